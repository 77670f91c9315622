"""Records: read strictly, refused where they contradict themselves.

Checked against: FORMAT.md, sections 1, 5 and 9, for signatures by the reader written from its text alone
(tests/vectors/make/wrapping_v1.py). A record that was bent here gets a fingerprint that fits again, so that the rule
under test is the one that refuses it.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from datetime import datetime, timedelta
from pathlib import Path
from typing import Any

import pytest
from cryptography.exceptions import InvalidSignature
from parties import card, unlocked
from strategies import CREATED, bits_flipped, crooked_split, flat
from vectors.make import wrapping_v1 as by_hand

from shares import clock
from shares.documents.base import fingerprint
from shares.documents.record import MAX_SIGNATURES, Record
from shares.errors import DocumentError, ParameterError
from shares.sharing.rule import Rule

TREE = Rule(2, (Rule(2, ("north-pier", "south-pier", "light-house")), "registrar", "dry-dock", "registrar"))


@pytest.fixture(scope="module")
def record() -> Record:
    return crooked_split(b"made up", TREE).record


def file_of(members: dict[str, Any]) -> bytes:
    """The file of a record whose fingerprint fits whatever the other members are."""
    counted = {name: value for name, value in members.items() if name not in ("fingerprint", "signatures")}
    return json.dumps({**members, "fingerprint": fingerprint("record", counted)}).encode()


def test_a_record_comes_back_from_its_file(record: Record) -> None:
    again = Record.parse(record.to_file())
    assert again.model_dump(mode="json") == record.model_dump(mode="json")
    assert again.to_file() == record.to_file()
    assert again.rule.to_rule() == TREE
    assert again.created == CREATED
    assert again.check_matrix() == record.check_matrix()


def test_the_fingerprint_is_over_everything_but_itself_and_the_signatures(record: Record) -> None:
    members = json.loads(record.to_file())
    assert json.loads(file_of(members)) == members
    for name in members:
        if name not in ("fingerprint", "signatures"):
            fewer = {
                other: value for other, value in members.items() if other not in (name, "fingerprint", "signatures")
            }
            assert fingerprint("record", fewer) != record.fingerprint


def members_in_order(record: Record) -> list[str]:
    return list(json.loads(record.to_file()))


def test_kind_and_version_stand_first(record: Record) -> None:
    assert members_in_order(record)[:2] == ["kind", "version"]


def test_every_flipped_bit_of_a_small_record_is_refused() -> None:
    """The fingerprint covers every value, and there is nothing else in the file that a flipped bit leaves valid."""
    small = crooked_split(b"x", flat(1, 2)).record.to_file()
    for _, changed in bits_flipped(small):
        with pytest.raises(DocumentError):
            Record.parse(changed)


Bend = Callable[[dict[str, Any]], None]


def swap(name: str, i: int, j: int) -> Bend:
    def bend(members: dict[str, Any]) -> None:
        members[name][i], members[name][j] = members[name][j], members[name][i]

    return bend


def setting(*path: Any, to: Any) -> Bend:
    def bend(members: dict[str, Any]) -> None:
        inner = members
        for step in path[:-1]:
            inner = inner[step]
        inner[path[-1]] = to

    return bend


def without(*path: Any) -> Bend:
    def bend(members: dict[str, Any]) -> None:
        inner = members
        for step in path[:-1]:
            inner = inner[step]
        del inner[path[-1]]

    return bend


CHECK = "A" * 22

REFUSED: dict[str, tuple[Bend, str]] = {
    "a custodian missing": (without("custodians", 0), "custodians are not those of its rule"),
    "custodians in another order": (swap("custodians", 0, 1), "custodians are not those of its rule"),
    "a custodian twice": (lambda m: m["custodians"].append(m["custodians"][0]), "custodians are not those of its rule"),
    "a custodian of another name": (setting("custodians", 0, "name", to="wharf"), "custodians are not those"),
    "a name in the rule that is no custodian": (setting("rule", "from", 1, to="wharf"), "custodians are not those"),
    "names that differ in case": (
        lambda m: (setting("rule", "from", 2, to="REGISTRAR")(m), setting("custodians", 4, "name", to="REGISTRAR")(m)),
        "differ only in case",
    ),
    "a node without checks": (without("checks", 1), "one list of checks for each node"),
    "checks without a node": (lambda m: m["checks"].append(m["checks"][0]), "one list of checks for each node"),
    "a check too few": (without("checks", 0, 1), "checks contradict its rule"),
    "a check too many": (lambda m: m["checks"][1].append(CHECK), "checks contradict its rule"),
    "a child that contradicts its parent": (setting("checks", 1, 0, to=CHECK), "checks contradict its rule"),
    "a parent that contradicts its child": (setting("checks", 0, 1, to=CHECK), "checks contradict its rule"),
    "another threshold": (setting("rule", "need", to=1), "checks contradict its rule"),
    "a threshold above the children": (setting("rule", "need", to=5), "threshold of 5"),
    "a threshold of 0": (setting("rule", "need", to=0), "rule.need"),
    "no children": (setting("rule", "from", to=[]), "rule.from"),
    "children by the name of the program": (
        lambda m: m.__setitem__("rule", {"need": m["rule"]["need"], "children": m["rule"]["from"]}),
        "the member rule.from is missing|does not know",
    ),
    "children by both names": (setting("rule", "children", to=["north-pier"]), "does not know"),
    "a threshold that is text": (setting("rule", "need", to="2"), "rule.need"),
    "a threshold that is true": (setting("rule", "need", to=True), "rule.need"),
    "a rule of 9 levels": (
        lambda m: m.__setitem__("rule", deep(8, m["rule"])),
        "at most 8 groups deep",
    ),
    "a rule of 90 levels": (lambda m: m.__setitem__("rule", deep(89, m["rule"])), "at most 8 groups deep"),
    "more than 1,000 places": (setting("rule", "from", 0, to={"need": 1, "from": ["x"] * 255}), "custodians are not"),
    "more than 255 children": (setting("rule", "from", to=["x"] * 256), "rule.from"),
    "a reducible polynomial": (setting("field", to="0x101"), r"field.*\(x \+ 1\)\^8"),
    "a field of degree 7": (setting("field", to="0x0ff"), "field"),
    "a field in capitals": (setting("field", to="0x11B"), "field"),
    "a field that is a number": (setting("field", to=283), "field"),
    "a set in capitals": (lambda m: m.__setitem__("set", m["set"].upper()), "set"),
    "a set too short": (lambda m: m.__setitem__("set", m["set"][2:]), "set.*16 bytes"),
    "epoch 0": (setting("epoch", to=0), "epoch"),
    "epoch 2^32": (setting("epoch", to=1 << 32), "epoch"),
    "an epoch that is true": (setting("epoch", to=True), "epoch"),
    "an unknown version": (setting("version", to=2), "version"),
    "a version that is true": (setting("version", to=True), "version"),
    "another kind": (setting("kind", to="share"), "it is a share"),
    "an unknown kind": (setting("kind", to="chart"), "does not say"),
    "a kind that is a list": (setting("kind", to=["record"]), "does not say"),
    "a row length too small": (setting("row_length", to=52), "row_length"),
    "a row length too large": (setting("row_length", to=131_073), "row_length"),
    "a time with a fraction": (setting("created", to="2026-12-01T07:00:00.5Z"), "created"),
    "a time in another zone": (setting("created", to="2026-12-01T07:00:00+00:00"), "created"),
    "a time that does not exist": (setting("created", to="2026-02-30T07:00:00Z"), "created"),
    "an empty label": (setting("label", to=""), "label"),
    "no label": (setting("label", to=None), "label"),
    "a label of 501 characters": (setting("label", to="x" * 501), "label"),
    "a label that turns text around": (setting("label", to="a\u202eb"), "label"),
    "a name with a separator": (setting("custodians", 0, "name", to="a/b"), "path separator"),
    "a name not in normal form C": (setting("custodians", 0, "name", to="n\u0303"), "normal form C"),
    "a check too short": (setting("checks", 0, 0, to="AAAA"), "checks"),
    "a check in another encoding": (setting("checks", 0, 0, to="+" + "A" * 21), "checks"),
    "a check with padding": (lambda m: setting("checks", 0, 0, to=m["checks"][0][0] + "==")(m), "checks"),
    "a check with unused bits set": (setting("checks", 0, 0, to="A" * 21 + "B"), "checks"),
    "a key of 31 bytes": (setting("custodians", 0, "attestation_key", to="A" * 42), "attestation_key"),
    "an unknown member": (setting("colour", to="blue"), "does not know"),
    "an unknown member of a custodian": (setting("custodians", 0, "person", to="x"), "does not know"),
    "a missing member": (without("policy"), "policy is missing"),
    "a signature that nobody can check": (setting("signatures", to=[{}]), "signatures"),
    "signatures that are null": (setting("signatures", to=None), "signatures"),
}


def deep(levels: int, rule: dict[str, Any]) -> dict[str, Any]:
    return rule if levels == 0 else {"need": 1, "from": [deep(levels - 1, rule)]}


@pytest.mark.parametrize("name", REFUSED)
def test_a_record_that_is_wrong_is_refused_with_the_reason(record: Record, name: str) -> None:
    bend, reason = REFUSED[name]
    members = json.loads(record.to_file())
    bend(members)
    with pytest.raises(DocumentError, match=reason) as refusal:
        Record.parse(file_of(members), where="record.json")
    assert str(refusal.value).startswith("record.json: ")
    assert refusal.value.__cause__ is refusal.value.__context__ is None


def test_a_fingerprint_that_does_not_fit_is_refused(record: Record) -> None:
    members = json.loads(record.to_file())
    members["label"] += "!"
    with pytest.raises(DocumentError, match="fingerprint does not fit"):
        Record.parse(json.dumps(members).encode())


def test_a_fingerprint_has_one_spelling(record: Record) -> None:
    members = json.loads(record.to_file())
    for spelling in (
        members["fingerprint"].lower(),
        members["fingerprint"].replace("-", ""),
        members["fingerprint"] + "\n",
        " " + members["fingerprint"],
    ):
        with pytest.raises(DocumentError, match="fingerprint"):
            Record.parse(json.dumps({**members, "fingerprint": spelling}).encode())


# Signatures.

LATER = CREATED + timedelta(minutes=10)
Signer = tuple[str, str]
DEALER: Signer = ("harbour-office", "dealer")
WITNESS: Signer = ("registrar", "witness")


def signed(record: Record, *signers: Signer, time: datetime = LATER) -> Record:
    for name, role in signers:
        with unlocked(name) as key:
            record = record.signed(key, role, time=time)  # type: ignore[arg-type]
    return record


def signed_by_hand(record: Record, entry: dict[str, Any], name: str) -> dict[str, Any]:
    """An entry of ``signatures`` signed anew, as the format says, by whoever has this party's key."""
    members = by_hand.signed_of_record(json.loads(record.to_file()), entry)
    with unlocked(name) as key:
        return {**entry, "signature": by_hand.b64(key.sign("record", members))}


@pytest.fixture(scope="module")
def both(record: Record) -> Record:
    return signed(record, DEALER, WITNESS)


def test_a_signed_record_comes_back_from_its_file(record: Record, both: Record) -> None:
    again = Record.parse(both.to_file())
    assert again == both
    assert again.to_file() == both.to_file()
    assert [(one.card.name, one.role, one.time) for one in again.signatures] == [(*DEALER, LATER), (*WITNESS, LATER)]
    assert [one.card for one in again.signatures] == [card(name) for name, _ in (DEALER, WITNESS)]


def test_signing_changes_nothing_but_the_signatures(record: Record, both: Record) -> None:
    assert both.fingerprint == record.fingerprint == both.own_fingerprint()
    assert both.model_copy(update={"signatures": ()}) == record
    assert record.signatures == ()


def test_a_signature_is_over_what_the_format_says(both: Record) -> None:
    members = json.loads(both.to_file())
    for entry in members["signatures"]:
        by_hand.verify(entry["card"], entry["signature"], "record", by_hand.signed_of_record(members, entry))
        for change in ({"role": "auditor"}, {"time": "2026-12-01T07:10:01Z"}):
            with pytest.raises(InvalidSignature):
                by_hand.verify(
                    entry["card"], entry["signature"], "record", by_hand.signed_of_record(members, entry | change)
                )


def test_a_record_signed_by_hand_is_read(record: Record) -> None:
    entry = {
        "role": "witness",
        "time": "2026-12-01T08:00:00Z",
        "card": json.loads(card("registrar").to_file()),
    }
    members = json.loads(record.to_file()) | {"signatures": [signed_by_hand(record, entry, "registrar")]}
    assert Record.parse(json.dumps(members).encode()).signatures[0].card == card("registrar")


def test_a_golden_signed_record_stays_readable_for_ever() -> None:
    folder = Path(__file__).parents[1] / "vectors" / "golden" / "v1"
    data = (folder / "wrapped" / "record.json").read_bytes()
    found = Record.parse(data)
    assert json.loads(found.to_file()) == json.loads(data)
    assert [(one.card.name, one.role) for one in found.signatures] == [DEALER, WITNESS]
    # The signatures were put onto the record of the flat set, which is as before.
    assert found.fingerprint == Record.parse((folder / "flat" / "record.json").read_bytes()).fingerprint


def entry_of(members: dict[str, Any], i: int) -> dict[str, Any]:
    found = members["signatures"][i]
    assert isinstance(found, dict)
    return found


def another_record(members: dict[str, Any]) -> None:
    """The signatures of this record under another one's content."""
    members["label"] += "!"
    counted = {name: value for name, value in members.items() if name not in ("fingerprint", "signatures")}
    members["fingerprint"] = fingerprint("record", counted)


def exchange(name: str) -> Bend:
    def bend(members: dict[str, Any]) -> None:
        one, other = members["signatures"]
        one[name], other[name] = other[name], one[name]

    return bend


def a_second_dealer(members: dict[str, Any]) -> None:
    record = Record.parse(json.dumps({**members, "signatures": []}).encode())
    entry = {**entry_of(members, 1), "role": "dealer"}
    members["signatures"][1] = signed_by_hand(record, entry, "registrar")


def the_same_later(members: dict[str, Any]) -> None:
    record = Record.parse(json.dumps({**members, "signatures": []}).encode())
    entry = {**entry_of(members, 1), "time": "2026-12-02T07:00:00Z"}
    members["signatures"].append(signed_by_hand(record, entry, "registrar"))


BENT_SIGNATURES: dict[str, tuple[Bend, str]] = {
    "a role changed": (setting("signatures", 0, "role", to="witness"), "signature by harbour-office does not fit"),
    "a time changed": (
        setting("signatures", 1, "time", to="2026-12-01T07:10:01Z"),
        "signature by registrar does not fit",
    ),
    "signatures exchanged": (exchange("signature"), "signature by harbour-office does not fit"),
    "cards exchanged": (exchange("card"), "signature by registrar does not fit"),
    "a signature of another record": (another_record, "signature by harbour-office does not fit"),
    "a signature of zeros": (setting("signatures", 0, "signature", to="A" * 86), "signature by harbour-office"),
    "a signature cut short": (setting("signatures", 0, "signature", to="A" * 82), "64 bytes"),
    "a card altered": (setting("signatures", 1, "card", "name", to="dry-dock"), "fingerprint does not fit"),
    "a card without its signature": (without("signatures", 1, "card", "signature"), "card.signature is missing"),
    "an unknown role": (setting("signatures", 0, "role", to="auditor"), "role"),
    "no role": (without("signatures", 0, "role"), "role is missing"),
    "a local time": (setting("signatures", 0, "time", to="2026-12-01T07:10:00+01:00"), "time"),
    "an unknown member": (setting("signatures", 0, "note", to="x"), "does not know"),
    "the same signature twice": (
        lambda m: m["signatures"].append(m["signatures"][1]),
        "one party signed it twice as the same",
    ),
    "one party twice as witness": (the_same_later, "one party signed it twice as the same"),
    "two dealers": (a_second_dealer, "more than one party signed it as its dealer"),
    "65 signatures": (lambda m: m.update(signatures=m["signatures"][1:] * 65), "too long"),
}


@pytest.mark.parametrize("name", BENT_SIGNATURES)
def test_a_record_with_a_wrong_signature_is_refused(both: Record, name: str) -> None:
    bend, reason = BENT_SIGNATURES[name]
    members = json.loads(both.to_file())
    bend(members)
    with pytest.raises(DocumentError, match=reason):
        Record.parse(json.dumps(members).encode(), where="record.json")


def test_every_flipped_bit_of_a_signed_record_is_refused() -> None:
    """One in seven of them, so that every eighth bit of every byte has its turn somewhere."""
    small = signed(crooked_split(b"x", flat(1, 2)).record, DEALER)
    data = json.dumps(json.loads(small.to_file()), separators=(",", ":")).encode()
    for bit, changed in bits_flipped(data):
        if bit % 7 == 0:
            with pytest.raises(DocumentError):
                Record.parse(changed)


def test_a_party_may_be_dealer_and_witness(record: Record) -> None:
    made = signed(record, DEALER, (DEALER[0], "witness"))
    assert Record.parse(made.to_file()).signatures == made.signatures


def test_nobody_signs_twice_as_the_same(both: Record) -> None:
    for signer in (DEALER, WITNESS):
        with pytest.raises(ParameterError, match="twice as the same"):
            signed(both, signer, time=LATER + timedelta(days=1))
    with pytest.raises(ParameterError, match="more than one party signed it as its dealer"):
        signed(both, ("registrar", "dealer"))


def test_a_record_holds_64_signatures_and_no_more(record: Record) -> None:
    assert MAX_SIGNATURES == 64
    full = signed(record, *((f"pier {i}", "witness") for i in range(64)))
    assert len(Record.parse(full.to_file()).signatures) == 64
    with pytest.raises(ParameterError, match="at most 64 signatures"):
        signed(full, DEALER)


def test_a_signature_has_the_time_of_now(record: Record) -> None:
    before = clock.now()
    with unlocked("registrar") as key:
        made = record.signed(key, "witness")
    assert before <= made.signatures[0].time <= clock.now()
