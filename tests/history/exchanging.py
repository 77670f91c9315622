"""Parties of the demo harbour that draw a number together: a task with something secret in it, for tests.

Each party seals a random number for every other one, adds up what it has and was sent, and shows the digest of its sum;
what comes of it is a file with all the digests. No purpose of the product is needed for that. Source: none.
"""

from __future__ import annotations

import dataclasses
import hashlib
import secrets
import shutil
from collections.abc import Collection, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from parties import card, unlocked

from shares.documents.event import Event
from shares.documents.key_event import TaskFinished
from shares.documents.party import OpenPartyKey
from shares.documents.task import Joining, Task, TaskParty
from shares.documents.task_message import Complaint, Review, TaskMessage
from shares.history import next as engine
from shares.history.exchange import TaskFolder
from shares.history.rounds import Failure, Inbox, NewFile, Outcome, Received, Said
from shares.history.standing import Standing, standing
from shares.history.steps import OwnSteps
from shares.memory import Secret

NAMES = ("north-pier", "south-pier", "light-house")
MADE = datetime(2026, 12, 1, 7, tzinfo=UTC)
DUE = datetime(2099, 12, 8, 7, tzinfo=UTC)
TELLTALE = bytes.fromhex("deadbeefcafe5eed")
"""How every secret number begins, so that a search finds it."""


def new_task(names: Sequence[str] = NAMES, **changes: Any) -> Task:
    """A task that these parties do together, asked for by the harbour office."""
    with unlocked("harbour-office") as key:
        members: dict[str, Any] = {
            "key": bytes(16),
            "epoch": 1,
            "record": None,
            "label": "Harbour draw",
            "work": Joining(what="join", need=2),
            "parties": tuple(TaskParty(name=name, card=card(name)) for name in names),
            "remark": None,
            "nonce": secrets.token_bytes(32),
            "created": MADE,
            "due": DUE,
        }
        return Task.signed_by(key, **{**members, **changes})


class Draw:
    """The course: fresh keys; numbers, sealed; digests of the sums. Who shows the digest of nothing has cheated."""

    rounds = ("fresh keys", "numbers", "sums")
    private = True

    def speakers(self, round: int, inbox: Inbox) -> Sequence[str]:
        return inbox.task.names

    def failure(self, inbox: Inbox) -> Failure | None:
        for name, message in inbox.of(2).items():
            if not isinstance(message.body, Review) or not message.body.complaints:
                return Failure(name, "it shows no sum")
        return None

    def holds(self, message: TaskMessage, inbox: Inbox) -> bool:
        return isinstance(message.body, Review) and bool(message.body.complaints)

    def fault(self, message: TaskMessage, inbox: Inbox) -> Failure | None:
        wrong = not isinstance(message.body, Review)
        return Failure(message.sender, f"{message.sender} shows no sum at all") if wrong else None

    def spares(self, names: Collection[str]) -> bool:
        return not names


@dataclass
class Drawer:
    """A party's part. ``cheats`` makes it show no sum; ``told`` are the rounds whose message it knows to be kept."""

    name: str
    cheats: bool = False
    told: list[int] = dataclasses.field(default_factory=list)

    def prospect(self, round: int, inbox: Inbox) -> Sequence[str]:
        return [f"takes part in round {round} of the draw"]

    def asks(self, round: int) -> bool:
        return round == 0

    def event(self, round: int, inbox: Inbox) -> Event | None:
        if round != 1:
            return None
        return TaskFinished(what="task-finished", task=inbox.task.digest(), work="join", result=None, remark="drawn")

    def speak(self, round: int, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Said:
        if round == 1:
            numbers = {name: Secret.of(TELLTALE + secrets.token_bytes(24)) for name in inbox.task.names}
            return Said(Review(what="review", complaints=()), numbers.pop(self.name), numbers)
        digest = self._sum(state, received)
        told = () if self.cheats else (Complaint(against=self.name, reason=digest.hex()),)
        return Said(Review(what="review", complaints=told), Secret.of(TELLTALE + bytes(24)))

    def kept(self, round: int, inbox: Inbox) -> None:
        self.told.append(round)

    def _sum(self, state: Secret, received: Sequence[Received]) -> bytes:
        sent = received[1]
        with state.view() as own:
            total = int.from_bytes(own, "big")
        for name, secret in sent.items():
            assert (secret is None) == (name == self.name)
            if secret is not None:
                with secret.view() as view:
                    total += int.from_bytes(view, "big")
        return hashlib.sha256(total.to_bytes(40, "big")).digest()

    def finish(self, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Outcome:
        sums = sorted(message.body.complaints[0].reason for message in inbox.of(2).values())  # type: ignore[union-attr]
        # Like a sealed share, the first file is another one whenever it is made.
        files = [
            NewFile("own.bin", secrets.token_bytes(32), True),
            NewFile("sums.txt", "\n".join(sums).encode(), False),
        ]
        digest = hashlib.sha256(files[1].data).digest()
        event = TaskFinished(what="task-finished", task=inbox.task.digest(), work="join", result=digest)
        return Outcome(files, event, ["drawn"])


@dataclass
class Desk:
    """One party's machine: its own copy of the task's folder, and its own folder."""

    root: Path
    name: str
    part: Drawer
    course: Draw = dataclasses.field(default_factory=Draw)

    @property
    def folder(self) -> Path:
        return self.root / "task"

    @property
    def mine(self) -> Path:
        return self.root / "mine"

    @property
    def messages(self) -> Path:
        return self.folder / "messages"

    def own(self) -> OwnSteps:
        return OwnSteps(self.mine, TaskFolder(self.folder).task, card(self.name))

    def turn(self) -> engine.Turn:
        return engine.turn(TaskFolder(self.folder), self.course, self.own())

    def standing(self) -> Standing:
        return standing(self.course, TaskFolder(self.folder).read())

    def take(self, key: OpenPartyKey | None = None) -> str:
        """Do what is to be done now, once; return what it was."""
        at = self.turn()
        with unlocked(self.name) if key is None else key as opened:
            if at.doing in ("speak", "repeat"):
                engine.speak(TaskFolder(self.folder), at, self.course, self.part, self.own(), opened)
            elif at.doing == "finish":
                engine.finish(at, self.course, self.part, self.own(), opened)
            elif at.doing == "erase":
                engine.close(self.own())
        return at.doing

    def message(self, round: int) -> TaskMessage:
        return TaskMessage.parse((self.messages / f"{round}-{self.name}.json").read_bytes())

    def send(self, other: Desk) -> None:
        """Carry all messages that this folder has to another's, by stick."""
        shutil.copytree(self.messages, other.messages, dirs_exist_ok=True)


def desks(root: Path, names: Sequence[str] = NAMES, task: Task | None = None, **changes: object) -> dict[str, Desk]:
    """A machine for each party, with a copy of the same new task."""
    task = task or new_task(names)
    made = {}
    for name in names:
        desk = Desk(root / name, name, Drawer(name, **changes))  # type: ignore[arg-type]
        desk.mine.mkdir(parents=True)
        TaskFolder.create(desk.folder, task)
        made[name] = desk
    return made


def exchange(machines: dict[str, Desk]) -> None:
    """Carry every message to everybody."""
    for desk in machines.values():
        for other in machines.values():
            if other is not desk:
                desk.send(other)


def to_the_end(machines: dict[str, Desk]) -> None:
    """Go on until it is over for everybody."""
    for _ in range(8):
        for desk in machines.values():
            desk.take()
        exchange(machines)
        if {desk.turn().doing for desk in machines.values()} == {"done"}:
            return
    assert {desk.turn().doing for desk in machines.values()} == {"done"}
