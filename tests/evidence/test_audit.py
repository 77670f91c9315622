"""Audits of whole sets: the verdict for each thing that can be amiss, and for each way to tamper with the evidence.

Checked against: the table of ``Verdict``; each tampering is one that a person with write access to the folder could do.
"""

from __future__ import annotations

import json
import os
import pickle
import shutil
from collections.abc import Callable
from datetime import timedelta
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from kept import NAMES, OFFICE, PEOPLE, START, Kept, day, policy_text
from parties import card, unlocked

from shares.documents.drill_report import DrillReport
from shares.documents.event import (
    Attested,
    Dealt,
    Destroyed,
    Deviation,
    DrillClosed,
    Noted,
    Retired,
    ScriptStep,
    Transcribed,
)
from shares.errors import StorageError
from shares.evidence import audit as module
from shares.evidence.audit import audit
from shares.evidence.audited import Audit, Reason, Verdict
from shares.history.files import PRACTICE_RECORD, FolderFiles
from shares.history.journal import append, read_journal
from shares.history.reports import append_with
from shares.sharing.rule import Rule


@pytest.fixture(scope="module")
def good(tmp_path_factory: pytest.TempPathFactory) -> Kept:
    """A set that audits as good on day 30: two rounds, a practice drill, a recovery drill."""
    kept = Kept.make(tmp_path_factory.mktemp("good") / "set", policy_text())
    kept.round(day(1))
    kept.drill("practice", day(5), NAMES[:3])
    kept.drill("recovery", day(10), NAMES[2:])
    kept.round(day(20))
    return kept


@pytest.fixture
def kept(good: Kept, tmp_path: Path) -> Kept:
    """A copy of it, to be tampered with."""
    shutil.copytree(good.folder, tmp_path / "set")
    return Kept(tmp_path / "set", good.dealt, good.practice)


def found(kept: Kept, at: float = 30, **more: object) -> dict[str, Verdict]:
    """Codes of all reasons, with the level that each leaves."""
    return {reason.code: reason.level for reason in kept.audit(day(at), **more).reasons}


def lines(kept: Kept) -> list[bytes]:
    return (kept.folder / "journal.jsonl").read_bytes().splitlines(keepends=True)


def write(kept: Kept, *new: bytes) -> None:
    (kept.folder / "journal.jsonl").write_bytes(b"".join(new))


def test_good(kept: Kept) -> None:
    audited = kept.audit(day(30))
    assert (audited.verdict, audited.reasons, audited.notes) == (Verdict.GOOD, (), ())
    assert (audited.label, audited.epoch, audited.record) == ("Tide archive", 1, kept.record.fingerprint)
    assert audited.rule == kept.record.rule.to_rule().words()
    assert audited.head == kept.set.journal().head.words()  # type: ignore[union-attr]
    assert (audited.counts.entries, audited.counts.attestations) == (len(lines(kept)), 10)
    (signer,) = audited.signers
    assert (signer.name, signer.roles, signer.entries) == (OFFICE, ("dealer", "journal"), len(lines(kept)))
    assert [(row.kind, row.passed, row.took) for row in audited.drills] == [
        ("practice", True, 3600),
        ("recovery", True, 3600),
    ]


def test_an_audit_is_plain_data(kept: Kept) -> None:
    audited = kept.audit(day(200))
    assert pickle.loads(pickle.dumps(audited)) == audited  # noqa: S301 - what this test has just written
    assert audited.reasons
    told = json.loads(json.dumps(audited.members()))
    assert told["verdict"] == "at risk"
    assert told["at"] == "2026-07-29T09:00:00Z"
    assert told["margin"]["custodians"] == {"low": -1, "high": -1}
    assert told["intervals"]["attest_every"] == 90


def test_the_worst_reason_decides_and_comes_first(kept: Kept) -> None:
    audited = kept.audit(day(400))
    ranks = [reason.level.rank for reason in audited.reasons]
    assert ranks == sorted(ranks, reverse=True)
    assert audited.verdict is audited.reasons[0].level
    assert [verdict.rank for verdict in Verdict] == [0, 1, 2, 3, 4]


# Who vouches.


def test_an_unsigned_record_is_never_better_than_unsigned(kept: Kept) -> None:
    (kept.folder / "record.json").write_bytes(kept.record.to_file())
    assert found(kept) == {"record-unsigned": Verdict.UNSIGNED}
    assert kept.audit(day(30)).verdict is Verdict.UNSIGNED
    assert found(kept, trusted=[card(OFFICE)])["record-not-trusted"] is Verdict.AT_RISK


def test_trusted_cards(kept: Kept) -> None:
    audited = kept.audit(day(30), trusted=[card("registrar"), card(OFFICE)])
    assert audited.verdict is Verdict.GOOD
    assert audited.signers[0].trusted
    assert found(kept, trusted=[card("registrar")]) == {
        "record-not-trusted": Verdict.AT_RISK,
        "journal-not-vouched": Verdict.UNSIGNED,
    }


def test_an_unsigned_entry_is_never_better_than_unsigned(kept: Kept) -> None:
    append(kept.folder, Noted(what="noted", remark="by whom?"), time=day(25))
    assert found(kept) == {"journal-not-vouched": Verdict.UNSIGNED}
    assert kept.audit(day(30)).counts.unsigned_entries == 1
    (reason,) = kept.audit(day(30), trusted=[card(OFFICE)]).reasons  # One, not a second that nobody trusted signed.
    assert reason.what.startswith(f"Journal: entry {len(lines(kept))} is not signed")


def test_dual_control_is_looked_for(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", policy_text(dual_control=True))
    assert found(kept)["journal-not-dual"] is Verdict.UNSIGNED
    other = Kept.make(tmp_path / "other", policy_text(dual_control=True), journal=False)
    with unlocked(OFFICE) as key, unlocked("registrar") as second:
        append(other.folder, Noted(what="noted", remark="two"), keys=[key, second], time=START)
    assert "journal-not-dual" not in found(other)


# Tampering.


def replaced(old: bytes, new: bytes) -> Callable[[list[bytes]], list[bytes]]:
    def change(journal: list[bytes]) -> list[bytes]:
        at = next(i for i, line in enumerate(journal) if old in line)
        return [*journal[:at], journal[at].replace(old, new), *journal[at + 1 :]]

    return change


TAMPERED: dict[str, Callable[[list[bytes]], list[bytes]]] = {
    "edited": replaced(b'"attributed":true', b'"attributed":false'),
    "reordered": lambda journal: [journal[0], journal[2], journal[1], *journal[3:]],
    "duplicated": lambda journal: [*journal[:3], journal[2], *journal[3:]],
    "one removed": lambda journal: journal[:4] + journal[5:],
    "no beginning": lambda journal: journal[1:],
    "a line of nothing": lambda journal: [*journal, b"{}\n"],
    "not text": lambda journal: [*journal[:2], b"\xff\x00\n", *journal[2:]],
}


@pytest.mark.parametrize("how", TAMPERED)
def test_a_journal_that_was_tampered_with_is_broken(kept: Kept, how: str) -> None:
    write(kept, *TAMPERED[how](lines(kept)))
    audited = kept.audit(day(30))
    assert audited.verdict is Verdict.BROKEN
    assert "journal" in {reason.code for reason in audited.reasons}
    assert audited.label == "Tide archive"  # What can be read is told all the same.


def test_a_removed_tail_is_caught_by_the_heads_that_documents_quote(kept: Kept) -> None:
    """A challenge quotes where the journal stood; an answer filed and the entries before it removed, that shows."""
    journal = lines(kept)
    challenged = max(i for i, line in enumerate(journal) if b'"what":"challenged"' in line)
    write(kept, *journal[: challenged + 1])
    assert "journal" not in found(kept)  # No head tells; but the answers lie there, and no entry names them.
    assert found(kept)["entry-missing"] is Verdict.DUE
    spliced = json.loads(journal[challenged])
    # Whoever holds the office's key writes another history before the challenge, and goes on from there.
    write(kept, *journal[: challenged - 1])
    with unlocked(OFFICE) as key:
        read = read_journal(journal[challenged] + b"").entries[0]
        append(kept.folder, Noted(what="noted", remark="nothing happened"), keys=[key], time=day(20))
        append(kept.folder, read.event, keys=[key], documents=read.documents, time=day(20))
    audited = kept.audit(day(30))
    assert spliced["event"]["what"] == "challenged"
    assert any("never stood at" in reason.what for reason in audited.reasons if reason.level is Verdict.BROKEN)


def without_its_last_round(kept: Kept) -> list[Path]:
    """Cut the journal before its last challenge; return the documents of which it no longer tells."""
    before = set(kept.folder.glob("*/*/*.json"))
    write(kept, *lines(kept)[:-6])
    named = {named.path for entry in kept.set.journal().entries for named in entry.documents}
    return sorted(path for path in before if os.fspath(path.relative_to(kept.folder)) not in named)


def test_documents_that_no_entry_names_tell_that_the_journal_was_cut(kept: Kept) -> None:
    strays = without_its_last_round(kept)
    assert len(strays) == 6
    audited = kept.audit(day(25))
    (reason,) = audited.reasons
    assert (reason.level, reason.code) == (Verdict.DUE, "entry-missing")
    assert reason.about == tuple(os.fspath(path.relative_to(kept.folder)) for path in strays)
    # Cut further, to before where the challenge says that the journal stood, it is shown to be cut.
    write(kept, *lines(kept)[:-1])
    codes = found(kept, 25)
    assert (codes["journal"], codes["entry-missing"]) == (Verdict.BROKEN, Verdict.DUE)


def test_the_report_of_a_drill_that_no_entry_tells_of_is_heard(kept: Kept) -> None:
    """Whoever removes a drill that failed leaves its report, which quotes a head; under no name is it passed over."""
    number = kept.drill("recovery", day(25), NAMES[:2])
    journal = lines(kept)
    write(kept, *journal[:-1])
    assert found(kept)["entry-missing"] is Verdict.DUE  # A run that was stopped leaves the same.
    assert "journal" not in found(kept)
    write(kept, *journal[: number - 1])
    assert (found(kept)["journal"], found(kept)["entry-missing"]) == (Verdict.BROKEN, Verdict.DUE)
    (kept.folder / f"drills/{number}/report.json").rename(kept.folder / f"drills/{number}/other.json")
    assert found(kept)["journal"] is Verdict.BROKEN


def test_a_head_is_heard_though_the_entry_that_names_its_document_is_of_another_kind(kept: Kept) -> None:
    without_its_last_round(kept)
    write(kept, *lines(kept)[:-1])
    named = [kept.set.named(os.fspath(path.relative_to(kept.folder))) for path in kept.folder.glob("*/*/*.json")]
    kept.append(Noted(what="noted", remark="nothing to see"), day(22), documents=named)
    codes = found(kept, 25)
    assert "entry-missing" not in codes
    assert codes["journal"] is Verdict.BROKEN


def test_what_a_stopped_run_left_is_settled_by_an_entry_that_keeps_a_copy(kept: Kept) -> None:
    strays = without_its_last_round(kept)
    attached = {path.name: path.read_bytes() for path in strays}
    with unlocked(OFFICE) as key:
        noted = Noted(what="noted", remark="the run was stopped")
        append_with(kept.set, noted, attached, keys=[key], time=day(24))
    assert found(kept, 25) == {}


def test_a_document_of_another_set_quotes_no_head_of_this_one(kept: Kept, tmp_path: Path) -> None:
    other = Kept.make(tmp_path / "other", policy_text())
    other.round(day(1))
    shutil.copytree(other.folder / "attestations", kept.folder / "attestations", dirs_exist_ok=True)
    assert found(kept) == {"entry-missing": Verdict.DUE}


def test_a_journal_that_was_removed_is_never_better_than_the_true_one(kept: Kept) -> None:
    (kept.folder / "journal.jsonl").unlink()
    codes = found(kept)
    assert codes["journal-removed"] is Verdict.BROKEN
    assert codes["journal"] is Verdict.BROKEN  # The heads that the documents quote.
    assert "no-journal" not in codes
    shutil.rmtree(kept.folder / "attestations")
    shutil.rmtree(kept.folder / "drills")
    assert found(kept)["no-journal"] is Verdict.AT_RISK


def test_heads_that_were_noted_elsewhere(kept: Kept) -> None:
    head = kept.set.journal().head
    assert head
    assert found(kept, heads=[head]) == {}
    assert kept.audit(day(30), heads=[head]).counts.heads == kept.audit(day(30)).counts.heads + 1
    write(kept, *lines(kept)[:-1])
    (reason,) = [one for one in kept.audit(day(30), heads=[head]).reasons if one.level is Verdict.BROKEN]
    assert head.words() in reason.what
    (kept.folder / "journal.jsonl").unlink()
    assert found(kept, heads=[head])["journal"] is Verdict.BROKEN


# Before the split.


def ceremony(folder: Path) -> None:
    for step in (1, 2):
        event = ScriptStep(what="step", script=bytes(32), step=step, initials="A.K.")
        append(folder, event, time=day(step))


def test_a_ceremony_under_way_is_due_and_not_broken(tmp_path: Path) -> None:
    ceremony(tmp_path)
    audited = audit(FolderFiles(tmp_path), at=day(3))
    (reason,) = audited.reasons
    assert (audited.verdict, reason.code) == (Verdict.DUE, "not-split")
    assert "Nothing is split yet" in reason.what
    assert audited.head
    assert audited.head.startswith("entry 2, ")
    assert (audited.counts.entries, audited.label) == (2, None)
    head = read_journal((tmp_path / "journal.jsonl").read_bytes()).head
    assert head
    whole = (tmp_path / "journal.jsonl").read_bytes()
    (tmp_path / "journal.jsonl").write_bytes(whole[: whole.index(b"\n") + 1])
    assert audit(FolderFiles(tmp_path), at=day(3), heads=[head]).verdict is Verdict.BROKEN
    (tmp_path / "journal.jsonl").write_bytes(whole.replace(b"A.K.", b"A.L.", 1))
    assert audit(FolderFiles(tmp_path), at=day(3)).verdict is Verdict.BROKEN


def test_a_set_whose_record_is_gone_is_no_ceremony(good: Kept, tmp_path: Path) -> None:
    ceremony(tmp_path)
    shutil.copytree(good.folder / "attestations", tmp_path / "attestations")
    assert audit(FolderFiles(tmp_path), at=day(3)).verdict is Verdict.BROKEN
    shutil.rmtree(tmp_path / "attestations")
    append(tmp_path, Transcribed(what="transcribed", custodian="dry-dock", persons=("keeper one",)), time=day(2))
    assert audit(FolderFiles(tmp_path), at=day(3)).verdict is Verdict.BROKEN
    (tmp_path / "journal.jsonl").write_bytes(b"")
    assert audit(FolderFiles(tmp_path), at=day(3)).verdict is Verdict.BROKEN


# Files that are missing or altered.


def test_the_tail_of_another_journal_does_not_fit(kept: Kept, tmp_path: Path) -> None:
    other = Kept.make(tmp_path / "other", policy_text())
    other.round(day(1))
    write(kept, *lines(kept)[:5], *lines(other)[5:])
    assert found(kept)["journal"] is Verdict.BROKEN


def test_a_journal_of_another_set_does_not_fit(kept: Kept, tmp_path: Path) -> None:
    other = Kept.make(tmp_path / "other", policy_text())
    shutil.copy(other.folder / "journal.jsonl", kept.folder / "journal.jsonl")
    assert found(kept)["journal"] is Verdict.BROKEN


def attestations(kept: Kept) -> list[Path]:
    return sorted(path for path in kept.folder.glob("attestations/*/*.json") if path.name != "challenge.json")


def test_documents_that_are_missing_or_altered_are_named_and_prove_nothing(kept: Kept) -> None:
    gone = attestations(kept)[-1]
    gone.unlink()
    audited = kept.audit(day(30))
    assert audited.verdict is Verdict.BROKEN
    assert gone.name in audited.reasons[0].what
    row = next(row for row in audited.custodians if row.name == gone.stem)
    assert row.proofs[-1].counts is False
    altered = attestations(kept)[0]
    altered.write_bytes(altered.read_bytes() + b"\n")
    audited = kept.audit(day(30))
    assert any(altered.name in reason.what and "altered" in reason.what for reason in audited.reasons)
    row = next(row for row in audited.custodians if row.name == altered.stem)
    assert [proof.counts for proof in row.proofs] == [False, True]


def test_a_forged_claim_is_named_and_counts_for_nothing(kept: Kept) -> None:
    """The operator enters a good attestation of a custodian who never answered: with an old answer, or with none."""
    challenge = kept.ask(day(26), ["dry-dock"])
    entry = next(
        e for e in kept.set.journal().entries if isinstance(e.event, Attested) and e.event.custodian == "dry-dock"
    )
    claim = entry.event.model_copy(update={"challenge": challenge.digest()})
    kept.append(claim, day(27), documents=entry.documents)
    audited = kept.audit(day(30))
    claims = [reason for reason in audited.reasons if reason.code == "claim"]
    assert [reason.level for reason in claims] == [Verdict.BROKEN]
    assert next(row for row in audited.custodians if row.name == "dry-dock").proofs[-1].counts is False
    kept.append(claim, day(28))
    assert sum(reason.code == "claim" for reason in kept.audit(day(30)).reasons) == 2


def test_an_answer_entered_for_another_custodian_counts_for_nobody(kept: Kept) -> None:
    journal = kept.set.journal().entries
    challenge = kept.ask(day(26))
    kept.answer(challenge, ["dry-dock"], day(27))
    answered = kept.set.journal().entries[len(journal) + 1]
    kept.append(answered.event.model_copy(update={"custodian": "registrar"}), day(28), documents=answered.documents)
    audited = kept.audit(day(30))
    assert "claim" in {reason.code for reason in audited.reasons}
    assert next(row for row in audited.custodians if row.name == "registrar").proofs[-1].counts is False


def test_the_same_answer_entered_twice_is_a_claim(kept: Kept) -> None:
    entry = next(e for e in reversed(kept.set.journal().entries) if isinstance(e.event, Attested))
    kept.append(entry.event, day(28), documents=entry.documents)
    assert found(kept)["claim"] is Verdict.BROKEN


def test_a_drill_that_only_the_journal_says_passed_did_not(kept: Kept) -> None:
    number = kept.drill("recovery", day(25), NAMES[:2])
    entry = kept.set.journal().entries[-1]
    kept.append(DrillClosed(what="drill-closed", drill=number, passed=True), day(26), documents=entry.documents)
    audited = kept.audit(day(30))
    assert "claim" in {reason.code for reason in audited.reasons}
    assert audited.drills[-1].passed is False


def test_a_report_of_a_drill_that_nobody_rehearsed_is_a_claim(kept: Kept) -> None:
    """Whoever holds the office's key writes a report of success over a drill in which no quorum came."""
    number = kept.drill("recovery", day(25), NAMES[:2])
    true = DrillReport.parse((kept.folder / f"drills/{number}/report.json").read_bytes())
    with unlocked(OFFICE) as key:
        forged = true.model_copy(update={"passed": True, "signatures": ()}).signed(key)
    named = kept.set.add(f"drills/{number}/report-2.json", forged.to_file())
    kept.append(DrillClosed(what="drill-closed", drill=number, passed=True), day(26), documents=[named])
    audited = kept.audit(day(30))
    assert [reason.code for reason in audited.reasons if reason.level is Verdict.BROKEN] == ["claim"]
    assert audited.drills[-1].passed is False


@pytest.mark.parametrize("name", ["record.json", "policy.toml", "journal.jsonl", PRACTICE_RECORD])
def test_a_file_that_is_missing(kept: Kept, name: str) -> None:
    (kept.folder / name).unlink()
    expected = {
        "record.json": ("record-unreadable", Verdict.BROKEN),
        "policy.toml": ("policy-missing", Verdict.AT_RISK),
        "journal.jsonl": ("journal-removed", Verdict.BROKEN),
        PRACTICE_RECORD: ("practice-missing", Verdict.DUE),
    }
    code, level = expected[name]
    assert found(kept)[code] is level


@pytest.mark.parametrize("name", ["record.json", "policy.toml", "journal.jsonl", PRACTICE_RECORD])
@pytest.mark.parametrize(
    "content", [b"", b"\x00", b"{}", b"[[[[", b'{"kind": "record", "version": 1}', b"\xff\xfe" * 50]
)
def test_a_file_of_rubbish(kept: Kept, name: str, content: bytes) -> None:
    (kept.folder / name).write_bytes(content)
    audited = kept.audit(day(30))
    assert audited.verdict is Verdict.BROKEN
    assert audited.reasons[0].what
    assert audited.reasons[0].next


@pytest.mark.parametrize("name", ["record.json", "policy.toml", "journal.jsonl", PRACTICE_RECORD])
def test_a_link_or_folder_in_a_files_place(kept: Kept, name: str, tmp_path: Path) -> None:
    path = kept.folder / name
    shutil.move(path, tmp_path / "elsewhere")
    path.symlink_to(tmp_path / "elsewhere")
    assert kept.audit(day(30)).verdict.rank >= Verdict.DUE.rank
    path.unlink()
    path.mkdir()
    assert kept.audit(day(30)).verdict.rank >= Verdict.DUE.rank


def test_the_policy_of_another_split_is_not_the_sets(kept: Kept) -> None:
    (kept.folder / "policy.toml").write_bytes(policy_text(attest_every="9999d"))
    assert found(kept)["policy-altered"] is Verdict.BROKEN
    assert kept.audit(day(30)).with_policy is False


def test_the_record_of_another_set_is_not_the_journals(kept: Kept, tmp_path: Path) -> None:
    other = Kept.make(tmp_path / "other", policy_text())
    shutil.copy(other.folder / "record.json", kept.folder / "record.json")
    assert found(kept)["journal"] is Verdict.BROKEN


def test_a_practice_record_of_another_set_is_none(kept: Kept, tmp_path: Path) -> None:
    other = Kept.make(tmp_path / "other", policy_text())
    shutil.copy(other.folder / PRACTICE_RECORD, kept.folder / PRACTICE_RECORD)
    assert found(kept)["practice-altered"] is Verdict.BROKEN


@given(st.data())
@settings(max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)
def test_no_flipped_bit_is_worth_a_better_verdict_and_none_raises(
    good: Kept, tmp_path: Path, data: st.DataObject
) -> None:
    folder = tmp_path / "flipped"
    shutil.copytree(good.folder, folder, dirs_exist_ok=True)
    files = sorted(path for path in folder.rglob("*") if path.is_file())
    path = data.draw(st.sampled_from(files))
    content = bytearray(path.read_bytes())
    bit = data.draw(st.integers(0, 8 * len(content) - 1))
    content[bit // 8] ^= 1 << bit % 8
    path.write_bytes(content)
    audited = audit(FolderFiles(folder), at=day(30))
    shutil.rmtree(folder)
    # What nothing names may change: white space of the record, which is read and not hashed as a file.
    assert audited.verdict is Verdict.BROKEN or path.name == "record.json"
    assert audited.verdict in (Verdict.BROKEN, Verdict.GOOD)


# Time.


def test_later_entries_are_checked_and_not_looked_at(kept: Kept) -> None:
    audited = kept.audit(day(3))
    assert audited.counts.later_entries == len(lines(kept)) - 7
    assert [note for note in audited.notes if "later time" in note]
    assert audited.drills == ()
    assert audited.margin
    assert audited.margin.confirmed == 5


def test_an_entry_of_the_future_is_due(kept: Kept, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module.clock, "now", lambda: day(30))
    assert audit(FolderFiles(kept.folder)).verdict is Verdict.GOOD
    kept.append(Noted(what="noted", remark="from tomorrow"), day(31))
    audited = audit(FolderFiles(kept.folder))
    assert (audited.verdict, audited.reasons[0].code) == (Verdict.DUE, "entries-in-future")


def test_a_clock_that_ran_backwards_is_noted(kept: Kept) -> None:
    kept.append(Noted(what="noted", remark="yesterday"), day(2))
    audited = kept.audit(day(30))
    assert audited.verdict is Verdict.GOOD
    assert any("time" in note for note in audited.notes)


def test_a_torn_last_line_is_noted(kept: Kept) -> None:
    with (kept.folder / "journal.jsonl").open("ab") as file:
        file.write(b'{"kind":"journal-en')
    audited = kept.audit(day(30))
    assert audited.verdict is Verdict.GOOD
    assert any("stopped" in note for note in audited.notes)


# What the life of a set shows.


def test_a_fresh_set_is_due_until_its_first_round_is(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", policy_text())
    assert found(kept, 1) == {"not-yet-attested": Verdict.DUE}
    assert found(kept, 90)["no-quorum"] is Verdict.AT_RISK
    kept.answer(kept.ask(day(2)), NAMES[:2], day(3))
    assert found(kept, 4) == {"not-yet-attested": Verdict.DUE}
    kept.answer(kept.ask(day(5), NAMES[2:]), NAMES[2:], day(6), damaged=True)
    assert found(kept, 7)["no-quorum"] is Verdict.AT_RISK


def test_no_margin_left_is_due(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", policy_text())
    kept.round(day(1), NAMES[:3])
    assert found(kept, 3) == {"no-margin": Verdict.DUE}
    everyone = Kept.make(tmp_path / "all", policy_text(need=5))
    everyone.round(day(1))
    assert found(everyone, 3) == {}  # Where all are needed by the rule, the plan said so.


def test_who_has_known_a_quorum_is_a_risk(kept: Kept) -> None:
    for name in ("registrar", "dry-dock"):
        kept.append(Transcribed(what="transcribed", custodian=name, persons=(PEOPLE["north-pier"],)), day(21))
    kept.round(day(22))
    (reason,) = kept.audit(day(30)).reasons
    assert (reason.level, reason.about) == (Verdict.AT_RISK, ("keeper one",))


def test_a_rule_that_one_satisfies_is_named_once(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", rule=Rule(1, NAMES))
    assert sum(reason.code == "one-knows-a-quorum" for reason in kept.audit(day(1)).reasons) == 1


def test_exceptions_are_told(kept: Kept) -> None:
    kept.append(Deviation(what="exception", remark="the cable was missing", remedy="another was fetched"), day(21))
    audited = kept.audit(day(30))
    assert audited.verdict is Verdict.GOOD
    assert [(row.what, row.remedy) for row in audited.exceptions] == [("the cable was missing", "another was fetched")]


def test_a_set_that_was_retired_is_due_nothing(kept: Kept) -> None:
    kept.append(Retired(what="retired", keep_until=day(800)), day(24))
    assert found(kept) == {"retired-with-copies": Verdict.AT_RISK}
    for name in NAMES:
        event = Destroyed(what="destroyed", custodian=name, copy="original", by=PEOPLE[name], witness="the auditor")
        kept.append(event, day(25))
    audited = kept.audit(day(700))
    assert (audited.verdict, audited.tasks) == (Verdict.GOOD, ())
    assert (audited.retired, audited.keep_until) == (day(24), day(800))


def test_an_earlier_epoch_proves_nothing_of_this_one(good: Kept, tmp_path: Path) -> None:
    """A journal goes on after new shares were dealt: attestations of the old ones do not count, nor are they claims."""
    renewed = Kept.make(tmp_path / "set", policy_text(), epoch=2, set_id=good.record.set, journal=False)
    event = good.set.journal().entries[0].event
    assert isinstance(event, Dealt)
    for name in ("journal.jsonl", "attestations", "drills"):
        shutil.move(shutil.copytree(good.folder, tmp_path / name) / name, renewed.folder / name)
    again = event.model_copy(update={"epoch": 2, "record": renewed.record.fingerprint, "practice": None})
    renewed.append(again, day(25))
    audited = renewed.audit(day(30))
    assert found(renewed) == {"not-yet-attested": Verdict.DUE}
    assert [row.status for row in audited.custodians] == ["not yet attested"] * 5
    assert audited.custodians[0].due == day(25) + timedelta(days=90)
    assert {row.epoch for row in audited.exposure} == {1, 2}
    old = next(row for row in audited.exposure if row.epoch == 1 and row.who == "keeper one")
    assert (old.shares, old.suffices, old.missing, old.recovered) == (("north-pier",), None, None, None)


class Refusing:
    """Files of which nothing can be read."""

    where = "a broken medium"

    def names(self) -> list[str]:
        raise StorageError("the medium reports an error", where=self.where)

    def read(self, name: str, *, limit: int) -> bytes:
        raise StorageError("the medium reports an error", where=name)


class Half(Refusing):
    """Files of which only the record can be read."""

    def __init__(self, kept: Kept) -> None:
        self.files = FolderFiles(kept.folder)

    def read(self, name: str, *, limit: int) -> bytes:
        return self.files.read(name, limit=limit) if name == "record.json" else super().read(name, limit=limit)


def test_a_medium_that_fails_is_a_finding(good: Kept) -> None:
    (reason,) = audit(Refusing(), at=day(30)).reasons
    assert (reason.level, reason.code) == (Verdict.BROKEN, "record-unreadable")
    codes = {reason.code for reason in audit(Half(good), at=day(30)).reasons}
    assert {"policy-unreadable", "journal-unreadable", "practice-altered"} - codes == {"practice-altered"}


def test_reasons_say_what_to_do() -> None:
    reason = Reason(Verdict.DUE, "code", "what", "next")
    assert Audit("here", START, Verdict.DUE, (reason,)).members()["reasons"] == [
        {"level": "due", "code": "code", "what": "what", "next": "next", "about": []}
    ]
