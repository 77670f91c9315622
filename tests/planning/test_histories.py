"""Clocks and rounds: the moment at which a rule is satisfied, by its definition; and what is drawn, by its law.

Source: the definition of a rule (``Rule.satisfied_by``); the law of large numbers, to five standard errors, with fixed
seeds.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.planning.events import lost, missing
from shares.planning.histories import Clocks, away, ends
from shares.planning.model import Cause
from shares.sharing.rule import Rule

NAMES = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")


def nodes(children: st.SearchStrategy[Rule | str]) -> st.SearchStrategy[Rule]:
    return st.lists(children, min_size=1, max_size=5).flatmap(
        lambda below: st.integers(1, len(below)).map(lambda need: Rule(need, tuple(below)))
    )


RULES = nodes(st.recursive(st.sampled_from(NAMES), nodes, max_leaves=12))


def lot(seed: int = 20261201) -> np.random.Generator:
    return np.random.Generator(np.random.PCG64(seed))


@given(rule=RULES, data=st.data())
def test_a_rule_is_satisfied_when_those_hit_so_far_satisfy_it(rule: Rule, data: st.DataObject) -> None:
    names = list(rule.paths())
    never = st.just(math.inf)
    drawn = data.draw(st.lists(st.tuples(*[st.integers(0, 6) | never] * len(names)), min_size=1, max_size=8))
    moments = np.array(drawn, dtype=float).T
    found = Clocks(rule, (), (), ()).satisfied(moments)
    for moment, hit in zip(found, drawn, strict=True):
        days = [day for day in hit if day < math.inf]
        so_far = {day: {name for name, at in zip(names, hit, strict=True) if at <= day} for day in days}
        assert moment == min((day for day in days if rule.satisfied_by(so_far[day])), default=math.inf)


def test_causes_that_hit_the_same_custodians_share_a_clock() -> None:
    rule = Rule(1, NAMES[:3])
    clocks = Clocks.of(
        rule,
        [
            Cause("share", "north-pier", frozenset({"north-pier"}), loss=0.365),
            Cause("person", "north-pier", frozenset({"north-pier", "dry-dock"}), loss=0.73, absent=0.5),
            Cause("person", "south-pier", frozenset({"south-pier"}), absent=0.25),
            Cause("site", "quay", frozenset(NAMES), loss=0.0365),
            Cause("line", "board", frozenset({"dry-dock"}), loss=9.0),
        ],
        lambda cause: missing(cause, 1.0),
    )
    assert clocks.hits == ((0,), (0, 1, 2))
    assert clocks.rates == pytest.approx((0.003, 0.0001))
    assert [members for members, _ in clocks.at_once] == [(0,), (1,)]
    assert [chance for _, chance in clocks.at_once] == pytest.approx([0.5, 0.25])


def test_moments_are_exponential_from_the_first_event_on() -> None:
    rule = Rule(1, NAMES[:3])
    rates, site = (0.001, 0.002, 0.004), 0.003
    clocks = Clocks(rule, ((0,), (1,), (2,), (0, 1)), (*rates, site), ())
    histories = 200_000
    first = clocks.first(draws := lot(), histories)
    moments = clocks.hit(draws, first)
    assert (moments.min(axis=0) == first).all()
    assert abs(first.mean() * 0.01 - 1) < 5 / math.sqrt(histories)
    for moment, rate in zip(moments, (0.004, 0.005, 0.004), strict=True):
        for days in (10, 100, 700):
            expected = -math.expm1(-rate * days)
            assert abs((moment <= days).mean() - expected) < 5 * math.sqrt(expected * (1 - expected) / histories)
    # Two are hit at once when the site is, before either of them: 3 of 6 times.
    assert abs((moments[0] == moments[1]).mean() - 0.5) < 5 * 0.5 / math.sqrt(histories)


def test_a_life_is_watched_to_the_end_of_its_last_round() -> None:
    clocks = Clocks(Rule(2, NAMES[:2]), ((0,),), (1e-3,), ())
    # It never ends. Rounds of 30 days, or of 40 with an event: 1,000 days are over when 1,000 to 1,040 are lived.
    found = ends(clocks, lot(), 30, 10, 1000, 1)
    assert (found.within, found.ended, found.of_ended) == (0, 0, 0)
    assert 1000 <= found.lived < 1040
    assert found.squared == found.lived**2
    quiet = Clocks(Rule(2, NAMES[:2]), (), (), ())
    assert ends(quiet, lot(), 30, 10, 1000, 3).lived == 3 * 1020
    assert ends(quiet, lot(), 50, 10, 1000, 3).lived == 3 * 1000
    assert ends(quiet, lot(), None, 0, 1000, 3).lived == math.inf
    assert ends(quiet, lot(), None, 0, 1000, 3).ended == 0
    # It always ends in the first round, and at once.
    sure = Clocks(Rule(1, NAMES[:1]), ((0,),), (1e9,), ())
    assert ends(sure, lot(), 30, 10, 1000, 7).within == 7


def test_rates_at_the_ends_of_the_numbers() -> None:
    for rate in (5e-324, 1e-300, 1e300):
        clocks = Clocks(Rule(1, NAMES[:2]), ((0,), (1,)), (rate, rate), ())
        sure = 100 if rate > 1 else 0
        for every in (None, 90):
            assert ends(clocks, lot(), every, 14, 3650, 100).within == sure
            assert away(clocks, lot(), every, 14, 3650, 100) == sure


@pytest.mark.parametrize(("every", "delay"), [(90, 14), (30, 100), (1, 0), (5000, 14), (None, 0)])
def test_what_is_lost_for_good_is_gone_on_all_days_after(every: int | None, delay: int) -> None:
    """One share is the key: however often anybody asks, it is gone for the time from its loss on, by hand."""
    rate, years_days, days = 0.0004, 3650, 200_000
    clocks = Clocks.of(Rule(1, NAMES[:1]), [Cause("share", NAMES[0], frozenset(NAMES[:1]), loss=rate * 365)], lost)
    expected = 1 + math.expm1(-rate * years_days) / (rate * years_days)
    found = away(clocks, lot(), every, delay, years_days, days) / days
    assert abs(found - expected) < 5 * math.sqrt(expected * (1 - expected) / days)
