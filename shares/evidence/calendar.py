"""The calendar of an audit's page: what was shown when, by whom, and what is due, in columns of equal length.

Source: none.
May import: shares.evidence.audited.
Secret: nothing. Confidential: all of it, like the audit that it shows. Public: nothing.
Does not: judge. Each mark repeats what the audit found, with the words that stand for it where it cannot be seen.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from datetime import datetime
from typing import Final

from shares.evidence.audited import Audit, CustodianRow, DrillRow, Proof

MOST_COLUMNS: Final = 18
"""More do not fit on a page of paper."""
MONTHS: Final = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")

LEGEND: Final = {
    "C": "content proven: the share was read and found whole",
    "S": "pack seen closed: no proof of content",
    "P": "present: attendance alone",
    "N": "answered, but it does not count",
    "?": "asked, and no answer by this day: silence is no consent",
    "D": "drill that passed",
    "F": "drill that failed",
    "O": "drill that is still open",
    ">": "to be done by this day",
    "!": "overdue since this day",
}
"""What each mark means, in the order in which a page explains them."""


@dataclass(frozen=True, slots=True)
class Mark:
    """Something in the calendar: the mark that is seen, and the words that are read aloud."""

    time: datetime
    mark: str
    words: str


@dataclass(frozen=True, slots=True)
class Column:
    """A stretch of time: its year, and its name within the year, empty where the year is the column."""

    year: str
    name: str


@dataclass(frozen=True, slots=True)
class CalendarRow:
    """The marks of one custodian, or of the set as a whole: one group for each column."""

    name: str
    cells: tuple[tuple[Mark, ...], ...]


@dataclass(frozen=True, slots=True)
class Calendar:
    """A table of marks.

    Attributes:
        columns: from the first dealing, or as far back as there is room, to the last thing that is due.
        years: each year, and how many columns it has.
        rows: the set as a whole, then the custodians.
        earlier: how many marks lie before the first column.
    """

    columns: tuple[Column, ...]
    years: tuple[tuple[str, int], ...]
    rows: tuple[CalendarRow, ...]
    earlier: int

    @property
    def legend(self) -> list[tuple[str, str]]:
        """The marks that occur, and what they mean."""
        used = {mark.mark for row in self.rows for cell in row.cells for mark in cell}
        return [(mark, words) for mark, words in LEGEND.items() if mark in used]


def calendar(audit: Audit) -> Calendar:
    """Return the calendar of an audit: months, or quarters or years where it would be too wide."""
    rows = [("The set", list(_of_set(audit)))]
    rows += [(one.name, list(_of_custodian(one, audit))) for one in audit.custodians]
    times = [audit.at, *(mark.time for _, marks in rows for mark in marks)]
    first = min([*times, *([audit.created] if audit.created else [])])
    last = max(times)
    place, name = next(
        ((place, name) for place, name in _UNITS if place(last) - place(first) < MOST_COLUMNS), _UNITS[-1]
    )
    start = max(place(first), place(last) - MOST_COLUMNS + 1)
    columns = tuple(name(number) for number in range(start, place(last) + 1))
    made, earlier = [], 0
    for title, marks in rows:
        cells: list[list[Mark]] = [[] for _ in columns]
        for mark in sorted(marks, key=lambda one: one.time):
            if place(mark.time) < start:
                earlier += 1
            else:
                cells[place(mark.time) - start].append(mark)
        made.append(CalendarRow(title, tuple(map(tuple, cells))))
    years = tuple(
        (year, len(list(group))) for year, group in itertools.groupby(columns, key=lambda column: column.year)
    )
    return Calendar(columns, years, tuple(made), earlier)


def _by_month(time: datetime) -> int:
    return time.year * 12 + time.month - 1


def _by_quarter(time: datetime) -> int:
    return _by_month(time) // 3


def _by_year(time: datetime) -> int:
    return time.year


_UNITS: Final[tuple[tuple[Callable[[datetime], int], Callable[[int], Column]], ...]] = (
    (_by_month, lambda number: Column(str(number // 12), MONTHS[number % 12])),
    (_by_quarter, lambda number: Column(str(number // 4), f"Q{number % 4 + 1}")),
    (_by_year, lambda number: Column(str(number), "")),
)


def _of_set(audit: Audit) -> Iterator[Mark]:
    for drill in audit.drills:
        yield _drill_mark(drill)
    for task in audit.tasks:
        # What a custodian owes stands in the custodian's own row.
        if task.kind != "attestation" and not (task.kind == "answer" and task.overdue):
            yield _due_mark(task.due, task.what, overdue=task.overdue)


def _of_custodian(one: CustodianRow, audit: Audit) -> Iterator[Mark]:
    for proof in one.proofs:
        yield Mark(proof.time, _proof_mark(proof), _proof_in_words(proof))
    for due in one.unanswered:
        yield Mark(due, "?", f"silent: asked, no answer by {day(due)}")
    for drill in audit.drills:
        if one.name in drill.custodians:
            yield _drill_mark(drill)
    if one.due is not None:
        yield _due_mark(one.due, "the next attestation", overdue=one.due < audit.at)


def _drill_mark(drill: DrillRow) -> Mark:
    mark, came = {None: ("O", "is still open"), True: ("D", "passed"), False: ("F", "failed")}[drill.passed]
    return Mark(drill.opened, mark, f"{drill.kind} drill {drill.number} {came}, {day(drill.opened)}")


def _due_mark(due: datetime, what: str, *, overdue: bool) -> Mark:
    return Mark(due, "!" if overdue else ">", f"{'overdue since' if overdue else 'due on'} {day(due)}: {what}")


def _proof_mark(proof: Proof) -> str:
    if proof.grade == "present":
        return "P"
    if not proof.counts:
        return "N"
    return "C" if proof.grade == "content" else "S"


def _proof_in_words(proof: Proof) -> str:
    what = {"content": "share read", "sealed": "pack seen", "present": "present"}.get(proof.grade, proof.grade)
    said = what if proof.result == proof.grade else f"{what}: {proof.result}"
    more = [
        words
        for words, holds in (
            ("late", proof.late),
            ("a seal was opened", proof.opened),
            ("not signed by the custodian's known key", not proof.attributed),
            ("does not count", proof.grade != "present" and not proof.counts),
        )
        if holds
    ]
    return ", ".join([said, day(proof.time), *more])


def day(time: datetime) -> str:
    """Return the day of a time as pages write it.

    >>> day(datetime(2026, 12, 1, 7, 0))
    '2026-12-01'
    """
    return time.date().isoformat()
