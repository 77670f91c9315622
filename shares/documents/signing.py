"""Signatures by parties: what is signed, and how it is checked.

Source: RFC 8032 (Ed25519); FORMAT.md, sec. 9.
May import: shares.documents.base.
Secret: nothing. Public: everything.
Does not: hold keys, or say whose a key is; a card does, and people compare its fingerprint.
"""

from __future__ import annotations

import contextlib
import functools
from typing import Any

from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

from shares.documents.base import canonical

_LABEL = b"shares/v1/sign/"
_P = 2**255 - 19
# The y of the points whose order divides 8: of order 1, 2, 4, and twice 8 (RFC 8032's curve; a test works them out).
_Y8 = 0x7A03AC9277FDC74EC6CC392CFA53202A0F67100D760B3CBA4FD84D3D706A17C7
_SMALL_ORDER = frozenset({1, _P - 1, 0, _Y8, _P - _Y8})


def signed_bytes(kind: str, members: dict[str, Any]) -> bytes:
    """Return what a signature of one kind is over. No kind's bytes begin another's: the brace ends the kind.

    Args:
        kind: what is signed, one word for each purpose.
        members: public JSON members.

    >>> signed_bytes("party-card", {"name": "north-pier"})
    b'shares/v1/sign/party-card{"name":"north-pier"}'
    """
    return _LABEL + kind.encode("ascii") + canonical(members)


def is_key(public_key: bytes) -> bool:
    """Say whether bytes are an Ed25519 public key that a signature proves something about.

    A point of small order has signatures that fit any content and that anybody can write; and a point has one encoding
    (RFC 8032, sec. 5.1.3), though libraries may take others.

    Args:
        public_key: 32 bytes.
    """
    y = int.from_bytes(public_key, "little") & (1 << 255) - 1
    return y < _P and y not in _SMALL_ORDER


def is_signed(public_key: bytes, signature: bytes, kind: str, members: dict[str, Any]) -> bool:
    """Say whether ``signature`` is one by the holder of ``public_key`` over these members.

    Args:
        public_key: Ed25519, 32 bytes.
        signature: 64 bytes.
        kind: as for ``signed_bytes``.
        members: as for ``signed_bytes``.
    """
    return is_signed_text(public_key, signature, kind, canonical(members))


def is_signed_text(public_key: bytes, signature: bytes, kind: str, text: bytes) -> bool:
    """Say the same of members that are in canonical form already.

    Args:
        public_key: Ed25519, 32 bytes.
        signature: 64 bytes.
        kind: as for ``signed_bytes``.
        text: the members, canonical.
    """
    key = _loaded(public_key)
    if key is None:
        return False
    try:
        key.verify(signature, _LABEL + kind.encode("ascii") + text)
    except InvalidSignature:
        return False
    return True


@functools.lru_cache(maxsize=256)
def _loaded(public_key: bytes) -> Ed25519PublicKey | None:
    """Return a key for the library, kept for the next signature by it; None where it proves nothing."""
    if is_key(public_key):
        with contextlib.suppress(ValueError):
            return Ed25519PublicKey.from_public_bytes(public_key)
    return None
