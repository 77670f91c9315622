"""A dealing of a threshold key that is killed at any system call: the key is born whole, or it never was.

Signals: signal(7), SIGKILL, struck by strace(1) at calls that touch the folders.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import pytest
from cli.harness import run
from cli.keyed import OFFICE, Keyed
from faults.tracing import Site, at_each, counted, distinct, trace_with

from shares.history.journal import load_journal

pytestmark = pytest.mark.usefixtures("strace")

NAMES = ("north-pier", "south-pier")
CHANGING = ("renameat2", "write", "fsync", "fchmod", "mkdirat", "unlinkat")


def prepared(folder: Path) -> Sequence[str | Path]:
    return Keyed.make(folder, NAMES).deal_arguments()


@pytest.fixture(scope="module")
def sites(tmp_path_factory: pytest.TempPathFactory) -> list[Site]:
    found = counted(tmp_path_factory.mktemp("count"), prepared)
    parties = (".card.json", ".key.json", ".passphrase")
    return [site for site in found if not any(ending in site.what for ending in parties)]


def test_the_calls_are_found(sites: list[Site]) -> None:
    calls = [site.call for site in sites]
    # Three files for each of two custodians, and the dealer's two.
    assert [calls.count(call) for call in ("renameat2", "write", "fchmod")] == [8, 8, 8]
    assert calls.count("mkdirat") == 3
    assert any("release-key/.record.json" in site.what for site in sites)


@pytest.mark.parametrize("every", [False, pytest.param(True, marks=pytest.mark.slow)])
def test_a_killed_dealing_leaves_a_key_or_none(sites: list[Site], tmp_path: Path, every: bool) -> None:
    """Killed at one call of each sort that changes something, or at every one that touches the folders."""

    def attempt(number: int, site: Site) -> tuple[Site, Keyed, int]:
        folder = tmp_path / f"run{number}"
        arguments = prepared(folder)
        return site, Keyed(folder, NAMES), trace_with(folder, arguments, site, "signal=KILL").result.code

    born = 0
    attempts = at_each(sites if every else distinct(site for site in sites if site.call in CHANGING), attempt)
    for site, keyed, code in attempts:
        assert code == -9, site
        if (keyed.key / "record.json").exists():
            born += 1
            assert_whole(keyed)
            continue
        left = sorted(path for path in keyed.own("").iterdir())
        left += [keyed.key / "journal.jsonl"] if (keyed.key / "journal.jsonl").exists() else []
        left += list(keyed.key.glob(".*.partial"))
        again = run(*keyed.deal_arguments())
        if left:
            # What is left is named and stays; once it is gone the key is dealt.
            assert again.code == 5, site
            assert all(str(path) in again.err for path in left), (site, again.err)
            for path in sorted(keyed.own("").rglob("*"), reverse=True):
                path.rmdir() if path.is_dir() else path.unlink()
            for path in keyed.key.glob("*") if keyed.key.exists() else ():
                path.unlink()
            for path in keyed.key.glob(".*.partial"):
                path.unlink()
            again = run(*keyed.deal_arguments())
        assert again.code == 0, (site, again.err)
        assert_whole(keyed)
    # Some died before the commit point, some after it.
    assert 0 < born < len(attempts)


def assert_whole(keyed: Keyed) -> None:
    for name in NAMES:
        assert run("key", "verify", keyed.own(name), *keyed.as_(name, "--key")).code == 0
        assert load_journal(keyed.own(name)).problems == ()
    assert run("key", "verify", keyed.key, "--trust", keyed.path(f"{OFFICE}.card.json")).code == 0
