"""The field GF(p^m) = GF(p)[x]/(f), made from an irreducible polynomial f of degree m, on public numbers.

For: codes and designs over small fields that are not prime, such as GF(32).
Source: R. Lidl, H. Niederreiter, "Introduction to Finite Fields and their Applications", chapter 2.
May import: shares.errors, shares.field.irreducible, shares.field.polynomial.
Secret: nothing. Public: everything; time depends on the values, so a secret must never come here.
Does not: share secrets. That is done over GF(2^8), by the kernel.
"""

from __future__ import annotations

from dataclasses import dataclass

from shares.errors import ParameterError
from shares.field.irreducible import require_irreducible
from shares.field.polynomial import Polynomial


@dataclass(frozen=True, slots=True)
class ExtensionField:
    """GF(p)[x]/(modulus). An element is a number 0 to p^m - 1, whose digits in base p are the coefficients.

    Args:
        modulus: irreducible, of degree 1 to 32.

    Raises:
        PolynomialError: the modulus is reducible or a constant; the message names the factors.

    >>> field = ExtensionField(Polynomial.parse("x^3 + x + 1"))
    >>> [field.power(2, exponent) for exponent in range(8)]
    [1, 2, 4, 3, 6, 7, 5, 1]
    """

    modulus: Polynomial

    def __post_init__(self) -> None:
        require_irreducible(self.modulus)

    @property
    def size(self) -> int:
        """The number of elements, p^m."""
        size: int = self.modulus.p**self.modulus.degree  # Typing cannot know that the degree is not negative.
        return size

    def add(self, a: int, b: int) -> int:
        """Add two elements, each 0 to p^m - 1."""
        return (self._element(a) + self._element(b)).number

    def subtract(self, a: int, b: int) -> int:
        """Subtract b from a, each 0 to p^m - 1."""
        return (self._element(a) - self._element(b)).number

    def multiply(self, a: int, b: int) -> int:
        """Multiply two elements, each 0 to p^m - 1."""
        return (self._element(a) * self._element(b) % self.modulus).number

    def power(self, a: int, exponent: int) -> int:
        """Raise an element, 0 to p^m - 1, to a power of 0 or more; ``power(0, 0)`` is 1."""
        return self._element(a).power(exponent, self.modulus).number

    def inverse(self, a: int) -> int:
        """Invert an element: a^(p^m - 2), as a^(p^m - 1) = 1 for every a but 0.

        Args:
            a: 1 to p^m - 1.

        Returns:
            The inverse, 1 to p^m - 1.

        Raises:
            ParameterError: a is 0 or no element.
        """
        if a == 0:
            raise ParameterError("0 has no inverse")
        return self.power(a, self.size - 2)

    def _element(self, a: int) -> Polynomial:
        if not 0 <= a < self.size:
            raise ParameterError(f"an element must be 0 to {self.size - 1}")
        return Polynomial.from_number(a, self.modulus.p)
