"""``Polynomial``: reading, writing and arithmetic, against python-flint."""

from __future__ import annotations

import flint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.errors import ParameterError
from shares.field.polynomial import MAX_DEGREE, Polynomial, gcd

PRIMES = st.sampled_from([2, 3, 5, 13, 257])


@st.composite
def polynomials(draw, p, *, max_degree=12):
    digits = st.sampled_from([0, 1, p - 1]) | st.integers(0, p - 1)
    return Polynomial.reduced(p, draw(st.lists(digits, max_size=max_degree + 1)))


PAIRS = PRIMES.flatmap(lambda p: st.tuples(polynomials(p), polynomials(p)))


def reference(f):
    return flint.nmod_poly(list(f.coefficients), f.p)


def same(f, expected):
    return list(f.coefficients) == [int(c) for c in expected.coeffs()]


class TestArithmetic:
    @given(PAIRS)
    def test_ring(self, pair):
        f, g = pair
        a, b = reference(f), reference(g)
        assert same(f + g, a + b)
        assert same(f - g, a - b)
        assert same(-f, -a)
        assert same(f * g, a * b)
        assert same(f.derivative(), a.derivative())

    @given(PAIRS)
    def test_division(self, pair):
        f, g = pair
        if g.coefficients:
            quotient, rest = divmod(reference(f), reference(g))
            assert same(f // g, quotient)
            assert same(f % g, rest)
            assert f == f // g * g + f % g

    @given(PAIRS)
    def test_gcd(self, pair):
        f, g = pair
        assert same(gcd(f, g), reference(f).gcd(reference(g)))

    @given(PAIRS, st.integers(0, 300))
    def test_power(self, pair, exponent):
        f, modulus = pair
        if modulus.coefficients:
            expected = flint.nmod_poly([1], f.p) % reference(modulus)
            for _ in range(exponent):
                expected = expected * reference(f) % reference(modulus)
            assert same(f.power(exponent, modulus), expected)

    def test_monic(self):
        assert str(Polynomial(5, (1, 0, 3)).monic()) == "x^2 + 2"
        assert Polynomial(5, ()).monic() == Polynomial(5, ())

    def test_refusals(self):
        f, zero = Polynomial(3, (1, 1)), Polynomial(3, ())
        with pytest.raises(ParameterError, match="divided by 0"):
            f % zero
        with pytest.raises(ParameterError, match="0 or more"):
            f.power(-1, f)
        for operation in [f.__add__, f.__sub__, f.__mul__, f.__mod__, f.__floordiv__]:
            with pytest.raises(ParameterError, match=r"GF\(3\) and one over GF\(2\)"):
                operation(Polynomial(2, (1, 1)))


class TestText:
    @pytest.mark.parametrize(
        "text", ["x^8 + x^4 + x^3 + x + 1", "0x11b", "0x11B", "283", "1+x+x^3+x^4+x^8", " x^8+x^4 +x^3+ x+1 "]
    )
    def test_the_same_polynomial(self, text):
        f = Polynomial.parse(text)
        assert (f.number, f.degree, str(f)) == (0x11B, 8, "x^8 + x^4 + x^3 + x + 1")

    def test_the_thirty(self, vectors):
        # Lidl, Niederreiter, tables: the same polynomial in four notations.
        entries = vectors("finite_fields")["irreducible_degree_8_over_gf2"]
        assert len(entries) == 30
        for entry in entries:
            f = Polynomial.parse(entry["poly"])
            assert str(f) == entry["poly"]
            assert f.number == int(entry["hex"], 16) == int(entry["octal"], 8) == int(entry["binary"], 2)

    @pytest.mark.parametrize(
        ("text", "p", "canonical", "number"),
        [
            ("x^2 + 2x + 2", 3, "x^2 + 2x + 2", 17),
            ("17", 3, "x^2 + 2x + 2", 17),
            ("0x11", 3, "x^2 + 2x + 2", 17),
            ("2 + 2x^2", 3, "2x^2 + 2", 20),
            ("-x", 3, "2x", 6),
            ("x^2 - 7", 11, "x^2 + 4", 125),
            ("x - 0", 3, "x", 3),
            ("x^1 + x^0", 3, "x + 1", 4),
            ("0", 3, "0", 0),
            ("0x", 3, "0", 0),
            ("256", 257, "256", 256),
            ("257", 257, "x", 257),
        ],
    )
    def test_other_fields(self, text, p, canonical, number):
        f = Polynomial.parse(text, p)
        assert (str(f), f.number) == (canonical, number)

    @given(PRIMES.flatmap(polynomials))
    def test_round_trips(self, f):
        assert Polynomial.parse(str(f), f.p) == f
        assert Polynomial.parse(hex(f.number), f.p) == f
        assert Polynomial.parse(str(f.number), f.p) == f
        assert Polynomial.from_number(f.number, f.p) == f

    @pytest.mark.parametrize(
        "text",
        ["", " ", "+", "x^", "x +", "+ + x", "x--1", "x^8 x", "1 1", "x 1", "x^-1", "x^2.0", "y", "2*x", "x**2", "X",
         "0xg", "0x 11", "x\u00b2", "\u0663", "x^\u0663", "\uff11", "x\n", "x\t+ 1", "NaN", "1e3", "1_0", "x;y",
         "(x + 1)^2", "0b11", "\x00"],
    )  # fmt: skip
    def test_no_polynomial(self, text):
        with pytest.raises(ParameterError, match="this is not a polynomial"):
            Polynomial.parse(text)

    @pytest.mark.parametrize(
        ("text", "p", "message"),
        [
            ("2x", 2, "coefficient must be 0 to 1"),
            ("x + 3", 3, "coefficient must be 0 to 2"),
            ("x + x", 2, "power 1 of x is given twice"),
            ("x^3 + 1 + 1", 2, "power 0 of x is given twice"),
            ("x^33", 2, "degree 32 at most"),
            ("x^" + "9" * 400, 2, "degree 32 at most"),
            ("9" * 400, 2, "degree 32 at most"),
            ("0x" + "f" * 400, 2, "degree 32 at most"),
            ("1" * 501, 2, "500 characters"),
            ("x + " * 1_000_000 + "1", 2, "500 characters"),
            ("x", 4, "prime of at most 257"),
            ("x", 1, "prime of at most 257"),
            ("x", -3, "prime of at most 257"),
            ("x", 263, "prime of at most 257"),
            ("x", 2**127 - 1, "prime of at most 257"),
        ],
    )
    def test_out_of_range(self, text, p, message):
        with pytest.raises(ParameterError, match=message):
            Polynomial.parse(text, p)

    @given(st.text(alphabet="0123456789x^+- abf", max_size=30), PRIMES)
    def test_whatever_is_typed_is_read_or_refused(self, text, p):
        try:
            f = Polynomial.parse(text, p)
        except ParameterError:
            return
        assert Polynomial.parse(str(f), p) == f


class TestNumbers:
    def test_the_largest(self):
        for p in [2, 257]:
            assert Polynomial.from_number(p ** (MAX_DEGREE + 1) - 1, p).degree == MAX_DEGREE
            with pytest.raises(ParameterError, match="degree 32"):
                Polynomial.from_number(p ** (MAX_DEGREE + 1), p)

    def test_a_negative_number_is_refused(self):
        with pytest.raises(ParameterError, match="0 or more"):
            Polynomial.from_number(-1)

    @pytest.mark.parametrize("coefficients", [(0,), (1, 0), (3,), (-1, 1), (1, 3)])
    def test_only_canonical_coefficients(self, coefficients):
        with pytest.raises(ParameterError, match="coefficients must be 0 to 2"):
            Polynomial(3, coefficients)
