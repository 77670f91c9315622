"""Hashing: published values, the second generator computed again from scratch, and hedging when randomness fails.

Checked against: RFC 9380, appendix K.1; ``curve`` and ``hashlib``.
"""

from __future__ import annotations

import hashlib

import curve
import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.errors import ParameterError, VerificationError
from shares.group import hashing
from shares.group.edwards25519 import BASE, ORDER, Point, Scalar
from shares.group.hashing import SECOND_BASE, SECOND_BASE_LABEL, expand_message_xmd, hashed_point, hedged


def test_expansion_of_rfc_9380(vectors):
    published = vectors("rfc9380_expand_message_xmd_sha256")
    assert len(published["vectors"]) == 10
    tag = published["DST_ascii"].encode()
    for case in published["vectors"]:
        expanded = expand_message_xmd(case["msg_ascii"].encode(), tag, case["len_in_bytes"])
        assert expanded.hex() == case["uniform_bytes"]


@pytest.mark.parametrize(("tag", "length"), [(b"", 32), (b"x" * 256, 32), (b"x", 0), (b"x", 8161), (b"x", -1)])
def test_expansion_refuses_what_is_out_of_range(tag, length):
    with pytest.raises(ParameterError, match="1 to 255 bytes, and 1 to 8,160"):
        expand_message_xmd(b"", tag, length)


@given(message=st.binary(max_size=200), tag=st.binary(min_size=1, max_size=255), length=st.integers(1, 300))
def test_expansion_is_as_long_as_wanted_and_says_so_in_its_bytes(message, tag, length):
    expanded = expand_message_xmd(message, tag, length)
    assert len(expanded) == length
    assert length < 16 or expand_message_xmd(message, tag, length + 1)[:length] != expanded
    assert length < 16 or expand_message_xmd(message + b"\0", tag, length) != expanded


def xmd(message: bytes, tag: bytes) -> bytes:
    """RFC 9380, sec. 5.3.1, for 32 bytes, where there is one block: written again from the standard."""
    prime = tag + bytes([len(tag)])
    b_0 = hashlib.sha256(b"\0" * 64 + message + b"\x00\x20" + b"\x00" + prime).digest()
    return hashlib.sha256(b_0 + b"\x01" + prime).digest()


def test_second_base_is_what_its_derivation_says():
    tried = []
    for number in range(256):
        octets = xmd(bytes([number]), b"shares/v1/second-base")
        point = curve.decode(octets)
        tried.append("off the curve" if point is None else "other group" if curve.order(point) != curve.L else "it")
        if tried[-1] == "it":
            break
    assert curve.encode(point) == SECOND_BASE.encode() == hashed_point(SECOND_BASE_LABEL).encode()
    assert len(tried) == 15
    assert {"off the curve", "other group", "it"} == set(tried)


def test_labels_lead_to_different_points():
    points = {hashed_point(label) for label in (b"shares/v1/second-base", b"a", b"b", b"c" * 255)}
    assert len(points | {BASE}) == 5


def test_a_label_that_leads_nowhere_is_refused(monkeypatch):
    monkeypatch.setattr(hashing, "expand_message_xmd", lambda message, tag, length: bytes(length))
    with pytest.raises(ParameterError, match="choose another"):
        hashed_point(b"shares/v1/second-base")
    with pytest.raises(VerificationError):
        Point.decode(bytes(32))


class Source:
    """A source of randomness that gives what a test expects, or always the same."""

    def __init__(self, *answers: bytes) -> None:
        self.answers = list(answers)

    def __call__(self, length: int) -> bytes:
        answer = self.answers.pop(0) if len(self.answers) > 1 else self.answers[0]
        return answer[:length]


def test_hedged_is_drawn_plus_hashed(monkeypatch):
    fresh, drawn = bytes(range(32)), bytes(range(64, 128))
    monkeypatch.setattr(hashing.secrets, "token_bytes", Source(fresh, drawn))
    secret = Scalar.of(1234)
    hashed = hashlib.sha512(b"shares/v1/scalar" + fresh + secret.encode() + b"place").digest()
    number = int.from_bytes(hashed, "little") + int.from_bytes(drawn, "little")
    assert hedged(secret, b"place") == Scalar.of(number % ORDER)


def test_a_source_that_repeats_itself_gives_different_numbers_at_different_places(monkeypatch):
    monkeypatch.setattr(hashing.secrets, "token_bytes", Source(bytes(64)))
    seen = [hedged(secret, place).encode() for secret in (Scalar.of(1), Scalar.of(2)) for place in (b"", b"a", b"b")]
    assert len(set(seen)) == 6


def test_the_same_secret_and_place_give_other_numbers_each_time():
    assert len({hedged(Scalar.of(1), b"place").encode() for _ in range(20)}) == 20
