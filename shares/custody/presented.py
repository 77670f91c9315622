"""Shares as they are given, readable or not, and what is found of each.

Source: the words for what is found are this project's own (README, "What verify says").
May import: shares.errors, shares.storage, shares.documents.
Secret: the rows of the shares read. Public: the findings.
Does not: judge; ``custody.verify`` and ``custody.recover`` do.
"""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass
from enum import StrEnum

from shares.documents.base import MAX_FILE
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import DocumentError, StorageError
from shares.storage import StrPath, read_file


class Status(StrEnum):
    """What is found of one share."""

    INTACT = "intact"
    DAMAGED = "damaged"
    INCONSISTENT = "inconsistent dealing"
    FOREIGN = "foreign set"
    OTHER_EPOCH = "other epoch"
    UNKNOWN = "not in the record"
    UNREADABLE = "unreadable"


@dataclass(frozen=True, slots=True)
class Finding:
    """One share's status, with the reason in words."""

    source: str
    custodian: str | None
    status: Status
    reason: str


@dataclass(frozen=True, slots=True, eq=False)
class Presented:
    """A share as it was given: what to call it, and the share, or why there is none."""

    source: str
    share: Share | None
    problem: str = ""
    status: Status = Status.DAMAGED

    def finding(self, status: Status, reason: str) -> Finding:
        """Return a finding about this share."""
        return Finding(self.source, self.share.custodian if self.share else None, status, reason)


def load_shares(paths: Sequence[StrPath]) -> list[Presented]:
    """Read share files; one that cannot be read or parsed is presented with the reason, and the others go on."""
    return [_load(path) for path in paths]


def _load(path: StrPath) -> Presented:
    source = os.fspath(path)
    try:
        return Presented(source, Share.parse(read_file(path, limit=MAX_FILE), where=source))
    except StorageError as error:
        return Presented(source, None, _reason(error), Status.UNREADABLE)
    except DocumentError as error:
        return Presented(source, None, _reason(error))


def _reason(error: StorageError | DocumentError) -> str:
    return f"{error.what} ({error.hint})" if error.hint else error.what


def load_record(path: StrPath) -> Record:
    """Read a record file.

    Raises:
        StorageError: it cannot be read.
        DocumentError: it is not a record, or does not agree with itself.
    """
    return Record.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path))
