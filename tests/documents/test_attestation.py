"""Attestations: two signatures over one answer, neither of which can stand in for the other.

Checked against: FORMAT_EVIDENCE.md, section 17, by the signer written from the text of section 9
(tests/vectors/make/wrapping_v1.py), and by the attestation key worked out from the share's file with the standard
library (RFC 5869).
"""

from __future__ import annotations

import base64
import hashlib
import json
from typing import Any, get_args

import pytest
from attested import NEXT_DAY, RECORD, SHARES, answered, challenge, sealed
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey, Ed25519PublicKey
from parties import card, file_of
from strategies import bits_flipped
from vectors.make import wrapping_v1 as by_hand

from shares.custody.presented import Status
from shares.documents.attestation import RESULTS, Attestation, Result
from shares.documents.event import Attested, Grade
from shares.errors import DocumentError

ASKED = challenge()
MADE = answered(ASKED, place="the pier house", serial="TB-0017", remark="dry, and the ink is good", carrier="paper")
BY_SHARE = answered(ASKED, signer=None)
SEALED = sealed(ASKED)
PRESENT = answered(challenge(purpose="attendance", drill=4), grade="present")
MEMBERS: dict[str, Any] = json.loads(MADE.to_file())
KEY = RECORD.custodians[0].attestation_key
NOT_SIGNED = ("card", "share_signature", "party_signature")


def over(members: dict[str, Any]) -> dict[str, Any]:
    """What is signed, by the text of section 17."""
    signed = {name: value for name, value in members.items() if name not in NOT_SIGNED}
    return signed | {"card": members["card"]["fingerprint"] if members["card"] else None}


@pytest.mark.parametrize("made", [MADE, BY_SHARE, SEALED, PRESENT], ids=["both", "share", "sealed", "present"])
def test_it_comes_back(made: Attestation) -> None:
    read = Attestation.parse(made.to_file())
    assert read == made
    assert read.is_signed_by_party() is (made is not BY_SHARE)
    assert read.is_signed_by_share(KEY) is (made in (MADE, BY_SHARE))
    assert read.digest() == hashlib.sha256(made.to_file()).digest()


@pytest.mark.parametrize("made", [MADE, BY_SHARE], ids=["both", "share"])
def test_signatures_are_over_what_the_format_says(made: Attestation) -> None:
    members = json.loads(made.to_file())
    share = json.loads(SHARES["north-pier"].to_file())
    header = {name: share[name] for name in ("kind", "version", "set", "epoch", "custodian", "field", "paths")}
    header |= {name: share[name] for name in ("secret_commitment", "encrypted_file")}
    core = by_hand.canonical(header) + b"".join(map(by_hand.raw, share["rows"]))
    seed = by_hand.expand(by_hand.extract(b"", core), b"shares/v1/attest", 32)
    # Ed25519 is deterministic (RFC 8032, section 5.1.6): the same signature, not only one that fits.
    mine = Ed25519PrivateKey.from_private_bytes(seed).sign(by_hand.signed("attestation-share", over(members)))
    assert made.share_signature == mine
    if made.party_signature:
        public = Ed25519PublicKey.from_public_bytes(card("north-pier").ed25519)
        public.verify(made.party_signature, by_hand.signed("attestation", over(members)))


def is_believed(data: bytes) -> bool:
    """Say whether an answer is read and both of its signatures fit."""
    try:
        read = Attestation.parse(data)
    except DocumentError:
        return False
    return read.is_signed_by_share(KEY) and read.is_signed_by_party()


def test_every_flipped_bit_is_refused() -> None:
    """But those within the card, whose own tests flip them, and in white space, which there is none of."""
    data = json.dumps({**MEMBERS, "card": None}, separators=(",", ":")).encode()
    whole = json.dumps(MEMBERS["card"], separators=(",", ":")).encode()
    assert is_believed(data.replace(b'"card":null', b'"card":' + whole))
    for bit, changed in bits_flipped(data):
        assert not is_believed(changed.replace(b'"card":null', b'"card":' + whole)), bit


def test_neither_signature_stands_for_the_other() -> None:
    moved = {"share_signature": MEMBERS["party_signature"], "party_signature": MEMBERS["share_signature"]}
    read = Attestation.parse(file_of(MEMBERS | moved))
    assert (read.is_signed_by_share(KEY), read.is_signed_by_party()) == (False, False)
    # Not even where share and party had the same key.
    assert not MADE.is_signed_by_share(card("north-pier").ed25519)


def test_a_card_cannot_be_exchanged_or_taken_off() -> None:
    other = json.loads(card("south-pier").to_file())
    read = Attestation.parse(file_of(MEMBERS | {"card": other}))
    assert (read.is_signed_by_share(KEY), read.is_signed_by_party()) == (False, False)
    read = Attestation.parse(file_of(MEMBERS | {"card": None, "party_signature": None}))
    assert (read.is_signed_by_share(KEY), read.is_signed_by_party()) == (False, False)


def test_a_key_of_small_order_has_signed_nothing() -> None:
    zero = base64.urlsafe_b64encode(bytes(63) + b"\0").decode().rstrip("=")
    read = Attestation.parse(file_of(MEMBERS | {"share_signature": zero}))
    assert not read.is_signed_by_share(bytes([1]) + bytes(31))


@pytest.mark.parametrize(
    ("made", "change", "reason"),
    [
        (MADE, {"result": "seal intact"}, "not one of its grade"),
        (MADE, {"result": "fine"}, "result"),
        (MADE, {"grade": "sealed", "result": "seal intact"}, "no other, has a carrier"),
        (MADE, {"carrier": None}, "no other, has a carrier"),
        (MADE, {"share_signature": None}, "an intact share signs"),
        (MADE, {"result": "damaged", "share_signature": None, "card": None, "party_signature": None}, "nobody signed"),
        (MADE, {"card": None}, "go together"),
        (MADE, {"party_signature": None}, "go together"),
        (BY_SHARE, {"share_signature": None, "result": "damaged"}, "nobody signed"),
        (SEALED, {"opened": True}, "no content seen"),
        (SEALED, {"serial": None}, "known by its serial"),
        (SEALED, {"share_signature": MEMBERS["share_signature"]}, "cannot have signed"),
        (SEALED, {"carrier": "paper"}, "no other, has a carrier"),
        (SEALED, {"result": "present"}, "not one of its grade"),
        (PRESENT, {"grade": "sealed", "result": "seal intact"}, "known by its serial"),
        (PRESENT, {"opened": 1}, "opened"),
        (MADE, {"colour": "blue"}, "does not know"),
        (MADE, {"kind": "challenge"}, "an attestation is wanted here, but it is a challenge"),
    ],
    ids=lambda value: "-".join(value) if isinstance(value, dict) else "",  # Values hold keys made anew in each run.
)
def test_what_contradicts_itself_is_refused(made: Attestation, change: dict[str, Any], reason: str) -> None:
    with pytest.raises(DocumentError, match=reason):
        Attestation.parse(file_of(json.loads(made.to_file()) | change))


def test_words_are_those_of_verify_and_of_the_journal() -> None:
    words = {word for results in RESULTS.values() for word in results}
    assert words == set(get_args(Result))
    assert set(RESULTS) == set(get_args(Grade))
    assert set(RESULTS["content"]) == {Status.INTACT.value, Status.DAMAGED.value, Status.INCONSISTENT.value}
    for grade, results in RESULTS.items():
        for result in results:
            Attested(
                what="attested",
                challenge=bytes(32),
                custodian="north-pier",
                grade=grade,
                result=result,
                attributed=False,
                late=False,
                opened=False,
            )
    assert MADE.time == NEXT_DAY
