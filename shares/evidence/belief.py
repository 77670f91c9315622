"""What of a journal is believed where parties are trusted: bad news from anybody, good news from them alone.

Whoever can write to the file can add entries. An incident that a stranger enters is looked into; that it is settled,
that a share has a new holder, that a card is a custodian's, or that a copy was destroyed, a trusted party says.

Source: none; whom to trust is up to whoever audits.
May import: shares.documents, shares.history.journal.
Secret: nothing. Confidential: the entries. Public: nothing.
Does not: check signatures: the journal says who signed. Without anybody trusted all is believed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from shares.documents.entry import Entry
from shares.documents.event import (
    Acknowledged,
    Dealt,
    Destroyed,
    DrillClosed,
    Event,
    HandedOn,
    Introduced,
    Received,
    Resolved,
    Retired,
)
from shares.documents.party import PartyCard
from shares.history.journal import Journal

_GOOD: Final = (Acknowledged, Introduced, Received, Resolved, Retired)
"""Good news and nothing else."""
_BOTH: Final = (Destroyed, HandedOn)
"""Good news and bad: the share was touched, and a place is filled, or a copy accounted for."""


@dataclass(frozen=True, slots=True)
class Belief:
    """Which entries' good news is not believed.

    Attributes:
        doubted: the numbers of the entries that nobody trusted has signed.
    """

    doubted: frozenset[int] = frozenset()

    @classmethod
    def of(cls, journal: Journal, trusted: Sequence[PartyCard]) -> Belief:
        """Return what is believed of a journal.

        Args:
            journal: as it was read.
            trusted: cards whose fingerprints were compared; where there are none, all is believed.
        """
        known = {card.ed25519 for card in trusted}
        if not known:
            return cls()
        return cls(
            frozenset(
                entry.sequence
                for entry in journal.entries
                if known.isdisjoint(card.ed25519 for card in journal.signers(entry))
            )
        )

    def told(self, entry: Entry) -> Entry | None:
        """Return what is left of an entry when its good news is not believed; None where that is nothing."""
        event = entry.event
        if entry.sequence not in self.doubted:
            return entry
        if isinstance(event, _GOOD) or (isinstance(event, DrillClosed) and event.passed):
            return None
        if isinstance(event, Dealt):
            unknown = tuple(share.model_copy(update={"card": None}) for share in event.custodians)
            return entry.model_copy(update={"event": event.model_copy(update={"custodians": unknown})})
        return entry

    def held(self, entry: Entry) -> Event | None:
        """Return what an entry says of who holds a share, and by which card they are known, where it is believed."""
        told = self.told(entry)
        if told is None or (entry.sequence in self.doubted and isinstance(told.event, HandedOn)):
            return None
        return told.event

    def not_believed(self, journal: Journal) -> list[int]:
        """Return the numbers of the entries whose good news is not believed."""
        return [
            entry.sequence
            for entry in journal.entries
            if entry.sequence in self.doubted and (isinstance(entry.event, _BOTH) or self.told(entry) is not entry)
        ]


ALL_BELIEVED: Final = Belief()
"""Where nobody in particular is trusted."""
