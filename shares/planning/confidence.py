"""How far a count of histories can be trusted: the chances that it does not rule out.

The interval is exact, no approximation by a bell curve: whatever the true chance is, the interval holds it in at least
95 of 100 simulations. So it holds for what is rare as well. Where nothing was seen in n histories it goes from 0 to
1 - 0.025^(1/n), which is about 3.7/n: nothing seen is not never.

Source: C. J. Clopper, E. S. Pearson, "The use of confidence or fiducial limits illustrated in the case of the
binomial", Biometrika 26, 1934; DLMF 8.17.4, 8.17.5 and 8.17.22 (binomial tails as incomplete beta functions, and these
as continued fractions); W. J. Lentz, Applied Optics 15, 1976 (how to work out a continued fraction from its front).
May import: nothing of this package.
Secret: nothing. Public: counts.
Does not: know what was counted.
"""

from __future__ import annotations

import math
from collections.abc import Iterator

_TAIL = 0.025
"""What a 95 % interval leaves out at each of its ends."""
_HALVINGS = 200
"""More than enough: the ends of the range are then neighbours among floating-point numbers."""
_ROUNDING = 1e-15
_TINY = 1e-300
"""Stands in for a denominator of nothing, as Lentz's method asks."""


def interval(seen: int, histories: int) -> tuple[float, float]:
    """Return the lowest and the highest chance that a count does not rule out, at 95 %.

    Args:
        seen: in how many histories it happened, 0 to ``histories``.
        histories: how many there were, 1 or more.

    Source: Clopper, Pearson 1934.

    >>> [f"{end:.4f}" for end in interval(0, 100)]
    ['0.0000', '0.0362']
    """
    missed = histories - seen
    low = 0.0 if seen == 0 else _chance_at(_TAIL, seen, missed + 1)
    high = 1.0 if missed == 0 else _chance_at(1 - _TAIL, seen + 1, missed)
    return low, high


def at_least(seen: int, histories: int, chance: float) -> float:
    """Return the chance that it happens in so many of the histories or more, if it happens in each with some chance.

    Args:
        seen: 1 to ``histories``.
        histories: 1 or more.
        chance: 0 to 1.

    Source: DLMF 8.17.5.

    >>> round(at_least(2, 3, 0.5), 12)
    0.5
    """
    return _beta(chance, seen, histories - seen + 1)


def _chance_at(wanted: float, a: int, b: int) -> float:
    """Return the x at which the incomplete beta function, which grows, comes to a value."""
    low, high = 0.0, 1.0
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        if _beta(middle, a, b) < wanted:
            low = middle
        else:
            high = middle
    return high


def _beta(x: float, a: int, b: int) -> float:
    """Return I_x(a, b), the regularized incomplete beta function."""
    if x <= 0 or x >= 1:
        return float(x >= 1)
    # The fraction converges fast below the mean alone; above it, the other tail is taken.
    if x > (a + 1) / (a + b + 2):
        return 1 - _tail(1 - x, math.log1p(-x), math.log(x), b, a)
    return _tail(x, math.log(x), math.log1p(-x), a, b)


def _tail(x: float, log_x: float, log_rest: float, a: int, b: int) -> float:
    log_front = math.lgamma(a + b) - math.lgamma(a) - math.lgamma(b) + a * log_x + b * log_rest
    return math.exp(log_front) / (a * _fraction(_terms(x, a, b)))


def _terms(x: float, a: int, b: int) -> Iterator[float]:
    """Yield d_1, d_2 and so on of DLMF 8.17.23."""
    m = 0
    while True:
        yield -(a + m) * (a + b + m) * x / ((a + 2 * m) * (a + 2 * m + 1))
        m += 1
        yield m * (b - m) * x / ((a + 2 * m - 1) * (a + 2 * m))


def _fraction(terms: Iterator[float]) -> float:
    """Return 1 + d_1 / (1 + d_2 / (1 + ...)), by Lentz's method."""
    value = above = 1.0
    below = 0.0
    for term in terms:
        below = 1 / (1 + term * below or _TINY)
        above = 1 + term / above or _TINY
        value *= above * below
        if abs(above * below - 1) < _ROUNDING:
            break
    return value
