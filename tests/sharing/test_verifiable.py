"""Verifiable sharing of scalars: every custodian can check their share, crooked dealers are caught, quorums recombine.

Checked against: ``curve`` and plain integers; the Feldman and Pedersen sharings that draft-wood-cfrg-threshold-secret-
sharing publishes over ristretto255, mapped to the same group; textbook examples.
"""

from __future__ import annotations

import functools
import hashlib
import itertools
from collections import Counter

import curve
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from shares.errors import ParameterError, VerificationError
from shares.group import edwards25519, hashing
from shares.group.edwards25519 import BASE, ORDER, Point, Scalar, total
from shares.group.hashing import SECOND_BASE, hashed_point
from shares.group.proofs import check_possession, prove_possession
from shares.sharing import verifiable
from shares.sharing.verifiable import (
    SCALARS,
    check_degree,
    check_feldman,
    check_pedersen,
    check_public_share,
    evaluate,
    feldman,
    pedersen,
    polynomial,
    public_share,
    recombine,
    summed,
    weight,
    weights,
)

numbers = st.sampled_from([1, 2, ORDER - 1]) | st.integers(1, ORDER - 1)
indices = st.sampled_from([1, 2, 255, ORDER - 1]) | st.integers(1, 20)
OUT_OF_RANGE = [0, -1, ORDER, ORDER + 1, 2 * ORDER, 2**256]


def value(scalar: Scalar) -> int:
    return int.from_bytes(scalar.encode(), "little")


def scalars(*all_numbers: int) -> list[Scalar]:
    return [Scalar.of(number) for number in all_numbers]


def secret_of(shares: dict[int, Scalar]) -> Scalar:
    """What no code of the package does: put a shared scalar together."""
    found = Scalar.of(0)
    for x, number in weights(shares).items():
        found = found + Scalar.of(number) * shares[x]
    return found


def sum_of(all_scalars: list[Scalar]) -> Scalar:
    found = Scalar.of(0)
    for scalar in all_scalars:
        found = found + scalar
    return found


@st.composite
def dealings(draw):
    """(k coefficients, n): k from 1 to 10, n up to 20; 1-of-1, k-of-k and 10-of-20 often.

    The secret is often an edge; the other coefficients are as good as random, as f(x) = 0 is no share that anyone gets.
    """
    need = draw(st.sampled_from([1, 2, 10]) | st.integers(1, 10))
    number = draw(st.sampled_from([need, 20]) | st.integers(need, 20))
    seed = draw(st.binary(min_size=8, max_size=8))
    others = [Scalar.reduced(hashlib.sha512(seed + bytes([j])).digest()) for j in range(1, need)]
    return [Scalar.of(draw(numbers)), *others], number


class TestPolynomial:
    @given(coefficients=st.lists(numbers | st.just(0), min_size=1, max_size=10), x=indices)
    def test_evaluate_is_that_of_integers(self, coefficients, x):
        assert value(evaluate(scalars(*coefficients), x)) == SCALARS.evaluate(coefficients, x)

    def test_textbook_example_over_the_integers(self, vectors):
        """1234 + 166 x + 94 x^2, small enough that nothing is reduced; the source is in the file."""
        (example,) = [e for e in vectors("textbook_shamir_gfp")["examples"] if "integer_version" in e]
        f = scalars(*example["coefficients"])
        points = example["integer_version"]["points"]
        assert [[x, value(evaluate(f, x))] for x, _ in points] == points
        for quorum in itertools.combinations(points, 3):
            assert secret_of({x: Scalar.of(y) for x, y in quorum}) == Scalar.of(1234)

    @pytest.mark.parametrize("need", [1, 2, 3, 20])
    def test_need_coefficients_the_secret_first(self, need):
        secret = Scalar.drawn()
        f = polynomial(secret, need)
        assert len(f) == need
        assert f[0] == secret
        assert len({a.encode() for a in f}) == need

    @pytest.mark.parametrize("need", [0, -1])
    def test_nobody_needed(self, need):
        with pytest.raises(ParameterError, match="at least one"):
            polynomial(Scalar.of(1), need)

    def test_coefficients_are_drawn_as_they_come_zero_included(self, monkeypatch):
        monkeypatch.setattr(verifiable, "hedged", lambda secret, place: Scalar.of(0))
        f = polynomial(Scalar.of(5), 3)
        assert f == scalars(5, 0, 0)
        with pytest.raises(VerificationError, match="is the identity"):
            feldman(f)

    def test_a_source_that_repeats_itself_repeats_no_coefficient(self, monkeypatch):
        monkeypatch.setattr(hashing.secrets, "token_bytes", bytes)
        drawn = [a.encode() for secret in (1, 2) for a in polynomial(Scalar.of(secret), 5)]
        assert len(set(drawn)) == 10

    @pytest.mark.parametrize("x", OUT_OF_RANGE)
    def test_an_index_out_of_range_is_refused_everywhere(self, x):
        """0 and the order are the secret's own place; index and index + order would be one custodian."""
        f = scalars(3, 5)
        for way in (
            lambda: evaluate(f, x),
            lambda: public_share(feldman(f), x),
            lambda: check_feldman(Scalar.of(3), x, feldman(f), 2),
            lambda: check_pedersen(Scalar.of(3), Scalar.of(1), x, feldman(f), 2),
            lambda: check_public_share(BASE, x, feldman(f), 2),
            lambda: weight(x, [1, x]),
            lambda: weight(1, [1, x]),
            lambda: weights([1, x]),
            lambda: recombine({1: BASE, x: BASE}),
        ):
            with pytest.raises(ParameterError, match="from 1 to the order of the group less 1"):
                way()

    def test_nothing_to_evaluate(self):
        with pytest.raises(ParameterError):
            evaluate([], 1)
        with pytest.raises(ParameterError):
            public_share([], 1)


class TestCommitments:
    @given(dealing=dealings(), data=st.data())
    @settings(max_examples=30)
    def test_every_honest_share_passes_at_its_own_index_alone(self, dealing, data):
        f, number = dealing
        need, blinds = len(f), polynomial(Scalar.drawn(), len(f))
        commitments, hiding = feldman(f), pedersen(f, blinds)
        x = data.draw(st.integers(1, number))
        share, blind = evaluate(f, x), evaluate(blinds, x)
        check_feldman(share, x, commitments, need)
        check_pedersen(share, blind, x, hiding, need)
        check_public_share(share * BASE, x, commitments, need)
        assert public_share(commitments, x) == share * BASE
        if need > 1:
            for other in {1, number, ORDER - x} - {x}:
                if evaluate(f, other) != share:
                    with pytest.raises(
                        VerificationError, match=f"does not fit the public commitments at index {other}"
                    ):
                        check_feldman(share, other, commitments, need)
                    with pytest.raises(VerificationError, match="does not fit"):
                        check_pedersen(share, blind, other, hiding, need)

    @given(coefficients=st.lists(numbers, min_size=1, max_size=4), x=indices, data=st.data())
    @settings(max_examples=40)
    def test_they_are_those_of_the_reference(self, coefficients, x, data):
        blinds = data.draw(st.lists(numbers, min_size=len(coefficients), max_size=len(coefficients)))
        second = curve.decode(SECOND_BASE.encode())
        plain = [curve.multiply(a, curve.BASE) for a in coefficients]
        hiding = [curve.add(point, curve.multiply(b, second)) for point, b in zip(plain, blinds, strict=True)]
        f, t = scalars(*coefficients), scalars(*blinds)
        assert [point.encode() for point in feldman(f)] == [curve.encode(point) for point in plain]
        assert [point.encode() for point in pedersen(f, t)] == [curve.encode(point) for point in hiding]
        powers = [pow(x, j, ORDER) for j in range(len(f))]
        there = curve.add(*(curve.multiply(power, point) for power, point in zip(powers, plain, strict=True)))
        on_the_way = [SCALARS.evaluate(coefficients[j:], x) for j in range(len(f))]
        if all(on_the_way):
            assert public_share(feldman(f), x).encode() == curve.encode(there)
        else:
            with pytest.raises(VerificationError, match="identity"):
                public_share(feldman(f), x)

    def test_pedersen_wants_a_blind_for_each(self):
        for count in (1, 3):
            with pytest.raises(ParameterError, match="one blind"):
                pedersen(scalars(1, 2), scalars(*range(1, count + 1)))


class TestInternetDraft:
    """draft-wood-cfrg-threshold-secret-sharing, appendix "Test Vectors" (an expired individual draft).

    It shares over ristretto255. An element of it is a class of points of edwards25519 of which one has prime order;
    sums and products of elements are those of these points, so the package's own functions check the draft's values.
    """

    def case(self, vectors, name):
        (case,) = [c for c in vectors("draft_wood_threshold_secret_sharing")["vectors"] if c["name"].startswith(name)]
        return case

    def point(self, text: str) -> Point:
        return Point.decode(curve.encode(curve.ristretto(bytes.fromhex(text))))

    def number(self, text: str) -> int:
        return int.from_bytes(bytes.fromhex(text), "little")

    def test_feldman(self, vectors):
        case = self.case(vectors, "DVTSS")
        f = [
            Scalar.decode(bytes.fromhex(text))
            for text in (case["shared_secret"], case["computed_here"]["coefficient_x1"])
        ]
        for share in case["shares"]:
            x, y = self.number(share["x"]), Scalar.decode(bytes.fromhex(share["y"]))
            commitments = [self.point(text) for text in share["commitment"]]
            assert evaluate(f, x) == y
            assert list(feldman(f)) == commitments
            check_feldman(y, x, commitments, 2)
            with pytest.raises(VerificationError):
                check_feldman(y + Scalar.of(1), x, commitments, 2)
        for size in (2, 3):
            for quorum in itertools.combinations(case["shares"], size):
                points = {self.number(s["x"]): Scalar.decode(bytes.fromhex(s["y"])) * BASE for s in quorum}
                assert recombine(points) == commitments[0]

    def test_pedersen(self, vectors, monkeypatch):
        case = self.case(vectors, "RVTSS")
        notes = vectors("draft_wood_threshold_secret_sharing")["notes"]["RVTSS"]
        monkeypatch.setattr(verifiable, "SECOND_BASE", self.point(notes.split("B2 encodes as ")[1][:64]))
        assert len(case["shares"]) == 3
        for share in case["shares"]:
            x, y, blind = (Scalar.decode(bytes.fromhex(share[name])) for name in ("x", "y", "blinding_share"))
            commitments = [self.point(text) for text in share["commitment"]]
            check_pedersen(y, blind, value(x), commitments, 2)
            for wrong in ((y + Scalar.of(1), blind), (y, blind + Scalar.of(1)), (blind, y)):
                with pytest.raises(VerificationError, match="does not fit"):
                    check_pedersen(*wrong, value(x), commitments, 2)


class TestDishonestDealer:
    F = polynomial(Scalar.drawn(), 3)
    T = polynomial(Scalar.drawn(), 3)
    PLAIN, HIDING = feldman(F), pedersen(F, T)

    def plain(self, share, commitments, x=2, need=3):
        with pytest.raises(VerificationError) as caught:
            check_feldman(share, x, commitments, need)
        return str(caught.value)

    def hiding(self, share, blind, commitments, x=2, need=3):
        with pytest.raises(VerificationError) as caught:
            check_pedersen(share, blind, x, commitments, need)
        return str(caught.value)

    def test_wrong_share(self):
        share, blind = evaluate(self.F, 2), evaluate(self.T, 2)
        for wrong in (share + Scalar.of(1), -share, evaluate(self.F, 1), self.F[0]):
            assert "does not fit the public commitments at index 2" in self.plain(wrong, self.PLAIN)
            assert "does not fit" in self.hiding(wrong, blind, self.HIDING)
            assert "does not fit" in self.hiding(share, wrong, self.HIDING)

    def test_a_share_of_zero_that_does_not_fit(self):
        assert "identity" in self.plain(Scalar.of(0), self.PLAIN)

    @pytest.mark.parametrize(("need", "change"), [(2, "lowered"), (1, "lowered"), (4, "raised"), (20, "raised")])
    def test_degree_lowered_or_raised(self, need, change):
        """Each share fits its polynomial. Only the number of commitments shows how many custodians it takes."""
        f, t = polynomial(Scalar.drawn(), need), polynomial(Scalar.drawn(), need)
        check_feldman(evaluate(f, 2), 2, feldman(f), need)
        due = f"there are {need} commitments where 3 are due: the number needed was {change}"
        assert due in self.plain(evaluate(f, 2), feldman(f))
        assert due in self.hiding(evaluate(f, 2), evaluate(t, 2), pedersen(f, t))
        with pytest.raises(VerificationError, match=due):
            check_degree(feldman(f), 3)
        with pytest.raises(VerificationError, match=due):
            summed([self.PLAIN, feldman(f), self.PLAIN], 3)

    def test_no_commitments(self):
        assert "there are 0 commitments where 3 are due" in self.plain(evaluate(self.F, 2), ())

    def test_a_degree_lowered_by_a_leading_zero_cannot_be_written(self):
        """Its commitment would be the identity, which is no ``Point``."""
        with pytest.raises(VerificationError):
            Point.decode(curve.encode(curve.IDENTITY))
        with pytest.raises(VerificationError, match="is the identity"):
            feldman([*self.F[:2], Scalar.of(0)])

    def test_commitments_swapped_or_changed_or_of_another(self):
        a, b, c = self.PLAIN
        other = feldman(polynomial(self.F[0], 3))
        for wrong in ((b, a, c), (a, c, b), (c, b, a), (a, b, c + BASE), (a + BASE, b, c), (a, b, a), other):
            assert "does not fit" in self.plain(evaluate(self.F, 2), wrong)

    def test_feldman_shares_against_hiding_commitments_and_the_other_way_round(self):
        share, blind = evaluate(self.F, 2), evaluate(self.T, 2)
        assert "does not fit" in self.plain(share, self.HIDING)
        assert "does not fit" in self.hiding(share, blind, self.PLAIN)

    def test_a_share_that_fits_one_custodian_alone(self):
        """A dealer can pass one polynomial's share off on one custodian; the others, checking too, see theirs fail."""
        other = [self.F[0], *polynomial(Scalar.drawn(), 3)[1:]]
        commitments = feldman(other)
        check_feldman(evaluate(other, 1), 1, commitments, 3)
        for x in (2, 3, 4, 5):
            assert "does not fit" in self.plain(evaluate(self.F, x), commitments, x=x)


class TestSums:
    """Several dealers at once, as when a key is born: the sum of shares against the sum of commitments."""

    def deal(self, dealers=4, need=3):
        return [polynomial(Scalar.drawn(), need) for _ in range(dealers)]

    def test_sums_of_honest_shares_pass(self):
        polynomials = self.deal()
        commitments = summed([feldman(f) for f in polynomials], 3)
        for x in range(1, 6):
            check_feldman(sum_of([evaluate(f, x) for f in polynomials]), x, commitments, 3)
        assert commitments[0] == total(f[0] * BASE for f in polynomials)

    def test_one_wrong_share_makes_the_sum_wrong(self):
        polynomials = self.deal()
        commitments = summed([feldman(f) for f in polynomials], 3)
        for wrong in range(4):
            shares = [evaluate(f, 2) for f in polynomials]
            shares[wrong] = shares[wrong] + Scalar.of(1)
            with pytest.raises(VerificationError, match="does not fit"):
                check_feldman(sum_of(shares), 2, commitments, 3)

    def test_two_errors_that_cancel_leave_the_sum_right(self):
        """As the docstring says: the sum is right all the same, and each by itself is not."""
        polynomials = self.deal(2)
        vectors = [feldman(f) for f in polynomials]
        shares = [evaluate(polynomials[0], 2) + Scalar.of(9), evaluate(polynomials[1], 2) - Scalar.of(9)]
        check_feldman(sum_of(shares), 2, summed(vectors, 3), 3)
        for share, commitments in zip(shares, vectors, strict=True):
            with pytest.raises(VerificationError):
                check_feldman(share, 2, commitments, 3)

    def test_a_vector_made_to_cancel_the_others_is_refused(self):
        """The last to speak could lower the degree of the sum: its leading commitment minus all the others'."""
        vectors = [feldman(f) for f in self.deal(3)]
        leading = Scalar.of(-1) * total(vector[2] for vector in vectors)
        with pytest.raises(VerificationError, match="identity"):
            summed([*vectors, (BASE, BASE, leading)], 3)

    def test_one_vector_is_its_own_sum_and_none_is_none(self):
        (f,) = self.deal(1)
        assert summed([feldman(f)], 3) == feldman(f)
        with pytest.raises(ParameterError):
            summed([], 3)

    def test_joint_generation_3_of_5_keeps_its_budget(self, monkeypatch):
        """Every multiplication one of five parties makes when nobody cheats: fewer than 60 (they are 36)."""
        others = [(f, polynomial(Scalar.drawn(), 3)) for f in self.deal(4)]
        hiding = [pedersen(f, t) for f, t in others]
        plain = [feldman(f) for f, _ in others]
        proofs = [prove_possession(f[0], x, b"task") for x, (f, _) in enumerate(others, 2)]
        count = Counter()

        def counted(real, *arguments):
            count[real] += 1
            return real(*arguments)

        for name in ("crypto_scalarmult_ed25519_noclamp", "crypto_scalarmult_ed25519_base_noclamp"):
            real = getattr(edwards25519.sodium, name)
            monkeypatch.setattr(edwards25519.sodium, name, functools.partial(counted, real))
        f, t = polynomial(Scalar.drawn(), 3), polynomial(Scalar.drawn(), 3)
        all_hiding, all_plain = [pedersen(f, t), *hiding], [feldman(f), *plain]
        prove_possession(f[0], 1, b"task")
        for x, (commitments, proof) in enumerate(zip(plain, proofs, strict=True), 2):
            check_possession(commitments[0], proof, x, b"task")
        share = sum_of([evaluate(g, 1) for g in (f, *(g for g, _ in others))])
        blind = sum_of([evaluate(g, 1) for g in (t, *(g for _, g in others))])
        check_pedersen(share, blind, 1, summed(all_hiding, 3), 3)
        key = summed(all_plain, 3)
        check_feldman(share, 1, key, 3)
        assert len({public_share(key, x) for x in range(1, 6)}) == 5
        assert sum(count.values()) == 36


class TestWeights:
    @given(st.lists(indices, min_size=1, max_size=12, unique=True))
    def test_weights_are_those_of_the_field(self, xs):
        expected = dict(zip(xs, SCALARS.interpolation_weights(xs), strict=True))
        assert weights(xs) == expected
        assert weights(reversed(xs)) == expected
        assert {x: weight(x, xs) for x in xs} == expected
        assert sum(expected.values()) % ORDER == 1  # the constant polynomial 1

    def test_by_hand(self):
        """Lagrange at 0 for {1, 2, 3}: 3, -3, 1."""
        assert weights([1, 2, 3]) == {1: 3, 2: ORDER - 3, 3: 1}

    @pytest.mark.parametrize("xs", [[], [1, 1], [2, 1, 2], [ORDER - 1, 3, ORDER - 1]])
    def test_none_or_one_twice(self, xs):
        with pytest.raises(ParameterError, match="must be different"):
            weights(xs)
        with pytest.raises(ParameterError, match="must be different"):
            weight(1, xs)

    def test_who_does_not_act_has_no_weight(self):
        with pytest.raises(ParameterError, match="not among those"):
            weight(4, [1, 2, 3])

    def test_the_field_is_that_of_the_order(self):
        assert SCALARS.p == ORDER == curve.L


class TestRecombine:
    @pytest.mark.parametrize(("need", "number"), [(n, m) for m in range(1, 6) for n in range(1, m + 1)])
    def test_every_quorum_and_every_larger_one(self, need, number):
        f = polynomial(Scalar.drawn(), need)
        sent = hashed_point(b"an encapsulated key of the tests")
        shares = {x: evaluate(f, x) for x in range(1, number + 1)}
        for size in range(need, number + 1):
            for quorum in itertools.combinations(shares, size):
                assert recombine({x: shares[x] * BASE for x in quorum}) == feldman(f)[0]
                assert recombine({x: shares[x] * sent for x in reversed(quorum)}) == f[0] * sent
                assert secret_of({x: shares[x] for x in quorum}) == f[0]

    @given(dealing=dealings(), data=st.data())
    @settings(max_examples=20)
    def test_public_shares_recombine_to_the_public_key(self, dealing, data):
        f, number = dealing
        commitments = feldman(f)
        order = data.draw(st.permutations(range(1, number + 1)))
        quorum = order[: data.draw(st.integers(len(f), number))]
        assert recombine({x: public_share(commitments, x) for x in quorum}) == commitments[0]

    def test_one_fewer_or_a_wrong_one_gives_another_point(self):
        f = polynomial(Scalar.drawn(), 3)
        points = {x: evaluate(f, x) * BASE for x in (1, 2, 3)}
        assert recombine({x: points[x] for x in (1, 2)}) != f[0] * BASE
        assert recombine(points | {2: points[2] + BASE}) != f[0] * BASE
        assert recombine({1: points[2], 2: points[1], 3: points[3]}) != f[0] * BASE

    def test_nothing_to_recombine(self):
        with pytest.raises(ParameterError):
            recombine({})


class TestSaysNothing:
    @given(
        secret=numbers, candidate=st.integers(0, ORDER - 1), xs=st.lists(indices, min_size=1, max_size=6, unique=True)
    )
    def test_k_minus_1_shares_fit_every_secret(self, secret, candidate, xs):
        """Through any candidate and k - 1 shares goes one polynomial of degree k - 1, so every secret is as likely."""
        need = len(xs) + 1
        f = polynomial(Scalar.of(secret), need)
        shares = {x: value(evaluate(f, x)) for x in xs}
        # g(x) = candidate + x h(x), and h, of degree k - 2, is fixed by its k - 1 values (share - candidate) / x.
        slopes = [(x, (y - candidate) * pow(x, -1, ORDER)) for x, y in shares.items()]
        for x, y in shares.items():
            assert (candidate + x * SCALARS.interpolate(slopes, at=x) - y) % ORDER == 0
        fourth = next(x for x in range(1, 100) if x not in shares)
        last = Scalar.of(candidate + fourth * SCALARS.interpolate(slopes, at=fourth))
        known = {x: Scalar.of(y) for x, y in shares.items()}
        assert secret_of({**known, fourth: last}) == Scalar.of(candidate)

    @given(a=numbers, b=numbers, candidate=numbers)
    def test_a_hiding_commitment_fits_every_value(self, a, b, candidate):
        """With a known logarithm h of the second base, the blind that opens it to any candidate is found."""
        h = 0xDECADE
        with pytest.MonkeyPatch.context() as patch:
            patch.setattr(verifiable, "SECOND_BASE", Scalar.of(h) * BASE)
            if (a + b * h) % ORDER == 0:
                return
            (commitment,) = pedersen(scalars(a), scalars(b))
            other = (b + (a - candidate) * pow(h, -1, ORDER)) % ORDER
            if other:
                assert pedersen(scalars(candidate), scalars(other)) == (commitment,)
