"""From causes to chances over time, against the same causes kept apart one by one.

Source: independent shocks (Marshall, Olkin 1967): nothing has hit before t with chance exp(-(sum of rates) t).
"""

from __future__ import annotations

import itertools
import math

from hypothesis import given
from hypothesis import strategies as st
from strategies import HARBOUR, rules

from shares.planning.events import Events, Force, leaked, lost, missing
from shares.planning.model import Cause
from shares.sharing.rule import Rule

FORCES = st.builds(Force, st.floats(0, 0.1), st.one_of(st.just(0.0), st.floats(0, 2), st.just(math.inf)))


@given(st.data())
def test_causes_that_hit_the_same_are_one_event(data: st.DataObject) -> None:
    rule = data.draw(rules(most=5))
    groups = st.frozensets(st.sampled_from(HARBOUR), max_size=3)
    hits = data.draw(st.lists(st.tuples(groups, FORCES), max_size=6))
    days = data.draw(st.sampled_from([0.0, 1.0, 37.5, 1000.0]))
    events = Events.of(rule, hits)
    assert events is not None
    total = 0.0
    for happen in itertools.product((False, True), repeat=len(hits)):
        chances = [
            force.chance(days) if yes else 1 - force.chance(days) for (_, force), yes in zip(hits, happen, strict=True)
        ]
        hit = frozenset().union(*(who for (who, _), yes in zip(hits, happen, strict=True) if yes))
        total += math.prod(chances) * rule.satisfied_by(hit)
    assert math.isclose(events.within(days), total, rel_tol=1e-10, abs_tol=1e-15)
    for_ever = frozenset().union(*(who for who, force in hits if force.daily or force.at_once == math.inf))
    if all(force.at_once in (0, math.inf) or force.daily for _, force in hits):
        assert events.within(math.inf) == rule.satisfied_by(for_ever)


def test_events_that_hit_nobody_of_the_rule_do_not_count() -> None:
    rule = Rule(1, ("north-pier", "south-pier"))
    events = Events.of(
        rule,
        [
            (frozenset({"north-pier"}), Force(0.001)),
            (frozenset({"north-pier", "dry-dock"}), Force(0.002)),
            (frozenset({"north-pier", "south-pier"}), Force(0.004)),
            (frozenset({"dry-dock"}), Force(0.1)),
            (frozenset[str](), Force(0.2)),
        ],
    )
    assert events is not None
    assert math.isclose(events.daily, 0.007)
    assert math.isclose(events.within(10), -math.expm1(-0.07))


def test_what_a_cause_does() -> None:
    cause = Cause("site", "quay", frozenset({"north-pier"}), loss=0.365, leak=0.73, absent=0.1)
    assert lost(cause) == Force(0.001)
    assert leaked(cause) == Force(0.002)
    assert math.isclose(missing(cause, 1.0).chance(0), 0.1)
    assert math.isclose(missing(cause, 0.5).chance(0), 0.05)
    # Closed, or lost since: two independent ways.
    assert math.isclose(missing(cause, 1.0).chance(100), 1 - 0.9 * math.exp(-0.1))
    never = Cause("person", "keeper", frozenset({"north-pier"}), absent=1.0)
    assert missing(never, 1.0).chance(0) == 1.0
