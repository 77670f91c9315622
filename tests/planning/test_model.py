"""What is read from a policy: rates stated and assumed, who shares which cause, and what is out of range.

Source of the numbers: an event of chance p a year has the rate -ln(1 - p), as 1 - exp(-rate) is the chance again.
"""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from strategies import toml_of

from shares.documents.policy import Policy
from shares.errors import ParameterError
from shares.planning import assumed
from shares.planning.assumed import assumptions
from shares.planning.model import Cause, Model, model_of, yearly
from shares.sharing.rule import Rule

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"


def policy_of(*custodians: dict[str, Any], **more: Any) -> Policy:
    named = [
        {"person": f"keeper of {c['name']}", "site": f"house of {c['name']}", "reports_to": "board", **c}
        for c in custodians
    ]
    rule = {"need": 1, "from": [custodian["name"] for custodian in named]}
    return Policy.parse(toml_of({"label": "Tide archive", "custodian": named, "rule": rule, **more}))


def causes(model: Model, kind: str) -> dict[str, Cause]:
    return {cause.name: cause for cause in model.causes if cause.kind == kind}


def test_a_yearly_chance_is_the_chance_of_its_rate() -> None:
    for chance in (0.0, 1e-12, 0.05, 0.999):
        assert math.isclose(-math.expm1(-yearly(chance)), chance, rel_tol=1e-15)


def test_what_is_stated_holds_and_the_nearest_statement_first() -> None:
    model = model_of(
        policy_of(
            {"name": "north-pier", "loss": "1 %/y", "leak": "2 %/y", "departure": "0 %/y", "absent": "3 %"},
            {"name": "south-pier", "medium": "stick"},
            rates={"loss": "5 %/y", "leak": "0 %/y", "departure": "20 %/y", "handed_on": "75 %", "absent": "9 %"},
            site=[{"name": "House of North-Pier", "loss": "4 %/y"}],
            attest_every="26w",
            refresh_every="1y",
            recover_within="4d",
        )
    )
    shares, people, sites = (causes(model, kind) for kind in ("share", "person", "site"))
    assert shares["north-pier"].loss == yearly(0.01)
    assert shares["south-pier"].loss == yearly(0.05)
    assert shares["north-pier"].leak == shares["north-pier"].absent == 0
    first, second = people["keeper of north-pier"], people["keeper of south-pier"]
    assert (first.loss, first.leak, first.absent) == (0, yearly(0.02), 0.03)
    # One leaver in four takes the share along.
    assert (second.loss, second.leak, second.absent) == (yearly(0.2) / 4, yearly(0.2) / 4, 0.09)
    site = sites["house of north-pier"]
    assert (site.loss, site.leak, site.absent) == (yearly(0.04), yearly(assumed.SITE.leak), assumed.SITE.absent)
    assert (model.attest_every, model.refresh_every, model.repair_after, model.recover_within) == (182, 365, 14, 4)


def test_what_is_not_stated_is_assumed() -> None:
    media = ("paper", "Safe", "stick", "card", "slate")
    model = model_of(policy_of({"name": "dry-dock"}, *({"name": medium, "medium": medium} for medium in media)))
    shares = causes(model, "share")
    losses = {"dry-dock": 0.04, "paper": 0.03, "Safe": 0.02, "stick": 0.06, "card": 0.04, "slate": 0.04}
    assert {name: cause.loss for name, cause in shares.items()} == {name: yearly(p) for name, p in losses.items()}
    assert {name: cause.loss for name, cause in causes(model, "medium").items()} == {
        **dict.fromkeys(("paper", "Safe", "slate"), 0),
        **dict.fromkeys(("stick", "card"), yearly(0.002)),
    }
    # Of shares on no special medium, 5 % a year are lost with departures: the figure of planning arithmetic.
    person = causes(model, "person")["keeper of dry-dock"]
    assert round(-math.expm1(-(shares["dry-dock"].loss + person.loss)), 3) == 0.05
    assert (model.attest_every, model.refresh_every, model.recover_within, model.patience) == (None, None, 1, 1)


def test_who_is_hit_together() -> None:
    model = model_of(
        policy_of(
            {"name": "north-pier", "person": "One", "site": "Pier House", "leak": "3 %/y", "medium": "paper"},
            {"name": "south-pier", "person": "one", "site": "pier  house", "absent": "50 %", "medium": "Paper"},
            {"name": "harbour-office", "person": "board", "reports_to": "trust"},
        )
    )
    together = {(cause.kind, cause.name): cause for cause in model.causes if len(cause.members) > 1}
    piers = {"north-pier", "south-pier"}
    assert {key: set(cause.members) for key, cause in together.items()} == {
        ("person", "One"): piers,
        ("site", "Pier House"): piers,
        # The manager's own share goes with those who report there.
        ("line", "board"): piers | {"harbour-office"},
        ("medium", "paper"): piers,
    }
    # What befalls a person befalls all their shares: the highest rate stated for any of them.
    person = together["person", "One"]
    assert math.isclose(person.leak - person.loss, yearly(0.03), rel_tol=1e-12)
    assert person.absent == 0.5


def test_absences_outlast_the_time_there_is() -> None:
    policy = policy_of({"name": "dry-dock"}, recover_within="8d", rates={"absent_for": "14d"})
    assert math.isclose(model_of(policy).patience, math.exp(-0.5), rel_tol=1e-15)
    assert model_of(policy_of({"name": "dry-dock"}, recover_within="4h")).patience == 1
    # Times of repair are counted in whole days, and never shortened.
    assert model_of(policy_of({"name": "dry-dock"}, rates={"repair_after": "25h"})).repair_after == 2


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
def test_each_custodian_of_the_examples_has_a_share_a_person_a_site_and_a_line(path: Path) -> None:
    model = model_of(Policy.parse(path.read_bytes()))
    for name in model.custodians:
        kinds = [cause.kind for cause in model.causes if name in cause.members]
        assert [kinds.count(kind) for kind in ("share", "person", "site")] == [1, 1, 1]
        assert kinds.count("line") >= 1


def test_assumptions_are_told_where_the_policy_leaves_something_open() -> None:
    kinds = (assumed.SHARE, assumed.PERSON, assumed.SITE, assumed.LINE, assumed.MEDIUM, assumed.MEDIUM_OF_ONE_MAKE)
    nothing = policy_of({"name": "north-pier", "medium": "paper"}, {"name": "south-pier", "medium": "stick"})
    assert assumptions(nothing) == (assumed.INDEPENDENT, *(kind.reason for kind in kinds), assumed.NO_DRILLS)
    whole = {"loss": "1 %/y", "leak": "1 %/y", "absent": "1 %"}
    stated = {
        "rates": {**whole, "departure": "0 %/y", "handed_on": "100 %", "absent_for": "1d"},
        "site": [{"name": "quay", **whole}],
        "line": [{"name": "board", **whole}],
    }
    everything = policy_of({"name": "north-pier", "site": "quay"}, **stated)
    assert assumptions(everything) == (assumed.INDEPENDENT, assumed.NO_DRILLS)
    for within, told in (("23h", True), ("1439min", True), ("24h", False), ("1d", False), ("9d", False)):
        given = policy_of({"name": "north-pier", "site": "quay"}, **stated, recover_within=within)
        assert assumptions(given) == (
            assumed.INDEPENDENT,
            *([assumed.WITHIN_A_DAY] if told else []),
            assumed.NO_DRILLS,
        )
    partly = {**stated, "site": [{"name": "quay", "loss": "1 %/y"}]}
    assert assumptions(policy_of({"name": "north-pier", "site": "quay"}, **partly)) == (
        assumed.INDEPENDENT,
        assumed.SITE.reason,
        assumed.NO_DRILLS,
    )
    for key in ("leak", "departure", "absent", "handed_on", "absent_for"):
        rates = {name: value for name, value in stated["rates"].items() if name != key}
        assert assumptions(policy_of({"name": "north-pier", "site": "quay"}, **{**stated, "rates": rates})) == (
            assumed.INDEPENDENT,
            assumed.PERSON.reason,
            assumed.NO_DRILLS,
        )


def test_what_is_out_of_range_is_refused() -> None:
    model = Model(Rule(1, ("north-pier",)), ())
    for wrong in (
        {"attest_every": 0},
        {"refresh_every": -1},
        {"repair_after": -1},
        {"recover_within": 0.5},
        {"absent_for": 0.0},
        {"absent_for": math.nan},
    ):
        with pytest.raises(ParameterError):
            replace(model, **wrong)  # type: ignore[arg-type]
    for wrong in ({"loss": -0.1}, {"loss": math.inf}, {"leak": math.nan}, {"absent": 1.1}, {"absent": -0.1}):
        with pytest.raises(ParameterError):
            Cause("site", "quay", frozenset({"north-pier"}), **wrong)
