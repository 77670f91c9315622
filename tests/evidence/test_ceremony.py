"""The log of a ceremony, from an empty folder to the report: steps bound to the script, exceptions kept, gaps named."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import pytest
from evidence.harbour_set import at, deal, enter, policy
from hypothesis import given, settings
from hypothesis import strategies as st
from parties import unlocked
from strategies import CREATED

from shares.documents.ceremony_script import CeremonyScript, Software
from shares.documents.event import Copied, Delivered, Deviation, Received, ScriptStep
from shares.errors import ParameterError, StorageError, VerificationError
from shares.evidence.ceremony import Logged, load_script, log_exception, log_step, script_name
from shares.evidence.ceremony_report import CeremonyReport, ceremony_report
from shares.evidence.script import make_script
from shares.history.files import FolderFiles
from shares.history.journal import append, load_journal

SCRIPT = make_script(policy(), Software(version="0.1.0", digest=bytes(32)), created=CREATED)
DUAL = make_script(policy("dual_control = true"), Software(version="0.1.0", digest=bytes(32)), created=CREATED)
LAST = len(SCRIPT.steps)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """An empty folder, which a set is going to have."""
    (tmp_path / "set").mkdir()
    return tmp_path / "set"


def log(folder: Path, step: int, script: CeremonyScript = SCRIPT, **options: Any) -> Logged:
    return log_step(folder, script, step, initials="A.K.", **{"time": at(step), **options})


def report(folder: Path, **options: Any) -> CeremonyReport:
    return ceremony_report(FolderFiles(folder), **options)


def whats(found: CeremonyReport) -> list[str]:
    return [one.what for one in found.exceptions]


def test_a_ceremony_from_an_empty_folder_to_its_report(folder: Path) -> None:
    half = LAST // 2
    for step in range(1, half):
        assert log(folder, step).following == step + 1
    log_exception(folder, SCRIPT, half, initials="A.K.", exception="slow clock", remedy="it was set", time=at(half))
    record = deal(folder, minute=half).record
    for step in range(half, LAST + 1):
        done = log(folder, step, remark="seen" if step == LAST else None)
    assert (done.skipped, done.following) == ((), None)
    found = report(folder)
    assert (found.missing, found.problems) == ((), ())
    assert [(one.what, one.remedy, one.step, one.initials) for one in found.exceptions] == [
        ("slow clock", "it was set", half, "A.K.")
    ]
    assert found.record == record
    assert (found.began, found.ended) == (at(1), at(LAST))
    assert found.steps[-1].remarks == ("seen",)
    assert [step.initials for step in found.steps] == [("A.K.",)] * LAST
    assert [copy.custodian for copy in found.copies] == ["north-pier", "south-pier", "registrar"]


def test_each_entry_is_bound_to_the_script_and_the_script_is_kept(folder: Path) -> None:
    log(folder, 1)
    log(folder, 2)
    kept = folder / script_name(SCRIPT.digest())
    assert kept.read_bytes() == SCRIPT.text
    assert kept.stat().st_mode & 0o777 == 0o600
    entries = load_journal(folder).entries
    for entry in entries:
        assert isinstance(entry.event, ScriptStep)
        assert entry.event.script == hashlib.sha256(kept.read_bytes()).digest()
        [named] = entry.documents
        assert (named.path, named.digest) == (f"ceremony/{SCRIPT.digest().hex()[:16]}.json", SCRIPT.digest())
    assert load_script(folder, None).digest() == SCRIPT.digest()


def test_who_logs_is_told_what_was_passed_over(folder: Path) -> None:
    log(folder, 2)
    done = log(folder, 5)
    assert (done.skipped, done.following) == ((1, 3, 4), 6)
    said = log_exception(folder, SCRIPT, None, initials="A.K.", exception="somebody came in")
    assert (said.skipped, said.following) == ((), 1)


def test_a_step_logged_twice_says_that_it_repeats(folder: Path) -> None:
    log(folder, 1)
    before = (folder / "journal.jsonl").read_bytes()
    with pytest.raises(ParameterError, match=r"step 1 has an entry already \(entry 1\)"):
        log(folder, 1)
    with pytest.raises(ParameterError, match="step 2 has no entry that could be repeated"):
        log(folder, 2, repeats=True)
    assert (folder / "journal.jsonl").read_bytes() == before
    log(folder, 2)
    log(folder, 1, repeats=True, time=at(3))
    assert whats(report(folder)) == []
    assert len(report(folder).steps[0].entries) == 2


@pytest.mark.parametrize("step", [0, -1, LAST + 1])
def test_a_step_that_the_script_does_not_have_is_refused(folder: Path, step: int) -> None:
    with pytest.raises(ParameterError, match=f"the script has steps 1 to {LAST}, and {step} is none of them"):
        log(folder, step)
    with pytest.raises(ParameterError, match="is none of them"):
        log_exception(folder, SCRIPT, step, initials="A.K.", exception="x")
    assert list(folder.iterdir()) == []


def test_texts_that_may_not_be_are_refused(folder: Path) -> None:
    for options in ({"remark": "\x1b[2J"}, {"remark": "x" * 501}):
        with pytest.raises(ParameterError, match="a text of the log"):
            log(folder, 1, **options)
    with pytest.raises(ParameterError, match="a text of the log"):
        log_exception(folder, SCRIPT, 1, initials="A.K.", exception="", remedy=None)
    assert list(folder.iterdir()) == []


def test_a_mistyped_folder_founds_no_journal(folder: Path) -> None:
    with pytest.raises(StorageError, match="the folder is not there"):
        log(folder / "missing", 1)
    (folder / "letter.txt").write_text("something else")
    with pytest.raises(StorageError, match="it holds other files, and is no set's folder"):
        log(folder, 1)
    assert [path.name for path in folder.iterdir()] == ["letter.txt"]


def test_another_script_under_the_same_name_is_refused(folder: Path) -> None:
    log(folder, 1)
    kept = folder / script_name(SCRIPT.digest())
    kept.chmod(0o600)
    kept.write_bytes(SCRIPT.text + b"\n")
    with pytest.raises(VerificationError, match="it is not the script that its name says"):
        log(folder, 2)
    with pytest.raises(VerificationError, match="it is not the script that the journal names"):
        report(folder)
    kept.unlink()
    with pytest.raises(StorageError, match="does not exist"):
        report(folder)


def test_two_scripts_are_told_apart(folder: Path) -> None:
    with pytest.raises(ParameterError, match="the folder holds no scripts"):
        load_script(folder, None)
    with pytest.raises(ParameterError, match="the journal tells of no ceremony"):
        report(folder)
    other = make_script(policy(), Software(version="0.1.0", digest=bytes(32)), created=at(1))
    log(folder, 1)
    log(folder, 3, other)
    with pytest.raises(ParameterError, match="the folder holds 2 scripts"):
        load_script(folder, None)
    with pytest.raises(ParameterError, match="tells of 2 ceremonies, so say which"):
        report(folder)
    assert 1 not in report(folder, script=SCRIPT.digest()).missing
    assert 3 not in report(folder, script=other.digest()).missing
    with pytest.raises(ParameterError, match="no step of this script"):
        report(folder, script=bytes(32))


def test_dual_control_binds_before_there_is_a_record_and_after(folder: Path) -> None:
    with unlocked("registrar") as one, unlocked("harbour-office") as two:
        for keys in ((), (one,), (one, one)):
            with pytest.raises(ParameterError, match="the policy asks for dual control"):
                log(folder, 1, DUAL, keys=keys)
            assert list(folder.iterdir()) == []
        log(folder, 1, DUAL, keys=(one, two))
        deal(folder, "dual_control = true", minute=1)
        with pytest.raises(ParameterError, match="dual control"):
            log(folder, 2, DUAL, keys=(one,))
        # A script that was made from another policy does not undo what the set's own asks for.
        with pytest.raises(ParameterError, match="dual control"):
            log(folder, 2, SCRIPT, keys=(one,))
        assert not (folder / script_name(SCRIPT.digest())).exists()
        log(folder, 2, DUAL, keys=(one, two))
    found = report(folder)
    assert found.steps[1].signers == ("registrar", "harbour-office")
    assert whats(found) == []


def test_the_report_names_what_the_log_itself_shows(folder: Path) -> None:
    def plain(step: int, minute: int, **options: Any) -> None:
        event = ScriptStep(what="step", script=DUAL.digest(), step=step, initials="X", **options)
        append(folder, event, time=at(minute))

    with unlocked("registrar") as one, unlocked("harbour-office") as two:
        log(folder, 4, DUAL, keys=(one, two))
    for minute, step in enumerate((2, 2, LAST + 9), start=5):
        plain(step, minute)
    deal(folder, minute=3)
    assert whats(report(folder)) == [
        "it was logged out of order, after step 4",
        "entry 2 lacks the two signatures of dual control",
        "it was logged twice, by entries 2 and 3, and the second does not say that it repeats the step",
        "entry 3 lacks the two signatures of dual control",
        f"entry 4 logs step {LAST + 9}, which the script does not have",
        "entry 4 lacks the two signatures of dual control",
        "the set was split by another policy than the one that the script was made for",
        "line 5 of the journal: its time, 2026-12-01T07:03:00Z, lies before that of the entry before it, "
        "2026-12-01T07:07:00Z",
    ]
    assert [one.step for one in report(folder).exceptions][:3] == [2, 2, 2]
    assert report(folder).problems == ()


def test_an_exception_without_a_script_counts_while_the_ceremony_goes_on(folder: Path) -> None:
    def plain(what: str, minute: int) -> None:
        append(folder, Deviation(what="exception", remark=what), time=at(minute))

    plain("before", 0)
    log(folder, 1)
    plain("during", 1)
    log(folder, 2)
    plain("after", 3)
    assert whats(report(folder)) == ["during"]


def test_shares_are_listed_by_serial_and_a_mismatch_is_an_exception(folder: Path) -> None:
    log(folder, 1)
    of_set = deal(folder, minute=1)
    enter(of_set, Delivered, what="delivered", custodian="north-pier", serial="P-1", channel="by hand")
    enter(of_set, Delivered, what="delivered", custodian="south-pier", serial="P-2")
    enter(of_set, Received, what="received", custodian="north-pier", serial="p-1 ")
    enter(of_set, Received, what="received", custodian="south-pier", serial="P-9")
    enter(of_set, Copied, what="copied", custodian="registrar", copy="S-1")
    found = report(folder)
    assert [(c.custodian, c.name, c.sent, c.received, c.channel) for c in found.copies] == [
        ("north-pier", "original", "P-1", "p-1 ", "by hand"),
        ("south-pier", "original", "P-2", "P-9", None),
        ("registrar", "original", None, None, None),
        ("registrar", "S-1", None, None, None),
    ]
    assert whats(found) == ["the pack of south-pier was sent with the serial P-2, and arrived with P-9"]


def test_a_journal_that_was_changed_is_said_to_be(folder: Path) -> None:
    log(folder, 1, remark="as it was")
    log(folder, 2)
    journal = folder / "journal.jsonl"
    journal.write_bytes(journal.read_bytes().replace(b"as it was", b"as we say"))
    [problem] = report(folder).problems
    assert problem.startswith("line 2: it does not follow ")


def expected_of(order: Sequence[int]) -> tuple[list[int], list[int]]:
    """The steps out of order, and those missing, by the definition in the format."""
    late = [step for i, step in enumerate(order) if any(before > step for before in order[:i])]
    return late, [step for step in range(1, LAST + 1) if step not in order]


@settings(max_examples=15)
@given(st.lists(st.integers(1, LAST), unique=True, min_size=1, max_size=8))
def test_gaps_and_disorder_against_their_definition(tmp_path_factory: pytest.TempPathFactory, order: list[int]) -> None:
    folder = tmp_path_factory.mktemp("set")
    for minute, step in enumerate(order):
        log(folder, step, time=at(minute))
    found = report(folder)
    late, missing = expected_of(order)
    assert [one.step for one in found.exceptions] == late
    assert list(found.missing) == missing
