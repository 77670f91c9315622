"""The odds of a policy by simulation: whole histories drawn by lot, and what can be said from how many go ill.

For rules and causes that are too entangled for ``odds``, and to check it where they are not: the same three odds of the
same model. One of 100,000 histories is 10^-5: odds far below that are not seen, and then the interval says no more than
that they lie below 3.7/histories. Only more histories, or an exact answer, can say more.

The same seed draws the same histories, with the same version of numpy. Losses, leaks and absences have lots of their
own: what befalls one of them does not depend on the rates of the others.

Source: Cox 1962 (a mean life is the mean time of the rounds over the chance that one is the last, whatever stops the
watching); A. Wald, "On cumulative sums of random variables", Ann. Math. Stat. 15, 1944 (why); M. E. O'Neill, "PCG",
2014 (the generator).
May import: shares.errors, .confidence, .events, .histories, .model, .odds, .structure.
Secret: nothing. Public: nothing either, as for the model. The lots are none that a key could come from.
Does not: make the odds of rare things larger in order to see them, or choose a seed.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

from shares.errors import ExtraMissingError, ParameterError
from shares.planning.confidence import interval
from shares.planning.events import leaked, lost, missing
from shares.planning.model import DAYS_OF_A_YEAR, Model
from shares.planning.odds import days_of
from shares.planning.structure import dual

MAX_HISTORIES = 1_000_000_000
NUMPY = "numpy"
INSTALL = "install numpy 1.26.4 or later beside shares, as README says under 'Two commands'"
"""What to do where it is missing. The extra that brings it is not named: a stranger's package may have the name of this
one on an index, and would be what ``pip install`` fetches by that name."""

_MOST_AT_ONCE = 1 << 14
_NUMBERS_AT_ONCE = 1 << 20
"""So many numbers are kept for the histories that are drawn at once, in each of a few tables; 8 MiB."""
_ENOUGH = 10
"""So many losses are seen before a mean time is told: with fewer, its interval would be a guess itself."""
_DEVIATIONS = 1.959963984540054
"""What a bell curve leaves out 2.5 % beyond, on either side."""


@dataclass(frozen=True, slots=True)
class Estimate:
    """What a simulation says of a number.

    Attributes:
        value: the best guess.
        low, high: the ends of the 95 % interval.
        seen: how many histories showed what it is about.
    """

    value: float
    low: float
    high: float
    seen: int


@dataclass(frozen=True, slots=True)
class Simulated:
    """Odds over a number of years, as ``Odds`` has them, by simulation.

    Attributes:
        loss, exposure, absence: chances, with the exact interval of Clopper and Pearson.
        years_to_loss: the mean time until no quorum is left, with the interval of a bell curve over its logarithm; None
            where fewer than 10 losses were seen, or they take longer than can be told; infinite where none can be.
        histories: how many were drawn.
        seed: what they were drawn from.
        numpy: the version that drew them; another one may draw others from the same seed.
    """

    loss: Estimate
    exposure: Estimate
    absence: Estimate
    years_to_loss: Estimate | None
    histories: int
    seed: int
    numpy: str


def simulate(
    model: Model, years: float, *, histories: int, seed: int, progress: Callable[[int], None] | None = None
) -> Simulated:
    """Estimate the odds of a policy over some years by drawing histories.

    Args:
        model: as ``model_of`` returns it; any rule.
        years: of 365 days, at least a day and at most 1,000 years; rounded to days.
        histories: how many to draw, 1 to 1,000,000,000. 100,000 tell odds of 1 % to within 6 % of themselves.
        seed: which histories to draw, 0 or more; to be shown along with the result.
        progress: told again and again how many are done; whatever it raises ends the simulation.

    Raises:
        ParameterError: the years, the histories or the seed are out of range.
        ExtraMissingError: numpy is not installed.
    """
    days = days_of(years)
    if not 1 <= histories <= MAX_HISTORIES:
        raise ParameterError(
            f"a simulation draws at least one history and at most {MAX_HISTORIES:,}",
            where="histories",
            hint="100,000 is common",
        )
    if seed < 0:
        raise ParameterError("a seed is a whole number, 0 or more", where="seed")
    try:
        import numpy as np

        from shares.planning.histories import Clocks, away, ends
    except ModuleNotFoundError as error:
        if error.name != "numpy":
            raise
        raise ExtraMissingError("to simulate takes numpy, which is not installed", hint=INSTALL) from None

    losses = Clocks.of(dual(model.rule), model.causes, lost)
    leaks = Clocks.of(model.rule, model.causes, leaked)
    absences = Clocks.of(dual(model.rule), model.causes, lambda cause: missing(cause, model.patience))
    lots = [np.random.Generator(np.random.PCG64(own)) for own in np.random.SeedSequence(seed).spawn(3)]
    at_once = min(_MOST_AT_ONCE, _NUMBERS_AT_ONCE // max(one.width for one in (losses, leaks, absences)))
    lives, exposed, absent, done = [], 0, 0, 0
    while done < histories:
        count = min(at_once, histories - done)
        lives.append(ends(losses, lots[0], model.attest_every, model.repair_after, days, count))
        exposed += ends(leaks, lots[1], model.refresh_every, 0, days, count).within
        absent += away(absences, lots[2], model.attest_every, model.repair_after, days, count)
        done += count
        if progress is not None:
            progress(done)
    sums = [math.fsum(getattr(one, of) for one in lives) for of in ("ended", "lived", "squared", "of_ended")]
    return Simulated(
        _portion(sum(one.within for one in lives), histories),
        _portion(exposed, histories),
        _portion(absent, histories),
        _mean_years(*sums) if _can_be_lost(model) else Estimate(math.inf, math.inf, math.inf, 0),
        histories,
        seed,
        np.__version__,
    )


def _portion(seen: int, histories: int) -> Estimate:
    return Estimate(seen / histories, *interval(seen, histories), seen)


def _can_be_lost(model: Model) -> bool:
    spared = set(model.custodians).difference(*(cause.members for cause in model.causes if cause.loss))
    return not model.rule.satisfied_by(spared)


def _mean_years(ended: float, lived: float, squared: float, of_ended: float) -> Estimate | None:
    """Return the time lived for each life that ended, and how far that can be trusted (the ratio of two sums)."""
    if ended < _ENOUGH or not squared < math.inf:
        return None
    mean = lived / ended
    deviation = math.sqrt(max(0.0, squared - 2 * mean * of_ended + mean * mean * ended)) / lived
    years, factor = mean / DAYS_OF_A_YEAR, math.exp(_DEVIATIONS * deviation)
    return Estimate(years, years / factor, years * factor, int(ended))
