"""Audits that somebody tries to mislead: each test is one way to have a set look better than it is.

Checked against: what the person who keeps the journal, or who once held a share, can do without any other key.
"""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest
from kept import NAMES, OFFICE, PEOPLE, Kept, day, policy_text
from parties import card, unlocked

from shares.documents.drill_report import DrillReport
from shares.documents.event import (
    Departed,
    Destroyed,
    DrillClosed,
    HandedOn,
    Incident,
    Introduced,
    Lost,
    Recovered,
    Rehearsed,
    Resolved,
    Retired,
)
from shares.evidence.after_action import close_drill
from shares.evidence.attest import answer
from shares.evidence.audited import CustodianRow, Reason, Verdict
from shares.evidence.drill import open_drill, the_drill
from shares.evidence.rehearsal import rehearse
from shares.evidence.rounds import enter
from shares.history.journal import append

NAME = "north-pier"
HOLDER = PEOPLE[NAME]


@pytest.fixture(scope="module")
def good(tmp_path_factory: pytest.TempPathFactory) -> Kept:
    """A set that audits as good on day 30."""
    kept = Kept.make(tmp_path_factory.mktemp("good") / "set", policy_text())
    kept.round(day(1))
    kept.drill("recovery", day(10), NAMES[2:])
    assert kept.audit(day(30)).verdict is Verdict.GOOD
    return kept


@pytest.fixture
def kept(good: Kept, tmp_path: Path) -> Kept:
    """A copy of it, to be misled about."""
    shutil.copytree(good.folder, tmp_path / "set")
    return Kept(tmp_path / "set", good.dealt, good.practice)


def found(kept: Kept, at: float = 30, **more: object) -> dict[str, Reason]:
    return {reason.code: reason for reason in kept.audit(day(at), **more).reasons}


def row(kept: Kept, at: float = 30, name: str = NAME) -> CustodianRow:
    return next(one for one in kept.audit(day(at)).custodians if one.name == name)


def introduce(kept: Kept, at: float, name: str = NAME, whose: str = NAME) -> None:
    event = Introduced(what="introduced", custodian=name, card=card(whose).fingerprint)
    kept.append(event, day(at), cards=[card(whose)])


def prove(kept: Kept, at: float, name: str = NAME) -> None:
    kept.answer(kept.ask(day(at), [name]), [name], day(at))


# Proofs from before.


def test_an_answer_to_an_older_question_does_not_clear_an_incident(kept: Kept) -> None:
    challenge = kept.ask(day(11))
    event = Incident(what="incident", custodians=NAMES, persons=(), exposed=False, due=day(20), remark="burnt")
    number = kept.append(event, day(12)).sequence
    kept.append(Resolved(what="resolved", entry=number, how="no exposure"), day(12))
    kept.answer(challenge, NAMES, day(13))
    assert [one.status for one in kept.audit(day(14)).custodians] == ["in doubt"] * 5
    assert row(kept).proofs[-1].counts is False
    assert kept.audit(day(14)).verdict is Verdict.AT_RISK
    kept.round(day(15))
    assert kept.audit(day(17)).verdict is Verdict.GOOD


def test_an_answer_to_an_older_question_does_not_heal_damage(kept: Kept) -> None:
    older, newer = kept.ask(day(11)), kept.ask(day(12))
    kept.answer(newer, [NAME], day(13), damaged=True)
    kept.answer(older, [NAME], day(14))
    assert row(kept).status == "damaged"
    prove(kept, 15)
    assert row(kept).status == "confirmed"


@pytest.mark.parametrize("grade", ["content", "sealed"])
def test_what_was_asked_of_the_holder_before_proves_nothing_of_the_next(kept: Kept, grade: str) -> None:
    challenge = kept.ask(day(11), [NAME])
    kept.append(HandedOn(what="handed-on", custodian=NAME, to="keeper six"), day(12))
    introduce(kept, 13)
    kept.answer(challenge, [NAME], day(14), grade=grade)  # type: ignore[arg-type]
    assert row(kept).status == "not yet attested"


# Whose card.


def test_whoever_handed_a_share_on_does_not_answer_for_the_new_holder(kept: Kept) -> None:
    kept.append(HandedOn(what="handed-on", custodian=NAME, to="keeper six"), day(12))
    challenge = kept.ask(day(13), [NAME])
    (entered,) = kept.answer(challenge, [NAME], day(14))
    assert entered.judgement.attributed is False
    assert (row(kept).status, row(kept).card) == ("unattributed", None)
    introduce(kept, 15)
    prove(kept, 16)
    assert row(kept).status == "confirmed"


@pytest.mark.parametrize("named", [(NAME,), ()])
def test_a_leaver_does_not_answer_once_the_departure_is_settled(kept: Kept, named: tuple[str, ...]) -> None:
    """The departure names what the leaver holds, or names nothing: it is theirs all the same."""
    event = Departed(what="departed", person="Keeper  One", custodians=named, due=day(13))
    number = kept.append(event, day(12)).sequence
    assert row(kept, 12).status == "departed"
    kept.append(Resolved(what="resolved", entry=number, how="no exposure"), day(13))
    (entered,) = kept.answer(kept.ask(day(14), [NAME]), [NAME], day(15))
    assert entered.judgement.attributed is False
    assert (row(kept).status, row(kept).card) == ("unattributed", None)


def test_a_departure_empties_the_place_that_was_handed_on_to_the_leaver(kept: Kept) -> None:
    kept.append(HandedOn(what="handed-on", custodian=NAME, to="keeper two"), day(11))
    kept.append(Departed(what="departed", person="keeper two", custodians=("south-pier",), due=day(13)), day(12))
    assert [row(kept, 12, name).status for name in NAMES[:3]] == ["departed", "departed", "confirmed"]
    assert found(kept, 12)["departure-open"].level is Verdict.DUE


def test_whoever_holds_the_share_no_longer_takes_no_place_along(kept: Kept) -> None:
    kept.append(HandedOn(what="handed-on", custodian=NAME, to="keeper six"), day(11))
    kept.append(Departed(what="departed", person=HOLDER, custodians=(), due=day(13)), day(12))
    assert row(kept, 12).status == "not yet attested"


def test_a_card_that_is_exchanged_voids_what_was_proven_and_is_told(kept: Kept) -> None:
    introduce(kept, 12)  # The same again changes nothing.
    assert (row(kept).status, kept.audit(day(30)).notes) == ("confirmed", ())
    introduce(kept, 13, whose=OFFICE)
    audited = kept.audit(day(30))
    assert (row(kept).status, row(kept).card) == ("not yet attested", card(OFFICE).fingerprint)
    (note,) = audited.notes
    assert "changed the card of north-pier" in note


def test_one_card_for_several_custodians_is_due(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", policy_text())
    for name in NAMES[:3]:
        introduce(kept, 1, name, OFFICE)
    challenge = kept.ask(day(2))
    with unlocked(OFFICE) as key:
        answers = [
            answer(challenge, kept.record, name, share=kept.share(name), key=key, grade="content", time=day(2))
            for name in NAMES[:3]
        ]
        entered = enter(kept.set, challenge, answers, keys=[key], time=day(2))
    assert [one.judgement.attributed for one in entered] == [True] * 3
    reason = found(kept, 3)["card-shared"]
    assert (reason.level, reason.about) == (Verdict.DUE, NAMES[:3])


def test_a_card_that_was_planted_before_the_split_is_forgotten_at_it(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", policy_text(), cards=(), journal=False)
    other = Kept.make(tmp_path / "other", policy_text(), cards=())
    planted = Introduced(what="introduced", custodian=NAME, card=card(OFFICE).fingerprint)
    append(kept.folder, planted, cards=[card(OFFICE)], time=day(-1))
    dealt = (
        other.set.journal()
        .entries[0]
        .event.model_copy(update={"set": kept.record.set, "record": kept.record.fingerprint, "practice": None})
    )
    kept.append(dealt, day(0))
    assert row(kept, 1).card is None
    challenge = kept.ask(day(2), [NAME])
    with unlocked(OFFICE) as key:
        one = answer(challenge, kept.record, NAME, share=kept.share(NAME), key=key, grade="content", time=day(2))
        (entered,) = enter(kept.set, challenge, [one], keys=[key], time=day(2))
    assert entered.judgement.attributed is False
    assert row(kept, 3).status == "unattributed"


# A set's end.


def end(kept: Kept, kind: type[Destroyed] | type[Lost], witness: str = "auditor-east") -> None:
    for name in NAMES:
        more = {"reason": "a flood"} if kind is Lost else {}
        members = {"what": kind.model_fields["what"].annotation.__args__[0], "custodian": name, "copy": "original"}  # type: ignore[union-attr]
        kept.append(kind.model_validate({**members, "by": PEOPLE[name], "witness": witness, **more}), day(20))
    kept.append(Retired(what="retired", keep_until=day(800)), day(21))


def test_a_set_that_was_destroyed_before_a_witness_is_at_its_end(kept: Kept) -> None:
    end(kept, Destroyed)
    assert found(kept, 700) == {}


def test_what_was_lost_is_no_end(kept: Kept) -> None:
    end(kept, Lost)
    reasons = found(kept, 700)
    assert (reasons["retired-with-lost"].level, reasons["retired-with-lost"].about) == (Verdict.AT_RISK, NAMES)
    assert {"one-knows-a-quorum", "loss-open"} <= set(reasons)


def test_who_knew_a_quorum_is_not_forgotten_with_the_set(kept: Kept) -> None:
    event = Incident(what="incident", custodians=NAMES, persons=("a thief",), exposed=True, due=day(20), remark="seen")
    kept.append(event, day(12))
    kept.append(Departed(what="departed", person=HOLDER, custodians=(), due=day(14)), day(13))
    end(kept, Destroyed)
    reasons = found(kept, 700)
    assert reasons["one-knows-a-quorum"].level is Verdict.AT_RISK
    assert {"incident-open", "departure-open"} <= set(reasons)
    assert {task.kind for task in kept.audit(day(700)).tasks} == {"incident", "departure"}


@pytest.mark.parametrize("witness", ["keeper ONE", NAME, "keeper six"])
@pytest.mark.parametrize("kind", [Destroyed, Lost])
def test_a_witness_who_is_no_third_party_is_a_false_claim(
    kept: Kept, witness: str, kind: type[Destroyed] | type[Lost]
) -> None:
    kept.append(HandedOn(what="handed-on", custodian=NAME, to="keeper six"), day(11))
    kept.append(HandedOn(what="handed-on", custodian=NAME, to="keeper seven"), day(12))
    end(kept, kind, witness)
    assert found(kept)["claim"].level is Verdict.BROKEN
    assert "no third party" in found(kept)["claim"].what


def test_only_a_key_that_was_replaced_ends_a_replacement(kept: Kept) -> None:
    gave = Recovered(
        what="recovered", custodians=NAMES[:3], persons=(), reason="a fire", disposition="replace", by=day(13)
    )
    number = kept.append(gave, day(12)).sequence
    for how in ("done", "no exposure", "refreshed"):
        kept.append(Resolved(what="resolved", entry=number, how=how), day(13))  # type: ignore[arg-type]
    kept.append(Resolved(what="resolved", entry=number, action=1, how="key replaced"), day(13))
    assert "replacement-overdue" in found(kept)
    kept.append(Resolved(what="resolved", entry=number, how="key replaced"), day(13))
    assert "replacement-overdue" not in found(kept)


def test_an_action_that_is_done_fills_no_place(kept: Kept) -> None:
    number = kept.append(Departed(what="departed", person=HOLDER, custodians=(), due=day(13)), day(12)).sequence
    kept.append(Resolved(what="resolved", entry=number, action=1, how="no exposure"), day(12))
    assert row(kept).status == "departed"
    assert "departure-open" in found(kept)


# Files that are gone.


@pytest.mark.parametrize("name", ["policy.toml", "journal.jsonl"])
def test_without_policy_or_journal_a_set_is_at_risk(tmp_path: Path, name: str) -> None:
    kept = Kept.make(tmp_path / "set", policy_text())
    (kept.folder / name).unlink()
    assert kept.audit(day(1)).verdict is Verdict.AT_RISK
    (kept.folder / name).mkdir()
    assert kept.audit(day(1)).verdict.rank >= Verdict.AT_RISK.rank


# Drills.


def test_a_report_that_comes_late_puts_the_next_drill_off_by_nothing(kept: Kept) -> None:
    with unlocked(OFFICE) as key:
        number = open_drill(kept.set, "recovery", keys=[key], at=day(12))[0].number
        drill = the_drill(kept.set.journal(), number)
        people = list(PEOPLE.values())
        rehearse(kept.set, drill, [kept.share(name) for name in NAMES], persons=people, keys=[key], at=day(13)).close()
        close_drill(kept.set, drill, keys=[key], at=day(150))
    (task,) = [one for one in kept.audit(day(151)).tasks if one.kind == "drill"]
    assert task.due == day(13 + 180)


def test_a_rehearsal_without_a_quorum_did_not_pass(kept: Kept) -> None:
    with unlocked(OFFICE) as key:
        number = open_drill(kept.set, "recovery", keys=[key], at=day(12))[0].number
        event = Rehearsed(
            what="rehearsed", drill=number, custodians=NAMES[:2], persons=(), passed=True, outcome="passed", seconds=1
        )
        kept.append(event, day(12))
        close_drill(kept.set, the_drill(kept.set.journal(), number), keys=[key], at=day(13))
    audited = kept.audit(day(30))
    assert [reason.code for reason in audited.reasons if reason.level is Verdict.BROKEN] == ["claim"] * 2
    assert audited.drills[-1].passed is False


def forged(kept: Kept, number: int, *, signed: bool = True, **told: object) -> None:
    """File and enter a report that tells otherwise than the true one, and close its drill by it."""
    true = DrillReport.parse((kept.folder / f"drills/{number}/report.json").read_bytes())
    with unlocked(OFFICE) as key:
        report = true.model_copy(update={"signatures": (), **told})
        report = report.signed(key) if signed else report
    named = kept.set.add(f"drills/{number}/other.json", report.to_file())
    kept.append(DrillClosed(what="drill-closed", drill=number, passed=report.passed), day(29), documents=[named])


def test_a_report_that_nobody_signed_is_a_false_claim(kept: Kept) -> None:
    number = kept.drill("recovery", day(12), NAMES[:3])
    forged(kept, number, signed=False)
    assert "nobody signed" in found(kept)["claim"].what


def test_a_report_of_success_of_a_drill_that_was_too_slow_is_a_false_claim(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", policy_text(recover_within="2h"))
    number = kept.drill("recovery", day(12), NAMES[:3], hours=3)
    assert "claim" not in found(kept)
    forged(kept, number, passed=True)
    assert "longer than its target" in found(kept)["claim"].what


def test_attendance_is_what_the_answers_prove(kept: Kept) -> None:
    with unlocked(OFFICE) as key:
        drill, challenge = open_drill(kept.set, "attendance", keys=[key], at=day(12))
        assert challenge
        kept.answer(challenge, NAMES[:2], day(13), grade="present")
        kept.answer(challenge, NAMES[2:], day(20), grade="present")  # These were late.
        close_drill(kept.set, the_drill(kept.set.journal(), drill.number), keys=[key], at=day(21))
    audited = kept.audit(day(30))
    assert (audited.drills[-1].passed, "claim" in found(kept)) == (False, False)
    forged(kept, drill.number, passed=True, findings=())
    assert "no quorum answered in time" in found(kept)["claim"].what
    assert kept.audit(day(30)).drills[-1].passed is False


def test_attendance_that_was_true_is_believed(kept: Kept) -> None:
    with unlocked(OFFICE) as key:
        drill, challenge = open_drill(kept.set, "attendance", keys=[key], at=day(12))
        assert challenge
        kept.answer(challenge, NAMES[:3], day(13), grade="present")
        close_drill(kept.set, the_drill(kept.set.journal(), drill.number), keys=[key], at=day(21))
    assert (kept.audit(day(30)).drills[-1].passed, found(kept)) == (True, {})


def test_real_shares_at_a_drill_of_practice_are_known_to_those_present(kept: Kept) -> None:
    with unlocked(OFFICE) as key:
        drill, _ = open_drill(kept.set, "practice", keys=[key], at=day(12))
        rehearse(kept.set, drill, [kept.share(name) for name in NAMES], persons=["a guest"], keys=[key], at=day(12))
    known = {one.who: one for one in kept.audit(day(13)).exposure}
    assert (known["a guest"].recovered, known["the machines of recoveries"].suffices) == (True, True)
