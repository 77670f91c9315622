"""What a task is about, found in the bytes; and nothing where there is none."""

from __future__ import annotations

import hashlib
from pathlib import Path

from keys.joining import task as joining
from keys.openings import Quorum, asked, message_of
from keys.played import KEY, START, a_root, after
from keys.quorum import a_task, dealt, named

from shares.keys.about import about
from shares.keys.content import described
from shares.keys.description import in_groups
from shares.keys.forms import signable
from shares.keys.opening import cautions_of
from shares.keys.revocation import Revoked, revocation_list


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


def test_of_a_revocation_list_the_same_is_told_as_to_its_signers(tmp_path: Path) -> None:
    """Whoever reads this page and then agrees unasked has read what the signers are shown."""
    key, above = dealt(), a_root()
    listed = revocation_list(
        KEY, [Revoked(77, START)], issuer=above, this_update=START, next_update=after(30), number=1
    )
    task = a_task(key, content=listed, form="revocation-list", issuer=named(above))
    told = about(task, key.record, listed, issuer=above)
    assert told is not None
    assert told == signable(task, listed, above, None).described(key.record.public_key.encode())
    assert any("continues no earlier list" in one for one in told.cautions)
    assert any("checked by the certificate of its issuer" in one for one in told.lines)
    assert about(task, key.record, listed, issuer=listed) == described(listed, key.record.public_key.encode())


def test_of_a_key_that_is_being_born_nothing_is_told() -> None:
    assert about(joining(), None, None) is None
