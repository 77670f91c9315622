"""Nonces on disk, each used for one signature share at most.

Source: RFC 9591, sec. 5.1 and 5.2 (nonces are made beforehand, used once and deleted); D. Boneh, V. Shoup, "A Graduate
    Course in Applied Cryptography", sec. 19.2 (two signatures with one nonce give the key away); flock(2), stat(2).
May import: shares.errors, shares.memory, shares.storage, shares.streams, shares.documents, shares.history.lines,
    shares.group.edwards25519, .frost.
Secret: nonces, sealed on disk for the signer's own card; the key share and party key are passed through. Public:
commitments, names of files, how many there are.
Does not: notice that a whole disk, file system or virtual machine was put back to an earlier time: nothing on it can.
Whoever does that throws away all nonces that lie there. Nor does it erase media: they may keep old blocks.

The folder of a signer holds:

    pair-ID.json        nonces that were never used
    batch-BATCH.json    signed by the signer: which pairs it made, and the mark of each one's file
    spent-ID-PURPOSE    empty, and stays for ever: the pair is used for one purpose, which is message, commitments of
                        all, record and task, in one digest
    bound-ID.json       the nonces of a spent pair, sealed anew for that purpose, until their share is kept

A mark is inode number and time of last change of a file, which nobody sets at will: whatever is copied, restored, moved
away and back, linked or written over has another one. From a pair nonces are taken only while its file has the mark
that the signer signed. From what is bound they are taken for the purpose alone that they were sealed with, and only
while ``spent-ID-PURPOSE`` has the mark that they were sealed with. A share is worked out when the pair is gone, on the
medium; after a crash the same purpose finds what is bound, and gives the same share.

So nobody without the party key makes a nonce serve a second purpose by writing into this folder, by keeping what lay
there, or by killing runs, and nobody has nonces used that the signer did not make. Not covered are: whoever is at work
there in the very moment in which files are made; sets the machine's clock back; mounts another file system there, or
puts a snapshot of this one back; has the party key, or reads the memory of a run. Nor is a medium that keeps no modes,
like FAT, where there are no marks, or one that tells times by the second: what is put back there goes unnoticed.
"""

from __future__ import annotations

import os
import secrets
import stat
import time
from collections.abc import Mapping
from pathlib import Path
from typing import Final

from shares.documents.base import MAX_FILE, sha256
from shares.documents.key_record import KeyRecord
from shares.documents.nonce_batch import (
    MAX_BATCH,
    BoundPair,
    NonceBatch,
    NonceMark,
    NonceMarks,
    NoncePair,
    SealedPair,
    pair_id,
)
from shares.documents.party import OpenPartyKey
from shares.documents.wrapping import Sealer, card_sealer
from shares.errors import ParameterError, VerificationError
from shares.group.edwards25519 import Point, Scalar
from shares.history.lines import alone_in
from shares.keys import frost
from shares.keys.frost import Nonces
from shares.memory import Secret
from shares.storage import discard, leftovers, make_folder, read_file, write_many_new, write_new
from shares.streams import refusing

_NEW: Final = "make new ones with `shares key commit`, and use them in a new task"
_KEPT_MODE: Final = 0o600
_TICK: Final = 0.02
"""Seconds: longer than the clock rests from which a file gets its time of change."""


class NonceStore:
    """The nonces of one signer of one key.

    Args:
        folder: where they lie; made when there are any.
        record: the key's. Nonces of another key or epoch are refused.
        signer: the name in the record.
        key: the signer's party key, which seals and opens them.
    """

    def __init__(self, folder: Path, record: KeyRecord, signer: str, key: OpenPartyKey) -> None:
        self.folder = folder
        self.record = record
        self.signer = signer
        self.key = key

    def make(self, share: Scalar, count: int = 1) -> list[tuple[Point, Point]]:
        """Make pairs of nonces and keep them.

        Args:
            share: the signer's key share, which hedges the randomness.
            count: how many pairs, 1 to ``MAX_BATCH``.

        Returns:
            The commitments to each pair. All is on the medium then, so they may be handed out. A run that is killed
            before leaves pairs that were never promised and are never used.

        Raises:
            ParameterError: a count out of range.
            StorageError: the folder refuses.
        """
        if not 1 <= count <= MAX_BATCH:
            raise ParameterError(f"1 to {MAX_BATCH} pairs of nonces are made at a time")
        make_folder(self.folder)
        batch = secrets.token_hex(16)
        seal = card_sealer(self.key.card.recipient())
        made = [self._sealed(frost.commit(share), batch, seal) for _ in range(count)]
        paths = {self._unspent(pair_id(one.hiding, one.binding)): one for one in made}
        write_many_new(self.folder, {path.name: one.to_file() for path, one in paths.items()})
        # The marks are read off the files as they lie there, and with them they become a promise.
        marks = [NonceMark(pair=pair_id(one.hiding, one.binding), mark=_mark(path)) for path, one in paths.items()]
        time.sleep(_TICK)  # Whatever is done to these files from now on changes their marks.
        listed = NonceMarks.signed_by(self.key, record=self.record, signer=self.signer, batch=batch, marks=marks)
        write_new(self._marks(batch), listed.to_file(), secret=True)
        return [(one.hiding, one.binding) for one in made]

    def batch(self, share: Scalar, count: int) -> NonceBatch:
        """Make pairs of nonces and return the signed document by which the commitments to them are handed out.

        Raises:
            ParameterError, StorageError: as for ``make``.
        """
        return NonceBatch.signed_by(
            self.key, record=self.record, signer=self.signer, commitments=self.make(share, count)
        )

    def take(self, hiding: Point, binding: Point, purpose: bytes) -> Nonces:
        """Return the nonces of these commitments, spent for a purpose and for no other, now and for ever.

        Args:
            hiding, binding: the commitments.
            purpose: 32 bytes: a digest of all that the signature share depends on, and of the task.

        Raises:
            VerificationError: they were used for something else, their share was given out, they do not lie here, were
                not made by this signer for this key, or their folder was copied or restored.
            StorageError: the folder refuses.
        """
        name = pair_id(hiding, binding)
        make_folder(self.folder)
        with alone_in(self.folder):
            self._check_purpose(name, purpose)
            pair = self._original(name)
            if pair is not None:
                self._bind(pair, name, purpose)
            nonces = self._opened(name, purpose, (hiding, binding))
            # What a killed run has removed in memory alone, or somebody put back. No share is worked out before.
            discard(self._unspent(name))
            return nonces

    def erase(self, hiding: Point, binding: Point) -> None:
        """Erase nonces, whether they are spent or not; that they are spent stays known. It may be done again.

        Raises:
            StorageError: the folder refuses.
        """
        name = pair_id(hiding, binding)
        if not os.path.lexists(self.folder):
            return
        with alone_in(self.folder):
            # A run that was killed may have left what it was about to bind under a temporary name.
            begun = [path for path in leftovers(self.folder) if path.name.startswith(f".{self._bound(name).name}.")]
            for path in (self._bound(name), self._unspent(name), *begun):
                if os.path.lexists(path):
                    discard(path)

    def holds(self, hiding: Point, binding: Point) -> bool:
        """Say whether the nonces of these commitments lie here and were never used."""
        name = pair_id(hiding, binding)
        return os.path.lexists(self._unspent(name)) and not self._spent(name)

    def unused(self) -> int:
        """Count the pairs that were promised and never used.

        Raises:
            SharesError: what tells of them cannot be read, or is not signed by this signer.
        """
        return sum(not self._spent(name) for name in self._pairs() & self._promised())

    def leftovers(self) -> list[Path]:
        """List what runs that were killed while they made nonces have left: pairs that were never promised.

        Raises:
            SharesError: as for ``unused``.
        """
        return [self._unspent(name) for name in sorted(self._pairs() - self._promised())]

    def _pairs(self) -> set[str]:
        return {path.stem.removeprefix("pair-") for path in self.folder.glob("pair-*.json")}

    def _promised(self) -> set[str]:
        return {name for path in self.folder.glob("batch-*.json") for name in self._marks_in(path)}

    def _unspent(self, name: str) -> Path:
        return self.folder / f"pair-{name}.json"

    def _marks(self, batch: str) -> Path:
        return self.folder / f"batch-{batch}.json"

    def _bound(self, name: str) -> Path:
        return self.folder / f"bound-{name}.json"

    def _spent_path(self, name: str, purpose: bytes) -> Path:
        return self.folder / f"spent-{name}-{purpose.hex()}"

    def _spent(self, name: str) -> list[str]:
        """Return the names of files that say of a pair that it was used: one, if any, in an honest folder."""
        # A folder that cannot be listed is refused, never taken for an empty one: all rests on what is found here.
        with refusing(self.folder):
            names = os.listdir(self.folder)
        return sorted(one for one in names if one.startswith(f"spent-{name}-"))

    def _sealed(self, nonces: Nonces, batch: str, seal: Sealer) -> NoncePair:
        hiding, binding = nonces.hiding_commitment, nonces.binding_commitment
        with Secret.of(nonces.encode()) as content:
            return NoncePair.wrap(
                content,
                record=self.record,
                signer=self.signer,
                batch=batch,
                hiding=hiding,
                binding=binding,
                seal=seal,
            )

    def _check_purpose(self, name: str, purpose: bytes) -> None:
        if set(self._spent(name)) - {self._spent_path(name, purpose).name}:
            raise _used_otherwise(self.folder)

    def _original(self, name: str) -> NoncePair | None:
        """Return a pair that was never used; None where it is gone, or what lies here is a copy of one that was."""
        path = self._unspent(name)
        if not os.path.lexists(path):
            return None
        pair = NoncePair.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path))
        self._check_facts(pair, name)
        marks = self._marks_of(pair)
        if name in marks and marks[name] in (None, _mark(path)):
            return pair
        if self._spent(name):
            return None
        raise _copied(self.folder)

    def _bind(self, pair: NoncePair, name: str, purpose: bytes) -> None:
        """Seal the nonces of a pair for one purpose, and remove the pair; each step is on the medium before the next.

        Killed before the end, the pair is still there, no share of it is, and all is done anew, for this purpose; for
        another one only after ``spent-ID-PURPOSE`` was removed, and then what was bound before never opens again.
        """
        spent, bound = self._spent_path(name, purpose), self._bound(name)
        with pair.content(self.key.open) as content:
            # A file that somebody put here beforehand might have no mark.
            for left in (bound, spent):
                discard(left)
            # It gets its name when it is made, and no other time of change after that.
            write_many_new(self.folder, {spent.name: b""})
            mark = _mark(spent)
            if mark is None and self._marks_of(pair)[name] is not None:
                raise _copied(self.folder)
            # Without locks another process may do the same for another purpose: then both find both names here.
            self._check_purpose(name, purpose)
            time.sleep(_TICK)  # Whatever is done to it from now on changes its mark.
            seal = card_sealer(self.key.card.recipient())
            sealed = BoundPair.of(pair, content, purpose=purpose, mark=mark, seal=seal)
        write_new(bound, sealed.to_file(), secret=True)
        discard(self._unspent(name))

    def _opened(self, name: str, purpose: bytes, commitments: tuple[Point, Point]) -> Nonces:
        """Open what is bound, for the purpose that it was sealed for."""
        spent, path = self._spent_path(name, purpose), self._bound(name)
        if not os.path.lexists(spent):
            raise VerificationError(
                "the nonces of these commitments do not lie here",
                where=os.fspath(self.folder),
                hint=f"they were made elsewhere, or removed: {_NEW}",
            )
        if not os.path.lexists(path):
            raise VerificationError(
                "this nonce was used, and is erased: its share was given out",
                where=os.fspath(spent),
                hint="the share lies with the steps of its task; `shares task next` sends it again",
            )
        bound = BoundPair.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path))
        self._check_facts(bound, name)
        if bound.purpose != purpose:
            raise _used_otherwise(self.folder)
        # Anybody can seal to a card: that the nonces are the signer's own, the signed list and their commitments say.
        if name not in self._marks_of(bound) or bound.mark not in (None, _mark(spent)):
            raise _copied(self.folder)
        with bound.content(self.key.open) as content, content.view() as view:
            return Nonces.decode(view, commitments)

    def _check_facts(self, pair: SealedPair, name: str) -> None:
        """Refuse nonces of another key, epoch, signer or name than the file is taken for."""
        if (*_facts(pair), pair_id(pair.hiding, pair.binding)) != (*self._own_facts(), name):
            raise VerificationError(
                "these nonces were made for another key, epoch or signer", where=os.fspath(self.folder), hint=_NEW
            )

    def _own_facts(self) -> tuple[str, int, str, str]:
        return self.record.key.hex(), self.record.epoch, self.record.fingerprint, self.signer

    def _marks_of(self, pair: SealedPair) -> Mapping[str, bytes | None]:
        """Return the marks of the batch that a pair says it is of, by pair; none where there is no such batch."""
        path = self._marks(pair.batch)
        return self._marks_in(path) if os.path.lexists(path) else {}

    def _marks_in(self, path: Path) -> Mapping[str, bytes | None]:
        listed = NonceMarks.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path))
        if not listed.is_by(self.key.card) or _facts(listed) != self._own_facts() or path != self._marks(listed.batch):
            raise VerificationError(
                "this list of nonces is not signed by this signer, for this key",
                where=os.fspath(path),
                hint=f"somebody has written into this folder: find out who, and {_NEW}",
            )
        return {one.pair: one.mark for one in listed.marks}


def _facts(document: SealedPair | NonceMarks) -> tuple[str, int, str, str]:
    return document.key.hex(), document.epoch, document.record, document.signer


def _used_otherwise(folder: Path) -> VerificationError:
    return VerificationError(
        "this nonce was used for another message, another group of signers or another task",
        where=os.fspath(folder),
        hint=f"with two shares of one nonce anyone works out the key share: {_NEW}",
    )


def _copied(folder: Path) -> VerificationError:
    return VerificationError(
        "this folder was copied or restored: its nonces are not safe",
        where=os.fspath(folder),
        hint=f"they may have been used already, where it was copied from: {_NEW}",
    )


def _mark(path: Path) -> bytes | None:
    """Return what tells a file from every copy of it: 32 bytes; None where the medium keeps no modes, and so perhaps no
    inode numbers or times that stay.

    Source: stat(2): st_ino; st_ctime, which a file gets when it is written, renamed or restored, and which nobody sets.
    """
    with refusing(path):
        status = path.lstat()
    if stat.S_IMODE(status.st_mode) != _KEPT_MODE:
        return None
    return sha256(b"shares/v1/nonce-mark", f"{status.st_ino}:{status.st_ctime_ns}".encode("ascii"))
