"""Truth tables, against every subset tried one by one, and against binomial coefficients.

Sources of the numbers: the counts of k-subsets (``math.comb``); the rule followed by hand (``strategies.satisfies``).
"""

from __future__ import annotations

import itertools
import math

import pytest
from hypothesis import given
from strategies import labelled, minimal_by_trying, sets_of

from shares.planning.structure import relabelled
from shares.planning.truth_table import MAX_NAMES, TruthTable
from shares.sharing.rule import Rule


@given(labelled())
def test_a_table_agrees_with_trying_every_set(drawn: tuple[Rule, dict[str, str]]) -> None:
    rule, label_of = drawn
    expected = minimal_by_trying(rule, label_of)
    table = TruthTable(relabelled(rule, label_of))
    found = [frozenset(chosen) for chosen in table.minimal_sets()]
    assert set(found) == expected
    assert len(found) == table.count == len(expected)
    assert table.fewest == min(map(len, expected))
    hitting = [chosen for chosen in sets_of(label_of.values()) if all(chosen & one for one in expected)]
    assert table.fewest_blocking == min(map(len, hitting))
    assert set(table.idle) == set(label_of.values()) - set().union(*expected)


@given(labelled())
def test_a_minimal_set_with_some_names_is_found_where_there_is_one(drawn: tuple[Rule, dict[str, str]]) -> None:
    rule, label_of = drawn
    expected = minimal_by_trying(rule, label_of)
    table = TruthTable(relabelled(rule, label_of))
    for one, other in itertools.product(table.names, repeat=2):
        found = table.minimal_set_with(one, other)
        holding = {chosen for chosen in expected if {one, other} <= chosen}
        assert frozenset(found) in holding if found else not holding


@pytest.mark.parametrize(("need", "total"), [(1, 24), (12, 24), (24, 24), (2, 3), (1, 1), (7, 16), (16, 17)])
def test_thresholds_have_as_many_minimal_sets_as_there_are_combinations(need: int, total: int) -> None:
    names = [f"pier {i}" for i in range(total)]
    table = TruthTable(Rule(need, tuple(names)))
    assert (table.count, table.fewest, table.idle) == (math.comb(total, need), need, ())
    assert table.fewest_blocking == total - need + 1


def test_weights_are_added() -> None:
    rule = Rule(5, ("a",) * 4 + ("b",) * 3 + ("c", "d"))
    table = TruthTable(rule)
    assert set(table.minimal_sets()) == {("a", "b"), ("a", "c"), ("a", "d"), ("b", "c", "d")}


def test_24_names_are_few_enough_for_the_largest_rule() -> None:
    """Many groups over the same names: nothing but trying all sets tells the answer, and it is told in seconds."""
    assert MAX_NAMES == 24
    names = [f"pier {i:02}" for i in range(24)]
    groups = tuple(Rule(12, tuple(names[:i] + names[i + 1 :])) for i in range(24))
    table = TruthTable(Rule(24, groups))
    # With 12 present, each of their own groups has 11 of them; with 13, every group has 12.
    assert (table.fewest, table.fewest_blocking, table.count) == (13, 12, math.comb(24, 13))
