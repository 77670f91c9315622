"""Journals for tests: of a small set, told by two parties over some hours, in memory or in a folder.

Source: none; the harbour is made up.
"""

from __future__ import annotations

import functools
from collections.abc import Sequence
from datetime import UTC, datetime, timedelta
from pathlib import Path

from parties import unlocked

from shares.custody.split import split
from shares.documents.entry import Entry, NamedDigest, line_digest
from shares.documents.event import Dealt, DealtShare, Event, make_event
from shares.documents.party import OpenPartyKey
from shares.documents.record import Record
from shares.history.journal import append
from shares.memory import Secret
from shares.sharing.rule import Rule

NAMES = ("north-pier", "south-pier", "light-house")
START = datetime(2026, 1, 5, 9, 0, tzinfo=UTC)


@functools.cache
def key(name: str = "harbour-office") -> OpenPartyKey:
    """An opened party key, kept for the whole run."""
    return unlocked(name)


@functools.cache
def record() -> Record:
    """The record of a set of 2 of 3."""
    with Secret.of(b"not a real key") as secret:
        dealt = split(secret, Rule(2, NAMES), label="Tide archive root")
    return dealt.record


def dealt() -> Dealt:
    """The event that tells of it."""
    return Dealt(
        what="dealt",
        set=record().set,
        epoch=1,
        record=record().fingerprint,
        custodians=tuple(DealtShare(name=name, packed="passphrase", card=None) for name in NAMES),
        practice=None,
    )


def note(remark: str) -> Event:
    return make_event("noted", remark=remark)


def events(count: int) -> list[Event]:
    """What happened, one event after another."""
    later = [make_event("delivered", custodian=NAMES[i % 3], serial=f"HT-{i:04}") for i in range(count - 1)]
    return [dealt(), *later][:count]


def lines_of(happened: Sequence[Event], *signers: str, start: datetime = START) -> list[bytes]:
    """The lines of a journal of these events, an hour apart."""
    made: list[bytes] = []
    for i, event in enumerate(happened):
        entry = Entry(
            kind="journal-entry",
            version=1,
            sequence=i + 1,
            time=start + timedelta(hours=i),
            previous=line_digest(made[-1]) if made else None,
            event=event,
            documents=(),
            cards=tuple(key(name).card for name in signers) if i == 0 else (),
            signatures=(),
        )
        for name in signers:
            entry = entry.signed(key(name))
        made.append(entry.line())
    return made


def text_of(lines: Sequence[bytes]) -> bytes:
    return b"".join(line + b"\n" for line in lines)


def set_folder(folder: Path, *signers: str, documents: Sequence[NamedDigest] = ()) -> Path:
    """A set's folder with its record, and a journal of one entry."""
    folder.mkdir(exist_ok=True)
    (folder / "record.json").write_bytes(record().to_file())
    append(folder, dealt(), keys=[key(name) for name in signers], documents=documents, time=START)
    return folder
