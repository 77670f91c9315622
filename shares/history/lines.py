"""A file of lines that only grows: one process at a time, each line on the medium before anybody is told of it.

Source: flock(2), fsync(2), open(2), pread(2) of the Linux manual pages.
May import: shares.errors, shares.streams.
Secret: nothing. Confidential: the lines. Public: the file's name.
Does not: know what a line says, or read more of the file than its end unless it is asked to search it.
"""

from __future__ import annotations

import contextlib
import errno
import fcntl
import os
import stat
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Final, final

from shares.errors import ParameterError, StorageError
from shares.streams import folder_of, refusing, sync_folder, write_all

MAX_LINE: Final = 1 << 20
"""The longest line, in bytes, its end not counted: 1 MiB."""
PATIENCE: Final = 60.0
"""How long to wait for another process that writes, in seconds."""

# O_NONBLOCK: a pipe in the file's place is refused at once instead of waited for.
_OPEN: Final = os.O_NOFOLLOW | os.O_NONBLOCK | os.O_NOCTTY | os.O_CLOEXEC
_PAUSE: Final = 0.02
# What flock(2) answers where a medium has no locks on folders.
_UNSUPPORTED: Final = frozenset(
    {errno.EBADF, errno.EINVAL, errno.ENOLCK, errno.ENOSYS, errno.ENOTSUP, errno.EOPNOTSUPP}
)
_PIECE: Final = 1 << 20


@final
class Lines:
    """An open file of lines that no other process adds to meanwhile; ``writing`` opens one.

    Attributes:
        end: where the whole lines end, in bytes from the start; 0 where there are none.
        last: the last whole line, without its end.
        torn: what stands after the last whole line: a run was stopped while it wrote it.
    """

    __slots__ = ("_descriptor", "_where", "end", "last", "torn")

    def __init__(self, descriptor: int, where: str) -> None:
        self._descriptor = descriptor
        self._where = where
        size = os.fstat(descriptor).st_size
        # A line and a torn one have their ends within this, or are longer than any.
        start = max(0, size - 2 * MAX_LINE - 2)
        tail = _read(descriptor, start, size)
        whole, end, self.torn = tail.rpartition(b"\n")
        self.end = size - len(self.torn)
        _, end_before, self.last = whole.rpartition(b"\n")
        if len(self.torn) > MAX_LINE or len(self.last) > MAX_LINE or (start and not (end and end_before)):
            raise StorageError(
                "ends in a line longer than any that belongs there",
                where=where,
                hint="bring back a copy of the file; nothing was added",
            )

    def holds(self, text: bytes) -> bool:
        """Say whether a text stands in the whole lines: read through, piece by piece.

        Args:
            text: within one line, at most 1 MiB.

        Raises:
            StorageError: the system refuses.
        """
        places = range(0, self.end, _PIECE)
        with refusing(self._where):
            return any(text in _read(self._descriptor, at, min(at + 2 * _PIECE, self.end)) for at in places)

    def cut(self) -> None:
        """Take away the torn line, which the caller has put elsewhere.

        Raises:
            StorageError: the system refuses.
        """
        with refusing(self._where):
            os.ftruncate(self._descriptor, self.end)
            os.fsync(self._descriptor)
        self.torn = b""

    def add(self, line: bytes) -> None:
        """Add one line and put it on the medium; it is there whole, or the file is as before.

        Args:
            line: without its end, 1 byte to 1 MiB, no line end inside.

        Raises:
            ParameterError: it is no such line, or a torn one is in its place.
            StorageError: the medium refuses; whatever it took of the line is taken back as far as the system lets us.
        """
        if self.torn or not 1 <= len(line) <= MAX_LINE or b"\n" in line:
            raise ParameterError("a line has 1 byte to 1 MiB, no line end inside, and follows a whole one")
        with refusing(self._where):
            try:
                os.lseek(self._descriptor, self.end, os.SEEK_SET)
                write_all(self._descriptor, line + b"\n")
                os.fsync(self._descriptor)
            except BaseException:
                # A full medium takes a part of a line: it is taken back, so that the next run finds no torn one.
                os.ftruncate(self._descriptor, self.end)
                raise
        self.end += len(line) + 1
        self.last = line


@contextlib.contextmanager
def writing(path: Path) -> Iterator[Lines]:
    """Open a file of lines to add some; the file is made with mode 0600 where it is missing.

    Raises:
        StorageError: it is a link, folder or special file; another process has held it for a minute; it ends in a
            line that is too long; or the system refuses.
    """
    with folder_of(path) as folder:
        with refusing(path):
            descriptor = _locked(folder, path)
        try:
            with refusing(path):
                lines = Lines(descriptor, os.fspath(path))
            yield lines
        finally:
            os.close(descriptor)


@contextlib.contextmanager
def alone_in(folder: Path) -> Iterator[None]:
    """Let no other process be within ``alone_in`` this folder meanwhile, where its medium can tell.

    Raises:
        StorageError: another process has been for a minute, or the folder cannot be opened.

    Source: flock(2). On a medium without locks what keeps processes apart is that files are created exclusively.
    """
    with folder_of(folder / "any") as descriptor:
        with refusing(folder):
            try:
                _lock(descriptor, fcntl.LOCK_EX, folder)
            except OSError as error:
                if isinstance(error, StorageError) or error.errno not in _UNSUPPORTED:
                    raise
        yield


def wait_for_writers(path: Path) -> None:
    """Return once no process is within ``writing`` this file.

    Raises:
        StorageError: one has been for a minute, or the file cannot be opened.
    """
    with refusing(path):
        descriptor = os.open(path, os.O_RDONLY | _OPEN)
        try:
            _lock(descriptor, fcntl.LOCK_SH, path)
        finally:
            os.close(descriptor)


def _locked(folder: int, path: Path) -> int:
    """Open the file and lock it; where another took its name while we waited, that one."""
    while True:
        try:
            descriptor = os.open(path.name, os.O_RDWR | _OPEN, dir_fd=folder)
        except FileNotFoundError:
            with contextlib.suppress(FileExistsError):
                os.close(os.open(path.name, os.O_CREAT | os.O_EXCL | _OPEN, 0o600, dir_fd=folder))
                sync_folder(folder)
            continue
        try:
            opened = os.fstat(descriptor)
            if not stat.S_ISREG(opened.st_mode):
                raise StorageError(
                    "is a pipe, device or socket, not a file", where=os.fspath(path), hint="move it out of the way"
                )
            _lock(descriptor, fcntl.LOCK_EX, path)
            with contextlib.suppress(FileNotFoundError):
                named = os.stat(path.name, dir_fd=folder, follow_symlinks=False)
                if (named.st_dev, named.st_ino) == (opened.st_dev, opened.st_ino):
                    return descriptor
        except BaseException:
            os.close(descriptor)
            raise
        os.close(descriptor)


def _lock(descriptor: int, how: int, path: Path) -> None:
    """Lock the file, waiting for whoever has it, but not for ever.

    Raises:
        StorageError: it was held too long.
        OSError: as the system says.
    """
    until = time.monotonic() + PATIENCE
    while True:
        try:
            fcntl.flock(descriptor, how | fcntl.LOCK_NB)
        except OSError as error:
            if error.errno not in (errno.EWOULDBLOCK, errno.EACCES):
                raise
        else:
            return
        if time.monotonic() > until:
            raise StorageError(
                f"another command has been at work on it for {PATIENCE:.0f} seconds",
                where=os.fspath(path),
                hint="let it finish or end it, then repeat; nothing was added",
            )
        time.sleep(_PAUSE)


def _read(descriptor: int, start: int, end: int) -> bytes:
    parts = []
    while start < end and (part := os.pread(descriptor, end - start, start)):
        parts.append(part)
        start += len(part)
    return b"".join(parts)
