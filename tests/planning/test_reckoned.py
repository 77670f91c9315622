"""Exact and simulated odds, told and compared alike.

Source: Schenker, Gentleman 2001 (intervals of one model that do not touch are rare); exact binomial tails for them.
"""

from __future__ import annotations

import math
import sys

import pytest

from shares.errors import ExtraMissingError, ParameterError
from shares.planning.confidence import interval
from shares.planning.model import Cause, Model
from shares.planning.odds import Odds
from shares.planning.reckoned import HISTORIES, apart, briefly, ends, fall, instead, value, words
from shares.planning.simulate import INSTALL, Estimate, Simulated, simulate
from shares.sharing.rule import Rule

PIERS = tuple(f"pier {i}" for i in range(5))
MODEL = Model(Rule(3, PIERS), tuple(Cause("share", name, frozenset({name}), 0.05, 0.05) for name in PIERS))
EXACT = Odds(0.3, 0.0, 0.02, 10.0)


def seen(count: int, histories: int = 100_000) -> Simulated:
    estimate = Estimate(count / histories, *interval(count, histories), count)
    return Simulated(estimate, estimate, estimate, None, histories, 1, "2.4.0")


def test_an_exact_chance_is_a_point() -> None:
    assert (value(EXACT, "loss"), ends(EXACT, "loss")) == (0.3, (0.3, 0.3))
    assert (words(EXACT, "loss"), briefly(EXACT, "loss")) == ("30 %", "30 %")
    assert (words(EXACT, "exposure"), briefly(EXACT, "exposure")) == ("none", "none")


@pytest.mark.parametrize(
    ("count", "told", "brief"),
    [
        (0, "0 of 100,000: below 0.004 %", "below 0.004 %"),
        (1, "0.001 % (0.00002 % to 0.006 %)", "0.001 %"),
        (332, "0.33 % (0.29 % to 0.37 %)", "0.33 %"),
        (39_155, "39 % (38.8 % to 39.5 %)", "39 %"),
        (100_000, "all of 100,000: above 99.996 %", "above 99 %"),
    ],
)
def test_a_simulated_chance_is_told_with_its_interval(count: int, told: str, brief: str) -> None:
    found = seen(count)
    assert value(found, "loss") == count / 100_000
    assert ends(found, "loss") == interval(count, 100_000)
    assert (words(found, "loss"), briefly(found, "loss")) == (told, brief)


def test_intervals_that_touch_are_not_apart() -> None:
    found = seen(332)
    low, high = ends(found, "loss")
    for p, differs in ((low, False), (high, False), (math.nextafter(low, 0), True), (math.nextafter(high, 1), True)):
        other = Odds(p, p, p, 1.0)
        assert apart(found, other, "loss") is apart(other, found, "loss") is differs
        assert (fall(found, other, "loss") is None) is not differs
    assert not apart(seen(0), seen(0), "loss")
    assert not apart(seen(0), EXACT, "exposure")
    assert fall(seen(332), seen(32), "loss") == pytest.approx(0.003)
    assert fall(seen(32), seen(332), "loss") == pytest.approx(-0.003)


def test_exact_odds_fall_by_their_difference() -> None:
    assert fall(EXACT, Odds(0.3, 0.0, 0.02, 10.0), "loss") == 0
    assert fall(EXACT, Odds(0.1, 0.0, 0.02, 10.0), "loss") == pytest.approx(0.2)


@pytest.mark.parametrize("chance", [0.5, 0.05, 0.002])
def test_two_simulations_of_one_model_are_seldom_apart(chance: float) -> None:
    """In fewer than 1 of 100 cases, summed up over all pairs of counts of 1,000 histories."""
    histories = 1000
    logs = [math.lgamma(histories + 1) - math.lgamma(i + 1) - math.lgamma(histories - i + 1) for i in range(1001)]
    mass = [math.exp(log + i * math.log(chance) + (1000 - i) * math.log1p(-chance)) for i, log in enumerate(logs)]
    likely = [i for i, p in enumerate(mass) if p > 1e-9]
    found = {i: seen(i, histories) for i in likely}
    wrong = math.fsum(
        mass[i] * mass[j] for i in likely for j in likely if abs(i - j) > 1 and apart(found[i], found[j], "loss")
    )
    assert math.fsum(mass[i] for i in likely) > 0.99999
    assert wrong < 0.01


def test_what_is_simulated_instead_is_what_simulate_draws() -> None:
    told_of = list[tuple[int, int | None]]()
    found = instead(MODEL, 10, histories=30_000, seed=3, drawn=lambda *step: told_of.append(step))
    assert found == simulate(MODEL, 10, histories=30_000, seed=3)
    # One less, as a bar tells what is being done.
    assert told_of[-1] == (29_999, 30_000)
    usual = instead(MODEL, 10, histories=None, seed=1, drawn=None)
    assert usual is not None
    assert (usual.histories, usual.seed) == (HISTORIES, 1)
    with pytest.raises(ParameterError, match="at least one history"):
        instead(MODEL, 10, histories=0, seed=1, drawn=None)


def test_numpy_is_demanded_only_where_histories_are(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "numpy", None)
    monkeypatch.delitem(sys.modules, "shares.planning.histories", raising=False)
    assert instead(MODEL, 10, histories=None, seed=1, drawn=None) is None
    with pytest.raises(ExtraMissingError, match=INSTALL):
        instead(MODEL, 10, histories=HISTORIES, seed=1, drawn=None)
