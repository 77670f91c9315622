"""What to change first: every single change that a dealer can make, what it does to the odds, and plain advice.

The changes tried are one more custodian, each threshold up or down by one, attestations and refreshes twice as often
(or yearly, where there are none), and a site of its own for a share. Custodians who can change places without changing
anything are tried once. The order is by what a change takes off loss and exposure together, which are counted alike:
where one of them matters more, go by its column.

Source: this project's own list; Blakley 1979 (from memory: shares lost and shares given away are two budgets, so nearly
every change buys one with the other).
May import: shares.errors, shares.sharing.rule, .changes, .model, .numbers, .odds.
Secret: nothing. Public: nothing either, as for the model.
Does not: know what a change costs, try two at once (``targets`` does), or say what odds are good enough.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

from shares.errors import ParameterError
from shares.planning import numbers
from shares.planning.changes import attesting_every, moved, refreshing_every, with_another
from shares.planning.model import DAYS_OF_A_YEAR, Model
from shares.planning.odds import Contribution, Odds, contributions, odds
from shares.sharing.rule import Rule

_MOST_CUSTODIANS = 24
_MOST_WORK = 50_000
"""``_work`` up to which causes and changes are worked out unasked: half a second on a slow machine."""


@dataclass(frozen=True, slots=True)
class Change:
    """One change, and the odds after it.

    Attributes:
        kind: "custodian", "threshold", "attest", "refresh" or "site".
        words: what is to be done, as in "to attest every 45 days".
        odds: after the change.
        loss, exposure: by how much these fall; below 0 where they rise.
    """

    kind: str
    words: str
    odds: Odds
    loss: float
    exposure: float

    @property
    def gain(self) -> float:
        """By how much loss and exposure fall together."""
        return self.loss + self.exposure


@dataclass(frozen=True, slots=True)
class Outlook:
    """The odds of a policy, where they come from, and what would change them.

    Attributes:
        years: over which the odds are.
        odds: None where they are too much work for an exact answer.
        causes: what each cause adds; None where that was not worked out.
        changes: single changes, the best first; None where that was not worked out.
        advice: three sentences.
    """

    years: float
    odds: Odds | None
    causes: tuple[Contribution, ...] | None
    changes: tuple[Change, ...] | None
    advice: tuple[str, ...]


def outlook(
    model: Model, years: float, *, full: bool = False, progress: Callable[[int, int | None], None] | None = None
) -> Outlook:
    """Work out the odds of a policy and, where that is not too much work or is asked for, causes and changes.

    Args:
        model: as ``model_of`` returns it.
        years: as for ``odds``.
        full: whether causes and changes are worked out however long it takes.
        progress: called with the number of changes tried and to try.

    Raises:
        ParameterError: a span of years that is out of range.
    """
    now = odds(model, years)
    causes: tuple[Contribution, ...] | None = None
    found: tuple[Change, ...] | None = None
    if now is not None and (full or len(model.custodians) <= _MOST_CUSTODIANS):
        tries = list(_single(model))
        taken_away = {one.kind if one.kind in ("share", "person") else (one.kind, one.name) for one in model.causes}
        if full or _work(model) * (len(tries) + len(taken_away)) <= _MOST_WORK:
            causes = contributions(model, years)
            found = _tried(tries, now, years, progress)
    return Outlook(years, now, causes, found, advice(model, years, now, causes, found))


def largest(causes: tuple[Contribution, ...], of: str) -> tuple[str, ...]:
    """Return in words what adds most to one of the odds: two causes at most, the second one only where it adds at
    least a tenth of what the first one does.

    Args:
        causes: as ``contributions`` returns them.
        of: "loss", "exposure" or "absence".
    """
    parts = {cause_words(cause): float(getattr(cause, of)) for cause in causes}
    most = max(parts.values(), default=0.0)
    ranked = sorted(parts, key=lambda words: -_told(parts[words]))[:2]
    return tuple(words for words in ranked if parts[words] > 0 and parts[words] >= most / 10)


def cause_words(cause: Contribution) -> str:
    """Return what a cause is called."""
    return {
        "share": "single shares lost",
        "person": "people",
        "site": f"the site {cause.name}",
        "line": f"the line of {cause.name}",
        "medium": f"the medium {cause.name}",
    }[cause.kind]


def advice(
    model: Model,
    years: float,
    now: Odds | None,
    causes: tuple[Contribution, ...] | None,
    found: tuple[Change, ...] | None,
) -> tuple[str, ...]:
    """Return three sentences: how great the danger is, what helps most, and what else to know.

    Args:
        model, years: as for ``outlook``.
        now, causes, found: as it works them out.
    """
    if now is None:
        return (
            "This rule, or the way in which people, sites and reporting lines overlap in it, is too large to be worked "
            "out exactly, so there are no odds here.",
            "What is said of its structure holds all the same.",
            "A simpler rule has odds, and fewer ways to go wrong: each group in one place, and few custodians in each.",
        )
    return (_danger(years, now, causes), _best(now, found), _besides(model, now))


def _danger(years: float, now: Odds, causes: tuple[Contribution, ...] | None) -> str:
    told = (
        f"Over {numbers.horizon(years)} the key is lost with a chance of {_both(now.loss)} and exposed with one of "
        f"{_both(now.exposure)}"
    )
    if max(now.loss, now.exposure) < 2 * min(now.loss, now.exposure):
        return f"{told}: one danger is about as great as the other."
    worse = "loss" if now.loss > now.exposure else "exposure"
    by = largest(causes or (), worse)[:1]
    return f"{told}: {worse} is the greater danger{f', above all by {by[0]}' if by else ''}."


def _best(now: Odds, found: tuple[Change, ...] | None) -> str:
    if found is None:
        return "What to change first was not worked out, as that takes long for this policy: --odds does it."
    if not found or numbers.chance(max(now.loss, now.exposure)) == "none":
        return "There is nothing to change that these odds would show."
    first = found[0]
    if first.gain <= 0:
        return "No single change tried takes more off one danger than it adds to the other."
    told = [
        f"{what} goes from {numbers.chance(before)} to {numbers.chance(after)}"
        for what, before, after in (
            ("loss", now.loss, first.odds.loss),
            ("exposure", now.exposure, first.odds.exposure),
        )
        if numbers.chance(before) != numbers.chance(after)
    ]
    return f"Of single changes it helps most {first.words}: {' and '.join(told) or 'though by little'}."


def _besides(model: Model, now: Odds) -> str:
    if model.attest_every is None:
        return (
            "Nobody asks for the shares here, so that losses add up unseen until the key is needed: attestations, with "
            "repair of what they find, end that."
        )
    if model.refresh_every is None and now.exposure > now.loss:
        return "There is no refresh here, so that what leaks adds up for as long as the set lives."
    return (
        f"On a day taken at random no quorum can be had in time with a chance of {_both(now.absence)}: drills show "
        "whether that is so."
    )


def _both(p: float) -> str:
    return f"{numbers.chance(p)} ({numbers.one_in(p)})" if numbers.one_in(p) else numbers.chance(p)


def _tried(
    tries: list[tuple[str, str, Model]],
    now: Odds,
    years: float,
    progress: Callable[[int, int | None], None] | None,
) -> tuple[Change, ...]:
    """Return the changes in the order of what they gain; a change whose odds are too much work is left out."""
    found = []
    for done, (kind, words, changed) in enumerate(tries):
        if progress:
            progress(done, len(tries))
        after = odds(changed, years)
        if after is not None:
            found.append(Change(kind, words, after, now.loss - after.loss, now.exposure - after.exposure))
    return tuple(sorted(found, key=lambda change: -_told(change.gain)))


def _told(number: float) -> float:
    """Round off the noise of the arithmetic, so that what is alike stays in its order on every machine."""
    return float(f"{number:.8e}")


def _single(model: Model) -> Iterator[tuple[str, str, Model]]:
    """Yield (kind, words, changed model) for every single change."""
    yield from _intervals(model)
    for node in dict.fromkeys(node for _, node in model.rule.nodes()):
        for need in (node.need - 1, node.need + 1):
            if 1 <= need <= len(node.children):
                other = Rule(need, node.children)
                words = f"to need {need} instead of {node.need}"
                # In a rule of several groups it is told which of them is meant.
                where = "" if model.rule.depth == 1 else " at the top" if node == model.rule else f" of {_listed(node)}"
                yield "threshold", words + where, replace(model, rule=_replaced(model.rule, node, other))
    for name in _kinds_of_custodian(model):
        try:
            yield "custodian", f"to have another custodian like {name}", with_another(model, name)
        except ParameterError:  # The rule has no room for more.
            continue
    for name in _kinds_of_custodian(model):
        if any(cause.kind == "site" and name in cause.members and len(cause.members) > 1 for cause in model.causes):
            yield "site", f"to keep the share of {name} at a site of its own", moved(model, name)


def _intervals(model: Model) -> Iterator[tuple[str, str, Model]]:
    for kind, now, changed in (
        ("attest", model.attest_every, attesting_every),
        ("refresh", model.refresh_every, refreshing_every),
    ):
        if now != 1:
            days = DAYS_OF_A_YEAR if now is None else now // 2
            yield kind, f"to {kind} {numbers.every(days)}", changed(model, days)


def _listed(node: Rule) -> str:
    """Name a group by those directly in it."""
    names = list(dict.fromkeys(child if isinstance(child, str) else "a group" for child in node.children))
    return f"({', '.join(names)})"


def _replaced(rule: Rule, old: Rule, new: Rule) -> Rule:
    if rule == old:
        return new
    return Rule(
        rule.need, tuple(_replaced(child, old, new) if isinstance(child, Rule) else child for child in rule.children)
    )


def _kinds_of_custodian(model: Model) -> list[str]:
    """Return one custodian for all who can change places with one another and leave the model as it is."""
    found = list[str]()
    itself = _shape(model, {})
    for name in model.custodians:
        if not any(_shape(model, {name: other, other: name}) == itself for other in found):
            found.append(name)
    return found


def _shape(model: Model, renamed: dict[str, str]) -> tuple[str, Counter[tuple[object, ...]]]:
    """Return what is left of a model when names of causes and the order of children do not count."""

    def of(node: Rule | str) -> str:
        if isinstance(node, str):
            return repr(renamed.get(node, node))
        return f"{node.need}({','.join(sorted(map(of, node.children)))})"

    causes = Counter[tuple[object, ...]](
        (one.kind, one.loss, one.leak, one.absent, frozenset(renamed.get(name, name) for name in one.members))
        for one in model.causes
    )
    return of(model.rule), causes


def _work(model: Model) -> float:
    """Guess, alike on every machine, how much work the odds are: places times thresholds, and more by a third of a
    doubling for every event whose custodians overlap with another's in part. (Measured to a factor of about three.)"""
    shared = list({cause.members for cause in model.causes if len(cause.members) > 1})
    crossing = sum(any(one & other and not (one <= other or other <= one) for other in shared) for one in shared)
    needed = max(node.need for _, node in model.rule.nodes())
    return float(model.rule.size * (needed + 10) * 2 ** (crossing / 3))
