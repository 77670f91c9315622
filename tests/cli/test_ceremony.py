"""``shares ceremony`` as people and scripts use it: script, log and report, from before the split to after it."""

from __future__ import annotations

import json
import re
import shlex
import stat
from pathlib import Path
from typing import Any

import pytest
from cli.harbour import Harbour
from cli.harness import NAMES, Place, assert_refused, files_in, run, spawn
from cli.terminal import on_terminal
from parties import party

from shares.cli.keys import UNSIGNED_ENTRY
from shares.custody.parties import write_party
from shares.documents.ceremony_script import CeremonyScript
from shares.history.journal import load_journal

POLICIES = Path(__file__).resolve().parents[2] / "examples" / "policies"


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A policy, and an empty folder for the set."""
    (tmp_path / "policy.toml").write_bytes((POLICIES / "tide-archive.toml").read_bytes())
    (tmp_path / "set").mkdir()
    return tmp_path


def scripted(folder: Path, *more: str | Path) -> CeremonyScript:
    done = run("ceremony", "script", folder / "policy.toml", "--to", folder / "made", *more)
    assert (done.code, done.err) == (0, "")
    return CeremonyScript.parse((folder / "made" / "script.json").read_bytes())


def logging(folder: Path, *more: str) -> list[str | Path]:
    script = folder / "made" / "script.json"
    return ["ceremony", "log", folder / "set", "--script", script, "--initials", "A.K.", *more]


def test_three_private_files_are_written_and_told(folder: Path) -> None:
    done = run("ceremony", "script", folder / "policy.toml", "--to", folder / "made", "--when", "2027-01-15")
    script = CeremonyScript.parse((folder / "made" / "script.json").read_bytes())
    assert (done.code, done.err, script.planned) == (0, "", "2027-01-15")
    assert script.spoken() in done.out
    assert script.digest().hex() in done.out
    text, page = ((folder / "made" / name).read_text() for name in ("script.txt", "script.html"))
    for shown in (text, page):
        assert script.digest().hex() in shown
        assert script.spoken() in shown
        assert script.software.digest.hex() in shown
    for mode, content in files_in(folder / "made").values():
        assert stat.S_IMODE(mode) == 0o600
        assert content
    numbers = [int(number) for number in re.findall(r"^ *([0-9]+)\. \[", text, flags=re.MULTILINE)]
    assert numbers == list(range(1, len(script.steps) + 1))
    assert [step.command in text for step in script.steps if step.command] != []
    assert all(step.command in text for step in script.steps if step.command)


def test_the_software_is_what_selftest_tells(folder: Path) -> None:
    script = scripted(folder)
    told = spawn("selftest", "--json").json
    assert told["software"] == script.software.digest.hex()
    assert f"Software, to compare with another machine: {told['software']}\n" in spawn("selftest").out


def test_a_script_is_signed_and_shown(folder: Path) -> None:
    harbour = Harbour.make(Place.make(folder / "place"))
    told = run(
        *("ceremony", "script", folder / "policy.toml", "--to", folder / "made", "--json"),
        *("--role", "dealer=harbour engineer", "--sign", harbour.key("registrar"), *harbour.known("registrar")),
    ).json
    assert told["signers"] == ["registrar"]
    script = CeremonyScript.parse((folder / "made" / "script.json").read_bytes())
    assert (told["digest"], told["spoken"]) == (script.digest().hex(), script.spoken())
    shown = run("show", folder / "made" / "script.json")
    assert (shown.code, "registrar, card" in shown.out, script.spoken() in shown.out) == (0, True, True)


def test_the_policy_and_its_cards_are_read(folder: Path) -> None:
    harbour = Harbour.make(Place.make(folder / "place"))
    text = (folder / "policy.toml").read_text()
    named = text.replace('name = "registrar"', 'name = "registrar"\ncard = "place/registrar.card.json"')
    (folder / "policy.toml").write_text(named)
    told = json.loads(harbour.card("registrar").read_text())
    assert told["fingerprint"] in {step.expected for step in scripted(folder).steps}


def test_a_bad_script_is_refused_and_nothing_is_written(folder: Path) -> None:
    making = ["ceremony", "script", folder / "policy.toml", "--to", folder / "made"]
    for role, code, words in (
        ("dealer", 2, "write ROLE=PERSON"),
        ("dealer=", 2, "write ROLE=PERSON"),
        ("=A", 2, "there is no role ''"),
        ("harbour-master=A", 2, "there is no role 'harbour-master'"),
        ("external-witness=Registrar", 4, "the external witness is the person of registrar, who keeps a share"),
    ):
        assert_refused([*making, "--role", role], code, words, watched=folder)
    twice = ["--role", "dealer=A", "--role", "dealer=B"]
    assert_refused([*making, *twice], 2, "the role dealer is given twice", watched=folder)
    assert_refused([*making, "--when", ""], 2, "an empty value", watched=folder)
    assert_refused(
        ["ceremony", "script", folder / "none", "--to", folder / "made"], 5, "does not exist", watched=folder
    )
    (folder / "made").mkdir()
    for name in ("script.json", "script.html", "script.txt"):
        (folder / "made" / name).write_text("taken")
        assert_refused(making, 5, f"{name}: exists already", watched=folder)
        (folder / "made" / name).unlink()


def test_who_works_and_keeps_a_share_is_cautioned_about(folder: Path) -> None:
    making = ["ceremony", "script", folder / "policy.toml", "--role", "dealer=registrar"]
    done = run(*making, "--to", folder / "made")
    assert (done.code, done.err.startswith("Caution: the dealer is the person of custodian registrar")) == (0, True)
    told = run(*making, "--to", folder / "again", "--json")
    assert (told.err, len(told.json["cautions"])) == ("", 1)


def test_steps_are_logged_and_the_next_is_told(folder: Path) -> None:
    script = scripted(folder)
    first = run(*logging(folder, "--step", "1"))
    unsigned = f"Caution: {UNSIGNED_ENTRY}\n"
    assert (first.code, first.err) == (0, unsigned)
    assert f"Logged: step 1 of {len(script.steps)}, done, " in first.out
    assert "Next: step 2, ceremony administrator: Examine the policy" in first.out
    third = run(*logging(folder, "--step", "4", "--remark", "no video"))
    assert third.err == "Caution: there is no entry yet of steps 2, 3, which come before it.\n" + unsigned
    fourth = run("ceremony", "log", folder / "set", "--initials", "A.K.", "--step", "3", "--json")
    assert fourth.err == ""
    told = fourth.json
    assert (told["entry"], told["step"], told["skipped"], told["next"]) == (3, 3, [2], 5)
    strange = ("--step", "2", "--exception", "it rained in")
    assert "Next: step 2 itself has no entry yet. Log it when it is done." in run(*logging(folder, *strange)).out
    assert run(*logging(folder, *strange, "--json")).json["next"] == 2
    assert "Next: step 2, " in run(*logging(folder, "--exception", "a gull came in")).out
    run(*logging(folder, "--step", "2"))
    assert "Next: step 5, " in run(*logging(folder, *strange)).out
    last = run(*logging(folder, "--step", str(len(script.steps))))
    assert "Next: no later step is left." in last.out


def test_what_does_not_go_together_is_refused(folder: Path) -> None:
    scripted(folder)
    for more, words in (
        ((), "--step N is needed"),
        (("--step", "1", "--remedy", "x"), "--remedy goes with --exception"),
        (("--step", "1", "--exception", "x", "--remark", "y"), "takes neither --remark nor --repeats"),
        (("--step", "1", "--exception", "x", "--repeats"), "takes neither --remark nor --repeats"),
        (("--step", "0"), "0 is none of them"),
        (("--step", "99"), "99 is none of them"),
        (("--step", "1", "--remark", ""), "an empty value"),
        (("--step", "1", "--repeats"), "no entry that could be repeated"),
    ):
        assert_refused(logging(folder, *more), 2, words, watched=folder)
    bare = ["ceremony", "log", folder / "set", "--initials", "A", "--step", "1"]
    assert_refused(bare, 2, "the folder holds no scripts", watched=folder)
    assert_refused([*bare, "--script", folder / "policy.toml"], 4, watched=folder)
    assert_refused([*bare, "--script", folder / "made"], 5, watched=folder)
    elsewhere = [
        "ceremony",
        "log",
        folder,
        "--script",
        folder / "made" / "script.json",
        "--step",
        "1",
        "--initials",
        "A",
    ]
    assert_refused(elsewhere, 5, "is no set's folder", watched=folder)
    assert_refused(["ceremony", "report", folder / "set"], 2, "tells of no ceremony", watched=folder)
    run(*logging(folder, "--step", "1"))
    assert_refused(logging(folder, "--step", "1"), 2, "has an entry already (entry 1)", "--repeats", watched=folder)


def test_the_report_puts_exceptions_first(folder: Path) -> None:
    script = scripted(folder)
    for more in (("--step", "2"), ("--step", "1"), ("--step", "7", "--exception", "slow clock", "--remedy", "set")):
        assert run(*logging(folder, *more)).code == 0
    done = run("ceremony", "report", folder / "set", "--html", folder / "report.html")
    assert (done.code, done.err) == (0, "")
    places = [
        done.out.index(words) for words in ("slow clock", "out of order", "Roles:", "Steps:", "The journal stands")
    ]
    assert places == sorted(places)
    assert f"Steps without an entry: 3 to {len(script.steps)}." in done.out
    page = (folder / "report.html").read_text()
    assert page.index("slow clock") < page.index('<h2 id="roles">')
    assert stat.S_IMODE((folder / "report.html").stat().st_mode) == 0o600
    told = run("ceremony", "report", folder / "set", "--json").json
    assert (told["complete"], told["missing"][0], told["record"], told["shares"]) == (False, 3, None, [])
    assert [(one["step"], one["remedy"], one["entry"]) for one in told["exceptions"]] == [
        (7, "set", 3),
        (1, None, None),
    ]
    assert_refused(["ceremony", "report", folder / "set", "--html", folder / "report.html"], 5, "exists already")


def test_a_changed_journal_is_reported_and_fails(folder: Path) -> None:
    scripted(folder)
    for step in ("1", "2"):
        run(*logging(folder, "--step", step, "--remark", "as it was"))
    journal = folder / "set" / "journal.jsonl"
    journal.write_bytes(journal.read_bytes().replace(b"as it was", b"as we say", 1))
    done = run("ceremony", "report", folder / "set")
    assert (done.code, "THE JOURNAL DOES NOT HOLD" in done.out) == (4, True)
    assert done.err == "Caution: the journal does not hold: the report cannot be relied on.\n"
    told = run("ceremony", "report", folder / "set", "--json").json
    assert (told["done"], told["exit"], len(told["problems"])) == (False, 4, 1)


def test_a_person_at_a_terminal_is_asked_for_the_passphrase_alone(folder: Path) -> None:
    harbour = Harbour.make(Place.make(folder / "place"))
    scripted(folder)
    with on_terminal(*logging(folder, "--step", "1", "--sign", str(harbour.key("registrar")))) as terminal:
        terminal.answer("Passphrase of registrar:", "the passphrase of registrar")
        code, _ = terminal.finish()
    assert code == 0
    told = run("ceremony", "report", folder / "set", "--json").json
    assert told["steps"][0]["signers"] == ["registrar"]


def of_script(command: str) -> list[list[str]]:
    """The commands of this program in what a step has people type."""
    return [shlex.split(one)[1:] for one in command.split("; ") if one.startswith("shares ")]


@pytest.mark.usefixtures("quick")
@pytest.mark.parametrize("dual", [False, True])
def test_every_command_of_a_script_runs_as_it_is_printed(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, dual: bool
) -> None:
    """A ceremony by the script, word for word; what stands for something is filled in."""
    harbour = Harbour.make(Place.make(tmp_path))
    for role in ("dealer", "internal-witness", "external-witness", "administrator"):
        write_party(party(role), tmp_path)
        harbour.phrase(role).write_text(f"the passphrase of {role}\n")
    policy = f'label = "Tide archive root"\nacknowledgement = true\ndual_control = {str(dual).lower()}\n'
    for name in NAMES[:3]:
        card = f'card = "{name}.card.json"\n' if name != "light-house" else ""
        policy += (
            f'[[custodian]]\nname = "{name}"\nperson = "P {name}"\nsite = "S {name}"\nreports_to = "R {name}"\n{card}'
        )
    (tmp_path / "policy.toml").write_text(policy + f"[rule]\nneed = 2\nfrom = {json.dumps(NAMES[:3])}\n")
    monkeypatch.chdir(tmp_path)
    assert run("ceremony", "script", "policy.toml", "--to", ".").code == 0
    script = CeremonyScript.parse(Path("script.json").read_bytes())
    Path("tide-archive-root").mkdir()
    Path("handover").mkdir()
    Path("secret").write_bytes(b"made up")
    everyone = (*NAMES[:3], "dealer", "internal-witness", "external-witness", "administrator")
    known = {name: f"--passphrase-file={name}={harbour.phrase(name)}" for name in everyone}
    two = ["--sign", "dealer.key.json", *(["--sign", "internal-witness.key.json"] if dual else [])]
    for number, step in enumerate(script.steps, start=1):
        for words in of_script(step.command or ""):
            for name in NAMES[:3] if "NAME.key.json" in words else ("SERIAL",):
                told = [word.replace("NAME", name) for word in words]
                ran(told, known)
        log = f"ceremony log tide-archive-root --script script.json --step {number} --initials X".split()
        ran([*log, *two], known)
    journal = load_journal(Path("tide-archive-root"))
    assert {len(journal.signers(entry)) for entry in journal.entries} == {2 if dual else 1}
    told = run("ceremony", "report", "tide-archive-root", "--json").json
    assert (told["complete"], told["exceptions"], told["problems"]) == (True, [], [])
    assert [(share["custodian"], share["sent"]) for share in told["shares"]] == [(name, "SERIAL") for name in NAMES[:3]]


def ran(words: list[str], known: dict[str, str]) -> None:
    """Run a command, with the passphrases that people would type."""
    options: list[Any] = []
    asking = {"acknowledge", "split", "verify", "record"}
    if words[0] in asking or "--sign" in words:
        options = [option for name, option in known.items() if any(f"{name}." in word for word in words)]
    if words[0] == "split" or (words[0] == "verify" and "light-house" in words[1]):
        options = list(dict.fromkeys([*options, known["light-house"]]))
    done = run(*words, *options)
    assert (words, done.code, done.err if done.code else "") == (words, 0, "")
