"""Audits of many sets: found, shared out to whatever executor, and never one's failure another's.

Checked against: the audit of each set by itself; ``concurrent.futures`` of the standard library, and the local cluster
of ``distributed``, an engine that somebody may already run.
"""

from __future__ import annotations

import os
import shutil
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor, ThreadPoolExecutor
from contextlib import AbstractContextManager, contextmanager
from multiprocessing import get_context
from pathlib import Path

import deadly
import pytest
from kept import NAMES, OFFICE, Kept, day, policy_text
from parties import card

from shares.errors import ParameterError, StorageError
from shares.evidence import many
from shares.evidence.audit import audit
from shares.evidence.audited import Audit, Verdict
from shares.evidence.many import audit_many, find_sets
from shares.history.files import FolderFiles
from shares.history.pack import write_pack

AT = day(30)
COPIES, TOTAL = 14, 19


@pytest.fixture(autouse=True)
def _small_chunks(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(many, "_CHUNK", 4)


@pytest.fixture(scope="module")
def sets(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder of sets: good ones, a fresh one, a broken one, a pack, and something else."""
    folder = tmp_path_factory.mktemp("many") / "sets"
    good = Kept.make(folder / "a-good", policy_text())
    good.round(day(1))
    for i in range(COPIES):
        shutil.copytree(good.folder, folder / f"b-copy-{i:02}")
    Kept.make(folder / "c-fresh", policy_text())
    shutil.copytree(good.folder, folder / "d-broken")
    (folder / "d-broken/record.json").write_bytes(b"{}")
    write_pack(FolderFiles(good.folder), folder / "e-pack.tar")
    (folder / "f-no-pack.tar").write_bytes(b"\x00" * 700)
    (folder / "g-empty").mkdir()
    (folder / "notes.txt").write_text("no set")
    return folder


@pytest.fixture(scope="module")
def alone(sets: Path) -> list[Audit]:
    """The audit of each, one after the other, in this process."""
    return list(audit_many(find_sets([sets]).sets, jobs=1, at=AT))


# Finding them.


def test_folders_packs_and_folders_of_these_are_found(sets: Path) -> None:
    found = find_sets([sets])
    names = [os.path.basename(path) for path in found.sets]
    assert names == sorted(names)
    assert {"a-good", "c-fresh", "d-broken", "e-pack.tar", "f-no-pack.tar"} <= set(names)
    assert len(names) == TOTAL
    assert [os.path.basename(path) for path in found.passed_over] == ["g-empty"]


def test_what_is_named_keeps_its_order_and_stands_once(sets: Path) -> None:
    named = [sets / "e-pack.tar", sets / "a-good", sets / "e-pack.tar"]
    assert find_sets(named).sets == (str(named[0]), str(named[1]))
    assert find_sets([sets / "a-good", sets]).sets[0] == str(sets / "a-good")
    assert len(find_sets([sets / "a-good", sets]).sets) == TOTAL


def test_a_folder_with_a_journal_alone_is_a_set_that_lost_its_record(sets: Path, tmp_path: Path) -> None:
    (tmp_path / "set").mkdir()
    shutil.copy(sets / "a-good/journal.jsonl", tmp_path / "set/journal.jsonl")
    (found,) = audit_many(find_sets([tmp_path / "set"]).sets, at=AT)
    assert (found.verdict, found.reasons[0].code) == (Verdict.BROKEN, "record-unreadable")


def test_where_there_is_no_set_that_is_said(tmp_path: Path) -> None:
    with pytest.raises(ParameterError, match="holds no set"):
        find_sets([tmp_path])
    with pytest.raises(StorageError, match="does not exist"):
        find_sets([tmp_path / "nowhere"])


# Doing them.


def test_one_after_the_other_is_what_each_is_alone(sets: Path, alone: list[Audit]) -> None:
    by_name = {os.path.basename(one.where): one for one in alone}
    assert by_name["a-good"] == audit(FolderFiles(sets / "a-good"), at=AT)
    assert by_name["a-good"].verdict is Verdict.GOOD
    assert by_name["c-fresh"].verdict is Verdict.DUE
    assert by_name["d-broken"].verdict is Verdict.BROKEN
    assert by_name["e-pack.tar"].verdict is Verdict.GOOD
    assert (by_name["f-no-pack.tar"].verdict, by_name["f-no-pack.tar"].reasons[0].code) == (
        Verdict.BROKEN,
        "unreadable",
    )


@contextmanager
def cluster() -> Iterator[Executor]:
    from distributed import Client, LocalCluster

    with (
        LocalCluster(n_workers=2, threads_per_worker=1, dashboard_address=None, silence_logs=50) as local,
        Client(local) as client,
    ):
        yield client.get_executor()


EXECUTORS: dict[str, Callable[[], AbstractContextManager[Executor]]] = {
    "threads": lambda: ThreadPoolExecutor(3),
    "processes": lambda: ProcessPoolExecutor(2, mp_context=get_context("forkserver")),
    "a cluster": cluster,
}


@pytest.mark.parametrize("kind", EXECUTORS)
def test_any_executor_finds_the_same_in_the_same_order(sets: Path, alone: list[Audit], kind: str) -> None:
    with EXECUTORS[kind]() as executor:
        assert list(audit_many(find_sets([sets]).sets, executor=executor, at=AT)) == alone
        # It is the caller's, and goes on.
        assert list(audit_many(find_sets([sets]).sets[:3], executor=executor, at=AT)) == alone[:3]


@pytest.mark.parametrize("jobs", [None, 2, 5])
def test_processes_of_our_own_find_the_same(sets: Path, alone: list[Audit], jobs: int | None) -> None:
    told = []
    found = audit_many(
        find_sets([sets]).sets, jobs=jobs, at=AT, progress=lambda done, total: told.append((done, total))
    )
    assert list(found) == alone
    assert told == [(i, TOTAL) for i in range(TOTAL)]


def test_trusted_cards_travel_along(sets: Path) -> None:
    paths = find_sets([sets]).sets[:9]
    assert all(
        one.verdict is Verdict.GOOD and one.signers[0].trusted
        for one in audit_many(paths, jobs=2, at=AT, trusted=[card(OFFICE)])
    )
    assert all(one.verdict is Verdict.AT_RISK for one in audit_many(paths, jobs=2, at=AT, trusted=[card(NAMES[0])]))


class Counting(Executor):
    """Does everything at once, and counts what is not yet taken back."""

    def __init__(self) -> None:
        self.waiting = self.most = 0

    def submit(self, fn, /, *args, **kwargs):  # type: ignore[no-untyped-def]
        self.waiting += 1
        self.most = max(self.most, self.waiting)
        future: Future[object] = Future()
        future.set_result(fn(*args, **kwargs))
        return future


def test_no_more_is_handed_over_than_is_soon_taken_back(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(many, "_CHUNK", 1)
    counting = Counting()
    for _ in audit_many([f"/nowhere/{i}" for i in range(500)], executor=counting, at=AT):
        counting.waiting -= 1
    assert counting.most <= many._IN_FLIGHT


def test_stopping_early_is_clean(sets: Path) -> None:
    some = audit_many(find_sets([sets]).sets, jobs=2, at=AT)
    assert next(some).verdict is Verdict.GOOD
    some.close()  # type: ignore[attr-defined]


def test_no_sets_and_no_jobs() -> None:
    assert list(audit_many([])) == []
    with pytest.raises(ParameterError, match="one process"):
        list(audit_many(["x"], jobs=0))


# One set's failure.


def with_one_called(sets: Path, tmp_path: Path, name: str) -> list[Path]:
    """Good sets, and one in their midst that is called so."""
    shutil.copytree(sets / "a-good", tmp_path / name)
    paths = [sets / f"b-copy-{i:02}" for i in range(COPIES)]
    return [*paths[:9], tmp_path / name, *paths[9:]]


def test_a_fault_in_this_program_is_told_of_its_set_alone(
    sets: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(many, "audit", deadly.audit)
    found = list(audit_many(with_one_called(sets, tmp_path, deadly.FAULTY), jobs=1, at=AT))
    assert [one.verdict for one in found].count(Verdict.GOOD) == COPIES
    (reason,) = found[9].reasons
    assert (found[9].verdict, reason.code) == (Verdict.BROKEN, "fault")
    assert "LookupError at deadly:" in reason.what
    assert "made up" not in reason.what


@pytest.mark.parametrize("jobs", [2, 4])
def test_a_process_that_dies_takes_no_other_set_with_it(
    sets: Path, tmp_path: Path, jobs: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(many, "_processes", deadly.processes)
    paths = with_one_called(sets, tmp_path, deadly.DEADLY)
    found = list(audit_many(paths, jobs=jobs, at=AT))
    assert [one.where for one in found] == [str(path) for path in paths]
    assert [one.verdict for one in found].count(Verdict.GOOD) == COPIES
    assert (found[9].verdict, found[9].reasons[0].code) == (Verdict.BROKEN, "broken-off")


class Losing(Executor):
    """Loses whatever holds a path that it does not like."""

    def submit(self, fn, /, paths):  # type: ignore[no-untyped-def]
        future: Future[object] = Future()
        if any(path.endswith(deadly.DEADLY) for path in paths):
            future.set_exception(MemoryError("a worker elsewhere"))
        else:
            future.set_result(fn(paths))
        return future


class Closed(Executor):
    """Takes nothing."""

    def submit(self, fn, /, paths):  # type: ignore[no-untyped-def]
        raise RuntimeError("cannot schedule new futures after shutdown")


def test_what_an_executor_loses_is_tried_alone(sets: Path, tmp_path: Path) -> None:
    paths = with_one_called(sets, tmp_path, deadly.DEADLY)
    found = list(audit_many(paths, executor=Losing(), at=AT))
    assert [one.where for one in found] == [str(path) for path in paths]
    assert [one.reasons[0].code for one in found if one.verdict is not Verdict.GOOD] == ["broken-off"]


def test_an_executor_that_takes_nothing_is_told_of_each_set(sets: Path) -> None:
    found = list(audit_many(find_sets([sets]).sets, executor=Closed(), at=AT))
    assert [one.reasons[0].code for one in found] == ["broken-off"] * TOTAL


@pytest.mark.slow
def test_ten_thousand_sets_in_one_call(sets: Path, tmp_path: Path) -> None:
    for i in range(10_000):
        shutil.copytree(sets / "a-good", tmp_path / f"{i:05}", copy_function=os.link)
    found = audit_many(find_sets([tmp_path]).sets, at=AT)
    verdicts = [one.verdict for one in found]
    assert verdicts == [Verdict.GOOD] * 10_000
