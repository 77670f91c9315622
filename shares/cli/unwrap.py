"""``shares unwrap``."""

from __future__ import annotations

import os
from pathlib import Path

import click

from shares.cli.keys import key_option, opening
from shares.cli.output import filled, json_option, print_result, progress, warn
from shares.cli.passphrases import passphrase_options
from shares.custody.deliver import to_file
from shares.custody.encrypted_file import open_file
from shares.custody.opening import Opening
from shares.documents.base import MAX_FILE, parse_object
from shares.documents.sealed_secret import SealedSecret
from shares.documents.wrapped_share import WrappedShare
from shares.errors import DocumentError, ParameterError, StorageError
from shares.storage import read_file, write_new
from shares.streams import new_file

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
@key_option
@passphrase_options
@json_option
def command(
    file: str,
    target: str,
    encrypted_file: str | None,
    keys: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Open a wrapped share, or a secret that was recovered for your card, into a new file.

    `verify` and `recover` take wrapped shares as they are; unwrapping is for those who must have the bare one.

    \b
    Example:
      shares unwrap registrar.wrapped.json --to bare.json \\
        --key registrar.key.json --passphrase-file registrar.passphrase
    """
    if os.path.lexists(target):
        raise StorageError("exists already and is never overwritten", where=target, hint="choose another name")
    data = read_file(file, limit=MAX_FILE)
    kind = parse_object(data, where=file).get("kind")
    with opening(keys, passphrase_files, descriptors) as at_hand:
        if kind == WrappedShare.KIND:
            share = at_hand.share(WrappedShare.parse(data, where=file))
            write_new(target, share.to_file(), secret=True)
            share.close()
            what, cautions = f"the share of {share.custodian}", [BARE]
        elif kind == SealedSecret.KIND:
            what, cautions = _secret(SealedSecret.parse(data, where=file), at_hand, Path(target), encrypted_file), []
        else:
            raise DocumentError("nothing in it is wrapped", where=file, hint="`shares show` says what it is")
    if not as_json:
        for caution in cautions:
            warn(caution)
    print_result(
        {"done": True, "file": file, "to": target, "what": what, "cautions": cautions},
        [f"Opened: {what}, written to {target}."],
        as_json=as_json,
    )


def _secret(sealed: SealedSecret, at_hand: Opening, target: Path, encrypted_file: str | None) -> str:
    if (encrypted_file is None) != (sealed.encrypted_file is None):
        raise ParameterError(
            "the key of an encrypted file is sealed in it, and that file is needed too"
            if encrypted_file is None
            else "the secret itself is sealed in it, and no key of an encrypted file",
            where="--encrypted",
        )
    with at_hand.content(sealed, sealed.label or "") as secret:
        if encrypted_file is None or sealed.encrypted_file is None:
            to_file(secret, target)
        else:
            sink, shown = new_file(target, secret=True), progress("Checking, then opening", "MiB")
            open_file(encrypted_file, secret, sealed.encrypted_file, sealed.set, sink, progress=shown)
    return f"the secret {sealed.label}" if sealed.label else "the secret"
