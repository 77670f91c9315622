"""The page of a plan: what a policy's odds are, where it lies among plain rules, and what would change them.

It is made for a meeting before a ceremony: printed, handed round and filed with the decision. The same policy, years,
histories and seed make the same page, byte for byte, with one version of this program (and of numpy, where it drew).

Source: W3C, "Web Content Accessibility Guidelines 2.2" (text for what is drawn, headings, contrast, reflow); E. R.
Tufte, "The Visual Display of Quantitative Information", 1983 (from memory: labels at the lines, no legends); the order,
the odds first, is ours.
May import: shares.paper.page, .advice, .befalling, .examine, .figures, .intervals, .lineup, .model, .numbers, .odds,
.plane, .reckoned, .telling.
Secret: nothing. Confidential: the page, like the policy: it tells whom to coerce, and where. Public: nothing.
Does not: work anything out but what it draws.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Final

from shares.paper.page import REPORT, render
from shares.planning import advice, figures, numbers
from shares.planning.advice import Outlook
from shares.planning.befalling import befalling
from shares.planning.examine import Plan
from shares.planning.intervals import AtInterval, over_intervals
from shares.planning.lineup import IMAGINED
from shares.planning.model import Model
from shares.planning.odds import Contribution, Odds
from shares.planning.plane import Point, plane
from shares.planning.reckoned import ends, value, words
from shares.planning.telling import DANGERS, NO_SUM, beside, cause_rows, change_rows, glued, not_told, why, years_words

_TEMPLATE: Final = Path(__file__).with_name("plan.html")
_STYLE: Final = Path(__file__).with_name("plan.css")

CAUTIONS: Final = (
    "Odds are as good as the rates they come from, and no better: replace what is assumed by what your own "
    "organisation has seen.",
    "That custodians share nothing but people, sites, reporting lines and media is an assumption. What else links them "
    "- one courier, one supplier, one law, one disaster - is not in the odds, and makes them worse.",
    "The odds know nothing of a lost passphrase of all, a program that fails, or a share that was never readable: only "
    "drills and attestations show these.",
    "Which odds are good enough, and whether the policy meets a law, standard or contract, is for a professional to "
    "judge.",
)
"""The limits of a plan, at the place where somebody relies on it."""

_MOST_BETTER = 6


@dataclass(frozen=True, slots=True)
class Drawn:
    """What the page draws beside the plan itself.

    Attributes:
        points: the plane; empty where no plain rule could be worked out.
        along: odds against intervals; empty where they could not be worked out.
    """

    points: tuple[Point, ...]
    along: tuple[AtInterval, ...]


def drawn(model: Model, years: float, *, progress: Callable[[int, int | None], None] | None = None) -> Drawn:
    """Work out what the page draws.

    Args:
        model, years: as for ``outlook``.
        progress: called with the number of rules worked out and to work out.

    Raises:
        ParameterError: a span of years that is out of range.
    """
    return Drawn(plane(model, years, progress=progress), over_intervals(model, years))


def plan_page(
    plan: Plan, model: Model, view: Outlook, on_it: Drawn, assumptions: tuple[str, ...], *, digest: bytes, program: str
) -> bytes:
    """Return the page of a plan.

    Args:
        plan: the examination of the policy.
        model: its model.
        view: its odds, as ``outlook`` returns them.
        on_it: what is drawn.
        assumptions: as ``assumed.assumptions`` returns them.
        digest: of the policy, 32 bytes.
        program: name and version of what made the page.
    """
    return render(
        _TEMPLATE,
        REPORT,
        _STYLE,
        plan=plan,
        model=model,
        view=view,
        over=numbers.horizon(view.years),
        dangers=tuple(_dangers(view)),
        until_lost=_until_lost(view),
        simulated=_simulated(view),
        not_told=not_told(view),
        changes=tuple(change_rows(view.now, view.changes)) if view.now and view.changes else (),
        points=on_it.points,
        plane=figures.plane_figure(on_it.points, view.now) if on_it.points else None,
        better=_better(on_it.points, view),
        no_choice=_no_choice(on_it.points),
        along=on_it.along,
        attested=_curves(on_it, model.attest_every, {"loss": "loss", "absence": "no quorum on a day"}),
        refreshed=_curves(on_it, model.refresh_every, {"exposure": "exposure"}),
        causes=tuple(_bars(view.causes or ())),
        no_sum=NO_SUM,
        rates=tuple(befalling(model)),
        assumptions=assumptions,
        imagined=IMAGINED,
        cautions=CAUTIONS,
        digest=digest.hex(),
        program=program,
        box=figures,
        chance=numbers.chance,
        every=numbers.every,
        glued=glued,
    )


@dataclass(frozen=True, slots=True)
class _Danger:
    """One of the odds on the page: what it is, how great, as one in so many, and by what."""

    what: str
    chance: str
    one_in: str
    by: str


def _dangers(view: Outlook) -> Iterator[_Danger]:
    if view.now is None:
        return
    for of, what in DANGERS.items():
        one_in = numbers.one_in(value(view.now, of)) if view.odds else ""
        by = "not worked out" if view.causes is None else "; ".join(advice.largest(view.causes, of))
        yield _Danger(what, words(view.now, of), one_in, by)


def _simulated(view: Outlook) -> str:
    """Say how odds were simulated, and, where there are exact ones, what came of it."""
    if view.simulated is None:
        return ""
    told = why([view.simulated], view.odds)
    if view.odds is None:
        return told
    found = "; ".join(f"{what}, {words(view.simulated, of)}" for of, what in DANGERS.items())
    return f"As a check, the odds were simulated: {found}. {beside(view.odds, view.simulated)} {told}"


def _until_lost(view: Outlook) -> str:
    if view.odds:
        return numbers.years(view.odds.years_to_loss)
    return years_words(view.simulated) if view.simulated else ""


def _bars(causes: tuple[Contribution, ...]) -> Iterator[tuple[str, tuple[tuple[str, float], ...]]]:
    """Yield the name of each cause and, for each of the odds, what it adds, in words and as a bar of up to 100."""
    most = {of: max((getattr(one, of) or 0.0 for one in causes), default=0.0) for of in DANGERS}
    for cause, (name, *parts) in zip(causes, cause_rows(causes), strict=True):
        bars = (100 * (getattr(cause, of) or 0.0) / most[of] if most[of] else 0.0 for of in DANGERS)
        yield name, tuple(zip(parts, (round(bar, 1) for bar in bars), strict=True))


def _curves(on_it: Drawn, now: int | None, of: dict[str, str]) -> figures.CurveFigure | None:
    def reading(what: str) -> Callable[[Odds], float]:
        return lambda odds: float(getattr(odds, what))

    return figures.curve_figure(on_it.along, now, [(n, reading(w)) for w, n in of.items()]) if on_it.along else None


def _better(points: tuple[Point, ...], view: Outlook) -> str:
    """Say how the policy stands among the plain rules; of simulated odds, the least that they can be is counted."""
    if view.now is None:
        return "The odds of the policy itself are not known, so it is not on the plane."
    loss, exposure, absence = (ends(view.now, of)[0] for of in DANGERS)
    here = Odds(loss, exposure, absence, math.inf)
    found = [point for point in points if point.better_than(here) and point.choice]
    own = _listed([point for point in found if not point.imagined])
    imagined = _listed([point for point in found if point.imagined])
    if own and imagined:
        return (
            f"Both are lower than with this policy for {own} of its own custodians, and with imagined ones {imagined}."
        )
    if own or imagined:
        return f"Both are lower than with this policy for {own or f'{imagined}, with imagined custodians'}."
    if view.odds is None:
        return "Whether any such rule has less of both than this policy, so many histories do not tell."
    return "No such rule has less of both than this policy, by a tenth or more."


def _no_choice(points: tuple[Point, ...]) -> str:
    if any(not point.choice and 1 < point.need < point.total for point in points):
        return "one custodian, person, site or reporting line alone makes a quorum, or is needed by every quorum"
    return "one custodian alone recovers, or one loss ends the key"


def _listed(points: list[Point]) -> str:
    told = [f"{point.need} of {point.total}" for point in points[:_MOST_BETTER]]
    more = len(points) - len(told)
    return ", ".join(told) + (f" and {more} more" if more else "")
