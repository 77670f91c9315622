"""Finite planes, against their axioms, published sizes, and what is published about the orders that have none.

Source: the axioms (Beutelspacher, Rosenbaum 1998, chapter 1); sizes: tests/vectors/covering_designs.json, "planes";
Bruck and Ryser 1949 (orders 6, 14, 21, 22 are excluded); Lam, Thiel and Swiercz 1989 (order 10).
"""

from __future__ import annotations

import itertools
import json
from pathlib import Path

import pytest

from shares.errors import ParameterError
from shares.evidence.planes import MAX_ORDER, affine_plane, prime_power, projective_plane, why_no_plane

ORDERS = (2, 3, 4, 5, 7, 8, 9)
PUBLISHED = json.loads((Path(__file__).parents[1] / "vectors" / "covering_designs.json").read_text())["planes"]
PRIME_POWERS = {p**m for p in (2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37) for m in range(1, 7) if p**m <= 40}


def through(lines: tuple[tuple[int, ...], ...], *points: int) -> int:
    return sum(set(points) <= set(line) for line in lines)


@pytest.mark.parametrize("q", ORDERS)
def test_a_projective_plane_keeps_the_axioms(q: int) -> None:
    lines = projective_plane(q)
    points = range(q * q + q + 1)
    assert len(lines) == len(set(lines)) == len(points)
    assert {point for line in lines for point in line} == set(points)
    assert {len(set(line)) for line in lines} == {q + 1}
    assert all(through(lines, *pair) == 1 for pair in itertools.combinations(points, 2))
    assert all(len(set(one) & set(other)) == 1 for one, other in itertools.combinations(lines, 2))


@pytest.mark.parametrize("q", ORDERS)
def test_an_affine_plane_keeps_the_axioms(q: int) -> None:
    lines = affine_plane(q)
    points = range(q * q)
    assert len(lines) == len(set(lines)) == q * q + q
    assert {len(set(line)) for line in lines} == {q}
    assert all(through(lines, *pair) == 1 for pair in itertools.combinations(points, 2))
    # Through a point beside a line there is one line that does not meet it.
    for line, point in itertools.product(lines[:: q + 1], points):
        apart = [other for other in lines if point in other and not set(other) & set(line)]
        assert len(apart) == (point not in line)


@pytest.mark.parametrize("published", PUBLISHED, ids=lambda published: published["kind"])
def test_the_published_sizes(published: dict[str, int | str]) -> None:
    kind, order = str(published["kind"])[:2], int(str(published["kind"]).split(",")[1].rstrip(")"))
    lines = projective_plane(order) if kind == "PG" else affine_plane(order)
    assert len(lines) == published["blocks"]
    assert {len(line) for line in lines} == {published["k"]}
    assert len({point for line in lines for point in line}) == published["v"]


def test_the_last_points_of_a_plane_are_a_line() -> None:
    """So that leaving them out one by one empties one line."""
    for q in ORDERS:
        assert projective_plane(q)[-1] == tuple(range(q * q, q * q + q + 1))
        assert affine_plane(q)[-1] == tuple(range(q * q - q, q * q))


def test_prime_powers() -> None:
    assert {order for order in range(2, 41) if prime_power(order)} == PRIME_POWERS
    assert prime_power(1) is None
    for order in PRIME_POWERS:
        p, exponent = prime_power(order) or (0, 0)
        assert p**exponent == order
        assert prime_power(p) == (p, 1)


def test_why_there_is_no_plane() -> None:
    for order in (6, 14, 21, 22):
        assert "Bruck and Ryser" in (why_no_plane(order) or "")
        assert "no plane of order" in (why_no_plane(order) or "")
    assert "exhaustive search" in (why_no_plane(10) or "")
    for order in (12, 15, 18, 20):
        assert "open question" in (why_no_plane(order) or "")
    assert {order for order in range(2, 41) if why_no_plane(order) is None} == PRIME_POWERS


def test_sums_of_two_squares() -> None:
    """Exactly the numbers in which every prime that is 3 modulo 4 stands an even number of times (Fermat, Euler)."""
    for order in range(2, 500):
        if prime_power(order) or order == 10 or order % 4 not in (1, 2):
            continue
        left, even = order, True
        for p in range(2, order + 1):
            exponent = 0
            while left % p == 0:
                left, exponent = left // p, exponent + 1
            even &= p % 4 != 3 or exponent % 2 == 0
        assert ("open question" in (why_no_plane(order) or "")) == even


@pytest.mark.parametrize("order", [0, 1, 6, 10, 12, MAX_ORDER + 3])
def test_where_there_is_no_field_no_plane_is_built(order: int) -> None:
    for build in (affine_plane, projective_plane):
        with pytest.raises(ParameterError, match=f"none of {order}"):
            build(order)


def test_the_largest_plane() -> None:
    assert len(affine_plane(MAX_ORDER)) == MAX_ORDER**2 + MAX_ORDER
