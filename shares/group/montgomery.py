"""Between edwards25519 and curve25519: the X25519 public key of a point, and the point of an X25519 public key.

Both curves are one group written in two ways. With u alone, X25519 tells a point from its negative as little as from
itself: whichever of the two ``lift`` returns, its multiples have the u that X25519 computes.

Source: RFC 7748, sec. 4.1 (the birational maps, u = (1 + y) / (1 - y) and y = (u - 1) / (u + 1)) and 5 (encoding of u);
    RFC 8032, sec. 5.1.2 (encoding of points).
May import: shares.errors, .edwards25519.
Secret: what ``agreed`` takes and returns, which only the library computes with. Public: everything else; Python's
integers compute there, so a secret u (a shared secret of X25519) must not be lifted.
Does not: multiply. A scalar that is not clamped multiplies the lifted point, which is why ``lift`` insists on the group
of prime order, where X25519 would let clamping take small factors away.
"""

from __future__ import annotations

from typing import Final

import nacl.bindings as sodium

from shares.errors import VerificationError
from shares.group.edwards25519 import SIZE, Point

_P: Final = 2**255 - 19
_A: Final = 486662
"""The coefficient in v^2 = u^3 + A u^2 + u (RFC 7748, sec. 4.1)."""
_SIGN: Final = 1 << 255


def public_of(point: Point) -> bytes:
    """Return u of a point, 32 bytes: of a signing key's point, the X25519 public key of the same secret scalar.

    Source: RFC 7748, sec. 4.1.

    >>> from shares.group.edwards25519 import BASE
    >>> int.from_bytes(public_of(BASE), "little")
    9
    """
    # No point has y = 1: that would be the identity.
    y = int.from_bytes(point.encode(), "little") % _SIGN
    return ((1 + y) * pow(1 - y, -1, _P) % _P).to_bytes(SIZE, "little")


def agreed(point: Point) -> bytes:
    """Return u of a secret point, 32 bytes: what X25519 would have computed. It equals ``public_of``, in the library.

    Source: RFC 7748, sec. 4.1; libsodium, crypto_sign_ed25519_pk_to_curve25519.

    >>> from shares.group.edwards25519 import BASE
    >>> agreed(BASE) == public_of(BASE)
    True
    """
    return sodium.crypto_sign_ed25519_pk_to_curve25519(point.encode())


def lift(u: bytes) -> Point:
    """Return the point with this u whose x is even (its encoding has sign bit 0).

    Args:
        u: 32 bytes, an X25519 public key as its sender encoded it.

    Raises:
        VerificationError: u is not 32 bytes, not below p (a set top bit included: X25519 would ignore it, so that one
            point had two encodings), -1, on the twist, or of a point outside the group of prime order.

    Source: RFC 7748, sec. 4.1; what is refused follows RFC 9591, sec. 6.1, for points of any origin.

    >>> from shares.group.edwards25519 import BASE
    >>> lift((9).to_bytes(32, "little")) == BASE
    True
    """
    if len(u) != SIZE:
        raise VerificationError("an X25519 public key has 32 bytes")
    number = int.from_bytes(u, "little")
    if number >= _P:
        raise VerificationError("the X25519 public key is not below 2^255 - 19: it is not in its one encoding")
    if number == _P - 1:
        raise VerificationError("the X25519 public key is -1, to which no point of edwards25519 belongs")
    # Euler's criterion: u is on the curve where u^3 + A u^2 + u is a square, and on its twist elsewhere.
    if pow(number * (number * (number + _A) + 1), (_P - 1) // 2, _P) == _P - 1:
        raise VerificationError("the X25519 public key belongs to a point on the twist, not on the curve")
    y = (number - 1) * pow(number + 1, -1, _P) % _P
    try:
        return Point.decode(y.to_bytes(SIZE, "little"))
    except VerificationError:
        raise VerificationError(
            "the X25519 public key belongs to a point of small order, or with a part of small order"
        ) from None
