"""The native kernel by itself: every processor path that runs here, against shift and add (FIPS 197, section 4.2).

``test_kernels.py`` compares the path in use with a reference library; here all paths are taken in turn, at the lengths
where registers, tiles, blocks and the way past the cache begin and end, and the binding is tried at its edges.
"""

from __future__ import annotations

import array
import os
import random
import sys
import threading
import time
from concurrent.futures import ThreadPoolExecutor
from functools import cache
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import product

if os.environ.get("SHARES_KERNEL") == "portable":
    pytest.skip("SHARES_KERNEL=portable: the native kernel must not be loaded", allow_module_level=True)
if os.environ.get("SHARES_KERNEL") != "native":
    pytest.importorskip("shares.field._kernel", reason="the native kernel is not built here", exc_type=ImportError)
from shares.field import _kernel

PATHS = _kernel.paths()
ALL = bytes(range(256))
# As _kernel.c has them: rows of output and of input in a tile, bytes in a block, bytes of output that bypass the cache.
WIDTH, DEPTH, BLOCK, STREAM_FROM = 5, 32, 16384, 16 << 20


@cache
def products(modulus):
    """All products, by shift and add: line a holds a * 0, a * 1, ..., a * 255."""
    return [bytes(product(a, b, modulus) for b in range(256)) for a in range(256)]


def by_reference(modulus, matrix, rows):
    """Work out each line from tables of products, with big integers for the sums."""
    result = []
    for line in matrix:
        total = 0
        for scalar, row in zip(line, rows, strict=True):
            total ^= int.from_bytes(bytes(row).translate(products(modulus)[scalar]), "big")
        result.append(total.to_bytes(len(rows[0]), "big"))
    return result


def views(generator, count, length, *, apart):
    """Rows of made-up bytes, each ``apart`` further from an aligned address than the one before."""
    room = [bytearray(generator.randbytes(length + 64)) for _ in range(count)]
    return [memoryview(block)[i * apart % 64 :][:length] for i, block in enumerate(room)]


def check(path, shape, length, *, modulus=0x11B, seed=0, apart=7, out_apart=11):
    """Compare one combination with the reference. What is in the outs before must not matter."""
    outs, ins = shape
    generator = random.Random(f"{shape} {length} {seed}")
    matrix = [generator.randbytes(ins) for _ in range(outs)]
    rows = views(generator, ins, length, apart=apart)
    out = views(generator, outs, length, apart=out_apart)
    _kernel.combine(modulus, matrix, rows, out, path=path)
    # Not compared as lists: pytest would print megabytes.
    expected = by_reference(modulus, matrix, rows)
    assert all(line == wanted for line, wanted in zip(out, expected, strict=True))


@pytest.fixture(scope="session", params=PATHS)
def path(request):
    return request.param


def test_the_edges_are_those_of_the_source():
    source = (Path(__file__).parents[2] / "shares" / "field" / "_kernel.c").read_text()
    for line in [f"WIDTH {WIDTH}", f"DEPTH {DEPTH}", f"BLOCK ((size_t){BLOCK})", "STREAM_FROM ((size_t)16 << 20)"]:
        assert f"#define {line}\n" in source


class TestPaths:
    def test_the_fastest_is_taken(self):
        assert _kernel.default_path() == PATHS[0]
        order = ["gfni", "avx2", "ssse3", "neon", "lanes64"]
        assert list(PATHS) == [name for name in order if name in PATHS]
        assert "lanes64" in PATHS

    @pytest.mark.skipif(not Path("/proc/cpuinfo").exists(), reason="no /proc/cpuinfo to compare with")
    def test_the_system_names_the_same_instructions(self):
        """The flags that the Linux kernel prints."""
        lines = Path("/proc/cpuinfo").read_text().splitlines()
        flags = set(next(line for line in lines if line.startswith(("flags", "Features"))).split())
        needs = {"gfni": {"avx2", "gfni"}, "avx2": {"avx2"}, "ssse3": {"ssse3"}, "neon": {"asimd"}, "lanes64": set()}
        assert set(PATHS) == {name for name, wanted in needs.items() if wanted <= flags}

    @pytest.mark.parametrize("name", ["", "avx", "avx22", "AVX2", "integers"])
    def test_an_unknown_path_is_refused(self, name):
        out = bytearray(b"\xa5")
        with pytest.raises(ValueError, match="unknown path"):
            _kernel.combine(0x11B, [b"\x01"], [b"\x01"], [out], path=name)
        assert out == b"\xa5"

    def test_a_path_that_does_not_run_here_is_refused(self):
        absent = "neon" if "ssse3" in PATHS else "avx2"
        with pytest.raises(ValueError, match="does not have that path"):
            _kernel.combine(0x11B, [b"\x01"], [b"\x01"], [bytearray(1)], path=absent)


class TestCombine:
    def test_all_products_of_all_fields(self, path, all_moduli):
        for modulus in all_moduli:
            for a, expected in enumerate(products(modulus)):
                out = bytearray(b"\xa5" * 256)
                _kernel.combine(modulus, [bytes([a])], [ALL], [out], path=path)
                assert out == expected

    @pytest.mark.parametrize("length", [*range(1, 67), 95, 96, 127, 128, 129, 191, 192, 193, 4096 + 5])
    def test_every_length_class(self, path, length):
        check(path, (3, 2), length)
        check(path, (1, 3), length, apart=0, out_apart=0)

    @pytest.mark.parametrize("outs", [*range(1, 2 * WIDTH + 3), 128, 255])
    @pytest.mark.parametrize("ins", [1, 2, DEPTH - 1, DEPTH, DEPTH + 1, 2 * DEPTH + 1])
    def test_every_tile(self, path, outs, ins):
        check(path, (outs, ins), 77)

    @pytest.mark.parametrize("length", [BLOCK - 1, BLOCK, BLOCK + 1, 3 * BLOCK + 77])
    @pytest.mark.parametrize("shape", [(WIDTH, 2), (WIDTH + 1, 2), (2, DEPTH + 1)])
    def test_every_block(self, path, shape, length):
        check(path, shape, length)

    @pytest.mark.parametrize("apart", [0, 1, 16, 64])
    @pytest.mark.parametrize("below", [1, 0])
    def test_past_the_cache(self, path, apart, below):
        check(path, (2, 1), STREAM_FROM // 2 - below, out_apart=apart)
        check(path, (6, 2), STREAM_FROM // 6 - below + 1, out_apart=apart)

    @given(data=st.data())
    def test_any_shape(self, path, data):
        shape = data.draw(st.integers(1, 12)), data.draw(st.integers(1, 40))
        length = data.draw(st.integers(1, 300))
        apart = data.draw(st.integers(0, 63)), data.draw(st.integers(0, 63))
        seed = data.draw(st.integers(0, 1 << 30))
        modulus = data.draw(st.sampled_from([0x11B, 0x11D, 0x1F9]))
        check(path, shape, length, modulus=modulus, seed=seed, apart=apart[0], out_apart=apart[1])

    @pytest.mark.parametrize("ones", range(4))
    def test_factors_of_one_come_first(self, path, ones):
        """Columns of ones take another way through the tile; one that is not quite of ones must not."""
        generator = random.Random(ones)
        rows = [generator.randbytes(100) for _ in range(3)]
        for spoiled in (None, 0, 1, 2):
            matrix = [bytearray(b"\x01" * ones + generator.randbytes(3 - ones)) for _ in range(3)]
            if spoiled is not None:
                matrix[2][spoiled] ^= 0x80
            out = [bytearray(b"\xa5" * 100) for _ in matrix]
            _kernel.combine(0x11B, matrix, rows, out, path=path)
            assert out == by_reference(0x11B, matrix, rows)


class TestProject:
    @pytest.mark.parametrize("length", [*range(1, 18), 80, 4096 + 5, 65600])
    @pytest.mark.parametrize("height", [1, 2, 16])
    def test_every_length_class(self, length, height):
        generator = random.Random(length)
        matrix, row, out = (views(generator, 1, n, apart=0)[0][0:] for n in (length * height, length, height))
        for modulus in (0x11B, 0x1F9):
            _kernel.project(modulus, matrix, row, out)
            table = products(modulus)
            for i in range(height):
                total = 0
                for a, b in zip(matrix[i * length : (i + 1) * length], row, strict=True):
                    total ^= table[a][b]
                assert out[i] == total

    def test_all_products_of_all_fields(self, all_moduli):
        for modulus in all_moduli:
            out = bytearray(256)
            for b in range(256):
                _kernel.project(modulus, ALL, bytes([b]), out)
                assert out == products(modulus)[b]


class TestBinding:
    @pytest.mark.parametrize("wrong", [None, 3, "text", [1, 2, 3], object()])
    def test_what_is_no_buffer(self, wrong):
        good = b"123"
        for arguments in [
            ([wrong], [good], [bytearray(3)]),
            ([b"\x01"], [wrong], [bytearray(3)]),
            ([b"\x01"], [good], [wrong]),
        ]:
            with pytest.raises(TypeError):
                _kernel.combine(0x11B, *arguments)
        for arguments in [(wrong, good, bytearray(1)), (good, wrong, bytearray(1)), (good, good, wrong)]:
            with pytest.raises(TypeError):
                _kernel.project(0x11B, *arguments)

    def test_what_is_no_sequence(self):
        for position in range(3):
            arguments = [[b"\x01"], [b"1"], [bytearray(1)]]
            arguments[position] = 3
            with pytest.raises(TypeError):
                _kernel.combine(0x11B, *arguments)

    def test_a_view_with_gaps_is_refused(self):
        gaps = memoryview(bytearray(6))[::2]
        with pytest.raises(ValueError, match="contiguous"):
            _kernel.combine(0x11B, [b"\x01"], [gaps], [bytearray(3)])
        with pytest.raises(ValueError, match="contiguous"):
            _kernel.combine(0x11B, [b"\x01"], [b"123"], [gaps])
        with pytest.raises(ValueError, match="contiguous"):
            _kernel.project(0x11B, b"123", gaps, bytearray(1))

    def test_lengths_are_in_bytes(self):
        row, out = array.array("I", [1, 2, 3]), bytearray(12)
        _kernel.combine(0x11B, [b"\x02"], [row], [out])
        assert out == by_reference(0x11B, [b"\x02"], [row.tobytes()])[0]

    @pytest.mark.parametrize("fault", ["none", "shape", "overlap", "path", "modulus", "readonly"])
    def test_every_buffer_is_given_back(self, fault):
        """A bytearray that is still lent out cannot grow, and an object that is still held counts one more."""
        rows, out = [bytearray(b"123"), bytearray(b"456")], [bytearray(3), bytearray(3)]
        matrix = [bytes([1, 2]), bytes([3, 4])]
        arguments = {"modulus": 0x11B, "matrix": matrix, "rows": rows, "out": out, "path": None}
        arguments |= {
            "none": {},
            "shape": {"rows": [rows[0], b"45"]},
            "overlap": {"out": [out[0], rows[1]]},
            "path": {"path": "none such"},
            "modulus": {"modulus": 0x1B},
            "readonly": {"out": [out[0], b"456"]},
        }[fault]
        before = [sys.getrefcount(thing) for thing in (*rows, *out, *matrix)]
        for _ in range(3):
            try:
                path = arguments["path"]
                _kernel.combine(*(arguments[name] for name in ("modulus", "matrix", "rows", "out")), path=path)
                refused = False
            except ValueError:
                refused = True
            assert refused == (fault != "none")
        assert [sys.getrefcount(thing) for thing in (*rows, *out, *matrix)] == before
        for thing in (*rows, *out):
            thing.append(0)

    def test_projection_gives_every_buffer_back(self):
        matrix, row, out = bytearray(b"123"), bytearray(b"456"), bytearray(1)
        _kernel.project(0x11B, matrix, row, out)
        for refused in [(matrix, row, row), (matrix, row[:2], out), (matrix, row, b"1")]:
            with pytest.raises(ValueError, match=r"."):
                _kernel.project(0x11B, *refused)
        for thing in (matrix, row, out):
            thing.append(0)


class TestThreads:
    def test_others_run_meanwhile(self):
        """One long call on the slowest path, about a second: this thread must get its turn before it ends."""
        row, out = bytes(1 << 20), [bytearray(1 << 20) for _ in range(5)]
        started, ended = threading.Event(), threading.Event()

        def work():
            started.set()
            _kernel.combine(0x11B, [b"\x03" * 200] * 5, [row] * 200, out, path="lanes64")
            ended.set()

        thread = threading.Thread(target=work)
        thread.start()
        started.wait()
        time.sleep(0.02)
        meanwhile = not ended.is_set()
        thread.join()
        assert meanwhile

    def test_many_at_once_are_right(self, path):
        with ThreadPoolExecutor(4) as threads:
            for done in [threads.submit(check, path, (5, 3), 30000 + n, seed=n) for n in range(20)]:
                done.result()
