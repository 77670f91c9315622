"""Recovery when some points may be wrong: search quorums with a judge, then say which points disagree.

Source: R. J. McEliece, D. V. Sarwate, "On sharing secrets and Reed-Solomon codes", CACM 24(9), 1981 (more points
than needed
correct errors); M. Bellare, W. Dai, P. Rogaway 2020 (recover with the one explanation, or say that there is none).
May import: shares.errors, shares.memory, shares.field, shares.sharing.rule, shares.sharing.shamir.
Secret: rows and candidate payloads. Public: paths, which points agree, what the judge says.
Does not: decode algebraically. It searches at most ``MAX_TRIES`` quorums: all of them where there are no more, else
random ones.
"""

from __future__ import annotations

import itertools
import secrets
from collections.abc import Callable, Iterator, Sequence

from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.rule import Path, Point, recover_payload
from shares.sharing.shamir import interpolate

MAX_TRIES = 20_000

Indices = tuple[int, ...]


class _Node:
    """Points grouped below one node: for each threshold claimed, for each x, what stands there."""

    def __init__(self, paths: Sequence[Path], indices: Sequence[int], depth: int) -> None:
        self.leaves: dict[tuple[int, int], list[int]] = {}
        below: dict[tuple[int, int], list[int]] = {}
        for i in indices:
            step = paths[i][depth]
            (self.leaves if len(paths[i]) == depth + 1 else below).setdefault(step, []).append(i)
        self.nodes = {step: _Node(paths, inner, depth + 1) for step, inner in below.items()}
        # In how many ways a row can be had at each child, children without any left out.
        self.ways = {step: len(i) for step, i in self.leaves.items()}
        for step, node in self.nodes.items():
            self.ways[step] = self.ways.get(step, 0) + node.count
        self.ways = {step: self.ways[step] for step in sorted(self.ways) if self.ways[step]}
        self.needs = [need for need in sorted({need for need, _ in self.ways}) if len(self.children(need)) >= need]
        self.count: int = sum(self._count(need) for need in self.needs)

    def children(self, need: int) -> list[tuple[int, int]]:
        """The children of threshold ``need`` from which at least one row can be had."""
        return [step for step in self.ways if step[0] == need]

    def _count(self, need: int) -> int:
        """The number of quorums: the elementary symmetric polynomial of degree ``need`` of the children's ways."""
        ways = [1] + [0] * need
        for step in self.children(need):
            for size in range(need, 0, -1):
                ways[size] += ways[size - 1] * self.ways[step]
        return ways[need]

    def quorums(self) -> Iterator[Indices]:
        for need in self.needs:
            for chosen in itertools.combinations(self.children(need), need):
                yield from self._rows_at(chosen)

    def _rows_at(self, steps: tuple[tuple[int, int], ...]) -> Iterator[Indices]:
        if not steps:
            yield ()
            return
        for first in self._rows_at_one(steps[0]):
            for rest in self._rows_at(steps[1:]):
                yield (*first, *rest)

    def _rows_at_one(self, step: tuple[int, int]) -> Iterator[Indices]:
        yield from ((i,) for i in self.leaves.get(step, ()))
        if step in self.nodes:
            yield from self.nodes[step].quorums()

    def random_quorum(self, source: secrets.SystemRandom) -> Indices:
        need = source.choice(self.needs)
        chosen: list[int] = []
        for step in source.sample(self.children(need), need):
            leaves, inner = self.leaves.get(step, []), self.nodes.get(step)
            if inner and source.randrange(self.ways[step]) >= len(leaves):
                chosen.extend(inner.random_quorum(source))
            else:
                chosen.append(source.choice(leaves))
        return tuple(chosen)


def count_quorums(paths: Sequence[Path]) -> int:
    """Return the number of minimal quorums of points among ``paths``; 0 where there is none.

    >>> count_quorums([((3, x),) for x in range(1, 6)])
    10
    """
    return _Node(paths, range(len(paths)), 0).count if paths else 0


def quorums(paths: Sequence[Path], *, most: int = MAX_TRIES) -> Iterator[Indices]:
    """Yield minimal quorums as indices into ``paths``: all where there are at most ``most``, else ``most`` random ones.

    Random, because a search in order would spend its tries on quorums that share their first points.
    """
    if not paths:
        return
    root = _Node(paths, range(len(paths)), 0)
    total = root.count
    if total <= most:
        yield from root.quorums()
        return
    source = secrets.SystemRandom()
    for _ in range(most):
        yield root.random_quorum(source)


def covering_quorums(paths: Sequence[Path]) -> Iterator[Indices]:
    """Yield quorums that together use every point that stands in any quorum: one for each point at most."""
    covered: set[int] = set()
    root = _Node(paths, range(len(paths)), 0)
    for i, path in enumerate(paths):
        if i not in covered:
            quorum = _quorum_with(root, i, path)
            covered.update(quorum)
            yield quorum


def _quorum_with(node: _Node, index: int, path: Path) -> Indices:
    """A quorum below ``node`` that uses point ``index``: its own branch, and the next children in order, cyclically."""
    step, rest = path[0], path[1:]
    need = step[0]
    children = node.children(need)
    start = children.index(step)
    chosen: list[int] = []
    for j in range(need):
        child = children[(start + j) % len(children)]
        if j:
            chosen.extend(next(node._rows_at_one(child)))
        elif rest:
            chosen.extend(_quorum_with(node.nodes[child], index, rest))
        else:
            chosen.append(index)
    return tuple(chosen)


def search(
    field: Field, points: Sequence[Point], judge: Callable[[Secret], bool], *, most: int = MAX_TRIES
) -> tuple[Secret, Indices] | None:
    """Return the first payload that the judge accepts, with the quorum that gave it; None when none does.

    Args:
        judge: says whether a candidate payload is the one committed to.
        most: quorums to try at most.

    Source: Bellare, Dai, Rogaway 2020: with a binding commitment as judge there is at most one explanation.
    """
    for quorum in quorums([point.path for point in points], most=most):
        payload = recover_payload(field, [points[i] for i in quorum])
        if judge(payload):
            return payload, quorum
        payload.close()
    return None


def agreeing(field: Field, points: Sequence[Point], payload: Secret) -> tuple[set[int], set[int]]:
    """Say which points lie on the dealing of a payload that is known to be right.

    Where several dealings explain the payload (a wrong point can be offset by another wrong one), the one with most
    points counts;
    where two have equally many, nothing is said of the points on which they differ.

    Returns:
        (indices that agree, indices that disagree). Points of groups that cannot be checked are in neither.
    """
    return _agreeing(field, points, range(len(points)), payload, 0)


_MAX_EXPLANATIONS = 256


def _agreeing(
    field: Field, points: Sequence[Point], indices: Sequence[int], payload: Secret, depth: int
) -> tuple[set[int], set[int]]:
    node = _Node([point.path for point in points], indices, depth)
    found: list[tuple[set[int], set[int]]] = []
    for quorum in itertools.islice(node.quorums(), _MAX_EXPLANATIONS):
        if any(set(quorum) <= good for good, _ in found):
            continue
        if recover_payload(field, [points[i] for i in quorum], depth=depth) == payload:
            found.append(_on_polynomial(field, points, indices, quorum, depth))
            if not found[-1][1]:
                return found[-1]
    if not found:
        return set(), set()
    most = max(len(good) for good, _ in found)
    best = [explanation for explanation in found if len(explanation[0]) == most]
    good = set.intersection(*(good for good, _ in best))
    bad = set.intersection(*(bad for _, bad in best))
    return good, bad


def _on_polynomial(
    field: Field, points: Sequence[Point], indices: Sequence[int], quorum: Indices, depth: int
) -> tuple[set[int], set[int]]:
    """Compare every point below a node with the polynomial that a quorum fixes."""
    need = points[quorum[0]].path[depth][0]
    at_x: dict[int, list[Point]] = {}
    for i in quorum:
        at_x.setdefault(points[i].path[depth][1], []).append(points[i])
    xs = sorted(at_x)
    rows = [
        at_x[x][0].row if len(at_x[x][0].path) == depth + 1 else recover_payload(field, at_x[x], depth=depth + 1)
        for x in xs
    ]
    good: set[int] = set()
    bad: set[int] = set()
    inner: dict[int, list[int]] = {}
    for i in indices:
        claimed, x = points[i].path[depth]
        if claimed != need:
            bad.add(i)
        elif len(points[i].path) == depth + 1:
            (good if points[i].row == interpolate(field, xs, rows, at=x) else bad).add(i)
        else:
            inner.setdefault(x, []).append(i)
    for x, below in inner.items():
        good_below, bad_below = _agreeing(field, points, below, interpolate(field, xs, rows, at=x), depth + 1)
        good |= good_below
        bad |= bad_below
    return good, bad
