"""Coverings and bounds, against published covering numbers and against exhaustive search.

Source: tests/vectors/covering_designs.json, which says of each value where it is from and how it was checked: the
published tables of covering numbers, Schonheim bounds (Gordon, Kuperberg, Patashnik 1995), the quadruple system on 8.
"""

from __future__ import annotations

import itertools
from typing import Any
from unittest import mock

import pytest
from coverings import TABLE, VECTORS, covered, fewest_by_trying, flat, names_in, pairs, pairs_of, parted, quorums_of
from hypothesis import example, given
from hypothesis import strategies as st
from strategies import HARBOUR, rules

from shares.evidence import covering
from shares.evidence.covering import Chance, gather, greedy, lower_bound, meet, partners, schonheim_bound, trimmed
from shares.evidence.gathering import Tree, members
from shares.sharing.rule import Rule

A, B, C, D, E = HARBOUR[:5]


@pytest.mark.parametrize("row", VECTORS["coverings_t2"], ids=lambda row: f"{row['v']}-{row['k']}")
def test_the_published_schonheim_bounds(row: dict[str, Any]) -> None:
    assert schonheim_bound(row["v"], row["k"]) == row["schonheim_bound"] <= row["C"]
    # The published coverings are what they say, and none beats the bound.
    assert covered([sum(1 << point for point in block) for block in row["blocks"]]) == set(
        itertools.combinations(range(row["v"]), 2)
    )
    tree = Tree(flat(row["k"], row["v"]))
    assert lower_bound(tree, partners(tree, Chance(0)).wanted) == row["schonheim_bound"]


def test_the_published_bound_for_triples() -> None:
    system = VECTORS["sqs8"]
    assert schonheim_bound(system["v"], system["k"], system["t"]) == system["C"] == len(system["blocks"])


@given(st.integers(2, 40), st.integers(2, 40))
def test_for_k_of_n_the_bound_is_that_of_schonheim(need: int, total: int) -> None:
    if need <= total:
        tree = Tree(flat(need, total))
        assert lower_bound(tree, partners(tree, Chance(0)).wanted) == schonheim_bound(total, need)


@pytest.mark.parametrize(("v", "k"), [(v, k) for v in range(3, 7) for k in range(2, v + 1)])
def test_tiny_tables_are_the_true_optimum(v: int, k: int) -> None:
    blocks = [frozenset(map(str, block)) for block in itertools.combinations(range(v), k)]
    optimum = fewest_by_trying(blocks, {frozenset(map(str, pair)) for pair in itertools.combinations(range(v), 2)})
    if k > 2 and v > k:
        assert TABLE[v, k] == optimum
    tree = Tree(flat(k, v))
    wanted = partners(tree, Chance(0)).wanted
    assert lower_bound(tree, wanted) <= optimum <= min(len(greedy(tree, wanted, Chance(seed))) for seed in range(5))


@given(rules(most=7))
@example(Rule(4, (A, A, A, B, B, C, D, E)))
@example(Rule(2, (Rule(2, (A, B, C)), Rule(1, (D, E)))))
def test_the_bound_is_never_above_the_optimum(rule: Rule) -> None:
    """Exhaustive search over all minimal quorums, with tangles and without."""
    for one in (rule, parted(rule)):
        quorums = quorums_of(one)
        tree = Tree(one)
        bound = lower_bound(tree, partners(tree, Chance(0)).wanted)
        assert bound <= fewest_by_trying(list(quorums), pairs_of(quorums))


@given(rules(most=9))
@example(Rule(2, (Rule(2, (A, B)), Rule(1, (A, C)))))
def test_partners_are_those_in_one_minimal_quorum(rule: Rule) -> None:
    for one in (rule, parted(rule)):
        tree = Tree(one)
        found = partners(tree, Chance(1))
        names = {frozenset((tree.names[a], tree.names[b])) for a, b in pairs(found.wanted)}
        assert names == pairs_of(quorums_of(one))
        assert all(
            found.wanted[a] >> b & 1 == found.wanted[b] >> a & 1
            for a in range(3)
            for b in range(3)
            if max(a, b) < len(tree.names)
        )
        if tree.tangled:
            assert covered(found.known) >= pairs(found.wanted)
        else:
            assert found.known == []


@given(rules(most=9), st.integers(0, 1 << 70))
def test_a_greedy_covering_covers_and_has_nothing_superfluous(rule: Rule, seed: int) -> None:
    for one in (rule, parted(rule)):
        tree, quorums = Tree(one), quorums_of(one)
        wanted, known = partners(tree, Chance(seed))
        found = greedy(tree, wanted, Chance(seed), known=known)
        assert all({tree.names[number] for number in members(quorum)} in quorums for quorum in found)
        assert covered(found) >= pairs(wanted)
        for left_out in range(len(found)):
            assert not covered(found[:left_out] + found[left_out + 1 :]) >= pairs(wanted)
        assert found == greedy(tree, wanted, Chance(seed), known=known)


def test_where_a_gathering_fails_a_known_quorum_is_taken() -> None:
    """With more than 24 custodians in tangles there is no table; what was found once is not lost."""
    names = tuple(f"custodian {number}" for number in range(26))
    rule = Rule(2, (Rule(2, names), Rule(2, names[:2])))
    tree = Tree(rule)
    assert tree.table is None
    wanted, known = partners(tree, Chance(0))
    assert covered(known) >= pairs(wanted)
    lost = [0] * 26
    lost[5], lost[7] = 1 << 7, 1 << 5  # No quorum needs both; a quorum said to be known is believed.
    assert gather(tree, (5, 7), lost, Chance(0)) is None
    assert greedy(tree, lost, Chance(0)) == []
    assert greedy(tree, lost, Chance(0), known=[0b10100011]) == [0b10100011]


@given(rules(most=9))
def test_up_to_24_custodians_a_table_decides_where_tries_fail(rule: Rule) -> None:
    tree, quorums = Tree(rule), quorums_of(rule)
    if tree.tangled:
        with mock.patch.object(covering, "_TRIES", 0):
            found = gather(tree, (0, 1), tree.places_of, Chance(0)) if len(tree.names) > 1 else None
        holding = [one for one in quorums if set(tree.names[:2]) <= one]
        assert (
            {tree.names[number] for number in members(found)} in holding
            if found
            else not holding or len(tree.names) == 1
        )


def test_trimming_leaves_out_the_last_first() -> None:
    wanted = [0b1110, 0b1101, 0b1011, 0b0111]
    assert trimmed([0b0111, 0b1011, 0b1100, 0b0011, 0b1101], wanted) == [0b0111, 0b1011, 0b1100]
    assert trimmed([0b0011], [0, 0, 0, 0]) == []
    left = list(wanted)
    meet(left, 0b0111)
    assert left == [0b1000, 0b1000, 0b1000, 0b0111]


def test_chance_reaches_everything_and_repeats_itself() -> None:
    chance, again = Chance(7), Chance(7)
    drawn = [chance.below(6) for _ in range(600)]
    assert drawn == [again.below(6) for _ in range(600)]
    assert min(map(drawn.count, range(6))) > 60
    assert {Chance(seed).below(1000) for seed in range(5)} != {Chance(0).below(1000)}
    assert {chance.member(0b1000101) for _ in range(100)} == {0, 2, 6}
    # Knuth, vol. 2, sec. 3.3.4, line 26 of the table: the multiplier; the first state is the increment.
    assert Chance(0).below(1 << 31) == 1442695040888963407 >> 33


def test_only_those_who_are_needed_are_gathered() -> None:
    tree = Tree(Rule(2, (Rule(2, (A, B, C)), Rule(1, (D, E)))))
    quorum = gather(tree, (0, 4), [0] * 5, Chance(3))
    assert quorum is not None
    assert names_in(tree, quorum) & {D, E} == {E}
    assert gather(tree, (3, 4), [0] * 5, Chance(3)) is None
