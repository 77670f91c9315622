"""A key's folder is read strictly: what is not what it should be is refused, and says where."""

from __future__ import annotations

from pathlib import Path

import pytest
from parties import card, unlocked

from shares.documents.key_event import KeyBorn
from shares.errors import DocumentError, StorageError, VerificationError
from shares.group.edwards25519 import Scalar
from shares.keys.deal import deal
from shares.keys.folder import KeyFolder
from shares.keys.handover import hand_over

NAMES = ("north-pier", "south-pier")


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """The folder of the north pier."""
    with unlocked("harbour-office") as dealer:
        dealt = deal(Scalar.drawn(), 2, [card(name) for name in NAMES], label="Harbour key", dealer=dealer)
        return hand_over(dealt, dealer, tmp_path / "key", dict.fromkeys(NAMES, tmp_path))["north-pier"]


def test_it_holds_record_share_and_journal(folder: Path) -> None:
    key = KeyFolder(folder)
    assert key.share().custodian == "north-pier"
    assert [type(entry.event) for entry in key.journal().entries] == [KeyBorn]
    assert key.where == str(folder)


@pytest.mark.parametrize("name", ["record.json", "share.json"])
def test_what_is_no_document_is_refused(folder: Path, name: str) -> None:
    path = folder / name
    for data in (b"", b"{}", b"\x00" * 100, (folder / "journal.jsonl").read_bytes()):
        path.unlink(missing_ok=True)
        path.write_bytes(data)
        with pytest.raises(DocumentError) as refused:
            KeyFolder(folder).share()
        assert refused.value.where == str(path)
    path.unlink()
    path.symlink_to(folder / "journal.jsonl")
    with pytest.raises(StorageError):
        KeyFolder(folder).share()
    path.unlink()
    with pytest.raises(StorageError):
        KeyFolder(folder).share()


def test_a_record_that_nobody_signed_is_none(folder: Path) -> None:
    record = KeyFolder(folder).record
    (folder / "record.json").unlink()
    (folder / "record.json").write_bytes(record.model_copy(update={"signatures": ()}).to_file())
    with pytest.raises(VerificationError, match="not its dealer has signed"):
        KeyFolder(folder)


def test_it_grows_and_nothing_is_written_over(folder: Path) -> None:
    key = KeyFolder(folder)
    named = key.add("asked/one.json", b"{}")
    assert (named.path, (folder / "asked").stat().st_mode & 0o777) == ("asked/one.json", 0o700)
    with pytest.raises(StorageError):
        key.add("asked/one.json", b"[]")
    born = key.journal().entries[0].event
    with unlocked("north-pier") as own:
        entry = key.append(born, keys=(own,), documents=(named,))
    assert [one.name for one in key.journal().signers(entry)] == ["north-pier"]
