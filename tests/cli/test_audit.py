"""``shares audit``: what it says of sets, by hand and by script, with the exit code that a scheduler acts on.

Checked against: the library's audit of the same folder; the table of exit codes in the README.
"""

from __future__ import annotations

import os
import shutil
from pathlib import Path

import pytest
from cli.harness import assert_refused, files_in, run, spawn
from kept import NAMES, OFFICE, Kept, day, policy_text
from parties import card

from shares.clock import to_text
from shares.documents.event import Departed
from shares.evidence.audited import Audit

AT = f"--at={to_text(day(30))}"


@pytest.fixture(scope="module")
def harbour(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder of sets: a good one, a fresh one, one that is broken; and the office's card beside."""
    folder = tmp_path_factory.mktemp("audit")
    good = Kept.make(folder / "sets/good", policy_text())
    good.round(day(1))
    Kept.make(folder / "sets/fresh", policy_text())
    shutil.copytree(good.folder, folder / "sets/broken")
    (folder / "sets/broken/journal.jsonl").write_bytes(b"{}\n")
    (folder / "office.card.json").write_bytes(card(OFFICE).to_file())
    (folder / "stranger.card.json").write_bytes(card("dry-dock").to_file())
    return folder


def test_good_is_0_due_is_6_broken_is_4(harbour: Path) -> None:
    for name, code in (("good", 0), ("fresh", 6), ("broken", 4)):
        by_hand = run("audit", harbour / "sets" / name, AT)
        assert (by_hand.code, by_hand.err) == (code, "")
        by_script = run("audit", harbour / "sets" / name, AT, "--json")
        assert (by_script.code, by_script.err) == (code, "")
        assert (by_script.json["done"], by_script.json["exit"]) == (code == 0, code)
    assert run("audit", harbour / "sets", AT).code == 4
    assert run("audit", harbour / "sets/good", harbour / "sets/fresh", AT).code == 6


def test_one_set_is_told_in_full(harbour: Path) -> None:
    told = run("audit", harbour / "sets/good", AT).out
    assert told.startswith("Good: Tide archive, epoch 1 (")
    for words in (
        "Confirmed: 5 of 5 custodians.",
        "May still be lost: 2 of these, 2 in people, 1 in sites.",
        "north-pier   confirmed: content proven 2026-01-12; due 2026-04-12",
        "Most known to one: keeper one, of north-pier; 2 more would make a quorum.",
        "2026-07-09  hold a drill of recovery or practice: none has passed yet",
        f"Signed by {OFFICE} (dealer, 7 entries), card {card(OFFICE).fingerprint}",
        "Journal: 7 entries; head entry 7, ",
        "It does not prove that a file was",
        "Confidential: it tells who holds what, and where.",
    ):
        assert words in told, words


def test_what_is_to_be_done_is_told(harbour: Path, tmp_path: Path) -> None:
    shutil.copytree(harbour / "sets/good", tmp_path / "set")
    kept = Kept(tmp_path / "set", None, None)  # type: ignore[arg-type]
    left = Departed(what="departed", person="keeper two", custodians=("south-pier",), due=day(21))
    kept.append(left, day(20))
    told = run("audit", tmp_path / "set", f"--at={to_text(day(20, 1))}")
    assert told.code == 6
    assert "due: keeper two has left: end what they could still do (due 2026-01-31 09:00 UTC)." in told.out
    assert "Next: Reassign: the place of south-pier goes to somebody else." in told.out
    assert "`shares journal add SET" in told.out
    assert "They make no quorum" not in told.out


def test_of_many_sets_the_worst_comes_first_and_good_ones_are_counted(harbour: Path) -> None:
    told = run("audit", harbour / "sets", AT).out
    assert told.index("Broken: ") < told.index("Due: ")
    assert "Good: " not in told
    assert "3 sets: 1 broken, 1 due, 1 good." in told


def test_json_holds_what_the_library_found(harbour: Path) -> None:
    told = run("audit", harbour / "sets", AT, "--json").json
    assert told["verdict"] == "broken"
    assert told["counts"] == {"good": 1, "unsigned": 0, "due": 1, "at risk": 0, "broken": 1}
    assert [one["verdict"] for one in told["sets"]] == ["broken", "due", "good"]
    good = told["sets"][2]
    assert set(good) == set(Audit.__dataclass_fields__)
    assert [row["status"] for row in good["custodians"]] == ["confirmed"] * 5
    assert good["margin"]["custodians"] == {"low": 2, "high": 2}


def test_trust(harbour: Path) -> None:
    trusted = run("audit", harbour / "sets/good", AT, "--trust", harbour / "office.card.json")
    assert (trusted.code, ", trusted" in trusted.out) == (0, True)
    other = run("audit", harbour / "sets/good", AT, "--trust", harbour / "stranger.card.json")
    assert (other.code, "signed by none of the parties that you trust" in other.out) == (6, True)
    assert_refused(["audit", harbour / "sets/good", "--trust", harbour / "sets/good/record.json"], 4, "a party card")


def test_a_head_that_was_noted_elsewhere_shows_a_journal_that_was_cut(harbour: Path, tmp_path: Path) -> None:
    folder = shutil.copytree(harbour / "sets/good", tmp_path / "good")
    head = Kept(folder, None, None).set.journal().head  # type: ignore[arg-type]
    assert head
    (tmp_path / "note.txt").write_text(f"On Monday it stood at {head.sequence} {head.head}.\n")
    assert run("audit", "pack", folder, "--to", tmp_path / "whole.tar").code == 0
    lines = (folder / "journal.jsonl").read_bytes().splitlines(keepends=True)
    (folder / "journal.jsonl").write_bytes(b"".join(lines[:-1]))
    assert run("audit", "pack", folder, "--to", tmp_path / "cut.tar").code == 0
    for given in (f"{head.sequence} {head.head}", tmp_path / "note.txt"):
        assert run("audit", tmp_path / "whole.tar", AT, "--head", given).code == 0
        for cut in (folder, tmp_path / "cut.tar"):
            told = run("audit", cut, AT, "--head", given)
            assert (told.code, "it never stood at entry 7" in " ".join(told.out.split())) == (4, True)
    assert run("audit", folder, AT).code == 6
    assert_refused(["audit", harbour / "sets", "--head", tmp_path / "note.txt"], 2, "several sets")
    assert_refused(["audit", folder, "--head", "tide"], 2, "no head")


def test_a_page_is_written_once_for_its_reader_alone(harbour: Path, tmp_path: Path) -> None:
    page = tmp_path / "report.html"
    done = run("audit", harbour / "sets", AT, "--html", page)
    assert (done.code, f"Page, confidential like this: {page}" in done.out) == (4, True)
    assert page.stat().st_mode & 0o777 == 0o600
    assert page.read_bytes().lower().startswith(b"<!doctype html>")
    assert run("audit", harbour / "sets/good", AT, "--html", tmp_path / "two.html", "--json").json["page"]
    assert_refused(["audit", harbour / "sets", AT, "--html", page], 5, "exists already", watched=tmp_path)


def test_nothing_is_changed_in_the_sets(harbour: Path) -> None:
    before = files_in(harbour)
    assert run("audit", harbour / "sets", "--jobs=2").code in (4, 6)
    assert files_in(harbour) == before


def test_a_folder_called_pack_is_named_by_a_path(
    harbour: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    shutil.copytree(harbour / "sets/good", tmp_path / "pack")
    monkeypatch.chdir(tmp_path)
    assert run("audit", "./pack", AT).code == 0
    assert_refused(["audit", "pack"], 2, "SET")
    assert run("audit", "pack", "pack", "--to", "out.tar").code == 0
    assert run("audit", "out.tar", AT).code == 0
    assert "Pack what an outside auditor needs" in run("audit", "pack", "--help").out


def test_folders_that_hold_no_set_are_named(harbour: Path, tmp_path: Path) -> None:
    shutil.copytree(harbour / "sets/good", tmp_path / "sets/good")
    (tmp_path / "sets/empty").mkdir()
    told = run("audit", tmp_path / "sets", AT)
    assert told.code == 0
    assert "1 folder(s) hold no set, and were passed over" in told.err
    assert run("audit", tmp_path / "sets", AT, "--json").json["passed_over"] == [os.fspath(tmp_path / "sets/empty")]


@pytest.mark.parametrize(
    ("arguments", "code", "words"),
    [
        ([], 2, "SET"),
        (["{empty}"], 2, "holds no set"),
        (["{empty}/nowhere"], 5, "does not exist"),
        (["{sets}", "--at=yesterday"], 2, "--at: "),
        (["{sets}", "--jobs=0"], 2, "jobs"),
        (["{sets}", "--trust={empty}/none.json"], 5, "does not exist"),
        (["{sets}", "--html="], 2, "an empty value"),
        ([""], 2, "an empty value"),
    ],
)
def test_refusals(harbour: Path, tmp_path: Path, arguments: list[str], code: int, words: str) -> None:
    filled = [one.format(empty=tmp_path, sets=harbour / "sets/good") for one in arguments]
    assert_refused(["audit", *filled], code, words)


def test_hostile_names_and_labels_steer_no_terminal(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "a\x1b[2Jb", policy_text())
    told = run("audit", kept.folder, AT)
    assert told.code == 6
    assert "\x1b" not in told.out


def test_many_sets_in_processes_from_the_program_itself(harbour: Path, tmp_path: Path) -> None:
    for i in range(20):
        shutil.copytree(harbour / "sets/good", tmp_path / "sets" / f"{i:02}")
    done = spawn("audit", tmp_path / "sets", AT, "--jobs=2")
    assert (done.code, done.err) == (0, "")
    assert "20 sets: 20 good." in done.out


def test_the_moment_of_an_audit_may_lie_in_the_past(harbour: Path) -> None:
    told = run("audit", harbour / "sets/good", f"--at={to_text(day(1))}")
    assert told.code == 6
    assert "entries bear a later time than this audit" in told.out
    assert NAMES[0] in told.out
