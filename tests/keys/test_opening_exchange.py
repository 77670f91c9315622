"""Openings from folder to folder: the engine of tasks, sealed boxes, files and journals, with the parts of an opening.

Checked against: a sender that shares no code with the package (``openings``).
"""

from __future__ import annotations

import secrets
import shutil
from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest
from keys.openings import (
    PLAINTEXT,
    Quorum,
    message_of,
    octets,
)
from parties import card, unlocked
from strategies import CREATED

from shares.documents.task import Task
from shares.documents.task_message import Body, Partial, Review, SealedFor, TaskMessage
from shares.errors import NotEnoughSharesError, VerificationError
from shares.history import next as engine
from shares.history.exchange import TaskFolder
from shares.history.standing import standing
from shares.history.steps import OwnSteps
from shares.keys.finishing import open_message
from shares.keys.folder import KeyFolder
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


def partial_by(desk: Desk, *, body: Body | None = None, box: bool = True, **changes: Any) -> None:
    """Put something that a custodian has signed for the round of partial results into the receiver's folder."""
    here = standing(desk.course, desk.folder.read()).before(1)
    members = {"seen": here.seen(1), "created": CREATED, **changes}
    sealed = (SealedFor(to=desk.task.work.receiver, box=bytes(80)),) if box else ()
    with unlocked(desk.name) as key:
        message = TaskMessage.signed_by(
            key,
            task=desk.task.digest(),
            round=1,
            sender=desk.name,
            body=body or Partial(what="partial"),
            sealed=sealed,
            **members,
        )
    (desk.folder.path / "messages" / f"x{message.digest().hex()}.json").write_bytes(message.to_file())


SURPLUS: dict[str, list[dict[str, Any]]] = {
    "another view": [{"seen": bytes(32)}],
    "late": [{"created": datetime(2100, 1, 1, tzinfo=UTC)}],
    "two things": [{}, {"created": datetime(2099, 1, 1, tzinfo=UTC)}],
    "no partial result": [{"box": False}, {"body": Review(what="review", complaints=())}],
}


def finished(desk: Desk, quorum: Quorum) -> tuple[list[bytes], Sequence[str]]:
    """What the receiver has in the end, by ``key finish``."""
    with unlocked("harbour-office") as dealer:
        signed = quorum.record.signed([quorum.record.signature_by(dealer)])
    (desk.mine / "record.json").write_bytes(signed.to_file())
    taken: list[bytes] = []

    def take(plaintext: Secret) -> None:
        with plaintext.view() as view:
            taken.append(bytes(view))

    with unlocked(desk.name) as key:
        words = open_message(KeyFolder(desk.mine), desk.folder, key, take)
    return taken, words


@pytest.mark.parametrize("surplus", SURPLUS.values(), ids=SURPLUS)
@pytest.mark.parametrize("first", [False, True])
def test_a_custodian_who_is_not_needed_stops_nothing(
    tmp_path: Path, surplus: list[dict[str, Any]], first: bool
) -> None:
    quorum = Quorum(tmp_path, 2, 3)
    receiver, custodians = desks(tmp_path / "desks", quorum, "auditor-east")
    receiver.take()
    for one in (custodians[2], *custodians[:2]) if first else custodians:
        receiver.send(one)
        if one is custodians[2]:
            for changes in surplus:
                partial_by(one, **changes)
        else:
            assert one.take() == "speak"
        one.send(receiver)
    taken, words = finished(receiver, quorum)
    assert taken == [PLAINTEXT]
    assert custodians[2].name in " ".join(words)
    assert receiver.take() == "done"
    # The others are done as well, and do not wait for it.
    receiver.send(custodians[0])
    assert custodians[0].take() == "finish"


@pytest.mark.parametrize("surplus", SURPLUS.values(), ids=SURPLUS)
def test_a_partial_result_that_holds_counts_whatever_its_custodian_has_said_besides(
    tmp_path: Path, surplus: list[dict[str, Any]]
) -> None:
    quorum = Quorum(tmp_path, 2, 3)
    receiver, custodians = desks(tmp_path / "desks", quorum, "auditor-east", "north-pier", "south-pier")
    receiver.take()
    for one in custodians:
        receiver.send(one)
        one.take()
        if one is custodians[1]:
            for changes in surplus:
                partial_by(one, **changes)
        one.send(receiver)
    taken, words = finished(receiver, quorum)
    assert taken == [PLAINTEXT]
    assert "two different messages of south-pier in round 1" in " ".join(words)


def test_where_too_few_are_left_it_has_failed(tmp_path: Path) -> None:
    quorum = Quorum(tmp_path, 2, 3)
    receiver, custodians = desks(tmp_path / "desks", quorum, "auditor-east", "north-pier", "south-pier")
    receiver.take()
    receiver.send(custodians[1])
    partial_by(custodians[1], seen=bytes(32))
    custodians[1].send(receiver)
    with pytest.raises(VerificationError, match="the task has failed: south-pier answered in round 1 to other"):
        finished(receiver, quorum)
