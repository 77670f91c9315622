"""Attestation and repair: the story of ``renewal`` told day by day, textbook mean lives, and histories drawn by lot.

Sources: Barlow, Proschan 1975 (mean life of a k-out-of-n system, sum of 1/(i * rate) from k to n; of one that is
inspected; birth and death process of repairable units: with n - 1 of n needed, rate a of failure and b of repair, the
mean is ((2n - 1) a + b) / (n (n - 1) a^2)); D. P. Gaver, "Time to failure and availability of paralleled systems with
repair", IEEE Trans. Reliability R-12, 1963 (from memory: repairs that take a constant time).
"""

from __future__ import annotations

import itertools
import math
from collections import defaultdict
from fractions import Fraction

import numpy as np
import pytest

from shares.planning.renewal import Upkeep, mean_days_unattended, portion_unattended


def tail(need: int, total: int, chance: float) -> float:
    """The chance that fewer than ``need`` of ``total`` are left, each being gone with some chance."""
    fewest = total - need + 1
    return math.fsum(math.comb(total, i) * chance**i * (1 - chance) ** (total - i) for i in range(fewest, total + 1))


def upkeep(need: int, total: int, rate: float, every: float, delay: float) -> Upkeep:
    return Upkeep(every, delay, total * rate, lambda t: tail(need, total, -math.expm1(-rate * t)))  # type: ignore[arg-type]


# The story, day by day, in exact fractions.


def told(need: int, total: int, lost_a_day: Fraction, every: int, delay: int, days: int) -> Fraction:
    """The chance that the key is gone within so many days: each day every share in place is lost or not."""
    gone = Fraction(0)
    # (shares lost, days since the dealing, days until the repair or None) -> chance
    now: dict[tuple[int, int, int | None], Fraction] = {(0, 0, None): Fraction(1)}
    for _ in range(days):
        then: dict[tuple[int, int, int | None], Fraction] = defaultdict(Fraction)
        for (lost, age, wait), chance in now.items():
            left = total - lost
            for more in range(left + 1):
                p = chance * math.comb(left, more) * lost_a_day**more * (1 - lost_a_day) ** (left - more)
                if left - more < need:
                    gone += p
                    continue
                state, waiting = (lost + more, age + 1), wait
                if waiting is None and state[1] == every:
                    state, waiting = (lost + more, 0), None if lost + more == 0 else delay
                elif waiting is not None:
                    waiting -= 1
                if waiting == 0:
                    state, waiting = (0, 0), None
                then[(*state, waiting)] += p
        now = then
    return gone


@pytest.mark.parametrize(("need", "total"), [(1, 2), (2, 3), (2, 2), (1, 3)])
@pytest.mark.parametrize("lost_a_day", [Fraction(1, 50), Fraction(1, 3)])
def test_within_days_agrees_with_the_story_told_day_by_day(need: int, total: int, lost_a_day: Fraction) -> None:
    rate = -math.log1p(-float(lost_a_day))
    for every, delay, days in itertools.product((1, 2, 3, 5), (0, 1, 2, 7), (1, 2, 5, 8, 13)):
        expected = told(need, total, lost_a_day, every, delay, days)
        found = upkeep(need, total, rate, every, delay).within(days)
        assert math.isclose(found, expected, rel_tol=1e-11), (every, delay, days)


def strict(need: int, total: int, rate: float, every: int, delay: int, periods: int) -> float:
    """The chance of loss where a repair serves only those whom the attestation found, and attestations keep their
    days; for a delay that is no longer than a period."""

    def after(days: float, places: int) -> list[float]:
        chance = -math.expm1(-rate * days)
        return [math.comb(places, i) * chance**i * (1 - chance) ** (places - i) for i in range(places + 1)]

    spare, gone = total - need, 0.0
    found = after(every, total)
    for _ in range(periods - 1):
        gone += sum(found[spare + 1 :])
        again = [0.0] * (total + 1)
        for lost, chance in enumerate(found[: spare + 1]):
            for meanwhile, p in enumerate(after(delay, total - lost)):
                if lost + meanwhile > spare:
                    gone += chance * p
                    continue
                for later, q in enumerate(after(every - delay, total - meanwhile)):
                    again[meanwhile + later] += chance * p * q
        found = again
    return gone + sum(found[spare + 1 :])


@pytest.mark.parametrize(("need", "total"), [(2, 3), (3, 5), (4, 7), (1, 5)])
def test_a_stricter_story_of_repair_has_nearly_the_same_odds(need: int, total: int) -> None:
    """What ``renewal`` says of it: within 3 % of the odds, with 5 % of shares lost a year and a delay of 14 days."""
    rate = -math.log1p(-0.05) / 365
    for every in (30, 90, 365):
        periods = 3650 // every
        found = upkeep(need, total, rate, every, 14).within(periods * every)
        assert math.isclose(found, strict(need, total, rate, every, 14, periods), rel_tol=0.03)


def test_a_repair_without_delay_makes_periods_of_their_own() -> None:
    yearly = tail(3, 5, 0.05)
    keep = upkeep(3, 5, -math.log1p(-0.05) / 365, 365, 0)
    assert math.isclose(keep.within(5 * 365), 1 - (1 - yearly) ** 5, rel_tol=1e-12)
    # The planning page: yearly attestation with repair fails about 0.6 % in five years, against 8.0 % without any.
    assert f"{100 * keep.within(5 * 365):.1f}" == "0.6"
    assert f"{100 * keep.gone(5 * 365):.1f}" == "8.0"


def test_small_chances_are_exact_relative_to_themselves() -> None:
    # Any 1 of 5, each lost with chance 10^-4 in a year: 10^-20 a year.
    keep = upkeep(1, 5, -math.log1p(-1e-4) / 365, 365, 0)
    assert math.isclose(keep.within(10 * 365), 1e-19, rel_tol=1e-11)


def test_odds_over_a_thousand_years_of_daily_attestation() -> None:
    keep = upkeep(1, 2, 1e-4, 1, 1)
    many, few = keep.within(365_000), keep.within(3_650)
    # Rounds are independent: the odds of outlasting a hundred times as long are nearly the hundredth power.
    assert math.isclose(math.log1p(-many), 100 * math.log1p(-few), rel_tol=1e-3)


# Mean lives.


@pytest.mark.parametrize(("need", "total"), [(1, 1), (2, 3), (5, 7), (1, 12), (12, 12), (10, 24)])
@pytest.mark.parametrize("rate", [1e-9, 1e-3, 2.0])
def test_the_mean_life_without_attestation(need: int, total: int, rate: float) -> None:
    gone = upkeep(need, total, rate, 1, 0).gone
    expected = math.fsum(1 / (i * rate) for i in range(need, total + 1))
    assert math.isclose(mean_days_unattended(total * rate, gone), expected, rel_tol=1e-12)


def test_what_cannot_be_lost_lasts_for_ever() -> None:
    assert mean_days_unattended(0.0, lambda _: 0.0) == math.inf
    assert Upkeep(30, 14, 0.0, lambda _: 0.0).mean_days() == math.inf
    assert Upkeep(30, 14, 0.01, lambda _: 0.0).mean_days() == math.inf
    assert Upkeep(30, 14, 0.01, lambda _: 0.0).within(3650) == 0


def test_what_takes_longer_than_can_be_told() -> None:
    assert mean_days_unattended(5e-324, lambda t: -math.expm1(-5e-324 * t)) == math.inf


@pytest.mark.parametrize(("need", "total"), [(2, 3), (3, 5), (4, 7)])
@pytest.mark.parametrize("every", [30.0, 3000.0, 300_000.0])
def test_the_mean_life_with_inspections(need: int, total: int, every: float) -> None:
    """Barlow and Proschan: the mean life within a period, over the chance that it is the last."""
    rate = 1e-4
    points, weights = np.polynomial.legendre.leggauss(60)
    spans = [0.0, *(every * 2.0**-i for i in range(12, -1, -1))]
    left = math.fsum(
        float(w) * (b - a) / 2 * (1 - tail(need, total, -math.expm1(-rate * ((a + b) / 2 + (b - a) / 2 * float(x)))))
        for a, b in itertools.pairwise(spans)
        for x, w in zip(points, weights, strict=True)
    )
    expected = left / tail(need, total, -math.expm1(-rate * every))
    assert math.isclose(upkeep(need, total, rate, every, 0).mean_days(), expected, rel_tol=1e-10)


@pytest.mark.parametrize("total", [2, 3, 5, 12])
def test_a_constant_time_of_repair_as_attestation_becomes_continuous(total: int) -> None:
    """With n - 1 of n needed: a first loss, then time after time whether the second comes before the repair does."""
    rate, delay = 1e-4, 100.0
    second = -math.expm1(-(total - 1) * rate * delay)
    expected = (1 / (total * rate) + second / ((total - 1) * rate)) / second
    # What is left of the period between attestations is of the order of every / delay.
    for every in (1.0, 0.1, 0.001):
        found = upkeep(total - 1, total, rate, every, delay).mean_days()
        assert math.isclose(found, expected, rel_tol=2 * every / delay)


def mean_over_repairs(need: int, total: int, rate: float, repair: float) -> float:
    """The limit of continuous attestation where repairs take an exponential time: by Gauss-Laguerre quadrature."""
    points, weights = np.polynomial.laguerre.laggauss(40)
    lived, ended = 0.0, 0.0
    for x, w in zip(points, weights, strict=True):
        keep = upkeep(need, total, rate, 1e-5 / repair, float(x) / repair)
        ended += float(w) * keep._ending
        lived += float(w) * keep._ending * keep.mean_days()
    return lived / ended


@pytest.mark.parametrize("total", [2, 3, 5, 12])
@pytest.mark.parametrize("repair", [0.01, 0.1])
def test_the_birth_and_death_formula_for_one_spare(total: int, repair: float) -> None:
    rate = 1e-4
    expected = ((2 * total - 1) * rate + repair) / (total * (total - 1) * rate**2)
    assert math.isclose(mean_over_repairs(total - 1, total, rate, repair), expected, rel_tol=1e-4)


@pytest.mark.parametrize(("need", "total"), [(1, 3), (3, 5), (2, 5), (4, 7)])
def test_the_process_in_which_one_repair_makes_all_good(need: int, total: int) -> None:
    """Birth by birth, and one death of all: E(j) = (1 + (n - j) a E(j + 1) + b E(0)) / ((n - j) a + b)."""
    rate, repair = 1e-3, 0.02
    # E(j) as constant + factor * E(0), from the last state before the end backwards.
    constant = factor = 0.0
    for lost in range(total - need, -1, -1):
        out, back = (total - lost) * rate, repair if lost else 0.0
        constant, factor = (1 + out * constant) / (out + back), (out * factor + back) / (out + back)
    expected = constant / (1 - factor)
    assert math.isclose(mean_over_repairs(need, total, rate, repair), expected, rel_tol=1e-4)


# Histories drawn by lot, in continuous time.


RATES, SITE = [0.002, 0.001, 0.0015, 0.001], 0.0005


def simulated(every: int, delay: int, days: int, histories: int) -> tuple[float, float]:
    """The part of histories in which fewer than two shares of four are left at some time, and the part of days on which
    the first share is gone, or all are for good. All but the first are at one site."""
    lot = np.random.default_rng(20261201)
    start, alive = np.zeros(histories), np.ones(histories, dtype=bool)
    missing = np.zeros(histories)
    while (running := alive & (start < days)).any():
        lost_at = lot.exponential(1 / np.array(RATES), (histories, 4))
        lost_at[:, 1:] = np.minimum(lost_at[:, 1:], lot.exponential(1 / SITE, (histories, 1)))
        ended = np.sort(lost_at, axis=1)[:, 2]
        length = np.where(lost_at.min(axis=1) > every, every, every + delay)
        dying = running & (ended <= np.minimum(length, days - start))
        until = np.where(dying, days - start, np.minimum(length, days - start))
        gone_at = np.where(dying, np.minimum(ended, lost_at[:, 0]), lost_at[:, 0])
        missing += np.where(running, np.clip(until - gone_at, 0, None), 0)
        alive &= ~dying
        start = np.where(running, start + length, start)
    return 1 - alive.mean(), float(missing.mean() / days)


def lost(rate: float, days: float) -> float:
    return -math.expm1(-rate * days)


def gone(days: float) -> float:
    """The chance that fewer than two of the four are left, by the site and by how many of the last three are lost."""
    last = [lost(rate, days) for rate in RATES[1:]]
    first, three = lost(RATES[0], days), math.prod(last)
    two = sum(math.prod(p if i != left else 1 - p for i, p in enumerate(last)) for left in range(3))
    return lost(SITE, days) + (1 - lost(SITE, days)) * (three + first * two)


def gone_or_first(days: float) -> float:
    """The chance that the first share is lost, or fewer than two are left."""
    others = lost(SITE, days) + (1 - lost(SITE, days)) * math.prod(lost(rate, days) for rate in RATES[1:])
    return 1 - (1 - lost(RATES[0], days)) * (1 - others)


@pytest.mark.parametrize(("every", "delay", "days"), [(90, 14, 2000), (30, 100, 2000), (400, 30, 300), (200, 90, 2555)])
def test_histories_drawn_by_lot(every: int, delay: int, days: int) -> None:
    histories = 40_000
    keep = Upkeep(every, delay, sum(RATES) + SITE, gone)
    ended, missing = simulated(every, delay, days, histories)
    expected = keep.within(days)
    # Five standard errors: wrong once in a million and a half seeds, and this seed is fixed.
    assert abs(ended - expected) < 5 * math.sqrt(expected * (1 - expected) / histories)
    away = keep.portion(gone_or_first, days)
    assert abs(missing - away) < 5 * math.sqrt(away * (1 - away) / histories)


def test_what_is_always_so_is_so_on_all_days_after_the_end_too() -> None:
    keep = upkeep(2, 3, 1e-3, 90, 14)
    alive = Upkeep(90, 14, 3e-3, lambda _: 0.0)
    assert math.isclose(alive.portion(lambda _: 0.25, 2000), 0.25, rel_tol=1e-12)
    assert keep.portion(lambda _: 0.25, 2000) > 0.25
    assert math.isclose(keep.portion(lambda _: 1.0, 2000), 1.0, rel_tol=1e-12)
    assert math.isclose(portion_unattended(lambda t: t / 100, 100), 0.5, rel_tol=1e-12)
    # Before the first round is over it is as if nobody asked.
    assert keep.portion(lambda t: t / 100, 90) == portion_unattended(lambda t: t / 100, 90)
