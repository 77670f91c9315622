"""Files that are complete or absent, and reading that cannot be led astray.

Source: open(2), rename(2), link(2), fsync(2), posix_fadvise(2) of the Linux manual pages.
May import: errors, memory.
Secret: what ``read_secret`` reads, what ``write_new`` is given with ``secret=True``, and what a share file that is read
holds. Public: paths, sizes, modes.
Does not: replace anything, erase media (flash and journaling file systems keep old blocks), or know what a file means.
"""

from __future__ import annotations

import contextlib
import errno
import os
import re
import stat
from collections.abc import Iterator
from pathlib import Path
from typing import Final, TypeAlias

from shares.errors import SharesError, StorageError
from shares.memory import Secret

StrPath: TypeAlias = str | os.PathLike[str]
Octets: TypeAlias = bytes | bytearray | memoryview

_READ: Final = os.O_RDONLY | os.O_CLOEXEC | os.O_NOCTTY
_CREATE: Final = os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_NOFOLLOW | os.O_CLOEXEC
_CHUNK: Final = 65536
_PARTIAL: Final = re.compile(r"\..+\.[0-9a-f]{16}\.partial", re.DOTALL)

# Linux's number for rename(2) without replacing, which the standard library does not name (linux/fs.h).
_RENAME_NOREPLACE: Final = 1

# What rename(2), link(2) and fsync(2) answer where a medium or kernel does not know what they were asked.
_UNSUPPORTED: Final = frozenset(
    {errno.EPERM, errno.EOPNOTSUPP, errno.ENOTSUP, errno.ENOSYS, errno.EINVAL, errno.EMLINK, errno.EXDEV}
)

_SPECIAL: Final = ("is a pipe, device or socket, not a file", "copy it to a file first")
_REASONS: Final[dict[int | None, tuple[str, str]]] = {
    errno.ENOENT: ("does not exist", "check the path"),
    errno.ENOTDIR: ("is not a folder, or lies below something that is none", "check the path"),
    errno.EISDIR: ("is a folder", "name a file"),
    errno.ELOOP: ("is a symbolic link", "name the file itself"),
    errno.ENXIO: _SPECIAL,
    errno.EBADF: ("is closed", "name a file or pipe the bytes in"),
    errno.EACCES: ("permission denied", "check the owner and mode of the file and of its folder"),
    errno.EPERM: ("not permitted", "check the owner, mode and attributes of the file and of its folder"),
    errno.EEXIST: ("exists already and is never overwritten", "choose another name, or move the old one away"),
    errno.ENAMETOOLONG: ("has too long a name for this medium", "choose a shorter name"),
    errno.EROFS: ("the medium is read-only", "make it writable or use another"),
    errno.ENOSPC: ("the medium is full", "make room or use another"),
    errno.EDQUOT: ("the disk quota is used up", "make room or use another medium"),
    errno.EFBIG: ("would be larger than is allowed here", "raise the file size limit (ulimit -f)"),
    errno.EIO: ("the medium reports an error", "do not trust this medium; use another"),
}


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

    Source: open(2), O_NOFOLLOW and O_NONBLOCK. The kind is asked of the file that is open, so it cannot be exchanged.
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


def read_secret(source: StrPath, *, limit: int) -> Secret:
    """Read secret bytes straight into locked memory; no Python copy of them is made.

    Args:
        source: a path, or ``-`` for standard input (a file of that name is ``./-``).
        limit: the most bytes accepted, 0 or more.

    Returns:
        A new secret of 0 to ``limit`` bytes; whether an empty one makes sense is the caller's to say.

    Raises:
        StorageError: the source is missing, a folder, a terminal, unreadable, or larger than ``limit``.
    """
    where = "standard input" if source == "-" else os.fspath(source)
    with _refusing(where):
        # Links, pipes and devices are welcome here, unlike for documents: the operator names this one source, and a
        # shell passes /dev/stdin and <(command) as links to pipes. To wait for the writer is then what is wanted.
        descriptor = os.dup(0) if source == "-" else os.open(source, _READ)
        try:
            if stat.S_ISDIR(os.fstat(descriptor).st_mode):
                raise StorageError("is a folder", where=where, hint="name a file")
            if os.isatty(descriptor):
                raise StorageError(
                    "is a terminal, which shows what is typed", where=where, hint="name a file or pipe the secret in"
                )
            return _read_secret(descriptor, where, limit)
        finally:
            os.close(descriptor)


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
    path = Path(path)
    mode = 0o600 if secret else 0o644
    temporary = f".{path.name}.{os.urandom(8).hex()}.partial"
    with _refusing(path), _folder(path.parent) as folder, contextlib.ExitStack() as undo:
        _create(folder, temporary, data, mode, undo)
        if not _give_name(folder, temporary, path.name):
            _create(folder, path.name, data, mode, undo)
        undo.callback(_remove_if_possible, folder, path.name)
        _remove(folder, temporary)
        _sync_folder(folder)
        undo.pop_all()


def make_folder(path: StrPath) -> None:
    """Make a folder, and those above it that are missing, each of mode 0700; one that exists is left as it is.

    Args:
        path: the folder.

    Raises:
        StorageError: something else has the name, or the folder above refuses.
    """
    path = Path(path)
    with _refusing(path):
        if path.is_dir():
            return
        make_folder(path.parent)
        with _folder(path.parent) as above:
            try:
                os.mkdir(path.name, 0o700, dir_fd=above)
            except FileExistsError:
                # Another process may just have made the same folder.
                if not path.is_dir():
                    raise StorageError("is not a folder", where=os.fspath(path), hint="choose another name") from None
            else:
                _sync_folder(above)


def leftovers(folder: StrPath) -> list[Path]:
    """List the temporary files that a killed run left in a folder. Those of a secret file hold secret bytes.

    Args:
        folder: the folder; a missing one has none.

    Returns:
        Their paths, sorted by name. A run that is still at work has its temporary file there as well.

    Raises:
        StorageError: the folder cannot be read.
    """
    with _refusing(folder):
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
    with _refusing(path), _folder(path.parent) as folder:
        _remove(folder, path.name)
        _sync_folder(folder)


def _read(path: StrPath, limit: int, *, fresh: bool) -> bytes:
    where = os.fspath(path)
    with _refusing(where):
        # O_NONBLOCK: a pipe without a writer opens at once and is then refused, instead of waiting for ever.
        descriptor = os.open(path, _READ | os.O_NOFOLLOW | os.O_NONBLOCK)
        try:
            kind = os.fstat(descriptor).st_mode
            if stat.S_ISDIR(kind):
                raise StorageError("is a folder", where=where, hint="name a file")
            if not stat.S_ISREG(kind):
                raise StorageError(_SPECIAL[0], where=where, hint=_SPECIAL[1])
            if fresh:
                with contextlib.suppress(OSError):
                    os.posix_fadvise(descriptor, 0, 0, os.POSIX_FADV_DONTNEED)
            # One byte beyond the limit is asked for: whoever can give it is too large, whatever size was claimed.
            parts, left = [], limit + 1
            while left > 0 and (part := os.read(descriptor, min(_CHUNK, left))):
                parts.append(part)
                left -= len(part)
        finally:
            os.close(descriptor)
    if left <= 0:
        raise _too_large(where, limit)
    return b"".join(parts)


def _read_secret(descriptor: int, where: str, limit: int) -> Secret:
    # The room starts at a page and doubles, since lockable memory is scarce and most secrets are short.
    room, length = Secret(min(4096, limit + 1)), 0
    try:
        while True:
            with room.view() as view, view[length:] as free:
                count = os.readv(descriptor, [free])
            length += count
            if length > limit:
                raise _too_large(where, limit)
            if count and length < len(room):
                continue
            with room.view() as view, view[:length] as filled:
                if not count:
                    return Secret.of(filled)
                larger = Secret(min(2 * length, limit + 1))
                with larger.view() as target:
                    target[:length] = filled
            room.close()
            room = larger
    finally:
        room.close()


def _too_large(where: str, limit: int) -> StorageError:
    return StorageError(f"is larger than {limit:,} bytes", where=where, hint="check that it is the right file")


def _create(folder: int, name: str, data: Octets, mode: int, undo: contextlib.ExitStack) -> None:
    """Create one file exclusively and put its whole content on the medium."""
    descriptor = os.open(name, _CREATE, 0o600, dir_fd=folder)
    undo.callback(_remove_if_possible, folder, name)
    try:
        with memoryview(data) as given, given.cast("B") as octets:
            written = 0
            while written < len(octets):
                with octets[written:] as rest:
                    written += os.write(descriptor, rest)
        # The file is never wider than 0600 before, so a medium without modes that refuses this loses nothing.
        with contextlib.suppress(OSError):
            os.fchmod(descriptor, mode)
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _give_name(folder: int, temporary: str, name: str) -> bool:
    """Give a finished file its final name unless that is taken; say whether this medium has a way to do so."""
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


def _remove(folder: int, name: str) -> None:
    with contextlib.suppress(FileNotFoundError):
        os.unlink(name, dir_fd=folder)


def _remove_if_possible(folder: int, name: str) -> None:
    # While undoing, the first error is the one to report; what stays is named by leftovers().
    with contextlib.suppress(OSError):
        os.unlink(name, dir_fd=folder)


def _sync_folder(folder: int) -> None:
    """Put the folder's entries on the medium, where its file system knows how."""
    try:
        os.fsync(folder)
    except OSError as error:
        if error.errno not in _UNSUPPORTED:
            raise


@contextlib.contextmanager
def _folder(path: Path) -> Iterator[int]:
    """Hold a folder open, so that every step acts on one and the same folder."""
    with _refusing(path):
        descriptor = os.open(path, os.O_RDONLY | os.O_DIRECTORY | os.O_CLOEXEC)
    try:
        yield descriptor
    finally:
        os.close(descriptor)


@contextlib.contextmanager
def _refusing(where: StrPath) -> Iterator[None]:
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
