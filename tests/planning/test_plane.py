"""The plane of loss against exposure: every rule lies where its odds are, and the best are those that none betters.

Sources: every pair compared with every other; binomial tails by ``math.comb``.
"""

from __future__ import annotations

import math
from itertools import pairwise
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.documents.policy import Policy
from shares.planning import plane as module
from shares.planning.model import Cause, Model, model_of, yearly
from shares.planning.odds import Odds, odds
from shares.planning.plane import frontier, plane
from shares.sharing.rule import Rule

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"
FEW = st.sampled_from([0.0, 0.1, 0.2, 0.3, 0.5, 1.0])


def at_least(count: int, total: int, chance: float) -> float:
    return math.fsum(math.comb(total, i) * chance**i * (1 - chance) ** (total - i) for i in range(count, total + 1))


def test_every_rule_is_there_with_its_odds() -> None:
    names = tuple(f"pier {i}" for i in range(5))
    causes = tuple(Cause("share", name, frozenset({name}), yearly(0.05), yearly(0.02)) for name in names)
    points = plane(Model(Rule(3, names), causes), 1)
    assert [(one.need, one.total) for one in points] == [(k, n) for n in range(1, 13) for k in range(1, n + 1)]
    for one in points:
        assert one.imagined == max(0, one.total - 5)
        assert one.odds.loss == pytest.approx(at_least(one.total - one.need + 1, one.total, 0.05), rel=1e-9)
        assert one.odds.exposure == pytest.approx(at_least(one.need, one.total, 0.02), rel=1e-9)


@given(st.lists(st.tuples(FEW, FEW), max_size=12))
def test_the_best_are_those_that_no_other_betters(pairs: list[tuple[float, float]]) -> None:
    found = [Odds(loss, exposure, 0.0, 1.0) for loss, exposure in pairs]
    best = frontier(found)
    for one in found:
        beaten = any(
            other.loss <= one.loss
            and other.exposure <= one.exposure
            and (other.loss, other.exposure) != (one.loss, one.exposure)
            for other in found
        )
        assert (one in best) is not beaten


@pytest.mark.parametrize("name", ["tide-gate", "break-glass"])
def test_along_the_frontier_less_of_one_is_more_of_the_other(name: str) -> None:
    policy = Policy.parse((EXAMPLES / f"{name}.toml").read_bytes())
    points = plane(model_of(policy), 10)
    best = sorted((one.odds for one in points if one.best), key=lambda one: one.loss)
    assert len(best) > 5
    assert not any(one.best for one in points if one.need in (1, one.total))
    for one, other in pairwise(best):
        assert one.loss < other.loss
        assert one.exposure > other.exposure


def test_a_policy_that_is_such_a_rule_lies_on_its_point_and_is_not_better_than_itself() -> None:
    model = model_of(Policy.parse((EXAMPLES / "tide-gate.toml").read_bytes()))
    now = odds(model, 10)
    assert now is not None
    (here,) = (one for one in plane(model, 10) if (one.need, one.total) == (8, 12))
    assert (here.odds.loss, here.odds.exposure) == (
        pytest.approx(now.loss, rel=1e-9),
        pytest.approx(now.exposure, rel=1e-9),
    )
    assert not here.better_than(now)
    assert here.better_than(Odds(1.2 * now.loss, 1.2 * now.exposure, 0.0, 1.0))
    assert not here.better_than(Odds(1.2 * now.loss, 1.05 * now.exposure, 0.0, 1.0))


def test_what_is_too_much_work_is_left_out(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "odds", lambda one, years: odds(one, years) if len(one.custodians) < 4 else None)
    model = model_of(Policy.parse((EXAMPLES / "break-glass.toml").read_bytes()))
    told: list[tuple[int, int | None]] = []
    points = plane(model, 10, progress=lambda done, all_: told.append((done, all_)))
    assert [(one.need, one.total) for one in points] == [(1, 1), (1, 2), (2, 2), (1, 3), (2, 3), (3, 3)]
    assert any(one.best for one in points)
    assert told == [(done, 78) for done in range(78)]
