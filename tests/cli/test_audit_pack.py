"""``shares audit pack``: what it says, what it writes, what it refuses; and an audit of the pack, elsewhere.

Source: FORMAT.md, sec. 20; the standard library's tarfile.
"""

from __future__ import annotations

import hashlib
import shutil
import tarfile
from pathlib import Path

import pytest
from cli.harness import Place, assert_refused, files_in, run, spawn

from shares.cli.audit_pack import CAUTION


@pytest.fixture
def pack(dealt: Place) -> Path:
    """The pack of a set."""
    to = dealt.folder / "tide-archive.tar"
    assert run("audit", "pack", dealt.set, "--to", to).code == 0
    return to


def test_it_says_what_is_in_it_and_that_it_is_confidential(dealt):
    to = dealt.folder / "tide-archive.tar"
    by_hand = run("audit", "pack", dealt.set, "--to", to)
    assert (by_hand.code, by_hand.err) == (0, "")
    data = to.read_bytes()
    assert f"{len(data):,} bytes, into {to}" in by_hand.out
    assert hashlib.sha256(data).hexdigest() in by_hand.out
    assert CAUTION in " ".join(by_hand.out.split())
    by_script = run("audit", "pack", dealt.set, "--to", dealt.folder / "again.tar", "--json")
    with tarfile.open(to) as opened:
        names = opened.getnames()
    assert by_script.json == {
        "done": True, "exit": 0, "pack": str(dealt.folder / "again.tar"), "sha256": hashlib.sha256(data).hexdigest(),
        "size": len(data), "files": names, "left_out": [], "caution": CAUTION,
    }  # fmt: skip
    assert {"journal.jsonl", "record.json"} <= set(names)
    assert (dealt.folder / "again.tar").read_bytes() == data


def test_an_auditor_reaches_the_same_verdict_from_the_pack_alone(dealt, pack, tmp_path):
    at = ("--at", "2030-01-01T00:00:00Z", "--json")
    here = run("audit", dealt.set, *at)
    elsewhere = tmp_path / "auditor"
    elsewhere.mkdir()
    shutil.move(pack, elsewhere / "received.tar")
    shutil.rmtree(dealt.set)
    before = files_in(elsewhere)
    there = spawn("audit", "received.tar", *at, cwd=elsewhere)
    assert (here.code, there.code) == (6, 6)
    (one,), (other,) = here.json["sets"], there.json["sets"]
    assert other["where"] == "received.tar"
    assert one | {"where": ""} == other | {"where": ""}
    assert files_in(elsewhere) == before


def test_a_share_in_the_folder_is_refused_by_name(dealt):
    stray = dealt.set / "documents" / "north-pier.json"
    stray.parent.mkdir(exist_ok=True)
    shutil.copy(dealt.share("north-pier"), stray)
    to = dealt.folder / "tide-archive.tar"
    assert_refused(
        ["audit", "pack", dealt.set, "--to", to], 5, str(stray.name), "holds a share", "nothing was packed",
        watched=dealt.folder,
    )  # fmt: skip


def test_what_cannot_be_packed_is_refused(dealt):
    to = dealt.folder / "tide-archive.tar"
    assert_refused(["audit", "pack", dealt.drop, "--to", to], 5, "holds", watched=dealt.folder)
    assert_refused(["audit", "pack", dealt.folder / "nowhere", "--to", to], 5, "does not exist", watched=dealt.folder)
    assert_refused(["audit", "pack", dealt.set], 2, "--to", watched=dealt.folder)
    assert_refused(["audit", "pack", dealt.set, "--to", dealt.record], 5, "exists already", watched=dealt.folder)


@pytest.mark.parametrize("bend", ["cut", "compressed", "of another program", "not a pack"])
def test_a_pack_that_is_none_is_named_and_takes_no_other_with_it(dealt, pack, tmp_path, bend):
    other = tmp_path / "other.tar"
    data = pack.read_bytes()
    words = {"cut": "cut short", "compressed": "compressed (gzip)", "not a pack": "another form of archive"}
    if bend == "of another program":
        with tarfile.open(other, "w") as made:
            made.add(dealt.set, arcname="../set")
        words[bend] = "tells more than a long name"
    else:
        other.write_bytes({"cut": data[:-700], "compressed": b"\x1f\x8b" + data, "not a pack": b"x" * 2000}[bend])
    done = run("audit", other, pack, "--json")
    assert done.code == 4
    bad, good = done.json["sets"]
    assert bad["verdict"] == "broken"
    assert words[bend] in bad["reasons"][0]["what"]
    assert good["verdict"] != "broken"


def test_the_page_is_written_new_and_private(dealt):
    page = dealt.folder / "report.html"
    done = run("audit", dealt.set, "--html", page)
    assert done.code == 6
    assert str(page) in done.out
    assert page.stat().st_mode & 0o777 == 0o600
    assert page.read_bytes().startswith(b"<!DOCTYPE html>")
    assert_refused(["audit", dealt.set, "--html", page], 5, "exists already", watched=dealt.folder)
