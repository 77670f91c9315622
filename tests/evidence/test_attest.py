"""A custodian's answer: only to whoever may ask, and true whatever the share is like.

Checked against: ``shares verify``'s own findings, whose words an answer repeats.
"""

from __future__ import annotations

from datetime import timedelta
from typing import Any

import pytest
from attested import ASKED, CARDS, DUE, NAMES, NEXT_DAY, RECORD, SHARES, answered, challenge, given, sealed
from hypothesis import given as drawn
from hypothesis import strategies as st
from parties import QUICK, by, card, party, passphrase, unlocked
from strategies import crooked_split, flat, flipped, presented, resealed, with_rows

from shares.custody.presented import Presented, Status
from shares.custody.verify import examine
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import card_sealer, passphrase_sealer
from shares.errors import (
    EpochMismatchError,
    ParameterError,
    SetMismatchError,
    StorageError,
    VerificationError,
    WrongKeyError,
)
from shares.evidence.attest import answer, check_asked
from shares.evidence.judge import judge
from shares.paper.paperform import from_paper, to_paper

CHALLENGE = challenge()
ATTENDANCE = challenge(purpose="attendance", drill=9)
OTHER_SET = crooked_split(b"another", flat(2, 3))
NEXT_EPOCH = crooked_split(b"made up", flat(2, 3), epoch=2, set_id=RECORD.set)


def counts(attestation: Any, name: str) -> bool:
    found = judge(attestation, CHALLENGE, RECORD, card=CARDS[name], received=NEXT_DAY, earlier={})
    return found.counts


@drawn(st.sampled_from(NAMES), st.integers(0, 8 * 67 - 1))
def test_any_flipped_bit_of_a_row_is_answered_truthfully(name: str, bit: int) -> None:
    share = SHARES[name]
    bent = with_rows(share, flipped(bit % (8 * share.row_length)))
    for one in (share.model_copy(update={"rows": bent}), resealed(share, rows=bent)):
        made = answered(CHALLENGE, name, share=one)
        assert (made.result, made.share_signature) == ("damaged", None)
        assert examine(presented([one]), RECORD)[0].status.value == made.result
        assert not counts(made, name)
    assert counts(answered(CHALLENGE, name), name)


def test_a_share_damaged_in_its_notes_alone_signs_that_it_is_damaged() -> None:
    """Its rows are the record's, so its key is too; but its own digest says that something happened to the file."""
    bent = SHARES["north-pier"].model_copy(update={"label": "Another"})
    made = answered(CHALLENGE, share=bent)
    assert (made.result, made.is_signed_by_share(RECORD.custodians[0].attestation_key)) == ("damaged", True)
    assert not counts(made, "north-pier")


def test_an_inconsistent_dealing_is_answered_and_signed() -> None:
    def bend(dealing: Any) -> None:
        with dealing.points["north-pier"][0].row.view() as row:
            row[0] ^= 1

    crooked = crooked_split(b"made up", flat(2, 3), bend=bend)
    asked = challenge(crooked.record)
    made = answered(asked, record=crooked.record, share=crooked.shares[0])
    assert (made.result, made.is_signed_by_share(crooked.record.custodians[0].attestation_key)) == (
        "inconsistent dealing",
        True,
    )


def test_a_file_that_is_no_share_at_all_is_answered_as_damaged() -> None:
    with unlocked("north-pier") as key:
        made = answer(
            CHALLENGE,
            RECORD,
            "north-pier",
            grade="content",
            share=Presented("north-pier", None, "it is not one JSON object", Status.DAMAGED),
            key=key,
            time=NEXT_DAY,
        )
    assert (made.result, made.share_signature) == ("damaged", None)


def test_damage_is_not_told_where_nobody_can_sign_it() -> None:
    bent = SHARES["north-pier"].model_copy(update={"rows": with_rows(SHARES["north-pier"], flipped(0))})
    with pytest.raises(VerificationError, match=r"damaged: .* no party key to sign that with"):
        answered(CHALLENGE, signer=None, share=bent)


@pytest.mark.parametrize(
    ("share", "error", "words"),
    [
        (given(OTHER_SET.shares[0]), SetMismatchError, "foreign set"),
        (given(NEXT_EPOCH.shares[0]), EpochMismatchError, "other epoch"),
        (given(SHARES["south-pier"]), ParameterError, "the share of south-pier, and north-pier would answer"),
        (Presented("x", None, "wrapped", Status.LOCKED), WrongKeyError, "not opened: wrapped"),
        (Presented("x", None, "missing", Status.UNREADABLE), StorageError, "unreadable: missing"),
        (given(resealed(SHARES["north-pier"], custodian="dry-dock")), VerificationError, "not in the record"),
    ],
    ids=["foreign", "epoch", "another's", "locked", "unreadable", "unknown"],
)
def test_a_slip_is_no_answer(share: Presented, error: type[Exception], words: str) -> None:
    with unlocked("north-pier") as key, pytest.raises(error, match=words):
        answer(CHALLENGE, RECORD, "north-pier", grade="content", share=share, key=key, time=NEXT_DAY)


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        ({"record": OTHER_SET.record}, SetMismatchError, "about the set"),
        ({"record": NEXT_EPOCH.record}, EpochMismatchError, "about epoch"),
        ({"custodian": "dry-dock"}, ParameterError, "does not ask dry-dock"),
        ({"trusted": [card("auditor-east")]}, VerificationError, "harbour-office, card .* is not trusted here"),
        ({"time": ASKED - timedelta(days=1, seconds=1)}, VerificationError, "is dated 2026-12-31T07:00:00Z"),
    ],
    ids=["set", "epoch", "not asked", "not trusted", "in the future"],
)
def test_a_challenge_that_is_not_to_be_answered(change: dict[str, Any], error: type[Exception], words: str) -> None:
    asked: dict[str, Any] = {"record": RECORD, "custodian": "north-pier", "trusted": (), "time": NEXT_DAY, **change}
    record, custodian = asked.pop("record"), asked.pop("custodian")
    with pytest.raises(error, match=words):
        check_asked(CHALLENGE, record, custodian, **asked)
    with unlocked("north-pier") as key, pytest.raises(error, match=words):
        answer(CHALLENGE, record, custodian, grade="content", share=given(SHARES["north-pier"]), key=key, **asked)


def test_a_trusted_asker_is_answered() -> None:
    check_asked(CHALLENGE, RECORD, "north-pier", trusted=[card("dry-dock"), card("harbour-office")], time=NEXT_DAY)
    assert answered(CHALLENGE, trusted=[card("harbour-office")]).result == "intact"


@pytest.mark.parametrize(
    ("asked", "change", "words"),
    [
        (CHALLENGE, {"grade": "present"}, "asks for the share, or its sealed pack"),
        (ATTENDANCE, {"grade": "content"}, "asks who is there"),
        (ATTENDANCE, {"grade": "sealed", "serial": "TB-1"}, "asks who is there"),
        (CHALLENGE, {"grade": "sealed"}, "known by its serial"),
        (CHALLENGE, {"grade": "sealed", "serial": "TB-1", "opened": True}, "a seal is broken to look at the share"),
        (CHALLENGE, {"grade": "sealed", "serial": "TB-1", "signer": None}, "only the custodian's party key can sign"),
        (ATTENDANCE, {"grade": "present", "signer": None}, "only the custodian's party key can sign"),
        (CHALLENGE, {"place": "a\nb"}, "control"),
        (CHALLENGE, {"remark": ""}, "1 to 500"),
        (CHALLENGE, {"serial": "x" * 501}, "1 to 500"),
    ],
)
def test_what_does_not_fit_is_refused(asked: Any, change: dict[str, Any], words: str) -> None:
    with pytest.raises(ParameterError, match=words):
        answered(asked, **change)


def test_content_needs_a_share_and_nothing_else_has_one() -> None:
    for grade, share in (("content", None), ("sealed", given(SHARES["north-pier"]))):
        with unlocked("north-pier") as key, pytest.raises(ParameterError, match="a share is given for an answer about"):
            answer(CHALLENGE, RECORD, "north-pier", grade=grade, share=share, key=key, serial="TB-1", time=NEXT_DAY)  # type: ignore[arg-type]


def test_what_was_seen_is_said() -> None:
    made = answered(CHALLENGE, carrier="paper", opened=True, place="the pier house", serial="TB-18", remark="new bag")
    assert (made.carrier, made.opened, made.place, made.serial, made.remark) == (
        "paper",
        True,
        "the pier house",
        "TB-18",
        "new bag",
    )
    assert answered(CHALLENGE).carrier == "file"
    broken = sealed(CHALLENGE, seal="broken")
    assert (broken.result, broken.carrier, broken.opened) == ("seal broken", None, False)
    assert answered(ATTENDANCE, grade="present").result == "present"


def test_a_late_answer_is_given_all_the_same() -> None:
    made = answered(CHALLENGE, time=DUE + timedelta(days=30))
    found = judge(made, CHALLENGE, RECORD, card=CARDS["north-pier"], received=DUE + timedelta(days=30), earlier={})
    assert (found.late, found.accepted, found.counts) == (True, True, True)


@pytest.mark.parametrize("way", ["passphrase", "x25519", "mlkem768-x25519"])
def test_a_wrapped_share_answers_as_a_bare_one_does(way: Any) -> None:
    share = SHARES["north-pier"]
    if way == "passphrase":
        opened = WrappedShare.wrap(share, passphrase_sealer(passphrase("north-pier"), QUICK)).open(by("north-pier"))
    else:
        wrapped = WrappedShare.wrap(share, card_sealer(card("north-pier").recipient(), way))
        with party("north-pier").open(passphrase("north-pier")) as key:
            opened = wrapped.open(key.open)
    # Ed25519 is deterministic: the same share gives the same signature.
    assert answered(CHALLENGE, share=opened).share_signature == answered(CHALLENGE).share_signature


def test_a_share_from_paper_signs_as_the_one_that_was_printed() -> None:
    share = SHARES["north-pier"]
    typed = from_paper(to_paper(share))
    assert isinstance(typed, Share)
    assert typed.label is None
    made = answered(CHALLENGE, share=typed, carrier="paper", opened=True)
    assert counts(made, "north-pier")
