"""Measure the portable kernel beside a general-purpose compiled field: ``python tests/benchmarks/portable.py``.

Prints medians and ratios; nothing is asserted. The yardstick is galois (compiled by numba, tables), given the same
work in the same run: a public matrix times rows of bytes over GF(2^8), 3-of-5 splitting and recovery of 3. The two
take turns, so that a change in the processor's speed meets both. Aims: 2 times galois at 32 bytes and 4 KiB, 1.5 times
at 1 MiB.
"""

from __future__ import annotations

import argparse
import os
import platform
import statistics
import time

from shares.field import kernel
from shares.field.gf256 import Field

SIZES = {"32 B": 32, "4 KiB": 4096, "1 MiB": 1 << 20}
CHECK_LENGTHS = {"80 B": 80, "4 KiB": 4096, "64 KiB": 1 << 16}


def in_turns(first, second, *, seconds):
    """Give the median times of two functions that are called alternately."""
    first(), second()
    times = [], []
    end = time.perf_counter() + seconds
    while time.perf_counter() < end or len(times[0]) < 5:
        for function, measured in zip([first, second], times, strict=True):
            start = time.perf_counter()
            function()
            measured.append(time.perf_counter() - start)
    return map(statistics.median, times)


def report(name, size, ours, theirs, aim):
    rate = size / ours / 1e6
    print(f"{name:<18}{ours * 1e6:>12.1f}{theirs * 1e6:>14.1f}{rate:>12.1f}{theirs / ours:>9.2f}  {aim}")


def main():
    parser = argparse.ArgumentParser(description="Measure the portable kernel beside galois.")
    parser.add_argument("--seconds", type=float, default=2.0, help="time for each line (default 2)")
    seconds = parser.parse_args().seconds
    # One thread for each; this must be said before numpy loads.
    for variable in ["OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "NUMBA_NUM_THREADS"]:
        os.environ[variable] = "1"
    import galois
    import numpy

    field, reference = Field(kernel=kernel("portable")), galois.GF(2**8, irreducible_poly=galois.Poly.Int(0x11B))
    split = [field.powers(x, 3) for x in range(1, 6)]
    recover = [field.interpolation_weights([1, 3, 4])]
    print(f"{platform.machine()}, Python {platform.python_version()}, galois {galois.__version__}, medians")
    print(f"{'':<18}{'portable us':>12}{'galois us':>14}{'MB/s':>12}{'ratio':>9}  aim")
    for label, size in SIZES.items():
        rows = [os.urandom(size) for _ in range(3)]
        elements = reference(numpy.frombuffer(b"".join(rows), numpy.uint8).reshape(3, size))
        for name, matrix in [("split 3-of-5", split), ("recover 3", recover)]:
            out = [bytearray(size) for _ in matrix]
            scalars = reference([list(line) for line in matrix])
            ours, theirs = in_turns(
                lambda matrix=matrix, rows=rows, out=out: field.combine(matrix, rows, out),
                lambda scalars=scalars, elements=elements: scalars @ elements,
                seconds=seconds,
            )
            # What is measured must be the same work.
            if b"".join(out) != numpy.asarray(scalars @ elements, dtype=numpy.uint8).tobytes():
                raise SystemExit("the two do not agree")
            report(f"{name}, {label}", size, ours, theirs, "1.5" if size == 1 << 20 else "2")
    for label, length in CHECK_LENGTHS.items():
        row, matrix, out = os.urandom(length), os.urandom(16 * length), bytearray(16)
        scalars = reference(numpy.frombuffer(matrix, numpy.uint8).reshape(16, length))
        elements = reference(numpy.frombuffer(row, numpy.uint8))
        ours, theirs = in_turns(
            lambda row=row, matrix=matrix, out=out: field.project(matrix, row, out),
            lambda scalars=scalars, elements=elements: scalars @ elements,
            seconds=seconds,
        )
        if bytes(out) != numpy.asarray(scalars @ elements, dtype=numpy.uint8).tobytes():
            raise SystemExit("the two do not agree")
        report(f"check, {label}", length, ours, theirs, "-")


if __name__ == "__main__":
    main()
