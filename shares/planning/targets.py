"""The other way round: from the odds that are wanted to the smallest rule and the longest intervals that have them.

Looked at are all rules k of n of ``lineup`` that are ``sound``; where none is, as with two sites alone, all in which
neither one custodian makes a quorum nor all are needed. Their intervals come from a list of those that people keep, a
week to five years or never. Shares are not attested oftener than a lost one is made good: nobody would keep up.

Loss does not depend on how often shares are refreshed, nor exposure on how often they are attested: so both intervals
are found at once. Odds are taken to grow with an interval; that what is told meets the targets is worked out, and only
that no longer interval does rests on this.

Source: search through all cases, in a fixed order; bisection.
May import: shares.errors, .changes, .lineup, .model, .odds, .reckoned,
.soundness.
Secret: nothing. Public: nothing either, as for the model.
Does not: look at trees of groups, at other sites, or at what anything costs.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import NamedTuple

from shares.errors import ParameterError
from shares.planning.changes import attesting_every, refreshing_every
from shares.planning.lineup import MAX_CUSTODIANS, lined_up
from shares.planning.model import DAYS_OF_A_YEAR, Model
from shares.planning.odds import Contribution, Odds, contributions, odds
from shares.planning.reckoned import Reckoned, ends
from shares.planning.soundness import sound

INTERVALS: tuple[int | None, ...] = (None, 1825, 730, 365, 182, 91, 30, 14, 7)
"""Days between attestations or refreshes that are tried, the longest first; None is never."""


class Targets(NamedTuple):
    """What odds are wanted.

    Attributes:
        loss, exposure: chances that are not to be exceeded; 1 where anything is good enough.
    """

    loss: float
    exposure: float

    @property
    def free(self) -> tuple[str, ...]:
        """Those for which anything is good enough: whatever meets the other one may make them very large."""
        return tuple(of for of, most in self._asdict().items() if most == 1)

    def met_by(self, found: Reckoned) -> bool | None:
        """Say whether odds are as good as is wanted; None where a simulation cannot tell."""
        wanted = [(ends(found, of), most) for of, most in self._asdict().items() if most < 1]
        if all(high <= most for (_, high), most in wanted):
            return True
        return False if any(low > most for (low, _), most in wanted) else None

    def missed_by(self, found: Odds) -> float:
        """Return how far odds are from the targets: the larger of both ratios, as a logarithm; 0 where they are met."""
        ratios = (found.loss / self.loss, found.exposure / self.exposure)
        return max(0.0, math.log(max(*ratios, 1.0)))


@dataclass(frozen=True, slots=True)
class Choice:
    """A rule k of n with its intervals, and the odds that it has.

    Attributes:
        need, total: k and n.
        imagined: how many of the custodians are not the policy's.
        attest_every, refresh_every: days; None for never.
        odds: over the years asked for.
    """

    need: int
    total: int
    imagined: int
    attest_every: int | None
    refresh_every: int | None
    odds: Odds

    @property
    def rounds(self) -> float:
        """How many attestations and refreshes a year there are."""
        return sum(DAYS_OF_A_YEAR / days for days in (self.attest_every, self.refresh_every) if days)


@dataclass(frozen=True, slots=True)
class Answer:
    """What was found for targets.

    Attributes:
        met: whether the targets can be met.
        choices: the smallest rule that meets them, and then larger ones, each with fewer rounds a year than the one
            before; or else the one that comes nearest.
        attested: the days between attestations that were tried, the longest first; None is never.
        sound: whether the rules tried are sound; else none is.
        causes: what stands in the way: the causes of the odds that come nearest; none where the targets are met.
    """

    met: bool
    choices: tuple[Choice, ...]
    attested: tuple[int | None, ...]
    sound: bool
    causes: tuple[Contribution, ...] = ()


def parse_targets(text: str) -> Targets:
    """Read targets, as the command line has them.

    Args:
        text: ``loss=`` and ``exposure=``, or one of them, each with a number above 0 and below 1 or a percentage.

    Raises:
        ParameterError: it is not written so.

    >>> parse_targets("loss=1e-6,exposure=0.1 %")
    Targets(loss=1e-06, exposure=0.001)
    """
    found: dict[str, float] = {}
    if re.search(r"=\s*[0-9]+,[0-9]", text):
        raise ParameterError(
            "a decimal comma is not read, as a comma parts the two targets", hint="write a point, like loss=0.1%"
        )
    for part in text.split(","):
        form = re.fullmatch(r"\s*(loss|exposure)\s*=\s*([0-9]{1,3}(?:\.[0-9]{1,12})?(?:e-[0-9]{1,2})?)\s*(%?)\s*", part)
        if form is None or form[1] in found:
            raise ParameterError(
                "targets are written like loss=1e-6,exposure=0.1%, each at most once", hint="either may be left out"
            )
        found[form[1]] = float(form[2]) / (100 if form[3] else 1)
        if not 0 < found[form[1]] < 1:
            raise ParameterError(
                f"the target for {form[1]} is not above 0 and below 1", hint="no rule makes a danger nothing"
            )
    return Targets(found.get("loss", 1.0), found.get("exposure", 1.0))


def meeting(
    model: Model, targets: Targets, years: float, *, progress: Callable[[int, int | None], None] | None = None
) -> Answer:
    """Find the smallest rule and the longest intervals that meet targets, or what comes nearest.

    Args:
        model: whose custodians, sites, lines, media and rates are used; its rule and intervals are not.
        targets: what is wanted.
        years: as for ``odds``.
        progress: called with the number of rules looked at and to look at.

    Returns:
        Of the rules of one size, the one with the fewest rounds a year, then with the smaller threshold. What comes
        nearest misses its worse target by the smallest factor, with the shortest intervals where longer ones do not do.

    Raises:
        ParameterError: a span of years that is out of range, or no rule could be worked out exactly.
    """
    custodians, attested = lined_up(model), attestations(model)
    nearest: tuple[float, Choice] | None = None
    choices = list[Choice]()
    is_sound = any(sound(custodians.rule(need, total)) for total, need in _rules())
    pairs = [(total, need) for total, need in _rules() if not is_sound or sound(custodians.rule(need, total))]
    for done, (total, need) in enumerate(pairs):
        if progress:
            progress(done, len(pairs))
        flat, imagined = custodians.rule(need, total), custodians.imagined(total)
        best = _with(flat, attested[-1], INTERVALS[-1], years)
        if best is None:
            continue
        missed = targets.missed_by(best)
        if missed and (nearest is None or (missed, total) < (nearest[0], nearest[1].total)):
            nearest = missed, Choice(need, total, imagined, attested[-1], INTERVALS[-1], best)
        # A rule that asks for more rounds a year than a smaller one is no choice.
        if not missed:
            found = _at_leisure(flat, targets, years, imagined)
            if choices and choices[-1].total == total and found.rounds < choices[-1].rounds:
                choices[-1] = found
            elif not choices or (choices[-1].total < total and found.rounds < choices[-1].rounds):
                choices.append(found)
    if choices:
        return Answer(True, tuple(choices), attested, is_sound)
    if nearest is None:
        raise ParameterError("rules over these custodians are too large to be worked out exactly")
    choice = nearest[1]
    flat = custodians.rule(choice.need, choice.total)
    reached = Targets(max(targets.loss, choice.odds.loss), max(targets.exposure, choice.odds.exposure))
    found = _at_leisure(flat, reached, years, choice.imagined)
    kept = refreshing_every(attesting_every(flat, found.attest_every), found.refresh_every)
    return Answer(False, (found,), attested, is_sound, contributions(kept, years) or ())


def attestations(model: Model) -> tuple[int | None, ...]:
    """Return the days between attestations that are tried for a model, the longest first; None is never.

    Args:
        model: whose ``repair_after`` counts: none is shorter.

    >>> from shares.sharing.rule import Rule
    >>> attestations(Model(Rule(1, ("north-pier",)), (), repair_after=60))
    (None, 1825, 730, 365, 182, 91)
    """
    return tuple(days for days in INTERVALS if days is None or days >= model.repair_after)


def _rules() -> Iterator[tuple[int, int]]:
    for total in range(3, MAX_CUSTODIANS + 1):
        for need in range(2, total):
            yield total, need


def _at_leisure(flat: Model, targets: Targets, years: float, imagined: int) -> Choice:
    """Return a rule that meets targets at the shortest intervals with the longest that do."""
    # Both bisections go on side by side, as one pass gives both odds.
    tried = attestations(flat), INTERVALS
    low, high = [0, 0], [len(intervals) - 1 for intervals in tried]
    while low != high:
        middle = [(a + b) // 2 for a, b in zip(low, high, strict=True)]
        found = _with(flat, tried[0][middle[0]], tried[1][middle[1]], years)
        fits = found is not None and (found.loss <= targets.loss, found.exposure <= targets.exposure)
        for i, good in enumerate(fits or (False, False)):
            if low[i] < high[i]:
                low[i], high[i] = (low[i], middle[i]) if good else (middle[i] + 1, high[i])
    attest, refresh = (intervals[place] for intervals, place in zip(tried, low, strict=True))
    chosen = _with(flat, attest, refresh, years)
    if chosen is None:  # pragma: no cover - the same rule was worked out before.
        raise ParameterError("a rule over these custodians is too large to be worked out exactly")
    return Choice(flat.rule.need, len(flat.custodians), imagined, attest, refresh, chosen)


def _with(flat: Model, attest: int | None, refresh: int | None, years: float) -> Odds | None:
    return odds(refreshing_every(attesting_every(flat, attest), refresh), years)
