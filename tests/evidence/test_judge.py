"""What an answer is worth: every flaw has its name, and only what is known, whole and attributed counts.

Source of the rules: FORMAT_EVIDENCE.md, section 17. Everything here is judged with public material alone.
"""

from __future__ import annotations

import json
from datetime import timedelta
from typing import Any

import pytest
from attested import ASKED, CARDS, DUE, NAMES, NEXT_DAY, RECORD, SHARES, answered, challenge, sealed
from hypothesis import given
from hypothesis import strategies as st
from parties import file_of
from strategies import crooked_split, flat, flipped, with_rows

from shares.documents.attestation import Attestation
from shares.documents.challenge import Challenge
from shares.documents.entry import head_of
from shares.documents.record import Record
from shares.errors import EpochMismatchError, SetMismatchError, VerificationError
from shares.evidence.judge import KEPT, TOLERANCE, Earlier, Flaw, Judgement, check_challenge, judge

CHALLENGE = challenge()
GOOD = answered(CHALLENGE)
OTHER = crooked_split(b"another", flat(2, 3)).record
LATER_EPOCH = crooked_split(b"made up", flat(2, 3), epoch=2, set_id=RECORD.set)


def judged(attestation: Attestation, asked: Challenge = CHALLENGE, **changes: Any) -> Judgement:
    known: dict[str, Any] = {"card": CARDS["north-pier"], "received": NEXT_DAY, "earlier": {}, "record": RECORD}
    known |= changes
    return judge(attestation, asked, known.pop("record"), **known)


def altered(attestation: Attestation, **changes: Any) -> Attestation:
    """An answer altered in its file."""
    return Attestation.parse(file_of(json.loads(attestation.to_file()) | changes))


def damaged_share() -> Any:
    share = SHARES["north-pier"]
    return share.model_copy(update={"rows": with_rows(share, flipped(5))})


def test_a_good_answer_counts() -> None:
    found = judged(GOOD)
    assert (found.accepted, found.attributed, found.late, found.counts, found.problems) == (True, True, False, True, ())
    assert (found.custodian, found.grade, found.result, found.whole) == ("north-pier", "content", "intact", True)


TO_OTHERS = challenge(custodians=("south-pier",))
ATTENDANCE = challenge(purpose="attendance", drill=3)
HEAD = head_of(12, bytes(range(32)))
NOTED = challenge(head=HEAD)
UNSIGNED_CHANGES = {"set": OTHER.set.hex(), "epoch": 2, "custodian": "south-pier", "remark": "x", "opened": True}


# What is wrong, what is answered, and what is known of it -> exactly the flaws that are named.
CASES: dict[str, tuple[Attestation, dict[str, Any], set[Flaw]]] = {
    "another set": (altered(GOOD, set=OTHER.set.hex()), {}, {Flaw.OTHER_SET}),
    "another epoch": (altered(GOOD, epoch=2), {}, {Flaw.OTHER_EPOCH}),
    "an old answer": (GOOD, {"asked": challenge()}, {Flaw.OTHER_CHALLENGE}),
    "another head of the journal": (altered(GOOD, journal=HEAD.public("sequence", "head")), {},
        {Flaw.OTHER_CHALLENGE}),
    "the challenge's head": (answered(NOTED), {"asked": NOTED}, set()),
    "no head where the challenge has one": (altered(answered(NOTED), journal=None), {"asked": NOTED},
        {Flaw.OTHER_CHALLENGE}),
    "somebody not asked": (altered(answered(challenge()), challenge=TO_OTHERS.digest().hex()),
        {"asked": TO_OTHERS}, {Flaw.NOT_ASKED}),
    "a seal where attendance is asked": (altered(sealed(CHALLENGE), challenge=ATTENDANCE.digest().hex()),
        {"asked": ATTENDANCE}, {Flaw.OTHER_GRADE}),
    "the same again": (GOOD, {"earlier": {"north-pier": Earlier(GOOD.digest(), True)}}, {Flaw.REPLAY}),
    "another answer": (GOOD, {"earlier": {"north-pier": Earlier(bytes(32), True)}}, {Flaw.ANSWERED}),
    "another's answer before": (GOOD, {"earlier": {"south-pier": Earlier(GOOD.digest(), True)}}, set()),
    "an unattributed answer before": (GOOD, {"earlier": {"north-pier": Earlier(bytes(32), False)}}, set()),
    "made late": (answered(CHALLENGE, time=DUE + timedelta(seconds=1)), {}, {Flaw.IN_FUTURE}),
    "made and come late": (answered(CHALLENGE, time=DUE + timedelta(seconds=1)), {"received": DUE}, {Flaw.LATE}),
    "come late": (GOOD, {"received": DUE + timedelta(seconds=1)}, {Flaw.LATE}),
    "on the last second": (answered(CHALLENGE, time=DUE), {"received": DUE}, set()),
    "by a clock that is a day slow": (answered(CHALLENGE, time=ASKED - TOLERANCE), {}, set()),
    "in the future": (answered(CHALLENGE, time=NEXT_DAY + TOLERANCE + timedelta(seconds=1)), {}, {Flaw.IN_FUTURE}),
    "a little in the future": (answered(CHALLENGE, time=NEXT_DAY + TOLERANCE), {}, set()),
    "damaged": (answered(CHALLENGE, share=damaged_share()), {}, {Flaw.NOT_WHOLE}),
    "sealed": (sealed(CHALLENGE), {}, {Flaw.NO_CONTENT}),
    "seal broken": (sealed(CHALLENGE, seal="broken"), {}, {Flaw.NO_CONTENT, Flaw.NOT_WHOLE}),
    "by the share alone": (answered(CHALLENGE, signer=None), {}, {Flaw.NO_PARTY}),
    "a card not known": (GOOD, {"card": None}, {Flaw.UNKNOWN_CARD}),
    "another's card": (answered(CHALLENGE, signer="dry-dock"), {}, {Flaw.OTHER_CARD}),
    "sealed, by a card not known": (sealed(CHALLENGE), {"card": None},
        {Flaw.UNKNOWN_CARD, Flaw.STRANGER, Flaw.NO_CONTENT}),
    "sealed, by another": (sealed(CHALLENGE, signer="dry-dock"), {},
        {Flaw.OTHER_CARD, Flaw.STRANGER, Flaw.NO_CONTENT}),
    "damaged, by another": (answered(CHALLENGE, share=damaged_share(), signer="dry-dock"), {},
        {Flaw.OTHER_CARD, Flaw.STRANGER, Flaw.NOT_WHOLE}),
    "forged for the share": (
        altered(GOOD, share_signature=json.loads(answered(challenge()).to_file())["share_signature"]), {},
        {Flaw.FORGED_SHARE}),
    "forged for the party": (
        altered(GOOD, party_signature=json.loads(answered(challenge()).to_file())["party_signature"]), {},
        {Flaw.FORGED_PARTY}),
    "another share's signature": (answered(CHALLENGE, "north-pier").model_copy(
        update={"share_signature": answered(CHALLENGE, "south-pier").share_signature}), {}, {Flaw.FORGED_SHARE}),
}  # fmt: skip


@pytest.mark.parametrize("case", CASES)
def test_each_flaw_is_named(case: str) -> None:
    attestation, known, flaws = CASES[case]
    found = judged(attestation, **known)
    assert found.flaws == flaws
    assert found.accepted is (flaws <= KEPT)
    unattributed = {Flaw.FORGED_PARTY, Flaw.NO_PARTY, Flaw.OTHER_CARD, Flaw.UNKNOWN_CARD}
    assert not (found.attributed and flaws & unattributed)
    assert found.counts is (flaws <= {Flaw.LATE})
    assert all(problem.what and not problem.what.endswith(".") for problem in found.problems)


def test_every_flaw_is_met() -> None:
    assert set(Flaw) - set().union(*(flaws for _, _, flaws in CASES.values())) == {Flaw.TOO_EARLY}
    early = Attestation.parse(file_of(json.loads(GOOD.to_file()) | {"time": "2026-12-30T06:59:59Z"}))
    assert Flaw.TOO_EARLY in judged(early).flaws


@pytest.mark.parametrize("name", UNSIGNED_CHANGES)
def test_what_is_altered_is_not_accepted(name: str) -> None:
    assert not judged(altered(GOOD, **{name: UNSIGNED_CHANGES[name]})).accepted


def test_an_answer_of_another_custodian_is_not_relabelled() -> None:
    """The record's key of the custodian who is named must fit, and no other's."""
    found = judged(altered(GOOD, custodian="south-pier"), card=CARDS["south-pier"])
    assert found.flaws == {Flaw.FORGED_SHARE, Flaw.FORGED_PARTY, Flaw.STRANGER}


@given(
    st.sampled_from(NAMES),
    st.sampled_from([None, *NAMES, "dry-dock"]),
    st.sampled_from([None, *NAMES]),
    st.integers(0, 30),
    st.sampled_from(["content", "sealed"]),
)
def test_only_what_is_known_whole_and_attributed_counts(name, signer, known, days, grade) -> None:
    if grade == "sealed" and signer is None:
        return
    received = ASKED + timedelta(days=days)
    attestation = (
        sealed(CHALLENGE, name, signer=signer, time=received)
        if grade == "sealed"
        else answered(CHALLENGE, name, signer=signer, time=received)
    )
    found = judged(attestation, card=CARDS[known] if known else None, received=received)
    assert found.attributed is (signer is not None and signer == known)
    assert found.late is (received > DUE)
    assert found.counts is (found.attributed and grade == "content")
    # Whoever is not known signs for nothing: the share's key is in the record, the card in the journal.
    assert found.accepted is (grade == "content" or found.attributed)


def test_a_challenge_about_something_else_is_refused() -> None:
    check_challenge(CHALLENGE, RECORD)
    with pytest.raises(SetMismatchError, match="about the set"):
        check_challenge(CHALLENGE, OTHER)
    with pytest.raises(EpochMismatchError, match="about epoch 1, the record about 2"):
        check_challenge(CHALLENGE, LATER_EPOCH.record)
    relabelled = Record.of(
        set_id=RECORD.set,
        epoch=1,
        label="another",
        created=RECORD.created,
        field=RECORD.field,
        row_length=RECORD.row_length,
        rule=RECORD.rule.to_rule(),
        custodians=RECORD.custodians,
        checks=RECORD.checks,
        secret_commitment=RECORD.secret_commitment,
    )
    with pytest.raises(VerificationError, match="another record"):
        judge(GOOD, CHALLENGE, relabelled, card=None, received=NEXT_DAY, earlier={})
