"""Nonces on disk, each used for one signature share at most.

Source: RFC 9591, sec. 5.1 and 5.2 (nonces are made beforehand, used once and deleted); D. Boneh, V. Shoup, "A Graduate
    Course in Applied Cryptography", sec. 19.2 (two signatures with one nonce give the key away); rename(2), stat(2).
May import: shares.errors, shares.memory, shares.storage, shares.streams, shares.documents, .frost,
    shares.group.edwards25519.
Secret: nonces, sealed on disk for the signer's own card; the key share and party key are passed through. Public:
commitments, names of files, how many there are.
Does not: notice that a whole disk, file system or virtual machine was put back to an earlier time: nothing on it can.
Whoever does that throws away all nonces that lie there. Nor does it erase media: they may keep old blocks.

The folder of a signer holds, for each pair of nonces, one file, whose name alone says what may be done with it:

    pair-ID.json        never used; it may be, once its mark stands in batch-BATCH.json, which is written after it
    spent-ID-PURPOSE    used for one purpose: message, commitments of all, record and task, in one digest. It holds the
                        sealed nonces until their share is kept, and nothing after that. It stays for ever.

A pair is renamed, and the new name is on the medium, before its share is worked out. After a crash the same purpose
finds it again, and gives the same share; no other purpose does. A pair that was copied back has a spent one beside it.
A folder that was copied or restored as a whole has files with other marks: inode number and time of last change, which
nobody sets at will. On media that keep no modes, like FAT, there are no marks, and restoring a folder goes unnoticed.
"""

from __future__ import annotations

import os
import secrets
import stat
from pathlib import Path
from typing import Final

from shares.documents.base import MAX_FILE, sha256
from shares.documents.key_record import KeyRecord
from shares.documents.nonce_batch import MAX_BATCH, NonceBatch, NonceMark, NonceMarks, NoncePair, pair_id
from shares.documents.party import OpenPartyKey
from shares.documents.wrapping import Sealer, card_sealer
from shares.errors import ParameterError, StorageError, VerificationError
from shares.group.edwards25519 import Point, Scalar
from shares.keys import frost
from shares.keys.frost import Nonces
from shares.memory import Secret
from shares.storage import empty, make_folder, read_file, rename_new, sync, write_many_new, write_new
from shares.streams import refusing

_NEW: Final = "make new ones with `shares key commit`, and use them in a new task"
_KEPT_MODE: Final = 0o600


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
        listed = NonceMarks(kind="nonce-marks", version=1, batch=batch, marks=tuple(marks))
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
                made for another key, or their folder was copied or restored.
            StorageError: the folder refuses.
        """
        name = pair_id(hiding, binding)
        wanted = self._spent_path(name, purpose)
        if not self._spent(name):
            self._spend(name, wanted)
        # Read anew: where two processes spend one pair, or a file was put back meanwhile, both find both names here.
        if self._spent(name) != [wanted.name]:
            raise VerificationError(
                "this nonce was used for another message, another group of signers or another task",
                where=os.fspath(self.folder),
                hint=f"with two shares of one nonce anyone works out the key share: {_NEW}",
            )
        # A run that was killed may have renamed the file, and the medium not know it yet.
        sync(self.folder)
        data = read_file(wanted, limit=MAX_FILE)
        if not data:
            raise VerificationError(
                "this nonce was used, and is erased: its share was given out",
                where=os.fspath(wanted),
                hint="the share lies with the steps of its task; `shares task next` sends it again",
            )
        pair = self._checked(NoncePair.parse(data, where=os.fspath(wanted)), name)
        with pair.content(self.key.open) as content, content.view() as view:
            return Nonces.decode(view, (hiding, binding))

    def erase(self, hiding: Point, binding: Point, purpose: bytes) -> None:
        """Erase nonces whose share is kept; their name stays. Nothing happens where that was done already.

        Raises:
            StorageError: the folder refuses.
        """
        path = self._spent_path(pair_id(hiding, binding), purpose)
        if os.path.lexists(path):
            empty(path)

    def holds(self, hiding: Point, binding: Point) -> bool:
        """Say whether the nonces of these commitments lie here and were never used."""
        name = pair_id(hiding, binding)
        return os.path.lexists(self._unspent(name)) and not self._spent(name)

    def unused(self) -> int:
        """Count the pairs that were promised and never used.

        Raises:
            StorageError, DocumentError: what tells of them cannot be read.
        """
        return sum(not self._spent(name) for name in self._pairs() & self._promised())

    def leftovers(self) -> list[Path]:
        """List what runs that were killed while they made nonces have left: pairs that were never promised.

        Raises:
            StorageError, DocumentError: as for ``unused``.
        """
        return [self._unspent(name) for name in sorted(self._pairs() - self._promised())]

    def _pairs(self) -> set[str]:
        return {path.stem.removeprefix("pair-") for path in self.folder.glob("pair-*.json")}

    def _promised(self) -> set[str]:
        return {one.pair for path in self.folder.glob("batch-*.json") for one in _marks_in(path)}

    def _unspent(self, name: str) -> Path:
        return self.folder / f"pair-{name}.json"

    def _marks(self, batch: str) -> Path:
        return self.folder / f"batch-{batch}.json"

    def _spent_path(self, name: str, purpose: bytes) -> Path:
        return self.folder / f"spent-{name}-{purpose.hex()}"

    def _spent(self, name: str) -> list[str]:
        """Return the names of files that say of a pair that it was used: one, if any, in an honest folder."""
        return sorted(path.name for path in self.folder.glob(f"spent-{name}-*"))

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

    def _spend(self, name: str, wanted: Path) -> None:
        """Rename a pair that was never used, unless another process does so right now."""
        path = self._unspent(name)
        try:
            pair = self._checked(NoncePair.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path)), name)
            is_original = self._is_original(path, pair)
            if is_original:
                rename_new(path, wanted.name)
        except StorageError:
            if os.path.lexists(path):
                raise
            is_original = None
        if is_original or self._spent(name):
            return
        where = os.fspath(self.folder)
        if is_original is None:
            raise VerificationError(
                "the nonces of these commitments do not lie here",
                where=where,
                hint=f"they were made elsewhere, or removed: {_NEW}",
            )
        raise VerificationError(
            "this folder was copied or restored: its nonces are not safe",
            where=where,
            hint=f"they may have been used already, where it was copied from: {_NEW}",
        )

    def _checked(self, pair: NoncePair, name: str) -> NoncePair:
        """Refuse nonces of another key, epoch, signer or name than the file is taken for."""
        facts = (pair.key, pair.epoch, pair.record, pair.signer, pair_id(pair.hiding, pair.binding))
        if facts != (self.record.key, self.record.epoch, self.record.fingerprint, self.signer, name):
            raise VerificationError(
                "these nonces were made for another key, epoch or signer", where=os.fspath(self.folder), hint=_NEW
            )
        return pair

    def _is_original(self, path: Path, pair: NoncePair) -> bool:
        """Say whether a file is the very one that was written, as far as the medium tells."""
        listed, name = self._marks(pair.batch), pair_id(pair.hiding, pair.binding)
        if not os.path.lexists(listed):
            return False
        known = {one.pair: one.mark for one in _marks_in(listed)}
        return name in known and known[name] in (None, _mark(path))


def _marks_in(path: Path) -> tuple[NonceMark, ...]:
    return NonceMarks.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path)).marks


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
