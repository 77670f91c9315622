"""Every function that a rule of 6 custodians can have, and every tree of thresholds over up to 6, but for names.

Six custodians have 7,828,354 monotone functions, too many to try; but chances do not depend on who is called what, so
one function of each kind is enough, under names taken by lot. Each is tried against the sum over all 64 sets.

Sources of the numbers: kinds of monotone functions of n variables by T. Stephen, T. Yusun, "Counting inequivalent
monotone Boolean functions", Discrete Applied Mathematics 167, 2014 (OEIS A003182: 2, 3, 5, 10, 30, 210, 16353). Kinds
of trees by their generating function (P. Flajolet, R. Sedgewick, "Analytic Combinatorics", 2009, sec. I.2: multisets).
All renamings, one swap of neighbours after another: H. F. Trotter, "Algorithm 115", Comm. ACM 5, 1962.
"""

from __future__ import annotations

import functools
import itertools
import math
from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np
import pytest

from shares.planning.chance import Chance
from shares.sharing.rule import Rule

NAMES = ("a", "b", "c", "d", "e", "f")
HIT = {name: (3 + 2 * i) / 17 for i, name in enumerate(NAMES)}
PARTS = 8
"""So many tests share the work; workers may take them in any order."""


# Functions as tables of their values: bit S is the value for the set S, and bit i of S stands for variable i.


def swaps(count: int) -> Iterator[int]:
    """Yield i for a swap of places i and i + 1, so that all orders of so many things come up, each once."""
    if count < 2:
        return
    inner = list(swaps(count - 1))
    for turn in range(len(inner) + 1):
        # The last thing walks through all places of the others, down and up again in turn.
        yield from range(count - 2, -1, -1) if turn % 2 == 0 else range(count - 1)
        if turn < len(inner):
            yield inner[turn] + (turn % 2 == 0)


def neighbours_swapped(tables: np.ndarray[Any, Any], i: int) -> np.ndarray[Any, Any]:
    """Give variables i and i + 1 each other's places, in many tables at once."""
    away = (1 << i + 1) - (1 << i)
    mask = np.uint64(sum(1 << s for s in range(64) if s >> i & 1 and not s >> i + 1 & 1))
    moved = (tables ^ tables >> np.uint64(away)) & mask
    return tables ^ moved ^ moved << np.uint64(away)


def kinds(tables: np.ndarray[Any, Any], variables: int) -> np.ndarray[Any, Any]:
    """Return one table of each kind: the least that renamings make."""
    least = now = tables
    for i in swaps(variables):
        now = neighbours_swapped(now, i)
        least = np.minimum(least, now)
    return np.unique(least)


@functools.cache
def functions_of_6() -> tuple[list[int], list[int]]:
    """Return how many kinds there are of 0 to 6 variables, and one function of each kind of 6.

    A function is a pair f <= g: its values without the last custodian, and with them. Names can be changed so that f
    is the one function of its kind.
    """
    every = kind = np.array([0, 1], dtype=np.uint64)
    counts = [len(kind)]
    for variables in range(1, 7):
        shift = np.uint64(1 << variables - 1)
        kind = kinds(np.concatenate([f | every[f & ~every == 0] << shift for f in kind]), variables)
        if variables < 6:
            every = np.concatenate([f | every[f & ~every == 0] << shift for f in every])
        counts.append(len(kind))
    return counts, kind.tolist()


def test_there_are_as_many_kinds_of_functions_as_published() -> None:
    assert functions_of_6()[0] == [2, 3, 5, 10, 30, 210, 16353]


def test_all_orders_come_up() -> None:
    order, seen = list(range(6)), {tuple(range(6))}
    for i in swaps(6):
        order[i], order[i + 1] = order[i + 1], order[i]
        seen.add(tuple(order))
    assert len(seen) == math.factorial(6) == 1 + len(list(swaps(6)))


def chances(names: Sequence[str]) -> np.ndarray[Any, Any]:
    """The chance that exactly those in the set are hit, for each of the 64 sets."""
    every = np.ones(1)
    for name in names:
        every = np.concatenate([every * (1 - HIT[name]), every * HIT[name]])
    return every


def least_sets(table: int) -> list[int]:
    sets = [s for s in range(64) if table >> s & 1]
    return [s for s in sets if not any(s >> i & 1 and table >> (s ^ 1 << i) & 1 for i in range(6))]


@pytest.mark.parametrize("part", range(PARTS))
def test_every_kind_of_function_of_6_custodians_against_brute_force(part: int) -> None:
    lot = np.random.default_rng(part)
    functions = functions_of_6()[1][1:-1]  # Nobody needed, and nobody enough, are no rules.
    assert len(functions) == 16351
    for table in functions[part::PARTS]:
        names = tuple(lot.permutation(NAMES).tolist())
        groups = [tuple(name for i, name in enumerate(names) if s >> i & 1) for s in least_sets(table)]
        rule = Rule(1, tuple(Rule(len(group), group) for group in groups))
        expected = math.fsum(chances(names)[[bool(table >> s & 1) for s in range(64)]])
        chance = Chance.of(rule)
        assert chance is not None
        assert math.isclose(chance.at(HIT), expected, rel_tol=1e-13)


# Trees in which each custodian stands once and each node has two children or more.


@functools.cache
def shapes(leaves: int) -> list[Any]:
    """Return every tree of thresholds over so many leaves: None for a leaf, else (need, children)."""
    if leaves == 1:
        return [None]
    return [
        (need, children)
        for sizes in partitions(leaves, leaves - 1)
        for children in forests(sizes)
        for need in range(1, len(children) + 1)
    ]


def partitions(total: int, most: int) -> Iterator[tuple[int, ...]]:
    if total == 0:
        yield ()
    for size in range(min(total, most), 0, -1):
        yield from ((size, *rest) for rest in partitions(total - size, size))


def forests(sizes: tuple[int, ...]) -> Iterator[tuple[Any, ...]]:
    """Yield every multiset of trees of these sizes."""
    alike = [
        itertools.combinations_with_replacement(shapes(size), len(list(group)))
        for size, group in itertools.groupby(sizes)
    ]
    yield from (tuple(itertools.chain(*chosen)) for chosen in itertools.product(*alike))


def counted(most: int) -> list[int]:
    """Return how many there are of 1 to so many leaves, by the generating function.

    With T(x) for trees, multisets of trees with y for each child are M(x, y) = exp(sum_j y^j T(x^j) / j), and k
    children have k needs: T = x + (dM/dy at y = 1) - T, the last for what has one child. And dM/dy at y = 1 is
    M(x, 1) S(x), with S(x) = sum_j T(x^j).
    """
    trees = [0, 1]
    for leaves in range(2, most + 1):
        known = [*trees, 0]  # What is not known yet comes in by one child alone, and is taken away again.
        sums, weighed = [0] * (leaves + 1), [0] * (leaves + 1)  # Of T(x^j), and of n [x^n] T(x^j) / j.
        for n, j in itertools.product(range(1, leaves + 1), repeat=2):
            if n % j == 0:
                sums[n] += known[n // j]
                weighed[n] += n // j * known[n // j]
        multisets = [1]
        for n in range(1, leaves + 1):
            multisets.append(sum(weighed[m] * multisets[n - m] for m in range(1, n + 1)) // n)
        trees.append(sum(multisets[leaves - n] * sums[n] for n in range(1, leaves + 1)))
    return trees[1:]


def named(shape: Any, names: Iterator[str]) -> Rule | str:
    return next(names) if shape is None else Rule(shape[0], tuple(named(child, names) for child in shape[1]))


def met(node: Rule | str, held: dict[str, np.ndarray[Any, Any]]) -> np.ndarray[Any, Any]:
    """Whether each of the 64 sets satisfies a node."""
    return held[node] if isinstance(node, str) else sum(met(child, held) for child in node.children) >= node.need


def test_every_kind_of_tree_of_thresholds_over_up_to_6_custodians_against_brute_force() -> None:
    assert [len(shapes(leaves)) for leaves in range(1, 7)] == counted(6)
    lot = np.random.default_rng(6)
    held = {name: np.arange(64) >> i & 1 for i, name in enumerate(NAMES)}
    for shape in itertools.chain(*map(shapes, range(2, 7))):
        rule = named(shape, iter(lot.permutation(NAMES).tolist()))
        assert isinstance(rule, Rule)
        chance = Chance.of(rule)
        assert chance is not None
        assert math.isclose(chance.at(HIT), math.fsum(chances(NAMES)[met(rule, held)]), rel_tol=1e-13)
