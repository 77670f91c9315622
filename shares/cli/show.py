"""``shares show``."""

from __future__ import annotations

import os

import click

from shares.cli.output import filled, json_option, print_result
from shares.documents.base import MAX_FILE, parse_object
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import DocumentError
from shares.field.polynomial import Polynomial
from shares.storage import read_file

KINDS = {"share": "share (its rows are secret and not shown)", "record": "record (public)"}


@click.command()
@click.argument("file", metavar="FILE", callback=filled)
@json_option
def command(file: str, as_json: bool) -> None:
    """Show the public facts of a share or record; never a secret byte.

    \b
    Example:
      shares show north-pier.share.json
    """
    data = read_file(file, limit=MAX_FILE)
    kind = parse_object(data, where=os.fspath(file)).get("kind")
    if kind == Share.KIND:
        facts = _share_facts(Share.parse(data, where=file))
    elif kind == Record.KIND:
        facts = _record_facts(Record.parse(data, where=file))
    else:
        raise DocumentError("it is neither a share nor a record", where=file, hint="show reads what split has written")
    width = max(len(name) for name in facts)
    described = facts | {"kind": KINDS[str(facts["kind"])]}
    lines = [f"{name.replace('_', ' '):<{width}}  {_text(value)}" for name, value in described.items()]
    print_result({"done": True, **facts}, lines, as_json=as_json)


def _share_facts(share: Share) -> dict[str, object]:
    return {
        "kind": "share",
        "label": share.label,
        "custodian": share.custodian,
        "set": share.set.hex(),
        "epoch": share.epoch,
        "rule": share.rule,
        "polynomial": str(Polynomial.from_number(share.field.modulus)),
        "points": [" / ".join(f"x = {x} of a threshold of {need}" for need, x in path) for path in share.paths],
        "row_bytes": share.row_length,
        "record": share.record,
        "secret_commitment": share.secret_commitment.hex(),
        "share_commitment": share.commitment().hex(),
        "own_digest": "fits" if share.is_whole() else "does not fit: the file was damaged or edited",
    }


def _record_facts(record: Record) -> dict[str, object]:
    return {
        "kind": "record",
        "label": record.label,
        "set": record.set.hex(),
        "epoch": record.epoch,
        "created": record.public("created")["created"],
        "rule": record.rule.to_rule().words(),
        "custodians": [custodian.name for custodian in record.custodians],
        "polynomial": str(Polynomial.from_number(record.field.modulus)),
        "row_bytes": record.row_length,
        "secret_commitment": record.secret_commitment.hex(),
        "previous": record.previous or "none: this is the first epoch",
        "fingerprint": record.fingerprint,
        "signatures": "unsigned: compare the fingerprint with the one read aloud at the split",
    }


def _text(value: object) -> str:
    if isinstance(value, list):
        return ", ".join(str(one) for one in value)
    return "not stated" if value is None else str(value)
