"""The files of a set, wherever they lie: in its folder, or in a pack made for an auditor.

Source: none.
May import: shares.errors, shares.storage.
Secret: nothing. Confidential: policy, journal and evidence.
Does not: know what a file means. Names are relative and lead nowhere else.
"""

from __future__ import annotations

import os
from pathlib import Path
from typing import Protocol

from shares.errors import StorageError
from shares.storage import read_file

RECORD_NAME = "record.json"
POLICY_NAME = "policy.toml"
PRACTICE_RECORD = "practice/record.json"


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
        """Return the names of all regular files below the folder, sorted; those that a killed run left are not."""
        found = []
        for folder, _, files in os.walk(self.folder):
            found += [os.path.relpath(os.path.join(folder, name), self.folder) for name in files if name[0] != "."]
        return sorted(found)

    def read(self, name: str, *, limit: int) -> bytes:
        """Return what a file holds."""
        check_name_in_set(name)
        return read_file(self.folder / name, limit=limit)


def check_name_in_set(name: str) -> None:
    """Refuse the name of a file that would lead out of the set's folder.

    Raises:
        StorageError: it is absolute, or has a part that is empty or begins with a dot.
    """
    if any(not part or part.startswith(".") for part in name.split("/")) or "\\" in name or "\0" in name:
        raise StorageError("is no name of a file in a set's folder", where=repr(name))
