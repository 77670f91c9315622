"""Custodians in a line: from different sites first, and more of them imagined like those.

Source: the same model built by hand, one custodian after another.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.errors import ParameterError
from shares.planning.changes import with_another
from shares.planning.lineup import MAX_CUSTODIANS, lined_up
from shares.planning.model import Model, model_of
from shares.sharing.rule import Rule

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"


def example(name: str) -> Model:
    return model_of(Policy.parse((EXAMPLES / f"{name}.toml").read_bytes()))


def test_custodians_are_taken_from_different_sites_first() -> None:
    gate = example("tide-gate")
    custodians = lined_up(gate)
    sites = [cause.members for cause in gate.causes if cause.kind == "site"]
    for start in range(0, 12, 3):
        three = custodians.names[start : start + 3]
        assert {i for i, site in enumerate(sites) for name in three if name in site} == {0, 1, 2}
    assert (custodians.own, custodians.imagined(12)) == (12, 0)
    assert custodians.rule(8, 12).causes == gate.causes


def test_more_are_imagined_like_those_who_are_there() -> None:
    draft = example("first-draft")
    custodians = lined_up(draft)
    names = custodians.names
    assert len(set(names)) == MAX_CUSTODIANS
    assert set(names[:4]) == set(draft.custodians)
    assert [custodians.imagined(total) for total in (3, 4, 5, 12)] == [0, 0, 1, 8]
    by_hand = replace(draft, rule=Rule(1, names[:4]))
    for like in names[:4]:
        by_hand = with_another(by_hand, like)
    peopled = custodians.rule(2, 8)
    for group in (cause for cause in by_hand.causes if cause.kind in ("site", "line")):
        now = next(cause for cause in peopled.causes if (cause.kind, cause.name) == (group.kind, group.name))
        assert now.members & set(names[:8]) == group.members


def test_a_rule_over_them_is_plain_and_keeps_all_else() -> None:
    archive = example("tide-archive")
    custodians = lined_up(archive)
    two_of_three = custodians.rule(2, 3)
    assert two_of_three.rule == Rule(2, custodians.names[:3])
    assert two_of_three.attest_every == archive.attest_every
    for need, total in ((0, 3), (4, 3), (1, 0)):
        with pytest.raises(ParameterError):
            custodians.rule(need, total)
