"""Odds that are exact or simulated, told and compared alike: an exact chance is an interval without a width.

Two odds differ as far as anyone can tell where their intervals do not touch. That is a strict test: of two simulations
of one model it is failed by fewer than one in a hundred.

Source: N. Schenker, J. F. Gentleman, "On judging the significance of differences by examining the overlap between
confidence intervals", The American Statistician 55(3), 2001 (intervals that do not touch: how strict that is).
May import: shares.errors, .model, .numbers, .odds, .simulate.
Secret: nothing. Public: nothing either, as for the model.
Does not: work anything out, or judge what is good enough.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeAlias

from shares.errors import ExtraMissingError
from shares.planning import numbers
from shares.planning.model import Model
from shares.planning.odds import Odds
from shares.planning.simulate import Simulated, simulate

Reckoned: TypeAlias = Odds | Simulated
"""Odds, however they were worked out; ``loss``, ``exposure`` and ``absence`` are those of either."""

HISTORIES, SEED = 100_000, 1
"""How many histories are drawn, and from which seed, where nobody says: a second for most rules."""


def instead(
    model: Model, years: float, *, histories: int | None, seed: int, drawn: Callable[[int, int | None], None] | None
) -> Simulated | None:
    """Simulate odds that are too much work for an exact answer.

    Args:
        model, years, seed: as for ``simulate``.
        histories: how many somebody asks for; None for the usual number, if numpy is there.
        drawn: called with how many histories are drawn and to be drawn.

    Returns:
        None where numpy is not installed and nobody asked for so many histories.

    Raises:
        ParameterError: the years, the histories or the seed are out of range.
        ExtraMissingError: so many histories are asked for, and numpy is not installed.
    """
    count = HISTORIES if histories is None else histories
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
