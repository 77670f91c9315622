"""The group of prime order within edwards25519: scalars that may be secret, points that are public.

Source: RFC 8032, sec. 5.1 (the curve, its base point and its encodings); RFC 9591, sec. 6.1 (what an element and a
scalar are, and which encodings are refused); RFC 7748, sec. 4.1 (constants).
May import: shares.errors.
Secret: whatever a ``Scalar`` holds; only the library computes with it. Public: every point, and the numbers that
``Scalar.of`` takes.
Does not: wipe scalars: they are ``bytes``, which Python cannot wipe (listed in SECURITY.md). The library's functions on
scalars and its multiplications run in constant time (libsodium's own claim); decoding a point does not have to.
"""

from __future__ import annotations

import functools
import hmac
import secrets
from collections.abc import Iterable
from typing import Final, NoReturn, Self, final

import nacl.bindings as sodium

from shares.errors import ParameterError, VerificationError

ORDER: Final = 2**252 + 27742317777372353535851937790883648493
"""The order of the group, a prime (RFC 8032, sec. 5.1: L)."""
SIZE: Final = 32
"""The bytes of a scalar, and of a point."""
_IDENTITY: Final = (1).to_bytes(SIZE, "little")


@final
class Scalar:
    """A number modulo the group's order, in the library's hands alone. It shows nothing; comparing is constant time.

    Public numbers are written as ``int``; ``+ - *`` between scalars and ``scalar * point`` read as in the papers.

    >>> three, four = Scalar.of(3), Scalar.of(4)
    >>> three * four - Scalar.of(5) == Scalar.of(7)
    True
    >>> three
    Scalar(<hidden>)
    """

    __slots__ = ("_octets",)
    __hash__ = None  # type: ignore[assignment]

    def __init__(self, octets: bytes) -> None:
        """Hold reduced octets; ``decode``, ``of``, ``reduced`` and ``drawn`` make scalars."""
        self._octets = octets

    @classmethod
    def of(cls, number: int) -> Self:
        """Return a public number modulo the order.

        Args:
            number: any integer; time depends on it, so it must be public.
        """
        return cls((number % ORDER).to_bytes(SIZE, "little"))

    @classmethod
    def of_index(cls, x: int) -> Self:
        """Return a custodian's index, 1 to ORDER - 1, as the place where a polynomial is evaluated.

        Raises:
            ParameterError: it is out of range. 0 and ORDER would be the secret's own place, and x and x + ORDER would
                be one custodian.

        Source: RFC 9591, sec. 4.2: identifiers are not zero, and different.
        """
        if not 0 < x < ORDER:
            raise ParameterError("an index must be from 1 to the order of the group less 1")
        return cls.of(x)

    @classmethod
    def decode(cls, octets: bytes | memoryview) -> Self:
        """Return the scalar with this encoding: 32 bytes, little endian, below the order. One value, one encoding.

        Raises:
            VerificationError: it is no such encoding.

        Source: RFC 9591, sec. 6.1, DeserializeScalar.
        """
        # A reduced scalar is the one that reducing leaves as it is: no comparison of a secret with the order is needed.
        # public: whether an encoding is refused.
        octets = bytes(memoryview(octets))  # bytes(32) would be a zero.
        if len(octets) != SIZE or not hmac.compare_digest(_reduce(octets + bytes(SIZE)), octets):
            raise VerificationError("it is no number below the order of the group in its one encoding")
        return cls(octets)

    @classmethod
    def reduced(cls, octets: bytes) -> Self:
        """Return 64 bytes, a number in little endian, modulo the order: uniform where they are.

        Raises:
            ParameterError: they are not 64.
        """
        if len(octets) != 2 * SIZE:
            raise ParameterError("64 bytes are reduced to a scalar")
        return cls(_reduce(octets))

    @classmethod
    def drawn(cls) -> Self:
        """Draw a scalar, uniform but for 2^-259."""
        return cls.reduced(secrets.token_bytes(2 * SIZE))

    def encode(self) -> bytes:
        """Return the scalar's 32 bytes. Whoever takes them keeps what they say."""
        return self._octets

    def is_zero(self) -> bool:
        """Say whether it is zero, which for a secret nobody learns who did not know it already.

        public: a secret scalar is zero with probability 2^-252, or because somebody made it so.
        """
        return hmac.compare_digest(self._octets, bytes(SIZE))

    def inverse(self) -> Scalar:
        """Return 1 / self.

        Raises:
            ParameterError: it is zero.
        """
        if self.is_zero():
            raise ParameterError("zero has no inverse")
        return Scalar(sodium.crypto_core_ed25519_scalar_invert(self._octets))

    def __add__(self, other: Scalar) -> Scalar:
        if not isinstance(other, Scalar):
            return NotImplemented
        return Scalar(sodium.crypto_core_ed25519_scalar_add(self._octets, other._octets))

    def __sub__(self, other: Scalar) -> Scalar:
        if not isinstance(other, Scalar):
            return NotImplemented
        return Scalar(sodium.crypto_core_ed25519_scalar_sub(self._octets, other._octets))

    def __neg__(self) -> Scalar:
        return Scalar(sodium.crypto_core_ed25519_scalar_negate(self._octets))

    def __mul__(self, other: Scalar) -> Scalar:
        if not isinstance(other, Scalar):
            return NotImplemented  # scalar * point is the point's to do.
        return Scalar(sodium.crypto_core_ed25519_scalar_mul(self._octets, other._octets))

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Scalar):
            return NotImplemented
        return hmac.compare_digest(self._octets, other._octets)

    def __repr__(self) -> str:
        return "Scalar(<hidden>)"

    def __format__(self, specification: str) -> NoReturn:
        raise TypeError("a scalar is not written into text")

    def __reduce_ex__(self, protocol: object) -> NoReturn:
        raise TypeError("a scalar is neither copied nor pickled")


@final
class Point:
    """A point of the group of prime order, never the identity: there is no other ``Point`` (invariant 1).

    ``scalar * point`` runs in constant time in the scalar. A sum that comes out as the identity is refused, since no
    honest run meets one.

    >>> Scalar.of(2) * BASE == BASE + BASE
    True
    """

    __slots__ = ("_octets",)

    def __init__(self, octets: bytes) -> None:
        """Hold octets for which invariant 1 holds; ``decode`` makes points of anything else."""
        self._octets = octets

    @classmethod
    def decode(cls, octets: bytes | memoryview) -> Self:
        """Return the point with this encoding.

        Raises:
            VerificationError: it is not 32 bytes, no canonical encoding, not on the curve, the identity, or not in the
                group of prime order.

        Source: RFC 9591, sec. 6.1, DeserializeElement: as RFC 8032, sec. 5.1.3, and the identity and every point
            outside the group of prime order are refused.
        """
        octets = bytes(memoryview(octets))
        if len(octets) != SIZE or not sodium.crypto_core_ed25519_is_valid_point(octets):
            raise VerificationError("it is no point of the group of prime order, in its one encoding")
        return cls(octets)

    def encode(self) -> bytes:
        """Return the point's one encoding, 32 bytes."""
        return self._octets

    def __add__(self, other: Point) -> Point:
        if not isinstance(other, Point):
            return NotImplemented
        return _not_identity(sodium.crypto_core_ed25519_add(self._octets, other._octets))

    def __sub__(self, other: Point) -> Point:
        if not isinstance(other, Point):
            return NotImplemented
        return _not_identity(sodium.crypto_core_ed25519_sub(self._octets, other._octets))

    def __rmul__(self, scalar: Scalar) -> Point:
        if not isinstance(scalar, Scalar):
            return NotImplemented
        if scalar.is_zero():
            raise VerificationError("a product with a point is the identity")
        if self is BASE:
            return Point(sodium.crypto_scalarmult_ed25519_base_noclamp(scalar.encode()))
        return Point(sodium.crypto_scalarmult_ed25519_noclamp(scalar.encode(), self._octets))

    def __eq__(self, other: object) -> bool:
        return self._octets == other._octets if isinstance(other, Point) else NotImplemented

    def __hash__(self) -> int:
        return hash(self._octets)

    def __repr__(self) -> str:
        # Some points are secret, such as what a custodian answers to whoever has a message opened.
        return "Point(<hidden>)"


BASE: Final = Point(bytes([0x58]) + bytes([0x66]) * 31)
"""The base point B (RFC 8032, sec. 5.1): y = 4/5."""


def total(points: Iterable[Point]) -> Point:
    """Return the sum of one point or more. What the sums on the way are does not matter, the identity included.

    Raises:
        VerificationError: it is the identity.
        ParameterError: there is none to add.
    """
    encodings = [point.encode() for point in points]
    if not encodings:
        raise ParameterError("there are no points to add")
    return _not_identity(functools.reduce(sodium.crypto_core_ed25519_add, encodings))


def _reduce(octets: bytes) -> bytes:
    return sodium.crypto_core_ed25519_scalar_reduce(octets)


def _not_identity(octets: bytes) -> Point:
    if octets == _IDENTITY:
        raise VerificationError("a sum of points is the identity")
    return Point(octets)
