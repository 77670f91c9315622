"""Simulated odds: against the exact ones on many models, and against the story told event by event.

Sources: ``odds`` (exact); the story in ``renewal``, told here once more with one history at a time, the standard
library's random numbers, and ``Rule.satisfied_by``. Wherever chance decides, seeds are fixed and what is allowed is as
improbable as five standard deviations: 1 in 3,500,000 on either side.
"""

from __future__ import annotations

import math
import random
import subprocess
import sys
import tracemalloc
from dataclasses import replace
from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.errors import ExtraMissingError, ParameterError
from shares.planning.confidence import at_least, interval
from shares.planning.model import Cause, Model, model_of, yearly
from shares.planning.odds import odds
from shares.planning.simulate import INSTALL, Estimate, Simulated, simulate
from shares.sharing.rule import Rule

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"
ODDS = ("loss", "exposure", "absence")
FIVE_DEVIATIONS = 2.9e-7


def alike(need: int, total: int, *, loss: float = 0.0, leak: float = 0.0, absent: float = 0.0) -> Model:
    names = tuple(f"pier {i}" for i in range(total))
    causes = tuple(Cause("share", name, frozenset({name}), yearly(loss), yearly(leak), absent) for name in names)
    return Model(Rule(need, names), causes, repair_after=0)


def any_model(seed: int) -> Model:
    """A model of up to 9 custodians who stand in one to three branches, with causes that overlap."""
    lot = random.Random(seed)
    names = [f"pier {i}" for i in range(lot.randint(3, 9))]

    def node(depth: int) -> Rule:
        below = lot.sample(names, lot.randint(2, len(names))) + [
            node(depth - 1) for _ in range(depth * lot.randint(0, 2))
        ]
        return Rule(lot.randint(1, len(below) - 1), tuple(below))

    rate = lambda most: most * lot.random() * (lot.random() < 0.8)  # noqa: E731
    causes = [
        *(Cause("share", name, frozenset({name}), rate(0.3), 0.0, 0.0) for name in names),
        *(Cause("person", name, frozenset({name}), rate(0.1), rate(0.2), rate(0.4)) for name in names),
        *(
            Cause(
                "site",
                f"quay {i}",
                frozenset(lot.sample(names, lot.randint(1, len(names)))),
                *map(rate, (0.1, 0.1, 0.2)),
            )
            for i in range(lot.randint(0, 3))
        ),
    ]
    return Model(
        node(2),
        tuple(causes),
        attest_every=lot.choice([None, 30, 90, 365, 1000]),
        repair_after=lot.choice([0, 14, 100]),
        refresh_every=lot.choice([None, 180, 700]),
        recover_within=lot.choice([1, 4]),
    )


def assert_credible(estimate: Estimate, exact: float, histories: int) -> None:
    """So many or more, and so many or fewer, have chances that are not out of all reason."""
    seen = estimate.seen
    assert estimate.value == seen / histories
    assert (estimate.low, estimate.high) == interval(seen, histories)
    exact = min(exact, 1.0)
    assert seen == 0 or at_least(seen, histories, exact) > FIVE_DEVIATIONS
    assert seen == histories or 1 - at_least(seen + 1, histories, exact) > FIVE_DEVIATIONS


def assert_agree(found: Simulated, model: Model, years: float) -> None:
    exact = odds(model, years)
    assert exact is not None
    for of in ODDS:
        assert_credible(getattr(found, of), getattr(exact, of), found.histories)
    if found.years_to_loss is None:
        return
    if exact.years_to_loss == math.inf:
        assert found.years_to_loss == Estimate(math.inf, math.inf, math.inf, 0)
        return
    mean = found.years_to_loss
    assert mean.low < mean.value < mean.high
    deviation = math.log(mean.high / mean.value) / 1.96
    assert abs(math.log(mean.value / exact.years_to_loss)) < 5 * deviation


@pytest.mark.parametrize("seed", range(60))
def test_simulated_and_exact_odds_agree(seed: int) -> None:
    model = any_model(seed)
    years = (0.1, 3, 10, 40)[seed % 4]
    assert_agree(simulate(model, years, histories=20_000, seed=seed), model, years)


@pytest.mark.parametrize(
    ("seed", "branches"), [(1, 2), (2, 3), (3, 4), (4, 5), (5, 6), (6, 7), (7, 8), (8, 8), (1000, 10)]
)
def test_24_custodians_in_many_branches_have_exact_odds(seed: int, branches: int) -> None:
    """Each at a site and in a line of their own, with houses that do not cross: and the simulation agrees."""
    lot = random.Random(seed)
    names = [f"pier {i}" for i in range(24)]
    groups = tuple(
        Rule(lot.choice([2, 3, 4, 6]), tuple(lot.sample(names, lot.randint(8, 20)))) for _ in range(branches)
    )
    rule = Rule(max(1, branches // 5), groups) if branches == 10 else Rule(lot.randint(1, branches), groups)
    causes = [
        Cause(kind, name, frozenset({name}), 0.02, 0.01, 0.02)  # type: ignore[arg-type]
        for name in names
        for kind in ("share", "person", "site", "line")
    ]
    houses = [Cause("medium", f"make {i}", frozenset(names[6 * i : 6 * i + 6]), 0.01, 0.01) for i in range(4)]
    model = Model(rule, (*causes, *houses), attest_every=365, refresh_every=365)
    assert odds(replace(model, causes=tuple(causes)), 10) is not None
    assert_agree(simulate(model, 10, histories=5_000, seed=seed), model, 10)


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
def test_policies_agree(path: Path) -> None:
    model = model_of(Policy.parse(path.read_bytes()))
    assert_agree(simulate(model, 10, histories=100_000, seed=1), model, 10)


def test_the_arithmetic_of_the_planning_page() -> None:
    """An unattended 3-of-5 fails 8.0 % in five years at 5 % a year, a 5-of-7 more, one with attestation 0.6 %."""
    for model, expected in (
        (alike(3, 5, loss=0.05), 0.0800),
        (alike(5, 7, loss=0.05), 0.196),
        (replace(alike(3, 5, loss=0.05), attest_every=365), 0.0058),
    ):
        found = simulate(model, 5, histories=200_000, seed=5).loss
        assert abs(found.value - expected) < 0.0005 + 5 * math.sqrt(expected / 200_000)


# One history at a time.


def told(model: Model, days: int, lot: random.Random) -> tuple[bool, bool, bool]:
    """Tell one history, event by event: whether the key was lost, whether it was exposed, and whether no quorum could
    be had on a day taken at random."""

    def events(of: str) -> list[tuple[float, frozenset[str]]]:
        found = []
        for cause in model.causes:
            rate, at = getattr(cause, of) / 365, 0.0
            while rate and (at := at + lot.expovariate(rate)) <= days:
                found.append((at, cause.members))
        return sorted(found, key=lambda event: event[0])

    names = set(model.custodians)
    left, attestation, repair = set(names), model.attest_every or days + 1, math.inf
    day, wanted = lot.random() * days, True  # Where the key is lost before the day, it is lost on it.
    for at, members in sorted([*events("loss"), (day, None)], key=lambda event: event[0]):
        while min(attestation, repair) < at:
            if repair <= attestation:
                left, attestation, repair = set(names), repair + (model.attest_every or days), math.inf
            elif left == names:
                attestation += model.attest_every or days
            else:
                repair, attestation = attestation + model.repair_after, math.inf
        if members is None:
            away = [cause.members for cause in model.causes if lot.random() < cause.absent * model.patience]
            wanted = not model.rule.satisfied_by(left.difference(*away))
            continue
        left -= members
        if not model.rule.satisfied_by(left):
            break
    leaked, epoch, exposed = set[str](), 0, False
    for at, members in events("leak"):
        now = int(at // (model.refresh_every or days + 1))
        leaked, epoch = (leaked if now == epoch else set()) | (members & names), now
        exposed = exposed or model.rule.satisfied_by(leaked)
    return not model.rule.satisfied_by(left), exposed, wanted


def assert_as_told(model: Model, years: int, *, told_times: int, histories: int, seed: int) -> Simulated:
    lot = random.Random(seed)
    ends = [told(model, years * 365, lot) for _ in range(told_times)]
    found = simulate(model, years, histories=histories, seed=seed)
    for of, seen in zip(ODDS, map(sum, zip(*ends, strict=True)), strict=True):
        both = (seen + getattr(found, of).seen) / (told_times + histories)
        deviation = math.sqrt(both * (1 - both) * (1 / told_times + 1 / histories))
        assert abs(seen / told_times - getattr(found, of).value) <= 5 * deviation
        assert 0 < both < 1
    return found


@pytest.mark.parametrize("seed", [3, 14, 15])
def test_histories_fare_as_those_told_event_by_event(seed: int) -> None:
    lot = random.Random(seed)
    names = tuple(f"pier {i}" for i in range(7))
    causes = (
        *(Cause("share", name, frozenset({name}), 0.1 + lot.random() / 4, lot.random() / 5) for name in names),
        *(Cause("person", name, frozenset({name}), absent=lot.random() / 3) for name in names),
        Cause("site", "quay", frozenset(names[:3]), 0.02, 0.02, 0.05),
        Cause("line", "board", frozenset(names[2:5]), 0.02, 0.02),
    )
    model = Model(
        Rule(2, (Rule(2, names[:4]), Rule(3, names[2:]), names[0])), causes, attest_every=90, refresh_every=400
    )
    assert_as_told(model, 10, told_times=4_000, histories=40_000, seed=seed)
    # An attestation that comes once in the years, and repairs that take longer than the time between two.
    for every, delay in ((2000, 90), (60, 200)):
        changed = replace(model, attest_every=every, repair_after=delay, recover_within=3.0)
        assert_as_told(changed, 7, told_times=3_000, histories=30_000, seed=seed)


def test_200_custodians_who_stand_in_several_branches() -> None:
    lot = random.Random(200)
    names = [f"pier {i}" for i in range(200)]
    groups = tuple(Rule(76, tuple(lot.sample(names, 100))) for _ in range(5))
    sites = tuple(Cause("site", f"quay {i}", frozenset(names[i::20]), 0.01, 0.05, 0.05) for i in range(20))
    shares = tuple(Cause("share", name, frozenset({name}), 0.2, 0.2, 0.1) for name in names)
    model = Model(Rule(3, groups), sites + shares, attest_every=365, refresh_every=1500)
    assert odds(model, 10) is None
    found = assert_as_told(model, 5, told_times=100, histories=1_500, seed=7)
    assert found.absence.seen > 0
    assert found.years_to_loss is not None


# What an interval says.


def test_what_is_rare_is_not_said_to_be_never() -> None:
    model = replace(alike(2, 5, loss=0.01, leak=0.001), attest_every=30, refresh_every=365)
    exact, found = odds(model, 10), simulate(model, 10, histories=10_000, seed=1)
    assert exact is not None
    assert exact.loss < 1e-9
    assert (found.loss.value, found.loss.low, found.loss.seen) == (0, 0, 0)
    assert math.isclose(found.loss.high, 3.689 / 10_000, rel_tol=1e-3)
    assert found.years_to_loss is None


def test_what_cannot_happen_and_what_must() -> None:
    for every in (None, 90):
        found = simulate(replace(alike(3, 5), attest_every=every), 10, histories=100, seed=1)
        assert [getattr(found, of).seen for of in ODDS] == [0, 0, 0]
        assert found.years_to_loss == Estimate(math.inf, math.inf, math.inf, 0)
        sure = simulate(
            replace(alike(3, 5, loss=1 - 1e-16, leak=1 - 1e-16, absent=1), attest_every=every),
            40,
            histories=100,
            seed=1,
        )
        assert [getattr(sure, of).seen for of in ODDS] == [100, 100, 100]
        assert sure.loss.high == 1
        assert 0.95 < sure.loss.low < 1


def test_a_mean_life_is_that_of_lives_longer_than_the_years_looked_at() -> None:
    model = replace(alike(3, 5, loss=0.05), attest_every=90, repair_after=14)
    for years in (1, 10, 100):
        assert_agree(simulate(model, years, histories=100_000, seed=3), model, years)


def test_the_interval_of_a_mean_life() -> None:
    """One custodian whom nobody asks lives for an exponential time: its deviation is its mean."""
    found = simulate(alike(1, 1, loss=0.05), 10, histories=10_000, seed=1).years_to_loss
    assert found is not None
    assert found.seen == 10_000
    assert math.isclose(math.log(found.high / found.value), 1.96 / 100, rel_tol=0.05)
    # Rare losses among many rounds come as independent events do: the deviation is that of their number.
    model = replace(alike(3, 5, loss=0.05), attest_every=365)
    found = simulate(model, 10, histories=20_000, seed=1).years_to_loss
    assert found is not None
    assert math.isclose(math.log(found.high / found.value), 1.96 / math.sqrt(found.seen), rel_tol=0.05)


def test_exposure_has_nothing_to_do_with_attestation() -> None:
    model = replace(alike(3, 5, loss=0.1, leak=0.1), attest_every=90, refresh_every=365)
    found = simulate(model, 10, histories=10_000, seed=1)
    for other in (replace(model, repair_after=300), replace(model, attest_every=None)):
        assert simulate(other, 10, histories=10_000, seed=1).exposure == found.exposure


# Seeds, batches, refusals.


def test_the_same_seed_draws_the_same_histories() -> None:
    model = any_model(8)
    one, again, other = (simulate(model, 10, histories=30_000, seed=seed) for seed in (1, 1, 2))
    assert one == again
    assert (one.seed, one.histories) == (1, 30_000)
    assert one.absence != other.absence
    # Each of the odds has a lot of its own.
    leaky = replace(model, causes=(*model.causes, Cause("line", "board", frozenset(model.custodians), leak=0.05)))
    changed = simulate(leaky, 10, histories=30_000, seed=1)
    assert (changed.loss, changed.absence) == (one.loss, one.absence)
    assert changed.exposure.seen > one.exposure.seen


def test_progress_is_told_and_can_end_it() -> None:
    model, told_of = alike(3, 5, loss=0.05), list[int]()
    simulate(model, 10, histories=50_000, seed=1, progress=told_of.append)
    assert told_of == sorted(told_of)
    assert len(told_of) > 2
    assert told_of[-1] == 50_000

    def stop(done: int) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        simulate(model, 10, histories=10**9, seed=1, progress=stop)


def peak(model: Model, histories: int) -> int:
    tracemalloc.start()
    try:
        simulate(model, 10, histories=histories, seed=1)
        return tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()


def test_memory_does_not_grow_with_the_histories() -> None:
    model = replace(alike(4, 7, loss=0.05, leak=0.01, absent=0.1), attest_every=90, refresh_every=365)
    few, many = peak(model, 20_000), peak(model, 200_000)
    assert many < 1.1 * few
    assert many < 64 << 20
    assert peak(alike(100, 200, loss=0.05, leak=0.01, absent=0.1), 10_000) < 128 << 20


@pytest.mark.parametrize("years", [0, -1, 1e-6, 1000.01, 10_000, math.inf, math.nan])
def test_a_horizon_that_is_none(years: float) -> None:
    with pytest.raises(ParameterError, match="at least one day and at most 1,000 years"):
        simulate(alike(3, 5), years, histories=10, seed=1)


def test_the_shortest_and_the_longest_horizon() -> None:
    model = replace(alike(2, 3, loss=0.5), attest_every=30, refresh_every=30)
    for years in (1 / 365, 1000):
        assert_agree(simulate(model, years, histories=2_000, seed=1), model, years)


@pytest.mark.parametrize("histories", [0, -1, 10**9 + 1])
def test_no_histories_and_too_many(histories: int) -> None:
    with pytest.raises(ParameterError, match="at least one history"):
        simulate(alike(3, 5), 10, histories=histories, seed=1)


def test_one_history() -> None:
    found = simulate(alike(3, 5, loss=0.05), 10, histories=1, seed=1).loss
    assert (found.low, found.high) in ((0.0, pytest.approx(0.975)), (pytest.approx(0.025), 1.0))


def test_a_seed_below_0() -> None:
    with pytest.raises(ParameterError, match="a seed is a whole number, 0 or more"):
        simulate(alike(3, 5), 10, histories=10, seed=-1)
    assert simulate(alike(3, 5), 10, histories=10, seed=2**200).seed == 2**200


def test_without_numpy_it_says_what_to_install(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "numpy", None)
    monkeypatch.delitem(sys.modules, "shares.planning.histories", raising=False)
    with pytest.raises(ExtraMissingError, match=INSTALL) as caught:
        simulate(alike(3, 5), 10, histories=10, seed=1)
    assert (caught.value.exit_code, caught.value.code) == (1, "extra-missing")
    assert caught.value.__cause__ is None


def test_numpy_is_not_imported_before_it_is_used() -> None:
    code = "import sys, shares.planning.simulate; sys.exit('numpy' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
