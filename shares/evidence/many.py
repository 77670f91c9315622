"""Audit many sets: found below folders, shared out to processes or to any executor, one failure never another's.

Source: none; ``concurrent.futures`` of the Python standard library is the interface to whatever does the work.
May import: shares.errors, shares.clock, shares.storage, shares.streams, shares.documents, shares.history,
shares.evidence.
Secret: nothing. Confidential: what audits tell. Public: paths.
Does not: audit; ``evidence.audit`` does, one set at a time.
"""

from __future__ import annotations

import itertools
import multiprocessing
import os
import signal
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Sequence
from concurrent.futures import BrokenExecutor, Executor, Future, ProcessPoolExecutor
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

from shares import clock
from shares.documents.entry import Head
from shares.documents.party import PartyCard
from shares.errors import OtherKindError, ParameterError, SharesError
from shares.evidence.audit import audit
from shares.evidence.audited import Audit, Reason, Verdict
from shares.history.files import RECORD_NAME, Files, FolderFiles
from shares.history.folder import refuse_key
from shares.history.journal import JOURNAL_NAME
from shares.history.pack import PackFiles
from shares.storage import StrPath
from shares.streams import refusing

PACK_SUFFIX = ".tar"
_CHUNK = 16
"""So many sets go to a worker at once: enough to hide what handing over costs, few enough to share the work evenly."""
_IN_FLIGHT = 64
"""So many chunks are handed over and not yet taken back, for an executor that does not say how many workers it has."""


@dataclass(frozen=True, slots=True)
class Found:
    """Where sets are.

    Attributes:
        sets: folders and packs, in the order given, and by name below one folder.
        passed_over: folders that hold no set, though they lie beside some that do.
    """

    sets: tuple[str, ...]
    passed_over: tuple[str, ...] = ()


def find_sets(paths: Iterable[StrPath]) -> Found:
    """Return the sets that are meant: each path is a set's folder, a pack, or a folder of these.

    Args:
        paths: files and folders. A file is taken for a pack. A folder with a record or a journal is a set's; in any
            other its folders and its files that end in ``.tar`` are looked at, and nothing below.

    Raises:
        StorageError: a folder cannot be listed, or a path does not exist.
        ParameterError: a folder holds no set.
        OtherKindError: it is that of a threshold key.
    """
    sets, passed_over = dict[str, None](), list[str]()
    for path in [os.fspath(one) for one in paths]:
        if not os.path.isdir(path) or _is_set(path):
            with refusing(path):
                os.stat(path)
            if os.path.isdir(path):
                refuse_key(FolderFiles(Path(path)))
            sets[path] = None
            continue
        with refusing(path):
            inside = sorted(os.scandir(path), key=lambda entry: entry.name)
        below = [entry.path for entry in inside if entry.is_dir() and _is_set(entry.path) and not _is_key(entry.path)]
        below += [entry.path for entry in inside if entry.is_file() and entry.name.endswith(PACK_SUFFIX)]
        if not below:
            raise ParameterError(
                "holds no set: neither a record, nor folders that do, nor packs",
                where=path,
                hint="name the folder with record.json in it, a folder of such folders, or a pack",
            )
        sets.update(dict.fromkeys(below))
        passed_over += [entry.path for entry in inside if entry.is_dir() and entry.path not in sets]
    return Found(tuple(sets), tuple(passed_over))


def _is_set(folder: str) -> bool:
    return any(os.path.lexists(Path(folder) / name) for name in (RECORD_NAME, JOURNAL_NAME))


def _is_key(folder: str) -> bool:
    try:
        refuse_key(FolderFiles(Path(folder)))
    except OtherKindError:
        return True
    return False


def audit_many(
    sets: Sequence[StrPath],
    *,
    executor: Executor | None = None,
    jobs: int | None = None,
    at: datetime | None = None,
    trusted: Sequence[PartyCard] = (),
    heads: Sequence[Head] = (),
    progress: Callable[[int, int], None] | None = None,
) -> Iterator[Audit]:
    """Audit sets, and yield what was found of each, in the order given.

    Args:
        sets: folders and packs, as ``find_sets`` returns them; where an executor works on other machines, paths that
            these can read.
        executor: what does the work; processes on this machine by default. It is not shut down.
        jobs: how many processes; as many as there are processors by default. Without meaning for an executor.
        at: as for ``audit``.
        trusted: as for ``audit``.
        heads: as for ``audit``; of one set alone.
        progress: called with (sets done, sets).

    Yields:
        One ``Audit`` for each set, whatever became of it: of one whose process died, say, that it was broken off.

    Raises:
        ParameterError: ``jobs`` is less than one, or heads are given with more than one set.
    """
    jobs = len(os.sched_getaffinity(0)) if jobs is None else jobs
    if jobs < 1:
        raise ParameterError("one process at least is needed", where="jobs")
    paths = [os.fspath(path) for path in sets]
    if heads and len(paths) > 1:
        raise ParameterError(
            "a head is of one journal, and several sets are given", where="--head", hint="audit its set alone"
        )
    work = _Work(at, clock.now(), tuple(trusted), tuple(heads))
    if executor is None and min(jobs, len(paths)) <= 1:
        audits: Iterator[Audit] = (one for path in paths for one in work([path]))
    else:
        audits = _shared_out(paths, work, executor, min(jobs, -(-len(paths) // _CHUNK)))
    for done, audited in enumerate(audits):
        if progress:
            progress(done, len(paths))
        yield audited


@dataclass(frozen=True, slots=True)
class _Work:
    """What a worker does with the paths that it is given; it travels to the worker."""

    at: datetime | None
    now: datetime
    trusted: tuple[PartyCard, ...]
    heads: tuple[Head, ...]

    def __call__(self, paths: Sequence[str]) -> list[Audit]:
        return [self._one(path) for path in paths]

    def _one(self, path: str) -> Audit:
        try:
            files: Files = FolderFiles(Path(path)) if os.path.isdir(path) else PackFiles(path)
            return audit(files, at=self.at, trusted=self.trusted, heads=self.heads)
        except SharesError as error:
            return self.failed(path, "unreadable", f"It cannot be read: {error.what}", error.hint or "check the path")
        except Exception as error:  # noqa: BLE001 - the other sets are audited all the same; the text may hold anything
            place = error.__traceback__
            while place and place.tb_next:
                place = place.tb_next
            where = f"{place.tb_frame.f_globals.get('__name__')}:{place.tb_lineno}" if place else "unknown place"
            what = f"A fault in this program, {type(error).__name__} at {where}"
            return self.failed(path, "fault", what, "please report it; no secret is in this line")

    def failed(self, path: str, code: str, what: str, step: str) -> Audit:
        reason = Reason(Verdict.BROKEN, code, f"{what}.", f"{step[:1].upper()}{step[1:]}.")
        return Audit(path, self.at or self.now, Verdict.BROKEN, (reason,))

    def broken_off(self, path: str) -> Audit:
        what = "The process that audited it died, for want of memory perhaps"
        return self.failed(path, "broken-off", what, "audit it alone, on a machine with more memory")


def _shared_out(paths: Sequence[str], work: _Work, executor: Executor | None, jobs: int) -> Iterator[Audit]:
    chunks = (paths[i : i + _CHUNK] for i in range(0, len(paths), _CHUNK))
    most = _IN_FLIGHT if executor else 2 * jobs
    pool = executor or _processes(jobs)
    waiting: deque[tuple[Sequence[str], Future[list[Audit]]]] = deque()
    try:
        while True:
            for chunk in itertools.islice(chunks, most - len(waiting)):
                waiting.append((chunk, _submitted(pool, work, chunk)))
            if not waiting:
                return
            chunk, future = waiting.popleft()
            problem = future.exception()
            if problem is None:
                yield from future.result()
                continue
            # Each set of the chunk is tried alone, so that it takes no other with it. Where processes of ours died,
            # those handed over later are lost as well, and any of them may have done it.
            suspects = list(chunk)
            if executor is None and isinstance(problem, BrokenExecutor):
                suspects += [path for one, _ in waiting for path in one]
                waiting.clear()
                pool.shutdown(wait=False)
                pool = _processes(jobs)
            yield from _one_by_one(suspects, work, executor)
    finally:
        for _, future in waiting:
            future.cancel()
        if executor is None:
            pool.shutdown(wait=False, cancel_futures=True)


def _submitted(pool: Executor, work: _Work, chunk: Sequence[str]) -> Future[list[Audit]]:
    """Hand a chunk over; where that fails, the future says so, as it does for one that failed later."""
    try:
        return pool.submit(work, chunk)
    except (BrokenExecutor, RuntimeError) as error:
        failed: Future[list[Audit]] = Future()
        failed.set_exception(error)
        return failed


def _one_by_one(paths: Sequence[str], work: _Work, executor: Executor | None) -> Iterator[Audit]:
    """Audit each set with nothing else under way; whichever stops its process is known then."""
    pool = executor or _processes(1)
    try:
        for path in paths:
            future = _submitted(pool, work, [path])
            if future.exception() is None:
                yield from future.result()
                continue
            yield work.broken_off(path)
            if executor is None:
                pool.shutdown(wait=False)
                pool = _processes(1)
    finally:
        if executor is None:
            pool.shutdown(wait=False, cancel_futures=True)


def _processes(jobs: int) -> ProcessPoolExecutor:
    # A fresh process for each worker, whatever threads this one has.
    context = multiprocessing.get_context("forkserver")
    context.set_forkserver_preload([__name__])
    return ProcessPoolExecutor(jobs, mp_context=context, initializer=_leave_interrupts)


def _leave_interrupts() -> None:
    """Let the process that asked deal with an interrupt from the terminal."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
