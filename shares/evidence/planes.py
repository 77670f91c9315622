"""Finite planes: points and lines such that any two points lie on exactly one line.

For: rehearsals in which every two custodians meet exactly once, as few as can be.
Source: A. Beutelspacher, U. Rosenbaum, "Projective Geometry", 1998 (the planes over a field, and their axioms);
    R. H. Bruck, H. J. Ryser, "The nonexistence of certain finite projective planes", Canad. J. Math. 1, 1949; C. W. H.
    Lam, L. Thiel, S. Swiercz, "The non-existence of finite projective planes of order 10", Canad. J. Math. 41, 1989.
May import: shares.errors, shares.field.extension, shares.field.irreducible.
Secret: nothing. Public: everything.
Does not: know custodians, or planes that are not over a field: those have the same sizes.
"""

from __future__ import annotations

import math
from typing import TypeAlias

from shares.errors import ParameterError
from shares.field.extension import ExtensionField
from shares.field.irreducible import irreducibles

MAX_ORDER = 64
"""The largest plane that is built: 4,161 points, far more than a rule has places for custodians."""

Lines: TypeAlias = tuple[tuple[int, ...], ...]
"""The lines of a plane, each with its points: numbers from 0 in ascending order."""


def prime_power(order: int) -> tuple[int, int] | None:
    """Return the prime p and the exponent m with p^m = order, or None where there are none.

    Args:
        order: 1 or more.

    >>> prime_power(9), prime_power(7), prime_power(12)
    ((3, 2), (7, 1), None)
    """
    p = next((p for p in range(2, order + 1) if order % p == 0), None)
    if p is None:
        return None
    exponent = 0
    while order % p == 0:
        order, exponent = order // p, exponent + 1
    return (p, exponent) if order == 1 else None


def affine_plane(order: int) -> Lines:
    """Build the affine plane over GF(order): order^2 points, and order^2 + order lines of ``order`` points.

    The point (x, y) has the number x * order + y. The lines are y = m x + b, and x = c.

    Args:
        order: a prime power, 2 to 64.

    Returns:
        The lines: the slopes one after the other, the vertical lines last.

    Raises:
        ParameterError: the order is out of range or no prime power.

    Source: Beutelspacher, Rosenbaum 1998, chapter 2.

    >>> affine_plane(2)
    ((0, 2), (1, 3), (0, 3), (1, 2), (0, 1), (2, 3))
    """
    add, multiply = _tables(order)
    elements = range(order)
    sloping = [tuple(x * order + add[multiply[m][x]][b] for x in elements) for m in elements for b in elements]
    upright = [tuple(c * order + y for y in elements) for c in elements]
    return tuple(sloping + upright)


def projective_plane(order: int) -> Lines:
    """Build the projective plane over GF(order): q^2 + q + 1 points and as many lines of q + 1 points, with q = order.

    It is the affine plane with a point more for each direction, on all lines of that direction, and a line of these:
    the last q + 1 points and the last line.

    Args:
        order: a prime power, 2 to 64.

    Raises:
        ParameterError: the order is out of range or no prime power.

    Source: Beutelspacher, Rosenbaum 1998, chapter 1.

    >>> projective_plane(2)
    ((0, 2, 4), (1, 3, 4), (0, 3, 5), (1, 2, 5), (0, 1, 6), (2, 3, 6), (4, 5, 6))
    """
    at_infinity = range(order * order, order * order + order + 1)
    affine = affine_plane(order)
    lines = [(*line, at_infinity[number // order]) for number, line in enumerate(affine)]
    return (*lines, tuple(at_infinity))


def why_no_plane(order: int) -> str | None:
    """Say why no plane of this order is used, affine or projective: there is one exactly where there is the other.

    Args:
        order: 2 or more.

    Returns:
        The reason in words; None for a prime power, where there is a plane.

    Source: Bruck, Ryser 1949: where the order is 1 or 2 modulo 4 it must be a sum of two squares. Lam, Thiel, Swiercz
        1989: order 10. All planes known have a prime power as their order.

    >>> why_no_plane(6)
    'no plane of order 6 exists: 6 is 2 modulo 4 and no sum of two squares (Bruck and Ryser 1949)'
    >>> why_no_plane(12)
    'whether a plane of order 12 exists is an open question: 12 is no prime power, and no plane is known'
    """
    if prime_power(order):
        return None
    if order % 4 in (1, 2) and not _is_sum_of_two_squares(order):
        return (
            f"no plane of order {order} exists: {order} is {order % 4} modulo 4 and no sum of two squares "
            f"(Bruck and Ryser 1949)"
        )
    if order == 10:
        return "no plane of order 10 exists: an exhaustive search found none (Lam, Thiel and Swiercz 1989)"
    return (
        f"whether a plane of order {order} exists is an open question: {order} is no prime power, and no plane is known"
    )


def _is_sum_of_two_squares(number: int) -> bool:
    return any(math.isqrt(number - a * a) ** 2 == number - a * a for a in range(math.isqrt(number) + 1))


def _tables(order: int) -> tuple[list[list[int]], list[list[int]]]:
    """Return the tables of addition and multiplication of GF(order)."""
    power = prime_power(order) if 2 <= order <= MAX_ORDER else None
    if power is None:
        raise ParameterError(
            f"a plane is built over a field of 2 to {MAX_ORDER} elements, and there is none of {order}",
            hint="choose a power of a prime",
        )
    p, exponent = power
    field = ExtensionField(next(irreducibles(exponent, p)))
    elements = range(order)
    return (
        [[field.add(a, b) for b in elements] for a in elements],
        [[field.multiply(a, b) for b in elements] for a in elements],
    )
