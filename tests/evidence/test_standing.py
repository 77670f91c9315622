"""How custodians stand: each event has its effect on what was proven, and time has too.

Checked against: the table of the module's docstring, event by event.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from kept import NAMES, START, Kept, day, policy_text
from parties import card

from shares.documents.event import (
    Copied,
    Departed,
    Destroyed,
    Event,
    HandedOn,
    Incident,
    Introduced,
    Lost,
    Received,
    Resolved,
    Transcribed,
)
from shares.evidence.audited import CustodianRow

NAME = "north-pier"


@pytest.fixture
def kept(tmp_path: Path) -> Kept:
    return Kept.make(tmp_path / "set", policy_text(content_every="200d"))


def row(kept: Kept, at: float, name: str = NAME) -> CustodianRow:
    return next(one for one in kept.audit(day(at)).custodians if one.name == name)


def status(kept: Kept, at: float) -> str:
    return row(kept, at).status


def prove(kept: Kept, at: float, **how: object) -> None:
    kept.answer(kept.ask(day(at), [NAME]), [NAME], day(at), **how)  # type: ignore[arg-type]


def known_again(kept: Kept, at: float) -> None:
    """Whoever holds the share now is known by a card: for these tests, by the one before."""
    kept.append(Introduced(what="introduced", custodian=NAME, card=card(NAME).fingerprint), day(at), cards=[card(NAME)])


def incident(exposed: bool = False) -> Incident:
    return Incident(what="incident", custodians=(NAME,), persons=(), exposed=exposed, due=day(60), remark="?")


def destroyed(copy: str) -> Destroyed:
    return Destroyed(what="destroyed", custodian=NAME, copy=copy, by="keeper one", witness="keeper two")


def test_fresh_then_confirmed_then_overdue(kept: Kept) -> None:
    assert status(kept, 1) == "not yet attested"
    assert row(kept, 1).due == day(90)
    assert status(kept, 90) == "overdue"
    prove(kept, 20)
    assert (status(kept, 19), status(kept, 20), status(kept, 109)) == ("not yet attested", "confirmed", "confirmed")
    assert (row(kept, 30).content, row(kept, 30).due) == (day(20), day(110))
    assert status(kept, 110) == "overdue"
    assert not row(kept, 110).counts


def test_a_sealed_pack_counts_with_content_in_the_longer_interval(kept: Kept) -> None:
    prove(kept, 10, grade="sealed")
    assert status(kept, 11) == "not yet attested"  # A seal alone proves no content.
    prove(kept, 20)
    prove(kept, 100, grade="sealed")
    assert status(kept, 105) == "confirmed"
    assert (status(kept, 110), row(kept, 110).counts, row(kept, 110).due) == ("sealed", True, day(190))
    prove(kept, 180, grade="sealed")
    assert row(kept, 185).due == day(220)  # Content was last proven on day 20, and is wanted after 200 days.
    assert status(kept, 220) == "overdue"


def test_a_broken_seal_voids_what_was_proven(kept: Kept) -> None:
    prove(kept, 10)
    prove(kept, 20, grade="sealed", seal="broken")
    assert status(kept, 21) == "in doubt"
    prove(kept, 22, grade="sealed")
    assert status(kept, 23) == "in doubt"
    prove(kept, 24)
    assert status(kept, 25) == "confirmed"


def test_damage_is_due_at_once_and_healed_by_content(kept: Kept) -> None:
    prove(kept, 10)
    prove(kept, 20, damaged=True)
    assert (status(kept, 21), row(kept, 21).due, row(kept, 21).content) == ("damaged", day(20), None)
    prove(kept, 25)
    assert status(kept, 26) == "confirmed"


def test_an_unattributed_answer_counts_for_nothing(kept: Kept) -> None:
    prove(kept, 10, party=False)
    assert (status(kept, 11), row(kept, 11).counts) == ("unattributed", False)
    assert row(kept, 11).proofs[0].attributed is False
    assert status(kept, 101) == "overdue"


def test_an_answer_by_a_card_that_the_journal_does_not_know_is_unattributed(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set", policy_text(), cards=())
    prove(kept, 10)
    assert status(kept, 11) == "unattributed"
    event = Introduced(what="introduced", custodian=NAME, card=card(NAME).fingerprint)
    kept.append(event, day(12), cards=[card(NAME)])
    assert status(kept, 13) == "unattributed"  # The answer came before the card did.
    prove(kept, 14)
    assert (status(kept, 15), row(kept, 15).card) == ("confirmed", card(NAME).fingerprint)


def test_a_late_answer_is_a_fact(kept: Kept) -> None:
    kept.answer(kept.ask(day(10), [NAME], due=day(12)), [NAME], day(15))
    assert (status(kept, 16), row(kept, 16).proofs[0].late) == ("confirmed", True)


VOIDING: list[tuple[Event, str]] = [
    (incident(), "in doubt"),
    (incident(exposed=True), "in doubt"),
    (HandedOn(what="handed-on", custodian=NAME, to="keeper six"), "not yet attested"),
    (Departed(what="departed", person="keeper one", custodians=(NAME,), due=day(31)), "departed"),
    (destroyed("original"), "destroyed"),
    (Lost(what="lost", custodian=NAME, copy="original", by="a", witness="b", reason="?"), "lost"),
    (Transcribed(what="transcribed", custodian=NAME, persons=("keeper two",)), "not yet attested"),
    (Transcribed(what="transcribed", custodian=NAME, persons=("Keeper One",)), "confirmed"),
    (Received(what="received", custodian=NAME), "confirmed"),
    (Copied(what="copied", custodian=NAME, copy="4711"), "confirmed"),
]


@pytest.mark.parametrize(("event", "then"), VOIDING)
def test_what_may_have_touched_the_share_voids_proof(kept: Kept, event: Event, then: str) -> None:
    prove(kept, 10)
    kept.append(event, day(30))
    assert status(kept, 29) == "confirmed"
    assert status(kept, 30) == then
    if isinstance(event, HandedOn | Departed):
        known_again(kept, 31)
    prove(kept, 35)
    final = "confirmed" if then not in ("departed", "destroyed", "lost") else then
    assert status(kept, 36) == final
    other = row(kept, 36, "south-pier")
    assert other.status == "not yet attested"


def test_after_a_departure_only_whoever_fills_the_place_counts(kept: Kept) -> None:
    left = kept.append(Departed(what="departed", person="keeper one", custodians=(NAME,), due=day(31)), day(30))
    kept.append(incident(), day(31))
    assert (status(kept, 32), row(kept, 32).due) == ("departed", None)
    kept.append(HandedOn(what="handed-on", custodian=NAME, to="keeper six"), day(40))
    # The incident stays with the share, whoever holds it now.
    assert (status(kept, 41), row(kept, 41).person, row(kept, 41).due) == ("in doubt", "keeper six", day(31))
    prove(kept, 41)
    assert status(kept, 42) == "in doubt"  # By the card of whoever had it before.
    known_again(kept, 42)
    prove(kept, 42)
    assert status(kept, 43) == "confirmed"
    kept.append(Resolved(what="resolved", entry=left.sequence, how="done"), day(44))
    assert status(kept, 45) == "confirmed"


FINDINGS: list[tuple[str, str]] = [("damage", "damaged"), ("incident", "in doubt"), ("seal", "in doubt")]


@pytest.mark.parametrize(("finding", "then"), FINDINGS)
@pytest.mark.parametrize("leaves", [False, True])
def test_handing_on_changes_the_person_and_not_the_finding(kept: Kept, finding: str, then: str, leaves: bool) -> None:
    prove(kept, 10)
    if finding == "damage":
        prove(kept, 20, damaged=True)
    elif finding == "seal":
        prove(kept, 20, grade="sealed", seal="broken")
    else:
        kept.append(incident(), day(20))
    before = row(kept, 21)
    assert (before.status, before.due) == (then, day(20))
    if leaves:
        kept.append(Departed(what="departed", person="keeper one", custodians=(NAME,), due=day(31)), day(30))
        assert status(kept, 31) == "departed"
    kept.append(HandedOn(what="handed-on", custodian=NAME, to="keeper six"), day(40))
    after = row(kept, 41)
    assert (after.status, after.due, after.why, after.person) == (then, day(20), before.why, "keeper six")
    kept.append(HandedOn(what="handed-on", custodian=NAME, to="keeper one"), day(42))
    assert (status(kept, 43), row(kept, 43).due) == (then, day(20))
    known_again(kept, 43)
    prove(kept, 44, grade="sealed")
    assert status(kept, 45) == then
    prove(kept, 46)
    assert status(kept, 47) == "confirmed"


def test_damage_is_not_made_less_by_an_incident(kept: Kept) -> None:
    prove(kept, 10, damaged=True)
    kept.append(incident(), day(20))
    assert (status(kept, 21), row(kept, 21).due) == ("damaged", day(10))


def test_what_a_leaver_proves_does_not_count_for_whoever_comes(kept: Kept) -> None:
    left = kept.append(Departed(what="departed", person="keeper one", custodians=(NAME,), due=day(31)), day(30))
    prove(kept, 31)
    kept.append(Resolved(what="resolved", entry=left.sequence, how="done"), day(33))
    assert status(kept, 34) == "not yet attested"


def lost(copy: str = "original") -> Lost:
    return Lost(what="lost", custodian=NAME, copy=copy, by="a", witness="b", reason="a flooded cellar")


def test_a_lost_share_is_said_to_be_lost_until_it_is_found_and_destroyed(kept: Kept) -> None:
    prove(kept, 10)
    number = kept.append(lost(), day(20)).sequence
    found = row(kept, 21)
    assert (found.status, found.copies, found.due, found.counts) == ("lost", 0, None, False)
    assert found.why == f"no copy is left: lost, entry {number}; it may turn up with anybody"
    (reason,) = [one for one in kept.audit(day(21)).reasons if one.code == "custodian-lost"]
    assert "destroyed" not in reason.what.replace("not destroyed", "")
    assert "incident" in reason.next
    assert [(known.who, known.shares) for known in kept.audit(day(21)).exposure if known.kind == "unknown"] == [
        ("somebody unknown", (NAME,))
    ]
    kept.append(destroyed("original"), day(30))
    assert status(kept, 31) == "destroyed"


def test_where_one_of_several_copies_was_lost_the_share_is_lost(kept: Kept) -> None:
    kept.append(Copied(what="copied", custodian=NAME, copy="4711"), day(11))
    number = kept.append(lost("4711"), day(13)).sequence
    assert (status(kept, 14), row(kept, 14).copies) == ("in doubt", 1)
    kept.append(destroyed("original"), day(15))
    assert (status(kept, 16), f"lost, entry {number};" in row(kept, 16).why) == ("lost", True)


def test_a_departure_that_was_resolved_lets_the_custodian_prove_anew(kept: Kept) -> None:
    prove(kept, 10)
    left = kept.append(Departed(what="departed", person="keeper one", custodians=(NAME,), due=day(31)), day(30))
    kept.append(Resolved(what="resolved", entry=left.sequence, how="share destroyed"), day(31))
    assert status(kept, 32) == "departed"
    kept.append(Resolved(what="resolved", entry=left.sequence, how="done"), day(33))
    assert status(kept, 34) == "not yet attested"
    known_again(kept, 35)
    prove(kept, 35)
    assert status(kept, 36) == "confirmed"


def test_with_a_copy_left_the_share_is_in_doubt_and_then_gone(kept: Kept) -> None:
    prove(kept, 10)
    kept.append(Copied(what="copied", custodian=NAME, copy="4711"), day(11))
    assert row(kept, 12).copies == 2
    kept.append(destroyed("original"), day(13))
    assert (status(kept, 14), row(kept, 14).copies) == ("in doubt", 1)
    prove(kept, 15)
    assert status(kept, 16) == "confirmed"
    kept.append(destroyed("4711"), day(17))
    assert (status(kept, 18), row(kept, 18).copies, row(kept, 18).due) == ("destroyed", 0, None)


def test_an_entry_that_bears_an_earlier_time_makes_no_proof_last_longer(kept: Kept) -> None:
    """The clock of the machine ran backwards: the entry's own, earlier time counts for the proof."""
    kept.round(day(10))
    kept.append(incident(), day(30))
    prove(kept, 20)
    assert (status(kept, 31), row(kept, 31).content, row(kept, 31).due) == ("confirmed", day(20), day(110))
    audited = kept.audit(day(31))
    assert audited.margin
    # What comes after an entry cannot have come before it: until the incident's time nothing is proven anew.
    assert (audited.margins[-1].low, audited.margins[-1].high) == audited.margin.custodians
    assert audited.margins[0].time == START


def test_without_policy_a_year_is_taken_and_said(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set")
    audited = kept.audit(day(364))
    assert audited.custodians[0].status == "not yet attested"
    assert kept.audit(day(365)).custodians[0].status == "overdue"
    assert audited.intervals
    assert audited.intervals.assumed == ("attest_every", "content_every", "drill_every")
    assert len([note for note in audited.notes if "365 days are taken" in note]) == 3


def test_rows_are_in_the_records_order(kept: Kept) -> None:
    assert tuple(one.name for one in kept.audit(day(1)).custodians) == NAMES
