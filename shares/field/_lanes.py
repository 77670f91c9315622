"""The portable kernel: one big integer holds all bytes of a row, each byte in a lane of its own.

For: machines without the native kernel. XOR, AND and shifts of a big integer work on all bytes at once.
Source: lanes within a word: L. Lamport, "Multiple byte processing with full-word instructions", CACM 18(8), 1975.
    Doubling in GF(2^8) is xtime of FIPS 197, section 4.2.1. Horner's rule over the bits of a public scalar.
May import: shares.field (the types of buffers).
Secret: rows, outs and every lane. Public: modulus, matrix, lengths, and so every loop bound, shift count and branch.
Does not: promise what Python cannot: integers cannot be wiped, and their time is the interpreter's. It only keeps the
    length of every integer, and with it every loop inside the interpreter, apart from the secret.

A big integer drops its leading zero digits, so the length of an unguarded one tells something of its value. Therefore
two lanes above the top byte hold a public guard, and:

    1. every integer made from a secret has a guard that is public and not zero, so its length is public;
    2. an integer that is doubled has the guard DOUBLED, which doubling leaves as it is (shown in ``_double``);
    3. the guards of the two operands of a XOR differ (TERM against DOUBLED, DOUBLED against TOTAL), so a guard is left;
    4. a mask covers the guard of what it masks.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from shares.field import ReadableBuffer, WritableBuffer

TERM = b"\x01\x00"
DOUBLED = b"\x00\xff"
TOTAL = b"\x02\x00"

# For one length and modulus: all bits of a lane but the top one, the top bits, the low byte of the modulus.
_Masks = tuple[int, int, int]

# Bytes that are worked on at once, so that a handful of integers stay in the second-level cache (measured on x86-64:
# 32 KiB is the fastest by a little, 128 KiB takes half as long again).
BLOCK = 1 << 15


def combine(
    modulus: int, matrix: Sequence[bytes], rows: Sequence[ReadableBuffer], out: Sequence[WritableBuffer]
) -> None:
    """Write ``out[i][t] = sum over j of matrix[i][j] * rows[j][t]`` over GF(2)[x]/(modulus).

    Args:
        modulus: public polynomial of degree 8 as int, bit i the coefficient of x^i.
        matrix: public; one ``bytes`` of ``len(rows)`` scalars for each out.
        rows: secret; at least one, all of the same length, 1 byte or more.
        out: at least one, each of the same length as the rows; overwritten whole.

    Raises:
        ValueError: shapes do not fit, or an out overlaps a row or another out; nothing has been written then.
    """
    sources, targets = [_view(row) for row in rows], [_view(target) for target in out]
    _check(modulus, sources, targets)
    if len(set(map(len, sources + targets))) > 1:
        raise ValueError("rows and outs must all have the same length")
    if len(matrix) != len(targets) or {len(scalars) for scalars in matrix} != {len(sources)}:
        raise ValueError("the matrix must have one line for each out and one column for each row")
    columns = list(zip(*matrix, strict=True))
    # Doublings are the larger part of the work. Either each row is doubled and shared by all outs (splitting), or each
    # out is built by Horner's rule (recovery); the same XORs are done in both.
    share_powers = sum(max(column).bit_length() for column in columns) <= sum(max(line).bit_length() for line in matrix)
    length = len(sources[0])
    for start in range(0, length, BLOCK):
        stop = min(start + BLOCK, length)
        masks = _masks(modulus, stop - start)
        blocks = [view[start:stop] for view in sources]
        totals = _double_rows(columns, blocks, masks) if share_powers else _double_outs(matrix, blocks, masks)
        for target, total in zip(targets, totals, strict=True):
            target[start:stop] = total.to_bytes(stop - start + 2, "big")[2:]


def project(modulus: int, matrix: ReadableBuffer, row: ReadableBuffer, out: WritableBuffer) -> None:
    """Write ``out[i] = sum over j of matrix[i][j] * row[j]`` over GF(2)[x]/(modulus).

    Args:
        modulus: public polynomial of degree 8 as int, bit i the coefficient of x^i.
        matrix: public; ``len(out) * len(row)`` bytes, line by line.
        row: secret, 1 byte or more.
        out: 1 byte or more; overwritten whole.

    Raises:
        ValueError: shapes do not fit, or out overlaps the row or the matrix; nothing has been written then.
    """
    lines, source, target = _view(matrix), _view(row), _view(out)
    _check(modulus, [source, lines], [target])
    length, height = len(source), len(target)
    if len(lines) != length * height:
        raise ValueError("the matrix must have one line for each byte of out and one column for each byte of the row")
    # Lanes run column by column: lane (j, i) holds row[j], against matrix[i][j]. So lanes of one out lie ``height``
    # apart, and the sum over j folds whole halves onto each other. Zeros fill the columns up to a power of two.
    columns = min(1 << max(BLOCK // height, 1).bit_length() - 1, 1 << (length - 1).bit_length())
    lanes = columns * height
    ones = int.from_bytes(b"\x01" * (lanes + 2), "big")
    sums = [int.from_bytes(TOTAL + bytes(lanes), "big")] * 8
    for start in range(0, length, columns):
        stop = min(start + columns, length)
        spread, scalars = bytearray(lanes), bytearray(lanes)
        for i in range(height):
            spread[i : (stop - start) * height : height] = source[start:stop]
            scalars[i : (stop - start) * height : height] = lines[i * length + start : i * length + stop]
        terms, public = int.from_bytes(TERM + spread, "big"), int.from_bytes(b"\xff\xff" + scalars, "big")
        for bit in range(8):
            # One mask for each bit of the public scalars; its guard is ff ff and keeps TERM.
            sums[bit] ^= terms & ((public >> bit & ones) * 0xFF)
    total, masks = int.from_bytes(DOUBLED + bytes(lanes), "big"), _masks(modulus, lanes)
    for part in reversed(sums):
        total = _double(total, *masks) ^ part
    target[:] = _fold(total, columns, height).to_bytes(height + 2, "big")[2:]


def _double_rows(columns: Sequence[tuple[int, ...]], rows: Sequence[memoryview], masks: _Masks) -> list[int]:
    totals = [int.from_bytes(TOTAL + bytes(len(rows[0])), "big")] * len(columns[0])
    for row, column in zip(rows, columns, strict=True):
        power = int.from_bytes(DOUBLED + row, "big")
        for bit in range(max(column).bit_length()):
            if bit:
                power = _double(power, *masks)
            for i, scalar in enumerate(column):
                if scalar >> bit & 1:  # public: the matrix
                    totals[i] ^= power
    return totals


def _double_outs(lines: Sequence[bytes], rows: Sequence[memoryview], masks: _Masks) -> list[int]:
    terms = [int.from_bytes(TERM + row, "big") for row in rows]
    totals = [int.from_bytes(DOUBLED + bytes(len(rows[0])), "big")] * len(lines)
    for i, line in enumerate(lines):
        for bit in reversed(range(max(line).bit_length())):
            for scalar, term in zip(line, terms, strict=True):
                if scalar >> bit & 1:  # public: the matrix
                    totals[i] ^= term
            if bit:
                totals[i] = _double(totals[i], *masks)
    return totals


def _double(value: int, low: int, top: int, m: int) -> int:
    """Multiply every lane by x; a guard of DOUBLED stays, whatever else lies above it.

    Each lane loses its top bit and, where that was 1, gains m, the low byte of the modulus. The multiplication by m
    does so in all lanes at once without a carry from lane to lane, for 80 * m fills bits 7 to 14 and the next lane
    begins at bit 15. In the guard lane ``low`` is ~m >> 1. So the guard ff becomes ~m & fe on the left and m on the
    right: an irreducible modulus has bit 0 and m is not ff, so neither is zero, and their XOR is ff again.
    """
    return ((value & low) << 1) ^ ((value & top) * m >> 7)


@lru_cache(maxsize=32)
def _masks(modulus: int, lanes: int) -> _Masks:
    m = modulus & 0xFF
    low = bytes([~m >> 1 & 0x7F]) + b"\x7f" * lanes
    return int.from_bytes(low, "big"), int.from_bytes(b"\x80" * (lanes + 1), "big"), m


def _fold(value: int, columns: int, height: int) -> int:
    """XOR ``columns`` groups of ``height`` lanes, a power of two of them, into one group, halving them each time.

    The upper half brings the guard of ``value`` down. The lower half gets TERM set above it before the mask cuts it
    off; the guard ff of the one and 01 00 of the other leave one that is not zero.
    """
    while columns > 1:
        columns //= 2
        bits = 8 * columns * height
        guard = int.from_bytes(TERM, "big") << bits
        value = (value >> bits) ^ ((value | guard) & (guard | (1 << bits) - 1))
    return value


def _view(buffer: ReadableBuffer) -> memoryview:
    view = memoryview(buffer)
    if not view.c_contiguous:
        raise ValueError("a buffer must be contiguous")
    return view.cast("B")


def _check(modulus: int, sources: Sequence[memoryview], targets: Sequence[memoryview]) -> None:
    if not 0x100 <= modulus <= 0x1FF:
        raise ValueError("the modulus must be of degree 8")
    if not sources or not targets or not all(map(len, sources)):
        raise ValueError("at least one row, one out and one byte are needed")
    if any(target.readonly for target in targets):
        raise ValueError("an out must be writable")
    owners = {id(target.obj) for target in targets}
    if len(owners) < len(targets) or owners & {id(source.obj) for source in sources}:
        _check_overlap(sources, targets)


def _check_overlap(sources: Sequence[memoryview], targets: Sequence[memoryview]) -> None:
    # Only views of one object need their addresses looked at, and only then is ctypes worth its slow import.
    import ctypes

    class Buffer(ctypes.Structure):
        # Py_buffer, part of the stable ABI from Python 3.11: the address comes first, 80 bytes in all.
        _fields_ = (("address", ctypes.c_void_p), ("rest", ctypes.c_void_p * 9))

    def span(view: memoryview, *, written: bool) -> tuple[int, int, bool]:
        buffer = Buffer()
        ctypes.pythonapi.PyObject_GetBuffer(ctypes.py_object(view), ctypes.byref(buffer), 0)
        ctypes.pythonapi.PyBuffer_Release(ctypes.byref(buffer))
        return buffer.address, buffer.address + len(view), written

    spans = [span(view, written=False) for view in sources] + [span(view, written=True) for view in targets]
    read_to = written_to = 0
    for start, stop, written in sorted(spans):
        if start < written_to or (written and start < read_to):
            raise ValueError("an out overlaps a row or another out")
        if written:
            written_to = stop
        else:
            read_to = max(read_to, stop)
