"""A custodian's memory: one encapsulated key serves one message, whatever stops or races the run.

Checked against: the sender's plaintext (``openings``). What a memory cannot know is tested as well, as its limit.
"""

from __future__ import annotations

import hashlib
import secrets
import shutil
from pathlib import Path

import pytest
from keys.openings import (
    PLAINTEXT,
    Quorum,
    asked,
    message_of,
    two_with_one_key,
)
from strategies import CREATED

from shares import storage
from shares.documents.opened_message import OpenedMessage
from shares.errors import (
    DocumentError,
    StorageError,
    VerificationError,
)
from shares.keys import opened as memory_of


@pytest.fixture
def quorum(tmp_path: Path) -> Quorum:
    """2 of 3."""
    return Quorum(tmp_path)


def test_a_second_ciphertext_for_one_encapsulated_key_is_refused(quorum) -> None:
    first, second = two_with_one_key(quorum)
    task, later = quorum.task(first), quorum.task(second)
    quorum.spoken(task, first, "north-pier")
    part = quorum.part(later, "north-pier")
    for act in (lambda: part.prospect(1, asked(later, second)), lambda: quorum.spoken(later, second, "north-pier")):
        with pytest.raises(VerificationError, match="served already, for another message") as refusal:
            act()
        assert "do not take part" in str(refusal.value.hint)
    # Another custodian has served neither, and knows nothing of it.
    assert quorum.spoken(later, second, "south-pier")
    with pytest.raises(VerificationError, match="served already"):
        quorum.spoken(task, first, "south-pier")


def test_the_same_message_again_is_allowed_and_said(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    part = quorum.part(task, "north-pier")
    assert not any("very message before" in line for line in part.prospect(1, asked(task, message)))
    quorum.spoken(task, message, "north-pier")
    # A run that was stopped begins again: that is no second time.
    assert not any("very message before" in line for line in part.prospect(1, asked(task, message)))
    (path,) = (quorum.folders["north-pier"] / "opened").iterdir()
    before = path.read_bytes()
    again = quorum.task(message, receiver="auditor-west")
    lines = quorum.part(again, "north-pier").prospect(1, asked(again, message))
    assert any("this very message before, for auditor-east" in line for line in lines)
    given = quorum.spoken(again, message, "north-pier", "south-pier")
    assert quorum.opened(again, message, given) == PLAINTEXT
    assert path.read_bytes() == before
    assert path.stat().st_mode & 0o777 == 0o600


def test_what_is_served_is_on_the_medium_before_it_leaves(quorum, monkeypatch) -> None:
    """A run that dies in between has served nothing and remembers: the same message goes on, another does not."""
    first, second = two_with_one_key(quorum)
    task, later = quorum.task(first), quorum.task(second)
    with monkeypatch.context() as broken:
        broken.setattr("shares.keys.opening.partial_result", lambda *_: (_ for _ in ()).throw(KeyboardInterrupt))
        with pytest.raises(KeyboardInterrupt):
            quorum.spoken(task, first, "north-pier")
    with pytest.raises(VerificationError, match="served already"):
        quorum.spoken(later, second, "north-pier")
    assert quorum.spoken(task, first, "north-pier")


def test_of_two_processes_one_is_first(quorum, monkeypatch) -> None:
    first, second = two_with_one_key(quorum)
    task, later = quorum.task(first), quorum.task(second)
    write = storage.write_new

    def after_another(path, data, *, secret) -> None:
        monkeypatch.setattr(storage, "write_new", write)
        quorum.spoken(later, second, "north-pier")
        write(path, data, secret=secret)

    monkeypatch.setattr(storage, "write_new", after_another)
    with pytest.raises(VerificationError, match="served already, for another message"):
        quorum.spoken(task, first, "north-pier")

    def after_itself(path, data, *, secret) -> None:
        monkeypatch.setattr(storage, "write_new", write)
        quorum.spoken(task, first, "south-pier")
        write(path, data, secret=secret)

    monkeypatch.setattr(storage, "write_new", after_itself)
    assert quorum.spoken(task, first, "south-pier")


def test_without_a_memory_nothing_is_served(quorum, monkeypatch) -> None:
    message = message_of(quorum)
    task = quorum.task(message)

    def full(path, data, *, secret) -> None:
        raise StorageError("the medium is full", where=str(path))

    with monkeypatch.context() as broken:
        broken.setattr(storage, "write_new", full)
        with pytest.raises(StorageError, match="full"):
            quorum.spoken(task, message, "north-pier")
    path = memory_of.file_of(quorum.folders["north-pier"], message[:32])
    served = OpenedMessage(
        kind="opened-message",
        version=1,
        key=quorum.record.key,
        encapsulated=secrets.token_bytes(32),
        content=task.work.content,
        task=task.digest(),
        receiver="auditor-east",
        time=CREATED,
    )
    for damaged, error in (
        (b"", DocumentError),
        (b"{}", DocumentError),
        (quorum.record.to_file(), DocumentError),
        (served.to_file(), VerificationError),
        (
            served.model_copy(update={"encapsulated": message[:32], "key": bytes([1] * 16)}).to_file(),
            VerificationError,
        ),
    ):
        path.write_bytes(damaged)
        with pytest.raises(error) as refusal:
            quorum.spoken(task, message, "north-pier")
        assert refusal.value.where == str(path)
    path.unlink()
    path.symlink_to("nowhere")
    with pytest.raises(StorageError):
        quorum.spoken(task, message, "north-pier")
    path.unlink()
    path.write_bytes(served.model_copy(update={"encapsulated": message[:32]}).to_file())
    assert quorum.spoken(task, message, "north-pier")
    assert OpenedMessage.parse(path.read_bytes()).to_file() == path.read_bytes()


def test_a_restored_folder_has_forgotten(quorum) -> None:
    """Not a promise but its limit, which the format page states."""
    first, second = two_with_one_key(quorum)
    task, later = quorum.task(first), quorum.task(second)
    quorum.spoken(task, first, "north-pier")
    shutil.rmtree(quorum.folders["north-pier"])
    assert quorum.spoken(later, second, "north-pier")


def test_the_golden_sample_is_read_for_ever() -> None:
    """Written by hand from the format page: name, members and bytes."""
    (path,) = (Path(__file__).parents[1] / "vectors/golden/v1/opened").iterdir()
    remembered = OpenedMessage.parse(path.read_bytes())
    assert path.name == f"{hashlib.sha256(remembered.encapsulated).hexdigest()}.json"
    assert path.name == memory_of.file_of(Path(), remembered.encapsulated).name
    assert (remembered.content.size, remembered.receiver, remembered.time) == (84, "auditor-east", CREATED)
    assert remembered.to_file() == path.read_bytes()
