"""A key share against the record alone: whatever differs is found, and named for what it is."""

from __future__ import annotations

import pytest
from cryptography.hazmat.primitives.asymmetric.ed448 import Ed448PrivateKey
from cryptography.hazmat.primitives.serialization import Encoding, PublicFormat
from keys.test_own_share import NAMES, key
from parties import card, unlocked

from shares.documents.key_record import KeyRecord
from shares.errors import DocumentError, VerificationError
from shares.group.edwards25519 import BASE
from shares.keys.checking import check_record, public_key_in
from shares.keys.public_key import pem


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
