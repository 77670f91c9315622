"""A set's folder for those who work with it: record, policy, journal, and evidence added beside them.

Source: FORMAT.md, sec. 15.
May import: shares.errors, shares.storage, shares.documents, shares.history.
Secret: party keys that sign, passed through. Confidential: policy, journal. Public: the record.
Does not: forgive: a record or policy that is not what it should be is refused. ``evidence.audit`` reads what it can.
"""

from __future__ import annotations

import contextlib
import itertools
import os
from collections.abc import Sequence
from datetime import datetime
from pathlib import Path
from typing import TYPE_CHECKING

from shares.documents.base import MAX_FILE
from shares.documents.entry import Entry, NamedDigest
from shares.documents.event import Event
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.record import Record
from shares.errors import DocumentError, OtherKindError, ParameterError, StorageError, VerificationError
from shares.history.files import (
    MAX_DOCUMENT,
    POLICY_NAME,
    PRACTICE_RECORD,
    RECORD_NAME,
    Files,
    FolderFiles,
    is_name_in_set,
)
from shares.history.journal import Journal, append, load_journal
from shares.storage import StrPath, make_folder, read_file, write_new

if TYPE_CHECKING:
    from shares.documents.policy import Policy


class SetFolder:
    """The folder of one set.

    Args:
        path: the folder.

    Raises:
        StorageError: the record cannot be read.
        DocumentError: record or policy are none.
        VerificationError: the policy is not the one that the record names.

    Attributes:
        record: the set's record.
        policy: its policy, where it was split by one.
    """

    def __init__(self, path: StrPath) -> None:
        self.path = Path(path)
        where = os.fspath(self.path / RECORD_NAME)
        self.record = Record.parse(read_file(where, limit=MAX_FILE), where=where)
        self.policy = load_policy(FolderFiles(self.path), self.record)

    def journal(self) -> Journal:
        """Read the journal as it stands now.

        Raises:
            StorageError: it cannot be read.
        """
        return load_journal(self.path)

    def named(self, name: str) -> NamedDigest:
        """Return a file of the folder as an entry names it.

        Raises:
            StorageError: it cannot be read, or is larger than 16 MiB.
        """
        data = read_file(self.path / name, limit=MAX_DOCUMENT)
        return NamedDigest.of(name, data)

    def practice_record(self) -> Record:
        """Read the record of the practice set that was dealt with this one.

        Raises:
            StorageError, DocumentError: it cannot be read, or is none.
        """
        where = os.fspath(self.path / PRACTICE_RECORD)
        return Record.parse(read_file(where, limit=MAX_FILE), where=where)

    def free_name(self, name: str) -> str:
        """Return ``name``, or where a stopped run left a file of that name, ``name-2`` and so on."""
        stem, dot, suffix = name.rpartition(".")
        names = (f"{stem}-{number}{dot}{suffix}" for number in itertools.count(2))
        return next(one for one in itertools.chain([name], names) if not os.path.lexists(self.path / one))

    def add(self, name: str, data: bytes) -> NamedDigest:
        """Write a new file into the folder, mode 0600, and return it as an entry names it.

        Raises:
            ParameterError: it is no name for a file in a set's folder.
            StorageError: the name is taken, or the medium refuses.
        """
        if not is_name_in_set(name):
            raise ParameterError("is no name for a file in a set's folder", where=ascii(name))
        named = NamedDigest.of(name, data)
        make_folder((self.path / name).parent)
        write_new(self.path / name, data, secret=True)
        return named

    def append(
        self,
        event: Event,
        *,
        keys: Sequence[OpenPartyKey] = (),
        cards: Sequence[PartyCard] = (),
        documents: Sequence[NamedDigest] = (),
        time: datetime | None = None,
    ) -> Entry:
        """Add an entry to the journal; see ``history.journal.append``.

        Raises:
            ParameterError: the policy asks for two signatures, and fewer parties sign.
            StorageError: the journal cannot be written.
        """
        self.require_signers(keys)
        return append(self.path, event, keys=keys, cards=cards, documents=documents, time=time)

    def require_signers(self, keys: Sequence[OpenPartyKey]) -> None:
        """Refuse an entry that the policy wants two parties to sign, before anything is done.

        Raises:
            ParameterError: fewer sign.
        """
        if self.policy is not None and self.policy.dual_control:
            signing = {key.card.ed25519 for key in keys}
            if len(signing) < 2:
                raise ParameterError(
                    f"the policy asks for dual control: two parties sign each entry, and {len(signing)} would",
                    hint="give the party keys of two people, each with --sign",
                )


def refuse_key(files: Files) -> None:
    """Refuse the folder of a threshold key where a set's is wanted; what else is wrong with a record is left to others.

    Args:
        files: those of the folder.

    Raises:
        OtherKindError: its record is a key's.
    """
    with contextlib.suppress(StorageError):
        data = files.read(RECORD_NAME, limit=MAX_FILE)
        if b'"key-record"' in data:
            try:
                Record.parse(data, where=os.path.join(files.where, RECORD_NAME))
            except OtherKindError:
                raise
            except DocumentError:
                return


def load_policy(files: Files, record: Record) -> Policy | None:
    """Read the policy beside a record, where the record names one.

    Args:
        files: those of the set.
        record: the set's.

    Raises:
        StorageError, DocumentError: it cannot be read, or is none.
        VerificationError: it is not the one that the record names.
    """
    if record.policy is None:
        return None
    # Imported late: a set that was split without a policy needs nothing of it.
    from shares.documents.policy import Policy

    where = os.path.join(files.where, POLICY_NAME)
    policy = Policy.parse(files.read(POLICY_NAME, limit=MAX_FILE), where=where)
    if policy.digest() != record.policy:
        raise VerificationError(
            "it is not the policy that the record names: it was changed since the split",
            where=where,
            hint="bring back the copy that was made at the split; a new policy goes with a new split",
        )
    return policy
