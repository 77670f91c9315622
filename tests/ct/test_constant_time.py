"""The native kernel in constant time: poisoned under Valgrind, and its disassembly read where Valgrind cannot run it.

Each compiler that is here builds the kernel at each level of optimisation, for each is another program. Which path is
checked how, on x86-64:

    lanes64, ssse3, avx2   as shipped, under Valgrind, all secrets poisoned
    gfni                   Valgrind knows no GF2P8AFFINEQB: the same source with that instruction replaced by a model of
                           its published pseudo-code under Valgrind, and the shipped object by ``disassembly.py``
    neon                   only that it is right, under emulation, where the tools for it are here

What must be refused (``harness table``, ``specimens.c``) is tried beside what must pass. A tool that is missing skips
with its name, and fails where ``SHARES_REQUIRE_CT=1``.
"""

from __future__ import annotations

import os
import platform
import shutil
import signal
import subprocess
from functools import cache
from pathlib import Path

import pytest
from ct import disassembly

pytestmark = pytest.mark.ct

HERE = Path(__file__).parent
FIELD = HERE.parents[1] / "shares" / "field"
LEVELS = ["-O0", "-O1", "-O2", "-O3", "-Os"]
COMPILERS = ["gcc", "clang"]
# clang's newer debugging format is not read by the Valgrind of Debian 12.
FLAGS = ["-std=c11", "-g", "-gdwarf-4", "-Wall", "-Wextra", "-Werror"]
MODEL = ["-include", str(HERE / "gfni_model.h")]
X86 = platform.machine() in {"x86_64", "AMD64"}
only_x86 = pytest.mark.skipif(not X86, reason="a path of x86-64")


def missing(what):
    if os.environ.get("SHARES_REQUIRE_CT") == "1":
        pytest.fail(f"SHARES_REQUIRE_CT=1, and {what} is not installed")
    pytest.skip(f"{what} is not installed")


@pytest.fixture(scope="session", params=[(c, level) for c in COMPILERS for level in LEVELS], ids=" ".join)
def compiler(request):
    """Each compiler with each level. Only clang may be missing."""
    name, level = request.param
    if shutil.which(name) is None:
        if name == "clang":
            pytest.skip("clang is not installed; it is checked too where it is")
        missing(name)
    return name, level


@pytest.fixture(scope="session")
def objdump():
    if shutil.which("objdump") is None:
        missing("objdump")


@pytest.fixture(scope="session")
def compiled(tmp_path_factory):
    """Compile one source into an object, once."""

    @cache
    def compile_one(source, compiler, *options):
        target = tmp_path_factory.mktemp("object") / f"{source.stem}.o"
        subprocess.run([*compiler, *FLAGS, *options, f"-I{FIELD}", "-c", source, "-o", target], check=True)
        return target

    return compile_one


@pytest.fixture(scope="session")
def harness(compiled, tmp_path_factory):
    """Link the harness with the kernel, once."""

    @cache
    def link(compiler, *options):
        target = tmp_path_factory.mktemp("harness") / "harness"
        # The header of Valgrind comes last, so that a cross-compiler keeps its own.
        source = compiled(HERE / "harness.c", compiler, "-idirafter", "/usr/include")
        kernel = compiled(FIELD / "_kernel.c", compiler, *options)
        subprocess.run([compiler[0], source, kernel, "-o", target], check=True)
        return target

    if not Path("/usr/include/valgrind/memcheck.h").exists():
        missing("the header valgrind/memcheck.h")
    return link


def run(*command):
    return subprocess.run(command, capture_output=True, text=True, timeout=900)


def under_valgrind(*command):
    if shutil.which("valgrind") is None:
        missing("valgrind")
    return run("valgrind", "--quiet", "--error-exitcode=9", "--track-origins=yes", *command)


def runnable(program):
    """The paths that run here as shipped and that Valgrind knows."""
    return [path for path in run(program, "paths").stdout.split() if path != "gfni"]


def require_pass(result, paths):
    assert result.returncode == 0, result.stderr[-3000:]
    assert result.stdout.split("\n") == [*(f"{path}: equal, poisoned" for path in paths), ""]
    assert result.stderr == ""


class TestHarness:
    """Before anything is believed: what must be reported is, what must pass does."""

    @pytest.mark.parametrize("mode", ["table", "branch"])
    def test_reports(self, harness, compiler, mode):
        result = under_valgrind(harness(compiler), mode)
        assert result.returncode == 9
        assert "uninitialised" in result.stderr

    @pytest.mark.parametrize("mode", ["mask", "declassified"])
    def test_lets_pass(self, harness, compiler, mode):
        result = under_valgrind(harness(compiler), mode)
        assert (result.returncode, result.stderr) == (0, "")

    @pytest.mark.parametrize("mode", ["table", "branch", "mask", "declassified", "check"])
    def test_never_passes_without_valgrind(self, harness, compiler, mode):
        assert run(harness(compiler), mode, "lanes64").returncode == 3


class TestPoisoned:
    def test_as_shipped(self, harness, compiler):
        program = harness(compiler)
        paths = runnable(program)
        assert "lanes64" in paths
        require_pass(under_valgrind(program, "check", *paths), paths)

    @only_x86
    def test_gfni_as_a_model(self, harness, compiler):
        paths = runnable(harness(compiler))
        if "avx2" not in paths:
            pytest.skip("the model needs AVX2")
        paths.append("gfni")
        require_pass(under_valgrind(harness(compiler, *MODEL), "check", *paths), paths)


class TestRight:
    """The same comparisons with nothing poisoned, where Valgrind cannot go. Each large output bypasses the cache."""

    @pytest.mark.parametrize("path", ["gfni", "avx2", "ssse3", "lanes64"])
    @only_x86
    def test_on_this_processor(self, harness, path):
        result = run(harness(("gcc", "-O3")), "equal", path)
        if result.returncode == -signal.SIGILL:
            pytest.skip(f"this processor does not have the instructions of the path {path}")
        assert (result.returncode, result.stdout) == (0, f"{path}: equal\n"), result.stderr

    def test_neon_under_emulation(self, harness):
        cross, emulator = "aarch64-linux-gnu-gcc", "qemu-aarch64"
        if not (shutil.which(cross) and shutil.which(emulator)):
            pytest.skip(f"{cross} and {emulator} are not installed; NEON is checked where they are")
        result = run(emulator, "-L", "/usr/aarch64-linux-gnu", harness((cross, "-O2")), "equal", "neon", "lanes64")
        assert (result.returncode, result.stdout) == (0, "neon: equal\nlanes64: equal\n"), result.stderr


def findings_of(functions, prefix):
    """What is refused in the functions that begin so, by function."""
    return {name: disassembly.findings(code) for name, code in functions.items() if name.startswith(prefix)}


@only_x86
@pytest.mark.usefixtures("objdump")
class TestDisassembly:
    def test_refuses_what_it_must(self, compiled, compiler):
        found = findings_of(disassembly.functions(compiled(HERE / "specimens.c", compiler)), "refused_")
        assert len(found) == 15
        assert [name for name, reasons in found.items() if not reasons] == []

    def test_accepts_what_it_must(self, compiled, compiler):
        found = findings_of(disassembly.functions(compiled(HERE / "specimens.c", compiler)), "accepted_")
        assert found == {"accepted_sum": [], "accepted_branch_on_factor": []}

    def test_gfni_is_accepted(self, compiled, compiler):
        found = findings_of(disassembly.functions(compiled(FIELD / "_kernel.c", compiler)), "gfni_tile_")
        assert found == {f"gfni_tile_{width}": [] for width in range(1, 6)}

    def test_gfni_is_what_is_read(self, compiled, compiler):
        functions = disassembly.functions(compiled(FIELD / "_kernel.c", compiler))
        for width in range(1, 6):
            used = [line for line in functions[f"gfni_tile_{width}"] if line.mnemonic == "vgf2p8affineqb"]
            assert used, "the path is built without its instruction"
        users = {name for name, code in functions.items() if any("gf2p8" in line.mnemonic for line in code)}
        assert users == {f"gfni_tile_{width}" for width in range(1, 6)}

    def test_the_installed_module_is_accepted(self):
        if os.environ.get("SHARES_KERNEL") == "portable":
            pytest.skip("SHARES_KERNEL=portable: the native kernel must not be loaded")
        from shares.field import _kernel

        found = findings_of(disassembly.functions(Path(_kernel.__file__)), "gfni_tile_")
        if not found:
            pytest.skip("the installed module has no symbols")
        assert found == {f"gfni_tile_{width}": [] for width in range(1, 6)}
