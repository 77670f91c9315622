"""A signer whose run is killed at any system call signs one message with one nonce, and goes on when it is run again.

Signals: signal(7), SIGKILL, struck by strace(1) at every call from the one on that first looks at the nonces. What a
signer has given is found in every file that it wrote: messages of tasks, and steps with them.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from cli.harness import run
from faults.tracing import Site, at_each, counted, distinct, trace
from keys.signer import ME, given, prepared, step

pytestmark = pytest.mark.usefixtures("strace")


@pytest.fixture(scope="module")
def sites(tmp_path_factory: pytest.TempPathFactory) -> list[Site]:
    found = counted(tmp_path_factory.mktemp("count"), prepared)
    first = next(number for number, site in enumerate(found) if "nonces" in site.what)
    return found[first:]


def killed_at(folder: Path, site: Site) -> tuple[Path, bool]:
    """A folder in which the run was killed at a call, and whether it had given its share before.

    A folder of nonces cannot be put back as it was: it is made anew where the signal struck another call.
    """
    for attempt in range(5):
        own = folder.with_name(f"{folder.name}-{attempt}")  # As deep as the counted runs: paths are resolved.
        traced = trace(own, prepared(own), f"{site.call}:signal=KILL:when={site.number}", calls=f"trace={site.call}")
        if site in traced.sites:
            assert traced.result.code == -9, site
            return own, bool(given(own))
    raise AssertionError(f"the signal never struck {site}")


def test_the_calls_are_found(sites: list[Site]) -> None:
    calls = [site.call for site in sites]
    assert calls.count("renameat2") >= 3  # the nonces as they are bound, the step, the message
    assert calls.count("fsync") >= 5
    assert 50 < len(sites) <= 300


@pytest.mark.parametrize("every", [False, pytest.param(True, marks=pytest.mark.slow)])
def test_a_killed_signer_gives_one_share(sites: list[Site], tmp_path: Path, every: bool) -> None:
    """The run after the kill is for the same task, or in turn for another one that names the same nonce.

    Killed at one call of each sort, or at every one.
    """
    sites = sites if every else distinct(sites)

    def attempt(number: int, site: Site) -> tuple[Path, bool]:
        return killed_at(tmp_path / str(number), site)

    struck = at_each(sites, attempt)
    assert {had for _, had in struck} == {False, True}
    outcomes = set()
    for number, (folder, _) in enumerate(struck):
        before = given(folder)
        order = ("one", "other") if number % 2 else ("other", "one")
        codes = {task: run(*step(folder, task)).code for task in order}
        # Whichever task has the nonce is signed, by what was given before the kill, and the other one is refused.
        assert len(given(folder)) == 1, sites[number]
        assert before <= given(folder), sites[number]
        assert sorted(codes.values()) == [0, 4], (sites[number], codes)
        # And nothing is left of the nonces themselves.
        assert [path.name[:6] for path in (folder / ME / "nonces").iterdir()].count("spent-") == 1
        assert not {path.name[:5] for path in (folder / ME / "nonces").iterdir()} & {"pair-", "bound"}
        outcomes.add((order[0], codes["one"]))
    # A crash is harmless: the run after it signs what the killed one would have signed.
    assert outcomes == {("one", 0), ("other", 0), ("other", 4)}
