"""Proofs: right ones pass, and no change of secret, statement, context, index, base or byte does.

Checked against: the equations of Komlo and Goldberg 2020 and Chaum and Pedersen 1992 in plain integers (``curve``),
with challenges hashed here by ``hashlib``.
"""

from __future__ import annotations

import hashlib

import curve
import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.errors import ParameterError, VerificationError
from shares.group import hashing, proofs
from shares.group.edwards25519 import BASE, ORDER, Scalar
from shares.group.hashing import SECOND_BASE, hashed_point
from shares.group.proofs import Proof, check_equal, check_possession, prove_equal, prove_possession

numbers = st.sampled_from([1, 2, ORDER - 1]) | st.integers(1, ORDER - 1)
contexts = st.sampled_from([b"", b"task"]) | st.binary(max_size=300)
indices = st.sampled_from([1, 2, 255, ORDER - 1]) | st.integers(1, 20)

SECRET = Scalar.of(0xC0FFEE << 200)
PUBLIC = SECRET * BASE
SENT = hashed_point(b"an encapsulated key of the tests")
RESULT = SECRET * SENT
POSSESSION = prove_possession(SECRET, 3, b"task 7")
EQUALITY = prove_equal(SECRET, SENT, b"task 7")


def integers(proof: Proof) -> tuple[int, int]:
    octets = proof.encode()
    return int.from_bytes(octets[:32], "little"), int.from_bytes(octets[32:], "little")


def challenge(label: bytes, context: bytes, *points: bytes) -> int:
    statement = label + len(context).to_bytes(8, "big") + context + b"".join(points)
    return int.from_bytes(hashlib.sha512(statement).digest(), "little") % ORDER


def commitment(proof: Proof, base: curve.Affine, public: curve.Affine) -> curve.Affine:
    c, z = integers(proof)
    return curve.add(curve.multiply(z, base), curve.multiply(-c, public))


class TestEquations:
    @given(number=numbers, x=indices, context=contexts)
    def test_possession(self, number, x, context):
        proof = prove_possession(Scalar.of(number), x, context)
        public = Scalar.of(number) * BASE
        check_possession(public, Proof.decode(proof.encode()), x, context)
        again = commitment(proof, curve.BASE, curve.decode(public.encode()))
        bound = x.to_bytes(32, "little") + context
        hashed = challenge(b"shares/v1/proof/possession", bound, public.encode(), curve.encode(again))
        assert integers(proof)[0] == hashed

    @given(number=numbers, context=contexts, place=st.integers(1, ORDER - 1))
    def test_equality(self, number, context, place):
        secret, base = Scalar.of(number), Scalar.of(place) * SECOND_BASE
        public, result = secret * BASE, secret * base
        proof = prove_equal(secret, base, context)
        check_equal(public, base, result, Proof.decode(proof.encode()), context)
        first = commitment(proof, curve.BASE, curve.decode(public.encode()))
        second = commitment(proof, curve.decode(base.encode()), curve.decode(result.encode()))
        points = [public.encode(), base.encode(), result.encode(), curve.encode(first), curve.encode(second)]
        assert integers(proof)[0] == challenge(b"shares/v1/proof/equality", context, *points)


def no_possession(public=PUBLIC, proof=POSSESSION, x=3, context=b"task 7"):
    with pytest.raises(VerificationError, match="secret of a public value is known does not hold"):
        check_possession(public, proof, x, context)


def no_equality(public=PUBLIC, base=SENT, result=RESULT, proof=EQUALITY, context=b"task 7"):
    with pytest.raises(VerificationError, match="a result was made with the secret of a public value does not hold"):
        check_equal(public, base, result, proof, context)


class TestPossessionRefused:
    def test_as_it_stands_it_holds(self):
        check_possession(PUBLIC, POSSESSION, 3, b"task 7")

    @pytest.mark.parametrize("context", [b"", b"task 8", b"task 7\0", b"\0task 7", b"task"])
    def test_another_context(self, context):
        no_possession(context=context)

    @pytest.mark.parametrize("x", [1, 2, 4, ORDER - 3])
    def test_a_replay_for_another_party(self, x):
        """A party that takes over another's public value and proof has no proof at its own index."""
        no_possession(x=x)

    @pytest.mark.parametrize("x", [0, ORDER, ORDER + 3])
    def test_no_index(self, x):
        with pytest.raises(ParameterError):
            check_possession(PUBLIC, POSSESSION, x, b"task 7")
        with pytest.raises(ParameterError):
            prove_possession(SECRET, x, b"task 7")

    def test_another_public_value(self):
        for other in (BASE, PUBLIC + BASE, Scalar.of(2) * PUBLIC, Scalar.of(-1) * PUBLIC):
            no_possession(public=other)

    def test_a_key_made_of_others_has_no_proof(self):
        """The attack that proofs of possession end: claim one's own value less all the others'."""
        mine = Scalar.of(77)
        claimed = mine * BASE - PUBLIC
        no_possession(public=claimed, proof=prove_possession(mine, 4, b"task 7"), x=4)

    def test_no_proof_of_equality(self):
        no_possession(proof=EQUALITY)

    def test_zero_is_no_secret(self):
        with pytest.raises(VerificationError):
            prove_possession(Scalar.of(0), 1, b"")


class TestEqualityRefused:
    def test_as_it_stands_it_holds(self):
        check_equal(PUBLIC, SENT, RESULT, EQUALITY, b"task 7")

    @pytest.mark.parametrize("context", [b"", b"task 8", b"task 7\0", b"task"])
    def test_another_context(self, context):
        no_equality(context=context)

    def test_another_base(self):
        no_equality(base=BASE)
        no_equality(base=SENT + BASE)
        no_equality(base=RESULT, result=SENT)

    def test_another_result(self):
        for wrong in (RESULT + BASE, Scalar.of(-1) * RESULT, (SECRET + Scalar.of(1)) * SENT, SENT, PUBLIC):
            no_equality(result=wrong)

    def test_a_replay_for_another_party(self):
        other = Scalar.of(12345)
        no_equality(public=other * BASE, result=other * SENT)

    def test_a_proof_made_for_a_result_with_another_secret(self):
        """Each half of it right by itself: two logarithms known, and not equal."""
        other = Scalar.of(12345)
        no_equality(result=other * SENT)
        no_equality(result=other * SENT, proof=prove_equal(other, SENT, b"task 7"))

    def test_responses_to_a_challenge_that_was_chosen_first(self):
        """The simulator: choose c and z, then commitments that fit. The hash of them is another number."""
        forged = Proof(Scalar.of(5), Scalar.of(6))
        no_equality(result=Scalar.of(12345) * SENT, proof=forged)
        no_possession(proof=forged)

    def test_zero_is_no_secret(self):
        with pytest.raises(VerificationError):
            prove_equal(Scalar.of(0), SENT, b"")


class TestEncoding:
    @given(st.integers(0, 511))
    def test_every_bit_counts(self, bit):
        for proof, check in ((POSSESSION, self.possession), (EQUALITY, self.equality)):
            octets = bytearray(proof.encode())
            octets[bit // 8] ^= 1 << bit % 8
            with pytest.raises(VerificationError):
                check(bytes(octets))

    def possession(self, octets):
        check_possession(PUBLIC, Proof.decode(octets), 3, b"task 7")

    def equality(self, octets):
        check_equal(PUBLIC, SENT, RESULT, Proof.decode(octets), b"task 7")

    def test_64_bytes_and_back(self):
        assert Proof.decode(POSSESSION.encode()) == POSSESSION
        assert Proof.decode(memoryview(POSSESSION.encode())) == POSSESSION
        assert len(POSSESSION.encode()) == 64

    def test_numbers_that_are_not_reduced(self):
        """The same proof in other bytes: c + L and z + L fit 32 bytes, and would mean the same."""
        c, z = integers(EQUALITY)
        for challenge_, response in ((c + ORDER, z), (c, z + ORDER)):
            with pytest.raises(VerificationError, match="below the order"):
                Proof.decode(challenge_.to_bytes(32, "little") + response.to_bytes(32, "little"))

    @pytest.mark.parametrize("length", [0, 32, 63, 65, 96])
    def test_another_length(self, length):
        with pytest.raises(VerificationError, match="64 bytes"):
            Proof.decode(bytes(length))

    @pytest.mark.parametrize(
        "octets",
        [bytes(64), bytes(32) + EQUALITY.encode()[32:], EQUALITY.encode()[:32] + bytes(32)],
        ids=["both", "challenge", "response"],
    )
    def test_zeros(self, octets):
        for check in (self.possession, self.equality):
            with pytest.raises(VerificationError):
                check(octets)


class TestNonces:
    def test_a_source_that_repeats_itself_does_not_give_the_secret_away(self, monkeypatch):
        """With one nonce for two challenges, (z1 - z2) / (c1 - c2) would be the secret."""
        monkeypatch.setattr(hashing.secrets, "token_bytes", bytes)
        made = [
            *(prove_possession(SECRET, x, context) for x in (1, 2) for context in (b"a", b"b")),
            *(prove_equal(SECRET, base, context) for base in (SENT, SECOND_BASE) for context in (b"a", b"b")),
        ]
        assert len({proof.encode() for proof in made}) == len(made)
        for one in made:
            for other in made:
                if one is not other:
                    slope = (one.response - other.response) * (one.challenge - other.challenge).inverse()
                    assert slope != SECRET

    def test_with_one_nonce_it_would(self, monkeypatch):
        monkeypatch.setattr(proofs, "hedged", lambda secret, place: Scalar.of(42))
        one, other = prove_possession(SECRET, 1, b"a"), prove_possession(SECRET, 1, b"b")
        assert (one.response - other.response) * (one.challenge - other.challenge).inverse() == SECRET

    def test_each_proof_is_another(self):
        assert len({prove_possession(SECRET, 1, b"").encode() for _ in range(10)}) == 10

    def test_a_proof_shows_no_number(self):
        assert repr(POSSESSION) == "Proof(challenge=Scalar(<hidden>), response=Scalar(<hidden>))"
