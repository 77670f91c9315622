"""``shares plan`` where an exact answer is too much work: odds are simulated, and said to be.

Source: the library's ``simulate`` with the same seed, which tests/planning checks against exact odds.
"""

from __future__ import annotations

import json
import sys
from dataclasses import replace
from pathlib import Path

import numpy
import pytest
from cli.harness import assert_refused, run

from shares.cli.plan_compare import comparison_lines
from shares.cli.plan_simulated import simulated_members
from shares.documents.policy import Policy
from shares.planning.advice import outlook
from shares.planning.compare import Side
from shares.planning.confidence import interval
from shares.planning.examine import examine
from shares.planning.model import Model, model_of
from shares.planning.odds import Odds, odds
from shares.planning.reckoned import parts, words
from shares.planning.simulate import INSTALL, MAX_HISTORIES, Estimate, Simulated, simulate
from shares.planning.telling import beside, why, years_words

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"
TIDE = EXAMPLES / "tide-archive.toml"
OF = ("loss", "exposure", "absence")
FEW = ("--histories", "2000", "--seed", "7")

DRAWN = f"drawn by numpy {numpy.__version__} with seed %s, the same ones at every run"


def entangled(folder: Path, more: str = "") -> Path:
    """A policy over 30 piers that stand in six groups each, at seven sites, in five lines and on three media."""
    names = [f"pier {i}" for i in range(30)]
    text = 'label = "Tide archive"\nkey_type = "other"\n' + more
    for i, name in enumerate(names):
        text += f'[[custodian]]\nname = "{name}"\nperson = "keeper of {name}"\nsite = "quay {i % 7}"\n'
        text += f'reports_to = "board {i % 5}"\nmedium = "{("paper", "stick", "card")[i % 3]}"\n'
    for i in range(6):
        members = [names[(7 * i + 11 * j) % 30] for j in range(15)]
        text += f"[group.g{i}]\nneed = 5\nfrom = {json.dumps(members)}\n"
    path = folder / "entangled.toml"
    path.write_text(text + '[rule]\nneed = 3\nfrom = ["g0", "g1", "g2", "g3", "g4", "g5"]\n')
    return path


def model(path: Path) -> Model:
    return model_of(Policy.parse(path.read_bytes()))


def told(found: Simulated) -> dict[str, object]:
    """Simulated odds as JSON has them, written down by hand."""
    years = found.years_to_loss
    assert years is not None
    return {
        of: {"value": one.value, "low": one.low, "high": one.high, "seen": one.seen}
        for of, one in (*((of, getattr(found, of)) for of in OF), ("years_to_loss", years))
    } | {"histories": found.histories, "seed": found.seed, "numpy": found.numpy}


def said(*args: object) -> str:
    result = run("plan", *args)
    assert (result.code, result.err) == (0, "")
    return " ".join(result.out.split())


def without_numpy(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "numpy", None)
    monkeypatch.delitem(sys.modules, "shares.planning.histories", raising=False)


def test_what_is_too_entangled_is_simulated_from_100_000_histories(tmp_path: Path) -> None:
    path = entangled(tmp_path)
    assert odds(model(path), 10) is None
    found = simulate(model(path), 10, histories=100_000, seed=1)
    members = run("plan", path, "--json").json
    assert (members["odds"], members["missing_extra"]) == (None, None)
    assert (members["causes"], members["changes"]) == (None, None)
    assert members["simulated"] == told(found)
    text = said(path)
    for part in (
        "odds over 10 years, simulated chance, and its 95 % interval",
        f"loss: no quorum is left {words(found, 'loss')} exposure: a quorum is known {words(found, 'exposure')} no ",
        f"quorum on a given day {words(found, 'absence')} Mean time until the first loss: {years_words(found)}.",
        f"Simulated from 100,000 histories, {DRAWN % 1}: ",
        "people, sites and lines overlap in it, is too entangled for exact odds. At least 95 of 100",
        "Ten times as many (--histories 1000000) give intervals about a third as wide.",
        "takes long for this policy: --odds does it.",
    ):
        assert part in text
    assert all(len(line) <= 105 for line in run("plan", path).out.splitlines())


def test_histories_and_seed_are_those_asked_for(tmp_path: Path) -> None:
    path = entangled(tmp_path)
    assert f"Simulated from 2,000 histories, {DRAWN % 7}: the rule" in said(path, *FEW)
    assert run("plan", path, *FEW, "--json").json["simulated"] == told(
        simulate(model(path), 10, histories=2000, seed=7)
    )


def test_exact_odds_are_simulated_beside_where_histories_are_asked_for() -> None:
    path = EXAMPLES / "tide-gate.toml"
    assert run("plan", path, "--json").json["simulated"] is None
    assert "imulated" not in said(path)
    assert run("plan", path, "--seed", "7", "--json").json["simulated"] is None
    members = run("plan", path, *FEW, "--json").json
    found, exact = simulate(model(path), 10, histories=2000, seed=7), odds(model(path), 10)
    assert exact is not None
    assert members["simulated"] == told(found)
    assert members["odds"]["loss"] == exact.loss
    text = said(path, *FEW)
    assert "exposure: a quorum is known 0.96 % 1 in 100 what people do; the site north house" in text
    assert f"exposure: a quorum is known {words(found, 'exposure')} no quorum" in text
    assert f"Simulated from 2,000 histories, {DRAWN % 7}. At least 95 of 100" in text
    assert beside(exact, found) in text


def test_exact_odds_that_lie_outside_the_interval_are_told() -> None:
    found = Simulated(*(Estimate(0.1, 0.09, 0.11, 100),) * 3, None, 1000, 1, "2.4.0")
    assert beside(Odds(0.09, 0.1, 0.11, 1), found) == "The exact odds lie within all three intervals."
    assert "odds of loss and of no quorum on a given day lie outside" in beside(Odds(0.08, 0.1, 0.12, 1), found)


def test_nothing_seen_is_never_told_as_nothing(tmp_path: Path) -> None:
    path = entangled(tmp_path, 'attest_every = "7d"\n')
    found = simulate(model(path), 10, histories=2000, seed=7)
    assert (found.loss.seen, found.years_to_loss) == (0, None)
    text = said(path, *FEW)
    assert "loss: no quorum is left 0 of 2,000: below 0.19 %" in text  # 1 - 0.025^(1/2000) is 0.00184.
    assert "the chance of loss is below 0.19 %, and that of exposure is " in text
    assert "Mean time until the first loss: too rare to be told from 2,000 histories." in text
    assert "none" not in text.partition("odds over")[2].partition("Assumed")[0]
    members = run("plan", path, *FEW, "--json").json["simulated"]
    assert (members["loss"]["value"], members["loss"]["low"], members["loss"]["seen"]) == (0, 0, 0)
    assert members["loss"]["high"] == pytest.approx(1 - 0.025 ** (1 / 2000))
    assert members["years_to_loss"] is None


def test_json_has_no_infinity() -> None:
    never = Simulated(*(Estimate(0.0, 0.0, 0.1, 0),) * 3, Estimate(*(float("inf"),) * 3, 0), 10, 1, "2.4.0")
    members = simulated_members(never)
    assert members is not None
    assert members["years_to_loss"] == {"value": None, "low": None, "high": None, "seen": 0}
    json.dumps(members, allow_nan=False)
    assert years_words(never) == "never"
    assert simulated_members(None) is None


def test_more_histories_are_proposed_as_far_as_there_are() -> None:
    found = Simulated(*(Estimate(0.1, 0.09, 0.11, 100),) * 3, None, MAX_HISTORIES // 10, 1, "2.4.0")
    assert f"--histories {MAX_HISTORIES}" in why([found], None)
    most = Simulated(*(Estimate(0.1, 0.09, 0.11, 100),) * 3, None, MAX_HISTORIES // 10 + 1, 1, "2.4.0")
    assert "--histories" not in why([most], None)
    assert why([replace(most, histories=1)], None).startswith("Simulated from 1 history, drawn by")
    assert years_words(replace(most, histories=1)) == "too rare to be told from 1 history"
    assert "histories each, drawn by numpy 2.4.0 with seed 1" in why([found, found], None)


# Without numpy.


def test_without_numpy_the_structure_is_told_and_what_to_install(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    without_numpy(monkeypatch)
    path = entangled(tmp_path)
    for more in ((), ("--odds",)):
        text = said(path, *more)
        assert "custodians 30 " in text
        assert "is too large for exact odds, and to simulate them takes numpy, which is not installed: " in text
        assert text.count(f"{INSTALL}.") == 1
        members = run("plan", path, *more, "--json").json
        assert [members[of] for of in ("odds", "simulated", "causes", "changes")] == [None] * 4
        assert members["missing_extra"] == "numpy"
        assert members["counts"]["custodians"]["total"] == 30
    # The exit code is still what the structure says.
    one_house = path.read_text().replace('"quay 1"', '"quay 0"').replace("key_type", "strict = true\nkey_type")
    for i in range(2, 7):
        one_house = one_house.replace(f'"quay {i}"', '"quay 0"')
    path.write_text(one_house)
    assert run("plan", path).code == run("plan", path, "--json").json["exit"] == 4


def test_without_numpy_exact_odds_are_as_they_are(monkeypatch: pytest.MonkeyPatch) -> None:
    before = run("plan", TIDE).out
    without_numpy(monkeypatch)
    assert run("plan", TIDE).out == before
    assert run("plan", TIDE, "--json").json["missing_extra"] is None


@pytest.mark.parametrize("more", [(), ("--odds",), ("--compare", TIDE), ("--targets", "loss=1%")])
def test_histories_asked_for_without_numpy_are_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, more: tuple[object, ...]
) -> None:
    without_numpy(monkeypatch)
    line = assert_refused(["plan", entangled(tmp_path), *FEW, *more], 1, INSTALL)
    assert "takes numpy, which is not installed" in line
    if not more:
        assert_refused(["plan", TIDE, *FEW], 1, INSTALL)


def test_questions_about_two_policies_without_numpy(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    without_numpy(monkeypatch)
    path = entangled(tmp_path)
    text = said(path, "--compare", TIDE)
    assert "loss too large 5.3 %" in text
    assert text.count(f"{INSTALL}.") == 1
    assert "policy is better" not in text
    members = run("plan", path, "--compare", TIDE, "--json").json
    assert [one["missing_extra"] for one in members["policies"]] == ["numpy", None]
    wanted = ("--targets", "loss=1%,exposure=50%")
    assert f"{INSTALL}." in said(path, *wanted)
    members = run("plan", path, *wanted, "--json").json
    assert (members["met_by_the_policy"], members["simulated"], members["missing_extra"]) == (None, None, "numpy")


# Two policies, and targets.


def test_a_side_that_is_too_large_is_simulated(tmp_path: Path) -> None:
    path = entangled(tmp_path)
    found = simulate(model(path), 10, histories=2000, seed=7)
    text = said(TIDE, "--compare", path, *FEW)
    (loss, of_loss), (exposure, of_exposure) = (parts(found, of) for of in ("loss", "exposure"))
    assert " first second, odds simulated " in text
    assert (
        f"loss 5.3 % {loss} its 95 % interval {of_loss} exposure 3.3 % {exposure} its 95 % interval {of_exposure}"
        in text
    )
    assert words(found, "loss") == f"{loss} ({of_loss})"
    assert f"Simulated from 2,000 histories, {DRAWN % 7}: the rule" in text
    assert " policy is better in " in text
    one, other = run("plan", TIDE, "--compare", path, *FEW, "--json").json["policies"]
    assert (one["simulated"], other["odds"], other["simulated"]) == (None, None, told(found))
    # The same policy twice, from the same histories.
    text = said(path, "--compare", path, *FEW)
    assert "So many histories do not show that one policy is better than the other." in text
    assert f"Simulated from 2,000 histories each, {DRAWN % 7}" in text
    assert " first, odds simulated second, odds simulated " in text


def test_two_simulated_policies_are_no_wider_than_a_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    """Whatever their odds: the widest that there are."""
    few = Estimate(1e-9, *interval(1, MAX_HISTORIES), 1)
    none = Estimate(0.0, *interval(0, MAX_HISTORIES), 0)
    policy = Policy.parse(TIDE.read_bytes())
    for estimate in (few, none):
        for mean in (
            None,
            Estimate(9.9e5, 2.55e5, 1e6, 1),
            Estimate(3e6, 2.55e5, 5e6, 1),
            Estimate(3e6, 2.55e5, float("inf"), 1),
        ):
            found = Simulated(*(estimate,) * 3, mean, MAX_HISTORIES, 1, "2.4.0")
            one = "policy.toml", Side(examine(policy), model_of(policy), None, found)
            lines = list(comparison_lines(one, one, 10))
            assert max(map(len, lines)) <= 105, max(lines, key=len)
            rows = [" ".join(line.split()) for line in lines]
            assert ("mean time until the first loss too rare to be told too rare to be told" in rows) == (mean is None)
            assert ("its 95 % interval 260,000 years or more 260,000 years or more" in rows) == (
                mean is not None and mean.high > 1e6
            )


def test_targets_that_a_simulation_meets_misses_or_cannot_tell(tmp_path: Path) -> None:
    path = entangled(tmp_path)
    found = simulate(model(path), 10, histories=2000, seed=7).exposure
    for most, met, enough in (
        (found.high + 0.001, True, "that is enough."),
        (found.value, None, "that is not to be told from so many histories, enough or not."),
        (found.low - 0.001, False, "that is not enough."),
    ):
        wanted = ("--targets", f"exposure={most:.6f}", *FEW)
        text = said(path, *wanted)
        assert f"exposure {words(simulate(model(path), 10, histories=2000, seed=7), 'exposure')}; " in text
        assert enough in text
        assert f"Simulated from 2,000 histories, {DRAWN % 7}" in text
        members = run("plan", path, *wanted, "--json").json
        assert members["met_by_the_policy"] is met
        assert members["simulated"]["exposure"]["seen"] == found.seen


# Causes and changes.


def test_causes_and_changes_are_simulated_where_they_are_asked_for(tmp_path: Path) -> None:
    path = entangled(tmp_path)
    view = outlook(model(path), 10, full=True, histories=2000, seed=7)
    assert view.causes
    assert view.changes
    members = run("plan", path, "--odds", *FEW, "--json").json
    assert [(one["kind"], one["name"], one["loss"]) for one in members["causes"]] == [
        (one.kind, one.name, one.loss) for one in view.causes
    ]
    assert [(one["what"], one["odds"], one["simulated"]["loss"]["seen"]) for one in members["changes"]] == [
        (one.words, None, one.odds.loss.seen) for one in view.changes if isinstance(one.odds, Simulated)
    ]
    assert members["left_out"] == {"causes": view.causes_left_out, "changes": view.changes_left_out}
    assert [one["gain"] for one in members["changes"]] == [
        {"loss": one.loss, "exposure": one.exposure} for one in view.changes
    ]
    text = said(path, "--odds", *FEW)
    assert f"Left out are {view.causes_left_out} causes and {view.changes_left_out} changes: what they do" in text
    assert "what each cause adds loss exposure no quorum" in text
    assert "refresh every year not told" in text
    assert "none" not in text.partition("what each cause adds")[2].partition("Assumed")[0]


# Questions that are none.


@pytest.mark.parametrize(
    ("more", "words"),
    [
        (("--histories", "0"), "0 is not in the range"),
        (("--histories", str(MAX_HISTORIES + 1)), "is not in the range"),
        (("--histories", "many"), "not a valid integer"),
        (("--seed", "-1"), "-1 is not in the range"),
        (("--seed", "x"), "not a valid integer"),
    ],
)
def test_histories_and_seeds_out_of_range(more: tuple[str, ...], words: str) -> None:
    assert_refused(["plan", TIDE, *more], 2, words)


def test_help_says_what_takes_long_and_what_it_takes() -> None:
    text = said("--help")
    for part in (
        "--histories N",
        "--seed S",
        "100000 where no odds are exact",
        "by numpy: without it (README,",
        "an hour in all for 200",
    ):
        assert part in text
