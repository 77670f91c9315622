"""A run that is killed or stopped at any system call leaves the old state, or the new one whole; never half of it.

Signals: signal(7). SIGKILL is struck at every call that touches the folders; the signals that a program may answer at
one call of each sort, and everywhere with ``-m slow``.
"""

from __future__ import annotations

import itertools
import re
import stat
from pathlib import Path

import pytest
from cli.harness import SECRET, Place, Result, assert_one_line, run
from faults.tracing import Site, Traced, at_each, counted, distinct, trace_with

from shares.custody.presented import load_record
from shares.history.journal import load_journal

pytestmark = pytest.mark.usefixtures("strace")

NAMES = ("pier", "quay")
# Neither a rename that never replaces nor hard links: renameat2(2) and link(2) as such a medium answers.
NO_LINKS = ("renameat2:error=EINVAL", "linkat:error=EPERM")


def split_sites(folder: Path, *inject: str) -> list[Site]:
    """The calls of an undisturbed split that touch its folders; the source that it reads is none of them."""
    sites = counted(folder, lambda own: Place.make(own).split_arguments(names=NAMES), *inject)
    return [site for site in sites if "key" not in site.what]


def split_with(folder: Path, site: Site, fault: str, *inject: str) -> tuple[Place, Traced]:
    place = Place.make(folder)
    return place, trace_with(folder, place.split_arguments(names=NAMES), site, fault, *inject)


def files(place: Place) -> set[Path]:
    """What a run has left: every file but the secret itself, and the journal: the next run goes on with that."""
    kept = (place.key, place.set / "journal.jsonl")
    return {path for path in place.folder.rglob("*") if path.is_file() and path not in kept}


def whole(place: Place) -> set[Path]:
    """The files of a finished split."""
    practice = {place.drop / f"{name}.practice.json" for name in NAMES} | {place.set / "practice.json"}
    return {*(place.share(name) for name in NAMES), place.record, *practice}


def assert_journal_tells(place: Place) -> None:
    """See that the last dealing which the journal tells is that of the record, and that others came to nothing."""
    journal = load_journal(place.set)
    assert journal.problems == ()
    *before, last = [entry.event for entry in journal.entries]
    assert last.what == "dealt"
    assert last.record == load_record(place.record).fingerprint
    assert [event.what for event in before] == ["dealt", "exception"] * (len(before) // 2)


def assert_whole(place: Place) -> None:
    """See that the set is complete: nothing else lies there, every share verifies, every quorum recovers."""
    assert files(place) == whole(place)
    assert_journal_tells(place)
    assert {stat.S_IMODE(path.stat().st_mode) for path in place.shares} == {0o600}
    assert run("verify", *place.shares, "--record", place.record).code == 0
    for quorum in itertools.combinations(place.shares, 2):
        target = place.folder / "out"
        assert run("recover", *quorum, "--to", target).code == 0
        assert target.read_bytes() == SECRET
        target.unlink()


def assert_next_run_is_right(place: Place) -> None:
    """See that the next run names what is left and writes nothing, and that it works once this is gone."""
    left = files(place)
    result = run(*place.split_arguments(names=NAMES))
    if left:
        line = assert_one_line(result)
        assert result.code == 5
        named = {path for path in left if str(path) in line}
        # A whole set is named by its record alone.
        assert named == left or (place.record in named and not list(place.folder.rglob("*.partial")))
        assert files(place) == left
        for path in left:
            path.unlink()
        result = run(*place.split_arguments(names=NAMES))
    assert result.code == 0, result.err
    assert_whole(place)


@pytest.fixture(scope="module")
def sites(tmp_path_factory: pytest.TempPathFactory) -> list[Site]:
    return split_sites(tmp_path_factory.mktemp("count"))


@pytest.fixture(scope="module")
def sites_without_links(tmp_path_factory: pytest.TempPathFactory) -> list[Site]:
    return split_sites(tmp_path_factory.mktemp("count"), *NO_LINKS)


def test_the_calls_are_found(sites: list[Site]) -> None:
    """The sweep is worth nothing if it misses the calls that matter."""
    calls = [site.call for site in sites]
    assert [calls.count(call) for call in ("renameat2", "write", "fchmod")] == [6, 7, 6]
    assert calls.count("fsync") >= 6
    assert len(distinct(sites)) < len(sites) <= 240
    whats = {site.what for site in sites}
    assert any("record.json.*.partial" in what for what in whats)
    assert any("*.share.json.*.partial" in what for what in whats)


def test_killed_at_every_call(sites: list[Site], tmp_path: Path) -> None:
    def attempt(number: int, site: Site) -> tuple[Site, Place, Traced]:
        return (site, *split_with(tmp_path / f"run{number}", site, "signal=KILL"))

    attempts = at_each(sites, attempt)
    with_record = 0
    for site, place, traced in attempts:
        assert traced.result.code == -9, site
        if place.record.exists():
            with_record += 1
            assert_whole(place)
        assert_next_run_is_right(place)
    # Some died before the commit point, some after it.
    assert 0 < with_record < len(sites)


def killed_without_links(sites: list[Site], tmp_path: Path) -> None:
    """There a file under its own name may be incomplete after a kill; it is named, and nothing is taken for whole."""

    def attempt(number: int, site: Site) -> tuple[Site, Place, Traced]:
        return (site, *split_with(tmp_path / f"run{number}", site, "signal=KILL", *NO_LINKS))

    for site, place, traced in at_each(sites, attempt):
        assert traced.result.code == -9, site
        if place.record.exists() and run("show", place.record).code == 0:
            assert_whole_or_named(place)
        assert_next_run_names(place)


def assert_whole_or_named(place: Place) -> None:
    left = files(place)
    temporary = {path for path in left if path.name.endswith(".partial")}
    assert left - temporary == whole(place)
    assert run("verify", *place.shares, "--record", place.record).code == 0
    assert run("recover", *place.shares, "--check").code == 0


def assert_next_run_names(place: Place) -> None:
    """Whatever the next run names is removed, until it finds nothing more."""
    for _ in range(10):
        left = files(place)
        result = run(*place.split_arguments(names=NAMES))
        if result.code == 0:
            assert not left
            return assert_whole(place)
        line = assert_one_line(result)
        named = {path for path in left if str(path) in line}
        assert (result.code, bool(named)) == (5, True)
        for path in named:
            path.unlink()
    raise AssertionError("the next runs named less than was left")


def test_killed_on_a_medium_without_links(sites: list[Site], sites_without_links: list[Site], tmp_path: Path) -> None:
    """Only at the calls that an ordinary medium does not see: there the sweep above has been."""
    seen = {(site.call, site.what) for site in sites}
    own = [site for site in distinct(sites_without_links) if (site.call, site.what) not in seen]
    assert {"linkat", "write", "fsync"} <= {site.call for site in own}
    killed_without_links(own, tmp_path)


@pytest.mark.slow
def test_killed_at_every_call_on_a_medium_without_links(sites_without_links: list[Site], tmp_path: Path) -> None:
    killed_without_links(sites_without_links, tmp_path)


def stopped(sites: list[Site], tmp_path: Path, signal: str) -> None:
    def attempt(number: int, site: Site) -> tuple[Site, Place, Traced]:
        return (site, *split_with(tmp_path / f"run{number}", site, f"signal={signal}"))

    done = []
    for site, place, traced in at_each(sites, attempt):
        result: Result = traced.result
        assert "Traceback" not in result.err
        if result.code == 0:
            # It came too late to stop anything: then everything is there, and is said to be.
            done.append(site)
            assert "Split: " in result.out
            assert_whole(place)
        else:
            # click ends the line on which a terminal has shown ^C.
            assert (result.code, result.out) == (1, ""), site
            assert result.err.lstrip("\n") == "shares: stopped before it was done (nothing was left half written)\n"
            assert not files(place), site
    assert 0 < len(done) < len(sites)
    assert all(re.search(r"record|set|journal|practice\.json", site.what) for site in done)


@pytest.mark.parametrize("signal", ["TERM", "INT", "HUP"])
def test_stopped_by_a_signal(sites: list[Site], tmp_path: Path, signal: str) -> None:
    """The three are handled alike, so at each sort of call one of them is tried."""
    stopped(distinct(sites)[("TERM", "INT", "HUP").index(signal) :: 3], tmp_path, signal)


@pytest.mark.slow
@pytest.mark.parametrize("signal", ["TERM", "INT", "HUP"])
def test_stopped_by_a_signal_at_every_call(sites: list[Site], tmp_path: Path, signal: str) -> None:
    stopped(sites, tmp_path, signal)


# Recovery to a file.


@pytest.fixture(scope="module")
def two_shares(tmp_path_factory: pytest.TempPathFactory) -> list[Path]:
    place = Place.make(tmp_path_factory.mktemp("shares") / "place")
    place.split(names=NAMES)
    return place.shares


@pytest.mark.parametrize("signal", ["KILL", "TERM"])
def test_a_recovery_stopped_at_every_call_that_touches_its_target(
    two_shares: list[Path], tmp_path: Path, signal: str
) -> None:
    def arguments(folder: Path) -> list[str | Path]:
        folder.mkdir()
        return ["recover", *two_shares, "--to", folder / "out"]

    sites = counted(tmp_path, arguments)
    assert len(sites) >= 9

    def attempt(number: int, site: Site) -> tuple[Path, Traced]:
        folder = tmp_path / f"run{number}"
        words = arguments(folder)
        return folder, trace_with(folder, words, site, f"signal={signal}")

    whole = 0
    sites = sites if signal == "KILL" else distinct(sites)
    for folder, traced in at_each(sites, attempt):
        target = folder / "out"
        left = set(folder.iterdir())
        if target.exists():
            whole += 1
            assert target.read_bytes() == SECRET
            assert stat.S_IMODE(target.stat().st_mode) == 0o600
            assert left == {target}
        if signal == "TERM":
            assert (traced.result.code, left) in ((0, {target}), (1, set()))
        else:
            assert traced.result.code == -9
            again = run("recover", *two_shares, "--to", folder / "another")
            assert again.code == 0
            assert all(str(path) in again.err for path in left - {target})
    assert 0 < whole < len(sites)
