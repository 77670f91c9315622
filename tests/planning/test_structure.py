"""How few make or block a quorum, and which quorums are minimal: against every subset tried one by one.

Sources of the numbers: the definitions, tried out (``minimal_by_trying``); binomial coefficients (``math.comb``); that
the minimal blocking sets are the minimal sets that meet every quorum (hitting sets, Garey and Johnson 1979).
"""

from __future__ import annotations

import math
from unittest import mock

import pytest
from hypothesis import example, given
from strategies import HARBOUR, labelled, minimal_by_trying, rules, sets_of

from shares.planning import structure
from shares.planning.structure import MAX_LISTED, Bounds, Count, alone, dual, minimal_quorums, relabelled
from shares.sharing.rule import Rule

A, B, C, D, E = HARBOUR[:5]


def own(rule: Rule) -> dict[str, str]:
    return {name: name for name in rule.paths()}


@given(labelled())
def test_the_fewest_are_those_of_the_smallest_set(drawn: tuple[Rule, dict[str, str]]) -> None:
    rule, label_of = drawn
    sets = minimal_by_trying(rule, label_of)
    hitting = [chosen for chosen in sets_of(label_of.values()) if all(chosen & one for one in sets)]
    make, block = min(map(len, sets)), min(map(len, hitting))
    total = len({label_of[name] for name in rule.paths()})
    assert Count.of(relabelled(rule, label_of)) == Count(total, Bounds(make, make), Bounds(block, block))


@given(labelled())
def test_bounds_hold_where_not_all_sets_are_tried(drawn: tuple[Rule, dict[str, str]]) -> None:
    rule, label_of = drawn
    exact = Count.of(relabelled(rule, label_of))
    with mock.patch.object(structure, "MAX_NAMES", 0):
        bounds = Count.of(relabelled(rule, label_of))
        counted = minimal_quorums(rule)
    assert 1 <= bounds.quorum.low <= exact.quorum.low <= bounds.quorum.high <= exact.total
    assert 1 <= bounds.block.low <= exact.block.low <= bounds.block.high <= exact.total
    count = len(minimal_by_trying(rule, own(rule)))
    assert 1 <= counted.count.low <= count <= counted.count.high
    assert counted.count.exact or (counted.listed, counted.idle) == ((), ())


@given(rules(most=12))
@example(Rule(2, (Rule(2, (A, A, B)), C)))
@example(Rule(3, (A, A, A, B)))
def test_minimal_quorums_are_those_found_by_trying(rule: Rule) -> None:
    expected = minimal_by_trying(rule, own(rule))
    found = minimal_quorums(rule)
    assert found.count == Bounds(len(expected), len(expected))
    assert set(found.idle) == set(rule.paths()) - set().union(*expected)
    if len(expected) <= MAX_LISTED:
        assert {frozenset(quorum) for quorum in found.listed} == expected
        assert len(found.listed) == len(expected)
        sizes = [len(quorum) for quorum in found.listed]
        assert sizes == sorted(sizes)
    else:
        assert found.listed == ()


@given(rules(most=12))
def test_both_ways_to_count_agree(rule: Rule) -> None:
    """Where no custodian stands in two branches the polynomial way is taken; trying all sets gives the same."""
    places = structure._places(rule)
    if max(places.values()) == 1:
        table = structure.TruthTable(rule)
        assert structure._count(rule) == table.count
        assert set(structure._idle(rule)) == set(table.idle)
        assert {frozenset(quorum) for quorum in structure._minimal(rule)} == set(map(frozenset, table.minimal_sets()))


@given(rules(most=12))
def test_the_dual_is_satisfied_by_those_whose_loss_leaves_no_quorum(rule: Rule) -> None:
    everyone = frozenset(rule.paths())
    for lost in sets_of(everyone):
        assert dual(rule).satisfied_by(lost) == (not rule.satisfied_by(everyone - lost))
    assert dual(dual(rule)) == rule


@given(labelled())
def test_who_suffices_alone(drawn: tuple[Rule, dict[str, str]]) -> None:
    rule, label_of = drawn
    holders: dict[str, set[str]] = {}
    for name in rule.paths():
        holders.setdefault(label_of[name], set()).add(name)
    expected = {next(iter(chosen)) for chosen in minimal_by_trying(rule, label_of) if len(chosen) == 1}
    assert set(alone(rule, holders)) == expected


def test_holders_may_overlap_and_keep_their_order() -> None:
    rule = Rule(2, (A, B, C))
    assert alone(rule, {"z": {A, B}, "y": {A}, "x": {A, C}, "w": set()}) == ("z", "x")


def test_one_person_who_is_several_custodians_counts_once() -> None:
    rule = Rule(3, (A, B, C, D))
    label_of = {A: "keeper one", B: "keeper one", C: "keeper two", D: "keeper three"}
    assert Count.of(relabelled(rule, label_of)) == Count(3, Bounds(2, 2), Bounds(1, 1))
    assert Count.of(rule) == Count(4, Bounds(3, 3), Bounds(2, 2))


def test_weights_count_wherever_they_stand() -> None:
    rule = Rule(2, (Rule(3, (A, A, B, C)), Rule(2, (A, A, D))))
    assert Count.of(rule) == Count(4, Bounds(2, 2), Bounds(1, 1))
    assert minimal_quorums(rule).listed == ((A, B), (A, C))
    assert minimal_quorums(rule).idle == (D,)


@pytest.mark.parametrize(("need", "total"), [(1, 1), (1, 255), (2, 255), (128, 255), (254, 255), (255, 255), (20, 40)])
def test_wide_thresholds(need: int, total: int) -> None:
    names = tuple(f"pier {i}" for i in range(total))
    rule = Rule(need, names)
    ways = math.comb(total, need)
    assert Count.of(rule) == Count(total, Bounds(need, need), Bounds(total - need + 1, total - need + 1))
    found = minimal_quorums(rule)
    assert (found.count, found.idle) == (Bounds(ways, ways), ())
    assert len(found.listed) == (ways if ways <= MAX_LISTED else 0)


def test_a_wide_rule_with_few_quorums_lists_them() -> None:
    names = [f"pier {i}" for i in range(3 * 250)]
    groups = tuple(Rule(250, tuple(names[i : i + 250])) for i in range(0, 750, 250))
    found = minimal_quorums(Rule(2, groups))
    assert [len(quorum) for quorum in found.listed] == [500] * 3
    assert found.listed[0] == tuple(names[:500])


def test_a_branch_with_many_quorums_that_nobody_needs_is_not_gone_through() -> None:
    many = Rule(20, tuple(f"pier {i}" for i in range(40)))
    rule = Rule(2, (A, A, many))
    found = minimal_quorums(rule)
    assert found.listed == ((A,),)
    assert found.count == Bounds(1, 1)
    assert found.idle == tuple(many.paths())


def test_beyond_24_names_that_repeat_there_are_bounds() -> None:
    """Four windows of 15 piers each, the next five further on: three are needed, ten piers of each.

    By hand: two of any three windows overlap in five piers or none, so at least 15 are needed; piers 5 to 19 do.
    """
    names = [f"pier {i}" for i in range(30)]
    rule = Rule(3, tuple(Rule(10, tuple(names[i : i + 15])) for i in range(0, 20, 5)))
    assert rule.satisfied_by(set(names[5:20]))
    quorum = Count.of(rule).quorum
    assert quorum.low <= 15 <= quorum.high <= 30
    assert not quorum.exact
    found = minimal_quorums(rule)
    assert not found.count.exact
    assert found.listed == found.idle == ()


def test_beyond_24_names_bounds_that_meet_are_exact() -> None:
    names = tuple(f"pier {i}" for i in range(60))
    rule = Rule(2, (Rule(1, names), Rule(1, names[::-1])))
    assert Count.of(rule).quorum == Bounds(1, 1)


def test_forty_quorums_are_listed_and_more_are_counted() -> None:
    names = tuple(f"pier {i}" for i in range(41))
    assert len(minimal_quorums(Rule(1, names[:40])).listed) == MAX_LISTED == 40
    assert minimal_quorums(Rule(1, names)).listed == ()
    pairs = Rule(2, (Rule(1, names[:4]), Rule(1, names[4:14])))  # 4 * 10 of them
    repeated = Rule(1, (pairs, pairs))
    assert minimal_quorums(repeated).count == Bounds(40, 40)
    assert len(minimal_quorums(repeated).listed) == 40
    assert minimal_quorums(Rule(1, (pairs, pairs, names[20]))).listed == ()


def test_bounds_in_text() -> None:
    assert [str(Bounds(3, 3)), str(Bounds(1, 1200))] == ["3", "1 to 1,200"]
