"""Rosters: what they cover, that no drill is superfluous, and that the bound holds; for any rule and any past.

Source: published covering numbers, tests/vectors/covering_designs.json; minimal quorums by trying all sets.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from unittest import mock

import pytest
from coverings import TABLE, fewest_by_trying, flat, pairs_of, parted, quorums_of
from hypothesis import example, given
from hypothesis import strategies as st
from strategies import HARBOUR, rules

from shares.errors import ParameterError
from shares.evidence import design
from shares.evidence.roster import FEW_QUORUMS, Covers, Roster, roster
from shares.sharing.rule import Rule

A, B, C, D, E = HARBOUR[:5]
TIDE = Rule(2, (Rule(2, (A, B, C)), Rule(1, ("registrar", Rule(2, ("auditor-east", "auditor-west"))))))


@pytest.fixture
def little_effort() -> Iterator[None]:
    """Short searches: what a roster must be does not depend on them."""
    with mock.patch.multiple(design, _ROUNDS=1, _STARTS=3, _WORK=3_000):
        yield


def groups_in(drill: tuple[str, ...], groups: tuple[tuple[str, ...], ...]) -> set[tuple[str, ...]]:
    return {group for group in groups if set(group) <= set(drill)}


def check(rule: Rule, found: Roster, past: list[frozenset[str]], covers: Covers) -> None:
    quorums = quorums_of(rule)
    order = list(rule.paths())
    wanted = quorums if covers == "quorums" else pairs_of(quorums) | {one for one in quorums if len(one) == 1}
    held = [company for company in past if any(quorum <= company for quorum in quorums)]
    assert found.covers == covers or max(map(len, quorums)) == 1
    # What was covered and what is left are all there is, told apart rightly, each group in the rule's order.
    groups = [*found.covered, *found.left]
    assert len(groups) == len(wanted)
    assert {frozenset(group) for group in groups} == wanted
    assert all(list(group) == sorted(group, key=order.index) for group in (*groups, *found.drills))
    assert {frozenset(one) for one in found.covered} == {
        one for one in wanted if any(one <= company for company in held)
    }
    # Every drill is a minimal quorum, all is covered, and without any one of them something is missed.
    assert all(frozenset(drill) in quorums for drill in found.drills)
    hits = [groups_in(drill, found.left) for drill in found.drills]
    assert set().union(*hits) == set(found.left)
    for number in range(len(hits)):
        assert set().union(*hits[:number], *hits[number + 1 :]) != set(found.left)
    assert found.bound <= len(found.drills)
    assert found.cycle_bound <= found.cycle
    assert len(found.drills) <= found.cycle
    assert found.shortest == (found.bound == len(found.drills))
    if covers == "pairs":
        needed = set().union(*(quorum for quorum in quorums if len(quorum) > 1))
        apart = {frozenset(pair) for pair in itertools.combinations(needed, 2)} - pairs_of(quorums)
        assert {frozenset(pair) for pair in found.apart} == apart
        assert len(found.apart) == len(apart)


@pytest.mark.usefixtures("little_effort")
@given(rules(most=9), st.data(), st.sampled_from(["pairs", None]), st.integers())
@example(TIDE, None, "pairs", 0)
@example(Rule(2, (Rule(2, (A, B)), Rule(1, (A, C)))), None, "pairs", 0)
@example(Rule(3, (A, A, A, B, C, D)), None, "pairs", 0)
def test_a_roster_is_what_it_says(rule: Rule, data: st.DataObject | None, covers: Covers | None, seed: int) -> None:
    for one in (rule, parted(rule)):
        companies = st.lists(st.frozensets(st.sampled_from([*one.paths(), "nobody"])), max_size=4)
        past = data.draw(companies) if data else []
        found = roster(one, past, covers=covers, seed=seed)
        check(one, found, past, covers or ("quorums" if len(quorums_of(one)) <= FEW_QUORUMS else "pairs"))
        assert found == roster(one, past, covers=covers, seed=seed)


@pytest.mark.usefixtures("little_effort")
@given(rules(most=7), st.data())
def test_the_bounds_are_never_above_the_optimum(rule: Rule, data: st.DataObject) -> None:
    past = data.draw(st.lists(st.frozensets(st.sampled_from(list(rule.paths()))), max_size=2))
    found = roster(rule, past, covers="pairs")
    quorums = list(quorums_of(rule))
    assert found.bound <= fewest_by_trying(quorums, {frozenset(group) for group in found.left})
    whole = {frozenset(group) for group in (*found.left, *found.covered)}
    assert found.cycle_bound <= fewest_by_trying(quorums, whole)


@pytest.mark.parametrize(("k", "v"), [(k, v) for v, k in sorted(TABLE) if v <= 13])
def test_published_covering_numbers_are_the_sizes(k: int, v: int) -> None:
    found = roster(flat(k, v), covers="pairs", seed=1)
    assert len(found.drills) == found.cycle == TABLE[v, k]
    assert found.bound_by == "Schonheim 1964" or found.method == "every minimal quorum"


@pytest.mark.usefixtures("little_effort")
@pytest.mark.parametrize("rule", [flat(3, 13), flat(3, 7), flat(4, 15), TIDE, Rule(2, (flat(2, 4), A, B))], ids=str)
def test_a_roster_can_be_followed(rule: Rule) -> None:
    whole = roster(rule, covers="pairs")
    for held in range(len(whole.drills) + 1):
        rest = roster(rule, whole.drills[:held], covers="pairs")
        assert len(rest.drills) <= len(whole.drills) - held
        assert (rest.cycle, rest.cycle_bound) == (len(whole.drills), whole.bound)
    assert (rest.drills, rest.left, rest.bound, rest.shortest) == ((), (), 0, True)


def test_a_large_company_covers_all_pairs_in_it() -> None:
    names = list(flat(3, 13).paths())
    found = roster(flat(3, 13), [names[:10]])
    assert len(found.covered) == 45
    assert len(found.left) == 13 * 12 // 2 - 45
    # Each of the three others is to meet twelve, two at a time: six drills each, and three pairs of them save three.
    assert found.bound <= len(found.drills) <= 18
    assert roster(flat(3, 13), [names]).drills == ()


@pytest.mark.parametrize("total", [1, 2, 12, 13, 40, 41, 60])
def test_whoever_recovers_alone_rehearses_alone(total: int) -> None:
    found = roster(flat(1, total))
    assert found.drills == found.left == tuple((name,) for name in flat(1, total).paths())
    assert (found.covers, found.method, found.cycle, found.shortest) == ("quorums", "every minimal quorum", total, True)
    after = roster(flat(1, total), found.drills[:1])
    assert (after.covered, len(after.drills)) == (found.drills[:1], total - 1)


def test_alone_and_in_pairs() -> None:
    found = roster(Rule(1, ("registrar", flat(2, 7))))
    assert found.drills[0] == ("registrar",)
    assert len(found.drills) == found.bound == 1 + 21
    assert found.method == "every pair is a quorum"


def test_few_quorums_all_rehearse_unless_pairs_are_asked_for() -> None:
    found = roster(TIDE)
    assert (found.covers, len(found.drills), found.bound) == ("quorums", 6, 6)
    assert {frozenset(drill) for drill in found.drills} == quorums_of(TIDE)
    found = roster(TIDE, covers="pairs")
    assert (found.covers, len(found.drills)) == ("pairs", 4)
    assert found.apart == (("registrar", "auditor-east"), ("registrar", "auditor-west"))
    assert any("never need each other" in note for note in found.notes)
    assert (roster(flat(3, 5)).covers, len(roster(flat(3, 5)).drills)) == ("quorums", 10)
    assert roster(flat(2, 6)).covers == "pairs"  # 15 quorums are more than twelve.
    assert len(roster(flat(2, 6), covers="quorums").drills) == 15


@pytest.mark.parametrize("rule", [flat(3, 8), flat(2, 30)])
def test_too_many_quorums_are_refused(rule: Rule) -> None:
    with pytest.raises(ParameterError, match="minimal quorums, and 40 at most"):
        roster(rule, covers="quorums")


def test_a_past_drill_of_no_quorum_is_not_counted_and_said() -> None:
    names = list(flat(3, 7).paths())
    found = roster(flat(3, 7), [names[:2], {"nobody"}, [*names[:2], "nobody"]])
    assert found.covered == ()
    assert found.notes == ("3 past drills of no quorum of this rule: not counted.",)
    assert roster(flat(3, 7), [{*names[:3], "nobody"}]).notes == ()


def test_whom_nobody_needs_is_on_no_roster() -> None:
    found = roster(Rule(4, (A, A, B, B, C, C, D)), covers="pairs")
    assert {name for drill in found.drills for name in drill} == {A, B, C}
    assert f"{D}: in no minimal quorum, so on no roster." in found.notes


def test_no_plane_of_order_6() -> None:
    found = roster(flat(7, 43))
    assert found.bound == 43 < len(found.drills)
    assert found.method == "greedy, improved by local search"
    assert [note for note in found.notes if "order 6 " in note and "Bruck and Ryser" in note]


def test_a_large_tangle_says_what_is_not_certain() -> None:
    """Above 24 custodians, with some in two branches, nobody tries all sets: what was not found may still be there."""
    names = tuple(f"custodian {number}" for number in range(26))
    found = roster(Rule(2, (Rule(1, names[:13]), Rule(1, (*names[13:], names[0])))))
    assert (found.covers, len(found.drills)) == ("pairs", 1 + 12 * 13)  # The first one recovers alone.
    assert len(found.apart) == 12 * 11 // 2 + 13 * 12 // 2
    [note] = found.notes
    assert "144 pairs for whom no quorum that needs both was found. There may be one" in note
    found = roster(Rule(2, (Rule(2, names), Rule(2, names[:2]))))
    assert found.drills == (names[:2],)
    [note] = found.notes
    assert "custodian 2, custodian 3, custodian 4 and 21 more: in no minimal quorum that was found (there may" in note


@pytest.mark.usefixtures("little_effort")
def test_a_thousand_custodians() -> None:
    rule = Rule(4, tuple(Rule(20, tuple(f"custodian {group} {i}" for i in range(200))) for group in range(5)))
    found = roster(rule)
    assert len(found.left) == 1000 * 999 // 2
    number_of = {name: number for number, name in enumerate(rule.paths())}
    met = [0] * 1000
    for drill in found.drills:
        assert len(drill) == 80
        assert rule.satisfied_by(drill)
        company = [number_of[name] for name in drill]
        together = sum(1 << number for number in company)
        for number in company:
            met[number] |= together
    assert set(met) == {(1 << 1000) - 1}
    assert found.bound <= len(found.drills)
