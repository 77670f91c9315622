"""Joint generation as it is really done: a folder a party, messages sealed, signed, stored and carried.

Source: FORMAT_KEYS.md, sec. 24 to 27; the resulting key is worked out by the integers of ``curve`` (RFC 8032).
"""

from __future__ import annotations

import dataclasses
from datetime import timedelta
from pathlib import Path

import pytest
from history.exchanging import Desk, exchange, to_the_end
from keys.joining import interpolated, key, public_half, task
from keys.test_joint_cheats import NAMES, NORTH, SOUTH

from shares.documents.key_event import Approved
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.task import Task
from shares.documents.task_message import Accusation, Answer, Complaint, Confirmation, Review, TaskMessage
from shares.history.exchange import TaskFolder
from shares.history.journal import read_journal
from shares.history.rounds import Inbox, Received, Said
from shares.keys.generation import Dealt
from shares.keys.joint import JointCourse, JointPart
from shares.memory import Secret


def desks(root: Path, made: Task, parts: dict[str, JointPart] | None = None) -> dict[str, Desk]:
    """A machine for each party, with nothing but the task and its own key."""
    found = {}
    for name in made.names:
        part = (parts or {}).get(name) or JointPart(made, name, key(name))
        desk = Desk(root / name, name, part, JointCourse(made))  # type: ignore[arg-type]
        desk.mine.mkdir(parents=True)
        TaskFolder.create(desk.folder, made)
        found[name] = desk
    return found


def test_five_folders_and_one_key(tmp_path: Path) -> None:
    machines = desks(tmp_path, task())
    to_the_end(machines)
    records = {(desk.mine / "record.json").read_bytes() for desk in machines.values()}
    assert len(records) == 1
    record = KeyRecord.parse(records.pop())
    assert record.is_confirmed()
    assert not list(machines[NORTH].messages.glob("3-*"))
    shares = {}
    for x, (name, desk) in enumerate(machines.items(), 1):
        share = KeyShare.parse((desk.mine / "share.json").read_bytes())
        assert (share.custodian, share.index, share.record) == (name, x, record.fingerprint)
        shares[x] = int.from_bytes(share.open(key(name).open).encode(), "little")
        events = [entry.event.what for entry in read_journal((desk.mine / "journal.jsonl").read_bytes()).entries]
        assert events == ["approved", "approved", "key-born"]
        second = read_journal((desk.mine / "journal.jsonl").read_bytes()).entries[1].event
        assert isinstance(second, Approved)
        assert record.fingerprint in second.summary
    assert public_half(interpolated({x: shares[x] for x in (1, 3, 5)})) == record.public_key.encode()
    kept = b"".join(path.read_bytes() for path in sorted(tmp_path.rglob("*.json*")))
    assert not any(form in kept for share in shares.values() for form in _forms(share))


def _forms(share: int) -> list[bytes]:
    octets = share.to_bytes(32, "little")
    return [octets, octets.hex().encode(), str(share).encode()]


class Crooked(JointPart):
    """Deals to one party what it has not committed to, and shows the same again."""

    def speak(self, round: int, inbox: Inbox, state: Secret, received: list[Received]) -> Said:  # type: ignore[override]
        said = super().speak(round, inbox, state, received)
        if round != 1:
            return said
        wrong = Dealt.decode(said.sealed[SOUTH])
        return dataclasses.replace(said, sealed={**said.sealed, SOUTH: Dealt(wrong.blind, wrong.share).encode()})


class Stubborn(Crooked):
    def speak(self, round: int, inbox: Inbox, state: Secret, received: list[Received]) -> Said:  # type: ignore[override]
        said = super().speak(round, inbox, state, received)
        if round != 3:
            return said
        shown = tuple(one.model_copy(update={"share": one.blind, "blind": one.share}) for one in said.body.shares)  # type: ignore[union-attr]
        return dataclasses.replace(said, body=said.body.model_copy(update={"shares": shown}))


def test_a_complaint_goes_through_folders_too(tmp_path: Path) -> None:
    made = task()
    machines = desks(tmp_path, made, {NORTH: Crooked(made, NORTH, key(NORTH))})
    to_the_end(machines)
    assert [path.name for path in machines[SOUTH].messages.glob("3-*")] == [f"3-{NORTH}.json"]
    assert len({(desk.mine / "record.json").read_bytes() for desk in machines.values()}) == 1


def test_who_insists_on_a_wrong_dealing_is_named_and_nothing_is_written(tmp_path: Path) -> None:
    made = task()
    machines = desks(tmp_path, made, {NORTH: Stubborn(made, NORTH, key(NORTH))})
    for _ in range(6):
        for desk in machines.values():
            desk.take()
        exchange(machines)
    for name in NAMES:
        failure = machines[name].standing().failure
        assert failure is not None
        assert failure.by == NORTH
        assert machines[name].turn().doing == "failed"
        assert not (machines[name].mine / "record.json").exists()


def test_who_confirms_to_some_and_accuses_to_others_takes_the_key_from_nobody(tmp_path: Path) -> None:
    machines = desks(tmp_path, task(2, 3))
    north, south, light = machines.values()
    for _ in range(4):
        for desk in machines.values():
            desk.take()
        exchange(machines)
    for desk in machines.values():
        desk.take()
    north.send(south)
    light.send(north)
    south.send(north)
    assert north.take() == "finish"
    good = light.message(5)
    for number in range(8):
        false = TaskMessage.signed_by(
            key(light.name),
            task=good.task,
            round=5,
            sender=light.name,
            seen=good.seen,
            body=Accusation(what="accusation", against=NORTH, reason=f"lie {number}", share=None, blind=None),
        )
        (south.messages / f"accusation {number}.json").write_bytes(false.to_file())
        assert south.take() == "failed"
    assert south.take() == "failed"
    assert not (south.mine / "share.json").exists()
    # With what others were sent, the key is born here as well: the same one.
    light.send(south)
    found = south.standing()
    assert [(one.kind, one.sender, one.stops) for one in found.problems] == [("conflict", light.name, False)]
    assert south.take() == "finish"
    assert (south.mine / "record.json").read_bytes() == (north.mine / "record.json").read_bytes()
    assert (south.mine / "share.json").exists()


def test_a_dealing_that_is_sent_when_all_is_over_takes_the_key_from_nobody(tmp_path: Path) -> None:
    machines = desks(tmp_path, task(2, 3))
    north, _, light = machines.values()
    for _ in range(5):
        for desk in machines.values():
            desk.take()
        exchange(machines)
    dealt = light.message(1)
    again = TaskMessage.signed_by(
        key(light.name), task=dealt.task, round=1, sender=light.name, seen=dealt.seen, body=dealt.body
    )
    (north.messages / "dealing.json").write_bytes(again.to_file())
    assert north.take() == "finish"


def test_a_second_review_and_its_answers_take_the_key_from_nobody(tmp_path: Path) -> None:
    """A cheat who was complained of makes other complaints for one party alone, and answers them as well."""
    made = task()
    machines = desks(tmp_path, made, {NORTH: Crooked(made, NORTH, key(NORTH))})
    for _ in range(6):
        for desk in machines.values():
            desk.take()
        exchange(machines)
    north, south, *_, other = machines.values()
    assert (other.mine / "record.json").exists() or other.take() == "finish"
    assert not (south.mine / "record.json").exists()
    reviewed, answered = north.message(2), north.message(3)
    assert isinstance(answered.body, Answer)
    before = south.standing().inbox
    for number in range(12):  # Whatever order they come in, by their digests: some before what all have answered.
        review = signed(
            reviewed, Review(what="review", complaints=(Complaint(against="dry-dock", reason=str(number)),))
        )
        dock = Inbox(made, (*before.rounds[:2], {**before.of(2), NORTH: review}))
        answer = signed(answered, answered.body, dock.seen(3))
        for name, message in (("review", review), ("answer", answer)):
            (south.messages / f"{name} {number}.json").write_bytes(message.to_file())
    harmless = Review(what="review", complaints=())
    for number in range(4):
        review = signed(reviewed, harmless, minute=number)
        other_view = Inbox(made, (*before.rounds[:2], {**before.of(2), NORTH: review})).seen(3)
        for name, message in (("review", review), ("answer", signed(answered, answered.body, other_view))):
            (south.messages / f"{name} without {number}.json").write_bytes(message.to_file())
    found = south.standing()
    assert (found.failure, found.complete) == (None, True)
    assert [(one.kind, one.sender, one.stops, one.round) for one in found.problems] == [
        ("conflict", NORTH, False, 2),
        ("conflict", NORTH, False, 3),
    ]
    assert south.take() == "finish"
    assert (south.mine / "record.json").read_bytes() == (other.mine / "record.json").read_bytes()


def signed(like: TaskMessage, body: object, seen: bytes | None = None, minute: int = 0) -> TaskMessage:
    """Another message by the sender of this one, in its round."""
    return TaskMessage.signed_by(
        key(like.sender),
        task=like.task,
        round=like.round,
        sender=like.sender,
        seen=like.seen if seen is None else seen,
        body=body,  # type: ignore[arg-type]
        created=like.created + timedelta(minutes=minute),
    )


LIES = {
    "a false accusation": Accusation(what="accusation", against=SOUTH, reason="a lie", share=None, blind=None),
    "of itself": Accusation(what="accusation", against=NORTH, reason="a lie", share=None, blind=None),
    "what does not belong there": Review(what="review", complaints=()),
}


@pytest.mark.parametrize("lie", LIES.values(), ids=LIES)
@pytest.mark.parametrize("beside", [False, True])
def test_whose_last_message_breaks_the_rules_is_named_whatever_else_it_says_that_it_has_seen(
    tmp_path: Path, lie: object, beside: bool
) -> None:
    south, good = up_to_the_last(tmp_path)
    right = lie is LIES["a false accusation"]  # Of what was said here, only who has seen it can say what is false.
    (south.messages / "lie.json").write_bytes(signed(good, lie, None if right else bytes(32)).to_file())
    if beside or right:
        (south.messages / "beside.json").write_bytes(signed(good, good.body, bytes(32)).to_file())
    found = south.standing()
    assert found.failure is not None
    assert (found.failure.by, NORTH in found.failure.what, found.complete) == (NORTH, True, False)
    # With what it told the others the key is born all the same.
    (south.messages / "good.json").write_bytes(good.to_file())
    assert south.standing().complete


def test_who_has_signed_for_another_is_named_whatever_it_says_that_it_has_seen(tmp_path: Path) -> None:
    south, good = up_to_the_last(tmp_path)
    for theirs in south.messages.glob("5-*"):
        body = TaskMessage.parse(theirs.read_bytes()).body
        assert isinstance(body, Confirmation)
        (south.messages / "lie.json").write_bytes(signed(good, body, bytes(32)).to_file())
        failure = south.standing().failure
        assert failure is not None
        assert failure.by == NORTH


def test_nobody_is_blamed_for_what_they_say_of_messages_that_are_not_here(tmp_path: Path) -> None:
    """Somebody else may have shown them to its sender: of that alone nobody can tell."""
    south, good = up_to_the_last(tmp_path)
    for number, body in enumerate((good.body, LIES["a false accusation"])):
        (south.messages / f"lie {number}.json").write_bytes(signed(good, body, bytes(32)).to_file())
        failure = south.standing().failure
        assert failure is not None
        assert failure.by is None
        assert NORTH in failure.what


def test_of_a_first_message_nobody_else_can_have_shown_anything(tmp_path: Path) -> None:
    machines = desks(tmp_path, task(2, 3))
    north, south, _ = machines.values()
    north.take()
    good = north.message(0)
    (south.messages / "lie.json").write_bytes(signed(good, good.body, bytes(32)).to_file())
    failure = south.standing().failure
    assert failure is not None
    assert (failure.by, "none come before it" in failure.what) == (NORTH, True)


def up_to_the_last(root: Path) -> tuple[Desk, TaskMessage]:
    """South-pier's machine, where all but north-pier have confirmed, and how that one has."""
    machines = desks(root, task(2, 3))
    north, south, _ = machines.values()
    for _ in range(5):
        for desk in machines.values():
            desk.take()
        exchange(machines)
    if not list(north.messages.glob("5-north*")):
        for desk in machines.values():
            desk.take()
        exchange(machines)
    good = north.message(5)
    for path in south.messages.glob(f"5-{NORTH}*"):
        path.unlink()
    return south, good
