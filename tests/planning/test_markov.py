"""The odds of whole models against Markov chains: a state is the set of those whose share is lost, or known.

Here rules may be any tree, custodians unlike, and causes hit several. All is solved by the matrix exponential of scipy:
nothing of the diagrams, of the pivotal sums or of the renewal equation is in it but the story that ``renewal`` tells.

Sources: J. G. Kemeny, J. L. Snell, "Finite Markov Chains", 1960 (absorbing chains: mean times solve a linear system in
the generator); C. F. Van Loan, "Computing integrals involving the matrix exponential", IEEE Trans. Automatic Control
23, 1978.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any, TypeAlias

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import linalg
from strategies import HARBOUR, rules

from shares.planning.model import Cause, Model
from shares.planning.odds import Odds, odds
from shares.sharing.rule import Rule

Array: TypeAlias = np.ndarray[Any, Any]
CLOSE = 1e-9


def states(model: Model) -> list[frozenset[str]]:
    """Every set of custodians; the first is empty."""
    names = model.custodians
    return [frozenset(some) for size in range(len(names) + 1) for some in itertools.combinations(names, size)]


def generator(model: Model, daily: Callable[[Cause], float]) -> Array:
    """How fast each set becomes each other one, a day."""
    sets = states(model)
    place = {one: i for i, one in enumerate(sets)}
    rates = np.zeros((len(sets), len(sets)))
    for i, one in enumerate(sets):
        for cause in model.causes:
            rates[i, place[one | cause.members & sets[-1]]] += daily(cause)
    return rates - np.diag(rates.sum(axis=1))


def after(rates: Array, days: float, start: Array) -> Array:
    return start @ linalg.expm(rates * days)


def sum_over(rates: Array, days: float, start: Array, worth: Array) -> float:
    """What is earned over so many days where each state earns its worth a day."""
    size = len(rates)
    both = np.zeros((size + 1, size + 1))
    both[:size, :size], both[:size, size] = rates, worth
    return float(start @ linalg.expm(both * days)[:size, size])


class Story:
    """The story that ``renewal`` tells, over the states in which it goes on."""

    def __init__(self, rates: Array, goes_on: list[bool], every: int, delay: int) -> None:
        self.rates, self.every, self.delay = rates[np.ix_(goes_on, goes_on)], every, delay
        self.new = np.eye(len(self.rates))[0]
        self.found = after(self.rates, every, self.new)
        self.quiet = self.found[0]
        self.found[0] = 0
        self.mended = after(self.rates, delay, self.found).sum()

    def mean(self) -> float:
        ones = np.ones(len(self.rates))
        lived = sum_over(self.rates, self.every, self.new, ones) + sum_over(self.rates, self.delay, self.found, ones)
        return lived / (1 - self.quiet - self.mended)

    def lasts(self, days: int) -> float:
        """The chance that it goes on for so many days: told from the shortest on."""
        round_, repair = (self._each_day(start, days) for start in (self.new, self.found))
        told: list[float] = []
        for day in range(days + 1):
            left = day - self.every
            if left <= 0:
                told.append(round_[day])
            elif left <= self.delay:
                told.append(self.quiet * told[left] + repair[left])
            else:
                told.append(self.quiet * told[left] + self.mended * told[left - self.delay])
        return told[days]

    def _each_day(self, state: Array, days: int) -> list[float]:
        """How probable it is that a round without a mending goes on, on each day from 0."""
        day, sums = linalg.expm(self.rates), []
        for _ in range(days + 1):
            sums.append(float(state.sum()))
            state = state @ day
        return sums


def out_of_reach(model: Model) -> Array:
    """For each set of lost shares, the chance that those who can be had with theirs make no quorum on a day."""
    away: dict[frozenset[str], float] = {frozenset(): 1.0}
    for cause in model.causes:
        chance = cause.absent * model.patience
        then: dict[frozenset[str], float] = {}
        for who, p in away.items():
            for all_, q in ((who, 1 - chance), (who | cause.members, chance)):
                then[all_] = then.get(all_, 0.0) + p * q
        away = then
    everyone = frozenset(model.custodians)
    return np.array(
        [
            math.fsum(p for who, p in away.items() if not model.rule.satisfied_by(everyone - lost - who))
            for lost in states(model)
        ]
    )


def by_chain(model: Model, days: int) -> Odds:
    everyone, sets = frozenset(model.custodians), states(model)
    losses = generator(model, lambda cause: cause.loss / 365)
    left = [model.rule.satisfied_by(everyone - lost) for lost in sets]
    leaks = generator(model, lambda cause: cause.leak / 365)
    unknown = [not model.rule.satisfied_by(known) for known in sets]
    # A refresh is a mending with no delay, of what may be known: the same story.
    sealed = Story(leaks, unknown, model.refresh_every or days, 0)
    start, worth = np.eye(len(sets))[0], out_of_reach(model)
    if model.attest_every is None:
        kept = losses[np.ix_(left, left)]
        mean = -float(linalg.solve(kept, np.ones(len(kept)))[0])
        return Odds(
            1 - float(after(kept, days, np.eye(len(kept))[0]).sum()),
            1 - sealed.lasts(days),
            sum_over(losses, days, start, worth) / days,
            mean / 365,
        )
    story = Story(losses, left, model.attest_every, model.repair_after)
    away = days_away(story, losses, worth, days) / days
    return Odds(1 - story.lasts(days), 1 - sealed.lasts(days), away, story.mean() / 365)


def days_away(story: Story, losses: Array, worth: Array, days: int) -> float:
    """How many days are spent in states that count, each by its worth: told from the shortest time on.

    Args:
        story: of rounds.
        losses: the generator over all states, of which those in which the story has ended count for 1.
        worth: how much each state counts.
        days: that are looked at.
    """
    start = np.eye(len(losses))[0]
    found = after(losses, story.every, start)
    found[0] = 0
    of_a_day = np.array([sum_over(losses, 1, one, worth) for one in np.eye(len(losses))])
    day, sums = linalg.expm(losses), []
    for state in (start, found):
        so_far = [0.0]
        for _ in range(days):
            so_far.append(so_far[-1] + float(state @ of_a_day))
            state = state @ day
        sums.append(so_far)
    told: list[float] = []
    for left in range(days + 1):
        after_ = left - story.every
        if after_ <= 0:
            told.append(sums[0][left])
            continue
        spent = sums[0][story.every] + story.quiet * told[after_] + sums[1][min(after_, story.delay)]
        if after_ > story.delay:
            rest = after_ - story.delay
            spent += story.mended * told[rest] + (found.sum() - story.mended) * rest
        told.append(float(spent))
    return told[days]


@st.composite
def models(draw: st.DrawFn) -> Model:
    rule = draw(rules(most=5))
    names = tuple(rule.paths())
    who = [frozenset({name}) for name in names]
    who += draw(st.lists(st.frozensets(st.sampled_from((*names, HARBOUR[-1])), min_size=2), max_size=3))
    # Not too rare: as the chain takes what goes on from one, it has no digits for the rarest.
    rates, parts = st.floats(0.02, 3), st.floats(0, 1)
    causes = tuple(Cause("site", str(i), one, draw(rates), draw(rates), draw(parts)) for i, one in enumerate(who))
    every = st.sampled_from([None, 1, 7, 30, 90, 365, 4000])
    wait, long = draw(st.sampled_from([1.0, 2.0, 14.0])), draw(st.sampled_from([1.0, 7.0]))
    delay = draw(st.sampled_from([0, 1, 14, 400]))
    return Model(rule, causes, draw(every), delay, draw(every), recover_within=wait, absent_for=long)


def assert_agree(model: Model, days: int) -> None:
    found, expected = odds(model, days / 365), by_chain(model, days)
    assert found is not None
    for name in ("loss", "exposure", "absence"):
        assert math.isclose(getattr(found, name), getattr(expected, name), rel_tol=CLOSE, abs_tol=1e-12), name
    # The chain takes from one the chance that a round is not the last: of a rare last one, few digits are left.
    rounds = expected.years_to_loss * 365 / (model.attest_every or 365)
    assert math.isclose(found.years_to_loss, expected.years_to_loss, rel_tol=CLOSE + 1e-14 * rounds)


@given(models(), st.sampled_from([1, 20, 365, 1000]))
def test_odds_of_any_model_are_those_of_its_chain(model: Model, days: int) -> None:
    assert_agree(model, days)


@pytest.mark.parametrize("every", [None, 30, 365])
def test_odds_of_a_harbour_are_those_of_its_chain(every: int | None) -> None:
    names = HARBOUR[:6]
    causes = (
        *(Cause("share", name, frozenset({name}), loss=0.1 * i, leak=0.05) for i, name in enumerate(names, start=1)),
        *(Cause("person", name, frozenset({name}), leak=0.1, absent=0.05 * i) for i, name in enumerate(names)),
        Cause("site", "pier house", frozenset(names[:3]), loss=0.2, leak=0.1, absent=0.02),
        Cause("line", "harbour master", frozenset(names[2:5]), leak=0.2, absent=0.1),
    )
    rule = Rule(2, (Rule(2, names[:3]), Rule(1, names[2:5]), names[5]))
    model = Model(rule, causes, every, 14, every)
    assert_agree(model, 3 * 365)
    assert_agree(replace(model, repair_after=0), 3 * 365)
