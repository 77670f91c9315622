"""How ``shares plan`` tells odds that are simulated: the members of its JSON, how sure they are, and why they are so.

Source: none.
May import: shares.planning.
Secret: nothing. Public: nothing either, as for the policy.
Does not: simulate.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator

from shares.planning import numbers
from shares.planning.odds import Odds
from shares.planning.reckoned import ends, value, words
from shares.planning.simulate import EXTRA, MAX_HISTORIES, Estimate, Simulated

OF = ("loss", "exposure", "absence")


def simulated_members(simulated: Simulated | None) -> dict[str, object] | None:
    """Return simulated odds for JSON, which has no infinity: null years are too rare to be told, and years whose value
    is null are 'never'."""
    if simulated is None:
        return None
    years = simulated.years_to_loss
    return {
        **{of: _estimate_members(getattr(simulated, of)) for of in OF},
        "years_to_loss": None if years is None else _estimate_members(years),
        "histories": simulated.histories,
        "seed": simulated.seed,
    }


def extra_missing(odds: Odds | None, simulated: Simulated | None) -> str | None:
    """Return the extra without which there are no odds, for JSON; null where there are."""
    return EXTRA if odds is None and simulated is None else None


def _estimate_members(estimate: Estimate) -> dict[str, object]:
    value, low, high = (None if end == math.inf else end for end in (estimate.value, estimate.low, estimate.high))
    return {"value": value, "low": low, "high": high, "seen": estimate.seen}


def years_words(simulated: Simulated) -> str:
    """Write the mean time until the first loss."""
    years = simulated.years_to_loss
    if years is None:
        return f"too rare to be told from {simulated.histories:,} histories"
    value, low, high = (numbers.years(end) for end in (years.value, years.low, years.high))
    # Where all are alike as they are told, the interval would say nothing.
    return value if low == high else f"{value} ({low} to {high})"


def simulated_rows(simulated: Simulated, years: float) -> Iterator[tuple[str, ...]]:
    """Yield the table of simulated odds: what, and how probably with its interval.

    Args:
        simulated: the odds.
        years: over which they are.
    """
    yield f"odds over {numbers.horizon(years)}, simulated", "chance, and its 95 % interval"
    yield "loss: no quorum is left", words(simulated, "loss")
    yield "exposure: a quorum is known", words(simulated, "exposure")
    yield "no quorum on a given day", words(simulated, "absence")


def why(simulated: Iterable[Simulated], odds: Odds | None) -> str:
    """Return what is to be known of a simulation: why it was made, how it is made again, and how to be surer.

    Args:
        simulated: one or several with the same histories and seed.
        odds: exact ones beside them; None where they were too much work.
    """
    first, *others = simulated
    told = f"Simulated from {first.histories:,} histories{' each' if others else ''} with seed {first.seed}"
    if odds is None:
        told += (
            ", as the rule, or the way in which people, sites and lines overlap in it, is too entangled for exact odds"
        )
    told += (
        ". At least 95 of 100 such intervals hold the true odds of the model; nothing seen is not never. The same seed "
        "and the same version of numpy draw the same histories."
    )
    if 10 * first.histories <= MAX_HISTORIES:
        told += f" Ten times as many (--histories {10 * first.histories}) give intervals about a third as wide."
    return told


def beside(odds: Odds, simulated: Simulated) -> str:
    """Return in one sentence whether exact odds lie within the intervals of simulated ones."""
    names = {"loss": "loss", "exposure": "exposure", "absence": "no quorum on a given day"}
    out = []
    for of in OF:
        low, high = ends(simulated, of)
        if not low <= value(odds, of) <= high:
            out.append(names[of])
    if not out:
        return "The exact odds lie within all three intervals."
    return f"The exact odds of {' and of '.join(out)} lie outside the interval, as one in twenty may by chance."
