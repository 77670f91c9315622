"""What is amiss with the party cards that a policy names: a card in another name, or one card for several custodians.

Source: NIST SP 800-57 Part 1, on assurance that a public key is its owner's (from memory); FORMAT.md, sec. 9 and 12.
May import: shares.documents.party, shares.documents.policy, .findings.
Secret: nothing. Public: cards. Confidential: for whom they are.
Does not: read files, or know whose a card is; only a comparison of fingerprints with its party shows that.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING

from shares.planning.findings import Finding

if TYPE_CHECKING:
    from shares.documents.party import PartyCard


def card_findings(cards: Mapping[str, PartyCard]) -> tuple[Finding, ...]:
    """Return what is amiss with cards. One for several custodians is serious: they are one holder then, whatever the
    policy says of people; one in another name is a caution, as only people know whether it is meant.

    Args:
        cards: the card of each custodian who has one, by the custodian's name.
    """
    return (*_in_other_names(cards), *_shared(cards))


def _in_other_names(cards: Mapping[str, PartyCard]) -> Iterator[Finding]:
    for name, card in cards.items():
        if card.name != name:
            yield Finding(
                "caution",
                "card-of-another-name",
                f"The card of {name} is in the name of {card.name}, fingerprint {card.fingerprint}.",
                "See whether it is the right file: the share is wrapped for whoever has this card's key.",
                (name,),
            )


def _shared(cards: Mapping[str, PartyCard]) -> Iterator[Finding]:
    held: dict[str, list[str]] = {}
    for name, card in cards.items():
        held.setdefault(card.fingerprint, []).append(name)
    for fingerprint, names in held.items():
        if len(names) > 1:
            yield Finding(
                "serious",
                "card-of-several",
                f"One card is given for {', '.join(names)}, fingerprint {fingerprint}.",
                "Whoever has its key opens all of these shares: give each custodian a card of their own.",
                tuple(names),
            )
