"""What is to be done until when, and what departures and incidents ask for.

Checked against: what trade practice asks for in each case (the module's sources), case by case.
"""

from __future__ import annotations

from datetime import timedelta
from pathlib import Path

import pytest
from kept import NAMES, OFFICE, Kept, day, policy_text
from parties import unlocked

from shares.documents.drill_report import Action
from shares.documents.event import (
    Departed,
    DrillKind,
    HandedOn,
    Incident,
    Lost,
    Recovered,
    Rehearsed,
    Resolved,
    Transcribed,
)
from shares.documents.policy import folded
from shares.evidence import tasks as module
from shares.evidence.audited import Task
from shares.evidence.drill import open_drill


@pytest.fixture
def kept(tmp_path: Path) -> Kept:
    return Kept.make(tmp_path / "set", policy_text())


def tasks(kept: Kept, at: float, kind: str) -> list[Task]:
    return [task for task in kept.audit(day(at)).tasks if task.kind == kind]


def codes(kept: Kept, at: float) -> list[str]:
    return [reason.code for reason in kept.audit(day(at)).reasons]


def departed(person: str = "keeper two", *names: str) -> Departed:
    return Departed(what="departed", person=person, custodians=names, due=day(31))


def incident(*persons: str, exposed: bool = True) -> Incident:
    return Incident(
        what="incident", custodians=("dry-dock",), persons=persons, exposed=exposed, due=day(31), remark="an open safe"
    )


def test_attestations_are_asked_for_together_where_they_are_due_together(kept: Kept) -> None:
    (task,) = tasks(kept, 1, "attestation")
    assert (task.due, task.about, task.overdue) == (day(90), NAMES, False)
    kept.answer(kept.ask(day(10)), NAMES[:2], day(11))
    early, late = tasks(kept, 100, "attestation")
    assert (early.about, early.due, early.overdue) == (NAMES[2:], day(90), True)
    assert (late.about, late.due, late.overdue) == (NAMES[:2], day(101), False)


def test_whoever_is_silent_is_named_until_they_answer_or_are_asked_anew(kept: Kept) -> None:
    first = kept.ask(day(10))
    kept.answer(first, NAMES[:3], day(11))
    (task,) = tasks(kept, 12, "answer")
    assert (task.about, task.due, task.overdue) == (NAMES[3:], day(24), False)
    assert tasks(kept, 25, "answer")[0].overdue
    assert "answer-overdue" in codes(kept, 25)
    (silent,) = {row.silent for row in kept.audit(day(25)).custodians if row.name in NAMES[3:]}
    assert (silent, {row.silent for row in kept.audit(day(25)).custodians[:3]}) == (day(24), {None})
    second = kept.ask(day(26), NAMES[3:])
    assert [(task.about, task.due) for task in tasks(kept, 27, "answer")] == [(NAMES[3:], day(40))]
    kept.answer(second, NAMES[3:4], day(28))
    kept.append(departed("keeper five", "dry-dock"), day(29))
    assert tasks(kept, 45, "answer") == []
    # What passed in silence is told of whoever answered later as well; asked anew in time, nobody was silent.
    rows = {row.name: row for row in kept.audit(day(45)).custodians}
    assert (rows["registrar"].unanswered, rows["registrar"].silent) == ((day(24),), None)
    assert (rows["dry-dock"].unanswered, rows["dry-dock"].silent) == ((day(24),), day(24))
    assert rows["north-pier"].unanswered == ()
    kept.ask(day(46), NAMES[:1])
    kept.ask(day(50), NAMES[:1])
    assert [row.unanswered for row in kept.audit(day(63)).custodians[:1]] == [()]
    assert [row.unanswered for row in kept.audit(day(65)).custodians[:1]] == [(day(64),)]


def test_drills_are_due_from_the_last_that_passed(kept: Kept) -> None:
    (task,) = tasks(kept, 1, "drill")
    assert task.due == day(180)
    kept.drill("practice", day(20), NAMES[:3])
    assert tasks(kept, 21, "drill")[0].due == day(200, 1)
    kept.drill("recovery", day(30), NAMES[:2])
    assert tasks(kept, 31, "drill")[0].due == day(200, 1)
    assert "recovery-drill-failed" in codes(kept, 31)
    assert "drill-overdue" in codes(kept, 201)
    kept.drill("recovery", day(201), NAMES[:3])
    assert tasks(kept, 202, "drill")[0].due == day(381, 1)
    assert not {"recovery-drill-failed", "drill-overdue"} & set(codes(kept, 202))


def test_a_practice_drill_does_not_make_up_for_a_recovery_that_failed(kept: Kept) -> None:
    kept.drill("recovery", day(30), NAMES[:2])
    kept.drill("practice", day(31), NAMES[:3])
    assert str(kept.audit(day(32)).verdict) == "at risk"
    assert "recovery-drill-failed" in codes(kept, 32)


def rehearsed(number: int, outcome: str) -> Rehearsed:
    passed = outcome == "passed"
    return Rehearsed(
        what="rehearsed", drill=number, custodians=NAMES[:3], persons=(), passed=passed, outcome=outcome, seconds=9
    )


@pytest.mark.parametrize(("kind", "level"), [("recovery", "at risk"), ("practice", "due")])
def test_a_drill_that_is_left_open_has_failed_all_the_same(kept: Kept, kind: DrillKind, level: str) -> None:
    kept.round(day(1))
    with unlocked(OFFICE) as key:
        number = open_drill(kept.set, kind, keys=[key], at=day(10))[0].number
    assert kept.audit(day(11)).reasons == ()
    (task,) = tasks(kept, 11, "closing")
    assert (task.due, task.entry, task.overdue) == (day(17), number, False)
    kept.append(rehearsed(number, "one share is damaged"), day(11))
    (reason,) = kept.audit(day(12)).reasons
    assert (reason.code, str(reason.level)) == (f"{kind}-drill-failed", level)
    assert "still open" in reason.what
    assert "one share is damaged" in reason.what
    assert f"{kind}-drill-failed" in codes(kept, 12)
    kept.append(rehearsed(number, "passed"), day(13))
    assert codes(kept, 14) == []
    (reason,) = kept.audit(day(18)).reasons
    assert (reason.code, str(reason.level)) == ("closing-overdue", "due")
    assert f"`shares drill close SET --drill {number}`" in reason.next


def test_an_open_drill_that_failed_is_made_up_for_by_a_later_one(kept: Kept) -> None:
    with unlocked(OFFICE) as key:
        number = open_drill(kept.set, "recovery", keys=[key], at=day(10))[0].number
    kept.append(rehearsed(number, "one share is damaged"), day(11))
    kept.drill("recovery", day(12), NAMES[:3])
    assert "recovery-drill-failed" not in codes(kept, 13)


def test_a_recovery_that_took_too_long_is_due_and_no_risk(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", policy_text(recover_within="4h"))
    kept.round(day(1))
    kept.drill("recovery", day(10), NAMES[:3], hours=5)
    audited = kept.audit(day(11))
    (reason,) = audited.reasons
    assert (reason.code, reason.level, str(audited.verdict)) == ("recovery-drill-failed", "due", "due")
    assert "5 h" in reason.what


def test_each_task_names_the_command_that_ends_it(kept: Kept) -> None:
    left = kept.append(departed("keeper two", "south-pier"), day(30)).sequence
    gave = Recovered(
        what="recovered", custodians=NAMES[:3], persons=(), reason="a fire", disposition="replace", by=day(31)
    )
    replaced = kept.append(gave, day(30)).sequence
    action = Action(what="call by telephone", owner=OFFICE, due=day(32))
    kept.drill("practice", day(30), NAMES[:3], actions=[action, action])
    closed = kept.set.journal().entries[-1].sequence
    said = " ".join(reason.next for reason in kept.audit(day(40)).reasons)
    assert f"`shares journal add SET resolved --entry {left} --how HOW`" in said
    assert 'refreshed, reassigned, "key replaced"' in said
    assert f'`shares journal add SET resolved --entry {replaced} --how "key replaced"`' in said
    for number in (1, 2):
        assert f"`shares journal add SET resolved --entry {closed} --action {number} --how done`" in said


def test_refreshing_is_asked_for_where_the_policy_asks(tmp_path: Path, kept: Kept) -> None:
    assert tasks(kept, 1, "refresh") == []
    other = Kept.make(tmp_path / "other", policy_text(refresh_every="100d"))
    assert tasks(other, 1, "refresh")[0].due == day(100)
    assert "refresh-overdue" in codes(other, 101)


def test_a_loss_is_dealt_with_like_an_incident(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", policy_text(respond_within="36h"))
    gone = Lost(what="lost", custodian="dry-dock", copy="original", by="a", witness="b", reason="a flooded cellar")
    number = kept.append(gone, day(30)).sequence
    (task,) = tasks(kept, 30.5, "loss")
    assert (task.due, task.entry, task.about, task.overdue) == (day(31, 12), number, ("dry-dock",), False)
    assert "Refresh" in task.advice
    assert "reassign the place of dry-dock" in task.advice
    assert "(2 more would make a quorum)" in task.advice
    assert "loss-open" in codes(kept, 30.5)
    assert tasks(kept, 32, "loss")[0].overdue
    kept.append(Resolved(what="resolved", entry=number, how="reassigned"), day(33))
    assert tasks(kept, 34, "loss") == []
    assert "loss-open" not in codes(kept, 34)
    assert "custodian-lost" in codes(kept, 34)  # The place is still empty.


def test_a_leaver_who_holds_a_place_is_to_be_replaced(kept: Kept) -> None:
    number = kept.append(departed("keeper two", "south-pier"), day(30)).sequence
    (task,) = tasks(kept, 30.5, "departure")
    assert (task.due, task.entry, task.overdue, task.about) == (day(31), number, False, ("keeper two", "south-pier"))
    assert task.advice.startswith("Reassign: the place of south-pier")
    assert "(2 more would make a quorum)" in task.advice
    assert "professional" in task.advice
    assert "departure-open" in codes(kept, 30.5)  # Urgent from the first hour on.
    assert tasks(kept, 32, "departure")[0].overdue
    kept.append(Resolved(what="resolved", entry=number, how="reassigned"), day(33))
    assert tasks(kept, 34, "departure") == []
    assert tasks(kept, 32, "departure")  # As of then it was still open.


def test_a_leaver_who_has_seen_a_quorum_costs_the_key(kept: Kept) -> None:
    for name in ("dry-dock", "registrar"):
        kept.append(Transcribed(what="transcribed", custodian=name, persons=("keeper two",)), day(3))
    kept.append(departed("Keeper TWO", "south-pier"), day(30))
    (task,) = tasks(kept, 30, "departure")
    assert task.advice.startswith("Replace the key, and retire this set: keeper two has known")


def test_a_leaver_who_was_present_at_a_recovery_costs_the_key(kept: Kept) -> None:
    kept.drill("recovery", day(10), NAMES[:3])
    kept.append(departed("keeper two", "south-pier"), day(30))
    assert tasks(kept, 30, "departure")[0].advice.startswith("Replace the key: keeper two was present")
    kept.append(departed("keeper five", "dry-dock"), day(30))
    assert tasks(kept, 30, "departure")[1].advice.startswith("Reassign")


def test_a_leaver_without_a_place_who_has_seen_shares_asks_for_new_ones(kept: Kept) -> None:
    kept.append(HandedOn(what="handed-on", custodian="south-pier", to="keeper six"), day(3))
    kept.append(departed("keeper two"), day(30))
    assert tasks(kept, 30, "departure")[0].advice.startswith("Refresh: keeper two has known south-pier")


def test_a_leaver_who_has_seen_nothing_is_only_entered(kept: Kept) -> None:
    kept.append(departed("the porter"), day(30))
    assert tasks(kept, 30, "departure")[0].advice.startswith("No share is known to have been seen by the porter")


def test_an_incident_asks_for_what_those_concerned_have_known(kept: Kept) -> None:
    kept.append(incident("the porter"), day(30))
    assert tasks(kept, 30, "incident")[0].advice.startswith("Refresh: the porter may know dry-dock")
    kept.append(incident(), day(30))
    assert tasks(kept, 30, "incident")[1].advice.startswith("Refresh: somebody unknown may know dry-dock")
    kept.append(incident(exposed=False), day(30))
    assert tasks(kept, 30, "incident")[2].advice.startswith("Fill the place of dry-dock again")
    for name in NAMES[:2]:
        kept.append(Transcribed(what="transcribed", custodian=name, persons=("The Porter",)), day(30))
    first = tasks(kept, 30, "incident")[0]
    assert first.advice.startswith("Replace the key, and retire this set: the porter has known")
    assert "incident-open" in codes(kept, 30)
    assert "one-knows-a-quorum" in codes(kept, 30)


def test_a_key_that_was_recovered_is_replaced_by_the_day_that_was_named(kept: Kept) -> None:
    event = Recovered(
        what="recovered",
        custodians=NAMES[:3],
        persons=("keeper one",),
        reason="the archive burnt",
        disposition="replace",
        by=day(40),
    )
    number = kept.append(event, day(30)).sequence
    (task,) = tasks(kept, 31, "replacement")
    assert (task.due, task.entry, task.overdue) == (day(40), number, False)
    assert "replacement-overdue" not in codes(kept, 31)
    assert "replacement-overdue" in codes(kept, 41)
    kept.append(Resolved(what="resolved", entry=number, how="key replaced"), day(41))
    assert tasks(kept, 42, "replacement") == []


@pytest.mark.parametrize("by_opening", [False, True])
def test_actions_of_reports_are_tasks_until_they_are_resolved(kept: Kept, by_opening: bool) -> None:
    actions = [
        Action(owner="harbour office", due=day(40), what="buy a second reader"),
        Action(owner="registrar", due=day(60), what="write the new number on the list"),
    ]
    drill = kept.drill("practice", day(20), NAMES[:3], actions=actions)
    first, second = tasks(kept, 50, "action")
    assert (first.about, first.action, first.overdue) == (("harbour office",), 1, True)
    assert (second.action, second.overdue) == (2, False)
    assert "action-overdue" in codes(kept, 50)
    named = drill if by_opening else first.entry
    assert named
    kept.append(Resolved(what="resolved", entry=named, action=1, how="done"), day(51))
    assert [task.action for task in tasks(kept, 52, "action")] == [2]


def test_what_is_not_yet_there_cannot_be_resolved(kept: Kept) -> None:
    kept.append(Resolved(what="resolved", entry=3, how="done"), day(29))
    assert kept.append(departed("keeper two", "south-pier"), day(30)).sequence == 3
    assert tasks(kept, 31, "departure")


def test_tasks_come_earliest_first(kept: Kept) -> None:
    kept.append(departed("keeper two", "south-pier"), day(30))
    kept.ask(day(30), due=day(30) + timedelta(hours=3))
    due = [task.due for task in kept.audit(day(31)).tasks]
    assert due == sorted(due)
    assert len(due) >= 4


def test_the_cost_of_incidents_grows_with_their_number(kept: Kept, monkeypatch: pytest.MonkeyPatch) -> None:
    """A flood of incidents with many names must not take a time that grows with the square of its length."""
    calls = 0

    def counting(text: str) -> str:
        nonlocal calls
        calls += 1
        return folded(text)

    monkeypatch.setattr(module, "folded", counting)
    counts = []
    for i in range(2):
        for j in range(10):
            people = tuple(f"passer-by {10 * i + j}, {n}" for n in range(5))
            event = Incident(
                what="incident", custodians=NAMES[:1], persons=people, exposed=True, due=day(9), remark="?"
            )
            kept.append(event, day(1))
        calls = 0
        assert len(tasks(kept, 2, "incident")) == 10 * (i + 1)
        counts.append(calls)
    assert counts[1] <= 2 * counts[0]
