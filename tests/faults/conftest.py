"""What the fault tests need of the machine: strace, and for some a medium of their own."""

from __future__ import annotations

import os
import shutil
import subprocess
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest


def missing(what: str) -> None:
    """Skip loudly, or fail where every check is promised."""
    if os.environ.get("SHARES_REQUIRE_CT") == "1":
        pytest.fail(f"{what}, and SHARES_REQUIRE_CT=1 demands it")
    pytest.skip(what)


@pytest.fixture(scope="session")
def strace() -> None:
    """See that strace is there and may trace."""
    if shutil.which("strace") is None:
        missing("strace is not installed (apt-get install strace)")
    tried = subprocess.run(
        ["strace", "-f", "-qq", "-o", "/dev/null", "-e", "inject=fsync:error=EIO", "true"],
        capture_output=True,
        text=True,
        check=False,
    )
    if tried.returncode:
        missing(f"strace may not trace here: {tried.stderr.strip()}")


@contextmanager
def mounted(folder: Path, options: str) -> Iterator[Path]:
    """A medium of its own in memory; only root can have one."""
    folder.mkdir()
    command = ["mount", "-t", "tmpfs", "-o", options, "tmpfs", folder]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    if done.returncode:
        if os.geteuid() == 0:
            missing(f"no medium can be mounted here: {done.stderr.strip()}")
        pytest.skip("only root can mount a medium")
    try:
        yield folder
    finally:
        subprocess.run(["umount", folder], check=True)


@pytest.fixture
def medium(tmp_path: Path) -> Iterator[object]:
    """A function that mounts a medium with the options given; it is gone after the test."""
    from contextlib import ExitStack

    with ExitStack() as stack:
        yield lambda name, options: stack.enter_context(mounted(tmp_path / name, options))
