"""The journal of a set: lines that are only ever added, each chained to the one before it and signed.

Source: S. Haber, W. S. Stornetta, "How to time-stamp a digital document", J. Cryptology 3, 1991 (linking by hashes);
FORMAT_EVIDENCE.md, sec. 16.
May import: shares.errors, shares.clock, shares.storage, shares.documents, shares.history.lines.
Secret: the party keys that sign, passed through. Confidential: the entries. Public: their digests.
Does not: say what events mean, or which must be there; ``evidence`` does. What entries say of the set and of its other
files, ``history.verify`` checks.
"""

from __future__ import annotations

import base64
import hashlib
import os
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from datetime import datetime
from pathlib import Path
from typing import Literal, TypeAlias

from shares import clock
from shares.documents.base import MAX_FILE
from shares.documents.entry import (
    MAX_ENTRY_SIGNATURES,
    Entry,
    EntrySignature,
    Head,
    NamedDigest,
    head_of,
    line_digest,
)
from shares.documents.event import Event, SetAside
from shares.documents.party import OpenPartyKey, PartyCard
from shares.errors import DocumentError, ParameterError, StorageError
from shares.history.lines import Lines, wait_for_writers, writing
from shares.storage import read_file, write_new

JOURNAL_NAME = "journal.jsonl"
MAX_JOURNAL = 1 << 30
"""The largest journal, in bytes: 1 GiB."""
MAX_UNREADABLE = 1_000
"""After so many lines that are no entries no more is read: it is no journal, and that was said often enough."""
TORN = re.compile(r"journal\.torn-[0-9]+-[0-9a-f]{16}")
"""The name of a file that keeps what a stopped run left of a line."""

ProblemKind: TypeAlias = Literal[
    "entry", "sequence", "chain", "signature", "time", "torn", "set-aside", "record", "missing", "altered", "renamed",
    "control", "trust", "head",
]  # fmt: skip


@dataclass(frozen=True, slots=True)
class Problem:
    """Something wrong with a journal, and where.

    Attributes:
        line: the line, from 1; in an unbroken journal that is the entry's number. 0 for the journal as a whole.
        what: what is wrong with it, in words.
        breaks: whether the journal, or what it names, can no longer be believed; else it is worth knowing and no more.
        kind: what sort of thing it is, for programs.
    """

    line: int
    what: str
    breaks: bool = True
    kind: ProblemKind = "entry"


@dataclass(frozen=True, slots=True, eq=False)
class Journal:
    """A journal as it was read: what can be read of it, and what is wrong with it.

    Attributes:
        entries: the entries that can be read, in order.
        digests: of each of them, 32 bytes: what the next one names.
        cards: the party cards that entries have introduced, by fingerprint. A card's name is what its maker wrote.
        problems: what is wrong with chain, sequence, time and signatures.
        torn: what a stopped run left after the last whole line.
    """

    entries: tuple[Entry, ...] = ()
    digests: tuple[bytes, ...] = ()
    cards: dict[str, PartyCard] = field(default_factory=dict)
    problems: tuple[Problem, ...] = ()
    torn: bytes = b""
    _standing: dict[bytes, int] = field(default_factory=dict, repr=False)
    _unproved: frozenset[tuple[int, EntrySignature]] = field(default=frozenset(), repr=False)

    @property
    def head(self) -> Head | None:
        """Where the journal stands: short enough to be read aloud and noted elsewhere; None for an empty one."""
        return head_of(self.entries[-1].sequence, self.digests[-1]) if self.entries else None

    def holds(self, head: Head) -> bool:
        """Say whether the journal once stood at ``head``: a journal that lost its tail, or was rewritten, did not."""
        return self._standing.get(base64.b32decode(head.head.replace("-", ""))) == head.sequence

    def signers(self, entry: Entry) -> list[PartyCard]:
        """The parties that signed an entry of this journal, each once; not those whose signature does not fit."""
        fitting = (one.card for one in entry.signatures if (entry.sequence, one) not in self._unproved)
        parties = {self.cards[card].ed25519: self.cards[card] for card in fitting if card in self.cards}
        return list(parties.values())


def read_journal(data: bytes, *, progress: Callable[[int, int | None], None] | None = None) -> Journal:
    """Read a journal, with all that is wrong with it; never raises for what it holds.

    Args:
        data: the bytes of the file.
        progress: called with (lines read, lines).
    """
    # Line by line: a file of nothing but line ends would take many times its size if it were split as a whole.
    count, reader, start = data.count(b"\n"), _Reader(), 0
    for i in range(count):
        if reader.unreadable == MAX_UNREADABLE:
            what = f"{MAX_UNREADABLE:,} lines are no entries: from this one on, {count - i:,} lines were not read"
            reader.report(i + 1, "entry", what)
            break
        if progress:
            progress(i, count)
        end = data.index(b"\n", start)
        reader.read(i + 1, data[start:end])
        start = end + 1
    torn = data[data.rfind(b"\n") + 1 :]
    if torn:
        what = "it is no whole line: a run was stopped while it wrote, and the next entry sets it aside"
        reader.report(count + 1, "torn", what, breaks=False)
    standing = {digest[:20]: entry.sequence for entry, digest in zip(reader.entries, reader.digests, strict=True)}
    return Journal(
        tuple(reader.entries),
        tuple(reader.digests),
        reader.cards,
        tuple(reader.problems),
        torn,
        standing,
        frozenset(reader.unproved),
    )


class _Reader:
    def __init__(self) -> None:
        self.entries: list[Entry] = []
        self.digests: list[bytes] = []
        self.cards: dict[str, PartyCard] = {}
        self.problems: list[Problem] = []
        self.unproved: set[tuple[int, EntrySignature]] = set()
        self.unreadable = 0
        # Of the line before. One that cannot be read counts as the entry that should stand there, so that the lines
        # after it are not blamed for more than that they follow something else.
        self.number = 0
        self.digest: bytes | None = None

    def report(self, line: int, kind: ProblemKind, what: str, *, breaks: bool = True) -> None:
        self.problems.append(Problem(line, what, breaks, kind))

    def read(self, number: int, line: bytes) -> None:
        wanted, before, self.digest = self.number + 1, self.digest, line_digest(line)
        self.number = wanted
        try:
            entry = Entry.of_line(line)
        except DocumentError as error:
            self.unreadable += 1
            self.report(number, "entry", f"it is no entry: {error.what}")
            return
        self.number = entry.sequence
        if entry.sequence != wanted:
            self.report(number, "sequence", f"it says that it is entry {entry.sequence}, and entry {wanted} is due")
        if entry.previous != before:
            what = "it does not follow the line before it: one was changed, removed, added or moved"
            self.report(number, "chain", what)
        if self.entries and entry.time < self.entries[-1].time:
            then = clock.to_text(self.entries[-1].time)
            what = f"its time, {clock.to_text(entry.time)}, lies before that of the entry before it, {then}"
            self.report(number, "time", what, breaks=False)
        for card in entry.cards:
            self.cards.setdefault(card.fingerprint, card)
        self._check_signatures(number, entry, line)
        self.entries.append(entry)
        self.digests.append(self.digest)

    def _check_signatures(self, number: int, entry: Entry, line: bytes) -> None:
        unsigned = entry.unsigned_text(line)
        keys = set()
        for one in entry.signatures:
            card = self.cards.get(one.card)
            if card is None:
                what = f"it is signed by the card {one.card}, which no entry has introduced"
            elif not entry.is_signed(one, card, unsigned):
                what = f"the signature by {card.name} does not fit its content"
                self.unproved.add((entry.sequence, one))
            elif card.ed25519 in keys:
                # Two cards with one signing key are one party.
                what = f"one party signed it twice, the second time as {card.name}"
            else:
                keys.add(card.ed25519)
                continue
            self.report(number, "signature", what)


def load_journal(folder: Path, *, progress: Callable[[int, int | None], None] | None = None) -> Journal:
    """Read the journal of a set's folder; a missing one is empty.

    Args:
        folder: the set's.
        progress: as for ``read_journal``.

    Raises:
        StorageError: it cannot be read.
    """
    path = folder / JOURNAL_NAME
    if not os.path.lexists(path):
        return Journal()
    data = read_file(path, limit=MAX_JOURNAL)
    if data and not data.endswith(b"\n"):
        # Another process may be writing this line just now: it is waited for, and only what is then torn is torn.
        wait_for_writers(path)
        data = read_file(path, limit=MAX_JOURNAL)
    return read_journal(data, progress=progress)


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
        keys: of the parties that sign, at most 8; their cards are introduced.
        cards: of other parties, to be introduced.
        documents: what the event speaks of.
        time: of the entry, UTC to the second; now by default.

    Raises:
        ParameterError: too many keys, one party's key twice, or a time that is none.
        StorageError: the entry would be larger than 1 MiB.
    """
    cards = _distinct((*(key.card for key in keys), *cards))
    return _made(event, 1, None, keys, cards, documents, time).line() + b"\n"


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
        keys: of the parties that sign, at most 8; their cards are introduced where they are not yet.
        cards: of other parties, to be introduced likewise.
        documents: what the event speaks of.
        time: of the entry, UTC to the second; now by default.

    Returns:
        The entry, as it stands in the journal.

    Raises:
        ParameterError: too many keys, one party's key twice, or a time that is none.
        StorageError: the journal cannot be written, its last line is no entry, or the entry would be larger than 1 MiB.
    """
    needed = _distinct((*(key.card for key in keys), *cards))
    with writing(folder / JOURNAL_NAME) as lines:

        def add(event: Event, needed: Iterable[PartyCard], documents: Sequence[NamedDigest]) -> Entry:
            sequence, previous = _last(lines, folder)
            # Only a card has a member of this name, so that searching the text tells whether one was introduced.
            new = [card for card in needed if not lines.holds(f'"fingerprint":"{card.fingerprint}"'.encode())]
            entry = _made(event, sequence + 1, previous, keys, new, documents, time)
            lines.add(entry.line())
            return entry

        _last(lines, folder)
        if lines.torn:
            _keep(folder, lines)
            lines.cut()
        for name in unnamed(os.listdir(folder), lambda name: lines.holds(f'"path":"{name}"'.encode())):
            data = read_file(folder / name, limit=MAX_FILE)
            remark = f"{len(data):,} bytes of a line that a stopped run did not finish"
            add(SetAside(what="set-aside", remark=remark), (key.card for key in keys), (NamedDigest.of(name, data),))
        return add(event, needed, documents)


def _distinct(cards: Iterable[PartyCard]) -> list[PartyCard]:
    return list({card.fingerprint: card for card in cards}.values())


def _last(lines: Lines, folder: Path) -> tuple[int, bytes | None]:
    """Return number and digest of the last entry; 0 and None before the first."""
    if not lines.end:
        return 0, None
    try:
        return Entry.of_line(lines.last).sequence, line_digest(lines.last)
    except DocumentError as error:
        problem = error.what
    raise StorageError(
        f"its last line is no entry: {problem}",
        where=os.fspath(folder / JOURNAL_NAME),
        hint="nothing was added; bring back a copy of the journal, or where there is none keep this file under another "
        "name: a new journal then begins, and audits say that the old one broke",
    )


def _made(
    event: Event,
    sequence: int,
    previous: bytes | None,
    keys: Sequence[OpenPartyKey],
    cards: Sequence[PartyCard],
    documents: Sequence[NamedDigest],
    time: datetime | None,
) -> Entry:
    """Return a signed entry."""
    if len(keys) > MAX_ENTRY_SIGNATURES:
        raise ParameterError(f"an entry has at most {MAX_ENTRY_SIGNATURES} signatures")
    if len({key.card.ed25519 for key in keys}) != len(keys):
        raise ParameterError("one party's key is given twice to sign an entry", hint="give each key once")
    time = clock.now() if time is None else time
    clock.to_text(time)
    entry = Entry(
        kind="journal-entry",
        version=1,
        sequence=sequence,
        time=time,
        previous=previous,
        event=event,
        documents=tuple(documents),
        cards=tuple(cards),
        signatures=(),
    )
    for key in keys:
        entry = entry.signed(key)
    if len(entry.line()) > MAX_FILE:
        raise StorageError("the entry would be larger than 1 MiB", where=JOURNAL_NAME, hint="say it in fewer words")
    return entry


def _keep(folder: Path, lines: Lines) -> None:
    """Write a torn line to a file of its own, unless a run that was stopped thereafter has done so already.

    The name tells where and what: two pieces that are alike, as one byte easily is, are still two.
    """
    path = folder / f"journal.torn-{lines.end}-{hashlib.sha256(lines.torn).hexdigest()[:16]}"
    if not os.path.lexists(path) or read_file(path, limit=MAX_FILE) != lines.torn:
        write_new(path, lines.torn, secret=True)


def unnamed(names: Iterable[str], holds: Callable[[str], bool]) -> list[str]:
    """Return the files of torn lines that no entry names: a run was stopped before it wrote that entry.

    Args:
        names: of the files in the set's folder.
        holds: says whether an entry names a file.
    """
    return [name for name in sorted(names) if TORN.fullmatch(name) and not holds(name)]
