"""Signatures by parties: what is signed, and how it is checked.

Source: RFC 8032 (Ed25519); FORMAT.md, sec. 9.
May import: shares.documents.base.
Secret: nothing. Public: everything.
Does not: hold keys, or say whose a key is; a card does, and people compare its fingerprint.
"""

from __future__ import annotations

from typing import Any

from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

from shares.documents.base import canonical


def signed_bytes(kind: str, members: dict[str, Any]) -> bytes:
    """Return what a signature of one kind is over. No kind's bytes begin another's: the brace ends the kind.

    Args:
        kind: what is signed, one word for each purpose.
        members: public JSON members.

    >>> signed_bytes("party-card", {"name": "north-pier"})
    b'shares/v1/sign/party-card{"name":"north-pier"}'
    """
    return b"shares/v1/sign/" + kind.encode("ascii") + canonical(members)


def is_signed(public_key: bytes, signature: bytes, kind: str, members: dict[str, Any]) -> bool:
    """Say whether ``signature`` is one by the holder of ``public_key`` over these members.

    Args:
        public_key: Ed25519, 32 bytes.
        signature: 64 bytes.
        kind: as for ``signed_bytes``.
        members: as for ``signed_bytes``.
    """
    try:
        Ed25519PublicKey.from_public_bytes(public_key).verify(signature, signed_bytes(kind, members))
    except (InvalidSignature, ValueError):
        return False
    return True
