"""Files that are complete or absent, and reading that cannot be led astray.

Source: open(2), link(2), fsync(2), posix_fadvise(2) of the Linux manual pages.
May import: errors, memory.
Secret: what ``read_secret`` reads and what ``write_new`` is given with ``secret=True``. Public: paths and sizes.
Does not: overwrite or rename anything, erase media (flash and journaling file systems keep old blocks), or know
what a file means.
"""

from __future__ import annotations

import contextlib
import errno
import os
import re
import stat
from collections.abc import Iterator
from pathlib import Path
from typing import Final

from shares.errors import StorageError
from shares.memory import Secret

_OPEN: Final = os.O_RDONLY | os.O_CLOEXEC | os.O_NOCTTY
_PARTIAL: Final = re.compile(r"\..+\.[0-9a-f]{16}\.partial", re.DOTALL)

# What link(2) answers on media without hard links (FAT, some network and user-space file systems).
_NO_LINKS: Final = frozenset(
    {errno.EPERM, errno.EOPNOTSUPP, errno.ENOTSUP, errno.ENOSYS, errno.EINVAL, errno.EMLINK, errno.EXDEV}
)

_REASONS: Final[dict[int, tuple[str, str | None]]] = {
    errno.ENOENT: ("does not exist", "check the path"),
    errno.ENOTDIR: ("a part of the path is not a folder", "check the path"),
    errno.EACCES: ("no permission", "check who owns it and its mode"),
    errno.EPERM: ("the system does not permit this", "check who owns it, its mode and its attributes"),
    errno.EEXIST: ("exists already and is never overwritten", "choose another name or move the old file away"),
    errno.EISDIR: ("is a folder", "name a file"),
    errno.ELOOP: ("is a symbolic link", "name the file itself"),
    errno.ENOSPC: ("the medium is full", "make room or choose another medium"),
    errno.EDQUOT: ("the disk quota is used up", "make room or choose another medium"),
    errno.EFBIG: ("the file is larger than this system allows", "raise the file size limit or choose another medium"),
    errno.EROFS: ("the medium is read-only", "make it writable or choose another"),
    errno.ENAMETOOLONG: ("the name is too long for this medium", "choose a shorter name"),
    errno.EIO: ("the medium reports an error", "do not trust this medium; use another"),
}


def read_file(path: str | os.PathLike[str], *, limit: int) -> bytes:
    """Read a regular file whole; links, folders and special files are refused without waiting on them.

    Args:
        path: the file.
        limit: the most bytes accepted.

    Raises:
        StorageError: the file is missing, not regular, unreadable or larger than ``limit``, also when it grows
            while it is read.
    """
    return _read(path, limit, fresh=False)


def read_back(path: str | os.PathLike[str], *, limit: int) -> bytes:
    """Read like ``read_file``, but from the medium as far as the system lets us, to see what was really written.

    Raises:
        StorageError: as for ``read_file``.

    Source: posix_fadvise(2), POSIX_FADV_DONTNEED; the advice may be ignored, and a drive has a cache of its own.
    """
    return _read(path, limit, fresh=True)


def read_secret(source: str | os.PathLike[str], *, limit: int) -> Secret:
    """Read secret bytes straight into locked memory; no Python copy of them is made.

    Args:
        source: a path, or ``-`` for standard input. An empty source gives an empty secret.
        limit: the most bytes accepted.

    Raises:
        StorageError: the source is missing, a folder, a terminal, unreadable or larger than ``limit``.
    """
    where = "standard input" if source == "-" else os.fspath(source)
    with _refusing(where):
        # Links and pipes are welcome here, unlike for documents: the operator names this one source, and shells hand
        # over /dev/stdin and <(command) as links to pipes. Waiting for the writer is then what is wanted.
        descriptor = os.dup(0) if source == "-" else os.open(source, _OPEN)
        try:
            if stat.S_ISDIR(os.fstat(descriptor).st_mode):
                raise StorageError("is a folder", where=where, hint="name a file")
            if os.isatty(descriptor):
                raise StorageError(
                    "is a terminal, which would show the secret", where=where, hint="name a file or pipe the secret in"
                )
            return _read_secret(descriptor, where, limit)
        finally:
            os.close(descriptor)


def write_new(path: str | os.PathLike[str], data: bytes | bytearray | memoryview, *, secret: bool) -> None:
    """Write a new file that is complete on the medium or absent, and never replaces anything.

    Args:
        path: the file; its folder must exist.
        data: the whole content.
        secret: True for mode 0600, False for 0644, whatever the umask. A medium that keeps no modes (FAT) shows the
            file to whoever can mount it.

    Raises:
        StorageError: the name is taken, or the medium or the folder refuses; then nothing is left behind.
    """
    path = Path(path)
    mode = 0o600 if secret else 0o644
    temporary = f".{path.name}.{os.urandom(8).hex()}.partial"
    with _refusing(path), _folder(path.parent) as folder:
        _create(folder, temporary, data, mode)
        try:
            _link(folder, temporary, path.name, data, mode)
        finally:
            os.unlink(temporary, dir_fd=folder)
        os.fsync(folder)


def make_folder(path: str | os.PathLike[str]) -> None:
    """Make a folder, and those above it that are missing, each with mode 0700; one that exists is accepted as it is.

    Raises:
        StorageError: something else has the name, or the folder above refuses.
    """
    path = Path(path)
    if path.is_dir():
        return
    if path.parent != path:
        make_folder(path.parent)
    with _refusing(path), _folder(path.parent) as above:
        try:
            os.mkdir(path.name, 0o700, dir_fd=above)
        except FileExistsError:
            if not path.is_dir():
                raise
            return
        os.chmod(path.name, 0o700, dir_fd=above)
        os.fsync(above)


def leftovers(folder: str | os.PathLike[str]) -> list[Path]:
    """List the temporary files that a killed run left in a folder, by name; a missing folder has none.

    Raises:
        StorageError: the folder cannot be read.
    """
    with _refusing(folder):
        try:
            names = os.listdir(folder)
        except FileNotFoundError:
            return []
    return [Path(folder, name) for name in sorted(names) if _PARTIAL.fullmatch(name)]


def discard(path: str | os.PathLike[str]) -> None:
    """Remove a file that this very run wrote, to undo an act that failed; a missing one is fine.

    It unlinks and erases nothing: the medium may keep the old blocks.

    Raises:
        StorageError: the system refuses.
    """
    path = Path(path)
    with _refusing(path), _folder(path.parent) as folder:
        with contextlib.suppress(FileNotFoundError):
            os.unlink(path.name, dir_fd=folder)
        os.fsync(folder)


def _read(path: str | os.PathLike[str], limit: int, *, fresh: bool) -> bytes:
    with _refusing(path):
        descriptor = os.open(path, _OPEN | os.O_NOFOLLOW | os.O_NONBLOCK)
        try:
            status = os.fstat(descriptor)
            if stat.S_ISDIR(status.st_mode):
                raise StorageError("is a folder", where=os.fspath(path), hint="name a file")
            if not stat.S_ISREG(status.st_mode):
                raise StorageError("is not a regular file", where=os.fspath(path), hint="copy it to a file first")
            if fresh:
                with contextlib.suppress(OSError):
                    os.posix_fadvise(descriptor, 0, 0, os.POSIX_FADV_DONTNEED)
            parts: list[bytes] = []
            left = limit + 1
            while left and (part := os.read(descriptor, min(left, status.st_size + 1))):
                parts.append(part)
                left -= len(part)
            if not left:
                raise _too_large(os.fspath(path), limit)
            return b"".join(parts)
        finally:
            os.close(descriptor)


def _read_secret(descriptor: int, where: str, limit: int) -> Secret:
    with Secret(limit + 1) as room, room.view() as view:
        length = 0
        while length <= limit and (count := os.readv(descriptor, [view[length:]])):
            length += count
        if length > limit:
            raise _too_large(where, limit)
        return Secret.of(view[:length])


def _too_large(where: str, limit: int) -> StorageError:
    return StorageError(f"is larger than {limit:,} bytes", where=where, hint="check that it is the right file")


def _create(folder: int, name: str, data: bytes | bytearray | memoryview, mode: int) -> None:
    """Create one file exclusively, with its whole content on the medium; on failure remove it again."""
    descriptor = os.open(
        name, os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_NOFOLLOW | os.O_CLOEXEC, 0o600, dir_fd=folder
    )
    try:
        try:
            with memoryview(data) as given, given.cast("B") as octets:
                written = 0
                while written < len(octets):
                    with octets[written:] as rest:
                        written += os.write(descriptor, rest)
            os.fchmod(descriptor, mode)
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
    except BaseException:
        os.unlink(name, dir_fd=folder)
        raise


def _link(folder: int, temporary: str, name: str, data: bytes | bytearray | memoryview, mode: int) -> None:
    """Give the finished file its name; where the medium has no links, create it a second time under that name."""
    try:
        os.link(temporary, name, src_dir_fd=folder, dst_dir_fd=folder, follow_symlinks=False)
    except OSError as error:
        if error.errno not in _NO_LINKS:
            raise
    else:
        return
    _create(folder, name, data, mode)


@contextlib.contextmanager
def _folder(path: Path) -> Iterator[int]:
    """Hold a folder open, so that all steps act on one and the same folder."""
    with _refusing(path):
        descriptor = os.open(path, os.O_RDONLY | os.O_DIRECTORY | os.O_CLOEXEC)
    try:
        yield descriptor
    finally:
        os.close(descriptor)


@contextlib.contextmanager
def _refusing(where: str | os.PathLike[str]) -> Iterator[None]:
    """Turn what the system refuses into one clear StorageError."""
    try:
        yield
    except StorageError:
        raise
    except OSError as error:
        what, hint = _REASONS.get(error.errno or 0, (os.strerror(error.errno or 0).lower(), None))
        raise StorageError(what, where=os.fspath(where), hint=hint) from error
