"""The rates told back are those of the policy, all of them, and each once.

Source: the rates of a policy written for this, as FORMAT.md, section 12, reads them.
"""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.planning.befalling import befalling
from shares.planning.model import model_of

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
def test_every_cause_is_told_once(path: Path) -> None:
    model = model_of(Policy.parse(path.read_bytes()))
    found = list(befalling(model))
    told = [(one.kind, name) for one in found for name in one.names]
    assert sorted(told) == sorted((cause.kind, cause.name) for cause in model.causes)
    rate_of = {(cause.kind, cause.name): cause for cause in model.causes}
    for one in found:
        for name in one.names:
            cause = rate_of[one.kind, name]
            assert one.loss == pytest.approx(1 - math.exp(-cause.loss), rel=1e-9)
            assert one.leak == pytest.approx(1 - math.exp(-cause.leak), rel=1e-9)
            assert one.absent == cause.absent


def test_what_a_policy_states_is_told_as_it_was_stated() -> None:
    text = (EXAMPLES / "break-glass.toml").read_text().replace('name = "dry-dock"', 'name = "dry-dock"\nloss = "7 %/y"')
    text += '[[site]]\nname = "light-house"\nloss = "1.5 %/y"\nleak = "0 %/y"\nabsent = "3 %"\n'
    told = {(one.kind, one.named): one.words for one in befalling(model_of(Policy.parse(text.encode())))}
    assert told["share", "dry-dock"] == ("7 %", "none", "none")
    assert told["site", "light-house"] == ("1.5 %", "none", "3 %")
    assert told["site", "north pier, south pier, dry dock, harbour office"] == ("0.2 %", "0.2 %", "0.5 %")


def test_of_many_names_the_first_are_told() -> None:
    model = model_of(Policy.parse((EXAMPLES / "tide-gate.toml").read_bytes()))
    shares = next(one for one in befalling(model) if one.kind == "share")
    assert shares.named.startswith("north-pier, ")
    assert shares.named.endswith(" and 4 more")
    assert shares.named.count(",") == 7
