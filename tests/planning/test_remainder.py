"""A rule without some, and a rule with some there already: what satisfies them, tried for every set.

Checked against: the rule followed by hand (strategies.satisfies), over all subsets.
"""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st
from strategies import rules, satisfies, sets_of

from shares.planning.remainder import still_needed, without
from shares.sharing.rule import Rule


@given(rules(most=8), st.data())
def test_without_is_satisfied_by_exactly_those_left_who_satisfy_the_rule(rule: Rule, data: st.DataObject) -> None:
    paths = rule.paths()
    lost = data.draw(st.sets(st.sampled_from(sorted(paths))))
    left = without(rule, lost)
    for chosen in sets_of(paths):
        held = {path for name in chosen - lost for path in paths[name]}
        assert (left is not None and left.satisfied_by(chosen)) == satisfies(rule, held)


@given(rules(most=8), st.data())
def test_still_needed_is_satisfied_by_exactly_those_who_complete_the_rule(rule: Rule, data: st.DataObject) -> None:
    points = [path for _, path in rule.points()]
    there = data.draw(st.sets(st.sampled_from(points)))
    needed = still_needed(rule, there)
    assert (needed is None) == satisfies(rule, there)
    paths = rule.paths()
    for chosen in sets_of(paths):
        held = there | {path for name in chosen for path in paths[name]}
        assert (needed is None or needed.satisfied_by(chosen)) == satisfies(rule, held)


def test_a_group_that_is_lost_counts_no_more_than_its_own_place() -> None:
    group = Rule(2, ("north-pier", "south-pier"))
    rule = Rule(2, (group, "registrar", "dry-dock"))
    assert without(rule, {"north-pier"}) == Rule(2, ("registrar", "dry-dock"))
    assert without(rule, {"north-pier", "registrar"}) is None
