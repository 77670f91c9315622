"""Whole files: read, written, undone; folders. Reading cannot be led astray, and files are whole or absent.

Source: open(2), mkdir(2), posix_fadvise(2) of the Linux manual pages.
May import: errors, memory, streams.
Secret: what ``read_secret`` reads, what ``write_new`` is given with ``secret=True``, and what a share file that is read
holds. Public: paths, sizes, modes.
Does not: replace anything, erase media (flash and journaling file systems keep old blocks), or know what a file means.
"""

from __future__ import annotations

import contextlib
import os
import re
from collections.abc import Mapping
from pathlib import Path
from typing import Final

from shares.errors import StorageError
from shares.memory import Secret
from shares.streams import (
    CREATE,
    Octets,
    Reader,
    folder_of,
    medium_sync,
    new_file,
    refusing,
    regular_file,
    remove,
    remove_if_possible,
    secret_source,
    sync_folder,
    write_all,
)
from shares.streams import StrPath as StrPath

_CHUNK: Final = 65536
_PARTIAL: Final = re.compile(r"\..+\.[0-9a-f]{16}\.partial", re.DOTALL)

_MANY: Final = 16
_CHECK: Final = "check that it is the right file"


def read_file(path: StrPath, *, limit: int) -> bytes:
    """Read a regular file whole; links, folders and special files are refused without waiting on them.

    Args:
        path: the file.
        limit: the most bytes accepted, 0 or more.

    Returns:
        The content, at most ``limit`` bytes.

    Raises:
        StorageError: the file is missing, not regular, unreadable, or larger than ``limit``, even if it only grew so
            large while it was read.
    """
    return _read(path, limit, fresh=False)


def read_back(path: StrPath, *, limit: int) -> bytes:
    """Read like ``read_file``, from the medium as far as the system lets us, to see what was really written.

    Args:
        path: the file.
        limit: the most bytes accepted, 0 or more.

    Returns:
        The content, at most ``limit`` bytes.

    Raises:
        StorageError: as for ``read_file``.

    Source: posix_fadvise(2), POSIX_FADV_DONTNEED. It is advice, and a drive's own cache is out of its reach.
    """
    return _read(path, limit, fresh=True)


def read_secret(source: StrPath, *, limit: int, if_larger: str = _CHECK) -> Secret:
    """Read secret bytes straight into locked memory; no Python copy of them is made.

    Args:
        source: a path, or ``-`` for standard input (a file of that name is ``./-``).
        limit: the most bytes accepted, 0 or more.
        if_larger: what to do about a source that gives more, for the refusal.

    Returns:
        A new secret of 0 to ``limit`` bytes; whether an empty one makes sense is the caller's to say.

    Raises:
        StorageError: the source is missing, a folder, a terminal, unreadable, or larger than ``limit``.
    """
    with secret_source(source) as reader:
        return _read_secret(reader, limit, if_larger)


def write_new(path: StrPath, data: Octets, *, secret: bool) -> None:
    """Write a new file that is complete and on the medium, or absent; nothing is ever replaced.

    Args:
        path: the file; its folder must exist.
        data: the whole content.
        secret: True for mode 0600, False for 0644, whatever the umask. A medium that keeps no modes (FAT) shows the
            file to everyone who can mount it.

    Raises:
        StorageError: the name is taken, or the medium or folder refuses; then nothing of this call is left behind.

    Source: rename(2), link(2), fsync(2). Where a medium has neither an exclusive rename nor links, the final name is
    itself created exclusively, and only there can a killed run leave an incomplete file under it.
    """
    with new_file(path, secret=secret) as write:
        write(data)


def write_many_new(folder: StrPath, files: Mapping[str, bytes]) -> None:
    """Write many new files, of mode 0600, and put them on the medium together: much faster than one by one.

    A killed run may leave any of them, and one of them incomplete. So they count for nothing until a file that is
    written after them, by ``write_new``, says so.

    Args:
        folder: where; it must exist.
        files: their names and contents.

    Raises:
        StorageError: a name is taken, or the medium or folder refuses; then nothing of this call is left behind.

    Source: syncfs(2).
    """
    # Few files are not worth waiting for all that others have written to the medium.
    together = medium_sync() if len(files) >= _MANY else None
    with refusing(folder), folder_of(Path(folder) / "any") as held, contextlib.ExitStack() as undo:
        for name, data in files.items():
            descriptor = os.open(name, CREATE, 0o600, dir_fd=held)
            undo.callback(remove_if_possible, held, name)
            try:
                # As for one new file: a medium without modes that refuses this loses nothing.
                with contextlib.suppress(OSError):
                    os.fchmod(descriptor, 0o600)
                write_all(descriptor, data)
                if together is None:
                    os.fsync(descriptor)
            finally:
                os.close(descriptor)
        if together is not None:
            together(held)
        sync_folder(held)
        undo.pop_all()


def make_folder(path: StrPath) -> None:
    """Make a folder, and those above it that are missing, each of mode 0700; one that exists is left as it is.

    Args:
        path: the folder.

    Raises:
        StorageError: something else has the name, or the folder above refuses.
    """
    path = Path(path)
    with refusing(path):
        if path.is_dir():
            return
        make_folder(path.parent)
        with folder_of(path) as above:
            try:
                os.mkdir(path.name, 0o700, dir_fd=above)
            except FileExistsError:
                # Another process may just have made the same folder.
                if not path.is_dir():
                    raise StorageError("is not a folder", where=os.fspath(path), hint="choose another name") from None
            else:
                sync_folder(above)


def leftovers(folder: StrPath) -> list[Path]:
    """List the temporary files that a killed run left in a folder. Those of a secret file hold secret bytes.

    Args:
        folder: the folder; a missing one has none.

    Returns:
        Their paths, sorted by name. A run that is still at work has its temporary file there as well.

    Raises:
        StorageError: the folder cannot be read.
    """
    with refusing(folder):
        try:
            names = os.listdir(folder)
        except FileNotFoundError:
            return []
    return [Path(folder, name) for name in sorted(names) if _PARTIAL.fullmatch(name)]


def discard(path: StrPath) -> None:
    """Remove a file that this very run wrote, to undo an act that failed. The medium may keep the old blocks.

    Args:
        path: the file; a missing one is fine.

    Raises:
        StorageError: the system refuses.
    """
    path = Path(path)
    with refusing(path), folder_of(path) as folder:
        remove(folder, path.name)
        sync_folder(folder)


def _read(path: StrPath, limit: int, *, fresh: bool) -> bytes:
    with regular_file(path) as reader, refusing(path):
        if fresh:
            with contextlib.suppress(OSError):
                os.posix_fadvise(reader.descriptor, 0, 0, os.POSIX_FADV_DONTNEED)
        # One byte beyond the limit is asked for: whoever can give it is too large, whatever size was claimed.
        parts, left = [], limit + 1
        while left > 0 and (part := os.read(reader.descriptor, min(_CHUNK, left))):
            parts.append(part)
            left -= len(part)
        if left <= 0:
            raise _too_large(reader.where, limit)
    return b"".join(parts)


def _read_secret(reader: Reader, limit: int, if_larger: str) -> Secret:
    # The room starts at a page and doubles, since lockable memory is scarce and most secrets are short.
    room, length = Secret(min(4096, limit + 1)), 0
    try:
        while True:
            with room.view() as view, view[length:] as free:
                length += reader.fill(free)
            if length > limit:
                raise _too_large(reader.where, limit, if_larger)
            with room.view() as view, view[:length] as filled:
                if length < len(room):
                    return Secret.of(filled)
                larger = Secret(min(2 * length, limit + 1))
                with larger.view() as target:
                    target[:length] = filled
            room.close()
            room = larger
    finally:
        room.close()


def _too_large(where: str, limit: int, hint: str = _CHECK) -> StorageError:
    return StorageError(f"is larger than {limit:,} bytes", where=where, hint=hint)
