"""A custodian's step in a task, killed at every system call and on media that fail: one message for ever, or none.

Signals: signal(7); SIGKILL is struck at every system call that touches the folders. Media: a real one in memory, full;
write(2), mount(8). The task is a real one: three parties generate a key.
"""

from __future__ import annotations

import functools
import shutil
import tempfile
from collections.abc import Callable, Sequence
from pathlib import Path

import pytest
from cli.harness import assert_one_line, run
from faults.tracing import Site, at_each, counted, distinct, trace_with
from history.exchanging import NAMES, new_task
from parties import party, unlocked

from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.history.exchange import TaskFolder
from shares.history.journal import load_journal
from shares.history.steps import OwnSteps
from shares.keys.own_share import own_share
from shares.storage import leftovers

ME = "north-pier"


def arguments(folder: Path, name: str = ME) -> Sequence[str | Path]:
    own = ["--mine", folder / name, "--key", folder / f"{name}.key.json"]
    return ["task", "next", folder / "task", *own, "--passphrase-file", folder / f"{name}.passphrase", "--yes"]


@functools.cache
def templates() -> dict[str, Path]:
    """The folders before north-pier's turn to deal, and before its turn to finish."""
    root = Path(tempfile.mkdtemp())
    folder = root / "run"
    folder.mkdir()
    for name in NAMES:
        (folder / f"{name}.key.json").write_bytes(party(name).to_file())
        (folder / f"{name}.passphrase").write_text(f"the passphrase of {name}\n")
    TaskFolder.create(folder / "task", new_task())
    for name in NAMES:
        assert run(*arguments(folder, name)).code == 0
    shutil.copytree(folder, root / "dealing")
    while len(list((folder / "task" / "messages").glob("5-*.json"))) < len(NAMES):
        for name in NAMES:  # north-pier first: it never is the last to speak, who goes on to the end
            assert run(*arguments(folder, name)).code == 0
    shutil.copytree(folder, root / "finishing")
    return {"dealing": root / "dealing", "finishing": root / "finishing"}


def prepared(which: str) -> Callable[[Path], Sequence[str | Path]]:
    def prepare(folder: Path) -> Sequence[str | Path]:
        shutil.copytree(templates()[which], folder)
        return arguments(folder)

    return prepare


def own(folder: Path) -> OwnSteps:
    return OwnSteps(folder / ME, TaskFolder(folder / "task").task, party(ME).card)


def wrong_after_dealing(folder: Path) -> list[str]:
    """What is wrong after a run that was killed, and the next one."""
    kept = own(folder).messages().get(1)
    done = run(*arguments(folder))
    found = [] if done.code == 0 else [done.err]
    said = [one for one in TaskFolder(folder / "task").read().signed if (one.sender, one.round) == (ME, 1)]
    if len(said) != 1 or (kept is not None and said[0] != kept) or own(folder).messages()[1] != said[0]:
        found.append("another message than the one that was kept")
    return found


def wrong_after_finishing(folder: Path) -> list[str]:
    before = {path.name: path.read_bytes() for path in (folder / ME).glob("*.json")}
    done = run(*arguments(folder))
    found = [] if done.code == 0 else [done.err]
    after = {path.name: path.read_bytes() for path in (folder / ME).glob("*.json")}
    if set(after) != {"share.json", "record.json"} or any(after[name] != data for name, data in before.items()):
        found.append(f"files {sorted(before)}, then {sorted(after)}")
    record = KeyRecord.parse(after["record.json"])
    with unlocked(ME) as key:
        own_share(KeyShare.parse(after["share.json"]), record, ME, key.open)
    if [entry.event.what for entry in load_journal(folder / ME).entries] != [*["approved"] * 2, "key-born"]:
        found.append("the journal tells it otherwise")
    if [path.name for path in own(folder).folder.iterdir()] != ["done.json"] or leftovers(own(folder).folder):
        found.append("something was not erased")
    return found


@pytest.mark.usefixtures("strace")
@pytest.mark.parametrize(
    ("which", "wrong"),
    [("dealing", wrong_after_dealing), ("finishing", wrong_after_finishing)],
    ids=["dealing", "finishing"],
)
def test_a_step_that_is_killed_at_any_call_is_gone_on_with(
    tmp_path: Path, which: str, wrong: Callable[[Path], list[str]]
) -> None:
    sites = distinct(counted(tmp_path, prepared(which)))
    assert {site.call for site in sites} >= {"openat", "write", "fsync", "flock"}

    def kill(i: int, site: Site) -> None:
        folder = tmp_path / f"run{i}"
        trace_with(folder, prepared(which)(folder), site, "signal=KILL")

    at_each(sites, kill)
    found = []
    for i, site in enumerate(sites):  # one after another: the program's own streams are this process's
        found += [f"{site}: {one}" for one in wrong(tmp_path / f"run{i}")]
    assert found == []
    assert len(sites) > 20


@pytest.mark.parametrize("kib", [4, 8, 16, 24, 32])
def test_a_full_medium_leaves_one_message_or_none(medium: Callable[[str, str], Path], tmp_path: Path, kib: int) -> None:
    """The party's own folder, or the task's, on a medium with little room left."""
    for place in (ME, "task"):
        folder = tmp_path / f"{place}{kib}"
        prepared("dealing")(folder)
        stick = medium(f"{place}{kib}-stick", "size=2m")
        shutil.copytree(folder / place, stick / place)
        shutil.rmtree(folder / place)
        (folder / place).symlink_to(stick / place)
        room = shutil.disk_usage(stick).free - kib * 1024
        (stick / "filler").write_bytes(bytes(room))
        done = run(*arguments(folder))
        kept = own(folder).messages().get(1)
        if done.code:
            assert (done.code, "the medium is full" in assert_one_line(done)) == (5, True)
        (stick / "filler").unlink()
        assert wrong_after_dealing(folder) == []
        assert kept is None or own(folder).messages()[1] == kept
