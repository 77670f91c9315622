"""The reference curve of the tests, checked by itself: published keys and signatures, and the group's own laws."""

from __future__ import annotations

import hashlib

import curve


def secret_scalar(seed: bytes) -> int:
    """RFC 8032, sec. 5.1.5."""
    lower = int.from_bytes(hashlib.sha512(seed).digest()[:32], "little")
    return lower & ~(7 | 1 << 255) | 1 << 254


def test_keys_and_signatures_of_rfc_8032(vectors):
    cases = vectors("rfc8032_ed25519")["vectors"]
    assert len(cases) == 3
    for case in cases:
        public, message, signature = (bytes.fromhex(case[name]) for name in ("public_key", "message", "signature"))
        key = curve.decode(public)
        scalar = secret_scalar(bytes.fromhex(case["secret_key"]))
        assert curve.multiply(scalar, curve.BASE) == key
        assert curve.encode(key) == public
        challenge = int.from_bytes(hashlib.sha512(signature[:32] + public + message).digest(), "little")
        right = curve.add(curve.decode(signature[:32]), curve.multiply(challenge, key))
        assert curve.multiply(int.from_bytes(signature[32:], "little"), curve.BASE) == right


def test_base_point():
    assert curve.on_curve(curve.BASE)
    assert curve.BASE[1] == 4 * pow(5, -1, curve.P) % curve.P
    assert curve.BASE[0] == 15112221349535400772501151409588531511454012693041857206046113283949847762202
    assert curve.order(curve.BASE) == curve.L


def test_points_of_small_order():
    assert [curve.order(point) for point in curve.TORSION] == [1, 8, 4, 8, 2, 8, 4, 8]
    assert len(set(curve.TORSION)) == 8
    assert all(curve.on_curve(point) for point in curve.TORSION)
    assert {curve.TORSION[0], curve.TORSION[4]} == {(0, 1), (0, curve.P - 1)}


def test_laws():
    two = curve.add(curve.BASE, curve.BASE)
    assert two == curve.multiply(2, curve.BASE)
    assert curve.on_curve(two)
    assert curve.add(two, curve.BASE, curve.multiply(-3, curve.BASE)) == curve.IDENTITY
    mixed = curve.add(curve.BASE, curve.TORSION[1])
    assert curve.order(mixed) == 8 * curve.L
    assert curve.prime_part(mixed) == curve.BASE
    assert curve.u_of(curve.BASE) == 9  # RFC 7748, sec. 4.1.


def test_ristretto_generator():
    # RFC 9496, appendix A.1: the encoding of the generator, which stands for the base point (from memory).
    octets = bytes.fromhex("e2f2ae0a6abc4e71a884a961c500515f58e30b6aa582dd8db6a65945e08d2d76")
    assert curve.ristretto(octets) == curve.BASE
