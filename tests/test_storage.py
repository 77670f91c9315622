"""Files: complete or absent, never replaced, whatever fails or is killed; and reading that is bounded and never waits.

Faults come from the kernel where it can be made to fail (a full or read-only medium, file size limits, another user),
and from wrapped system calls elsewhere. Error numbers: open(2), rename(2), link(2), write(2), fsync(2).
"""

from __future__ import annotations

import contextlib
import ctypes
import errno
import hashlib
import itertools
import mmap
import os
import pty
import resource
import signal
import socket
import stat
import subprocess
import sys
import textwrap
import threading
import time
import warnings
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares import memory, storage, streams
from shares.errors import ParameterError, StorageError
from shares.memory import Secret

DATA = b"the content of a file, whole"
UNPRIVILEGED = 65534
CALLS = ("open", "write", "fchmod", "fsync", "close", "link", "unlink")


def refuse(*_: object, **__: object) -> None:
    raise OSError(errno.EPERM, "as a medium without it answers")


@pytest.fixture(params=["rename", "link", "create"])
def medium(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> str:
    """Each way a medium lets a file get its name: exclusive rename, hard link, neither."""
    if request.param != "rename":
        monkeypatch.setattr(streams, "_rename_new", refuse)
    if request.param == "create":
        monkeypatch.setattr(os, "link", refuse)
    return str(request.param)


def in_child(work: Callable[[], object], *, seconds: int = 20) -> tuple[int, str]:
    """Run work in a forked child; return its exit status (negative: the signal) and what it answered."""
    reader, writer = os.pipe()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        child = os.fork()
    if child == 0:
        leave, answer_with = os._exit, os.write
        signal.alarm(seconds)
        status = 1
        try:
            answer_with(writer, str(work()).encode())
            status = 0
        except StorageError as error:
            answer_with(writer, str(error).encode())
            status = 5
        finally:
            leave(status)
    os.close(writer)
    with os.fdopen(reader, "rb") as stream:
        answer = stream.read().decode()
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]), answer


def drop_privileges() -> None:
    """Permissions do not bind root, so they are tried as another user."""
    if os.geteuid() == 0:
        os.setgroups([])
        os.setgid(UNPRIVILEGED)
        os.setuid(UNPRIVILEGED)


def mode_of(path: Path) -> int:
    return stat.S_IMODE(path.lstat().st_mode)


# Writing.


@given(data=st.binary(max_size=200_000), secret=st.booleans())
def test_what_is_written_is_read(tmp_path_factory: pytest.TempPathFactory, data: bytes, secret: bool) -> None:
    path = tmp_path_factory.mktemp("written") / "file"
    for given_as in (data, bytearray(data), memoryview(data)):
        storage.write_new(path, given_as, secret=secret)
        assert storage.read_file(path, limit=len(data)) == data
        assert storage.read_back(path, limit=len(data)) == data
        path.unlink()


def test_a_secret_is_written_from_its_own_memory(tmp_path: Path) -> None:
    path = tmp_path / "key"
    with Secret.of(DATA) as secret, secret.view() as view:
        storage.write_new(path, view, secret=True)
    assert path.read_bytes() == DATA


@pytest.mark.parametrize("umask", [0, 0o022, 0o077, 0o777])
@pytest.mark.parametrize(("secret", "mode"), [(True, 0o600), (False, 0o644)])
def test_modes_are_exact_whatever_the_umask(tmp_path: Path, medium: str, umask: int, secret: bool, mode: int) -> None:
    before = os.umask(umask)
    try:
        storage.write_new(tmp_path / "file", DATA, secret=secret)
    finally:
        os.umask(before)
    assert mode_of(tmp_path / "file") == mode
    assert os.listdir(tmp_path) == ["file"]
    assert (tmp_path / "file").stat().st_nlink == 1


def test_a_secret_is_never_open_to_others_on_the_way(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    seen: list[int] = []
    real = os.write

    def watch(descriptor: int, data: memoryview) -> int:
        seen.append(stat.S_IMODE(os.fstat(descriptor).st_mode))
        return real(descriptor, data)

    monkeypatch.setattr(os, "write", watch)
    before = os.umask(0)
    try:
        storage.write_new(tmp_path / "file", DATA, secret=True)
    finally:
        os.umask(before)
    assert seen == [0o600]


def test_short_writes_are_continued(tmp_path: Path, medium: str, monkeypatch: pytest.MonkeyPatch) -> None:
    real = os.write
    monkeypatch.setattr(os, "write", lambda descriptor, data: real(descriptor, data[:3]))
    storage.write_new(tmp_path / "file", DATA, secret=True)
    assert (tmp_path / "file").read_bytes() == DATA


def occupy_with_file(path: Path) -> None:
    path.write_bytes(b"old")


def occupy_with_link(path: Path) -> None:
    path.with_name("target").write_bytes(b"old")
    path.symlink_to("target")


def occupy_with_dangling_link(path: Path) -> None:
    path.symlink_to("nowhere")


def occupy_with_folder(path: Path) -> None:
    path.mkdir()


def occupy_with_pipe(path: Path) -> None:
    os.mkfifo(path)


@pytest.mark.parametrize(
    "occupy",
    [occupy_with_file, occupy_with_link, occupy_with_dangling_link, occupy_with_folder, occupy_with_pipe],
)
def test_nothing_is_ever_replaced(tmp_path: Path, medium: str, occupy: Callable[[Path], None]) -> None:
    path = tmp_path / "file"
    occupy(path)
    before = {entry.name: entry.lstat() for entry in tmp_path.iterdir()}
    with pytest.raises(StorageError, match="exists already") as caught:
        storage.write_new(path, DATA, secret=False)
    assert caught.value.where == str(path)
    assert caught.value.hint
    after = {entry.name: entry.lstat() for entry in tmp_path.iterdir()}
    assert {name: (status.st_ino, status.st_size, status.st_mtime_ns) for name, status in after.items()} == {
        name: (status.st_ino, status.st_size, status.st_mtime_ns) for name, status in before.items()
    }


def test_of_many_writers_one_wins(tmp_path: Path, medium: str) -> None:
    path = tmp_path / "file"
    gate_reader, gate = os.pipe()
    children = []
    for number in range(8):
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", DeprecationWarning)
            child = os.fork()
        if child == 0:
            status = 1
            try:
                os.close(gate)
                os.read(gate_reader, 1)
                storage.write_new(path, bytes([number]) * 100_000, secret=True)
                status = 0
            except StorageError as error:
                status = 5 if "exists already" in error.what else 1
            finally:
                os._exit(status)
        children.append(child)
    os.close(gate)
    statuses = [os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]) for child in children]
    os.close(gate_reader)
    assert sorted(statuses) == [0, 5, 5, 5, 5, 5, 5, 5]
    assert path.read_bytes() == bytes([statuses.index(0)]) * 100_000
    assert os.listdir(tmp_path) == ["file"]


@pytest.mark.parametrize("name", ["two words", "line\nbreak", "-", "-rf", ".hidden", "\u00e9", "\udcff", "x" * 220])
def test_unusual_names_work(tmp_path: Path, name: str) -> None:
    storage.write_new(tmp_path / name, DATA, secret=False)
    assert storage.read_file(tmp_path / name, limit=100) == DATA
    assert os.listdir(tmp_path) == [name]


@pytest.mark.parametrize(
    ("name", "what"),
    [
        ("", "exists already|is a folder"),
        (".", "exists already|is a folder"),
        ("..", "exists already"),
        ("missing/file", "does not exist"),
        ("plain/file", "is not a folder"),
        ("x" * 256, "too long a name"),
        ("zero\0byte", "not a possible path"),
        ("\ud800", "not a possible path"),
    ],
)
def test_impossible_names_are_refused(tmp_path: Path, name: str, what: str) -> None:
    (tmp_path / "plain").write_bytes(b"")
    with pytest.raises(StorageError, match=what):
        storage.write_new(f"{tmp_path}/{name}", DATA, secret=False)
    assert os.listdir(tmp_path) == ["plain"]


# Failing and being killed at each step.


@contextlib.contextmanager
def stepping(wanted: int, act: Callable[[Callable[[], object]], object]) -> Iterator[list[str]]:
    """Count the system calls that writing makes, and hand number ``wanted`` to ``act``; write in small parts."""
    made: list[str] = []

    def wrap(name: str, real: Callable[..., object]) -> Callable[..., object]:
        def call(*arguments: object, **named: object) -> object:
            made.append(name)
            if len(made) == wanted:
                return act(lambda: real(*arguments, **named))
            return real(*arguments, **named)

        return call

    write = os.write
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(os, "write", lambda descriptor, data: write(descriptor, data[:10]))
        for home, name in [*((os, name) for name in CALLS), (streams, "_rename_new")]:
            if getattr(home, name) is not refuse:
                patch.setattr(home, name, wrap(name, getattr(home, name)))
        yield made


def kill_before(_: Callable[[], object]) -> None:
    os.kill(os.getpid(), signal.SIGKILL)


def kill_after(call: Callable[[], object]) -> None:
    try:
        call()
    finally:
        os.kill(os.getpid(), signal.SIGKILL)


@pytest.mark.parametrize("kill", [kill_before, kill_after])
def test_a_killed_run_leaves_a_whole_file_or_none(tmp_path: Path, medium: str, kill: Callable[..., None]) -> None:
    found: set[str] = set()
    for step in itertools.count(1):
        folder = tmp_path / str(step)
        folder.mkdir()
        path = folder / "file"

        def work(step: int = step, path: Path = path) -> None:
            with stepping(step, kill):
                storage.write_new(path, DATA, secret=True)

        status, _ = in_child(work)
        if status == 0:
            break
        assert status == -signal.SIGKILL
        left = storage.leftovers(folder)
        assert {entry for entry in folder.iterdir() if entry != path} == set(left)
        assert all(mode_of(entry) == 0o600 for entry in left)
        if not path.exists():
            found.add("absent")
            storage.write_new(path, DATA, secret=True)
            assert path.read_bytes() == DATA
        else:
            found.add("whole" if path.read_bytes() == DATA else "part")
            assert DATA.startswith(path.read_bytes())
            with pytest.raises(StorageError, match="exists already"):
                storage.write_new(path, DATA, secret=True)
        assert storage.leftovers(folder) == left
    assert step > 10
    # Only a medium with neither way can be left with a part of a file under its final name, and says so.
    assert found == ({"absent", "whole", "part"} if medium == "create" else {"absent", "whole"})


@pytest.mark.parametrize("code", [errno.ENOSPC, errno.EIO, errno.EROFS, errno.EACCES, errno.EDQUOT, errno.ENOMEM])
def test_a_failing_step_leaves_nothing(tmp_path: Path, medium: str, code: int) -> None:
    open_before = len(os.listdir("/proc/self/fd"))
    failed: list[str] = []

    def fail(name: str, call: Callable[[], object]) -> None:
        if name == "close":
            call()
        raise OSError(code, os.strerror(code))

    for step in itertools.count(1):
        folder = tmp_path / str(step)
        folder.mkdir()
        error = None
        with stepping(step, lambda call: fail(made[-1], call)) as made:
            try:
                storage.write_new(folder / "file", DATA, secret=True)
            except StorageError as caught:
                error = caught
        assert len(os.listdir("/proc/self/fd")) == open_before
        if len(made) < step:
            break
        if error is None:
            # A medium without modes may refuse them: the file is 0600 from its first moment.
            assert made[step - 1] == "fchmod"
            assert (folder / "file").read_bytes() == DATA
        elif step < len(made):
            failed.append(made[step - 1])
            assert os.listdir(folder) == []
            assert (error.what, error.hint) == streams._REASONS.get(code, (error.what, error.hint))
            assert error.hint
    assert {"open", "write", "fsync", "close"} < set(failed)
    assert {"rename": "_rename_new", "link": "link", "create": "unlink"}[medium] in failed


def test_what_the_system_says_is_passed_on(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(descriptor: int) -> None:
        raise OSError(errno.ENOMEM, "")

    monkeypatch.setattr(os, "fsync", fail)
    with pytest.raises(StorageError, match=os.strerror(errno.ENOMEM).lower()):
        storage.write_new(tmp_path / "file", DATA, secret=True)


def test_an_interrupted_run_leaves_nothing(tmp_path: Path, medium: str) -> None:
    def interrupt(_: Callable[[], object]) -> None:
        raise KeyboardInterrupt

    for step in range(3, 7):
        with stepping(step, interrupt), pytest.raises(KeyboardInterrupt):
            storage.write_new(tmp_path / "file", DATA, secret=True)
        assert os.listdir(tmp_path) == []


def test_a_folder_that_cannot_be_synced_is_no_failure(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    real = os.fsync

    def only_files(descriptor: int) -> None:
        if stat.S_ISDIR(os.fstat(descriptor).st_mode):
            raise OSError(errno.EINVAL, "as some network file systems answer")
        real(descriptor)

    monkeypatch.setattr(os, "fsync", only_files)
    storage.write_new(tmp_path / "file", DATA, secret=True)
    assert (tmp_path / "file").read_bytes() == DATA


def test_content_and_folder_are_synced_in_order(tmp_path: Path, medium: str) -> None:
    with stepping(0, lambda call: None) as made:
        storage.write_new(tmp_path / "file", DATA[:5], secret=True)
    # open folder, open file; the content is on the medium before the name is, and the name before the end.
    start = ["open", "open", "write", "fchmod", "fsync", "close"]
    ends = {
        "rename": ["_rename_new", "unlink", "fsync", "close"],
        "link": ["link", "unlink", "fsync", "close"],
        # The finished file is copied to its final name.
        "create": ["open", "open", "write", "close", "fchmod", "fsync", "close", "unlink", "fsync", "close"],
    }
    assert made == start + ends[medium]


# Media that the kernel makes fail.


@contextlib.contextmanager
def mounted(folder: Path, options: str) -> Iterator[None]:
    folder.mkdir()
    if os.geteuid() != 0:
        pytest.skip("only root can mount a medium")
    done = subprocess.run(["mount", "-t", "tmpfs", "-o", options, "tmpfs", folder], capture_output=True, check=False)
    if done.returncode != 0:
        pytest.skip(f"no medium can be mounted here: {done.stderr.decode().strip()}")
    try:
        yield
    finally:
        subprocess.run(["umount", folder], check=True)


def test_a_full_medium(tmp_path: Path, medium: str) -> None:
    folder = tmp_path / "medium"
    with mounted(folder, "size=64k"):
        storage.write_new(folder / "small", b"x" * 10_000, secret=True)
        with pytest.raises(StorageError, match="the medium is full"):
            storage.write_new(folder / "large", b"x" * 100_000, secret=True)
        assert os.listdir(folder) == ["small"]
        storage.write_new(folder / "next", b"x" * 10_000, secret=True)


def test_a_read_only_medium(tmp_path: Path, medium: str) -> None:
    folder = tmp_path / "medium"
    with mounted(folder, "ro"):
        with pytest.raises(StorageError, match="the medium is read-only"):
            storage.write_new(folder / "file", DATA, secret=True)
        with pytest.raises(StorageError, match="the medium is read-only"):
            storage.make_folder(folder / "inner")


def test_a_file_size_limit(tmp_path: Path, medium: str) -> None:
    def work() -> None:
        resource.setrlimit(resource.RLIMIT_FSIZE, (50_000, 50_000))
        storage.write_new(tmp_path / "file", b"x" * 100_000, secret=True)

    status, answer = in_child(work)
    assert status == 5
    assert "larger than is allowed" in answer
    assert os.listdir(tmp_path) == []


def test_a_folder_without_permission(tmp_path: Path, medium: str) -> None:
    tmp_path.chmod(0o555)

    def work() -> None:
        # The working folder stays reachable although those above it are closed to the other user.
        os.chdir(tmp_path)
        drop_privileges()
        storage.write_new("file", DATA, secret=True)

    status, answer = in_child(work)
    assert status == 5
    assert answer.startswith("file: permission denied (")
    assert os.listdir(tmp_path) == []


@pytest.mark.parametrize("act", ["read_file", "read_secret", "leftovers", "make_folder"])
def test_reading_without_permission(tmp_path: Path, act: str) -> None:
    (tmp_path / "closed").mkdir(mode=0)
    (tmp_path / "file").write_bytes(DATA)
    (tmp_path / "file").chmod(0)
    tmp_path.chmod(0o755)

    def work() -> None:
        os.chdir(tmp_path)
        drop_privileges()
        if act == "leftovers":
            storage.leftovers("closed")
        elif act == "make_folder":
            storage.make_folder("closed/inner/most")
        else:
            getattr(storage, act)("file", limit=100)

    status, answer = in_child(work)
    assert status == 5
    assert "permission denied" in answer


# Folders, leftovers, undoing.


@pytest.mark.parametrize("umask", [0, 0o022, 0o077])
def test_folders_are_made_for_their_owner_alone(tmp_path: Path, umask: int) -> None:
    before = os.umask(umask)
    try:
        storage.make_folder(tmp_path / "a" / "b" / "c")
    finally:
        os.umask(before)
    for made in ("a", "a/b", "a/b/c"):
        assert mode_of(tmp_path / made) == 0o700


def test_a_folder_that_exists_is_left_as_it_is(tmp_path: Path) -> None:
    (tmp_path / "old").mkdir()
    (tmp_path / "old").chmod(0o755)
    (tmp_path / "link").symlink_to("old")
    for name in ("old", "link", "old/", "old/../old"):
        storage.make_folder(f"{tmp_path}/{name}")
    assert mode_of(tmp_path / "old") == 0o755
    storage.make_folder(tmp_path / "link" / "inner")
    assert (tmp_path / "old" / "inner").is_dir()


@pytest.mark.parametrize("occupy", [occupy_with_file, occupy_with_dangling_link, occupy_with_pipe])
def test_what_is_no_folder_is_refused(tmp_path: Path, occupy: Callable[[Path], None]) -> None:
    occupy(tmp_path / "a")
    for path in (tmp_path / "a", tmp_path / "a" / "b"):
        with pytest.raises(StorageError, match="is not a folder"):
            storage.make_folder(path)


def test_two_may_make_the_same_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    real = os.mkdir

    def made_by_another(*arguments: object, **named: object) -> None:
        real(*arguments, **named)  # type: ignore[arg-type]
        real(*arguments, **named)  # type: ignore[arg-type]

    monkeypatch.setattr(os, "mkdir", made_by_another)
    storage.make_folder(tmp_path / "a")
    assert (tmp_path / "a").is_dir()


def test_leftovers_are_named_and_nothing_else(tmp_path: Path) -> None:
    partial = [".b.json.0123456789abcdef.partial", ".a\nb.fedcba9876543210.partial"]
    other = ["b.json", ".hidden", "x.partial", ".partial", ".x.partial", "..0123456789abcdef.partial", ".a.01.partial"]
    for name in partial + other:
        (tmp_path / name).write_bytes(b"")
    assert storage.leftovers(tmp_path) == [tmp_path / name for name in sorted(partial)]
    assert storage.leftovers(tmp_path / "missing") == []
    with pytest.raises(StorageError, match="is not a folder"):
        storage.leftovers(tmp_path / "b.json")


def test_discarding_removes_one_file_and_may_be_repeated(tmp_path: Path) -> None:
    storage.write_new(tmp_path / "file", DATA, secret=True)
    storage.write_new(tmp_path / "other", DATA, secret=True)
    (tmp_path / "link").symlink_to("other")
    for name in ("file", "file", "link"):
        storage.discard(tmp_path / name)
    assert os.listdir(tmp_path) == ["other"]
    (tmp_path / "folder").mkdir()
    with pytest.raises(StorageError):
        storage.discard(tmp_path / "folder")
    assert (tmp_path / "folder").is_dir()


# Many files at once.


def test_a_folder_is_put_on_the_medium(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Writing many files ends with fsync(2) of the folder."""
    synced: list[str] = []
    real = os.fsync

    def watch(descriptor: int) -> None:
        synced.append(os.readlink(f"/proc/self/fd/{descriptor}"))
        real(descriptor)

    monkeypatch.setattr(os, "fsync", watch)
    storage.write_many_new(tmp_path, {"b": DATA})
    assert synced[-1] == os.fspath(tmp_path)


@pytest.mark.parametrize("count", [0, 1, 15, 16, 40])
@pytest.mark.parametrize("together", [True, False])
def test_many_files_are_written(tmp_path: Path, count: int, together: bool, monkeypatch: pytest.MonkeyPatch) -> None:
    """Whether the system can write out a whole medium or not; then each file is by itself."""
    if not together:
        monkeypatch.setattr(storage, "medium_sync", lambda: None)
    before = os.umask(0o777)
    files = {f"file{number}": DATA + bytes([number]) for number in range(count)}
    try:
        storage.write_many_new(tmp_path, files)
    finally:
        os.umask(before)
    assert {path.name: path.read_bytes() for path in tmp_path.iterdir()} == files
    assert {mode_of(path) for path in tmp_path.iterdir()} <= {0o600}


@pytest.mark.parametrize("occupied", ["file0", "file19"])
def test_many_files_are_written_or_none(tmp_path: Path, occupied: str) -> None:
    (tmp_path / occupied).write_bytes(b"before")
    with pytest.raises(StorageError, match="exists already"):
        storage.write_many_new(tmp_path, {f"file{number}": DATA for number in range(20)})
    assert os.listdir(tmp_path) == [occupied]
    assert (tmp_path / occupied).read_bytes() == b"before"
    with pytest.raises(StorageError, match="does not exist"):
        storage.write_many_new(tmp_path / "missing", {"file": DATA})


def test_a_medium_that_cannot_be_written_out_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fails(folder: int) -> None:
        raise OSError(errno.EIO, "as the system answers")

    monkeypatch.setattr(storage, "medium_sync", lambda: fails)
    with pytest.raises(StorageError, match="the medium reports an error"):
        storage.write_many_new(tmp_path, {f"file{number}": DATA for number in range(20)})
    assert os.listdir(tmp_path) == []


def test_the_systems_own_call_says_what_it_refuses(tmp_path: Path) -> None:
    sync = streams.medium_sync()
    assert sync is not None
    with streams.folder_of(tmp_path / "any") as folder:
        sync(folder)
    with pytest.raises(OSError, match="Bad file descriptor"):
        sync(-1)


# Reading documents.


@pytest.mark.parametrize("read", [storage.read_file, storage.read_back])
def test_only_regular_files_are_read_and_nothing_waits(tmp_path: Path, read: Callable[..., bytes]) -> None:
    (tmp_path / "file").write_bytes(DATA)
    (tmp_path / "link").symlink_to("file")
    (tmp_path / "dangling").symlink_to("nowhere")
    (tmp_path / "folder-link").symlink_to(".")
    os.mkfifo(tmp_path / "pipe")
    with socket.socket(socket.AF_UNIX) as server:
        server.bind(str(tmp_path / "socket"))
        wanted = {
            "missing": "does not exist",
            "file/below": "is not a folder",
            "link": "is a symbolic link",
            "dangling": "is a symbolic link",
            ".": "is a folder",
            "pipe": "is a pipe, device or socket",
            "socket": "is a pipe, device or socket",
            "/dev/zero": "is a pipe, device or socket",
            "/dev/null": "is a pipe, device or socket",
            "zero\0byte": "is not a possible path",
        }

        def work() -> str:
            answers = {}
            for name in wanted:
                try:
                    read(f"{tmp_path}/{name}" if not name.startswith("/dev") else name, limit=100)
                except StorageError as error:
                    answers[name] = error.what
            return "\n".join(f"{name!r} {answers.get(name)}" for name in wanted)

        # In a child, since one that waits is stopped there by its alarm.
        status, answer = in_child(work)
    assert status == 0
    for line, (name, what) in zip(answer.splitlines(), wanted.items(), strict=True):
        assert line.startswith(f"{name!r} {what}")
    # A link among the folders above is the operator's own arrangement.
    assert read(tmp_path / "folder-link" / "file", limit=100) == DATA


@pytest.mark.parametrize("size", [0, 1, 65535, 65536, 65537, 200_000])
def test_the_limit_is_exact(tmp_path: Path, size: int) -> None:
    path = tmp_path / "file"
    path.write_bytes(b"x" * size)
    assert len(storage.read_file(path, limit=size)) == size
    assert len(storage.read_file(path, limit=size + 1)) == size
    with storage.read_secret(path, limit=size) as secret:
        assert len(secret) == size
    if size:
        with pytest.raises(StorageError, match=f"is larger than {size - 1:,} bytes"):
            storage.read_file(path, limit=size - 1)
        with pytest.raises(StorageError, match=f"is larger than {size - 1:,} bytes"):
            storage.read_secret(path, limit=size - 1)


def test_a_negative_limit_is_refused(tmp_path: Path) -> None:
    (tmp_path / "file").write_bytes(b"")
    with pytest.raises(StorageError):
        storage.read_file(tmp_path / "file", limit=-2)
    with pytest.raises(ParameterError):
        storage.read_secret(tmp_path / "file", limit=-2)


def test_a_file_that_grows_is_bounded(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "file"
    path.write_bytes(b"x" * 10)
    real = os.read

    def read(descriptor: int, length: int) -> bytes:
        with path.open("ab") as more:
            more.write(b"x" * 10)
        return real(descriptor, min(length, 10))

    monkeypatch.setattr(os, "read", read)
    with pytest.raises(StorageError, match="is larger than 100 bytes"):
        storage.read_file(path, limit=100)
    assert path.stat().st_size < 200


def test_short_reads_are_continued(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "file").write_bytes(DATA)
    real_read, real_readv = os.read, os.readv
    monkeypatch.setattr(os, "read", lambda descriptor, length: real_read(descriptor, min(length, 3)))
    monkeypatch.setattr(os, "readv", lambda descriptor, buffers: real_readv(descriptor, [buffers[0][:3]]))
    assert storage.read_file(tmp_path / "file", limit=100) == DATA
    with storage.read_secret(tmp_path / "file", limit=100) as secret, secret.view() as view:
        assert bytes(view) == DATA


def pages_in_cache(path: Path) -> int:
    """Ask mincore(2) how many pages of a file lie in the page cache."""
    libc = ctypes.CDLL(None, use_errno=True)
    with path.open("r+b") as stream, mmap.mmap(stream.fileno(), 0) as mapping:
        pages = -(-len(mapping) // mmap.PAGESIZE)
        answer = (ctypes.c_ubyte * pages)()
        start = ctypes.c_char.from_buffer(mapping)
        refused = libc.mincore(ctypes.c_void_p(ctypes.addressof(start)), ctypes.c_size_t(len(mapping)), answer)
        del start
    assert refused == 0
    return sum(octet & 1 for octet in answer)


def test_reading_back_leaves_the_cache_aside(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "file"
    storage.write_new(path, b"x" * 100_000, secret=True)
    assert pages_in_cache(path) == 25
    os.posix_fadvise(descriptor := os.open(path, os.O_RDONLY), 0, 0, os.POSIX_FADV_DONTNEED)
    os.close(descriptor)
    if pages_in_cache(path) != 0:
        pytest.skip("the file system of the test folder lives in the cache (a RAM disk)")
    storage.read_file(path, limit=100_000)
    assert pages_in_cache(path) == 25
    found: list[int] = []
    real = os.read

    def read(descriptor: int, length: int) -> bytes:
        found.append(pages_in_cache(path))
        return real(descriptor, length)

    monkeypatch.setattr(os, "read", read)
    assert storage.read_back(path, limit=100_000) == b"x" * 100_000
    assert found[0] == 0


# Reading secrets.


def digest(secret: Secret) -> str:
    with secret.view() as view:
        return hashlib.sha256(view).hexdigest()


@given(data=st.binary(max_size=300), size=st.sampled_from([0, 1, 4000, 4095, 4096, 4097, 8191, 8192, 8193, 70_000]))
def test_secrets_come_whole_through_a_pipe(data: bytes, size: int) -> None:
    whole = bytes(size) + data
    opened = len(memory._open)
    reader, writer = os.pipe()

    def feed() -> None:
        with os.fdopen(writer, "wb", buffering=0) as stream:
            stream.write(whole)

    feeder = threading.Thread(target=feed)
    feeder.start()
    with storage.read_secret(f"/dev/fd/{reader}", limit=len(whole)) as secret:
        same = digest(secret) == hashlib.sha256(whole).hexdigest()
        assert same
        assert len(memory._open) == opened + 1
    feeder.join()
    os.close(reader)
    assert len(memory._open) == opened


def run_reader(source: str, *, stdin: int | None, limit: int = 100, before: str = "") -> str:
    """Read a secret in a fresh process and return its SHA-256, or the refusal."""
    script = f"""
        {before}
        import hashlib, os, sys
        from shares.errors import StorageError
        from shares.storage import read_secret
        try:
            with read_secret(sys.argv[1], limit=int(sys.argv[2])) as secret, secret.view() as view:
                print(hashlib.sha256(view).hexdigest())
            os.fstat(0)
        except StorageError as error:
            print(error)
    """
    command = [sys.executable, "-c", textwrap.dedent(script), source, str(limit)]
    done = subprocess.run(command, stdin=stdin, capture_output=True, text=True, timeout=10, check=False)
    assert done.stderr == ""
    return done.stdout.strip()


@pytest.mark.parametrize("source", ["-", "/dev/stdin", "/dev/fd/0", "/proc/self/fd/0"])
@pytest.mark.parametrize("kind", ["file", "pipe"])
def test_standard_input_by_each_of_its_names(tmp_path: Path, source: str, kind: str) -> None:
    (tmp_path / "key").write_bytes(DATA)
    reader, writer = os.pipe()
    os.write(writer, DATA)
    os.close(writer)
    with open(tmp_path / "key", "rb") as key:
        assert run_reader(source, stdin=key.fileno() if kind == "file" else reader) == hashlib.sha256(DATA).hexdigest()
    os.close(reader)


def test_standard_input_works_for_a_protected_process_of_another_user() -> None:
    # A process that is not dumpable no longer owns its files under /proc (proc(5)); its own reading must go on.
    before = "import os, resource, ctypes, hmac, shares.storage, shares.memory"
    before += f"; os.geteuid() or os.setuid({UNPRIVILEGED}); shares.memory.protect_process()"
    reader, writer = os.pipe()
    if os.geteuid() == 0:
        os.fchown(reader, UNPRIVILEGED, UNPRIVILEGED)
    os.write(writer, DATA)
    os.close(writer)
    answer = run_reader("/dev/stdin", stdin=reader, before=before)
    os.close(reader)
    assert answer == hashlib.sha256(DATA).hexdigest()


def test_a_closed_standard_input_is_refused() -> None:
    answer = run_reader("-", stdin=subprocess.DEVNULL, before="import os; os.close(0)")
    assert answer.startswith("standard input: is closed (")


def test_a_pipe_by_name_is_waited_for(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    (tmp_path / "link").symlink_to("pipe")

    def feed() -> None:
        time.sleep(0.05)
        with open(tmp_path / "pipe", "wb", buffering=0) as stream:
            for octet in DATA:
                stream.write(bytes([octet]))

    feeder = threading.Thread(target=feed)
    feeder.start()
    with storage.read_secret(tmp_path / "link", limit=100) as secret:
        same = digest(secret) == hashlib.sha256(DATA).hexdigest()
    feeder.join()
    assert same


def test_signals_do_not_disturb(tmp_path: Path) -> None:
    rung: list[int] = []
    reader, writer = os.pipe()

    def feed() -> None:
        with os.fdopen(writer, "wb", buffering=0) as stream:
            for _ in range(10):
                time.sleep(0.01)
                stream.write(DATA)

    before = signal.signal(signal.SIGALRM, lambda number, frame: rung.append(number))
    feeder = threading.Thread(target=feed)
    feeder.start()
    signal.setitimer(signal.ITIMER_REAL, 0.001, 0.003)
    try:
        with storage.read_secret(f"/dev/fd/{reader}", limit=1000) as secret:
            same = digest(secret) == hashlib.sha256(DATA * 10).hexdigest()
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0)
        signal.signal(signal.SIGALRM, before)
        feeder.join()
        os.close(reader)
    assert same
    assert len(rung) > 5


@pytest.mark.parametrize(
    ("source", "what"),
    [("/dev/zero", "is larger than 5,000 bytes"), ("/dev", "is a folder"), ("/nowhere", "does not exist")],
)
def test_bad_sources_are_refused_and_leave_no_room_open(source: str, what: str) -> None:
    opened = len(memory._open)
    with pytest.raises(StorageError, match=what) as caught:
        storage.read_secret(source, limit=5000)
    assert caught.value.where == source
    assert len(memory._open) == opened


def test_an_empty_source_is_an_empty_secret() -> None:
    with storage.read_secret("/dev/null", limit=100) as secret:
        assert len(secret) == 0


def test_a_terminal_is_refused() -> None:
    leader, follower = pty.openpty()
    try:
        name = os.ttyname(follower)
        assert run_reader(name, stdin=subprocess.DEVNULL).startswith(f"{name}: is a terminal")
        assert run_reader("-", stdin=follower).startswith("standard input: is a terminal")
    finally:
        os.close(leader)
        os.close(follower)


@pytest.mark.skipif(sys.platform != "linux", reason="/proc/self/mem is of Linux")
def test_reading_makes_no_second_copy(tmp_path: Path) -> None:
    # The pattern is made outside and sought through the secret's own view, so that this process holds it just once.
    with open(tmp_path / "key", "wb") as key:
        subprocess.run(["head", "-c", "9000", "/dev/urandom"], stdout=key, check=True)
    script = """
        import mmap, sys
        from shares.memory import Secret
        from shares.storage import read_secret

        def copies(pattern):
            found = 0
            with open("/proc/self/maps") as maps, open("/proc/self/mem", "rb", buffering=0) as memory:
                for line in maps.read().splitlines():
                    bounds, rights = line.split()[:2]
                    low, high = (int(bound, 16) for bound in bounds.split("-"))
                    if not rights.startswith("rw") or "[v" in line:
                        continue
                    with mmap.mmap(-1, high - low) as room:
                        memory.seek(low)
                        with memoryview(room) as target:
                            memory.readinto(target)
                        at = room.find(pattern)
                        while at >= 0:
                            found += 1
                            at = room.find(pattern, at + 1)
            return found

        with Secret(32) as pattern, pattern.view() as sought:
            secret = read_secret(sys.argv[1], limit=65536)
            with secret.view() as view:
                for start in (0, 4080, 8900):
                    sought[:] = view[start:start + 32]
                    print(copies(sought) - 1, end=" ")
                kept = bytes(view)
                print(copies(sought) - 1, end=" ")
            secret.close()
            print(copies(sought) - 1, len(kept))
    """
    command = [sys.executable, "-c", textwrap.dedent(script), tmp_path / "key"]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60, check=False)
    assert done.stderr == ""
    # One while it is open; two with a copy made on purpose, which shows that the search sees; that one after closing.
    assert done.stdout.split() == ["1", "1", "1", "2", "1", "9000"]
