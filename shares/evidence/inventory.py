"""The copies of every share of a set, and what became of each: worked out from the journal, stored nowhere.

Source: FBCA certificate policy, sec. 6.2.4.1 (a copy is kept as the original; from a summary); WebTrust for CAs 4.6
(destruction is of any copy for any purpose; from a summary); PCI PIN 3.1, 9-2 (serials of packs; from a summary).
May import: shares.documents, shares.history.
Secret: nothing. Confidential: all of it, as it tells where shares are. Public: nothing.
Does not: know of a copy that nobody entered, or count practice shares, which are worth nothing.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from datetime import datetime
from typing import Final, Literal, TypeAlias

from shares.documents.entry import Entry
from shares.documents.event import Copied, Dealt, Delivered, Destroyed, HandedOn, Lost, Received
from shares.documents.policy import folded
from shares.documents.record import Record
from shares.history.journal import Journal

ORIGINAL: Final = "original"
Fate: TypeAlias = Literal["held", "destroyed", "lost"]


@dataclass(frozen=True, slots=True)
class Copy:
    """One copy of a custodian's share.

    Attributes:
        custodian: whose share.
        name: ``original`` for the one that was dealt (``original, epoch 2`` for one of a later epoch), else its serial.
        epoch: of the share.
        dealt: whether it came from a split, and is no copy of one that did.
        packed: how it left the split, where the journal says so.
        sent: the serial of the pack, as it was sent.
        received: the serial that was seen on receipt.
        channel: the way it went.
        arrived: whether its receipt was entered.
        holders: persons to whom it was handed on, in order.
        fate: what became of it.
        entry: the number of the entry that says so, or None while it is held.
        time: of that entry.
        by: who destroyed it, or gave it up.
        witness: who saw that.
    """

    custodian: str
    name: str
    epoch: int
    dealt: bool = True
    packed: str | None = None
    sent: str | None = None
    received: str | None = None
    channel: str | None = None
    arrived: bool = False
    holders: tuple[str, ...] = ()
    fate: Fate = "held"
    entry: int | None = None
    time: datetime | None = None
    by: str | None = None
    witness: str | None = None

    @property
    def mismatch(self) -> bool:
        """Whether the pack that arrived bears another serial than the one that was sent."""
        return None not in (self.sent, self.received) and folded(self.sent or "") != folded(self.received or "")


@dataclass(frozen=True, slots=True)
class Inventory:
    """All copies, in the order in which they came to be.

    Attributes:
        copies: of every share, destroyed ones as well.
        problems: entries that do not fit to any copy, in words.
    """

    copies: tuple[Copy, ...]
    problems: tuple[str, ...]

    @property
    def held(self) -> tuple[Copy, ...]:
        """The copies that nobody has accounted for."""
        return tuple(copy for copy in self.copies if copy.fate == "held")

    def find(self, custodian: str, name: str) -> Copy | None:
        """Return a copy by its name; spelling as in ``folded``."""
        return next((c for c in self.copies if c.custodian == custodian and folded(c.name) == folded(name)), None)


def take_inventory(journal: Journal, record: Record | None) -> Inventory:
    """Return the copies of a set's shares.

    Args:
        journal: the set's.
        record: the set's: where the journal begins after the split, its custodians' originals are counted all the same.
    """
    counting = _Counting()
    # A split that did not finish stands in the journal too; the shares of the record's set are what counts.
    dealt = [e.event for e in journal.entries if isinstance(e.event, Dealt)]
    sets = {event.set for event in dealt} if record is None else {record.set}
    if record is not None and not any(event.set == record.set for event in dealt):
        counting.deal(((one.name, None) for one in record.custodians), record.epoch)
    for entry in journal.entries:
        if not isinstance(entry.event, Dealt) or entry.event.set in sets:
            counting.take(entry)
    return Inventory(tuple(counting.copies), tuple(counting.problems))


class _Counting:
    def __init__(self) -> None:
        self.copies: list[Copy] = []
        self.problems: list[str] = []

    def deal(self, custodians: Iterable[tuple[str, str | None]], epoch: int) -> None:
        name = ORIGINAL if not self.copies else f"{ORIGINAL}, epoch {epoch}"
        for custodian, packed in custodians:
            self.copies.append(Copy(custodian, self._free_name(custodian, name), epoch, packed=packed))

    def _free_name(self, custodian: str, name: str) -> str:
        """Return a name that no copy of this custodian has: rather one too many to account for than one too few."""
        taken = {folded(copy.name) for copy in self.copies if copy.custodian == custodian}
        free, number = name, 2
        while folded(free) in taken:
            free, number = f"{name} ({number})", number + 1
        return free

    def take(self, entry: Entry) -> None:
        event = entry.event
        if isinstance(event, Dealt):
            self.deal(((one.name, one.packed) for one in event.custodians), event.epoch)
        elif isinstance(event, Copied):
            self._copy(event, entry)
        elif isinstance(event, Delivered):
            self._change(entry, event.custodian, sent=event.serial, channel=event.channel)
        elif isinstance(event, Received):
            self._change(entry, event.custodian, received=event.serial, arrived=True)
        elif isinstance(event, HandedOn):
            at = self._latest(event.custodian)
            self._change(
                entry, event.custodian, holders=(*(self.copies[at].holders if at is not None else ()), event.to)
            )
        elif isinstance(event, Destroyed | Lost):
            self._end(event, entry)

    def _copy(self, event: Copied, entry: Entry) -> None:
        at = self._latest(event.custodian)
        if at is None:
            self.problems.append(f"entry {entry.sequence} tells of a copy of a share that was not dealt")
        name = self._free_name(event.custodian, event.copy_)
        if name != event.copy_:
            self.problems.append(
                f"entry {entry.sequence} tells of a copy that {event.custodian} had: counted as {name}"
            )
        epoch = 1 if at is None else self.copies[at].epoch
        self.copies.append(Copy(event.custodian, name, epoch, dealt=False))

    def _latest(self, custodian: str) -> int | None:
        """Return where the original of the newest epoch stands."""
        places = [i for i, c in enumerate(self.copies) if c.custodian == custodian and c.dealt]
        return places[-1] if places else None

    def _change(self, entry: Entry, custodian: str, **facts: object) -> None:
        at = self._latest(custodian)
        if at is None:
            self.problems.append(f"entry {entry.sequence} is about a share of {custodian}, who was dealt none")
        else:
            self.copies[at] = replace(self.copies[at], **facts)  # type: ignore[arg-type]

    def _end(self, event: Destroyed | Lost, entry: Entry) -> None:
        fate: Fate = "destroyed" if isinstance(event, Destroyed) else "lost"
        for i, copy in enumerate(self.copies):
            # What was given up as lost may be found and destroyed after all; nothing else ends twice.
            open_ = copy.fate == "held" or (copy.fate == "lost" and fate == "destroyed")
            if copy.custodian == event.custodian and folded(copy.name) == folded(event.copy_) and open_:
                self.copies[i] = replace(
                    copy, fate=fate, entry=entry.sequence, time=entry.time, by=event.by, witness=event.witness
                )
                return
        self.problems.append(
            f"entry {entry.sequence} says that copy {event.copy_} of {event.custodian} was {fate}, and none was held"
        )
