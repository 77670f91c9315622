"""What is drawn of a plan: the plane of loss against exposure, and odds against intervals, as places on paper.

Source: W3C, "Scalable Vector Graphics (SVG) 2", sec. 9 (paths); labels are put one after another where there is room
(the greedy way with point labels).
May import: shares.paper.scale, .intervals, .numbers, .odds, .plane.
Secret: nothing. Confidential: where a policy lies. Public: nothing.
Does not: draw: the page's template does, from plain numbers; know colours.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import NamedTuple

from shares.paper.scale import LogScale, Tick
from shares.planning import numbers
from shares.planning.intervals import AtInterval
from shares.planning.odds import Odds
from shares.planning.plane import Point

LEAST = 1e-12
"""Odds below are drawn as this: nobody knows a rate well enough to tell them apart."""
_CHARACTER, _LINE, _GAP = 6.6, 13.0, 7.0
"""How wide a character of a label is, how high its line, and how far it stands from its mark."""


class Box(NamedTuple):
    """The edges of a plot in its picture, in the picture's units; y grows downwards."""

    width: int
    height: int
    left: int
    right: int
    top: int
    bottom: int


PLANE = Box(720, 560, 70, 690, 20, 505)
CURVES = Box(460, 300, 62, 400, 16, 240)
_NEVER_AT = 436
"""Where "never" stands, beyond the axis of the intervals."""
_ROUND = ((7, "week"), (30, "month"), (91, "quarter"), (365, "year"), (1095, "3 y"), (3650, "10 y"))


@dataclass(frozen=True, slots=True)
class Mark:
    """A point that is drawn: where, of what kind, and what it stands for."""

    x: float
    y: float
    kind: str
    words: str


@dataclass(frozen=True, slots=True)
class Label:
    """A text and where it stands; ``anchor`` is "start", "middle" or "end"."""

    x: float
    y: float
    text: str
    anchor: str


@dataclass(frozen=True, slots=True)
class PlaneFigure:
    """The plane of loss (to the right) against exposure (upwards), both on logarithmic axes.

    Attributes:
        columns, rows: marks of the two axes.
        lines: for each n, the path from 1 of n to n of n.
        frontier: the path along the best rules.
        marks: one for each rule: "best" or "other".
        policy: where the policy lies; None where that is not known.
        labels: names of the best rules, as far as there is room, and of the lines.
    """

    columns: tuple[Tick, ...]
    rows: tuple[Tick, ...]
    lines: tuple[str, ...]
    frontier: str
    marks: tuple[Mark, ...]
    policy: Mark | None
    labels: tuple[Label, ...]


@dataclass(frozen=True, slots=True)
class CurveFigure:
    """Odds against an interval, both on logarithmic axes.

    Attributes:
        columns, rows: marks of the two axes.
        lines: the paths of the odds, in the order in which they were asked for.
        marks: on each line, "now" where the policy is, and "never" for no interval at all.
        labels: the name of each line.
    """

    columns: tuple[Tick, ...]
    rows: tuple[Tick, ...]
    lines: tuple[str, ...]
    marks: tuple[Mark, ...]
    labels: tuple[Label, ...]


def tick_words(chance: float) -> str:
    """Write a chance beside an axis.

    >>> tick_words(1.0), tick_words(0.001)
    ('100 %', '0.1 %')
    """
    return "100 %" if chance >= 1 else numbers.chance(chance)


def plane_figure(points: Sequence[Point], policy: Odds | None) -> PlaneFigure:
    """Lay out the plane.

    Args:
        points: as ``plane`` returns them, at least one.
        policy: the odds of the policy itself, where they are known.
    """
    known = [point.odds for point in points] + ([policy] if policy else [])
    x = LogScale.around((one.loss for one in known), least=LEAST, start=PLANE.left, end=PLANE.right)
    y = LogScale.around((one.exposure for one in known), least=LEAST, start=PLANE.bottom, end=PLANE.top)

    def mark(one: Odds, kind: str, name: str) -> Mark:
        words = f"{name}: loss {numbers.chance(one.loss)}, exposure {numbers.chance(one.exposure)}"
        return Mark(x.at(one.loss), y.at(one.exposure), kind, words)

    marks = {
        (one.need, one.total): mark(one.odds, "best" if one.best else "other", f"{one.need} of {one.total}")
        for one in points
    }
    here = mark(policy, "policy", "this policy") if policy else None
    best = sorted((one for one in points if one.best), key=lambda one: one.odds.loss)
    named = [(here, "this policy")] if here else []
    named += [(marks[one.need, one.total], f"{one.need} of {one.total}") for one in best]
    totals = sorted({total for _, total in marks})
    lines = {total: [one for (_, n), one in marks.items() if n == total] for total in totals}
    named += [(lines[total][-1], f"{total} of {total}") for total in totals if len(lines[total]) == total]
    return PlaneFigure(
        x.ticks(tick_words),
        y.ticks(tick_words),
        tuple(_path(line) for line in lines.values() if len(line) > 1),
        _path([marks[one.need, one.total] for one in best]),
        tuple(marks.values()),
        here,
        tuple(_labels(named, [*marks.values(), *([here] if here else [])])),
    )


def curve_figure(
    along: Sequence[AtInterval], now: int | None, of: Sequence[tuple[str, Callable[[Odds], float]]]
) -> CurveFigure:
    """Lay out odds against an interval.

    Args:
        along: as ``over_intervals`` returns it, never last.
        now: the policy's own interval; None for never.
        of: the name of each line, and which of the odds it shows.
    """
    shown = [(one.days, [odds(one.odds) for _, odds in of]) for one in along]
    longest = max((days for days, _ in shown if days), default=7)
    x = LogScale(7 / 1.1, max(longest, 14) * 1.1, CURVES.left, CURVES.right)
    y = LogScale.around(
        (value for _, values in shown for value in values), least=LEAST, start=CURVES.bottom, end=CURVES.top
    )
    lines, marks, labels = list[str](), list[Mark](), list[Label]()
    for i, (name, _) in enumerate(of):
        at = [
            Mark(
                x.at(days) if days else _NEVER_AT,
                y.at(values[i]),
                "now" if days == now else "never" if days is None else "",
                f"{name}, {numbers.every(days)}: {numbers.chance(values[i])}",
            )
            for days, values in shown
        ]
        lines.append(_path(at[:-1]))
        marks += [one for one in at if one.kind]
        above = not labels or at[0].y < labels[0].y
        labels.append(Label(at[0].x + 4, at[0].y + (-9 if above else 17), name, "start"))
    columns = [Tick(x.at(days), words) for days, words in _ROUND if days <= longest]
    return CurveFigure(
        (*columns, Tick(_NEVER_AT, "never")), y.ticks(tick_words), tuple(lines), tuple(marks), tuple(labels)
    )


def _path(along: Sequence[Mark]) -> str:
    return " ".join(f"{'L' if i else 'M'}{one.x:g} {one.y:g}" for i, one in enumerate(along))


def _labels(named: Sequence[tuple[Mark, str]], marks: Sequence[Mark]) -> Iterator[Label]:
    """Yield labels, the first ones first, each where it covers neither a mark nor a label; else none."""
    taken = [(one.x - 3, one.y - 3, one.x + 3, one.y + 3) for one in marks]
    done = set[str]()
    for mark, text in named:
        if text in done:
            continue
        width = _CHARACTER * len(text)
        for label, left in (
            (Label(mark.x + _GAP, mark.y + 4, text, "start"), mark.x + _GAP),
            (Label(mark.x - _GAP, mark.y + 4, text, "end"), mark.x - _GAP - width),
            (Label(mark.x, mark.y - _GAP, text, "middle"), mark.x - width / 2),
            (Label(mark.x, mark.y + _LINE + 3, text, "middle"), mark.x - width / 2),
        ):
            box = (left, label.y - _LINE + 3, left + width, label.y + 3)
            inside = PLANE.left < box[0] and box[2] < PLANE.width and PLANE.top < box[1] and box[3] < PLANE.bottom
            if inside and not any(_meet(box, other) for other in taken):
                taken.append(box)
                done.add(text)
                yield label
                break


def _meet(one: tuple[float, float, float, float], other: tuple[float, float, float, float]) -> bool:
    return one[0] < other[2] and other[0] < one[2] and one[1] < other[3] and other[1] < one[3]
