"""Every single change is there once but those that nobody should make, and custodians who can change places are tried
once.

Sources: the definition, tried out: two custodians change places where swapping their names everywhere leaves the model
as it is, whatever its causes are called. The rule followed by hand says who makes or blocks a quorum alone.
"""

from __future__ import annotations

import itertools
import random
from collections import Counter
from collections.abc import Iterator
from dataclasses import replace

import pytest
from hypothesis import given
from strategies import policies, satisfies, toml_of

from shares.documents.policy import Policy
from shares.planning.changes import with_another
from shares.planning.model import Cause, Model, model_of
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


# What nobody should be advised to do.


def together(model: Model, kind: str) -> set[frozenset[str]]:
    """Those who belong together, and each custodian by themselves."""
    return {frozenset({name}) for name in model.custodians} | {c.members for c in model.causes if c.kind == kind}


def suffices(model: Model, members: frozenset[str]) -> bool:
    paths = model.rule.paths()
    return satisfies(model.rule, {path for name in members & paths.keys() for path in paths[name]})


def blocks(model: Model, members: frozenset[str]) -> bool:
    return not suffices(model, frozenset(model.custodians) - members)


def new_ones(before: Model, after: Model) -> set[str]:
    """What is serious after a change and was not so before. Whoever was enough alone may have more now, and what is
    left of a site or line may be enough still."""
    found = set()
    for kind, tests in (("person", (suffices, blocks)), ("site", (suffices, blocks)), ("line", (suffices,))):
        for test in tests:
            old = [members for members in together(before, kind) if test(before, members)]
            new = [members for members in together(after, kind) if test(after, members)]
            left = [] if kind == "person" or before.rule != after.rule else old
            if any(
                not any(one <= members for one in old) and not any(members < one for one in left) for members in new
            ):
                found.add(f"a {kind} {test.__name__}")
    return found


@given(policies())
def test_no_advised_change_newly_makes_one_person_a_quorum_or_one_that_all_need(data: dict[str, object]) -> None:
    model = model_of(Policy.parse(toml_of(data)))
    advised = list(single_changes(model))
    for change in advised:
        assert not new_ones(model, change.model), change.words
        everybody_needed = all(blocks(change.model, frozenset({name})) for name in change.model.custodians)
        assert not everybody_needed or all(blocks(model, frozenset({name})) for name in model.custodians)
    # What is left out is left out for that alone.
    left_out = [one for one in every_change(model) if one not in [change.model for change in advised]]
    for changed in left_out:
        assert new_ones(model, changed)


def every_change(model: Model) -> Iterator[Model]:
    """Each other threshold, and each other custodian."""
    for old in {node for _, node in model.rule.nodes()}:
        for need in (old.need - 1, old.need + 1):
            if 1 <= need <= len(old.children):
                yield replace(model, rule=put(model.rule, old, Rule(need, old.children)))
    yield from (with_another(model, name) for name in _kinds_of_custodian(model))


def put(node: Rule, old: Rule, new: Rule) -> Rule:
    if node == old:
        return new
    return Rule(node.need, tuple(put(one, old, new) if isinstance(one, Rule) else one for one in node.children))


def piers(need: int, total: int, *causes: Cause) -> Model:
    return Model(Rule(need, tuple(f"pier {i}" for i in range(total))), causes)


@pytest.mark.parametrize(
    ("model", "thresholds"),
    [
        (piers(2, 3), []),  # 1 of 3 is one person's, and 3 of 3 ends with one loss.
        (piers(3, 5), ["2", "4"]),
        (piers(2, 5), ["3"]),
        (piers(4, 5), ["3"]),
        (piers(1, 3), ["2"]),
        (piers(3, 3), ["2"]),
        (piers(3, 5, Cause("person", "keeper", frozenset({"pier 0", "pier 1"}))), []),  # 2 of 5, and both of 4 of 5
        (piers(3, 5, Cause("line", "board", frozenset({"pier 0", "pier 1"}))), ["4"]),
        (piers(3, 6, Cause("site", "quay", frozenset({"pier 0", "pier 1"}))), ["4"]),
    ],
    ids=lambda one: str(one) if isinstance(one, list) else one.rule.words(),
)
def test_thresholds_that_are_advised(model: Model, thresholds: list[str]) -> None:
    told = [change.words.split()[2] for change in single_changes(model) if change.kind == "threshold"]
    assert told == thresholds


def test_nobody_is_advised_to_give_a_site_or_a_person_more_than_others_have() -> None:
    def others(model: Model) -> list[str]:
        return [change.words.rpartition(" like ")[2] for change in single_changes(model) if change.kind == "custodian"]

    assert others(piers(1, 2)) == []
    assert others(piers(2, 2)) == ["pier 0"]
    # One more at the quay would make three there, of which three are needed.
    quay = Cause("site", "quay", frozenset({"pier 0", "pier 1"}))
    assert others(piers(3, 5, quay)) == ["pier 2"]


def test_lines_and_media_that_several_share_can_be_left() -> None:
    keeper = Cause("person", "keeper", frozenset({"pier 0", "pier 1"}))
    board = Cause("line", "board", frozenset({"pier 0", "pier 1", "pier 2"}))
    stick = Cause("medium", "stick", frozenset({"pier 3", "pier 4"}), loss=0.1)

    def told(*causes: Cause) -> list[str]:
        return [one.words for one in single_changes(piers(3, 5, *causes)) if one.kind in ("line", "medium")]

    assert told(keeper, board, stick) == [
        "to have pier 0 report to somebody else",
        "to have pier 2 report to somebody else",
        "to keep the share of pier 3 on another medium",
    ]
    # All of one person have one manager; nobody leaves a line that is their own; and paper does not fail at once.
    assert told(keeper, replace(board, members=keeper.members)) == []
    assert told(replace(keeper, name="Board"), board) == ["to have pier 2 report to somebody else"]
    assert told(replace(stick, loss=0.0)) == told(replace(stick, members=frozenset({"pier 3"}))) == []


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
