"""Histories of share sets drawn by lot, thousands side by side.

Each cause has a clock that rings after an exponential time. A custodian is hit when the first clock of a cause that
hits them rings, and a rule over those who are hit is satisfied at a moment found by one walk over its tree: at a node
with need k, the k-th earliest of the moments of its children. So a history costs no more where the rule is entangled.

Lives are rounds, as ``renewal`` tells them. Quiet rounds, which are most, are not drawn one by one: where the first
clock rings is drawn once, over all rounds to come, and the history goes straight to that round. From there all clocks
begin anew, as an exponential time does not remember how long it has lasted.

Source: Marshall, Olkin 1967 (the first of several independent shocks); Cox 1962 (rounds).
May import: shares.sharing.rule, .events, .model.
Secret: nothing. Public: nothing either, as for the model.
Does not: run without numpy, so nothing but ``simulate`` imports it; know what a count proves.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from shares.planning.events import Force
from shares.planning.model import Cause
from shares.sharing.rule import Rule

Moments: TypeAlias = NDArray[np.float64]
"""Days, for each history; infinite for never. In two dimensions: a row for each custodian or cause."""

Lot: TypeAlias = np.random.Generator


@dataclass(frozen=True, slots=True)
class Clocks:
    """When those who are hit satisfy a rule.

    Attributes:
        rule: what those hit satisfy in the end.
        hits: the custodians that each cause hits, as places in the order in which the rule meets them.
        rates: how often each cause hits, in events a day, above 0.
        at_once: custodians who are hit from the beginning, and with what chance, above 0.
    """

    rule: Rule
    hits: tuple[tuple[int, ...], ...]
    rates: tuple[float, ...]
    at_once: tuple[tuple[tuple[int, ...], float], ...]

    @classmethod
    def of(cls, rule: Rule, causes: Iterable[Cause], force: Callable[[Cause], Force]) -> Clocks:
        """Make the clocks of a model; causes that hit the same custodians share one.

        Args:
            rule: what those hit satisfy in the end.
            causes: what hits them.
            force: how strongly.
        """
        place = {name: i for i, name in enumerate(rule.paths())}
        forces: dict[tuple[int, ...], Force] = {}
        for cause in causes:
            if hit := tuple(sorted(place[name] for name in cause.members if name in place)):
                forces[hit] = forces.get(hit, Force(0.0)) | force(cause)
        ringing = {hit: one.daily for hit, one in forces.items() if one.daily}
        at_once = tuple((hit, one.chance(0)) for hit, one in forces.items() if one.at_once)
        return cls(rule, tuple(ringing), tuple(ringing.values()), at_once)

    @property
    def rate(self) -> float:
        """How many events there are a day."""
        return math.fsum(self.rates)

    @property
    def width(self) -> int:
        """How many numbers there are to be kept for each history at least."""
        return len(self.rates) + len(self.rule.paths())

    def first(self, lot: Lot, histories: int) -> Moments:
        """Draw the moments of the first event."""
        if not self.rates:
            return np.full(histories, np.inf)
        with np.errstate(over="ignore"):
            return lot.standard_exponential(histories) / self.rate

    def hit(self, lot: Lot, first: Moments) -> Moments:
        """Draw the moments at which custodians are hit, one row for each of them.

        Args:
            lot: where the draws come from.
            first: when the first event is.
        """
        histories = len(first)
        moments = np.full((len(self.rule.paths()), histories), np.inf)
        if not self.rates:
            return moments
        rates = np.array(self.rates)
        which = np.searchsorted(np.cumsum(rates)[:-1] / self.rate, lot.random(histories), side="right")
        with np.errstate(over="ignore"):
            rung = lot.standard_exponential((len(rates), histories)) / rates[:, np.newaxis] + first
        rung[which, np.arange(histories)] = first
        for members, moment in zip(self.hits, rung, strict=True):
            for member in members:
                np.minimum(moments[member], moment, out=moments[member])
        return moments

    def satisfied(self, moments: Moments) -> Moments:
        """Return when those hit satisfy the rule.

        Args:
            moments: when each is hit.
        """
        return _satisfied(self.rule, dict(zip(self.rule.paths(), moments, strict=True)))


def _satisfied(node: Rule, moments: dict[str, Moments]) -> Moments:
    below = [_satisfied(child, moments) if isinstance(child, Rule) else moments[child] for child in node.children]
    if node.need == 1:
        return functools.reduce(np.minimum, below)
    if node.need == len(below):
        return functools.reduce(np.maximum, below)
    return np.asarray(np.partition(np.stack(below), node.need - 1, axis=0)[node.need - 1])


@dataclass(frozen=True, slots=True)
class Ends:
    """What came of histories in which the rule may be satisfied in the end.

    Attributes:
        within: in how many that was within the days looked at.
        ended: in how many it was before the first round that begins after these days.
        lived, squared, of_ended: the days until then or until that round; the sum, that of their squares, and the sum
            over those that ended.
    """

    within: int
    ended: int
    lived: float
    squared: float
    of_ended: float


def ends(clocks: Clocks, lot: Lot, every: int | None, delay: int, days: int, histories: int) -> Ends:
    """Draw histories until the rule is satisfied, or the round is over in which the last day lies.

    Args:
        clocks: of those who are hit.
        lot: where the draws come from.
        every: days of a round; None for one round without an end.
        delay: days that a round takes longer after an event in it.
        days: how many are looked at.
        histories: how many to draw.
    """
    whole = math.inf if every is None else every + delay
    lived, ended = np.zeros(histories), np.zeros(histories, dtype=bool)
    running, start = np.arange(histories), np.zeros(histories)
    while len(running):
        first = clocks.first(lot, len(running))
        if every is not None:
            # Where the first event lies beyond the last day there is no such round: any number of quiet ones will do.
            quiet, first = np.divmod(np.minimum(first, 2.0 * days + every), every)
            begun = start + quiet * every
            over = begun >= days
            lived[running[over]] = start[over] + np.ceil(np.maximum(days - start[over], 0) / every) * every
            running, start, first = running[~over], begun[~over], first[~over]
        end = clocks.satisfied(clocks.hit(lot, first))
        now = end <= whole
        ended[running[now]] = end[now] < np.inf
        lived[running[now]] = start[now] + end[now]
        running, start = running[~now], start[~now] + whole
    with np.errstate(over="ignore"):
        return Ends(
            within=int(np.count_nonzero(ended & (lived <= days))),
            ended=int(np.count_nonzero(ended)),
            lived=float(lived.sum()),
            squared=float(np.square(lived).sum()),
            of_ended=float(lived[ended].sum()),
        )


def away(clocks: Clocks, lot: Lot, every: int | None, delay: int, days: int, histories: int) -> int:
    """Draw one day of each history, and count on how many of them those missing satisfy the rule.

    Args:
        clocks: of those who are lost or kept away.
        lot: where the draws come from.
        every: days of a round; None for one round without an end.
        delay: days that a round takes longer after an event in it.
        days: of how many the day is one. Where those lost satisfied the rule before, they do so on that day.
        histories: how many days to draw.
    """
    whole = math.inf if every is None else every + delay
    found, day, start = 0, lot.random(histories) * days, np.zeros(histories)
    while len(day):
        first, begun = clocks.first(lot, len(day)), start
        if every is not None:
            # As in ``ends``: where the first event lies beyond the last day, any number of quiet rounds will do.
            quiet, first = np.divmod(np.minimum(first, 2.0 * days + every), every)
            begun = start + quiet * every
        over = day >= begun + whole
        found += _missing(clocks, lot, first[~over], (day - begun)[~over])
        lost = clocks.satisfied(clocks.hit(lot, first[over])) <= whole
        found += int(np.count_nonzero(lost))
        day, start = day[over][~lost], (begun + whole)[over][~lost]
    return found


def _missing(clocks: Clocks, lot: Lot, first: Moments, day: Moments) -> int:
    """Count where those missing satisfy the rule on a day.

    Args:
        clocks, lot: as for ``away``.
        first: when in the round the first event is.
        day: which day of the round it is; below 0 for one of the quiet rounds before.
    """
    moments = np.full((len(clocks.rule.paths()), len(day)), np.inf)
    hit = np.flatnonzero(first <= day)
    moments[:, hit] = clocks.hit(lot, first[hit])
    for members, chance in clocks.at_once:
        kept = lot.random(len(day)) < chance
        for member in members:
            moments[member, kept] = 0
    return int(np.count_nonzero(clocks.satisfied(moments) <= np.maximum(day, 0)))
