"""The margin over time as a chart: the places of its line, its marks, and the words that say the same.

Source: W3C, "Scalable Vector Graphics (SVG) 2", sec. 9 (paths), sec. 5.7 (title and desc).
May import: shares.paper.scale, .audited, .calendar.
Secret: nothing. Confidential: how near a set is to its end. Public: nothing.
Does not: draw: the page's template does, from plain numbers.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Final

from shares.evidence.audited import MarginSince
from shares.evidence.calendar import day
from shares.paper.scale import Tick

WIDTH: Final = 360
HEIGHT: Final = 170
LEFT, RIGHT, TOP, BOTTOM = 28, 336, 14, 146
"""Edges of the plot in the picture, in its own units, pixels on a small telephone; a date may stand at each side."""
_MOST_DATES: Final = 5
_MOST_LINES: Final = 8
_MONTHS_BETWEEN: Final = (1, 2, 3, 6, 12, 24, 60, 120)


@dataclass(frozen=True, slots=True)
class Change:
    """The margin from a day on, in words."""

    since: str
    margin: str


@dataclass(frozen=True, slots=True)
class Chart:
    """The margin of a set over time.

    Attributes:
        line: the path of the margin, of its lower bound where only bounds are known.
        upper: the path of the upper bound, where they differ; else nothing.
        zero: the height at which no more custodian may be lost; below it there is no quorum.
        heights: marks of the vertical axis; ``dates``: of the horizontal one.
        words: what the chart shows, for those who do not see it.
        changes: the same as a table, oldest first.
    """

    line: str
    upper: str
    zero: float
    heights: tuple[Tick, ...]
    dates: tuple[Tick, ...]
    words: str
    changes: tuple[Change, ...]


def chart(margins: Sequence[MarginSince], until: datetime, *, most: int = 0) -> Chart | None:
    """Return the chart of a margin over time, or None where there is nothing to show.

    Args:
        margins: from the first dealing on, in order.
        until: the time of the audit.
        most: the margin if all were confirmed: room is left up to there.
    """
    changes = _changes(margins)
    if not changes:
        return None
    first, last = changes[0].time, max(until, changes[-1].time)
    top = max(1, most, *(one.high for one in changes))
    length = max((last - first).total_seconds(), 1.0)

    def across(time: datetime) -> float:
        return round(LEFT + (RIGHT - LEFT) * (time - first).total_seconds() / length, 1)

    def up(margin: int) -> float:
        return round(BOTTOM - (BOTTOM - TOP) * (margin + 1) / (top + 1), 1)

    def path(heights: Sequence[int]) -> str:
        steps = [f"M{across(first)} {up(heights[0])}"]
        steps += [f"H{across(one.time)}V{up(height)}" for one, height in zip(changes[1:], heights[1:], strict=True)]
        return "".join([*steps, f"H{across(last)}"])

    lows, highs = [one.low for one in changes], [one.high for one in changes]
    step = -(-(top + 1) // _MOST_LINES)
    return Chart(
        line=path(lows),
        upper=path(highs) if highs != lows else "",
        zero=up(0),
        heights=tuple(Tick(up(margin), str(margin)) for margin in range(0, top + 1, step)),
        dates=tuple(Tick(across(time), f"{time.year}-{time.month:02}") for time in _dates(first, last)),
        words=_in_words(changes, until),
        changes=tuple(Change(day(one.time), margin_in_words(one.low, one.high)) for one in changes),
    )


def margin_in_words(low: int, high: int) -> str:
    """Say a margin for a table.

    >>> margin_in_words(2, 2), margin_in_words(0, 1), margin_in_words(-1, -1), margin_in_words(-1, 0)
    ('2', '0 to 1', 'no quorum', 'no quorum, or 0')
    """
    if high < 0:
        return "no quorum"
    if low < 0:
        return f"no quorum, or {margin_in_words(0, high)}"
    return str(low) if low == high else f"{low} to {high}"


def _changes(margins: Sequence[MarginSince]) -> list[MarginSince]:
    """Return the margins that differ from the one before. Where the clock ran back, the later entry says what holds."""
    found: list[MarginSince] = []
    for one in margins:
        while found and found[-1].time >= one.time:
            found.pop()
        if not found or (found[-1].low, found[-1].high) != (one.low, one.high):
            found.append(one)
    return found


def _dates(first: datetime, last: datetime) -> list[datetime]:
    """Return the beginnings of months that fall between two times, few enough to be written side by side."""
    start = first.year * 12 + first.month - 1
    end = last.year * 12 + last.month - 1
    for step in _MONTHS_BETWEEN:
        months = [month for month in range(start + 1, end + 1) if month % step == 0]
        if len(months) <= _MOST_DATES:
            break
    return [datetime(month // 12, month % 12 + 1, 1, tzinfo=UTC) for month in months]


def _in_words(changes: Sequence[MarginSince], until: datetime) -> str:
    now, worst = changes[-1], min(changes, key=lambda one: one.low)
    said = f"On {day(until)} the margin is {margin_in_words(now.low, now.high)}, since {day(now.time)}."
    lowest = f"It was lowest from {day(worst.time)} on: {margin_in_words(worst.low, worst.high)}."
    count = len(changes) - 1
    changed = f"It changed {count} time{'s' if count != 1 else ''} since {day(changes[0].time)}."
    return " ".join([said, lowest, changed, "The table has every change."])
