"""A journal on media that fail and in runs that are killed: what was reported as done stays, and nothing is half there.

Signals: signal(7); SIGKILL is struck at every system call that touches the set's folder. Media: a real one in memory,
full and then read-only; write(2), mount(8).
"""

from __future__ import annotations

import subprocess
from collections.abc import Callable, Sequence
from pathlib import Path

import pytest
from cli.harness import assert_one_line, run
from faults.tracing import at_each, counted, trace_with
from history.making import key, note, set_folder

from shares.errors import StorageError
from shares.history.files import FolderFiles
from shares.history.folder import SetFolder
from shares.history.journal import append, load_journal
from shares.history.verify import verify

TORN = b'{"cards":[],"docu'


def torn_set(folder: Path) -> Sequence[str | Path]:
    """A set whose journal ends in a torn line, and a command that adds to it, with a document."""
    set_folder(folder)
    with (folder / "journal.jsonl").open("ab") as journal:
        journal.write(TORN)
    paper = folder.with_name(f"{folder.name}.paper")
    paper.write_bytes(b"a paper")
    return ["journal", "add", folder, "noted", "--remark=after the storm", "--document", paper]


@pytest.mark.usefixtures("strace")
def test_a_run_that_is_killed_at_any_call_leaves_a_journal_to_go_on_with(tmp_path: Path) -> None:
    sites = counted(tmp_path, torn_set)
    assert {site.call for site in sites} >= {"openat", "write", "fsync", "ftruncate"}

    def killed(i: int, site: object) -> list[str]:
        folder = tmp_path / f"run{i}"
        trace_with(folder, torn_set(folder), site, "signal=KILL")  # type: ignore[arg-type]
        before = load_journal(folder)
        append(folder, note("goes on"))
        opened = SetFolder(folder)
        journal = opened.journal()
        problems = verify(journal, FolderFiles(folder), opened.record, None)
        # The torn line was kept, and is named by exactly one entry, whichever run wrote it.
        kept = [path.read_bytes() for path in folder.glob("journal.torn-*")]
        told = [entry.event.what for entry in journal.entries]
        whole = not [one for one in (*before.problems, *problems) if one.breaks]
        fine = TORN in kept and told.count("set-aside") == len(kept) and told[0] == "dealt" and told[-1] == "noted"
        return [] if whole and fine else [f"{site}: {told}, {problems}"]

    found = at_each(sites, killed)
    assert [one for run in found for one in run] == []
    assert len(found) > 20


@pytest.mark.parametrize("kib", [8, 12, 16])
def test_a_medium_that_fills_up_keeps_every_entry_that_was_reported(
    medium: Callable[[str, str], Path], kib: int
) -> None:
    stick = medium("stick", f"size={kib}k")
    folder = set_folder(stick / "set")
    done, refusal = 1, ""
    while not refusal:
        try:
            append(folder, note("x" * 400), keys=[key()] if done % 7 == 0 else [])
            done += 1
        except StorageError as error:
            refusal = error.what
    assert refusal == "the medium is full"
    journal = load_journal(folder)
    assert (journal.problems, len(journal.entries)) == ((), done)
    (stick / "set" / "record.json").unlink()
    append(folder, note("room again"))
    assert len(load_journal(folder).entries) == done + 1


def test_a_read_only_medium_is_told_and_read(medium: Callable[[str, str], Path]) -> None:
    stick = medium("stick", "size=1m")
    folder = set_folder(stick / "set")
    subprocess.run(["mount", "-o", "remount,ro", stick], check=True)
    done = run("journal", "add", folder, "noted", "--remark=no")
    assert (done.code, "the medium is read-only" in assert_one_line(done)) == (5, True)
    assert run("journal", "verify", folder).code == 0
    assert run("journal", "head", folder).code == 0
