"""Gathering quorums, against every minimal quorum found by trying all sets.

Source: the definitions, tried out (``minimal_by_trying``).
"""

from __future__ import annotations

import pytest
from coverings import names_in, parted, quorums_of
from hypothesis import example, given
from hypothesis import strategies as st
from strategies import HARBOUR, rules, sets_of

from shares.evidence.gathering import Gathering, Tree, members
from shares.sharing.rule import Rule

A, B, C, D, E = HARBOUR[:5]


def test_members_are_the_bits_that_are_set() -> None:
    for chosen in range(300):
        assert sum(1 << number for number in members(chosen)) == chosen
        assert list(members(chosen)) == sorted(set(members(chosen)))


@given(rules(most=9), st.data())
@example(Rule(3, (A, A, B, C, D)), None)
@example(Rule(2, (Rule(1, (A, B)), C, C)), None)
def test_who_may_join_is_who_stands_in_a_minimal_quorum_with_all_who_did(
    rule: Rule, data: st.DataObject | None
) -> None:
    tree = Tree(parted(rule))
    expected = quorums_of(parted(rule))
    assert not tree.tangled
    gathering = Gathering(tree)
    while True:
        chosen = names_in(tree, gathering.chosen)
        holding = [quorum for quorum in expected if chosen <= quorum]
        assert names_in(tree, gathering.open) == set().union(*holding) - chosen
        if not gathering.open:
            assert chosen in expected
            return
        places = list(members(gathering.open))
        gathering.add(data.draw(st.sampled_from(places)) if data else places[-1])


@given(rules(most=9))
def test_with_tangles_a_gathering_still_makes_a_quorum(rule: Rule) -> None:
    tree = Tree(rule)
    assert tree.tangled == any(count > 1 for count in map(int.bit_count, tree.places_of))
    gathering = Gathering(tree)
    while gathering.open:
        gathering.add(next(members(gathering.open)))
    assert rule.satisfied_by(names_in(tree, gathering.chosen))


@given(rules(most=9))
@example(Rule(4, (A, A, A, B, B, C, D, E)))
def test_the_largest_quorums(rule: Rule) -> None:
    rule = parted(rule)
    tree, expected = Tree(rule), quorums_of(rule)
    even = all(node.even for node in tree.nodes)
    most = max(map(len, expected))
    assert tree.largest()[0] == most if even else tree.largest()[0] >= most
    for place, bound in enumerate(tree.largest_with()):
        sizes = [len(quorum) for quorum in expected if tree.names[place] in quorum]
        assert bound == max(sizes) if even else bound >= max(sizes, default=0)
    for node, bound in zip(tree.nodes, tree.largest(), strict=True):
        assert bound >= max(len(quorum & names_in(tree, node.places)) for quorum in expected)


@pytest.mark.parametrize("weights", [(5, 3, 2, 2, 1), (9, 4, 4, 4), (1, 1, 1), (7,), (6, 6, 1)])
def test_weights_leave_in_whoever_can_be_of_use(weights: tuple[int, ...]) -> None:
    names = "abcde"[: len(weights)]
    for need in range(1, sum(weights) + 1):
        rule = Rule(need, tuple(name for name, weight in zip(names, weights, strict=True) for _ in range(weight)))
        expected = [
            one
            for one in sets_of(names)
            if rule.satisfied_by(one) and not any(rule.satisfied_by(one - {name}) for name in one)
        ]
        tree = Tree(rule)
        assert names_in(tree, tree.joinable) == set().union(*expected)


def test_a_tree_tells_what_it_is() -> None:
    flat, weights, deep = Rule(2, (A, B, C)), Rule(2, (A, A, B)), Rule(2, (Rule(1, (A, B)), C))
    tangled = Rule(2, (Rule(1, (A, B)), Rule(1, (A, C))))
    assert [Tree(rule).flat for rule in (flat, weights, deep, tangled)] == [True, False, False, False]
    assert [Tree(rule).tangled for rule in (flat, weights, deep, tangled)] == [False, False, False, True]
    tree = Tree(tangled)
    assert tree.names == (A, B, C)
    assert tree.several == 0b001
    assert tree.places(0b101) == 0b1101
    assert tree.table is not None
    assert Tree(flat).table is None


def test_weights_and_branches_at_one_node() -> None:
    """A branch that was met stays open for its others, when what else has its weight is closed."""
    tree = Tree(Rule(3, (A, A, D, Rule(2, (B, C, E)))))
    gathering = Gathering(tree)
    for name, others in ((A, {B, C, D, E}), (B, {C, E}), (C, set())):
        gathering.add(tree.names.index(name))
        assert names_in(tree, gathering.open) == others


def test_the_largest_quorum_with_a_light_custodian() -> None:
    """With weights 1, 2, 2, 2 and 6 needed, whoever has 1 leaves room for two others: with three they would be idle."""
    assert Tree(Rule(6, (A, B, B, C, C, D, D))).largest_with() == [3, 3, 3, 3]
