"""What a task is about, found in the bytes; and nothing where there is none."""

from __future__ import annotations

import hashlib
from pathlib import Path

from keys.joining import task as joining
from keys.openings import Quorum, asked, message_of

from shares.keys.about import about
from shares.keys.description import in_groups
from shares.keys.opening import cautions_of


def test_of_a_message_the_digest_and_the_cautions_are_told(tmp_path: Path) -> None:
    quorum = Quorum(tmp_path)
    message = message_of(quorum)
    task = quorum.task(message)
    told = about(task, quorum.record, message)
    assert told is not None
    assert told.kind == "a message that is encrypted to the key"
    assert told.lines[1] == f"SHA-256: {in_groups(hashlib.sha256(message).digest())}"
    assert told.cautions == cautions_of(task.work)
    said = quorum.part(task, "north-pier").prospect(1, asked(task, message))
    assert [line for line in said if line.startswith("Caution: ")] == [f"Caution: {one}" for one in told.cautions]
    assert about(task, quorum.record, None) is None


def test_of_a_key_that_is_being_born_nothing_is_told() -> None:
    assert about(joining(), None, None) is None
