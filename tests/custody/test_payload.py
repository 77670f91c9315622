"""The payload's frame: every length in, the same length out, and nothing else is taken for a secret.

Checked against: FORMAT.md, sections 2 and 8, with ``hashlib``.
"""

from __future__ import annotations

import hashlib

import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from strategies import octets, revealed

from shares.custody.payload import (
    DEFAULT_PAD,
    MAX_PAD,
    MAX_SECRET,
    commitment,
    is_committed,
    make_payload,
    open_payload,
)
from shares.errors import ParameterError, VerificationError
from shares.field.gf256 import Field
from shares.memory import Secret

FIELD = Field()


@pytest.mark.parametrize("pad", [1, 2, 3, 16, 48])
def test_every_length_around_the_pads_boundaries(pad: int) -> None:
    for length in range(1, 3 * 48 + 6):
        secret = bytes((7 * i + length) % 256 for i in range(length))
        payload = make_payload(FIELD, Secret.of(secret), pad=pad)
        message = revealed(payload)[:-48]
        assert len(message) % pad == 0
        assert 0 <= len(message) - 4 - length < pad
        assert message == length.to_bytes(4, "big") + secret + bytes(len(message) - 4 - length)
        assert revealed(open_payload(payload)) == secret


@given(st.integers(1, MAX_SECRET), st.integers(1, MAX_PAD))
@example(MAX_SECRET, 1)
@example(MAX_SECRET, MAX_PAD)
@example(MAX_SECRET - 4, MAX_PAD)
@example(MAX_PAD - 4, MAX_PAD)
@example(MAX_PAD - 3, MAX_PAD)
@example(1, MAX_PAD)
@example(12, DEFAULT_PAD)
@example(13, DEFAULT_PAD)
def test_any_length_up_to_64_kibibytes_and_any_pad(length: int, pad: int) -> None:
    secret = hashlib.shake_256(bytes([length % 256, pad % 256])).digest(length)
    payload = make_payload(FIELD, Secret.of(secret), pad=pad)
    assert (len(payload) - 48) % pad == 0
    assert revealed(open_payload(payload)) == secret


def test_secrets_that_are_zeros_or_end_in_zeros_come_back_whole() -> None:
    for secret in (bytes(1), bytes(16), b"\1" + bytes(40), bytes(11) + b"\1"):
        assert revealed(open_payload(make_payload(FIELD, Secret.of(secret)))) == secret


@pytest.mark.parametrize("length", [0, MAX_SECRET + 1])
def test_a_secret_out_of_range_is_refused(length: int) -> None:
    with pytest.raises(ParameterError, match="the secret is"):
        make_payload(FIELD, Secret(length))


@pytest.mark.parametrize("given_secret", [b"canary", bytearray(b"canary"), "canary", None])
def test_a_secret_in_other_hands_is_refused_and_not_repeated(given_secret: object) -> None:
    with pytest.raises(TypeError, match=r"see Secret\.of") as refusal:
        make_payload(FIELD, given_secret)
    assert "canary" not in f"{refusal.value!r} {vars(refusal.value)} {refusal.value.args}"


@pytest.mark.parametrize("pad", [0, -16, MAX_PAD + 1])
def test_a_pad_out_of_range_is_refused(pad: int) -> None:
    with pytest.raises(ParameterError, match="pad"):
        make_payload(FIELD, Secret(1), pad=pad)


def test_blind_and_mask_are_fresh_each_time() -> None:
    tails = {revealed(make_payload(FIELD, Secret.of(b"same")))[-48:] for _ in range(50)}
    assert len({tail[:32] for tail in tails}) == len({tail[32:] for tail in tails}) == 50


def test_blind_and_mask_are_hedged_by_the_message(monkeypatch) -> None:
    """FORMAT.md, section 3: drawn like coefficients, with the message in place of f_0."""
    supply = iter([bytes(range(32)), bytes(range(100, 148))])
    monkeypatch.setattr("shares.sharing.shamir.secrets.token_bytes", lambda length: next(supply))
    payload = revealed(make_payload(FIELD, Secret.of(b"made up")))
    stream = hashlib.shake_256(b"shares/v1/hedge" + bytes(range(32)) + payload[:-48]).digest(48)
    assert payload[-48:] == bytes(a ^ b for a, b in zip(stream, range(100, 148), strict=True))


# Commitment.


@given(octets(16, 16), octets(53, 120))
def test_the_commitment_is_over_set_message_and_blind(set_id: bytes, payload: bytes) -> None:
    expected = hashlib.sha256(b"shares/v1/secret" + set_id + payload[:-16]).digest()
    assert commitment(set_id, Secret.of(payload)) == expected
    assert is_committed(set_id, Secret.of(payload), expected)


def test_every_bit_of_message_and_blind_is_committed_to_and_no_bit_of_the_mask() -> None:
    set_id, payload = bytes(16), bytes(range(64))
    committed = commitment(set_id, Secret.of(payload))
    for bit in range(8 * len(payload)):
        changed = bytearray(payload)
        changed[bit // 8] ^= 1 << bit % 8
        assert is_committed(set_id, Secret.of(changed), committed) == (bit >= 8 * 48)
    for bit in range(128):
        other = bytearray(set_id)
        other[bit // 8] ^= 1 << bit % 8
        assert not is_committed(bytes(other), Secret.of(payload), committed)


# Frames that no honest dealer makes.


@pytest.mark.parametrize(
    "message",
    [
        bytes(16),  # Length 0.
        b"\0\0\0\x0d" + bytes(12),  # One byte more than there is.
        b"\xff\xff\xff\xff" + bytes(12),
        b"\x80\0\0\1" + bytes(12),
        b"\0\0\0\3abc" + bytes(8) + b"\1",  # Something behind the secret.
        b"\0\0\0\3abcd" + bytes(8),
        b"\0\0\0\0a" + bytes(11),
    ],
)
def test_a_wrong_frame_is_refused(message: bytes) -> None:
    with pytest.raises(VerificationError, match="not framed as a secret") as refusal:
        open_payload(Secret.of(message + bytes(48)))
    assert "abc" not in str(refusal.value)


def test_a_frame_without_filling_is_right() -> None:
    assert revealed(open_payload(Secret.of(b"\0\0\0\1a" + bytes(48)))) == b"a"
    assert revealed(open_payload(Secret.of(b"\0\0\0\x0c" + b"abcdefghijkl" + bytes(48)))) == b"abcdefghijkl"
