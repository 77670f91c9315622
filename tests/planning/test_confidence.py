"""Exact intervals of a count: by their definition, by a reference library, and by what they promise.

Sources: Clopper, Pearson 1934 (at each end of the interval, so many or more, or so many or fewer, have a chance of just
2.5 %); the same interval of scipy, and its quantiles of the beta distribution; incomplete beta functions by
python-flint, in ball arithmetic; binomial tails as exact fractions and of scipy.
"""

from __future__ import annotations

import math
from fractions import Fraction

import flint
import pytest
from scipy import stats

from shares.planning.confidence import at_least, interval


def tail(fewest: int, total: int, chance: Fraction) -> Fraction:
    return sum(
        (math.comb(total, i) * chance**i * (1 - chance) ** (total - i) for i in range(fewest, total + 1)), Fraction(0)
    )


@pytest.mark.parametrize("total", [1, 2, 7, 40])
def test_tails_are_those_of_the_binomial_distribution(total: int) -> None:
    for seen in range(1, total + 1):
        for chance in (
            Fraction(0),
            Fraction(1, 1 << 20),
            Fraction(1, 4),
            Fraction(1, 2),
            Fraction(31, 32),
            Fraction(1),
        ):
            expected = float(tail(seen, total, chance))
            assert math.isclose(at_least(seen, total, float(chance)), expected, rel_tol=1e-11, abs_tol=1e-15)


@pytest.mark.parametrize("total", [1, 2, 7, 40])
def test_each_end_leaves_out_what_it_should(total: int) -> None:
    for seen in range(total + 1):
        low, high = interval(seen, total)
        assert 0 <= low <= seen / total <= high <= 1
        assert (low > 0, high < 1) == (seen > 0, seen < total)
        if seen:
            assert math.isclose(tail(seen, total, Fraction(low)), 0.025, rel_tol=1e-9)
        if seen < total:
            assert math.isclose(1 - tail(seen + 1, total, Fraction(high)), 0.025, rel_tol=1e-9)


@pytest.mark.parametrize(
    ("seen", "histories"), [(1, 10**5), (137, 10**5), (99_999, 10**5), (3, 10**9), (31_000_000, 10**9), (10**9, 10**9)]
)
def test_large_counts_agree_with_a_reference_library(seen: int, histories: int) -> None:
    low, high = interval(seen, histories)
    flint.ctx.prec = 200
    below = flint.arb(low).beta_lower(seen, histories - seen + 1, regularized=True)
    assert math.isclose(float(below), 0.025, rel_tol=1e-5)
    if seen < histories:
        above = 1 - flint.arb(high).beta_lower(seen + 1, histories - seen, regularized=True)
        assert math.isclose(float(above), 0.025, rel_tol=1e-5)


def several(total: int) -> list[int]:
    wanted = {0, 1, 2, 3, total // 100, total // 3, total // 2, total - 2, total - 1, total}
    return sorted(seen for seen in wanted if 0 <= seen <= total)


# Logarithms of factorials grow with the number of histories, and what their rounding leaves out grows with them.
@pytest.mark.parametrize(
    ("total", "close"),
    [*((total, 1e-12) for total in (1, 2, 3, 10, 100, 1000)), (10**4, 1e-10), (10**5, 1e-8), (10**6, 1e-7)],
)
def test_the_interval_is_that_of_a_reference_library(total: int, close: float) -> None:
    for seen in several(total):
        low, high = interval(seen, total)
        expected = stats.binomtest(seen, total).proportion_ci(0.95, method="exact")
        # Its ends are found to within 2e-12; the quantiles that they are defined by have all their digits.
        assert math.isclose(low, expected.low, abs_tol=4e-12)
        assert math.isclose(high, expected.high, abs_tol=4e-12)
        if seen:
            assert math.isclose(low, stats.beta.ppf(0.025, seen, total - seen + 1), rel_tol=close)
        if seen < total:
            assert math.isclose(high, stats.beta.ppf(0.975, seen + 1, total - seen), rel_tol=close)


@pytest.mark.parametrize(
    ("total", "close"), [(1, 1e-12), (7, 1e-12), (40, 1e-12), (200, 1e-12), (1000, 1e-11), (10**5, 1e-8), (10**9, 1e-5)]
)
def test_tails_are_those_of_a_reference_library(total: int, close: float) -> None:
    for seen in several(total)[1:]:
        for chance in (1e-9, 1e-6, 0.01, 0.3, 0.5, 0.9, 0.999, 0.999 * seen / total, min(1, 1.001 * seen / total)):
            expected = stats.binom.sf(seen - 1, total, chance)
            if expected > 1e-290:
                assert math.isclose(at_least(seen, total, chance), expected, rel_tol=close), (seen, chance)


def test_nothing_seen_is_not_never() -> None:
    for histories in (1, 100, 10**5, 10**9):
        low, high = interval(0, histories)
        assert low == 0
        assert math.isclose(high, -math.expm1(math.log(0.025) / histories), rel_tol=1e-6)
    assert f"{interval(0, 10**6)[1] * 10**6:.1f}" == "3.7"


def test_it_holds_the_truth_in_95_of_100_or_more() -> None:
    total = 30
    ends = [interval(seen, total) for seen in range(total + 1)]
    for chance in (i / 200 for i in range(201)):
        missed = [seen for seen, (low, high) in enumerate(ends) if not low <= chance <= high]
        assert math.fsum(math.comb(total, i) * chance**i * (1 - chance) ** (total - i) for i in missed) <= 0.05
