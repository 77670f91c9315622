"""The calendar: each thing that the audit found stands in it once, in the row and the stretch of time that it is of.

Source: the calendar of ISO 8601 by way of the standard library.
"""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta

import pytest
from evidence.samples import AT, DEALT, a_year, custodian, good, on, proof, unreadable
from hypothesis import given
from hypothesis import strategies as st

from shares.evidence.audited import Task
from shares.evidence.calendar import LEGEND, MONTHS, MOST_COLUMNS, calendar

TIMES = st.datetimes(datetime(2016, 1, 1), datetime(2046, 12, 31), timezones=st.just(UTC)).map(
    lambda time: time.replace(microsecond=0)
)


def audits(times, dues, drills):
    """An audit whose custodians proved, and owe, at these times."""
    rows = [custodian("north-pier", "A. Keel", "confirmed", "", *(proof(t, i) for i, t in enumerate(times)), due=None)]
    rows += [custodian(f"pier-{i}", "B. Mast", "overdue", "", due=due) for i, due in enumerate(dues)]
    held = [replace(a_year().drills[0], number=i, opened=t, custodians=()) for i, t in enumerate(drills)]
    return replace(a_year(), custodians=tuple(rows), drills=tuple(held), tasks=(), created=min([AT, *times, *drills]))


@given(st.lists(TIMES, max_size=12), st.lists(TIMES, max_size=4), st.lists(TIMES, max_size=4))
def test_each_thing_stands_once_where_it_belongs(times, dues, drills):
    audit = audits(times, dues, drills)
    made = calendar(audit)
    assert 1 <= len(made.columns) <= MOST_COLUMNS
    assert {len(row.cells) for row in made.rows} == {len(made.columns)}
    assert sum(count for _, count in made.years) == len(made.columns)
    assert [year for year, _ in made.years] == sorted({column.year for column in made.columns})
    marks = [mark for row in made.rows for cell in row.cells for mark in cell]
    assert len(marks) + made.earlier == len(times) + len(dues) + len(drills)
    for row in made.rows:
        for column, cell in zip(made.columns, row.cells, strict=True):
            for mark in cell:
                names = ("", f"Q{(mark.time.month + 2) // 3}", MONTHS[mark.time.month - 1])
                assert (column.year, column.name) in {(str(mark.time.year), name) for name in names}
            assert [mark.time for mark in cell] == sorted(mark.time for mark in cell)
    # Where the time is too long for the columns, the newest are shown.
    last = max([AT, *times, *dues, *drills])
    assert made.columns[-1].year == str(last.year)
    assert made.earlier == 0 or not made.columns[0].name


@pytest.mark.parametrize(
    ("years", "names"), [(0, set(MONTHS)), (1, set(MONTHS)), (4, {"Q1", "Q2", "Q3", "Q4"}), (12, {""}), (40, {""})]
)
def test_its_columns_fit_the_time_that_has_passed(years, names):
    start = AT.replace(year=AT.year - years)
    made = calendar(replace(good(), created=start, custodians=()))
    assert {column.name for column in made.columns} <= names
    assert made.columns[0].year == str(max(start.year, AT.year - MOST_COLUMNS + 1))


def test_the_year_of_the_sample_reads_as_it_went():
    made = calendar(a_year())
    months = [f"{column.name} {column.year}" for column in made.columns]
    assert (months[0], months[-1], len(months)) == ("Dec 2025", "Apr 2027", 17)
    assert made.years == (("2025", 1), ("2026", 12), ("2027", 4))
    said = {
        row.name: {
            month: [(one.mark, one.words) for one in cell]
            for month, cell in zip(months, row.cells, strict=True)
            if cell
        }
        for row in made.rows
    }
    assert said["south-pier"] == {
        "Mar 2026": [("C", "share read: intact, 2026-03-04, late")],
        "Apr 2026": [("D", "practice drill 20 passed, 2026-04-20")],
        "Oct 2026": [
            ("S", "pack seen: seal intact, 2026-10-03"),
            ("F", "recovery drill 46 failed, 2026-10-12"),
        ],
        "Nov 2026": [("P", "present, 2026-11-02")],
        "Jan 2027": [(">", "due on 2027-01-01: the next attestation")],
    }
    assert said["light-house"]["Sep 2026"] == [
        ("N", "share read: damaged, 2026-09-09, a seal was opened, does not count")
    ]
    assert said["light-house"]["Jun 2026"] == [("!", "overdue since 2026-06-07: the next attestation")]
    assert said["registrar"]["Sep 2026"] == [("?", "silent: asked, no answer by 2026-09-15")]
    assert said["dry-dock"] == {}
    assert said["The set"]["Nov 2026"] == [
        ("!", "overdue since 2026-11-11: E. Hull has left: end what they could still do"),
        ("O", "attendance drill 55 is still open, 2026-11-28"),
    ]
    assert [mark for mark, _ in made.legend] == list(LEGEND)


def test_whoever_owes_an_answer_has_the_mark_in_their_own_row_and_not_in_the_sets():
    tasks = [Task("answer", "answer the challenge of entry 9", on(11, 2), overdue, ("a",)) for overdue in (True, False)]
    assert sum(map(len, calendar(replace(good(), drills=(), tasks=tuple(tasks))).rows[0].cells)) == 1


def test_only_marks_that_occur_are_explained():
    made = calendar(replace(good(), drills=()))
    assert made.legend == [("C", LEGEND["C"]), (">", LEGEND[">"])]
    assert calendar(unreadable()).rows[0].cells == ((),)


def test_what_is_due_this_very_second_is_not_overdue():
    for seconds, mark in ((-1, "!"), (0, ">"), (1, ">")):
        due = AT + timedelta(seconds=seconds)
        row = custodian("north-pier", "A. Keel", "confirmed", "", due=due)
        made = calendar(replace(good(), custodians=(row,), drills=(), created=DEALT))
        assert [one.mark for cell in made.rows[1].cells for one in cell] == [mark]
    tasks = (Task("attestation", "x", on(12), True), Task("drill", "y", on(12, 2), False))
    made = calendar(replace(good(), custodians=(), drills=(), tasks=tasks))
    assert [one.words for cell in made.rows[0].cells for one in cell] == ["due on 2026-12-02: y"]
