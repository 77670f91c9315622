"""A set's folder: what lies in it is listed and read without being led elsewhere, and what is added stays its own.

Source: this project's own format (FORMAT.md, section 15).
"""

from __future__ import annotations

import os
import stat
from pathlib import Path

import pytest
from history.making import NAMES, key, note, record, set_folder

from shares.custody.split import split
from shares.documents.policy import Policy
from shares.errors import DocumentError, ParameterError, StorageError, VerificationError
from shares.history.files import FolderFiles, is_name_in_set
from shares.history.folder import SetFolder
from shares.history.journal import load_journal
from shares.memory import Secret
from shares.sharing.rule import Rule

POLICY = b"""
label = "Tide archive root"
dual_control = true
""" + b"".join(
    b'[[custodian]]\nname = "%s"\nperson = "%s keeper"\nsite = "pier"\nreports_to = "harbour master"\n'
    % (name.encode(), name.encode())
    for name in NAMES
) + b"""
[rule]
need = 2
from = ["north-pier", "south-pier", "light-house"]
"""  # fmt: skip


def with_policy(folder: Path, text: bytes = POLICY) -> Path:
    policy = Policy.parse(text)
    with Secret.of(b"not a real key") as secret:
        dealt = split(secret, Rule(2, NAMES), label=policy.label, policy=policy.digest())
    folder.mkdir()
    (folder / "record.json").write_bytes(dealt.record.to_file())
    (folder / "policy.toml").write_bytes(text)
    return folder


def test_all_regular_files_are_listed_and_nothing_else(tmp_path: Path) -> None:
    for name in (
        "record.json",
        "drills/57/report.json",
        ".record.json.0123456789abcdef.partial",
        ".git/config",
        "a\\b",
    ):
        (tmp_path / name).parent.mkdir(parents=True, exist_ok=True)
        (tmp_path / name).write_bytes(b"x")
    (tmp_path / "link").symlink_to("record.json")
    (tmp_path / "loop").symlink_to(".")
    os.mkfifo(tmp_path / "pipe")
    assert FolderFiles(tmp_path).names() == ["drills/57/report.json", "record.json"]
    assert FolderFiles(tmp_path).read("drills/57/report.json", limit=1) == b"x"
    assert FolderFiles(tmp_path).where == str(tmp_path)


@pytest.mark.parametrize("name", ["link", "pipe", "loop/record.json", "missing", "..", "/etc/hostname", "", "a\0b"])
def test_what_leads_elsewhere_is_not_read(name: str, tmp_path: Path) -> None:
    (tmp_path / "record.json").write_bytes(b"x")
    (tmp_path / "link").symlink_to("record.json")
    (tmp_path / "loop").symlink_to(".")
    os.mkfifo(tmp_path / "pipe")
    with pytest.raises(StorageError):
        FolderFiles(tmp_path).read(name, limit=10)


def test_names_that_a_file_may_have() -> None:
    for name in ("record.json", "a/b/c", "acknowledgements/north pier.json", "öl"):
        assert is_name_in_set(name)
    for name in ("", ".", "..", "/a", "a/", "a//b", "a/../b", "a/.b", ".a", "a\\b", "a\0b", "a\nb", "a\x7fb"):
        assert not is_name_in_set(name)


def test_what_is_added_is_private_new_and_named(tmp_path: Path) -> None:
    folder = SetFolder(set_folder(tmp_path / "set"))
    named = folder.add("drills/2/report.json", b"{}")
    assert named == folder.named("drills/2/report.json")
    path = folder.path / named.path
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    assert stat.S_IMODE(path.parent.stat().st_mode) == 0o700
    with pytest.raises(StorageError, match="never overwritten"):
        folder.add("drills/2/report.json", b"other")
    assert path.read_bytes() == b"{}"


@pytest.mark.parametrize("name", ["../out", "/out", "a//b", ".hidden", "a\x07b", "x" * 501])
def test_nothing_is_added_elsewhere(name: str, tmp_path: Path) -> None:
    folder = SetFolder(set_folder(tmp_path / "set"))
    with pytest.raises(ParameterError):
        folder.add(name, b"x")
    assert sorted(one.name for one in folder.path.iterdir()) == ["journal.jsonl", "record.json"]


def test_a_folder_without_a_record_is_refused(tmp_path: Path) -> None:
    with pytest.raises(StorageError, match="does not exist"):
        SetFolder(tmp_path)
    (tmp_path / "record.json").write_bytes(b"{}")
    with pytest.raises(DocumentError):
        SetFolder(tmp_path)


def test_a_policy_that_is_not_the_records_is_refused(tmp_path: Path) -> None:
    folder = with_policy(tmp_path / "set")
    assert SetFolder(folder).policy is not None
    (folder / "policy.toml").write_bytes(POLICY.replace(b"true", b"false"))
    with pytest.raises(VerificationError, match="changed since the split"):
        SetFolder(folder)
    (folder / "policy.toml").unlink()
    with pytest.raises(StorageError):
        SetFolder(folder)
    assert SetFolder(set_folder(tmp_path / "other")).policy is None


def test_dual_control_is_asked_for_before_anything_is_written(tmp_path: Path) -> None:
    folder = SetFolder(with_policy(tmp_path / "set"))
    for keys in ([], [key()], [key(), key()]):
        with pytest.raises(ParameterError, match="dual control"):
            folder.append(note("alone"), keys=keys)
    assert not (folder.path / "journal.jsonl").exists()
    folder.append(note("both"), keys=[key(), key("registrar")])
    journal = folder.journal()
    assert (journal.problems, len(journal.signers(journal.entries[0]))) == ((), 2)
    assert load_journal(folder.path).head == journal.head
    assert folder.record.set != record().set
