"""The two secret operations, the same tests for both kernels: ``combine`` and ``project``."""

from __future__ import annotations

import random

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from shares.field.gf256 import Field

MODULI = [0x11B, 0x11D, 0x1F5]
SCALARS = st.sampled_from([0, 1, 2, 0x7F, 0x80, 0xFF]) | st.integers(0, 255)
# The portable kernel works in blocks of 32,768 bytes; vector registers hold 16, 32 or 64.
LENGTHS = [1, 2, 3, 15, 16, 17, 31, 32, 33, 63, 64, 65, 255, 4096, 32767, 32768, 32769, 70000]
ALL = bytes(range(256))


def rows_of(length):
    edges = st.sampled_from([bytes(length), b"\x80" * length, b"\xff" * length])
    return edges | st.binary(min_size=length, max_size=length)


@st.composite
def problems(draw, *, max_length=70):
    """A matrix and rows that fit."""
    length, columns, lines = draw(st.integers(1, max_length)), draw(st.integers(1, 6)), draw(st.integers(1, 6))
    matrix = [bytes(draw(st.lists(SCALARS, min_size=columns, max_size=columns))) for _ in range(lines)]
    return matrix, [draw(rows_of(length)) for _ in range(columns)]


def combine(field, matrix, rows):
    # Outs are dirty: what was in them must not matter.
    out = [bytearray(b"\xa5" * len(rows[0])) for _ in matrix]
    field.combine(matrix, rows, out)
    return [bytes(line) for line in out]


def project(field, matrix, row, height):
    out = bytearray(b"\xa5" * height)
    field.project(matrix, row, out)
    return bytes(out)


def xor(a, b):
    return bytes(x ^ y for x, y in zip(a, b, strict=True))


def by_definition(field, matrix, rows):
    def value(line, t):
        total = 0
        for scalar, row in zip(line, rows, strict=True):
            total ^= field.multiply(scalar, row[t])
        return total

    return [bytes(value(line, t) for t in range(len(rows[0]))) for line in matrix]


class TestAllProducts:
    """Each of the 65,536 products of each of the 30 fields equals galois's."""

    def test_one_row_for_all_scalars(self, implementation, all_moduli, reference_products):
        for modulus in all_moduli:
            field = Field(modulus, kernel=implementation)
            assert combine(field, [bytes([a]) for a in range(256)], [ALL]) == reference_products(modulus)

    def test_one_scalar_at_a_time(self, implementation, all_moduli, reference_products):
        # Two equal columns and one line: the portable kernel takes its other way, Horner's rule.
        for modulus in all_moduli:
            field, expected = Field(modulus, kernel=implementation), reference_products(modulus)
            for a in range(256):
                assert combine(field, [bytes([a, a])], [ALL, bytes(256)]) == [expected[a]]

    def test_projection_of_one_byte(self, implementation, all_moduli, reference_products):
        for modulus in all_moduli:
            field, expected = Field(modulus, kernel=implementation), reference_products(modulus)
            for b in range(256):
                assert project(field, ALL, bytes([b]), 256) == expected[b]


class TestPublishedShares:
    """draft-mcgrew-tss-03, section 9 (Internet-Draft, expired): field 0x11b, threshold 2."""

    def test_split(self, implementation, vectors):
        draft = vectors("draft_mcgrew_tss")
        field = Field(int(draft["modulus"], 16), kernel=implementation)
        rows = [bytes.fromhex(draft["secret"]), bytes.fromhex(draft["derived"]["coefficient_x1"])]
        points = [(share["index"], share["data"]) for share in draft["shares"]]
        points.append((3, draft["derived"]["share_at_index_3"]))
        out = combine(field, [field.powers(x, 2) for x, _ in points], rows)
        assert [line.hex() for line in out] == [data for _, data in points]

    def test_recover(self, implementation, vectors, all_moduli):
        draft = vectors("draft_mcgrew_tss")
        xs = [share["index"] for share in draft["shares"]]
        rows = [bytes.fromhex(share["data"]) for share in draft["shares"]]

        def recovers(modulus):
            field = Field(modulus, kernel=implementation)
            return combine(field, [field.interpolation_weights(xs)], rows)[0].hex() == draft["secret"]

        assert [f"{m:#x}" for m in all_moduli if recovers(m)] == draft["polynomials_that_reproduce_the_secret"]


class TestAlgebra:
    @pytest.mark.parametrize("modulus", MODULI)
    @given(problem=problems())
    @example(problem=([b"\x00"], [b"\x00"]))
    @example(problem=([b"\xff\xff"], [b"\xff" * 31, b"\x80" * 31]))
    def test_definition(self, implementation, modulus, problem):
        field = Field(modulus, kernel=implementation)
        assert combine(field, *problem) == by_definition(field, *problem)

    @pytest.mark.parametrize("modulus", MODULI)
    @given(data=st.data())
    def test_projection_by_definition(self, implementation, modulus, data):
        field = Field(modulus, kernel=implementation)
        row = data.draw(st.integers(1, 70).flatmap(rows_of))
        height = data.draw(st.integers(1, 20))
        matrix = data.draw(rows_of(height * len(row)))
        expected = [
            by_definition(field, [matrix[i * len(row) : (i + 1) * len(row)]], [bytes([b]) for b in row])[0]
            for i in range(height)
        ]
        assert project(field, matrix, row, height) == b"".join(expected)

    @given(problem=problems(), data=st.data())
    def test_linear_in_the_rows(self, implementation, problem, data):
        field = Field(kernel=implementation)
        matrix, rows = problem
        others = [data.draw(rows_of(len(rows[0]))) for _ in rows]
        sums = [xor(a, b) for a, b in zip(rows, others, strict=True)]
        apart = zip(combine(field, matrix, rows), combine(field, matrix, others), strict=True)
        assert combine(field, matrix, sums) == [xor(a, b) for a, b in apart]

    @given(problem=problems(), data=st.data())
    def test_linear_in_the_matrix(self, implementation, problem, data):
        field = Field(kernel=implementation)
        matrix, rows = problem
        other = [data.draw(rows_of(len(rows))) for _ in matrix]
        sums = [xor(a, b) for a, b in zip(matrix, other, strict=True)]
        apart = zip(combine(field, matrix, rows), combine(field, other, rows), strict=True)
        assert combine(field, sums, rows) == [xor(a, b) for a, b in apart]

    @given(problem=problems(), data=st.data())
    def test_two_steps_equal_one_with_the_product_matrix(self, implementation, problem, data):
        field = Field(kernel=implementation)
        matrix, rows = problem
        second = [data.draw(rows_of(len(matrix))) for _ in range(data.draw(st.integers(1, 4)))]
        product = by_definition(field, second, matrix)
        assert combine(field, second, combine(field, matrix, rows)) == combine(field, product, rows)

    @pytest.mark.parametrize("modulus", MODULI)
    @given(data=st.data())
    def test_interpolation_recovers_at_any_point(self, implementation, modulus, data):
        field = Field(modulus, kernel=implementation)
        k = data.draw(st.integers(1, 8))
        coefficients = [data.draw(rows_of(5)) for _ in range(k)]
        xs = data.draw(st.lists(st.integers(1, 255), min_size=k, max_size=k, unique=True))
        at = data.draw(SCALARS)
        shares = combine(field, [field.powers(x, k) for x in xs], coefficients)
        wanted = combine(field, [field.powers(at, k)], coefficients)
        assert combine(field, [field.interpolation_weights(xs, at=at)], shares) == wanted


class TestShapes:
    @pytest.mark.parametrize("length", LENGTHS)
    def test_every_byte_of_every_length(self, implementation, reference_products, length):
        field, products = Field(kernel=implementation), reference_products(0x11B)
        generator = random.Random(length)
        for scalars in [b"\x01\x53\xca", b"\xff\xff\xff"]:
            rows = [generator.randbytes(length) for _ in scalars]
            expected = bytes(length)
            for scalar, row in zip(scalars, rows, strict=True):
                expected = xor(expected, row.translate(products[scalar]))
            assert combine(field, [scalars], rows) == [expected]
            assert combine(field, [scalars, b"\x00\x00\x00", scalars], rows) == [expected, bytes(length), expected]

    @pytest.mark.parametrize("height", [1, 2, 16, 17, 20000])
    @pytest.mark.parametrize("length", [1, 2, 3, 16, 80, 2047, 2048, 2049, 5000])
    def test_projection_of_every_length(self, implementation, reference_products, length, height):
        if length * height > 1 << 18:
            height = 3
        field, products = Field(kernel=implementation), reference_products(0x11B)
        generator = random.Random(length)
        row, matrix = generator.randbytes(length), generator.randbytes(length * height)
        expected = bytearray(height)
        for i in range(height):
            for a, b in zip(matrix[i * length : (i + 1) * length], row, strict=True):
                expected[i] ^= products[a][b]
        assert project(field, matrix, row, height) == expected

    def test_255_of_255(self, implementation):
        field = Field(kernel=implementation)
        rows = [random.Random(7).randbytes(3) for _ in range(255)]
        shares = combine(field, [field.powers(x, 255) for x in range(1, 256)], rows)
        assert combine(field, [field.interpolation_weights(range(1, 256))], shares) == rows[:1]

    def test_buffers_of_every_kind(self, implementation):
        field, row = Field(kernel=implementation), b"\x57\x83"
        rows = [row, bytearray(row), memoryview(row), memoryview(bytearray(row)).toreadonly()]
        out = bytearray(4)
        field.combine([b"\x01\x00\x00\x00", b"\x01\x02\x03\x04"], rows, [memoryview(out)[:2], memoryview(out)[2:]])
        assert out[:2] == row
        assert out[2:] == by_definition(field, [b"\x01\x02\x03\x04"], [row] * 4)[0]

    def test_a_row_may_be_given_twice(self, implementation):
        row = b"\x57\x83"
        assert combine(Field(kernel=implementation), [b"\x01\x01"], [row, row]) == [bytes(2)]


ROW = b"\x01\x02\x03"


@pytest.mark.parametrize(
    ("matrix", "rows", "lengths"),
    [
        ([b"\x01"], [], [3]),
        ([b""], [], [3]),
        ([], [ROW], []),
        ([b"\x01"], [b""], [0]),
        ([b"\x01"], [ROW], [2]),
        ([b"\x01"], [ROW], [4]),
        ([b"\x01\x01"], [ROW, ROW[:2]], [3]),
        ([b"\x01"], [ROW], [3, 3]),
        ([b"\x01", b"\x01"], [ROW], [3]),
        ([b"\x01\x01"], [ROW], [3]),
        ([b"\x01", b"\x01\x01"], [ROW], [3, 3]),
    ],
)
def test_combine_refuses_shapes_before_it_writes(implementation, matrix, rows, lengths):
    out = [bytearray(b"\xa5" * length) for length in lengths]
    with pytest.raises(ValueError, match=r"."):
        implementation.combine(0x11B, matrix, rows, out)
    assert out == [b"\xa5" * length for length in lengths]


@pytest.mark.parametrize(("matrix", "row", "length"), [(b"", b"", 1), (b"", ROW, 0), (ROW, ROW, 2), (ROW, ROW[:2], 1)])
def test_project_refuses_shapes_before_it_writes(implementation, matrix, row, length):
    out = bytearray(b"\xa5" * length)
    with pytest.raises(ValueError, match=r"."):
        implementation.project(0x11B, matrix, row, out)
    assert out == b"\xa5" * length


@pytest.mark.parametrize("modulus", [-1, 0, 0x1B, 0xFF, 0x200, 0x11B << 8, 1 << 64])
def test_a_modulus_of_another_degree_is_refused(implementation, modulus):
    out = bytearray(b"\xa5")
    with pytest.raises((ValueError, OverflowError)):
        implementation.combine(modulus, [b"\x01"], [b"\x01"], [out])
    with pytest.raises((ValueError, OverflowError)):
        implementation.project(modulus, b"\x01", b"\x01", out)
    assert out == b"\xa5"


class TestOverlap:
    """Buffers inside one object: whether they overlap is told by address, and told before anything is written."""

    @pytest.mark.parametrize(("row", "out"), [((0, 4), (0, 4)), ((0, 4), (3, 7)), ((3, 7), (0, 4)), ((2, 6), (2, 6))])
    @pytest.mark.parametrize("readonly", [False, True])
    def test_out_over_row(self, implementation, row, out, readonly):
        memory = bytearray(range(10))
        source, target = memoryview(memory)[slice(*row)], memoryview(memory)[slice(*out)]
        if readonly:
            source = source.toreadonly()
        with pytest.raises(ValueError, match="overlap"):
            implementation.combine(0x11B, [b"\x02"], [source], [target])
        with pytest.raises(ValueError, match="overlap"):
            implementation.project(0x11B, bytes(16), source, target)
        with pytest.raises(ValueError, match="overlap"):
            implementation.project(0x11B, source, b"\x01", target)
        assert memory == bytearray(range(10))

    @pytest.mark.parametrize(("one", "two"), [((0, 4), (0, 4)), ((0, 4), (3, 7)), ((3, 7), (0, 4))])
    def test_out_over_out(self, implementation, one, two):
        memory = bytearray(range(10))
        outs = [memoryview(memory)[slice(*one)], memoryview(memory)[slice(*two)]]
        with pytest.raises(ValueError, match="overlap"):
            implementation.combine(0x11B, [b"\x01", b"\x02"], [b"1234"], outs)
        assert memory == bytearray(range(10))

    def test_the_same_object_twice(self, implementation):
        out = bytearray(3)
        with pytest.raises(ValueError, match="overlap"):
            implementation.combine(0x11B, [b"\x01", b"\x01"], [ROW], [out, out])
        with pytest.raises(ValueError, match="overlap"):
            implementation.combine(0x11B, [b"\x01"], [out], [out])

    def test_a_short_row_inside_a_long_matrix(self, implementation):
        # By address: the matrix, the row within it, and the out, which begins behind the row but within the matrix.
        memory = memoryview(bytearray(range(12)))
        with pytest.raises(ValueError, match="overlap"):
            implementation.project(0x11B, memory[0:8], memory[1:2], memory[4:12])
        assert memory == bytes(range(12))

    def test_neighbours_do_not_overlap(self, implementation):
        memory = bytearray(range(12))
        view = memoryview(memory)
        implementation.combine(0x11B, [b"\x01\x01"], [view[:4], view[8:]], [view[4:8]])
        assert memory == bytes([0, 1, 2, 3, 8, 8, 8, 8, 8, 9, 10, 11])
        implementation.project(0x11B, view[:4], view[4:5], view[8:12])
        assert memory[8:] == bytes([0, 8, 16, 24])

    def test_rows_may_overlap_each_other(self, implementation):
        memory, out = memoryview(bytearray(range(6))), bytearray(4)
        implementation.combine(0x11B, [b"\x01\x01"], [memory[:4], memory[2:]], [out])
        assert out == bytes([0 ^ 2, 1 ^ 3, 2 ^ 4, 3 ^ 5])

    def test_a_read_only_out_is_refused(self, implementation):
        first, second = bytearray(3), memoryview(bytearray(3)).toreadonly()
        with pytest.raises((ValueError, TypeError, BufferError)):
            implementation.combine(0x11B, [b"\x01", b"\x01"], [ROW], [first, second])
        assert first == bytes(3)
        with pytest.raises((ValueError, TypeError, BufferError)):
            implementation.project(0x11B, ROW, ROW, second[:1])
