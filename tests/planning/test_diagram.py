"""Decision diagrams, walked for every set of custodians; every function that a rule of up to 5 custodians can have.

Sources of the numbers: the count of monotone functions of n variables is Dedekind's (OEIS A000372: 2, 3, 6, 20, 168,
7581); the nodes of a threshold are k(n - k + 1), as one counts them in the grid of (asked, met).
"""

from __future__ import annotations

import itertools
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import rules, sets_of

from shares.planning import diagram as diagrams
from shares.planning.chance import Chance
from shares.planning.diagram import MAX_CUSTODIANS, Diagram
from shares.planning.truth_table import MAX_NAMES
from shares.sharing.rule import Rule


def walked(diagram: Diagram, held: frozenset[str]) -> bool:
    place = 0
    for name, level in zip(diagram.order, diagram.levels, strict=True):
        place = level[place][name in held]
    return diagram.ends[place]


@given(rules(), st.randoms())
def test_a_walk_says_what_the_rule_says_in_any_order(rule: Rule, chosen: object) -> None:
    order = list(rule.paths())
    chosen.shuffle(order)  # type: ignore[attr-defined]
    diagram = Diagram.of(rule, order)
    assert diagram is not None
    assert len(diagram.levels[0]) == 1
    for held in sets_of(order):
        assert walked(diagram, held) == rule.satisfied_by(held)


@pytest.mark.parametrize(("need", "total"), [(1, 1), (2, 3), (5, 7), (128, 255), (255, 255), (1, 255)])
def test_a_threshold_takes_a_grid_of_nodes(need: int, total: int) -> None:
    names = tuple(f"pier {i}" for i in range(total))
    diagram = Diagram.of(Rule(need, names), names)
    assert diagram is not None
    asking = [without != held for level in diagram.levels for without, held in level]
    assert sum(asking) == need * (total - need + 1)


def monotone(names: int) -> list[int]:
    """Every monotone function of so many names, as the table of its values: bit S is its value for the set S."""
    if names == 0:
        return [0, 1]
    below = monotone(names - 1)
    return [low | high << (1 << names - 1) for low, high in itertools.product(below, repeat=2) if not low & ~high]


NAMES = ("a", "b", "c", "d", "e")


def by_quorums(table: int, names: tuple[str, ...]) -> Rule:
    """The rule of all minimal quorums: one custodian stands in many branches."""
    sets = [s for s in range(1 << len(names)) if table >> s & 1]
    minimal = [s for s in sets if not any(other != s and other & ~s == 0 for other in sets)]
    groups = [tuple(name for i, name in enumerate(names) if s >> i & 1) for s in minimal]
    return Rule(1, tuple(Rule(len(group), group) for group in groups))


def test_every_function_of_up_to_5_custodians_against_brute_force() -> None:
    counts = []
    for total in range(1, len(NAMES) + 1):
        names, tables = NAMES[:total], monotone(total)
        counts.append(len(tables))
        hit = {name: (3 + 2 * i) / 17 for i, name in enumerate(names)}
        chances = [
            math.prod(hit[name] if s >> i & 1 else 1 - hit[name] for i, name in enumerate(names))
            for s in range(1 << total)
        ]
        for table in tables[1:-1]:  # Nobody needed, and nobody enough, are no rules.
            rule = by_quorums(table, names)
            expected = math.fsum(chance for s, chance in enumerate(chances) if table >> s & 1)
            chance = Chance.of(rule)
            assert chance is not None
            assert math.isclose(chance.at({name: hit[name] for name in rule.paths()}), expected, rel_tol=1e-13)
    assert counts == [3, 6, 20, 168, 7581]


def trees(names: tuple[str, ...]) -> list[Rule | str]:
    """Every tree of thresholds in which each name stands once, but for groups of one."""
    if len(names) == 1:
        return list(names)
    return [
        Rule(need, children)
        for blocks in partitions(names)
        if len(blocks) > 1
        for children in itertools.product(*map(trees, blocks))
        for need in range(1, len(children) + 1)
    ]


def partitions(names: tuple[str, ...]) -> list[list[tuple[str, ...]]]:
    if not names:
        return [[]]
    first, rest = names[0], names[1:]
    found = []
    for size in range(len(rest) + 1):
        for others in itertools.combinations(rest, size):
            left = tuple(name for name in rest if name not in others)
            found += [[(first, *others), *more] for more in partitions(left)]
    return found


def test_every_tree_of_thresholds_over_up_to_5_custodians_against_brute_force() -> None:
    hit = {name: (3 + 2 * i) / 17 for i, name in enumerate(NAMES)}
    for total in range(2, len(NAMES) + 1):
        sets = sets_of(NAMES[:total])
        chances = [math.prod(hit[n] if n in held else 1 - hit[n] for n in NAMES[:total]) for held in sets]
        for rule in trees(NAMES[:total]):
            assert isinstance(rule, Rule)
            expected = math.fsum(c for held, c in zip(sets, chances, strict=True) if rule.satisfied_by(held))
            chance = Chance.of(rule)
            assert chance is not None
            assert math.isclose(chance.at(hit), expected, rel_tol=1e-13)


def entangled(total: int) -> Rule:
    """Many groups over the same custodians: each leaves one out."""
    names = tuple(f"pier {i:02}" for i in range(total))
    return Rule(total, tuple(Rule(total // 2, names[:i] + names[i + 1 :]) for i in range(total)))


def test_24_custodians_in_24_branches_each() -> None:
    rule = entangled(24)
    chance = Chance.of(rule)
    assert chance is not None
    # With 12 present each of their own groups has 11 of them; with 13 every group has 12: as in test_truth_table.
    assert chance.at(dict.fromkeys(rule.paths(), 0.5)) == sum(math.comb(24, i) for i in range(13, 25)) / 2**24


def test_what_is_too_much_is_said_to_be() -> None:
    names = tuple(f"pier {i}" for i in range(MAX_CUSTODIANS + 1))
    halves = Rule(2, (Rule(1, names[:200]), Rule(1, names[200:])))
    assert Diagram.of(halves, names) is None
    # Pairs whose two custodians are asked far apart: each first one must be kept in mind.
    pairs = Rule(1, tuple(Rule(2, (f"east {i}", f"west {i}")) for i in range(20)))
    apart = [f"east {i}" for i in range(20)] + [f"west {i}" for i in range(20)]
    assert Diagram.of(pairs, apart) is None
    together = Diagram.of(pairs, list(pairs.paths()))
    assert together is not None
    assert sum(map(len, together.levels)) < 200
    assert diagrams.MAX_STEPS < diagrams.MAX_STEPS_OF_FEW < 2**20
    # Up to 24 custodians are worth more steps.
    assert diagrams.FEW == MAX_NAMES
    pairs = Rule(1, tuple(Rule(2, (f"east {i}", f"west {i}")) for i in range(12)))
    assert Diagram.of(pairs, [f"east {i}" for i in range(12)] + [f"west {i}" for i in range(12)]) is not None


def test_200_custodians_with_repeats_are_too_much() -> None:
    names = tuple(f"pier {i}" for i in range(200))
    rows = tuple(Rule(2, names[i : i + 10]) for i in range(0, 200, 10))
    columns = tuple(Rule(2, names[i::20]) for i in range(20))
    assert Chance.of(Rule(2, (Rule(5, rows), Rule(5, columns)))) is None
