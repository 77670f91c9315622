"""A file of lines that only grows: one process at a time, each line on the medium before anybody is told of it.

Source: flock(2), fsync(2), open(2) with O_APPEND of the Linux manual pages.
May import: shares.errors, shares.storage, shares.streams.
Secret: nothing. Confidential: the lines.
Does not: know what a line says.
"""

from __future__ import annotations

import fcntl
import os
from collections.abc import Callable
from pathlib import Path

from shares.streams import folder_of, refusing, sync_folder, write_all

_OPEN = os.O_RDWR | os.O_APPEND | os.O_CREAT | os.O_NOFOLLOW | os.O_CLOEXEC


def appended(
    path: Path,
    line_after: Callable[[bytes], bytes],
    torn_line_after: Callable[[bytes, bytes], bytes],
) -> None:
    """Add a line to a file, holding its lock from reading to the medium.

    Args:
        path: the file, made with mode 0600 where it is missing.
        line_after: returns the line, without its end, that follows the whole lines given.
        torn_line_after: called first where the file ends within a line, with the whole lines and the piece: keeps the
            piece elsewhere and returns the line that takes its place.

    Raises:
        StorageError: the system refuses; whatever was added of the line is taken back as far as the system lets us.
    """
    with folder_of(path) as folder, refusing(path):
        descriptor = os.open(path.name, _OPEN, 0o600, dir_fd=folder)
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX)
            whole = _read(descriptor)
            end = whole.rfind(b"\n") + 1
            if end != len(whole):
                line = torn_line_after(whole[:end], whole[end:])
                os.ftruncate(descriptor, end)
                whole = whole[:end] + _add(descriptor, end, line)
            _add(descriptor, len(whole), line_after(whole))
            sync_folder(folder)
        finally:
            os.close(descriptor)


def _read(descriptor: int) -> bytes:
    parts = []
    while part := os.read(descriptor, 1 << 20):
        parts.append(part)
    return b"".join(parts)


def _add(descriptor: int, end: int, line: bytes) -> bytes:
    whole = line + b"\n"
    try:
        write_all(descriptor, whole)
        os.fsync(descriptor)
    except BaseException:
        # A full medium takes a part of a line: it is taken back, so that the next run finds no torn one.
        os.ftruncate(descriptor, end)
        raise
    return whole
