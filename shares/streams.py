"""Open files: read into the caller's own memory, piece by piece, or written new, complete or absent.

Source: open(2), readv(2), rename(2), link(2), fsync(2) of the Linux manual pages.
May import: errors, memory.
Secret: what passes through, in the caller's buffers alone. Public: paths, sizes, modes, times.
Does not: replace anything, or know what a file means.
"""

from __future__ import annotations

import contextlib
import errno
import os
import stat
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Final, TypeAlias, final

from shares.errors import SharesError, StorageError
from shares.memory import Secret

StrPath: TypeAlias = str | os.PathLike[str]
Octets: TypeAlias = bytes | bytearray | memoryview
Write: TypeAlias = Callable[[Octets], None]
"""Writes all of what it is given, after what it was given before."""

_READ: Final = os.O_RDONLY | os.O_CLOEXEC | os.O_NOCTTY
CREATE: Final = os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_NOFOLLOW | os.O_CLOEXEC
_COPIED_AT_ONCE: Final = 65_536

# Linux's number for rename(2) without replacing, which the standard library does not name (linux/fs.h).
_RENAME_NOREPLACE: Final = 1

# What rename(2), link(2) and fsync(2) answer where a medium or kernel does not know what they were asked.
_UNSUPPORTED: Final = frozenset(
    {errno.EPERM, errno.EOPNOTSUPP, errno.ENOTSUP, errno.ENOSYS, errno.EINVAL, errno.EMLINK, errno.EXDEV}
)

_SPECIAL: Final = ("is a pipe, device or socket, not a file", "copy it to a file first")
_TAKEN: Final = ("exists already and is never overwritten", "choose another name, or move the old one away")
_REASONS: Final[dict[int | None, tuple[str, str]]] = {
    errno.ENOENT: ("does not exist", "check the path"),
    errno.ENOTDIR: ("is not a folder, or lies below something that is none", "check the path"),
    errno.EISDIR: ("is a folder", "name a file"),
    errno.ELOOP: ("is a symbolic link", "name the file itself"),
    errno.ENXIO: _SPECIAL,
    errno.EBADF: ("is closed", "name a file or pipe the bytes in"),
    errno.EACCES: ("permission denied", "check the owner and mode of the file and of its folder"),
    errno.EPERM: ("not permitted", "check the owner, mode and attributes of the file and of its folder"),
    errno.EEXIST: _TAKEN,
    errno.ENAMETOOLONG: ("has too long a name for this medium", "choose a shorter name"),
    errno.EROFS: ("the medium is read-only", "make it writable or use another"),
    errno.ENOSPC: ("the medium is full", "make room or use another"),
    errno.EDQUOT: ("the disk quota is used up", "make room or use another medium"),
    errno.EFBIG: ("would be larger than is allowed here", "raise the file size limit (ulimit -f)"),
    errno.EIO: ("the medium reports an error", "do not trust this medium; use another"),
}


@final
class Reader:
    """An open file or pipe, read in order. It stays the same file, whatever becomes of the path meanwhile.

    Attributes:
        where: what to call it in a refusal.
        descriptor: the open file.
        size: its length when it was opened, in bytes; None for a pipe or device, which does not say.
    """

    __slots__ = ("_written", "descriptor", "size", "where")

    def __init__(self, descriptor: int, where: str) -> None:
        status = os.fstat(descriptor)
        self.descriptor = descriptor
        self.where = where
        self.size = status.st_size if stat.S_ISREG(status.st_mode) else None
        self._written = status.st_mtime_ns

    def fill(self, buffer: memoryview) -> int:
        """Read until the buffer is full or nothing more comes.

        Returns:
            The bytes read; fewer than the buffer holds only at the end.

        Raises:
            StorageError: the medium refuses.
        """
        filled = 0
        with refusing(self.where):
            while filled < len(buffer):
                with buffer[filled:] as free:
                    count = os.readv(self.descriptor, [free])
                if not count:
                    break
                filled += count
        return filled

    def go_to(self, place: int) -> None:
        """Read on from a place in a regular file, in bytes from its start.

        Raises:
            StorageError: the system refuses, as for a pipe.
        """
        with refusing(self.where):
            os.lseek(self.descriptor, place, os.SEEK_SET)

    def check_unchanged(self, read: int) -> None:
        """Refuse a regular file that was written to since it was opened, so that what was read may be two halves.

        Args:
            read: the bytes that were read of it, to its end.

        Raises:
            StorageError: its size or the time of its last change is another one.
        """
        if self.size is None:
            return
        with refusing(self.where):
            status = os.fstat(self.descriptor)
        if (read, status.st_size, status.st_mtime_ns) != (self.size, self.size, self._written):
            raise StorageError(
                "was changed while it was read", where=self.where, hint="let whatever writes to it finish, then repeat"
            )


@contextlib.contextmanager
def regular_file(path: StrPath) -> Iterator[Reader]:
    """Open a regular file; links, folders and special files are refused without waiting on them.

    Raises:
        StorageError: the file is missing, not regular or unreadable.

    Source: open(2), O_NOFOLLOW and O_NONBLOCK. The kind is asked of the file that is open, so it cannot be exchanged.
    """
    where = os.fspath(path)
    # O_NONBLOCK: a pipe without a writer opens at once and is then refused, instead of waiting for ever.
    with _opened(lambda: os.open(path, _READ | os.O_NOFOLLOW | os.O_NONBLOCK), where) as reader:
        if reader.size is None:
            raise StorageError(_SPECIAL[0], where=where, hint=_SPECIAL[1])
        yield reader


@contextlib.contextmanager
def secret_source(source: StrPath) -> Iterator[Reader]:
    """Open what holds the operator's secret.

    Args:
        source: a path, or ``-`` for standard input (a file of that name is ``./-``).

    Raises:
        StorageError: the source is missing, a folder, a terminal or unreadable.
    """
    where = "standard input" if source == "-" else os.fspath(source)
    # Links, pipes and devices are welcome here, unlike for documents: the operator names this one source, and a
    # shell passes /dev/stdin and <(command) as links to pipes. To wait for the writer is then what is wanted.
    with _opened(lambda: os.dup(0) if source == "-" else os.open(source, _READ), where) as reader:
        if os.isatty(reader.descriptor):
            raise StorageError(
                "is a terminal, which shows what is typed", where=where, hint="name a file or pipe the secret in"
            )
        yield reader


@contextlib.contextmanager
def _opened(opening: Callable[[], int], where: str) -> Iterator[Reader]:
    with refusing(where):
        descriptor = opening()
    try:
        with refusing(where):
            reader = Reader(descriptor, where)
            if stat.S_ISDIR(os.fstat(descriptor).st_mode):
                raise StorageError("is a folder", where=where, hint="name a file")
        yield reader
    finally:
        with refusing(where):
            os.close(descriptor)


@contextlib.contextmanager
def new_file(path: StrPath, *, secret: bool) -> Iterator[Write]:
    """Open a new file that is complete and on the medium at the end of ``with``, or absent; nothing is ever replaced.

    Args:
        path: the file; its folder must exist.
        secret: True for mode 0600, False for 0644, whatever the umask. A medium that keeps no modes (FAT) shows the
            file to everyone who can mount it.

    Yields:
        A function that writes what comes next.

    Raises:
        StorageError: the name is taken, or the medium or folder refuses. Then, and whenever anything is raised before
            the end of ``with``, nothing of this call is left behind.

    Source: rename(2), link(2), fsync(2). Where a medium has neither an exclusive rename nor links, the final name is
    itself created exclusively, and only there can a killed run leave an incomplete file under it.
    """
    path = Path(path)
    mode = 0o600 if secret else 0o644
    temporary = f".{path.name}.{os.urandom(8).hex()}.partial"
    with refusing(path):
        # The name is given only at the end; whoever cannot have it should not have to wait for that.
        if path.name and os.path.lexists(path):
            raise StorageError(_TAKEN[0], where=os.fspath(path), hint=_TAKEN[1])
    with folder_of(path) as folder, contextlib.ExitStack() as undo:
        with _created(folder, temporary, path, mode, undo) as write:
            yield write
        with refusing(path):
            named = _give_name(folder, temporary, path.name)
        if not named:
            with _created(folder, path.name, path, mode, undo) as write:
                _copy(folder, temporary, path, write)
        undo.callback(remove_if_possible, folder, path.name)
        with refusing(path):
            remove(folder, temporary)
            sync_folder(folder)
        undo.pop_all()


@contextlib.contextmanager
def _created(folder: int, name: str, path: Path, mode: int, undo: contextlib.ExitStack) -> Iterator[Write]:
    """Create one file exclusively, and put what is written to it on the medium."""
    with refusing(path):
        descriptor = os.open(name, CREATE, 0o600, dir_fd=folder)
    undo.callback(remove_if_possible, folder, name)

    def write(data: Octets) -> None:
        with refusing(path):
            write_all(descriptor, data)

    try:
        yield write
        with refusing(path):
            # The file is never wider than 0600 before, so a medium without modes that refuses this loses nothing.
            with contextlib.suppress(OSError):
                os.fchmod(descriptor, mode)
            os.fsync(descriptor)
    finally:
        with refusing(path):
            os.close(descriptor)


def write_all(descriptor: int, data: Octets) -> None:
    """Write all of the data, in as many parts as the system makes of it.

    Raises:
        OSError: as the system says.
    """
    with memoryview(data) as given, given.cast("B") as octets:
        written = 0
        while written < len(octets):
            with octets[written:] as rest:
                written += os.write(descriptor, rest)


def _copy(folder: int, name: str, path: Path, write: Write) -> None:
    """Copy a finished file, for a medium on which it cannot get another name."""
    with (
        _opened(lambda: os.open(name, _READ | os.O_NOFOLLOW, dir_fd=folder), os.fspath(path)) as reader,
        Secret(_COPIED_AT_ONCE) as room,
        room.view() as buffer,
    ):
        while count := reader.fill(buffer):
            with buffer[:count] as filled:
                write(filled)


def _give_name(folder: int, temporary: str, name: str) -> bool:
    """Give a finished file another name unless that is taken; say whether this medium has a way to do so.

    The old name may stay beside it: it is the caller's to remove.

    Raises:
        OSError: as the system says, and that the name is taken.
    """
    for exclusive in (_rename_new, _link_new):
        try:
            exclusive(folder, temporary, name)
        except OSError as error:
            if error.errno not in _UNSUPPORTED:
                raise
        else:
            return True
    return False


def _rename_new(folder: int, temporary: str, name: str) -> None:
    """Rename in one step that never replaces. Tried first: a killed run leaves no second name, and FAT has it too."""
    import ctypes

    rename = getattr(ctypes.CDLL(None, use_errno=True), "renameat2", None)
    if rename is None:
        raise OSError(errno.ENOSYS, os.strerror(errno.ENOSYS))
    if rename(folder, os.fsencode(temporary), folder, os.fsencode(name), _RENAME_NOREPLACE) != 0:
        code = ctypes.get_errno()
        raise OSError(code, os.strerror(code))


def _link_new(folder: int, temporary: str, name: str) -> None:
    """Link under the final name, for network media and systems without the exclusive rename."""
    os.link(temporary, name, src_dir_fd=folder, dst_dir_fd=folder, follow_symlinks=False)


def remove(folder: int, name: str) -> None:
    """Remove a file of an open folder; a missing one is fine.

    Raises:
        OSError: as the system says.
    """
    with contextlib.suppress(FileNotFoundError):
        os.unlink(name, dir_fd=folder)


def remove_if_possible(folder: int, name: str) -> None:
    """Remove a file while undoing: then the first error is the one to report, not one of this."""
    # What stays is named by storage.leftovers().
    with contextlib.suppress(OSError):
        os.unlink(name, dir_fd=folder)


def sync_folder(folder: int) -> None:
    """Put an open folder's entries on the medium, where its file system knows how.

    Raises:
        OSError: as the system says.
    """
    try:
        os.fsync(folder)
    except OSError as error:
        if error.errno not in _UNSUPPORTED:
            raise


def medium_sync() -> Callable[[int], None] | None:
    """Return what writes out a whole medium, given an open folder on it; None where the system has no such call.

    Before Linux 5.8 it does not tell of data that could not be written.

    Source: syncfs(2), which the standard library does not have.
    """
    import ctypes

    syncfs = getattr(ctypes.CDLL(None, use_errno=True), "syncfs", None)
    if syncfs is None:
        return None

    def sync(folder: int) -> None:
        if syncfs(folder) != 0:
            code = ctypes.get_errno()
            raise OSError(code, os.strerror(code))

    return sync


@contextlib.contextmanager
def folder_of(path: Path) -> Iterator[int]:
    """Hold the folder of a file open, so that every step acts on one and the same folder."""
    with refusing(path.parent):
        descriptor = os.open(path.parent, os.O_RDONLY | os.O_DIRECTORY | os.O_CLOEXEC)
    try:
        yield descriptor
    finally:
        with refusing(path.parent):
            os.close(descriptor)


@contextlib.contextmanager
def refusing(where: StrPath) -> Iterator[None]:
    """Turn what the system refuses into one clear StorageError."""
    try:
        yield
    except SharesError:
        raise
    except OSError as error:
        what, hint = _REASONS.get(error.errno, (os.strerror(error.errno or 0).lower(), "see what the system reports"))
        raise StorageError(what, where=os.fspath(where), hint=hint) from error
    except ValueError as error:
        # A zero byte, or text that the file system's encoding does not have.
        raise StorageError("is not a possible path", where=repr(os.fspath(where)), hint="check the path") from error
