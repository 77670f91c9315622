"""The audit pack: all that an auditor needs of a set's folder, in one file that is read where it lies.

Source: trade practice: an audit package that is verified offline and without shares (common practice, no source);
FORMAT.md, sec. 20.
May import: shares.errors, shares.storage, shares.streams, shares.documents.base, shares.history.
Secret: a share that lies in the folder by mistake is met, and refused. Confidential: the pack. Public: names, sizes.
Does not: judge what it packs, or unpack anything.
"""

from __future__ import annotations

import hashlib
import os
import re
from dataclasses import dataclass
from typing import Final

from shares.documents.base import MAX_FILE, parse_object
from shares.errors import DocumentError, StorageError
from shares.history.files import POLICY_NAME, PRACTICE_RECORD, RECORD_NAME, Files
from shares.history.folder import refuse_key
from shares.history.journal import JOURNAL_NAME, MAX_JOURNAL, TORN
from shares.history.tar import END, MAX_MEMBERS, MAX_NAME, content, header, index, padding
from shares.storage import StrPath
from shares.streams import new_file, regular_file

MAX_PACKED: Final = 1 << 24
"""The largest file in a pack beside the journal, in bytes: 16 MiB, for scans."""
# What a set's folder holds for others to see (FORMAT.md, sec. 15). All else stays where it is.
_NAMES: Final = (RECORD_NAME, POLICY_NAME, PRACTICE_RECORD, JOURNAL_NAME)
_FOLDERS: Final = ("acknowledgements", "affidavits", "attestations", "ceremony", "documents", "drills")
# Files that hold a share or a private key, sealed or not. What is damaged, or stands within something else, counts.
_SECRET: Final = ("share", "wrapped-share", "sealed-secret", "party-key")
_SAYS_SECRET: Final = re.compile(rb'"kind"\s*:\s*"(' + "|".join(_SECRET).encode() + rb')"')


@dataclass(frozen=True, slots=True)
class Packed:
    """What went into a pack.

    Attributes:
        names: the files in it, sorted.
        left_out: the files of the folder that are not in it, sorted.
        size: of the pack, in bytes.
        digest: SHA-256 of the pack, 32 bytes: the same for the same files, whenever and wherever it is made.
    """

    names: tuple[str, ...]
    left_out: tuple[str, ...]
    size: int
    digest: bytes


class PackFiles:
    """The files of a set in a pack, read without unpacking it.

    Args:
        path: the pack.

    Raises:
        StorageError: it cannot be read.
        DocumentError: it is not as ``write_pack`` makes them; says of which file.
    """

    def __init__(self, path: StrPath) -> None:
        self._path = path
        with regular_file(path) as reader:
            self._members = index(reader, limit_of=_limit)

    @property
    def where(self) -> str:
        """The pack's path."""
        return os.fspath(self._path)

    def names(self) -> list[str]:
        """Return the names of all files in it, sorted."""
        return list(self._members)

    def read(self, name: str, *, limit: int) -> bytes:
        """Return what a file holds.

        Raises:
            StorageError: it is missing, larger than ``limit`` bytes, or the pack was changed meanwhile.
        """
        where = f"{self.where}, {name}"
        member = self._members.get(name)
        if member is None:
            raise StorageError("is not in the pack", where=where, hint="ask for a pack of the whole folder")
        if member.size > limit:
            raise StorageError(f"is larger than {limit:,} bytes", where=where, hint="check that it is the right file")
        with regular_file(self._path) as reader:
            return content(reader, name, member)


def write_pack(files: Files, to: StrPath) -> Packed:
    """Write the pack of a set: a new file, mode 0600, complete or absent.

    Args:
        files: of the set.
        to: the pack's path.

    Returns:
        What went into it. The same files give the same bytes.

    Raises:
        StorageError: a file of the set holds a share or a private key, has a name or size that a pack does not take,
            or cannot be read; the pack's name is taken or cannot be written. Then there is no pack.
        OtherKindError: it is the folder of a threshold key.
    """
    refuse_key(files)
    # The journal comes first: whatever an entry names was written before it, so that all of it is listed after.
    held = {JOURNAL_NAME: files.read(JOURNAL_NAME, limit=MAX_JOURNAL)} if JOURNAL_NAME in files.names() else {}
    names = sorted(files.names())
    packed = [name for name in names if _belongs(name)]
    if RECORD_NAME not in packed:
        raise StorageError("holds no record, and so no set to pack", where=files.where, hint="name the set's folder")
    if len(packed) > MAX_MEMBERS:
        raise StorageError(f"holds more than {MAX_MEMBERS:,} files that belong in a pack", where=files.where)
    left_out = tuple(name for name in names if not _belongs(name))
    for name in left_out:
        _refuse_stray_share(files, name)
    digest, size = hashlib.sha256(), 0
    with new_file(to, secret=True) as write:
        for name in packed:
            data = held.pop(name, None)
            data = files.read(name, limit=_limit(name)) if data is None else data
            where = f"{files.where}, {name}"
            _refuse_name(name, where)
            _refuse_secret(data, where)
            for part in (header(name, len(data)), data, padding(len(data))):
                write(part)
                digest.update(part)
                size += len(part)
        write(END)
        digest.update(END)
    return Packed(tuple(packed), left_out, size + len(END), digest.digest())


def _belongs(name: str) -> bool:
    first, _, rest = name.partition("/")
    return first in _FOLDERS if rest else name in _NAMES or TORN.fullmatch(name) is not None


def _limit(name: str) -> int:
    return MAX_JOURNAL if name == JOURNAL_NAME else MAX_PACKED


def _refuse_name(name: str, where: str) -> None:
    try:
        length = len(name.encode("utf-8"))
    except UnicodeEncodeError:
        length = MAX_NAME + 1
    if length > MAX_NAME:
        raise StorageError(
            f"has a name that is no UTF-8, or longer than {MAX_NAME} bytes", where=ascii(where), hint="give it another"
        )


def _refuse_stray_share(files: Files, name: str) -> None:
    """Refuse to go on while a share lies beside the record, though it would not be packed: it is never kept there."""
    try:
        data = files.read(name, limit=MAX_FILE)
    except StorageError:
        return  # Too large to be one, or no file at all; and it is not packed.
    _refuse_secret(data, f"{files.where}, {name}")


def _refuse_secret(data: bytes, where: str) -> None:
    said = _SAYS_SECRET.search(data)
    kind = said[1].decode() if said else _kind(data)
    if kind in _SECRET:
        raise StorageError(
            f"holds a {kind.replace('-', ' ')}, and a pack goes to people who must hold none; nothing was packed",
            where=where,
            hint="move it out of the set's folder; who can read that folder may have seen it: `shares journal add`",
        )


def _kind(data: bytes) -> object:
    try:
        return parse_object(data).get("kind") if len(data) <= MAX_FILE else None
    except DocumentError:
        return None
