"""Signatures by parties: over exactly these bytes, for exactly this purpose.

Checked against: RFC 8032, section 7.1 (tests/vectors/rfc8032_ed25519.json), for the keys; FORMAT.md, section 9, for the
bytes, by the reader written from its text alone (tests/vectors/make/wrapping_v1.py).
"""

from __future__ import annotations

import itertools
import json
from pathlib import Path
from typing import Any

import pytest
from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from hypothesis import given
from hypothesis import strategies as st
from vectors.make import wrapping_v1 as by_hand

from shares.documents import signing
from shares.documents.base import KINDS
from shares.documents.signing import is_signed, signed_bytes

VECTORS = json.loads((Path(__file__).parents[1] / "vectors" / "rfc8032_ed25519.json").read_text())["vectors"]
MEMBERS: dict[str, Any] = {"name": "north-pier", "epoch": 1, "list": [1, "ö"], "null": None}
JSON = st.dictionaries(
    st.text(st.characters(codec="ascii", categories=["L", "N"]), max_size=8),
    st.none() | st.integers(0, 2**32 - 1) | st.text(max_size=20) | st.lists(st.integers(0, 9), max_size=3),
    max_size=5,
)


def key(vector: dict[str, Any] = VECTORS[0]) -> Ed25519PrivateKey:
    return Ed25519PrivateKey.from_private_bytes(bytes.fromhex(vector["secret_key"]))


@pytest.mark.parametrize("vector", VECTORS, ids=lambda vector: vector["name"])
def test_a_signature_with_a_key_of_rfc_8032_is_accepted(vector: dict[str, Any]) -> None:
    public = bytes.fromhex(vector["public_key"])
    signature = key(vector).sign(b"shares/v1/sign/party-card" + b'{"name":"north-pier"}')
    assert is_signed(public, signature, "party-card", {"name": "north-pier"})
    # The RFC's own signatures are over other messages.
    assert not is_signed(public, bytes.fromhex(vector["signature"]), "party-card", {"name": "north-pier"})


@given(JSON)
def test_the_bytes_are_those_of_the_format(members: dict[str, Any]) -> None:
    assert signed_bytes("record", members) == by_hand.signed("record", members)


def test_the_bytes_of_one_kind_never_begin_those_of_another() -> None:
    """Kinds are words without a brace, and every document begins with one."""
    for one, other in itertools.permutations((*KINDS, "record-of", "recor"), 2):
        assert not signed_bytes(other, {}).startswith(signed_bytes(one, {})[:-1])


def test_every_flipped_bit_of_key_and_signature_is_refused() -> None:
    public = key().public_key().public_bytes_raw()
    signature = key().sign(signed_bytes("record", MEMBERS))
    assert is_signed(public, signature, "record", MEMBERS)
    for i in range(8 * 32):
        changed = (int.from_bytes(public) ^ 1 << i).to_bytes(32)
        assert not is_signed(changed, signature, "record", MEMBERS)
    for i in range(8 * 64):
        changed = (int.from_bytes(signature) ^ 1 << i).to_bytes(64)
        assert not is_signed(public, changed, "record", MEMBERS)


@pytest.mark.parametrize("length", [0, 31, 33, 63, 65])
def test_keys_and_signatures_of_other_lengths_are_no_signature(length: int) -> None:
    public, signature = key().public_key().public_bytes_raw(), key().sign(signed_bytes("record", MEMBERS))
    assert not is_signed(bytes(length), signature, "record", MEMBERS)
    assert not is_signed(public, signature[:length].ljust(length, b"\0"), "record", MEMBERS)


def test_the_order_is_added_to_no_signature() -> None:
    """RFC 8032, section 5.1.7: S is below the order of the group, so that a signature cannot be made into another."""
    order = 2**252 + 27742317777372353535851937790883648493
    signature = key().sign(signed_bytes("record", MEMBERS))
    another = signature[:32] + (int.from_bytes(signature[32:], "little") + order).to_bytes(32, "little")
    assert not is_signed(key().public_key().public_bytes_raw(), another, "record", MEMBERS)


@pytest.mark.parametrize(
    ("kind", "change"),
    [
        ("party-card", {}),
        ("recor", {}),
        ("record", {"name": "south-pier"}),
        ("record", {"epoch": 2}),
        ("record", {"null": 0}),
        ("record", {"more": None}),
        ("record", {"list": ["ö", 1]}),
    ],
)
def test_another_purpose_or_other_members_are_refused(kind: str, change: dict[str, Any]) -> None:
    public, signature = key().public_key().public_bytes_raw(), key().sign(signed_bytes("record", MEMBERS))
    assert not is_signed(public, signature, kind, MEMBERS | change)


def test_the_order_of_members_is_free() -> None:
    public, signature = key().public_key().public_bytes_raw(), key().sign(signed_bytes("record", MEMBERS))
    assert is_signed(public, signature, "record", dict(reversed(MEMBERS.items())))


def test_the_reader_by_hand_agrees() -> None:
    card = {"ed25519": by_hand.b64(key().public_key().public_bytes_raw())}
    signature = by_hand.b64(key().sign(signed_bytes("record", MEMBERS)))
    by_hand.verify(card, signature, "record", MEMBERS)
    with pytest.raises(InvalidSignature):
        by_hand.verify(card, signature, "record", MEMBERS | {"epoch": 2})


# Keys that prove nothing.

P = 2**255 - 19
D = -121665 * pow(121666, -1, P) % P


def added(one: tuple[int, int], other: tuple[int, int]) -> tuple[int, int]:
    """Add two points of the curve -x^2 + y^2 = 1 + d x^2 y^2 (RFC 8032, sec. 5.1.4), by the textbook's formula."""
    (a, b), (c, d) = one, other
    product = D * a * b * c * d % P
    return (a * d + b * c) * pow(1 + product, -1, P) % P, (b * d + a * c) * pow(1 - product, -1, P) % P


def points_of(y: int) -> list[tuple[int, int]]:
    """The points with this y: none, one or two."""
    square = (y * y - 1) * pow(D * y * y + 1, -1, P) % P
    root = pow(square, (P + 3) // 8, P)
    roots = {root, root * pow(2, (P - 1) // 4, P) % P}
    return [(x, y) for one in roots if one * one % P == square for x in {one, -one % P}]


def test_the_keys_of_small_order_are_exactly_those() -> None:
    """Eight times a point of small order is the neutral one, (0, 1). The curve has eight of them (RFC 8032's h = 8)."""
    found = {point for y in signing._SMALL_ORDER for point in points_of(y)}
    assert len(found) == 8
    for point in found:
        twice = added(point, point)
        four = added(twice, twice)
        assert added(four, four) == (0, 1)


@pytest.mark.parametrize("y", [*sorted(signing._SMALL_ORDER), P, P + 1, 2**255 - 1], ids=hex)
@pytest.mark.parametrize("sign", [0, 1])
def test_a_key_that_fits_any_content_signs_nothing(y: int, sign: int) -> None:
    """With a public key of small order the signature R || 0, R such a point, verifies whatever was signed, or often."""
    key = (y | sign << 255).to_bytes(32, "little")
    assert not signing.is_key(key)
    assert not any(is_signed(key, key + bytes(32), "record", {"n": n}) for n in range(16))


def test_honest_keys_are_keys() -> None:
    for _ in range(50):
        assert signing.is_key(Ed25519PrivateKey.generate().public_key().public_bytes_raw())
