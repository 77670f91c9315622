"""Points and scalars that come out of hashes: a second generator, and secret numbers that outlive bad randomness.

Source: RFC 9380, sec. 5.3.1 (expand_message_xmd); T. P. Pedersen, "Non-Interactive and Information-Theoretic Secure
    Verifiable Secret Sharing", CRYPTO '91 (why nobody may know the second generator's logarithm); hedged randomness
    after M. Bellare, W. Dai, P. Rogaway, "Reimagining Secret Sharing", 2020 (privacy goal).
May import: shares.errors, .edwards25519.
Secret: what ``hedged`` takes and returns. Public: messages, labels and points.
Does not: hash secrets to points: how long ``hashed_point`` searches depends on its label.
"""

from __future__ import annotations

import hashlib
import secrets
from typing import Final

from shares.errors import ParameterError, VerificationError
from shares.group.edwards25519 import SIZE, Point, Scalar

_DIGEST: Final = 32  # bytes of SHA-256
_BLOCK: Final = 64  # bytes SHA-256 takes at a time (FIPS 180-4, sec. 5.2.1)

SECOND_BASE_LABEL: Final = b"shares/v1/second-base"
HEDGE_LABEL: Final = b"shares/v1/scalar"


def expand_message_xmd(message: bytes, tag: bytes, length: int) -> bytes:
    """Hash a message to as many bytes as are wanted, with SHA-256.

    Args:
        message: any bytes.
        tag: domain separation tag, 1 to 255 bytes.
        length: bytes wanted, 1 to 8,160.

    Raises:
        ParameterError: a tag or length out of range.

    Source: RFC 9380, sec. 5.3.1; its names for tag and length are DST and len_in_bytes.

    >>> expand_message_xmd(b"", b"QUUX-V01-CS02-with-expander-SHA256-128", 32).hex()[:16]
    '68a985b87eb6b469'
    """
    if not 1 <= len(tag) <= 255 or not 1 <= length <= 255 * _DIGEST:
        raise ParameterError("a tag has 1 to 255 bytes, and 1 to 8,160 bytes can be wanted")
    ending = tag + bytes([len(tag)])  # DST_prime
    first = hashlib.sha256(bytes(_BLOCK) + message + length.to_bytes(2, "big") + b"\0" + ending).digest()  # b_0
    block = hashlib.sha256(first + b"\1" + ending).digest()
    blocks = [block]
    for number in range(2, -(-length // _DIGEST) + 1):
        mixed = bytes(a ^ b for a, b in zip(first, block, strict=True))
        block = hashlib.sha256(mixed + bytes([number]) + ending).digest()
        blocks.append(block)
    return b"".join(blocks)[:length]


def hashed_point(label: bytes) -> Point:
    """Return a point of which nobody knows the logarithm to any base, and which anybody can compute again.

    For i = 0, 1, 2, ... take 32 bytes of expand_message_xmd, SHA-256, with the single byte i as message and the label
    as tag. The first of them that are, as they stand, the encoding of a point (RFC 8032, sec. 5.1.3) of order
    ``ORDER`` are the point's. About one string in sixteen is such an encoding: half are on the curve, and an eighth of
    these are in the group. Nothing is multiplied by the cofactor.

    Args:
        label: 1 to 255 bytes, public.

    Raises:
        ParameterError: none of 256 tries is a point, which happens to one label in ten million.

    Source: RFC 9380, sec. 5.3.1, for the bytes; trying until a string fits is folklore, and safe where all is public.
    """
    for number in range(256):
        try:
            return Point.decode(expand_message_xmd(bytes([number]), label, SIZE))
        except VerificationError:
            continue
    raise ParameterError("this label leads to no point: choose another")


SECOND_BASE: Final = Point.decode(bytes.fromhex("1d98b4e0069bb4cb6a6dd18a1a74e54a88ecfc1419e3e1fa0afa3d6a20078518"))
"""The second generator H, ``hashed_point(SECOND_BASE_LABEL)``: nobody knows h with H = h * BASE (Pedersen 1991: h)."""


def hedged(secret: Scalar, place: bytes) -> Scalar:
    """Draw a scalar that stays unpredictable while either the system's randomness or ``secret`` is.

    A drawn scalar plus SHA-512(label, 32 fresh bytes, secret, place) modulo the order: uniform with a good source
    whatever the secret is, still computationally hidden with a bad one as long as the secret cannot be guessed.

    Args:
        secret: goes into the hash.
        place: public bytes that tell apart what is drawn with one secret, so that even a source that repeats itself
            gives other numbers at other places.

    Source: Bellare, Dai, Rogaway 2020; FIPS 180-4 (SHA-512).
    """
    hashed = hashlib.sha512(HEDGE_LABEL + secrets.token_bytes(SIZE) + secret.encode() + place).digest()
    return Scalar.drawn() + Scalar.reduced(hashed)
