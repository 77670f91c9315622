"""The journal of a set: lines that are only ever added, each chained to the one before it and signed.

Source: S. Haber, W. S. Stornetta, "How to time-stamp a digital document", J. Cryptology 3, 1991 (linking by hashes);
flock(2) and fsync(2) of the Linux manual pages; FORMAT.md, sec. 16.
May import: shares.errors, shares.clock, shares.storage, shares.documents, shares.history.lines.
Secret: the party keys that sign, passed through. Confidential: the entries. Public: their digests.
Does not: say what events mean, or which must be there; ``evidence`` does.
"""

from __future__ import annotations

import hashlib
import os
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from datetime import datetime
from pathlib import Path

from shares import clock
from shares.documents.base import MAX_FILE
from shares.documents.entry import Entry, EntrySignature, Head, NamedDigest, head_of, line_digest
from shares.documents.event import Event, SetAside
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed
from shares.errors import DocumentError, StorageError
from shares.history.lines import appended
from shares.storage import read_file, write_new

JOURNAL_NAME = "journal.jsonl"
MAX_JOURNAL = 1 << 30
"""The largest journal, in bytes: 1 GiB."""


@dataclass(frozen=True, slots=True)
class Problem:
    """Something wrong with a journal, and where.

    Attributes:
        line: the line, from 1.
        what: what is wrong with it, in words.
        breaks: whether the journal can no longer be believed from here on; else it is worth knowing and no more.
    """

    line: int
    what: str
    breaks: bool = True


@dataclass(frozen=True, slots=True, eq=False)
class Journal:
    """A journal as it was read: what can be read of it, and what is wrong with it.

    Attributes:
        entries: the entries that can be read, in order.
        digests: of each of them, 32 bytes: what the next one names.
        cards: the party cards that entries have introduced, by fingerprint.
        problems: what is wrong with chain, sequence, time and signatures.
        torn: what a stopped run left after the last whole line.
    """

    entries: tuple[Entry, ...] = ()
    digests: tuple[bytes, ...] = ()
    cards: dict[str, PartyCard] = field(default_factory=dict)
    problems: tuple[Problem, ...] = ()
    torn: bytes = b""

    @property
    def head(self) -> Head | None:
        """Where the journal stands: short enough to be read aloud and noted elsewhere; None for an empty one."""
        return head_of(self.entries[-1].sequence, self.digests[-1]) if self.entries else None

    def holds(self, head: Head) -> bool:
        """Say whether the journal once stood at ``head``: a journal that lost its tail, or was rewritten, did not."""
        return any(
            entry.sequence == head.sequence and head_of(entry.sequence, digest) == head
            for entry, digest in zip(self.entries, self.digests, strict=True)
        )

    def signers(self, entry: Entry) -> list[PartyCard]:
        """The parties that signed an entry of this journal; those whose signature does not fit are in ``problems``."""
        return [self.cards[one.card] for one in entry.signatures if one.card in self.cards]


def read_journal(data: bytes, *, progress: Callable[[int, int | None], None] | None = None) -> Journal:
    """Read a journal, with all that is wrong with it; never raises for what it holds.

    Args:
        data: the bytes of the file.
        progress: called with (lines read, lines).
    """
    *lines, torn = data.split(b"\n")
    reader = _Reader()
    for i, line in enumerate(lines):
        if progress:
            progress(i, len(lines))
        reader.read(i + 1, line)
    if torn:
        reader.problems.append(
            Problem(len(lines) + 1, "it is no whole line: a run was stopped while it wrote", breaks=False)
        )
    return Journal(tuple(reader.entries), tuple(reader.digests), reader.cards, tuple(reader.problems), torn)


class _Reader:
    def __init__(self) -> None:
        self.entries: list[Entry] = []
        self.digests: list[bytes] = []
        self.cards: dict[str, PartyCard] = {}
        self.problems: list[Problem] = []

    def read(self, number: int, line: bytes) -> None:
        try:
            entry = Entry.parse(line)
        except DocumentError as error:
            self.problems.append(Problem(number, f"it is no entry: {error.what}"))
            return
        digest = line_digest(line)
        self.problems += (Problem(number, what) for what in self._broken(entry, line))
        if self.entries and entry.time < self.entries[-1].time:
            then = clock.to_text(self.entries[-1].time)
            what = f"its time, {clock.to_text(entry.time)}, lies before that of the entry before it, {then}"
            self.problems.append(Problem(number, what, breaks=False))
        self.entries.append(entry)
        self.digests.append(digest)

    def _broken(self, entry: Entry, line: bytes) -> list[str]:
        broken = []
        if entry.line() != line:
            broken.append("it is not in canonical form")
        before = self.entries[-1] if self.entries else None
        if entry.sequence != (before.sequence + 1 if before else 1):
            broken.append(f"it says that it is entry {entry.sequence}, after {before.sequence if before else 'none'}")
        if entry.previous != (self.digests[-1] if self.digests else None):
            broken.append("it does not follow the entry before it: one was changed, removed, added or moved")
        for card in entry.cards:
            self.cards.setdefault(card.fingerprint, card)
        for one in entry.signatures:
            broken += self._signature_problem(entry, one)
        if len({one.card for one in entry.signatures}) != len(entry.signatures):
            broken.append("one party signed it twice")
        return broken

    def _signature_problem(self, entry: Entry, one: EntrySignature) -> list[str]:
        card = self.cards.get(one.card)
        if card is None:
            return [f"it is signed by the card {one.card}, which no entry has introduced"]
        if not is_signed(card.ed25519, one.signature, entry.KIND, entry.signed_members(one.card)):
            return [f"the signature by {card.name} does not fit its content"]
        return []


def load_journal(folder: Path) -> Journal:
    """Read the journal of a set's folder; a missing one is empty.

    Raises:
        StorageError: it cannot be read.
    """
    path = folder / JOURNAL_NAME
    return read_journal(read_file(path, limit=MAX_JOURNAL)) if os.path.lexists(path) else Journal()


def first_line(
    event: Event,
    *,
    keys: Sequence[OpenPartyKey] = (),
    cards: Sequence[PartyCard] = (),
    documents: Sequence[NamedDigest] = (),
    time: datetime | None = None,
) -> bytes:
    """Return the content of a journal with one entry, for a set's folder that is only being made.

    Args:
        event: what happened.
        keys: of the parties that sign.
        cards: of other parties, to be introduced.
        documents: what the event speaks of.
        time: of the entry; now by default.
    """
    return _made(event, b"", keys, cards, documents, time).line() + b"\n"


def append(
    folder: Path,
    event: Event,
    *,
    keys: Sequence[OpenPartyKey] = (),
    cards: Sequence[PartyCard] = (),
    documents: Sequence[NamedDigest] = (),
    time: datetime | None = None,
) -> Entry:
    """Add one entry to the journal of a folder, durably, one process at a time; the file is made where it is missing.

    What a stopped run left after the last whole line is moved to a file of its own first, and an entry says so.

    Args:
        folder: the set's.
        event: what happened.
        keys: of the parties that sign; their cards are introduced where they are not yet.
        cards: of other parties, to be introduced likewise.
        documents: what the event speaks of.
        time: of the entry; now by default.

    Returns:
        The entry, as it stands in the journal.

    Raises:
        StorageError: the journal cannot be written, or its last line is no entry.
    """
    made: list[Entry] = []

    def line_after(before: bytes) -> bytes:
        made[:] = [_made(event, before, keys, cards, documents, time)]
        return made[0].line()

    def torn_line_after(before: bytes, torn: bytes) -> bytes:
        return _set_aside(folder, before, torn, keys, time).line()

    appended(folder / JOURNAL_NAME, line_after, torn_line_after)
    return made[0]


def _made(
    event: Event,
    before: bytes,
    keys: Sequence[OpenPartyKey],
    cards: Sequence[PartyCard],
    documents: Sequence[NamedDigest],
    time: datetime | None,
) -> Entry:
    """Return the signed entry that follows what a journal holds."""
    last = before.rstrip(b"\n").rpartition(b"\n")[2]
    sequence, previous, problem = 0, None, ""
    if last:
        try:
            sequence, previous = Entry.parse(last).sequence, line_digest(last)
        except DocumentError as error:
            problem = error.what
        if problem:
            raise StorageError(
                f"the last line of the journal is no entry: {problem}",
                where=JOURNAL_NAME,
                hint="`shares journal verify` says what is wrong; nothing was added",
            )
    needed = {card.fingerprint: card for card in (*(key.card for key in keys), *cards)}
    # Only a card has a member of this name, so that searching the text tells whether one was introduced.
    new = tuple(card for card in needed.values() if f'"fingerprint":"{card.fingerprint}"'.encode() not in before)
    entry = Entry(
        kind="journal-entry",
        version=1,
        sequence=sequence + 1,
        time=clock.now() if time is None else time,
        previous=previous,
        event=event,
        documents=tuple(documents),
        cards=new,
        signatures=(),
    )
    for key in keys:
        entry = entry.signed(key)
    if len(entry.line()) > MAX_FILE:
        raise StorageError("the entry would be larger than 1 MiB", where=JOURNAL_NAME, hint="say it in fewer words")
    return entry


def _set_aside(folder: Path, before: bytes, torn: bytes, keys: Sequence[OpenPartyKey], time: datetime | None) -> Entry:
    """Move a torn last line to a file of its own, and return the entry that says so."""
    digest = hashlib.sha256(torn).digest()
    name = f"journal.torn-{digest.hex()[:16]}"
    if not os.path.lexists(folder / name):
        write_new(folder / name, torn, secret=True)
    event = SetAside(what="set-aside", remark=f"{len(torn):,} bytes of a line that a stopped run did not finish")
    return _made(event, before, keys, (), (NamedDigest(path=name, digest=digest),), time)
