"""The files of parties: key and card are written whole and private, or not at all, and read strictly.

Checked against: what lies in the folder afterwards. Every step that can fail is made to fail, one at a time.
"""

from __future__ import annotations

import os
import stat
from pathlib import Path

import pytest
from parties import card, party, passphrase

from shares.custody import parties
from shares.custody.parties import check_party_paths, load_card, load_key, party_paths, write_party
from shares.errors import DocumentError, StorageError

NAME = "north-pier"
KEY = party(NAME)


def test_key_and_card_are_written_and_read(tmp_path: Path) -> None:
    assert party_paths(tmp_path, NAME) == (tmp_path / "north-pier.key.json", tmp_path / "north-pier.card.json")
    check_party_paths(tmp_path, NAME)
    assert write_party(KEY, tmp_path) == party_paths(tmp_path, NAME)
    modes = [stat.S_IMODE(path.stat().st_mode) for path in party_paths(tmp_path, NAME)]
    assert modes == [0o600, 0o644]
    key_path, card_path = party_paths(tmp_path, NAME)
    assert (load_key(key_path), load_card(card_path)) == (KEY, card(NAME))
    with load_key(key_path).open(passphrase(NAME)) as opened:
        assert opened.card == load_card(card_path)


@pytest.mark.parametrize("which", [0, 1])
@pytest.mark.parametrize("kind", ["file", "folder", "dangling link"])
def test_whatever_has_the_name_already_is_kept(tmp_path: Path, which: int, kind: str) -> None:
    taken = party_paths(tmp_path, NAME)[which]
    if kind == "file":
        taken.write_bytes(b"kept")
    elif kind == "folder":
        taken.mkdir()
    else:
        taken.symlink_to("nowhere")
    with pytest.raises(StorageError, match=r"never overwritten.*cannot open what was wrapped"):
        check_party_paths(tmp_path, NAME)
    with pytest.raises(StorageError):
        write_party(KEY, tmp_path)
    assert os.listdir(tmp_path) == [taken.name]
    assert kind != "file" or taken.read_bytes() == b"kept"


def test_the_folder_must_be_there(tmp_path: Path) -> None:
    with pytest.raises(StorageError, match="the folder is not there"):
        check_party_paths(tmp_path / "nowhere", NAME)
    (tmp_path / "file").write_bytes(b"")
    with pytest.raises(StorageError, match="the folder is not there"):
        check_party_paths(tmp_path / "file", NAME)
    with pytest.raises(StorageError):
        write_party(KEY, tmp_path / "nowhere")


class Failure(Exception):
    """What no code of the package raises or expects."""


@pytest.mark.parametrize("error", [StorageError("the medium is full"), KeyboardInterrupt(), Failure()], ids=repr)
@pytest.mark.parametrize(("function", "at"), [("write_new", 1), ("write_new", 2), ("read_back", 1), ("read_back", 2)])
def test_a_failure_at_any_step_leaves_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, function: str, at: int, error: BaseException
) -> None:
    real, calls = getattr(parties, function), []

    def stand_in(*args, **kwargs):
        calls.append(1)
        if len(calls) == at:
            raise error
        return real(*args, **kwargs)

    monkeypatch.setattr(parties, function, stand_in)
    with pytest.raises(type(error)):
        write_party(KEY, tmp_path)
    assert os.listdir(tmp_path) == []


@pytest.mark.parametrize("which", [0, 1])
def test_what_comes_back_changed_leaves_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, which: int) -> None:
    real, spoiled = parties.read_back, party_paths(tmp_path, NAME)[which]
    monkeypatch.setattr(
        parties, "read_back", lambda path, *, limit: real(path, limit=limit) + (b" " if path == spoiled else b"")
    )
    with pytest.raises(StorageError, match="read back differs"):
        write_party(KEY, tmp_path)
    assert os.listdir(tmp_path) == []


def test_files_of_other_kinds_are_refused_by_name(tmp_path: Path) -> None:
    key_path, card_path = write_party(KEY, tmp_path)
    with pytest.raises(DocumentError, match=f"{card_path}: a party key is wanted here, but it is a party card"):
        load_key(card_path)
    with pytest.raises(DocumentError, match=f"{key_path}: a party card is wanted here, but it is a party key"):
        load_card(key_path)
    for load in (load_key, load_card):
        with pytest.raises(StorageError, match="nowhere: does not exist"):
            load(tmp_path / "nowhere")
