"""Cards that do not fit the custodians they are named for, each told where it is so and not elsewhere.

Source: every way to give three custodians one of three cards, with what is expected counted anew.
"""

from __future__ import annotations

import itertools
from pathlib import Path

from parties import card

from shares.documents.policy import Policy
from shares.planning.cards import card_findings
from shares.planning.examine import examine

NAMES = ("north-pier", "south-pier", "light-house")
TIDE = Path(__file__).parents[2] / "examples" / "policies" / "tide-archive.toml"


def test_every_way_to_mix_up_three_cards() -> None:
    for given in itertools.product((None, *NAMES), repeat=3):
        cards = {name: card(of) for name, of in zip(NAMES, given, strict=True) if of is not None}
        told = card_findings(cards)
        wrong = [(name,) for name, one in cards.items() if one.name != name]
        shared = {tuple(name for name, one in cards.items() if one.name == of) for of in NAMES}
        assert [one.about for one in told if one.code == "card-of-another-name"] == wrong
        assert {one.about for one in told if one.code == "card-of-several"} == {names for names in shared if names[1:]}
        serious = {one.code for one in told if one.severity == "serious"}
        assert serious == ({"card-of-several"} if any(names[1:] for names in shared) else set())
        assert all(one.what.endswith(".") and one.advice.endswith(".") for one in told)


def test_a_plan_tells_them_among_its_cautions() -> None:
    policy = Policy.parse(TIDE.read_bytes())
    plan = examine(policy, cards={"north-pier": card("registrar")})
    assert [one.code for one in plan.findings] == ["line-blocks", "card-of-another-name", "one-loss-left"]
    assert plan.findings[1].what.startswith("The card of north-pier is in the name of registrar, fingerprint ")
    assert not plan.refused  # strict forbids serious findings alone
    assert examine(policy, cards={}) == examine(policy)
