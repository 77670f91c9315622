"""The field GF(2^8) = GF(2)[x]/(m), for any of the 30 irreducible polynomials m of degree 8.

For: everything that is shared is shared byte by byte over this field.
Source: R. Lidl, H. Niederreiter, "Introduction to Finite Fields and their Applications", chapter 3 (irreducibles);
    FIPS 197, section 4.2 (an element is a byte, bit i the coefficient of x^i; multiplication by doubling).
May import: shares.errors, shares.field, shares.field.irreducible, shares.field.polynomial.
Secret: the rows and outs of ``combine`` and ``project``, which are computed by the kernel alone.
    Public: the modulus, evaluation points, weights and every other number here; their arithmetic may take any time.
Does not: multiply two secrets or invert one. Nothing in this package needs it. It uses no tables.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from functools import cache

from shares.errors import DuplicatePointError, ParameterError, PolynomialError
from shares.field import Kernel, ReadableBuffer, WritableBuffer
from shares.field import kernel as kernel_in_use
from shares.field.irreducible import require_irreducible
from shares.field.polynomial import MAX_DEGREE, Polynomial

DEFAULT_MODULUS = 0x11B


@dataclass(frozen=True, slots=True, repr=False)
class Field:
    """GF(2)[x]/(modulus): products and weights of public numbers, and the two operations on secret rows.

    Args:
        modulus: irreducible polynomial of degree 8 as int, bit i the coefficient of x^i.
        kernel: who computes on secrets; by default the kernel in use. Fields of one modulus are equal.

    Raises:
        PolynomialError: the modulus is of another degree, or reducible (the message names the factors).
        KernelUnavailableError: the demanded kernel cannot be loaded.

    >>> hex(Field(0x11b).multiply(0x57, 0x83))  # FIPS 197, section 4.2
    '0xc1'
    >>> Field(0x101)
    Traceback (most recent call last):
    shares.errors.PolynomialError: x^8 + 1 is not irreducible: over GF(2) it is (x + 1)^8
    """

    modulus: int = DEFAULT_MODULUS
    kernel: Kernel = field(default_factory=kernel_in_use, kw_only=True, compare=False)

    def __post_init__(self) -> None:
        _require_irreducible(self.modulus)

    def __repr__(self) -> str:
        return f"Field({self.modulus:#x})"

    # Public numbers: ordinary Python, whose time depends on the values.

    def multiply(self, a: int, b: int) -> int:
        """Multiply two public elements.

        Args:
            a: 0 to 255.
            b: 0 to 255.

        Returns:
            The product, 0 to 255.

        Raises:
            ParameterError: a or b is no element.
        """
        _require_elements(a | b)
        product = 0
        while b:
            if b & 1:
                product ^= a
            a <<= 1
            if a & 0x100:
                a ^= self.modulus
            b >>= 1
        return product

    def power(self, a: int, exponent: int) -> int:
        """Raise a public element to a power of 0 or more; ``power(0, 0)`` is 1.

        Args:
            a: 0 to 255.
            exponent: 0 or more.

        Returns:
            The power, 0 to 255.

        Raises:
            ParameterError: a is no element, or the exponent is negative.
        """
        _require_elements(a)
        if exponent < 0:
            raise ParameterError("an exponent must be 0 or more")
        result = 1
        while exponent:
            if exponent & 1:
                result = self.multiply(result, a)
            a = self.multiply(a, a)
            exponent >>= 1
        return result

    def inverse(self, a: int) -> int:
        """Invert a public element: a^254, as a^255 = 1 for every a but 0.

        Args:
            a: 1 to 255.

        Returns:
            The inverse, 1 to 255.

        Raises:
            ParameterError: a is 0 or no element.
        """
        if a == 0:
            raise ParameterError("0 has no inverse")
        return self.power(a, 254)

    def powers(self, x: int, count: int) -> bytes:
        """Give 1, x, x^2, ...: one line of the matrix that evaluates polynomials.

        Args:
            x: public evaluation point, 0 to 255.
            count: number of powers, 0 or more.

        Returns:
            ``count`` bytes.

        Raises:
            ParameterError: x is no element.

        >>> Field().powers(2, 9).hex()
        '01020408102040801b'
        """

        def chain() -> Iterator[int]:
            power = 1
            for _ in range(count):
                yield power
                power = self.multiply(power, x)

        _require_elements(x)
        return bytes(chain())

    def interpolation_weights(self, xs: Sequence[int], *, at: int = 0) -> bytes:
        """Give w with f(at) = sum of w_i f(x_i) for every polynomial f of degree below ``len(xs)``.

        Args:
            xs: public evaluation points, each 1 to 255 and once only.
            at: where f is wanted, 0 to 255.

        Returns:
            ``len(xs)`` bytes, in the order of ``xs``.

        Raises:
            DuplicatePointError: a point is given twice.
            ParameterError: no point, or one out of range.

        Source: Lagrange's formula: w_i is the product over j != i of (at - x_j) / (x_i - x_j); minus is XOR here.

        >>> Field().interpolation_weights([1, 2, 3]).hex()  # f(0) = f(1) + f(2) + f(3), as 1 + 2 + 3 = 0
        '010101'
        """
        if not xs or not all(1 <= x <= 255 for x in xs):
            raise ParameterError("evaluation points must be 1 to 255, at least one of them")
        _require_elements(at)
        if len(set(xs)) < len(xs):
            raise DuplicatePointError("two evaluation points are the same")
        if at in xs:
            return bytes(int(x == at) for x in xs)
        # The numerator of w_i is the product over all j of (at - x_j), without its own factor.
        whole = 1
        for x in xs:
            whole = self.multiply(whole, at ^ x)
        weights = bytearray()
        for x_i in xs:
            divisor = at ^ x_i
            for x_j in xs:
                if x_j != x_i:
                    divisor = self.multiply(divisor, x_i ^ x_j)
            weights.append(self.multiply(whole, self.inverse(divisor)))
        return bytes(weights)

    # Secret rows: the kernel.

    def combine(self, matrix: Sequence[bytes], rows: Sequence[ReadableBuffer], out: Sequence[WritableBuffer]) -> None:
        """Write ``out[i][t] = sum over j of matrix[i][j] * rows[j][t]``.

        Args:
            matrix: public; for each out ``len(rows)`` scalars.
            rows: secret; at least one, all of one length, 1 byte or more.
            out: at least one, of the same length; overwritten whole, and no part of a row or of another out.

        Raises:
            ValueError: shapes do not fit or buffers overlap; nothing has been written then.
        """
        self.kernel.combine(self.modulus, matrix, rows, out)

    def project(self, matrix: ReadableBuffer, row: ReadableBuffer, out: WritableBuffer) -> None:
        """Write ``out[i] = sum over j of matrix[i][j] * row[j]``.

        Args:
            matrix: public; ``len(out) * len(row)`` bytes, line by line.
            row: secret; 1 byte or more.
            out: 1 byte or more; overwritten whole, and no part of the row or the matrix.

        Raises:
            ValueError: shapes do not fit or buffers overlap; nothing has been written then.
        """
        self.kernel.project(self.modulus, matrix, row, out)


def _require_elements(bits: int) -> None:
    if bits & ~0xFF:
        raise ParameterError("an element must be 0 to 255")


@cache
def _require_irreducible(modulus: int) -> None:
    if not 0 <= modulus < 2 << MAX_DEGREE:
        raise PolynomialError("the field polynomial must be of degree 8")
    require_irreducible(Polynomial.from_number(modulus), degree=8)
