"""The JSON Schemas in the tree are current, and draw the line where the documents do, as far as a schema can.

Checked against: the general-purpose validator ``jsonschema`` (JSON Schema, draft 2020-12).
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from attested import answered, challenge, sealed
from hypothesis import given
from keys.samples import as_json, key_documents, key_mutations
from parties import QUICK, card, party, passphrase, unlocked
from strategies import CREATED, crooked_split, flat, moduli, octets, rules
from vectors.make import wrapping_v1 as by_hand

from shares.documents.acknowledgement import Acknowledgement
from shares.documents.base import Document
from shares.documents.ceremony_script import CeremonyRole, CeremonyScript, CeremonyStep, Software
from shares.documents.drill_report import Action, DrillReport, DrillStep, Participant
from shares.documents.entry import head_of
from shares.documents.key_event import Content
from shares.documents.opened_message import OpenedMessage
from shares.documents.schema import FOLDER, KINDS, schema, schema_files
from shares.documents.sealed_secret import SealedSecret
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import card_sealer, passphrase_sealer
from shares.errors import DocumentError
from shares.field.gf256 import Field
from shares.memory import Secret

GOLDEN = sorted((Path(__file__).parents[1] / "vectors" / "golden" / "v1").rglob("*.json"))
DEALT = crooked_split(b"made up", flat(2, 3))
NAME = "north-pier"
BY_NAME: dict[str, type[Document]] = {kind.KIND: kind for kind in KINDS}


def samples() -> dict[str, Any]:
    """One document of each kind, as JSON; wrapped shares of both methods, and a signed record."""
    share = DEALT.shares[0]
    to_card = card_sealer(card(NAME).recipient())
    with unlocked(NAME) as key:
        signed = DEALT.record.signed(key, "dealer", time=CREATED)
        accepted = Acknowledgement.signed_by(key, custodian=NAME, label="Tide archive", time=CREATED)
        script = ceremony_script().signed(key, time=CREATED)
        report = drill_report().signed(key)
    secret = SealedSecret.seal(
        Secret.of(b"made up"), to_card, set_id=bytes(16), epoch=1, label="Tide archive", secret_commitment=bytes(32)
    )
    asked = challenge(head=head_of(12, bytes(32)))
    made = {
        "share": share,
        "record": DEALT.record,
        "signed record": signed,
        "wrapped-share": WrappedShare.wrap(share, passphrase_sealer(passphrase(NAME), QUICK)),
        "share wrapped for a card": WrappedShare.wrap(share, to_card),
        "sealed-secret": secret,
        "party-key": party(NAME),
        "party-card": card(NAME),
        "acknowledgement": accepted,
        "challenge": asked,
        "attestation": answered(asked),
        "attestation of a seal": sealed(asked),
        "ceremony-script": script,
        "drill-report": report,
        "opened-message": opened_message(),
    }
    journal = (Path(__file__).parents[1] / "vectors/golden/v1/journal/journal.jsonl").read_text().splitlines()
    entries = {f"journal-entry {i + 1}": json.loads(line) for i, line in enumerate(journal)}
    return (
        {name: json.loads(document.to_file()) for name, document in made.items()} | entries | as_json(key_documents())
    )


def ceremony_script() -> CeremonyScript:
    """A script of one step."""
    step = CeremonyStep(part="Dealing", role="dealer", what="Split.", command="ls", expected="Done.", note=None)
    return CeremonyScript(
        kind="ceremony-script",
        version=1,
        created=CREATED,
        label="Tide archive",
        policy=bytes(32),
        rule="any 2 of 3",
        software=Software(version="0.1.0", digest=bytes(32)),
        dual_control=False,
        planned=None,
        standby="the day after",
        roles=(CeremonyRole(role="dealer", duty="Works at the machine.", person=None),),
        steps=(step,),
        signatures=(),
    )


def drill_report() -> DrillReport:
    """A report of a drill in which one custodian of two took part."""
    record = DEALT.record
    took_part = (True, 90, "the pier house"), (False, None, None)
    return DrillReport(
        kind="drill-report",
        version=1,
        set=record.set,
        epoch=1,
        record=record.fingerprint,
        label="Tide archive",
        drill=3,
        drill_kind="recovery",
        scope="from storage",
        objectives=("a quorum is assembled",),
        opened=CREATED,
        closed=CREATED,
        participants=tuple(
            Participant(custodian=name, took_part=took, seconds=seconds, place=place)
            for name, (took, seconds, place) in zip(("north-pier", "south-pier"), took_part, strict=True)
        ),
        persons=("A. Keeper",),
        steps=(DrillStep(time=CREATED, what="called"),),
        recovery_seconds=90,
        target_seconds=14_400,
        passed=True,
        findings=("the room was locked",),
        actions=(Action(owner="registrar", due=CREATED, what="a second key"),),
        journal=head_of(3, bytes(32)),
        signatures=(),
    )


def opened_message() -> OpenedMessage:
    """What a custodian remembers of a message of 100 bytes."""
    return OpenedMessage(
        kind="opened-message",
        version=1,
        key=bytes(16),
        encapsulated=bytes([9]) + bytes(31),
        content=Content(size=100, digest=bytes(32)),
        task=bytes(32),
        receiver=NAME,
        time=CREATED,
    )


SAMPLES = samples()


def validator(kind: str) -> jsonschema.Draft202012Validator:
    found = json.loads((FOLDER / f"{kind.replace('-', '_')}_v1.json").read_text())
    jsonschema.Draft202012Validator.check_schema(found)
    return jsonschema.Draft202012Validator(found)


VALIDATORS = {kind: validator(kind) for kind in BY_NAME}


def test_the_files_are_current() -> None:
    """If this fails: python -m shares.documents.schema, and look at what changed. Version 1 is frozen."""
    assert {path: json.loads(path.read_text()) for path in FOLDER.iterdir()} == {
        path: json.loads(text) for path, text in schema_files().items()
    }


def test_the_schemas_hold_no_words_about_code() -> None:
    for kind in KINDS:
        assert "``" not in json.dumps(schema(kind))


@pytest.mark.parametrize("path", GOLDEN, ids=lambda path: f"{path.parent.name}-{path.name}")
def test_golden_samples_validate(path: Path) -> None:
    members = json.loads(path.read_text())
    VALIDATORS[members["kind"]].validate(members)


@given(rules(most=6), moduli(), octets(1, 20))
def test_whatever_is_dealt_validates(rule, modulus, secret) -> None:
    dealt = crooked_split(secret, rule, field=Field(modulus))
    VALIDATORS["record"].validate(json.loads(dealt.record.to_file()))
    for share in dealt.shares:
        VALIDATORS["share"].validate(json.loads(share.to_file()))


MUTATED: dict[str, dict[str, Any]] = {
    "another kind": {"kind": "sheet"},
    "another version": {"version": 2},
    "version as text": {"version": "1"},
    "set too short": {"set": "00" * 15},
    "set in capitals": {"set": "AB" * 16},
    "epoch 0": {"epoch": 0},
    "epoch 2^32": {"epoch": 2**32},
    "a fraction": {"epoch": 1.5},
    "field of degree 7": {"field": "0x0ff"},
    "field as number": {"field": 283},
    "commitment too long": {"secret_commitment": "00" * 33},
    "encrypted file as text": {"encrypted_file": "none"},
    "label too long": {"label": "x" * 501},
    "label empty": {"label": ""},
    "unknown member": {"colour": "blue"},
}
OF_SHARE: dict[str, dict[str, Any]] = {
    "x = 0": {"paths": [[[2, 0]]]},
    "k = 256": {"paths": [[[256, 1]]]},
    "a step of one": {"paths": [[[2]]]},
    "a step of three": {"paths": [[[2, 1, 1]]]},
    "a path of nine": {"paths": [[[1, 1]] * 9]},
    "no paths": {"paths": []},
    "no rows": {"rows": []},
    "a padded row": {"rows": ["QUJD="]},
    "a row with a space": {"rows": ["QU JD"]},
    "rule too long": {"rule": "x" * 65_537},
    "record in small letters": {"record": "aaaa-" * 7 + "aaaa"},
    "custodian too long": {"custodian": "x" * 65},
    "digest null": {"digest": None},
}
OF_RECORD: dict[str, dict[str, Any]] = {
    "row too short": {"row_length": 52},
    "row too long": {"row_length": 131_073},
    "a rule without children": {"rule": {"need": 1, "from": []}},
    "a rule by the program's names": {"rule": {"need": 1, "children": ["a"]}},
    "a threshold of 0": {"rule": {"need": 0, "from": ["a"]}},
    "no custodians": {"custodians": []},
    "a custodian with a person": {"custodians": [{**SAMPLES["record"]["custodians"][0], "person": "x"}]},
    "a short key": {"custodians": [{**SAMPLES["record"]["custodians"][0], "attestation_key": "AAAA"}]},
    "no checks": {"checks": []},
    "a short check": {"checks": [["AAAA"]]},
    "a local time": {"created": "2026-12-01T07:00:00+01:00"},
    "a signature": {"signatures": [{}]},
    "no label": {"label": None},
    "fingerprint null": {"fingerprint": None},
}
OF_WRAPPING: dict[str, dict[str, Any]] = {
    "no wrapping": {"wrapping": None},
    "a wrapping of no method": {"wrapping": {}},
    "sealed empty": {"sealed": ""},
    "sealed with padding": {"sealed": "QUJD="},
    "sealed null": {"sealed": None},
}
OF_ENVELOPE: dict[str, dict[str, Any]] = {**OF_WRAPPING, "digest null": {"digest": None}}
OF_CARD: dict[str, dict[str, Any]] = {
    "name too long": {"name": "x" * 65},
    "name empty": {"name": ""},
    "contact empty": {"contact": ""},
    "contact too long": {"contact": "x" * 501},
    "a local time": {"created": "2026-12-01T07:00:00+01:00"},
    "a short curve key": {"x25519": "A" * 42},
    "a long lattice key": {"mlkem768": "A" * 1580},
    "a key in another alphabet": {"ed25519": "+" + "A" * 42},
    "no signature": {"signature": None},
    "a short signature": {"signature": "A" * 85},
    "fingerprint in small letters": {"fingerprint": SAMPLES["party-card"]["fingerprint"].lower()},
}


def wrapped_otherwise(sample: str) -> dict[str, dict[str, Any]]:
    """Mutations of the members of a sample's wrapping."""
    wrapping = SAMPLES[sample]["wrapping"]
    if wrapping["method"] == "card":
        changes: dict[str, dict[str, Any]] = {
            "another suite": {"suite": "p256"},
            "card null": {"card": None},
            "card in small letters": {"card": wrapping["card"].lower()},
            "key empty": {"key": ""},
            "a short commitment": {"commitment": "A" * 42},
            "a salt": {"salt": "A" * 22},
        }
    else:
        changes = {
            "memory too small": {"memory": 7},
            "memory above 2 GiB": {"memory": (1 << 21) + 1},
            "no pass": {"passes": 0},
            "11 passes": {"passes": 11},
            "no lane": {"lanes": 0},
            "17 lanes": {"lanes": 17, "memory": 1024},
            "a fraction of a pass": {"passes": 1.5},
            "a short salt": {"salt": "A" * 21},
            "a long commitment": {"commitment": "A" * 44},
            "a suite": {"suite": "x25519"},
        }
    changes["another method"] = {"method": "sesame"}
    return {f"wrapping: {name}": {"wrapping": {**wrapping, **change}} for name, change in changes.items()}


COMMON = ("another kind", "another version", "version as text", "unknown member")
FACTS = ("set too short", "set in capitals", "epoch 0", "epoch 2^32", "a fraction", "encrypted file as text")
LABEL = ("label too long", "label empty")


def some(*names: str) -> dict[str, dict[str, Any]]:
    return {name: MUTATED[name] for name in names}


OF_ROWS = ("no rows", "a padded row", "a row with a space")
OF_WRAPPED_SHARE = {
    **MUTATED,
    **{name: change for name, change in OF_SHARE.items() if name not in OF_ROWS},
    "rows": {"rows": ["AAAA"]},
    **OF_ENVELOPE,
}
PER_SAMPLE: dict[str, dict[str, dict[str, Any]]] = {
    "share": {**MUTATED, **OF_SHARE},
    "record": {**MUTATED, **OF_RECORD},
    "wrapped-share": {**OF_WRAPPED_SHARE, **wrapped_otherwise("wrapped-share")},
    "share wrapped for a card": {**OF_WRAPPED_SHARE, **wrapped_otherwise("share wrapped for a card")},
    "sealed-secret": {**some(*COMMON, *FACTS, *LABEL), **OF_ENVELOPE, **wrapped_otherwise("sealed-secret")}
    | {"wrapped by passphrase": {"wrapping": SAMPLES["wrapped-share"]["wrapping"]}},
    "party-key": {**some(*COMMON), **OF_WRAPPING, **wrapped_otherwise("party-key")}
    | {"wrapped for a card": {"wrapping": SAMPLES["sealed-secret"]["wrapping"]}, "a digest": {"digest": "00" * 32}}
    | {f"card: {name}": {"card": {**SAMPLES["party-card"], **change}} for name, change in OF_CARD.items()},
    "party-card": {**some(*COMMON), **OF_CARD},
    "signed record": {
        name: {"signatures": [{**SAMPLES["signed record"]["signatures"][0], **change}]}
        for name, change in {
            "another role": {"role": "auditor"},
            "a local signing time": {"time": "2026-12-01T07:00:00+01:00"},
            "a short signature": {"signature": "A" * 85},
            "a signer without a card": {"card": None},
            "a signer with a note": {"note": "x"},
        }.items()
    }
    | {"65 signatures": {"signatures": SAMPLES["signed record"]["signatures"] * 65}},
    "ceremony-script": {
        **some(*COMMON, *LABEL),
        "policy too short": {"policy": "00" * 31},
        "software without a digest": {"software": {"version": "0.1.0"}},
        "dual control as a number": {"dual_control": 1},
        "no roles": {"roles": []},
        "no steps": {"steps": []},
        "a step without a number of members": {"steps": [{"what": "Split."}]},
        "a step with a number": {"steps": [{**SAMPLES["ceremony-script"]["steps"][0], "number": 1}]},
        "a role of nobody": {"roles": [{"role": "dealer", "duty": "x"}]},
        "a short signature": {"signatures": [{**SAMPLES["ceremony-script"]["signatures"][0], "signature": "A" * 85}]},
        "nine signatures": {"signatures": SAMPLES["ceremony-script"]["signatures"] * 9},
    },
    "drill-report": {
        **some(*COMMON, *FACTS[:-1], *LABEL),
        "drill 0": {"drill": 0},
        "another kind of drill": {"drill_kind": "rehearsal"},
        "a fraction of a second": {"recovery_seconds": 1.5},
        "passed as a number": {"passed": 1},
        "a participant of nobody": {"participants": [{"took_part": True, "seconds": 1, "place": None}]},
        "an action without a date": {"actions": [{"owner": "registrar", "what": "a key"}]},
        "101 actions": {"actions": SAMPLES["drill-report"]["actions"] * 101},
        "no head": {"journal": None},
        "a short signature": {"signatures": [{**SAMPLES["drill-report"]["signatures"][0], "signature": "A" * 85}]},
        "nine signatures": {"signatures": SAMPLES["drill-report"]["signatures"] * 9},
    },
}
PER_SAMPLE["opened-message"] = {
    **some(*COMMON),
    "a short key id": {"key": "00" * 15},
    "an encapsulated key too long": {"encapsulated": "A" * 44},
    "a digest alone": {"content": {"digest": "00" * 32}},
    "more than 64 MiB": {"content": {"size": (64 << 20) + 1, "digest": "00" * 32}},
    "a size below 0": {"content": {"size": -1, "digest": "00" * 32}},
    "no receiver": {"receiver": ""},
    "a local time": {"time": "2026-12-01T07:00:00+01:00"},
}
OF_CHALLENGE: dict[str, dict[str, Any]] = {
    "another purpose": {"purpose": "recovery"},
    "nobody asked": {"custodians": []},
    "a short nonce": {"nonce": "00" * 31},
    "a local time": {"due": "2026-12-01T07:00:00+01:00"},
    "a head without its number": {"journal": {"head": SAMPLES["challenge"]["record"]}},
    "entry 0": {"journal": {"sequence": 0, "head": SAMPLES["challenge"]["record"]}},
    "drill 0": {"drill": 0},
    "no asker": {"card": None},
    "a short signature": {"signature": "A" * 85},
}
OF_ATTESTATION: dict[str, dict[str, Any]] = {
    "another grade": {"grade": "seen"},
    "another result": {"result": "fine"},
    "another carrier": {"carrier": "stone"},
    "opened as number": {"opened": 0},
    "an empty place": {"place": ""},
    "a long remark": {"remark": "x" * 501},
    "a short share signature": {"share_signature": "A" * 85},
    "a short party signature": {"party_signature": "A" * 85},
    "a challenge in capitals": {"challenge": "AB" * 32},
    "a head without its number": {"journal": {"head": SAMPLES["challenge"]["record"]}},
}
PER_SAMPLE |= {
    "challenge": {**some(*COMMON, *FACTS[:-1], *LABEL), **OF_CHALLENGE},
    "attestation": {**some(*COMMON, *FACTS[:-1]), **OF_ATTESTATION},
}
PER_SAMPLE |= key_mutations(SAMPLES)
ENTRY, EVENT = SAMPLES["journal-entry 2"], SAMPLES["journal-entry 2"]["event"]
OF_ENTRY: dict[str, dict[str, Any]] = {
    **some(*COMMON),
    "number 0": {"sequence": 0},
    "number 2^32": {"sequence": 2**32},
    "a local time": {"time": "2026-12-01T07:00:00+01:00"},
    "a short digest before": {"previous": "00" * 31},
    "no event": {"event": {}},
    "an unknown event": {"event": {**EVENT, "what": "forgotten"}},
    "an event of other members": {"event": {**EVENT, "what": "delivered"}},
    "an event with a member too many": {"event": {**EVENT, "words": "x"}},
    "an event with a member too few": {"event": {"what": "introduced", "custodian": "registrar"}},
    "a document without a digest": {"documents": [{"path": "record.json"}]},
    "nine signatures": {"signatures": ENTRY["signatures"] * 9},
    "a short signature": {"signatures": [{**ENTRY["signatures"][0], "signature": "A" * 85}]},
    "a card that is none": {"cards": [{}]},
}
PER_SAMPLE["journal-entry 2"] = OF_ENTRY
CASES = [(sample, name, change) for sample, changes in PER_SAMPLE.items() for name, change in changes.items()]


@pytest.mark.parametrize("sample", SAMPLES)
def test_samples_validate_and_parse(sample: str) -> None:
    members = SAMPLES[sample]
    VALIDATORS[members["kind"]].validate(members)
    parsed = BY_NAME[members["kind"]].parse(json.dumps(members).encode())
    assert parsed.model_dump(mode="json", by_alias=True) == members


def test_there_is_a_sample_of_every_kind() -> None:
    assert {members["kind"] for members in SAMPLES.values()} == set(BY_NAME)


@pytest.mark.parametrize(("sample", "name", "change"), CASES, ids=[f"{kind}: {name}" for kind, name, _ in CASES])
def test_mutated_documents_do_not_validate_and_do_not_parse(sample: str, name: str, change: dict[str, Any]) -> None:
    kind, members = SAMPLES[sample]["kind"], {**SAMPLES[sample], **change}
    assert not VALIDATORS[kind].is_valid(members)
    # Where a document has a digest of its own, it is made to fit: the form alone is to be what is refused.
    if kind in ("wrapped-share", "sealed-secret") and "digest" not in change:
        try:
            members["digest"] = by_hand.envelope_digest(members)
        except (ValueError, TypeError):
            members["digest"] = "00" * 32
    with pytest.raises(DocumentError):
        BY_NAME[kind].parse(json.dumps(members).encode())


@pytest.mark.parametrize("sample", SAMPLES)
def test_every_member_is_required_and_typed(sample: str) -> None:
    members = SAMPLES[sample]
    kind = members["kind"]
    for name in members:
        fewer = {other: value for other, value in members.items() if other != name}
        assert not VALIDATORS[kind].is_valid(fewer), name
        assert not VALIDATORS[kind].is_valid({**members, name: {"x": True}}), name
        with pytest.raises(DocumentError):
            BY_NAME[kind].parse(json.dumps(fewer).encode())


@pytest.mark.parametrize("sample", [name for name, members in SAMPLES.items() if "wrapping" in members])
def test_every_member_of_a_wrapping_is_required_and_typed(sample: str) -> None:
    members = SAMPLES[sample]
    kind, wrapping = members["kind"], members["wrapping"]
    for name in wrapping:
        fewer = {other: value for other, value in wrapping.items() if other != name}
        for changed in (fewer, {**wrapping, name: {"x": True}}):
            assert not VALIDATORS[kind].is_valid({**members, "wrapping": changed}), name
            with pytest.raises(DocumentError):
                BY_NAME[kind].parse(json.dumps({**members, "wrapping": changed}).encode())
