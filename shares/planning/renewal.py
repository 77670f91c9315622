"""A life of attestations and repairs, as a process that begins anew again and again.

The story told. On day 0 every share is in place. An attestation every A days finds what was lost since. Where nothing
was, the set is as new. Where something was and a quorum is left, everything is made good D days later: whoever has lost
a share meanwhile says so when the repair begins and is served as well, so the set is as new again, and the next
attestation comes A days after. Where too few are left, at any time, the key is gone for good, and the story ends.

A set in which a repair serves only those whom the attestation found, and whose days of attestation do not move, fares
nearly alike: with 5 % of shares lost a year and a delay of 14 days its odds differ by 3 % of themselves at most. In
both, a loss that does no harm brings an earlier look at all shares, here a little more: so a rate that goes up can take
the odds of loss or absence down, by about 1 % of themselves, and by up to 6.5 % (the most that a search found) where a
repair takes longer than the time between two attestations. Without a delay it never does.

So a life is a row of independent *rounds*: A days with no loss at all; or A + D days with a loss, mended; or a round in
which the end comes. What is wanted of the whole life follows from one function, the chance u(t) that t days after a
dealing, with nothing mended, no quorum is left. Whether A is longer than D does not matter.

Source: D. R. Cox, "Renewal Theory", 1962 (renewal equation, and means of a life by the round); Barlow, Proschan 1975
(inspection and repair of k-out-of-n systems).
May import: .curve.
Secret: nothing. Public: nothing either, as for the model.
Does not: know what u is made of, or that a repair took several tries.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import TypeAlias

from shares.planning.curve import Curve

OverTime: TypeAlias = Callable[[float], float]
"""A chance, 0 to 1, as a function of the days since a dealing."""

_NEGLIGIBLE = 1e-14
"""What one minus a chance is not exact beyond."""


@dataclass(frozen=True, slots=True)
class Upkeep:
    """Attestations, and repairs of what they find.

    Attributes:
        every: days between attestations, 1 or more; the text above calls it A.
        delay: days from an attestation to the repair, 0 or more; D above.
        losses: events a day that lose any share at all.
        gone: the chance that so many days after a dealing no quorum is left, nothing being mended; u above.
    """

    every: int
    delay: int
    losses: float
    gone: OverTime

    @property
    def _whole(self) -> int:
        """How many days a round with a loss takes."""
        return self.every + self.delay

    @property
    def _quiet(self) -> float:
        """The chance of a round with no loss."""
        return math.exp(-self.losses * self.every)

    @property
    def _ending(self) -> float:
        """The chance that a round is the last: no quorum is left at its end, and it is no quiet one."""
        return self.gone(self.every + self.delay) - self._quiet * self.gone(self.delay)

    def within(self, days: int) -> float:
        """Return the chance that the key is gone within so many days, 1 or more.

        >>> halving = Upkeep(every=1, delay=0, losses=math.log(2), gone=lambda days: 1 - 0.5**days)
        >>> halving.within(3)
        0.875
        """
        if days <= self.every:
            return self.gone(days)
        curve, ending = Curve.of(self.gone, min(self._whole, days)), self._ending
        lost = sum(
            chance * (ending if left >= self._whole else self._of_a_round(curve.at, left))
            for left, chance in self._rounds(days)
        )
        return min(1.0, lost)

    def mean_days(self) -> float:
        """Return the mean number of days until the key is gone; infinite where that cannot happen."""
        ending = self._ending
        if ending <= 0:
            return math.inf
        left = Curve.of(lambda days: 1 - self.gone(days), self._whole, scale=1.0)
        return self._of_a_round(left.integral, self._whole) / ending

    def portion(self, away: OverTime, days: int) -> float:
        """Return the part of so many days, 1 or more, on which something is the case, as it always is after the end.

        Args:
            away: the chance that it is, so many days after a dealing, nothing being mended; ``gone`` or more.
            days: how many are looked at.
        """
        whole, ending = self._whole, self._ending
        curve = Curve.of(away, min(whole, days))
        in_whole = self._of_a_round(curve.integral, whole) if days >= whole else 0.0
        missed = sum(
            chance * (in_whole + ending * (left - whole) if left >= whole else self._of_a_round(curve.integral, left))
            for left, chance in self._rounds(days)
        )
        return min(1.0, missed / days)

    def _rounds(self, days: int) -> Iterator[tuple[int, float]]:
        """Yield for each day on which a round may begin how many are left then, and the chance that one does."""
        mended = max(0.0, -math.expm1(-self.losses * self.every) - self._ending)
        ways = (self.every, self._quiet), (self._whole, mended)
        begun = [1.0] + [0.0] * (days - 1)
        for day in range(days):
            if chance := begun[day]:
                yield days - day, chance
                for length, part in ways:
                    if day + length < days:
                        begun[day + length] += chance * part

    def _of_a_round(self, total: OverTime, left: int) -> float:
        """Return what a round brings up to its end, or up to the last of the days that are left.

        Args:
            total: what so many days bring after which nothing was mended; a quiet round ends after A of them.
            left: how many days are left.
        """
        end = min(left, self._whole)
        return total(end) - (self._quiet * total(end - self.every) if end > self.every else 0.0)


def mean_days_unattended(losses: float, gone: OverTime) -> float:
    """Return the mean number of days until the key is gone where nobody asks; infinite where that cannot
    happen, or takes longer than can be told.

    Args:
        losses: events a day that lose any share at all.
        gone: the chance that the key is gone after so many days; it takes infinity.
    """
    if gone(math.inf) == 0:
        return math.inf
    # It is as likely as not that the key outlasts the first events by far: so each span is twice the one before.
    start, end, total = 0.0, 1 / losses, 0.0
    while end < math.inf:
        total += Curve.of(lambda days: 1 - gone(days), end, start=start, scale=1.0).integral(end)
        if 1 - gone(end) < _NEGLIGIBLE:
            return total
        start, end = end, 2 * end
    return math.inf


def portion_unattended(away: OverTime, days: int) -> float:
    """Return the part of the next days, 1 or more, on which something is the case where nobody asks."""
    return Curve.of(away, days).integral(days) / days
