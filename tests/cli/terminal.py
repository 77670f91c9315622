"""A terminal for the tests of prompts: a pseudo-terminal that a program under test has for its own.

Source: pty(7), termios(3), ioctl_tty(2) (TIOCSCTTY).
"""

from __future__ import annotations

import contextlib
import fcntl
import os
import pty
import select
import subprocess
import termios
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from cli.harness import PROGRAM

PATIENCE = 30.0


class Terminal:
    """The other end of a program's terminal: what it shows, and what is typed."""

    def __init__(self, leader: int, follower: int, process: subprocess.Popen[bytes]) -> None:
        self._leader = leader
        self._follower = follower
        self.process = process
        self.shown = b""
        self._seen = 0

    def wait_for(self, text: str) -> None:
        """Wait until the program shows this, after what was waited for before."""
        wanted, limit = text.encode(), time.monotonic() + PATIENCE
        while (at := self.shown.find(wanted, self._seen)) < 0:
            assert time.monotonic() < limit, f"{text!r} was not shown"
            self._read()
        self._seen = at + len(wanted)

    def type(self, keys: str | bytes) -> None:
        """Type keys; ``\\x03`` is what an interrupt is typed with, ``\\x04`` the end of input."""
        os.write(self._leader, keys.encode() if isinstance(keys, str) else keys)

    def answer(self, prompt: str, line: str) -> None:
        """Wait for a prompt and type a line."""
        self.wait_for(prompt)
        self.type(line + "\n")

    @property
    def echoes(self) -> bool:
        """Whether the terminal shows what is typed."""
        return bool(termios.tcgetattr(self._follower)[3] & termios.ECHO)

    @property
    def suspends(self) -> bool:
        """Whether a key (Ctrl-Z) suspends the program."""
        return termios.tcgetattr(self._follower)[6][termios.VSUSP] != b"\0"

    def finish(self) -> tuple[int, str]:
        """Wait for the program's end; return its exit code and its standard output."""
        assert self.process.stdout is not None
        limit = time.monotonic() + PATIENCE
        while self.process.poll() is None:
            assert time.monotonic() < limit, "the program does not end"
            self._read()
        while select.select([self._leader], [], [], 0)[0]:
            self._read()
        return self.process.returncode, self.process.stdout.read().decode()

    def _read(self) -> None:
        if select.select([self._leader], [], [], 0.05)[0]:
            self.shown += os.read(self._leader, 65_536)


@contextlib.contextmanager
def on_terminal(*arguments: str | Path, stderr: Any = None, **options: Any) -> Iterator[Terminal]:
    """Run the program on a terminal of its own: standard input and error; standard output is a pipe."""
    leader, follower = pty.openpty()
    process = subprocess.Popen(
        [PROGRAM, *arguments],
        stdin=follower,
        stdout=subprocess.PIPE,
        stderr=follower if stderr is None else stderr,
        start_new_session=True,
        preexec_fn=lambda: fcntl.ioctl(0, termios.TIOCSCTTY, 0) and None,
        **options,
    )
    try:
        yield Terminal(leader, follower, process)
    finally:
        process.kill()
        process.wait(PATIENCE)
        if process.stdout is not None:
            process.stdout.close()
        os.close(leader)
        os.close(follower)
