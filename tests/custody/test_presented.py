"""Shares as they are given: what cannot be read is named, and the rest goes on.

Checked against: open(2) and the files made here.
"""

from __future__ import annotations

import json
import os
import socket
from pathlib import Path

import pytest
from parties import QUICK, by, card, edited, file_of, passphrase, unlocked
from strategies import crooked_split, flat

from shares.custody.presented import Status, load_record, load_shares, parse_share
from shares.documents.base import MAX_FILE
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import card_sealer, passphrase_sealer
from shares.errors import DocumentError, ParameterError, SharesError, StorageError, VerificationError, WrongKeyError

DEALT = crooked_split(b"made up", flat(2, 3))


def test_good_and_bad_files_are_presented_in_order_with_the_reason(tmp_path: Path) -> None:
    good = tmp_path / "good"
    good.write_bytes(DEALT.shares[0].to_file())
    names = {
        "missing": ("does not exist", Status.UNREADABLE),
        "folder": ("is a folder", Status.UNREADABLE),
        "link": ("link", Status.UNREADABLE),
        "pipe": ("pipe, device or socket", Status.UNREADABLE),
        "large": ("larger than 1,048,576 bytes", Status.UNREADABLE),
        "empty": ("not one JSON object", Status.DAMAGED),
        "record": ("it is a record", Status.UNREADABLE),
        "binary": ("not UTF-8", Status.DAMAGED),
    }
    (tmp_path / "folder").mkdir()
    (tmp_path / "link").symlink_to(good)
    os.mkfifo(tmp_path / "pipe")
    (tmp_path / "large").write_bytes(good.read_bytes().ljust(MAX_FILE + 1))
    (tmp_path / "empty").write_bytes(b"")
    (tmp_path / "record").write_bytes(DEALT.record.to_file())
    (tmp_path / "binary").write_bytes(b"\xff" * 100)
    found = load_shares([good, *(tmp_path / name for name in names), good])
    assert [one.share is not None for one in found] == [True, *[False] * len(names), True]
    for one, (name, (reason, status)) in zip(found[1:-1], names.items(), strict=True):
        assert one.source == str(tmp_path / name)
        assert reason in one.problem
        assert one.status is status


def test_a_share_of_exactly_1_mebibyte_is_read(tmp_path: Path) -> None:
    path = tmp_path / "share"
    path.write_bytes(DEALT.shares[0].to_file().ljust(MAX_FILE))
    (one,) = load_shares([path])
    assert one.share is not None
    assert one.share.is_whole()


def test_sockets_and_devices_are_not_waited_for(tmp_path: Path) -> None:
    with socket.socket(socket.AF_UNIX) as listener:
        listener.bind(str(tmp_path / "socket"))
        found = load_shares([tmp_path / "socket", "/dev/zero", "/dev/stdin", ""])
    assert [one.status for one in found] == [Status.UNREADABLE] * 4
    assert all(one.share is None and one.problem for one in found)


def test_a_record_is_read_or_refused_whole(tmp_path: Path) -> None:
    path = tmp_path / "record.json"
    with pytest.raises(StorageError, match="does not exist"):
        load_record(path)
    path.write_bytes(DEALT.record.to_file())
    assert load_record(path).fingerprint == DEALT.record.fingerprint
    path.write_bytes(DEALT.shares[0].to_file())
    with pytest.raises(DocumentError, match=f"{path}: a record is wanted here, but it is a share"):
        load_record(path)


# Wrapped ones.

NAME = "north-pier"
BY_PHRASE = WrappedShare.wrap(DEALT.shares[0], passphrase_sealer(passphrase(NAME), QUICK))


@pytest.fixture
def wrapped(tmp_path: Path) -> Path:
    path = tmp_path / "north-pier.wrapped.json"
    path.write_bytes(BY_PHRASE.to_file())
    return path


def opener(share: WrappedShare) -> Share:
    return share.open(by(NAME))


def test_a_wrapped_share_is_opened_by_what_is_handed_in(wrapped: Path, tmp_path: Path) -> None:
    bare = tmp_path / "bare"
    bare.write_bytes(DEALT.shares[1].to_file())
    first, second = load_shares([wrapped, bare], opener)
    assert first.share is not None
    assert first.share.to_file() == DEALT.shares[0].to_file()
    assert first.source == str(wrapped)
    assert second.share is not None


def test_without_anything_to_open_it_a_wrapped_share_stays_closed(wrapped: Path) -> None:
    (one,) = load_shares([wrapped])
    assert (one.share, one.status, one.problem) == (
        None,
        Status.LOCKED,
        "it is wrapped, and nothing was given to open it",
    )


@pytest.mark.parametrize(
    ("error", "status"),
    [
        (WrongKeyError("the passphrase does not open it", hint="try again"), Status.LOCKED),
        (SharesError("this machine did not give the 2,048 MiB", hint="another machine"), Status.LOCKED),
        (VerificationError("the key is right", hint="keep it"), Status.DAMAGED),
    ],
    ids=lambda value: str(value),
)
def test_a_share_that_does_not_open_is_told_and_the_others_go_on(
    wrapped: Path, tmp_path: Path, error: SharesError, status: Status
) -> None:
    good = tmp_path / "good"
    good.write_bytes(DEALT.shares[1].to_file())

    def refusing(_: WrappedShare) -> Share:
        raise error

    one, two = load_shares([wrapped, good], refusing)
    assert (one.share, one.status, one.problem) == (None, status, f"{error.what} ({error.hint})")
    assert two.share is not None


@pytest.mark.parametrize(
    "error",
    [StorageError("does not exist", where="the.passphrase"), ParameterError("the passphrase is empty", where="it")],
    ids=lambda error: type(error).__name__,
)
def test_a_passphrase_that_cannot_be_read_is_no_finding_about_a_share(wrapped: Path, error: SharesError) -> None:
    """Once the share was called unreadable, and nobody could see that the passphrase file was missing."""

    def refusing(_: WrappedShare) -> Share:
        raise error

    with pytest.raises(type(error)) as refusal:
        load_shares([wrapped], refusing)
    assert refusal.value is error


def test_what_is_found_of_damaged_and_locked_ones(wrapped: Path, tmp_path: Path) -> None:
    """With a real opener: damage in the file, behind a digest that fits, another passphrase, another way."""
    damaged = edited(BY_PHRASE.to_file(), "epoch", to=2)
    forged = BY_PHRASE.model_copy(update={"epoch": 2}).with_digest()
    other = WrappedShare.wrap(DEALT.shares[1], passphrase_sealer(passphrase("south-pier"), QUICK))
    for_card = WrappedShare.wrap(DEALT.shares[2], card_sealer(card("light-house").recipient()))
    files = {
        "damaged": (file_of(damaged), Status.DAMAGED, "its own digest does not fit"),
        "forged": (forged.to_file(), Status.DAMAGED, "the key is right, but"),
        "other": (other.to_file(), Status.LOCKED, "the passphrase does not open it"),
        "unreadable": (BY_PHRASE.to_file()[:-3], Status.DAMAGED, "not one JSON object"),
        "costly": (
            file_of(edited(BY_PHRASE.to_file(), "wrapping", "memory", to=1 << 22)),
            Status.DAMAGED,
            "memory",
        ),
    }
    for name, (data, _, _) in files.items():
        (tmp_path / name).write_bytes(data)
    for one, (_, status, reason) in zip(
        load_shares([tmp_path / name for name in files], opener), files.values(), strict=True
    ):
        assert (one.share, one.status) == (None, status)
        assert reason in one.problem
    (tmp_path / "card").write_bytes(for_card.to_file())
    with unlocked("light-house") as key:
        (one,) = load_shares([tmp_path / "card"], lambda share: share.open(key.open))
    assert one.share is not None


def test_a_share_is_read_wrapped_or_not_and_nothing_else_is() -> None:
    assert isinstance(parse_share(BY_PHRASE.to_file(), where="x"), WrappedShare)
    assert isinstance(parse_share(DEALT.shares[0].to_file(), where="x"), Share)
    for other in (DEALT.record.to_file(), card(NAME).to_file(), json.dumps({"kind": []}).encode()):
        with pytest.raises(DocumentError, match="x: a share is wanted here, but"):
            parse_share(other, where="x")
