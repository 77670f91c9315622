"""A year of a kept set, packed: an auditor who has the pack alone finds what is found in the folder, good or bad.

Checked against: the audit of the folder itself; the standard library's tarfile, which takes the pack apart.
"""

from __future__ import annotations

import dataclasses
import shutil
import tarfile
from collections.abc import Callable
from pathlib import Path

import pytest
from kept import NAMES, Kept, day, policy_text

from shares.documents.drill_report import Action
from shares.documents.event import Departed, Deviation
from shares.evidence.audit import audit
from shares.evidence.audited import Audit, Verdict
from shares.evidence.page import audit_page
from shares.history.files import FolderFiles
from shares.history.pack import PackFiles, write_pack

LATER = day(300)


@pytest.fixture(scope="module")
def year(tmp_path_factory) -> Path:
    """Two rounds, a damaged share, a silent custodian, drills of both kinds, an exception, a departure."""
    kept = Kept.make(tmp_path_factory.mktemp("kept") / "tide-archive", policy_text())
    kept.round(day(5))
    kept.drill("practice", day(30), NAMES[:3])
    challenge = kept.ask(day(92))
    kept.answer(challenge, NAMES[:3], day(93))
    kept.answer(challenge, ["registrar"], day(94), damaged=True)
    remark, remedy = "a pack was numbered twice", "a new pack, number TM-118"
    kept.append(Deviation(what="exception", remark=remark, remedy=remedy), day(95))
    action = Action(what="call by telephone first", owner="harbour-office", due=day(170))
    kept.drill("recovery", day(150), ("north-pier", "south-pier", "dry-dock"), actions=[action], hours=30)
    gone = Departed(what="departed", person="keeper three", custodians=("light-house",), due=day(201))
    kept.append(gone, day(200))
    return kept.folder


def both(folder: Path, to: Path) -> tuple[Audit, Audit]:
    write_pack(FolderFiles(folder), to)
    here, there = audit(FolderFiles(folder), at=LATER), audit(PackFiles(to), at=LATER)
    return here, dataclasses.replace(there, where=here.where)


def test_pack_and_folder_tell_the_same(year, tmp_path):
    here, there = both(year, tmp_path / "pack.tar")
    assert here == there
    assert here.verdict is Verdict.AT_RISK
    assert here.counts.attestations == 9


def without_line(data: bytes, number: int) -> bytes:
    lines = data.splitlines(keepends=True)
    return b"".join(lines[:number] + lines[number + 1 :])


def spoil(name: str, change: Callable[[bytes], bytes]) -> Callable[[Path], None]:
    def spoiled(folder: Path) -> None:
        (path,) = sorted(folder.glob(name))[:1]
        path.write_bytes(change(path.read_bytes()))

    return spoiled


SPOILED = {
    "a report altered": spoil("drills/*/report.json", lambda data: data.replace(b"pier", b"peer", 1)),
    "an entry removed": spoil("journal.jsonl", lambda data: without_line(data, 3)),
    "a torn line": spoil("journal.jsonl", lambda data: data[:-9]),
    "the policy altered": spoil("policy.toml", lambda data: data + b"# \n"),
    "no record at all": spoil("record.json", lambda data: b"{}"),
    "an answer gone": lambda folder: sorted(folder.glob("attestations/*/north-pier.json"))[0].unlink(),
    "no journal": lambda folder: (folder / "journal.jsonl").unlink(),
}  # fmt: skip


@pytest.mark.parametrize("name", SPOILED)
def test_what_is_amiss_shows_in_the_pack_as_well(year, tmp_path, name):
    folder = tmp_path / "tide-archive"
    shutil.copytree(year, folder)
    whole = audit(FolderFiles(folder), at=LATER)
    SPOILED[name](folder)
    here, there = both(folder, tmp_path / "pack.tar")
    assert here == there
    assert here.reasons != whole.reasons or here.notes != whole.notes


def test_the_pack_unpacked_by_another_program_is_the_folder(year, tmp_path):
    write_pack(FolderFiles(year), tmp_path / "pack.tar")
    with tarfile.open(tmp_path / "pack.tar") as opened:
        opened.extractall(tmp_path / "out", filter="data")
    unpacked = FolderFiles(tmp_path / "out")
    assert unpacked.names() == FolderFiles(year).names()
    here = audit(FolderFiles(year), at=LATER)
    assert dataclasses.replace(audit(unpacked, at=LATER), where=here.where) == here


def test_the_page_tells_the_story_of_the_year(year):
    page = audit_page([audit(FolderFiles(year), at=LATER)], program="shares 1.0").decode()
    for words in (
        "At risk", "registrar", "found damaged", "a pack was numbered twice", "a new pack, number TM-118",
        "call by telephone first", "keeper three", "practice drill 8 passed", "recovery drill", "no quorum",
        "share read: damaged",
    ):  # fmt: skip
        assert words in page, words
