"""Sharing a scalar so that each custodian can check their own share, with public material and alone.

Source: A. Shamir, "How to share a secret", CACM 22(11), 1979; P. Feldman, "A Practical Scheme for Non-interactive
    Verifiable Secret Sharing", FOCS 1987; T. P. Pedersen, "Non-Interactive and Information-Theoretic Secure Verifiable
    Secret Sharing", CRYPTO '91; R. Gennaro, S. Jarecki, H. Krawczyk, T. Rabin, "Secure Distributed Key Generation for
    Discrete-Log Based Cryptosystems", J. Cryptology 20, 2007 (when to use which).
May import: shares.errors, shares.field.prime, shares.group.edwards25519, shares.group.hashing.
Secret: coefficients, shares, blinds. Public: commitments, indices, weights, thresholds.
Does not: name a dealer. It says what is wrong; whoever asked knows whose it is.

A dealer has f(x) = a_0 + a_1 x + ... + a_(k-1) x^(k-1), and for Pedersen's commitments a second polynomial b; custodian
x gets s = f(x), and t = b(x). Two generators are fixed, B (``BASE``) and H (``SECOND_BASE``).

    Feldman    A_j = a_j B            s B       = sum of x^j A_j    shows a_0 B: for a key whose public half is known
    Pedersen   C_j = a_j B + b_j H    s B + t H = sum of x^j C_j    shows nothing: while a key is being born
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Final

from shares.errors import ParameterError, VerificationError
from shares.field.prime import PrimeField
from shares.group.edwards25519 import BASE, ORDER, Point, Scalar, total
from shares.group.hashing import SECOND_BASE, hedged

Commitments = tuple[Point, ...]
"""k points, that of a_0 first."""

SCALARS: Final = PrimeField(ORDER)
"""Public numbers modulo the group's order. Made once: making it tests that the order is a prime."""


def polynomial(secret: Scalar, need: int) -> list[Scalar]:
    """Return [secret, a_1, ..., a_(need-1)], the a_j uniform over all scalars, zero included.

    One zero in 2^252 has the identity for its commitment; ``feldman`` then refuses, and the dealing is begun again.
    Leaving zero out here would make the other values likelier than they may be.

    Args:
        secret: a_0, which also hedges the others against a bad source of randomness.
        need: the threshold k, at least 1.

    Raises:
        ParameterError: need is below 1.

    Source: Shamir 1979, sec. 2.
    """
    if need < 1:
        raise ParameterError("at least one custodian is needed")
    return [secret, *(hedged(secret, b"coefficient" + j.to_bytes(8, "big")) for j in range(1, need))]


def evaluate(coefficients: Sequence[Scalar], x: int) -> Scalar:
    """Return f(x), the share of custodian x.

    Args:
        coefficients: k scalars, a_0 first.
        x: the custodian's index, 1 to ORDER - 1.

    Raises:
        ParameterError: the index is out of range, or there is no coefficient.

    Source: Shamir 1979, sec. 2, by Horner's rule.

    >>> evaluate([Scalar.of(5), Scalar.of(7)], 2) == Scalar.of(5 + 7 * 2)
    True
    """
    if not coefficients:
        raise ParameterError("a polynomial needs at least one coefficient")
    at = Scalar.of_index(x)
    *lower, value = coefficients
    for coefficient in reversed(lower):
        value = value * at + coefficient
    return value


def feldman(coefficients: Iterable[Scalar]) -> Commitments:
    """Return A_j = a_j B for each coefficient: they show a_0 B, and bind the dealer.

    Raises:
        VerificationError: a coefficient is zero (one in 2^252), and its commitment would be the identity.

    Source: Feldman 1987.
    """
    return tuple(a * BASE for a in coefficients)


def pedersen(coefficients: Sequence[Scalar], blinds: Sequence[Scalar]) -> Commitments:
    """Return C_j = a_j B + b_j H for each coefficient: they bind the dealer and show nothing of f.

    Args:
        coefficients: k scalars, a_0 first.
        blinds: the k coefficients of a second polynomial, all of them drawn: ``polynomial(Scalar.drawn(), k)``.

    Raises:
        ParameterError: they are not of one number.
        VerificationError: a coefficient or blind is zero (one in 2^252).

    Source: Pedersen 1991, sec. 4.
    """
    if len(coefficients) != len(blinds):
        raise ParameterError("each coefficient needs one blind")
    return tuple(a * BASE + b * SECOND_BASE for a, b in zip(coefficients, blinds, strict=True))


def public_share(commitments: Sequence[Point], x: int) -> Point:
    """Return sum of x^j A_j: what ``share * BASE`` has to be at index x. It takes k - 1 multiplications.

    Raises:
        ParameterError: the index is out of range, or there is no commitment.
        VerificationError: it is the identity, or a sum on the way is: no honest dealer's are, but for one in 2^252.

    Source: Feldman 1987, by Horner's rule.
    """
    if not commitments:
        raise ParameterError("there are no commitments")
    Scalar.of_index(x)  # It refuses an index out of range.
    constant, *higher = commitments
    # Not by Horner's rule: a dealer could choose commitments whose sum on the way is the identity, and be told from the
    # definition by that alone.
    return total([constant, *(Scalar.of(pow(x, j, ORDER)) * a_j for j, a_j in enumerate(higher, start=1))])


def check_degree(commitments: Sequence[Point], need: int) -> None:
    """Check that commitments are to a polynomial of degree k - 1, so that exactly k custodians are needed.

    Args:
        commitments: as they were given. None of them is the identity: no ``Point`` is.
        need: the threshold k that everybody agreed on.

    Raises:
        VerificationError: they are more or fewer than k.
    """
    if len(commitments) != need:
        change = "raised" if len(commitments) > need else "lowered"
        raise VerificationError(
            f"there are {len(commitments)} commitments where {need} are due: the number needed was {change}"
        )


def check_feldman(share: Scalar, x: int, commitments: Sequence[Point], need: int) -> None:
    """Check custodian x's share against the public commitments.

    Raises:
        VerificationError: the vector has another length than k, or the share does not fit.
        ParameterError: the index is out of range.

    Source: Feldman 1987.
    """
    check_public_share(share * BASE, x, commitments, need)


def check_pedersen(share: Scalar, blind: Scalar, x: int, commitments: Sequence[Point], need: int) -> None:
    """Check custodian x's share and its blind against commitments that hide.

    Raises:
        VerificationError: the vector has another length than k, or share and blind do not fit.
        ParameterError: the index is out of range.

    Source: Pedersen 1991, sec. 4.
    """
    check_public_share(share * BASE + blind * SECOND_BASE, x, commitments, need)


def check_public_share(point: Point, x: int, commitments: Sequence[Point], need: int) -> None:
    """Check a share whose point is already there: ``share * BASE``, or ``share * BASE + blind * SECOND_BASE``.

    Raises:
        VerificationError: the vector has another length than k, or the point does not fit.
        ParameterError: the index is out of range.
    """
    check_degree(commitments, need)
    if point != public_share(commitments, x):
        raise VerificationError(f"the share does not fit the public commitments at index {x}")


def summed(vectors: Sequence[Sequence[Point]], need: int) -> Commitments:
    """Return the commitments to the sum of several dealers' polynomials, for one check instead of one a dealer.

    Shares add up like polynomials: the sum of the shares is checked against the sum of the commitments. That shows that
    the sum is right, which is all a key generated jointly is made of; where it is not, each dealer's own share is
    checked to find whose is wrong. Where one dealer's part may later be left out of the sum, check each from the start:
    two dealers' errors can cancel.

    Args:
        vectors: each dealer's commitments, one vector or more.
        need: the threshold k.

    Raises:
        VerificationError: a vector has another length than k, or a sum is the identity, which nobody's honest
            commitments make it: somebody chose theirs after seeing others'.
        ParameterError: there is no vector.

    Source: Pedersen, "A Threshold Cryptosystem without a Trusted Party", EUROCRYPT '91 (polynomials add up).
    """
    if not vectors:
        raise ParameterError("there are no commitments to add")
    for commitments in vectors:
        check_degree(commitments, need)
    return tuple(total(column) for column in zip(*vectors, strict=True))


def weight(x: int, xs: Iterable[int]) -> int:
    """Return the number by which custodian x's part counts when custodians ``xs`` act. It takes one inversion.

    Args:
        x: one of ``xs``.
        xs: all who act, different indices from 1 to ORDER - 1, in any order.

    Raises:
        ParameterError: an index is out of range, there twice, or x is not among them.

    Source: RFC 9591, sec. 4.2, derive_interpolating_value; Lagrange's formula at 0.

    >>> [weight(x, [1, 2]) for x in (1, 2)] == [2, ORDER - 1]
    True
    """
    xs = _indices(xs)
    if x not in xs:
        raise ParameterError("the index is not among those that act")
    numerator = denominator = 1
    for other in xs:
        if other != x:
            numerator = SCALARS.multiply(numerator, other)
            denominator = SCALARS.multiply(denominator, SCALARS.subtract(other, x))
    return SCALARS.multiply(numerator, SCALARS.inverse(denominator))


def weights(xs: Iterable[int]) -> dict[int, int]:
    """Return the weight of each custodian when custodians ``xs`` act: f(0) = sum of weight * f(x).

    Args:
        xs: different indices from 1 to ORDER - 1, in any order, at least one.

    Raises:
        ParameterError: an index is out of range or there twice, or there is none.

    Source: RFC 9591, sec. 4.2.
    """
    xs = _indices(xs)
    return dict(zip(xs, SCALARS.interpolation_weights(xs), strict=True))


def recombine(points: Mapping[int, Point]) -> Point:
    """Return f(0) P from f(x) P of k custodians: interpolation in the exponent. No scalar of theirs is seen.

    Args:
        points: for each index its point, exactly or more than k of them, all right: it cannot tell a wrong one.

    Raises:
        ParameterError: an index is out of range, or there is no point.
        VerificationError: the sum is the identity.

    Source: Shamir 1979, sec. 2 (Lagrange); Y. Desmedt, Y. Frankel, "Threshold cryptosystems", CRYPTO '89.
    """
    return total(Scalar.of(number) * points[x] for x, number in weights(points).items())


def _indices(xs: Iterable[int]) -> list[int]:
    listed = list(xs)
    if not listed or len(set(listed)) < len(listed) or not all(0 < x < ORDER for x in listed):
        raise ParameterError("indices must be different, from 1 to the order of the group less 1, and at least one")
    return listed
