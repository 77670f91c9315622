"""Every single change that a dealer can make to a policy, each with its words and the model that it leaves.

They are one more custodian, each threshold up or down by one, attestations and refreshes twice as often (or yearly,
where there are none), a site of its own for a share, another medium for one of several that may fail together, and
another manager for one of several. Custodians who can change places without changing anything are tried once.

Left out is what nobody should be advised to do, since it brings what ``findings`` calls serious: a change after which
one custodian, person, site or reporting line makes a quorum alone, or one custodian, person or site is needed by every
quorum (as all are in n of n), where that was not so before.

Source: this project's own list; ``findings`` names the demands of the trade.
May import: shares.errors, shares.sharing.rule, .changes, .model, .numbers, .soundness.
Secret: nothing. Public: nothing either, as for the model.
Does not: know what a change costs or gains, know by which ways shares travel, or make two changes at once (``targets``
does).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, replace

from shares.errors import ParameterError
from shares.planning import numbers
from shares.planning.changes import (
    attesting_every,
    moved,
    on_another_medium,
    refreshing_every,
    reporting_elsewhere,
    with_another,
)
from shares.planning.model import DAYS_OF_A_YEAR, Cause, Model
from shares.planning.soundness import Soundness, wholes
from shares.sharing.rule import Rule

_MOST_NAMED = 4
"""A group of more custodians is told by its place, and by so many of them less one."""


@dataclass(frozen=True, slots=True)
class Single:
    """One change.

    Attributes:
        kind: "custodian", "threshold", "attest", "refresh", "site", "line" or "medium".
        words: what is to be done, as in "to attest every 45 days".
        model: what is left when it is done.
    """

    kind: str
    words: str
    model: Model


def single_changes(model: Model) -> Iterator[Single]:
    """Yield every single change of a model that leaves its structure as sound as it is.

    Args:
        model: as ``model_of`` returns it.

    >>> piers = Model(Rule(2, ("north-pier", "south-pier")), (), refresh_every=365)
    >>> [change.words for change in single_changes(piers)][:3]
    ['to attest every year', 'to refresh every 182 days', 'to have another custodian like north-pier']
    """
    yield from _intervals(model)
    sound = Soundness(model)
    kinds = _kinds_of_custodian(model)
    yield from (change for change in _thresholds(model) if sound.stays(change.model))
    yield from (change for change in _others(model, kinds) if sound.stays(change.model))
    # Whoever is set apart belongs to a smaller whole than before, which can do no more than the larger one could.
    yield from _set_apart(model, kinds)


def _thresholds(model: Model) -> Iterator[Single]:
    for place, node in enumerate(dict.fromkeys(node for _, node in model.rule.nodes())):
        for need in (node.need - 1, node.need + 1):
            if 1 <= need <= len(node.children):
                other = Rule(need, node.children)
                words = f"to need {need} instead of {node.need}"
                # In a rule of several groups it is told which of them is meant.
                where = "" if model.rule.depth == 1 else " at the top" if node == model.rule else _named(node, place)
                changed = replace(model, rule=_replaced(model.rule, node, other))
                yield Single("threshold", words + where, changed)


def _others(model: Model, kinds: list[str]) -> Iterator[Single]:
    for name in kinds:
        try:
            yield Single("custodian", f"to have another custodian like {name}", with_another(model, name))
        except ParameterError:  # The rule has no room for more.
            continue


def _set_apart(model: Model, kinds: list[str]) -> Iterator[Single]:
    shared = [cause for cause in model.causes if len(cause.members) > 1]
    for name in kinds:
        if any(cause.kind == "site" and name in cause.members for cause in shared):
            yield Single("site", f"to keep the share of {name} at a site of its own", moved(model, name))
    for name in kinds:
        # All shares of one person have one manager: where nobody else has, another one changes nothing.
        elsewhere = reporting_elsewhere(model, name)
        if wholes(elsewhere, "line") != wholes(model, "line"):
            yield Single("line", f"to have {name} report to somebody else", elsewhere)
    for name in kinds:
        if any(cause.kind == "medium" and cause.loss and name in cause.members for cause in shared):
            yield Single("medium", f"to keep the share of {name} on another medium", on_another_medium(model, name))


def _intervals(model: Model) -> Iterator[Single]:
    # Nobody keeps up with attestations that come before what the one before found lost is made good.
    for kind, now, shortest, changed in (
        ("attest", model.attest_every, model.repair_after, attesting_every),
        ("refresh", model.refresh_every, 1, refreshing_every),
    ):
        days = DAYS_OF_A_YEAR if now is None else now // 2
        if days >= max(1, shortest):
            yield Single(kind, f"to {kind} {numbers.every(days)}", changed(model, days))


def _named(node: Rule, place: int) -> str:
    """Name a group by those directly in it; a large one by its place among the groups as well."""
    names = list(dict.fromkeys(child if isinstance(child, str) else "a group" for child in node.children))
    if len(names) <= _MOST_NAMED:
        return f" of ({', '.join(names)})"
    first = names[: _MOST_NAMED - 1]
    return f" of group {place} ({', '.join(first)} and {len(names) - len(first)} more)"


def _replaced(rule: Rule, old: Rule, new: Rule) -> Rule:
    if rule == old:
        return new
    return Rule(
        rule.need, tuple(_replaced(child, old, new) if isinstance(child, Rule) else child for child in rule.children)
    )


def _kinds_of_custodian(model: Model) -> list[str]:
    """Return one custodian for all who can change places with one another and leave the model as it is."""
    befalling: dict[str, list[Cause]] = {name: [] for name in model.custodians}
    for cause in model.causes:
        for name in cause.members & befalling.keys():
            befalling[name].append(cause)
    places = _places(model.rule)
    # Only those who stand at places alike can change them; so the whole rule is compared seldom.
    found: dict[tuple[object, ...], list[str]] = {}
    whole = _shape(model.rule, {})
    for name in model.custodians:
        alike = found.setdefault((places[name], _rates(befalling[name])), [])
        if not any(
            _befallen(befalling[name], name, other) == _befallen(befalling[other], other, name)
            and _shape(model.rule, {name: other, other: name}) == whole
            for other in alike
        ):
            alike.append(name)
    chosen = {name for names in found.values() for name in names}
    return [name for name in model.custodians if name in chosen]


def _places(rule: Rule) -> dict[str, tuple[tuple[tuple[int, int], ...], ...]]:
    """Return for each custodian, in one order, the thresholds that stand above each of their leaves."""
    found: dict[str, list[tuple[tuple[int, int], ...]]] = {}

    def walk(node: Rule, above: tuple[tuple[int, int], ...]) -> None:
        below = (*above, (node.need, len(node.children)))
        for child in node.children:
            if isinstance(child, Rule):
                walk(child, below)
            else:
                found.setdefault(child, []).append(below)

    walk(rule, ())
    return {name: tuple(sorted(places)) for name, places in found.items()}


def _rates(causes: list[Cause]) -> tuple[tuple[object, ...], ...]:
    return tuple(sorted((one.kind, one.loss, one.leak, one.absent, len(one.members)) for one in causes))


def _befallen(causes: list[Cause], name: str, other: str) -> Counter[tuple[object, ...]]:
    """Return what befalls one custodian and not another one; names of causes do not count."""
    return Counter(
        (one.kind, one.loss, one.leak, one.absent, one.members - {name}) for one in causes if other not in one.members
    )


def _shape(node: Rule | str, renamed: dict[str, str]) -> str:
    """Return what is left of a rule when the order of children does not count."""
    if isinstance(node, str):
        return repr(renamed.get(node, node))
    return f"{node.need}({','.join(sorted(_shape(child, renamed) for child in node.children))})"
