"""Scalars and points: right against a reference in plain integers, refused where the standards refuse, and silent.

Checked against: ``curve`` (tests/curve.py); RFC 8032, sec. 7.1 (public keys); RFC 9591, sec. 6.1, and RFC 8032,
sec. 5.1.3 (encodings that are refused).
"""

from __future__ import annotations

import ast
import copy
import hashlib
import pickle
from pathlib import Path

import curve
import nacl
import pytest
from hypothesis import given
from hypothesis import strategies as st

import shares
from shares.errors import ParameterError, VerificationError
from shares.group import edwards25519 as module
from shares.group.edwards25519 import BASE, ORDER, SIZE, Point, Scalar, total

numbers = st.sampled_from([0, 1, 2, 8, ORDER - 1, ORDER - 2, ORDER // 2, 2**252 - 1]) | st.integers(0, ORDER - 1)
nonzero = numbers.filter(bool)


def little(number: int, length: int = SIZE) -> bytes:
    return number.to_bytes(length, "little")


def value(scalar: Scalar) -> int:
    return int.from_bytes(scalar.encode(), "little")


def refused(octets: bytes) -> bool:
    with pytest.raises(VerificationError, match=r"^it is no point of the group of prime order"):
        Point.decode(octets)
    return True


class TestScalar:
    @given(a=numbers, b=numbers)
    def test_arithmetic_is_that_of_integers(self, a, b):
        one, other = Scalar.of(a), Scalar.of(b)
        assert value(one + other) == (a + b) % ORDER
        assert value(one - other) == (a - b) % ORDER
        assert value(one * other) == a * b % ORDER
        assert value(-one) == -a % ORDER
        assert (one == other) == (a == b)
        assert one.is_zero() == (a == 0)

    @given(nonzero)
    def test_inverse(self, a):
        assert value(Scalar.of(a).inverse()) == pow(a, -1, ORDER)

    def test_zero_has_no_inverse(self):
        with pytest.raises(ParameterError, match="zero has no inverse"):
            Scalar.of(0).inverse()

    @given(st.integers())
    def test_of_any_integer(self, number):
        assert value(Scalar.of(number)) == number % ORDER

    @given(numbers)
    def test_decode_takes_the_one_encoding(self, a):
        assert Scalar.decode(little(a)).encode() == little(a)
        assert Scalar.decode(memoryview(little(a))) == Scalar.of(a)

    @pytest.mark.parametrize(
        "number",
        [ORDER, ORDER + 1, 2 * ORDER - 1, 2 * ORDER, *(2**bit for bit in (253, 254, 255)), 2**255 - 1, 2**256 - 1],
    )
    def test_decode_refuses_what_is_not_below_the_order(self, number):
        with pytest.raises(VerificationError, match="no number below the order"):
            Scalar.decode(little(number))

    @given(st.integers(0, 2**256 - 1))
    def test_decode_takes_or_refuses_any_32_bytes_rightly(self, number):
        if number < ORDER:
            assert value(Scalar.decode(little(number))) == number
        else:
            with pytest.raises(VerificationError):
                Scalar.decode(little(number))

    @pytest.mark.parametrize("length", [0, 1, 31, 33, 64])
    def test_decode_refuses_another_length(self, length):
        with pytest.raises(VerificationError):
            Scalar.decode(bytes(length))

    @given(st.sampled_from([bytes(64), b"\xff" * 64]) | st.binary(min_size=64, max_size=64))
    def test_reduced(self, octets):
        assert value(Scalar.reduced(octets)) == int.from_bytes(octets, "little") % ORDER

    @pytest.mark.parametrize("length", [0, 32, 63, 65])
    def test_reduced_wants_64_bytes(self, length):
        with pytest.raises(ParameterError):
            Scalar.reduced(bytes(length))

    def test_drawn_reduces_64_bytes_of_the_system(self, monkeypatch):
        monkeypatch.setattr(module.secrets, "token_bytes", lambda length: bytes(range(length)))
        assert value(Scalar.drawn()) == int.from_bytes(bytes(range(64)), "little") % ORDER
        monkeypatch.undo()
        assert Scalar.drawn() != Scalar.drawn()

    @pytest.mark.parametrize("x", [1, 2, 255, ORDER - 1])
    def test_index(self, x):
        assert value(Scalar.of_index(x)) == x

    @pytest.mark.parametrize("x", [0, -1, ORDER, ORDER + 1, 2 * ORDER, 2**256])
    def test_an_index_out_of_range_is_refused(self, x):
        with pytest.raises(ParameterError, match="an index must be"):
            Scalar.of_index(x)


class TestSilence:
    SECRET = Scalar.of(0x0123456789ABCDEF << 180)

    def shows_nothing(self, text: str) -> bool:
        octets = self.SECRET.encode()
        whole = (octets.hex(), octets[::-1].hex().lstrip("0"), str(value(self.SECRET)), repr(octets))
        return not any(sign[:12] in text.lower() for sign in whole)

    def test_it_writes_nothing_of_itself(self):
        for text in (repr(self.SECRET), str(self.SECRET), repr([self.SECRET]), "%s" % self.SECRET):  # noqa: UP031
            assert "Scalar(<hidden>)" in text
            assert self.shows_nothing(text)

    def test_it_is_put_into_no_text(self):
        for way in (lambda s: f"{s}", lambda s: f"{s:>40}", lambda s: "{}".format(s), lambda s: format(s, "x")):  # noqa: UP032
            with pytest.raises(TypeError, match="not written into text"):
                way(self.SECRET)

    def test_it_is_neither_copied_nor_pickled(self):
        ways = [
            copy.copy,
            copy.deepcopy,
            *(lambda s, p=p: pickle.dumps(s, p) for p in range(pickle.HIGHEST_PROTOCOL + 1)),
        ]
        for way in ways:
            with pytest.raises(TypeError, match="neither copied nor pickled"):
                way(self.SECRET)

    def test_it_is_no_key_of_anything(self):
        with pytest.raises(TypeError, match="unhashable"):
            hash(self.SECRET)

    def test_it_has_no_order_no_length_and_no_integer(self):
        for way in (lambda s: s < s, int, len, bytes, lambda s: [0][s], iter):
            with pytest.raises(TypeError) as caught:
                way(self.SECRET)
            assert self.shows_nothing(str(caught.value))

    def test_a_refusal_shows_nothing(self):
        with pytest.raises(VerificationError) as caught:
            Scalar.decode(self.SECRET.encode()[:31] + b"\xff")
        assert self.shows_nothing(str(caught.value) + repr(caught.value))
        assert caught.value.__cause__ is caught.value.__context__ is None

    def test_equality_with_others(self):
        assert self.SECRET == self.SECRET
        assert value(self.SECRET) != self.SECRET
        assert self.SECRET.encode() != self.SECRET
        assert Scalar.of(1) != Point.decode(BASE.encode())


class TestTypes:
    """Nothing of one kind goes where the other is due: both are 32 bytes, and the library would take them."""

    @pytest.mark.parametrize(
        "way",
        [
            lambda: Scalar.of(1) + BASE,
            lambda: Scalar.of(1) - BASE,
            lambda: BASE + Scalar.of(1),
            lambda: BASE - Scalar.of(1),
            lambda: BASE * Scalar.of(1),
            lambda: BASE * BASE,
            lambda: 2 * BASE,
            lambda: 2 * Scalar.of(1),
            lambda: Scalar.of(1) * 2,
            lambda: Scalar.of(1) + 2,
            lambda: BASE + BASE.encode(),
            lambda: Scalar.decode(32),
            lambda: Point.decode(32),
            lambda: Scalar.decode([0] * 32),
            lambda: Scalar.decode("0" * 32),
            lambda: Scalar.of(b"1"),
        ],
    )
    def test_a_wrong_type_is_refused(self, way):
        with pytest.raises(TypeError):
            way()

    def test_only_this_module_makes_scalars_and_points_without_looking(self):
        """``Scalar(...)`` and ``Point(...)`` hold what they are given (invariant 1 rests on it)."""
        looked_at = 0
        for path in Path(shares.__file__).parent.rglob("*.py"):
            tree = ast.parse(path.read_text("utf-8"))
            taken = {
                alias.asname or alias.name
                for node in ast.walk(tree)
                if isinstance(node, ast.ImportFrom) and node.module == "shares.group.edwards25519"
                for alias in node.names
            } & {"Scalar", "Point"}
            looked_at += bool(taken)
            for node in ast.walk(tree):
                if isinstance(node, ast.Call):
                    assert ast.unparse(node.func).split(".")[-1] not in taken, path
        assert looked_at >= 3


class TestPoint:
    @given(a=nonzero, b=nonzero)
    def test_products_and_sums_are_those_of_the_reference(self, a, b):
        one, other = Scalar.of(a) * BASE, Scalar.of(b) * BASE
        reference = curve.multiply(a, curve.BASE), curve.multiply(b, curve.BASE)
        assert [one.encode(), other.encode()] == [curve.encode(point) for point in reference]
        assert (Scalar.of(b) * one).encode() == curve.encode(curve.multiply(b, reference[0]))
        assert Scalar.of(b) * one == Scalar.of(a) * other == Scalar.of(a) * Scalar.of(b) * BASE
        if (a + b) % ORDER:
            assert (one + other).encode() == curve.encode(curve.add(*reference))
            assert one + other == other + one == total([one, other])
        if a != b:
            assert (one - other).encode() == curve.encode(curve.add(reference[0], curve.negative(reference[1])))
        assert (one == other) == (a == b)

    def test_the_base_decoded_is_the_base(self):
        again = Point.decode(BASE.encode())
        assert again is not BASE
        assert again == BASE
        assert hash(again) == hash(BASE)
        assert Scalar.of(5) * again == Scalar.of(5) * BASE
        assert repr(again) == str(again) == "Point(<hidden>)"
        assert BASE.encode() == curve.encode(curve.BASE)
        assert again != BASE.encode()

    def test_public_keys_of_rfc_8032(self, vectors):
        cases = vectors("rfc8032_ed25519")["vectors"]
        assert len(cases) == 3
        for case in cases:
            lower = bytearray(hashlib.sha512(bytes.fromhex(case["secret_key"])).digest()[:32])
            lower[0] &= 0xF8
            lower[31] = lower[31] & 0x7F | 0x40
            scalar = Scalar.reduced(bytes(lower) + bytes(32))
            assert scalar.encode().hex() == case["computed_here"]["clamped_scalar_mod_order"]
            public = Point.decode(bytes.fromhex(case["public_key"]))
            assert public == scalar * BASE

    @given(nonzero)
    def test_the_identity_is_never_a_result(self, a):
        point = Scalar.of(a) * BASE
        for way in (
            lambda: point - point,
            lambda: point + Scalar.of(ORDER - a) * BASE,
            lambda: Scalar.of(0) * point,
            lambda: Scalar.of(0) * BASE,
            lambda: total([point, point, Scalar.of(-2 * a) * BASE]),
            lambda: total([point, Scalar.of(-a) * BASE]),
        ):
            with pytest.raises(VerificationError, match="is the identity"):
                way()

    def test_total(self):
        points = [Scalar.of(number) * BASE for number in (1, 2, 3)]
        assert total(points) == total(iter(points)) == Scalar.of(6) * BASE
        assert total(points[:1]) == BASE
        # 1 + 2 - 3 is the identity on the way, and no sum.
        assert total([*points[:2], Scalar.of(-3) * BASE, points[1], Scalar.of(-2) * BASE, BASE]) == BASE
        with pytest.raises(ParameterError):
            total([])


ON_CURVE = [point for y in range(200) if (point := curve.decode(little(y)))]
OFF_CURVE = [y for y in range(200) if curve.decode(little(y)) is None]
SIGN = 1 << 255


class TestRefusedEncodings:
    """What RFC 9591, sec. 6.1, wants refused: all that RFC 8032 does not decode, the identity, other groups' points."""

    @pytest.mark.parametrize("y", range(curve.P, 2**255))
    @pytest.mark.parametrize("sign", [0, SIGN])
    def test_y_not_below_p(self, y, sign):
        assert curve.decode(little(y | sign)) is None
        assert refused(little(y | sign))

    def test_no_y_not_below_p_was_left_out(self):
        assert 2**255 - curve.P == 19

    @pytest.mark.parametrize("y", [1, curve.P - 1])
    def test_x_zero_with_its_sign_set(self, y):
        assert curve.decode(little(y | SIGN)) is None
        assert curve.decode(little(y)) == (0, y)
        assert refused(little(y | SIGN))

    def test_identity(self):
        assert refused(curve.encode(curve.IDENTITY))

    @pytest.mark.parametrize("point", curve.TORSION)
    def test_points_of_small_order_in_every_encoding(self, point):
        """The proper encoding, that with y + p where it fits, and both signs of each."""
        encodings = {y | sign for y in (point[1], point[1] + curve.P) if y < 2**255 for sign in (0, SIGN)}
        assert int.from_bytes(curve.encode(point), "little") in encodings
        assert all(refused(little(encoding)) for encoding in encodings)

    @pytest.mark.parametrize("torsion", curve.TORSION[1:])
    def test_points_of_mixed_order(self, torsion):
        for point in (curve.BASE, curve.negative(curve.BASE), curve.multiply(0xC0FFEE, curve.BASE)):
            mixed = curve.add(point, torsion)
            assert curve.decode(curve.encode(mixed)) == mixed
            assert refused(curve.encode(mixed))

    @pytest.mark.parametrize("y", OFF_CURVE[:40])
    @pytest.mark.parametrize("sign", [0, SIGN])
    def test_no_point_of_the_curve(self, y, sign):
        assert refused(little(y | sign))

    def test_small_y_one_by_one(self):
        """All y below 200: taken where the reference says that the order is prime, refused elsewhere."""
        taken = [point for point in ON_CURVE if curve.order(point) == curve.L]
        assert 5 < len(taken) < len(ON_CURVE) < 150
        for point in ON_CURVE:
            octets = curve.encode(point)
            assert Point.decode(octets).encode() == octets if point in taken else refused(octets)

    @given(st.integers(0, 2**256 - 1), st.integers(1, 7))
    def test_any_32_bytes(self, number, torsion):
        octets = little(number)
        point = curve.decode(octets)
        if point is None or curve.order(point) != curve.L:
            assert refused(octets)
        else:
            assert Point.decode(octets).encode() == octets
            assert refused(curve.encode(curve.add(point, curve.TORSION[torsion])))

    @pytest.mark.parametrize("octets", [b"", BASE.encode()[:31], BASE.encode() + b"\0", BASE.encode() * 2])
    def test_another_length(self, octets):
        assert refused(octets)

    def test_these_tests_would_catch_a_library_that_looks_at_x_alone(self, monkeypatch):
        """Before 1.6.2, the bindings brought a check that took a point for one of the group where x of L times it is 0.

        So it let pass a point with a part of order 2, whose L-fold is (0, -1) (CVE-2025-69277).
        """

        def looks_at_x_alone(octets):
            point = curve.decode(octets)
            return point is not None and point not in curve.TORSION and curve.multiply(curve.L, point)[0] == 0

        monkeypatch.setattr(module.sodium, "crypto_core_ed25519_is_valid_point", looks_at_x_alone)
        passed = [t for t in curve.TORSION[1:] if looks_at_x_alone(curve.encode(curve.add(curve.BASE, t)))]
        assert passed == [(0, curve.P - 1)]
        with pytest.raises(pytest.fail.Exception, match="DID NOT RAISE"):
            self.test_points_of_mixed_order(passed[0])

    def test_the_bindings_are_new_enough(self):
        assert tuple(int(part) for part in nacl.__version__.split(".")[:3]) >= (1, 6, 2)
