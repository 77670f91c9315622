"""A secret too large to be shared itself: it is encrypted beside the record, and the key is split in its stead.

Source: FORMAT.md, sec. 13.
May import: shares.errors, shares.memory, shares.storage, shares.documents, shares.history,
shares.custody.encrypted_file, .payload.
Secret: the key. Public: the set's identifier, the digest of the encrypted file.
Does not: split; ``custody.split`` does.
"""

from __future__ import annotations

import contextlib
import os
import secrets
import stat
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from shares.custody.encrypted_file import Progress, check_file, digest_of, encrypt_file
from shares.custody.payload import MAX_SECRET
from shares.documents.record import Record
from shares.errors import ParameterError, VerificationError
from shares.history.files import RECORD_NAME
from shares.memory import Secret
from shares.storage import StrPath, discard, make_folder, read_secret

ENCRYPTED_NAME = "secret.encrypted"


@dataclass(frozen=True, slots=True, eq=False)
class Source:
    """What is split: the secret itself, or the key of the file that it was encrypted to.

    Attributes:
        secret: the bytes to be shared.
        set_id: of the set that is to protect them, 16 bytes.
        encrypted_file: the digest of the encrypted file, or None.
    """

    secret: Secret
    set_id: bytes
    encrypted_file: bytes | None


@contextlib.contextmanager
def sourced(source: StrPath, set_folder: Path, *, encrypt: bool, progress: Progress | None = None) -> Iterator[Source]:
    """Read the secret, or encrypt it into the set's folder where that is asked for or it is larger than 64 KiB.

    Args:
        source: a path, or ``-`` for standard input.
        set_folder: where the encrypted file goes; made where it is missing.
        encrypt: encrypt it whatever its size.
        progress: see ``encrypted_file.Progress``.

    Yields:
        What is to be split. What is raised within removes the encrypted file again, unless the record stands by then.

    Raises:
        StorageError: a file cannot be read or written.
        VerificationError: what was written does not read back.
        ParameterError: the secret is empty.
    """
    set_id = secrets.token_bytes(16)
    if not encrypt and not _is_large(source):
        with read_secret(source, limit=MAX_SECRET, if_larger="give --encrypt, which takes any size") as secret:
            yield Source(secret, set_id, None)
        return
    make_folder(set_folder)
    target = set_folder / ENCRYPTED_NAME
    key, digest = encrypt_file(source, target, set_id, progress=progress)
    try:
        with key:
            check_file(target, key, digest, set_id)  # Nothing is called done unread.
            yield Source(key, set_id, digest)
    except BaseException:
        # The record is the commit point: once it stands, the set is in use and cannot do without this file.
        if not os.path.lexists(set_folder / RECORD_NAME):
            discard(target)
        raise


def _is_large(source: StrPath) -> bool:
    """Say whether a file is too large to be shared itself. What does not tell its size is taken to be small."""
    try:
        status = os.fstat(0) if source == "-" else os.stat(source)
    except (OSError, ValueError):
        return False  # Reading it will say what is wrong.
    return stat.S_ISREG(status.st_mode) and status.st_size > MAX_SECRET


def check_encrypted(path: StrPath, record: Record, *, progress: Progress | None = None) -> None:
    """See, without any key, that an encrypted file is whole and the one that the record names.

    Args:
        path: the encrypted file.
        record: the public record.
        progress: see ``encrypted_file.Progress``.

    Raises:
        ParameterError: the record names no encrypted file.
        VerificationError: it is another file, or damaged.
        DocumentError: it is no encrypted file.
        StorageError: it cannot be read.
    """
    if record.encrypted_file is None:
        raise ParameterError("the record names no encrypted file: its shares hold the secret itself")
    if digest_of(path, progress=progress) != record.encrypted_file:
        raise VerificationError(
            "it is not the encrypted file that the record names, or was altered",
            where=os.fspath(path),
            hint="use another copy: without the right file, no shares recover the secret",
        )
