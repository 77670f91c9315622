"""``shares plan``: what it tells of a policy, its exit codes, and that it says once that this is confidential."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest
from cli.harness import Place, assert_refused, run
from parties import party

from shares.cli.plan import CONFIDENTIAL
from shares.documents.policy import Policy
from shares.planning.advice import outlook
from shares.planning.assumed import assumptions
from shares.planning.examine import examine
from shares.planning.model import model_of
from shares.planning.numbers import chance, every
from shares.planning.targets import Targets, meeting

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"
TIDE = EXAMPLES / "tide-archive.toml"


def changed(tmp_path: Path, source: Path, old: str, new: str) -> Path:
    text = source.read_text()
    assert old in text
    path = tmp_path / "policy.toml"
    path.write_text(text.replace(old, new))
    return path


def test_the_plan_of_the_tide_archive() -> None:
    result = run("plan", TIDE)
    assert (result.code, result.err) == (0, "")
    said = " ".join(result.out.split())
    for part in (
        "Plan: Tide archive backup root. To recover: any 2 of north-pier, south-pier, light-house; and (registrar;",
        "in all make a quorum block every quorum custodians 6 3 2 people 6 3 2 sites 6 3 2 reporting lines 3 2 1",
        "Minimal quorums, 6 in all: north-pier, south-pier, registrar north-pier, light-house, registrar",
        "Caution: No quorum is left without those who report to one manager: harbour master (north-pier, south-pier,",
        "Note: Any one person may be lost",
        "Nothing serious was found",
    ):
        assert part in said
    assert all(len(line) <= 105 for line in result.out.splitlines())


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
def test_it_says_once_that_it_is_confidential(path: Path) -> None:
    assert run("plan", path).out.count(CONFIDENTIAL) == 1
    assert run("plan", path, "--json").out.count(CONFIDENTIAL) == 1


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
def test_json_tells_the_same(path: Path) -> None:
    plan = examine(Policy.parse(path.read_bytes()))
    told = run("plan", path, "--json")
    assert (told.code, told.err) == (0, "")
    members = told.json
    assert (members["done"], members["exit"]) == (True, 0)
    assert (members["label"], members["rule"]) == (plan.label, plan.rule.words())
    assert (members["strict"], members["refused"], members["exact"]) == (plan.strict, False, True)
    assert members["points"] == plan.rule.size
    for what, count in plan.counts.items():
        assert members["counts"][what] == {
            "total": count.total,
            "quorum": {"low": count.quorum.low, "high": count.quorum.high},
            "block": {"low": count.block.low, "high": count.block.high},
        }
    assert members["minimal_quorums"]["listed"] == [list(quorum) for quorum in plan.quorums.listed]
    few = len(plan.quorums.listed) or 495  # binomial(12, 8), too many to list
    assert members["minimal_quorums"]["low"] == members["minimal_quorums"]["high"] == few
    assert [finding["code"] for finding in members["findings"]] == [finding.code for finding in plan.findings]
    text = " ".join(run("plan", path).out.split())
    for finding in members["findings"]:
        assert f"{finding['severity'].capitalize()}: {finding['what']} {finding['advice']}" in text
    assert text.count("Serious: ") + text.count("Caution: ") + text.count("Note: ") == len(members["findings"])


@pytest.mark.parametrize("more", [(), ("--json",)])
def test_a_serious_finding_gives_4_only_where_the_policy_is_strict(tmp_path: Path, more: tuple[str, ...]) -> None:
    draft = EXAMPLES / "first-draft.toml"
    assert run("plan", draft, *more).code == 0
    strict = changed(tmp_path, draft, "pad = 64", "strict = true")
    result = run("plan", strict, *more)
    assert result.code == 4
    if more:
        assert (result.json["done"], result.json["exit"], result.json["refused"]) == (False, 4, True)
    else:
        assert "`shares split` refuses it" in " ".join(result.out.split())


def test_many_quorums_are_counted(tmp_path: Path) -> None:
    names = [f"pier {i}" for i in range(250)]
    custodians = "".join(
        f'[[custodian]]\nname = "{name}"\nperson = "keeper of {name}"\nsite = "{name}"\nreports_to = "{name}"\n'
        for name in names
    )
    path = tmp_path / "policy.toml"
    path.write_text(f'label = "Tide archive"\n{custodians}[rule]\nneed = 3\nfrom = {json.dumps(names)}\n')
    assert "Minimal quorums: 2,573,000, too many to list" in run("plan", path).out  # 250 * 249 * 248 / 6
    path.write_text(path.read_text().replace("need = 3", "need = 125"))
    assert "Minimal quorums: about 10^74, too many" in run("plan", path).out  # log10 of binomial(250, 125) is 73.96
    assert run("plan", path, "--json").json["exact"] is True


def test_bounds_are_said_to_be_bounds(tmp_path: Path) -> None:
    names = [f"pier {i}" for i in range(30)]
    text = 'label = "Tide archive"\nkey_type = "other"\n' + "".join(
        f'[[custodian]]\nname = "{name}"\nperson = "keeper of {name}"\nsite = "{name}"\nreports_to = "{name}"\n'
        for name in names
    )
    for i in range(4):
        text += f"[group.g{i}]\nneed = 10\nfrom = {json.dumps(names[5 * i : 5 * i + 15])}\n"
    path = tmp_path / "policy.toml"
    path.write_text(text + '[rule]\nneed = 3\nfrom = ["g0", "g1", "g2", "g3"]\n')
    result = run("plan", path)
    assert result.code == 0
    assert re.search(r"people +30 +\d+ to \d+ ", result.out)
    assert "Where two numbers stand for one, it lies between them" in result.out
    assert re.search(r"Minimal quorums: \d+ to [\d,]+, too many to list", result.out)
    told = run("plan", path, "--json").json
    assert told["exact"] is False
    assert told["counts"]["people"]["quorum"]["low"] < told["counts"]["people"]["quorum"]["high"]


def test_a_policy_that_is_wrong_is_refused_with_the_key(tmp_path: Path) -> None:
    path = changed(tmp_path, TIDE, '"light-house"]', '"lighthouse"]')
    line = assert_refused(
        ["plan", path], 4, f"{path}: group.operators.from[2] names no custodian", "light-house meant?"
    )
    assert "board of the trust" not in line
    assert_refused(["plan", changed(tmp_path, TIDE, "need = 2", "need 2")], 4, "it is not TOML: line 59, column 6")


def with_cards(folder: Path, **cards: str) -> Path:
    """The plan of the tide archive, with a card for some: the names of custodians have _ for -."""
    text = TIDE.read_text()
    for name, card in cards.items():
        line = f'name = "{name.replace("_", "-")}"\n'
        assert line in text
        text = text.replace(line, f'{line}card = "{card}"\n')
    (folder / "cards").mkdir(parents=True, exist_ok=True)
    for name in ("north-pier", "registrar"):
        (folder / "cards" / f"{name}.card.json").write_bytes(party(name).card.to_file())
    (folder / "policy.toml").write_text(text)
    return folder / "policy.toml"


def test_cards_that_fit_are_passed_in_silence(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = with_cards(
        tmp_path / "a", north_pier="cards/north-pier.card.json", registrar="../a/cards/registrar.card.json"
    )
    result = run("plan", path)
    assert (result.code, result.err, result.out) == (0, "", run("plan", TIDE).out)
    monkeypatch.chdir(path.parent)
    assert run("plan", "policy.toml").out == result.out


def test_a_card_in_another_name_or_of_several_is_told(tmp_path: Path) -> None:
    card = "cards/north-pier.card.json"
    path = with_cards(tmp_path, north_pier=card, south_pier=card, registrar=card)
    fingerprint = party("north-pier").card.fingerprint
    result = run("plan", path)
    said = " ".join(result.out.split())
    assert result.code == 4  # The policy is strict, and these three are one holder.
    for name in ("south-pier", "registrar"):
        assert f"Caution: The card of {name} is in the name of north-pier, fingerprint {fingerprint}." in said
    assert f"Serious: One card is given for north-pier, south-pier, registrar, fingerprint {fingerprint}." in said
    told = [finding for finding in run("plan", path, "--json").json["findings"] if "card" in finding["code"]]
    assert [(one["code"], one["severity"], one["about"]) for one in told] == [
        ("card-of-several", "serious", ["north-pier", "south-pier", "registrar"]),
        ("card-of-another-name", "caution", ["south-pier"]),
        ("card-of-another-name", "caution", ["registrar"]),
    ]


def test_a_card_that_split_would_refuse_is_refused_in_the_same_words(tmp_path: Path) -> None:
    place = Place.make(tmp_path / "place")

    def refused_by_both(code: int, *words: str) -> None:
        line = assert_refused(["plan", path], code, *words)
        split = ["split", place.key, "--policy", path, "--set", place.set, "--deliver", place.drop, "--plain"]
        assert run(*split).err == line

    path = with_cards(tmp_path, north_pier="cards/none.card.json", registrar="cards/registrar.card.json")
    refused_by_both(5, f"{tmp_path}/cards/none.card.json", "does not exist")
    card = tmp_path / "cards" / "none.card.json"
    card.write_bytes(party("north-pier").card.to_file().replace(b"north-pier", b"south-pier"))
    refused_by_both(4, f"{tmp_path}/cards/none.card.json", "does not fit its content")
    card.write_text("{")
    refused_by_both(4, f"{tmp_path}/cards/none.card.json", "not one JSON object")
    card.unlink()
    card.mkdir()
    refused_by_both(5, f"{tmp_path}/cards/none.card.json", "is a folder")


def test_help_says_where_the_format_is_and_what_is_serious() -> None:
    said = " ".join(run("plan", "--help").out.split())
    for part in ("FORMAT.md, section 12", "examples/policies/", "Serious is that one person, or one site, alone"):
        assert part in said
    assert EXAMPLES.is_dir()
    assert "\n## 12. The policy\n" in (EXAMPLES.parents[1] / "shares" / "documents" / "FORMAT.md").read_text()


def test_a_file_that_cannot_be_read(tmp_path: Path) -> None:
    assert_refused(["plan", tmp_path / "none.toml"], 5, "does not exist")
    assert_refused(["plan", tmp_path], 5, "is a folder")
    assert_refused(["plan", ""], 2, "an empty value is given")
    large = tmp_path / "large.toml"
    large.write_bytes(b"#" * ((1 << 20) + 1))
    assert_refused(["plan", large], 5, "larger")
    link = tmp_path / "link.toml"
    link.symlink_to(TIDE)
    assert_refused(["plan", link], 5, "symbolic link")
    assert_refused(["plan"], 2, "POLICY")


def test_strange_text_cannot_steer_the_terminal(tmp_path: Path) -> None:
    """The policy is refused for it; the refusal shows none of it."""
    path = changed(tmp_path, TIDE, 'label = "Tide', 'label = "\\u001b[31mTide')
    line = assert_refused(["plan", path], 4, "label is not allowed")
    assert line.strip().isprintable()


def test_odds_come_with_causes_advice_and_what_to_change() -> None:
    """The numbers are those of the library, which tests/planning checks."""
    policy = Policy.parse((EXAMPLES / "tide-gate.toml").read_bytes())
    view = outlook(model_of(policy), 10)
    assert view.odds is not None
    result = run("plan", EXAMPLES / "tide-gate.toml")
    said = " ".join(result.out.split())
    assert result.code == 0
    for part in (
        "odds over 10 years chance mostly by loss: no quorum is left 60 % single shares lost; what people do",
        "exposure: a quorum is known 0.96 % 1 in 100 what people do; the site",
        "Mean time until the first loss: 9.5 years.",
        " ".join(view.advice),
        "what to change first loss exposure (as it is) 60 % 0.96 % attest every year 3.3 % 0.96 % need 7 instead",
        "have another custodian like north-pier (or 2 others)",
        "Assumed, as the policy does not state all of it: the rates of losses of single shares, what people do,",
        "Odds are as good as the rates they come from, and no better.",
        "is an assumption. Have a professional decide.",
    ):
        assert part in said
    assert "need 9 instead of 8" not in said  # It does harm.
    assert all(len(line) <= 105 for line in result.out.splitlines())


def test_json_tells_all_of_the_odds() -> None:
    path = EXAMPLES / "first-draft.toml"
    policy = Policy.parse(path.read_bytes())
    view = outlook(model_of(policy), 2.5)
    assert view.odds is not None
    assert view.causes is not None
    assert view.changes is not None
    told = run("plan", path, "--years", "2.5", "--json").json
    assert told["years"] == 2.5
    assert told["odds"] == {name: getattr(view.odds, name) for name in ("loss", "exposure", "absence", "years_to_loss")}
    assert [(one["kind"], one["name"], one["loss"]) for one in told["causes"]] == [
        (one.kind, one.name, one.loss) for one in view.causes
    ]
    assert [(one["what"], one["gain"]["loss"], one["odds"]["exposure"]) for one in told["changes"]] == [
        (one.words, one.loss, one.odds.exposure) for one in view.changes
    ]
    assert (told["advice"], told["assumptions"]) == (list(view.advice), list(assumptions(policy)))
    assert "professional" in told["cautions"]


def test_all_causes_changes_and_assumptions_where_they_are_asked_for() -> None:
    path = EXAMPLES / "first-draft.toml"
    result = run("plan", path, "--odds")
    said = " ".join(result.out.split())
    for reason in assumptions(Policy.parse(path.read_bytes())):
        assert f"Assumed: {reason}" in said
    assert "what each cause adds loss exposure no quorum single shares lost 42 % none 21 %" in said
    assert "The parts do not add up to the whole: what takes two causes goes away with either." in said
    assert "need 1 instead of 2 of (harbour-office, north-pier, south-pier) " in said
    assert "need 3 instead of 2 of (harbour-office, north-pier, south-pier)" not in said  # The office would be needed.
    assert (
        "what the odds rest on lost a year leaked a year days away of single shares 4 % none none harbour-off" in said
    )
    rates = run("plan", path, "--json").json["rates"]
    assert rates[0] == {
        "what": "share",
        "names": ["harbour-office", "north-pier", "south-pier", "registrar"],
        "loss": pytest.approx(0.04),
        "leak": 0.0,
        "absent": 0.0,
    }
    assert [one["what"] for one in rates] == ["share", "person", "site", "line"]


def test_rates_that_are_all_stated_leave_nothing_to_assume(tmp_path: Path) -> None:
    text = TIDE.read_text() + (
        '[rates]\nloss = "0 %/y"\nleak = "0 %/y"\ndeparture = "0 %/y"\nhanded_on = "100 %"\nabsent = "0 %"\n'
        'absent_for = "1d"\n'
    )
    for key, names in (
        ("site", ["north pier", "south pier", "light-house", "harbour office", "audit house east", "audit house west"]),
        ("line", ["harbour master", "board of the trust", "audit committee"]),
    ):
        for name in names:
            text += f'[[{key}]]\nname = "{name}"\nloss = "0 %/y"\nleak = "0 %/y"\nabsent = "0 %"\n'
    path = tmp_path / "policy.toml"
    path.write_text(text)
    said = " ".join(run("plan", path).out.split())
    assert "loss: no quorum is left none" in said
    assert "Mean time until the first loss: never." in said
    assert "There is nothing to change that these odds would show." in said
    assert "Assumed" not in said
    assert "what to change first" not in said
    told = run("plan", path, "--json").json
    assert told["odds"]["years_to_loss"] is None  # JSON has no infinity.
    assert told["causes"] == []


def test_targets_find_rules_and_intervals() -> None:
    path = EXAMPLES / "tide-gate.toml"
    wanted = ("--targets", "loss=1%,exposure=1%", "--years", "5")
    answer = meeting(model_of(Policy.parse(path.read_bytes())), Targets(0.01, 0.01), 5)
    result = run("plan", path, *wanted)
    said = " ".join(result.out.split())
    assert (result.code, result.err) == (0, "")
    assert "Wanted over 5 years: loss at most 1 % and exposure at most 1 %. The policy as it is: loss" in said
    assert "; that is not enough. The smallest rule that has these odds, and larger ones with less to do:" in said
    for choice in answer.choices:
        assert f" {choice.need} of {choice.total} {every(choice.attest_every)} {every(choice.refresh_every)} " in said
    for part in ("another person", "Assumed, as", "Have a professional decide", CONFIDENTIAL):
        assert part in said
    told = run("plan", path, *wanted, "--json").json
    assert (told["done"], told["met"], told["met_by_the_policy"], told["causes"]) == (True, True, False, [])
    assert told["targets"] == {"loss": 0.01, "exposure": 0.01}
    assert [(one["need"], one["total"], one["attest_every_days"], one["odds"]["loss"]) for one in told["choices"]] == [
        (one.need, one.total, one.attest_every, one.odds.loss) for one in answer.choices
    ]


def test_what_no_bound_was_asked_for_is_told_and_how_bad_it_is() -> None:
    answer = meeting(model_of(Policy.parse(TIDE.read_bytes())), Targets(1.0, 0.001), 10)
    worst = max(choice.odds.loss for choice in answer.choices)
    assert worst > 0.5
    said = " ".join(run("plan", TIDE, "--targets", "exposure=0.1%").out.split())
    assert f"No bound was asked for loss: with these rules it is up to {chance(worst)}. Ask for one as well" in said
    assert run("plan", TIDE, "--targets", "exposure=0.1%", "--json").json["free"] == ["loss"]
    both = run("plan", TIDE, "--targets", "exposure=0.1%,loss=99.9%").out
    assert "loss at most 99.9 % and exposure at most 0.1 %." in both
    assert "No bound" not in both


def test_what_was_tried_says_how_often_shares_are_attested(tmp_path: Path) -> None:
    def tried(days: str, *more: str) -> str:
        path = changed(tmp_path, TIDE, "strict = ", f'rates.repair_after = "{days}"\nstrict = ')
        return " ".join(run("plan", path, "--targets", "loss=1%", *more).out.split())

    oftenest = "Attestations were tried no oftener than every 91 days: a lost share is not made good in less time"
    assert f"{oftenest} (repair_after)." in tried("60d")
    assert oftenest in tried("60d", "--json")
    assert "Attestations were tried not at all:" in tried("2000d")
    assert "Attestations were tried" not in tried("7d")


def test_targets_out_of_reach_are_met_as_nearly_as_can_be() -> None:
    path = EXAMPLES / "first-draft.toml"
    result = run("plan", path, "--targets", "loss=1e-6,exposure=1e-6")
    said = " ".join(result.out.split())
    assert result.code == 0
    assert "No rule that was tried has these odds. What comes nearest, as it misses its worse target by the" in said
    assert "What stands in the way: of loss, the " in said
    assert "More sites and managers help" in said
    told = run("plan", path, "--targets", "loss=1e-6,exposure=1e-6", "--json").json
    assert (told["done"], told["met"], len(told["choices"])) == (True, False, 1)
    assert told["causes"]


def test_two_policies_side_by_side() -> None:
    other = EXAMPLES / "break-glass.toml"
    result = run("plan", TIDE, "--compare", other)
    said = " ".join(result.out.split())
    assert (result.code, result.err) == (0, "")
    for part in (
        f"First: {TIDE}, Tide archive backup root.",
        f"Second: {other}, Break-glass password of the gate house.",
        "custodians 6 5 fewest people that make a quorum 3 3",
        "attested every 90 days every 182 days refreshed never every 2 years loss 5.3 % 0.52 % exposure 3.3 % 0.74 %",
        "The second policy is better in loss, exposure and absence, and worse in nothing.",
        CONFIDENTIAL,
    ):
        assert part in said
    told = run("plan", TIDE, "--compare", other, "--json").json
    assert [one["policy"] for one in told["policies"]] == [str(TIDE), str(other)]
    for one, path in zip(told["policies"], (TIDE, other), strict=True):
        assert one["odds"] == run("plan", path, "--json").json["odds"]


@pytest.mark.parametrize(
    ("more", "words"),
    [
        (("--years", "0"), "at least one day and at most 1,000 years"),
        (("--years", "10000"), "at least one day and at most 1,000 years"),
        (("--years", "nan"), "at least one day and at most 1,000 years"),
        (("--years", "ten"), "not a valid float"),
        (("--targets", "loss"), "targets are written like loss=1e-6,exposure=0.1%"),
        (("--targets", "loss=2"), "not above 0 and below 1"),
        (("--targets", ""), "an empty value is given"),
        (("--compare", ""), "an empty value is given"),
        (("--targets", "loss=0.1", "--compare", TIDE), "answer two questions"),
        (("--targets", "loss=0.1", "--odds"), "--odds is for a plan, not for --targets or --compare"),
        (("--compare", TIDE, "--odds"), "--odds is for a plan, not for --targets or --compare"),
    ],
)
def test_questions_that_are_none(more: tuple[str, ...], words: str) -> None:
    assert_refused(["plan", TIDE, *more], 2, words)


def test_the_other_policy_is_refused_in_its_own_name(tmp_path: Path) -> None:
    path = changed(tmp_path, TIDE, "need = 2", "need 2")
    assert_refused(["plan", TIDE, "--compare", path], 4, f"{path}: it is not TOML")
    assert_refused(["plan", TIDE, "--compare", tmp_path / "none.toml"], 5, "does not exist")
