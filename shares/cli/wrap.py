"""``shares wrap``."""

from __future__ import annotations

import click

from shares.cli.keys import suite_option
from shares.cli.output import filled, json_option, print_result, refuse_taken
from shares.cli.passphrases import GivenPassphrases, passphrase_options
from shares.custody.packing import Packing
from shares.custody.parties import load_card
from shares.custody.presented import parse_share
from shares.documents.base import MAX_FILE
from shares.documents.share import Share
from shares.documents.wrapping import Suite
from shares.errors import DocumentError, ParameterError, VerificationError
from shares.storage import discard, read_back, read_file, write_new


@click.command()
@click.argument("share_file", metavar="SHARE", callback=filled)
@click.option("--to", "target", required=True, metavar="FILE", callback=filled, help="New file, mode 0600.")
@click.option("--passphrase", "by_passphrase", is_flag=True, help="Wrap it under a passphrase.")
@click.option("--for", "card_file", metavar="CARD", callback=filled, help="Wrap it for the party of this card.")
@suite_option
@passphrase_options
@json_option
def command(
    share_file: str,
    target: str,
    by_passphrase: bool,
    card_file: str | None,
    suite: Suite,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Wrap a bare SHARE, under a passphrase or for a party's card, in a new file.

    \b
    Example:
      shares wrap north-pier.share.json --for north-pier.card.json --to north-pier.wrapped.json
    """
    if by_passphrase == (card_file is not None):
        raise ParameterError("give exactly one of --passphrase and --for CARD", hint="see --help")
    refuse_taken(target)
    share = parse_share(read_file(share_file, limit=MAX_FILE), where=share_file)
    if not isinstance(share, Share):
        raise DocumentError("it is wrapped already", where=share_file, hint="`shares unwrap` opens it first")
    if not share.is_whole():
        raise VerificationError(
            "its own digest does not fit: the file was damaged or edited",
            where=share_file,
            hint="a damaged share is not wrapped: `shares verify` says more",
        )
    with GivenPassphrases(passphrase_files, descriptors) as passphrases:
        packing = (
            Packing.for_card(load_card(card_file), suite)
            if card_file is not None
            else Packing.by_passphrase(passphrases.new(share.custodian))
        )
        write_new(target, packing.pack(share), secret=True)
        try:
            packing.unpack(read_back(target, limit=MAX_FILE), target, share)
        except BaseException:  # What does not come back as it was is not left to be relied on.
            discard(target)
            raise
    members = {"done": True, "share": share_file, "wrapped": target, "custodian": share.custodian, "how": packing.words}
    lines = [
        f"The share of {share.custodian} is {packing.words}, in {target}, and was read back.",
        f"Next: see that its holder can open it, and then destroy {share_file}; the medium may keep old blocks.",
    ]
    print_result(members, lines, as_json=as_json)
