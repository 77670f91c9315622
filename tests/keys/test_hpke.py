"""HPKE's receiving side, with the receiver's key among custodians.

Checked against: RFC 9180, appendix A (base mode, X25519), every value of the KEM and of the key schedule;
``cryptography``'s own X25519, HPKE sender; a sender written with ``hashlib`` and ``hmac`` (``openings``).
"""

from __future__ import annotations

import itertools

import pytest
from cryptography.hazmat.primitives import hpke
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey, X25519PublicKey
from cryptography.hazmat.primitives.ciphers.aead import AESGCM
from hypothesis import given
from hypothesis import strategies as st
from keys.openings import clamped, octets, sealed, sent

from shares.errors import VerificationError
from shares.group.edwards25519 import BASE, Scalar
from shares.group.montgomery import lift, public_of
from shares.keys.hpke import AEADS, Aead, ReceiverContext, key_schedule, shared_secret
from shares.keys.partial import agreement
from shares.memory import Secret
from shares.sharing.verifiable import evaluate, polynomial

# AES-128-GCM is in the vectors and not in the package: its key schedule differs by a number and a length.
NAMES = ("skRm", "pkRm", "enc", "shared_secret", "info", "key", "base_nonce")
BY_NUMBER = {aead.number: aead for aead in AEADS.values()} | {1: Aead(1, 16, AESGCM)}


def context(dh: bytes, encapsulated: bytes, public_key: bytes, cipher: str, info: bytes = b"") -> ReceiverContext:
    with Secret.of(dh) as given_dh, shared_secret(given_dh, encapsulated, public_key) as shared:
        return key_schedule(shared, info, AEADS[cipher])


def by_custodians(secret: Scalar, encapsulated: bytes, need: int, who: tuple[int, ...]) -> bytes:
    """The Diffie-Hellman value of a shared key."""
    coefficients = polynomial(secret, need)
    point = lift(encapsulated)
    return octets(agreement({i: evaluate(coefficients, i) * point for i in who}))


def test_the_published_values_come_out_with_the_key_shared(vectors) -> None:
    found = vectors("rfc9180_hpke_x25519_base")["vectors"]
    seen = []
    for vector in found:
        value = {name: bytes.fromhex(vector[name]) for name in NAMES if name in vector}
        secret = clamped(value["skRm"])
        assert public_of(secret * BASE) == value["pkRm"]
        plain_dh = X25519PrivateKey.from_private_bytes(value["skRm"]).exchange(
            X25519PublicKey.from_public_bytes(value["enc"])
        )
        for who in itertools.combinations(range(1, 6), 3):
            dh = by_custodians(secret, value["enc"], 3, who)
            assert dh == plain_dh
        with Secret.of(dh) as given_dh, shared_secret(given_dh, value["enc"], value["pkRm"]) as shared:
            assert shared == Secret.of(value["shared_secret"])
            if vector["aead_id"] not in BY_NUMBER:  # Export only: nothing is encrypted.
                continue
            with key_schedule(shared, value["info"], BY_NUMBER[vector["aead_id"]]) as made:
                assert made.key == Secret.of(value["key"])
                assert made.nonce == Secret.of(value["base_nonce"])
                first = next(one for one in vector["encryptions"] if one["sequence_number"] == 0)
                aad, ct, pt = (bytes.fromhex(first[name]) for name in ("aad", "ct", "pt"))
                assert octets(made.open(ct, aad)) == pt
                seen.append(vector["aead_id"])
                # Changed at its ends, cut short, cut below a tag.
                for changed in (ct[:-1] + bytes([ct[-1] ^ 1]), bytes([ct[0] ^ 128]) + ct[1:], ct[:-1], ct[:15], b""):
                    with pytest.raises(VerificationError):
                        made.open(changed, aad)
                with pytest.raises(VerificationError):
                    made.open(ct, aad + b"\0")
    assert sorted(seen) == [1, 2, 3]


def test_shared_keys_agree_with_x25519_in_300_trials() -> None:
    for trial in range(300):
        private = X25519PrivateKey.generate()
        ephemeral = X25519PrivateKey.generate()
        encapsulated = ephemeral.public_key().public_bytes_raw()
        # Half the keys are as X25519 clamps them, half are any scalar, as those of a threshold key are.
        secret = clamped(private.private_bytes_raw()) if trial % 2 else Scalar.drawn()
        public_key = public_of(secret * BASE)
        need = 2 + trial % 3
        dh = by_custodians(secret, encapsulated, need, tuple(range(2, 2 + need)))
        assert dh == ephemeral.exchange(X25519PublicKey.from_public_bytes(public_key))
        if trial % 2:
            assert public_key == private.public_key().public_bytes_raw()


@pytest.mark.parametrize("cipher", AEADS)
@given(plaintext=st.binary(max_size=200), info=st.binary(max_size=80), associated=st.binary(max_size=80))
def test_what_an_independent_sender_wrote_opens(cipher, plaintext, info, associated) -> None:
    private = X25519PrivateKey.generate()
    public_key = private.public_key().public_bytes_raw()
    message = sent(public_key, plaintext, cipher=cipher, info=info, associated=associated)
    dh = private.exchange(X25519PublicKey.from_public_bytes(message[:32]))
    with context(dh, message[:32], public_key, cipher, info) as made:
        assert octets(made.open(memoryview(message)[32:], associated)) == plaintext
    for other in (
        context(dh, message[:32], public_key, cipher, info + b"."),
        context(dh, public_key, message[:32], cipher, info),
        context(dh[::-1], message[:32], public_key, cipher, info),
        context(dh, message[:32], public_key, next(name for name in AEADS if name != cipher), info),
    ):
        with other, pytest.raises(VerificationError):
            other.open(memoryview(message)[32:], associated)


@pytest.mark.parametrize(
    ("cipher", "aead"),
    [("aes-256-gcm", hpke.AEAD.AES_256_GCM), ("chacha20-poly1305", hpke.AEAD.CHACHA20_POLY1305)],
)
@given(plaintext=st.binary(max_size=200), info=st.binary(max_size=80))
def test_messages_of_the_librarys_own_sender_open(cipher, aead, plaintext, info) -> None:
    private = X25519PrivateKey.generate()
    suite = hpke.Suite(hpke.KEM.X25519, hpke.KDF.HKDF_SHA256, aead)
    message = suite.encrypt(plaintext, private.public_key(), info)
    dh = private.exchange(X25519PublicKey.from_public_bytes(message[:32]))
    with context(dh, message[:32], private.public_key().public_bytes_raw(), cipher, info) as made:
        assert octets(made.open(message[32:], b"")) == plaintext


def test_the_independent_sender_is_right() -> None:
    """Otherwise it would prove nothing: the library opens what it writes."""
    private = X25519PrivateKey.generate()
    suite = hpke.Suite(hpke.KEM.X25519, hpke.KDF.HKDF_SHA256, hpke.AEAD.AES_256_GCM)
    message = sent(private.public_key().public_bytes_raw(), b"tide tables", info=b"harbour")
    assert suite.decrypt(message, private, b"harbour") == b"tide tables"
    assert sealed(bytes(32), bytes(32), bytes(32), b"a") != sealed(bytes(31) + b"\1", bytes(32), bytes(32), b"a")


def test_keys_are_wiped() -> None:
    with context(bytes(32), bytes(32), bytes(32), "aes-256-gcm") as made:
        assert (len(made.key), len(made.nonce)) == (32, 12)
    for secret in (made.key, made.nonce):
        with pytest.raises(ValueError, match="closed"):
            secret.view()
