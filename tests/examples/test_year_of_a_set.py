"""The year of a set tells its story truthfully: what the audit says is what was done to the set.

Source: the story is the script's own; the pack is audited on its own, as an auditor elsewhere does.
"""

from __future__ import annotations

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest
from cli.harness import run

SCRIPT = Path(__file__).resolve().parents[2] / "examples" / "year_of_a_set.py"


@pytest.fixture(scope="module")
def year(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("year") / "told"
    done = subprocess.run([sys.executable, SCRIPT, folder], capture_output=True, text=True, timeout=120, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    assert done.stdout.startswith("Tide archive backup root: due\n")
    return folder


def test_the_audit_of_the_pack_tells_what_happened(year: Path, tmp_path: Path) -> None:
    pack = tmp_path / "received.tar"
    os.rename(year / "tide-archive.tar", pack)
    told = run("audit", pack, "--at", "2026-12-01T09:00:00Z", "--json")
    assert told.code == 6
    (found,) = told.json["sets"]
    assert found["verdict"] == "due"
    stands = {row["name"]: row["status"] for row in found["custodians"]}
    assert {name for name, standing in stands.items() if standing == "confirmed"} == {
        "north-pier", "light-house", "registrar", "auditor-east"
    }  # fmt: skip
    assert (stands["auditor-west"], stands["south-pier"]) == ("damaged", "departed")
    assert [(drill["kind"], drill["passed"]) for drill in found["drills"]] == [("practice", True), ("recovery", True)]
    said = " ".join(reason["what"] for reason in found["reasons"])
    for words in ("auditor-west", "operator of the south pier has left", "wipe the drill machine"):
        assert words in said


def test_the_pages_tell_it_too(year: Path) -> None:
    page = (year / "audit.html").read_text()
    report = (year / "drill.html").read_text()
    assert all(
        word in page for word in ("found damaged", "operator of the south pier", "the way to the office is dark")
    )
    assert "wipe the drill machine before a witness" in report
    for text in (page, report):
        assert not re.search(r"<script|src=|https?:", text)


def test_no_secret_is_in_what_an_auditor_gets(year: Path) -> None:
    secret = b"the root key of the tide archive, made up"
    rows = re.findall(rb'"([A-Za-z0-9_-]{90,})"', (year / "kept/north-pier/north-pier.share.json").read_bytes())
    assert rows
    for path in [*(year / "set").rglob("*"), year / "audit.html", year / "drill.html"]:
        data = path.read_bytes() if path.is_file() else b""
        assert not [word for word in (secret, *rows) if word in data], path
