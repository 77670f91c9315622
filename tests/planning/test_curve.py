"""Curves against functions whose values and integrals are known in closed form.

Sources: elementary calculus; the integral of the binomial tail is the textbook's mean life of a k-out-of-n system.
"""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.planning.curve import Curve


@given(st.floats(1e-6, 50), st.floats(0.1, 1000))
def test_values_and_integrals_of_exponentials(rate: float, end: float) -> None:
    rate = rate / end
    curve = Curve.of(lambda t: math.exp(-rate * t), end)
    for t in (0.0, end / 7, end / 2, end * 0.99, end):
        assert abs(curve.at(t) - math.exp(-rate * t)) < 1e-12
        assert math.isclose(curve.integral(t), -math.expm1(-rate * t) / rate, rel_tol=1e-12, abs_tol=1e-13 * end)


@pytest.mark.parametrize("power", [0, 1, 5, 24, 60])
def test_powers(power: int) -> None:
    curve = Curve.of(lambda t: t**power, 2.0)
    for t in (0.0, 0.5, 1.3, 2.0):
        assert abs(curve.at(t) - t**power) < 1e-12 * 2.0**power
        assert abs(curve.integral(t) - t ** (power + 1) / (power + 1)) < 1e-12 * 2.0 ** (power + 1)


def test_a_span_that_does_not_begin_at_0() -> None:
    curve = Curve.of(math.cos, 5.0, start=2.0)
    assert math.isclose(curve.integral(4.0), math.sin(4) - math.sin(2), abs_tol=1e-13)


def test_a_bend_much_shorter_than_the_span_is_found_by_halving() -> None:
    curve = Curve.of(lambda t: math.exp(-t), 3e5)
    assert math.isclose(curve.integral(3e5), 1.0, rel_tol=1e-12)


def test_smooth_functions_take_few_values() -> None:
    asked = list[float]()

    def function(t: float) -> float:
        asked.append(t)
        return math.exp(-0.1 * t)

    Curve.of(function, 1.0)
    assert len(asked) == 9


def test_noise_below_the_scale_is_not_followed() -> None:
    asked = list[float]()

    def function(t: float) -> float:
        asked.append(t)
        return 1e-15 * math.cos(1e6 * t)

    Curve.of(function, 1.0, scale=1.0)
    assert len(asked) == 9


def test_what_is_not_smooth_comes_to_an_end() -> None:
    asked = list[float]()

    def function(t: float) -> float:
        asked.append(t)
        return 5e-324 * (len(asked) % 3)

    Curve.of(function, 1.0)
    assert len(asked) < 20_000
