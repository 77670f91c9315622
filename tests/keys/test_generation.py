"""The mathematics of joint generation: equations (4) and (5), hiding, and what is found where they do not hold.

Source: Gennaro et al. 2007, fig. 2; Pedersen 1991, theorem 3.1 and 4.4 (commitments and fewer than k shares fit every
secret). Points and polynomials are worked out again by the integers of ``curve`` (RFC 8032).
"""

from __future__ import annotations

import pytest
from curve import BASE as B
from curve import L, add, decode, encode, multiply
from hypothesis import given
from hypothesis import strategies as st
from keys.rounds import octets

from shares.errors import VerificationError
from shares.group.edwards25519 import BASE, ORDER, Scalar
from shares.group.hashing import SECOND_BASE
from shares.keys.generation import Contribution, Dealt, is_possessed, is_revealed, misrevealed, sum_of
from shares.memory import Secret
from shares.sharing import verifiable

NUMBERS = st.one_of(st.sampled_from([1, 2, ORDER - 1, ORDER // 2]), st.integers(1, ORDER - 1))
POLYNOMIALS = st.integers(2, 5).flatmap(lambda k: st.tuples(*[st.lists(NUMBERS, min_size=k, max_size=k)] * 2))
INDICES = st.integers(1, 64)


def contribution(both: tuple[list[int], list[int]]) -> Contribution:
    one, other = both
    return Contribution(tuple(map(Scalar.of, one)), tuple(map(Scalar.of, other)))


def value(numbers: list[int], x: int) -> int:
    return sum(a * x**j for j, a in enumerate(numbers)) % L


def number(scalar: Scalar) -> int:
    return int.from_bytes(scalar.encode(), "little")


@given(POLYNOMIALS, INDICES)
def test_both_equations_are_those_of_the_paper(both: tuple[list[int], list[int]], x: int) -> None:
    made, need = contribution(both), len(both[0])
    dealt = made.dealt_to(x)
    assert (number(dealt.share), number(dealt.blind)) == (value(both[0], x), value(both[1], x))
    second = decode(SECOND_BASE.encode())
    expected = [encode(add(multiply(a, B), multiply(b, second))) for a, b in zip(*both, strict=True)]
    assert [one.encode() for one in made.commitments()] == expected
    assert [one.encode() for one in made.revealed()] == [encode(multiply(a, B)) for a in both[0]]
    # A number that is zero is refused, as its product with a point is the identity; sums on the way do not matter.
    values = [value(numbers, x) for numbers in both]
    assert dealt.fits(made.commitments(), x, need) == all(values)
    assert is_revealed(dealt.share, made.revealed(), x, need) == bool(values[0])


@given(POLYNOMIALS, INDICES, NUMBERS)
def test_one_wrong_number_fits_neither_equation(both: tuple[list[int], list[int]], x: int, change: int) -> None:
    made, need, by = contribution(both), len(both[0]), Scalar.of(change)
    dealt = made.dealt_to(x)
    assert not Dealt(dealt.share + by, dealt.blind).fits(made.commitments(), x, need)
    assert not Dealt(dealt.share, dealt.blind + by).fits(made.commitments(), x, need)
    assert not dealt.fits(made.commitments(), x + 1, need)
    assert not dealt.fits(made.commitments()[:-1], x, need)
    assert not dealt.fits((*made.commitments(), BASE), x, need)
    assert not is_revealed(dealt.share + by, made.revealed(), x, need)
    assert not is_revealed(dealt.share, (*made.revealed(), BASE), x, need)


@given(st.integers(2, 5), NUMBERS, NUMBERS)
def test_what_fewer_than_k_see_fits_every_contribution(need: int, h: int, change: int) -> None:
    # Whoever knew h with H = h B could say for each other constant how the same commitments and the same k - 1 pairs
    # come of it: so they say nothing of the constant to those who do not.
    with pytest.MonkeyPatch.context() as patched:
        patched.setattr(verifiable, "SECOND_BASE", Scalar.of(h) * BASE)
        real = Contribution.drawn(need)
        seen = range(1, need)
        # The polynomial that is ``change`` at 0, and 0 wherever somebody has seen.
        bump = [change]
        for x in seen:
            slope = -pow(x, -1, L) % L
            bump = [(low + slope * high) % L for low, high in zip([*bump, 0], [0, *bump], strict=True)]
        ratio = pow(h, -1, L)
        other = Contribution(
            tuple(a + Scalar.of(c) for a, c in zip(real.coefficients, bump, strict=True)),
            tuple(b - Scalar.of(c * ratio) for b, c in zip(real.blinds, bump, strict=True)),
        )
        assert other.coefficients[0] == real.coefficients[0] + Scalar.of(change)
        assert other.commitments() == real.commitments()
        for x in seen:
            assert other.dealt_to(x).share == real.dealt_to(x).share
            assert other.dealt_to(x).blind == real.dealt_to(x).blind
        assert other.dealt_to(need).share != real.dealt_to(need).share


@given(POLYNOMIALS, INDICES)
def test_what_is_kept_comes_back(both: tuple[list[int], list[int]], x: int) -> None:
    made = contribution(both)
    kept = octets(made.encode())
    assert kept == b"".join(a.to_bytes(32, "little") for half in both for a in half)
    again = Contribution.decode(Secret.of(kept))
    assert octets(again.encode()) == kept
    assert octets(Dealt.decode(made.dealt_to(x).encode()).encode()) == octets(made.dealt_to(x).encode())


@pytest.mark.parametrize("content", [b"", bytes(63), bytes(65), bytes(96), b"\xff" * 64, bytes(32) + b"\xff" * 32])
def test_what_is_no_pair_is_refused(content: bytes) -> None:
    with pytest.raises(VerificationError):
        Dealt.decode(Secret.of(content))


def test_two_contributions_are_never_alike() -> None:
    numbers = [octets(Contribution.drawn(3).encode()) for _ in range(20)]
    pieces = [one[start : start + 32] for one in numbers for start in range(0, 192, 32)]
    assert len(set(pieces)) == 20 * 6


def test_a_proof_holds_for_one_point_one_party_and_one_context() -> None:
    made = Contribution.drawn(2)
    proof = made.possession(3, b"here").encode()
    public = made.revealed()[0]
    assert is_possessed(public, proof, 3, b"here")
    assert not is_possessed(public, proof, 4, b"here")
    assert not is_possessed(public, proof, 3, b"there")
    assert not is_possessed(public + BASE, proof, 3, b"here")
    assert not any(is_possessed(public, _flipped(proof, place), 3, b"here") for place in range(0, 512, 7))


def _flipped(data: bytes, bit: int) -> bytes:
    return (int.from_bytes(data, "little") ^ 1 << bit).to_bytes(len(data), "little")


@pytest.mark.parametrize("culprit", [None, "light-house", "north-pier", "south-pier"])
def test_whose_commitments_do_not_fit_is_found(culprit: str | None) -> None:
    made = {name: Contribution.drawn(3) for name in ("north-pier", "south-pier", "light-house")}
    shares = {name: one.dealt_to(2).share for name, one in made.items()}
    revealed = {name: (Contribution.drawn(3) if name == culprit else one).revealed() for name, one in made.items()}
    assert misrevealed(shares, revealed, 2, 3) == culprit
    total = sum_of(shares.values())
    assert number(total) == sum(map(number, shares.values())) % L
