"""Shamir's scheme on rows: evaluation, interpolation, secrecy, and where the coefficients come from.

Checked against: schoolbook products (``strategies.product``); python-flint's polynomials over the same field; the
definition of perfect secrecy, by counting; FIPS 202 through ``hashlib``; a chi-square threshold whose false-alarm
probability python-flint works out here.
"""

from __future__ import annotations

import hashlib
import itertools
from collections import Counter

import flint
import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import MODULI, copy_of, moduli, octets, product, revealed, thresholds

from shares.errors import DuplicatePointError, ParameterError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing import shamir
from shares.sharing.rule import Rule, deal
from shares.sharing.shamir import draw, evaluate, interpolate, random_polynomial


@st.composite
def polynomials(draw: st.DrawFn, *, most: int = 6) -> list[bytes]:
    """Coefficients, as rows of one length."""
    length = draw(st.integers(1, 5))
    return draw(st.lists(octets(length, length), min_size=1, max_size=most))


def secrets_of(rows: list[bytes]) -> list[Secret]:
    return [Secret.of(row) for row in rows]


# Evaluation and interpolation.


@given(polynomials(), moduli(), st.lists(st.integers(1, 255), min_size=1, max_size=6))
def test_evaluation_is_the_definition(rows: list[bytes], modulus: int, xs: list[int]) -> None:
    """Horner's rule with schoolbook products, byte by byte."""

    def at(x: int, t: int) -> int:
        value = 0
        for row in reversed(rows):
            value = product(value, x, modulus) ^ row[t]
        return value

    expected = [bytes(at(x, t) for t in range(len(rows[0]))) for x in xs]
    assert [revealed(row) for row in evaluate(Field(modulus), secrets_of(rows), xs)] == expected


@given(polynomials(), moduli(), st.integers(0, 255), st.data())
def test_any_k_points_give_the_polynomial_back_everywhere(rows, modulus, at, data) -> None:
    field = Field(modulus)
    xs = data.draw(st.lists(st.integers(1, 255), min_size=len(rows), max_size=len(rows), unique=True))
    values = evaluate(field, secrets_of(rows), xs)
    wanted = evaluate(field, secrets_of(rows), [at])[0] if at else Secret.of(rows[0])
    assert interpolate(field, xs, values, at=at) == wanted


@pytest.mark.parametrize("total", range(1, 9))
def test_every_k_subset_recovers_for_every_k(total: int) -> None:
    field, payload = Field(), bytes(range(40, 60))
    for need in range(1, total + 1):
        rows = evaluate(field, random_polynomial(field, Secret.of(payload), need), range(1, total + 1))
        for xs in itertools.combinations(range(1, total + 1), need):
            assert revealed(interpolate(field, xs, [rows[x - 1] for x in xs])) == payload


@pytest.mark.parametrize("modulus", MODULI)
def test_interpolation_is_that_of_a_general_purpose_library(modulus: int) -> None:
    """python-flint: polynomials over GF(2)[z]/(modulus), Lagrange's formula written with its own elements."""
    context = flint.fq_default_ctx(modulus=flint.fmpz_mod_poly_ctx(2)([modulus >> i & 1 for i in range(9)]), var="z")

    def element(octet: int):
        return context([octet >> i & 1 for i in range(8)])

    def number(value) -> int:
        return sum(int(bit) << i for i, bit in enumerate(value.to_list()))

    field, payload = Field(modulus), bytes(range(250, 256)) + bytes(range(6))
    xs = [1, 2, 0x53, 0xFF]
    rows = evaluate(field, random_polynomial(field, Secret.of(payload), 4), xs)
    seen = []
    for t in range(len(payload)):
        total = context(0)
        for x, row in zip(xs, rows, strict=True):
            term = element(revealed(row)[t])
            for other in xs:
                if other != x:
                    term *= element(other) / (element(other) - element(x))
            total += term
        seen.append(number(total))
    assert bytes(seen) == payload == revealed(interpolate(field, xs, rows))


def test_the_highest_coefficient_may_be_zero_and_the_degree_lower() -> None:
    field, payload = Field(), bytes(range(16))
    rows = evaluate(field, secrets_of([payload, bytes(16), bytes(16)]), [1, 2, 3])
    assert [revealed(row) for row in rows] == [payload] * 3
    assert revealed(interpolate(field, [1, 2, 3], rows)) == payload


@pytest.mark.parametrize("xs", [[0], [256], [-1], [1, 0]])
def test_points_out_of_range_are_refused(xs: list[int]) -> None:
    field = Field()
    with pytest.raises(ParameterError):
        evaluate(field, secrets_of([b"a", b"b"]), xs)
    with pytest.raises(ParameterError):
        interpolate(field, xs, secrets_of([b"a"] * len(xs)))


def test_what_cannot_be_interpolated_is_refused() -> None:
    field, rows = Field(), secrets_of([b"a", b"b"])
    with pytest.raises(DuplicatePointError):
        interpolate(field, [7, 7], rows)
    with pytest.raises(ParameterError):
        interpolate(field, [], [])
    with pytest.raises(ParameterError):
        interpolate(field, [1], rows)
    with pytest.raises(ParameterError):
        interpolate(field, [1, 2], rows, at=256)
    with pytest.raises(ParameterError):
        evaluate(field, [], [1])


# Secrecy: k - 1 points fit every payload, equally often.


def test_one_point_of_two_fits_every_payload_exactly_once() -> None:
    """2-of-n over the whole field: all 65,536 pairs (payload, coefficient) side by side as the bytes of two rows."""
    pairs = list(itertools.product(range(256), repeat=2))
    payload, slope = bytes(pair[0] for pair in pairs), bytes(pair[1] for pair in pairs)
    for modulus in MODULI:
        for x, row in zip(
            (1, 2, 255), evaluate(Field(modulus), secrets_of([payload, slope]), (1, 2, 255)), strict=True
        ):
            met = Counter(zip(payload, revealed(row), strict=True))
            assert len(met) == 65_536, x
            assert set(met.values()) == {1}


def subfield(field: Field, size: int) -> bytes:
    """The elements with a^size = a: the subfield of 4 or 16, closed under everything that sharing does."""
    return bytes(a for a in range(256) if field.power(a, size) == a)


@pytest.mark.parametrize("need", [2, 3, 4])
def test_any_k_minus_1_points_fit_every_payload_equally_often(need: int) -> None:
    """Over the subfield of 4 elements, all polynomials of degree below k, all sets of k - 1 of its 3 points."""
    field = Field()
    few = subfield(field, 4)
    polynomials = list(itertools.product(few, repeat=need))
    rows = [bytes(coefficients[j] for coefficients in polynomials) for j in range(need)]
    values = [revealed(row) for row in evaluate(field, secrets_of(rows), few[1:])]
    for known in itertools.combinations(values, need - 1):
        met = Counter(zip(rows[0], *known, strict=True))
        assert len(met) == 4**need
        assert len(set(met.values())) == 1


def test_without_the_zero_coefficient_a_point_would_rule_payloads_out() -> None:
    """What the test above would see if the coefficients were drawn without zero: 256 combinations are missing."""
    pairs = [(s, a) for s in range(256) for a in range(1, 256)]
    rows = secrets_of([bytes(pair[i] for pair in pairs) for i in (0, 1)])
    met = set(zip(revealed(rows[0]), revealed(evaluate(Field(), rows, [1])[0]), strict=True))
    assert len(met) == 65_536 - 256


# Coefficients.

LIMIT = 415.0
"""Chi-square of 256 classes, 255 degrees of freedom; exceeded by uniform bytes once in about 10^9 runs."""


def chi_square(data: bytes) -> float:
    expected = len(data) / 256
    counts = Counter(data)
    return sum((counts[value] - expected) ** 2 for value in range(256)) / expected


def test_the_limit_has_the_false_alarm_probability_it_claims() -> None:
    """The upper tail of chi-square is the regularised upper incomplete gamma function, by python-flint."""
    tail = (flint.arb(LIMIT) / 2).gamma_upper(flint.arb(255) / 2, regularized=1)
    assert 5e-10 < float(tail) < 1.5e-9


def test_coefficients_are_uniform_with_zero_included() -> None:
    field = Field()
    payload, *drawn = random_polynomial(field, Secret.of(bytes(1 << 16)), 17)
    assert revealed(payload) == bytes(1 << 16)
    data = b"".join(revealed(row) for row in drawn)
    assert len(data) == 1 << 20
    assert chi_square(data) < LIMIT
    # Each coefficient by itself too: 16 more chances of a false alarm, less than 2 in 10^8 in all.
    assert max(chi_square(revealed(row)) for row in drawn) < LIMIT


def test_the_limit_sees_coefficients_without_zero_and_a_slight_bias() -> None:
    drawn = revealed(draw(Field(), Secret.of(b"hedge"), 1 << 20))
    assert chi_square(bytes(octet or 1 for octet in drawn)) > LIMIT
    assert chi_square(bytes(octet & 0xFE if t % 16 == 0 else octet for t, octet in enumerate(drawn))) > LIMIT


@given(thresholds(), octets(1, 40))
def test_a_polynomial_has_k_coefficients_of_one_length_and_the_payload_first(size, payload) -> None:
    need, _ = size
    secret = Secret.of(payload)
    rows = random_polynomial(Field(), secret, need)
    assert rows[0] is secret
    assert [len(row) for row in rows] == [len(payload)] * need


def test_no_two_coefficients_are_alike() -> None:
    field, payload = Field(), Secret.of(bytes(32))
    drawn = [revealed(row) for _ in range(20) for row in random_polynomial(field, payload, 5)[1:]]
    assert len(set(drawn)) == 80


# Hedged randomness.


def constant(length: int) -> bytes:
    return bytes(length)


def test_what_is_drawn_is_the_systems_bytes_xor_the_hash(monkeypatch) -> None:
    """FORMAT.md, section 3, worked out with ``hashlib``."""
    supplied = [bytes(range(32)), bytes(range(100, 150))]
    supply = iter(supplied)
    monkeypatch.setattr(shamir.secrets, "token_bytes", lambda length: next(supply))
    drawn = draw(Field(), Secret.of(b"a payload"), 50)
    stream = hashlib.shake_256(b"shares/v1/hedge" + supplied[0] + b"a payload").digest(50)
    assert revealed(drawn) == bytes(a ^ b for a, b in zip(stream, supplied[1], strict=True))


@given(octets(1, 40), octets(1, 40), st.integers(2, 4))
def test_with_a_source_that_fails_different_payloads_still_give_different_coefficients(one, other, need) -> None:
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(shamir.secrets, "token_bytes", constant)
        rows = [
            [revealed(row) for row in random_polynomial(Field(), Secret.of(payload), need)[1:]]
            for payload in (one, other)
        ]
    alike = [a[:16] == b[:16] for a, b in zip(*rows, strict=True)] if min(len(one), len(other)) >= 16 else []
    assert all(alike) if one == other else not any(alike)
    # One coefficient is never the other, nor the constant that the source gave.
    assert len(one) < 16 or len({*rows[0], bytes(len(one))}) == need


def test_with_a_source_that_fails_nodes_of_one_payload_still_differ(monkeypatch) -> None:
    """Below an 'any 1 of' two nodes have one payload. With equal coefficients, shares of the one would serve the other:
    two of its custodians would become a quorum together with none of their own."""
    monkeypatch.setattr(shamir.secrets, "token_bytes", constant)
    rule = Rule(1, (Rule(2, ("north-pier", "south-pier")), Rule(2, ("registrar", "light-house"))))
    dealing = deal(Field(), rule, Secret.of(bytes(range(64))))
    first, second = ([revealed(row) for row in polynomial] for polynomial in dealing.polynomials[1:])
    assert first[0] == second[0] == bytes(range(64))
    assert first[1] != second[1]


def test_the_pad_depends_on_the_nonce_alone_when_all_else_is_the_same(monkeypatch) -> None:
    nonces = iter([bytes(32), bytes(31) + b"\1"])
    monkeypatch.setattr(
        shamir.secrets, "token_bytes", lambda length: next(nonces) if length == shamir.NONCE_LENGTH else bytes(length)
    )
    one, other = (revealed(draw(Field(), Secret.of(b"a payload"), 48)) for _ in range(2))
    assert one != other
    assert sum((a ^ b).bit_count() for a, b in zip(one, other, strict=True)) > 100


def test_a_known_payload_does_not_weaken_a_good_source(monkeypatch) -> None:
    """The system's bytes pass through unchanged but for a pad that does not depend on them."""
    nonce = bytes(32)
    pads = set()
    for filler in (0x00, 0xFF, 0x5A):
        supply = iter([nonce, bytes([filler]) * 40])
        monkeypatch.setattr(shamir.secrets, "token_bytes", lambda length, supply=supply: next(supply))
        drawn = revealed(draw(Field(), Secret.of(b"a payload"), 40))
        pads.add(bytes(octet ^ filler for octet in drawn))
    assert len(pads) == 1


def test_rows_given_are_not_changed() -> None:
    field, row = Field(), Secret.of(b"\x01\x02")
    before = copy_of(row)
    evaluate(field, [row, copy_of(row)], [1, 2])
    interpolate(field, [1], [row])
    draw(field, row, 3)
    assert row == before
