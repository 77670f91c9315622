"""Odds over intervals: each is what the model with that interval has, and no odds depend on both intervals.

Source: the same odds, one interval at a time.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.planning import intervals as module
from shares.planning.intervals import DAYS, over_intervals
from shares.planning.model import Model, model_of
from shares.planning.odds import odds

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"


def example(name: str) -> Model:
    return model_of(Policy.parse((EXAMPLES / f"{name}.toml").read_bytes()))


@pytest.mark.parametrize("name", ["break-glass", "tide-gate"])
def test_each_is_the_odds_with_one_interval_changed(name: str) -> None:
    model = example(name)
    along = over_intervals(model, 10)
    assert [one.days for one in along] == [*sorted({*DAYS, *filter(None, (model.attest_every,))} - {3650}), None]
    for one in along:
        attested = odds(replace(model, attest_every=one.days), 10)
        refreshed = odds(replace(model, refresh_every=one.days), 10)
        assert attested is not None
        assert refreshed is not None
        assert (one.odds.loss, one.odds.absence, one.odds.exposure) == (
            attested.loss,
            attested.absence,
            refreshed.exposure,
        )


def test_the_policys_own_intervals_are_among_them_and_none_beyond_the_years() -> None:
    model = replace(example("break-glass"), attest_every=100, refresh_every=2000)
    assert [one.days for one in over_intervals(model, 1)] == [*(days for days in DAYS if days < 100), 100] + [
        days for days in DAYS if 100 < days < 365
    ] + [2000, None]


def test_what_is_too_much_work_has_no_curves(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "odds", lambda *_: None)
    assert over_intervals(example("break-glass"), 10) == ()
