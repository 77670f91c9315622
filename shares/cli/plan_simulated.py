"""The members of the JSON of ``shares plan`` that tell of odds that are simulated.

Source: none.
May import: shares.planning.
Secret: nothing. Public: nothing either, as for the policy.
Does not: simulate.
"""

from __future__ import annotations

import math

from shares.planning.odds import Odds
from shares.planning.simulate import NUMPY, Estimate, Simulated
from shares.planning.telling import DANGERS


def simulated_members(simulated: Simulated | None) -> dict[str, object] | None:
    """Return simulated odds for JSON, which has no infinity: null years are too rare to be told, and years whose value
    is null are 'never'."""
    if simulated is None:
        return None
    years = simulated.years_to_loss
    return {
        **{of: _estimate_members(getattr(simulated, of)) for of in DANGERS},
        "years_to_loss": None if years is None else _estimate_members(years),
        "histories": simulated.histories,
        "seed": simulated.seed,
        "numpy": simulated.numpy,
    }


def extra_missing(odds: Odds | None, simulated: Simulated | None) -> str | None:
    """Return the package without which there are no odds, for JSON; null where there are."""
    return NUMPY if odds is None and simulated is None else None


def _estimate_members(estimate: Estimate) -> dict[str, object]:
    value, low, high = (None if end == math.inf else end for end in (estimate.value, estimate.low, estimate.high))
    return {"value": value, "low": low, "high": high, "seen": estimate.seen}
