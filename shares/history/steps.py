"""What a party keeps of a task in its own folder: each step it took, its message and its sealed state in one file.

Source: FORMAT_KEYS.md, sec. 25.
May import: shares.errors, shares.memory, shares.storage, shares.documents, .exchange, .lines, .rounds.
Secret: the states, sealed on the medium and opened only within ``kept``. Public: the messages.
Does not: decide what is said, or release it. A folder that is copied or restored whole tells nothing of that by itself:
what others have of this party's messages does, where ``check_against`` sees them.
"""

from __future__ import annotations

import contextlib
import os
import re
from collections.abc import Iterator, Sequence
from pathlib import Path

from shares.documents.base import MAX_FILE
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.task import Task
from shares.documents.task_box import KEY_SIZE, open_box
from shares.documents.task_message import TaskMessage, box_info
from shares.documents.task_step import TaskDone, TaskStep
from shares.errors import StorageError, VerificationError, WrongKeyError
from shares.history.exchange import conflict_words
from shares.history.lines import alone_in
from shares.history.rounds import Inbox, NewFile, Received
from shares.memory import Secret
from shares.storage import StrPath, discard, leftovers, make_folder, read_file, write_new

TASKS_NAME, DONE_NAME = "tasks", "done.json"
_STEP = re.compile(r"step-([0-9])\.json")
_ERASED = re.compile(r"(step-[0-9]\.json|result-[0-9]+)")
_BEGIN_ANEW = "do not go on with it: ask for a new task, and say why"


class OwnSteps:
    """One party's steps in one task.

    Args:
        mine: the party's own folder, in which ``tasks/`` holds a folder for each task.
        task: the task.
        card: the party's.

    Raises:
        WrongKeyError: it is the card of no party of the task.

    Attributes:
        name: the party, as the task names it.
    """

    def __init__(self, mine: StrPath, task: Task, card: PartyCard) -> None:
        party = task.party_by(card)
        if party is None:
            raise WrongKeyError(
                f"the party key is {card.name}'s, card {card.fingerprint}, who is no party of this task",
                hint=f"its parties are {', '.join(task.names)}",
            )
        self.mine = Path(mine)
        self.folder = self.mine / TASKS_NAME / task.digest().hex()[:32]
        self.task = task
        self.name = party.name
        self._card = party.card

    def steps(self) -> dict[int, TaskStep]:
        """Read the steps that are kept, by round.

        Raises:
            StorageError: one cannot be read.
            VerificationError: one is not what this party kept of this task.
        """
        found = {}
        for name in self._names():
            match = _STEP.fullmatch(name)
            if match is None:
                continue
            where, problem = os.fspath(self.folder / name), None
            data = read_file(where, limit=2 * MAX_FILE)
            step = TaskStep.parse(data, where=where)
            if step.task == self.task.digest() and step.party != self.name:
                raise _of_another(step.party, self.name, self.mine)
            if (step.task, step.party) != (self.task.digest(), self.name):
                problem = "it is a step of another task"
            elif (message_problem := self._problem_of(step.message)) or step.message.round != int(match[1]):
                problem = message_problem or "it is the step of another round than its name says"
            elif not step.is_whole():
                problem = "its own digest does not fit: the file was damaged or edited"
            if problem:
                raise VerificationError(problem, where=where, hint=_BEGIN_ANEW)
            found[step.message.round] = step
        return found

    def done(self) -> TaskDone | None:
        """Read what is left once the task is over for this party; None before.

        Raises:
            StorageError: it cannot be read.
            VerificationError: it is not what this party has left of this task.
        """
        if DONE_NAME not in self._names():
            return None
        where = os.fspath(self.folder / DONE_NAME)
        done = TaskDone.parse(read_file(where, limit=MAX_FILE), where=where)
        if done.task == self.task.digest() and done.party != self.name:
            raise _of_another(done.party, self.name, self.mine)
        if (done.task, done.party) != (self.task.digest(), self.name) or any(map(self._problem_of, done.messages)):
            raise VerificationError("it is of another task", where=where, hint=_BEGIN_ANEW)
        return done

    def messages(self) -> dict[int, TaskMessage]:
        """Return what this party has said, by round: what it must never say differently.

        Raises:
            StorageError, VerificationError: as for ``steps`` and ``done``.
        """
        done = self.done()
        if done is not None:
            return {message.round: message for message in done.messages}
        return {round: step.message for round, step in self.steps().items()}

    def check_against(self, signed: Sequence[TaskMessage]) -> None:
        """Compare what this party keeps with what others have of it.

        Args:
            signed: every message in the task's folder that its sender has signed.

        Raises:
            VerificationError: a message by this party is not the one that it keeps, or it keeps none: its folder was
                copied or restored, or its key is in other hands.
        """
        own = self.messages()
        for message in signed:
            if message.sender != self.name:
                continue
            kept = own.get(message.round)
            if kept is None:
                raise VerificationError(
                    f"{self.name} has spoken in round {message.round}, and this folder does not know of it: it was "
                    "restored from an older copy, is not the one that was used before, or somebody else has the "
                    "party key",
                    where=os.fspath(self.folder),
                    hint="give the folder that was used before; where there is none, ask for a new task, and say why",
                )
            if kept.digest() != message.digest():
                what = conflict_words(message.round, self.name)
                raise VerificationError(what, where=os.fspath(self.folder), hint=_BEGIN_ANEW)

    def check_seen(self, inbox: Inbox, rounds: int) -> None:
        """Compare the messages that this party has answered with those that are here now.

        Args:
            inbox: what is here now.
            rounds: how many rounds are complete.

        Raises:
            VerificationError: messages were exchanged after they were answered.
        """
        for round, message in self.messages().items():
            if round <= rounds and message.seen != inbox.seen(round):
                raise VerificationError(
                    f"messages of rounds before {round} were exchanged after {self.name} answered them",
                    where=os.fspath(self.folder),
                    hint="somebody has sent different messages to different people; compare with the others what "
                    "`shares task show` says, and ask for a new task",
                )

    @contextlib.contextmanager
    def alone(self) -> Iterator[None]:
        """Let no other run of this party work on this task meanwhile; the folder is made where it is missing.

        Raises:
            StorageError: another run has been at work for a minute, or the folder cannot be made.
        """
        make_folder(self.folder)
        with alone_in(self.folder):
            yield

    def keep(self, message: TaskMessage, state: Secret, key: OpenPartyKey) -> None:
        """Put a step on the medium: from then on this is what the party says in the round.

        Raises:
            StorageError: the medium refuses, or there is a step of this round.
        """
        data = TaskStep.wrap(message, state, key).to_file()
        write_new(self._step(message.round), data, secret=True)

    @contextlib.contextmanager
    def kept(
        self, inbox: Inbox, *, private: bool, key: OpenPartyKey
    ) -> Iterator[tuple[Secret, Secret, list[Received]]]:
        """Open what this party keeps, and what was sealed for it; all of it is wiped at the end.

        Args:
            inbox: whose messages are opened.
            private: whether the course has fresh keys in round 0.
            key: the party's.

        Yields:
            The private half of this party's key of round 0, empty where it has none; the state after its last step,
            empty before the first; and what was sent to it in each round, by sender.

        Raises:
            VerificationError: the state does not open.
        """
        steps = self.steps()
        with contextlib.ExitStack() as wiped:
            whole = wiped.enter_context(steps[max(steps)].state(key) if steps else Secret(0))
            size = KEY_SIZE if private and 0 in steps else 0
            with whole.view() as view:
                box_key = wiped.enter_context(Secret.of(view[:size]))
                state = wiped.enter_context(Secret.of(view[size:]))
            received: list[Received] = []
            for round in range(len(inbox.rounds)):
                opened = {sender: self._opened(message, box_key) for sender, message in inbox.of(round).items()}
                for secret in opened.values():
                    if secret is not None:
                        wiped.enter_context(secret)
                received.append(opened)
            yield box_key, state, received

    def make(self, files: Sequence[NewFile]) -> None:
        """Write what comes of the task into the party's folder, the very same bytes however often it is stopped.

        It is put beside the steps first, whole; a run after a stopped one takes what it finds there, since what is
        sealed anew would differ.

        Raises:
            StorageError: a name is taken by something else, or the medium refuses.
        """
        staged = [self.folder / f"result-{number}" for number in range(1, len(files) + 1)]
        if staged and not os.path.lexists(staged[-1]):
            for path, file in zip(staged, files, strict=True):
                discard(path)
                write_new(path, file.data, secret=file.secret)
        for path, file in zip(staged, files, strict=True):
            data, target = read_file(path, limit=1 << 30), self.mine / file.name
            if os.path.lexists(target):
                if read_file(target, limit=len(data) + 1) != data:
                    raise StorageError(
                        "exists already, is something else, and is never overwritten",
                        where=os.fspath(target),
                        hint="move it away, and repeat; what comes of the task waits in " + os.fspath(self.folder),
                    )
                continue
            make_folder(target.parent)
            write_new(target, data, secret=file.secret)

    def end(self, *, given_up: bool) -> None:
        """Put on the medium that the task is over for this party, unless it stands there; nothing is erased yet.

        Args:
            given_up: whether the party gives it up. What was written first stays.

        Raises:
            StorageError: the medium refuses.
        """
        if self.done() is not None:
            return
        done = TaskDone(
            kind="task-done",
            version=1,
            task=self.task.digest(),
            party=self.name,
            given_up=given_up,
            messages=tuple(message for _, message in sorted(self.messages().items())),
        )
        make_folder(self.folder)
        write_new(self.folder / DONE_NAME, done.to_file(), secret=False)

    def close(self) -> None:
        """End the task for this party: its messages are kept, and every state is erased, as far as the medium lets us.

        A medium may keep the old blocks; what is in them stays sealed for the party's key.

        Raises:
            StorageError: the medium refuses.
        """
        self.end(given_up=False)
        for path in self.remains():
            discard(path)

    def remains(self) -> list[Path]:
        """List the files that are erased when the task is over for this party."""
        return [*(self.folder / name for name in self._names() if _ERASED.fullmatch(name)), *self.leftovers()]

    def leftovers(self) -> list[Path]:
        """List what runs that were stopped have left; sealed, where it is a state."""
        return leftovers(self.folder)

    def _opened(self, message: TaskMessage, box_key: Secret) -> Secret | None:
        box = message.box_for(self.name)
        if box is None or not len(box_key):
            return None
        return open_box(box_key, box, box_info(self.task, message.round, message.sender, self.name))

    def _step(self, round: int) -> Path:
        return self.folder / f"step-{round}.json"

    def _problem_of(self, message: TaskMessage) -> str | None:
        if (message.task, message.sender) != (self.task.digest(), self.name) or not message.is_by(self._card):
            return "its message is of another task, or not signed by this party"
        return None

    def _names(self) -> list[str]:
        try:
            return sorted(os.listdir(self.folder))
        except FileNotFoundError:
            return []
        except OSError as error:
            reason = (error.strerror or type(error).__name__).lower()
        raise StorageError(reason, where=os.fspath(self.folder), hint="check its owner and mode")


def _of_another(party: str, me: str, mine: Path) -> VerificationError:
    return VerificationError(
        f"is the folder of {party}, who has taken part in this task from there, and the party key is that of {me}",
        where=os.fspath(mine),
        hint="name your own folder; each party has one",
    )
