"""The portable kernel keeps the length of every integer apart from the secret: guards, seen from inside.

Source of the rule: CPython drops leading zero digits of an int, so its length, and the time of what is done with it,
would depend on the value; ints up to 256 are shared objects (CPython, Objects/longobject.c).
"""

from __future__ import annotations

import random

import pytest

from shares.field import _lanes

# Lengths of one lane, of whole and of odd digits of 15 and 30 bits, and around one block.
LENGTHS = [1, 2, 3, 4, 15, 30, 60, 61, _lanes.BLOCK - 1, _lanes.BLOCK, _lanes.BLOCK + 1]
SMALL_INTS = 256


class Traced(int):
    """An int that notes the operation and the length of each result that came from a traced one."""

    steps: list[tuple[str, int]]
    smallest: int

    @classmethod
    def from_bytes(cls, *arguments):
        return cls.note("from_bytes", int.from_bytes(*arguments))

    @classmethod
    def note(cls, name, result):
        cls.steps.append((name, result.bit_length()))
        cls.smallest = min(cls.smallest, result)
        return cls(result)


def traced(name):
    plain = getattr(int, name)
    return lambda self, other: Traced.note(name, plain(self, other))


for operator in ["and", "or", "xor", "lshift", "rshift", "mul"]:
    setattr(Traced, f"__{operator}__", traced(f"__{operator}__"))
    setattr(Traced, f"__r{operator}__", traced(f"__r{operator}__"))


@pytest.fixture
def trace(monkeypatch):
    """Run the kernel on traced integers; give all steps with their lengths, and the smallest integer there was."""
    monkeypatch.setattr(_lanes, "int", Traced, raising=False)

    def run(function, *arguments):
        _lanes._masks.cache_clear()
        Traced.steps, Traced.smallest = [], 1 << 64
        function(*arguments)
        return Traced.steps, Traced.smallest

    yield run
    _lanes._masks.cache_clear()


def secrets_of(length):
    half = length // 2
    return [
        bytes(length),
        b"\x01" * length,
        b"\x80" * length,
        b"\xff" * length,
        bytes(half) + b"\xff" * (length - half),
        b"\xff" * half + bytes(length - half),
        random.Random(length).randbytes(length),
    ]


def combine(matrix, secret):
    def run():
        rows = [secret, secret[::-1], secret]
        _lanes.combine(0x11B, matrix, rows, [bytearray(len(secret)) for _ in matrix])

    return run


@pytest.mark.parametrize("length", LENGTHS)
@pytest.mark.parametrize("matrix", [[b"\x01\x02\x04", b"\x01\x03\x05", b"\x01\x80\xff"], [b"\x53\xca\x01"]])
def test_combine_takes_the_same_steps_for_every_secret(trace, matrix, length):
    seen = [trace(combine(matrix, secret)) for secret in secrets_of(length)]
    steps, _ = seen[0]
    assert len(steps) > 20  # It was traced.
    assert all(others == steps for others, _ in seen)
    assert min(smallest for _, smallest in seen) > SMALL_INTS


@pytest.mark.parametrize("height", [1, 16])
@pytest.mark.parametrize("length", [1, 2, 3, 16, 17, 64, 80, 2047, 2048, 2049])
def test_project_takes_the_same_steps_for_every_secret(trace, height, length):
    matrix = random.Random(1).randbytes(length * height)
    seen = [trace(_lanes.project, 0x11B, matrix, secret, bytearray(height)) for secret in secrets_of(length)]
    steps, _ = seen[0]
    assert len(steps) > 80
    assert all(others == steps for others, _ in seen)


@pytest.mark.parametrize("guard", ["TERM", "DOUBLED", "TOTAL"])
@pytest.mark.parametrize("operation", ["combine", "recover", "project"])
def test_a_missing_guard_would_be_seen(trace, monkeypatch, operation, guard):
    # The check of the check. TERM guards recovery and projection, DOUBLED everything, TOTAL splitting and projection.
    monkeypatch.setattr(_lanes, guard, bytes(2))

    def steps(secret):
        if operation == "project":
            return trace(_lanes.project, 0x11B, b"\xff" * len(secret), secret, bytearray(1))[0]
        return trace(combine([b"\x01\x02\x04"] * 3 if operation == "combine" else [b"\x53\xca\x01"], secret))[0]

    unused = (guard, operation) in [("TERM", "combine"), ("TOTAL", "recover")]
    # The sums of ``project`` need TOTAL from the second block on.
    one, other = bytes(2 * _lanes.BLOCK), bytes(_lanes.BLOCK) + b"\x0f" * _lanes.BLOCK
    assert (steps(one) == steps(other)) == unused


def test_doubling_keeps_its_guard_for_every_modulus(all_moduli):
    for modulus in all_moduli:
        low, top, m = _lanes._masks(modulus, 4)
        for above in [0x00, 0x01, 0x02, 0x03]:
            value = int.from_bytes(bytes([above, 0xFF]) + b"\x00\x80\xff\x7f", "big")
            assert _lanes._double(value, low, top, m) >> 32 == int.from_bytes(_lanes.DOUBLED, "big")
            assert (value & low) >> 32 > 0
            assert (value & top) >> 32 > 0


@pytest.mark.parametrize("columns", [1, 2, 4, 8, 1024])
@pytest.mark.parametrize("height", [1, 3, 16])
def test_fold_adds_up_the_columns(columns, height):
    generator = random.Random(columns)
    groups = [generator.randbytes(height) for _ in range(columns)]
    expected = 0
    for group in groups:
        expected ^= int.from_bytes(group, "big")
    for guard in [b"\x02\xff", b"\x03\xff"]:
        folded = _lanes._fold(int.from_bytes(guard + b"".join(groups), "big"), columns, height)
        assert folded & (1 << 8 * height) - 1 == expected
        assert folded >> 8 * height > 0
