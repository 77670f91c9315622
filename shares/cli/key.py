"""``shares key``: ``show`` and ``verify`` here, and the others in modules of their own."""

from __future__ import annotations

import os
from pathlib import Path

import click

from shares.cli import key_ask, key_certify, key_make, key_use
from shares.cli.keys import opening, signers, trust_option
from shares.cli.output import filled, json_option, print_result, prose, refuse_taken
from shares.cli.passphrases import passphrase_options
from shares.custody.parties import load_card
from shares.documents.base import MAX_FILE, parse_object
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.errors import ParameterError
from shares.group.montgomery import public_of
from shares.history.files import RECORD_NAME
from shares.keys.checking import check_record, public_key_in
from shares.keys.folder import SHARE_NAME, load_key_record
from shares.keys.own_share import check_belongs, own_share
from shares.keys.public_key import pem, sealing_pem, ssh_line
from shares.storage import read_file, write_new

BORN = {
    "dealt": "dealt, so the machine of its dealer has held it once",
    "joint": "generated jointly: it was in no one place ever",
}
SHARE_PROVES = (
    "This proves that the key share is the one that the record with fingerprint {fingerprint} commits to. {who} "
    "It does not prove that enough others still have theirs."
)
SHARE_CLOSED = (
    "This shows that the key share names the record with fingerprint {fingerprint}, and that no accident befell the "
    "file. It was not opened: give --key to compare what is in it with the record. {who}"
)
RECORD_ALONE = (
    "This proves that the record with fingerprint {fingerprint} agrees with itself and is signed by all who must sign "
    "it. {who} It proves nothing of any key share: each custodian checks their own."
)
UNKNOWN = "Who has signed the record, the fingerprints of their cards say: compare them aloud, or give --trust CARD."
KNOWN = "One who signed the record has a card that you trust."


class _InOrder(click.Group):
    """A group whose help lists commands in the order of a key's life."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(self.commands)


@click.group(cls=_InOrder)
def command() -> None:
    """Keys that a quorum uses and nobody holds: make one, sign with it, open messages to it.

    What a quorum signs verifies with ordinary programs, as Ed25519; what ordinary programs encrypt to the key (HPKE)
    a quorum opens. The key itself is never put together.

    \b
    Example:
      shares key show release-key
    """


@click.command(short_help="Show a key's public facts, and export its public half.")
@click.argument("source", metavar="KEYDIR|RECORD", callback=filled)
@click.option("--pem", "pem_file", metavar="FILE", callback=filled, help="Write the public key to this new PEM file.")
@click.option("--openssh", "ssh_file", metavar="FILE", callback=filled, help="The same as an OpenSSH public key.")
@click.option(
    "--x25519-pem",
    "x25519_file",
    metavar="FILE",
    callback=filled,
    help="Write the key that messages are encrypted to.",
)
@json_option
def show(source: str, pem_file: str | None, ssh_file: str | None, x25519_file: str | None, as_json: bool) -> None:
    """Show what is public of a key, by its folder or its record: who uses it, how it was born, its fingerprint.

    With --pem or --openssh its public half goes to a new file, by which others verify what the quorum signs; with
    --x25519-pem the key that others encrypt messages to. X25519 is not post-quantum: it is not for secrets that must
    last ten years.

    \b
    Example:
      shares key show release-key --pem release.pub.pem
    """
    record = _record(Path(source))
    public_key = record.public_key.encode()
    exports = (
        (pem_file, pem(public_key)),
        (ssh_file, ssh_line(public_key, record.label).encode()),
        (x25519_file, sealing_pem(public_of(record.public_key))),
    )
    wanted = [(path, data) for path, data in exports if path is not None]
    written = [path for path, _ in wanted]
    for path in written:
        refuse_taken(path)
    if len({os.path.abspath(path) for path in written}) < len(written):
        raise ParameterError("two public keys would go to one file", where=written[-1], hint="name a file for each")
    for path, data in wanted:
        write_new(path, data, secret=False)
    members = {"done": True, **facts(record), "written": written}
    print_result(members, [*_shown(record), *(f"Written: {path}" for path in written)], as_json=as_json)


@click.command(short_help="Check a key share against the public record, and the record itself.")
@click.argument("source", metavar="KEYDIR|SHARE|RECORD", callback=filled)
@click.option("--record", "record_file", metavar="R", callback=filled, help="With a SHARE: the key's record.")
@click.option("--key", "key_file", metavar="KEY", callback=filled, help="The custodian's party key: opens it.")
@click.option("--public", "public_file", metavar="PEM", callback=filled, help="The public key that it is known by.")
@trust_option
@passphrase_options
@json_option
def verify(
    source: str,
    record_file: str | None,
    key_file: str | None,
    public_file: str | None,
    trusted_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Check a custodian's key share against the public record alone, and the record against what you know of the key.

    With --key the share is opened in memory, and compared with the record's commitments. With --public the record
    must be of that key, and with --trust be signed by a party whose card you trust.

    \b
    Example:
      shares key verify north-pier --key north-pier.key.json --passphrase-file north-pier.passphrase
    """
    share_path, record_path = _paths(Path(source), record_file)
    record = load_key_record(record_path)
    known = None if public_file is None else public_key_in(read_file(public_file, limit=MAX_FILE), where=public_file)
    check_record(record, public_key=known, trusted=[load_card(path) for path in trusted_files])
    share = None
    if share_path is not None:
        share = KeyShare.parse(read_file(share_path, limit=MAX_FILE), where=os.fspath(share_path))
        check_belongs(share, record)
    if key_file is not None:
        if share is None:
            raise ParameterError("there is no key share here that --key could open", where=source)
        with opening((key_file,), passphrase_files, descriptors) as at_hand:
            own_share(share, record, share.custodian, signers((key_file,), at_hand)[0].open)
    proves = RECORD_ALONE if share is None else SHARE_CLOSED if key_file is None else SHARE_PROVES
    proves = proves.format(fingerprint=record.fingerprint, who=KNOWN if trusted_files else UNKNOWN)
    members = {
        "done": True,
        **facts(record),
        "custodian": share.custodian if share else None,
        "opened": key_file is not None,
        "public_key_compared": known is not None,
        "trusted": bool(trusted_files),
        "proves": proves,
    }
    if share is None:
        what = "The record holds"
    elif key_file is None:
        what = f"The key share of {share.custodian} names this record, and was not opened"
    else:
        what = f"The key share of {share.custodian} holds"
    lines = [
        f"{what}: {record.label}, {quorum(record)}.",
        *(["It is the key whose public half was given."] if known else []),
        *prose(proves),
    ]
    print_result(members, lines, as_json=as_json)


def facts(record: KeyRecord) -> dict[str, object]:
    """Return what is public of a key, for programs."""
    return {
        "label": record.label,
        "key": record.key.hex(),
        "epoch": record.epoch,
        "created": record.public("created")["created"],
        "origin": record.origin,
        "need": record.need,
        "custodians": [one.public("name", "index") | {"card": one.card.fingerprint} for one in record.custodians],
        "public_key": record.public_key.encode().hex(),
        "x25519": public_of(record.public_key).hex(),
        "fingerprint": record.fingerprint,
        "signatures": [f"{one.card.name}, card {one.card.fingerprint}" for one in record.signatures],
    }


def quorum(record: KeyRecord) -> str:
    """Say how many use a key."""
    return f"any {record.need} of {len(record.custodians)} custodians use it"


def _shown(record: KeyRecord) -> list[str]:
    width = max(len(one.name) for one in record.custodians)
    return [
        f"Key: {record.label}; {quorum(record)}.",
        f"Born {record.public('created')['created']}, {BORN[record.origin]}; epoch {record.epoch}.",
        *(f"  {one.index:>2}  {one.name:<{width}}  card {one.card.fingerprint}" for one in record.custodians),
        f"Signed by {', '.join(one.card.name for one in record.signatures)}.",
        f"Public key (Ed25519): {record.public_key.encode().hex()}",
        f"Fingerprint of the record, to read aloud: {record.fingerprint}",
    ]


def _record(source: Path) -> KeyRecord:
    return load_key_record(source / RECORD_NAME if source.is_dir() else source)


def _paths(source: Path, record_file: str | None) -> tuple[Path | None, Path]:
    """Return where the key share is, if one is to be checked, and where the record."""
    if source.is_dir():
        share = source / SHARE_NAME
        return share if os.path.lexists(share) else None, Path(record_file or source / RECORD_NAME)
    kind = parse_object(read_file(source, limit=MAX_FILE), where=os.fspath(source)).get("kind")
    if kind == KeyRecord.KIND:
        return None, source
    if record_file is None:
        raise ParameterError("a key share is checked against its record", hint="give --record R")
    return source, Path(record_file)


for one in (
    key_make.deal_command,
    key_make.join_command,
    key_use.commit_command,
    key_ask.sign_command,
    key_certify.root_command,
    key_certify.certify_command,
    key_certify.revoke_command,
    key_use.open_command,
    key_use.finish_command,
    show,
    verify,
):
    command.add_command(one)
