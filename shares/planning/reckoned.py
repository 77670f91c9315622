"""Odds that are exact or simulated, told and compared alike: an exact chance is an interval without a width.

Two odds differ as far as anyone can tell where their intervals do not touch. That is a strict test: of two simulations
of one model it is failed by fewer than one in a hundred.

Source: N. Schenker, J. F. Gentleman, "On judging the significance of differences by examining the overlap between
confidence intervals", The American Statistician 55(3), 2001 (intervals that do not touch: how strict that is).
May import: shares.errors, .model, .numbers, .odds, .simulate.
Secret: nothing. Public: nothing either, as for the model.
Does not: work odds out, or judge what is good enough.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import TypeAlias

from shares.errors import ExtraMissingError
from shares.planning import numbers
from shares.planning.model import DAYS_OF_A_YEAR, Model
from shares.planning.odds import Odds, days_of
from shares.planning.simulate import Simulated, simulate

Reckoned: TypeAlias = Odds | Simulated
"""Odds, however they were worked out; ``loss``, ``exposure`` and ``absence`` are those of either."""

HISTORIES, SEED = 100_000, 1
"""How many histories are drawn at most, and from which seed, where nobody says: a second for most rules."""
LEAST_HISTORIES = 1_000
"""So many are drawn where nobody says, however long each takes."""
_NUMBERS = 500_000_000
"""So many numbers, or fewer, are worked with for them: two to ten seconds (measured, at most 20 ns for each)."""


def usual(model: Model, years: float) -> int:
    """Return how many histories to draw where nobody says: fewer where each is long, and alike on every machine.

    A history takes a number for each clock and for each place in the rule, in each round with an event: of losses, of
    leaks, and of losses once more until a day on which someone is missing.

    Args:
        model, years: as for ``simulate``.

    Returns:
        1,000 to 100,000, in steps as 1,000, 2,000, 5,000, 10,000.

    Raises:
        ParameterError: the years are out of range.
    """
    days = days_of(years)
    losses = math.fsum(cause.loss for cause in model.causes) / DAYS_OF_A_YEAR
    leaks = math.fsum(cause.leak for cause in model.causes) / DAYS_OF_A_YEAR
    rounds = 1.5 * _rounds(losses, model.attest_every, model.repair_after, days)
    rounds += _rounds(leaks, model.refresh_every, 0, days)
    numbers_each = rounds * (len({cause.members for cause in model.causes}) + model.rule.size)
    count = min(HISTORIES, max(LEAST_HISTORIES, int(_NUMBERS / numbers_each)))
    power: int = 10 ** (len(str(count)) - 1)
    return max(step * power for step in (1, 2, 5) if step * power <= count)


def _rounds(rate: float, every: int | None, delay: int, days: int) -> float:
    """Return about how many rounds with an event there are in so many days, the last one always among them.

    Args:
        rate: events a day.
        every, delay: as for ``Upkeep``; None for one round without an end.
    """
    noisy = 0.0 if every is None else -math.expm1(-rate * every)
    return 1 + days * noisy / ((every or 1) + noisy * delay)


def instead(
    model: Model,
    years: float,
    *,
    histories: int | None,
    seed: int,
    drawn: Callable[[int, int | None], None] | None,
    usually: int | None = None,
) -> Simulated | None:
    """Simulate odds that are too much work for an exact answer.

    Args:
        model, years, seed: as for ``simulate``.
        histories: how many somebody asks for; None for the usual number, if numpy is there.
        drawn: called with how many histories are drawn and to be drawn.
        usually: the usual number; None for ``usual``. Odds that are told side by side come from as many.

    Returns:
        None where numpy is not installed and nobody asked for so many histories.

    Raises:
        ParameterError: the years, the histories or the seed are out of range.
        ExtraMissingError: so many histories are asked for, and numpy is not installed.
    """
    count = histories if histories is not None else usual(model, years) if usually is None else usually
    told = None if drawn is None else lambda done: drawn(done - 1, count)
    try:
        return simulate(model, years, histories=count, seed=seed, progress=told)
    except ExtraMissingError:
        if histories is not None:
            raise
        return None


def value(found: Reckoned, of: str) -> float:
    """Return one of the odds, or the best guess at it.

    Args:
        found: exact or simulated.
        of: "loss", "exposure" or "absence".
    """
    return float(getattr(found, of).value) if isinstance(found, Simulated) else float(getattr(found, of))


def ends(found: Reckoned, of: str) -> tuple[float, float]:
    """Return the ends of the interval of one of the odds; an exact one is both ends itself.

    Args:
        found, of: as for ``value``.

    >>> ends(Odds(0.25, 0.5, 0.0, 10.0), "loss")
    (0.25, 0.25)
    """
    if isinstance(found, Simulated):
        estimate = getattr(found, of)
        return estimate.low, estimate.high
    return value(found, of), value(found, of)


def apart(one: Reckoned, other: Reckoned, of: str) -> bool:
    """Say whether two odds differ by more than the chance of a simulation can make.

    Args:
        one, other, of: as for ``value``.
    """
    (low, high), (others_low, others_high) = ends(one, of), ends(other, of)
    return high < others_low or others_high < low


def fall(before: Reckoned, after: Reckoned, of: str) -> float | None:
    """Return by how much one of the odds falls; below 0 where it rises.

    Args:
        before, after, of: as for ``value``.

    Returns:
        None where one of both is simulated and they cannot be told apart.
    """
    exact = isinstance(before, Odds) and isinstance(after, Odds)
    return value(before, of) - value(after, of) if exact or apart(before, after, of) else None


def words(found: Reckoned, of: str) -> str:
    """Write one of the odds; one that is simulated with its interval, and never as none.

    Args:
        found, of: as for ``value``.
    """
    told, within = parts(found, of)
    if not within:
        return told
    return f"{told}: {within}" if " of " in told else f"{told} ({within})"


def parts(found: Reckoned, of: str) -> tuple[str, str]:
    """Write one of the odds, and apart from it its interval; nothing for the interval of an exact one.

    Args:
        found, of: as for ``value``.
    """
    if not isinstance(found, Simulated):
        return numbers.chance(value(found, of)), ""
    estimate = getattr(found, of)
    seen = {0: "0", found.histories: "all"}.get(estimate.seen)
    told = f"{seen} of {found.histories:,}" if seen else numbers.chance(estimate.value)
    return told, numbers.interval(estimate.low, estimate.high)


def briefly(found: Reckoned, of: str) -> str:
    """Write one of the odds without its interval, where that is told elsewhere.

    Args:
        found, of: as for ``value``.
    """
    if isinstance(found, Simulated) and getattr(found, of).seen == 0:
        return numbers.interval(*ends(found, of))
    return numbers.chance(value(found, of))
