"""Challenges: one asker's question about one set, and not a bit of it can change.

Checked against: FORMAT_EVIDENCE.md, section 17, by the signer written from the text of section 9
(tests/vectors/make/wrapping_v1.py).
"""

from __future__ import annotations

import base64
import hashlib
import json
import re
from datetime import timedelta
from typing import Any

import pytest
from attested import ASKED, RECORD, challenge
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
from hypothesis import given
from hypothesis import strategies as st
from parties import card, file_of, unlocked
from strategies import HARBOUR, bits_flipped
from vectors.make import wrapping_v1 as by_hand

from shares.documents.challenge import Challenge
from shares.documents.entry import head_of
from shares.errors import DocumentError, ParameterError

MADE = challenge(head=head_of(12, bytes(range(32))))
MEMBERS: dict[str, Any] = json.loads(MADE.to_file())
NOT_SIGNED = ("card", "signature")


@given(
    st.lists(st.sampled_from(HARBOUR[:3]), min_size=1, unique=True),
    st.integers(1, 10**6),
    st.one_of(st.none(), st.builds(head_of, st.integers(1, 2**32 - 1), st.binary(min_size=32, max_size=32))),
)
def test_it_comes_back(names, seconds, head) -> None:
    made = challenge(custodians=names, due=ASKED + timedelta(seconds=seconds), head=head)
    assert Challenge.parse(made.to_file()) == made
    assert (made.custodians, made.journal, made.set) == (tuple(names), head, RECORD.set)


def test_one_of_attendance_comes_back() -> None:
    made = challenge(purpose="attendance", drill=7)
    assert Challenge.parse(made.to_file()) == made
    assert "who is there" in made.words()


def test_no_two_are_alike() -> None:
    assert len({challenge().digest() for _ in range(8)}) == 8


def test_signature_and_digest_are_over_what_the_format_says() -> None:
    over = {name: value for name, value in MEMBERS.items() if name not in NOT_SIGNED}
    over["card"] = card("harbour-office").fingerprint
    public = Ed25519PublicKey.from_public_bytes(card("harbour-office").ed25519)
    public.verify(MADE.signature, by_hand.signed("challenge", over))
    assert MADE.digest() == hashlib.sha256(b"shares/v1/challenge" + by_hand.canonical(MEMBERS)).digest()


def test_every_flipped_bit_is_refused() -> None:
    """But those within the card, whose own tests flip them, and in white space, which there is none of."""
    data = json.dumps({**MEMBERS, "card": None}, separators=(",", ":")).encode()
    whole = json.dumps(MEMBERS["card"], separators=(",", ":")).encode()
    for _, changed in bits_flipped(data):
        with pytest.raises(DocumentError):
            Challenge.parse(changed.replace(b'"card":null', b'"card":' + whole))


def test_another_card_does_not_fit() -> None:
    with pytest.raises(DocumentError, match="its signature does not fit"):
        Challenge.parse(file_of(MEMBERS | {"card": json.loads(card("auditor-east").to_file())}))


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        ({"custodians": ["north-pier", "North-Pier"]}, "asks one custodian twice"),
        ({"custodians": []}, "custodians"),
        ({"due": MEMBERS["created"]}, "due before it was made"),
        ({"drill": 3}, "attendance, and nothing else"),
        ({"purpose": "attendance"}, "attendance, and nothing else"),
        ({"purpose": "attendance", "drill": 3}, "its signature does not fit"),
        ({"purpose": "recovery"}, "purpose"),
        ({"nonce": "00" * 31}, "nonce"),
        ({"nonce": "00" * 32}, "its signature does not fit"),
        ({"journal": {"sequence": 0, "head": MEMBERS["record"]}}, "journal.sequence"),
        ({"journal": None}, "its signature does not fit"),
        ({"card": None}, "card"),
        ({"signature": None}, "signature"),
        ({"colour": "blue"}, "does not know"),
        ({"version": 2}, "version"),
        ({"kind": "attestation"}, "a challenge is wanted here, but it is an attestation"),
    ],
    ids=lambda value: "-".join(value) if isinstance(value, dict) else "",  # Values hold keys made anew in each run.
)
def test_one_that_was_altered_is_refused(change: dict[str, Any], reason: str) -> None:
    with pytest.raises(DocumentError, match=reason):
        Challenge.parse(file_of(MEMBERS | change))


def test_rules_of_a_challenge_hold_though_its_signature_fits() -> None:
    """Whoever has a party key can sign anything; a reader goes by the rules all the same."""
    members = {name: getattr(MADE, name) for name in Challenge.model_fields if name not in (*NOT_SIGNED, "kind")}
    with unlocked("harbour-office") as key:
        Challenge.signed_by(key, **members)
        for change in ({"due": ASKED}, {"drill": 3}, {"custodians": ("north-pier", "north-pier")}):
            with pytest.raises(ValueError, match="Challenge"):
                Challenge.signed_by(key, **{**members, **change})


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        ({"custodians": ()}, "one custodian or more"),
        ({"custodians": ("north-pier", "north-pier")}, "each of them once"),
        ({"custodians": ("north-pier", "dry-dock")}, "names no custodian dry-dock"),
        ({"due": ASKED}, "due after it is made"),
        ({"drill": 2}, "asked for in a drill"),
        ({"purpose": "attendance"}, "asked for in a drill"),
    ],
    ids=lambda value: "-".join(value) if isinstance(value, dict) else "",  # Values hold keys made anew in each run.
)
def test_one_that_would_be_refused_is_not_made(change: dict[str, Any], reason: str) -> None:
    with pytest.raises(ParameterError, match=reason):
        challenge(**change)


def test_it_says_whom_it_asks_for_what() -> None:
    assert MADE.words() == (
        "north-pier, south-pier, light-house are asked whether the share is there and whole, until 2027-01-14T07:00:00Z"
    )
    assert re.fullmatch("([A-Z2-7]{4}-){7}[A-Z2-7]{4}", MADE.fingerprint)
    assert MADE.fingerprint.replace("-", "") == base64.b32encode(MADE.digest()[:20]).decode()
