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
from shares.planning.examine import examine

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
    assert members["minimal_quorums"]["low"] == members["minimal_quorums"]["high"] == len(plan.quorums.listed)
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
