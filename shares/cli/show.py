"""``shares show``."""

from __future__ import annotations

from collections.abc import Callable

import click

from shares.cli.output import filled, json_option, print_result
from shares.documents.acknowledgement import Acknowledgement
from shares.documents.attestation import Attestation
from shares.documents.base import MAX_FILE, parse_object
from shares.documents.ceremony_script import CeremonyScript
from shares.documents.challenge import Challenge
from shares.documents.chunks import Header
from shares.documents.drill_report import DrillReport
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.nonce_batch import NonceBatch
from shares.documents.party import PartyCard, PartyKey
from shares.documents.record import Record
from shares.documents.sealed_secret import SealedSecret
from shares.documents.share import Share, ShareFacts
from shares.documents.task import Task
from shares.documents.task_message import TaskMessage
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import ByCard, ByPassphrase, Envelope
from shares.errors import DocumentError
from shares.field.polynomial import Polynomial
from shares.storage import read_file
from shares.streams import regular_file

KINDS = {
    "share": "share (its rows are secret and not shown)",
    "wrapped-share": "wrapped share (its rows are sealed)",
    "sealed-secret": "sealed secret (for one receiver)",
    "record": "record (public)",
    "party-key": "party key (private, wrapped by passphrase)",
    "party-card": "party card (public)",
    "acknowledgement": "acknowledgement of duties",
    "drill-report": "report of a drill (confidential)",
    "ceremony-script": "script of a key ceremony (confidential)",
    "challenge": "challenge (what custodians are asked; fresh, dated and signed)",
    "attestation": "attestation (an answer to a challenge; `shares attest check` checks its signatures)",
    "key-record": "record of a threshold key (public; `shares key show` tells more, and exports)",
    "key-share": "key share (its number is sealed; `shares key verify` checks it)",
    "task": "task (`shares task show` on its folder says where it stands)",
    "task-message": "message of a task (`shares task show` on the task's folder judges it)",
    "nonce-batch": "commitments of a signer (public; each is used once)",
    "encrypted-file": "encrypted file (of no use without a quorum of its set's shares)",
}
UNSIGNED = "unsigned: compare the fingerprint with the one read aloud at the split"


@click.command()
@click.argument("file", metavar="FILE", callback=filled)
@json_option
def command(file: str, as_json: bool) -> None:
    """Show the public facts of a share, record, party card or any other document of this program; never a secret byte.

    \b
    Example:
      shares show north-pier.share.json
    """
    facts = _encrypted_file(file) or _document(file)
    kind = str(facts["kind"])
    width = max(len(name) for name in facts)
    described = (
        facts
        | {"kind": KINDS[kind]}
        | ({"signatures": facts["signatures"] or UNSIGNED} if "signatures" in facts else {})
    )
    lines = [f"{name.replace('_', ' '):<{width}}  {_text(name, value)}" for name, value in described.items()]
    print_result({"done": True, **facts}, lines, as_json=as_json)


def _document(file: str) -> dict[str, object]:
    if file.endswith(".toml"):
        raise DocumentError("a policy is no JSON document", where=file, hint="`shares plan` examines it")
    data = read_file(file, limit=MAX_FILE)
    kind = str(parse_object(data, where=file).get("kind"))
    if kind not in FACTS:
        raise DocumentError("it is no document of this program", where=file, hint="show reads what this program wrote")
    return {"kind": kind, **FACTS[kind](data, file)}


def _encrypted_file(file: str) -> dict[str, object] | None:
    """Return the facts of an encrypted file, or None where it does not begin as one."""
    with regular_file(file) as reader:
        try:
            header = Header.read(reader)
        except DocumentError:
            return None
        return {
            "kind": "encrypted-file",
            "set": header.set.hex(),
            "chunk_bytes": header.chunk,
            "bytes": reader.size,
            "whole": "not looked at: `shares verify --record R --encrypted FILE` does",
        }


def _share(data: bytes, where: str) -> dict[str, object]:
    share = Share.parse(data, where=where)
    return {
        **_common(share),
        "row_bytes": share.row_length,
        "share_commitment": share.commitment().hex(),
        **_whole(share),
    }


def _wrapped_share(data: bytes, where: str) -> dict[str, object]:
    wrapped = WrappedShare.parse(data, where=where)
    return {**_common(wrapped), "row_bytes": wrapped.row_length, "wrapped": _how(wrapped.wrapping), **_whole(wrapped)}


def _common(share: ShareFacts) -> dict[str, object]:
    return {
        "label": share.label,
        "custodian": share.custodian,
        "set": share.set.hex(),
        "epoch": share.epoch,
        "rule": share.rule,
        "polynomial": str(Polynomial.from_number(share.field.modulus)),
        "points": [" / ".join(f"x = {x} of a threshold of {need}" for need, x in path) for path in share.paths],
        "record": share.record,
        "secret_commitment": share.secret_commitment.hex(),
        "encrypted_file": _hex(share.encrypted_file),
    }


def _sealed_secret(data: bytes, where: str) -> dict[str, object]:
    sealed = SealedSecret.parse(data, where=where)
    return {
        "label": sealed.label,
        "set": sealed.set.hex(),
        "epoch": sealed.epoch,
        "encrypted_file": _hex(sealed.encrypted_file),
        "wrapped": _how(sealed.wrapping),
        **_whole(sealed),
    }


def _record(data: bytes, where: str) -> dict[str, object]:
    record = Record.parse(data, where=where)
    return {
        "label": record.label,
        "set": record.set.hex(),
        "epoch": record.epoch,
        "created": record.public("created")["created"],
        "rule": record.rule.to_rule().words(),
        "custodians": [custodian.name for custodian in record.custodians],
        "polynomial": str(Polynomial.from_number(record.field.modulus)),
        "row_bytes": record.row_length,
        "secret_commitment": record.secret_commitment.hex(),
        "encrypted_file": _hex(record.encrypted_file),
        "policy": _hex(record.policy),
        "previous": record.previous,
        "fingerprint": record.fingerprint,
        "signatures": [f"{one.card.name} as {one.role}, card {one.card.fingerprint}" for one in record.signatures],
    }


def _acknowledgement(data: bytes, where: str) -> dict[str, object]:
    found = Acknowledgement.parse(data, where=where)
    return {**found.public("custodian", "label", "time"), "duties": list(found.duties), "accepted": found.words()}


def _ceremony_script(data: bytes, where: str) -> dict[str, object]:
    script = CeremonyScript.parse(data, where=where)
    return {
        **script.public("label", "created", "rule", "planned", "standby", "dual_control"),
        "policy": _hex(script.policy),
        "software": f"shares {script.software.version}, {script.software.digest.hex()}",
        "steps": len(script.steps),
        "digest": script.digest().hex(),
        "read_aloud": script.spoken(),
        "agreed_by": [f"{one.card.name}, card {one.card.fingerprint}" for one in script.signatures],
    }


def _drill_report(data: bytes, where: str) -> dict[str, object]:
    found = DrillReport.parse(data, where=where)
    return {
        **found.public("set", "epoch", "record", "label", "drill", "drill_kind", "opened", "closed", "passed"),
        **found.public("recovery_seconds", "target_seconds", "findings", "journal"),
        "actions": [f"{one.owner}, by {one.due:%Y-%m-%d}: {one.what}" for one in found.actions],
        "signatures": [f"{one.card.name}, card {one.card.fingerprint}" for one in found.signatures],
    }


def _challenge(data: bytes, where: str) -> dict[str, object]:
    found = Challenge.parse(data, where=where)
    return {
        **found.public("label", "set", "epoch", "record", "purpose", "created", "due"),
        "custodians": list(found.custodians),
        "asker": f"{found.card.name}, card {found.card.fingerprint}",
        "journal": found.journal.words() if found.journal else None,
        "fingerprint": found.fingerprint,
    }


def _attestation(data: bytes, where: str) -> dict[str, object]:
    found = Attestation.parse(data, where=where)
    return {
        **found.public("set", "epoch", "custodian", "challenge", "time", "grade", "result", "carrier", "opened"),
        **found.public("place", "serial", "remark"),
        "signed_by_share": found.share_signature is not None,
        "signed_by": f"{found.card.name}, card {found.card.fingerprint}" if found.card else None,
    }


def _key_record(data: bytes, where: str) -> dict[str, object]:
    record = KeyRecord.parse(data, where=where)
    return {
        **record.public("label", "key", "epoch", "created", "origin", "need"),
        "custodians": [one.name for one in record.custodians],
        "public_key": record.public_key.encode().hex(),
        "fingerprint": record.fingerprint,
        "signatures": [f"{one.card.name}, card {one.card.fingerprint}" for one in record.signatures],
    }


def _key_share(data: bytes, where: str) -> dict[str, object]:
    share = KeyShare.parse(data, where=where)
    return {
        **share.public("label", "key", "epoch", "record", "custodian", "index", "need"),
        "wrapped": _how(share.wrapping),
        **_whole(share),
    }


def _task(data: bytes, where: str) -> dict[str, object]:
    task = Task.parse(data, where=where)
    return {
        **task.public("label", "key", "epoch", "record", "remark", "created", "due"),
        "work": task.work.what,
        "parties": list(task.names),
        "author": f"{task.author.name}, card {task.author.fingerprint}",
        "fingerprint": task.fingerprint,
    }


def _task_message(data: bytes, where: str) -> dict[str, object]:
    said = TaskMessage.parse(data, where=where)
    return {
        **said.public("task", "round", "sender", "created"),
        "says": said.body.what,
        "sealed_for": [one.to for one in said.sealed],
    }


def _nonce_batch(data: bytes, where: str) -> dict[str, object]:
    batch = NonceBatch.parse(data, where=where)
    return {
        **batch.public("key", "epoch", "record", "signer", "created"),
        "pairs": len(batch.commitments),
        "signed_by": f"{batch.card.name}, card {batch.card.fingerprint}",
    }


def _card_facts(card: PartyCard) -> dict[str, object]:
    return card.public("name", "contact", "created", "fingerprint")


FACTS: dict[str, Callable[[bytes, str], dict[str, object]]] = {
    Share.KIND: _share,
    WrappedShare.KIND: _wrapped_share,
    SealedSecret.KIND: _sealed_secret,
    Record.KIND: _record,
    PartyKey.KIND: lambda data, where: _card_facts(PartyKey.parse(data, where=where).card),
    Acknowledgement.KIND: _acknowledgement,
    CeremonyScript.KIND: _ceremony_script,
    Challenge.KIND: _challenge,
    DrillReport.KIND: _drill_report,
    Attestation.KIND: _attestation,
    KeyRecord.KIND: _key_record,
    KeyShare.KIND: _key_share,
    Task.KIND: _task,
    TaskMessage.KIND: _task_message,
    NonceBatch.KIND: _nonce_batch,
    PartyCard.KIND: lambda data, where: _card_facts(PartyCard.parse(data, where=where)),
}


def _how(wrapping: ByPassphrase | ByCard) -> str:
    if isinstance(wrapping, ByCard):
        return f"for the card {wrapping.card} ({wrapping.suite})"
    return f"by passphrase (Argon2id, {wrapping.memory // 1024} MiB, {wrapping.passes} passes, {wrapping.lanes} lanes)"


def _whole(document: Share | Envelope) -> dict[str, object]:
    return {"own_digest": "fits" if document.is_whole() else "does not fit: the file was damaged or edited"}


def _hex(digest: bytes | None) -> str | None:
    return None if digest is None else digest.hex()


def _text(name: str, value: object) -> str:
    if value is None:
        return "none" if name in ("encrypted_file", "policy", "previous") else "not stated"
    if isinstance(value, list):
        return ("; " if name in ("duties", "points") else ", ").join(str(one) for one in value)
    return str(value)
