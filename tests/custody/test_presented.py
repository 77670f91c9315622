"""Shares as they are given: what cannot be read is named, and the rest goes on.

Checked against: open(2) and the files made here.
"""

from __future__ import annotations

import os
import socket
from pathlib import Path

import pytest
from strategies import crooked_split, flat

from shares.custody.presented import Status, load_record, load_shares
from shares.documents.base import MAX_FILE
from shares.errors import DocumentError, StorageError

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
        "record": ("it is a record", Status.DAMAGED),
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
