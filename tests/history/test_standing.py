"""What a party says besides, later, too late or to somebody else stops no task that can do without it.

Checked against: nothing outside; the rule is this project's own (shares/documents/FORMAT_KEYS.md, sec. 24).
"""

from __future__ import annotations

from collections.abc import Collection, Sequence
from datetime import timedelta
from pathlib import Path

import pytest
from history.exchanging import DUE, MADE, NAMES, Desk, Draw, desks, exchange
from parties import unlocked

from shares.documents.task_message import Body, Complaint, OpeningKey, Review, TaskMessage
from shares.errors import VerificationError
from shares.history.rounds import Inbox
from shares.history.standing import Standing

LIGHT = "light-house"
NOTHING = Review(what="review", complaints=())
SOMETHING = Review(what="review", complaints=(Complaint(against=LIGHT, reason="00"),))


class Sparing(Draw):
    """A draw of which one sum may be missing."""

    def spares(self, names: Collection[str]) -> bool:
        return len(names) < 2


class OnlyTwo(Draw):
    """A draw whose last round is not everybody's."""

    def speakers(self, round: int, inbox: Inbox) -> Sequence[str]:
        return inbox.task.names[:2] if round == 2 else inbox.task.names


def put(desk: Desk, round: int, body: Body, *, seen: bytes | None = None, minute: int = 0, late: bool = False) -> None:
    """Add to a folder something that light-house has signed."""
    task, here = desk.own().task, desk.standing().inbox
    with unlocked(LIGHT) as key:
        message = TaskMessage.signed_by(
            key,
            task=task.digest(),
            round=round,
            sender=LIGHT,
            seen=here.seen(round) if seen is None else seen,
            body=body,
            created=DUE + timedelta(seconds=1) if late else MADE + timedelta(minutes=minute),
        )
    (desk.messages / f"put {round} {minute} {late} {seen is None}.json").write_bytes(message.to_file())


def played(root: Path, rounds: int, course: Draw | None = None, silent: str | None = None) -> dict[str, Desk]:
    """Machines that have gone through so many rounds; in the last of them one may be silent."""
    machines = desks(root)
    for round in range(rounds):
        for desk in machines.values():
            desk.course = course or desk.course
            if (desk.name, round) != (silent, rounds - 1):
                desk.take()
        exchange(machines)
    return machines


def kinds(found: Standing) -> set[tuple[str, str | None, bool]]:
    return {(one.kind, one.sender, one.stops) for one in found.problems}


SURPLUS = {
    "what does not hold": {"body": NOTHING},
    "what does not belong there": {"body": OpeningKey(what="opening-key", x25519=bytes([9]) + bytes(31))},
    "an answer to something else": {"body": SOMETHING, "seen": bytes(32)},
    "what is late": {"body": SOMETHING, "late": True},
}


@pytest.mark.parametrize("more", SURPLUS.values(), ids=SURPLUS)
def test_in_the_last_round_what_holds_counts_whatever_else_was_said(tmp_path: Path, more: dict[str, object]) -> None:
    machines = played(tmp_path, 3)
    for desk in list(machines.values())[:2]:
        put(desk, 2, **more)  # type: ignore[arg-type]
        found = desk.standing()
        assert (found.complete, kinds(found)) == (True, {("conflict", LIGHT, False)})
        assert "what holds of them counts" in found.problems[0].what
        assert desk.take() == "finish"
    first, second = (desk.mine / "sums.txt" for desk in list(machines.values())[:2])
    assert first.read_bytes() == second.read_bytes()


def test_of_several_that_hold_everybody_takes_the_same(tmp_path: Path) -> None:
    machines = played(tmp_path, 3)
    taken = set()
    for desk in list(machines.values())[:2]:
        for minute in range(4):
            put(desk, 2, SOMETHING, minute=minute)
        found = desk.standing()
        assert found.complete
        assert len(found.doubled[LIGHT]) == 5
        taken.add(found.inbox.of(2)[LIGHT].digest())
    assert len(taken) == 1


@pytest.mark.parametrize("more", SURPLUS.values(), ids=SURPLUS)
@pytest.mark.parametrize("both", [False, True])
def test_what_does_not_count_stops_a_task_that_needs_it(tmp_path: Path, more: dict[str, object], both: bool) -> None:
    north = played(tmp_path, 3, silent=LIGHT)["north-pier"]
    put(north, 2, **more)  # type: ignore[arg-type]
    if both:
        put(north, 2, NOTHING, minute=1)
    found = north.standing()
    assert found.failure is not None
    assert north.take() == "failed"
    # And no longer, once what is needed is there.
    for path in north.messages.glob("put*"):
        path.unlink()
    assert north.take() == "wait"


@pytest.mark.parametrize("more", list(SURPLUS.values())[2:], ids=list(SURPLUS)[2:])
def test_where_one_may_be_missing_what_does_not_count_stops_nothing(tmp_path: Path, more: dict[str, object]) -> None:
    north = played(tmp_path, 3, Sparing(), silent=LIGHT)["north-pier"]
    put(north, 2, **more)  # type: ignore[arg-type]
    found = north.standing()
    assert (found.failure, found.awaited, found.round) == (None, (), 3)
    assert [(sender, stops) for _, sender, stops in kinds(found)] == [(LIGHT, False)]
    put(north, 2, NOTHING, minute=1)
    put(north, 2, NOTHING, minute=2)
    assert north.standing().failure is None


@pytest.mark.parametrize("round", [0, 1])
def test_what_nobody_has_answered_stops_no_task_that_is_complete(tmp_path: Path, round: int) -> None:
    machines = played(tmp_path, 3)
    for desk in list(machines.values())[:2]:
        for minute in range(3):
            put(desk, round, OpeningKey(what="opening-key", x25519=bytes([9 + minute]) + bytes(31)), minute=minute)
        found = desk.standing()
        assert (found.complete, kinds(found)) == (True, {("conflict", LIGHT, False)})
        assert desk.take() == "finish"


def test_what_contradicts_before_the_last_round_stops_a_task_that_is_not_complete(tmp_path: Path) -> None:
    north = played(tmp_path, 2)["north-pier"]
    put(north, 1, SOMETHING)
    found = north.standing()
    assert found.failure is not None
    assert "two different messages of light-house in round 1" in found.failure.what
    assert kinds(found) == {("conflict", LIGHT, True)}
    assert north.take() == "failed"


def test_what_contradicts_in_a_round_to_come_stops_it_already(tmp_path: Path) -> None:
    north = played(tmp_path, 1, silent="south-pier")["north-pier"]
    for minute in (1, 2):
        put(north, 1, NOTHING, seen=bytes(32), minute=minute)
    found = north.standing()
    assert (found.round, found.failure is not None) == (0, True)


def test_who_has_no_turn_stops_nothing_by_saying_two_things(tmp_path: Path) -> None:
    north = played(tmp_path, 3, OnlyTwo())["north-pier"]
    for minute in (1, 2):
        put(north, 2, SOMETHING, minute=minute)
    for minute in (1, 2):
        put(north, 5, SOMETHING, minute=minute)
    found = north.standing()
    assert found.complete
    assert not any(one.stops for one in found.problems)
    assert ("out-of-turn", LIGHT, False) in kinds(found)


def test_two_who_contradict_themselves_are_told_apart_by_what_all_have_answered(tmp_path: Path) -> None:
    machines = played(tmp_path, 3)
    north = machines["north-pier"]
    with unlocked("south-pier") as key:
        here = north.standing().inbox
        for minute in range(3):
            more = TaskMessage.signed_by(
                key,
                task=here.task.digest(),
                round=1,
                sender="south-pier",
                seen=here.seen(1),
                body=NOTHING,
                created=MADE + timedelta(minutes=minute),
            )
            (north.messages / f"south {minute}.json").write_bytes(more.to_file())
    for minute in range(3):
        put(north, 1, NOTHING, minute=minute)
    assert north.standing().complete
    assert {message.digest() for message in north.standing().inbox.of(1).values()} == {
        machines[name].message(1).digest() for name in NAMES
    }


def test_a_party_whose_own_messages_differ_does_nothing_all_the_same(tmp_path: Path) -> None:
    light = played(tmp_path, 3)[LIGHT]
    put(light, 2, NOTHING)
    with pytest.raises(VerificationError, match="conflict: misbehaviour or restored state"):
        light.take()
