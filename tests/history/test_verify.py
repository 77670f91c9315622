"""A journal against what it speaks of: each thing that does not fit is named, and told apart from the others.

Source: this project's own format (FORMAT_EVIDENCE.md, section 16).
"""

from __future__ import annotations

from pathlib import Path

import pytest
from history.making import dealt, key, lines_of, note, record, set_folder, text_of

from shares.documents.entry import Entry, Head, NamedDigest
from shares.documents.event import Event
from shares.documents.policy import Policy
from shares.errors import StorageError
from shares.history.files import FolderFiles
from shares.history.folder import SetFolder
from shares.history.journal import Journal, Problem, append, load_journal, read_journal
from shares.history.verify import verify

POLICY = b"""
label = "Tide archive root"
dual_control = true
[[custodian]]
name = "north-pier"
person = "A. Keeper"
site = "north"
reports_to = "harbour master"
[rule]
need = 1
from = ["north-pier"]
"""


def problems(folder: Path, **options: object) -> list[Problem]:
    policy = options.pop("policy", None)
    return list(verify(load_journal(folder), FolderFiles(folder), record(), policy, **options))  # type: ignore[arg-type]


def kinds(folder: Path, **options: object) -> list[tuple[int, str, bool]]:
    return [(one.line, one.kind, one.breaks) for one in problems(folder, **options)]


def of_events(*happened: Event) -> Journal:
    return read_journal(text_of(lines_of(happened, "harbour-office")))


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A set's folder, its journal signed, with one document named."""
    made = set_folder(tmp_path / "set", "harbour-office")
    opened = SetFolder(made)
    receipt = opened.add("receipts/1/north-pier.json", b"received")
    opened.append(note("a receipt"), keys=[key()], documents=[receipt])
    return made


def test_a_whole_journal_has_nothing_to_be_told(folder: Path) -> None:
    head = load_journal(folder).head
    assert head is not None
    assert problems(folder, heads=[head], trusted=[key().card]) == []


def test_missing_and_altered_documents_are_told_apart(folder: Path) -> None:
    path = folder / "receipts/1/north-pier.json"
    path.write_bytes(b"received.")
    (problem,) = problems(folder)
    assert (problem.line, problem.kind, problem.breaks) == (2, "altered", True)
    assert "receipts/1/north-pier.json" in problem.what
    path.unlink()
    assert kinds(folder) == [(2, "missing", True)]
    (folder / "elsewhere").write_bytes(b"received")
    path.symlink_to(folder / "elsewhere")
    assert kinds(folder) == [(2, "missing", True)]


def test_a_document_in_a_folder_that_is_a_link_is_not_read(folder: Path) -> None:
    (folder / "receipts").rename(folder.parent / "moved")
    (folder / "receipts").symlink_to(folder.parent / "moved")
    assert kinds(folder) == [(2, "missing", True)]


def test_a_document_too_large_to_be_one_is_told(folder: Path) -> None:
    with (folder / "receipts/1/north-pier.json").open("wb") as made:
        made.truncate((16 << 20) + 1)
    (problem,) = problems(folder)
    assert problem.kind == "missing"
    assert "larger than" in problem.what


@pytest.mark.parametrize("path", ["../policy.toml", "/etc/hostname", "a//b", ".hidden", "a/./b", "a\\b"])
def test_a_path_that_leads_elsewhere_is_told_and_not_followed(folder: Path, path: str) -> None:
    append(folder, note("sly"), keys=[key()], documents=[NamedDigest(path=path, digest=bytes(32))])
    (problem,) = problems(folder)
    assert (problem.line, problem.kind, problem.breaks) == (3, "missing", True)
    assert "no file in a set's folder" in problem.what


def test_a_document_that_is_named_anew_with_other_content_is_told(folder: Path) -> None:
    (folder / "receipts/1/north-pier.json").write_bytes(b"received late")
    named = SetFolder(folder).named("receipts/1/north-pier.json")
    append(folder, note("changed"), keys=[key()], documents=[named])
    (problem,) = problems(folder)
    assert (problem.line, problem.kind, problem.breaks) == (3, "renamed", False)
    assert "than entry 2 did" in problem.what


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"set": bytes(16)}, "tells of the set 0000"),
        ({"record": "-".join(["AAAA"] * 8)}, "last dealt with the record AAAA"),
        ({"custodians": dealt().custodians[:2]}, "other custodians"),
    ],
)
def test_a_record_of_another_dealing_is_told(changes: dict[str, object], words: str, tmp_path: Path) -> None:
    journal = of_events(dealt().model_copy(update=changes))
    found = verify(journal, FolderFiles(tmp_path), record(), None)
    assert found
    assert all(problem.breaks and problem.kind == "record" for problem in found)
    assert words in found[0].what


def test_a_journal_that_tells_of_no_dealing_or_goes_back_is_told(tmp_path: Path) -> None:
    (problem,) = verify(of_events(note("nothing yet")), FolderFiles(tmp_path), record(), None)
    assert (problem.kind, "no entry tells" in problem.what) == ("record", True)
    assert [one.kind for one in verify(Journal(), FolderFiles(tmp_path), record(), None)] == ["record"]
    (again,) = verify(of_events(dealt(), dealt()), FolderFiles(tmp_path), record(), None)
    assert (again.line, "after epoch 1" in again.what) == (2, True)
    later = dealt().model_copy(update={"epoch": 2, "record": "-".join(["AAAA"] * 8)})
    (newer,) = verify(of_events(dealt(), later), FolderFiles(tmp_path), record(), None)
    assert "last dealt with the record AAAA" in newer.what


def test_heads_noted_elsewhere_tell_of_a_removed_end_and_of_another_journal(folder: Path) -> None:
    whole = load_journal(folder)
    assert whole.head is not None
    path = folder / "journal.jsonl"
    path.write_bytes(path.read_bytes().split(b"\n")[0] + b"\n")
    (cut,) = problems(folder, heads=[whole.head])
    assert (cut.line, cut.kind, "its end was removed" in cut.what) == (0, "head", True)
    other = Head(sequence=1, head="-".join(["AAAA"] * 8))
    (rewritten,) = problems(folder, heads=[other])
    assert (rewritten.kind, "rewritten" in rewritten.what, "removed" in rewritten.what) == ("head", True, False)
    assert rewritten.breaks


def test_dual_control_names_the_entries_that_one_party_made_alone(folder: Path) -> None:
    policy = Policy.parse(POLICY)
    for _ in range(2):
        append(folder, note("both"), keys=[key(), key("registrar")])
    append(folder, note("one"), keys=[key("registrar")])
    append(folder, note("nobody"))
    append(folder, note("nobody"))
    found = problems(folder, policy=policy)
    assert [(one.line, one.kind, one.breaks) for one in found] == [(6, "trust", False), (1, "control", True)]
    assert found[0].what.startswith("entries 6 to 7 are not signed")
    assert found[1].what.startswith("entries 1 to 2, 5 to 7 are signed by fewer than two")
    lenient = Policy.parse(POLICY.replace(b"true", b"false"))
    assert [one.kind for one in problems(folder, policy=lenient)] == ["trust"]


def test_a_doubled_signature_is_no_dual_control(tmp_path: Path) -> None:
    (line,) = lines_of([dealt()], "harbour-office")
    entry = Entry.of_line(line).signed(key())
    found = verify(read_journal(text_of([entry.line()])), FolderFiles(tmp_path), record(), Policy.parse(POLICY))
    assert {one.kind for one in found} == {"signature", "control"}


def test_trusted_parties_are_demanded(folder: Path) -> None:
    append(folder, note("stranger"), keys=[key("dry-dock")])
    assert kinds(folder, trusted=[key().card]) == [(3, "trust", True)]
    assert kinds(folder, trusted=[key().card, key("dry-dock").card]) == []
    assert kinds(folder) == []


def test_what_was_set_aside_is_told_for_ever(folder: Path) -> None:
    path = folder / "journal.jsonl"
    path.write_bytes(path.read_bytes() + b'{"torn')
    assert kinds(folder) == [(3, "torn", False)]
    append(folder, note("goes on"), keys=[key()])
    (problem,) = problems(folder)
    assert (problem.line, problem.kind, problem.breaks) == (3, "set-aside", False)
    (piece,) = folder.glob("journal.torn-*")
    assert piece.name in problem.what
    piece.write_bytes(b"other")
    assert [one.kind for one in problems(folder)] == ["altered", "set-aside"]


def test_a_piece_that_no_entry_names_is_told(folder: Path) -> None:
    (folder / "journal.torn-100-0123456789abcdef").write_bytes(b"{")
    (problem,) = problems(folder)
    assert (problem.line, problem.kind, problem.breaks) == (0, "set-aside", False)


def test_a_folder_that_cannot_be_read_is_refused(tmp_path: Path) -> None:
    with pytest.raises(StorageError):
        verify(Journal(), FolderFiles(tmp_path / "nowhere"), record(), None)


def test_all_problems_come_at_once(folder: Path) -> None:
    """One thing that is wrong hides no other."""
    path = folder / "journal.jsonl"
    path.write_bytes(path.read_bytes().replace(b"a receipt", b"no receipt"))
    (folder / "receipts/1/north-pier.json").unlink()
    head = Head(sequence=2, head="-".join(["AAAA"] * 8))
    assert {one.kind for one in problems(folder, heads=[head], trusted=[key("registrar").card])} == {
        "signature", "missing", "head", "trust",
    }  # fmt: skip
