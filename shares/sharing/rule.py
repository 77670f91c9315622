"""Rules: trees of thresholds over custodians, and dealing along them.

Source: A. Shamir 1979 (threshold); J. Benaloh, J. Leichter, "Generalized secret sharing and monotone functions",
CRYPTO '88
(a tree of thresholds is shared node by node).
May import: shares.errors, shares.memory, shares.field, shares.sharing.shamir.
Secret: the payload, every coefficient, every row. Public: the rule, the names, the paths.
Does not: decide whether a rule is wise, check recovered payloads, or know what a payload holds.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass
from typing import NamedTuple, TypeAlias

from shares.errors import NotEnoughSharesError, ParameterError, ShareError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.shamir import evaluate, interpolate, random_polynomial

MAX_CHILDREN = 255  # The non-zero elements of GF(2^8) are the evaluation points.
MAX_DEPTH = 8
MAX_POINTS = 1000

Path: TypeAlias = tuple[tuple[int, int], ...]
"""Where a point lies: the (need, x) met from the root down."""


@dataclass(frozen=True, slots=True)
class Rule:
    """A node of a rule: any ``need`` of ``children``; a child is a custodian's name or a node.

    The child at place i, counted from 1, sits at x = i. A name that stands w times has weight w.

    Raises:
        ParameterError: need or the number of children out of range, too deep, or too many points.

    >>> Rule(2, ("north-pier", "south-pier", "light-house")).words()
    'any 2 of north-pier, south-pier, light-house'
    """

    need: int
    children: tuple[Rule | str, ...]

    def __post_init__(self) -> None:
        total = len(self.children)
        if not 1 <= total <= MAX_CHILDREN:
            raise ParameterError(f"a rule is over 1 to {MAX_CHILDREN} custodians or groups, not {total}")
        if not 1 <= self.need <= total:
            raise ParameterError(
                f"a threshold of {self.need} cannot stand over {total} shares", hint=f"choose from 1 to {total}"
            )
        if self.depth > MAX_DEPTH:
            raise ParameterError(f"a rule is at most {MAX_DEPTH} groups deep")
        if self.size > MAX_POINTS:
            raise ParameterError(f"a rule has at most {MAX_POINTS} places for custodians")

    @property
    def depth(self) -> int:
        """The number of nodes on the longest way down."""
        return 1 + max((child.depth for child in self.children if isinstance(child, Rule)), default=0)

    @property
    def size(self) -> int:
        """The number of points: leaves, counted with weight."""
        return sum(child.size if isinstance(child, Rule) else 1 for child in self.children)

    def nodes(self) -> Iterator[tuple[Path, Rule]]:
        """Yield every node with its path, parents before children, from left to right."""
        yield from _nodes(self, ())

    def points(self) -> Iterator[tuple[str, Path]]:
        """Yield (custodian, path) for every leaf, from left to right, depth first."""
        yield from _points(self, ())

    def paths(self) -> dict[str, tuple[Path, ...]]:
        """Return each custodian's paths; custodians in the order in which the rule first meets them."""
        found: dict[str, tuple[Path, ...]] = {}
        for name, path in self.points():
            found[name] = (*found.get(name, ()), path)
        return found

    def satisfied_by(self, custodians: Collection[str]) -> bool:
        """Say whether these custodians, each with all of their points, make a quorum.

        Args:
            custodians: names in any order, best a set; names that the rule does not know count for nothing.

        >>> Rule(2, ("north-pier", Rule(1, ("south-pier", "light-house")))).satisfied_by({"north-pier", "light-house"})
        True
        """
        met = 0
        for child in self.children:
            met += child.satisfied_by(custodians) if isinstance(child, Rule) else child in custodians
            if met >= self.need:
                return True
        return False

    def words(self) -> str:
        """Return the rule as a person would say it.

        >>> Rule(2, (Rule(2, ("north-pier", "south-pier", "light-house")), "registrar")).words()
        'any 2 of north-pier, south-pier, light-house; and registrar'
        """
        # A name that stands w times in one node is said once, with its weight.
        counts = Counter(self.children)
        everyone, anyone = self.need == len(self.children), self.need == 1
        if len(counts) == 1 and (everyone or anyone):
            return _words(self.children[0])
        if (everyone or anyone) and any(isinstance(child, Rule) for child in counts):
            return ("; and " if everyone else "; or ").join(_words(child, within=True) for child in counts)
        if everyone:
            return f"{'both' if len(counts) == 2 else f'all {len(counts)}'} of {', '.join(map(_words, counts))}"
        if anyone:
            return f"any 1 of {', '.join(map(_words, counts))}"
        said = [_words(child, bracketed=True) + f" (weight {w})" * (w > 1) for child, w in counts.items()]
        return f"any {self.need} of {', '.join(said)}"


def _words(child: Rule | str, *, within: bool = False, bracketed: bool = False) -> str:
    """Return a child in words: in brackets where it could not be told from what stands around it."""
    if isinstance(child, str):
        return child
    words = child.words()
    return f"({words})" if bracketed or (within and "; " in words) else words


def _nodes(rule: Rule, path: Path) -> Iterator[tuple[Path, Rule]]:
    yield path, rule
    for x, child in enumerate(rule.children, start=1):
        if isinstance(child, Rule):
            yield from _nodes(child, (*path, (rule.need, x)))


def _points(rule: Rule, path: Path) -> Iterator[tuple[str, Path]]:
    for x, child in enumerate(rule.children, start=1):
        place = (*path, (rule.need, x))
        if isinstance(child, Rule):
            yield from _points(child, place)
        else:
            yield child, place


class Point(NamedTuple):
    """One evaluation point: its path (public) and its row (secret)."""

    path: Path
    row: Secret


@dataclass(frozen=True, slots=True, repr=False, eq=False)
class Dealing:
    """What a dealer holds between drawing and writing: secret throughout.

    Attributes:
        points: the points of each custodian, in the order of ``Rule.paths``.
        polynomials: the coefficients of each node, in the order of ``Rule.nodes``.
    """

    points: dict[str, list[Point]]
    polynomials: list[list[Secret]]

    def close_polynomials(self) -> None:
        """Wipe every coefficient; the points live on in the shares."""
        for polynomial in self.polynomials:
            for coefficient in polynomial:
                coefficient.close()


def deal(field: Field, rule: Rule, payload: Secret) -> Dealing:
    """Share ``payload`` along ``rule``: one random polynomial for each node.

    A child's row is its node's polynomial at the child's x, and is the payload of the subtree below.

    Source: Benaloh and Leichter 1988, on Shamir 1979.
    """
    dealing = Dealing(points={name: [] for name in rule.paths()}, polynomials=[])
    _deal(field, rule, payload, (), dealing)
    return dealing


def _deal(field: Field, node: Rule, payload: Secret, path: Path, dealing: Dealing) -> None:
    # Below an 'any 1 of' several nodes have one payload: their places keep them apart even where the source fails.
    steps = bytes(number for step in path for number in step)
    polynomial = random_polynomial(field, payload, node.need, place=steps)
    dealing.polynomials.append(polynomial)
    xs = range(1, len(node.children) + 1)
    for x, child, row in zip(xs, node.children, evaluate(field, polynomial, xs), strict=True):
        place = (*path, (node.need, x))
        if isinstance(child, Rule):
            _deal(field, child, row, place, dealing)
        else:
            dealing.points[child].append(Point(place, row))


def recover_payload(field: Field, points: Sequence[Point], *, depth: int = 0) -> Secret:
    """Return f_0 of the node at ``depth`` from exactly a quorum of points below it. It cannot tell whether a row is
    wrong.

    Args:
        field: GF(2^8) on a chosen polynomial.
        points: points that share their first ``depth`` steps; at every node exactly ``need`` children.

    Raises:
        ShareError: points that contradict one another about a node.
        NotEnoughSharesError: fewer children than a node needs.

    Source: Shamir 1979, sec. 2, from the leaves up.
    """
    below: dict[int, list[Point]] = {}
    needs = set()
    for point in points:
        need, x = point.path[depth]
        needs.add(need)
        below.setdefault(x, []).append(point)
    if len(needs) != 1:
        raise ShareError("the points do not agree how many are needed")
    (need,) = needs
    if len(below) < need:
        raise NotEnoughSharesError(f"{need} points are needed, {len(below)} given")
    xs = sorted(below)[:need]
    return interpolate(field, xs, [row_of_child(field, below[x], depth + 1) for x in xs])


def row_of_child(field: Field, points: Sequence[Point], depth: int) -> Secret:
    """Return the row of the child that points below it give: a leaf's own, or the payload of a subtree.

    Args:
        field: GF(2^8) on a chosen polynomial.
        points: one leaf, or a quorum of the subtree.
        depth: the length of the path to the child.

    Raises:
        ShareError, NotEnoughSharesError: as for ``recover_payload``.
    """
    leaves = [point for point in points if len(point.path) == depth]
    if not leaves:
        return recover_payload(field, points, depth=depth)
    if len(points) > 1:
        raise ShareError("two points stand at the same place")
    return leaves[0].row
