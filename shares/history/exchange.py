"""A task's folder: the task, what it is about, and the messages that parties have exchanged, each of them judged.

Source: FORMAT_KEYS.md, sec. 23 and 24.
May import: shares.errors, shares.clock, shares.storage, shares.documents, .rounds.
Secret: nothing; the folder may be shared, copied and sent. Confidential: what is signed or opened. Public: the rest.
Does not: know what a message means, or who speaks when; ``next`` asks the task's course.
"""

from __future__ import annotations

import contextlib
import hashlib
import itertools
import os
import stat
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal, TypeAlias

from shares import clock
from shares.documents.base import MAX_FILE
from shares.documents.key_event import MAX_CONTENT, Content
from shares.documents.key_record import KeyRecord
from shares.documents.task import Joining, Signing, Task
from shares.documents.task_message import MAX_ROUNDS, TaskMessage
from shares.errors import ParameterError, SharesError, StorageError, VerificationError
from shares.history.rounds import Inbox
from shares.storage import StrPath, discard, leftovers, make_folder, read_file, write_new

TASK_NAME, RECORD_NAME, MESSAGES_NAME = "task.json", "record.json", "messages"
CONTENT_NAME, ISSUER_NAME, EARLIER_NAME = "content", "issuer", "earlier"
"""The files beside a task that it names by size and digest: what it is about, and what that is checked by."""
MAX_MESSAGE = 1 << 18
"""The largest file of a message, in bytes: 256 KiB. The largest that anybody has to say is about half of that."""
MAX_MESSAGES = 2_048
"""The most files of messages in a folder: three times what the most parties can have to say."""
MAX_ALL, MAX_STRAY = 1 << 25, 64
"""The most bytes of all of them, 32 MiB, twice what the most parties can have to say; and the most files that are no
signed messages of the task. Each is read, and reading one of the largest takes a twentieth of a second."""

ProblemKind: TypeAlias = Literal[
    "unreadable", "foreign", "stranger", "signature", "late", "conflict", "out-of-turn", "other-view", "content",
    "leftover",
]  # fmt: skip


@dataclass(frozen=True, slots=True)
class Problem:
    """Something wrong in a task's folder.

    Attributes:
        kind: what sort of thing it is, for programs.
        what: in words, with the file's name where it is about one.
        sender: whose message it is; None where that cannot be told.
        stops: whether the task cannot be finished with it. Else the file is left out, and nothing is lost by it. Of a
            folder that was only read: whether that may be.
        round: in which it stops, or may.
    """

    kind: ProblemKind
    what: str
    sender: str | None = None
    stops: bool = False
    round: int | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Reading:
    """What a task's folder holds.

    Attributes:
        inbox: the messages that count, as far as they can be judged without the course of the task.
        problems: what is wrong.
        signed: every message for this task that its sender has signed, those that do not count included.
    """

    inbox: Inbox
    problems: Sequence[Problem]
    signed: Sequence[TaskMessage]


class TaskFolder:
    """The folder of one task.

    Args:
        path: the folder.

    Raises:
        StorageError: the task, or the record beside it, cannot be read.
        DocumentError: they are none.
        VerificationError: the record is not the one that the task names.

    Attributes:
        task: what is to be done.
        record: of the key that is used; None for a key that is being born.
    """

    def __init__(self, path: StrPath) -> None:
        self.path = Path(path)
        where = os.fspath(self.path / TASK_NAME)
        self.task = Task.parse(read_file(where, limit=MAX_FILE), where=where)
        self._digest = self.task.digest()
        self.record: KeyRecord | None = None
        if self.task.record is not None:
            where = os.fspath(self.path / RECORD_NAME)
            self.record = KeyRecord.parse(read_file(where, limit=MAX_FILE), where=where)
            if not _is_named(self.record, self.task):
                raise VerificationError(
                    "it is not the record of the key that the task names",
                    where=where,
                    hint="ask whoever made the task for the whole folder",
                )

    @classmethod
    def create(
        cls,
        path: StrPath,
        task: Task,
        *,
        content: bytes | None = None,
        issuer: bytes | None = None,
        earlier: bytes | None = None,
        record: KeyRecord | None = None,
    ) -> TaskFolder:
        """Make the folder of a new task; ``task.json`` is written last, and with it the task is there.

        Args:
            path: a new folder, or one that holds no task yet.
            task: what is to be done.
            content: what is signed or opened, exactly as the task names it; None for a key that is being born.
            issuer: the certificate that the task names as issuer; None where it names none.
            earlier: the revocation list that it names as the earlier one, likewise.
            record: of the key that is used; None for a key that is being born.

        Raises:
            ParameterError: one of them is not what the task names.
            StorageError: a name is taken, or the medium refuses; then no file of this call is left.
        """
        if (record is None) != (task.record is None) or (record is not None and not _is_named(record, task)):
            raise ParameterError("the record is not the one that the task names")
        beside: dict[str, bytes | None] = {CONTENT_NAME: content, ISSUER_NAME: issuer, EARLIER_NAME: earlier}
        wanted = _wanted(task)
        for name, data in beside.items():
            if (None if data is None else _of(data)) != wanted[name]:
                raise ParameterError(f"the file {name} is not the one that the task names")
        folder = Path(path)
        make_folder(folder / MESSAGES_NAME)
        files = (
            *beside.items(),
            (RECORD_NAME, None if record is None else record.to_file()),
            (TASK_NAME, task.to_file()),
        )
        with contextlib.ExitStack() as undo:
            for name, data in files:
                # What a killed run has left of the same content need not be written again.
                if data is None or (name != TASK_NAME and _holds(folder / name, data)):
                    continue
                write_new(folder / name, data, secret=False)
                undo.callback(_discard_if_possible, folder / name)
            undo.pop_all()
        return cls(folder)

    def content(self) -> bytes | None:
        """Return what the task is about, exactly as it names it; see ``beside``."""
        return self.beside(CONTENT_NAME)

    def beside(self, name: str) -> bytes | None:
        """Return a file beside the task, exactly as it names it; None where it names none.

        Args:
            name: ``CONTENT_NAME``, ``ISSUER_NAME`` or ``EARLIER_NAME``.

        Raises:
            StorageError: the file is missing or cannot be read.
            VerificationError: it is not the one that the task names.
        """
        wanted = _wanted(self.task)[name]
        if wanted is None:
            return None
        where = os.fspath(self.path / name)
        found = read_file(where, limit=MAX_CONTENT)
        if _of(found) != wanted:
            about = "what the task is about" if name == CONTENT_NAME else f"the {name} that the task names"
            raise VerificationError(
                f"it is not {about}, which has {wanted.size:,} bytes and the SHA-256 {wanted.digest.hex()}",
                where=where,
                hint="do nothing with this task; ask whoever made it for the whole folder",
            )
        return found

    def read(self) -> Reading:
        """Read and judge everything that lies in the folder.

        Raises:
            StorageError: the messages cannot be listed, or are too many or too large; or too many files are none.
        """
        problems, content = [], None
        try:
            content = self.content()
        except SharesError as error:
            problems.append(Problem("content", f"{error.where}: {error.what}", stops=True))
        signed: dict[bytes, TaskMessage] = {}
        for path in self._message_files():
            judged = self._judge(path)
            if isinstance(judged, Problem):
                problems.append(judged)
                if len(problems) > MAX_STRAY:
                    raise self._flooded(f"{MAX_STRAY} files that are no messages of this task")
            else:
                signed.setdefault(judged.digest(), judged)
        by_place: dict[tuple[int, str], list[TaskMessage]] = {}
        for message in signed.values():
            by_place.setdefault((message.round, message.sender), []).append(message)
        rounds: list[dict[str, TaskMessage]] = [{} for _ in range(MAX_ROUNDS)]
        for (round, sender), messages in sorted(by_place.items()):
            problem = _conflict(round, sender) if len(messages) > 1 else self._lateness(messages[0])
            if problem:
                problems.append(problem)
            else:
                rounds[round][sender] = messages[0]
        for left in leftovers(self.path / MESSAGES_NAME):
            problems.append(
                Problem("leftover", f"{_shown(left.name)}: left by a run that was stopped, or that is at work now")
            )
        return Reading(Inbox(self.task, tuple(rounds), content), tuple(problems), tuple(signed.values()))

    def release(self, message: TaskMessage) -> Path:
        """Put a message into the folder; where its name is taken by something else, both are kept.

        Returns:
            The file in which it lies, whole and on the medium.

        Raises:
            StorageError: the medium refuses.
        """
        folder, data = self.path / MESSAGES_NAME, message.to_file()
        make_folder(folder)
        _check_folder(folder)
        for number in itertools.count(1):
            path = folder / f"{message.round}-{message.sender}{'' if number == 1 else f'-{number}'}.json"
            if not os.path.lexists(path):
                try:
                    write_new(path, data, secret=False)
                except StorageError:
                    # Another run of this party may have been faster with the same message.
                    if not os.path.lexists(path):
                        raise
            if _holds(path, data):
                return path
        raise AssertionError  # pragma: no cover - the count does not end

    def _message_files(self) -> list[Path]:
        """Return whatever could be a message, by name."""
        folder = self.path / MESSAGES_NAME
        try:
            _check_folder(folder)
            with os.scandir(folder) as entries:
                possible = (one for one in entries if _may_be_message(one.name))
                found = list(itertools.islice(possible, MAX_MESSAGES + 1))
                sizes = [one.stat(follow_symlinks=False).st_size for one in found]
        except FileNotFoundError:
            return []
        except StorageError:
            raise
        except OSError as error:
            reason = (error.strerror or type(error).__name__).lower()
            raise StorageError(reason, where=os.fspath(folder), hint="check its owner and mode") from error
        if len(found) > MAX_MESSAGES:
            raise self._flooded(f"{MAX_MESSAGES:,} files")
        if sum(min(size, MAX_MESSAGE) for size in sizes) > MAX_ALL:
            raise self._flooded(f"{MAX_ALL >> 20} MiB")
        return sorted(folder / one.name for one in found)

    def _flooded(self, most: str) -> StorageError:
        return StorageError(
            f"holds more than {most}",
            where=os.fspath(self.path / MESSAGES_NAME),
            hint="no task has so many messages; take away what does not belong there",
        )

    def _judge(self, path: Path) -> TaskMessage | Problem:
        """Read one file: a message for this task by one of its parties, or what is wrong with it."""
        name = _shown(path.name)
        try:
            message = TaskMessage.parse(read_file(path, limit=MAX_MESSAGE))
        except SharesError as error:
            return Problem("unreadable", f"{name}: {error.what}")
        if message.task != self._digest:
            return Problem("foreign", f"{name}: it is a message of another task")
        party = self.task.party(message.sender)
        if party is None:
            return Problem("stranger", f"{name}: it says that it is by {message.sender}, who is no party of this task")
        if not message.is_by(party.card):
            what = f"{name}: {message.sender}'s signature does not fit it: it was altered, or somebody else made it"
            return Problem("signature", what, message.sender)
        return message

    def _lateness(self, message: TaskMessage) -> Problem | None:
        if not self.task.is_late(message.created):
            return None
        made, due = clock.to_text(message.created), clock.to_text(self.task.due)
        what = f"{message.sender}'s message of round {message.round} is late: made {made}, and the task was due {due}"
        return Problem("late", what, message.sender, stops=True, round=message.round)


def _check_folder(folder: Path) -> None:
    """Refuse a link in the place of the folder of messages: it could lead anywhere.

    Raises:
        StorageError: it is a link or a file.
        OSError: as the system says.
    """
    if not stat.S_ISDIR(os.lstat(folder).st_mode):
        raise StorageError(
            "is a link or file, not a folder", where=os.fspath(folder), hint="ask for the whole folder of the task"
        )


def conflict_words(round: int, sender: str) -> str:
    """Say that two different messages of one party in one round were found."""
    return (
        f"two different messages of {sender} in round {round}: conflict: misbehaviour or restored state; "
        "both are kept, neither counts"
    )


def _conflict(round: int, sender: str) -> Problem:
    return Problem("conflict", conflict_words(round, sender), sender, stops=True, round=round)


def _may_be_message(name: str) -> bool:
    return name.endswith(".json") and not name.startswith(".")


def _shown(name: str) -> str:
    """Return a file's name fit for a page or terminal: whoever sent the folder chose it."""
    return name if name.isprintable() and len(name) <= 80 else ascii(name)[1:-1][:80]


def _holds(path: Path, data: bytes) -> bool:
    try:
        return read_file(path, limit=len(data)) == data
    except StorageError:
        return False


def _discard_if_possible(path: Path) -> None:
    with contextlib.suppress(StorageError):
        discard(path)


def _wanted(task: Task) -> dict[str, Content | None]:
    work = task.work
    signing = work if isinstance(work, Signing) else None
    return {
        CONTENT_NAME: None if isinstance(work, Joining) else work.content,
        ISSUER_NAME: signing.issuer if signing else None,
        EARLIER_NAME: signing.earlier if signing else None,
    }


def _of(content: bytes) -> Content:
    return Content(size=len(content), digest=hashlib.sha256(content).digest())


def _is_named(record: KeyRecord, task: Task) -> bool:
    return (record.fingerprint, record.key, record.epoch) == (task.record, task.key, task.epoch)
