"""A smooth function of time by polynomials: a few exact values give all the others, and its integral.

A chance as a function of the days gone by is a sum of exponentials, so that polynomials through few points meet it to
the last digits; where they do not, the span is halved.

Source: C. W. Clenshaw, A. R. Curtis, "A method for numerical integration on an automatic computer", Numer. Math. 2,
1960; L. N. Trefethen, "Approximation Theory and Approximation Practice", 2013, ch. 3 and 4 (interpolation in Chebyshev
points, and how its coefficients fall).
May import: nothing of this package.
Secret: nothing. Public: nothing either: what is computed here is a policy's.
Does not: know what the function is.
"""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import accumulate

_DEGREES = (8, 16, 32)
TOLERANCE = 1e-14
"""How large the last coefficients may be, relative to the largest value met so far."""
_MOST_PIECES = 200
"""More are not worth it: what is still not smooth then is noise, as with numbers too small to have all their digits."""


@dataclass(frozen=True, slots=True)
class _Piece:
    """A polynomial on [start, end], and its integral from start, by their Chebyshev coefficients."""

    start: float
    end: float
    coefficients: tuple[float, ...]
    integral: tuple[float, ...]

    def settled(self, largest: float) -> bool:
        """Say whether the last coefficients are no more than noise beside the largest value."""
        return max(map(abs, self.coefficients[-2:])) <= TOLERANCE * largest

    def at(self, t: float, coefficients: Sequence[float]) -> float:
        """Clenshaw's recurrence."""
        x = (2 * t - self.start - self.end) / (self.end - self.start)
        before = now = 0.0
        for c in reversed(coefficients[1:]):
            before, now = now, 2 * x * now - before + c
        return coefficients[0] + x * now - before


@dataclass(frozen=True, slots=True)
class Curve:
    """A function on a span of time, known to about 13 digits of its largest value."""

    _pieces: tuple[_Piece, ...]
    _sums: tuple[float, ...]

    @classmethod
    def of(cls, function: Callable[[float], float], end: float, *, start: float = 0.0, scale: float = 0.0) -> Curve:
        """Follow a function that has all derivatives.

        Args:
            function: what is followed; called some 9 to 33 times where it is smooth.
            end: where the span ends, above ``start``.
            start: where it begins.
            scale: to about 14 digits of what the values are known, if not of the largest among them. What is less is
                noise, and is not followed.

        >>> curve = Curve.of(math.exp, 1.0)
        >>> abs(curve.at(0.3) - math.exp(0.3)) < 1e-13, abs(curve.integral(1.0) - (math.e - 1)) < 1e-13
        (True, True)
        """
        pieces, ahead, largest = list[_Piece](), [(start, end)], scale
        while ahead:
            first, last = ahead.pop()
            piece, values = _through(function, first, last, largest)
            largest = max(largest, values)
            if piece.settled(largest) or len(pieces) + len(ahead) >= _MOST_PIECES:
                pieces.append(piece)
            else:
                ahead += [((first + last) / 2, last), (first, (first + last) / 2)]
        return cls(tuple(pieces), (0.0, *accumulate(piece.at(piece.end, piece.integral) for piece in pieces)))

    def at(self, t: float) -> float:
        """Return the function's value."""
        piece = self._pieces[self._place(t)]
        return piece.at(t, piece.coefficients)

    def integral(self, t: float) -> float:
        """Return the integral from the start of the span to t."""
        place = self._place(t)
        piece = self._pieces[place]
        return self._sums[place] + piece.at(t, piece.integral)

    def _place(self, t: float) -> int:
        return min(bisect_left(self._pieces, t, key=lambda piece: piece.end), len(self._pieces) - 1)


def _through(function: Callable[[float], float], start: float, end: float, largest: float) -> tuple[_Piece, float]:
    """Return the polynomial of the lowest degree tried that settles, or else of the highest, and the largest value."""
    values: dict[float, float] = {}
    middle, half = (start + end) / 2, (end - start) / 2
    for degree in _DEGREES:
        # The points of one degree are among those of the next, so nothing is worked out twice.
        places = [j / degree for j in range(degree + 1)]
        for place in places:
            if place not in values:
                values[place] = function(middle + half * math.cos(math.pi * place))
        largest = max(largest, *map(abs, values.values()))
        coefficients = _coefficients([values[place] for place in places])
        piece = _Piece(start, end, coefficients, _integrated(coefficients, half))
        if piece.settled(largest):
            break
    return piece, largest


def _coefficients(values: Sequence[float]) -> tuple[float, ...]:
    """Return the Chebyshev coefficients of the polynomial through values at cos(pi j / n), j = 0..n."""
    n = len(values) - 1
    cosines = [math.cos(math.pi * j / n) for j in range(2 * n)]
    ends = [values[0] / 2, *values[1:-1], values[-1] / 2]
    sums = [2 / n * math.fsum(v * cosines[i * j % (2 * n)] for j, v in enumerate(ends)) for i in range(n + 1)]
    return (sums[0] / 2, *sums[1:-1], sums[-1] / 2)


def _integrated(c: Sequence[float], half: float) -> tuple[float, ...]:
    """Return the coefficients of the integral from the left end, for a span of 2 * half."""
    padded = [*c, 0.0, 0.0]
    padded[0] *= 2
    inner = [half * (padded[i - 1] - padded[i + 1]) / (2 * i) for i in range(1, len(c) + 1)]
    # Each polynomial T_i is (-1)^i at the left end.
    return (math.fsum(-a if i % 2 else a for i, a in enumerate(inner)), *inner)
