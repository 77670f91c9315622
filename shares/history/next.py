"""Whose turn it is in a task, and one party's next step: stored whole before anything of it is released.

Source: FORMAT_KEYS.md, sec. 25.
May import: shares.errors, shares.clock, shares.documents, shares.memory, .exchange, .journal, .rounds, .standing,
.steps.
Secret: states and what is sealed, on their way between a party's part and its steps. Public: messages, who is awaited.
Does not: know any purpose; a course and a part, which ``keys`` makes, do. Ask anybody; the command does.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Literal, TypeAlias

from shares import clock
from shares.documents.event import Event
from shares.documents.party import OpenPartyKey
from shares.documents.task import Task
from shares.documents.task_box import new_box_key, seal_box
from shares.documents.task_message import Body, OpeningKey, SealedFor, TaskMessage, box_info
from shares.errors import ParameterError, SharesError, VerificationError
from shares.history.exchange import TaskFolder
from shares.history.journal import append, load_journal
from shares.history.rounds import Course, Inbox, Outcome, Part, Received, Said
from shares.history.standing import Standing, standing
from shares.history.steps import OwnSteps
from shares.memory import Secret

Doing: TypeAlias = Literal["speak", "repeat", "wait", "finish", "erase", "done", "failed"]


@dataclass(frozen=True, slots=True, eq=False)
class Turn:
    """What one party is to do now.

    Attributes:
        doing: say something in ``round``; send again what was said there; wait; bring the task to its end; erase what a
            run that was stopped there has left; nothing, since it is over for this party; or nothing, since it has
            failed.
        round: which.
    """

    doing: Doing
    round: int
    standing: Standing


def turn(folder: TaskFolder, course: Course, own: OwnSteps) -> Turn:
    """Say what one party is to do now; nothing is written, and nothing secret is opened.

    Args:
        folder: the task's.
        course: of the task.
        own: the party's steps.

    Raises:
        StorageError: something cannot be read, or the content that the task is about is missing.
        VerificationError: what others have of this party's messages is not what it keeps; messages were exchanged after
            it answered them; or the content is not what the task is about.
    """
    reading = folder.read()
    own.check_against(reading.signed)
    found = standing(course, reading)
    own.check_seen(found.inbox, found.round)
    done = own.done()
    if done is not None:
        if done.given_up:
            return Turn("done", found.round, found)  # Whatever it kept: what was never released stays unsaid.
        if own.remains():
            return Turn("erase", found.round, found)
        repeat = own.name in found.awaited and found.round in own.messages()
        return Turn("repeat" if repeat else "done", found.round, found)
    if found.inbox.content is None:
        folder.content()  # It is refused where the task is about something that is missing or altered.
    if found.failure is not None:
        return Turn("failed", found.round, found)
    if found.complete:
        return Turn("finish", found.round, found)
    if own.name not in found.awaited:
        return Turn("wait", found.round, found)
    return Turn("repeat" if found.round in own.messages() else "speak", found.round, found)


def speak(folder: TaskFolder, at: Turn, course: Course, part: Part, own: OwnSteps, key: OpenPartyKey) -> Path:
    """Say what is this party's to say in a round, or again what it has said, to the byte.

    Message and state are put on the medium in one file; then the party's journal tells of it; then the part erases what
    the message was made of; then it is released. Whatever stops that, the next run goes on with the same message.

    Args:
        folder: the task's.
        at: a turn to speak or to repeat.
        course: of the task.
        part: the party's.
        own: its steps.
        key: its party key.

    Returns:
        The file of the message, in the task's folder.

    Raises:
        ParameterError: it is no turn to speak.
        SharesError: another run has given the task up meanwhile.
        VerificationError: the task is past its due date, or the part finds something wrong.
        StorageError: something cannot be written.
    """
    if at.doing not in ("speak", "repeat"):
        raise ParameterError("it is not this party's turn to speak")
    earlier = at.standing.before(at.round)
    with own.alone():
        done = own.done()
        if done is not None and done.given_up:
            raise SharesError("another run of this party has given the task up", hint="it says nothing more in it")
        # Another run of this party may have spoken meanwhile: its message is the one to send.
        message = own.messages().get(at.round)
        if message is None:
            check_time(own.task)
            message = _say(at.round, earlier, course, part, own, key)
        if done is None:
            _enter(own.mine, part.event(at.round, earlier), key)
        part.kept(at.round, earlier)
        return folder.release(message)


def check_time(task: Task) -> None:
    """Refuse to speak in a task that is past its due date.

    Raises:
        VerificationError: it is.
    """
    time = clock.now()
    if task.is_late(time):
        due, now = clock.to_text(task.due), clock.to_text(time)
        raise VerificationError(
            f"the task was due {due}, and it is {now} by this machine's clock",
            hint="set the clock if it is wrong; else ask for a new task",
        )


def finish(at: Turn, course: Course, part: Part, own: OwnSteps, key: OpenPartyKey) -> Outcome:
    """Bring a task to its end for one party: files, journal, and then its steps are erased.

    Args:
        at: a turn to finish.
        course: of the task.
        part: the party's.
        own: its steps.
        key: its party key.

    Raises:
        ParameterError: it is no turn to finish.
        VerificationError: what came of the task does not hold.
        StorageError: something cannot be written.
    """
    if at.doing != "finish":
        raise ParameterError("it is not the end of the task")
    with own.alone():
        if own.done() is not None:
            raise SharesError("another run of this party has just ended the task", hint="nothing is left to be done")
        with opened(at.standing.inbox, course, own, key) as (state, received):
            outcome = part.finish(at.standing.inbox, state, received)
        own.make(outcome.files)
        _enter(own.mine, outcome.event, key)
        if outcome.ends:
            own.close()
    return outcome


@contextmanager
def opened(
    inbox: Inbox, course: Course, own: OwnSteps, key: OpenPartyKey
) -> Iterator[tuple[Secret, Sequence[Received]]]:
    """Open what a party keeps of a task, and what was sealed for it in each round; all of it is wiped at the end.

    Args:
        inbox: of the task as it stands.
        course: of the task.
        own: the party's steps.
        key: its party key.

    Raises:
        VerificationError: the state does not open.
    """
    with own.kept(inbox, private=course.private, key=key) as (_, state, received):
        yield state, received


def close(own: OwnSteps) -> None:
    """End a task for one party, and erase what it keeps: after an outcome that did not, or a run that was stopped.

    Args:
        own: the party's steps.

    Raises:
        StorageError: something cannot be written or erased.
    """
    with own.alone():
        own.close()


def drop(own: OwnSteps, told: Callable[[], Event | None], key: OpenPartyKey, erase: Callable[[], None]) -> bool:
    """Give a task up for one party: that it is; journal; then what its purpose keeps elsewhere and steps are erased.

    From the first of these on it says nothing more, wherever a run is stopped. One that is repeated does what is
    missing. Of a task that has come to its end only what a run that was stopped there has left is erased; by what the
    journal says it may have, although the run was stopped before its steps said so.

    Args:
        own: the party's steps.
        told: returns what its journal is to say, once no other run is at work; None where it says that the task has
            come to its end.
        key: its party key.
        erase: erases what lies outside the steps; may be called again.

    Returns:
        Whether it was given up; False where it had come to its end.

    Raises:
        ParameterError: it had, and nothing is left.
        StorageError: something cannot be written or erased.
    """
    with own.alone():
        done = own.done()
        if done is not None and not done.given_up and not own.remains():
            raise ParameterError(f"the task is over for {own.name}", hint="nothing is left to be erased")
        event = told() if done is None or done.given_up else None
        if event is not None:
            own.end(given_up=True)
            _enter(own.mine, event, key)
            erase()
        own.close()
    return event is not None


def _say(round: int, earlier: Inbox, course: Course, part: Part, own: OwnSteps, key: OpenPartyKey) -> TaskMessage:
    """Make the message and the state of a round, and put them on the medium."""
    with own.kept(earlier, private=course.private, key=key) as (box_key, state, received):
        if course.private and round == 0:
            fresh, public = new_box_key()
            with fresh:
                return _keep(own, key, earlier, round, OpeningKey(what="opening-key", x25519=public), (), fresh)
        said = part.speak(round, earlier, state, received)
        with said.state:
            sealed = _sealed(said, round, earlier, own)
            with Secret(len(box_key) + len(said.state)) as whole:
                with whole.view() as view, box_key.view() as first, said.state.view() as rest:
                    view[: len(first)], view[len(first) :] = first, rest
                return _keep(own, key, earlier, round, said.body, sealed, whole)


def _keep(
    own: OwnSteps,
    key: OpenPartyKey,
    earlier: Inbox,
    round: int,
    body: Body,
    sealed: tuple[SealedFor, ...],
    state: Secret,
) -> TaskMessage:
    message = TaskMessage.signed_by(
        key,
        task=own.task.digest(),
        round=round,
        sender=own.name,
        seen=earlier.seen(round),
        body=body,
        sealed=sealed,
    )
    own.keep(message, state, key)
    return message


def _sealed(said: Said, round: int, earlier: Inbox, own: OwnSteps) -> tuple[SealedFor, ...]:
    boxes = []
    for to, content in said.sealed.items():
        opening = earlier.of(0)[to].body
        if not isinstance(opening, OpeningKey):
            raise ParameterError(f"nothing can be sealed for {to}, who has shown no key")
        with content:
            boxes.append(
                SealedFor(to=to, box=seal_box(content, opening.x25519, box_info(own.task, round, own.name, to)))
            )
    return tuple(boxes)


def _enter(mine: Path, event: Event | None, key: OpenPartyKey) -> None:
    """Enter an event in the party's own journal, unless a run that was stopped has done so."""
    if event is not None and event not in [entry.event for entry in load_journal(mine).entries]:
        append(mine, event, keys=[key])
