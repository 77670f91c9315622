"""What to change first: every single change that a dealer can make, what it does to the odds, and plain advice.

The order is by what a change takes off loss and exposure together, which are counted alike: where one of them matters
more, go by its column. Where odds are too much work for an exact answer they are simulated. Then causes and changes are
worked out on request alone, and those whose effect cannot be told from what chance makes are left out.

Source: this project's own list; Blakley 1979 (from memory: shares lost and shares given away are two budgets, so nearly
every change buys one with the other).
May import: .model, .numbers, .odds, .reckoned, .simulate, .single.
Secret: nothing. Public: nothing either, as for the model.
Does not: know what a change costs, try two at once (``targets`` does), or say what odds are good enough.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from itertools import count
from typing import TypeAlias

from shares.planning import numbers
from shares.planning.model import Model
from shares.planning.odds import Contribution, Odds, contributions, odds, without_each
from shares.planning.reckoned import SEED, Reckoned, briefly, fall, instead, usual, value, words
from shares.planning.simulate import INSTALL, Simulated
from shares.planning.single import Single, single_changes

_MUCH_LESS = 0.9
_MOST_CUSTODIANS = 24
_MOST_WORK = 50_000
"""``_work`` up to which causes and changes are worked out unasked: half a second on a slow machine."""

Told: TypeAlias = Callable[[int, int | None], None]
"""Called with what is done and what there is to do."""


@dataclass(frozen=True, slots=True)
class Change:
    """One change, and the odds after it.

    Attributes:
        kind: as of ``Single``.
        words: what is to be done, as in "to attest every 45 days".
        odds: after the change; simulated where those of the policy are.
        loss, exposure: by how much these fall; below 0 where they rise; None where that cannot be told from what chance
            makes.
    """

    kind: str
    words: str
    odds: Reckoned
    loss: float | None
    exposure: float | None

    @property
    def gain(self) -> float:
        """By how much loss and exposure fall together, as far as can be told."""
        return (self.loss or 0.0) + (self.exposure or 0.0)


@dataclass(frozen=True, slots=True)
class Outlook:
    """The odds of a policy, where they come from, and what would change them.

    Attributes:
        years: over which the odds are.
        odds: None where they are too much work for an exact answer.
        simulated: the odds once more; None where they are exact and nobody asked for it, or numpy is not installed.
        causes: what each cause adds; None where that was not worked out.
        changes: single changes, the best first; None where that was not worked out.
        advice: three sentences.
        causes_left_out, changes_left_out: how many had no effect that could be told from what chance makes.
    """

    years: float
    odds: Odds | None
    simulated: Simulated | None
    causes: tuple[Contribution, ...] | None
    changes: tuple[Change, ...] | None
    advice: tuple[str, ...]
    causes_left_out: int = 0
    changes_left_out: int = 0

    @property
    def now(self) -> Reckoned | None:
        """The odds, exact where they can be; None where numpy is needed for them and not installed."""
        return self.odds or self.simulated


def outlook(
    model: Model,
    years: float,
    *,
    full: bool = False,
    histories: int | None = None,
    seed: int = SEED,
    progress: Told | None = None,
    drawn: Told | None = None,
) -> Outlook:
    """Work out the odds of a policy and, where that is not too much work or is asked for, causes and changes.

    Args:
        model: as ``model_of`` returns it.
        years: as for ``odds``.
        full: whether causes and changes are worked out however long it takes.
        histories: how many to draw, also where odds are exact; None to draw the usual number where they are not, if
            numpy is there.
        seed: as for ``simulate``.
        progress: called with the number of changes tried and to try, where odds are exact.
        drawn: called with the number of histories drawn and to be drawn.

    Raises:
        ParameterError: the years, the histories or the seed are out of range.
        ExtraMissingError: a number of histories is asked for, and numpy is not installed.
    """
    now = odds(model, years)
    if now is None:
        if full:
            return _simulated_in_full(model, years, histories, seed, drawn)
        guess = instead(model, years, histories=histories, seed=seed, drawn=drawn)
        return Outlook(years, None, guess, None, None, advice(model, years, guess, None, None))
    simulated = None
    if histories is not None:
        simulated = instead(model, years, histories=histories, seed=seed, drawn=drawn)
    causes: tuple[Contribution, ...] | None = None
    found: tuple[Change, ...] | None = None
    if full or len(model.custodians) <= _MOST_CUSTODIANS:
        tries = list(single_changes(model))
        taken_away = {one.kind if one.kind in ("share", "person") else (one.kind, one.name) for one in model.causes}
        if full or _work(model) * (len(tries) + len(taken_away)) <= _MOST_WORK:
            causes = contributions(model, years)
            found = _tried(tries, now, lambda changed: odds(changed, years), progress)
    return Outlook(years, now, simulated, causes, found, advice(model, years, now, causes, found))


def largest(causes: tuple[Contribution, ...], of: str) -> tuple[str, ...]:
    """Return in words what adds most to one of the odds: two causes at most, the second one only where it adds at
    least a tenth of what the first one does.

    Args:
        causes: as ``contributions`` returns them.
        of: "loss", "exposure" or "absence".
    """
    parts = {cause_words(cause): float(getattr(cause, of) or 0.0) for cause in causes}
    most = max(parts.values(), default=0.0)
    ranked = sorted(parts, key=lambda words: -_told(parts[words]))[:2]
    return tuple(words for words in ranked if parts[words] > 0 and parts[words] >= most / 10)


def cause_words(cause: Contribution) -> str:
    """Return what a cause is called."""
    return {
        "share": "single shares lost",
        "person": "what people do",
        "site": f"the site {cause.name}",
        "line": f"the line of {cause.name}",
        "medium": f"the medium {cause.name}",
    }[cause.kind]


def advice(
    model: Model,
    years: float,
    now: Reckoned | None,
    causes: tuple[Contribution, ...] | None,
    found: tuple[Change, ...] | None,
) -> tuple[str, ...]:
    """Return three sentences: how great the danger is, what helps most, and what else to know.

    Args:
        model, years: as for ``outlook``.
        now, causes, found: as it works them out; no odds are there where numpy is needed for them and not installed.
    """
    if now is None:
        return (
            "This rule, or the way in which people, sites and reporting lines overlap in it, is too large for exact "
            f"odds, and to simulate them takes numpy, which is not installed: {INSTALL}.",
            "What is said of its structure holds all the same.",
            "A simpler rule has odds, and fewer ways to go wrong: each group in one place, and few custodians in each.",
        )
    return (_danger(years, now, causes), _best(now, found), _besides(model, now, found))


def _danger(years: float, now: Reckoned, causes: tuple[Contribution, ...] | None) -> str:
    told = (
        f"Over {numbers.horizon(years)} the chance of loss is {_both(now, 'loss')}, and that of exposure is "
        f"{_both(now, 'exposure')}"
    )
    loss, exposure = value(now, "loss"), value(now, "exposure")
    if not isinstance(now, Simulated) and loss == exposure == 0:
        return f"{told}: at these rates neither can happen."
    if not isinstance(now, Simulated) and max(loss, exposure) < numbers.LEAST:
        return f"{told}: beside what no rate knows of, neither matters."
    if isinstance(now, Simulated) and not _worse_is_plain(now):
        return f"{told}: which danger is the greater one, so many histories do not tell."
    if max(loss, exposure) < 2 * min(loss, exposure):
        return f"{told}: one danger is about as great as the other."
    worse = "loss" if loss > exposure else "exposure"
    by = largest(causes or (), worse)[:1]
    return f"{told}: {worse} is the greater danger{f', above all by {by[0]}' if by else ''}."


def _worse_is_plain(now: Simulated) -> bool:
    return now.loss.high < now.exposure.low or now.exposure.high < now.loss.low


def _best(now: Reckoned, found: tuple[Change, ...] | None) -> str:
    if found is None:
        return "What to change first was not worked out, as that takes long for this policy: --odds does it."
    if isinstance(now, Simulated) and not found:
        return "Of no single change can so many histories tell what it does to these odds."
    if not found or (isinstance(now, Odds) and max(now.loss, now.exposure) < numbers.LEAST):
        return "There is nothing to change that these odds would show."
    first = found[0]
    if first.gain <= 0:
        return "No single change tried takes more off one danger than it adds to the other."
    told = [
        f"{what} goes from {_in_text(briefly(now, what))} to {_in_text(briefly(first.odds, what))}"
        for what, falls in (("loss", first.loss), ("exposure", first.exposure))
        if falls is not None and briefly(now, what) != briefly(first.odds, what)
    ]
    return f"Of the changes tried it helps most {first.words}: {' and '.join(told) or 'though by little'}."


def _besides(model: Model, now: Reckoned, found: tuple[Change, ...] | None) -> str:
    if model.attest_every is None and (isinstance(now, Simulated) or now.loss):
        asked = next((change for change in found or () if change.kind == "attest"), None)
        if asked is None or value(asked.odds, "loss") < _MUCH_LESS * value(now, "loss"):
            return (
                "Nobody asks for the shares here, so that losses add up unseen until the key is needed: attestations, "
                "with repair of what they find, are there for that."
            )
        return (
            "Nobody asks for the shares here, and to ask every year would help little: what ends the key here leaves "
            "nothing to repair it with."
        )
    if model.refresh_every is None and value(now, "exposure") > value(now, "loss"):
        return "There is no refresh here, so that what leaks adds up for as long as the set lives."
    return (
        f"The chance that on a day taken at random no quorum can be had in time is {_both(now, 'absence')}: drills "
        "show whether that is so."
    )


def _both(now: Reckoned, of: str) -> str:
    """Write one of the odds within a sentence."""
    if isinstance(now, Simulated):
        return words(now, of).rpartition(": ")[2]
    p = value(now, of)
    return f"{numbers.chance(p)} ({numbers.one_in(p)})" if numbers.one_in(p) else _in_text(numbers.chance(p))


def _in_text(chance: str) -> str:
    """Return a chance as it stands in a sentence: of a chance one does not say that it is none, as a table does."""
    return "0" if chance == "none" else chance


def _tried(
    tries: Sequence[Single], now: Reckoned, reckon: Callable[[Model], Reckoned | None], progress: Told | None = None
) -> tuple[Change, ...]:
    """Return the changes in the order of what they gain. One is left out if its odds are too much work, or if it has no
    effect that can be told from what chance makes."""
    found = []
    for done, one in enumerate(tries):
        if progress:
            progress(done, len(tries))
        if (after := reckon(one.model)) is None:
            continue
        loss, exposure = fall(now, after, "loss"), fall(now, after, "exposure")
        if loss is not None or exposure is not None:
            found.append(Change(one.kind, one.words, after, loss, exposure))
    return tuple(sorted(found, key=lambda change: -_told(change.gain)))


def _simulated_in_full(model: Model, years: float, histories: int | None, seed: int, drawn: Told | None) -> Outlook:
    """Work out odds, causes and changes by as many histories for each."""
    causes, tries = list(without_each(model)), list(single_changes(model))
    usually = usual(model, years)
    each = usually if histories is None else histories
    place = count()

    def draw(changed: Model) -> Simulated | None:
        before, total = next(place) * each, (1 + len(causes) + len(tries)) * each
        told = None if drawn is None else lambda done, _: drawn(before + done, total)
        return instead(changed, years, histories=histories, seed=seed, drawn=told, usually=usually)

    if (now := draw(model)) is None:
        return Outlook(years, None, None, None, None, advice(model, years, None, None, None))
    adding = tuple(_adding(causes, now, draw))
    found = _tried(tries, now, draw)
    told = advice(model, years, now, adding, found)
    left_out = len(causes) - len(adding), len(tries) - len(found)
    return Outlook(years, None, now, adding, found, told, *left_out)


def _adding(
    causes: Sequence[tuple[str, str, Model]], now: Reckoned, reckon: Callable[[Model], Reckoned | None]
) -> Iterator[Contribution]:
    """Yield what each cause adds, if any of it can be told from what chance makes."""
    for kind, name, spared in causes:
        if (less := reckon(spared)) is None:
            continue
        falls = (fall(now, less, of) for of in ("loss", "exposure", "absence"))
        parts = [part if part and part > 0 else None for part in falls]
        if any(parts):
            yield Contribution(kind, name, *parts)


def _told(number: float) -> float:
    """Round off the noise of the arithmetic, so that what is alike stays in its order on every machine."""
    return float(f"{number:.8e}")


def _work(model: Model) -> float:
    """Guess, alike on every machine, how much work the odds are: places times thresholds, and more by a third of a
    doubling for every event whose custodians overlap with another's in part. (Measured to a factor of about three.)"""
    shared = list({cause.members for cause in model.causes if len(cause.members) > 1})
    crossing = sum(any(one & other and not (one <= other or other <= one) for other in shared) for one in shared)
    needed = max(node.need for _, node in model.rule.nodes())
    return float(model.rule.size * (needed + 10) * 2 ** (crossing / 3))
