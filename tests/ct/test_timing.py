"""Evidence by the clock, not proof: does the time of an operation tell a fixed secret from random ones?

Source: O. Reparaz, J. Balasch, I. Verbauwhede, "Dude, is my code constant time?", DATE 2017: two classes of input in
random order, the slow tail cropped, Welch's t-test (B. L. Welch, Biometrika 34, 1947). An absolute t above 10 fails;
between 4.5 and 10 it is measured again.

A run is void, and fails as such, unless on the same machine at the same time a comparison that stops at the first
difference is told above 10, and two classes of the same kind are not told, below 4.5.

    pytest -m stat tests/ct/test_timing.py

It never gates anything: a busy machine can fail it, and a small leak can pass it.
"""

from __future__ import annotations

import gc
import math
import os
import random
import statistics
import time

import pytest

from shares.errors import KernelUnavailableError
from shares.field import kernel

pytestmark = pytest.mark.stat

LENGTH = 1024
RUNS = 20_000
KEPT = 0.8
LEAK, CLEAR, TRIES = 10, 4.5, 4
SCALARS = [bytes([1, x, x * x]) for x in range(1, 6)]
FIXED = {"zeros": b"\x00", "ones": b"\xff", "top bits": b"\x80"}


def operations():
    """Each operation as a function of one row of secret bytes."""
    out, check = [bytearray(LENGTH) for _ in SCALARS], bytearray(16)
    public = random.Random(16).randbytes(16 * LENGTH)
    portable = kernel("portable")
    found = {
        "combine integers": lambda row: portable.combine(0x11B, SCALARS, [row] * 3, out),
        "project integers": lambda row: portable.project(0x11B, public, row, check),
    }
    if os.environ.get("SHARES_KERNEL") != "portable":
        try:
            native = kernel("native")
        except KernelUnavailableError:
            return found
        from shares.field import _kernel

        found["project native"] = lambda row: native.project(0x11B, public, row, check)
        for path in _kernel.paths():
            found[f"combine {path}"] = lambda row, path=path: _kernel.combine(0x11B, SCALARS, [row] * 3, out, path=path)
    return found


OPERATIONS = operations()


def welch(one, two):
    """Give Welch's t of two samples, cropped where the slowest fifth of both together begins."""
    limit = statistics.quantiles(one + two, n=100)[round(100 * KEPT) - 1]
    one, two = ([t for t in sample if t <= limit] for sample in (one, two))
    spread = statistics.variance(one) / len(one) + statistics.variance(two) / len(two)
    return (statistics.fmean(one) - statistics.fmean(two)) / math.sqrt(spread)


def tell_apart(operation, fixed):
    """Time the operation on fixed and on random rows; None for a fixed row makes both classes random.

    Every row is made anew, and copied into the one buffer that the operation reads: where it lies, and what is in the
    cache, is the same for both classes.
    """
    generator = random.Random()
    row = bytearray(LENGTH)
    inputs = []
    for _ in range(RUNS):
        is_fixed = generator.random() < 0.5
        made_up = generator.randbytes(LENGTH)
        inputs.append((is_fixed, bytes(bytearray(fixed * LENGTH)) if is_fixed and fixed else made_up))
    times = {True: [], False: []}
    gc.collect()
    gc.disable()
    try:
        for is_fixed, secret in inputs:
            row[:] = secret
            start = time.perf_counter_ns()
            operation(row)
            times[is_fixed].append(time.perf_counter_ns() - start)
    finally:
        gc.enable()
    return welch(times[True], times[False])


@pytest.fixture(scope="module")
def controls():
    """Void the run unless a leak is seen here and now, and nothing where there is nothing."""
    zeros = bytes(LENGTH)
    leaky = abs(tell_apart(lambda row: row == zeros, b"\x00"))
    same = abs(tell_apart(lambda row: row == zeros, None))
    if not (leaky > LEAK and same < CLEAR):
        pytest.fail(f"void: the leaky control gives {leaky:.1f}, the same class {same:.1f}; the machine is too busy")
    return f"controls: leaky {leaky:.1f}, same class {same:.1f}"


@pytest.mark.parametrize("fixed", FIXED)
@pytest.mark.parametrize("name", OPERATIONS)
def test_time_tells_nothing(controls, capsys, name, fixed):
    tried = []
    while not tried or (CLEAR <= abs(tried[-1]) <= LEAK and len(tried) < TRIES):
        tried.append(tell_apart(OPERATIONS[name], FIXED[fixed]))
    with capsys.disabled():
        print(f"\n{name}, {fixed}: t = {', '.join(f'{t:.1f}' for t in tried)} ({controls})", end="")
    assert abs(tried[-1]) < CLEAR
