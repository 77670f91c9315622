"""A key share against the record alone: whatever differs is found, and named for what it is."""

from __future__ import annotations

import functools
import json
from typing import Any

import pytest
from cryptography.hazmat.primitives.asymmetric.ed448 import Ed448PrivateKey
from cryptography.hazmat.primitives.serialization import Encoding, PublicFormat
from parties import card, unlocked

from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.wrapping import card_sealer
from shares.errors import DocumentError, EpochMismatchError, SetMismatchError, VerificationError, WrongKeyError
from shares.group.edwards25519 import BASE, Scalar
from shares.keys.checking import check_belongs, check_record, opened, public_key_in
from shares.keys.deal import DealtKey, deal
from shares.keys.public_key import pem

NAMES = ("north-pier", "south-pier", "light-house")


@functools.cache
def key(label: str = "Harbour release key") -> DealtKey:
    with unlocked("harbour-office") as dealer:
        return deal(Scalar.drawn(), 2, [card(name) for name in NAMES], label=label, dealer=dealer)


def share(custodian: str = "north-pier", /, **changed: Any) -> KeyShare:
    """A key share some of whose public facts were changed, its own digest made to fit."""
    found = next(one for one in key().shares if one.custodian == custodian)
    return found.model_copy(update=changed).with_digest() if changed else found


def test_each_custodian_checks_their_own() -> None:
    for name in NAMES:
        with unlocked(name) as own:
            scalar = opened(share(name), key().record, own.open)
        assert (scalar * BASE).encode() != key().record.public_key.encode()


def test_another_party_key_is_asked_for() -> None:
    with unlocked("south-pier") as other, pytest.raises(WrongKeyError):
        opened(share("north-pier"), key().record, other.open)


def test_a_number_that_was_not_dealt_is_named() -> None:
    record = key().record
    for wrong in (Scalar.of(1), Scalar.drawn()):
        false = KeyShare.wrap(wrong, record, "north-pier", card_sealer(card("north-pier").recipient()))
        with unlocked("north-pier") as own, pytest.raises(VerificationError, match="north-pier does not hold: "):
            opened(false, record, own.open)


def test_the_share_of_another_custodian_is_no_share_of_ones_own() -> None:
    """Wrapped anew as one's own, at one's own index."""
    record = key().record
    with unlocked("south-pier") as other:
        value = opened(share("south-pier"), record, other.open)
    false = KeyShare.wrap(value, record, "north-pier", card_sealer(card("north-pier").recipient()))
    with unlocked("north-pier") as own, pytest.raises(VerificationError):
        opened(false, record, own.open)


@pytest.mark.parametrize(
    ("changed", "error"),
    [
        ({"key": bytes(16)}, SetMismatchError),
        ({"epoch": 2}, EpochMismatchError),
        ({"record": "AAAA-AAAA-AAAA-AAAA-AAAA-AAAA-AAAA-AAAA"}, VerificationError),
        ({"custodian": "dry-dock"}, VerificationError),
        ({"custodian": "south-pier"}, VerificationError),
        ({"index": 2}, VerificationError),
        ({"need": 3}, VerificationError),
    ],
    ids=lambda one: str(one) if isinstance(one, dict) else one.__name__,
)
def test_what_the_record_does_not_say_is_refused(changed: dict[str, Any], error: type[Exception]) -> None:
    with pytest.raises(error):
        check_belongs(share(**changed), key().record)


def test_facts_that_were_changed_do_not_open() -> None:
    """Whoever edits a key share so that it seems to be of another record has what was sealed against them."""
    other = key("Another key")
    facts = {"key": other.record.key, "record": other.record.fingerprint}
    with unlocked("north-pier") as own, pytest.raises(VerificationError, match="were changed"):
        opened(share(**facts), other.record, own.open)


def test_a_share_wrapped_for_somebody_else_is_refused() -> None:
    other = share("south-pier").wrapping
    with pytest.raises(VerificationError, match="not its custodian's"):
        check_belongs(share(wrapping=other), key().record)


def test_damage_is_noticed() -> None:
    members = json.loads(share().to_file())
    members["label"] = "Another label"
    with pytest.raises(VerificationError):
        check_belongs(KeyShare.parse(json.dumps(members).encode()), key().record)


def test_the_record_against_what_is_known_of_it() -> None:
    record = key().record
    check_record(record)
    check_record(record, public_key=record.public_key.encode(), trusted=[card("auditor-east"), card("harbour-office")])
    with pytest.raises(VerificationError, match="another key"):
        check_record(record, public_key=BASE.encode())
    with pytest.raises(VerificationError, match="none of the parties you trust"):
        check_record(record, trusted=[card("auditor-east")])


def test_an_unsigned_record_is_none() -> None:
    record = key().record
    bare = KeyRecord.parse(record.model_copy(update={"signatures": ()}).to_file())
    with pytest.raises(VerificationError, match="not its dealer has signed"):
        check_record(bare)


def test_a_joint_record_is_signed_by_every_custodian() -> None:
    record = key().record
    joint = KeyRecord.of(
        key=record.key,
        label=record.label,
        created=record.created,
        origin="joint",
        custodians=record.custodians,
        commitments=record.commitments,
        generation=bytes(32),
    )
    for count, name in enumerate(NAMES, 1):
        with unlocked(name) as own:
            joint = joint.signed([joint.signature_by(own)])
        if count < len(NAMES):
            with pytest.raises(VerificationError, match="not all who generated the key"):
                check_record(joint)
    check_record(joint)


def test_a_public_key_in_pem() -> None:
    public = key().record.public_key.encode()
    assert public_key_in(pem(public)) == public
    other = Ed448PrivateKey.generate().public_key().public_bytes(Encoding.PEM, PublicFormat.SubjectPublicKeyInfo)
    for data in (b"", b"x", pem(public)[:-40], other):
        with pytest.raises(DocumentError):
            public_key_in(data, where="public.pem")
