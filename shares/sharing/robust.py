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
import time
from collections.abc import Callable, Iterator, Sequence
from typing import NamedTuple

from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.rule import Path, Point, recover_payload, row_of_child
from shares.sharing.shamir import interpolate

MAX_TRIES = 20_000
MAX_SECONDS = 20.0

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
        # A stack instead of recursion: there may be hundreds of steps, and as many again in each group below.
        chosen: list[Indices] = []
        stack = [self._rows_at_one(steps[0])]
        while stack:
            row = next(stack[-1], None)
            if row is None:
                stack.pop()
                del chosen[-1:]
            elif len(stack) == len(steps):
                yield tuple(itertools.chain(*chosen, row))
            else:
                chosen.append(row)
                stack.append(self._rows_at_one(steps[len(stack)]))

    def _rows_at_one(self, step: tuple[int, int]) -> Iterator[Indices]:
        yield from ((i,) for i in self.leaves.get(step, ()))
        if step in self.nodes:
            yield from self.nodes[step].quorums()

    def sample(self, most: int) -> Iterator[Indices]:
        """Yield all quorums where there are at most ``most``, else ``most`` random ones."""
        if self.count <= most:
            yield from self.quorums()
        else:
            source = secrets.SystemRandom()
            for _ in range(most):
                yield self.random_quorum(source)

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
    if paths:
        yield from _Node(paths, range(len(paths)), 0).sample(most)


def covering_quorums(paths: Sequence[Path]) -> Iterator[Indices]:
    """Yield quorums that together use every point that stands in any quorum: one for each point at most."""
    covered: set[int] = set()
    root = _Node(paths, range(len(paths)), 0)
    for i, path in enumerate(paths):
        if i not in covered and (quorum := _quorum_with(root, i, path)):
            covered.update(quorum)
            yield quorum


def _quorum_with(node: _Node, index: int, path: Path) -> Indices:
    """A quorum below ``node`` that uses point ``index``: its own branch, and the next children in order, cyclically.

    Empty where the point stands in none, because too few of its neighbours are there.
    """
    step, rest = path[0], path[1:]
    need = step[0]
    children = node.children(need)
    if need not in node.needs or step not in children:
        return ()
    start = children.index(step)
    chosen: list[int] = []
    for j in range(need):
        child = children[(start + j) % len(children)]
        if j:
            chosen.extend(next(node._rows_at_one(child)))
        elif rest:
            inner = _quorum_with(node.nodes[child], index, rest)
            if not inner:
                return ()
            chosen.extend(inner)
        else:
            chosen.append(index)
    return tuple(chosen)


def search(
    field: Field,
    points: Sequence[Point],
    judge: Callable[[Secret], bool],
    *,
    owners: Sequence[int] | None = None,
    most: int = MAX_TRIES,
) -> tuple[Secret, Indices] | None:
    """Return the first payload that the judge accepts, with the quorum that gave it; None when none does.

    Args:
        judge: says whether a candidate payload is the one committed to.
        owners: for each point whose it is; points of one owner are likely to be right or wrong together.
        most: quorums to try at most, after those that leave out one or two owners of several points; nor does the
            search go on for longer than ``MAX_SECONDS``.

    Source: Bellare, Dai, Rogaway 2020: with a binding commitment as judge there is at most one explanation.
    """
    paths = [point.path for point in points]
    holders = list(range(len(paths))) if owners is None else list(owners)
    end = time.monotonic() + MAX_SECONDS
    for quorum in _promising(paths, holders, most):
        payload = recover_payload(field, [points[i] for i in quorum])
        if judge(payload):
            return payload, quorum
        payload.close()
        if time.monotonic() > end:
            break
    return None


def _promising(paths: Sequence[Path], owners: Sequence[int], most: int) -> Iterator[Indices]:
    """Yield quorums, the likely ones first: without one or two owners, who may have brought many wrong points; then all
    where there are at most ``most``, else ``most`` random ones."""
    several = len(set(owners)) < len(owners)
    if several:
        yield from _leaving_out(paths, owners)
    if not several or count_quorums(paths) <= most:
        yield from quorums(paths, most=most)
        return
    source = secrets.SystemRandom()
    for _ in range(most // 2):
        yield from _of_few_owners(paths, owners, source)
        yield from quorums(paths, most=1)


_MAX_LEFT_OUT = 2000


def _leaving_out(paths: Sequence[Path], owners: Sequence[int]) -> Iterator[Indices]:
    """Yield one quorum of what remains without nobody, each owner, and each pair of owners."""
    different = sorted(set(owners))
    absent = itertools.chain.from_iterable(itertools.combinations(different, size) for size in range(3))
    for out in itertools.islice(absent, _MAX_LEFT_OUT):
        kept = [i for i, owner in enumerate(owners) if owner not in out]
        if kept and (node := _Node(paths, kept, 0)).count:
            yield next(node.quorums())


def _of_few_owners(paths: Sequence[Path], owners: Sequence[int], source: secrets.SystemRandom) -> Iterator[Indices]:
    """Yield a random quorum of the points of a random few owners: as few, in a random order, as have one."""
    order = sorted(set(owners))
    source.shuffle(order)
    few, many = 0, len(order)
    while few + 1 < many:  # Between them lies the least number of owners that has a quorum.
        middle = (few + many) // 2
        if count_quorums([paths[i] for i, owner in enumerate(owners) if owner in order[:middle]]):
            many = middle
        else:
            few = middle
    node = _Node(paths, [i for i, owner in enumerate(owners) if owner in order[:many]], 0)
    if node.count:
        yield node.random_quorum(source)


class Agreement(NamedTuple):
    """What a payload known to be right says of points, by index; one that nothing can be compared with is in no set.

    Attributes:
        good: they lie on the dealing of the payload.
        bad: they do not.
        torn: they contradict one another, and which of them are wrong cannot be told.
    """

    good: set[int]
    bad: set[int]
    torn: set[int]


def agreeing(field: Field, points: Sequence[Point], payload: Secret, quorum: Indices) -> Agreement:
    """Say which points lie on the dealing of a payload that is known to be right.

    Where several dealings explain the payload (a wrong point can be offset by another wrong one), the one with most
    points counts; where two have equally many, the points on which they differ are torn. Where a group has more than
    256 quorums, a random 256 of them are looked at.

    Args:
        field: GF(2^8) on a chosen polynomial.
        points: all that are to be judged.
        payload: checked against its commitment.
        quorum: indices of the points that gave it.
    """
    return _agreeing(field, points, range(len(points)), payload, 0, quorum)


_MAX_EXPLANATIONS = 256


def _agreeing(
    field: Field, points: Sequence[Point], indices: Sequence[int], payload: Secret, depth: int, known: Indices
) -> Agreement:
    node = _Node([point.path for point in points], indices, depth)
    found: list[Agreement] = []
    # The quorum that is known comes first: among many, bad points could otherwise hide it from the search.
    for quorum in itertools.chain([known] if known else [], node.sample(_MAX_EXPLANATIONS)):
        if any(explanation.good.issuperset(quorum) for explanation in found):
            continue
        if recover_payload(field, [points[i] for i in quorum], depth=depth) == payload:
            found.append(_on_polynomial(field, points, indices, quorum, depth))
            if not found[-1].bad and not found[-1].torn:
                return found[-1]
    if not found:
        return Agreement(set(), set(), set(indices) if node.count else set())
    most = max(len(explanation.good) for explanation in found)
    best = [explanation for explanation in found if len(explanation.good) == most]
    good = set.intersection(*(explanation.good for explanation in best))
    bad = set.intersection(*(explanation.bad for explanation in best))
    return Agreement(good, bad, set[int]().union(*itertools.chain.from_iterable(best)) - good - bad)


def _on_polynomial(
    field: Field, points: Sequence[Point], indices: Sequence[int], quorum: Indices, depth: int
) -> Agreement:
    """Compare every point below a node with the polynomial that a quorum fixes."""
    need = points[quorum[0]].path[depth][0]
    at_x: dict[int, list[int]] = {}
    for i in quorum:
        at_x.setdefault(points[i].path[depth][1], []).append(i)
    xs = sorted(at_x)
    rows = [row_of_child(field, [points[i] for i in at_x[x]], depth + 1) for x in xs]
    said = Agreement(set(), set(), set())
    inner: dict[int, list[int]] = {}
    for i in indices:
        claimed, x = points[i].path[depth]
        if claimed != need:
            said.bad.add(i)
        elif len(points[i].path) == depth + 1:
            (said.good if points[i].row == interpolate(field, xs, rows, at=x) else said.bad).add(i)
        else:
            inner.setdefault(x, []).append(i)
    for x, below in inner.items():
        known = tuple(i for i in at_x.get(x, ()) if i in below)
        of_child = _agreeing(field, points, below, interpolate(field, xs, rows, at=x), depth + 1, known)
        for mine, theirs in zip(said, of_child, strict=True):
            mine.update(theirs)
    return said
