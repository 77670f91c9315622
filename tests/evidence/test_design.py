"""Designs: as short as the published coverings, and never shorter; planes where they fit.

Source: tests/vectors/covering_designs.json: published covering numbers for v up to 33.
"""

from __future__ import annotations

import pytest
from coverings import TABLE, covered, flat, pairs

from shares.evidence.covering import Chance, partners
from shares.evidence.design import design, no_planes
from shares.evidence.gathering import Tree
from shares.evidence.planes import why_no_plane
from shares.sharing.rule import Rule


@pytest.mark.parametrize(("v", "k"), sorted(TABLE))
def test_published_covering_numbers_are_reached(v: int, k: int) -> None:
    tree = Tree(flat(k, v))
    wanted, _ = partners(tree, Chance(0))
    found = design(tree, wanted, seed=0)
    assert len(found.quorums) == TABLE[v, k]
    assert covered(found.quorums) == pairs(wanted)
    assert {one.bit_count() for one in found.quorums} == {k}


@pytest.mark.parametrize("q", [2, 3, 4, 5, 7, 8, 9])
def test_a_plane_is_used_where_it_fits(q: int) -> None:
    for need, total, method in (
        (q + 1, q * q + q + 1, f"the projective plane of order {q}"),
        (q, q * q, f"the affine plane of order {q}"),
    ):
        if need > 2:
            tree = Tree(flat(need, total))
            found = design(tree, partners(tree, Chance(0)).wanted, seed=0)
            assert (found.method, len(found.quorums)) == (method, total * (total - 1) // (need * (need - 1)))


@pytest.mark.parametrize(
    ("need", "total", "method"),
    [
        (5, 20, "the projective plane of order 4 with 1 point left out"),
        (8, 54, "the projective plane of order 7 with 3 points left out"),
        (5, 24, "the affine plane of order 5 with 1 point left out"),
        (11, 111, "the affine plane of order 11 with 10 points left out"),
    ],
)
def test_a_plane_with_points_left_out(need: int, total: int, method: str) -> None:
    tree = Tree(flat(need, total))
    wanted, _ = partners(tree, Chance(0))
    found = design(tree, wanted, seed=0)
    assert found.method == method
    assert covered(found.quorums) == pairs(wanted)
    assert {one.bit_count() for one in found.quorums} == {need}


@pytest.mark.parametrize(
    ("need", "most", "least", "kind", "order"),
    [
        (7, 43, 36, "projective", 6),
        (6, 36, 30, "affine", 6),
        (11, 111, 100, "projective", 10),
        (10, 100, 90, "affine", 10),
        (13, 157, 144, "projective", 12),
        (12, 144, 132, "affine", 12),
    ],
)
def test_where_there_is_no_plane_it_is_said_why(need: int, most: int, least: int, kind: str, order: int) -> None:
    note = f"The {kind} plane of order {order} would fit these numbers, but is not used: {why_no_plane(order)}."
    for total in (least, most):
        assert note in no_planes(Tree(flat(need, total)))
    for total in (least - 1, most + 1):
        assert note not in no_planes(Tree(flat(need, total)))


@pytest.mark.parametrize(
    "rule", [Rule(2, tuple("abcd")), Rule(7, tuple("abcdefg")), Rule(4, ("a", *map(str, range(12))))]
)
def test_where_a_plane_is_used_or_none_fits_nothing_is_said(rule: Rule) -> None:
    assert no_planes(Tree(rule)) == []


def test_nothing_to_cover() -> None:
    tree = Tree(flat(3, 9))
    assert design(tree, [0] * 9, seed=0).quorums == []
