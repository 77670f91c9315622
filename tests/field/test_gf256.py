"""``Field``: public numbers over GF(2^8), and which polynomials make one."""

from __future__ import annotations

import itertools

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.errors import DuplicatePointError, ParameterError, PolynomialError
from shares.field import kernel
from shares.field.gf256 import Field

BYTES = st.sampled_from([0, 1, 2, 0x80, 0xFF]) | st.integers(0, 255)
POINTS = st.lists(st.integers(1, 255), min_size=1, max_size=12, unique=True)


@pytest.fixture(scope="module")
def aes(vectors):
    """NIST FIPS 197, sections 4 and 5.1.1: worked products, xtime, S-box."""
    return vectors("fips197_gf256")


class TestFips197:
    def test_worked_products(self, aes):
        field = Field(int(aes["modulus"], 16))
        assert len(aes["worked_products"]) == 2
        for entry in aes["worked_products"]:
            assert field.multiply(int(entry["a"], 16), int(entry["b"], 16)) == int(entry["product"], 16)

    def test_xtime_chain(self, aes):
        field, product = Field(), 0x57
        assert [int(step["times"], 16) for step in aes["xtime_chain_of_57"]] == [1 << i for i in range(8)]
        for step in aes["xtime_chain_of_57"]:
            assert product == field.multiply(0x57, int(step["times"], 16)) == int(step["product"], 16)
            product = field.multiply(2, product)

    def test_all_inverses_through_the_sbox(self, aes):
        # Section 5.1.1: the S-box is an affine map of the inverse, 0 standing for its own.
        def affine(b):
            return b ^ rotate(b, 1) ^ rotate(b, 2) ^ rotate(b, 3) ^ rotate(b, 4) ^ 0x63

        def rotate(b, by):
            return (b << by | b >> 8 - by) & 0xFF

        field = Field()
        inverses = [0] + [field.inverse(a) for a in range(1, 256)]
        assert [f"{affine(b):02x}" for b in inverses] == aes["sbox"]
        assert [f"{b:02x}" for b in inverses] == aes["inverse"]

    def test_powers_of_the_generator(self, aes):
        assert [f"{a:02x}" for a in Field().powers(0x03, 255)] == aes["exp_table_generator_03"]
        assert Field().power(0x02, aes["order_of_02"]) == 1


class TestReference:
    """Every field against galois."""

    def test_all_products(self, all_moduli, reference_products):
        for modulus in all_moduli:
            field, products = Field(modulus), reference_products(modulus)
            for a in range(256):
                # Half of them: that products commute is seen by test_field_laws.
                assert bytes(field.multiply(a, b) for b in range(a + 1)) == products[a][: a + 1]

    def test_all_inverses(self, all_moduli, reference_products):
        for modulus in all_moduli:
            field, products = Field(modulus), reference_products(modulus)
            assert all(products[a][field.inverse(a)] == 1 for a in range(1, 256))

    @pytest.mark.parametrize("modulus", [0x11B, 0x1F5])
    @given(xs=POINTS, data=st.data())
    def test_interpolation(self, reference_field, modulus, xs, data):
        import galois

        values = data.draw(st.lists(BYTES, min_size=len(xs), max_size=len(xs)))
        at = data.draw(BYTES)
        field, reference = Field(modulus), reference_field(2, tuple(map(int, f"{modulus:b}")))
        total = 0
        for weight, value in zip(field.interpolation_weights(xs, at=at), values, strict=True):
            total ^= field.multiply(weight, value)
        assert total == int(galois.lagrange_poly(reference(xs), reference(values))(reference(at)))


class TestPublicNumbers:
    @given(a=BYTES, b=BYTES, c=BYTES)
    def test_field_laws(self, a, b, c):
        field = Field()
        assert field.multiply(a, b ^ c) == field.multiply(a, b) ^ field.multiply(a, c)
        assert field.multiply(field.multiply(a, b), c) == field.multiply(a, field.multiply(b, c))
        assert field.multiply(a, b) == field.multiply(b, a)

    @given(a=BYTES, exponent=st.integers(0, 600))
    def test_power_is_repeated_multiplication(self, a, exponent):
        field, expected = Field(), 1
        for _ in range(exponent):
            expected = field.multiply(expected, a)
        assert field.power(a, exponent) == expected
        assert field.powers(a, exponent + 1)[-1] == expected

    def test_no_powers(self):
        assert Field().powers(7, 0) == b""

    @given(xs=POINTS)
    def test_weights_at_a_point_pick_its_value(self, xs):
        for i, x in enumerate(xs):
            assert Field().interpolation_weights(xs, at=x) == bytes(int(i == j) for j in range(len(xs)))

    @pytest.mark.parametrize("xs", [[], [0], [1, 0], [256], [1, 257], [-1]])
    def test_points_out_of_range(self, xs):
        with pytest.raises(ParameterError, match="1 to 255"):
            Field().interpolation_weights(xs)

    def test_duplicate_points(self):
        for xs in itertools.permutations([7, 255, 255]):
            with pytest.raises(DuplicatePointError):
                Field().interpolation_weights(xs)

    @pytest.mark.parametrize("wrong", [-1, 256, 1 << 80])
    def test_no_elements(self, wrong):
        field = Field()
        for call in [
            lambda: field.multiply(wrong, 1),
            lambda: field.multiply(1, wrong),
            lambda: field.power(wrong, 0),
            lambda: field.inverse(wrong),
            lambda: field.powers(wrong, 1),
            lambda: field.interpolation_weights([1], at=wrong),
        ]:
            with pytest.raises(ParameterError, match="0 to 255"):
                call()

    def test_no_inverse_and_no_negative_power(self):
        with pytest.raises(ParameterError, match="no inverse"):
            Field().inverse(0)
        with pytest.raises(ParameterError, match="0 or more"):
            Field().power(3, -1)


class TestConstruction:
    def test_exactly_the_thirty(self, all_moduli):
        def makes_a_field(modulus):
            try:
                Field(modulus)
            except PolynomialError:
                return False
            return True

        assert [m for m in range(1 << 9) if makes_a_field(m)] == sorted(all_moduli)

    @pytest.mark.parametrize(
        ("modulus", "message"),
        [
            (0x101, "x^8 + 1 is not irreducible: over GF(2) it is (x + 1)^8"),
            (0x11A, "over GF(2) it is x * (x + 1)"),
            (0x111, "over GF(2) it is (x^2 + x + 1)^4"),
            (0x13, "x^4 + x + 1 is not of degree 8"),
            (0x11, "x^4 + 1 is not of degree 8, and over GF(2) it is (x + 1)^4"),
            (0, "0 is not of degree 8"),
            (1, "1 is not of degree 8"),
            (-0x11B, "of degree 8"),
            (1 << 100, "of degree 8"),
        ],
    )
    def test_refusals_name_the_factors(self, modulus, message):
        with pytest.raises(PolynomialError) as caught:
            Field(modulus)
        assert message in str(caught.value)

    def test_default_and_text(self):
        assert Field().modulus == 0x11B
        assert repr(Field(0x1F5)) == "Field(0x1f5)"

    def test_fields_of_one_modulus_are_equal(self, implementation):
        assert Field(0x11D, kernel=implementation) == Field(0x11D, kernel=kernel("portable")) != Field(0x11B)
        assert len({Field(), Field(0x11B), Field(0x11D)}) == 2

    def test_frozen(self):
        field = Field()
        for name in ["modulus", "kernel"]:
            with pytest.raises(AttributeError):
                setattr(field, name, 0x11D)
        assert field.modulus == 0x11B
