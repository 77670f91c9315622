"""The map to curve25519: equal to X25519 of another library, and each bad public key refused for its own reason.

Checked against: RFC 7748, sec. 5.2 and 6.1; X25519 of ``cryptography``; ``curve`` in plain integers.
"""

from __future__ import annotations

import curve
import pytest
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey, X25519PublicKey
from hypothesis import example, given
from hypothesis import strategies as st

from shares.errors import VerificationError
from shares.group.edwards25519 import BASE, ORDER, Scalar
from shares.group.montgomery import agreed, lift, public_of

NOT_CANONICAL = "it is not in its one encoding"
MINUS_ONE = "is -1, to which no point"
TWIST = "on the twist, not on the curve"
SMALL = "of small order, or with a part of small order"


def little(number: int) -> bytes:
    return number.to_bytes(32, "little")


def clamped(octets: bytes) -> Scalar:
    """RFC 7748, sec. 5, modulo the order: the same multiples of points of prime order."""
    number = int.from_bytes(octets, "little") & ~7 & (1 << 255) - 1 | 1 << 254
    return Scalar.of(number)


def x25519(private: bytes, public: bytes) -> bytes:
    return X25519PrivateKey.from_private_bytes(private).exchange(X25519PublicKey.from_public_bytes(public))


def public_half(private: bytes) -> bytes:
    return X25519PrivateKey.from_private_bytes(private).public_key().public_bytes_raw()


keys = st.sampled_from([bytes(32), b"\xff" * 32, b"\x01" + bytes(31)]) | st.binary(min_size=32, max_size=32)
scalars = st.sampled_from([1, 2, 8, ORDER - 1]) | st.integers(1, ORDER - 1)


class TestEqualToX25519:
    @given(private=keys, number=scalars)
    def test_what_the_sender_computes_is_what_the_key_computes(self, private, number):
        """The sender has e and the key's u; the key has the encapsulated key u(eB) and s, which is not clamped."""
        secret = Scalar.of(number)
        sent = public_half(private)
        assert public_of(secret * lift(sent)) == x25519(private, public_of(secret * BASE))

    def test_two_hundred_times(self):
        for _ in range(200):
            ephemeral = X25519PrivateKey.generate()
            sent = ephemeral.public_key().public_bytes_raw()
            secret = Scalar.drawn()
            recipient = X25519PublicKey.from_public_bytes(public_of(secret * BASE))
            assert public_of(secret * lift(sent)) == ephemeral.exchange(recipient)

    @given(keys)
    def test_public_half(self, private):
        assert public_of(clamped(private) * BASE) == public_half(private)

    @given(mine=keys, theirs=keys)
    def test_agreement_with_clamped_scalars(self, mine, theirs):
        assert public_of(clamped(mine) * lift(public_half(theirs))) == x25519(mine, public_half(theirs))

    @given(scalars)
    @example(1)
    def test_map_is_that_of_the_reference_and_lift_undoes_it_up_to_the_sign(self, number):
        point = Scalar.of(number) * BASE
        u = public_of(point)
        assert int.from_bytes(u, "little") == curve.u_of(curve.decode(point.encode()))
        lifted = lift(u)
        assert lifted in (point, Scalar.of(-number) * BASE)
        assert lifted.encode()[31] < 0x80
        assert public_of(lifted) == u


class TestRfc7748:
    def test_section_5_2(self, vectors):
        """One public key there is of the group of prime order, the base; the reference finds why the others are not."""
        outcomes = []
        for case in vectors("rfc7748_x25519")["vectors"]:
            u = bytes.fromhex(case["u"])
            try:
                product = clamped(bytes.fromhex(case["scalar"])) * lift(u)
            except VerificationError as error:
                outcomes.append(str(error).split(", ")[-1])
                number = int.from_bytes(u, "little")
                point = (
                    curve.decode(little((number - 1) * pow(number + 1, -1, curve.P) % curve.P)) if u[31] < 128 else 0
                )
                assert not point or curve.order(point) != curve.L
            else:
                outcomes.append("equal")
                assert public_of(product).hex() == case["output_u"]
        assert outcomes.count("equal") >= 1
        assert len(outcomes) == 3

    def test_agreement_of_section_6_1(self, vectors):
        keys = {name: bytes.fromhex(text) for name, text in vectors("rfc7748_x25519")["diffie_hellman"].items()
                if name.endswith(("private", "public", "secret"))}  # fmt: skip
        alice, bob = clamped(keys["alice_private"]), clamped(keys["bob_private"])
        assert public_of(alice * BASE) == keys["alice_public"]
        assert public_of(bob * BASE) == keys["bob_public"]
        assert public_of(alice * lift(keys["bob_public"])) == keys["shared_secret"]
        assert public_of(bob * lift(keys["alice_public"])) == keys["shared_secret"]

    def test_a_thousand_times_one_after_the_other(self, vectors):
        """Sec. 5.2, the second test: every u on its way is a multiple of the base, so each is lifted."""
        k = u = little(9)
        for _ in range(1000):
            k, u = public_of(clamped(k) * lift(u)), k
        assert k.hex() == vectors("rfc7748_x25519")["iterated_1000"]["value"]


def twisted(number: int) -> bool:
    return curve.root(number * (number * (number + 486662) + 1) % curve.P) is None


class TestRefusals:
    @pytest.mark.parametrize("length", [0, 31, 33, 64])
    def test_length(self, length):
        with pytest.raises(VerificationError, match="has 32 bytes"):
            lift(bytes([9]).ljust(length, b"\0") if length else b"")

    @pytest.mark.parametrize("number", [*range(curve.P, 2**255), 2**255, 2**255 + 9, 2**255 + curve.P - 1, 2**256 - 1])
    def test_not_below_p(self, number):
        with pytest.raises(VerificationError, match=NOT_CANONICAL):
            lift(little(number))

    def test_a_set_top_bit_on_a_good_key(self):
        """X25519 ignores the bit (RFC 7748, sec. 5), so one encapsulated key could come in two forms."""
        private = bytes(range(32))
        good = public_half(private)
        other = good[:31] + bytes([good[31] | 0x80])
        assert x25519(private, good) == x25519(private, other)
        assert public_of(lift(good)) == good
        with pytest.raises(VerificationError, match=NOT_CANONICAL):
            lift(other)

    def test_minus_one(self):
        assert twisted(curve.P - 1)
        with pytest.raises(VerificationError, match=MINUS_ONE):
            lift(little(curve.P - 1))

    def test_small_numbers_one_by_one(self):
        """All u below 100: on the twist, outside the group of prime order, or lifted, as the reference says."""
        outcomes = {TWIST: 0, SMALL: 0, "": 0}
        for number in range(100):
            point = curve.decode(little((number - 1) * pow(number + 1, -1, curve.P) % curve.P))
            assert (point is None) == twisted(number)
            why = TWIST if point is None else SMALL if curve.order(point) != curve.L else ""
            outcomes[why] += 1
            if why:
                with pytest.raises(VerificationError, match=why):
                    lift(little(number))
            else:
                assert lift(little(number)).encode() == curve.encode(point)
        assert all(count > 3 for count in outcomes.values())

    def test_every_u_of_small_order(self):
        """What X25519 takes to zero (RFC 7748, sec. 6.1 and 7): points of both curves, in every form of 256 bits."""
        on_curve = {curve.u_of(point) for point in curve.TORSION if point != curve.IDENTITY}
        assert len(on_curve) == 4
        assert {0, 1} < on_curve
        on_twist = {0, curve.P - 1}
        forms = {
            u + times * curve.P + top
            for u in on_curve | on_twist
            for times in (0, 1)
            for top in (0, 2**255)
            if u + times * curve.P < 2**255
        }
        assert len(forms) == 2 * (5 + 2)  # five numbers, and two of them, 0 and 1, a second time above p
        for form in forms:
            with pytest.raises(VerificationError) as caught:
                lift(little(form))
            small, minus_one = form in on_curve, form == curve.P - 1
            assert (SMALL if small else MINUS_ONE if minus_one else NOT_CANONICAL) in str(caught.value)
            with pytest.raises(ValueError, match="Error computing shared key"):
                x25519(bytes(range(32)), little(form))

    @pytest.mark.parametrize("torsion", curve.TORSION[1:])
    def test_points_with_a_part_of_small_order(self, torsion):
        mixed = curve.add(curve.multiply(0xC0FFEE, curve.BASE), torsion)
        with pytest.raises(VerificationError, match=SMALL):
            lift(little(curve.u_of(mixed)))


def test_a_secret_point_is_mapped_by_the_library_to_the_same_u() -> None:
    for _ in range(100):
        point = Scalar.drawn() * BASE
        assert agreed(point) == public_of(point)
