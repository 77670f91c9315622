"""What is drawn of a plan: the plane of loss against exposure, and odds against intervals, as places on paper.

Source: W3C, "Scalable Vector Graphics (SVG) 2", sec. 9 (paths); labels are put one after another where there is room
(the greedy way with point labels).
May import: shares.paper.scale, .intervals, .numbers, .odds, .plane, .reckoned, .simulate.
Secret: nothing. Confidential: where a policy lies. Public: nothing.
Does not: draw: the page's template does, from plain numbers; know colours.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import NamedTuple

from shares.paper.scale import LogScale, Tick
from shares.planning import numbers
from shares.planning.intervals import AtInterval
from shares.planning.odds import Odds
from shares.planning.plane import Point
from shares.planning.reckoned import Reckoned, ends, value, words
from shares.planning.simulate import Simulated

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


PLANE = Box(790, 572, 116, 740, 20, 505)
CURVES = Box(500, 300, 108, 440, 16, 240)
_THIS = "this policy"
_NEVER_AT = 476
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
        marks: one for each rule: "best", "other", or "none" for what is no choice.
        policy: where the policy lies; None where that is not known.
        spread: the path along the intervals of its loss and exposure, where these are simulated.
        labels: names of the best rules, as far as there is room, and of the lines.
    """

    columns: tuple[Tick, ...]
    rows: tuple[Tick, ...]
    lines: tuple[str, ...]
    frontier: str
    marks: tuple[Mark, ...]
    policy: Mark | None
    spread: str
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
    """Write a chance beside an axis; at the end at which all that is less is drawn, without its "or less".

    >>> tick_words(1.0), tick_words(0.001), tick_words(numbers.LEAST)
    ('100 %', '0.1 %', '1 in a trillion')
    """
    if chance < 1.5 * numbers.LEAST:
        return "1 in a trillion"
    return "100 %" if chance >= 1 else numbers.chance(chance)


def plane_figure(points: Sequence[Point], policy: Reckoned | None) -> PlaneFigure:
    """Lay out the plane.

    Args:
        points: as ``plane`` returns them, at least one.
        policy: the odds of the policy itself, where they are known. Simulated ones are drawn at their best guess, or at
            the most that they can be where no history showed them.
    """
    here = None if policy is None else tuple(value(policy, of) or ends(policy, of)[1] for of in ("loss", "exposure"))
    known = [(point.odds.loss, point.odds.exposure) for point in points] + ([here] if here else [])
    x = LogScale.around((loss for loss, _ in known), least=numbers.LEAST, start=PLANE.left, end=PLANE.right)
    y = LogScale.around((exposure for _, exposure in known), least=numbers.LEAST, start=PLANE.bottom, end=PLANE.top)

    def mark(one: Reckoned, kind: str, name: str, loss: float, exposure: float) -> Mark:
        told = f"{name}: loss {words(one, 'loss')}, exposure {words(one, 'exposure')}"
        return Mark(x.at(loss), y.at(exposure), kind, told)

    marks = {
        (one.need, one.total): mark(
            one.odds,
            "best" if one.best else "other" if one.choice else "none",
            f"{one.need} of {one.total}",
            one.odds.loss,
            one.odds.exposure,
        )
        for one in points
    }
    its = mark(policy, "policy", _THIS, *here) if policy and here else None
    best = sorted((one for one in points if one.best), key=lambda one: one.odds.loss)
    named = [(marks[one.need, one.total], f"{one.need} of {one.total}") for one in best]
    totals = sorted({total for _, total in marks})
    lines = {total: [one for (_, n), one in marks.items() if n == total] for total in totals}
    named += [(lines[total][-1], f"{total} of {total}") for total in totals if len(lines[total]) == total]
    frontier = [marks[one.need, one.total] for one in best]
    return PlaneFigure(
        x.ticks(tick_words),
        y.ticks(tick_words),
        tuple(_path(line) for line in lines.values() if len(line) > 1),
        _path(frontier),
        tuple(marks.values()),
        its,
        _spread(policy, its, x, y) if isinstance(policy, Simulated) and its else "",
        tuple(_labels(named, its, [*marks.values(), *_along(frontier)])),
    )


def _spread(policy: Simulated, its: Mark, x: LogScale, y: LogScale) -> str:
    left, right = map(x.at, ends(policy, "loss"))
    low, high = map(y.at, ends(policy, "exposure"))
    return f"M{left:g} {its.y:g} L{right:g} {its.y:g} M{its.x:g} {low:g} L{its.x:g} {high:g}"


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
        (value for _, values in shown for value in values), least=numbers.LEAST, start=CURVES.bottom, end=CURVES.top
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
        labels.append(_beside_line(at[0], name, labels))
    columns = [Tick(x.at(days), words) for days, words in _ROUND if days <= longest]
    return CurveFigure(
        (*columns, Tick(_NEVER_AT, "never")), y.ticks(tick_words), tuple(lines), tuple(marks), tuple(labels)
    )


def _beside_line(mark: Mark, name: str, others: Sequence[Label]) -> Label:
    """Put the name of a line where it begins: above or below it, within the plot, and apart from other names."""
    anchor, x = ("start", mark.x + 4) if mark.x < (CURVES.left + CURVES.right) / 2 else ("end", mark.x - 8)
    heights = [y for y in (mark.y - 9, mark.y + 17, mark.y - 9 - _LINE) if CURVES.top + 6 < y < CURVES.bottom - 2]
    apart = [y for y in heights if all(abs(y - other.y) >= _LINE for other in others)]
    return Label(x, (apart or heights or [mark.y - 9])[0], name, anchor)


def _path(along: Sequence[Mark]) -> str:
    return " ".join(f"{'L' if i else 'M'}{one.x:g} {one.y:g}" for i, one in enumerate(along))


def _along(line: Sequence[Mark]) -> Iterator[Mark]:
    """Yield points along a path, close enough that no label lies between them."""
    for one, other in pairwise(line):
        steps = int(math.hypot(other.x - one.x, other.y - one.y) / _LINE) + 1
        for i in range(1, steps):
            part = i / steps
            yield Mark(one.x + part * (other.x - one.x), one.y + part * (other.y - one.y), "", "")


def _labels(named: Sequence[tuple[Mark, str]], policy: Mark | None, kept_free: Sequence[Mark]) -> Iterator[Label]:
    """Yield labels, the first ones first, each where it covers neither a mark nor a label; else none. The policy's
    stands first, always, and farther off where it must."""
    taken = [_Area(one.x - 3, one.y - 3, one.x + 3, one.y + 3) for one in kept_free]
    if policy:
        taken.append(_Area(policy.x - 8, policy.y - 8, policy.x + 8, policy.y + 8))
        choices = [choice for gap in (_GAP + 4, 20.0, 34.0) for choice in _places(policy, _THIS, gap)]
        label, area = next((one for one in choices if _free(one[1], taken)), choices[0])
        taken.append(area)
        yield label
    done = set[str]()
    for mark, text in named:
        if text in done:
            continue
        for label, area in _places(mark, text, _GAP):
            if _free(area, taken):
                taken.append(area)
                done.add(text)
                yield label
                break


class _Area(NamedTuple):
    """What a label or a mark covers."""

    left: float
    top: float
    right: float
    bottom: float


def _places(mark: Mark, text: str, gap: float) -> Iterator[tuple[Label, _Area]]:
    """Yield where a label may stand: beside its mark, above and below it, and across from its corners."""
    width, near = _CHARACTER * len(text), 0.7 * gap
    for x, y, anchor in (
        (gap, 4.0, "start"),
        (-gap, 4.0, "end"),
        (0.0, -gap, "middle"),
        (0.0, gap + _LINE - 3, "middle"),
        (near, -near, "start"),
        (-near, near + _LINE - 3, "end"),
        (-near, -near, "end"),
        (near, near + _LINE - 3, "start"),
    ):
        label = Label(round(mark.x + x, 1), round(mark.y + y, 1), text, anchor)
        left = label.x - {"start": 0.0, "middle": width / 2, "end": width}[anchor]
        yield label, _Area(left, label.y - _LINE + 3, left + width, label.y + 3)


def _free(area: _Area, taken: Sequence[_Area]) -> bool:
    """Say whether an area is within the picture and meets none of those that are taken."""
    inside = PLANE.left < area.left and area.right < PLANE.width and PLANE.top - 8 < area.top
    return inside and area.bottom < PLANE.bottom and not any(_meet(area, other) for other in taken)


def _meet(one: _Area, other: _Area) -> bool:
    return one.left < other.right and other.left < one.right and one.top < other.bottom and other.top < one.bottom
