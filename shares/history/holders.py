"""Who holds each share, and by which card they are known, as policy and journal tell up to one entry.

A card belongs to a person. Whoever takes a share over is not known by the card of whoever had it before: until their
own is introduced, nobody's signature is theirs.

Source: FORMAT_EVIDENCE.md, sec. 16.
May import: shares.documents, .journal.
Secret: nothing. Confidential: persons. Public: names, fingerprints of cards.
Does not: say what a share is worth, or whether its place is filled; ``evidence.standing`` does.
"""

from __future__ import annotations

from collections.abc import Iterable

from shares.documents.event import Dealt, Departed, Event, HandedOn, Introduced
from shares.documents.policy import Policy, folded
from shares.documents.record import Record
from shares.history.journal import Journal


def known_cards(journal: Journal, record: Record, policy: Policy | None) -> dict[str, str]:
    """Return the fingerprint of each custodian's party card, as the journal told last of who holds the share now."""
    holders = Holders((custodian.name for custodian in record.custodians), policy)
    for entry in journal.entries:
        holders.take(entry.event)
    return holders.cards


class Holders:
    """Who holds what, while the events of a journal are taken one after the other.

    Args:
        names: the custodians of the record.
        policy: names each custodian's person; without one, a custodian is known by the custodian's own name.

    Attributes:
        now: who holds each share.
        cards: fingerprint of each custodian's party card, where it is known whose it is.
    """

    def __init__(self, names: Iterable[str], policy: Policy | None) -> None:
        said = {one.name: one.person for one in policy.custodians} if policy else {}
        self._first = {name: said.get(name, name) for name in names}
        self.now = dict(self._first)
        self._ever = {name: {holder} for name, holder in self.now.items()}
        self.cards: dict[str, str] = {}

    def take(self, event: Event) -> tuple[str, ...]:
        """Let an event have its effect.

        Returns:
            The custodians whose place a departure empties: those that it names, and all that the person holds.
        """
        match event:
            case Dealt():
                for share in event.custodians:
                    self.now[share.name] = self._first.get(share.name, share.name)
                    self._ever[share.name] = {self.now[share.name]}
                    self._know(share.name, share.card)
            case Introduced():
                self._know(event.custodian, event.card)
            case HandedOn():
                self.now[event.custodian] = event.to
                self._ever.setdefault(event.custodian, set()).add(event.to)
                self._know(event.custodian, None)
            case Departed():
                names = tuple(dict.fromkeys((*event.custodians, *self.held_by(event.person))))
                for name in names:
                    self._know(name, None)
                return names
        return ()

    def is_party(self, custodian: str, person: str) -> bool:
        """Say whether a person holds, or since the dealing has held, a custodian's share: no third party to it."""
        return folded(person) in map(folded, (custodian, *self._ever.get(custodian, ())))

    def held_by(self, person: str) -> tuple[str, ...]:
        """Return whose shares a person holds; spelling as in ``folded``, and a first holder by the custodian's name."""
        return tuple(
            name
            for name, holder in self.now.items()
            if folded(person) == folded(holder)
            or (folded(person) == folded(name) and holder == self._first.get(name, name))
        )

    def _know(self, custodian: str, card: str | None) -> None:
        self.cards.pop(custodian, None)
        if card is not None:
            self.cards[custodian] = card
