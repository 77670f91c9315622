"""``ExtensionField``: every sum, product and inverse of small fields, against galois."""

from __future__ import annotations

import pytest

from shares.errors import ParameterError, PolynomialError
from shares.field.extension import ExtensionField
from shares.field.gf256 import Field
from shares.field.polynomial import Polynomial
from shares.field.prime import PrimeField


@pytest.mark.parametrize(
    ("p", "text"),
    [
        (2, "x^2 + x + 1"),
        (2, "x^3 + x + 1"),
        (2, "x^5 + x^2 + 1"),
        (3, "x^2 + 1"),
        (3, "x^3 + 2x + 1"),
        (5, "x^2 + 2"),
        (7, "x^2 + 1"),
        (3, "2x^2 + 2"),
    ],
)
def test_all_of_it(reference_field, p, text):
    f = Polynomial.parse(text, p)
    field, reference = ExtensionField(f), reference_field(p, tuple(reversed(f.monic().coefficients)))
    assert field.size == reference.order
    for a in range(field.size):
        for b in range(field.size):
            assert field.add(a, b) == int(reference(a) + reference(b))
            assert field.subtract(a, b) == int(reference(a) - reference(b))
            assert field.multiply(a, b) == int(reference(a) * reference(b))
        if a:
            assert field.inverse(a) == int(reference(a) ** -1)
            assert field.power(a, 5) == int(reference(a) ** 5)


@pytest.mark.parametrize("p", [2, 7, 257])
def test_degree_1_gives_the_prime_field(p):
    field, prime_field = ExtensionField(Polynomial.parse("x + 1", p)), PrimeField(p)
    for a in {0, 1, p // 2, p - 1}:
        for b in {0, 1, p // 2, p - 1}:
            assert field.add(a, b) == prime_field.add(a, b)
            assert field.multiply(a, b) == prime_field.multiply(a, b)
        if a:
            assert field.inverse(a) == prime_field.inverse(a)


def test_powers_of_x_in_gf8(vectors):
    # Lidl, Niederreiter: GF(8) from x^3 + x + 1.
    field = ExtensionField(Polynomial.parse("x^3 + x + 1"))
    assert [field.power(2, e) for e in range(7)] == vectors("finite_fields")["gf8_powers_of_x_mod_x3_x_1"]


def test_the_same_products_as_the_field_of_bytes():
    field, bytes_field = ExtensionField(Polynomial.from_number(0x11D)), Field(0x11D)
    for a in [0, 1, 2, 0x53, 0x80, 0xFF]:
        assert [field.multiply(a, b) for b in range(256)] == [bytes_field.multiply(a, b) for b in range(256)]


@pytest.mark.parametrize(("text", "message"), [("x^2 + 1", r"\(x \+ 1\)\^2"), ("1", "it is 1"), ("0", "it is 0")])
def test_a_reducible_modulus_is_refused(text, message):
    with pytest.raises(PolynomialError, match=message):
        ExtensionField(Polynomial.parse(text))


@pytest.mark.parametrize("wrong", [-1, 8, 1 << 90])
def test_no_elements(wrong):
    field = ExtensionField(Polynomial.parse("x^3 + x + 1"))
    for call in [
        lambda: field.add(wrong, 1),
        lambda: field.subtract(1, wrong),
        lambda: field.multiply(wrong, 1),
        lambda: field.power(wrong, 0),
        lambda: field.inverse(wrong),
    ]:
        with pytest.raises(ParameterError, match="0 to 7"):
            call()


def test_zero_has_no_inverse():
    with pytest.raises(ParameterError, match="no inverse"):
        ExtensionField(Polynomial.parse("x^3 + x + 1")).inverse(0)
