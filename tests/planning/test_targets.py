"""From odds to rules: what is found meets the targets, nothing smaller or rarer does, and else it is the nearest.

Sources: every rule and every pair of intervals tried in turn; binomial tails by ``math.comb``.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import replace
from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.errors import ParameterError
from shares.planning import targets as module
from shares.planning.confidence import interval
from shares.planning.lineup import MAX_CUSTODIANS, lined_up
from shares.planning.model import Cause, Model, model_of, yearly
from shares.planning.odds import Odds, odds
from shares.planning.simulate import Estimate, Simulated
from shares.planning.targets import INTERVALS, Targets, attestations, meeting, parse_targets
from shares.sharing.rule import Rule

SMALL = 7
EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"


def example(name: str) -> Model:
    return model_of(Policy.parse((EXAMPLES / f"{name}.toml").read_bytes()))


def alike(total: int, *, loss: float, leak: float) -> Model:
    names = tuple(f"pier {i}" for i in range(total))
    causes = tuple(Cause("share", name, frozenset({name}), yearly(loss), yearly(leak)) for name in names)
    return Model(Rule(1, names), causes, repair_after=7)


def rounds(attest: int | None, refresh: int | None) -> float:
    return sum(365 / days for days in (attest, refresh) if days is not None)


def every_rule(model: Model) -> dict[tuple[int, int], list[tuple[int | None, int | None, float, float]]]:
    """The odds of all rules with all intervals; loss by the first interval, exposure by the second."""
    found = {}
    for total, need in itertools.combinations(range(SMALL, 1, -1), 2):
        rule = Rule(need, model.custodians[:total])
        both = []
        for days in INTERVALS:
            one = odds(replace(model, rule=rule, attest_every=days, refresh_every=days), 10)
            assert one is not None
            both.append((days, one))
        found[total, need] = [(a, r, x.loss, y.exposure) for a, x in both for r, y in both]
    return found


def test_nothing_smaller_and_nothing_rarer_meets_the_targets(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "MAX_CUSTODIANS", SMALL)  # Twelve take half a minute.
    model = alike(SMALL, loss=0.05, leak=0.02)
    tried = every_rule(model)
    for loss, exposure in ((0.01, 0.01), (1e-2, 1e-3), (1e-3, 0.5), (1.0, 1e-3)):
        answer = meeting(model, Targets(loss, exposure), 10)
        assert answer.met
        assert answer.causes == ()
        fewest = {
            total: min(
                (
                    rounds(a, r)
                    for (n, _), all_odds in tried.items()
                    if n == total
                    for a, r, lost, exposed in all_odds
                    if lost <= loss and exposed <= exposure
                ),
                default=math.inf,
            )
            for total in range(3, SMALL + 1)
        }
        # Those sizes are told at which fewer rounds do than at every smaller one.
        wanted = [n for n, least in fewest.items() if least < min([fewest[m] for m in range(3, n)], default=math.inf)]
        assert [choice.total for choice in answer.choices] == wanted
        for choice in answer.choices:
            assert choice.rounds == pytest.approx(fewest[choice.total])
            assert (choice.attest_every, choice.refresh_every, choice.odds.loss, choice.odds.exposure) in [
                pytest.approx(one) if None not in one else one for one in tried[choice.total, choice.need]
            ]
            assert choice.odds.loss <= loss
            assert choice.odds.exposure <= exposure
            assert choice.imagined == 0


def test_exposure_of_a_choice_is_the_binomial_tail_of_its_epochs() -> None:
    answer = meeting(alike(5, loss=0.05, leak=0.02), Targets(0.01, 1e-3), 10)
    for choice in answer.choices:
        assert choice.refresh_every is not None
        epochs, rest = divmod(3650, choice.refresh_every)
        spared = 1.0
        for days, times in ((choice.refresh_every, epochs), (rest, 1)):
            leaked = 1 - 0.98 ** (days / 365)
            n, k = choice.total, choice.need
            tail = math.fsum(math.comb(n, i) * leaked**i * (1 - leaked) ** (n - i) for i in range(k, n + 1))
            spared *= (1 - tail) ** times
        assert choice.odds.exposure == pytest.approx(1 - spared, rel=1e-9)
        assert choice.imagined == max(0, choice.total - 5)


def test_what_cannot_be_met_is_met_as_nearly_as_can_be() -> None:
    model = example("first-draft")
    targets = Targets(1e-6, 1e-4)
    answer = meeting(model, targets, 10)
    assert not answer.met
    (nearest,) = answer.choices
    assert {cause.kind for cause in answer.causes} >= {"site", "line"}
    custodians = lined_up(model)
    for total, need in itertools.combinations(range(MAX_CUSTODIANS, 1, -1), 2):
        best = odds(replace(custodians.rule(need, total), attest_every=14, refresh_every=7), 10)
        assert best is not None
        assert targets.missed_by(best) >= targets.missed_by(nearest.odds) * (1 - 1e-9)
        assert not targets.met_by(best)


def test_what_misses_one_target_alone_still_takes_it_easy_with_the_other() -> None:
    answer = meeting(alike(3, loss=0.0, leak=0.9), Targets(1e-6, 1e-15), 10)
    assert not answer.met
    assert answer.choices[0].attest_every is None
    assert answer.choices[0].refresh_every == 7


def test_how_far_odds_miss() -> None:
    targets = Targets(0.01, 0.1)
    assert targets.missed_by(Odds(0.01, 0.1, 0.0, 1.0)) == 0
    assert targets.missed_by(Odds(0.02, 0.5, 0.0, 1.0)) == pytest.approx(math.log(5))
    assert targets.met_by(Odds(0.01, 0.1, 1.0, 1.0))
    assert not targets.met_by(Odds(0.0101, 0.1, 0.0, 1.0))
    assert not targets.met_by(Odds(0.01, 0.101, 0.0, 1.0))


def test_whether_simulated_odds_meet_targets() -> None:
    def found(loss: int, exposure: int) -> Simulated:
        estimates = (Estimate(count / 1000, *interval(count, 1000), count) for count in (loss, exposure, 0))
        return Simulated(*estimates, None, 1000, 1, "2.4.0")

    # 5 of 1,000 are anything from 0.16 % to 1.2 %, and none are up to 0.37 %.
    for loss, exposure, met in ((0.012, 0.012, True), (0.011, 0.012, None), (0.0016, 1.0, False), (0.0017, 1.0, None)):
        assert Targets(loss, exposure).met_by(found(5, 5)) is met
    assert Targets(0.0016, 0.006).met_by(found(5, 5)) is False
    assert Targets(0.0036, 1.0).met_by(found(0, 1000)) is None
    assert Targets(0.0037, 1.0).met_by(found(0, 1000)) is True


def test_rules_that_are_too_large_are_passed_over(monkeypatch: pytest.MonkeyPatch) -> None:
    model = alike(5, loss=0.05, leak=0.02)
    monkeypatch.setattr(module, "odds", lambda *_: None)
    with pytest.raises(ParameterError, match="too large to be worked out exactly"):
        meeting(model, Targets(0.01, 0.01), 10)
    monkeypatch.setattr(module, "odds", lambda one, years: odds(one, years) if len(one.custodians) > 8 else None)
    assert meeting(model, Targets(0.01, 0.01), 10).choices[0].total == 9


def test_progress_is_told_for_each_rule(monkeypatch: pytest.MonkeyPatch) -> None:
    assert len(list(module._rules())) == 55  # All 2 <= k < n <= 12.
    monkeypatch.setattr(module, "MAX_CUSTODIANS", 5)
    seen = list[tuple[int, int | None]]()
    meeting(alike(3, loss=0.05, leak=0.02), Targets(0.1, 0.1), 1, progress=lambda *step: seen.append(step))
    assert seen == [(i, 6) for i in range(6)]


@pytest.mark.parametrize(
    ("text", "targets"),
    [
        ("loss=1e-6,exposure=1e-6", (1e-6, 1e-6)),
        ("exposure = 0.1 %, loss=0.05", (0.05, 0.001)),
        ("loss=2%", (0.02, 1.0)),
        ("exposure=0.5", (1.0, 0.5)),
    ],
)
def test_targets_as_people_write_them(text: str, targets: tuple[float, float]) -> None:
    assert parse_targets(text) == pytest.approx(targets)


@pytest.mark.parametrize(
    "text",
    [
        *("loss", "loss=", "loss=x", "loss=0", "loss=1", "loss=100%", "loss=-0.1", "loss=1e6", "loss=nan", "", ","),
        *("loss=0.1,loss=0.1", "absence=0.1", "loss=0.1;exposure=0.1", "loss=0.1,", "loss=1e-400", "loss=0.0%"),
        *("loss=0.1/y", "Loss=0.1"),
    ],
)
def test_targets_that_are_none(text: str) -> None:
    with pytest.raises(ParameterError):
        parse_targets(text)


@pytest.mark.parametrize("text", ["loss=0,1%", "exposure = 0,1 %", "exposure=0.1,loss=0,05", "loss=1,exposure=0,1"])
def test_a_decimal_comma_is_named(text: str) -> None:
    with pytest.raises(ParameterError, match="decimal comma"):
        parse_targets(text)


def test_targets_that_are_left_free() -> None:
    assert [parse_targets(text).free for text in ("loss=2%", "exposure=0.5", "loss=1%,exposure=99.9%")] == [
        ("exposure",),
        ("loss",),
        (),
    ]


def test_shares_are_not_attested_oftener_than_a_lost_one_is_made_good() -> None:
    model = alike(5, loss=0.3, leak=0.02)
    hard = Targets(1e-7, 0.5)
    for days, tried in ((0, INTERVALS), (7, INTERVALS), (8, INTERVALS[:-1]), (91, INTERVALS[:6]), (1826, (None,))):
        slow = replace(model, repair_after=days)
        answer = meeting(slow, hard, 10)
        assert attestations(slow) == answer.attested == tried
        assert all(choice.attest_every in tried for choice in answer.choices)
        custodians = lined_up(slow)
        for total, need in itertools.combinations(range(MAX_CUSTODIANS, 1, -1), 2):
            # Nothing that is allowed and was left untried comes nearer.
            best = odds(replace(custodians.rule(need, total), attest_every=tried[-1], refresh_every=7), 10)
            assert best is not None
            assert answer.met or hard.missed_by(best) >= hard.missed_by(answer.choices[0].odds) * (1 - 1e-9)
    assert not answer.met
    assert answer.choices[0].attest_every is None


@pytest.mark.parametrize("years", [0, 10_000, math.nan])
def test_a_span_out_of_range_is_refused(years: float) -> None:
    with pytest.raises(ParameterError, match="at least one day and at most 1,000 years"):
        meeting(alike(3, loss=0.05, leak=0.02), Targets(0.1, 0.1), years)
