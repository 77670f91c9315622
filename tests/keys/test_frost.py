"""FROST(Ed25519, SHA-512): byte for byte as published, and an ordinary signature whoever signs in whatever order.

Checked against: RFC 9591, appendix E.1 (tests/vectors/rfc9591_frost.json), every value of it; ``cryptography`` as the
ordinary verifier; ``hashlib`` and integers modulo the order for the equation of a signature share.
"""

from __future__ import annotations

import copy
import functools
import hashlib
import itertools
import json
import pickle
from pathlib import Path

import pytest
from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
from hypothesis import example, given, settings
from hypothesis import strategies as st

from shares.errors import ParameterError, SharesError, VerificationError
from shares.group.edwards25519 import BASE, ORDER, Point, Scalar
from shares.keys import frost
from shares.keys.frost import Agreed, Commitment, Nonces
from shares.sharing import verifiable

VECTORS = json.loads((Path(__file__).parents[1] / "vectors" / "rfc9591_frost.json").read_text())
(SUITE,) = VECTORS["suites"]
MESSAGE = bytes.fromhex(SUITE["message"])
PUBLIC = Point.decode(bytes.fromhex(SUITE["group_public_key"]))
SHARES = {
    one["identifier"]: Scalar.decode(bytes.fromhex(one["participant_share"])) for one in SUITE["participant_shares"]
}
ROUND_ONE = {one["identifier"]: one for one in SUITE["round_one_outputs"]}
ROUND_TWO = {one["identifier"]: bytes.fromhex(one["sig_share"]) for one in SUITE["round_two_outputs"]}
SIGNATURE = bytes.fromhex(SUITE["sig"])
DERIVED = SUITE["computed_here_not_in_the_rfc"]


class Published:
    """A source of randomness that gives what was published, in its order."""

    def __init__(self, one: dict[str, str]) -> None:
        self.left = [one["hiding_nonce_randomness"], one["binding_nonce_randomness"]]

    def __call__(self, length: int) -> bytes:
        given = bytes.fromhex(self.left.pop(0))
        assert len(given) == length
        return given


def published_nonces(identifier: int) -> Nonces:
    return frost.commit(SHARES[identifier], Published(ROUND_ONE[identifier]))


def published() -> Agreed:
    nonces = {i: published_nonces(i) for i in ROUND_ONE}
    return Agreed(PUBLIC, MESSAGE, [committed(i, nonces[i]) for i in nonces])


def committed(identifier: int, nonces: Nonces) -> Commitment:
    return Commitment(identifier, nonces.hiding_commitment, nonces.binding_commitment)


def is_ordinary(public: Point, signature: bytes, message: bytes) -> bool:
    """What any verifier of Ed25519 says, written apart from the package's own."""
    try:
        Ed25519PublicKey.from_public_bytes(public.encode()).verify(signature, message)
    except InvalidSignature:
        return False
    return True


@functools.cache
def dealt(need: int, total: int) -> tuple[Point, tuple[Point, ...], dict[int, Scalar]]:
    """A key, its commitments, and everybody's key share."""
    coefficients = verifiable.polynomial(Scalar.drawn(), need)
    commitments = verifiable.feldman(coefficients)
    return commitments[0], commitments, {x: verifiable.evaluate(coefficients, x) for x in range(1, total + 1)}


def signed(need: int, total: int, signers: list[int], message: bytes) -> tuple[bytes, Agreed, dict[int, Scalar]]:
    public, _, shares = dealt(need, total)
    nonces = {i: frost.commit(shares[i]) for i in signers}
    agreed = Agreed(public, message, [committed(i, nonces[i]) for i in signers])
    sig_shares = {i: frost.sign(i, shares[i], nonces[i], agreed) for i in signers}
    return frost.aggregate(sig_shares, agreed), agreed, sig_shares


# As published.


def test_the_vectors_are_all_there() -> None:
    assert SUITE["suite"] == "FROST(Ed25519, SHA-512)"
    assert SUITE["context_string"].encode() == frost.CONTEXT_STRING
    assert sorted(ROUND_ONE) == sorted(ROUND_TWO) == SUITE["participant_list"] == [1, 3]
    assert sorted(SHARES) == [1, 2, 3]


def test_shares_are_as_published() -> None:
    secret = Scalar.decode(bytes.fromhex(SUITE["group_secret_key"]))
    rest = [Scalar.decode(bytes.fromhex(one)) for one in SUITE["share_polynomial_coefficients"]]
    commitments = verifiable.feldman([secret, *rest])
    assert commitments[0] == PUBLIC
    assert [point.encode().hex() for point in commitments] == DERIVED["vss_commitment"]
    for x, share in SHARES.items():
        assert verifiable.evaluate([secret, *rest], x) == share
        assert verifiable.public_share(commitments, x).encode().hex() == DERIVED["participant_public_keys"][str(x)]


@pytest.mark.parametrize("identifier", ROUND_ONE)
def test_round_one_is_as_published(identifier: int) -> None:
    one = ROUND_ONE[identifier]
    nonces = published_nonces(identifier)
    assert nonces.hiding_commitment.encode().hex() == one["hiding_nonce_commitment"]
    assert nonces.binding_commitment.encode().hex() == one["binding_nonce_commitment"]
    assert nonces.encode().hex() == one["hiding_nonce"] + one["binding_nonce"]


@pytest.mark.parametrize("identifier", ROUND_ONE)
def test_binding_factors_are_as_published(identifier: int) -> None:
    one = ROUND_ONE[identifier]
    agreed = published()
    encoded = frost.encode_group_commitment_list(agreed.commitment_list)
    prefix = PUBLIC.encode() + frost.H4(MESSAGE) + frost.H5(encoded)
    assert (prefix + Scalar.of(identifier).encode()).hex() == one["binding_factor_input"]
    assert agreed.binding_factors[identifier].encode().hex() == one["binding_factor"]
    assert agreed.interpolating_value(identifier).encode().hex() == DERIVED["interpolating_values"][str(identifier)]


@pytest.mark.parametrize("order", list(itertools.permutations(ROUND_ONE)))
def test_round_two_is_as_published_in_any_order(order: tuple[int, ...]) -> None:
    nonces = {i: published_nonces(i) for i in order}
    agreed = Agreed(PUBLIC, MESSAGE, [committed(i, nonces[i]) for i in order])
    assert agreed.group_commitment.encode().hex() == DERIVED["group_commitment"]
    assert agreed.challenge.encode().hex() == DERIVED["challenge"]
    sig_shares = {i: frost.sign(i, SHARES[i], nonces[i], agreed) for i in order}
    assert {i: share.encode() for i, share in sig_shares.items()} == ROUND_TWO
    assert frost.aggregate(sig_shares, agreed) == SIGNATURE
    assert frost.verify(PUBLIC, MESSAGE, SIGNATURE)
    assert is_ordinary(PUBLIC, SIGNATURE, MESSAGE)
    for i in order:
        public_share = Point.decode(bytes.fromhex(DERIVED["participant_public_keys"][str(i)]))
        assert frost.verify_signature_share(i, public_share, sig_shares[i], agreed)


def test_hashes_are_those_of_the_suite() -> None:
    """Sec. 6.1, by hashlib and integers."""

    def reduced(data: bytes) -> bytes:
        return (int.from_bytes(hashlib.sha512(data).digest(), "little") % ORDER).to_bytes(32, "little")

    context = b"FROST-ED25519-SHA512-v1"
    assert frost.H1(b"m").encode() == reduced(context + b"rho" + b"m")
    assert frost.H2(b"a", b"m").encode() == reduced(b"am")
    assert frost.H3(b"m").encode() == reduced(context + b"nonce" + b"m")
    assert frost.H4(b"m") == hashlib.sha512(context + b"msg" + b"m").digest()
    assert frost.H5(b"m") == hashlib.sha512(context + b"com" + b"m").digest()


def test_a_flipped_bit_of_the_signature_verifies_nowhere() -> None:
    for bit in range(8 * 64):
        altered = bytearray(SIGNATURE)
        altered[bit // 8] ^= 1 << bit % 8
        assert not frost.verify(PUBLIC, MESSAGE, bytes(altered))
    assert not any(frost.verify(PUBLIC, MESSAGE, SIGNATURE[:length]) for length in (0, 63))
    assert not frost.verify(PUBLIC, MESSAGE, SIGNATURE + b"\0")


def test_a_flipped_bit_of_the_message_verifies_nowhere() -> None:
    for bit in range(8 * len(MESSAGE)):
        altered = bytearray(MESSAGE)
        altered[bit // 8] ^= 1 << bit % 8
        assert not frost.verify(PUBLIC, bytes(altered), SIGNATURE)


@pytest.mark.parametrize("identifier", ROUND_TWO)
def test_a_flipped_bit_of_a_share_names_its_signer(identifier: int) -> None:
    agreed = published()
    refused = 0
    for bit in range(256):
        altered = bytearray(ROUND_TWO[identifier])
        altered[bit // 8] ^= 1 << bit % 8
        try:
            wrong = Scalar.decode(bytes(altered))
        except VerificationError:
            refused += 1
            continue
        sig_shares = {i: Scalar.decode(octets) for i, octets in ROUND_TWO.items()} | {identifier: wrong}
        assert not frost.verify(PUBLIC, MESSAGE, frost.aggregate(sig_shares, agreed))
        public = {i: share * BASE for i, share in SHARES.items()}
        assert frost.misbehaving(sig_shares, public.__getitem__, agreed) == (identifier,)
    # Bits above the order's length give no number below it.
    assert 3 <= refused < 8


@pytest.mark.parametrize("number", [ORDER, ORDER + 1, 2**256 - 1, 2**255])
def test_a_share_that_is_no_number_below_the_order_is_refused(number: int) -> None:
    with pytest.raises(VerificationError):
        Scalar.decode(number.to_bytes(32, "little"))


# Any quorum, any message.


@pytest.mark.parametrize(("need", "total"), [(2, 2), (2, 3), (3, 5), (5, 5), (7, 10), (10, 20)])
def test_quorums_sign(need: int, total: int) -> None:
    first = list(range(1, need + 1))
    for signers in (first, list(range(total, total - need, -1)), list(range(1, total + 1))):
        signature, agreed, sig_shares = signed(need, total, signers, b"manifest of the light-house")
        public, commitments, _ = dealt(need, total)
        assert is_ordinary(public, signature, b"manifest of the light-house")
        assert agreed.identifiers == tuple(sorted(signers))
        assert frost.misbehaving(sig_shares, lambda i: verifiable.public_share(commitments, i), agreed) == ()  # noqa: B023


@pytest.mark.parametrize(("need", "total"), [(2, 3), (3, 5)])
def test_every_quorum_signs(need: int, total: int) -> None:
    for signers in itertools.combinations(range(1, total + 1), need):
        signature, agreed, _ = signed(need, total, list(signers), b"x")
        assert is_ordinary(dealt(need, total)[0], signature, b"x"), agreed.identifiers


@given(message=st.binary(max_size=300), signers=st.permutations([1, 2, 3, 4, 5]), count=st.integers(3, 5))
@settings(max_examples=25)
@example(message=b"", signers=[5, 1, 3, 2, 4], count=3)
def test_any_message_any_signers(message: bytes, signers: list[int], count: int) -> None:
    signature, _, _ = signed(3, 5, signers[:count], message)
    assert is_ordinary(dealt(3, 5)[0], signature, message)
    assert not frost.verify(dealt(3, 5)[0], message + b"\0", signature)


def test_ten_mebibytes_are_signed() -> None:
    message = bytes(10 << 20)
    signature, _, _ = signed(2, 2, [1, 2], message)
    assert is_ordinary(dealt(2, 2)[0], signature, message)


def test_fewer_than_needed_make_no_signature() -> None:
    signature, _, _ = signed(3, 5, [1, 2], b"x")
    assert not frost.verify(dealt(3, 5)[0], b"x", signature)


def test_the_equation_of_a_share() -> None:
    """Sec. 5.2 in integers: z = d + e rho + lambda s c modulo the order."""
    _, _, shares = dealt(2, 3)
    nonces = {i: frost.commit(shares[i]) for i in (1, 3)}
    agreed = Agreed(dealt(2, 3)[0], b"x", [committed(i, nonces[i]) for i in nonces])
    hiding, binding = nonces[1].used()

    def number(scalar: Scalar) -> int:
        return int.from_bytes(scalar.encode(), "little")

    weight = 3 * pow(3 - 1, -1, ORDER)
    expected = number(hiding) + number(binding) * number(agreed.binding_factors[1])
    expected += weight * number(shares[1]) * number(agreed.challenge)
    again = Nonces(hiding, binding)
    assert number(frost.sign(1, shares[1], again, agreed)) == expected % ORDER


# Who cheats is named.


@pytest.mark.parametrize("cheating", [(1,), (3,), (2, 5), (1, 2, 5)])
def test_cheating_signers_are_named(cheating: tuple[int, ...]) -> None:
    public, commitments, _ = dealt(3, 5)
    _, agreed, sig_shares = signed(3, 5, [1, 2, 3, 5], b"x")
    for i in cheating:
        sig_shares[i] = sig_shares[i] + Scalar.of(i)
    assert not frost.verify(public, b"x", frost.aggregate(sig_shares, agreed))
    found = frost.misbehaving(sig_shares, lambda i: verifiable.public_share(commitments, i), agreed)
    assert found == cheating


def test_a_share_of_zero_is_wrong() -> None:
    _, commitments, _ = dealt(3, 5)
    _, agreed, _ = signed(3, 5, [1, 2, 3], b"x")
    assert not frost.verify_signature_share(1, verifiable.public_share(commitments, 1), Scalar.of(0), agreed)


def test_a_signer_that_is_added_or_left_out_is_no_part_of_it() -> None:
    _, agreed, sig_shares = signed(3, 5, [1, 2, 3], b"x")
    for wrong in ({1: sig_shares[1], 2: sig_shares[2]}, sig_shares | {4: sig_shares[3]}):
        with pytest.raises(ParameterError, match="one share by each signer"):
            frost.aggregate(wrong, agreed)
    with pytest.raises(ParameterError):
        frost.verify_signature_share(4, BASE, sig_shares[1], agreed)


# Lists that are refused.


@pytest.mark.parametrize("identifier", [0, ORDER, 2 * ORDER, -ORDER, ORDER + 1, -1])
def test_identifiers_are_between_zero_and_the_order(identifier: int) -> None:
    """0 is where the key itself is; and what differs by the order is one signer."""
    pair = frost.commit(Scalar.of(7))
    with pytest.raises(ParameterError):
        Agreed(PUBLIC, b"x", [committed(identifier, pair), committed(2, pair)])


def test_a_list_names_each_signer_once() -> None:
    pair, other = frost.commit(Scalar.of(7)), frost.commit(Scalar.of(7))
    for wrong in ([], [committed(1, pair), committed(1, other)], [committed(1, pair), committed(1, pair)]):
        with pytest.raises(ParameterError, match="each of them once"):
            Agreed(PUBLIC, b"x", wrong)


def test_a_signer_finds_its_own_commitments_in_the_list() -> None:
    own, other = frost.commit(SHARES[1]), frost.commit(SHARES[3])
    mixed = Commitment(1, own.hiding_commitment, other.binding_commitment)
    swapped = Commitment(1, own.binding_commitment, own.hiding_commitment)
    for wrong in ([committed(3, other)], [mixed, committed(3, other)], [swapped, committed(3, other)]):
        with pytest.raises(VerificationError, match="as they were made"):
            frost.sign(1, SHARES[1], own, Agreed(PUBLIC, b"x", wrong))
    # Nothing was given away, so the nonces are still there.
    agreed = Agreed(PUBLIC, b"x", [committed(1, own), committed(3, other)])
    assert frost.sign(1, SHARES[1], own, agreed) != Scalar.of(0)


def test_a_crafted_commitment_makes_no_identity() -> None:
    """One commits to the opposite of another: the sum of the hiding commitments alone would be the identity."""
    own = frost.commit(SHARES[1])
    opposite = Scalar.of(ORDER - 1) * own.hiding_commitment
    agreed = Agreed(
        PUBLIC, b"x", [committed(1, own), Commitment(3, opposite, frost.commit(SHARES[3]).binding_commitment)]
    )
    assert frost.sign(1, SHARES[1], own, agreed) != Scalar.of(0)


# Nonces.


def test_nonces_are_used_once() -> None:
    own, other = frost.commit(SHARES[1]), frost.commit(SHARES[3])
    agreed = Agreed(PUBLIC, b"x", [committed(1, own), committed(3, other)])
    frost.sign(1, SHARES[1], own, agreed)
    for again in (lambda: frost.sign(1, SHARES[1], own, agreed), own.used, own.encode):
        with pytest.raises(ParameterError, match="used before"):
            again()


def test_nonces_are_stored_once_and_come_back() -> None:
    nonces = frost.commit(SHARES[1])
    pair = (nonces.hiding_commitment, nonces.binding_commitment)
    octets = nonces.encode()
    back = Nonces.decode(octets, pair)
    assert tuple(one * BASE for one in back.used()) == pair
    for wrong in (b"", octets[:63], octets + b"\0", octets[:32] + b"\xff" * 32):
        with pytest.raises(VerificationError):
            Nonces.decode(wrong, pair)


def test_nonces_differ_with_a_source_that_stands_still_by_their_share() -> None:
    """Sec. 4.1: the hash takes the share in, so that one bad source on two machines gives two nonces."""
    still = lambda length: bytes(length)  # noqa: E731
    assert frost.nonce_generate(SHARES[1], still) != frost.nonce_generate(SHARES[2], still)
    drawn = {frost.commit(SHARES[1]).hiding_commitment for _ in range(50)}
    assert len(drawn) == 50


def test_nonces_show_nothing() -> None:
    nonces = frost.commit(SHARES[1])
    assert repr(nonces) == str(nonces) == "Nonces(<hidden>)"
    for copying in (copy.copy, copy.deepcopy, pickle.dumps):
        with pytest.raises(TypeError):
            copying(nonces)
    with pytest.raises(TypeError):
        hash(nonces)
    with pytest.raises(SharesError) as refused:
        frost.sign(1, SHARES[1], nonces, published())
    octets = nonces.encode()
    assert octets[:32].hex() not in repr(refused.value.__dict__) + str(refused.value)
