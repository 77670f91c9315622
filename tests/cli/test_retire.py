"""``shares retire`` as people and scripts use it: what is left, who destroyed it, who saw it, and the end."""

from __future__ import annotations

import stat
from pathlib import Path

import pytest
from cli.harbour import Harbour
from cli.harness import NAMES, Place, assert_refused, files_in, run
from cli.terminal import on_terminal

from shares.cli.keys import UNSIGNED_ENTRY
from shares.clock import from_text
from shares.history.journal import load_journal

THIRD = ("--by", "A. Person", "--witness", "B. Person")


def retiring(place: Place, what: str, *more: str | Path) -> list[str | Path]:
    return ["retire", what, place.set, *more]


def destroying(place: Place, name: str, *more: str | Path) -> list[str | Path]:
    return retiring(place, "destroyed", "--custodian", name, *THIRD, *more)


def test_a_set_from_what_is_held_to_its_end(dealt: Place) -> None:
    status = run(*retiring(dealt, "status"))
    assert (status.code, status.err) == (0, "")
    assert status.out.startswith(
        "0 of 5 copies are accounted for. Practice shares are worth nothing and are not counted.\n"
    )
    for i, name in enumerate(NAMES):
        words = f"{5 - i} of 5 copies are unaccounted for: {name} (original)"
        assert_refused(retiring(dealt, "close"), 4, words, "shares retire lost", watched=dealt.folder)
        done = run(*destroying(dealt, name, "--method", "shredded crosswise"))
        assert (done.code, "Caution: deleting is not destroying" in done.err) == (0, True)
        assert UNSIGNED_ENTRY in done.err
        assert f"Entered: {name}'s copy (original), destroyed by A. Person, seen by B. Person" in done.out
    assert "Next: `shares retire close` ends the set." in done.out
    closed = run(*retiring(dealt, "close"))
    assert (closed.code, "cannot prove that nothing is left" in closed.err) == (0, True)
    assert UNSIGNED_ENTRY in closed.err
    assert "5 copies were destroyed." in closed.out
    told = run(*retiring(dealt, "status", "--json")).json
    assert (told["retired"], told["held"], {copy["fate"] for copy in told["copies"]}) == (True, 0, {"destroyed"})
    ended = load_journal(dealt.set).entries[-1].time
    assert (from_text(told["keep_until"]) - ended).days == 730
    assert f"Keep record, policy, journal, affidavits and their paper until {told['keep_until']}" in closed.out
    assert f"records are kept until {told['keep_until']}." in run(*retiring(dealt, "status")).out
    assert_refused(retiring(dealt, "close"), 2, "the set was retired on", watched=dealt.folder)
    # A copy that turns up afterwards is entered, and not passed over.
    assert run("journal", "add", dealt.set, "copied", "--custodian", "registrar", "--copy", "S-1").code == 0
    assert "Entered since, and to be accounted for: 1." in run(*retiring(dealt, "status")).out


def test_what_is_lost_is_not_said_to_be_destroyed(dealt: Place) -> None:
    for name in NAMES[1:]:
        run(*destroying(dealt, name))
    losing = retiring(dealt, "lost", "--custodian", NAMES[0], *THIRD)
    assert_refused(losing, 2, "Missing option '--reason'", watched=dealt.folder)
    done = run(*losing, "--reason", "the flood of 2027")
    assert (done.code, "Caution: it was not destroyed" in done.err) == (0, True)
    assert UNSIGNED_ENTRY in done.err
    closed = run(*retiring(dealt, "close"))
    assert "4 copies were destroyed.\nNot destroyed but lost: north-pier, original: lost, by A. Person" in closed.out
    assert "Exposure stays." in closed.out
    told = run(*retiring(dealt, "status", "--json")).json
    assert [copy["fate"] for copy in told["copies"]] == ["lost"] + ["destroyed"] * 4


def test_the_form_is_written_and_its_scan_is_kept(dealt: Place) -> None:
    form, scan = dealt.folder / "form.html", dealt.folder / "scan.pdf"
    done = run(*retiring(dealt, "affidavit", "--custodian", "registrar", "--to", form))
    assert (done.code, done.err, stat.S_IMODE(form.stat().st_mode)) == (0, "", 0o600)
    assert "Affidavit of destruction" in form.read_text()
    assert_refused(retiring(dealt, "affidavit", "--custodian", "registrar", "--to", form), 5, "exists already")
    scan.write_bytes(b"signed by hand")
    assert run(*destroying(dealt, "registrar", "--affidavit", scan)).code == 0
    [kept] = (dealt.set / "affidavits").iterdir()
    assert kept.read_bytes() == b"signed by hand"


def test_mistakes_are_refused_and_nothing_is_entered(dealt: Place) -> None:
    def acted(*more: str | Path) -> list[str | Path]:
        return retiring(dealt, "destroyed", "--custodian", "registrar", *more)

    watched = dealt.folder
    assert_refused(
        destroying(dealt, "east-quay"), 2, "east-quay was dealt no share", "custodians: north-pier", watched=watched
    )
    assert_refused(destroying(dealt, "registrar", "--copy", "S-1"), 2, "no entry tells of a copy S-1", watched=watched)
    assert_refused(acted("--by", "A", "--witness", "Registrar"), 4, "must be a third party", watched=watched)
    assert_refused(acted("--by", "A", "--witness", "a"), 4, "nobody witnesses their own act", watched=watched)
    assert_refused(acted("--by", "A"), 2, "Missing option '--witness'", watched=watched)
    assert_refused(acted("--by", "", "--witness", "B"), 2, "an empty value", watched=watched)
    assert_refused(acted("--by", "A\x07", "--witness", "B"), 2, "must not hold control", watched=watched)
    assert_refused(destroying(dealt, "registrar", "--affidavit", dealt.folder / "none"), 5, "exist", watched=watched)
    for command in ("status", "close"):
        assert_refused(["retire", command, dealt.folder], 5, "record.json", watched=watched)
    run(*destroying(dealt, "registrar"))
    assert_refused(destroying(dealt, "registrar"), 2, "was destroyed already", watched=watched)


def test_a_changed_journal_ends_nothing(dealt: Place) -> None:
    for name in NAMES:
        run(*destroying(dealt, name))
    journal = dealt.set / "journal.jsonl"
    lines = journal.read_bytes().splitlines(keepends=True)
    journal.write_bytes(b"".join([*lines[:2], *lines[3:]]))
    for command in ("status", "close"):
        assert_refused(retiring(dealt, command), 4, "the journal cannot be relied on: line 3", watched=dealt.folder)


@pytest.mark.usefixtures("quick")
def test_who_signs_stands_in_the_journal(harbour: Harbour) -> None:
    place = harbour.place
    signing = ["--sign", harbour.key("auditor-east"), *harbour.known("auditor-east")]
    done = run(*destroying(place, "registrar", *signing, "--json"))
    assert (done.json["left"][0], done.err) == ("north-pier (original)", "")
    assert UNSIGNED_ENTRY not in run(*destroying(place, "dry-dock", *signing)).err
    journal = load_journal(place.set)
    assert [card.name for card in journal.signers(journal.entries[-1])] == ["auditor-east"]
    before = files_in(place.set)
    with on_terminal(*destroying(place, "light-house", "--sign", harbour.key("registrar"))) as terminal:
        terminal.answer("Passphrase of registrar:", "a wrong one")
        terminal.wait_for("Passphrase of registrar:")
        terminal.type("\x03")
        code, _ = terminal.finish()
    assert code != 0
    assert files_in(place.set) == before
