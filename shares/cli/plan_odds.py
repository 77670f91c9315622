"""How ``shares plan`` tells odds: the table, the advice, what to change first, what is assumed, and the cautions.

Source: none.
May import: shares.planning, .output, .plan_simulated.
Secret: nothing. Public: nothing either, as for the policy.
Does not: work anything out.
"""

from __future__ import annotations

import math
import textwrap
from collections.abc import Iterable, Iterator, Sequence

from shares.cli.output import prose
from shares.cli.plan_simulated import extra_missing, simulated_members
from shares.planning import assumed, numbers
from shares.planning.advice import Change, Outlook, largest
from shares.planning.befalling import befalling
from shares.planning.model import Model
from shares.planning.odds import Contribution, Odds
from shares.planning.reckoned import Reckoned, words
from shares.planning.simulate import Simulated
from shares.planning.telling import DANGERS, NO_SUM, beside, cause_rows, change_rows, glued, not_told, why, years_words

CAUTIONS = (
    "Odds are as good as the rates they come from, and no better. That custodians share nothing but people, sites, "
    "reporting lines and media is an assumption. Have a professional decide."
)
_MOST_CHANGES = 5
_WHAT = {"share": "single shares", "person": "people", "site": "sites", "line": "reporting lines", "medium": "media"}
_IN_SHORT = {
    assumed.SHARE.reason: "losses of single shares",
    assumed.PERSON.reason: "what people do",
    assumed.SITE.reason: "what befalls sites",
    assumed.LINE.reason: "what befalls reporting lines",
    assumed.MEDIUM.reason: "what befalls media",
    assumed.MEDIUM_OF_ONE_MAKE.reason: "what befalls sticks and cards",
}


def sentences(text: str) -> list[str]:
    """Break text into lines as ``prose`` does, yet never within "5.3 %" or "1 in 20"."""
    return [line.replace("\N{NO-BREAK SPACE}", " ") for line in prose(glued(text))]


def table(rows: Sequence[Sequence[str]], *, left: int = 1) -> Iterator[str]:
    """Yield rows as lines in columns.

    Args:
        rows: the cells; all rows have as many.
        left: so many columns, and the last one, begin at their left; the others end at their right.
    """
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    for row in rows:
        cells = [
            f"{cell:<{width}}" if i < left else f"{cell:>{width}}"
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ]
        yield "  ".join(cells).rstrip()


def odds_members(odds: Odds | None) -> dict[str, object] | None:
    """Return odds for JSON, which has no infinity: null years are 'never'."""
    if odds is None:
        return None
    years = None if odds.years_to_loss == math.inf else odds.years_to_loss
    return {"loss": odds.loss, "exposure": odds.exposure, "absence": odds.absence, "years_to_loss": years}


def cause_members(causes: Iterable[Contribution]) -> list[dict[str, object]]:
    """Return what each cause adds, for JSON."""
    return [
        {
            "kind": cause.kind,
            "name": cause.name,
            "loss": cause.loss,
            "exposure": cause.exposure,
            "absence": cause.absence,
        }
        for cause in causes
    ]


def outlook_members(view: Outlook) -> dict[str, object]:
    """Return all that is known of a policy's odds, for JSON."""
    return {
        "years": view.years,
        "odds": odds_members(view.odds),
        "simulated": simulated_members(view.simulated),
        "missing_extra": extra_missing(view.odds, view.simulated),
        "causes": None if view.causes is None else cause_members(view.causes),
        "changes": None
        if view.changes is None
        else [
            {
                "kind": change.kind,
                "what": change.words,
                **_change_members(change.odds),
                "gain": {"loss": change.loss, "exposure": change.exposure},
            }
            for change in view.changes
        ],
        "left_out": {"causes": view.causes_left_out, "changes": view.changes_left_out},
        "advice": list(view.advice),
    }


def _change_members(found: Reckoned) -> dict[str, object]:
    exact, simulated = (None, found) if isinstance(found, Simulated) else (found, None)
    return {"odds": odds_members(exact), "simulated": simulated_members(simulated)}


def rate_members(model: Model) -> list[dict[str, object]]:
    """Return the rates that odds rest on, for JSON."""
    return [
        {"what": one.kind, "names": list(one.names), "loss": one.loss, "leak": one.leak, "absent": one.absent}
        for one in befalling(model)
    ]


def rate_lines(model: Model) -> Iterator[str]:
    """Yield the rates that odds rest on, stated and assumed alike, for people."""
    rows = [("what the odds rest on", "lost a year", "leaked a year", "days away", "of")]
    rows += [(_WHAT[one.kind], *one.words, one.named) for one in befalling(model)]
    width = 2 * len(rows[0]) + sum(max(map(len, column)) for column in list(zip(*rows, strict=True))[:-1])
    for line in _last_left(rows):
        yield from textwrap.wrap(line, 100, subsequent_indent=" " * (width - 2), break_on_hyphens=False) or [line]


def rest_members(assumptions: Sequence[str]) -> dict[str, object]:
    """Return for JSON what all odds rest on, and the cautions."""
    return {"assumptions": list(assumptions), "cautions": CAUTIONS}


def outlook_lines(view: Outlook, *, full: bool) -> Iterator[str]:
    """Yield what people are told of a policy's odds.

    Args:
        view: what was worked out.
        full: whether every cause and change is told, not the largest alone.
    """
    if view.odds is not None:
        yield from _odds_lines(view, view.odds, full=full)
        yield ""
    if view.simulated is not None:
        yield from _simulated_lines(view, view.simulated)
        yield ""
    if view.now is not None and full and view.causes:
        yield from _cause_lines(view.causes)
        yield ""
    yield from sentences(" ".join(view.advice))
    if view.now is not None and view.changes:
        yield from _change_lines(view.now, view.changes, full=full)
    if left_out := not_told(view):
        yield ""
        yield from sentences(left_out)


def _simulated_lines(view: Outlook, simulated: Simulated) -> Iterator[str]:
    rows = [(f"odds over {numbers.horizon(view.years)}, simulated", "chance, and its 95 % interval")]
    yield from table([*rows, *((what, words(simulated, of)) for of, what in DANGERS.items())])
    yield f"Mean time until the first loss: {years_words(simulated)}."
    told = "" if view.odds is None else f" {beside(view.odds, simulated)}"
    yield from sentences(why([simulated], view.odds) + told)


def _odds_lines(view: Outlook, odds: Odds, *, full: bool) -> Iterator[str]:
    rows = [(f"odds over {numbers.horizon(view.years)}", "chance", "", "" if full else "mostly by")]
    for of, what in DANGERS.items():
        chance = float(getattr(odds, of))
        by = "" if full or view.causes is None else "; ".join(largest(view.causes, of))
        rows.append((what, numbers.chance(chance), numbers.one_in(chance), by))
    yield from _last_left(rows)
    yield f"Mean time until the first loss: {numbers.years(odds.years_to_loss)}."


def _cause_lines(causes: Sequence[Contribution]) -> Iterator[str]:
    yield from table([("what each cause adds", "loss", "exposure", "no quorum"), *cause_rows(causes)])
    yield from prose(NO_SUM)


def _last_left(rows: Sequence[tuple[str, ...]]) -> Iterator[str]:
    """Yield a table whose last column begins at its left."""
    for line, row in zip(table([row[:-1] for row in rows] if rows else []), rows, strict=True):
        width = sum(max(map(len, column)) for column in list(zip(*rows, strict=True))[:-1]) + 2 * (len(row) - 2)
        yield f"{line:<{width}}  {row[-1]}".rstrip()


def _change_lines(now: Reckoned, changes: Sequence[Change], *, full: bool) -> Iterator[str]:
    rows = list(change_rows(now, changes, best_alone=not full))
    if len(rows) == 1:
        return
    yield ""
    yield from table([("what to change first", "loss", "exposure"), *(rows if full else rows[: 1 + _MOST_CHANGES])])
    yield "Each alone, in the order of what it takes off both odds together."


def rest_lines(assumptions: Sequence[str], *, full: bool) -> Iterator[str]:
    """Yield what all odds rest on beside what the policy states, and the cautions.

    Args:
        assumptions: as ``assumed.assumptions`` returns them.
        full: whether they are told in full.
    """
    if full:
        for reason in assumptions:
            yield from prose(f"Assumed: {reason}")
    else:
        short = [_IN_SHORT[reason] for reason in assumptions if reason in _IN_SHORT]
        if short:
            yield from prose(
                f"Assumed, as the policy does not state all of it: the rates of {', '.join(short)}. What is assumed, "
                "and why: --odds; how to state your own: FORMAT.md, section 12."
            )
    yield from prose(CAUTIONS)
