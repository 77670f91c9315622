"""Openings from folder to folder: the engine of tasks, sealed boxes, files and journals, with the parts of an opening.

Checked against: a sender that shares no code with the package (``openings``).
"""

from __future__ import annotations

import secrets
import shutil
from datetime import UTC, datetime
from pathlib import Path

import pytest
from keys.openings import (
    PLAINTEXT,
    Quorum,
    message_of,
    octets,
)
from parties import card, unlocked

from shares.documents.task import Task
from shares.errors import (
    NotEnoughSharesError,
)
from shares.history import next as engine
from shares.history.exchange import TaskFolder
from shares.history.standing import standing
from shares.history.steps import OwnSteps
from shares.keys.opening import Opened, OpeningCourse, OpeningPart, combine
from shares.memory import Secret


class Desk:
    """One party's machine: its own copy of the task's folder, and its own folder."""

    def __init__(self, root: Path, quorum: Quorum, task: Task, message: bytes, name: str) -> None:
        self.task, self.name = task, name
        self.mine = root / name / "mine"
        self.mine.mkdir(parents=True)
        self.folder = TaskFolder.create(root / name / "task", task, content=message, record=quorum.record)
        self.course = OpeningCourse(task, quorum.record)
        self.own = OwnSteps(self.mine, task, card(name))
        self.record = quorum.record
        with unlocked(name) as key:
            self.part = OpeningPart(task, name, quorum.record, quorum.shares.get(name), key, self.mine)

    def take(self) -> str:
        at = engine.turn(self.folder, self.course, self.own)
        with unlocked(self.name) as key:
            part = OpeningPart(self.task, self.name, self.record, self.part._share, key, self.mine)
            if at.doing in ("speak", "repeat"):
                engine.speak(self.folder, at, self.course, part, self.own, key)
            elif at.doing == "finish":
                engine.finish(at, self.course, part, self.own, key)
        return at.doing

    def opened(self) -> Opened:
        found = standing(self.course, self.folder.read())
        with unlocked(self.name) as key, engine.opened(found.inbox, self.course, self.own, key) as (_, received):
            return combine(self.task, self.record, found.inbox, received)

    def send(self, other: Desk) -> None:
        shutil.copytree(self.folder.path / "messages", other.folder.path / "messages", dirs_exist_ok=True)


def desks(root: Path, quorum: Quorum, receiver: str, *custodians: str) -> tuple[Desk, list[Desk]]:
    message = message_of(quorum)
    task = quorum.task(message, *custodians, receiver=receiver, due=datetime(2099, 12, 8, tzinfo=UTC))
    made = {name: Desk(root, quorum, task, message, name) for name in task.names}
    return made[receiver], [made[name] for name in OpeningCourse(task, quorum.record).custodians]


def test_an_opening_goes_from_folder_to_folder(tmp_path) -> None:
    quorum = Quorum(tmp_path, 2, 3)
    receiver, custodians = desks(tmp_path / "desks", quorum, "auditor-east")
    assert [one.take() for one in custodians] == ["wait"] * 3
    assert receiver.take() == "speak"
    for one in custodians[:2]:
        receiver.send(one)
        assert one.take() == "speak"
        one.send(receiver)
    # Two of three are enough, though the third is still awaited.
    assert receiver.take() == "wait"
    assert octets(receiver.opened().plaintext) == PLAINTEXT
    receiver.send(custodians[2])
    assert custodians[2].take() == "speak"
    custodians[2].send(receiver)
    assert receiver.take() == "finish"
    assert receiver.take() == "finish"  # What opens the message stays until it was used.
    opened = receiver.opened()
    assert opened.set_aside == ()
    assert octets(opened.plaintext) == PLAINTEXT
    engine.close(receiver.own)
    assert receiver.take() == "done"
    with pytest.raises(NotEnoughSharesError):  # And is gone afterwards.
        receiver.opened()
    receiver.send(custodians[0])
    assert custodians[0].take() == "finish"
    assert custodians[0].take() == "done"
    assert PLAINTEXT not in b"".join(path.read_bytes() for path in tmp_path.rglob("*") if path.is_file())


def test_a_receiver_who_is_a_custodian_seals_for_themselves_as_well(tmp_path) -> None:
    quorum = Quorum(tmp_path, 2, 3)
    receiver, custodians = desks(tmp_path / "desks", quorum, "south-pier", "south-pier", "north-pier")
    assert receiver in custodians
    assert receiver.take() == "speak"
    assert receiver.take() == "speak"
    north = custodians[0]
    receiver.send(north)
    assert north.take() == "speak"
    north.send(receiver)
    assert octets(receiver.opened().plaintext) == PLAINTEXT


def test_a_custodian_who_cheats_is_named_from_folder_to_folder(tmp_path) -> None:
    quorum = Quorum(tmp_path, 2, 3)
    receiver, custodians = desks(tmp_path / "desks", quorum, "auditor-east")
    receiver.take()
    for one in custodians:
        receiver.send(one)
        with pytest.MonkeyPatch.context() as cheat:
            if one.name == "south-pier":
                cheat.setattr("shares.keys.opening.partial_result", lambda *_: Secret.of(secrets.token_bytes(96)))
            one.take()
        one.send(receiver)
    opened = receiver.opened()
    assert [one.by for one in opened.set_aside] == ["south-pier"]
    assert octets(opened.plaintext) == PLAINTEXT
