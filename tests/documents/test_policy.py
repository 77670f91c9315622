"""The policy: what is read from TOML, what rule it gives, and how each mistake is named.

Checked against: the rule followed through the policy's data by hand (``strategies.authorised``) for every set of
custodians, and real dealings; ``hashlib`` for the digest; the standard library's TOML reader for what is TOML.
"""

from __future__ import annotations

import copy
import hashlib
import tomllib
from collections.abc import Callable
from datetime import timedelta
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from strategies import authorised, points_of, policies, revealed, sets_of, toml_of

from shares.documents.policy import Policy, folded
from shares.errors import DocumentError
from shares.field.gf256 import Field
from shares.field.irreducible import irreducibles
from shares.memory import Secret
from shares.sharing.robust import quorums
from shares.sharing.rule import Rule, deal, recover_payload

EXAMPLES = Path(__file__).parents[2] / "examples" / "policies"
PERSON, SITE, MANAGER = "canary person", "canary site", "canary manager"


def custodian(name: str, **more: Any) -> dict[str, Any]:
    return {"name": name, "person": PERSON, "site": SITE, "reports_to": MANAGER, **more}


DATA: dict[str, Any] = {
    "label": "canary label",
    "custodian": [custodian("north-pier"), custodian("south-pier"), custodian("light-house"), custodian("registrar")],
    "group": {"operators": {"need": 2, "from": ["north-pier", "south-pier", "light-house"]}},
    "rule": {"need": 2, "from": ["operators", "registrar"]},
}


def policy_of(**changes: Any) -> Policy:
    return Policy.parse(toml_of({**DATA, **changes}))


# What is read.


def test_a_policy_with_everything_in_it() -> None:
    text = toml_of(
        {
            **DATA,
            "key_type": "signature",
            "reason": "because",
            "polynomial": "x^8 + x^4 + x^3 + x^2 + 1",
            "pad": 64,
            "attest_every": "90d",
            "drill_every": "26w",
            "refresh_every": "2y",
            "strict": True,
            "acknowledgement": True,
            "custodian": [
                *DATA["custodian"][:3],
                custodian("registrar", carrier="boat", channel="by hand", card="cards/registrar.card.json", weight=2),
            ],
        }
    )
    policy = Policy.parse(text)
    assert (policy.label, policy.key_type, policy.reason, policy.pad) == ("canary label", "signature", "because", 64)
    assert policy.field() == Field(0x11D)
    assert (policy.attest_every, policy.drill_every) == (timedelta(days=90), timedelta(days=182))
    assert policy.refresh_every == timedelta(days=730)
    assert policy.strict is policy.acknowledgement is True
    last = policy.custodians[3]
    assert (last.name, last.person, last.site, last.reports_to) == ("registrar", PERSON, SITE, MANAGER)
    assert (last.carrier, last.channel, last.card, last.weight) == ("boat", "by hand", "cards/registrar.card.json", 2)
    assert policy.rule() == Rule(2, (Rule(2, ("north-pier", "south-pier", "light-house")), "registrar", "registrar"))


def test_what_is_left_out_is_as_the_format_says() -> None:
    policy = policy_of()
    assert policy.key_type is policy.reason is policy.attest_every is policy.drill_every is policy.refresh_every is None
    assert (policy.pad, policy.strict, policy.acknowledgement, policy.field()) == (16, False, False, Field(0x11B))
    first = policy.custodians[0]
    assert (first.carrier, first.channel, first.card, first.weight) == (None, None, None, 1)
    assert Policy.parse(
        toml_of({**DATA, "group": {}, "rule": {"need": 1, "from": [c["name"] for c in DATA["custodian"]]}})
    )


def test_rates_where_they_are_stated_and_where_not() -> None:
    rates = policy_of().rates
    assert rates.loss is rates.leak is rates.departure is rates.handed_on is rates.absent is rates.absent_for is None
    assert rates.repair_after == timedelta(days=14)
    first, *others = DATA["custodian"]
    stated = policy_of(
        rates={"loss": "4 %/y", "leak": "0.01/y", "handed_on": "90 %", "absent_for": "12h", "repair_after": "3d"},
        custodian=[{**first, "medium": "Paper", "loss": "0 %/y", "departure": "12.5 %/y", "absent": "0.5 %"}, *others],
        site=[{"name": SITE.upper(), "loss": "0.1 %/y"}],
        line=[{"name": MANAGER, "leak": "0.2 %/y"}],
        medium=[{"name": "paper", "absent": "1 %"}],
    )
    rates, first = stated.rates, stated.custodians[0]
    assert (rates.loss, rates.leak, rates.handed_on, rates.departure) == (0.04, 0.01, 0.9, None)
    assert (rates.absent_for, rates.repair_after) == (timedelta(hours=12), timedelta(days=3))
    assert (first.medium, first.loss, first.leak, first.departure, first.absent) == ("Paper", 0.0, None, 0.125, 0.005)
    assert (stated.sites[0].loss, stated.sites[0].leak, stated.lines[0].leak, stated.media[0].absent) == (
        0.001,
        None,
        0.002,
        0.01,
    )


def test_the_digest_is_over_the_bytes_as_given() -> None:
    text = b"# a note\r\n" + toml_of(DATA)
    policy = Policy.parse(text)
    assert policy.text == text
    assert policy.digest() == hashlib.sha256(text).digest()
    assert Policy.parse(bytearray(text)).digest() == policy.digest()
    assert policy_of().digest() != policy.digest()


def test_each_of_the_30_polynomials_is_taken_in_each_form() -> None:
    for f in irreducibles(8, 2):
        for form in (str(f), hex(f.number), str(f.number)):
            assert policy_of(polynomial=form).field().modulus == f.number


@given(policies())
def test_the_rule_is_the_one_that_the_file_states(data: dict[str, Any]) -> None:
    text = toml_of(data)
    assert {"group": {}, **tomllib.loads(text.decode())} == data
    rule = Policy.parse(text).rule()
    assert set(rule.paths()) == {custodian["name"] for custodian in data["custodian"]}
    for held in sets_of(rule.paths()):
        assert rule.satisfied_by(held) == authorised(data, held)


@given(policies(most=4, heaviest=2))
def test_a_dealing_along_a_policy_is_recovered_by_whom_the_file_authorises(data: dict[str, Any]) -> None:
    policy = Policy.parse(toml_of(data))
    dealing = deal(policy.field(), policy.rule(), Secret.of(b"\x5a"))
    assert len(points_of(dealing)) == policy.rule().size
    for held in sets_of(dealing.points):
        points = [point for name in held for point in dealing.points[name]]
        quorum = next(quorums([point.path for point in points]), None)
        assert (quorum is not None) == authorised(data, held)
        if quorum is not None:
            assert revealed(recover_payload(policy.field(), [points[i] for i in quorum])) == b"\x5a"


def test_spellings_of_one_person() -> None:
    assert (
        len(set(map(folded, ("Harbour Master", "harbour  master", " HARBOUR\u00a0MASTER", "\uff28arbour master")))) == 1
    )
    assert folded("stra\u00dfe") == folded("STRASSE")
    assert folded("keeper one") != folded("keeper two")


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
def test_the_examples_are_policies(path: Path) -> None:
    policy = Policy.parse(path.read_bytes())
    assert policy.digest() == hashlib.sha256(path.read_bytes()).digest()
    assert {custodian.name for custodian in policy.custodians} == set(policy.rule().paths())


def test_the_example_of_the_tide_archive_says_what_its_first_line_says() -> None:
    rule = Policy.parse((EXAMPLES / "tide-archive.toml").read_bytes()).rule()
    assert rule.words() == (
        "any 2 of north-pier, south-pier, light-house; and (registrar; or both of auditor-east, auditor-west)"
    )
    operators, auditors = {"north-pier", "south-pier", "light-house"}, {"auditor-east", "auditor-west"}
    for held in sets_of(rule.paths()):
        expected = len(held & operators) >= 2 and ("registrar" in held or auditors <= held)
        assert rule.satisfied_by(held) == expected


# The bounds of a rule.


def chain(levels: int) -> dict[str, Any]:
    """Groups of which each holds the next: with the rule, so many nodes deep."""
    groups = {f"g{i}": {"need": 1, "from": [f"g{i + 1}"]} for i in range(1, levels - 1)}
    groups[f"g{levels - 1}"] = {"need": 1, "from": ["north-pier"]}
    return {"custodian": [custodian("north-pier")], "group": groups, "rule": {"need": 1, "from": ["g1"]}}


def wide(total: int, **more: Any) -> dict[str, Any]:
    names = [f"pier {i}" for i in range(total)]
    return {"custodian": [custodian(name, **more) for name in names], "group": {}, "rule": {"need": 1, "from": names}}


def many(groups: int, weight: int) -> dict[str, Any]:
    names = [f"pier {i}" for i in range(groups)]
    return {
        "custodian": [custodian(name, weight=weight) for name in names],
        "group": {f"g{i}": {"need": 1, "from": [name]} for i, name in enumerate(names)},
        "rule": {"need": 1, "from": [f"g{i}" for i in range(groups)]},
    }


def test_as_deep_wide_and_many_as_the_format_allows() -> None:
    assert policy_of(**chain(8)).rule().depth == 8
    assert policy_of(**wide(255)).rule().size == 255
    assert policy_of(**many(4, 250)).rule().size == 1000
    assert policy_of(**wide(1, weight=255)).rule().size == 255


def doubling(levels: int) -> dict[str, Any]:
    """Groups that each stand several times in the next: few lines that would make a tree without end."""
    names = [f"g{i}.{j}" for i in range(levels) for j in range(10)]
    groups = {name: {"need": 1, "from": [f"g{int(name[1]) - 1}.{j}" for j in range(10)]} for name in names[10:]}
    groups |= {name: {"need": 1, "from": ["north-pier"]} for name in names[:10]}
    return {"custodian": [custodian("north-pier")], "group": groups, "rule": {"need": 1, "from": names[-10:]}}


# What is refused.

Bend = Callable[[dict[str, Any]], Any]


def setting(*path: Any, to: Any) -> Bend:
    def bend(data: dict[str, Any]) -> None:
        inner = data
        for step in path[:-1]:
            inner = inner[step]
        inner[path[-1]] = to

    return bend


def without(*path: Any) -> Bend:
    def bend(data: dict[str, Any]) -> None:
        inner = data
        for step in path[:-1]:
            inner = inner[step]
        del inner[path[-1]]

    return bend


def instead(other: dict[str, Any]) -> Bend:
    return lambda data: data.update(other)


OPERATORS = ("group", "operators")
FROM = (*OPERATORS, "from")

REFUSED: dict[str, tuple[Bend, str]] = {
    "a rate without a unit": (setting("custodian", 0, "loss", to="0.04"), "loss should be a rate with its unit, like "),
    "a rate that is a number": (
        setting("rates", to={"loss": 0.04}),
        "rates.loss should be a rate with its unit, like ",
    ),
    "a rate of 100 %": (
        setting("rates", to={"leak": "100 %/y"}),
        "rates.leak should be below 100 %/y: it is the chance",
    ),
    "a rate below 0": (setting("rates", to={"leak": "-1 %/y"}), "rates.leak should be a rate with its unit, like "),
    "absences above 100 %": (setting("rates", to={"absent": "101 %"}), "rates.absent should be at most 100 %"),
    "absences by the year": (setting("rates", to={"absent": "10 %/y"}), "rates.absent should be a percentage, like "),
    "no time for repairs": (
        setting("rates", to={"repair_after": "0d"}),
        "rates.repair_after should be a duration like ",
    ),
    "an unknown rate": (
        setting("rates", to={"theft": "1 %/y"}),
        "rates.theft is no key that a policy has at this place",
    ),
    "rates of nobody's site": (
        setting("site", to=[{"name": SITE}, {"name": "canary elsewhere"}]),
        "site[1].name is the site of no custodian; write it as theirs",
    ),
    "rates of nobody's manager": (
        setting("line", to=[{"name": SITE}]),
        "line[0].name is the reports_to of no custodian; write it as theirs",
    ),
    "rates of nobody's medium": (
        setting("medium", to=[{"name": "canary paper"}]),
        "medium[0].name is the medium of no custodian; write it as theirs",
    ),
    "rates of a site twice": (
        setting("site", to=[{"name": SITE}, {"name": SITE.upper()}]),
        "site[1].name is the same as site[0].name (case, width and spacing do not count)",
    ),
    "rates of no name": (setting("site", to=[{"loss": "1 %/y"}]), "site[0].name is missing"),
    "a departure from a site": (
        setting("site", to=[{"name": SITE, "departure": "1 %/y"}]),
        "site[0].departure is no key that a policy has at this place",
    ),
    "an unknown name": (setting(*FROM, 2, to="wharf"), "group.operators.from[2] names no custodian and no group"),
    "a misspelt name": (
        setting("rule", "from", 1, to="registar"),
        "rule.from[1] names no custodian and no group; is registrar meant?",
    ),
    "a name in other case": (
        setting("rule", "from", 1, to="Registrar"),
        "rule.from[1] names no custodian and no group; is registrar",
    ),
    "a name twice in a list": (
        setting(*FROM, 2, to="north-pier"),
        "group.operators.from[2] names north-pier a second time",
    ),
    "a group twice in a list": (
        setting("rule", "from", to=["operators", "registrar", "operators"]),
        "rule.from[2] names operators a second",
    ),
    "a custodian left out": (
        instead({"rule": {"need": 1, "from": ["operators"]}}),
        "custodian registrar (custodian[3]) is not used by the rule and would hold no share",
    ),
    "a group left out": (
        setting("group", "spare", to={"need": 1, "from": ["registrar"]}),
        "group.spare is not used by the rule",
    ),
    "a custodian used only in a group left out": (
        instead({"rule": {"need": 1, "from": ["registrar"]}}),
        "group.operators is not used by the rule",
    ),
    "a group in itself": (
        setting(*FROM, to=["north-pier", "south-pier", "light-house", "operators"]),
        "group.operators.from[3]: the group leads back to itself: operators -> operators",
    ),
    "two groups in each other": (
        lambda d: (
            setting("group", "watch", to={"need": 1, "from": ["operators", "registrar"]})(d),
            setting(*FROM, 0, to="watch")(d),
            setting("custodian", to=d["custodian"][1:])(d),
        ),
        "group.watch.from[0]: the group leads back to itself: operators -> watch -> operators",
    ),
    "a group named like a custodian": (
        lambda d: setting("group", "registrar", to={"need": 1, "from": ["operators"]})(d),
        "group.registrar has the same name as custodian[3].name",
    ),
    "a group named like another but for case": (
        setting("group", "Operators", to={"need": 1, "from": ["registrar"]}),
        "group.Operators has the same name as group.operators",
    ),
    "a custodian named twice": (
        setting("custodian", 3, "name", to="north-pier"),
        "custodian[3].name, north-pier, is the same as custodian[0].name",
    ),
    "custodians whose names differ in case": (
        setting("custodian", 1, "name", to="NORTH-pier"),
        "custodian[1].name, NORTH-pier, is the same as custodian[0].name",
    ),
    "a custodian's name with a separator": (
        setting("custodian", 2, "name", to="a/b"),
        "custodian[2].name is not a name: a custodian's name must not hold a path separator",
    ),
    "a group's name with a separator": (
        setting("group", "a/b", to={"need": 1, "from": ["registrar"]}),
        'group."a/b" is not named as custodians are',
    ),
    "an empty name": (
        setting("custodian", 0, "name", to=""),
        "custodian[0].name is not a name: a custodian's name must not be empty",
    ),
    "a threshold above the leaves": (
        setting(*OPERATORS, "need", to=4),
        "group.operators: a threshold of 4 cannot stand over 3 shares; choose from 1 to 3",
    ),
    "a threshold of 0": (
        setting(*OPERATORS, "need", to=0),
        "group.operators.need should be greater than or equal to 1",
    ),
    "a threshold of 256": (setting("rule", "need", to=256), "rule.need should be less than or equal to 255"),
    "a threshold that is text": (setting("rule", "need", to="2"), "rule.need should be a whole number, without quotes"),
    "a threshold that is true": (
        setting("rule", "need", to=True),
        "rule.need should be a whole number, without quotes",
    ),
    "a threshold with a fraction": (
        setting("rule", "need", to=2.0),
        "rule.need should be a whole number, without quotes",
    ),
    "no threshold": (without(*OPERATORS, "need"), "group.operators.need is missing"),
    "no names": (setting(*FROM, to=[]), "group.operators.from should not be empty"),
    "a name where a list is wanted": (
        setting(*FROM, to="north-pier"),
        "group.operators.from should be a list in brackets",
    ),
    "a number among the names": (setting(*FROM, 1, to=7), "group.operators.from[1] should be text in quotes"),
    "256 names": (setting(*FROM, to=["north-pier"] * 256), "group.operators.from is too long"),
    "256 leaves by weight": (
        setting("custodian", 3, "weight", to=255),
        "rule: a rule is over 1 to 255 custodians or groups, not 256",
    ),
    "9 levels": (instead(chain(9)), "group.g7.from[0]: a rule is at most 8 groups deep"),
    "1,001 points": (instead(many(4, 251)), "rule: a rule has at most 1000 places"),
    "10^8 points in few lines": (instead(doubling(7)), "a rule has at most 1000 places"),
    "no rule": (without("rule"), "rule is missing"),
    "no custodians": (without("custodian"), "custodian is missing"),
    "no label": (without("label"), "label is missing"),
    "an empty label": (setting("label", to=""), "label should not be empty"),
    "a label of 501 characters": (setting("label", to="x" * 501), "label is too long"),
    "a label that turns text around": (
        setting("label", to="canary\u202e"),
        "label is not allowed: it holds control or invisible",
    ),
    "a label that is a number": (setting("label", to=7), "label should be text in quotes"),
    "no person": (without("custodian", 1, "person"), "custodian south-pier (custodian[1]): person is missing"),
    "no site": (without("custodian", 1, "site"), "custodian south-pier (custodian[1]): site is missing"),
    "no manager": (without("custodian", 1, "reports_to"), "custodian south-pier (custodian[1]): reports_to is missing"),
    "an empty person": (
        setting("custodian", 1, "person", to=""),
        "custodian south-pier (custodian[1]): person should not be empty",
    ),
    "no site, and no name either": (
        lambda d: (without("custodian", 1, "site")(d), without("custodian", 1, "name")(d)),
        "custodian[1].name is missing",
    ),
    "no site, and a name that is none": (
        lambda d: (setting("custodian", 1, "name", to="canary/")(d), setting("custodian", 1, "sight", to=SITE)(d)),
        "custodian[1].sight is no key",
    ),
    "no site, and a name that is a number": (
        lambda d: (setting("custodian", 1, "name", to=7)(d), setting("custodian", 1, "sight", to=SITE)(d)),
        "custodian[1].sight is no key",
    ),
    "a misspelt key": (
        lambda d: (without("custodian", 1, "site")(d), setting("custodian", 1, "sight", to=SITE)(d)),
        "custodian south-pier (custodian[1]): sight is no key that a policy has at this place",
    ),
    "an unknown key": (setting("colour", to="canary"), "colour is no key that a policy has at this place"),
    "a key of the program's own": (setting("custodians", to=[]), "custodians is no key"),
    "children by the name of the program": (
        lambda d: setting("rule", to={"need": 1, "children": ["registrar"]})(d),
        "rule.children is no key",
    ),
    "a weight of 0": (
        setting("custodian", 0, "weight", to=0),
        "custodian north-pier (custodian[0]): weight should be greater than or equal to 1",
    ),
    "a card at an absolute path": (
        setting("custodian", 0, "card", to="/canary"),
        "custodian north-pier (custodian[0]): card should be a path relative to the policy's folder",
    ),
    "an unknown key type": (setting("key_type", to="canary"), "key_type should be 'symmetric', 'signature', "),
    "a signature key without a reason": (
        setting("key_type", to="signature"),
        "reason is missing: signature keys are not backed up as a rule",
    ),
    "a reducible polynomial": (
        setting("polynomial", to="x^8 + 1"),
        "polynomial makes no field: x^8 + 1 is not irreducible: over GF(2) it is (x + 1)^8",
    ),
    "a polynomial of degree 7": (
        setting("polynomial", to="x^7 + x + 1"),
        "polynomial makes no field: x^7 + x + 1 is not of degree 8",
    ),
    "no polynomial": (setting("polynomial", to="canary"), "polynomial makes no field: this is not a polynomial"),
    "a polynomial that is a number": (setting("polynomial", to=283), "polynomial should be text in quotes"),
    "a pad of 0": (setting("pad", to=0), "pad should be greater than or equal to 1"),
    "a pad of 4,097": (setting("pad", to=4097), "pad should be less than or equal to 4096"),
    "an interval of nothing": (
        setting("drill_every", to="0d"),
        'drill_every should be an interval of a day or more, like "90d"',
    ),
    "an interval in months": (setting("attest_every", to="3m"), "attest_every should be an interval"),
    "an interval that is a number": (setting("refresh_every", to=90), "refresh_every should be an interval"),
    "strict that is text": (setting("strict", to="true"), "strict should be true or false, without quotes"),
    "acknowledgement that is a number": (
        setting("acknowledgement", to=1),
        "acknowledgement should be true or false, without quotes",
    ),
}


def refusal(text: bytes) -> DocumentError:
    with pytest.raises(DocumentError) as caught:
        Policy.parse(text, where="policy.toml")
    assert caught.value.__cause__ is caught.value.__context__ is None
    assert str(caught.value).startswith("policy.toml: ")
    assert caught.value.hint
    return caught.value


@pytest.mark.parametrize("name", REFUSED)
def test_a_mistake_is_named_by_its_key_and_no_value_is_told(name: str) -> None:
    bend, reason = REFUSED[name]
    data = copy.deepcopy(DATA)
    bend(data)
    problem = refusal(toml_of(data))
    assert reason in problem.what
    assert "canary" not in str(problem)
    assert ("counted from 0" in str(problem)) == ("[" in problem.what)


TEXT = toml_of(DATA).decode()


@pytest.mark.parametrize(
    "custodians", ["7", '["north-pier"]', '[[{ name = "north-pier" }]]', '{ name = "north-pier" }']
)
def test_custodians_that_are_no_tables_are_named_by_their_place(custodians: str) -> None:
    text = f'label = "canary"\ncustodian = {custodians}\n[rule]\nneed = 1\nfrom = ["north-pier"]\n'
    assert refusal(text.encode()).what.startswith("custodian")


def test_keys_of_very_many_parts_are_refused_before_they_are_read() -> None:
    """A line of 120,000 bytes once took twenty seconds and four gigabytes."""
    problem = refusal(b'label = "x"\n' + b"a." * 60_000 + b"b = 1\n")
    assert problem.what == "line 2 holds more than 100 dots"
    refusal(b"# " + b"." * 200 + b"\n[rule")  # A rule drawn in a comment is none of these.


@pytest.mark.parametrize(
    ("text", "place"),
    [
        (TEXT.replace('label = "canary label"', 'label = "canary'), "line 1, column 16"),
        (TEXT.replace("[group", "\n[[group"), "line 23, column"),
        (TEXT.replace("need = 2", "need 2", 1), "line 23, column 6"),
        (TEXT + '[rule]\nneed = 1\nfrom = ["registrar"]\n', "line 28, column 6"),
        (TEXT + "need = 3\n", "line 28, column"),
        (TEXT[: TEXT.rindex("]")], "end of document"),
        (TEXT + "x = [1, 2", "end of document"),
    ],
    ids=[
        "an open quote",
        "an odd bracket",
        "no sign of equality",
        "a table twice",
        "a key twice",
        "cut",
        "an open list",
    ],
)
def test_where_a_file_is_not_toml_the_line_is_named(text: str, place: str) -> None:
    with pytest.raises(tomllib.TOMLDecodeError):
        tomllib.loads(text)
    problem = refusal(text.encode())
    assert problem.what.startswith("it is not TOML: ")
    assert place in problem.what
    assert "canary" not in str(problem)


@pytest.mark.parametrize(
    ("data", "reason"),
    [
        (TEXT.encode() + b"# \xff", "not UTF-8"),
        (TEXT.encode("utf-8-sig"), "begins with a byte order mark"),
        (b"x = " + b"[" * 100_000, "nested too deeply"),
        (b"pad = " + b"9" * 5000, "a number is out of range"),
        (TEXT.encode() + b"#" * (1 << 20), "larger than 1 MiB"),
        (b"", "is missing"),
        (b"\x00", "line 1, column 1"),
    ],
)
def test_what_is_no_policy_at_all(data: bytes, reason: str) -> None:
    assert reason in refusal(data).what


def test_every_bit_flipped_gives_a_policy_or_a_refusal() -> None:
    """Nothing but DocumentError ever comes out, whatever a medium does to the file."""
    text = toml_of(
        {**DATA, "custodian": DATA["custodian"][:1], "group": {}, "rule": {"need": 1, "from": ["north-pier"]}}
    )
    refused = 0
    for bit in range(8 * len(text)):
        changed = bytearray(text)
        changed[bit // 8] ^= 1 << bit % 8
        try:
            Policy.parse(bytes(changed))
        except DocumentError:
            refused += 1
    assert refused > len(text)
