"""``shares party new``, ``show`` and ``passphrase``."""

from __future__ import annotations

from pathlib import Path

import click

from shares.cli.output import filled, json_option, print_result, refuse_taken
from shares.cli.passphrases import GivenPassphrases, passphrase_options
from shares.cli.signals import held_signals
from shares.custody.parties import check_party_paths, load_card, load_key, write_party
from shares.documents.members import check_name
from shares.documents.party import PartyCard, new_party
from shares.storage import write_new

READ_ALOUD = (
    "Next: read the fingerprint aloud to those who use the card, in person or by a line you know; they compare it.",
    "Keep the key and its passphrase apart. Who loses either cannot open what was wrapped for the card.",
)


@click.group()
def command() -> None:
    """Make and show party keys and cards.

    A party is a dealer, custodian, witness or receiver. Its key (wrapped by passphrase) signs and opens; its card is
    public, carries the public halves, and is known by a fingerprint to read aloud.

    \b
    Example:
      shares party new north-pier --in /media/stick --passphrase-file north-pier.passphrase
    """


@command.command(short_help="Make a party key and card.")
@click.argument("name", callback=filled)
@click.option("--in", "folder", default=".", metavar="DIR", callback=filled, help="Existing folder.  [default: .]")
@click.option("--contact", metavar="TEXT", callback=filled, help="How the party is reached. It is public.")
@passphrase_options
@json_option
def new(
    name: str,
    folder: str,
    contact: str | None,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Make a party key and card: NAME.key.json, wrapped by passphrase, and NAME.card.json.

    \b
    Example:
      shares party new north-pier --in /media/stick --passphrase-file north-pier.passphrase
    """
    check_name(name)
    check_party_paths(Path(folder), name)
    with GivenPassphrases(passphrase_files, descriptors) as passphrases:
        key = new_party(name, passphrases.new(name), contact=contact)
    with held_signals():
        key_path, card_path = write_party(key, Path(folder))
        members = {"done": True, "key": str(key_path), "card": str(card_path), **_facts(key.card)}
        lines = [f"Made: the party {name}.", f"  key (private)   {key_path}", f"  card (public)   {card_path}"]
        lines += [f"Fingerprint of the card: {key.card.fingerprint}", *READ_ALOUD]
        print_result(members, lines, as_json=as_json)


@command.command(short_help="Show a party card, checked, with its fingerprint.")
@click.argument("card", callback=filled)
@json_option
def show(card: str, as_json: bool) -> None:
    """Show a party card, after checking that it is signed by its own key.

    \b
    Example:
      shares party show north-pier.card.json
    """
    found = load_card(card)
    lines = [
        f"Card of {found.name}{f' ({found.contact})' if found.contact else ''}, made {_facts(found)['created']}.",
        f"Fingerprint: {found.fingerprint}",
        "Its own signature fits: whoever made this card holds its key.",
        "It does not prove who that is: compare the fingerprint with the party itself.",
    ]
    print_result({"done": True, **_facts(found)}, lines, as_json=as_json)


@command.command(short_help="Wrap a party key under a new passphrase.")
@click.argument("key", callback=filled)
@click.option("--to", "target", required=True, metavar="FILE", callback=filled, help="New file for the key.")
@click.option(
    "--new-passphrase-file",
    metavar="FILE",
    callback=filled,
    help="Read the new passphrase from this file: one line.",
)
@passphrase_options
@json_option
def passphrase(
    key: str,
    target: str,
    new_passphrase_file: str | None,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Wrap a party KEY under a new passphrase, in a new file. The card and its fingerprint stay.

    \b
    Example:
      shares party passphrase north-pier.key.json --to new.key.json \\
        --passphrase-file north-pier.passphrase --new-passphrase-file new.passphrase
    """
    refuse_taken(target)
    old = load_key(key)
    name = old.card.name
    # The sign of equality says that all of what follows is the path.
    chosen = (f"={new_passphrase_file}",) if new_passphrase_file else ()
    with (
        GivenPassphrases(passphrase_files, descriptors) as known,
        GivenPassphrases(chosen, (), option="--new-passphrase-file FILE") as fresh,
        known.opening(name, old.open) as opened,
    ):
        rewrapped = opened.wrapped(fresh.new(name))
    write_new(target, rewrapped.to_file(), secret=True)
    lines = [
        f"Wrapped the key of {name} under the new passphrase, in {target}.",
        f"Next: see that it opens, and then destroy {key}: whoever knows the old passphrase can still open that file.",
    ]
    print_result({"done": True, "key": target, **_facts(old.card)}, lines, as_json=as_json)


def _facts(card: PartyCard) -> dict[str, object]:
    return card.public("name", "contact", "created", "fingerprint")
