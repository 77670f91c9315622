"""Odds in words: what is read back from them is what was meant, to the digits that are told."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.planning.confidence import interval as of_counts
from shares.planning.numbers import chance, every, horizon, interval, one_in, years


def read(text: str) -> float:
    if text.endswith(" %"):
        return float(text.removesuffix(" %")) / 100
    number, unit = text.removeprefix("1 in ").split()
    return 1 / (float(number) * {"million": 1e6, "billion": 1e9, "trillion": 1e12}[unit])


@given(st.floats(-20, -0.01).map(lambda power: 10**power))
def test_a_chance_is_told_to_the_digits_that_are_meant(p: float) -> None:
    told = chance(p)
    if p >= 0.995:
        assert told == "above 99 %"
    elif p < 1e-12:
        assert told == "below 1 in a trillion"
    else:
        assert math.isclose(read(told), p, rel_tol=0.34 if 1e-6 <= p < 1e-4 else 0.051)
        number = told.removeprefix("1 in ").split()[0]
        assert len(number.replace(".", "").strip("0")) <= 2


@given(st.integers(1, 10**9), st.floats(0, 1))
def test_an_interval_is_told_no_narrower_than_it_is_and_not_much_wider(histories: int, part: float) -> None:
    """For the intervals there are: those of so many seen in so many histories."""
    count = min(int(part * histories), histories)
    low, high = of_counts(count, histories)
    told = interval(low, high)
    if count in (0, histories):
        words, end = told.split(" ", 1)
        assert words == ("above" if count else "below")
        ends = (read(end), 1.0) if count else (0.0, read(end))
    else:
        ends = tuple(map(read, told.split(" to ")))  # type: ignore[assignment]
    slack = 1e-12
    assert ends[0] <= low + slack
    assert ends[1] >= high - slack
    assert ends[1] - ends[0] <= 3 * (high - low) + slack


@given(st.floats(1e-6, 0.1))
def test_one_in_so_many(p: float) -> None:
    assert math.isclose(float(one_in(p).removeprefix("1 in ").replace(",", "")), 1 / p, rel_tol=0.05)


def test_the_ends() -> None:
    assert (chance(0.0), chance(1.0), chance(0.994), chance(5e-324)) == (
        "none",
        "above 99 %",
        "99 %",
        "below 1 in a trillion",
    )
    assert one_in(0.1) == "1 in 10"
    assert one_in(0.1001) == one_in(9e-7) == one_in(1.0) == one_in(0.0) == ""
    assert (years(math.inf), years(1e6), years(1.0), years(0.0)) == ("never", "1,000,000 years", "1 year", "0 days")
    assert (years(1.049), years(1 / 365), years(0.999)) == ("1 year", "1 day", "360 days")


@pytest.mark.parametrize(
    ("days", "words"), [(364, "every 364 days"), (3650, "every 10 years"), (1825, "every 5 years")]
)
def test_intervals(days: int, words: str) -> None:
    assert every(days) == words


def test_horizons() -> None:
    assert (horizon(1000.0), horizon(0.25), horizon(1.0)) == ("1,000 years", "91 days", "1 year")
