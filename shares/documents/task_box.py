"""What one party of a task seals for another: fresh keys for one task alone, and boxes that only they open.

Source: RFC 9180 (HPKE, base mode): DHKEM(X25519, HKDF-SHA256), HKDF-SHA256, AES-256-GCM; FORMAT_KEYS.md, sec. 24.
May import: shares.memory.
Secret: the private key, and what is in a box. Public: the public key, the box, its length.
Does not: sign: a message's signature covers its boxes; or say what a box is bound to, which ``box_info`` does.
"""

from __future__ import annotations

import secrets

from cryptography.exceptions import InvalidTag
from cryptography.hazmat.primitives import hpke
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey, X25519PublicKey

from shares.memory import Secret

KEY_SIZE = 32
"""Of a private key and of a public one, in bytes."""
_SUITE = hpke.Suite(hpke.KEM.X25519, hpke.KDF.HKDF_SHA256, hpke.AEAD.AES_256_GCM)


def new_box_key() -> tuple[Secret, bytes]:
    """Draw a fresh key: return its private half, 32 bytes, which the caller wipes, and its public half, 32 bytes."""
    private = Secret.of(secrets.token_bytes(KEY_SIZE))
    return private, _loaded(private).public_key().public_bytes_raw()


def is_box_key(public: bytes) -> bool:
    """Say whether anything can be sealed to a public key of 32 bytes: a point of low order gives the same to all.

    Source: RFC 7748, sec. 6.1: every clamped scalar is a multiple of 8, so that any one of them shows such a point.
    """
    try:
        X25519PrivateKey.from_private_bytes(bytes(KEY_SIZE)).exchange(X25519PublicKey.from_public_bytes(public))
    except ValueError:
        return False
    return True


def seal_box(content: Secret, public: bytes, info: bytes) -> bytes:
    """Return content sealed: encapsulated key, then ciphertext.

    Args:
        content: 1 byte or more.
        public: the receiver's key for this task, for which ``is_box_key`` holds.
        info: what the box is bound to, see ``task_message.box_info``.
    """
    with content.view() as view:
        return _SUITE.encrypt(view, X25519PublicKey.from_public_bytes(public), info)


def open_box(private: Secret, box: bytes, info: bytes) -> Secret | None:
    """Return what is in a box; None where it was sealed to another key, bound to something else, or changed."""
    try:
        plain = _SUITE.decrypt(box, _loaded(private), info)
    except (InvalidTag, ValueError):
        return None
    return Secret.of(plain)


def _loaded(private: Secret) -> X25519PrivateKey:
    # The library takes and keeps a copy of its own; it is listed in SECURITY.md.
    with private.view() as view:
        return X25519PrivateKey.from_private_bytes(view)
