"""Irreducible polynomials: which ones are, what the others are made of, how many there are.

For: every field is made from one, and a wrong choice is refused with its factors.
Source: M. O. Rabin, "Probabilistic algorithms in finite fields", SIAM J. Computing 9(2), 1980 (irreducibility);
    E. R. Berlekamp, "Factoring polynomials over finite fields", Bell System Technical Journal 46, 1967; R. Lidl,
    H. Niederreiter, "Introduction to Finite Fields and their Applications" (Gauss's count, primitive polynomials).
May import: shares.errors, shares.field.polynomial.
Secret: nothing. Public: everything; time depends on the values, so a secret must never come here.
Does not: handle large degrees or primes. The bounds keep every answer within seconds, whatever is asked.
"""

from __future__ import annotations

from collections.abc import Iterator

from shares.errors import ParameterError, PolynomialError
from shares.field.polynomial import Polynomial, gcd, require_degree, require_prime

MAX_LISTED = 1 << 12  # So many monic polynomials, p^m, are looked through for a list.
MAX_ORDER = 1 << 40  # p^m - 1 is factored by trial division for ``is_primitive``.


def is_irreducible(f: Polynomial) -> bool:
    """Tell whether f has no factor of a lower degree than its own, except constants.

    Args:
        f: of degree 32 at most.

    Returns:
        False for constants, too.

    Raises:
        ParameterError: the degree is too large.

    Source: Rabin 1980: f of degree n is irreducible if and only if f divides x^(p^n) - x and has no factor in
        common with x^(p^(n/q)) - x for any prime q that divides n.
    """
    require_degree(f.degree)
    if f.degree < 1:
        return False
    x = Polynomial(f.p, (0, 1))
    conjugates = [x % f]  # x^(p^i) modulo f
    for _ in range(f.degree):
        conjugates.append(conjugates[-1].power(f.p, f))
    return conjugates[f.degree] == conjugates[0] and all(
        gcd(conjugates[f.degree // q] - x, f).degree == 0 for q in _prime_divisors(f.degree)
    )


def is_primitive(f: Polynomial) -> bool:
    """Tell whether f is irreducible and x generates the non-zero elements of the field that f makes.

    Args:
        f: of degree m, with p^m at most 2^40.

    Returns:
        Whether x has order p^m - 1 modulo f.

    Raises:
        ParameterError: p^m is too large.

    Source: Lidl, Niederreiter, primitive polynomials: x^((p^m - 1) / q) is not 1 for any prime q that divides p^m - 1.
    """
    order = f.p ** max(f.degree, 0) - 1
    if order >= MAX_ORDER:
        raise ParameterError(f"whether a polynomial is primitive is told up to {MAX_ORDER} elements only")
    x, one = Polynomial(f.p, (0, 1)), Polynomial(f.p, (1,))
    # The power p^m - 1 itself tells x apart, the only irreducible polynomial with the root 0.
    return (
        is_irreducible(f)
        and x.power(order, f) == one
        and all(x.power(order // q, f) != one for q in _prime_divisors(order))
    )


def factor(f: Polynomial) -> list[tuple[Polynomial, int]]:
    """Split f into irreducible factors.

    Args:
        f: of degree 32 at most, not 0.

    Returns:
        Monic irreducible factors with their multiplicities, in the order of degree and number. Their product is f but
        for its leading coefficient.

    Raises:
        ParameterError: f is 0, or its degree is too large.

    >>> [(str(g), times) for g, times in factor(Polynomial.parse("x^5 + x"))]
    [('x', 1), ('x + 1', 4)]
    """
    require_degree(f.degree)
    if not f.coefficients:
        raise ParameterError("the zero polynomial has no factors")
    factors = [(g, times) for part, times in _squarefree_parts(f.monic()) for g in _split(part)]
    return sorted(factors, key=lambda pair: pair[0].number)


def factored(f: Polynomial) -> str:
    """Write f as a product of irreducible factors, as a refusal names them.

    >>> factored(Polynomial.parse("2x^3 + 2x", 5))
    '2 * x * (x + 2) * (x + 3)'
    """
    lead = f.coefficients[-1] if f.coefficients else 0
    texts = [str(lead)] if lead != 1 or f.degree == 0 else []
    for g, times in factor(f) if f.coefficients else []:
        base = str(g) if len(g.coefficients) - g.coefficients.count(0) == 1 else f"({g})"
        texts.append(base if times == 1 else f"{base}^{times}")
    return " * ".join(texts)


def require_irreducible(f: Polynomial, *, degree: int | None = None) -> None:
    """Refuse f, naming its factors, unless it is irreducible and of the wanted degree.

    Args:
        f: of degree 32 at most.
        degree: the wanted degree; by default any.

    Raises:
        PolynomialError: f is not as wanted.
    """
    reducible = "" if is_irreducible(f) else f"over GF({f.p}) it is {factored(f)}"
    if degree is not None and f.degree != degree:
        raise PolynomialError(f"{f} is not of degree {degree}" + (f", and {reducible}" if reducible else ""))
    if reducible:
        raise PolynomialError(f"{f} is not irreducible: {reducible}")


def count_irreducible(q: int, m: int) -> int:
    """Count the monic irreducible polynomials of degree m over the field of q elements.

    Args:
        q: number of elements, 2 or more.
        m: degree, 1 to 32.

    Returns:
        The count.

    Raises:
        ParameterError: q or m is out of range.

    Source: Gauss's formula (Lidl, Niederreiter, theorem 3.25): 1/m times the sum of mu(d) q^(m/d) over all d | m.

    >>> count_irreducible(2, 8)
    30
    """
    if q < 2 or m < 1:
        raise ParameterError("a field has 2 elements or more, and the degree must be 1 or more")
    require_degree(m)
    total = 0
    for d in range(1, m + 1):
        primes = _prime_divisors(d)
        squarefree = all(d % (prime * prime) for prime in primes)
        if m % d == 0 and squarefree:
            total += (-1) ** len(primes) * q ** (m // d)
    return total // m


def irreducibles(m: int, p: int = 2) -> Iterator[Polynomial]:
    """List the monic irreducible polynomials of degree m over GF(p), in the order of their numbers.

    Args:
        m: degree, 1 or more, with p^m at most 4,096.
        p: a prime of at most 257.

    Returns:
        An iterator, for a long list takes its time.

    Raises:
        ParameterError: m or p is out of range.

    >>> [str(f) for f in irreducibles(2, 3)]
    ['x^2 + 1', 'x^2 + x + 2', 'x^2 + 2x + 2']
    """
    require_prime(p)
    require_degree(m)
    if m < 1 or p**m > MAX_LISTED:
        raise ParameterError(f"the degree m must be 1 or more, and p^m at most {MAX_LISTED}")
    monic = (Polynomial.from_number(number, p) for number in range(p**m, 2 * p**m))
    return (f for f in monic if is_irreducible(f))


def _squarefree_parts(f: Polynomial) -> Iterator[tuple[Polynomial, int]]:
    """Give squarefree g_i and multiplicities e_i with f = product of g_i^e_i, for a monic f.

    Source: Lidl, Niederreiter, on repeated factors: a factor of multiplicity e divides the derivative e - 1 times, or e
        times where p divides e; what is left in the end is a p-th power, whose root has every p-th coefficient.
    """
    repeated = gcd(f, f.derivative())
    simple, times = f // repeated, 1
    while simple.degree > 0:
        further = gcd(simple, repeated)
        part = simple // further
        if part.degree > 0:
            yield part, times
        simple, repeated, times = further, repeated // further, times + 1
    if repeated.degree > 0:
        root = Polynomial(f.p, repeated.coefficients[:: f.p])
        yield from ((part, times * f.p) for part, times in _squarefree_parts(root))


def _split(f: Polynomial) -> list[Polynomial]:
    """Split a monic squarefree polynomial into its irreducible factors.

    Source: Berlekamp 1967: the h with h^p = h modulo f form a space whose dimension is the number of factors, and f is
        the product of gcd(f, h - s) over all s in GF(p).
    """
    factors, space = [f], _fixed_by_frobenius(f)
    for h in space:
        for s in range(f.p):
            if len(factors) == len(space):
                return factors
            shifted = h - Polynomial.reduced(f.p, [s])
            parts = [(g, gcd(g, shifted)) for g in factors]
            factors = [piece for g, d in parts for piece in (d, g // d) if piece.degree > 0]
    return factors


def _fixed_by_frobenius(f: Polynomial) -> list[Polynomial]:
    """Give a basis of all h with h^p = h modulo f, by elimination."""
    n, p = f.degree, f.p
    step, image = Polynomial(p, (0, 1)).power(p, f), Polynomial(p, (1,))
    rows = []
    for i in range(n):
        # The left half is h^p - h modulo f and the right half is h, from h = x^i onwards through the elimination.
        left = [*image.coefficients, *[0] * (n - len(image.coefficients))]
        left[i] -= 1
        rows.append(left + [int(i == j) for j in range(n)])
        image = image * step % f
    for column in range(n):
        pivot = next((row for row in rows if row[column] % p), None)
        if pivot is not None:
            scale = pow(pivot[column], -1, p)
            rows = [
                [(a - row[column] * scale * b) % p for a, b in zip(row, pivot, strict=True)]
                for row in rows
                if row is not pivot
            ]
    return [Polynomial.reduced(p, row[n:]) for row in rows]


def _prime_divisors(n: int) -> list[int]:
    primes = []
    d = 2
    while d * d <= n:
        if n % d == 0:
            primes.append(d)
            while n % d == 0:
                n //= d
        d += 1
    return [*primes, n] if n > 1 else primes
