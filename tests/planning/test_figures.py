"""What is drawn of a plan lies where its numbers say, and labels cover nothing.

Source: the pictures' own edges; logarithms by the standard library.
"""

from __future__ import annotations

import re
from itertools import pairwise
from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.planning.figures import CURVES, PLANE, CurveFigure, Label, PlaneFigure, curve_figure, plane_figure
from shares.planning.intervals import AtInterval, over_intervals
from shares.planning.model import Model, model_of
from shares.planning.odds import Odds, odds
from shares.planning.plane import Point, plane
from shares.planning.simulate import Estimate, Simulated

EXAMPLES = sorted((Path(__file__).parents[2] / "examples" / "policies").glob("*.toml"))
BOTH = [("loss", lambda one: one.loss), ("no quorum on a day", lambda one: one.absence)]


def model(path: Path) -> Model:
    return model_of(Policy.parse(path.read_bytes()))


def places(path: str) -> list[tuple[float, float]]:
    return [(float(x), float(y)) for x, y in re.findall(r"[ML](\S+) (\S+)", path)]


def box(label: Label) -> tuple[float, float, float, float]:
    width = 6.6 * len(label.text)
    left = label.x - {"start": 0, "middle": width / 2, "end": width}[label.anchor]
    return left, label.y - 10, left + width, label.y + 3


def drawn(path: Path) -> tuple[PlaneFigure, tuple[Point, ...], Odds]:
    now = odds(model(path), 10)
    assert now is not None
    points = plane(model(path), 10)
    return plane_figure(points, now), points, now


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_rules_lie_in_the_order_of_their_odds(path: Path) -> None:
    figure, points, _ = drawn(path)
    assert len(figure.marks) == len(points) == 78
    for of, along, grows in (
        ("loss", [one.x for one in figure.marks], 1),
        ("exposure", [one.y for one in figure.marks], -1),
    ):
        in_order = sorted(zip((getattr(point.odds, of) for point in points), along, strict=True))
        assert [place for _, place in in_order] == sorted((place for _, place in in_order), key=lambda p: grows * p)
    assert all(PLANE.left <= one.x <= PLANE.right and PLANE.top <= one.y <= PLANE.bottom for one in figure.marks)
    assert [one.kind == "best" for one in figure.marks] == [one.best for one in points]
    assert [one.kind == "extreme" for one in figure.marks] == [one.need in (1, one.total) for one in points]
    assert len(places(figure.frontier)) == sum(one.best for one in points)
    assert [len(places(line)) for line in figure.lines] == list(range(2, 13))


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_labels_cover_neither_one_another_nor_a_mark(path: Path) -> None:
    figure, _, _ = drawn(path)
    assert figure.labels[0].text == "this policy"
    assert len(figure.labels) > 12
    boxes = [box(label) for label in figure.labels]
    marks = [(one.x - 2, one.y - 2, one.x + 2, one.y + 2) for one in (*figure.marks, figure.policy) if one]
    for i, one in enumerate(boxes):
        assert one[0] >= 0
        assert one[2] <= PLANE.width
        for other in (*boxes[i + 1 :], *marks):
            apart = one[2] <= other[0] or other[2] <= one[0] or one[3] <= other[1] or other[3] <= one[1]
            assert apart, figure.labels[i]


def test_a_label_names_the_point_beside_it() -> None:
    figure, points, _ = drawn(EXAMPLES[0])
    where = {f"{one.need} of {one.total}": mark for one, mark in zip(points, figure.marks, strict=True)}
    for label in figure.labels[1:]:
        left, top, right, bottom = box(label)
        mark = where[label.text]
        assert left - 8 <= mark.x <= right + 8
        assert top - 8 <= mark.y <= bottom + 8
        assert mark.words.startswith(f"{label.text}: loss ")


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_labels_do_not_lie_on_the_frontier(path: Path) -> None:
    figure, _, _ = drawn(path)
    along = places(figure.frontier)
    for label in figure.labels[1:]:
        left, top, right, bottom = box(label)
        for (x, y), (other_x, other_y) in pairwise(along):
            for i in range(101):
                at_x, at_y = x + i / 100 * (other_x - x), y + i / 100 * (other_y - y)
                assert not (left + 4 < at_x < right - 4 and top + 4 < at_y < bottom - 4), label


def test_a_policy_that_was_simulated_has_a_cross_of_its_intervals() -> None:
    _, points, _ = drawn(EXAMPLES[0])
    loss, exposure = Estimate(0.01, 0.005, 0.02, 10), Estimate(0.0, 0.0, 0.003, 0)
    figure = plane_figure(points, Simulated(loss, exposure, loss, None, 1000, 1, "2.4.0"))
    assert figure.policy is not None
    left, right, low, high = places(figure.spread)
    assert left[0] < figure.policy.x < right[0]
    assert left[1] == right[1] == figure.policy.y == high[1]  # Nothing seen: it is drawn at the most it can be.
    assert low[1] == PLANE.bottom
    assert figure.policy.words == "this policy: loss 1 % (0.5 % to 2 %), exposure 0 of 1,000: below 0.3 %"
    assert plane_figure(points, points[0].odds).spread == ""


def test_the_policy_is_drawn_where_its_odds_are_or_not_at_all() -> None:
    figure, points, now = drawn(EXAMPLES[0])
    assert figure.policy is not None
    (its_point,) = (mark for one, mark in zip(points, figure.marks, strict=True) if (one.need, one.total) == (3, 5))
    assert (figure.policy.x, figure.policy.y) == (its_point.x, its_point.y)  # any three of five
    assert plane_figure(points, None).policy is None
    assert now.loss > 0


def test_odds_of_nothing_lie_at_the_edge() -> None:
    points = [Point(2, 3, 0, Odds(0.0, 0.0, 0.0, 1.0), True), Point(2, 4, 0, Odds(0.1, 1e-300, 0.0, 1.0), False)]
    figure = plane_figure(points, Odds(1.0, 1.0, 0.0, 1.0))
    none, little = figure.marks
    assert (none.x, none.y, none.words) == (PLANE.left, PLANE.bottom, "2 of 3: loss none, exposure none")
    assert little.x > PLANE.right - 60  # 10 % is 10 %, also beside nothing.
    assert little.y == PLANE.bottom
    assert figure.columns[0].text == figure.rows[0].text == "1 in a trillion"
    assert figure.policy is not None
    assert (figure.policy.x, figure.policy.y) == (PLANE.right, PLANE.top)


def curves(path: Path, now: int | None) -> tuple[CurveFigure, tuple[AtInterval, ...]]:
    along = over_intervals(model(path), 10)
    return curve_figure(along, now, BOTH), along


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_curves_go_from_the_shortest_interval_to_the_longest_with_never_beside(path: Path) -> None:
    now = model(path).attest_every
    figure, along = curves(path, now)
    for line in figure.lines:
        xs = [x for x, _ in places(line)]
        assert len(xs) == len(along) - 1
        assert xs == sorted(set(xs))
        assert CURVES.left <= xs[0]
        assert xs[-1] <= CURVES.right
    kinds = [one.kind for one in figure.marks]
    assert kinds == (["now", "now"] if now is None else ["now", "never", "now", "never"])
    assert figure.marks[0].words.startswith(f"loss, {'never' if now is None else 'every'}")
    assert [label.text for label in figure.labels] == ["loss", "no quorum on a day"]
    assert figure.columns[-1].text == "never"
    assert len(figure.rows) >= 2


def test_the_mark_of_now_lies_on_its_line() -> None:
    path = next(path for path in EXAMPLES if path.stem == "break-glass")
    figure, _ = curves(path, 182)
    for line, mark in zip(figure.lines, [one for one in figure.marks if one.kind == "now"], strict=True):
        assert (mark.x, mark.y) in places(line)


def test_where_nothing_but_never_fits_there_is_no_line() -> None:
    along = over_intervals(model(EXAMPLES[1]), 1 / 365)
    figure = curve_figure(along, None, BOTH)
    assert [one.days for one in along] == [None]
    assert figure.lines == ("", "")
    assert [one.kind for one in figure.marks] == ["now", "now"]
