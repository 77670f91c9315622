"""The plane of loss against exposure: where all rules any k of n lie, up to 12 custodians, and which of them are best.

A lower threshold buys less loss with more exposure. A rule is on the *frontier* where no other one that was looked at
is better in one of both and no worse in the other. Rules in which one custodian alone recovers, or all are needed, are
worked out as well, but are no choice, and none of them is on it.

Source: V. Pareto, "Manuale di economia politica", 1906 (from memory: what cannot be bettered in one thing but at the
cost of another); Blakley 1979 (from memory: shares lost and shares given away are two budgets).
May import: .compare, .lineup, .model, .odds.
Secret: nothing. Public: nothing either, as for the model.
Does not: say where on the frontier to be, or what a custodian costs.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace

from shares.planning.compare import ALIKE
from shares.planning.lineup import MAX_CUSTODIANS, lined_up
from shares.planning.model import Model
from shares.planning.odds import Odds, odds


@dataclass(frozen=True, slots=True)
class Point:
    """A rule any ``need`` of ``total``, and its odds with the intervals of the policy.

    Attributes:
        need, total: k and n.
        imagined: how many of the custodians are not the policy's.
        odds: over the years asked for.
        best: whether it is on the frontier.
    """

    need: int
    total: int
    imagined: int
    odds: Odds
    best: bool

    @property
    def extreme(self) -> bool:
        """Whether one custodian alone recovers, or one that is lost ends the key."""
        return self.need in (1, self.total)

    def better_than(self, other: Odds) -> bool:
        """Say whether both loss and exposure are lower, and not by so little that they are called alike."""
        return ALIKE * self.odds.loss < other.loss and ALIKE * self.odds.exposure < other.exposure


def plane(
    model: Model, years: float, *, progress: Callable[[int, int | None], None] | None = None
) -> tuple[Point, ...]:
    """Work out the odds of all rules any k of n over the custodians of a model, n from 1 to 12.

    Args:
        model: whose custodians, causes and intervals are used; its rule is not.
        years: as for ``odds``.
        progress: called with the number of rules worked out and to work out.

    Returns:
        In the order of n, then of k. A rule that is too much work for an exact answer is left out.

    Raises:
        ParameterError: a span of years that is out of range.
    """
    custodians = lined_up(model)
    pairs = [(total, need) for total in range(1, MAX_CUSTODIANS + 1) for need in range(1, total + 1)]
    found: dict[tuple[int, int], Odds] = {}
    for done, (total, need) in enumerate(pairs):
        if progress:
            progress(done, len(pairs))
        if (one := odds(custodians.rule(need, total), years)) is not None:
            found[total, need] = one
    points = [Point(need, total, custodians.imagined(total), one, False) for (total, need), one in found.items()]
    best = frontier(point.odds for point in points if not point.extreme)
    return tuple(replace(point, best=not point.extreme and point.odds in best) for point in points)


def frontier(all_odds: Iterable[Odds]) -> set[Odds]:
    """Return those odds that no others beat: by less loss or less exposure, and not more of the other.

    >>> near, far, beaten = (Odds(*pair, 0.0, 1.0) for pair in ((0.1, 0.2), (0.01, 0.3), (0.1, 0.3)))
    >>> frontier([near, far, beaten]) == {near, far}
    True
    """
    best = set[Odds]()
    least = (float("inf"), float("inf"))
    # From the least loss on, a rule is on the frontier where it has less exposure than all before it.
    for one in sorted(all_odds, key=lambda one: (one.loss, one.exposure)):
        here = (one.exposure, one.loss)
        if one.exposure < least[0] or here == least:
            best.add(one)
            least = here
    return best
