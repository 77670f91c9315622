"""The page of a plan: what a policy's odds are, where it lies among plain rules, and what would change them.

It is made for a meeting before a ceremony: printed, handed round and filed with the decision. The same policy makes the
same page, byte for byte.

Source: W3C, "Web Content Accessibility Guidelines 2.2" (text for what is drawn, headings, contrast, reflow); E. R.
Tufte, "The Visual Display of Quantitative Information", 1983 (from memory: labels at the lines, no legends); the order,
the odds first, is ours.
May import: shares.paper.page, .advice, .assumed, .examine, .figures, .intervals, .lineup, .model, .numbers, .odds,
.plane, .simulate.
Secret: nothing. Confidential: the page, like the policy: it tells whom to coerce, and where. Public: nothing.
Does not: work anything out but what it draws.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Final

from shares.paper.page import REPORT, render
from shares.planning import advice, figures, numbers
from shares.planning.advice import Outlook
from shares.planning.examine import Plan
from shares.planning.intervals import AtInterval, over_intervals
from shares.planning.lineup import IMAGINED
from shares.planning.model import Model
from shares.planning.odds import Odds
from shares.planning.plane import Point, plane

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
    here = view.odds
    return render(
        _TEMPLATE,
        REPORT,
        _STYLE,
        plan=plan,
        model=model,
        view=view,
        over=numbers.horizon(view.years),
        points=on_it.points,
        plane=figures.plane_figure(on_it.points, here) if on_it.points else None,
        better=_better(on_it.points, here),
        along=on_it.along,
        attested=_curves(on_it, model.attest_every, ("loss", "no quorum on a day"), ("loss", "absence")),
        refreshed=_curves(on_it, model.refresh_every, ("exposure",), ("exposure",)),
        most={of: max((getattr(one, of) for one in view.causes or ()), default=0.0) for of in _KINDS},
        kinds=_KINDS,
        assumptions=assumptions,
        imagined=IMAGINED,
        cautions=CAUTIONS,
        digest=digest.hex(),
        program=program,
        box=figures,
        chance=numbers.chance,
        one_in=numbers.one_in,
        every=numbers.every,
        span=numbers.years,
        cause_words=advice.cause_words,
        largest=advice.largest,
    )


_KINDS: Final = {"loss": "loss", "exposure": "exposure", "absence": "no quorum on a day"}


def _curves(on_it: Drawn, now: int | None, names: tuple[str, ...], of: tuple[str, ...]) -> figures.CurveFigure | None:
    def reading(what: str) -> Callable[[Odds], float]:
        return lambda odds: float(getattr(odds, what))

    lines = [(name, reading(what)) for name, what in zip(names, of, strict=True)]
    return figures.curve_figure(on_it.along, now, lines) if on_it.along else None


def _better(points: tuple[Point, ...], here: Odds | None) -> str:
    """Say how the policy stands among the plain rules."""
    if here is None:
        return "The odds of the policy itself are not worked out exactly, so it is not on the plane."
    found = [point for point in points if point.better_than(here)]
    own = _listed([point for point in found if not point.imagined])
    imagined = _listed([point for point in found if point.imagined])
    if own and imagined:
        return f"Less of both than this policy have {own} of its own custodians, and with imagined ones {imagined}."
    if own or imagined:
        return f"Less of both than this policy have {own or f'{imagined}, with imagined custodians'}."
    return "No such rule has less of both than this policy, by a tenth or more."


def _listed(points: list[Point]) -> str:
    told = [f"{point.need} of {point.total}" for point in points[:_MOST_BETTER]]
    more = len(points) - len(told)
    return ", ".join(told) + (f" and {more} more" if more else "")
