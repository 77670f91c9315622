"""Improving coverings: the same is covered, with no more quorums, and they stay minimal.

Source: the published covering numbers, tests/vectors/covering_designs.json.
"""

from __future__ import annotations

import pytest
from coverings import TABLE, covered, flat, pairs, parted, quorums_of
from hypothesis import given
from strategies import rules

from shares.evidence.covering import Chance, greedy, lower_bound, partners
from shares.evidence.gathering import Tree, members
from shares.evidence.improving import improved
from shares.sharing.rule import Rule


@pytest.mark.parametrize(("v", "k"), [(10, 3), (15, 4), (13, 6), (14, 6), (15, 3)])
def test_a_long_covering_becomes_as_short_as_the_published_one(v: int, k: int) -> None:
    tree = Tree(flat(k, v))
    wanted, _ = partners(tree, Chance(0))
    longest = max((greedy(tree, wanted, Chance(seed)) for seed in range(20)), key=len)
    assert len(longest) > TABLE[v, k]
    found = improved(tree, longest, wanted, Chance(0), fewest=TABLE[v, k], work=3_000_000)
    assert len(found) == TABLE[v, k]
    assert covered(found) == pairs(wanted)
    assert {one.bit_count() for one in found} == {k}


@given(rules(most=9))
def test_what_is_improved_covers_the_same_with_minimal_quorums(rule: Rule) -> None:
    rule = parted(rule)
    tree, quorums = Tree(rule), quorums_of(rule)
    wanted, _ = partners(tree, Chance(0))
    for seed in range(3):
        before = greedy(tree, wanted, Chance(seed))
        after = improved(tree, before, wanted, Chance(seed), fewest=lower_bound(tree, wanted), work=20_000)
        assert len(after) <= len(before)
        assert covered(after) >= pairs(wanted)
        assert all({tree.names[number] for number in members(quorum)} in quorums for quorum in after)


def test_without_work_or_need_nothing_changes() -> None:
    tree = Tree(flat(3, 7))
    wanted, _ = partners(tree, Chance(0))
    before = max((greedy(tree, wanted, Chance(seed)) for seed in range(50)), key=len)
    assert improved(tree, before, wanted, Chance(0), fewest=7, work=0) == before
    assert improved(tree, before, wanted, Chance(0), fewest=len(before), work=1_000_000) == before
    assert improved(tree, [], [0] * 7, Chance(0), fewest=0, work=1_000_000) == []


@pytest.mark.parametrize(
    "rule",
    [
        Rule(2, tuple(Rule(3, tuple(f"{group}{i}" for i in range(6))) for group in "abcd")),
        Rule(3, (Rule(2, tuple("abcdef")), *"ghijklm")),
        Rule(6, ("a", "a", "b", "b", *"cdefghijklm")),
    ],
    ids=["groups", "a group", "weights"],
)
def test_exchanges_keep_quorums_of_groups_and_weights_minimal(rule: Rule) -> None:
    tree = Tree(rule)
    wanted, _ = partners(tree, Chance(0))
    longest = max((greedy(tree, wanted, Chance(seed)) for seed in range(10)), key=len)
    found = improved(tree, longest, wanted, Chance(0), fewest=lower_bound(tree, wanted), work=1_000_000)
    assert len(found) < len(longest)
    assert covered(found) >= pairs(wanted)
    for one in found:
        company = {tree.names[number] for number in members(one)}
        assert rule.satisfied_by(company)
        assert not any(rule.satisfied_by(company - {name}) for name in company)


def test_a_search_in_vain_gives_back_what_there_was() -> None:
    """No four quorums cover 7 custodians in fours: the published number is 5, and the Schonheim bound 4."""
    tree = Tree(flat(4, 7))
    wanted, _ = partners(tree, Chance(0))
    before = min((greedy(tree, wanted, Chance(seed)) for seed in range(10)), key=len)
    assert len(before) == TABLE[7, 4] == lower_bound(tree, wanted) + 1
    assert improved(tree, before, wanted, Chance(0), fewest=4, work=100_000) == before
