"""The scalar within an Ed25519 key. Checked against RFC 8032's own keys and the curve in plain integers."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import curve
import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from hypothesis import given
from hypothesis import strategies as st

from shares.errors import ParameterError, VerificationError
from shares.group import seed as module
from shares.group.edwards25519 import BASE
from shares.group.seed import scalar_of_seed

VECTORS = json.loads((Path(__file__).parents[1] / "vectors" / "rfc8032_ed25519.json").read_text())
KEYS = [(bytes.fromhex(one["secret_key"]), bytes.fromhex(one["public_key"])) for one in VECTORS["vectors"]]


def pruned(seed: bytes) -> int:
    """RFC 8032, sec. 5.1.5, steps 1 and 2, in plain integers."""
    half = bytearray(hashlib.sha512(seed).digest()[:32])
    half[0] &= 0b11111000
    half[31] = half[31] & 0b01111111 | 0b01000000
    return int.from_bytes(half, "little")


@pytest.mark.parametrize(("seed", "public"), KEYS)
def test_the_public_half_is_the_one_of_rfc_8032(seed: bytes, public: bytes) -> None:
    scalar, point = scalar_of_seed(seed)
    assert (point.encode(), (scalar * BASE).encode()) == (public, public)


@given(st.binary(min_size=32, max_size=32))
def test_the_scalar_is_the_pruned_hash_modulo_the_order(seed: bytes) -> None:
    scalar, point = scalar_of_seed(seed)
    assert int.from_bytes(scalar.encode(), "little") == pruned(seed) % curve.L
    assert point.encode() == Ed25519PrivateKey.from_private_bytes(seed).public_key().public_bytes_raw()


@pytest.mark.parametrize("length", [0, 31, 33, 64])
def test_a_seed_has_32_bytes(length: int) -> None:
    with pytest.raises(ParameterError):
        scalar_of_seed(bytes(length))


def test_a_faulty_machine_is_noticed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module.sodium, "crypto_sign_ed25519_sk_to_curve25519", lambda _: bytes([1]) * 32)
    with pytest.raises(VerificationError, match="does not give its public half"):
        scalar_of_seed(bytes(32))
