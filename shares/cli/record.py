"""``shares record sign``."""

from __future__ import annotations

import click

from shares.cli.keys import opening
from shares.cli.output import filled, json_option, print_result, refuse_taken
from shares.cli.passphrases import passphrase_options
from shares.custody.parties import load_key
from shares.custody.presented import load_record
from shares.documents.record import Role
from shares.storage import write_new


@click.group()
def command() -> None:
    """Add to a record.

    \b
    Example:
      shares record sign tide-archive/record.json --as witness --to signed-record.json \\
        --key registrar.key.json --passphrase-file registrar.passphrase
    """


@command.command()
@click.argument("record", callback=filled)
@click.option("--key", "key_file", required=True, metavar="KEY", callback=filled, help="The signer's party key.")
@click.option("--as", "role", type=click.Choice(["dealer", "witness"]), required=True, help="What the signer was.")
@click.option("--to", "target", required=True, metavar="FILE", callback=filled, help="New file for the signed record.")
@passphrase_options
@json_option
def sign(
    record: str,
    key_file: str,
    role: Role,
    target: str,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Sign a RECORD, in a new file. Its fingerprint stays, so that shares and readers know it as before.

    Before you sign, compare the fingerprint with the one read aloud at the split: you sign that this is it.

    \b
    Example:
      shares record sign tide-archive/record.json --as witness --to signed-record.json \\
        --key registrar.key.json --passphrase-file registrar.passphrase
    """
    refuse_taken(target)
    found, key = load_record(record), load_key(key_file)
    with opening((), passphrase_files, descriptors) as at_hand:
        signed = found.signed(at_hand.party(key), role)
    write_new(target, signed.to_file(), secret=False)
    signers = [f"{one.card.name} as {one.role}" for one in signed.signatures]
    members = {"done": True, "record": target, "fingerprint": signed.fingerprint, "signers": signers}
    lines = [
        f"Signed: {signed.label}, by {key.card.name} as {role}, in {target}.",
        f"Fingerprint, as before: {signed.fingerprint}",
        f"Signed so far by: {', '.join(signers)}.",
        "Next: give the signed record to everyone who has the old one.",
    ]
    print_result(members, lines, as_json=as_json)
