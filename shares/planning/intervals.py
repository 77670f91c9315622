"""The odds against an interval: between attestations, and between refreshes, with all else as it is.

Source: none; the odds are those of ``odds``.
May import: .changes, .model, .odds.
Secret: nothing. Public: nothing either, as for the model.
Does not: choose an interval (``targets`` does), or draw the curves.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from shares.planning.changes import attesting_every, refreshing_every
from shares.planning.model import DAYS_OF_A_YEAR, Model
from shares.planning.odds import Odds, odds

DAYS = (7, 10, 14, 21, 30, 45, 61, 91, 122, 182, 243, 365, 547, 730, 1095, 1460, 1825, 2555, 3650)
"""The intervals looked at, in days, from a week to ten years; about a third to a half is put on top each time."""


@dataclass(frozen=True, slots=True)
class AtInterval:
    """The odds where shares are attested, and refreshed, every so many days.

    Attributes:
        days: the interval; None for never.
        odds: loss and absence depend on the attestations alone, exposure on the refreshes.
    """

    days: int | None
    odds: Odds


def over_intervals(
    model: Model, years: float, *, progress: Callable[[int, int | None], None] | None = None
) -> tuple[AtInterval, ...]:
    """Work out the odds with all intervals of ``DAYS`` below the years looked at, the model's own, and never.

    Args:
        model: whose intervals are varied, both at once, as no odds depend on both.
        years: as for ``odds``.
        progress: called with the number of intervals worked out and to work out.

    Returns:
        In the order of the intervals, never last; nothing where the odds are too much work for an exact answer.

    Raises:
        ParameterError: a span of years that is out of range.
    """
    own = {days for days in (model.attest_every, model.refresh_every) if days is not None}
    looked_at = sorted({days for days in DAYS if days < years * DAYS_OF_A_YEAR} | own)
    found = []
    for done, days in enumerate((*looked_at, None)):
        if progress:
            progress(done, len(looked_at) + 1)
        one = odds(refreshing_every(attesting_every(model, days), days), years)
        if one is None:
            return ()
        found.append(AtInterval(days, one))
    return tuple(found)
