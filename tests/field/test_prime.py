"""``PrimeField`` and ``is_prime``: published examples of sharing over GF(p), and known primes and pretenders."""

from __future__ import annotations

import itertools

import flint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.errors import DuplicatePointError, ParameterError
from shares.field.prime import PrimeField, is_prime


class TestTextbooks:
    """Examples of Stinson, Denning, Schneier, Trappe and Washington, a course and an encyclopaedia (each with its
    source in the file)."""

    def test_every_share_and_every_quorum(self, vectors):
        examples = vectors("textbook_shamir_gfp")["examples"]
        assert len(examples) == 7
        for example in examples:
            field, points = PrimeField(example["p"]), [tuple(share) for share in example["shares"]]
            assert [(x, field.evaluate(example["coefficients"], x)) for x, _ in points] == points
            quorums = list(itertools.combinations(points, example["k"]))
            assert len(quorums) == example["checked_subsets"]
            assert {field.interpolate(quorum) for quorum in quorums} == {example["secret"]}

    def test_pooling_constants_of_stinson(self, vectors):
        (example,) = [e for e in vectors("textbook_shamir_gfp")["examples"] if e["name"] == "stinson-17"]
        assert PrimeField(17).interpolation_weights([1, 3, 5]) == example["pooling_constants"]["b"]

    def test_feldman_toy_shares(self, vectors):
        toy = vectors("textbook_shamir_gfp")["feldman_toy_example"]
        scalars, group = PrimeField(toy["q"]), PrimeField(toy["p"])
        for x, y in toy["correct"]["shares"]:
            assert scalars.evaluate(toy["correct"]["coefficients"], x) == y
            check = 1
            for power, commitment in enumerate(toy["correct"]["commitments"]):
                check = group.multiply(check, pow(commitment, x**power, toy["p"]))
            assert check == pow(toy["g"], y, toy["p"])


class TestInternetDraft:
    """draft-wood-cfrg-threshold-secret-sharing, appendix "Test Vectors" (an expired individual draft)."""

    def test_every_share_and_every_quorum(self, vectors):
        cases = vectors("draft_wood_threshold_secret_sharing")["vectors"]
        assert len(cases) == 6
        for case in cases:
            field, order = PrimeField(int(case["modulus"], 16)), case["scalar_endianness"]

            def number(text, order=order):
                return int.from_bytes(bytes.fromhex(text), order)

            secret, slope = number(case["shared_secret"]), number(case["computed_here"]["coefficient_x1"])
            points = [(number(share["x"]), number(share["y"])) for share in case["shares"]]
            assert [(x, field.evaluate([secret, slope], x)) for x, _ in points] == points
            for size in [2, 3]:
                for quorum in itertools.combinations(points, size):
                    assert field.interpolate(quorum) == secret


class TestPrimeField:
    @given(data=st.data(), p=st.sampled_from([2, 3, 5, 257, 2**255 - 19]))
    def test_interpolation_recovers_at_any_point(self, data, p):
        field = PrimeField(p)
        k = data.draw(st.integers(1, min(p - 1, 6)))
        numbers = st.sampled_from([0, 1, p - 1]) | st.integers(-p, 2 * p)
        coefficients = data.draw(st.lists(numbers, min_size=k, max_size=k))
        xs = data.draw(st.lists(st.integers(1, p - 1), min_size=k, max_size=k, unique=True))
        at = data.draw(numbers)
        points = [(x, field.evaluate(coefficients, x)) for x in xs]
        assert field.interpolate(points, at=at) == field.evaluate(coefficients, at)

    @given(data=st.data(), p=st.sampled_from([2, 3, 257, 2**61 - 1]))
    def test_arithmetic_equals_the_reference(self, data, p):
        field = PrimeField(p)
        a, b = data.draw(st.integers(-p, 2 * p)), data.draw(st.integers(-p, 2 * p))
        x, y = flint.nmod(a % p, p), flint.nmod(b % p, p)
        assert [field.add(a, b), field.subtract(a, b), field.multiply(a, b)] == [int(x + y), int(x - y), int(x * y)]
        if a % p:
            assert field.inverse(a) == int(1 / x)

    def test_weights_at_a_point_pick_its_value(self):
        for i, x in enumerate([1, 5, 16]):
            assert PrimeField(17).interpolation_weights([1, 5, 16], at=x + 17) == [int(i == j) for j in range(3)]

    def test_no_coefficients(self):
        assert PrimeField(5).evaluate([], 3) == 0

    @pytest.mark.parametrize("xs", [[], [0], [1, 0], [17], [3, 34], [-17]])
    def test_a_point_that_is_zero_modulo_p_is_refused(self, xs):
        # There f(x) is the secret itself.
        with pytest.raises(ParameterError, match="not be 0 modulo p"):
            PrimeField(17).interpolation_weights(xs)

    @pytest.mark.parametrize("xs", [[1, 1], [1, 18], [3, 5, 22], [16, -1]])
    def test_points_that_are_the_same_modulo_p_are_refused(self, xs):
        with pytest.raises(DuplicatePointError):
            PrimeField(17).interpolate([(x, 1) for x in xs])

    @pytest.mark.parametrize("a", [0, 17, -34])
    def test_zero_has_no_inverse(self, a):
        with pytest.raises(ParameterError):
            PrimeField(17).inverse(a)

    @pytest.mark.parametrize("p", [-7, 0, 1, 4, 561, 2**255 - 21])
    def test_no_prime_no_field(self, p):
        with pytest.raises(ParameterError):
            PrimeField(p)


class TestIsPrime:
    def test_small_numbers_equal_the_reference(self):
        assert [n for n in range(20000) if is_prime(n)] == [n for n in range(20000) if flint.fmpz(n).is_prime()]

    @given(st.integers(0, 1 << 90))
    def test_random_numbers_equal_the_reference(self, n):
        assert is_prime(n) == flint.fmpz(n).is_prime()

    # Strong pseudoprimes to the first 4, 9, 12 and 13 primes: Sorenson, Webster 2017, table of psi_k (from memory,
    # confirmed by the factors that python-flint finds). 561 and 1729 are Carmichael numbers.
    @pytest.mark.parametrize(
        "n",
        [
            561,
            1729,
            3215031751,
            3825123056546413051,
            318665857834031151167461,
            3317044064679887385961981,
        ],
    )
    def test_pretenders(self, n):
        assert sum(multiplicity for _, multiplicity in flint.fmpz(n).factor()) > 1
        assert not is_prime(n)

    # RFC 7748 (2^255 - 19), RFC 8032 (order of the group), FIPS 186-4 (P-256); the Mersenne prime of exponent 521.
    @pytest.mark.parametrize(
        "p",
        [
            2**255 - 19,
            2**252 + 27742317777372353535851937790883648493,
            2**256 - 2**224 + 2**192 + 2**96 - 1,
            2**521 - 1,
        ],
    )
    def test_published_primes(self, p):
        assert is_prime(p)
        assert not is_prime(p * (2**61 - 1))
        assert not is_prime(p * p)

    def test_too_large_a_number_is_refused(self):
        with pytest.raises(ParameterError, match="4096 bits"):
            is_prime(1 << 4096)
