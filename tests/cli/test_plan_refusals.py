"""What ``shares plan`` refuses in a policy and in its options: one line each, with the place and what to do about it.

Each is what an operator may well write by mistake. That nothing of a policy's values is told is in
tests/documents/test_policy.py, with every other mistake that a policy can hold.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from cli.harness import assert_refused, run

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"

NAMES = ("north-pier", "south-pier", "registrar")
ALL_THREE = 'from = ["north-pier", "south-pier", "registrar"]'
HOW_RATES_ARE_WRITTEN = 'a rate with its unit, like "4 %/y" or "0.04/y": in plain digits, from 0 to below 100 %/y'
HOW_PARTS_ARE_WRITTEN = 'a percentage, like "10 %": in plain digits, from 0 to 100 %'
HOW_INTERVALS_ARE_WRITTEN = 'an interval of a day or more, like "90d", "26w" or "1y": 1 to 9999 and d, w or y'
HOW_DURATIONS_ARE_WRITTEN = 'a duration like "90min", "4h" or "2d": 1 to 9999 and min, h or d'
COUNTED_FROM_0 = "places in a list are counted from 0"


def policy(
    folder: Path, *, first: str = "", of_the_first: str = "", rule: str = f"need = 2\n{ALL_THREE}", more: str = ""
) -> Path:
    """A policy that is sound, but for what a test writes at its head, for its first custodian, or at its end."""
    text = f'label = "Tide archive"\n{first}\n'
    for i, name in enumerate(NAMES):
        text += f'[[custodian]]\nname = "{name}"\nperson = "keeper of {name}"\nsite = "{name} house"\n'
        text += f'reports_to = "harbour master"\n{"" if i else of_the_first}\n'
    path = folder / "policy.toml"
    path.write_text(f"{text}[rule]\n{rule}\n{more}\n")
    return path


def refused(path: Path, *words: str) -> None:
    """See that the one line names the file, says these words, and says where the format is."""
    line = assert_refused(["plan", path], 4, *words, "FORMAT.md, section 12", watched=path.parent)
    assert line.startswith(f"shares: {path}: ")
    assert "keeper" not in line
    assert "harbour master" not in line


def test_the_policy_is_sound_before_it_is_spoilt(tmp_path: Path) -> None:
    rates = '[rates]\nloss = "99.9 %/y"\nleak = "0.001/y"\nabsent = "99.9 %"\nrepair_after = "1d"'
    path = policy(tmp_path, first='attest_every = "1d"', of_the_first='loss = "0 %/y"\nweight = 1', more=rates)
    assert run("plan", path).code == 0


@pytest.mark.parametrize(
    "rate",
    [
        '"-1 %/y"',
        '"nan"',
        '"nan %/y"',
        '"inf/y"',
        '"1e400 %/y"',
        '"1e-3 %/y"',
        '"1000 %/y"',
        '"5 %"',
        '"0.05"',
        '"5 %/d"',
        '"5 %/month"',
        '"0,5 %/y"',
        '"\N{ARABIC-INDIC DIGIT FIVE} %/y"',
        '" 5 %/y"',
        '""',
        "0.05",
        "-5",
        "nan",
        "1e400",
        "true",
        '["5 %/y"]',
        "2026-12-01",
    ],
)
def test_what_is_no_rate(tmp_path: Path, rate: str) -> None:
    refused(policy(tmp_path, more=f"[rates]\nloss = {rate}"), f"rates.loss should be {HOW_RATES_ARE_WRITTEN}")
    site = f'[[site]]\nname = "registrar house"\nleak = {rate}'
    refused(policy(tmp_path, more=site), f"site[0].leak should be {HOW_RATES_ARE_WRITTEN}", COUNTED_FROM_0)
    refused(
        policy(tmp_path, of_the_first=f"departure = {rate}"),
        f"custodian north-pier (custodian[0]): departure should be {HOW_RATES_ARE_WRITTEN}",
    )


@pytest.mark.parametrize("rate", ["100 %/y", "101 %/y", "999.9 %/y", "1/y", "1.0/y", "365/y"])
def test_what_is_certain_within_a_year_has_no_rate(tmp_path: Path, rate: str) -> None:
    refused(
        policy(tmp_path, more=f'[rates]\nleak = "{rate}"'),
        "rates.leak should be below 100 %/y: it is the chance that this happens within a year",
    )


@pytest.mark.parametrize("part", ['"-1 %"', '"10"', '"0.1"', '"10 %/y"', '"nan"', '"1e1 %"', "0.1", "10", "inf"])
def test_what_is_no_part_of_the_days(tmp_path: Path, part: str) -> None:
    refused(policy(tmp_path, more=f"[rates]\nabsent = {part}"), f"rates.absent should be {HOW_PARTS_ARE_WRITTEN}")


@pytest.mark.parametrize("part", ["100 %", "100%", "100.0 %"])
def test_whoever_is_never_there_is_left_out(tmp_path: Path, part: str) -> None:
    """An absence has a length in the model, after which whoever is away comes back: one without an end has none."""
    words = "absent should be below 100 %: leave out of the rule whoever can never be reached"
    refused(policy(tmp_path, more=f'[rates]\nabsent = "{part}"'), f"rates.{words}")
    site = f'[[site]]\nname = "registrar house"\nabsent = "{part}"'
    refused(policy(tmp_path, more=site), f"site[0].{words}", COUNTED_FROM_0)
    refused(policy(tmp_path, of_the_first=f'absent = "{part}"'), f"custodian north-pier (custodian[0]): {words}")


def test_a_part_is_not_more_than_all(tmp_path: Path) -> None:
    refused(policy(tmp_path, more='[rates]\nhanded_on = "101 %"'), "rates.handed_on should be at most 100 %")


@pytest.mark.parametrize("key", ["attest_every", "refresh_every", "drill_every"])
@pytest.mark.parametrize("span", ['"0d"', '"0y"', "0", "90", '"90"', '"-1d"', '"1.5d"', '"10000d"', '"1h"', '"never"'])
def test_what_is_no_interval(tmp_path: Path, key: str, span: str) -> None:
    refused(policy(tmp_path, first=f"{key} = {span}"), f"{key} should be {HOW_INTERVALS_ARE_WRITTEN}")


@pytest.mark.parametrize("key", ["repair_after", "absent_for"])
@pytest.mark.parametrize("span", ['"0d"', '"0h"', "0", "14", '"-1d"', '"2w"', '"nan"'])
def test_what_is_no_duration(tmp_path: Path, key: str, span: str) -> None:
    refused(policy(tmp_path, more=f"[rates]\n{key} = {span}"), f"rates.{key} should be {HOW_DURATIONS_ARE_WRITTEN}")


@pytest.mark.parametrize(
    ("rule", "words"),
    [
        (f"need = 4\n{ALL_THREE}", "rule: a threshold of 4 cannot stand over 3 shares; choose from 1 to 3"),
        (f"need = 0\n{ALL_THREE}", "rule.need should be greater than or equal to 1"),
        (f"need = -1\n{ALL_THREE}", "rule.need should be greater than or equal to 1"),
        (f"need = 256\n{ALL_THREE}", "rule.need should be less than or equal to 255"),
        (f'need = "2"\n{ALL_THREE}', "rule.need should be a whole number, without quotes"),
        (f"need = 1.5\n{ALL_THREE}", "rule.need should be a whole number, without quotes"),
        ("need = 1\nfrom = []", "rule.from should not be empty"),
        ('need = 1\nfrom = "registrar"', "rule.from should be a list in brackets"),
        (ALL_THREE, "rule.need is missing"),
        ("need = 2", "rule.from is missing"),
        (
            'need = 2\nfrom = ["north-pier", "south-pier"]',
            "custodian registrar (custodian[2]) is not used by the rule and would hold no share",
        ),
        (
            'need = 2\nfrom = ["north-pier", "south-pier", "registrar", "registrar"]',
            "rule.from[3] names registrar a second time; to count a custodian more than once, use weight",
        ),
        (
            'need = 2\nfrom = ["piers", "registrar"]\n[group.piers]\nneed = 3\nfrom = ["north-pier", "south-pier"]',
            "group.piers: a threshold of 3 cannot stand over 2 shares; choose from 1 to 2",
        ),
        (
            f'need = 2\n{ALL_THREE}\n[group.piers]\nneed = 1\nfrom = ["north-pier", "south-pier"]',
            "group.piers is not used by the rule",
        ),
        (
            'need = 2\nfrom = ["piers", "registrar"]\n'
            '[group.piers]\nneed = 1\nfrom = ["north-pier", "south-pier", "piers"]',
            "group.piers.from[2]: the group leads back to itself: piers -> piers",
        ),
    ],
)
def test_rules_that_cannot_be_met_or_leave_someone_out(tmp_path: Path, rule: str, words: str) -> None:
    refused(policy(tmp_path, rule=rule), words)


@pytest.mark.parametrize(
    ("weight", "words"),
    [
        ("0", "weight should be greater than or equal to 1"),
        ("-2", "weight should be greater than or equal to 1"),
        ("256", "weight should be less than or equal to 255"),
        ("0.5", "weight should be a whole number, without quotes"),
        ('"2"', "weight should be a whole number, without quotes"),
    ],
)
def test_what_is_no_weight(tmp_path: Path, weight: str, words: str) -> None:
    refused(policy(tmp_path, of_the_first=f"weight = {weight}"), "custodian north-pier (custodian[0]): ", words)


def test_a_threshold_beyond_all_weights(tmp_path: Path) -> None:
    path = policy(tmp_path, of_the_first="weight = 3", rule=f"need = 6\n{ALL_THREE}")
    refused(path, "rule: a threshold of 6 cannot stand over 5 shares; choose from 1 to 5")


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ('[[site]]\nname = "dry dock"\nloss = "1 %/y"', "site[0].name is the site of no custodian"),
        ('[[line]]\nname = "dry dock"', "line[0].name is the reports_to of no custodian"),
        ('[[medium]]\nname = "clay"', "medium[0].name is the medium of no custodian"),
    ],
)
def test_tables_of_what_nobody_has(tmp_path: Path, more: str, words: str) -> None:
    refused(policy(tmp_path, more=more), words, "write it as theirs, or leave the table out", COUNTED_FROM_0)


def test_two_tables_of_one_site(tmp_path: Path) -> None:
    path = policy(tmp_path, more='[[site]]\nname = "registrar house"\n[[site]]\nname = "Registrar  House"')
    refused(path, "site[1].name is the same as site[0].name (case, width and spacing do not count); keep one table")


@pytest.mark.parametrize("key", ["site", "line", "medium"])
def test_one_bracket_where_there_may_be_several_tables(tmp_path: Path, key: str) -> None:
    refused(policy(tmp_path, more=f'[{key}]\nname = "x"'), f"{key} should be a table for each, headed [[{key}]]")


def test_several_tables_where_there_is_one(tmp_path: Path) -> None:
    refused(policy(tmp_path, more='[[rates]]\nloss = "1 %/y"'), "rates should be one table")
    path = policy(tmp_path, more='[rates]\nloss = "1 %/y"\n[rates]\nleak = "1 %/y"')
    assert_refused(["plan", path], 4, "it is not TOML: line ", "a key or table stand twice")


@pytest.mark.parametrize(
    ("more", "key"),
    [
        ('[rates]\nlosses = "1 %/y"', "rates.losses"),
        ('[rates]\n"lo ss" = "1 %/y"', 'rates."lo ss"'),
        ('[[site]]\nname = "registrar house"\ndeparture = "1 %/y"', "site[0].departure"),
        ("[odds]\nloss = 1", "odds"),
    ],
)
def test_keys_that_no_policy_has(tmp_path: Path, more: str, key: str) -> None:
    refused(policy(tmp_path, more=more), f"{key} is no key that a policy has at this place")


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"", ("label is missing", "FORMAT.md, section 12")),
        (b"# nothing yet\n", ("label is missing", "FORMAT.md, section 12")),
        (b"\0" * 4096, ("it is not TOML: line 1, column 1", "look there")),
        (b'{"label": "Tide archive"}', ("it is not TOML: line 1, column 1", "look there")),
        (bytes(range(256)), ("it is not UTF-8 text", "save it as UTF-8")),
        ('label = "Tide archive"'.encode("utf-16"), ("it is not UTF-8 text", "save it as UTF-8")),
        (b'label = "caf\xe9"', ("it is not UTF-8 text", "save it as UTF-8")),
        (b'\xef\xbb\xbflabel = "Tide archive"', ("it begins with a byte order mark", "save it as UTF-8 without one")),
        (b"a = " + b"[" * 100_000, ("it is nested too deeply", "brackets may be left open")),
        (b"need = " + b"9" * 5000, ("it is not TOML: a number is out of range", "look there")),
        (b"a." * 60_000 + b"a = 1", ("line 1 holds more than 100 dots", "no policy needs them")),
        (b'label = "' + b"x" * 500_000 + b'"', ("label is too long", "FORMAT.md, section 12")),
        (b"label = 2026-99-99", ("it is not TOML: line 1, column ", "look there")),
        (b"\n".join(b"k%d = 1" % i for i in range(50_000)), ("k0 is no key that a policy has", "FORMAT.md")),
        (b"#" * ((1 << 20) + 1), ("larger",)),
    ],
    ids=range(15),
)
def test_files_that_are_no_policy(tmp_path: Path, content: bytes, words: tuple[str, ...]) -> None:
    path = tmp_path / "policy.toml"
    path.write_bytes(content)
    line = assert_refused(["plan", path], 5 if "larger" in words else 4, str(path), *words)
    assert len(line) < 400


@pytest.mark.parametrize("years", ["0", "-1", "-1e-9", "0.001", "nan", "inf", "-inf", "1e400", "10000", "1000.1"])
def test_spans_that_no_odds_are_over(years: str) -> None:
    path = EXAMPLES / "tide-archive.toml"
    for more in ([], ["--odds"], ["--targets", "loss=1%"], ["--compare", str(path)]):
        words = ("years: odds are over at least one day and at most 1,000 years", "10 is common")
        assert_refused(["plan", path, f"--years={years}", *more], 2, *words)
