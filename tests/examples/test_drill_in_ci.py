"""The scheduled drill runs without a terminal, and its exit codes and JSON say how it went.

Source: the exit codes are those of README's table.
"""

from __future__ import annotations

import json
import os
import subprocess
from pathlib import Path

import pytest
from cli.harbour import Harbour
from cli.harness import NAMES, PROGRAM, Place

SCRIPT = Path(__file__).resolve().parents[2] / "examples" / "drill-in-ci"


@pytest.fixture
def harbour(tmp_path: Path) -> Harbour:
    place = Place.make(tmp_path / "place")
    place.split(need=2)
    return Harbour.make(place)


def drilled(harbour: Harbour, *names: str) -> tuple[int, dict[str, object]]:
    """Run the script in a folder of its own; return its exit code and what the rehearsal told."""
    office = "harbour-office"
    shares = [harbour.place.drop / f"{name}.practice.json" for name in names]
    scheduled = harbour.folder / "scheduled"
    scheduled.mkdir()
    done = subprocess.run(
        [SCRIPT, harbour.place.set, harbour.key(office), harbour.phrase(office), *shares],
        cwd=scheduled,
        env={**os.environ, "PATH": f"{PROGRAM.parent}:{os.environ['PATH']}"},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        timeout=60,
        check=False,
    )
    return done.returncode, json.loads((scheduled / "drill.json").read_text())


def test_a_drill_that_passes_leaves_what_the_audit_finds(harbour: Harbour) -> None:
    code, told = drilled(harbour, *NAMES[:2])
    assert (code, told["done"], told["outcome"]) == (6, True, "passed")  # Nobody has attested yet, so something is due.
    audited = json.loads((harbour.folder / "scheduled" / "audit.json").read_text())
    assert audited["sets"][0]["drills"][0]["passed"] is True


def test_a_drill_that_fails_says_so(harbour: Harbour) -> None:
    code, told = drilled(harbour, NAMES[0])
    assert (code, told["done"], told["exit"]) == (3, False, 3)
    closed = json.loads((harbour.folder / "scheduled" / "closed.json").read_text())
    assert (closed["done"], closed["exit"]) == (False, 1)
    assert "the scheduled drill failed with exit code 3" in closed["findings"]


def test_it_says_how_it_is_used() -> None:
    done = subprocess.run([SCRIPT], capture_output=True, text=True, timeout=60, check=False)
    assert (done.returncode, done.stderr.startswith("usage: drill-in-ci")) == (2, True)
