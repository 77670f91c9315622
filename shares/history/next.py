"""Where a task stands, whose turn it is, and one party's next step: stored whole before anything of it is released.

Source: FORMAT_KEYS.md, sec. 24 and 25; Y. Ishai, R. Ostrovsky, V. Zikas, "Secure multi-party computation with
identifiable abort", CRYPTO 2014 (a task that fails says by whom, as far as that can be told).
May import: shares.errors, shares.clock, shares.documents, shares.memory, .exchange, .journal, .rounds, .steps.
Secret: states and what is sealed, on their way between a party's part and its steps. Public: messages, who is awaited.
Does not: know any purpose; a course and a part, which ``keys`` makes, do. Ask anybody; the command does.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Literal, TypeAlias

from shares import clock
from shares.documents.event import Event
from shares.documents.party import OpenPartyKey
from shares.documents.task_box import is_box_key, new_box_key, seal_box
from shares.documents.task_message import Body, OpeningKey, SealedFor, TaskMessage, box_info
from shares.errors import ParameterError, SharesError, VerificationError
from shares.history.exchange import Problem, Reading, TaskFolder
from shares.history.journal import append, load_journal
from shares.history.rounds import Course, Failure, Inbox, Outcome, Part, Received, Said
from shares.history.steps import OwnSteps
from shares.memory import Secret

Doing: TypeAlias = Literal["speak", "repeat", "wait", "finish", "erase", "done", "failed"]


@dataclass(frozen=True, slots=True, eq=False)
class Standing:
    """Where a task stands, as anybody with its folder can see.

    Attributes:
        round: the first round that is not complete; the number of rounds where all are.
        names: what is said in each round.
        inbox: the messages of complete rounds, and those that were said so far in ``round``.
        spoken: who has spoken in ``round``.
        awaited: who has not.
        failure: why the task cannot be finished, whoever waits for whom; None while it can.
        problems: what is wrong with single messages or files.
    """

    round: int
    names: Sequence[str]
    inbox: Inbox
    spoken: Sequence[str]
    awaited: Sequence[str]
    failure: Failure | None
    problems: Sequence[Problem]

    @property
    def complete(self) -> bool:
        """Whether everything has been said."""
        return self.round == len(self.names) and self.failure is None

    def before(self, round: int) -> Inbox:
        """Return what had been said before a round, which no later message belongs to."""
        return Inbox(self.inbox.task, self.inbox.rounds[:round], self.inbox.content)


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


def standing(course: Course, reading: Reading) -> Standing:
    """Say where a task stands.

    Args:
        course: of the task.
        reading: what its folder holds.
    """
    task, said = reading.inbox.task, reading.inbox
    problems = list(reading.problems)
    done = Inbox(task, (), said.content)
    spoken: list[str] = []
    awaited: list[str] = []
    failure = _stopped(problems) or course.failure(done)
    round = 0
    while failure is None and round < len(course.rounds):
        speakers = list(course.speakers(round, done))
        here = said.of(round)
        problems += [_out_of_turn(round, name) for name in here if name not in speakers]
        strange = [name for name in here if name in speakers and here[name].seen != done.seen(round)]
        problems += [_other_view(round, name) for name in strange]
        counted = {name: here[name] for name in speakers if name in here and name not in strange}
        spoken = [name for name in speakers if name in counted]
        awaited = [name for name in speakers if name not in counted]
        done = Inbox(task, (*done.rounds, counted), said.content)
        if strange:
            failure = Failure(None, _other_view(round, strange[0]).what)
        if awaited:
            break
        failure = failure or _bad_key(course, done, round) or course.failure(done)
        round += 1
    late_rounds = [(number, name) for number in range(len(course.rounds), len(said.rounds)) for name in said.of(number)]
    problems += [_out_of_turn(number, name) for number, name in late_rounds]
    if not awaited:
        spoken = []
    return Standing(round, tuple(course.rounds), done, tuple(spoken), tuple(awaited), failure, tuple(problems))


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
    if own.done() is not None:
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
        VerificationError: the task is past its due date, or the part finds something wrong.
        StorageError: something cannot be written.
    """
    if at.doing not in ("speak", "repeat"):
        raise ParameterError("it is not this party's turn to speak")
    earlier = at.standing.before(at.round)
    with own.alone():
        # Another run of this party may have spoken meanwhile: its message is the one to send.
        message = own.messages().get(at.round)
        if message is None:
            time = clock.now()
            if own.task.is_late(time):
                due, now = clock.to_text(own.task.due), clock.to_text(time)
                raise VerificationError(
                    f"the task was due {due}, and it is {now} by this machine's clock",
                    hint="set the clock if it is wrong; else ask for a new task",
                )
            message = _say(at.round, earlier, course, part, own, key)
        if own.done() is None:
            _enter(own.mine, part.event(at.round, earlier), key)
        part.kept(at.round, earlier)
        return folder.release(message)


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


def _stopped(problems: Sequence[Problem]) -> Failure | None:
    found = next((problem for problem in problems if problem.stops), None)
    if found is None:
        return None
    return Failure(found.sender if found.kind == "late" else None, found.what)


def _bad_key(course: Course, inbox: Inbox, round: int) -> Failure | None:
    """Say who has shown no key that anything can be sealed to, where round 0 is about that."""
    for name, message in inbox.of(0).items() if course.private and round == 0 else ():
        if not isinstance(message.body, OpeningKey) or not is_box_key(message.body.x25519):
            return Failure(name, "its message of round 0 shows no key that anything can be sealed to")
    return None


def _out_of_turn(round: int, sender: str) -> Problem:
    return Problem("out-of-turn", f"{sender} has no turn in round {round}: its message there does not count", sender)


def _other_view(round: int, sender: str) -> Problem:
    return Problem(
        "other-view",
        f"{sender} answered in round {round} to other messages than are here: somebody has sent different messages to "
        "different people, or one was exchanged",
        sender,
        stops=True,
    )
