"""The audit pack: what goes in, what never does, and that it is the same bytes for the same files.

Source: FORMAT.md, sec. 20; the shares, keys and records of tests/vectors/golden.
"""

from __future__ import annotations

import hashlib
import json
import os
import shutil
from pathlib import Path

import pytest

from shares.documents.base import MAX_FILE
from shares.documents.event import Noted
from shares.errors import DocumentError, StorageError
from shares.history import pack
from shares.history.files import FolderFiles
from shares.history.journal import append, read_journal
from shares.history.pack import MAX_PACKED, PackFiles, write_pack

GOLDEN = Path(__file__).parents[1] / "vectors/golden/v1"
PACKED = {
    "acknowledgements/north-pier.json": b"{}",
    "attestations/2/challenge.json": b"{}",
    "attestations/2/north-pier.json": b"{}",
    "ceremony/0123456789abcdef.json": b"{}",
    "documents/affidavit.pdf": b"%PDF",
    "drills/9/report.html": b"<!DOCTYPE html>",
    "drills/9/report.json": b"{}",
    "journal.torn-1234-0123456789abcdef": b'{"kind":"journal-en',
    "policy.toml": b'label = "Tide archive root"\n',
    "practice.json": b"{}",
}
LEFT = {"secret.encrypted": b"shares encrypted file\n", "notes.txt": b"x", "journal.torn-1": b"", "other/a.json": b"{}"}


@pytest.fixture
def folder(tmp_path):
    """A set's folder with a file of every sort."""
    made = tmp_path / "tide-archive"
    fill(made, PACKED | LEFT)
    shutil.copy(GOLDEN / "flat/record.json", made)
    append(made, Noted(what="noted", remark="made for a test"))
    return made


def fill(folder: Path, files: dict[str, bytes]) -> None:
    for name, data in files.items():
        (folder / name).parent.mkdir(parents=True, exist_ok=True)
        (folder / name).write_bytes(data)


def refused(folder: Path, to: Path, error: type[StorageError] = StorageError) -> StorageError:
    with pytest.raises(error) as caught:
        write_pack(FolderFiles(folder), to)
    assert not to.exists()
    assert not [name for name in os.listdir(to.parent) if name.endswith(".partial")]
    return caught.value


def test_an_auditor_reads_the_same_files(folder, tmp_path):
    to = tmp_path / "pack.tar"
    made = write_pack(FolderFiles(folder), to)
    there, here = PackFiles(to), FolderFiles(folder)
    names = sorted([*PACKED, "journal.jsonl", "record.json"])
    assert (there.names(), list(made.names), list(made.left_out)) == (names, names, sorted(LEFT))
    assert {
        name: there.read(name, limit=MAX_FILE) == here.read(name, limit=MAX_FILE) for name in names
    } == dict.fromkeys(names, True)
    assert there.where == str(to)
    assert (made.size, made.digest) == (to.stat().st_size, hashlib.sha256(to.read_bytes()).digest())
    assert to.stat().st_mode & 0o777 == 0o600
    assert read_journal(there.read("journal.jsonl", limit=MAX_FILE)).problems == ()


def test_it_is_the_same_whenever_and_wherever_it_is_made(folder, tmp_path):
    first = tmp_path / "first.tar"
    write_pack(FolderFiles(folder), first)
    copy = tmp_path / "elsewhere" / "copy"
    # Made in another order, by copies that keep neither time nor mode, under another umask.
    before = os.umask(0o077)
    try:
        for path in sorted((path for path in folder.rglob("*") if path.is_file()), reverse=True):
            to = copy / path.relative_to(folder)
            to.parent.mkdir(parents=True, exist_ok=True)
            to.write_bytes(path.read_bytes())
            os.utime(to, (1, 1))
        write_pack(FolderFiles(copy), second := tmp_path / "second.tar")
    finally:
        os.umask(before)
    assert first.read_bytes() == second.read_bytes()
    write_pack(PackFiles(first), third := tmp_path / "third.tar")
    assert first.read_bytes() == third.read_bytes()
    (copy / "drills/9/report.json").write_bytes(b"[]")
    assert write_pack(FolderFiles(copy), tmp_path / "fourth.tar").digest != hashlib.sha256(first.read_bytes()).digest()


SECRETS = {
    "share": GOLDEN / "flat/north-pier.share.json",
    "wrapped share": GOLDEN / "wrapped/north-pier.wrapped.json",
    "sealed secret": GOLDEN / "wrapped/harbour-office.sealed.json",
    "party key": GOLDEN / "wrapped/registrar.key.json",
}


@pytest.mark.parametrize("kind", SECRETS)
@pytest.mark.parametrize(
    "name", ["documents/scan.pdf", "attestations/2/south-pier.json", "north-pier.share.json", "a/b"]
)
def test_nobody_is_handed_a_share_or_key(folder, tmp_path, kind, name):
    secret = SECRETS[kind].read_bytes()
    members = json.loads(secret)
    forms = [
        secret,
        json.dumps(members, separators=(",", ":")).encode(),
        json.dumps({"found": members}).encode(),
        secret[:-40],
        b"% a scan\n" + secret,
        secret.replace(b'"kind": "', b'"kind": "\\u%04x' % secret[secret.index(b'"kind": "') + 9], 1),
    ]
    escaped = bytearray(forms[-1])
    del escaped[escaped.index(b"\\u") + 6]
    forms[-1] = bytes(escaped)
    assert json.loads(forms[-1]) == members
    for form in forms:
        fill(folder, {name: form})
        told = refused(folder, tmp_path / "pack.tar")
        assert f"holds a {kind}, " in told.what
        assert told.where == f"{folder}, {name}"
        # What was found travels no further: not in the refusal, nor in an error behind it.
        assert (told.__cause__, told.__context__) == (None, None)
        text = f"{told} {told!r} {told.args} {vars(told)}"
        assert not any(len(value) > 40 and value in text for value in map(str, members.values()))
    (folder / name).unlink()
    write_pack(FolderFiles(folder), tmp_path / "pack.tar")


def test_words_about_shares_are_no_shares(folder, tmp_path):
    fill(folder, {
        "documents/format.md": b'a share has (`kind` "share"), and a member "kind"',
        "documents/card.json": (GOLDEN / "wrapped/registrar.card.json").read_bytes(),
        "drills/9/report.html": b"{&#34;kind&#34;: &#34;share&#34;}",
    })  # fmt: skip
    append(folder, Noted(what="noted", remark='somebody left {"kind": "share"} in a file'))
    assert "documents/card.json" in write_pack(FolderFiles(folder), tmp_path / "pack.tar").names


def test_a_folder_without_a_record_is_refused(folder, tmp_path):
    (folder / "record.json").unlink()
    assert "holds no record" in refused(folder, tmp_path / "pack.tar").what


def test_a_set_without_a_journal_is_packed(folder, tmp_path):
    (folder / "journal.jsonl").unlink()
    assert "journal.jsonl" not in write_pack(FolderFiles(folder), tmp_path / "pack.tar").names


def test_a_name_that_is_taken_is_not_given_again(folder, tmp_path):
    (tmp_path / "pack.tar").write_bytes(b"mine")
    with pytest.raises(StorageError, match="never overwritten"):
        write_pack(FolderFiles(folder), tmp_path / "pack.tar")
    assert (tmp_path / "pack.tar").read_bytes() == b"mine"


def test_a_pack_within_the_folder_does_not_swallow_itself(folder):
    first = write_pack(FolderFiles(folder), folder / "first.tar")
    second = write_pack(FolderFiles(folder), folder / "second.tar")
    assert first.digest == second.digest
    assert "first.tar" in second.left_out


def test_what_is_no_regular_file_stays_out(folder, tmp_path):
    (folder / "documents/link.pdf").symlink_to("/etc/hostname")
    (folder / "drills/9/elsewhere").symlink_to("/etc")
    os.mkfifo(folder / "documents/pipe")
    assert set(write_pack(FolderFiles(folder), tmp_path / "pack.tar").names) == {
        *PACKED,
        "journal.jsonl",
        "record.json",
    }


def test_hidden_files_stay_out(folder, tmp_path):
    fill(folder, {"documents/.cache/x": b"x", "drills/.DS": b"x"})
    made = write_pack(FolderFiles(folder), tmp_path / "pack.tar")
    assert not [name for name in made.names if "/." in name]


@pytest.mark.parametrize("name", ["documents/" + "/".join(["d" * 99] * 5), "documents/\udcff"])
def test_names_that_a_pack_cannot_hold_are_refused(folder, tmp_path, name):
    fill(folder, {name: b"x"})
    told = refused(folder, tmp_path / "pack.tar")
    assert "name" in told.what
    assert str(told).isprintable() or "\udcff" in str(told)


def test_names_of_every_length_that_a_custodian_may_have(folder, tmp_path):
    quay = "\u6e2f"
    names = [f"attestations/{2**32 - 1}/{quay * n}.json" for n in (1, 31, 32, 33, 34, 64)]
    names += [f"acknowledgements/{'W' * n}.json" for n in (63, 64)]
    fill(folder, dict.fromkeys(names, b"{}"))
    write_pack(FolderFiles(folder), tmp_path / "pack.tar")
    assert set(names) < set(PackFiles(tmp_path / "pack.tar").names())


def test_large_files_are_refused_by_name(folder, tmp_path, monkeypatch):
    monkeypatch.setattr(pack, "MAX_PACKED", 4000)
    fill(folder, {"documents/film": bytes(4000)})
    write_pack(FolderFiles(folder), tmp_path / "pack.tar")
    fill(folder, {"documents/film": bytes(4001)})
    told = refused(folder, tmp_path / "second.tar")
    assert ("documents/film" in told.where, "larger than 4,000 bytes" in told.what) == (True, True)
    monkeypatch.setattr(pack, "MAX_PACKED", 3999)
    with pytest.raises(DocumentError, match="'documents/film' is larger than 3,999 bytes"):
        PackFiles(tmp_path / "pack.tar")
    monkeypatch.setattr(pack, "MAX_MEMBERS", 11)
    assert "more than 11 files" in refused(folder, tmp_path / "second.tar").what
    assert MAX_PACKED >= MAX_FILE


def test_reading_is_bounded_and_named(folder, tmp_path):
    write_pack(FolderFiles(folder), to := tmp_path / "pack.tar")
    files = PackFiles(to)
    with pytest.raises(StorageError, match="is not in the pack") as caught:
        files.read("secret.encrypted", limit=MAX_FILE)
    assert caught.value.where == f"{to}, secret.encrypted"
    size = len(files.read("record.json", limit=MAX_FILE))
    assert len(files.read("record.json", limit=size)) == size
    with pytest.raises(StorageError, match="is larger than"):
        files.read("record.json", limit=size - 1)
    to.unlink()
    with pytest.raises(StorageError, match="does not exist"):
        files.read("record.json", limit=size)


def test_what_an_entry_names_is_in_the_pack_though_it_came_meanwhile(folder, tmp_path):
    class Growing(FolderFiles):
        def read(self, name: str, *, limit: int) -> bytes:
            data = super().read(name, limit=limit)
            if name == "journal.jsonl":
                fill(folder, {"documents/later.pdf": b"x"})
                append(folder, Noted(what="noted", remark="written while the pack was made"))
            return data

    before = (folder / "journal.jsonl").read_bytes()
    write_pack(Growing(folder), tmp_path / "pack.tar")
    files = PackFiles(tmp_path / "pack.tar")
    assert files.read("journal.jsonl", limit=MAX_FILE) == before
    assert (folder / "journal.jsonl").stat().st_size > len(before)
    assert "documents/later.pdf" in files.names()
