"""The secret holder: what it hides, where its bytes lie, and that they are gone afterwards.

What the kernel really did is read from the kernel (/proc/self/smaps, prctl, getrlimit), not from the module.
"""

from __future__ import annotations

import copy
import ctypes
import gc
import json
import mmap
import os
import pickle
import subprocess
import sys
import textwrap
import traceback
import warnings
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares import memory
from shares.errors import ParameterError
from shares.memory import Secret

CANARY = b"canary-of-the-north-pier"
UNPRIVILEGED = 65534


def content(secret: Secret) -> bytes:
    with secret.view() as view:
        return bytes(view)


def in_child(work: Callable[[], object]) -> str:
    """Run work in a forked child and return its result as text; the child fails if the work does."""
    reader, writer = os.pipe()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        child = os.fork()
    if child == 0:
        status = 1
        try:
            os.write(writer, str(work()).encode())
            status = 0
        finally:
            os._exit(status)
    os.close(writer)
    with os.fdopen(reader, "rb") as stream:
        answer = stream.read().decode()
    assert os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]) == 0
    return answer


def run_script(script: str, *options: str) -> str:
    """Run a program in a fresh interpreter and return what it prints; it must succeed and complain of nothing."""
    command = [sys.executable, *options, "-c", textwrap.dedent(script)]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60, check=False)
    assert done.stderr == ""
    assert done.returncode == 0
    return done.stdout.strip()


# What it holds.


# Drawing.


def test_what_is_drawn_is_fresh() -> None:
    drawn = [Secret.drawn(32) for _ in range(100)]
    assert len({content(secret) for secret in drawn}) == 100
    assert {len(secret) for secret in drawn} == {32}


def test_every_byte_is_drawn() -> None:
    """Each place takes both values of each bit in 64 draws, but for a chance of 2^-51."""
    ones, zeros = bytearray(256), bytearray(256)
    for _ in range(64):
        with Secret.drawn(256) as secret:
            for i, byte in enumerate(content(secret)):
                ones[i] |= byte
                zeros[i] |= byte ^ 255
    assert ones == zeros == b"\xff" * 256


@pytest.mark.parametrize("length", [0, 1, 256])
def test_as_many_bytes_are_drawn_as_asked_for(length: int) -> None:
    assert len(content(Secret.drawn(length))) == length


@pytest.mark.parametrize("length", [-1, 257])
def test_no_other_number_of_bytes_is_drawn(length: int) -> None:
    with pytest.raises(ParameterError, match="0 to 256"):
        Secret.drawn(length)


def test_a_system_without_random_bytes_is_an_error(monkeypatch: pytest.MonkeyPatch) -> None:
    """Never zeros for a key."""
    for answer in (-1, 0, 31):

        class Poor:
            @staticmethod
            def getrandom(*_: object, answer: int = answer) -> int:
                return answer

        with monkeypatch.context() as patch:
            patch.setattr(memory, "_libc", lambda: Poor)
            patch.setattr(memory, "_lock", lambda mapping: None)
            with pytest.raises(OSError, match="random"):
                Secret.drawn(32)


@given(st.binary(max_size=9000))
def test_bytes_come_back(data: bytes) -> None:
    for given_as in (data, bytearray(data), memoryview(data)):
        with Secret.of(given_as) as secret:
            assert len(secret) == len(data)
            assert content(secret) == data


@pytest.mark.parametrize("length", [0, 1, 32, mmap.PAGESIZE - 1, mmap.PAGESIZE, mmap.PAGESIZE + 1, 65540])
def test_a_new_secret_is_zeros_of_exactly_its_length(length: int) -> None:
    with Secret(length) as secret, secret.view() as view:
        assert view.nbytes == len(view) == length
        assert not view.readonly
        assert bytes(view) == bytes(length)


def test_views_write_through() -> None:
    with Secret(3) as secret:
        with secret.view() as view:
            view[:] = b"abc"
        assert content(secret) == b"abc"


def test_the_source_is_copied_not_kept() -> None:
    source = bytearray(b"abc")
    with Secret.of(source) as secret:
        source[:] = b"xyz"
        source += b"and it is free to be resized"
        assert content(secret) == b"abc"


def test_wide_items_are_taken_as_octets() -> None:
    words = memoryview(bytearray(b"12345678")).cast("I")
    with Secret.of(words) as secret:
        assert content(secret) == b"12345678"


def test_a_negative_length_is_refused() -> None:
    with pytest.raises(ParameterError):
        Secret(-1)


def test_a_thousand_secrets_live_side_by_side() -> None:
    before = len(memory._open)
    many = [Secret.of(number.to_bytes(2, "big")) for number in range(1000)]
    assert all(content(secret) == number.to_bytes(2, "big") for number, secret in enumerate(many))
    for secret in many:
        secret.close()
    assert len(memory._open) == before


# What it shows.


def test_its_text_is_fixed() -> None:
    with Secret.of(CANARY) as long, Secret(0) as short:
        assert repr(long) == str(long) == repr(short) == "Secret(<hidden>)"
        assert "%s" % long == repr([short])[1:-1]  # noqa: UP031 - the older way of formatting is meant.


@pytest.mark.parametrize(
    "use",
    [
        copy.copy,
        copy.deepcopy,
        *(lambda secret, protocol=protocol: pickle.dumps(secret, protocol) for protocol in range(6)),
        format,
        lambda secret: f"{secret}",
        "{}".format,
        "{:>10}".format,
        hash,
        lambda secret: {secret},
        lambda secret: {secret: 1},
        iter,
        list,
        bytes,
        bytearray,
        memoryview,
        int,
        float,
        json.dumps,
        lambda secret: secret[0],
        lambda secret: secret[:],
        lambda secret: 99 in secret,
        lambda secret: secret + secret,
        lambda secret: secret < secret,
        lambda secret: b"".join([secret]),
        reversed,
    ],
)
def test_it_refuses_every_way_out_but_views(use: Callable[[object], object]) -> None:
    with Secret.of(CANARY) as secret:
        with pytest.raises(TypeError) as caught:
            use(secret)
        shown = "".join(traceback.TracebackException.from_exception(caught.value, capture_locals=True).format())
        absent = CANARY.decode() not in shown and CANARY.hex() not in shown
        assert absent


def test_it_has_no_attributes_to_leak_from() -> None:
    with Secret.of(CANARY) as secret:
        assert not hasattr(secret, "__dict__")
        with pytest.raises(AttributeError):
            secret.note = "x"  # type: ignore[attr-defined]
        held = [value for value in gc.get_referents(secret) if not isinstance(value, type)]
        assert all(isinstance(value, int) for value in held)


def test_tracebacks_with_locals_show_nothing() -> None:
    def fail(secret: Secret) -> None:
        with secret.view() as view:
            view[len(view)] = 0

    with Secret.of(CANARY) as secret:
        with pytest.raises(IndexError) as caught:
            fail(secret)
        shown = "".join(traceback.TracebackException.from_exception(caught.value, capture_locals=True).format())
        absent = CANARY.decode() not in shown
        assert absent
        assert "secret = Secret(<hidden>)" in shown


# Equality.


@given(st.binary(max_size=40), st.binary(max_size=40))
def test_equality_is_that_of_the_bytes(left: bytes, right: bytes) -> None:
    with Secret.of(left) as one, Secret.of(right) as other, Secret.of(left) as same:
        assert (one == other) is (left == right)
        assert (one != other) is (left != right)
        assert one == same


@given(st.binary(min_size=1, max_size=40), st.data())
def test_each_bit_counts(data: bytes, draw: st.DataObject) -> None:
    at, bit = draw.draw(st.integers(0, len(data) - 1)), draw.draw(st.integers(0, 7))
    other = bytearray(data)
    other[at] ^= 1 << bit
    with Secret.of(data) as one, Secret.of(other) as two:
        assert one != two


def test_comparing_takes_the_constant_time_way(monkeypatch: pytest.MonkeyPatch) -> None:
    # Source: hmac.compare_digest of the standard library, "designed to prevent timing analysis".
    asked: list[tuple[int, int]] = []
    monkeypatch.setattr("hmac.compare_digest", lambda one, two: bool(asked.append((len(one), len(two)))))
    with Secret.of(b"abc") as one, Secret.of(b"abc") as two:
        assert one != two
    assert asked == [(3, 3)]


def test_a_secret_equals_nothing_else() -> None:
    with Secret.of(b"abc") as secret:
        assert secret != b"abc"
        assert secret != [97, 98, 99]
        assert secret != 3


# Wiping.


@pytest.fixture
def last_words(monkeypatch: pytest.MonkeyPatch) -> list[bytes]:
    """What each mapping held when it was unmapped."""
    words: list[bytes] = []

    class Watched(mmap.mmap):
        def close(self) -> None:
            words.append(self[:])
            super().close()

    monkeypatch.setattr(memory.mmap, "mmap", Watched)
    return words


def test_closing_wipes(last_words: list[bytes]) -> None:
    secret = Secret.of(CANARY)
    secret.close()
    assert last_words == [bytes(len(CANARY))]
    secret.close()
    assert len(last_words) == 1


def test_the_end_of_a_block_wipes_also_after_an_error(last_words: list[bytes]) -> None:
    def fail() -> None:
        with Secret.of(CANARY):
            raise RuntimeError("stop")

    with pytest.raises(RuntimeError, match="stop"):
        fail()
    assert last_words == [bytes(len(CANARY))]


def test_garbage_collection_wipes(last_words: list[bytes]) -> None:
    secret = Secret.of(CANARY)
    loop: list[object] = [secret]
    loop.append(loop)
    del secret, loop
    gc.collect()
    assert last_words == [bytes(len(CANARY))]


def test_closing_wipes_under_open_views() -> None:
    secret = Secret.of(CANARY)
    view = secret.view()
    secret.close()
    gone = bytes(view) == bytes(len(CANARY))
    assert gone
    view.release()


def test_after_closing_nothing_opens() -> None:
    secret = Secret.of(CANARY)
    secret.close()
    with pytest.raises(ValueError, match="closed"):
        secret.view()
    with Secret.of(CANARY) as other, pytest.raises(ValueError, match="closed"):
        _ = secret == other
    assert len(secret) == len(CANARY)


def test_the_end_of_the_interpreter_wipes() -> None:
    script = """
        import mmap
        class Watched(mmap.mmap):
            def close(self):
                print("zeros" if self[:] == bytes(len(self)) else "bytes")
                super().close()
        mmap.mmap = Watched
        from shares.memory import Secret
        kept = Secret.of(b"still here at the end")
        class Cycle: pass
        cycle = Cycle(); cycle.self = cycle; cycle.secret = Secret.of(b"and this one too")
        {end}
    """
    for end in ("", "raise SystemExit(0)"):
        assert run_script(script.replace("{end}", end)) == "zeros\nzeros"


# Forks.


def test_a_forked_child_has_neither_the_bytes_nor_the_secret() -> None:
    with Secret.of(CANARY) as secret, secret.view() as view:

        def look() -> str:
            try:
                secret.view()
            except ValueError as error:
                return f"{error}, {bytes(view) == bytes(len(view))}"
            return "open"

        assert in_child(look) == "the secret is closed, True"
        kept = bytes(view) == CANARY
        assert kept


@pytest.mark.skipif(sys.platform != "linux", reason="MADV_WIPEONFORK is of Linux")
def test_the_kernel_itself_wipes_for_a_child() -> None:
    # The C library's fork runs no Python hook, so only the kernel can have wiped. In a process of its own: a child that
    # Python does not know of waits for ever where another thread was waiting for the interpreter.
    script = """
        import ctypes, os
        from shares.memory import Secret
        secret = Secret.of(b"not a real key")
        view = secret.view()
        child = ctypes.PyDLL(None).fork()
        if child == 0:
            os._exit(0 if bytes(view) == bytes(len(view)) else 1)
        print(os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]), bytes(view) == b"not a real key")
    """
    assert run_script(script) == "0 True"


def test_without_the_kernel_the_hook_wipes_for_a_child(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(memory, "_MADV_WIPEONFORK", 12345)
    with Secret.of(CANARY) as secret, secret.view() as view:
        assert in_child(lambda: bytes(view) == bytes(len(view))) == "True"


def test_a_child_that_ends_in_order_harms_nobody() -> None:
    script = """
        import os, sys
        from shares.memory import Secret
        kept = Secret.of(b"parent's")
        child = os.fork()
        if child == 0:
            own = Secret.of(b"child's own")
            sys.exit(0 if bytes(own.view()) == b"child's own" else 1)
        status = os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])
        print(status, bytes(kept.view()) == b"parent's")
    """
    assert run_script(script) == "0 True"


# What the kernel was told.


@pytest.mark.skipif(sys.platform != "linux", reason="/proc/self/smaps is of Linux")
@pytest.mark.parametrize("length", [1, 32, 70000])
def test_the_pages_are_locked_undumped_and_wiped_on_fork(length: int) -> None:
    # Source: proc_pid_smaps(5): lo = locked, dd = not in core dumps, wf = wiped on fork.
    if not memory.locking().works:
        pytest.skip("this system refuses to lock memory")
    with Secret(length) as secret, secret.view() as view:
        start = ctypes.addressof(ctypes.c_char.from_buffer(view))
        gc.collect()
        with open("/proc/self/smaps") as maps:
            lines = maps.read().splitlines()
    flags: set[str] = set()
    inside = False
    for line in lines:
        words = line.split()
        if not words[0].endswith(":"):
            low, high = (int(bound, 16) for bound in words[0].split("-"))
            inside = low <= start and start + length <= high
        elif inside and words[0] == "VmFlags:":
            flags.update(words[1:])
    assert {"lo", "dd", "wf"} <= flags


def drop_privileges() -> None:
    """Root may lock without limit and read anything, so what binds others is tried as another user."""
    if os.geteuid() == 0:
        os.setgroups([])
        os.setgid(UNPRIVILEGED)
        os.setuid(UNPRIVILEGED)


def test_a_refused_lock_is_reported_and_not_fatal() -> None:
    import resource

    def work() -> str:
        resource.setrlimit(resource.RLIMIT_MEMLOCK, (0, 0))
        drop_privileges()
        silent = memory.lock_refused() is None
        tried = memory.locking()
        with Secret.of(CANARY) as secret, Secret(1):
            whole = content(secret) == CANARY
        return f"{silent} {tried.works} {tried.limit} {whole} {memory.lock_refused()}"

    answer = in_child(work)
    assert answer.startswith("True False 0 True memory could not be locked (")
    assert "swap" in answer


@pytest.mark.skipif(sys.platform != "linux", reason="/proc/self/status is of Linux")
def test_a_lock_is_tried_again_after_a_refusal() -> None:
    # A large secret may be refused and a small one still be granted: each is worth the asking.
    import resource

    def work() -> str:
        resource.setrlimit(resource.RLIMIT_MEMLOCK, (2 * mmap.PAGESIZE, 2 * mmap.PAGESIZE))
        drop_privileges()
        with Secret(4 * mmap.PAGESIZE), Secret(32), open("/proc/self/status") as status:
            locked = next(line for line in status if line.startswith("VmLck"))
        return f"{memory.lock_refused() is not None} {locked.split()[1]}"

    assert in_child(work) == f"True {mmap.PAGESIZE // 1024}"


def test_granted_locks_are_no_news() -> None:
    if not memory.locking().works:
        pytest.skip("this system refuses to lock memory")

    def work() -> object:
        with Secret(32):
            return memory.lock_refused()

    assert in_child(work) == str(memory.lock_refused())


def test_the_process_gives_up_core_dumps() -> None:
    script = """
        import ctypes, resource
        resource.setrlimit(resource.RLIMIT_CORE, (0, resource.getrlimit(resource.RLIMIT_CORE)[1]))
        from shares.memory import protect_process
        dumpable = lambda: ctypes.CDLL(None).prctl(3, 0, 0, 0, 0)
        before = dumpable()
        got = protect_process()
        print(before, dumpable(), resource.getrlimit(resource.RLIMIT_CORE), got.core_limit, got.not_dumpable)
    """
    # Source: PR_GET_DUMPABLE(2const): 1 = dumpable, 0 = not; 3 is its number in linux/prctl.h.
    assert run_script(script) == "1 0 (0, 0) True True"


def test_import_loads_nothing_heavy() -> None:
    # Without site packages, since these load modules of their own before anything else runs.
    script = f"""
        import sys
        sys.path.append({str(Path(memory.__file__).parent.parent)!r})
        import shares.memory
        print({{"ctypes", "hmac", "hashlib", "pathlib", "resource"}} & set(sys.modules))
    """
    assert run_script(script, "-I", "-S") == "set()"
