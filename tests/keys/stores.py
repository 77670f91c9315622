"""A signer's folder of nonces for tests, shares made from it, and children that are killed at any call they make.

Source: RFC 9591, sec. 5.2 (a signature share, whose value shows whether two were made of one nonce).
"""

from __future__ import annotations

import errno
import itertools
import os
import signal
import warnings
from collections.abc import Callable
from pathlib import Path

from keys.quorum import Key, dealt
from parties import unlocked

from shares import streams
from shares.documents.party import OpenPartyKey
from shares.errors import StorageError, VerificationError
from shares.group.edwards25519 import BASE, Point
from shares.keys import frost
from shares.keys.nonces import NonceStore

ME = "north-pier"
ONE, OTHER = bytes([1]) * 32, bytes([2]) * 32
Pair = tuple[Point, Point]


def store_in(folder: Path, own: OpenPartyKey, key: Key | None = None) -> NonceStore:
    return NonceStore(folder / "nonces", (key or dealt()).record, ME, own)


def share_of(store: NonceStore, pair: Pair, message: bytes) -> bytes:
    """This signer's share of a signature over a message, its purpose being the message. The other signer stays."""
    key = dealt()
    partner = frost.Commitment(2, BASE, BASE)
    agreed = frost.Agreed(key.record.public_key, message, [frost.Commitment(1, *pair), partner])
    taken = store.take(*pair, message.ljust(32, b"\0"))
    return frost.sign(1, key.scalars[ME], taken, agreed).encode()


def refuse(*_: object, **__: object) -> None:
    raise OSError(errno.EPERM, "as a medium without it answers")


def files(store: NonceStore) -> list[str]:
    return sorted(path.name.split("-")[0] for path in store.folder.iterdir())


def in_child(work: Callable[[], bytes], kill_at: int | None = None, *, after: bool = False) -> tuple[int, bytes]:
    """Do work in a forked child that is killed at its n-th call to the system, before or after it.

    Returns:
        The exit status (negative: the signal; 4: refused), and what came out of the work.
    """
    reader, writer = os.pipe()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        child = os.fork()
    if child == 0:
        leave, answer = os._exit, os.write
        signal.alarm(30)
        status = 1
        try:
            if kill_at is not None:
                kill_at_call(kill_at, after=after)
            answer(writer, work())
            status = 0
        except (VerificationError, StorageError):
            status = 4
        finally:
            leave(status)
    os.close(writer)
    with os.fdopen(reader, "rb") as stream:
        answered = stream.read()
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]), answered


def kill_at_call(number: int, *, after: bool) -> None:
    """Count this process's calls that touch files from here on, and kill it at one of them."""
    counter = itertools.count()

    def counted(call: Callable[..., object]) -> Callable[..., object]:
        def wrapped(*arguments: object, **named: object) -> object:
            due = next(counter) == number
            if due and not after:
                os.kill(os.getpid(), signal.SIGKILL)
            answer = call(*arguments, **named)
            if due:
                os.kill(os.getpid(), signal.SIGKILL)
            return answer

        return wrapped

    for name in (
        "open",
        "read",
        "write",
        "fchmod",
        "fsync",
        "close",
        "link",
        "unlink",
        "ftruncate",
        "scandir",
        "mkdir",
    ):
        setattr(os, name, counted(getattr(os, name)))
    streams._rename_new = counted(streams._rename_new)  # type: ignore[assignment]


def kills(attempt: Callable[[int, bool], int]) -> int:
    """Attempt something that is killed at each call, until it is through before that; return how often it was."""
    for number in itertools.count():
        statuses = {attempt(number, after) for after in (False, True)}
        if statuses == {0}:
            return number
        assert statuses <= {0, -signal.SIGKILL}, number


def fresh(folder: Path, number: int) -> tuple[Callable[[bytes], bytes], Pair]:
    """A folder of its own with one pair, and what gives a share of it; each time with the party key opened anew."""
    place = folder / str(number)
    with unlocked(ME) as own:
        (pair,) = store_in(place, own).make(dealt().scalars[ME])

    def share(message: bytes) -> bytes:
        with unlocked(ME) as again:
            return share_of(store_in(place, again), pair, message)

    return share, pair


def or_nothing(share: Callable[[bytes], bytes], message: bytes) -> bytes | None:
    try:
        return share(message)
    except VerificationError:
        return None
