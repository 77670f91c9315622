"""Stop signals: where they stop a command at once, and where they wait, so that an act on files is whole or undone.

Source: signal(7); the handlers of the standard library run between two steps of Python code, in the main thread.
May import: nothing of this package.
Secret: nothing. Public: which signals came.
Does not: hold back SIGKILL, which nothing can; the next run names what a killed one left over.
"""

from __future__ import annotations

import contextlib
import os
import signal
import termios
from collections.abc import Callable, Iterator
from types import FrameType
from typing import NoReturn

STOP = (signal.SIGINT, signal.SIGTERM, signal.SIGHUP, signal.SIGQUIT)


def heed_signals() -> None:
    """Let every stop signal raise KeyboardInterrupt, so that secrets are wiped on the way out."""
    for number in _not_ignored():
        signal.signal(number, _stop)


@contextlib.contextmanager
def held_signals() -> Iterator[Callable[[], None]]:
    """Hold stop signals back while files are written, undone, or reported as done.

    Without this a signal may come after a file has got its name and before anybody has noted that it is there.

    Yields:
        A function to call where stopping is safe: it raises KeyboardInterrupt when a signal has come. One that comes
        after the last such call comes too late: the act is finished, and reported as done.
    """
    came: list[int] = []
    before = {number: signal.signal(number, lambda number, _: came.append(number)) for number in _not_ignored()}

    def stop_here() -> None:
        if came:
            raise KeyboardInterrupt(came[0])

    try:
        yield stop_here
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


@contextlib.contextmanager
def unsuspended() -> Iterator[None]:
    """Switch off the key that suspends (Ctrl-Z) while standard input is a terminal that must not be left as it is.

    Suspended, a program can neither turn echo on again nor wipe a screen with secrets on it.
    """
    before = termios.tcgetattr(0)
    without = [*before[:6], [*before[6]]]
    without[6][termios.VSUSP] = os.fpathconf(0, "PC_VDISABLE").to_bytes(1, "big")
    termios.tcsetattr(0, termios.TCSADRAIN, without)
    try:
        yield
    finally:
        termios.tcsetattr(0, termios.TCSADRAIN, before)


def _not_ignored() -> list[signal.Signals]:
    # Whoever started this program may have switched a signal off for it, as nohup(1) does; it stays off.
    return [number for number in STOP if signal.getsignal(number) is not signal.SIG_IGN]


def _stop(number: int, _: FrameType | None) -> NoReturn:
    raise KeyboardInterrupt(number)
