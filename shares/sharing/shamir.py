"""Shamir's scheme on rows: evaluate a polynomial whose coefficients are rows, and interpolate it again.

Source: A. Shamir, "How to share a secret", CACM 22(11), 1979, sec. 2; hedged randomness after M. Bellare, W. Dai,
P. Rogaway, "Reimagining Secret Sharing", 2020 (privacy goal).
May import: shares.errors, shares.memory, shares.field.
Secret: payloads, coefficients, rows. Public: evaluation points, thresholds, the field, lengths.
Does not: judge whether what it interpolates is right. Whoever calls ``interpolate`` checks the result.
"""

from __future__ import annotations

import hashlib
import secrets
from collections.abc import Sequence

from shares.errors import ParameterError
from shares.field.gf256 import Field
from shares.memory import Secret

HEDGE_LABEL = b"shares/v1/hedge"
NONCE_LENGTH = 32


def evaluate(field: Field, coefficients: Sequence[Secret], xs: Sequence[int]) -> list[Secret]:
    """Return f(x) = f_0 + f_1 x + ... + f_(k-1) x^(k-1) for each x.

    Args:
        field: GF(2^8) on a chosen polynomial.
        coefficients: k rows of equal length, f_0 first.
        xs: evaluation points, each 1 to 255.

    Returns:
        One new row for each x.

    Raises:
        ParameterError: an evaluation point out of range, or no coefficient.

    Source: Shamir 1979, sec. 2.
    """
    if not coefficients:
        raise ParameterError("a polynomial needs at least one coefficient")
    if any(not 1 <= x <= 255 for x in xs):
        raise ParameterError("an evaluation point must be from 1 to 255")
    rows = [Secret(len(coefficients[0])) for _ in xs]
    matrix = [field.powers(x, len(coefficients)) for x in xs]
    field.combine(matrix, [f.view() for f in coefficients], [row.view() for row in rows])
    return rows


def interpolate(field: Field, xs: Sequence[int], rows: Sequence[Secret], *, at: int = 0) -> Secret:
    """Return f(at) for the polynomial f of degree below k with f(x_i) = row_i. It cannot tell whether a row is wrong.

    Args:
        field: GF(2^8) on a chosen polynomial.
        xs: k different evaluation points, each 1 to 255.
        rows: k rows of equal length.
        at: the point wanted, 0 (coefficient 0) to 255.

    Raises:
        ParameterError, DuplicatePointError: points out of range or repeated.

    Source: Shamir 1979, sec. 2 (Lagrange).
    """
    if not rows or len(xs) != len(rows):
        raise ParameterError("interpolation needs one row for each evaluation point, and at least one")
    value = Secret(len(rows[0]))
    weights = field.interpolation_weights(xs, at=at)
    field.combine([weights], [row.view() for row in rows], [value.view()])
    return value


def draw(field: Field, hedge: Secret, length: int, *, place: bytes = b"") -> Secret:
    """Draw ``length`` random bytes that stay unpredictable while either the system's randomness or ``hedge`` is.

    Bytes of the operating system XOR SHAKE256(label, fresh nonce, place, hedge): uniform with a good source whatever
    the hedge is, still computationally hidden with a bad source as long as the hedge itself cannot be guessed.

    Args:
        field: any GF(2^8); only its addition (XOR) is used.
        hedge: secret bytes that go into the hash.
        length: bytes wanted, at least 1.
        place: public bytes that tell apart what is drawn with one hedge; all hedges beside places have one length.

    Source: Bellare, Dai, Rogaway 2020; FIPS 202 (SHAKE256).
    """
    stream = hashlib.shake_256(HEDGE_LABEL + secrets.token_bytes(NONCE_LENGTH))
    stream.update(place)
    stream.update(hedge.view())
    drawn = Secret(length)
    with Secret.of(secrets.token_bytes(length)) as system, Secret.of(stream.digest(length)) as hashed:
        field.combine([b"\x01\x01"], [system.view(), hashed.view()], [drawn.view()])
    return drawn


def random_polynomial(field: Field, payload: Secret, need: int, *, place: bytes = b"") -> list[Secret]:
    """Return [payload, f_1, ..., f_(need-1)], the f_j uniform over the whole field, zero included.

    Args:
        field: GF(2^8) on a chosen polynomial.
        payload: coefficient 0.
        need: the threshold k, 1 to 255. The degree bound is k - 1.
        place: as for ``draw``.

    Source: Shamir 1979, sec. 2. Leaving out zero would leak a little at every sharing (trade experience: hundreds of
    sharings of one secret then betray it).
    """
    length = len(payload)
    if need == 1:
        return [payload]
    with draw(field, payload, (need - 1) * length, place=place) as drawn, drawn.view() as all_bytes:
        return [payload, *(Secret.of(all_bytes[j * length : (j + 1) * length]) for j in range(need - 1))]
