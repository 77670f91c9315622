"""From the causes of a model to a chance over time: that the events of some days hit those who satisfy a rule.

Causes that hit one custodian alone add up to that custodian's own rate, and causes that hit the same custodians to one
event: only what links different custodians is kept apart.

Source: Marshall, Olkin 1967 (independent shocks; rates of shocks on the same components add).
May import: shares.sharing.rule, .chance, .model.
Secret: nothing. Public: nothing either, as for the model.
Does not: know whether being hit is a loss, a leak or an absence.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import NamedTuple

from shares.planning.chance import Chance
from shares.planning.model import DAYS_OF_A_YEAR, Cause
from shares.sharing.rule import Rule


class Force(NamedTuple):
    """How strongly a cause hits: the chance within t days is 1 - exp(-(at_once + daily * t)).

    Attributes:
        daily: events a day.
        at_once: what is there from the beginning, in the same measure; infinite where it is certain.
    """

    daily: float
    at_once: float = 0.0

    def chance(self, days: float) -> float:
        """Return the chance that it has hit within so many days.

        >>> Force(0.0, math.inf).chance(1.0), Force(0.0).chance(1.0)
        (1.0, 0.0)
        """
        return -math.expm1(-(self.at_once + self.daily * days))

    def __or__(self, other: Force) -> Force:
        """Return the force of one or the other, which are independent."""
        return Force(self.daily + other.daily, self.at_once + other.at_once)


def lost(cause: Cause) -> Force:
    """Return with what force a cause loses shares."""
    return Force(cause.loss / DAYS_OF_A_YEAR)


def leaked(cause: Cause) -> Force:
    """Return with what force a cause leaks shares."""
    return Force(cause.leak / DAYS_OF_A_YEAR)


def missing(cause: Cause, patience: float) -> Force:
    """Return with what force a cause keeps shares away: lost since, or out of reach for too long.

    Args:
        cause: one of a model.
        patience: ``Model.patience``.
    """
    away = cause.absent * patience
    return Force(cause.loss / DAYS_OF_A_YEAR, math.inf if away >= 1 else -math.log1p(-away))


@dataclass(frozen=True, slots=True)
class Events:
    """The chance over time that whoever is hit satisfies a rule."""

    _chance: Chance
    _alone: dict[str, Force]
    _together: tuple[Force, ...]

    @classmethod
    def of(cls, rule: Rule, hits: Iterable[tuple[frozenset[str], Force]]) -> Events | None:
        """Gather what hits the custodians of a rule.

        Args:
            rule: what is satisfied by those who are hit.
            hits: who is hit, and with what force; several of these may hit the same custodians.

        Returns:
            None where an exact answer is too much work.
        """
        names = frozenset(rule.paths())
        forces: dict[frozenset[str], Force] = {}
        for hit, force in hits:
            if any(force):
                forces[hit & names] = forces.get(hit & names, Force(0.0)) | force
        alone = {name: forces.get(frozenset({name}), Force(0.0)) for name in names}
        shared = {hit: force for hit, force in forces.items() if len(hit) > 1}
        chance = Chance.of(rule, tuple(shared))
        return None if chance is None else cls(chance, alone, tuple(shared.values()))

    @property
    def daily(self) -> float:
        """How many events there are a day that hit anyone."""
        return math.fsum(force.daily for force in (*self._alone.values(), *self._together))

    def within(self, days: float) -> float:
        """Return the chance that after so many days those hit satisfy the rule; infinitely many are allowed."""
        if days == math.inf:
            forces = [Force(0.0, math.inf if any(force) else 0.0) for force in (*self._alone.values(), *self._together)]
            alone = dict(zip(self._alone, forces, strict=False))
            return Events(self._chance, alone, tuple(forces[len(alone) :])).within(0)
        alone_by_now = {name: force.chance(days) for name, force in self._alone.items()}
        return self._chance.at(alone_by_now, [force.chance(days) for force in self._together])
