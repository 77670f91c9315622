"""Measure the native kernel beside copying: ``python tests/benchmarks/kernel.py``.

Prints medians and ratios; nothing is asserted. Coefficients are given, everything lies in memory, one thread. The
yardstick of splitting k-of-n is to copy the secret n times, that of recovery from k to copy k rows, both as slices of a
memoryview, so by the C library. The two take turns, so that a change in the processor's speed meets both, and what is
read is the thread's processor time, so that other programs count less. Aims: 0.8 of the speed of copying for 3-of-5 and
for recovery of 3, at 64 MiB.
"""

from __future__ import annotations

import argparse
import platform
import random
import statistics
import time
from functools import partial
from pathlib import Path

from shares.field import kernel
from shares.field.gf256 import Field

MODULUS = 0x11B
# Rows are shortened where all of them together would take more memory than this.
MEMORY = 1 << 30
AIMS = {"split 3-of-5": "0.8", "recover from 3": "0.8"}
SHAPES = [(2, 3), (3, 5), (5, 9), (10, 20), (64, 128)]
RECOVERED = [3, 10, 64]
CHECK_LENGTHS = [80, 4096, 65600]
LINE = "{:<22}{:>10}{:>12}{:>12}{:>10}{:>8}  {}"


def processor():
    lines = Path("/proc/cpuinfo").read_text().splitlines() if Path("/proc/cpuinfo").exists() else []
    names = [line.split(":")[1].strip() for line in lines if line.startswith("model name")]
    return names[0] if names else platform.machine()


def in_turns(first, second, *, seconds):
    """Give the median times of two functions that are called alternately, short ones many times in a row."""
    first(), second()  # The memory is there, and the caches are as they will be.
    start = time.perf_counter()
    first()
    calls = max(1, int(1e-4 / (time.perf_counter() - start)))
    times = [], []
    while time.perf_counter() < start + seconds or len(times[0]) < 7:
        for function, measured in zip((first, second), times, strict=True):
            before = time.thread_time()
            for _ in range(calls):
                function()
            measured.append((time.thread_time() - before) / calls)
    return map(statistics.median, times)


def made_up(count, length):
    """Rows that differ, at the price of one."""
    row = random.randbytes(length)
    return [bytearray(row[i:] + row[:i]) for i in range(count)]


def report(name, size, ours, theirs, aim):
    label = f"{size / (1 << 20):.1f} MiB" if size >= 1 << 20 else f"{size} B"
    speeds = [f"{size / seconds / 1e9:.3f}" for seconds in (ours, theirs)]
    print(LINE.format(name, label, f"{ours * 1e6:.1f}", *speeds, f"{theirs / ours:.2f}", aim))


def measure(combine, matrix, length, copied, seconds):
    """Give the median times of one combination, and of copying ``copied`` rows (numbers of inputs) into the outs."""
    rows = made_up(len(matrix[0]), length)
    outs = [bytearray(length) for _ in range(max(len(matrix), len(copied)))]
    used = outs[: len(matrix)]
    pairs = [(memoryview(out), rows[j]) for out, j in zip(outs, copied, strict=True)]

    def copy():
        for view, row in pairs:
            view[:] = row

    return in_turns(lambda: combine(MODULUS, matrix, rows, used), copy, seconds=seconds)


def combinations(field, length):
    """Give name, matrix, length of a row and rows to copy, for each line of the table."""
    for k, n in SHAPES:
        matrix = [field.powers(x, k) for x in range(1, n + 1)]
        yield f"split {k}-of-{n}", matrix, min(length, MEMORY // (k + n)), [0] * n
    for k in RECOVERED:
        matrix = [field.interpolation_weights(range(2, k + 2))]
        yield f"recover from {k}", matrix, min(length, MEMORY // (2 * k + 1)), range(k)


def main():
    parser = argparse.ArgumentParser(description="Measure the native kernel beside copying.")
    parser.add_argument("--seconds", type=float, default=4.0, help="time for each line (default 4)")
    parser.add_argument("--mebibytes", type=int, default=64, help="length of a long row (default 64)")
    options = parser.parse_args()
    native, field = kernel("native"), Field(MODULUS, kernel=kernel("portable"))
    from shares.field import _kernel

    print(f"{processor()}, Python {platform.python_version()}, path {native.path}; medians, GB/s of secret")
    print(LINE.format("", "row", "us", "ours", "copying", "ratio", "aim"))
    for length, aims in ((options.mebibytes << 20, AIMS), (96, {})):
        for name, matrix, size, copied in combinations(field, length):
            times = measure(native.combine, matrix, size, copied, options.seconds)
            report(name, size, *times, aims.get(name, "-"))
    for path in _kernel.paths():
        name, matrix, size, copied = list(combinations(field, options.mebibytes << 20))[1]
        times = measure(partial(_kernel.combine, path=path), matrix, size, copied, options.seconds)
        report(f"{name}, {path}", size, *times, "-")
    for length in CHECK_LENGTHS:
        public, row, out = random.randbytes(16 * length), random.randbytes(length), bytearray(16)
        target = memoryview(bytearray(16 * length))
        times = in_turns(
            lambda public=public, row=row, out=out: native.project(MODULUS, public, row, out),
            lambda public=public, target=target: target.__setitem__(slice(None), public),
            seconds=options.seconds,
        )
        report("check, 16 lines", length, *times, "below 10 ms" if length == max(CHECK_LENGTHS) else "-")


if __name__ == "__main__":
    main()
