"""Drills as the journal tells them: called, rehearsed, closed; and the calling of one.

Source: NIST SP 800-53 rev. 5, CP-4 (test the plan, review the results, start corrective action); FORMAT.md, sec. 16.
May import: shares.errors, shares.documents, shares.history, shares.evidence.retire, .rounds.
Secret: party keys that sign, passed through. Confidential: the rest. Public: nothing.
Does not: keep any state of its own: a drill is what the entries of its number say.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import datetime, timedelta

from shares.documents.challenge import Challenge
from shares.documents.entry import Entry
from shares.documents.event import Attested, Challenged, DrillClosed, DrillKind, DrillOpened, Rehearsed
from shares.documents.members import MAX_TEXT, check_text
from shares.documents.party import OpenPartyKey
from shares.documents.record import Record
from shares.errors import ParameterError, VerificationError
from shares.evidence.retire import refuse_retired
from shares.evidence.rounds import ask
from shares.history.folder import SetFolder
from shares.history.journal import Journal

OBJECTIVES: dict[DrillKind, tuple[str, ...]] = {
    "attendance": ("enough custodians for a quorum answer in time, by the known way",),
    "practice": ("people know the steps of a recovery, and a quorum recovers the worthless practice secret",),
    "recovery": (
        "a quorum is assembled and the secret recovers from the shares as they are kept",
        "what was recovered is what the record commits to",
    ),
}


@dataclass(frozen=True, slots=True)
class Drill:
    """One drill, as the journal tells it.

    Attributes:
        number: of the entry that opened it.
        opened: when.
        event: how it was called.
        rehearsals: the entries of rehearsals, in order.
        answers: who answered in a drill of attendance, with the entry that says so.
        closed: the entry that closed it, or None.
    """

    number: int
    opened: datetime
    event: DrillOpened
    rehearsals: tuple[Entry, ...]
    answers: dict[str, Entry]
    closed: Entry | None

    @property
    def took_part(self) -> dict[str, Entry]:
        """Each custodian who took part, with the first entry that says so."""
        found = dict(self.answers)
        for entry in self.rehearsals:
            for name in entry.event.custodians if isinstance(entry.event, Rehearsed) else ():
                found.setdefault(name, entry)
        return found

    @property
    def recovered(self) -> int | None:
        """Seconds from the opening to the first rehearsal that passed, or None."""
        times = [entry.time for entry in self.rehearsals if isinstance(entry.event, Rehearsed) and entry.event.passed]
        return seconds_between(self.opened, times[0]) if times else None


def drills(journal: Journal) -> list[Drill]:
    """Return the drills of a journal, in the order in which they were opened."""
    found: dict[int, Drill] = {}
    rehearsals: dict[int, list[Entry]] = {}
    asked: dict[bytes, int] = {}
    for entry in journal.entries:
        event = entry.event
        if isinstance(event, DrillOpened):
            found[entry.sequence] = Drill(entry.sequence, entry.time, event, (), {}, None)
        elif isinstance(event, Challenged) and event.drill is not None:
            asked[event.challenge] = event.drill
        elif isinstance(event, Attested) and asked.get(event.challenge) in found:
            found[asked[event.challenge]].answers.setdefault(event.custodian, entry)
        elif isinstance(event, Rehearsed) and event.drill in found:
            rehearsals.setdefault(event.drill, []).append(entry)
        elif isinstance(event, DrillClosed) and event.drill in found:
            found[event.drill] = replace(found[event.drill], closed=entry)
    return [replace(drill, rehearsals=tuple(rehearsals.get(number, ()))) for number, drill in found.items()]


def seconds_between(since: datetime, until: datetime) -> int:
    """Return the seconds between two entries; a clock that ran backwards makes none."""
    return max(0, int((until - since).total_seconds()))


def the_drill(journal: Journal, number: int | None = None) -> Drill:
    """Return the drill of a number, or the only one that is open.

    Raises:
        ParameterError: there is none, more than one, or it is closed.
    """
    all_of_them = drills(journal)
    found = [drill for drill in all_of_them if drill.number == number or (number is None and drill.closed is None)]
    if len(found) > 1:
        numbers = ", ".join(str(drill.number) for drill in found)
        raise ParameterError(f"more than one drill is open: {numbers}", hint="say which, with --drill")
    if not found:
        known = ", ".join(str(drill.number) for drill in all_of_them) or "none"
        raise ParameterError(
            "no drill is open" if number is None else f"there is no drill {number}; known: {known}",
            hint="`shares drill open` calls one",
        )
    if found[0].closed is not None:
        raise ParameterError(
            f"drill {found[0].number} was closed by entry {found[0].closed.sequence}", hint="call a new one"
        )
    return found[0]


def open_drill(
    folder: SetFolder,
    kind: DrillKind,
    *,
    custodians: Sequence[str] = (),
    scope: str | None = None,
    objectives: Sequence[str] = (),
    due: timedelta = timedelta(days=2),
    keys: Sequence[OpenPartyKey] = (),
    at: datetime | None = None,
) -> tuple[Drill, Challenge | None]:
    """Call a drill: enter it into the journal, and in one of attendance ask those called to answer.

    Args:
        folder: the set's.
        kind: attendance, practice or recovery.
        custodians: who is called; all by default.
        scope: what it covers, in words.
        objectives: what it is to show; the usual ones of its kind by default.
        due: how long those called to attend have to answer.
        keys: of the parties that sign; the first of them asks in a drill of attendance.
        at: the time of the entry; now by default.

    Returns:
        The drill, and the challenge to hand out in one of attendance.

    Raises:
        ParameterError: no such custodian, a text out of range, no practice set, too few signers, nobody who asks, or a
            set that was retired.
        StorageError: the journal cannot be written.
    """
    refuse_retired(folder)
    known = [custodian.name for custodian in folder.record.custodians]
    for name in custodians:
        if name not in known:
            raise ParameterError(f"the record names no custodian {name}", hint=f"it names {', '.join(known)}")
    if kind == "practice":
        practice_record(folder)
    if kind == "attendance" and not keys:
        raise ParameterError(
            "whoever calls a drill of attendance signs what custodians are asked", hint="give --sign KEY"
        )
    for text in (*objectives, *([scope] if scope is not None else [])):
        check_text(text)
    target = folder.policy.recover_within if folder.policy and kind != "attendance" else None
    event = DrillOpened(
        what="drill-opened",
        kind=kind,
        scope=scope or f"{kind} drill of {folder.record.label}"[:MAX_TEXT],
        objectives=tuple(objectives) or OBJECTIVES[kind],
        custodians=tuple(custodians) or tuple(known),
        target=int(target.total_seconds()) if target else None,
    )
    entry = folder.append(event, keys=keys, time=at)
    drill = Drill(entry.sequence, entry.time, event, (), {}, None)
    if kind != "attendance":
        return drill, None
    asked, _ = ask(
        folder,
        keys=keys,
        due=entry.time + due,
        custodians=event.custodians,
        purpose="attendance",
        drill=entry.sequence,
        time=entry.time,
    )
    return drill, asked


def practice_record(folder: SetFolder) -> Record:
    """Return the record of the practice set that was dealt with a set.

    Raises:
        ParameterError: none was dealt.
        StorageError, DocumentError: it cannot be read.
        VerificationError: it is not the one that the journal names.
    """
    dealt = [entry.event for entry in folder.journal().entries if entry.event.what == "dealt"]
    named = next((event.practice for event in reversed(dealt) if event.record == folder.record.fingerprint), None)
    if named is None:
        raise ParameterError(
            "no practice set was dealt with this set",
            hint="a policy with `practice = false` deals none; rehearse attendance or recovery",
        )
    found = folder.practice_record()
    if found.fingerprint != named:
        raise VerificationError(
            "the practice record is not the one that the journal names", hint="bring back the one of the split"
        )
    return found


def rehearsed_together(journal: Journal, since: datetime | None = None) -> list[tuple[str, ...]]:
    """Return whose shares recovered together in each rehearsal that passed, real or practice.

    Args:
        journal: the set's.
        since: leave out what was before; by default nothing.
    """
    return [
        entry.event.custodians
        for drill in drills(journal)
        for entry in drill.rehearsals
        if isinstance(entry.event, Rehearsed) and entry.event.passed and (since is None or entry.time >= since)
    ]
