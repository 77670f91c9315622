"""Which test files never reach the kernel, and the guard that sees to it.

The suite runs on both kernels. What neither of them computes for gives the same on both, so the second run leaves it
out: ``pytest -m 'not kernel_free'``. A file may be ``FREE`` when none of its tests has a kernel compute. While such a
file is collected and its tests run, the two operations of the field are watched, in this process and in those forked
from it, and whatever is started is told by ``SHARES_KERNEL`` to use a kernel that does not exist: it fails when it so
much as chooses one. What is started without being told so, breaks the promise as well. A test that breaks it fails, on
every kernel, with what it did.

A value that one test made and another finds made (``functools.cache``) is seen in the first alone. So before a file
comes onto the list, run it by itself.

Source: this project's own rule (DEVELOPERS.md, "Test"). ``sys.addaudithook`` and its events: PEP 578.
"""

from __future__ import annotations

import mmap
import os
import sys
from collections.abc import Callable, Collection, Generator
from contextlib import contextmanager
from multiprocessing.process import BaseProcess
from pathlib import Path
from typing import Any
from unittest import mock

import pytest

from shares.field import kernel
from shares.field.gf256 import Field

MARKER = "kernel_free"
TESTS = Path(__file__).resolve().parent

# Files, and folders with all that is in them, by their path below tests/; and files of these folders that are no part
# of it.
FREE = (
    "cli/test_completion.py",
    "cli/test_key.py",
    "cli/test_key_folder.py",
    "cli/test_key_forms.py",
    "cli/test_key_tasks.py",
    "cli/test_plan.py",
    "cli/test_polynomial.py",
    "documents/test_acknowledgement.py",
    "documents/test_ceremony_script.py",
    "documents/test_chunks.py",
    "documents/test_keyed_golden.py",
    "documents/test_labels.py",
    "documents/test_members.py",
    "documents/test_nonce_batch.py",
    "documents/test_party.py",
    "documents/test_rates.py",
    "documents/test_sealed_secret.py",
    "documents/test_signing.py",
    "documents/test_task.py",
    "documents/test_vectors.py",
    "documents/test_wrapping.py",
    "evidence/test_calendar.py",
    "evidence/test_chart.py",
    "evidence/test_covering.py",
    "evidence/test_design.py",
    "evidence/test_gathering.py",
    "evidence/test_golden.py",
    "evidence/test_improving.py",
    "evidence/test_planes.py",
    "evidence/test_roster.py",
    "evidence/test_script.py",
    "examples/test_threshold_key.py",
    "faults/test_signing.py",
    "faults/test_tasks.py",
    "group/",
    "history/test_exchange.py",
    "history/test_golden.py",
    "history/test_next.py",
    "history/test_next_dropped.py",
    "history/test_pack.py",
    "history/test_standing.py",
    "history/test_tar.py",
    "keys/",
    "paper/test_linecode.py",
    "paper/test_transcription.py",
    "paper/test_typedline.py",
    "planning/",
    "test_clock.py",
    "test_layers.py",
    "test_storage.py",
    "test_streams.py",
)
BUT: tuple[str, ...] = ()

CHOICE, REFUSED = "SHARES_KERNEL", "none, as tests/kernel_free.py promises"
# Programs that cannot run a line of this package, whatever they are told.
HARMLESS = {"chromium", "node"}
# The events of starting a program, and which argument is its environment: None is the one of this process.
STARTS = {"subprocess.Popen": 3, "os.posix_spawn": 2, "os.exec": 2}
KERNEL, PROGRAM = 0, 1


class Watch:
    """What has reached the kernel, or may have, while it is on: in this process and in those forked from it."""

    def __init__(self) -> None:
        # One byte for each of the two, in shared memory, so that a forked process tells of itself as well.
        self._seen = mmap.mmap(-1, 2)
        self._programs: list[str] = []
        self._on = False
        sys.addaudithook(self._audit)

    def _audit(self, event: str, arguments: tuple[Any, ...]) -> None:
        # Called at every event of the interpreter, so the usual answer comes first.
        if not self._on or event not in STARTS:
            return
        name, environment = os.path.basename(os.fsdecode(arguments[0])), arguments[STARTS[event]]
        told = environment is None or environment.get(CHOICE) == REFUSED
        if not told and name not in HARMLESS:
            self._started(name)

    def _started(self, name: str) -> None:
        self._seen[PROGRAM] = 1
        self._programs.append(name)

    def _operation(self, real: Callable[..., None]) -> Callable[..., None]:
        def operation(*arguments: Any) -> None:
            self._seen[KERNEL] = 1
            real(*arguments)

        return operation

    def _start(self, real: Callable[[BaseProcess], None]) -> Callable[[BaseProcess], None]:
        def start(process: BaseProcess) -> None:
            self._started("a process of multiprocessing")
            real(process)

        return start

    @contextmanager
    def on(self) -> Generator[list[str], None, None]:
        """Watch; the list tells afterwards what was done that no test of ``FREE`` does."""
        found: list[str] = []
        self._seen[:] = bytes(2)
        self._programs.clear()
        kernel()  # This process has its own by now; only what it starts is refused one.
        before = os.environ.get(CHOICE)
        with (
            mock.patch.object(Field, "combine", self._operation(Field.combine)),
            mock.patch.object(Field, "project", self._operation(Field.project)),
            mock.patch.object(BaseProcess, "start", self._start(BaseProcess.start)),
        ):
            self._on = True
            os.environ[CHOICE] = REFUSED
            try:
                yield found
            finally:
                self._on = False
                os.environ.pop(CHOICE, None)
                if before is not None:
                    os.environ[CHOICE] = before
        if self._seen[KERNEL]:
            found.append("the kernel was reached")
        if self._seen[PROGRAM]:
            names = ", ".join(dict.fromkeys(self._programs)) or "a program, by a forked process"
            found.append(f"{names} was started without {CHOICE}={REFUSED!r}")


class Guard:
    """A plugin that marks the tests of some files, and fails each that reaches the kernel.

    Args:
        free: files and folders, as in ``FREE``.
        but: files, as in ``BUT``.
        folder: where they are.
    """

    def __init__(self, free: Collection[str], but: Collection[str], folder: Path) -> None:
        self.files = {folder / name for name in free if not name.endswith("/")}
        self.folders = {folder / name for name in free if name.endswith("/")}
        self.but = {folder / name for name in but}
        self.folder = folder
        self.watch = Watch()

    def has(self, path: Path) -> bool:
        """Say whether a file never reaches the kernel."""
        return path not in self.but and (path in self.files or not self.folders.isdisjoint(path.parents))

    def complaint(self, path: Path, found: list[str]) -> str:
        """Say how a file has broken the promise, and what to do."""
        name = path.relative_to(self.folder).as_posix()
        return (
            f"{'; '.join(found)}, but by tests/kernel_free.py {name} never reaches the kernel. Take it off the list "
            f"there, or move this test; pytest {path} tells of all of it."
        )

    @contextmanager
    def kept(self, path: Path) -> Generator[None, None, None]:
        """Fail at the end when what was done for a file of the list has broken the promise."""
        if not self.has(path):
            yield
            return
        with self.watch.on() as found:
            yield
        if found:
            pytest.fail(self.complaint(path, found), pytrace=False)

    def pytest_collection_modifyitems(self, items: list[pytest.Item]) -> None:
        for item in items:
            if self.has(item.path):
                item.add_marker(MARKER)

    @pytest.hookimpl(wrapper=True)
    def pytest_make_collect_report(
        self, collector: pytest.Collector
    ) -> Generator[None, pytest.CollectReport, pytest.CollectReport]:
        if not isinstance(collector, pytest.Module) or not self.has(collector.path):
            return (yield)
        with self.watch.on() as found:
            report = yield
        if found and report.passed:
            report.outcome, report.longrepr = "failed", self.complaint(collector.path, found)
        return report

    @pytest.hookimpl(wrapper=True)
    def pytest_runtest_setup(self, item: pytest.Item) -> Generator[None, Any, Any]:
        with self.kept(item.path):
            return (yield)

    @pytest.hookimpl(wrapper=True)
    def pytest_runtest_call(self, item: pytest.Item) -> Generator[None, Any, Any]:
        with self.kept(item.path):
            return (yield)

    @pytest.hookimpl(wrapper=True)
    def pytest_runtest_teardown(self, item: pytest.Item) -> Generator[None, Any, Any]:
        with self.kept(item.path):
            return (yield)
