"""The files of a set, wherever they lie: in its folder, or in a pack made for an auditor.

Source: none.
May import: shares.errors, shares.storage, shares.streams.
Secret: nothing. Confidential: policy, journal and evidence. Public: names, and the record.
Does not: know what a file means. Names are relative and lead nowhere else.
"""

from __future__ import annotations

import os
import stat
from pathlib import Path
from typing import Protocol

from shares.errors import StorageError
from shares.storage import read_file
from shares.streams import refusing

MAX_DOCUMENT = 16 << 20
"""The largest file that an entry names, in bytes: 16 MiB, for scans."""

RECORD_NAME = "record.json"
POLICY_NAME = "policy.toml"
PRACTICE_RECORD = "practice.json"


class Files(Protocol):
    """Where the files of one set can be read."""

    @property
    def where(self) -> str:
        """What to call it in a message, normally its path."""

    def names(self) -> list[str]:
        """Return the names of all files, like ``drills/57/report.json``, sorted."""

    def read(self, name: str, *, limit: int) -> bytes:
        """Return what a file holds.

        Raises:
            StorageError: it is missing, unreadable, or larger than ``limit`` bytes.
        """


class FolderFiles:
    """The files of a set's folder. Links are not followed."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    @property
    def where(self) -> str:
        """The folder's path."""
        return os.fspath(self.folder)

    def names(self) -> list[str]:
        """Return the names of all regular files below the folder, sorted; those that a killed run left are not.

        Raises:
            StorageError: a folder cannot be read.
        """
        found = []
        with refusing(self.where):
            for folder, folders, files in os.walk(self.folder, onerror=_refused):
                folders[:] = [name for name in folders if not name.startswith(".")]
                paths = (os.path.join(folder, name) for name in files if not name.startswith("."))
                found += [os.path.relpath(path, self.folder) for path in paths if _is_regular(path)]
        return sorted(name for name in found if is_name_in_set(name))

    def read(self, name: str, *, limit: int) -> bytes:
        """Return what a file holds.

        Raises:
            StorageError: its name leads elsewhere, a folder on the way is a link, or as for ``Files``.
        """
        check_name_in_set(name)
        for above in Path(name).parents:
            if os.path.islink(self.folder / above) and above != Path():
                raise StorageError("is a symbolic link", where=os.fspath(self.folder / above))
        return read_file(self.folder / name, limit=limit)


def _refused(error: OSError) -> None:
    raise error


def _is_regular(path: str) -> bool:
    return stat.S_ISREG(os.lstat(path).st_mode)


def is_name_in_set(name: str) -> bool:
    """Say whether a file may have this name: it does not lead out of the set's folder, nor to what a killed run left.

    Args:
        name: with ``/`` between its parts.

    >>> [name for name in ("drills/57/report.json", "../policy.toml", "/etc/motd", "a//b") if is_name_in_set(name)]
    ['drills/57/report.json']
    """
    if any(c < " " or c in "\\\x7f" for c in name):
        return False
    return not any(not part or part.startswith(".") for part in name.split("/"))


def check_name_in_set(name: str) -> None:
    """Refuse a name that a file of a set may not have.

    Args:
        name: as for ``is_name_in_set``.

    Raises:
        StorageError: it is no such name.
    """
    if not is_name_in_set(name):
        raise StorageError("is no name of a file in a set's folder", where=ascii(name))
