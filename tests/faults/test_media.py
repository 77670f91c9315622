"""Media that fail: full, read-only, faulty at any call, without links. Exit code 5, one line, and nothing left behind.

Error numbers: write(2), open(2), rename(2), fsync(2). A full medium is a real one in memory, or the system's answer at
one call; a read-only one is a real one.
"""

from __future__ import annotations

import os
import re
import resource
import stat
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest
from cli.harness import PROGRAM, SECRET, Place, Result, assert_one_line, files_in, run, with_json
from faults.tracing import Site, Traced, at_each, counted, distinct, trace, trace_with

Mount = Callable[[str, str], Path]
NAMES = ("pier", "quay", "dock")
HARBOUR = [f"pier-{i}" for i in range(40)]


def shares_left(place: Place) -> list[Path]:
    return [path for path in place.folder.rglob("*") if path.is_file() and path != place.key]


def refused(result: Result, *words: str) -> str:
    line = assert_one_line(result)
    assert result.code == 5, line
    assert [word for word in words if word not in line] == []
    return line


# Real media.


@pytest.mark.parametrize("kib", [4, 16, 64, 156])
def test_a_delivery_medium_that_fills_up(medium: Mount, tmp_path: Path, kib: int) -> None:
    """40 shares of at least a page each, on a medium with room for some; more on each turn, never enough."""
    place = Place.make(tmp_path / "place")
    stick = medium("stick", f"size={kib}k")
    arguments = place.split_arguments(names=HARBOUR, deliver=[stick])
    refused(run(*arguments), "the medium is full", "make room", str(stick))
    assert files_in(stick) == {}
    assert not place.record.exists()
    told = run(*with_json(arguments)).json
    assert (told["done"], told["exit"], told["error"]["code"]) == (False, 5, "storage")


def test_a_medium_for_the_record_that_is_full(medium: Mount, tmp_path: Path) -> None:
    place = Place.make(tmp_path / "place")
    full = medium("full", "size=4k")
    (full / "filler").write_bytes(bytes(4096))
    refused(run(*place.split_arguments(names=NAMES, folder=full)), "the medium is full")
    assert (shares_left(place), list(files_in(full))) == ([], ["filler"])


def test_a_medium_without_room_for_another_name(medium: Mount, tmp_path: Path) -> None:
    place = Place.make(tmp_path / "place")
    stick = medium("stick", "nr_inodes=3")
    refused(run(*place.split_arguments(names=NAMES, deliver=[stick])), "the medium is full")
    assert files_in(stick) == {}


def test_a_full_medium_for_a_recovered_secret(medium: Mount, tmp_path: Path) -> None:
    place = Place.make(tmp_path / "place", bytes(range(256)) * 40)
    place.split(names=NAMES)
    stick = medium("stick", "size=8k")
    refused(run("recover", *place.shares, "--to", stick / "out"), "the medium is full")
    assert files_in(stick) == {}


def test_a_read_only_medium(medium: Mount, tmp_path: Path) -> None:
    place = Place.make(tmp_path / "place")
    stick = medium("stick", "ro")
    refused(run(*place.split_arguments(names=NAMES, deliver=[stick])), "read-only")
    refused(run(*place.split_arguments(names=NAMES, folder=stick / "set")), "read-only")
    refused(run(*place.split_arguments(names=NAMES, folder=stick)), "read-only")
    assert shares_left(place) == []
    place.split(names=NAMES)
    refused(run("recover", *place.shares, "--to", stick / "out"), "read-only")


def test_shares_are_read_from_a_read_only_medium(medium: Mount, tmp_path: Path) -> None:
    place = Place.make(tmp_path / "place")
    stick = medium("stick", "size=1m")
    place.split(names=NAMES, deliver=[stick])
    subprocess.run(["mount", "-o", "remount,ro", stick], check=True)
    paths = [stick / f"{name}.share.json" for name in NAMES]
    assert run("verify", *paths, "--record", place.record).code == 0
    assert run("recover", *paths, "--check").code == 0


@pytest.mark.parametrize("limit", [0, 1, 100, 500])
def test_a_limit_on_the_size_of_files(tmp_path: Path, limit: int) -> None:
    place = Place.make(tmp_path / "place")
    done = subprocess.run(
        [PROGRAM, *place.split_arguments(names=NAMES)],
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
        preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit)),
    )
    refused(Result(done.returncode, done.stdout, done.stderr), "larger than is allowed here", "ulimit -f")
    assert shares_left(place) == []


# Faults at any call.


@pytest.fixture(scope="module")
def sites(tmp_path_factory: pytest.TempPathFactory, strace: None) -> list[Site]:
    folder = tmp_path_factory.mktemp("count")
    sites = counted(folder, lambda own: Place.make(own).split_arguments(names=NAMES[:2]))
    return [site for site in sites if "key" not in site.what]


# The last act of every file: by then it is complete and on the medium, and closing a folder writes nothing.
CLOSED_FOLDERS = ("<drop>", "<set>", "<*>")


def faulty(sites: list[Site], tmp_path: Path, error: str) -> None:
    def attempt(number: int, site: Site) -> tuple[Site, Place, Traced]:
        place = Place.make(tmp_path / f"run{number}")
        arguments = place.split_arguments(names=NAMES[:2])
        return site, place, trace_with(place.folder, arguments, site, f"error={error}")

    outcomes = set()
    for site, place, traced in at_each(sites, attempt):
        result = traced.result
        outcomes.add(result.code)
        if result.code == 0:
            # Some calls may fail without harm: advice, modes where a medium has none, questions of what is there; and
            # the look for shares of other sets, of which the person is only told.
            looking = site.call in ("openat", "getdents64") and re.search(r'<drop>|"drop", O_RDONLY', site.what)
            assert site.call in ("fadvise64", "fchmod", "newfstatat", "close", "ioctl") or looking, site
            assert run("verify", *place.shares, "--record", place.record).code == 0
        else:
            refused(result)
            assert shares_left(place) == [], site
    assert 5 in outcomes <= {0, 5}


@pytest.mark.parametrize("error", ["EIO", "ENOSPC"])
def test_a_medium_that_fails_at_some_call(sites: list[Site], tmp_path: Path, error: str) -> None:
    chosen = [site for site in distinct(sites) if (site.call, site.what in CLOSED_FOLDERS) != ("close", True)]
    writing = ("write", "fsync", "renameat2", "mkdir", "mkdirat")
    faulty(chosen if error == "EIO" else [site for site in chosen if site.call in writing], tmp_path, error)


@pytest.mark.slow
@pytest.mark.parametrize("error", ["EIO", "ENOSPC", "EROFS", "EACCES", "EDQUOT", "ENODEV"])
def test_a_medium_that_fails_at_every_call(sites: list[Site], tmp_path: Path, error: str) -> None:
    faulty([site for site in sites if (site.call, site.what in CLOSED_FOLDERS) != ("close", True)], tmp_path, error)


@pytest.mark.usefixtures("strace")
@pytest.mark.parametrize(
    "inject",
    [
        ("linkat:error=EPERM",),
        ("renameat2:error=EINVAL",),
        ("renameat2:error=EINVAL", "linkat:error=EPERM"),
        ("renameat2:error=ENOSYS", "linkat:error=EOPNOTSUPP"),
        ("fchmod:error=EPERM",),
    ],
    ids=" ".join,
)
def test_a_medium_that_lacks_something(tmp_path: Path, inject: tuple[str, ...]) -> None:
    """Hard links, an exclusive rename, both; modes. The answers are those of the manual pages."""
    place = Place.make(tmp_path / "place")
    traced = trace(place.folder, place.split_arguments(names=NAMES), *inject)
    assert traced.result.code == 0, traced.result.err
    expected = {f"{name}.{kind}.json" for name in NAMES for kind in ("share", "practice")}
    assert {path.name for path in shares_left(place)} == expected | {"record.json", "practice.json", "journal.jsonl"}
    assert {stat.S_IMODE(path.stat().st_mode) for path in place.shares} == {0o600}
    assert run("verify", *place.shares, "--record", place.record).code == 0
    target = tmp_path / "out"
    target.mkdir()
    recovered = trace(target, ["recover", *place.shares, "--to", target / "key"], *inject)
    assert recovered.result.code == 0
    assert (target / "key").read_bytes() == SECRET
    assert os.listdir(target) == ["key"]
    # What is there already is not replaced on such a medium either.
    again = trace(target, ["recover", *place.shares, "--to", target / "key"], *inject)
    refused(again.result, "never overwritten")


@pytest.mark.usefixtures("strace")
def test_what_is_read_back_is_what_counts(tmp_path: Path) -> None:
    """A medium that loses what it was given: the second share reads as empty, and the run undoes itself."""
    place = Place.make(tmp_path / "place")
    arguments = place.split_arguments(names=NAMES[:2])
    sites = counted(tmp_path, lambda own: Place.make(own).split_arguments(names=NAMES[:2]))
    reads = [site for site in sites if site.call == "read" and "share.json" in site.what]
    for site in (reads[0], reads[-2]):
        traced = trace_with(place.folder, arguments, site, "retval=0")
        line = assert_one_line(traced.result)
        assert traced.result.code == 4
        assert "share.json" in line
        assert shares_left(place) == []
