"""edwards25519 in plain integers, for tests alone: nothing here is the package's, and nothing is constant in time.

Source: RFC 8032, sec. 5.1 (curve, base point, encodings, recovery of x); D. J. Bernstein, P. Birkner, M. Joye,
T. Lange, C. Peters, "Twisted Edwards Curves", AFRICACRYPT 2008, sec. 6 (addition without inversion); RFC 7748, sec. 4.1
(map to curve25519); RFC 9496, sec. 4.3.1 (ristretto255, for vectors in that encoding).
"""

from __future__ import annotations

P = 2**255 - 19
L = 2**252 + 27742317777372353535851937790883648493
D = -121665 * pow(121666, -1, P) % P
ROOT = pow(2, (P - 1) // 4, P)  # of -1

Affine = tuple[int, int]
IDENTITY: Affine = (0, 1)


def on_curve(point: Affine) -> bool:
    """Tell whether -x^2 + y^2 = 1 + d x^2 y^2."""
    x, y = point
    return 0 <= x < P and 0 <= y < P and (y * y - x * x - 1 - D * x * x * y * y) % P == 0


def root(square: int) -> int | None:
    """Return a square root modulo p, or None. As p = 5 modulo 8, one of two candidates is it (RFC 8032, sec. 5.1.3)."""
    candidate = pow(square, (P + 3) // 8, P)
    return next((r for r in (candidate, candidate * ROOT % P) if (r * r - square) % P == 0), None)


def decode(octets: bytes) -> Affine | None:
    """Decode as RFC 8032, sec. 5.1.3, to the letter: any point of the curve, whatever its order, or None."""
    number = int.from_bytes(octets, "little")
    sign, y = number >> 255, number % 2**255
    if len(octets) != 32 or y >= P:
        return None
    x = root((y * y - 1) * pow(D * y * y + 1, -1, P) % P)
    if x is None or (x == 0 and sign):
        return None
    return (x if x % 2 == sign else P - x, y)


def encode(point: Affine) -> bytes:
    x, y = point
    return (y + (x % 2 << 255)).to_bytes(32, "little")


def multiply(number: int, point: Affine) -> Affine:
    """Double and add, from the top bit down, in projective coordinates; a negative number takes the negative point."""
    if number < 0:
        return multiply(-number, negative(point))
    one, total = (*point, 1), (0, 1, 1)
    for bit in f"{number:b}":
        total = _add(total, total)
        if bit == "1":
            total = _add(total, one)
    x, y, z = total
    inverse = pow(z, -1, P)
    return x * inverse % P, y * inverse % P


def add(*points: Affine) -> Affine:
    total = (0, 1, 1)
    for point in points:
        total = _add(total, (*point, 1))
    x, y, z = total
    inverse = pow(z, -1, P)
    return x * inverse % P, y * inverse % P


def negative(point: Affine) -> Affine:
    return -point[0] % P, point[1]


def order(point: Affine) -> int:
    """Return 1, 2, 4, 8, L, 2 L, 4 L or 8 L."""
    return next(n for n in (1, 2, 4, 8, L, 2 * L, 4 * L, 8 * L) if multiply(n, point) == IDENTITY)


def prime_part(point: Affine) -> Affine:
    """Take the part of small order away: multiply by the number that is 1 modulo L and 0 modulo 8."""
    return multiply(8 * pow(8, -1, L), point)


def u_of(point: Affine) -> int:
    """Map to curve25519."""
    return (1 + point[1]) * pow(1 - point[1], -1, P) % P


def ristretto(octets: bytes) -> Affine:
    """Return the point of prime order that stands for an element of ristretto255.

    An element is a class of four points that differ by points of order 4; just one of them is of prime order, so the
    equations that hold between elements hold between these. Every element given here must be a proper one.
    """
    s = int.from_bytes(octets, "little")
    assert s < P
    assert s % 2 == 0
    u1, u2 = (1 - s * s) % P, (1 + s * s) % P
    v = (-D * u1 * u1 - u2 * u2) % P
    i = root(pow(v * u2 * u2 % P, -1, P))
    assert i is not None
    x = 2 * s * i * u2 % P
    x = P - x if x % 2 else x
    y = u1 * i * i * u2 * v % P
    assert on_curve((x, y))
    return prime_part((x, y))


def _add(one: tuple[int, int, int], other: tuple[int, int, int]) -> tuple[int, int, int]:
    # Complete on this curve: -1 is a square modulo p and d is not.
    x1, y1, z1 = one
    x2, y2, z2 = other
    a = z1 * z2 % P
    b = a * a % P
    c = x1 * x2 % P
    d = y1 * y2 % P
    e = D * c * d % P
    f, g = b - e, b + e
    return a * f * ((x1 + y1) * (x2 + y2) - c - d) % P, a * g * (d + c) % P, f * g % P


def _eighth() -> Affine:
    # L times a point leaves its part of small order; that of every second point has order 8.
    for y in range(2, 100):
        point = decode(y.to_bytes(32, "little"))
        if point is not None:
            left = multiply(L, point)
            if multiply(4, left) != IDENTITY:
                return left
    raise AssertionError("no point of order 8 was found")


BASE = decode(bytes([0x58]) + bytes([0x66]) * 31)
TORSION = [multiply(i, _eighth()) for i in range(8)]
"""The eight points of order 1, 8, 4, 8, 2, 8, 4, 8."""
