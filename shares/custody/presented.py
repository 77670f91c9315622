"""Shares as they are given, readable or not, and what is found of each.

Source: the words for what is found are this project's own (README, "What verify says").
May import: shares.errors, shares.storage, shares.documents.
Secret: the rows of the shares read. Public: the findings.
Does not: judge; ``custody.verify`` and ``custody.recover`` do.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from enum import StrEnum

from shares.documents.base import MAX_FILE, parse_object
from shares.documents.record import Record
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.errors import (
    DocumentError,
    OtherKindError,
    ParameterError,
    SharesError,
    StorageError,
    VerificationError,
    WrongKeyError,
)
from shares.storage import StrPath, read_file


class Status(StrEnum):
    """What is found of one share."""

    INTACT = "intact"
    DAMAGED = "damaged"
    INCONSISTENT = "inconsistent dealing"
    FOREIGN = "foreign set"
    OTHER_EPOCH = "other epoch"
    UNKNOWN = "not in the record"
    LOCKED = "not opened"
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


ShareOpener = Callable[[WrappedShare], Share]
"""Takes a wrapped share and returns the one inside, normally ``Opening.share``."""


def load_shares(paths: Sequence[StrPath], opener: ShareOpener | None = None) -> list[Presented]:
    """Read share files; one that cannot be read, parsed or opened is presented with the reason, and the others go on.

    Args:
        paths: files of shares, wrapped or not.
        opener: what opens wrapped ones; without it they stay closed.

    Raises:
        StorageError, ParameterError: a passphrase that the opener was to use cannot be read.
    """
    return [_load(path, opener) for path in paths]


def _load(path: StrPath, opener: ShareOpener | None) -> Presented:
    source = os.fspath(path)
    try:
        share = parse_share(read_file(path, limit=MAX_FILE), where=source)
    except (StorageError, OtherKindError) as error:
        return Presented(source, None, _reason(error), Status.UNREADABLE)
    except DocumentError as error:
        return Presented(source, None, _reason(error))
    return Presented(source, share) if isinstance(share, Share) else _opened(source, share, opener)


def _opened(source: str, wrapped: WrappedShare, opener: ShareOpener | None) -> Presented:
    if opener is None:
        return Presented(source, None, "it is wrapped, and nothing was given to open it", Status.LOCKED)
    try:
        return Presented(source, opener(wrapped))
    except (StorageError, ParameterError):
        raise  # A passphrase cannot be had from where it was said to be: that is no finding about a share.
    except SharesError as error:
        is_damaged = isinstance(error, VerificationError) and not isinstance(error, WrongKeyError)
        return Presented(source, None, _reason(error), Status.DAMAGED if is_damaged else Status.LOCKED)


def parse_share(data: bytes, *, where: str) -> Share | WrappedShare:
    """Read a share, wrapped or not, from the bytes of a file.

    Raises:
        DocumentError: it is neither.
    """
    kind = WrappedShare if parse_object(data, where=where).get("kind") == WrappedShare.KIND else Share
    return kind.parse(data, where=where)


def _reason(error: SharesError) -> str:
    return f"{error.what} ({error.hint})" if error.hint else error.what


def load_record(path: StrPath) -> Record:
    """Read a record file.

    Raises:
        StorageError: it cannot be read.
        DocumentError: it is not a record, or does not agree with itself.
    """
    return Record.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path))
