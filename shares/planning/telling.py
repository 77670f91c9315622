"""Odds, causes and changes in words and as rows of a table: for a terminal and for a page alike.

Source: none.
May import: .advice, .numbers, .odds, .reckoned, .simulate.
Secret: nothing. Public: nothing either, as for the model.
Does not: know whether a table is drawn in characters or in HTML.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterable, Iterator, Sequence
from typing import TypeAlias

from shares.planning import numbers
from shares.planning.advice import Change, Outlook, cause_words
from shares.planning.odds import Contribution, Odds
from shares.planning.reckoned import Reckoned, briefly, ends, value
from shares.planning.simulate import MAX_HISTORIES, Simulated

NOT_TOLD = "not told"
"""Stands for an effect that cannot be told from what chance makes."""

NO_SUM = "The parts do not add up to the whole: what takes two causes goes away with either."
"""What is to be known of a table of what each cause adds."""

DANGERS = {
    "loss": "loss: no quorum is left",
    "exposure": "exposure: a quorum is known",
    "absence": "no quorum on a given day",
}
"""What each of the odds is called."""

Row: TypeAlias = tuple[str, ...]


_GLUE = "\N{NO-BREAK SPACE}"


def glued(text: str) -> str:
    """Return text that is not broken into lines within "5.3 %" or "1 in 20".

    >>> glued("5.3 % of shares").split(" ")
    ['5.3\\xa0%', 'of', 'shares']
    """
    return re.sub(r"(?<=\d) (?=%)|(?<=\b1) (?=in \d)|(?<=\b1 in) (?=\d)", _GLUE, text)


def years_words(simulated: Simulated) -> str:
    """Write the mean time until the first loss."""
    if simulated.years_to_loss is None:
        return f"too few losses were seen ({simulated.loss.seen}) to tell it"
    told, within = years_parts(simulated)
    return f"{told} ({within})" if within else told


def years_parts(simulated: Simulated) -> tuple[str, str]:
    """Write the mean time until the first loss, and apart from it its interval; nothing for that where all are alike as
    they are told."""
    years = simulated.years_to_loss
    if years is None:
        return "too few losses seen", ""
    told, low, high = (numbers.years(end) for end in (years.value, years.low, years.high))
    if low == high:
        return told, ""
    return told, f"{low} or more" if years.high > numbers.MOST_YEARS else f"{low} to {high}"


def why(simulated: Iterable[Simulated], odds: Odds | None) -> str:
    """Return what is to be known of a simulation: why it was made, how it is made again, and how to be surer.

    Args:
        simulated: one or several with the same histories and seed.
        odds: exact ones beside them; None where they were too much work.
    """
    first, *others = simulated
    drawn = f"drawn by numpy {first.numpy} with seed {first.seed}, the same ones at every run"
    told = f"Simulated from {numbers.histories(first.histories)}{' each' if others else ''}, {drawn}"
    if odds is None:
        told += ": the rule, or the way in which people, sites and lines overlap in it, is too entangled for exact odds"
    told += ". At least 95 of 100 such intervals hold the true odds of the model; nothing seen is not never."
    if 10 * first.histories <= MAX_HISTORIES:
        told += f" Ten times as many (--histories {10 * first.histories}) give intervals about a third as wide."
    return told


def beside(odds: Odds, simulated: Simulated) -> str:
    """Return in one sentence whether exact odds lie within the intervals of simulated ones."""
    names = {"loss": "loss", "exposure": "exposure", "absence": "no quorum on a given day"}
    out = []
    for of, name in names.items():
        low, high = ends(simulated, of)
        if not low <= value(odds, of) <= high:
            out.append(name)
    if not out:
        return "The exact odds lie within all three intervals."
    return f"The exact odds of {' and of '.join(out)} lie outside the interval, as one in twenty may by chance."


def not_told(view: Outlook) -> str:
    """Say how many causes and changes are left out since chance hides what they do; nothing where none is."""
    if not (view.causes_left_out or view.changes_left_out):
        return ""
    causes, changes = _so_many(view.causes_left_out, "cause"), _so_many(view.changes_left_out, "change")
    return (
        f"Left out are {causes} and {changes}: what they do cannot be told from what chance makes. "
        f"{NOT_TOLD.capitalize()} means the same of one of the odds. More histories tell more."
    )


def _so_many(count: int, what: str) -> str:
    return f"{count} {what}{'' if count == 1 else 's'}"


def cause_rows(causes: Sequence[Contribution]) -> Iterator[Row]:
    """Yield for each cause what it is, and what it adds to loss, exposure and absence."""
    for one in causes:
        parts = (NOT_TOLD if part is None else numbers.chance(part) for part in (one.loss, one.exposure, one.absence))
        yield cause_words(one), *parts


def change_rows(now: Reckoned, changes: Sequence[Change], *, best_alone: bool = False) -> Iterator[Row]:
    """Yield what a policy's loss and exposure are, and what each change makes of them, the best change first.

    Changes of one kind that make the same of both are one row.

    Args:
        now: the odds as they are.
        changes: as ``outlook`` returns them.
        best_alone: whether those that do more harm than good, or nothing that is told, are left out.
    """
    as_it_is = briefly(now, "loss"), briefly(now, "exposure")
    yield "(as it is)", *as_it_is
    alike = Counter((change.kind, *_after(change)) for change in changes)
    for change in changes:
        others = alike.pop((change.kind, *_after(change)), 0) - 1
        if others >= 0 and not (best_alone and (change.gain <= 0 or _after(change) == as_it_is)):
            more = f" (or {others} other{'s' if others > 1 else ''})" if others else ""
            yield change.words.removeprefix("to ") + more, *_after(change)


def _after(change: Change) -> tuple[str, str]:
    """Write the odds after a change, as far as the change can be told."""
    loss = NOT_TOLD if change.loss is None else briefly(change.odds, "loss")
    return loss, NOT_TOLD if change.exposure is None else briefly(change.odds, "exposure")
