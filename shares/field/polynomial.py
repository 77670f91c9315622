"""Polynomials over GF(p) for small primes p: reading, writing and arithmetic.

For: naming a field by its polynomial, and working out whether the choice is right (``irreducible``).
Source: R. Lidl, H. Niederreiter, "Introduction to Finite Fields and their Applications", chapter 1.
May import: shares.errors, shares.field.prime.
Secret: nothing. Public: everything; time depends on the values, so a secret must never come here.
Does not: read anything of degree above 32 or a prime above 257, so that no input can keep it busy for long.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache

from shares.errors import ParameterError
from shares.field.prime import is_prime

MAX_PRIME = 257
MAX_DEGREE = 32
MAX_TEXT = 500


@dataclass(frozen=True, slots=True)
class Polynomial:
    """A polynomial over GF(p).

    Args:
        p: a prime of at most 257.
        coefficients: each 0 to p - 1, that of x^0 first, the last one not 0; none for the zero polynomial.

    Raises:
        ParameterError: the prime or a coefficient is out of range.

    >>> f = Polynomial.parse("x^4 + x^2 + 1")
    >>> f.degree, f.number, str(f * f)
    (4, 21, 'x^8 + x^4 + 1')
    """

    p: int
    coefficients: tuple[int, ...]

    def __post_init__(self) -> None:
        require_prime(self.p)
        if not all(0 <= c < self.p for c in self.coefficients) or self.coefficients[-1:] == (0,):
            raise ParameterError(f"coefficients must be 0 to {self.p - 1}, and the leading one not 0")

    @classmethod
    def reduced(cls, p: int, coefficients: Iterable[int]) -> Polynomial:
        """Make a polynomial from any integers: reduce them modulo p and drop leading zeros."""
        digits = [c % p for c in coefficients]
        while digits and digits[-1] == 0:
            digits.pop()
        return cls(p, tuple(digits))

    @classmethod
    def from_number(cls, number: int, p: int = 2) -> Polynomial:
        """Read the digits of a number in base p as coefficients, the last digit as that of x^0.

        Args:
            number: 0 or more, below p^33.
            p: a prime of at most 257.

        Returns:
            The polynomial, of degree 32 at most.

        Raises:
            ParameterError: the number or the prime is out of range.

        >>> str(Polynomial.from_number(0x11b))
        'x^8 + x^4 + x^3 + x + 1'
        """
        require_prime(p)
        if number < 0:
            raise ParameterError("the number of a polynomial must be 0 or more")
        require_degree(MAX_DEGREE + (number >= p ** (MAX_DEGREE + 1)))
        digits = []
        while number:
            number, digit = divmod(number, p)
            digits.append(digit)
        return cls(p, tuple(digits))

    @classmethod
    def parse(cls, text: str, p: int = 2) -> Polynomial:
        """Read ``x^8 + x^4 + x^3 + x + 1``, or a number as for ``from_number`` in decimal or hexadecimal.

        Args:
            text: terms in any order, each power once at most, coefficients 0 to p - 1; or ``283``, ``0x11b``. At
                most 500 characters, of degree 32 at most.
            p: a prime of at most 257.

        Returns:
            The polynomial.

        Raises:
            ParameterError: the text is no such polynomial, or the prime is out of range.

        >>> Polynomial.parse("2x - 1", 3) == Polynomial.parse("8", 3) == Polynomial(3, (2, 2))
        True
        """
        require_prime(p)
        if len(text) > MAX_TEXT:
            raise ParameterError(f"a polynomial may be written with {MAX_TEXT} characters at most")
        text = text.strip(" ")
        if re.fullmatch("[0-9]+|0x[0-9a-fA-F]+", text):
            return cls.from_number(int(text, 16 if "x" in text else 10), p)
        first, *signed = re.split(" *([+-]) *", text)
        if first or not signed:
            signed = ["+", first, *signed]
        terms: dict[int, int] = {}
        for sign, term in zip(signed[::2], signed[1::2], strict=True):
            match = re.fullmatch(r"([0-9]*)(?:(x)(?:\^([0-9]+))?)?", term)
            if not term or not match:
                raise ParameterError("this is not a polynomial", hint="write x^8 + x^4 + x^3 + x + 1, 0x11b or 283")
            power = int(match[3] or 1) if match[2] else 0
            require_degree(power)
            if power in terms:
                raise ParameterError(f"the power {power} of x is given twice")
            coefficient = int(match[1] or 1)
            if coefficient >= p:
                raise ParameterError(f"over GF({p}) a coefficient must be 0 to {p - 1}")
            terms[power] = coefficient if sign == "+" else -coefficient
        return cls.reduced(p, [terms.get(power, 0) for power in range(MAX_DEGREE + 1)])

    @property
    def degree(self) -> int:
        """The degree; -1 for the zero polynomial."""
        return len(self.coefficients) - 1

    @property
    def number(self) -> int:
        """The number whose digits in base p are the coefficients: 0x11b for x^8 + x^4 + x^3 + x + 1 over GF(2)."""
        return sum(c * self.p**power for power, c in enumerate(self.coefficients))

    def __str__(self) -> str:
        terms = []
        for power, c in reversed(list(enumerate(self.coefficients))):
            x = "" if power == 0 else "x" if power == 1 else f"x^{power}"
            if c:
                terms.append(x if x and c == 1 else f"{c}{x}")
        return " + ".join(terms) or "0"

    def __add__(self, other: Polynomial) -> Polynomial:
        self._require_same_field(other)
        longer, shorter = sorted([self.coefficients, other.coefficients], key=len, reverse=True)
        total = [a + b for a, b in zip(longer, shorter, strict=False)]
        return Polynomial.reduced(self.p, [*total, *longer[len(shorter) :]])

    def __neg__(self) -> Polynomial:
        return Polynomial.reduced(self.p, [-c for c in self.coefficients])

    def __sub__(self, other: Polynomial) -> Polynomial:
        return self + -other

    def __mul__(self, other: Polynomial) -> Polynomial:
        self._require_same_field(other)
        product = [0] * (len(self.coefficients) + len(other.coefficients))
        for i, a in enumerate(self.coefficients):
            for j, b in enumerate(other.coefficients):
                product[i + j] += a * b
        return Polynomial.reduced(self.p, product)

    def __divmod__(self, other: Polynomial) -> tuple[Polynomial, Polynomial]:
        self._require_same_field(other)
        if not other.coefficients:
            raise ParameterError("a polynomial cannot be divided by 0")
        rest = list(self.coefficients)
        quotient = [0] * max(len(rest) - other.degree, 0)
        lead_inverse = pow(other.coefficients[-1], -1, self.p)
        for shift in reversed(range(len(quotient))):
            quotient[shift] = rest[shift + other.degree] * lead_inverse % self.p
            for i, b in enumerate(other.coefficients):
                rest[shift + i] -= quotient[shift] * b
        return Polynomial(self.p, tuple(quotient)), Polynomial.reduced(self.p, rest)

    def __floordiv__(self, other: Polynomial) -> Polynomial:
        return divmod(self, other)[0]

    def __mod__(self, other: Polynomial) -> Polynomial:
        return divmod(self, other)[1]

    def power(self, exponent: int, modulus: Polynomial) -> Polynomial:
        """Raise to a power of 0 or more, modulo another polynomial."""
        if exponent < 0:
            raise ParameterError("an exponent must be 0 or more")
        result = Polynomial(self.p, (1,)) % modulus
        for bit in f"{exponent:b}":
            result = result * result % modulus
            if bit == "1":
                result = result * self % modulus
        return result

    def monic(self) -> Polynomial:
        """Divide by the leading coefficient; the zero polynomial stays."""
        lead_inverse = pow(self.coefficients[-1], -1, self.p) if self.coefficients else 0
        return Polynomial.reduced(self.p, [c * lead_inverse for c in self.coefficients])

    def derivative(self) -> Polynomial:
        """Differentiate formally."""
        return Polynomial.reduced(self.p, [i * c for i, c in enumerate(self.coefficients)][1:])

    def _require_same_field(self, other: Polynomial) -> None:
        if self.p != other.p:
            raise ParameterError(f"a polynomial over GF({self.p}) and one over GF({other.p}) do not go together")


def gcd(f: Polynomial, g: Polynomial) -> Polynomial:
    """Give the monic greatest common divisor, by Euclid's algorithm; 0 for two zero polynomials."""
    while g.coefficients:
        f, g = g, f % g
    return f.monic()


@cache
def require_prime(p: int) -> None:
    if not 2 <= p <= MAX_PRIME or not is_prime(p):
        raise ParameterError(f"p must be a prime of at most {MAX_PRIME}")


def require_degree(degree: int) -> None:
    if degree > MAX_DEGREE:
        raise ParameterError(f"a polynomial may be of degree {MAX_DEGREE} at most")
