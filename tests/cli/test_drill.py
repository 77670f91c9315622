"""``shares drill``: called, rehearsed, closed; with worthless shares, with real ones, and by attendance.

Source: NIST SP 800-84, sec. 6.5, for what a report holds; the probe is `openssl pkey`, OpenSSL's own reader of keys.
"""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from cli.harbour import Harbour
from cli.harness import NAMES, SECRET, Place, Result, assert_refused, files_in, run, spawn
from cryptography.hazmat.primitives import serialization
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

from shares.documents.drill_report import DrillReport
from shares.documents.event import Brought, Rehearsed
from shares.history.journal import load_journal

OFFICE = "harbour-office"
TARGET = 'recover_within = "4h"\n'


@pytest.fixture
def harbour(tmp_path: Path) -> Harbour:
    place = Place.make(tmp_path / "place")
    place.split(need=2)
    return Harbour.make(place)


def signing(harbour: Harbour, name: str = OFFICE) -> list[str | Path]:
    return ["--sign", harbour.key(name), *harbour.known(name)]


def practice(harbour: Harbour, *names: str) -> list[Path]:
    return [harbour.place.drop / f"{name}.practice.json" for name in names]


def opened(harbour: Harbour, kind: str, *more: str | Path) -> int:
    done = run("drill", "open", harbour.place.set, "--kind", kind, "--json", *more)
    assert done.code == 0, done.err
    return int(done.json["drill"])


def closed(harbour: Harbour, *more: str | Path) -> Result:
    return run("drill", "close", harbour.place.set, *signing(harbour), *more)


def report(harbour: Harbour, number: int) -> DrillReport:
    return DrillReport.parse((harbour.place.set / "drills" / str(number) / "report.json").read_bytes())


def events(harbour: Harbour) -> list[str]:
    journal = load_journal(harbour.place.set)
    assert journal.problems == ()
    return [entry.event.what for entry in journal.entries]


def test_a_drill_of_practice_is_held_in_the_open_and_reported(harbour: Harbour) -> None:
    number = opened(harbour, "practice", "--objective", "people know the steps")
    shown = {
        run("drill", "rehearse", harbour.place.set, *practice(harbour, *pair), "--json").json["practice_secret"]
        for pair in (NAMES[:2], NAMES[1:3])
    }
    assert len(shown) == 1  # Every quorum recovers the same worthless secret.
    assert None not in shown
    page = harbour.folder / "report.html"
    done = closed(
        harbour, "--finding", "the room was locked", "--action", "registrar", "2027-01-15", "a key", "--html", page
    )
    assert (done.code, done.err) == (0, "")
    told = report(harbour, number)
    assert (told.passed, told.drill_kind, told.objectives) == (True, "practice", ("people know the steps",))
    assert told.findings == ("the room was locked",)
    assert [(one.owner, one.what) for one in told.actions] == [("registrar", "a key")]
    assert [(one.custodian, one.took_part) for one in told.participants] == [(name, True) for name in NAMES[:3]]
    assert [one.card.name for one in told.signatures] == [OFFICE]
    assert load_journal(harbour.place.set).holds(told.journal)
    assert events(harbour) == ["dealt", "drill-opened", "rehearsed", "rehearsed", "drill-closed"]
    text = page.read_text()
    assert all(word in text for word in ("the room was locked", "registrar", "2027-01-15", "Passed"))
    assert "<script" not in text
    assert_refused(["drill", "rehearse", harbour.place.set, "--drill", str(number), "x"], 2, "was closed by entry 5")


def test_a_drill_of_recovery_gives_the_secret_to_the_probe_alone(tmp_path: Path) -> None:
    key = Ed25519PrivateKey.generate().private_bytes(
        serialization.Encoding.PEM, serialization.PrivateFormat.PKCS8, serialization.NoEncryption()
    )
    place = Place.make(tmp_path / "place", key)
    place.split(need=2)
    harbour = Harbour.make(place)
    number = opened(harbour, "recovery")
    before = {name: held for name, held in files_in(place.folder).items() if name != "set/journal.jsonl"}
    done = spawn(
        "drill", "rehearse", place.set, *place.shares[:2], "--present", "A. Keeper", "--json", "--",
        "openssl", "pkey", "-noout", "-check",
    )  # fmt: skip
    assert (done.code, done.json["probe"], done.json["outcome"]) == (0, 0, "passed")
    assert done.json["practice_secret"] is None
    after = {name: held for name, held in files_in(place.folder).items() if name != "set/journal.jsonl"}
    assert after == before
    journal = (place.set / "journal.jsonl").read_bytes()
    for line in key.splitlines()[1:-1]:
        assert line.decode() not in done.out + done.err
        assert line not in journal
    assert closed(harbour).code == 0
    told = report(harbour, number)
    assert told.passed
    assert told.persons == ("A. Keeper",)
    assert [one.custodian for one in told.participants if one.took_part] == list(done.json["used"])


@pytest.mark.parametrize(
    ("how", "code", "words"),
    [
        ("too few", 3, "2 different shares are needed, 1 given"),
        ("damaged", 3, "2 different shares are needed, 1 given"),
        ("the probe fails", 7, "ended with code 3"),
        ("the probe is missing", 5, "the command was not started"),
        ("practice shares", 4, "none of the 2 shares given is of the record's set"),
    ],
)
def test_a_rehearsal_that_fails_is_a_result(harbour: Harbour, how: str, code: int, words: str) -> None:
    shares, probe = harbour.place.shares[:2], ["--", "sh", "-c", "cat >/dev/null; exit 3"]
    if how == "too few":
        shares, probe = shares[:1], []
    elif how == "damaged":
        shares[0].write_bytes(shares[0].read_bytes().replace(b'"digest": "', b'"digest": "0')[:-3])
        probe = []
    elif how == "the probe is missing":
        probe = ["--", str(harbour.folder / "no such command")]
    elif how == "practice shares":
        shares, probe = practice(harbour, *NAMES[:2]), []
    number = opened(harbour, "recovery")
    done = run("drill", "rehearse", harbour.place.set, *shares, "--json", *probe)
    assert (done.code, done.json["done"], done.json["exit"]) == (code, False, code)
    assert words in done.json["outcome"]
    (entry,) = [one for one in load_journal(harbour.place.set).entries if isinstance(one.event, Rehearsed)]
    assert isinstance(entry.event, Rehearsed)
    assert not entry.event.passed
    assert entry.event.probe == (3 if how == "the probe fails" else None)
    done = closed(harbour, "--json")
    assert (done.code, done.json["done"], done.json["exit"]) == (1, False, 1)
    assert any(words in finding for finding in done.json["findings"])
    assert not report(harbour, number).passed


def test_real_shares_at_a_drill_of_practice_are_named(harbour: Harbour) -> None:
    opened(harbour, "practice")
    done = run("drill", "rehearse", harbour.place.set, harbour.place.shares[0], *practice(harbour, NAMES[1], NAMES[2]))
    assert done.code == 4
    assert "real shares were brought to a drill of practice" in done.out
    assert "this machine has now held the shares brought" in done.out.replace("\n", " ")
    (brought,) = [one.event for one in load_journal(harbour.place.set).entries if isinstance(one.event, Brought)]
    assert brought.custodians == (harbour.place.shares[0].name.removesuffix(".share.json"),)
    assert "incident" in done.err
    assert SECRET.decode().strip() not in done.out + done.err


def test_a_run_that_its_probe_kills_has_entered_whose_shares_it_opened(harbour: Harbour) -> None:
    """What the probe got is known from then on, whatever becomes of the program that gave it."""
    number = opened(harbour, "recovery")
    stolen = harbour.folder / "stolen"
    arguments = ["drill", "rehearse", harbour.place.set, *harbour.place.shares, "--present", "A. Keeper"]
    killed = spawn(*arguments, "--", "sh", "-c", f"cat > {stolen}; kill -9 $PPID")
    assert (killed.code, stolen.read_bytes()) == (-9, SECRET)
    *_, last = load_journal(harbour.place.set).entries
    assert isinstance(last.event, Brought)
    assert (last.event.drill, last.event.persons) == (number, ("A. Keeper",))
    assert set(last.event.custodians) == set(NAMES[:3])
    told = run("audit", harbour.place.set, "--json").json["sets"][0]["exposure"]
    (keeper,) = [one for one in told if one["who"] == "A. Keeper"]
    assert set(keeper["shares"]) == set(NAMES[:3]) or keeper["recoveries"]


def test_practice_shares_at_a_drill_of_recovery_expose_nothing(harbour: Harbour) -> None:
    opened(harbour, "recovery")
    done = run("drill", "rehearse", harbour.place.set, *practice(harbour, *NAMES[:2]))
    assert done.code == 4
    assert "has now held" not in done.out
    assert "brought" not in events(harbour)


def test_a_drill_of_attendance_is_answered(harbour: Harbour) -> None:
    called = harbour.folder / "called.json"
    number = opened(harbour, "attendance", "--to", called, *signing(harbour))
    answers = []
    for name in NAMES[:2]:
        answers.append(harbour.folder / f"{name}.answer.json")
        done = run(
            "attest", "answer", called, "--record", harbour.place.record, "--present", "--place", "the pier house",
            "--to", answers[-1], "--sign", harbour.key(name), *harbour.known(name),
        )  # fmt: skip
        assert done.code == 0, done.err
    cards = [word for name in NAMES[:2] for word in ("--card", harbour.card(name))]
    done = run("attest", "check", called, *answers, "--set", harbour.place.set, *cards, "--json")
    assert done.json["silent"] == [NAMES[2]]
    done = closed(harbour)
    assert done.code == 0
    told = report(harbour, number)
    assert told.passed
    assert told.findings == (f"{NAMES[2]} did not answer",)
    assert [(one.took_part, one.place) for one in told.participants] == [
        (True, "the pier house"), (True, "the pier house"), (False, None)
    ]  # fmt: skip
    opened(harbour, "attendance", "--to", harbour.folder / "again.json", *signing(harbour))
    done = closed(harbour, "--json")
    assert (done.code, done.json["done"]) == (1, False)
    assert "those who answered in time make no quorum" in done.json["findings"]


def test_bad_input_is_refused_and_changes_nothing(harbour: Harbour) -> None:
    folder, share = harbour.place.set, harbour.place.shares[0]
    for arguments, code, word in (
        (["drill", "rehearse", folder, share], 2, "no drill is open"),
        (["drill", "close", folder, *signing(harbour)], 2, "no drill is open"),
        (["drill", "open", folder, "--kind", "practice", "--custodian", "nobody"], 2, "names no custodian nobody"),
        (["drill", "open", folder, "--kind", "practice", "--to", "x"], 2, "--to C"),
        (["drill", "open", folder, "--kind", "attendance"], 2, "--to C"),
        (["drill", "open", folder, "--kind", "attendance", "--to", harbour.folder / "c"], 2, "--sign"),
        (["drill", "open", harbour.folder / "nowhere", "--kind", "practice"], 5, "does not exist"),
    ):
        assert_refused(arguments, code, word, watched=harbour.place.folder)
    opened(harbour, "practice")
    opened(harbour, "recovery")
    for arguments, code, word in (
        (["drill", "rehearse", folder, share], 2, "more than one drill is open: 2, 3"),
        (["drill", "rehearse", folder, share, "--drill", "2", "--", "true"], 2, "opens nothing"),
        (["drill", "rehearse", folder, share, "--drill", "3", "--"], 2, "no command after --"),
        (["drill", "rehearse", folder, share, "--drill", "9"], 2, "there is no drill 9; known: 2, 3"),
        (["drill", "close", folder, "--drill", "2"], 2, "--sign"),
        (
            ["drill", "close", folder, "--drill", "2", *signing(harbour), "--action", "x", "soon", "y"],
            2,
            "no date",
        ),
    ):
        assert_refused(arguments, code, word, watched=harbour.place.folder)


def test_without_a_practice_set_there_is_no_practice(harbour: Harbour) -> None:
    (harbour.place.set / "practice.json").unlink()
    assert_refused(["drill", "open", harbour.place.set, "--kind", "practice"], 5, "practice.json")
    shutil.copy(harbour.place.record, harbour.place.set / "practice.json")
    assert_refused(["drill", "open", harbour.place.set, "--kind", "practice"], 4, "not the one that the journal names")


def test_the_roster_leaves_out_what_was_rehearsed(harbour: Harbour) -> None:
    first = run("drill", "roster", harbour.place.set, "--json").json
    assert (len(first["drills"]), first["bound"]) == (3, 3)
    opened(harbour, "practice")
    assert run("drill", "rehearse", harbour.place.set, *practice(harbour, *NAMES[:2])).code == 0
    after = run("drill", "roster", harbour.place.set, "--json").json
    assert len(after["drills"]) == 2
    assert after["covered"] == [list(NAMES[:2])]
    text = run("drill", "roster", harbour.place.set).out
    assert text.startswith("2 drills for Tide archive root, no fewer than 2")


def test_a_report_that_was_altered_is_refused(harbour: Harbour) -> None:
    number = opened(harbour, "practice")
    assert closed(harbour).code == 1  # Nothing was rehearsed.
    path = harbour.place.set / "drills" / str(number) / "report.json"
    altered = json.loads(path.read_bytes()) | {"passed": True}
    path.write_text(json.dumps(altered))
    assert_refused(["show", path], 4, "the signature by harbour-office does not fit its content")
