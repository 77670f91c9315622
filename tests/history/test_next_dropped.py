"""A task that a party has given up: wherever it or giving it up was stopped, nothing more is said in it.

Checked against: nothing outside; the order of giving up is this project's own (shares/documents/FORMAT_KEYS.md,
sec. 25).
"""

from __future__ import annotations

from pathlib import Path
from unittest import mock

import pytest
from history.exchanging import NAMES, Desk, desks, exchange
from parties import unlocked

from shares.documents.key_event import TaskFailed
from shares.errors import ParameterError, SharesError
from shares.history import next as engine
from shares.history import steps as steps_module
from shares.history.exchange import TaskFolder
from shares.history.journal import load_journal
from shares.history.steps import OwnSteps


class Killed(BaseException):
    """Stands for the end of the process."""


def drop(desk: Desk, erased: list[str]) -> bool:
    task = TaskFolder(desk.folder).task
    event = TaskFailed(what="task-failed", task=task.digest(), work="join", by=None, reason="given up")
    with unlocked(desk.name) as key:
        return engine.drop(desk.own(), lambda: event, key, lambda: erased.append(desk.name))


def kept(desk: Desk) -> list[str]:
    return sorted(path.name for path in desk.own().folder.iterdir())


def entries(desk: Desk) -> list[str]:
    return [entry.event.what for entry in load_journal(desk.mine).entries]


def test_what_was_kept_and_never_released_is_not_released_after_giving_up(tmp_path: Path) -> None:
    desk = desks(tmp_path)["north-pier"]
    with mock.patch.object(TaskFolder, "release", side_effect=Killed), pytest.raises(Killed):
        desk.take()
    before = desk.turn()
    assert (before.doing, kept(desk)) == ("repeat", ["step-0.json"])
    assert drop(desk, [])
    assert (desk.take(), kept(desk)) == ("done", ["done.json"])
    # A run that had read the folder before is as late.
    with unlocked(desk.name) as key, pytest.raises(SharesError, match="has given the task up"):
        engine.speak(TaskFolder(desk.folder), before, desk.course, desk.part, desk.own(), key)
    assert not list(desk.messages.iterdir())
    assert entries(desk) == ["task-failed"]


def test_what_was_released_is_not_sent_again_after_giving_up(tmp_path: Path) -> None:
    desk = desks(tmp_path)["north-pier"]
    desk.take()
    drop(desk, [])
    for path in desk.messages.iterdir():
        path.unlink()
    assert desk.take() == "done"
    assert not list(desk.messages.iterdir())


@pytest.mark.parametrize(
    ("owner", "name"), [(engine, "_enter"), (engine, "append"), (OwnSteps, "close"), (steps_module, "discard")]
)
def test_giving_up_holds_wherever_it_is_stopped_and_is_completed_by_repeating_it(
    tmp_path: Path, owner: object, name: str
) -> None:
    machines = desks(tmp_path)
    desk, erased = machines["north-pier"], list[str]()
    for one in machines.values():
        one.take()
    exchange(machines)
    with mock.patch.object(owner, name, side_effect=Killed), pytest.raises(Killed):
        drop(desk, erased)
    said = sorted(desk.messages.iterdir())
    assert (desk.take(), desk.take()) == ("done", "done")
    assert sorted(desk.messages.iterdir()) == said
    assert drop(desk, erased)
    assert (kept(desk), entries(desk)) == (["done.json"], ["task-failed"])
    # Even with no steps left: what lies elsewhere may have to be erased still.
    before = len(erased)
    assert drop(desk, erased)
    assert (len(erased), entries(desk)) == (before + 1, ["task-failed"])


def test_of_a_task_that_has_come_to_its_end_only_what_is_left_is_erased(tmp_path: Path) -> None:
    machines = desks(tmp_path)
    desk, erased = machines["north-pier"], list[str]()
    for _ in range(3):
        for name in NAMES:
            machines[name].take()
        exchange(machines)
    with mock.patch.object(OwnSteps, "remains", side_effect=Killed), pytest.raises(Killed):
        desk.take()
    assert {"done.json", "step-2.json"} < set(kept(desk))
    assert not drop(desk, erased)
    assert (kept(desk), entries(desk), erased) == (["done.json"], ["task-finished"] * 2, [])
    with pytest.raises(ParameterError, match="the task is over for north-pier"):
        drop(desk, erased)
