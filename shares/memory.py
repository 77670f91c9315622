"""A place for secret bytes: locked, kept out of dumps and forks, wiped.

Source: mmap(2), mlock(2), madvise(2), getrandom(2), prctl(2), getrlimit(2) of the Linux manual pages.
May import: errors.
Secret: the bytes of a ``Secret``. Public: its length, whether memory could be locked, the limits.
Does not: reach the copies that Python itself makes (``bytes``, ``str``, ``int``), swap written before the lock,
hibernation images, or a process killed by a signal (there the kernel clears the pages before anyone else gets them).
"""

from __future__ import annotations

import contextlib
import functools
import itertools
import mmap
import os
import sys
import weakref
from dataclasses import dataclass
from types import TracebackType
from typing import TYPE_CHECKING, Final, NoReturn, Self, final

from shares.errors import ParameterError

if TYPE_CHECKING:
    import ctypes

# Linux numbers that the standard library does not name (include/uapi/asm-generic/mman-common.h, linux/prctl.h).
_MADV_WIPEONFORK: Final = 18
_PR_GET_DUMPABLE: Final = 3
_PR_SET_DUMPABLE: Final = 4

# So many bytes getrandom(2) gives whole.
_DRAWN_AT_ONCE: Final = 256

# The mappings of all open secrets of this process. A Secret holds only its number here, so that one function
# wipes for close(), for garbage collection, for the end of the interpreter and for a forked child.
_open: dict[int, mmap.mmap] = {}
_numbers = itertools.count()
_refused: str | None = None


@final
class Secret:
    """Secret bytes of a fixed length, wiped on ``close()``, at the end of ``with``, and when nobody holds them.

    It shows nothing: its text is fixed, and it refuses to be copied, pickled, formatted, hashed, indexed or iterated.
    ``==`` compares two secrets in constant time; lengths are public.

    Args:
        length: number of bytes, 0 or more; they start as zeros.

    Raises:
        ParameterError: a negative length.
        OSError: the system gives no memory. A refused lock is no error: see ``lock_refused``.

    Source: mlock(2); madvise(2), MADV_DONTDUMP and MADV_WIPEONFORK.

    >>> with Secret.of(b"not a real key") as key:
    ...     print(key, len(key))
    Secret(<hidden>) 14
    """

    __slots__ = ("__weakref__", "_length", "_number")
    __hash__ = None  # type: ignore[assignment]

    def __init__(self, length: int) -> None:
        if length < 0:
            raise ParameterError("the length of a secret cannot be negative")
        self._length = length
        self._number = next(_numbers)
        _open[self._number] = _map(length)
        # The finaliser also runs at the end of the interpreter; it must not hold the secret itself.
        weakref.finalize(self, _wipe, self._number)

    @classmethod
    def of(cls, data: bytes | bytearray | memoryview) -> Self:
        """Make a secret of given bytes; the caller's own copy remains the caller's to wipe.

        Args:
            data: the bytes, 0 or more; copied, not kept.

        Returns:
            A new secret of the same length.
        """
        with memoryview(data) as given, given.cast("B") as octets:
            secret = cls(len(octets))
            with secret.view() as view:
                view[:] = octets
        return secret

    @classmethod
    def drawn(cls, length: int) -> Self:
        """Draw fresh random bytes from the system, straight into the secret: nothing else has a copy.

        Args:
            length: number of bytes, 0 to 256.

        Raises:
            ParameterError: the length is out of range.
            OSError: the system has no random source.

        Source: getrandom(2): it waits until the source is seeded, and then never gives fewer than 256 bytes asked for.
        """
        if not 0 <= length <= _DRAWN_AT_ONCE:
            raise ParameterError(f"a secret is drawn with 0 to {_DRAWN_AT_ONCE} bytes")
        import ctypes

        secret = cls(length)
        start = ctypes.c_char.from_buffer(_open[secret._number])
        address, count = ctypes.c_void_p(ctypes.addressof(start)), ctypes.c_size_t(length)
        if _libc().getrandom(address, count, 0) != length:
            raise OSError(ctypes.get_errno(), "the system gives no random bytes")
        return secret

    def __len__(self) -> int:
        return self._length

    def view(self) -> memoryview:
        """Open a writable window onto exactly the secret bytes; use it as ``with secret.view() as octets``.

        Returns:
            A memoryview of ``len(secret)`` bytes. After ``close()`` it shows zeros: do not keep it.

        Raises:
            ValueError: the secret is closed, or this process was forked from the one that made it.
        """
        mapping = _open.get(self._number)
        if mapping is None:
            raise ValueError("the secret is closed")
        return memoryview(mapping)[: self._length]

    def close(self) -> None:
        """Wipe the bytes, also under views that are still open, and give the memory back. May be repeated."""
        _wipe(self._number)

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, traceback: TracebackType | None
    ) -> None:
        self.close()

    def __repr__(self) -> str:
        return "Secret(<hidden>)"

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Secret):
            return NotImplemented
        from hmac import compare_digest

        with self.view() as mine, other.view() as theirs:
            return compare_digest(mine, theirs)

    def __format__(self, specification: str) -> NoReturn:
        raise TypeError("a secret is not written into text")

    def __reduce_ex__(self, protocol: object) -> NoReturn:
        # copy, deepcopy and pickle all ask this one method.
        raise TypeError("a secret is neither copied nor pickled")


@dataclass(frozen=True, slots=True)
class Protection:
    """What the system granted to the whole process: no core file, and no dump by a helper program either."""

    core_limit: bool
    not_dumpable: bool


@dataclass(frozen=True, slots=True)
class Locking:
    """Whether memory can be locked into RAM here, and how many bytes (``None``: no limit, or none known)."""

    works: bool
    limit: int | None


def protect_process() -> Protection:
    """Turn core dumps off for this process; programs started from it inherit the limit.

    The limit alone does not bind a dump helper that the kernel pipes to (core(5)), so on Linux the process
    also gives up being dumpable, which keeps other processes of the same user from reading its memory.

    Returns:
        What holds now, as read back from the system; a refusal is not an error.
    """
    import resource

    with contextlib.suppress(OSError, ValueError):
        resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    not_dumpable = False
    if sys.platform == "linux":
        prctl = _libc().prctl
        prctl(_PR_SET_DUMPABLE, 0, 0, 0, 0)
        not_dumpable = prctl(_PR_GET_DUMPABLE, 0, 0, 0, 0) == 0
    return Protection(resource.getrlimit(resource.RLIMIT_CORE)[0] == 0, not_dumpable)


def locking() -> Locking:
    """Try whether one page can be locked now, and read the limit."""
    import resource

    limit = resource.getrlimit(resource.RLIMIT_MEMLOCK)[0]
    with mmap.mmap(-1, mmap.PAGESIZE) as page:
        works = _lock(page) is None
    return Locking(works, None if limit == resource.RLIM_INFINITY else limit)


def lock_refused() -> str | None:
    """Say why some secret of this process could not be locked into RAM.

    Returns:
        One sentence without a final stop, worth showing once; ``None`` when every lock was granted.
    """
    if _refused is None:
        return None
    return f"memory could not be locked ({_refused}), so secrets may reach swap; raise the limit (ulimit -l)"


def _map(length: int) -> mmap.mmap:
    """Map zeroed private pages, away from dumps and forks and, where the system allows, locked."""
    global _refused
    mapping = mmap.mmap(-1, max(length, 1), flags=mmap.MAP_PRIVATE | mmap.MAP_ANONYMOUS)
    # An old or foreign kernel refuses advice that it does not know; protect_process and the fork hook below remain.
    if sys.platform == "linux":
        for advice in (mmap.MADV_DONTDUMP, _MADV_WIPEONFORK):
            with contextlib.suppress(OSError):
                mapping.madvise(advice)
    _refused = _lock(mapping) or _refused
    return mapping


def _lock(mapping: mmap.mmap) -> str | None:
    """Lock a mapping into RAM; on refusal return the system's reason."""
    import ctypes

    start = ctypes.c_char.from_buffer(mapping)
    refused = _libc().mlock(ctypes.c_void_p(ctypes.addressof(start)), ctypes.c_size_t(len(mapping))) != 0
    return os.strerror(ctypes.get_errno()) if refused else None


@functools.cache
def _libc() -> ctypes.CDLL:
    # Imported late: not every command needs a secret, and each should start fast.
    import ctypes

    return ctypes.CDLL(None, use_errno=True)


def _wipe(number: int) -> None:
    """Overwrite one secret with zeros and unmap it."""
    mapping = _open.pop(number, None)
    if mapping is None:
        return
    mapping[:] = bytes(len(mapping))
    # A view that is still open keeps the (wiped) pages until it is released.
    with contextlib.suppress(BufferError):
        mapping.close()


def _wipe_all() -> None:
    for number in list(_open):
        _wipe(number)


# A forked child closes every secret it inherited. Linux has wiped the pages by then (MADV_WIPEONFORK); elsewhere this
# does it. Leaving the pages out of the child instead (MADV_DONTFORK) would make wiping at its exit a memory fault.
os.register_at_fork(after_in_child=_wipe_all)
