"""Which course and which part belong to a task: one line for each purpose.

Source: FORMAT_KEYS.md, sec. 23.
May import: shares.errors, shares.storage, shares.documents, shares.history, .folder, .joint, .opening,
.own_share, .signing.
Secret: the party key, passed through. Public: the task, the record.
Does not: know what happens in any of them.
"""

from __future__ import annotations

import os
from pathlib import Path

from shares.documents.base import MAX_FILE
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.party import OpenPartyKey
from shares.documents.task import Joining, Opening, Signing
from shares.errors import ParameterError, StorageError
from shares.history.exchange import EARLIER_NAME, ISSUER_NAME, TaskFolder
from shares.history.rounds import Course, Part
from shares.keys.folder import SHARE_NAME
from shares.keys.joint import JointCourse, JointPart
from shares.keys.opening import OpeningCourse, OpeningPart
from shares.keys.own_share import check_is_of
from shares.keys.signing import SigningCourse, SigningPart
from shares.storage import read_file


def course_of(folder: TaskFolder) -> Course:
    """Return the rounds of a task.

    Args:
        folder: the task's.

    Raises:
        VerificationError: the task contradicts the record of the key that it uses, or a file that it names is another.
        StorageError: such a file is missing.
    """
    task = folder.task
    match task.work:
        case Joining():
            return JointCourse(task)
        case Signing():
            return SigningCourse(
                task, _record(folder), issuer=folder.beside(ISSUER_NAME), earlier=folder.beside(EARLIER_NAME)
            )
        case Opening():
            return OpeningCourse(task, _record(folder))


def part_of(folder: TaskFolder, name: str, mine: Path, key: OpenPartyKey) -> Part:
    """Return what one party does in a task.

    Args:
        folder: the task's.
        name: the party, as the task names it.
        mine: the party's own folder; the key share lies there, where one is needed.
        key: its party key.

    Raises:
        StorageError: the key share cannot be read.
        DocumentError: it is none.
        SetMismatchError, EpochMismatchError, VerificationError: it is another party's, of another record than the task
            names, or damaged.
    """
    task = folder.task
    match task.work:
        case Joining():
            return JointPart(task, name, key)
        case Signing():
            share = _share(folder, name, mine)
            if share is None:
                raise StorageError(
                    "there is no key share", where=os.fspath(mine / SHARE_NAME), hint="name your folder of this key"
                )
            return SigningPart(
                task,
                name,
                _record(folder),
                share,
                key,
                mine,
                issuer=folder.beside(ISSUER_NAME),
                earlier=folder.beside(EARLIER_NAME),
            )
        case Opening():
            return OpeningPart(task, name, _record(folder), _share(folder, name, mine), key, mine)


def _share(folder: TaskFolder, name: str, mine: Path) -> KeyShare | None:
    """Return the party's key share, which is looked at before anybody is asked; None where none lies there."""
    path = mine / SHARE_NAME
    if not os.path.lexists(path):
        return None
    share = KeyShare.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path))
    check_is_of(name, share, _record(folder))
    return share


def _record(folder: TaskFolder) -> KeyRecord:
    if folder.record is None:
        raise ParameterError("the task names no key")
    return folder.record
