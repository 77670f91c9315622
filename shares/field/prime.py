"""The field GF(p) for a prime p, on public numbers.

For: checks against published examples, scalars in public equations, coefficients of ``polynomial``.
Source: A. Shamir, "How to share a secret", CACM 22(11), 1979 (interpolation over GF(p)); M. O. Rabin, "Probabilistic
    algorithm for testing primality", J. Number Theory 12, 1980; J. Sorenson, J. Webster, "Strong pseudoprimes to twelve
    prime bases", Math. Comp. 86, 2017 (bases that leave no doubt).
May import: shares.errors.
Secret: nothing. Public: everything; time depends on the values, so a secret must never come here.
Does not: share secrets. That is done over GF(2^8), by the kernel.
"""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass

from shares.errors import DuplicatePointError, ParameterError

MAX_BITS = 4096

# Sorenson and Webster 2017: no composite number below this is a strong pseudoprime to all of the first 13 primes.
_FIRST_PRIMES = (2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37, 41)
_PROVEN_BELOW = 3_317_044_064_679_887_385_961_981

# A composite number passes a round with a random base with probability at most 1/4 (Rabin 1980).
_ROUNDS = 64


@dataclass(frozen=True, slots=True)
class PrimeField:
    """GF(p): numbers modulo a prime. Every argument is reduced modulo p first.

    Args:
        p: a prime of at most 4,096 bits.

    Raises:
        ParameterError: p is not prime, or too large.

    >>> PrimeField(11).interpolate([(1, 7), (3, 4)])  # the line through (1, 7) and (3, 4) at 0
    3
    """

    p: int

    def __post_init__(self) -> None:
        if not is_prime(self.p):
            raise ParameterError("the modulus must be a prime")

    def add(self, a: int, b: int) -> int:
        """Add two elements."""
        return (a + b) % self.p

    def subtract(self, a: int, b: int) -> int:
        """Subtract b from a."""
        return (a - b) % self.p

    def multiply(self, a: int, b: int) -> int:
        """Multiply two elements."""
        return a * b % self.p

    def inverse(self, a: int) -> int:
        """Invert an element.

        Args:
            a: any number that p does not divide.

        Returns:
            The inverse, 1 to p - 1.

        Raises:
            ParameterError: p divides a.
        """
        if a % self.p == 0:
            raise ParameterError("0 has no inverse")
        return pow(a, -1, self.p)

    def evaluate(self, coefficients: Sequence[int], x: int) -> int:
        """Evaluate a polynomial at x.

        Args:
            coefficients: that of x^0 first.
            x: where.

        Returns:
            The value, 0 to p - 1; 0 for no coefficients.
        """
        value = 0
        for coefficient in reversed(coefficients):
            value = (value * x + coefficient) % self.p
        return value

    def interpolation_weights(self, xs: Sequence[int], *, at: int = 0) -> list[int]:
        """Give w with f(at) = sum of w_i f(x_i) for every polynomial f of degree below ``len(xs)``.

        Args:
            xs: evaluation points, at least one, different from 0 and from each other modulo p.
            at: where f is wanted.

        Returns:
            The weights, in the order of ``xs``.

        Raises:
            DuplicatePointError: two points are the same modulo p.
            ParameterError: no point, or one that is 0 modulo p: there f is the secret itself.

        Source: Lagrange's formula: w_i is the product over j != i of (at - x_j) / (x_i - x_j).

        >>> PrimeField(17).interpolation_weights([1, 3, 5])
        [4, 3, 11]
        """
        reduced = [x % self.p for x in xs]
        if not reduced or 0 in reduced:
            raise ParameterError("evaluation points must not be 0 modulo p, and at least one is needed")
        if len(set(reduced)) < len(reduced):
            raise DuplicatePointError("two evaluation points are the same modulo p")
        weights = []
        for i, x_i in enumerate(reduced):
            numerator = denominator = 1
            for x_j in reduced[:i] + reduced[i + 1 :]:
                numerator = numerator * (at - x_j) % self.p
                denominator = denominator * (x_i - x_j) % self.p
            weights.append(numerator * self.inverse(denominator) % self.p)
        return weights

    def interpolate(self, points: Sequence[tuple[int, int]], *, at: int = 0) -> int:
        """Evaluate the polynomial of degree below ``len(points)`` that goes through the points.

        Args:
            points: pairs (x, f(x)), the x as for ``interpolation_weights``.
            at: where it is wanted.

        Returns:
            f(at), 0 to p - 1.

        Raises:
            DuplicatePointError: two points have the same x modulo p.
            ParameterError: no point, or one with x = 0 modulo p.
        """
        weights = self.interpolation_weights([x for x, _ in points], at=at)
        return sum(weight * y for weight, (_, y) in zip(weights, points, strict=True)) % self.p


def is_prime(n: int) -> bool:
    """Tell whether n is a prime: for certain below 3.3 * 10^24, above with an error of at most 2^-128.

    Args:
        n: any number of at most 4,096 bits.

    Returns:
        True for a prime.

    Raises:
        ParameterError: n is too large.

    Source: Miller's test with fixed bases (Sorenson, Webster 2017), or with 64 random ones (Rabin 1980); the latter
        holds for numbers that an adversary chose, too.

    >>> [n for n in range(20) if is_prime(n)]
    [2, 3, 5, 7, 11, 13, 17, 19]
    """
    if n.bit_length() > MAX_BITS:
        raise ParameterError(f"a prime may have at most {MAX_BITS} bits")
    if n < 2:
        return False
    if any(n % prime == 0 for prime in _FIRST_PRIMES):
        return n in _FIRST_PRIMES
    if n < _PROVEN_BELOW:
        return all(_passes(n, base) for base in _FIRST_PRIMES)
    return all(_passes(n, _random_base(n)) for _ in range(_ROUNDS))


def _passes(n: int, base: int) -> bool:
    # n - 1 = odd * 2^twos. For a prime n the powers of the base reach 1 by way of -1, or start there.
    twos = (n - 1 & 1 - n).bit_length() - 1
    power = pow(base, n - 1 >> twos, n)
    if power in (1, n - 1):
        return True
    for _ in range(twos - 1):
        power = power * power % n
        if power == n - 1:
            return True
    return False


def _random_base(n: int) -> int:
    # 64 bits more than n has keep the base uniform up to 2^-64.
    return 2 + int.from_bytes(os.urandom(n.bit_length() // 8 + 9), "big") % (n - 3)
