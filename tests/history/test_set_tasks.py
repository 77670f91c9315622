"""Which tasks `resolved` may speak of: those that an entry has set, and no other; the refusal lists the open ones.

Source: this project's own (FORMAT_EVIDENCE.md, sec. 16, `resolved`).
"""

from __future__ import annotations

from pathlib import Path

import pytest
from history.making import START, set_folder

from shares.documents.drill_report import Action, DrillReport
from shares.documents.event import make_event
from shares.errors import ParameterError, StorageError
from shares.history.folder import SetFolder
from shares.history.set_tasks import check_task, open_tasks


def report(folder: SetFolder, actions: int) -> bytes:
    head = folder.journal().head
    assert head
    return DrillReport(
        kind="drill-report", version=1, set=folder.record.set, epoch=1, record=folder.record.fingerprint,
        label="Tide archive", drill=8, drill_kind="attendance", scope="who comes", objectives=(), opened=START,
        closed=START, participants=(), persons=(), steps=(), recovery_seconds=None, target_seconds=None, passed=True,
        findings=(), actions=tuple(Action(owner="A", due=START, what=f"do {i}") for i in range(1, actions + 1)),
        journal=head, signatures=(),
    ).to_file()  # fmt: skip


@pytest.fixture
def folder(tmp_path: Path) -> SetFolder:
    """Entries 2 to 7 are of what sets tasks and what does not; drill 8 is closed by entry 9, drill 10 is open."""
    made = SetFolder(set_folder(tmp_path / "set"))
    name = "north-pier"
    recovered = {"custodians": (name,), "persons": (), "reason": "the disk failed"}
    made.append(make_event("departed", person="A. Keeper", custodians=(name,), due=START))
    made.append(make_event("incident", custodians=(name,), persons=(), exposed=True, due=START, remark="seen"))
    made.append(make_event("recovered", disposition="replace", by=START, **recovered))
    made.append(make_event("recovered", disposition="returned", **recovered))
    made.append(make_event("lost", custodian=name, copy="original", by="A", witness="B", reason="the flood"))
    made.append(make_event("noted", remark="calm"))
    opened = {"kind": "attendance", "scope": "who comes", "objectives": (), "custodians": (name,), "target": None}
    made.append(make_event("drill-opened", **opened))
    filed = made.add("drills/8/report.json", report(made, 2))
    made.append(make_event("drill-closed", drill=8, passed=True), documents=[filed])
    made.append(make_event("drill-opened", **opened))
    return made


OPEN = [(2, None), (3, None), (4, None), (6, None), (9, 1), (9, 2)]


def test_tasks_are_open_until_they_are_resolved(folder: SetFolder) -> None:
    assert [task[:2] for task in open_tasks(folder, folder.journal())] == OPEN
    for entry, action in ((3, None), (8, 1), (9, 2)):
        folder.append(make_event("resolved", entry=entry, action=action, how="done"))
    assert [task[:2] for task in open_tasks(folder, folder.journal())] == [(2, None), (4, None), (6, None)]


@pytest.mark.parametrize(("entry", "action"), [*OPEN, (8, 1), (8, 2)])
def test_what_was_set_can_be_resolved(folder: SetFolder, entry: int, action: int | None) -> None:
    check_task(folder, entry, action, "key replaced" if entry == 4 else "done")


def test_only_a_new_key_ends_what_a_recovery_asks_for(folder: SetFolder) -> None:
    with pytest.raises(ParameterError, match="--how: entry 4 asks for a new key"):
        check_task(folder, 4, None, "refreshed")
    folder.append(make_event("resolved", entry=4, action=None, how="refreshed"))
    assert (4, None) in [task[:2] for task in open_tasks(folder, folder.journal())]
    folder.append(make_event("resolved", entry=4, action=None, how="key replaced"))
    assert (4, None) not in [task[:2] for task in open_tasks(folder, folder.journal())]


@pytest.mark.parametrize(
    ("entry", "action", "words"),
    [
        (1, None, "--entry: entry 1 sets no task: it is dealt"),
        (5, None, "--entry: entry 5 sets no task: it is recovered"),
        (7, None, "--entry: entry 7 sets no task: it is noted"),
        (11, None, "--entry: the journal has no entry 11"),
        (2, 1, "--action: entry 2 is departed, and no drill's report"),
        (8, None, "--action: entry 8 is about drill 8, whose actions are done one by one"),
        (9, 3, "--action: the report of drill 8 has 2 actions"),
        (10, 1, "--entry: drill 10 is not closed"),
    ],
)
def test_what_was_not_set_is_refused_and_what_is_open_listed(
    folder: SetFolder, entry: int, action: int | None, words: str
) -> None:
    with pytest.raises(ParameterError) as refusal:
        check_task(folder, entry, action, "done")
    assert words in str(refusal.value)
    assert "open: --entry 2 (A. Keeper leaves" in str(refusal.value)
    assert "--entry 9 --action 1 (do 1); and 1 more" in str(refusal.value)


def test_a_report_that_is_gone_is_named_and_nothing_else_is_hidden(folder: SetFolder) -> None:
    (folder.path / "drills/8/report.json").unlink()
    with pytest.raises(StorageError, match=r"report\.json"):
        check_task(folder, 9, 1, "done")
    assert [task[:2] for task in open_tasks(folder, folder.journal())] == OPEN[:4]


def test_where_nothing_is_open_it_says_so(tmp_path: Path) -> None:
    with pytest.raises(ParameterError, match="no task is open"):
        check_task(SetFolder(set_folder(tmp_path / "set")), 1, None, "done")
