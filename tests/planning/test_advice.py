"""What to change first: every change is worked out, none is told twice, and the words say what the numbers do.

Sources: binomial tails by ``math.comb``; the odds of each changed model, worked out anew for every custodian.
"""

from __future__ import annotations

import itertools
import math
import re
import sys
from dataclasses import replace
from pathlib import Path

import pytest

from shares.documents.policy import Policy
from shares.errors import ParameterError
from shares.planning import advice as module
from shares.planning.advice import Change, advice, cause_words, largest, outlook
from shares.planning.changes import moved, with_another
from shares.planning.confidence import interval
from shares.planning.model import Cause, Model, model_of, yearly
from shares.planning.odds import Contribution, Odds, contributions, odds, without_each
from shares.planning.reckoned import HISTORIES
from shares.planning.simulate import Estimate, Simulated, simulate
from shares.sharing.rule import Rule

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"
TIDE = model_of(Policy.parse((EXAMPLES / "tide-archive.toml").read_bytes()))
GATE = model_of(Policy.parse((EXAMPLES / "tide-gate.toml").read_bytes()))


def alike(need: int, total: int, *, loss: float = 0.05, leak: float = 0.01) -> Model:
    names = tuple(f"pier {i}" for i in range(total))
    causes = tuple(Cause("share", name, frozenset({name}), yearly(loss), yearly(leak)) for name in names)
    return Model(Rule(need, names), causes)


def tail(fewest: int, total: int, chance: float) -> float:
    return math.fsum(math.comb(total, i) * chance**i * (1 - chance) ** (total - i) for i in range(fewest, total + 1))


def changes_of(model: Model, *, full: bool = False) -> tuple[Change, ...]:
    found = outlook(model, 10, full=full).changes
    assert found is not None
    return found


def test_changes_of_a_plain_rule_have_the_odds_that_arithmetic_gives() -> None:
    found = {change.words: change for change in changes_of(alike(3, 5))}
    lost, leaked = 1 - 0.95**10, 1 - 0.99**10
    for words, need, total in (
        ("to need 2 instead of 3", 2, 5),
        ("to need 4 instead of 3", 4, 5),
        ("to have another custodian like pier 0", 3, 6),
    ):
        change = found.pop(words)
        assert math.isclose(change.odds.loss, tail(total - need + 1, total, lost), rel_tol=1e-9)
        assert math.isclose(change.odds.exposure, tail(need, total, leaked), rel_tol=1e-9)
        assert math.isclose(change.loss, tail(3, 5, lost) - change.odds.loss, rel_tol=1e-9)
        assert math.isclose(change.exposure, tail(3, 5, leaked) - change.odds.exposure, rel_tol=1e-9)
    refreshed = found.pop("to refresh every year")
    assert math.isclose(refreshed.odds.exposure, 1 - (1 - tail(3, 5, 0.01)) ** 10, rel_tol=1e-9)
    assert found.pop("to attest every year").odds.loss < tail(3, 5, lost) / 5
    assert not found


@pytest.mark.parametrize("model", [TIDE, GATE, alike(2, 4)], ids=["tide archive", "tide gate", "alike"])
def test_changes_are_sorted_and_no_custodian_is_forgotten(model: Model) -> None:
    found = changes_of(model)
    gains = [float(f"{change.gain:.8e}") for change in found]
    assert gains == sorted(gains, reverse=True)
    now = odds(model, 10)
    assert now is not None
    assert all(
        change.gain == pytest.approx(now.loss + now.exposure - change.odds.loss - change.odds.exposure)
        for change in found
    )
    for kind, changed in (("custodian", with_another), ("site", moved)):
        told = [change.odds.loss for change in found if change.kind == kind]
        assert len(told) < len(model.custodians)
        for name in model.custodians:
            if kind == "custodian" or any(c.kind == "site" and {name} < c.members for c in model.causes):
                after = odds(changed(model, name), 10)
                assert after is not None
                assert any(math.isclose(after.loss, one, rel_tol=1e-9) for one in told)


def test_each_threshold_is_tried_and_named_by_its_group() -> None:
    told = {change.words for change in changes_of(TIDE) if change.kind == "threshold"}
    # What is not there makes the registrar a quorum alone, or each operator or the registrar one whom all need.
    assert told == {
        "to need 1 instead of 2 of (north-pier, south-pier, light-house)",
        "to need 1 instead of 2 of (auditor-east, auditor-west)",
    }
    # The weight of a custodian stays where it is, and a change to the group of the auditors is one to that group alone.
    auditors = next(change for change in changes_of(TIDE) if change.words.endswith("(auditor-east, auditor-west)"))
    operators = Rule(2, ("north-pier", "south-pier", "light-house"))
    by_hand = Rule(2, (operators, Rule(1, ("registrar", Rule(1, ("auditor-east", "auditor-west"))))))
    assert auditors.odds == odds(replace(TIDE, rule=by_hand), 10)


def test_intervals_are_halved_as_long_as_somebody_can_keep_up() -> None:
    prompt = replace(TIDE, attest_every=3, repair_after=1, refresh_every=1)
    told = [change.words for change in changes_of(prompt)]
    assert "to attest every day" in told
    assert not [words for words in told if "refresh" in words]
    slow = [change.words for change in changes_of(replace(prompt, repair_after=2))]
    assert not [words for words in slow if "attest" in words]


def test_attestations_are_advised_where_they_help_and_not_praised_where_they_do_not() -> None:
    for model, said in ((alike(3, 5), "are there for that."), (alike(3, 3), "leaves nothing to repair it with.")):
        danger, best, besides = outlook(replace(model, attest_every=None), 10).advice
        assert danger
        assert best
        assert besides.startswith("Nobody asks for the shares here, ")
        assert besides.endswith(said)
    never = outlook(replace(alike(3, 5), causes=(), attest_every=None), 10).advice
    assert not any("Nobody asks" in sentence for sentence in never)


def test_a_rule_without_room_has_no_other_custodian() -> None:
    names = tuple(f"pier {i}" for i in range(255))
    model = Model(Rule(255, names), tuple(Cause("share", name, frozenset({name}), 0.01) for name in names[:1]))
    assert {change.kind for change in changes_of(model, full=True)} == {"attest", "refresh", "threshold"}


def test_what_would_take_long_is_done_where_it_is_asked_for() -> None:
    many = alike(2, 25)
    assert outlook(many, 10).odds == odds(many, 10)
    assert (outlook(many, 10).changes, outlook(many, 10).causes) == (None, None)
    assert "--odds does it" in outlook(many, 10).advice[1]
    seen = list[tuple[int, int | None]]()
    full = outlook(many, 10, full=True, progress=lambda done, total: seen.append((done, total)))
    assert full.causes == contributions(many, 10)
    assert full.changes is not None
    assert seen == [(i, len(full.changes)) for i in range(len(full.changes))]
    # Twelve custodians, whose sites, lines and media all cross one another.
    names = tuple(f"pier {i}" for i in range(12))
    groups = (
        [("site", i % 3, i) for i in range(12)]
        + [("line", i % 4, i) for i in range(12)]
        + [("medium", i // 4, i) for i in range(12)]
    )
    members: dict[tuple[str, int], set[str]] = {}
    for kind, group, i in groups:
        members.setdefault((kind, group), set()).add(names[i])
    crossing = tuple(Cause(kind, str(group), frozenset(of), 0.01, 0.01) for (kind, group), of in members.items())  # type: ignore[arg-type]
    assert outlook(replace(alike(5, 12), causes=(*alike(5, 12).causes, *crossing)), 10).changes is None
    assert outlook(GATE, 10).changes is not None


def test_what_is_too_large_is_said_calmly_without_numpy(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "numpy", None)
    monkeypatch.delitem(sys.modules, "shares.planning.histories", raising=False)
    names = [f"pier {i}" for i in range(60)]
    groups = tuple(Rule(10, tuple(names[(7 * i + 11 * j) % 60] for j in range(30))) for i in range(6))
    view = outlook(Model(Rule(3, groups), (Cause("site", "a", frozenset(names), 0.1, 0.1),)), 10, full=True)
    assert (view.odds, view.causes, view.changes) == (None, None, None)
    assert "too large for exact odds" in view.advice[0]
    assert len(view.advice) == 3


def test_three_sentences_say_what_the_numbers_do() -> None:
    view = outlook(GATE, 10)
    assert view.odds is not None
    assert view.changes is not None
    danger, best, besides = view.advice
    assert danger == (
        "Over 10 years the chance of loss is 60 %, and that of exposure is 0.96 % (1 in 100): loss is the greater "
        "danger, above all by single shares lost."
    )
    assert best == "Of the changes tried it helps most to attest every year: loss goes from 60 % to 3.3 %."
    assert view.changes[0].words in best
    assert besides.startswith("Nobody asks for the shares")

    def third(loss: float, exposure: float, refresh: int | None) -> str:
        return advice(
            replace(GATE, attest_every=90, refresh_every=refresh), 10, Odds(loss, exposure, 0.02, 1), None, None
        )[2]

    assert third(0.1, 0.2, None).startswith("There is no refresh")
    assert "2 % (1 in 50)" in third(0.2, 0.1, None)
    assert third(0.2, 0.1, None) == third(0.1, 0.2, 365)


def test_words_for_the_ends() -> None:
    now = Odds(0.01, 0.2, 0.0, 9.0)
    assert "exposure is the greater danger." in advice(GATE, 10, now, (), None)[0]
    assert "as great as the other" in advice(GATE, 10, replace(now, loss=0.11), (), None)[0]
    worse = Change("custodian", "to do harm", now, -0.1, 0.0)
    assert advice(GATE, 10, now, (), (worse,))[1].startswith("No single change tried takes more off")
    slight = Change("site", "to do next to nothing", replace(now, loss=0.00999), 0.00001, 0.0)
    assert advice(GATE, 10, now, (), (slight,))[1].endswith("though by little.")
    safe = Model(Rule(1, ("north-pier",)), ())
    assert outlook(safe, 10).advice[1] == "There is nothing to change that these odds would show."
    with pytest.raises(ParameterError):
        outlook(safe, 0)


def test_the_largest_causes_are_two_at_most_and_none_is_small() -> None:
    causes = [
        Contribution("share", "", 0.3, 0.0, 0.0),
        Contribution("site", "dry dock", 0.5, 0.02, 0.0),
        Contribution("line", "board", 0.4, 0.001, 0.0),
        Contribution("medium", "stick", 0.0, 0.0, 0.0),
    ]
    assert largest(tuple(causes), "loss") == ("the site dry dock", "the line of board")
    assert largest(tuple(causes), "exposure") == ("the site dry dock",)
    assert largest(tuple(causes), "absence") == largest((), "loss") == ()
    assert cause_words(causes[3]) == "the medium stick"


# Simulated.


def test_causes_and_changes_that_are_simulated_are_those_that_arithmetic_gives(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Exact odds are there to be compared with: they are taken away from the outlook alone."""
    names = frozenset({"north-pier", "registrar"})
    model = replace(TIDE, causes=(*TIDE.causes, Cause("medium", "tin", names, 1e-9)))
    exact = outlook(model, 10, full=True)
    assert exact.odds is not None
    assert exact.changes is not None
    causes = {(one.kind, one.name): one for one in contributions(model, 10) or ()}
    kinds = len(list(without_each(model)))
    changes = {one.words: one for one in exact.changes}
    monkeypatch.setattr(module, "odds", lambda *_: None)
    told = list[tuple[int, int | None]]()
    view = outlook(model, 10, full=True, histories=3_000, seed=2, drawn=lambda *step: told.append(step))
    now = view.simulated
    assert now == view.now == simulate(model, 10, histories=3_000, seed=2)
    assert view.odds is None
    assert view.causes
    assert view.changes
    assert view.causes_left_out == kinds - len(view.causes) > 0
    assert view.changes_left_out == len(changes) - len(view.changes) > 0
    for cause in view.causes:
        whole = causes[cause.kind, cause.name]
        parts = [(getattr(cause, of), getattr(whole, of)) for of in ("loss", "exposure", "absence")]
        assert any(part is not None for part, _ in parts)
        assert all(part is None or part == pytest.approx(real, abs=0.02) for part, real in parts)
        assert all(part is None or part > 0 for part, _ in parts)
    assert ("medium", "tin") not in {(one.kind, one.name) for one in view.causes}
    for change in view.changes:
        assert isinstance(change.odds, Simulated)
        real = changes[change.words]
        assert isinstance(real.odds, Odds)
        assert change.loss is None or change.loss == pytest.approx(real.loss, abs=0.02)
        assert change.exposure is None or change.exposure == pytest.approx(real.exposure, abs=0.02)
        assert change.gain == (change.loss or 0) + (change.exposure or 0)
        assert not (change.loss is change.exposure is None)
    gains = [round(one.gain, 9) for one in view.changes]
    assert gains == sorted(gains, reverse=True)
    # One bar over all that is drawn.
    total = 3_000 * (1 + kinds + len(changes))
    assert [done for done, _ in told] == sorted({done for done, _ in told})
    assert {whole for _, whole in told} == {told[-1][0] + 1} == {total}


def test_an_entangled_policy_is_simulated_without_causes_where_they_are_not_asked_for(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(module, "odds", lambda *_: None)
    view = outlook(TIDE, 10)
    assert (view.odds, view.causes, view.changes) == (None, None, None)
    assert view.simulated == simulate(TIDE, 10, histories=HISTORIES, seed=1)
    assert "--odds does it" in view.advice[1]


def test_exact_odds_stay_what_they_are_beside_simulated_ones() -> None:
    plain, both = outlook(TIDE, 10), outlook(TIDE, 10, histories=1000, seed=5)
    assert replace(both, simulated=None) == plain
    assert plain.now == both.now == plain.odds
    assert both.simulated == simulate(TIDE, 10, histories=1000, seed=5)


def seen(loss: int, exposure: int, absence: int = 0) -> Simulated:
    estimates = (Estimate(count / 1000, *interval(count, 1000), count) for count in (loss, exposure, absence))
    return Simulated(*estimates, None, 1000, 1, "2.4.0")


def test_words_for_what_is_simulated() -> None:
    def danger(loss: int, exposure: int) -> str:
        return advice(GATE, 10, seen(loss, exposure), None, None)[0]

    assert danger(100, 0) == (
        "Over 10 years the chance of loss is 10 % (8.2 % to 13 %), and that of exposure is below 0.37 %: loss is the "
        "greater danger."
    )
    assert danger(0, 100).endswith("exposure is the greater danger.")
    for few in ((0, 0), (5, 10), (100, 100)):
        assert danger(*few).endswith("which danger is the greater one, so many histories do not tell.")
    assert danger(400, 500).endswith("one danger is about as great as the other.")
    now = seen(100, 100)
    assert advice(GATE, 10, now, (), ())[1] == (
        "Of no single change can so many histories tell what it does to these odds."
    )
    better = Change("attest", "to attest every year", seen(0, 120), 0.1, None)
    assert advice(GATE, 10, now, (), (better,))[1] == (
        "Of the changes tried it helps most to attest every year: loss goes from 10 % to below 0.37 %."
    )
    attested = replace(GATE, attest_every=90, refresh_every=365)
    assert "no quorum can be had in time is below 0.37 %: drills" in advice(attested, 10, now, None, None)[2]


NUMBER = r"(?:[0-9]+(?:\.[0-9]+)? %|1 in [0-9.,]+ \w+)"
SIMULATED = rf"(?:above )?{NUMBER} \({NUMBER} to {NUMBER}\)"
CHANCE = rf"(?:0|below 1 in a trillion|(?:below |above )?{NUMBER}|{NUMBER} \(1 in [0-9,]+\)|{SIMULATED})"
EXACT = [Odds(*(p,) * 3, 1.0) for p in (0.0, 5e-14, 4e-7, 9e-4, 0.1, 0.19, 0.6, 1.0)]
DRAWN = [seen(*(count,) * 3) for count in (0, 5, 100, 1000)]


@pytest.mark.parametrize("kind", [EXACT, DRAWN], ids=["exact", "simulated"])
def test_every_combination_of_odds_reads_well(kind: list[Odds] | list[Simulated]) -> None:
    attested = replace(GATE, attest_every=90, refresh_every=365)
    for one, other in itertools.product(kind, kind):
        now = replace(one, exposure=other.exposure)
        after = replace(other, exposure=one.exposure)
        better = Change("attest", "to attest every year", after, 0.2, -0.1)
        danger, best, besides = advice(attested, 10, now, None, (better,))
        said = re.fullmatch(
            rf"Over 10 years the chance of loss is {CHANCE}, and that of exposure is {CHANCE}: (?:loss is the greater "
            r"danger|exposure is the greater danger|one danger is about as great as the other|which danger is the "
            r"greater one, so many histories do not tell|at these rates neither can happen|beside what no rate knows "
            r"of, neither matters)\.",
            danger,
        )
        assert said, danger
        small = not isinstance(now, Simulated) and max(now.loss, now.exposure) < 1e-12
        assert ("neither" in danger) == small
        if small:
            assert best == "There is nothing to change that these odds would show."
        elif one is not other:
            assert re.fullmatch(
                rf"Of the changes tried it helps most to attest every year: loss goes from {CHANCE} to {CHANCE} and "
                rf"exposure goes from {CHANCE} to {CHANCE}\.",
                best,
            ), best
        assert re.fullmatch(
            rf"The chance that on a day taken at random no quorum can be had in time is {CHANCE}: drills show whether "
            r"that is so\.",
            besides,
        ), besides
