"""The script worked out from a policy: nothing that a policy asks for is left out, and nobody watches themself."""

from __future__ import annotations

import shlex
from typing import Any

import pytest
from evidence.harbour_set import NAMES, policy
from hypothesis import given
from hypothesis import strategies as st
from parties import card
from strategies import CREATED, policies, toml_of

from shares.documents.base import MAX_FILE
from shares.documents.ceremony_script import CeremonyScript, CeremonyStep, Software
from shares.documents.policy import Policy
from shares.errors import ParameterError, VerificationError
from shares.evidence.paperwork import log_command
from shares.evidence.script import DUTIES, cautions, make_script
from shares.evidence.steps import EVERYONE, folder_name, title

SOFTWARE = Software(version="0.1.0", digest=bytes(range(32)))


def made(more: str = "", **options: Any) -> CeremonyScript:
    return make_script(policy(more), SOFTWARE, created=CREATED, **options)


def commands(script: CeremonyScript, *words: str) -> list[str]:
    """The commands that begin with these words."""
    return [step.command for step in script.steps if step.command and step.command.startswith(" ".join(words))]


def told(script: CeremonyScript) -> str:
    return "\n".join(f"{step.what} {step.command} {step.expected} {step.note}" for step in script.steps)


@given(policies(), st.booleans(), st.booleans(), st.booleans())
def test_every_policy_has_a_script_that_leaves_nobody_out(
    data: dict[str, Any], dual: bool, practice: bool, acknowledged: bool
) -> None:
    keys = {"dual_control": dual, "practice": practice, "acknowledgement": acknowledged}
    read = Policy.parse(toml_of({**data, **keys}))
    script = make_script(read, SOFTWARE, created=CREATED)
    assert CeremonyScript.parse(script.to_file()).to_file() == script.to_file()
    names = [one.name for one in read.custodians]
    assert [role.role for role in script.roles] == [title(role) for role in DUTIES] + [f"custodian {n}" for n in names]
    assert {step.role for step in script.steps} <= {role.role for role in script.roles} | {EVERYONE}
    for name in names:
        own = [step for step in script.steps if step.role == f"custodian {name}"]
        assert [shlex.split(step.command or "")[1] for step in own] == ["verify", "sheet", "journal"]
        assert own[-1].note == "Serial of the pack"
    [split] = commands(script, "shares split")
    assert (" --acknowledged " in split) is acknowledged
    assert (" --witness " in split) is dual
    assert len(commands(script, "shares record sign")) == (1 if dual else 2)
    assert ("mv handover/*.practice.json" in told(script)) is practice
    assert script.dual_control is dual
    # Parts are written one after another: none begins twice.
    parts = [step.part for step in script.steps]
    assert parts == sorted(parts, key=list(dict.fromkeys(parts)).index)


def test_the_steps_of_the_trade_are_there_in_their_order() -> None:
    script = made()
    text = [f"{step.what} {step.command} {step.expected}" for step in script.steps]
    wanted = [
        "a stand-in for each",
        "shares plan policy.toml",
        "numbered packs",
        "no witness keeps a share",
        "without its disk",
        "second clock",
        policy().digest().hex(),
        SOFTWARE.digest.hex(),
        "source of randomness",
        "shares split secret --policy policy.toml",
        "reads the fingerprint of the record aloud",
        "shares record sign",
        "shares verify handover/north-pier.wrapped.json",
        "shares sheet handover/registrar.wrapped.json",
        "Erase the secret",
        "Clear the printer",
        "shares ceremony report tide-archive-root",
        "Sign the last page",
        "shares journal head tide-archive-root",
        "Shut the machine down",
    ]
    places = [next(i for i, one in enumerate(text) if words in one) for words in wanted]
    assert places == sorted(places)
    assert "with: harbour boat; the way: by hand" in told(script)


def test_cards_are_read_aloud_and_keys_are_used() -> None:
    read = Policy.parse(policy().text.replace(b'site = "registrar"', b'site = "registrar"\ncard = "r.card.json"'))
    script = make_script(read, SOFTWARE, cards={"registrar": card("registrar")}, created=CREATED)
    [step] = [step for step in script.steps if step.expected == card("registrar").fingerprint]
    assert step.role == "custodian registrar"
    assert [" --key " in one for one in commands(script, "shares verify")] == [False, False, True]
    assert "unseen by others: north-pier, south-pier." in told(script)
    shown = [step for step in script.steps if (step.command or "").startswith("shares party show ")]
    assert [step.command.split()[-1].partition(".")[0] for step in shown if step.command and step is not shown[0]] == [
        "dealer", "internal-witness", "external-witness",
    ]  # fmt: skip
    assert all(step.note == "Fingerprint of the card" for step in shown[1:])
    split = next(i for i, step in enumerate(script.steps) if "shares split" in (step.command or ""))
    assert all(script.steps.index(step) < split for step in shown)


@pytest.mark.parametrize("dual", [False, True])
def test_whatever_is_entered_is_signed(dual: bool) -> None:
    script = made("dual_control = true" if dual else "")
    signed = " --sign dealer.key.json" + " --sign internal-witness.key.json" * dual
    entering = [log_command(script), *commands(script, "shares journal add")]
    assert len(entering) == 4
    assert all(command.endswith(signed) and command.count("--sign") == 1 + dual for command in entering)


def test_days_and_people_are_those_given() -> None:
    people = {role: f"person of {role}" for role in DUTIES}
    script = made(people=people, planned="2027-01-15, harbour office", standby="2027-01-22")
    assert [role.person for role in script.roles] == [*people.values(), *(f"Keeper of {name}" for name in NAMES)]
    assert "The day: 2027-01-15, harbour office. The second: 2027-01-22." in script.steps[0].expected
    assert made(people={}).roles[0].person is None


@pytest.mark.parametrize("witness", ["internal-witness", "external-witness"])
def test_who_watches_keeps_no_share_and_has_no_second_role(witness: str) -> None:
    with pytest.raises(VerificationError, match="is the person of registrar, who keeps a share"):
        made(people={witness: "KEEPER  of registrar"})
    with pytest.raises(VerificationError, match=f"one person is {title(witness)} and dealer: nobody watches themself"):
        made(people={witness: "A. Person", "dealer": "a. person"})


def test_a_strict_policy_that_a_split_would_refuse_has_no_script() -> None:
    weak = policy("strict = true").text.replace(b"Keeper of south-pier", b"Keeper of north-pier")
    with pytest.raises(VerificationError, match="the policy is strict, and a serious finding stands"):
        make_script(Policy.parse(weak), SOFTWARE)


def test_who_works_and_keeps_a_share_is_cautioned_about() -> None:
    people = {"dealer": "keeper of registrar", "administrator": "A. Person"}
    assert made(people=people).roles[3].person == "keeper of registrar"
    [caution] = cautions(policy(), people)
    assert caution.startswith("the dealer is the person of custodian registrar")


@pytest.mark.parametrize(
    ("options", "problem"),
    [
        ({"people": {"harbour master": "A"}}, "there is no role 'harbour master'"),
        ({"people": {"dealer": "A\nB"}}, "the name of a person must not hold control"),
        ({"people": {"dealer": "x" * 501}}, "the name of a person has 1 to 500 characters"),
        ({"planned": ""}, "a day and place has 1 to 500 characters"),
        ({"standby": "\u202e"}, "a day and place must not hold control or invisible characters"),
    ],
)
def test_what_may_not_stand_in_it_is_refused(options: dict[str, Any], problem: str) -> None:
    with pytest.raises(ParameterError, match=problem):
        made(**options)


def test_a_script_is_no_larger_than_documents_are() -> None:
    def of(total: int) -> CeremonyScript:
        one = {"person": "A", "site": "B", "reports_to": "C"}
        custodians = [{"name": f"quay-{i}", **one} for i in range(total)]
        groups = {f"g{i}": {"need": 1, "from": [c["name"] for c in custodians[i::4]]} for i in range(4)}
        data = {"label": "Tide archive", "custodian": custodians, "group": groups}
        return make_script(Policy.parse(toml_of({**data, "rule": {"need": 2, "from": list(groups)}})), SOFTWARE)

    assert len(of(200).to_file()) < MAX_FILE
    with pytest.raises(ParameterError, match="the script for 1000 custodians would be larger than 1 MiB"):
        of(1000)


def test_hostile_names_stay_one_word_of_a_command() -> None:
    text = policy().text.replace(b"registrar", b"$(reboot);'x")
    script = make_script(Policy.parse(text), SOFTWARE)
    steps: list[CeremonyStep] = [step for step in script.steps if step.role == "custodian $(reboot);'x"]
    assert [shlex.split(step.command or "")[2:3] for step in steps][:2] == [["handover/$(reboot);'x.wrapped.json"]] * 2


@pytest.mark.parametrize(
    ("label", "name"),
    [("Tide archive, backup root", "tide-archive-backup-root"), ("\u6e2f\u6e7e", "set"), ("../" * 9, "set")],
)
def test_the_folder_is_named_by_the_label(label: str, name: str) -> None:
    assert folder_name(label) == name
    assert len(folder_name("long " * 100)) <= 40
