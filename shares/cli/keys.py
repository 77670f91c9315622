"""Options about party keys and cards, and what of wrapped files they open.

Source: none.
May import: shares.errors, shares.custody, shares.documents, shares.cli.output, shares.cli.passphrases.
Secret: party keys and passphrases, while a command runs. Public: cards, paths.
Does not: decide what is signed or wrapped.
"""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Iterator
from typing import Any, TypeVar

import click

from shares.cli.output import filled, warn
from shares.cli.passphrases import GivenPassphrases
from shares.custody.opening import Opening
from shares.custody.parties import load_card, load_key
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.wrapping import SUITES
from shares.errors import ParameterError

Function = TypeVar("Function", bound=Callable[..., Any])

UNSIGNED_ENTRY = (
    "the entry is unsigned, and cannot be signed later: an audit says so for good. --sign KEY signs it when it is made."
)

key_option = click.option(
    "--key",
    "keys",
    multiple=True,
    metavar="KEY",
    callback=filled,
    help="A party key that opens shares wrapped for its card; once for each.",
)
sign_option = click.option(
    "--sign",
    "signer_files",
    multiple=True,
    metavar="KEY",
    callback=filled,
    help="A party key that signs this; once for each, where the policy asks for two.",
)
trust_option = click.option(
    "--trust",
    "trusted_files",
    multiple=True,
    metavar="CARD",
    callback=filled,
    help="A party card whose fingerprint you have compared: the record must be signed by one such party.",
)
suite_option = click.option(
    "--suite",
    type=click.Choice(SUITES),
    default=SUITES[0],
    show_default=True,
    help="How to encrypt to a card: hybrid, and newer than RFC 9180; or as in RFC 9180.",
)


@contextlib.contextmanager
def opening(keys: tuple[str, ...], files: tuple[str, ...], descriptors: tuple[str, ...]) -> Iterator[Opening]:
    """Hold what opens wrapped files, as the options say; wiped at the end."""
    loaded = [load_key(path) for path in keys]
    with GivenPassphrases(files, descriptors) as passphrases, Opening(passphrases, loaded) as opened:
        yield opened


def signers(paths: tuple[str, ...], at_hand: Opening) -> list[OpenPartyKey]:
    """Return the party keys that sign, opened; ``at_hand`` wipes them."""
    return [at_hand.party(load_key(path)) for path in paths]


def warn_unsigned(signer_files: tuple[str, ...], *, as_json: bool = False) -> None:
    """Caution that nobody has signed an entry of the journal; programs see that by its signers.

    Args:
        signer_files: what ``--sign`` gave.
        as_json: whether a program reads the result.
    """
    if not signer_files and not as_json:
        warn(UNSIGNED_ENTRY)


def cards_by_name(given: tuple[str, ...], names: list[str], *, option: str) -> dict[str, PartyCard]:
    """Read ``NAME=CARD`` options, or ``CARD`` where the card's own name is the custodian's.

    Raises:
        ParameterError: a name that is none of ``names``, or two cards for one.
    """
    cards: dict[str, PartyCard] = {}
    for one in given:
        name = max((name for name in names if one.startswith(f"{name}=")), key=len, default=None)
        card = load_card(one if name is None else one.removeprefix(f"{name}="))
        owner = name or card.name
        if owner not in names:
            raise ParameterError(
                f"the card is of {card.name}, who is no custodian here",
                where=f"{option} {one}",
                hint="write NAME=CARD, with the custodian's name",
            )
        if owner in cards:
            raise ParameterError(f"two cards are given for {owner}", where=option)
        cards[owner] = card
    return cards
