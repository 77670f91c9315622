"""The shortest covering that can be had: a finite plane where the numbers fit, else greedy and improved.

For: the roster of rehearsals.
Source: D. M. Gordon, G. Kuperberg, O. Patashnik, "New constructions for covering designs", J. Combin. Designs 3, 1995
    (planes with points left out; the best of several ways).
May import: .covering, .gathering, .improving, .planes.
Secret: nothing. Public: the rule, which is confidential.
Does not: find the fewest for sure; ``covering.lower_bound`` tells how far from it this can be.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import NamedTuple

from shares.evidence.covering import Chance, gather, greedy, lower_bound, meet, trimmed
from shares.evidence.gathering import Tree
from shares.evidence.improving import improved
from shares.evidence.planes import affine_plane, projective_plane, why_no_plane

# Measured on the published coverings up to 33 points: this effort reaches all of them, in half a second at most.
_ROUNDS = 4
_STARTS = 50
_PAIRS = 20_000  # Fewer starts where there are many pairs: so many pairs are covered in all of them together.
_WORK = 500_000
_MAX_IMPROVED = 255


class Design(NamedTuple):
    """A covering and how it was made.

    Attributes:
        quorums: minimal quorums, none superfluous.
        method: in words.
    """

    quorums: list[int]
    method: str


class _Fit(NamedTuple):
    """A plane whose lines are as long as the quorums of a rule k of n, and which has points enough."""

    kind: str
    order: int
    points: int


def design(tree: Tree, wanted: Sequence[int], *, seed: int, known: Sequence[int] = ()) -> Design:
    """Cover what is wanted by few minimal quorums.

    Args:
        tree: the rule, laid out.
        wanted: whom each custodian is to meet.
        seed: the same seed gives the same covering.
        known: with tangles, minimal quorums that cover what is wanted.
    """
    chance, fewest = Chance(seed), lower_bound(tree, wanted)
    best: Design | None = None
    for one in _tries(tree, wanted, chance, known, fewest):
        if best is None or len(one.quorums) < len(best.quorums):
            best = one
        if len(best.quorums) <= fewest:
            break
    return best or Design([], "nothing is left to cover")


def no_planes(tree: Tree) -> list[str]:
    """Say of each plane that would fit why it is not used; of planes over a field, which are used, nothing.

    >>> from shares.sharing.rule import Rule
    >>> [note] = no_planes(Tree(Rule(6, tuple(map(str, range(36))))))
    >>> note[:63]
    'The affine plane of order 6 would fit these numbers, but is not'
    """
    return [
        f"The {fit.kind} plane of order {fit.order} would fit these numbers, but is not used: {reason}."
        for fit in _fits(tree)
        if (reason := why_no_plane(fit.order))
    ]


def _tries(tree: Tree, wanted: Sequence[int], chance: Chance, known: Sequence[int], fewest: int) -> Iterator[Design]:
    """Yield coverings, those first that cost least."""
    pairs = sum(others.bit_count() for others in wanted) // 2
    starts = max(1, min(_STARTS, _PAIRS // max(pairs, 1)))
    for fit in _fits(tree):
        if not why_no_plane(fit.order):
            quorums = _from_plane(fit, tree, wanted, chance)
            left_out = fit.points - len(tree.names)
            method = f"the {fit.kind} plane of order {fit.order}"
            if left_out:
                method += f" with {left_out} point{'s' * (left_out > 1)} left out"
            yield Design(quorums, method)
    if known:
        yield Design(trimmed(known, wanted), "greedy")
        if pairs > _PAIRS:
            return
    for _ in range(_ROUNDS):
        best = min((greedy(tree, wanted, chance, known=known) for _ in range(starts)), key=len)
        yield Design(best, "greedy")
        if tree.tangled or len(tree.names) > _MAX_IMPROVED:
            return
        better = improved(tree, best, wanted, chance, fewest=fewest, work=_WORK)
        if len(better) < len(best):
            yield Design(better, "greedy, improved by local search")


def _fits(tree: Tree) -> Iterator[_Fit]:
    """Yield the planes that fit a rule k of n, with all their points or with a line of them left out at most."""
    total, need = len(tree.names), tree.nodes[0].need
    if tree.flat and 2 < need < total:
        for fit in (_Fit("projective", need - 1, need * (need - 1) + 1), _Fit("affine", need, need * need)):
            if fit.points - need <= total <= fit.points:
                yield fit


def _from_plane(fit: _Fit, tree: Tree, wanted: Sequence[int], chance: Chance) -> list[int]:
    """Take the lines of a plane, leave out its last points, which lie on one line, and fill the lines up again."""
    lines = projective_plane(fit.order) if fit.kind == "projective" else affine_plane(fit.order)
    left, quorums = list(wanted), []
    for line in lines:
        present = [point for point in line if point < len(tree.names)]
        quorum = gather(tree, present, left, chance)
        if quorum is not None:  # It never is: any k custodians or fewer are in a quorum of k.
            quorums.append(quorum)
            meet(left, quorum)
    return trimmed(quorums, wanted)
