"""Irreducibility, factors, primitivity and counts, against tables, python-flint and galois."""

from __future__ import annotations

import flint
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from shares.errors import ParameterError, PolynomialError
from shares.field.irreducible import (
    MAX_LISTED,
    count_irreducible,
    factor,
    factored,
    irreducibles,
    is_irreducible,
    is_primitive,
    require_irreducible,
)
from shares.field.polynomial import Polynomial

PRIMES = st.sampled_from([2, 3, 5, 13])


@st.composite
def products(draw):
    """A polynomial made of a few small ones, some of them several times."""
    p = draw(PRIMES)
    f = Polynomial(p, (draw(st.integers(1, p - 1)),))
    for _ in range(draw(st.integers(1, 4))):
        g = Polynomial.reduced(p, [*draw(st.lists(st.integers(0, p - 1), max_size=4)), 1])
        for _ in range(draw(st.sampled_from([1, 1, 2, 3, p]))):
            if f.degree + g.degree <= 32:
                f = f * g
    return f


def reference_factors(f):
    _, factors = flint.nmod_poly(list(f.coefficients), f.p).factor()
    return sorted(([int(c) for c in g.coeffs()], times) for g, times in factors)


def check_factors(f):
    expected = reference_factors(f)
    assert sorted((list(g.coefficients), times) for g, times in factor(f)) == expected
    assert is_irreducible(f) == ([times for _, times in expected] == [1])


class TestTables:
    """Lidl, Niederreiter; Peterson, Weldon, appendix C (sources and standing in the file)."""

    def test_the_thirty(self, vectors):
        entries = vectors("finite_fields")["irreducible_degree_8_over_gf2"]
        found = {f.number: is_primitive(f) for f in irreducibles(8)}
        assert found == {int(entry["hex"], 16): entry["primitive"] for entry in entries}
        assert [m for m, primitive in found.items() if primitive] == [
            int(text, 16) for text in vectors("finite_fields")["primitive_degree_8_over_gf2"]
        ]

    def test_peterson(self, vectors):
        # The table lists one of each reciprocal pair, in octal.
        table = vectors("finite_fields")
        numbers = [int(text, 8) for text in table["peterson_octal"]]
        reciprocals = [int(f"{number:09b}"[::-1], 2) for number in numbers]
        assert {f.number for f in irreducibles(8)} == {*numbers, *reciprocals}
        primitive = [text for text in table["peterson_octal"] if is_primitive(Polynomial.from_number(int(text, 8)))]
        assert sorted(primitive) == sorted(table["peterson_octal_primitive"])

    def test_facts(self, vectors):
        facts = vectors("finite_fields")["irreducibility_facts"]
        assert len(facts) == 20
        for fact in facts:
            p = int(fact["field"][3:-1])
            f = Polynomial.parse(fact["polynomial"], p)
            assert list(f.coefficients) == fact["coefficients_low_first"]
            assert is_irreducible(f) == fact["irreducible"]
            check_factors(f)

    def test_gauss_counts(self, vectors):
        for entry in vectors("finite_fields")["irreducible_counts"]:
            counts = [count_irreducible(entry["q"], m) for m in range(1, 9)]
            assert counts == entry["degree_1_to_8"]

    def test_lists_are_as_long_as_counted(self, vectors):
        primitive = {entry["q"]: entry["degree_1_to_8"] for entry in vectors("finite_fields")["primitive_counts"]}
        checked = 0
        for p in [2, 3, 5, 7, 11, 13]:
            for m in range(1, 9):
                if p**m <= 729:
                    found = list(irreducibles(m, p))
                    assert len(found) == count_irreducible(p, m)
                    if p in primitive:
                        assert sum(map(is_primitive, found)) == primitive[p][m - 1]
                    checked += 1
        assert checked == 8 + 6 + 4 + 3 + 2 + 2


class TestReference:
    @pytest.mark.parametrize(("p", "degree"), [(2, 8), (3, 4), (5, 3), (13, 2)])
    def test_every_small_polynomial(self, p, degree):
        for number in range(1, p ** (degree + 1)):
            check_factors(Polynomial.from_number(number, p))

    @given(products())
    @example(Polynomial(2, (1,) + (0,) * 31 + (1,)))
    @example(Polynomial(3, (2, 0, 0, 1, 0, 0, 1)))
    @example(Polynomial(257, (0, 256) + (0,) * 30 + (1,)))
    def test_products(self, f):
        check_factors(f)

    @given(st.sampled_from([2, 3, 13, 257]), st.data())
    def test_random_polynomials(self, p, data):
        digits = data.draw(st.lists(st.integers(0, p - 1), max_size=10))
        check_factors(Polynomial.reduced(p, [*digits, 1]))

    @pytest.mark.parametrize(("p", "m"), [(2, 1), (2, 5), (2, 8), (3, 3), (3, 4), (5, 2), (7, 2)])
    def test_lists_equal_galois(self, p, m):
        import galois

        assert [f.number for f in irreducibles(m, p)] == [int(f) for f in galois.irreducible_polys(p, m)]
        assert [f.number for f in irreducibles(m, p) if is_primitive(f)] == [
            int(f) for f in galois.primitive_polys(p, m)
        ]


class TestTextOfFactors:
    @pytest.mark.parametrize(
        ("text", "p", "expected"),
        [
            ("x^4 + x^2 + 1", 2, "(x^2 + x + 1)^2"),
            ("x^8 + x^4", 2, "x^4 * (x + 1)^4"),
            ("2x^2", 3, "2 * x^2"),
            ("2x^2 + 1", 3, "2 * (x + 1) * (x + 2)"),
            ("x^3 + 1", 7, "(x + 1) * (x + 2) * (x + 4)"),
            ("x", 2, "x"),
            ("2", 3, "2"),
            ("1", 2, "1"),
            ("0", 2, "0"),
        ],
    )
    def test_factored(self, text, p, expected):
        assert factored(Polynomial.parse(text, p)) == expected

    @pytest.mark.parametrize(
        ("text", "degree", "message"),
        [
            ("x^8 + 1", None, "x^8 + 1 is not irreducible: over GF(2) it is (x + 1)^8"),
            ("x^8 + 1", 8, "x^8 + 1 is not irreducible: over GF(2) it is (x + 1)^8"),
            ("x^4 + x + 1", 8, "x^4 + x + 1 is not of degree 8"),
            ("x^2", 8, "x^2 is not of degree 8, and over GF(2) it is x^2"),
            ("1", None, "1 is not irreducible: over GF(2) it is 1"),
        ],
    )
    def test_refusals(self, text, degree, message):
        with pytest.raises(PolynomialError) as caught:
            require_irreducible(Polynomial.parse(text), degree=degree)
        assert str(caught.value) == message

    def test_no_refusal(self):
        require_irreducible(Polynomial.parse("x^8 + x^4 + x^3 + x + 1"), degree=8)
        require_irreducible(Polynomial.parse("x^2 + 1", 3))


class TestBounds:
    def test_x_is_irreducible_but_not_primitive(self):
        assert is_irreducible(Polynomial.parse("x"))
        assert not is_primitive(Polynomial.parse("x"))
        assert is_primitive(Polynomial.parse("x + 1"))

    @pytest.mark.parametrize("constant", ["0", "1", "2"])
    def test_constants_are_not_irreducible(self, constant):
        assert not is_irreducible(Polynomial.parse(constant, 3))
        assert not is_primitive(Polynomial.parse(constant, 3))

    def test_too_large_a_degree(self):
        f = Polynomial.from_number(1 << 32) * Polynomial.parse("x")
        for function in [is_irreducible, factor, require_irreducible]:
            with pytest.raises(ParameterError, match="degree 32"):
                function(f)

    def test_too_large_an_order(self):
        with pytest.raises(ParameterError, match="primitive"):
            is_primitive(Polynomial.parse("x^6 + 3", 257))

    def test_zero_has_no_factors(self):
        with pytest.raises(ParameterError, match="zero polynomial"):
            factor(Polynomial.parse("0"))

    @pytest.mark.parametrize(("m", "p"), [(0, 2), (-1, 2), (13, 2), (33, 2), (10**9, 2), (2, 67), (1, 4), (1, 263)])
    def test_lists_are_bounded_at_once(self, m, p):
        # The refusal comes from the call, not from the first step of the iterator.
        with pytest.raises(ParameterError):
            irreducibles(m, p)

    def test_the_longest_list_begins(self):
        assert MAX_LISTED == 2**12
        assert str(next(irreducibles(12))) == "x^12 + x^3 + 1"  # Lidl, Niederreiter, tables (from memory).

    @pytest.mark.parametrize(("q", "m"), [(1, 1), (0, 3), (2, 0), (2, -1), (2, 33)])
    def test_counts_are_bounded(self, q, m):
        with pytest.raises(ParameterError):
            count_irreducible(q, m)
