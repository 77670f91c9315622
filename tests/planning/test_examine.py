"""The plan as a whole: its numbers against brute force over all sets of people, and what strict makes of it."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from strategies import authorised, policies, sets_of, toml_of

from shares.documents.policy import Policy
from shares.errors import VerificationError
from shares.planning.examine import examine
from shares.planning.structure import Bounds, Count

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"
MEMBERS = {"custodians": "name", "people": "person", "sites": "site", "reporting lines": "reports_to"}


@given(policies())
def test_the_numbers_against_trying_every_set(data: dict[str, Any]) -> None:
    plan = examine(Policy.parse(toml_of(data)))
    everyone = {custodian["name"] for custodian in data["custodian"]}
    assert plan.exact
    assert list(plan.counts) == list(MEMBERS)
    for what, member in MEMBERS.items():
        label_of = {custodian["name"]: custodian[member] for custodian in data["custodian"]}
        sets = sets_of(label_of.values())
        held = {chosen: {name for name in everyone if label_of[name] in chosen} for chosen in sets}
        make = min(len(chosen) for chosen in sets if authorised(data, held[chosen]))
        block = min(len(chosen) for chosen in sets if not authorised(data, everyone - held[chosen]))
        total = len(set(label_of.values()))
        assert plan.counts[what] == Count(total, Bounds(make, make), Bounds(block, block))
    for quorum in plan.quorums.listed:
        assert authorised(data, quorum)
        assert not any(authorised(data, set(quorum) - {name}) for name in quorum)


def example(name: str, **changes: str) -> Policy:
    text = (EXAMPLES / f"{name}.toml").read_text()
    for old, new in changes.items():
        text = text.replace(old, new)
    return Policy.parse(text.encode())


def test_the_plans_of_the_examples() -> None:
    """The numbers were found by hand on paper: two operators and the registrar; the registrar and one auditor block."""
    tide = examine(example("tide-archive"))
    assert tide.counts["people"] == Count(6, Bounds(3, 3), Bounds(2, 2))
    assert tide.counts["reporting lines"] == Count(3, Bounds(2, 2), Bounds(1, 1))
    assert tide.quorums.count == Bounds(6, 6)
    assert tide.quorums.listed[0] == ("north-pier", "south-pier", "registrar")
    assert tide.quorums.listed[-1] == ("south-pier", "light-house", "auditor-east", "auditor-west")
    assert (tide.strict, tide.serious, tide.refused) == (True, (), False)
    assert examine(example("break-glass")).findings == ()


def test_the_first_draft_has_the_usual_mistakes() -> None:
    plan = examine(example("first-draft"))
    assert {finding.code for finding in plan.serious} == {
        "too-few-sites",
        "site-suffices",
        "line-suffices",
        "person-blocks",
        "site-blocks",
    }
    assert {finding.code for finding in plan.findings} - {finding.code for finding in plan.serious} == {
        "line-blocks",
        "signature-key",
        "delivery-not-stated",
    }


def test_strict_refuses_serious_findings_and_nothing_else() -> None:
    plan = examine(example("first-draft"))
    assert not plan.refused
    plan.require_sound()
    strict = examine(example("first-draft", **{"pad = 64": "strict = true"}))
    assert strict.refused
    with pytest.raises(
        VerificationError, match="strict, and a serious finding stands \\(and 4 more\\): With two sites, one"
    ):
        strict.require_sound()
    examine(example("tide-archive")).require_sound()  # strict, with a caution and a note


def test_one_serious_finding_is_told_alone() -> None:
    plan = examine(example("break-glass", **{"need = 3": "need = 5"}))
    assert [finding.code for finding in plan.serious] == ["all-needed"]
    with pytest.raises(VerificationError, match="a serious finding stands: Every custodian is needed"):
        plan.require_sound()
