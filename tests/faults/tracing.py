"""Faults at the level of system calls: strace(1) counts the calls of a run and then makes one of them fail or kill.

A run is traced once to learn which of its calls touch a folder. Each of these is then named by the call and how often
that call had come before, and run again with a signal or an error injected right there. Where a run takes another turn
than the traced one, and the fault does not strike what it was meant for, the test fails rather than say nothing.
"""

from __future__ import annotations

import atexit
import collections
import compileall
import functools
import os
import re
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from typing import TypeVar

from cli.harness import Result

import shares

# The calls through which a file or folder is reached, by path or by descriptor.
CALLS = "trace=%file,%desc"
BY_DESCRIPTOR = ("read", "readv", "write", "getdents64", "ioctl")
AT_ONCE = len(os.sched_getaffinity(0))

Answer = TypeVar("Answer")


@dataclass(frozen=True)
class Site:
    """One system call of a run: which, how many of its kind came before it, and what it does, names left out."""

    call: str
    number: int
    what: str

    def __str__(self) -> str:
        return f"{self.call} {self.number}: {self.what}"


@dataclass(frozen=True)
class Traced:
    """A traced run: its result, and the calls of it that touched the folder."""

    result: Result
    sites: list[Site]


@functools.cache
def program() -> list[str]:
    """The program, from a copy that makes the same calls on every run: compiled, and edited by nobody meanwhile."""
    folder = tempfile.mkdtemp()
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    shutil.copytree(Path(shares.__file__).parent, f"{folder}/shares", ignore=shutil.ignore_patterns("__pycache__"))
    compileall.compile_dir(folder, quiet=2)
    # The process is left open to its tracer: once it is closed to dumps, only root could see which files it names.
    code = f"import sys; sys.path.insert(0, {folder!r})\n"
    code += "from shares.cli import main; main.protect_process = int; main.run()"
    # -P: not the folder of this checkout, even where the tests are run from it.
    return [sys.executable, "-P", "-B", "-c", code]


def trace(folder: Path, arguments: Sequence[str | Path], *inject: str, calls: str = CALLS) -> Traced:
    """Run the program under strace in a folder, with faults injected.

    Args:
        folder: the calls that touch it are kept; the log is written beside it.
        arguments: of the program.
        inject: expressions of strace, as ``fsync:error=EIO``, in force at every such call.
        calls: what is traced; the fewer, the faster.
    """
    log = folder.with_name(f"{folder.name}.log")
    faults = [word for expression in inject for word in ("-e", f"inject={expression}")]
    done = subprocess.run(
        ["strace", "-f", "-qq", "-y", "-s", "8", "-o", log, "-e", calls, *faults, *program(), *arguments],
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )
    return Traced(Result(done.returncode, done.stdout, done.stderr), _touching(log, folder))


def _touching(log: Path, folder: Path) -> list[Site]:
    seen: collections.Counter[str] = collections.Counter()
    sites = []
    for line in log.read_text("utf-8", "replace").splitlines():
        found = re.match(r"\d+ +(\w+)\((.*)", line)
        if not found or found[1] in ("execve", "exit_group"):
            continue
        call, rest = found.groups()
        seen[call] += 1
        # What is printed names files as well; that is not reaching them.
        if re.search(rf'{re.escape(os.fspath(folder))}[/>"]', rest) and not re.match(
            r"[012]<(pipe|/dev/null|socket)", rest
        ):
            what = _named_alike(rest, folder)
            # Of these the first argument says all; what is read is not there yet when the run is killed.
            sites.append(Site(call, seen[call], what.partition(",")[0] if call in BY_DESCRIPTOR else what))
    return sites


def _named_alike(rest: str, folder: Path) -> str:
    """The arguments of a call, with what differs between runs and between custodians left out."""
    # What is read and written, addresses, and how the call ended.
    what = re.split(r"\) +=|0x|\{| <unfinished", rest)[0]
    what = what.replace(f"{folder}/", "").replace(os.fspath(folder), "*").replace(os.getcwd(), ".")
    what = re.sub(r"\.[0-9a-f]{16}\.partial", ".*.partial", what)
    what = re.sub(r"[0-9a-f]{32,64}", "*", what)  # digests and random names
    what = re.sub(r"[\w-]+\.share\.json", "*.share.json", what)
    return re.sub(r"\b\d+<", "<", what).rstrip(' ,)["')


def counted(folder: Path, prepare: Callable[[Path], Sequence[str | Path]], *inject: str) -> list[Site]:
    """Learn the calls of an undisturbed run: of two runs in succession that agree.

    Args:
        folder: where folders for the runs are made.
        prepare: makes the folder of a run and returns its arguments.
        inject: faults in force all the time.
    """
    before = None
    for attempt in range(6):
        own = folder / f"count{attempt}"
        traced = trace(own, prepare(own), *inject)
        assert traced.result.code == 0, traced.result.err
        if traced.sites == before:
            return before
        before = traced.sites
    raise AssertionError("no two runs make the same calls")


def trace_with(folder: Path, arguments: Sequence[str | Path], site: Site, fault: str, *inject: str) -> Traced:
    """Run the program with a fault, ``signal=KILL`` or ``error=EIO``, at one call; see that it struck there.

    Whatever else is at work on this machine may make a run look into one folder more than the run before. A fault that
    struck another call so is tried again, in the folder as it was.
    """
    always = [one for one in inject if not one.startswith(f"{site.call}:")]
    once = f"{site.call}:{fault}:when={site.number}"
    # Only calls that are traced are made to fail.
    calls = {site.call, *(one.split(":")[0] for one in always)}
    before = shutil.copytree(folder, folder.with_name(f"{folder.name}.before"))
    for _ in range(5):
        traced = trace(folder, arguments, *always, once, calls=f"trace={','.join(calls)}")
        if site in traced.sites:
            shutil.rmtree(before)
            return traced
        shutil.rmtree(folder)
        shutil.copytree(before, folder)
    raise AssertionError(f"the fault never struck {site}")


def distinct(sites: Iterable[Site]) -> list[Site]:
    """The last call of each sort: of those that differ in nothing but custodians' names."""
    return list({(site.call, site.what): site for site in sites}.values())


def at_each(sites: Sequence[Site], attempt: Callable[[int, Site], Answer]) -> list[Answer]:
    """Attempt something at each call, as many at once as there are processors."""
    with ThreadPoolExecutor(AT_ONCE) as pool:
        return list(pool.map(attempt, range(len(sites)), sites))
