"""The folder of a threshold key: its record, for a custodian the key share, and the journal of what it was used for.

    record.json     the key's public record; whoever asks for signatures or messages needs no more
    share.json      a custodian's own key share, wrapped for their card
    journal.jsonl   what happened, as this party knows it
    nonces/         a signer's nonces, wrapped; never copied, never restored
    asked/          the tasks that this party has asked for
    tasks/          this party's steps in tasks that run, and what is left of those that are over
    opened/         for which encapsulated keys this custodian has served already

Source: FORMAT_KEYS.md, sec. 21 and 22.
May import: shares.errors, shares.storage, shares.documents, shares.history, .checking, .own_share.
Secret: party keys that sign, passed through; the key share stays wrapped. Confidential: the journal. Public: the
record.
Does not: know what is done in a task; what lies in the folders below belongs to the modules that write there.
"""

from __future__ import annotations

import os
from collections.abc import Sequence
from pathlib import Path

from shares.documents.base import MAX_FILE
from shares.documents.entry import Entry, NamedDigest
from shares.documents.event import Event
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.party import OpenPartyKey, PartyCard
from shares.errors import ParameterError, StorageError
from shares.history.files import RECORD_NAME
from shares.history.journal import Journal, append, load_journal
from shares.keys.checking import check_record
from shares.keys.own_share import check_belongs
from shares.storage import StrPath, make_folder, read_file, write_new

SHARE_NAME = "share.json"


class KeyFolder:
    """The folder of one threshold key, a custodian's or that of whoever asks for tasks.

    Args:
        path: the folder.

    Raises:
        StorageError: the record cannot be read.
        DocumentError: it is none.
        VerificationError: it is not signed by all who must have signed it.

    Attributes:
        record: the key's.
    """

    def __init__(self, path: StrPath) -> None:
        self.path = Path(path)
        if not os.path.lexists(self.path / RECORD_NAME):
            raise StorageError(
                f"is no folder of a key: it holds no {RECORD_NAME}",
                where=self.where,
                hint="name the one that `shares key deal` or `join` made, or your own, in which the key's record lies",
            )
        self.record = load_key_record(self.path / RECORD_NAME)

    @property
    def holds_share(self) -> bool:
        """Whether a key share lies here."""
        return os.path.lexists(self.path / SHARE_NAME)

    def share(self) -> KeyShare:
        """Read the key share that lies here, wrapped as it is; by all that it shows it is one of the record's.

        Raises:
            StorageError: there is none, or it cannot be read.
            DocumentError: it is none.
            SetMismatchError, EpochMismatchError, VerificationError: it is not one of this record's.
        """
        where = os.fspath(self.path / SHARE_NAME)
        if not self.holds_share:
            raise StorageError("holds no key share", where=self.where, hint="name the folder of a custodian of the key")
        share = KeyShare.parse(read_file(where, limit=MAX_FILE), where=where)
        check_belongs(share, self.record)
        return share

    def check_own(self, card: PartyCard) -> None:
        """Refuse a folder that is not this party's own: a custodian's is the one with their key share.

        Args:
            card: the party's.

        Raises:
            ParameterError: it is another's, or the party is a custodian of the key, and no key share lies here.
            StorageError, DocumentError, SharesError: the key share that lies here is unreadable or of another key.
        """
        holder = self.record.holder_by(card)
        mine, lies_here = holder.name if holder else None, self.share().custodian if self.holds_share else None
        if mine != lies_here:
            whose = f"is the folder of {lies_here}" if lies_here else f"holds no key share, and {mine} is a custodian"
            raise ParameterError(whose, where=self.where, hint="give your own folder of the key")

    @property
    def where(self) -> str:
        """What to call the folder in a message: its path."""
        return os.fspath(self.path)

    def journal(self) -> Journal:
        """Read the journal as it stands now.

        Raises:
            StorageError: it cannot be read.
        """
        return load_journal(self.path)

    def add(self, name: str, data: bytes) -> NamedDigest:
        """Write a new file into the folder, mode 0600, and return it as an entry names it.

        Raises:
            StorageError: the name is taken, or the medium refuses.
        """
        make_folder((self.path / name).parent)
        write_new(self.path / name, data, secret=True)
        return NamedDigest.of(name, data)

    def append(
        self, event: Event, *, keys: Sequence[OpenPartyKey] = (), documents: Sequence[NamedDigest] = ()
    ) -> Entry:
        """Add an entry to the journal; see ``history.journal.append``.

        Raises:
            StorageError: the journal cannot be written.
        """
        return append(self.path, event, keys=keys, documents=documents)


def load_key_record(path: StrPath) -> KeyRecord:
    """Read a key's record.

    Raises:
        StorageError: it cannot be read.
        DocumentError: it is none.
        VerificationError: it is not signed by all who must have signed it.
    """
    where = os.fspath(path)
    record = KeyRecord.parse(read_file(path, limit=MAX_FILE), where=where)
    check_record(record)
    return record
