"""Every single change is there once, and custodians who can change places are tried once.

Source: the definition, tried out: two custodians change places where swapping their names everywhere leaves the model
as it is, whatever its causes are called.
"""

from __future__ import annotations

import itertools
import random
from collections import Counter

import pytest

from shares.planning.changes import with_another
from shares.planning.model import Cause, Model
from shares.planning.single import _kinds_of_custodian, single_changes
from shares.sharing.rule import Rule


def shape(model: Model, renamed: dict[str, str]) -> object:
    """What is left of a model when names of causes and the order of children do not count."""

    def of(node: Rule | str) -> str:
        if isinstance(node, str):
            return renamed.get(node, node)
        return f"{node.need}({','.join(sorted(map(of, node.children)))})"

    causes = Counter(
        (one.kind, one.loss, one.leak, one.absent, frozenset(renamed.get(name, name) for name in one.members))
        for one in model.causes
    )
    return of(model.rule), causes


def alike(model: Model, one: str, other: str) -> bool:
    return shape(model, {one: other, other: one}) == shape(model, {})


def any_model(seed: int) -> Model:
    """Up to 8 custodians in up to three groups, in houses that overlap, with rates of two sorts: many are alike."""
    lot = random.Random(seed)
    names = [f"pier {i}" for i in range(lot.randint(2, 8))]
    groups = tuple(Rule(1, tuple(lot.sample(names, lot.randint(1, len(names))))) for _ in range(lot.randint(0, 2)))
    rule = Rule(1, (*names[: lot.randint(1, len(names))], *groups))
    causes = [Cause("share", name, frozenset({name}), lot.choice([0.1, 0.1, 0.2])) for name in names]
    for i in range(lot.randint(0, 4)):
        members = frozenset(lot.sample(names, lot.randint(1, len(names))))
        causes.append(Cause(lot.choice(["site", "line"]), f"house {i}", members, 0.1, lot.choice([0.1, 0.2])))
    return Model(rule, tuple(causes))


@pytest.mark.parametrize("seeds", [range(i, i + 100) for i in range(0, 400, 100)], ids=str)
def test_one_custodian_stands_for_all_who_can_change_places(seeds: range) -> None:
    fewer = 0
    for model in map(any_model, seeds):
        kinds = _kinds_of_custodian(model)
        assert kinds == [name for name in model.custodians if name in kinds]
        assert not any(alike(model, one, other) for one, other in itertools.combinations(kinds, 2))
        for name in model.custodians:
            assert any(name == one or alike(model, name, one) for one in kinds)
        fewer += len(kinds) < len(model.custodians)
    assert 20 < fewer < 100


def test_two_who_stand_alike_in_groups_that_are_not() -> None:
    """Their thresholds and rates are the same; only the whole rule tells that they cannot change places."""
    rule = Rule(2, (Rule(1, ("a", "b", "c")), Rule(1, ("d", "e", "f")), Rule(2, ("a", "d", "x")), "y"))
    model = Model(rule, (), attest_every=1, refresh_every=1)
    # a may change places with d only if b and c do with e and f.
    assert _kinds_of_custodian(model) == ["a", "b", "d", "e", "x", "y"]


def test_200_custodians_of_many_kinds_are_all_there() -> None:
    lot = random.Random(1)
    names = [f"pier {i}" for i in range(200)]
    groups = tuple(Rule(33, tuple(lot.sample(names, 100))) for _ in range(6))
    causes = tuple(Cause("site", f"quay {i}", frozenset(names[i::7]), 0.1) for i in range(7))
    model = Model(Rule(3, groups), causes)
    others = [change for change in single_changes(model) if change.kind == "custodian"]
    kinds = _kinds_of_custodian(model)
    assert [change.words for change in others] == [f"to have another custodian like {name}" for name in kinds]
    assert others[5].model == with_another(model, kinds[5])
    assert len(kinds) > 100


def test_large_groups_are_named_by_their_place() -> None:
    names = tuple(f"pier {i}" for i in range(8))
    model = Model(Rule(2, (Rule(1, names[:4]), Rule(2, names[:5]), Rule(2, names[1:]))), ())
    told = [change.words for change in single_changes(model) if change.words.startswith("to need 2")]
    assert told == ["to need 2 instead of 1 of (pier 0, pier 1, pier 2, pier 3)"]
    threes = [change for change in single_changes(model) if change.words.startswith("to need 3")]
    assert [change.words for change in threes] == [
        "to need 3 instead of 2 at the top",
        "to need 3 instead of 2 of group 2 (pier 0, pier 1, pier 2 and 2 more)",
        "to need 3 instead of 2 of group 3 (pier 1, pier 2, pier 3 and 4 more)",
    ]
    assert [node.need for _, node in threes[2].model.rule.nodes()] == [2, 1, 2, 3]
