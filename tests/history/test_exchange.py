"""A task's folder: what counts of the messages in it, and what is wrong with the others, named and never followed.

Checked against: nothing outside; what is to be named is this project's own (shares/documents/FORMAT_KEYS.md, sec. 24).
Hostile files: symlink(7), mkfifo(3), and JSON that is huge or deep.
"""

from __future__ import annotations

import hashlib
import json
import os
import secrets
import shutil
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any
from unittest import mock

import pytest
from history.exchanging import MADE, NAMES, Draw, desks, new_task
from parties import card, unlocked

from shares.documents.key_event import MAX_CONTENT, Content
from shares.documents.key_record import Holder, KeyRecord
from shares.documents.task import Opening, Signing, Task
from shares.documents.task_message import OpeningKey, TaskMessage
from shares.errors import DocumentError, ParameterError, StorageError, VerificationError
from shares.group.edwards25519 import BASE, Scalar
from shares.history import exchange as exchange_module
from shares.history.exchange import MAX_ALL, MAX_MESSAGE, MAX_MESSAGES, MAX_STRAY, TaskFolder
from shares.history.rounds import Inbox
from shares.history.standing import standing


def said(name: str, task: Task, *, by: str | None = None, **changes: Any) -> TaskMessage:
    """A message of round 0, signed by its sender or by somebody else."""
    members: dict[str, Any] = {
        "task": task.digest(),
        "round": 0,
        "sender": name,
        "seen": Inbox(task, ()).seen(0),
        "body": OpeningKey(what="opening-key", x25519=b"\x09" + bytes(31)),
    }
    with unlocked(by or name) as key:
        return TaskMessage.signed_by(key, **{**members, **changes})


@pytest.fixture
def folder(tmp_path: Path) -> TaskFolder:
    return TaskFolder.create(tmp_path / "task", new_task())


def put(folder: TaskFolder, name: str, data: bytes | TaskMessage) -> Path:
    path = folder.path / "messages" / name
    path.write_bytes(data if isinstance(data, bytes) else data.to_file())
    return path


def problems(folder: TaskFolder) -> list[tuple[str, str | None]]:
    return [(one.kind, one.sender) for one in folder.read().problems]


def counted(folder: TaskFolder) -> list[tuple[int, str]]:
    return [(round, name) for round, said in enumerate(folder.read().inbox.rounds) for name in said]


def test_a_message_counts_under_any_name_and_once(folder: TaskFolder) -> None:
    message = said("north-pier", folder.task)
    for name in ("0-north-pier.json", "copy of 0-north-pier (2).json", "ÄÖ.json"):
        put(folder, name, message)
    put(folder, "as one line.json", json.dumps(json.loads(message.to_file())).encode())
    put(folder, "read me.txt", b"not a message, and not said to be one")
    assert (problems(folder), counted(folder)) == ([], [(0, "north-pier")])


def test_each_thing_that_is_wrong_is_named(folder: TaskFolder) -> None:
    task = folder.task
    put(folder, "a.json", b"{}")
    put(folder, "b.json", said("north-pier", new_task()))
    put(folder, "c.json", said("registrar", task))
    put(folder, "d.json", said("south-pier", task, by="north-pier"))
    put(folder, "e.json", said("light-house", task, created=task.due + timedelta(seconds=1)))
    put(folder, "f.json", task.to_file())
    found = [(one.kind, one.sender, one.stops, one.what.split(":")[0]) for one in folder.read().problems]
    assert found == [
        ("unreadable", None, False, "a.json"),
        ("foreign", None, False, "b.json"),
        ("stranger", None, False, "c.json"),
        ("signature", "south-pier", False, "d.json"),
        ("unreadable", None, False, "f.json"),
        ("late", "light-house", True, "light-house's message of round 0 is late"),
    ]
    assert counted(folder) == []


def test_at_the_due_second_it_is_not_late(folder: TaskFolder) -> None:
    put(folder, "a.json", said("light-house", folder.task, created=folder.task.due))
    assert (problems(folder), counted(folder)) == ([], [(0, "light-house")])


def test_two_different_messages_are_a_conflict_and_both_are_kept(folder: TaskFolder) -> None:
    one, other = (said("north-pier", folder.task, created=datetime(2026, 12, 1, 8, i, tzinfo=UTC)) for i in (1, 2))
    assert folder.release(one).name == "0-north-pier.json"
    assert folder.release(other).name == "0-north-pier-2.json"
    assert folder.release(one).name == "0-north-pier.json"
    (problem,) = folder.read().problems
    assert (problem.kind, problem.sender, problem.stops) == ("conflict", "north-pier", True)
    assert "conflict: misbehaviour or restored state" in problem.what
    assert counted(folder) == []
    assert len(folder.read().signed) == 2


def test_a_conflict_is_one_whatever_else_is_wrong_with_one_of_them(folder: TaskFolder) -> None:
    folder.release(said("north-pier", folder.task))
    folder.release(said("north-pier", folder.task, created=folder.task.due + timedelta(days=1)))
    assert problems(folder) == [("conflict", "north-pier")]


def test_every_byte_of_a_message_counts(folder: TaskFolder) -> None:
    message = said("north-pier", folder.task, created=datetime(2026, 12, 1, 8, tzinfo=UTC))
    data = message.to_file()
    path = put(folder, "a.json", data)
    kept = 0
    for i in range(len(data)):
        for changed in (data[i] ^ 0x01,):
            path.write_bytes(data[:i] + bytes([changed]) + data[i + 1 :])
            reading = folder.read()
            (said_now,) = reading.signed or (None,)
            if said_now is None:
                assert len(reading.problems) == 1, (i, changed)
            else:
                # Another way to write the same members: white space, a letter as an escape.
                assert said_now == message, (i, changed)
                kept += 1
    assert kept < len(data) // 4


def test_messages_of_rounds_in_which_nobody_or_somebody_else_speaks(tmp_path: Path) -> None:
    class OnlyNorth(Draw):
        def speakers(self, round: int, inbox: Any) -> Any:
            return ("north-pier",) if round == 0 else super().speakers(round, inbox)

    desk = desks(tmp_path)["north-pier"]
    folder = TaskFolder(desk.folder)
    folder.release(said("south-pier", folder.task))
    folder.release(said("light-house", folder.task, round=7))
    found = standing(OnlyNorth(), folder.read())
    assert [(one.kind, one.sender, one.stops) for one in found.problems] == [
        ("out-of-turn", "south-pier", False),
        ("out-of-turn", "light-house", False),
    ]
    assert (found.round, found.awaited, found.failure) == (0, ("north-pier",), None)
    assert found.inbox.of(0) == {}
    folder.release(said("north-pier", folder.task))
    # What others have to see is the same with and without such a message.
    assert len(standing(OnlyNorth(), folder.read()).inbox.of(0)) == 1


def test_hostile_files_are_named_and_never_followed(folder: TaskFolder, tmp_path: Path) -> None:
    messages = folder.path / "messages"
    outside = tmp_path / "outside.json"
    outside.write_bytes(said("north-pier", folder.task).to_file())
    (messages / "link.json").symlink_to(outside)
    (messages / "dangling.json").symlink_to(tmp_path / "nothing")
    os.mkfifo(messages / "pipe.json")
    (messages / "folder.json").mkdir()
    put(folder, "huge.json", b" " * (MAX_MESSAGE + 1))
    put(folder, "deep.json", b"[" * (MAX_MESSAGE // 2))
    put(folder, "deep-object.json", b'{"a":' * 20_000)
    put(folder, "number.json", b'{"a":' + b"9" * 10_000 + b"}")
    put(folder, "twice.json", b'{"kind":"task-message","kind":"task-message"}')
    put(folder, "empty.json", b"")
    put(folder, "not text.json", bytes(range(256)))
    put(folder, "\x1b[31mred.json", b"{}")
    put(folder, os.fsdecode(b"\xff\xfe.json"), b"{}")
    reading = folder.read()
    assert {one.kind for one in reading.problems} == {"unreadable"}
    assert len(reading.problems) == 13
    assert all(one.what.isprintable() for one in reading.problems)
    assert reading.signed == ()


def test_a_flood_of_files_is_refused(folder: TaskFolder) -> None:
    for i in range(MAX_MESSAGES + 1):
        put(folder, f"{i}.json", b"")
    with pytest.raises(StorageError, match="holds more than"):
        folder.read()


def test_a_flood_of_files_that_are_no_messages_is_refused_before_all_are_read(folder: TaskFolder) -> None:
    folder.release(said("north-pier", folder.task))
    for i in range(MAX_STRAY):
        put(folder, f"{i}.json", b"{}" if i % 2 else said("north-pier", new_task()))
    assert len(folder.read().problems) == MAX_STRAY
    put(folder, "x.json", b"{}")
    with mock.patch.object(TaskMessage, "parse", side_effect=TaskMessage.parse) as parse:
        with pytest.raises(StorageError, match=f"more than {MAX_STRAY} files that are no messages of this task"):
            folder.read()
        assert parse.call_count <= MAX_STRAY + 2


def test_a_flood_of_large_files_is_refused_before_any_is_read(folder: TaskFolder) -> None:
    for i in range(MAX_ALL // MAX_MESSAGE + 1):
        with (folder.path / "messages" / f"{i}.json").open("wb") as sparse:
            sparse.truncate(MAX_MESSAGE if i else 1)
    with mock.patch.object(TaskMessage, "parse", side_effect=TaskMessage.parse) as parse:
        with pytest.raises(StorageError, match="holds more than 32 MiB"):
            folder.read()
        assert parse.call_count == 0


def test_where_another_run_sends_the_same_message_just_now_it_is_sent_once(folder: TaskFolder) -> None:
    message, real = said("north-pier", folder.task), exchange_module.write_new

    def slow(path: Path, data: bytes, *, secret: bool) -> None:
        real(path, data, secret=secret)  # The other run.
        real(path, data, secret=secret)

    with mock.patch.object(exchange_module, "write_new", slow):
        assert folder.release(message).name == "0-north-pier.json"
    assert len(list((folder.path / "messages").iterdir())) == 1


def test_a_link_in_the_place_of_the_messages_is_not_followed(folder: TaskFolder, tmp_path: Path) -> None:
    messages = folder.path / "messages"
    messages.rename(tmp_path / "elsewhere")
    assert folder.read().problems == ()
    messages.symlink_to(tmp_path / "elsewhere")
    with pytest.raises(StorageError, match="link or file"):
        folder.read()
    with pytest.raises(StorageError, match="link or file"):
        folder.release(said("north-pier", folder.task))
    assert list((tmp_path / "elsewhere").iterdir()) == []
    messages.unlink()
    messages.write_bytes(b"")
    with pytest.raises(StorageError, match="link or file"):
        folder.read()


def test_what_a_stopped_run_left_is_named(folder: TaskFolder) -> None:
    put(folder, f".0-north-pier.json.{secrets.token_hex(8)}.partial", b"{")
    assert problems(folder) == [("leftover", None)]
    assert not folder.read().problems[0].stops


def test_no_member_of_a_task_can_be_changed(folder: TaskFolder) -> None:
    path = folder.path / "task.json"
    members = json.loads(path.read_bytes())
    changes = {
        "label": "Another draw",
        "epoch": 2,
        "remark": "hurry",
        "nonce": "00" * 32,
        "due": "2027-01-01T00:00:00Z",
        "work": {"what": "join", "need": 3},
        "parties": members["parties"][:2],
        "author": json.loads(card("north-pier").to_file()),
    }
    for name, value in changes.items():
        assert members[name] != value
        path.write_text(json.dumps({**members, name: value}))
        with pytest.raises(DocumentError, match="signature does not fit"):
            TaskFolder(folder.path)


def test_a_task_that_the_author_signed_anew_has_other_messages(folder: TaskFolder) -> None:
    folder.release(said("north-pier", folder.task))
    (folder.path / "task.json").unlink()
    (folder.path / "task.json").write_bytes(new_task().to_file())
    assert problems(TaskFolder(folder.path)) == [("foreign", None)]


CONTENT = b"what is to be opened, as it came"


def key_record(*, label: str = "Harbour key") -> KeyRecord:
    """The record of a key whose polynomial everybody knows."""
    commitments = [Scalar.of(number) * BASE for number in (4711, 2)]
    holders = [Holder(name=name, index=i, card=card(name)) for i, name in enumerate(NAMES, start=1)]
    return KeyRecord.of(
        key=bytes(16), label=label, created=MADE, origin="dealt", custodians=holders, commitments=commitments
    )


def letter(record: KeyRecord, content: bytes = CONTENT) -> Task:
    """A task about a file."""
    work = Opening(
        what="open",
        receiver="north-pier",
        encapsulated=bytes(32),
        content=Content(size=len(content), digest=hashlib.sha256(content).digest()),
        cipher="aes-256-gcm",
        info=None,
        associated=None,
    )
    return new_task(work=work, record=record.fingerprint)


def test_content_is_exactly_what_the_task_names(tmp_path: Path) -> None:
    record = key_record()
    folder = TaskFolder.create(tmp_path / "task", letter(record), content=CONTENT, record=record)
    assert (folder.record, folder.content()) == (record, CONTENT)
    path = folder.path / "content"
    for wrong in (b"", CONTENT[:-1], CONTENT + b"!", bytes(len(CONTENT))):
        path.write_bytes(wrong)
        with pytest.raises(VerificationError, match="it is not what the task is about"):
            folder.content()
        assert [(one.kind, one.stops) for one in folder.read().problems] == [("content", True)]
        assert folder.read().inbox.content is None
    path.unlink()
    with pytest.raises(StorageError, match="does not exist"):
        folder.content()
    assert problems(folder) == [("content", None)]
    with path.open("wb") as sparse:
        sparse.truncate(MAX_CONTENT + 1)
    with pytest.raises(StorageError, match="is larger than"):
        folder.content()
    path.unlink()
    path.symlink_to(tmp_path / "task" / "task.json")
    with pytest.raises(StorageError, match="symbolic link"):
        folder.content()


def listing(record: KeyRecord, issuer: bytes, earlier: bytes | None) -> Task:
    """A task to sign a revocation list."""

    def named(data: bytes | None) -> Content | None:
        return None if data is None else Content(size=len(data), digest=hashlib.sha256(data).digest())

    files = {"content": named(CONTENT), "issuer": named(issuer), "earlier": named(earlier)}
    work = {"what": "sign", "form": "revocation-list", "namespace": None, "commitments": (), **files}
    return new_task(work=Signing.model_validate(work), record=record.fingerprint)


def test_what_content_is_checked_by_lies_beside_the_task(tmp_path: Path) -> None:
    record = key_record()
    task = listing(record, b"issuer", b"earlier")
    files = {"content": CONTENT, "issuer": b"issuer", "earlier": b"earlier", "record": record}
    for name in ("issuer", "earlier"):
        for wrong in (None, b"another"):
            with pytest.raises(ParameterError, match=f"the file {name} is not the one that the task names"):
                TaskFolder.create(tmp_path / "task", task, **{**files, name: wrong})  # type: ignore[arg-type]
    with pytest.raises(ParameterError, match="the file earlier is not"):
        TaskFolder.create(tmp_path / "task", listing(record, b"issuer", None), **files)  # type: ignore[arg-type]
    assert not (tmp_path / "task").exists()
    folder = TaskFolder.create(tmp_path / "task", task, **files)  # type: ignore[arg-type]
    for name in ("issuer", "earlier"):
        assert folder.beside(name) == name.encode() == (folder.path / name).read_bytes()
        (folder.path / name).write_bytes(b"another")
        with pytest.raises(VerificationError, match=f"it is not the {name} that the task names"):
            folder.beside(name)
        (folder.path / name).unlink()
        with pytest.raises(StorageError, match="does not exist"):
            folder.beside(name)
    first = TaskFolder.create(tmp_path / "first", listing(record, b"issuer", None), **{**files, "earlier": None})  # type: ignore[arg-type]
    (first.path / "earlier").write_bytes(b"what the task does not name is not looked at")
    assert first.beside("earlier") is None


def test_the_record_is_the_one_that_the_task_names(tmp_path: Path) -> None:
    record = key_record()
    folder = TaskFolder.create(tmp_path / "task", letter(record), content=CONTENT, record=record)
    path = folder.path / "record.json"
    path.write_bytes(key_record(label="Another key").to_file())
    with pytest.raises(VerificationError, match="not the record of the key that the task names"):
        TaskFolder(folder.path)
    path.unlink()
    with pytest.raises(StorageError, match="does not exist"):
        TaskFolder(folder.path)


def test_no_folder_is_made_of_what_does_not_belong_together(tmp_path: Path) -> None:
    record, other = key_record(), key_record(label="Another key")
    for task, content, beside in (
        (letter(record), CONTENT, other),
        (letter(record), CONTENT, None),
        (letter(record), None, record),
        (letter(record), CONTENT[1:], record),
        (new_task(), CONTENT, None),
        (new_task(), None, record),
    ):
        with pytest.raises(ParameterError, match="not the one that the task names"):
            TaskFolder.create(tmp_path / "task", task, content=content, record=beside)
        assert not (tmp_path / "task").exists()


def test_what_could_not_be_finished_is_not_in_the_way(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A full medium leaves nothing; what a killed run leaves is gone on from."""
    record = key_record()
    task, real = letter(record), exchange_module.write_new

    def full(path: Path, data: bytes, *, secret: bool) -> None:
        if Path(path).name == "task.json":
            raise StorageError("no space left")
        real(path, data, secret=secret)

    with monkeypatch.context() as patched:
        patched.setattr(exchange_module, "write_new", full)
        with pytest.raises(StorageError, match="no space left"):
            TaskFolder.create(tmp_path / "t", task, content=CONTENT, record=record)
    assert [path.name for path in (tmp_path / "t").iterdir()] == ["messages"]
    (tmp_path / "t" / "content").write_bytes(CONTENT)
    TaskFolder.create(tmp_path / "t", task, content=CONTENT, record=record)
    (tmp_path / "u").mkdir()
    (tmp_path / "u" / "content").write_bytes(CONTENT[1:])
    with pytest.raises(StorageError, match="exists already"):
        TaskFolder.create(tmp_path / "u", task, content=CONTENT, record=record)
    assert (tmp_path / "u" / "content").read_bytes() == CONTENT[1:]


def test_a_folder_that_holds_a_task_gets_no_other(folder: TaskFolder) -> None:
    before = (folder.path / "task.json").read_bytes()
    with pytest.raises(StorageError, match="exists already"):
        TaskFolder.create(folder.path, new_task())
    assert (folder.path / "task.json").read_bytes() == before


def test_a_folder_without_messages_has_none(folder: TaskFolder) -> None:
    shutil.rmtree(folder.path / "messages")
    assert (problems(folder), counted(folder)) == ([], [])
    assert folder.release(said("north-pier", folder.task)).exists()
    assert counted(folder) == [(0, "north-pier")]
