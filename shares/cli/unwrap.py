"""``shares unwrap``."""

from __future__ import annotations

from pathlib import Path

import click

from shares.cli.keys import key_option, opening
from shares.cli.output import filled, json_option, print_result, progress, refuse_taken, warn
from shares.cli.passphrases import passphrase_options
from shares.custody.deliver import open_sealed, to_file
from shares.custody.encrypted_file import open_file
from shares.custody.opening import Opening
from shares.custody.presented import load_record
from shares.custody.verify import verify_share
from shares.documents.base import MAX_FILE, parse_object
from shares.documents.record import Record
from shares.documents.sealed_secret import SealedSecret
from shares.documents.wrapped_share import WrappedShare
from shares.errors import DocumentError, ParameterError
from shares.storage import read_file, write_new
from shares.streams import new_file

UNCHECKED = "nothing says who wrapped it, as anybody can wrap something for a card. --record checks what it is."
BARE = "the share is bare now: enough of them are the secret. Keep it only as long as it is needed, and destroy it."


@click.command()
@click.argument("file", metavar="FILE", callback=filled)
@click.option("--to", "target", required=True, metavar="FILE", callback=filled, help="New file, mode 0600.")
@click.option(
    "--encrypted",
    "encrypted_file",
    metavar="FILE",
    callback=filled,
    help="The encrypted file, where the key is sealed.",
)
@click.option(
    "--record", "record_file", metavar="R", callback=filled, help="The set's public record: checks what it is."
)
@key_option
@passphrase_options
@json_option
def command(
    file: str,
    target: str,
    encrypted_file: str | None,
    record_file: str | None,
    keys: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Open a wrapped share, or a secret that was recovered for your card, into a new file.

    `verify` and `recover` take wrapped shares as they are; unwrapping is for those who must have the bare one. Anybody
    can wrap something for your card: with --record what comes out is checked before it is written.

    \b
    Example:
      shares unwrap registrar.wrapped.json --to bare.json \\
        --key registrar.key.json --passphrase-file registrar.passphrase
    """
    refuse_taken(target)
    data = read_file(file, limit=MAX_FILE)
    kind = parse_object(data, where=file).get("kind")
    record = load_record(record_file) if record_file is not None else None
    with opening(keys, passphrase_files, descriptors) as at_hand:
        if kind == WrappedShare.KIND:
            what, cautions = _share(WrappedShare.parse(data, where=file), at_hand, Path(target), record), [BARE]
        elif kind == SealedSecret.KIND:
            sealed = SealedSecret.parse(data, where=file)
            what, cautions = _secret(sealed, at_hand, Path(target), encrypted_file, record), []
        else:
            raise DocumentError("nothing in it is wrapped", where=file, hint="`shares show` says what it is")
    if record is None:
        cautions.append(UNCHECKED)
    if not as_json:
        for caution in cautions:
            warn(caution)
    checked = f"Checked against the record with fingerprint {record.fingerprint}." if record else None
    print_result(
        {
            "done": True,
            "file": file,
            "to": target,
            "what": what,
            "checked_against": record.fingerprint if record else None,
            "cautions": cautions,
        },
        [f"Opened: {what}, written to {target}.", *([checked] if checked else [])],
        as_json=as_json,
    )


def _share(wrapped: WrappedShare, at_hand: Opening, target: Path, record: Record | None) -> str:
    share = at_hand.share(wrapped)
    try:
        if record is not None:
            verify_share(share, record)
        write_new(target, share.to_file(), secret=True)
    finally:
        share.close()
    return f"the share of {share.custodian}"


def _secret(
    sealed: SealedSecret, at_hand: Opening, target: Path, encrypted_file: str | None, record: Record | None
) -> str:
    if (encrypted_file is None) != (sealed.encrypted_file is None):
        raise ParameterError(
            "the key of an encrypted file is sealed in it, and that file is needed too"
            if encrypted_file is None
            else "the secret itself is sealed in it, and no key of an encrypted file",
            where="--encrypted",
        )
    with open_sealed(sealed, lambda one: at_hand.content(one, one.label or ""), record) as secret:
        if encrypted_file is None or sealed.encrypted_file is None:
            to_file(secret, target)
        else:
            sink, shown = new_file(target, secret=True), progress("Checking, then opening", "MiB")
            open_file(encrypted_file, secret, sealed.encrypted_file, sealed.set, sink, progress=shown)
    label = record.label if record else sealed.label
    return f"the secret {label}" if label else "the secret"
