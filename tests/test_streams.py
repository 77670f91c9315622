"""Streams: read to the end, whatever comes at once, and changes noticed; written whole, or not at all.

That a new file is whole or absent at every step, failing or killed, is tested with the whole files of storage
(test_storage.py), which are written through it. Error numbers: open(2), write(2).
"""

from __future__ import annotations

import contextlib
import errno
import os
import stat
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares import storage, streams
from shares.errors import StorageError
from shares.streams import Write, new_file, regular_file, secret_source

DATA = bytes(range(256)) * 300


# Reading.


@pytest.mark.parametrize("opened", [regular_file, secret_source])
@given(wanted=st.lists(st.integers(0, 50_000), max_size=8), most=st.integers(1, 70_000))
def test_a_buffer_is_filled_whatever_comes_at_once(
    tmp_path_factory: pytest.TempPathFactory,
    opened: Callable[[Path], contextlib.AbstractContextManager[streams.Reader]],
    wanted: list[int],
    most: int,
) -> None:
    path = tmp_path_factory.mktemp("read") / "file"
    path.write_bytes(DATA)
    real = os.readv
    got = b""
    with pytest.MonkeyPatch.context() as patch, opened(path) as reader:
        patch.setattr(os, "readv", lambda descriptor, buffers: real(descriptor, [buffers[0][:most]]))
        assert reader.size == len(DATA)
        for count in wanted:
            room = bytearray(count)
            filled = reader.fill(memoryview(room))
            assert filled == min(count, len(DATA) - len(got))
            got += room[:filled]
        assert got == DATA[: len(got)]
        reader.go_to(7)
        room = bytearray(10)
        assert reader.fill(memoryview(room)) == 10
        assert bytes(room) == DATA[7:17]


def test_a_pipe_has_no_size(tmp_path: Path) -> None:
    reader, writer = os.pipe()
    os.write(writer, b"all of it")
    os.close(writer)
    with secret_source(f"/dev/fd/{reader}") as opened:
        room = bytearray(100)
        assert (opened.size, opened.fill(memoryview(room))) == (None, 9)
        opened.check_unchanged(9)  # There is nothing to compare with.
        with pytest.raises(StorageError):
            opened.go_to(0)
    os.close(reader)


def change_size(path: Path) -> None:
    with open(path, "ab") as file:
        file.write(b"x")


def cut(path: Path) -> None:
    os.truncate(path, 100)


def change_content(path: Path) -> None:
    with open(path, "r+b") as file:
        file.write(b"x")


@pytest.mark.parametrize("change", [change_size, cut, change_content])
def test_a_change_is_noticed(tmp_path: Path, change: Callable[[Path], None]) -> None:
    path = tmp_path / "file"
    path.write_bytes(DATA)
    os.utime(path, (1, 1))
    with regular_file(path) as reader:
        reader.check_unchanged(len(DATA))
        with pytest.raises(StorageError, match="was changed while it was read"):
            reader.check_unchanged(len(DATA) - 1)
        change(path)
        with pytest.raises(StorageError, match="was changed while it was read"):
            reader.check_unchanged(len(DATA))


def test_an_error_while_reading_says_where(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "file").write_bytes(DATA)

    def fail(*_: object) -> int:
        raise OSError(errno.EIO, "")

    with regular_file(tmp_path / "file") as reader:
        monkeypatch.setattr(os, "readv", fail)
        with pytest.raises(StorageError, match="the medium reports an error") as caught:
            reader.fill(memoryview(bytearray(1)))
    assert caught.value.where == str(tmp_path / "file")


def test_an_error_of_others_is_left_as_it_is(tmp_path: Path) -> None:
    """Only the system's answers about this file become a refusal of it."""
    (tmp_path / "file").write_bytes(DATA)
    for opened in (regular_file(tmp_path / "file"), new_file(tmp_path / "new", secret=True)):
        with pytest.raises(BrokenPipeError), opened:
            raise BrokenPipeError
    assert os.listdir(tmp_path) == ["file"]


# Writing.


@given(parts=st.lists(st.binary(max_size=5000), max_size=8), secret=st.booleans(), most=st.integers(1, 6000))
def test_parts_are_written_one_after_another(
    tmp_path_factory: pytest.TempPathFactory, parts: list[bytes], secret: bool, most: int
) -> None:
    path = tmp_path_factory.mktemp("new") / "file"
    real = os.write
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(os, "write", lambda descriptor, data: real(descriptor, data[:most]))
        with new_file(path, secret=secret) as write:
            for part in parts:
                write(part)
                assert not path.exists()
                assert [entry.stat().st_mode & 0o777 for entry in storage.leftovers(path.parent)] == [0o600]
    assert path.read_bytes() == b"".join(parts)
    assert stat.S_IMODE(path.stat().st_mode) == (0o600 if secret else 0o644)
    assert os.listdir(path.parent) == ["file"]


def refuse(*_: object, **__: object) -> None:
    raise OSError(errno.EPERM, "as a medium without it answers")


@pytest.fixture(params=[False, True], ids=["usual", "poor"])
def medium(request: pytest.FixtureRequest, poor_medium: Callable[[], None]) -> None:
    if request.param:
        poor_medium()


@pytest.fixture
def poor_medium(monkeypatch: pytest.MonkeyPatch) -> Callable[[], None]:
    """Neither exclusive renames nor links, from the call on."""

    def become() -> None:
        monkeypatch.setattr(streams, "_rename_new", refuse)
        monkeypatch.setattr(os, "link", refuse)

    return become


@pytest.mark.parametrize("size", [0, 1, 65_535, 65_536, 65_537, 300_000])
def test_a_finished_file_is_copied_where_it_cannot_be_named(
    tmp_path: Path, poor_medium: Callable[[], None], size: int
) -> None:
    poor_medium()
    data = (DATA * 5)[:size]
    with new_file(tmp_path / "file", secret=True) as write:
        write(data)
    assert (tmp_path / "file").read_bytes() == data
    assert os.listdir(tmp_path) == ["file"]


def test_a_name_taken_meanwhile_stays(tmp_path: Path, medium: None) -> None:
    path = tmp_path / "file"

    def write_late() -> None:
        with new_file(path, secret=True) as write:
            write(DATA)
            path.write_bytes(b"somebody else's")

    with pytest.raises(StorageError, match="never overwritten"):
        write_late()
    assert path.read_bytes() == b"somebody else's"
    assert os.listdir(tmp_path) == ["file"]


def test_a_taken_name_is_refused_at_once(tmp_path: Path) -> None:
    (tmp_path / "file").write_bytes(b"")
    (tmp_path / "link").symlink_to("nowhere")

    def body(_: Write) -> None:
        raise AssertionError("nobody should get here")

    for name in ("file", "link"):
        with pytest.raises(StorageError, match="never overwritten"), new_file(tmp_path / name, secret=True) as write:
            body(write)


def test_a_sink_that_is_not_entered_does_nothing(tmp_path: Path) -> None:
    new_file(tmp_path / "file", secret=True)
    new_file(tmp_path / "missing" / "file", secret=True)
    assert os.listdir(tmp_path) == []
