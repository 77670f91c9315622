"""Put together what came of a task: a signature, for whoever asked; a message's content, for its receiver alone.

Source: RFC 9591, sec. 5.3 (the coordinator aggregates, without a secret); FORMAT_KEYS.md, sec. 28 (openings).
May import: shares.errors, shares.clock, shares.memory, shares.documents, shares.history, .folder, .opening, .signing.
Secret: the plaintext of an opening, handed to whoever takes it; the receiver's party key, passed through. Public: the
signature.
Does not: write files but the journal; the caller does.
"""

from __future__ import annotations

import contextlib
import hashlib
import itertools
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path

from shares import clock
from shares.documents.key_event import KeyEvent, TaskFailed, TaskFinished
from shares.documents.members import MAX_TEXT
from shares.documents.party import OpenPartyKey
from shares.documents.task import Task
from shares.errors import NotEnoughSharesError, ParameterError, VerificationError
from shares.history.exchange import EARLIER_NAME, ISSUER_NAME, TaskFolder
from shares.history.next import close, opened, speak, turn
from shares.history.rounds import Course, Failure, Inbox, Received
from shares.history.standing import Standing, standing
from shares.history.steps import OwnSteps
from shares.keys.folder import KeyFolder
from shares.keys.opening import PARTIAL_RESULTS, Opened, OpeningCourse, OpeningPart, combine
from shares.keys.opening import outcome as end_of_opening
from shares.keys.signing import SigningCourse, finish_signing
from shares.memory import Secret

_SEVERAL = 16
"""How many partial results more of one custodian are looked at, where there are several."""
Deliver = Callable[[Secret], None]
"""Takes the plaintext to where the receiver wants it: all of it, or it raises."""


def signed(folder: KeyFolder, task: TaskFolder, key: OpenPartyKey) -> bytes:
    """Return the signature, certificate or list that a task was about, checked. It takes no secret of the key.

    Args:
        folder: of the key, in which the task was asked for; its journal tells of a failure.
        task: its folder, with all messages.
        key: the party key of whoever asked, which signs that entry.

    Raises:
        NotEnoughSharesError: somebody has not spoken yet.
        VerificationError: the task has failed; who made it fail is named. Or it is about another key.
        StorageError: a file that the task names is missing, or the journal cannot be written.
    """
    task.content()  # Where it is missing or altered, this copy is damaged; the task has not failed by that.
    issuer, earlier = task.beside(ISSUER_NAME), task.beside(EARLIER_NAME)
    course = SigningCourse(task.task, folder.record, issuer=issuer, earlier=earlier)
    found = standing(course, task.read())
    _refuse_failed(folder, found, key)
    if not found.complete:
        raise _awaited(found)
    data, _ = finish_signing(task.task, folder.record, found.inbox, issuer=issuer, earlier=earlier)
    return data


def begin_opening(folder: KeyFolder, task: TaskFolder, key: OpenPartyKey) -> Path:
    """Say what the receiver says in round 0: a fresh key, kept in the folder's steps until the message is open.

    Args:
        folder: the receiver's own, of the key.
        task: its folder.
        key: the receiver's party key.

    Returns:
        The file of the message.
    """
    course, part, own = _receiving(folder, task, key)
    return speak(task, turn(task, course, own), course, part, own, key)


def open_message(folder: KeyFolder, task: TaskFolder, key: OpenPartyKey, deliver: Deliver) -> Sequence[str]:
    """Put partial results together, as soon as enough of them hold, and hand the content of the message over.

    The journal tells of it, and then the receiver's key of this task is erased. Where handing over fails, all stays as
    it was, to be tried again.

    Args:
        folder: the receiver's own, in which the task was asked for.
        task: its folder, with the messages so far.
        key: the receiver's party key.
        deliver: takes the plaintext, or raises.

    Returns:
        What happened, in words.

    Raises:
        NotEnoughSharesError: fewer than k partial results hold; who is bad or awaited is named.
        VerificationError: the task has failed, or the message does not open.
        ParameterError: the task is over, or the key is not the receiver's.
    """
    course, _, own = _receiving(folder, task, key)
    at = turn(task, course, own)
    _refuse_failed(folder, at.standing, key)
    if at.doing == "done":
        raise ParameterError(
            "this task is over, and what was sealed for it can no longer be read",
            where=str(task.path),
            hint="to read the message again ask for a new task",
        )
    if at.round == 0:
        raise _awaited(at.standing)
    inbox = at.standing.inbox
    with contextlib.ExitStack() as wiped:
        received, *more = (
            wiped.enter_context(opened(one, course, own, key))[1] for one in (inbox, *_besides(at.standing))
        )
        besides = [one[PARTIAL_RESULTS] for one in more]
        found = _combined(folder, at.standing, received, besides, key)
        with found.plaintext as plaintext:
            deliver(plaintext)
            end = end_of_opening(task.task, found)
    if isinstance(end.event, TaskFinished):
        enter_once(folder, end.event, key)
    close(own)
    return [*end.words, *(f"Left aside: {one.what}." for one in at.standing.problems if one.sender is not None)]


def _combined(
    folder: KeyFolder, at: Standing, received: Sequence[Received], besides: Sequence[Received], key: OpenPartyKey
) -> Opened:
    """Combine partial results; where all have given theirs and too few hold, the journal tells that it has failed."""
    task = at.inbox.task
    try:
        return combine(task, folder.record, at.inbox, received, besides=besides)
    except NotEnoughSharesError as error:
        problem = error
    if not at.awaited:
        enter_once(folder, failed(task, Failure(None, problem.what)), key)
    raise problem


def failed(task: Task, failure: Failure) -> TaskFailed:
    """Return what a journal says of a task that came to nothing."""
    reason = failure.what[:MAX_TEXT]
    return TaskFailed(what="task-failed", task=task.digest(), work=task.work.what, by=failure.by, reason=reason)


def finished(task: Task, data: bytes) -> TaskFinished:
    """Return what a journal says of a signature that was put together."""
    result = hashlib.sha256(data).digest()
    return TaskFinished(what="task-finished", task=task.digest(), work="sign", result=result)


def enter_once(folder: KeyFolder, event: KeyEvent, key: OpenPartyKey) -> bool:
    """Add an entry to the journal, unless it says so already; return whether it was added."""
    if event in [entry.event for entry in folder.journal().entries]:
        return False
    folder.append(event, keys=(key,))
    return True


def _receiving(folder: KeyFolder, task: TaskFolder, key: OpenPartyKey) -> tuple[Course, OpeningPart, OwnSteps]:
    course = OpeningCourse(task.task, folder.record)
    me = task.task.party_by(key.card)
    if me is None or me.name != course.work.receiver:
        raise ParameterError(
            f"the receiver of this message is {course.work.receiver}", hint="give the receiver's party key"
        )
    share = folder.share() if folder.holds_share else None
    part = OpeningPart(task.task, me.name, folder.record, share, key, folder.path)
    return course, part, OwnSteps(folder.path, task.task, key.card)


def _besides(found: Standing) -> Iterator[Inbox]:
    """Yield the messages as they are with what else those have said who have said several things."""
    for several in itertools.islice(itertools.zip_longest(*(ones[1:] for ones in found.doubled.values())), _SEVERAL):
        others = {one.sender: one for one in several if one is not None}
        yield Inbox(found.inbox.task, (*found.before(PARTIAL_RESULTS).rounds, others), found.inbox.content)


def _refuse_failed(folder: KeyFolder, found: Standing, key: OpenPartyKey) -> None:
    """Refuse a task that has failed, once the journal tells of it: an auditor is to see who made it fail."""
    if found.failure is not None:
        enter_once(folder, failed(found.inbox.task, found.failure), key)
        # Words about single messages follow: they are why it cannot be finished, where no one's fault is proved.
        raise VerificationError(
            found.failure.words(),
            hint="begin a new one; `shares task show` tells all that is wrong",
        )


def _awaited(found: Standing) -> NotEnoughSharesError:
    task, verb = found.inbox.task, "has" if len(found.awaited) == 1 else "have"
    names, round = ", ".join(found.awaited), found.names[found.round]
    if task.is_late(clock.now()):
        return NotEnoughSharesError(
            f"the task was due {clock.to_text(task.due)}, and {names} {verb} not spoken ({round})",
            hint="nobody can speak in it any more: unless their messages were made in time and are on their way, begin "
            "a new task",
        )
    return NotEnoughSharesError(
        f"{names} {verb} still to speak ({round})",
        hint="bring their messages into the task's folder, and try again",
    )
