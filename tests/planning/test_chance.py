"""Chances that those who are hit satisfy a rule: published tails, and every set of hits tried one by one.

Checked against: binomial and Poisson-binomial tails as exact fractions (vectors/reliability_k_of_n.json), of scipy, and
by numpy's convolution; the availability table of the planning page, to its digits; sums over all sets of events, in
exact fractions, with the rule followed by hand.
"""

from __future__ import annotations

import itertools
import json
import math
import sys
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from strategies import HARBOUR, rules

from shares.planning import chance as chances
from shares.planning.chance import Chance
from shares.planning.structure import dual
from shares.sharing.rule import Rule

VECTORS = json.loads((Path(__file__).parents[1] / "vectors" / "reliability_k_of_n.json").read_text())
CLOSE = 1e-12


def of(rule: Rule, *shared: frozenset[str]) -> Chance:
    chance = Chance.of(rule, shared)
    assert chance is not None
    return chance


def flat(need: int, chances: list[float]) -> tuple[Rule, dict[str, float]]:
    alone = {f"pier {i}": chance for i, chance in enumerate(chances)}
    return Rule(need, tuple(alone)), alone


def blocked(need: int, away: list[float]) -> float:
    """The chance that no quorum is left."""
    rule, alone = flat(need, away)
    return of(dual(rule)).at(alone)


@pytest.mark.parametrize("case", VECTORS["binomial"], ids=lambda case: f"{case['k']} of {case['n']} at {case['p']}")
def test_equal_chances_make_binomial_tails(case: dict[str, Any]) -> None:
    present = Fraction(case["p"])
    rule, alone = flat(case["k"], [float(present)] * case["n"])
    assert math.isclose(of(rule).at(alone), case["available"], rel_tol=CLOSE)
    assert math.isclose(blocked(case["k"], [float(1 - present)] * case["n"]), case["unavailable"], rel_tol=CLOSE)


@pytest.mark.parametrize("case", VECTORS["poisson_binomial"], ids=lambda case: f"{case['k']} of {case['p']}")
def test_different_chances_make_poisson_binomial_tails(case: dict[str, Any]) -> None:
    present = [Fraction(p) for p in case["p"]]
    rule, alone = flat(case["k"], list(map(float, present)))
    assert math.isclose(of(rule).at(alone), case["available"], rel_tol=CLOSE)
    assert math.isclose(blocked(case["k"], [float(1 - p) for p in present]), case["unavailable"], rel_tol=CLOSE)


@pytest.mark.parametrize("total", [1, 2, 3, 5, 7, 12, 40, 100, 255])
def test_equal_chances_make_the_tails_of_a_reference_library(total: int) -> None:
    for need in sorted({1, min(2, total), (total + 1) // 2, max(1, total - 1), total}):
        rule, alone = flat(need, [0.0] * total)
        enough, too_few = of(rule), of(dual(rule))
        for hit in (1e-9, 1e-4, 0.05, 0.23, 0.5, 0.9, 0.999, 1 - 1e-9):
            expected = stats.binom.sf(need - 1, total, hit)
            if expected > sys.float_info.min:
                assert math.isclose(enough.at(dict.fromkeys(alone, hit)), expected, rel_tol=CLOSE), (need, hit)
            expected = stats.binom.sf(total - need, total, hit)
            if expected > sys.float_info.min:
                assert math.isclose(too_few.at(dict.fromkeys(alone, hit)), expected, rel_tol=CLOSE), (need, hit)


@pytest.mark.parametrize("total", [2, 5, 7, 20, 60, 255])
def test_different_chances_make_the_tails_of_reference_libraries(total: int) -> None:
    lot = np.random.default_rng(total)
    for least, most in ((-9, 0), (-2, -0.01)):
        hit = 10 ** lot.uniform(least, most, total)
        hit[: total // 2] = 1 - hit[: total // 2]
        number = np.ones(1)  # How probable it is that so many are hit.
        for chance in hit:
            number = np.convolve(number, [1 - chance, chance])
        for need in sorted({1, 2, (total + 1) // 2, total - 1, total}):
            rule, alone = flat(need, hit.tolist())
            found = of(rule).at(alone)
            assert math.isclose(found, math.fsum(number[need:]), rel_tol=CLOSE)
            # Its tails come as one minus the rest, so the smallest have no digits left.
            assert math.isclose(found, stats.poisson_binom.sf(need - 1, hit), abs_tol=CLOSE)


@pytest.mark.parametrize("case", VECTORS["smallest_n"], ids=lambda case: f"{case['k']} at {case['p']}")
def test_the_smallest_total_that_meets_a_target(case: dict[str, Any]) -> None:
    away, target = float(1 - Fraction(case["p"])), float(1 - Fraction(case["target"]))
    found = next(n for n in itertools.count(case["k"]) if blocked(case["k"], [away] * n) <= target)
    assert found == case["smallest_n"]


@pytest.mark.parametrize(
    ("away", "percent"),
    [
        (0.05, {(2, 3): "0.7", (3, 5): "0.1", (4, 7): "0.02", (5, 7): "0.4"}),
        (0.10, {(2, 3): "2.8", (3, 5): "0.9", (4, 7): "0.3", (5, 7): "2.6"}),
        # 5 % a year, unnoticed for five years: the page rounds to 23 %.
        (1 - 0.95**5, {(2, 3): "13.0", (3, 5): "8.0", (4, 7): "5.1", (5, 7): "19.6", (3, 6): "2.6"}),
    ],
)
def test_the_availability_table(away: float, percent: dict[tuple[int, int], str]) -> None:
    for (need, total), expected in percent.items():
        digits = len(expected.partition(".")[2])
        assert f"{100 * blocked(need, [away] * total):.{digits}f}" == expected


def by_trying(
    rule: Rule, shared: list[frozenset[str]], alone: dict[str, Fraction], together: list[Fraction]
) -> Fraction:
    """Go through every set of events that happen."""
    events = [(frozenset({name}), chance) for name, chance in alone.items()] + list(zip(shared, together, strict=True))
    total = Fraction(0)
    for happen in itertools.product((False, True), repeat=len(events)):
        hit = frozenset().union(*(who for (who, _), happens in zip(events, happen, strict=True) if happens))
        if rule.satisfied_by(hit):
            total += math.prod(p if happens else 1 - p for (_, p), happens in zip(events, happen, strict=True))
    return total


CHANCES = st.one_of(st.sampled_from([Fraction(0), Fraction(1), Fraction(1, 2), Fraction(1, 10**9)]), st.fractions(0, 1))


@given(st.data())
def test_shared_events_agree_with_trying_every_set_of_events(data: st.DataObject) -> None:
    rule = data.draw(rules(most=6))
    alone = {name: data.draw(CHANCES) for name in rule.paths()}
    shared = data.draw(st.lists(st.frozensets(st.sampled_from(HARBOUR)), max_size=4))
    together = [data.draw(CHANCES) for _ in shared]
    expected = by_trying(rule, shared, alone, together)
    found = of(rule, *shared).at({name: float(p) for name, p in alone.items()}, list(map(float, together)))
    # Relative, not absolute: the smallest chances count as well.
    assert math.isclose(found, expected, rel_tol=CLOSE)


@given(st.data())
def test_what_is_likelier_to_hit_never_makes_a_rule_less_likely(data: st.DataObject) -> None:
    """Rules have no way to be met by fewer: a coherent structure, as Barlow and Proschan call it."""
    rule = data.draw(rules(most=8))
    shared = data.draw(st.lists(st.frozensets(st.sampled_from(HARBOUR)), max_size=3))
    parts = st.floats(0, 1)
    low, high = (
        [{name: data.draw(parts) for name in rule.paths()}, [data.draw(parts) for _ in shared]] for _ in range(2)
    )
    less_alone, more_alone = ({name: by(low[0][name], high[0][name]) for name in low[0]} for by in (min, max))
    less_shared, more_shared = (list(map(by, low[1], high[1])) for by in (min, max))
    chance = of(rule, *shared)
    less, more = chance.at(less_alone, less_shared), chance.at(more_alone, more_shared)
    assert less <= more * (1 + CLOSE)


@given(rules(most=8), st.data())
def test_a_node_that_needs_one_more_is_never_likelier(rule: Rule, data: st.DataObject) -> None:
    alone = {name: data.draw(st.floats(0, 1)) for name in rule.paths()}
    if rule.need < len(rule.children):
        stricter = Rule(rule.need + 1, rule.children)
        assert of(stricter).at(alone) <= of(rule).at(alone) * (1 + CLOSE)
    lenient = Rule(rule.need, (*rule.children, data.draw(st.sampled_from(list(rule.paths())))))
    assert of(rule).at(alone) <= of(lenient).at(alone) * (1 + CLOSE)


def in_the_order_described(node: Rule, shared: list[frozenset[str]], asked: list[str]) -> None:
    """Ask a node's custodians: next is always the child after which the fewest events are begun and not over."""
    waiting = list(dict.fromkeys(node.children))

    def in_mind(child: Rule | str) -> int:
        then = {*asked, *(child.paths() if isinstance(child, Rule) else (child,))}
        return sum(0 < len(event & then) < len(event) for event in shared)

    while waiting:
        child = min(waiting, key=in_mind) if shared else waiting[0]
        waiting.remove(child)
        if isinstance(child, Rule):
            in_the_order_described(child, shared, asked)
        elif child not in asked:
            asked.append(child)


@given(rules(most=12), st.data())
def test_the_next_one_asked_leaves_the_fewest_events_in_mind(rule: Rule, data: st.DataObject) -> None:
    names = list(rule.paths())
    shared = data.draw(st.lists(st.frozensets(st.sampled_from(names)), max_size=8))
    expected: list[str] = []
    in_the_order_described(rule, shared, expected)
    found = chances._order(rule, shared)
    assert found is not None
    assert list(found) == expected
    for place, name in enumerate(expected):
        so_far, others = set(expected[: place + 1]), set(expected[place:])
        assert found[name] == sum(bool(event & so_far) and bool(event & others) for event in shared)


def test_what_is_too_much_is_found_out_before_much_is_done(monkeypatch: pytest.MonkeyPatch) -> None:
    def never(*_: object) -> None:
        raise AssertionError

    monkeypatch.setattr(chances.Diagram, "of", never)
    # More custodians than a diagram takes are not even put in order.
    with monkeypatch.context() as patched:
        patched.setattr(chances, "_order", never)
        one_more = Rule(1, (flat(100, [0.1] * chances.MAX_CUSTODIANS)[0], "dry-dock"))
        assert Chance.of(one_more) is None
    asked = list[str]()

    def told(*given: Any) -> Any:
        for name in ask(*given):
            asked.append(name)
            yield name

    ask = chances._asked
    monkeypatch.setattr(chances, "_asked", told)
    # 255 custodians, each in three pairs that cross one another: each one asked adds to what is kept in mind.
    names = [f"pier {i}" for i in range(chances.MAX_CUSTODIANS)]
    pairs = [frozenset({names[i], names[i * step % 255]}) for i in range(255) for step in (2, 4, 7)]
    assert Chance.of(Rule(128, tuple(names)), [pair for pair in pairs if len(pair) > 1]) is None
    assert 0 < len(set(asked)) < 64
    # One custodian whom more events hit than can be kept in mind: nobody is asked.
    asked.clear()
    events = [frozenset({names[0], name}) for name in names[1:20]]
    assert Chance.of(Rule(128, tuple(names)), events) is None
    assert not asked
