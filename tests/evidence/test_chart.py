"""The chart of the margin: its line is the margin at every time, and the words and the table say the same.

Source: SVG 2, sec. 9.3 (path data: M, H and V), read here by a few lines of its own.
"""

from __future__ import annotations

import re
from datetime import UTC, datetime, timedelta

from evidence.samples import AT, DEALT, a_year
from hypothesis import given
from hypothesis import strategies as st

from shares.evidence.audited import MarginSince
from shares.evidence.chart import BOTTOM, LEFT, RIGHT, TOP, WIDTH, chart, margin_in_words

STEPS = st.lists(st.tuples(st.integers(0, 4000), st.integers(-1, 254), st.integers(0, 3)), min_size=1, max_size=30).map(
    lambda found: [
        MarginSince(DEALT + timedelta(days=days), low, low + more)
        for days, low, more in sorted(found, key=lambda x: x[0])
    ]
)


def drawn(path: str) -> list[tuple[float, float]]:
    """The corners of a path of horizontal and vertical strokes."""
    corners: list[tuple[float, float]] = []
    assert re.fullmatch(r"M[\d.]+ [\d.]+(?:[HV][\d.]+)*", path)
    for letter, numbers in re.findall(r"([MHV])([\d. ]+)", path):
        values = [float(value) for value in numbers.split()]
        if letter == "M":
            corners.append((values[0], values[1]))
        else:
            x, y = corners[-1]
            corners.append((values[0], y) if letter == "H" else (x, values[0]))
    return corners


def height_at(path: str, x: float) -> float:
    """How high the line stands just right of a place."""
    corners = drawn(path)
    return [y for at, y in corners if at <= x][-1]


@given(STEPS, st.integers(0, 3))
def test_the_line_is_the_margin_at_every_time(steps, most):
    until = max(steps[-1].time, AT)
    made = chart(steps, until, most=most)
    assert made is not None
    top = max(1, most, *(one.high for one in steps_that_count(steps)))
    length = max((until - made_first(steps)).total_seconds(), 1)

    def margin_of(y: float) -> float:
        return (BOTTOM - y) * (top + 1) / (BOTTOM - TOP) - 1

    for path in (made.line, made.upper or made.line):
        corners = drawn(path)
        assert [x for x, _ in corners] == sorted(x for x, _ in corners)
        assert (corners[0][0], corners[-1][0]) == (LEFT, RIGHT if length > 1 else corners[-1][0])
        assert all(TOP <= y <= BOTTOM for _, y in corners)
    counted = steps_that_count(steps)
    for one, after in zip(counted, [*counted[1:], MarginSince(until, 0, 0)], strict=True):
        x = LEFT + (RIGHT - LEFT) * (one.time - made_first(steps)).total_seconds() / length
        if (after.time - one.time).total_seconds() / length * (RIGHT - LEFT) < 0.2:
            continue  # Too short to be seen: the table has it.
        assert abs(margin_of(height_at(made.line, x + 0.1)) - one.low) <= 0.1 * (top + 1) / 132
        assert abs(margin_of(height_at(made.upper or made.line, x + 0.1)) - one.high) <= 0.1 * (top + 1) / 132
    assert abs(margin_of(made.zero)) <= 0.1 * (top + 1) / 132
    told = [change.margin for change in made.changes]
    assert told[-1] == margin_in_words(steps[-1].low, steps[-1].high)
    assert all(now != before for now, before in zip(told[1:], told, strict=False))
    assert len(made.dates) <= 5
    # Seven characters of about six units each, centred, stay within the picture.
    assert all(21 <= tick.at <= WIDTH - 21 for tick in made.dates)
    assert 1 <= len(made.heights) <= 9


def steps_that_count(steps):
    """Of several at one time the last, and of equal ones the first."""
    last_of = {one.time: one for one in steps}
    counted = []
    for one in last_of.values():
        if not counted or (counted[-1].low, counted[-1].high) != (one.low, one.high):
            counted.append(one)
    return counted


def made_first(steps):
    return steps[0].time


def test_the_year_of_the_sample_reads_as_it_went():
    made = chart(a_year().margins, AT, most=2)
    assert made is not None
    assert [(one.since, one.margin) for one in made.changes] == [
        ("2025-12-03", "no quorum"), ("2026-03-09", "0"), ("2026-03-10", "1"), ("2026-06-08", "no quorum"),
        ("2026-09-03", "0 to 1"), ("2026-09-09", "no quorum"),
    ]  # fmt: skip
    assert made.words == (
        "On 2026-12-01 the margin is no quorum, since 2026-09-09. It was lowest from 2025-12-03 on: no quorum. "
        "It changed 5 times since 2025-12-03. The table has every change."
    )
    assert [tick.text for tick in made.heights] == ["0", "1", "2"]
    assert [tick.text for tick in made.dates] == ["2026-01", "2026-04", "2026-07", "2026-10"]
    assert made.upper


def test_where_the_clock_ran_back_the_later_entry_holds():
    steps = [
        MarginSince(datetime(2026, month, 1, tzinfo=UTC), value, value) for month, value in ((1, 0), (6, 2), (3, 1))
    ]
    made = chart(steps, AT)
    assert made is not None
    assert [(one.since, one.margin) for one in made.changes] == [("2026-01-01", "0"), ("2026-03-01", "1")]


def test_nothing_is_drawn_of_nothing_and_a_moment_is():
    assert chart((), AT) is None
    made = chart([MarginSince(AT, -1, -1)], AT)
    assert made is not None
    assert made.line == f"M{LEFT}.0 {BOTTOM}.0H{LEFT}.0"
