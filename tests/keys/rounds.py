"""A task run in memory: each party sees what it was sent and nothing else, and any party can be made to cheat.

Source: ``shares.history.rounds``: what a part may rely on. Messages and states pass through bytes on their way, as they
do between machines; what is sealed is handed over as it is, since sealing is tested with the engine.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta

from shares.documents.party import OpenPartyKey
from shares.documents.task import Task
from shares.documents.task_message import OpeningKey, TaskMessage
from shares.errors import SharesError
from shares.history.rounds import Course, Failure, Inbox, Outcome, Part, Said
from shares.memory import Secret

START = datetime(2026, 12, 1, 7, 0, tzinfo=UTC)
DUE = datetime(2099, 12, 8, 7, tzinfo=UTC)
"""Late enough for every clock that these tests will run by."""

Cheat = Callable[["Exchange", Said | None], Said | Mapping[str, Said] | None]
"""Takes what a party would say, None where its program refuses; returns what it says: to all, by receiver, nothing."""


def octets(secret: Secret) -> bytes:
    with secret.view() as view:
        return bytes(view)


@dataclass(eq=False)
class Exchange:
    """Parties who send each other the messages of a task.

    Attributes:
        cheats: by round and party, what that party does instead.
        told: by viewer, round and sender, the message that the viewer was sent.
        boxes: by round, receiver and sender, what was sealed.
        silent: who has said nothing where they should have.
    """

    task: Task
    course: Course
    parts: Mapping[str, Part]
    keys: Mapping[str, OpenPartyKey]
    cheats: Mapping[tuple[int, str], Cheat] = field(default_factory=dict)
    content: bytes | None = None

    def __post_init__(self):
        self.told = {name: [{} for _ in self.course.rounds] for name in self.task.names}
        self.boxes = [{name: {} for name in self.task.names} for _ in self.course.rounds]
        self.states = dict.fromkeys(self.task.names, b"")
        self.silent = []

    def inbox(self, viewer, rounds=None):
        """What a party sees, of so many rounds."""
        return Inbox(self.task, tuple(self.told[viewer][:rounds]), self.content)

    def received(self, viewer, rounds):
        """What a party was sent, opened, of so many rounds."""
        others = [name for name in self.task.names if name != viewer]
        return [{name: self._opened(round, viewer, name) for name in others} for round in range(rounds)]

    def _opened(self, round, viewer, sender):
        found = self.boxes[round][viewer].get(sender)
        return None if found is None else Secret.of(found)

    def speak(self, round):
        """Let everybody speak who has to in a round, each knowing the rounds before."""
        speakers = {name: self.course.speakers(round, self.inbox(name, round)) for name in self.task.names}
        said = {name: self._say(round, name) for name in self.task.names if name in speakers[name]}
        for name, one in said.items():
            if one is None:
                self.silent.append(name)
            elif isinstance(one, Said):
                self._release(round, name, one, self.task.names)
            else:
                for viewer, other in one.items():
                    self._release(round, name, other, [viewer])

    def _say(self, round, name):
        cheat = self.cheats.get((round, name))
        said = None
        try:
            said = self._honestly(round, name)
        except SharesError:
            # The program of a party that has cheated before may refuse to go on, which does not stop that party.
            if cheat is None:
                raise
        if cheat:
            said = cheat(self, said)
        if isinstance(said, Said):
            self.states[name] = octets(said.state)
        return said

    def _honestly(self, round, name):
        if round == 0 and self.course.private:
            return Said(OpeningKey(what="opening-key", x25519=self.keys[name].card.x25519), Secret(0))
        received, state = self.received(name, round), Secret.of(self.states[name])
        return self.parts[name].speak(round, self.inbox(name, round), state, received)

    def _release(self, round, name, said, viewers):
        message = TaskMessage.signed_by(
            self.keys[name],
            task=self.task.digest(),
            round=round,
            sender=name,
            seen=self.inbox(name).seen(round),
            body=said.body,
            created=START + timedelta(minutes=round, seconds=self.task.names.index(name)),
        )
        for viewer in viewers:
            self.told[viewer][round][name] = self.parsed(message)
        for to, box in said.sealed.items():
            if to in viewers:
                self.boxes[round][to][name] = octets(box)

    def parsed(self, message):
        """The message as its reader has it."""
        return TaskMessage.parse(message.to_file())

    def failures(self, rounds=None) -> dict[str, Failure | None]:
        """What each party says of the task after so many rounds."""
        return {name: self.course.failure(self.inbox(name, rounds)) for name in self.task.names}

    def run(self, rounds=None):
        """Go on until everybody has spoken in all rounds, somebody is silent, or somebody says that it has failed."""
        for round in range(len(self.course.rounds))[:rounds]:
            if self.silent or any(self.failures(round).values()):
                break
            self.speak(round)
        return self

    def outcome(self, name) -> Outcome:
        """What has come of it for a party."""
        inbox = self.inbox(name)
        received = self.received(name, len(self.course.rounds))
        return self.parts[name].finish(inbox, Secret.of(self.states[name]), received)
