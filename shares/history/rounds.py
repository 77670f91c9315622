"""What a task is made of, whatever its purpose: rounds, who speaks in each, what a party says and what comes of it.

Source: RFC 9591, sec. 5 (rounds, a coordinator without secrets); Y. Ishai, R. Ostrovsky, V. Zikas, "Secure multi-party
computation with identifiable abort", CRYPTO 2014: a task that fails says who made it fail.
May import: shares.errors, shares.memory, shares.documents.
Secret: states and what is sealed, passed through. Public: the rest.
Does not: touch files (``exchange`` and ``steps`` do), or know any purpose; ``keys`` does.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Protocol

from shares.documents.base import sha256
from shares.documents.event import Event
from shares.documents.task import Task
from shares.documents.task_message import Body, TaskMessage
from shares.memory import Secret

Received = Mapping[str, Secret | None]
"""What one party was sent in a round, opened, by sender; None where nothing was sealed for it, or did not open."""


@dataclass(frozen=True, slots=True, eq=False)
class Inbox:
    """A task, what it is about, and every message that counts: signed by its sender, for this task, the only one.

    Attributes:
        rounds: the messages of each round by sender.
        content: the file that the task is about; None where there is none.
    """

    task: Task
    rounds: tuple[Mapping[str, TaskMessage], ...]
    content: bytes | None = None

    def of(self, round: int) -> Mapping[str, TaskMessage]:
        """Return the messages of a round by sender, in the order of the task's parties."""
        said = self.rounds[round] if round < len(self.rounds) else {}
        return {name: said[name] for name in self.task.names if name in said}

    def seen(self, round: int) -> bytes:
        """Return the digest over all messages of earlier rounds: 32 bytes, the same for all who have seen the same."""
        digests = [message.digest() for earlier in range(round) for message in self.of(earlier).values()]
        return seen_of(self.task, digests)


def seen_of(task: Task, digests: Sequence[bytes]) -> bytes:
    """Return the digest by which a message names those that it answers, given theirs in order: 32 bytes."""
    return sha256(b"shares/v1/task-seen", task.digest(), *digests)


@dataclass(frozen=True, slots=True)
class Failure:
    """Why a task cannot be finished, from what everybody can see.

    Attributes:
        by: the party whose doing it is; None where messages contradict each other and no one's fault is proved.
        what: what is wrong, one sentence without a final stop.
    """

    by: str | None
    what: str

    def words(self) -> str:
        """Say that a task has failed, by whom, if somebody is named, and what is wrong."""
        return f"the task has failed{f', by {self.by}' if self.by else ''}: {self.what}"


@dataclass(frozen=True, slots=True, eq=False)
class Said:
    """What a party says in a round.

    Attributes:
        body: to all.
        sealed: to single parties, by name; wiped when it is sealed.
        state: what the party must keep to go on; sealed for it, on disk with the message.
    """

    body: Body
    state: Secret
    sealed: Mapping[str, Secret] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class NewFile:
    """A file that comes of a task: its name in the party's own folder, its content, and whether others may read it."""

    name: str
    data: bytes
    secret: bool


@dataclass(frozen=True, slots=True)
class Outcome:
    """What a task has come to, for one party.

    Attributes:
        files: to be written into the party's own folder, in this order; the last one is the commit point.
        event: for its journal.
        words: what happened, what it proves, what next.
        ends: whether the party's steps, and with them all they keep, are erased now. False where another command has
            still to use what they keep, and ends the task then.
    """

    files: Sequence[NewFile]
    event: Event | None
    words: Sequence[str]
    ends: bool = True


class Course(Protocol):
    """The rounds of one purpose, as everybody can follow them, holding no secret.

    The inboxes that it is asked about hold whole rounds only: each message of them was checked to come from who speaks
    there, and to name the same messages of earlier rounds. With no round yet, it may look at the task alone.

    Attributes:
        rounds: what is said in each round, in a few words.
        private: whether anything is sealed: round 0 is then about fresh keys, which ``history.next`` makes itself.
    """

    rounds: Sequence[str]
    private: bool

    def speakers(self, round: int, inbox: Inbox) -> Sequence[str]:
        """Return who speaks in a round, once all earlier rounds are complete and fine; nobody skips the round."""

    def failure(self, inbox: Inbox) -> Failure | None:
        """Say why the task has failed already, judging by the rounds that are complete; None while it has not."""

    def holds(self, message: TaskMessage, inbox: Inbox) -> bool:
        """Say whether a message of the last round may count, though it is one of several of its sender.

        Args:
            message: signed by a speaker of the last round, and answering what is here.
            inbox: with all earlier rounds, and no more.
        """

    def fault(self, message: TaskMessage, inbox: Inbox) -> Failure | None:
        """Say whose doing a message of the last round that does not count proves the end to be; None where nobody's.

        It is judged by itself. Where it answers other messages than lie here, somebody else may have shown them to its
        sender: then that alone counts against it which is wrong whatever they are.

        Args:
            message: signed by a speaker of the last round.
            inbox: with all earlier rounds, and no more.
        """

    def spares(self, names: Collection[str]) -> bool:
        """Say whether the last round can do without what these of its speakers say there."""


class Part(Protocol):
    """What one party does in a task. It keeps no state of its own between rounds: it is given what it has kept.

    Where the course is private, round 0 is not its own to say; whether to take part in it at all is.
    """

    def prospect(self, round: int, inbox: Inbox) -> Sequence[str]:
        """Return what this party is about to do in a round, in words, cautions included, before anything is done."""

    def asks(self, round: int) -> bool:
        """Say whether the party must agree to this round: it signs, opens, or takes on a duty."""

    def event(self, round: int, inbox: Inbox) -> Event | None:
        """Return what the party's own journal says of this round, entered before its message is released."""

    def speak(self, round: int, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Said:
        """Say what this party says in a round in which it speaks.

        Args:
            round: which.
            inbox: with all earlier rounds complete.
            state: what this party kept after its last message; empty before the first.
            received: what was sealed for it, opened, for each earlier round.

        Raises:
            VerificationError: something in the inbox is wrong in a way that ends the task.
        """

    def kept(self, round: int, inbox: Inbox) -> None:
        """Do what has to be done once this party's message of a round is kept, before it is released.

        It may be done again: after a run that was killed meanwhile.

        Args:
            round: which.
            inbox: with all earlier rounds complete.
        """

    def finish(self, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Outcome:
        """Return what comes of the task for this party, all rounds being complete.

        Raises:
            VerificationError: what came of it does not hold.
        """
