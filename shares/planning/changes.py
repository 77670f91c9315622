"""What if: a model with one thing changed, so that its odds can be set beside those of the model as it is.

Source: this project's own list of what a dealer can change before a ceremony.
May import: shares.errors, shares.sharing.rule, shares.documents.policy, .assumed, .model.
Secret: nothing. Public: nothing either, as for the model.
Does not: judge a change, or know what it costs.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator
from dataclasses import replace

from shares.documents.policy import folded
from shares.errors import ParameterError
from shares.planning.assumed import Kind
from shares.planning.model import Cause, Model
from shares.sharing.rule import Rule


def attesting_every(model: Model, days: int | None) -> Model:
    """Return the model with attestations every so many days, 1 or more, or with none.

    Raises:
        ParameterError: an interval of less than a day.
    """
    return replace(model, attest_every=days)


def refreshing_every(model: Model, days: int | None) -> Model:
    """Return the model with a refresh every so many days, 1 or more, or with none.

    Raises:
        ParameterError: an interval of less than a day.
    """
    return replace(model, refresh_every=days)


def with_another(model: Model, like: str) -> Model:
    """Return the model with one more custodian: in the rule wherever ``like`` stands and with the same weight, at the
    same site, under the same manager and on the same medium, but another person, who commands nobody. No threshold
    changes.

    Raises:
        ParameterError: nobody has that name, or the rule has no room for more.
    """
    _known(model, like)
    name = next(name for i in range(2, len(model.custodians) + 3) if (name := f"{like} {i}") not in model.custodians)
    return replace(model, rule=_beside(model.rule, like, name), causes=tuple(_befalling(model.causes, like, name)))


def moved(model: Model, custodian: str) -> Model:
    """Return the model with a custodian's share at a site of its own, which is as safe as the one before.

    Raises:
        ParameterError: nobody has that name.
    """
    return _apart(model, "site", frozenset({custodian}), custodian)


def on_another_medium(model: Model, custodian: str) -> Model:
    """Return the model with a custodian's share on a medium of its own, which is as good as the one before.

    Raises:
        ParameterError: nobody has that name.
    """
    return _apart(model, "medium", frozenset({custodian}), custodian)


def reporting_elsewhere(model: Model, custodian: str) -> Model:
    """Return the model with the person who is a custodian in a line of their own, with all shares that they hold.

    The line that a person commands stays theirs, whoever they report to.

    Raises:
        ParameterError: nobody has that name.
    """
    persons = [one for one in model.causes if one.kind == "person" and custodian in one.members]
    held = frozenset({custodian}).union(*(one.members for one in persons))
    return _apart(model, "line", held, custodian, but={folded(one.name) for one in persons})


def _apart(
    model: Model, kind: Kind, held: frozenset[str], custodian: str, *, but: Collection[str] = frozenset()
) -> Model:
    """Return the model with some custodians taken out of the causes of a kind, and struck by one of their own each time
    instead; causes of some names, folded, stay as they are."""
    _known(model, custodian)
    causes = list[Cause]()
    for cause in model.causes:
        if cause.kind == kind and custodian in cause.members and folded(cause.name) not in but:
            causes.append(replace(cause, members=cause.members - held))
            causes.append(replace(cause, name=f"a {kind} for {custodian}", members=cause.members & held))
        else:
            causes.append(cause)
    return replace(model, causes=tuple(cause for cause in causes if cause.members))


def _known(model: Model, custodian: str) -> None:
    if custodian not in model.custodians:
        raise ParameterError("no custodian of this name is in the rule", where=custodian)


def _beside(node: Rule, like: str, name: str) -> Rule:
    children = list[Rule | str]()
    for child in node.children:
        if isinstance(child, Rule):
            children.append(_beside(child, like, name))
        else:
            children += [child, name] if child == like else [child]
    return Rule(node.need, tuple(children))


def _befalling(causes: tuple[Cause, ...], like: str, name: str) -> Iterator[Cause]:
    persons = {folded(cause.name) for cause in causes if cause.kind == "person" and like in cause.members}
    for cause in causes:
        if like not in cause.members or (cause.kind == "line" and folded(cause.name) in persons):
            yield cause
        elif cause.kind in ("share", "person"):
            yield cause
            yield replace(cause, name=name, members=frozenset({name}))
        else:
            yield replace(cause, members=cause.members | {name})
