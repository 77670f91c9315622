"""Logarithmic axes: numbers lie in their order between the ends, and marks are round and not too many.

Source: log10 by the standard library, at powers of ten where it is exact.
"""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.paper.scale import LogScale

CHANCES = st.floats(1e-12, 1.0)


@given(st.lists(CHANCES, min_size=1, max_size=9), st.floats(0, 0.99e-12))
def test_what_is_below_the_least_lies_at_it_and_never_higher(numbers: list[float], small: float) -> None:
    scale = LogScale.around([*numbers, small], least=1e-12, start=500, end=20)
    assert scale.low == pytest.approx(1e-12, rel=1e-9)
    assert scale.at(small) == 500
    assert scale.at(1e-9) < 500


@given(st.lists(CHANCES, min_size=1, max_size=9))
def test_what_is_on_an_axis_lies_between_its_ends_and_in_its_order(numbers: list[float]) -> None:
    scale = LogScale.around(numbers, least=1e-12, start=500, end=20)
    assert scale.low <= min(numbers) * (1 + 1e-9)
    assert scale.high >= max(numbers) * (1 - 1e-9)
    places = [scale.at(number) for number in sorted(numbers)]
    assert places == sorted(places, reverse=True)
    assert 20 <= places[-1] <= places[0] <= 500


@given(st.lists(CHANCES, min_size=1, max_size=9))
def test_marks_are_few_round_and_in_their_places(numbers: list[float]) -> None:
    scale = LogScale.around(numbers, least=1e-12, start=0, end=100)
    ticks = scale.ticks(lambda number: f"{number:.3e}")
    assert 2 <= len(ticks) <= 8
    for tick in ticks:
        digit, power = tick.text.split("e")
        assert digit in ("1.000", "2.000", "5.000")
        assert tick.at == scale.at(float(tick.text))
        assert scale.low * (1 - 1e-9) <= 10 ** int(power) <= scale.high * (1 + 1e-9)


def test_places_by_hand() -> None:
    scale = LogScale(0.001, 1.0, 0, 300)
    assert [scale.at(number) for number in (0.001, 0.01, 0.1, 1.0)] == [0, 100, 200, 300]
    assert scale.at(0.02) == pytest.approx(100 * (math.log10(0.02) + 3), abs=0.05)
    # What is beyond an end lies there, and so does nothing at all.
    assert (scale.at(0.0), scale.at(2.0)) == (0, 300)


def test_an_axis_without_anything_to_show_has_two_ends_all_the_same() -> None:
    for numbers in ([], [0.0], [1e-15], [1.0], [0.1, 0.1]):
        scale = LogScale.around(numbers, least=1e-12, start=0, end=1)
        assert 0 < scale.low < scale.high <= 1
        assert len(scale.ticks(str)) >= 2
