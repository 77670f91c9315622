"""The line code: 31 characters of which any two wrong ones are found and set right, and nothing worse is ever made of.

Source: I. S. Reed, G. Solomon, "Polynomial Codes over Certain Finite Fields", J. SIAM 8(2), 1960; F. J. MacWilliams,
N. J. A. Sloane, "The Theory of Error-Correcting Codes", 1977, chapters 9 and 10; FORMAT.md, sec. 11.
May import: shares.errors, shares.field.extension, shares.field.polynomial.
Secret: the symbols of a line; they are looked up in tables and branched on, so not in constant time (SECURITY.md).
Public: the code itself.
Does not: know letters, line numbers, or what a line is part of.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from typing import Final

from shares.errors import ParameterError
from shares.field.extension import ExtensionField
from shares.field.polynomial import Polynomial

LENGTH: Final = 31
"""Symbols in a line."""
DATA: Final = 25
"""Symbols of a line that are chosen freely; the other six follow from them."""
MAX_ERASED: Final = 3
"""Most symbols given as unreadable. With four, one line in 961 that held three wrong ones besides would be taken."""
BUDGET: Final = 4
"""Most that 2 * wrong + unreadable may come to. The distance 7 would allow 6, at the price of false corrections."""

_FIELD: Final = ExtensionField(Polynomial.parse("x^5 + x^2 + 1"))
_POWERS: Final = [_FIELD.power(2, exponent) for exponent in range(LENGTH)]
# All logarithms here are taken modulo 31; that of 0 is never asked for.
_LOG: Final = {power: exponent for exponent, power in enumerate(_POWERS)}
# A line read as a polynomial r, the first character at x^30, has r(a) = 1 and r(a^2) = ... = r(a^6) = 0. With r(a) = 0
# the code would be cyclic: a line begun at its second character, the first put at the end, would be a line as well.
# The words with r(a) = 1 have the same distances from each other, and each shifted one lies 6 away from all of them:
# it differs from a line by a word with the syndrome (s, 0, 0, 0, 0, 0), s not 0, which is no sum of five columns.
_WANTED: Final = (1, 0, 0, 0, 0, 0)
_CHECKS: Final = len(_WANTED)


def _times(a: int, b: int) -> int:
    return _POWERS[(_LOG[a] + _LOG[b]) % LENGTH] if a and b else 0


def _over(a: int, b: int) -> int:
    return _POWERS[(_LOG[a] - _LOG[b]) % LENGTH] if a else 0


# For each place and each symbol there, what it adds to the six sums r(a^j).
_ADDS: Final = [
    [tuple(_times(symbol, _POWERS[j * (LENGTH - 1 - place) % LENGTH]) for j in range(1, 7)) for symbol in range(32)]
    for place in range(LENGTH)
]


def encode(data: Sequence[int]) -> list[int]:
    """Return the line that begins with ``data``.

    Args:
        data: 25 symbols, each 0 to 31.

    Returns:
        31 symbols: the 25 given, and six more.

    Raises:
        ParameterError: not 25 symbols.

    >>> encode(range(1, 26))[25:]
    [24, 16, 28, 22, 23, 28]
    """
    if len(data) != DATA:
        raise ParameterError(f"a line holds {DATA} symbols of data")
    return _filled([*data, *[0] * _CHECKS], list(range(DATA, LENGTH)))


def decode(line: Sequence[int | None]) -> list[int] | None:
    """Return the one line that differs little enough from the symbols read, or None where there is none.

    Little enough: 2 * wrong + unreadable is at most 4, and unreadable at most 3. Two lines differ in seven symbols or
    more. So what was a line with at most four symbols wrong or unreadable is set right or refused, never made into
    another line. Of lines that are worse, fewer than one in a thousand are.

    Args:
        line: 31 symbols, each 0 to 31, or None where one cannot be read.

    Returns:
        31 symbols.

    Raises:
        ParameterError: not 31 symbols.

    >>> line = encode(range(1, 26))
    >>> decode([None, None, 7, *line[3:]]) == line
    True
    """
    if len(line) != LENGTH:
        raise ParameterError(f"a line has {LENGTH} symbols")
    erased = [place for place, symbol in enumerate(line) if symbol is None]
    if len(erased) > MAX_ERASED:
        return None
    read = [symbol or 0 for symbol in line]
    sums = _syndrome(read)
    for place in erased:
        sums = _without(sums, _locator(place))
    wrong = _locate(sums, (BUDGET - len(erased)) // 2)
    if wrong is None:
        return None
    found = _filled(read, sorted({*erased, *wrong}))
    return None if any(_syndrome(found)) else found


def _syndrome(line: Sequence[int]) -> list[int]:
    """Return in what the six sums of a line differ from those wanted; all zeros for a line of the code."""
    sums = list(_WANTED)
    for adds, symbol in zip(_ADDS, line, strict=True):
        sums = [a ^ b for a, b in zip(sums, adds[symbol], strict=True)]
    return sums


def _locator(place: int) -> int:
    return _POWERS[LENGTH - 1 - place]


def _without(sums: Sequence[int], locator: int) -> list[int]:
    """Take what one place added out of sums of powers, S_j = sum of Y X^j: S_(j+1) - X S_j lacks the term of that X."""
    return [_times(locator, a) ^ b for a, b in itertools.pairwise(sums)]


def _locate(sums: Sequence[int], most: int) -> list[int] | None:
    """Return at most ``most`` (0 to 2) places whose terms explain all sums, or None.

    The sums of one term, Y X^j, have the quotient X. For two, each place is tried as one of them.
    """
    if not any(sums):
        return []
    if most == 0 or len(sums) <= most:
        return None
    if all(sums):
        locator = _over(sums[1], sums[0])
        if not any(_without(sums, locator)):
            return [LENGTH - 1 - _LOG[locator]]
    if most == 2:
        for place in range(LENGTH):
            other = _locate(_without(sums, _locator(place)), 1)
            if other:
                return [place, *other]
    return None


def _filled(line: Sequence[int], places: Sequence[int]) -> list[int]:
    """Return the line with other symbols at up to six places, such that as many sums as there are places are right.

    Solved by elimination: one equation for each place, the last ones left to whoever checks the result.
    """
    rest = _syndrome(line)[: len(places)]
    rows = [[_ADDS[place][1][j] for place in places] + [rest[j]] for j in range(len(places))]
    for i in range(len(places)):
        # Vandermonde: the leading entry is never 0 in any order of different places.
        rows[i] = [_over(entry, rows[i][i]) for entry in rows[i]]
        for k in range(len(places)):
            if k != i:
                factor = rows[k][i]
                rows[k] = [a ^ _times(factor, b) for a, b in zip(rows[k], rows[i], strict=True)]
    filled = list(line)
    for place, row in zip(places, rows, strict=True):
        filled[place] ^= row[-1]
    return filled
