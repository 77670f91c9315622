"""The odds of a policy: that its key is lost, that it is exposed, and that no quorum comes together on a day.

* *Loss*: within the years looked at there is a moment at which no quorum of shares is left. Attestations and repairs
  are those of ``renewal``; a refresh is not counted as a repair.
* *Exposure*: someone comes to know a quorum of shares of one epoch. A refresh begins an epoch and makes what leaked
  before worthless; a repair does not. Leaks are not found out.
* *Absence*: on a day of these years, taken at random, those who can be reached within ``recover_within`` and have their
  shares make no quorum; nor do they on any day after a loss. An absence of a mean of ``absent_for`` days goes on for
  exponentially long.

All three are exact for the model, up to rounding (some 12 digits); ``odds`` returns None where that is too much work.
They are as good as the rates, and no better: what links custodians and is in no cause is not in the odds.

Source: Barlow, Proschan 1975; Cox 1962. Blakley 1979 (from memory: shares lost and shares given away are two budgets).
May import: shares.errors, shares.sharing.rule, .events, .model, .renewal, .structure.
Secret: nothing. Public: nothing either, as for the model.
Does not: simulate, advise, or say what odds are good enough.
"""

from __future__ import annotations

import math
import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

from shares.errors import ParameterError
from shares.planning.events import Events, Force, leaked, lost, missing
from shares.planning.model import DAYS_OF_A_YEAR, Cause, Model
from shares.planning.renewal import Upkeep, mean_days_unattended, portion_unattended
from shares.planning.structure import dual
from shares.sharing.rule import Rule

MAX_YEARS = 1000
_SMALLEST, _LONGEST = math.ulp(0.0), sys.float_info.max


@dataclass(frozen=True, slots=True)
class Odds:
    """Chances over a number of years, 0 to 1.

    Attributes:
        loss: that at some time no quorum is left.
        exposure: that a quorum of shares of one epoch is known to someone who must not know it.
        absence: that on a day no quorum can be brought together.
        years_to_loss: the mean time until no quorum is left; infinite where that cannot happen.
    """

    loss: float
    exposure: float
    absence: float
    years_to_loss: float


@dataclass(frozen=True, slots=True)
class Contribution:
    """By how much each of the odds falls when one cause is taken away, and all else stays.

    The parts do not add up to the whole: what takes two causes goes away with either. A cause that does no harm alone
    may even help by a hair where repairs take time (see ``renewal``): its part is 0 then.

    Attributes:
        kind: "share" for all shares' own losses, "person" for all people; "site", "line" or "medium".
        name: the site, manager or medium; empty for shares and people.
        loss, exposure, absence: differences of chances, 0 or more; None where they are simulated, and the part
            cannot be told from what chance makes.
    """

    kind: str
    name: str
    loss: float | None
    exposure: float | None
    absence: float | None


def odds(model: Model, years: float) -> Odds | None:
    """Work out the odds of a policy over some years.

    Args:
        model: as ``model_of`` returns it.
        years: of 365 days, at least a day and at most 1,000 years; rounded to days.

    Returns:
        None where the rule or the causes are too entangled for an exact answer: then simulate.

    Raises:
        ParameterError: a span of years that is out of range.
    """
    days = days_of(years)
    if (losses := _events(dual(model.rule), model, lost)) is None:
        return None
    if (leaks := _events(model.rule, model, leaked)) is None:
        return None
    if (away := _events(dual(model.rule), model, lambda cause: missing(cause, model.patience))) is None:
        return None
    if model.attest_every is None:
        lost_within, absence = losses.within(days), portion_unattended(away.within, days)
        mean = mean_days_unattended(losses.daily, losses.within)
    else:
        upkeep = Upkeep(model.attest_every, model.repair_after, losses.daily, losses.within)
        lost_within, absence = upkeep.within(days), upkeep.portion(away.within, days)
        mean = upkeep.mean_days()
    exposure = _exposed(leaks, model.refresh_every, days)
    return Odds(
        _or_possible(lost_within, losses),
        _or_possible(exposure, leaks),
        _or_possible(absence, away),
        min(mean / DAYS_OF_A_YEAR, _LONGEST) if _possible(losses) else math.inf,
    )


def contributions(model: Model, years: float) -> tuple[Contribution, ...] | None:
    """Work out how much of the odds each cause makes: shares' own losses, people, each site, line and medium.

    Args and Raises are those of ``odds``.

    Returns:
        One for every cause that is not without effect, in the order of the model; None as for ``odds``.
    """
    whole = odds(model, years)
    if whole is None:
        return None
    found = []
    for kind, name, spared in without_each(model):
        less = odds(spared, years)
        if less is None:
            return None
        parts = [getattr(whole, of) - getattr(less, of) for of in ("loss", "exposure", "absence")]
        if any(part > 0 for part in parts):
            found.append(Contribution(kind, name, *(max(0.0, part) for part in parts)))
    return tuple(found)


def without_each(model: Model) -> Iterator[tuple[str, str, Model]]:
    """Yield for each cause that ``contributions`` tells its kind, its name, and the model without it.

    Args:
        model: as ``model_of`` returns it.
    """
    for kind, name in dict.fromkeys(_named(cause) for cause in model.causes):
        yield kind, name, replace(model, causes=tuple(one for one in model.causes if _named(one) != (kind, name)))


def days_of(years: float) -> int:
    """Return a span of years in days.

    Raises:
        ParameterError: it is shorter than a day, longer than 1,000 years, or no number.
    """
    if not 1 / DAYS_OF_A_YEAR <= years <= MAX_YEARS:
        raise ParameterError(
            f"odds are over at least one day and at most {MAX_YEARS:,} years",
            where="years",
            hint="10 is common: as long as the key is to be kept",
        )
    return max(1, round(years * DAYS_OF_A_YEAR))


def _named(cause: Cause) -> tuple[str, str]:
    return cause.kind, "" if cause.kind in ("share", "person") else cause.name


def _events(rule: Rule, model: Model, force: Callable[[Cause], Force]) -> Events | None:
    return Events.of(rule, [(cause.members, force(cause)) for cause in model.causes])


def _exposed(leaks: Events, every: int | None, days: int) -> float:
    epochs, rest = (0, days) if every is None else divmod(days, every)
    whole, partly = leaks.within(every) if every and epochs else 0.0, leaks.within(rest)
    if 1.0 in (whole, partly):
        return 1.0
    return -math.expm1(epochs * math.log1p(-whole) + math.log1p(-partly))


def _possible(events: Events) -> bool:
    return events.within(math.inf) > 0


def _or_possible(chance: float, events: Events) -> float:
    """Return a chance; one that is too small for a number, and yet not nothing, as the smallest number there is."""
    return max(chance, _SMALLEST) if _possible(events) else chance
