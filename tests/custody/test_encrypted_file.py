"""The encrypted file opens to exactly what went in, or gives not a byte, whatever is done to it, its source or key.

Checked against: files made by tests/vectors/make/encrypted_file_v1.py, which uses the two-part interface of
`cryptography` and shares no code with the package; FORMAT.md, sec. 13.
"""

from __future__ import annotations

import contextlib
import gc
import hashlib
import itertools
import json
import os
import resource
import stat
import subprocess
import sys
import textwrap
import threading
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from vectors.make.encrypted_file_v1 import encrypted_file, made_up

from shares.custody import encrypted_file as module
from shares.custody.deliver import fed
from shares.custody.encrypted_file import check_file, digest_of, encrypt_file, open_file
from shares.documents.chunks import CHUNK, Header
from shares.errors import (
    CommandFailedError,
    DocumentError,
    ParameterError,
    SetMismatchError,
    SharesError,
    StorageError,
    VerificationError,
)
from shares.memory import Secret
from shares.streams import Write, new_file, secret_source

SET = bytes(range(16))
KEY = made_up("key", 32)
SMALL = 65_536
FULL = SMALL + 16
SECRET = made_up("secret", 3 * SMALL - 100)
FILE, DIGEST = encrypted_file(KEY, SET, SMALL, SECRET)
HEADER = 44
VECTORS = Path(__file__).resolve().parent.parent / "vectors"

Altered = Callable[[bytes], bytes]


def content(secret: Secret) -> bytes:
    with secret.view() as view:
        return bytes(view)


class Sink:
    """Takes what is written, and knows whether it was ever entered and how it was left."""

    def __init__(self) -> None:
        self.entered = False
        self.error: BaseException | None = None
        self.got = b""

    @contextlib.contextmanager
    def open(self) -> Iterator[Write]:
        self.entered = True
        try:
            yield self.write
        except BaseException as error:
            self.error = error
            raise

    def write(self, data: bytes | bytearray | memoryview) -> None:
        self.got += bytes(data)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    path = tmp_path / "archive.encrypted"
    path.write_bytes(FILE)
    return path


def refused(
    path: Path, *, key: bytes = KEY, digest: bytes = DIGEST, set_id: bytes = SET, kind: type[SharesError]
) -> SharesError:
    """See that opening and checking refuse alike, and that nothing was decrypted for anybody."""
    sink = Sink()
    with Secret.of(key) as secret:
        with pytest.raises(kind) as first:
            open_file(path, secret, digest, set_id, sink.open())
        with pytest.raises(kind) as second:
            check_file(path, secret, digest, set_id)
    assert (sink.entered, sink.got) == (False, b"")
    assert str(first.value) == str(second.value)
    assert (first.value.where, bool(first.value.hint)) in ((str(path), True), (None, True))
    assert type(first.value) is kind
    return first.value


# What goes in comes out.


def sizes(chunk: int) -> list[int]:
    return sorted(
        {n * chunk + off for n in range(4) for off in (-17, -16, -15, -1, 0, 1, 15, 16, 17)} - {0} - set(range(-20, 0))
    )


def sealed(secret: bytes, folder: Path, chunk: int) -> tuple[Path, bytes]:
    """Encrypt with the package, with the key and the size of chunks given."""
    source, target = folder / "source", folder / "target"
    source.write_bytes(secret)
    with Secret.of(KEY) as key, secret_source(source) as reader, new_file(target, secret=True) as write:
        digest = module._encrypt(reader, write, key, Header(SET, chunk), None)
    return target, digest


@pytest.mark.parametrize("size", sizes(SMALL))
def test_every_size_near_a_multiple_of_a_chunk(tmp_path: Path, size: int) -> None:
    """The file is byte for byte what the other maker makes, and opens to what went in."""
    secret = made_up("edge", size)
    target, digest = sealed(secret, tmp_path, SMALL)
    assert (target.read_bytes() == encrypted_file(KEY, SET, SMALL, secret)[0], digest) == (
        True,
        encrypted_file(KEY, SET, SMALL, secret)[1],
    )
    sink = Sink()
    with Secret.of(KEY) as key:
        assert open_file(target, key, digest, SET, sink.open()) == size
        assert check_file(target, key, digest, SET) == size
    assert sink.got == secret
    assert digest_of(target) == digest


@settings(max_examples=30)
@given(
    size=st.integers(1, 400_000), chunk=st.sampled_from([65_536, 65_537, 100_003, 1 << 20]), seed=st.binary(max_size=4)
)
def test_any_size_and_chunk(tmp_path_factory: pytest.TempPathFactory, size: int, chunk: int, seed: bytes) -> None:
    secret = hashlib.shake_256(seed).digest(size)
    target, digest = sealed(secret, tmp_path_factory.mktemp("any"), chunk)
    assert (target.read_bytes(), digest) == encrypted_file(KEY, SET, chunk, secret)
    sink = Sink()
    with Secret.of(KEY) as key:
        open_file(target, key, digest, SET, sink.open())
    assert sink.got == secret


@pytest.mark.parametrize(
    "size", [1, 65_536, CHUNK - 1, CHUNK, CHUNK + 1, 2 * CHUNK - 1, 2 * CHUNK, 2 * CHUNK + 1, 3_000_000]
)
def test_the_public_way(tmp_path: Path, size: int) -> None:
    """As `split` and `recover` go: a fresh key, a new private file, and back into a new private file."""
    secret = made_up("public", size)
    (tmp_path / "source").write_bytes(secret)
    key, digest = encrypt_file(tmp_path / "source", tmp_path / "target", SET)
    file = (tmp_path / "target").read_bytes()
    assert (file, digest) == encrypted_file(content(key), SET, CHUNK, secret)
    assert stat.S_IMODE((tmp_path / "target").stat().st_mode) == 0o600
    assert digest_of(tmp_path / "target") == digest
    opened = tmp_path / "opened"
    assert open_file(tmp_path / "target", key, digest, SET, new_file(opened, secret=True)) == size
    assert opened.read_bytes() == secret
    assert stat.S_IMODE(opened.stat().st_mode) == 0o600
    assert sorted(os.listdir(tmp_path)) == ["opened", "source", "target"]
    key.close()


@pytest.mark.parametrize(
    "test", json.loads((VECTORS / "aes_256_gcm_chunks.json").read_text())["testGroups"][0]["tests"]
)
def test_golden_samples_stay_readable(tmp_path: Path, test: dict[str, str]) -> None:
    key, set_id, digest = (bytes.fromhex(test[name]) for name in ("key", "set", "digest"))
    secret = made_up(test["comment"], int(test["length"]))
    file, _ = encrypted_file(key, set_id, int(test["chunk"]), secret)
    assert hashlib.sha256(file).hexdigest() == test["sha256"]
    assert test.get("file", file.hex()) == file.hex()
    (tmp_path / "file").write_bytes(file)
    assert digest_of(tmp_path / "file") == digest
    sink = Sink()
    with Secret.of(key) as held:
        open_file(tmp_path / "file", held, digest, set_id, sink.open())
    assert sink.got == secret


def test_a_key_is_never_used_twice(tmp_path: Path) -> None:
    (tmp_path / "source").write_bytes(b"not a real key")
    made = [encrypt_file(tmp_path / "source", tmp_path / str(i), SET) for i in range(20)]
    assert len({content(key) for key, _ in made}) == len({digest for _, digest in made}) == 20
    assert all(len(key) == 32 for key, _ in made)


@pytest.mark.parametrize("source", ["-", "/dev/fd"])
@pytest.mark.parametrize("size", [1, SMALL, CHUNK, CHUNK + 1, 2_500_000])
def test_a_pipe_has_no_length(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, source: str, size: int) -> None:
    """It comes in parts of any size, and its end is known only when it comes."""
    secret = made_up("pipe", size)
    reader, writer = os.pipe()

    def pour() -> None:
        with os.fdopen(writer, "wb", buffering=0) as pipe:
            for i in range(0, size, 30_011):
                pipe.write(secret[i : i + 30_011])

    told: list[tuple[int, int | None]] = []
    thread = threading.Thread(target=pour)
    thread.start()
    standard_input = os.dup(0)
    try:
        if source == "-":
            os.dup2(reader, 0)
        key, digest = encrypt_file(
            source if source == "-" else f"/dev/fd/{reader}",
            tmp_path / "target",
            SET,
            progress=lambda done, total: told.append((done, total)),
        )
    finally:
        os.dup2(standard_input, 0)
        os.close(standard_input)
        os.close(reader)
        thread.join()
    assert told == [(i, None) for i in range(-(-size // CHUNK))]
    assert (tmp_path / "target").read_bytes() == encrypted_file(content(key), SET, CHUNK, secret)[0]
    sink = Sink()
    open_file(tmp_path / "target", key, digest, SET, sink.open())
    assert sink.got == secret


def test_the_end_of_a_pipe_is_its_end(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A named pipe may give more after its end, when another writer comes; that is another message."""
    reader, writer = os.pipe()
    answers = [b"the whole of it", b"", b"from another writer"]

    def readv(_: int, buffers: list[memoryview]) -> int:
        answer = answers.pop(0) if answers else b""
        buffers[0][: len(answer)] = answer
        return len(answer)

    with monkeypatch.context() as patch:
        patch.setattr(os, "readv", readv)
        key, digest = encrypt_file(f"/dev/fd/{reader}", tmp_path / "target", SET)
    os.close(reader)
    os.close(writer)
    sink = Sink()
    open_file(tmp_path / "target", key, digest, SET, sink.open())
    assert sink.got == b"the whole of it"


def test_progress_counts_every_chunk_of_every_pass(tmp_path: Path, path: Path) -> None:
    told: list[tuple[int, int | None]] = []

    def tell(done: int, total: int | None) -> None:
        told.append((done, total))

    with Secret.of(KEY) as key:
        open_file(path, key, DIGEST, SET, Sink().open(), progress=tell)
        check_file(path, key, DIGEST, SET, progress=tell)
    digest_of(path, progress=tell)
    (tmp_path / "source").write_bytes(bytes(CHUNK + 1))
    encrypt_file(tmp_path / "source", tmp_path / "target", SET, progress=tell)
    assert told == [(i, total) for total in (6, 3, 3, 2) for i in range(total)]


def test_memory_does_not_grow_with_the_secret(tmp_path: Path) -> None:
    """Peak memory of a process that encrypts and opens, for a secret of 2 MiB and one of 256 MiB (a file of holes)."""
    code = textwrap.dedent("""
        import sys
        from pathlib import Path
        from shares.custody.encrypted_file import encrypt_file, open_file
        from shares.streams import new_file
        folder = Path(sys.argv[1])
        key, digest = encrypt_file(folder / "source", folder / "target", bytes(16))
        open_file(folder / "target", key, digest, bytes(16), new_file(folder / "opened", secret=True))
        # What getrusage(2) tells would be no less than the peak of the process that started this one.
        print(next(line.split()[1] for line in open("/proc/self/status") if line.startswith("VmHWM")))
    """)
    peaks = []
    for mebibytes in (2, 256):
        with open(tmp_path / "source", "wb") as source:
            source.truncate(mebibytes << 20)
        done = subprocess.run([sys.executable, "-c", code, tmp_path], capture_output=True, text=True, check=True)
        peaks.append(int(done.stdout))
        assert (tmp_path / "opened").stat().st_size == mebibytes << 20
        (tmp_path / "target").unlink()
        (tmp_path / "opened").unlink()
    assert abs(peaks[1] - peaks[0]) < 8 * 1024, peaks
    assert min(peaks) > 20 * 1024, peaks  # It is really this process that is measured, with its libraries.


# What is done to the file is seen before anything is opened.


def test_every_bit_of_a_file(tmp_path: Path) -> None:
    file, digest = encrypted_file(KEY, SET, SMALL, b"a secret of one short chunk")
    path = tmp_path / "file"
    kinds = set()
    for bit in range(8 * len(file)):
        altered = bytearray(file)
        altered[bit // 8] ^= 1 << bit % 8
        path.write_bytes(altered)
        sink = Sink()
        with Secret.of(KEY) as key, pytest.raises(SharesError) as caught:
            open_file(path, key, digest, SET, sink.open())
        assert (sink.entered, caught.value.exit_code) == (False, 4), bit
        kinds.add(type(caught.value))
        with contextlib.suppress(SharesError):
            assert digest_of(path) != digest
    assert kinds == {DocumentError, SetMismatchError, VerificationError}


def test_every_length_of_a_file(tmp_path: Path) -> None:
    """Cut short to every length, and extended by up to two tags; of zeros, and of what stood there before."""
    file, digest = encrypted_file(KEY, SET, SMALL, b"a secret of one short chunk")
    path = tmp_path / "file"
    whole = 0
    for length in range(len(file) + 33):
        path.write_bytes((file + bytes(16) + file)[:length])
        with Secret.of(KEY) as key:
            if length == len(file):
                whole += check_file(path, key, digest, SET)
                continue
            with pytest.raises((DocumentError, VerificationError)):
                check_file(path, key, digest, SET)
    assert whole == 27


OTHER, _ = encrypted_file(KEY, SET, SMALL, made_up("another secret under the same key", len(SECRET)))
FOREIGN, FOREIGN_DIGEST = encrypted_file(KEY, bytes(16), SMALL, SECRET)


def chunk_of(file: bytes, number: int) -> bytes:
    return file[HEADER + number * FULL : HEADER + (number + 1) * FULL]


def put_together(*chunks: bytes) -> bytes:
    return FILE[:HEADER] + b"".join(chunks)


ONE, TWO, LAST = (chunk_of(FILE, i) for i in range(3))
PARTS: dict[str, tuple[bytes, int]] = {
    **{
        f"order {order}": (put_together(*order_of), 1)
        for order, order_of in zip(
            itertools.permutations(range(3)), itertools.permutations((ONE, TWO, LAST)), strict=True
        )
        if order not in ((0, 1, 2), (0, 2, 1))
    },
    "last before second": (put_together(ONE, LAST, TWO), 2),
    "first twice": (put_together(ONE, ONE, LAST), 2),
    "second gone": (put_together(ONE, LAST), 2),
    "last gone, at the end of a chunk": (put_together(ONE, TWO), 2),
    "first alone": (put_together(ONE), 1),
    "last twice": (put_together(ONE, TWO, LAST, LAST), 3),
    "one more at the end": (put_together(ONE, TWO, LAST + bytes(FULL - len(LAST)), LAST), 3),
    "last cut by a byte": (FILE[:-1], 3),
    "last cut to a byte": (FILE[: HEADER + 2 * FULL + 17], 3),
    "a byte more": (FILE + b"\0", 3),
    "second of another secret under the same key": (put_together(ONE, chunk_of(OTHER, 1), LAST), 1),
    "second of another set under the same key": (put_together(ONE, chunk_of(FOREIGN, 1), LAST), 2),
    "last-chunk flag on the first": (encrypted_file(KEY, SET, SMALL, SECRET, lasts=[True, False, True])[0], 1),
    "last-chunk flag on the second": (encrypted_file(KEY, SET, SMALL, SECRET, lasts=[False, True, False])[0], 2),
    "last-chunk flag on none": (encrypted_file(KEY, SET, SMALL, SECRET, lasts=[False, False, False])[0], 3),
    "one bit in the middle": (
        FILE[: HEADER + FULL + 5] + bytes([FILE[HEADER + FULL + 5] ^ 1]) + FILE[HEADER + FULL + 6 :],
        2,
    ),
}


@pytest.mark.parametrize("name", PARTS)
def test_a_file_put_together_from_parts(path: Path, name: str) -> None:
    """The first chunk that does not fit is named. The same key, so it is place, flag and header that tell."""
    file, bad = PARTS[name]
    path.write_bytes(file)
    error = refused(path, kind=VerificationError)
    if name == "second of another secret under the same key":
        # It fits in its place, under this key: a key is never used twice, yet the digest would tell.
        assert "whoever made it had the key" in error.what
    else:
        assert f"chunk {bad} of " in error.what
    assert digest_of(path) != DIGEST


@pytest.mark.parametrize(
    ("start", "stop", "value", "kind", "what"),
    [
        (0, 22, b"sharez encrypted file\n", DocumentError, "does not say that it is an encrypted file"),
        (0, 22, b"SHARES encrypted file\n", DocumentError, "does not say that it is an encrypted file"),
        (22, 24, b"\0\2", DocumentError, "a version that this program does not know"),
        (22, 24, b"\0\0", DocumentError, "a version that this program does not know"),
        (22, 24, b"\1\1", DocumentError, "a version that this program does not know"),
        (24, 40, bytes(16), SetMismatchError, "is of set 00000000000000000000000000000000"),
        (40, 44, (65_535).to_bytes(4, "big"), DocumentError, "chunks of 65,535 bytes"),
        (40, 44, ((1 << 24) + 1).to_bytes(4, "big"), DocumentError, "chunks of 16,777,217 bytes"),
        (40, 44, b"\xff\xff\xff\xff", DocumentError, "chunks of 4,294,967,295 bytes"),
        (40, 44, bytes(4), DocumentError, "chunks of 0 bytes"),
        (40, 44, (65_537).to_bytes(4, "big"), VerificationError, "chunk 1 of 3"),
        (40, 44, (1 << 24).to_bytes(4, "big"), VerificationError, "chunk 1 of 1"),
    ],
)
def test_another_header(path: Path, start: int, stop: int, value: bytes, kind: type[SharesError], what: str) -> None:
    path.write_bytes(FILE[:start] + value + FILE[stop:])
    assert what in refused(path, kind=kind).what


def test_a_version_that_is_whole_in_itself(path: Path) -> None:
    """Made by whoever has the key, with every tag right: still not of a version that is known."""
    file, digest = encrypted_file(KEY, SET, SMALL, SECRET, version=2)
    path.write_bytes(file)
    refused(path, digest=digest, kind=DocumentError)
    with pytest.raises(DocumentError):
        digest_of(path)


@pytest.mark.parametrize("content", [b"", b"\n", FILE[:43], b'{"kind": "share"}', bytes(1000)])
def test_no_encrypted_file_at_all(path: Path, content: bytes) -> None:
    path.write_bytes(content)
    refused(path, kind=DocumentError)


def test_no_file_at_all(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    (tmp_path / "link").symlink_to("pipe")
    for name, what in (("absent", "does not exist"), ("pipe", "is a pipe"), ("link", "symbolic link"), (".", "folder")):
        with pytest.raises(StorageError, match=what):
            digest_of(tmp_path / name)


# Key, digest and set must belong together.


def test_another_key(path: Path) -> None:
    assert "whole, but their key does not open it" in refused(path, key=bytes(32), kind=VerificationError).what
    assert "chunk 1 of 3" in refused(path, key=bytes(32), digest=bytes(32), kind=VerificationError).what


@pytest.mark.parametrize("length", [0, 1, 16, 31, 33, 64])
def test_a_secret_that_is_no_key(path: Path, length: int) -> None:
    assert "not the key of an encrypted file" in refused(path, key=bytes(length), kind=VerificationError).what


@pytest.mark.parametrize("digest", [bytes(32), DIGEST[:31], b"", DIGEST + b"\0", FOREIGN_DIGEST])
def test_another_digest(path: Path, digest: bytes) -> None:
    assert "not the encrypted file that the shares name" in refused(path, digest=digest, kind=VerificationError).what


def test_a_file_of_another_set(path: Path) -> None:
    """Its digest and key would fit; it is refused all the same, before any chunk is read."""
    path.write_bytes(FOREIGN)
    refused(path, digest=FOREIGN_DIGEST, kind=SetMismatchError)


# The file changes between the two passes, or during one.


def acting(sink: Sink, act: Callable[[], object]) -> contextlib.AbstractContextManager[Write]:
    """A sink that does something to the world when it is entered, which is between the passes."""

    @contextlib.contextmanager
    def opened() -> Iterator[Write]:
        with sink.open() as write:
            act()
            yield write

    return opened()


def rewritten(path: Path, file: bytes) -> Callable[[], object]:
    """Write into the very file that is open, keeping its length where it is the same."""

    def rewrite() -> None:
        descriptor = os.open(path, os.O_WRONLY)
        os.pwrite(descriptor, file, 0)
        os.ftruncate(descriptor, len(file))
        os.close(descriptor)

    return rewrite


@pytest.mark.parametrize(
    ("file", "most"),
    [
        (FILE[:-1] + bytes([FILE[-1] ^ 1]), 2 * SMALL),
        (FILE[:50] + bytes([FILE[50] ^ 1]) + FILE[51:], 0),
        (put_together(ONE, chunk_of(FOREIGN, 1), LAST), SMALL),
        (FOREIGN, 0),
        (OTHER, len(SECRET)),
    ],
)
def test_altered_between_the_passes(path: Path, file: bytes, most: int) -> None:
    """No chunk that fails its tag is handed on; and even who has the key is found out at the end."""
    sink = Sink()
    with Secret.of(KEY) as key, pytest.raises(VerificationError, match="altered while it was being opened"):
        open_file(path, key, DIGEST, SET, acting(sink, rewritten(path, file)))
    assert isinstance(sink.error, VerificationError)
    assert len(sink.got) <= most


def test_altered_between_the_passes_leaves_no_file(tmp_path: Path, path: Path) -> None:
    for file in (OTHER, FILE[:-1] + b"\0"):
        rewritten(path, FILE)()

        @contextlib.contextmanager
        def sink(file: bytes = file) -> Iterator[Write]:
            with new_file(tmp_path / "opened", secret=True) as write:
                rewritten(path, file)()
                yield write

        with Secret.of(KEY) as key, pytest.raises(VerificationError):
            open_file(path, key, DIGEST, SET, sink())
        assert os.listdir(tmp_path) == [path.name]


def test_what_was_seen_is_told_by_a_key_of_its_own() -> None:
    """The same chunk looks alike under one key and not under another, and place counts."""
    first, other = module._Seen.first(), module._Seen.first()
    again, moved = first.again(), first.again()
    for seen in (first, other, again):
        seen.add(0, memoryview(ONE))
    moved.add(1, memoryview(ONE))
    assert first.is_same(again)
    assert not first.is_same(other)
    assert not first.is_same(moved)
    assert not first.is_same(first.again())


def test_cut_between_the_passes(path: Path) -> None:
    sink = Sink()
    with Secret.of(KEY) as key, pytest.raises(StorageError, match="became shorter"):
        open_file(path, key, DIGEST, SET, acting(sink, rewritten(path, FILE[:-100])))
    assert isinstance(sink.error, StorageError)
    assert len(sink.got) == 2 * SMALL


def test_exchanged_between_the_passes(tmp_path: Path, path: Path) -> None:
    """Another file at the same path is another file: the one that is open was checked, and is opened."""
    (tmp_path / "other").write_bytes(OTHER)
    sink = Sink()
    with Secret.of(KEY) as key:
        open_file(path, key, DIGEST, SET, acting(sink, lambda: os.replace(tmp_path / "other", path)))
    assert sink.got == SECRET


def test_extended_between_the_passes(path: Path) -> None:
    """What was checked is what is opened; what was added since is nobody's."""
    sink = Sink()
    with Secret.of(KEY) as key:
        open_file(path, key, DIGEST, SET, acting(sink, rewritten(path, FILE + b"more")))
    assert sink.got == SECRET


# The source changes while it is read.


@pytest.mark.parametrize("size", [2 * CHUNK, 2 * CHUNK + 5, 4 * CHUNK])
@pytest.mark.parametrize("when", [0, 1])
@pytest.mark.parametrize("change", ["grow", "grow a lot", "shrink", "empty", "rewrite"])
def test_a_source_that_changes(tmp_path: Path, size: int, when: int, change: str) -> None:
    source = tmp_path / "source"
    source.write_bytes(bytes(size))
    os.utime(source, (1, 1))
    calls = []

    def meddle(done: int, total: int | None) -> None:
        calls.append(done)
        if change == "grow a lot":
            with open(source, "ab") as file:
                file.write(bytes(CHUNK))
        elif done == when:
            with open(source, "r+b") as file:
                if change == "rewrite":
                    file.write(b"x")
                else:
                    file.truncate({"grow": size + 1, "shrink": size - 1, "empty": 0}[change])

    with pytest.raises(StorageError, match="was changed while it was read") as caught:
        encrypt_file(source, tmp_path / "target", SET, progress=meddle)
    assert caught.value.where == str(source)
    assert os.listdir(tmp_path) == ["source"]
    # A source that grows for ever is not followed for ever.
    assert len(calls) <= size // CHUNK + 2


def test_an_empty_source(tmp_path: Path) -> None:
    (tmp_path / "source").touch()
    for source in (tmp_path / "source", "/dev/null"):
        with pytest.raises(ParameterError, match="the secret is empty"):
            encrypt_file(source, tmp_path / "target", SET)
    assert os.listdir(tmp_path) == ["source"]


# Refusals and interruptions leave nothing, not even a key.


def open_secrets() -> int:
    from shares import memory

    gc.collect()
    return len(memory._open)


@pytest.mark.parametrize("at", range(4))
@pytest.mark.parametrize("error", [KeyboardInterrupt, MemoryError])
def test_an_interruption_at_any_chunk(tmp_path: Path, at: int, error: type[BaseException]) -> None:
    (tmp_path / "source").write_bytes(bytes(3 * CHUNK + 1))
    before = open_secrets()

    def stop(done: int, total: int | None) -> None:
        if done == at:
            raise error

    with pytest.raises(error):
        encrypt_file(tmp_path / "source", tmp_path / "target", SET, progress=stop)
    assert os.listdir(tmp_path) == ["source"]
    assert open_secrets() == before
    assert threading.active_count() == 1


@pytest.mark.parametrize("at", range(6))
def test_an_interruption_while_opening(tmp_path: Path, path: Path, at: int) -> None:
    def stop(done: int, total: int | None) -> None:
        if done == at:
            raise KeyboardInterrupt

    with Secret.of(KEY) as key:
        before = open_secrets()
        with pytest.raises(KeyboardInterrupt):
            open_file(path, key, DIGEST, SET, new_file(tmp_path / "opened", secret=True), progress=stop)
        assert open_secrets() == before
    assert os.listdir(tmp_path) == [path.name]
    assert threading.active_count() == 1


def test_the_key_is_wiped_when_encrypting_fails(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    drawn: list[Secret] = []
    real = Secret.drawn

    def keep(length: int) -> Secret:
        drawn.append(real(length))
        return drawn[-1]

    monkeypatch.setattr(Secret, "drawn", keep)
    with pytest.raises(StorageError):
        encrypt_file(tmp_path / "missing", tmp_path / "target", SET)
    with pytest.raises(ValueError, match="closed"):
        drawn[0].view()
    assert len(drawn) == 1


def test_a_taken_name_is_refused_before_anything_is_read(tmp_path: Path, path: Path) -> None:
    os.mkfifo(tmp_path / "source")  # Whoever opens it waits for ever.
    with pytest.raises(StorageError, match="never overwritten"):
        encrypt_file(tmp_path / "source", path, SET)
    assert path.read_bytes() == FILE


@pytest.mark.parametrize("set_id", [b"", bytes(15), bytes(17)])
def test_an_identifier_of_another_length(tmp_path: Path, path: Path, set_id: bytes) -> None:
    with pytest.raises(ParameterError, match="16 bytes"):
        encrypt_file(path, tmp_path / "target", set_id)
    refused(path, set_id=set_id, kind=SetMismatchError)


def test_a_limit_on_the_size_of_files(tmp_path: Path) -> None:
    (tmp_path / "source").write_bytes(bytes(3 * CHUNK))
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (CHUNK + 1000, hard))
    try:
        with pytest.raises(StorageError, match="larger than is allowed here"):
            encrypt_file(tmp_path / "source", tmp_path / "target", SET)
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))
    assert os.listdir(tmp_path) == ["source"]


# A command is fed.


def python(code: str, *arguments: object) -> list[str]:
    return [sys.executable, "-c", code, *map(str, arguments)]


KEEP = "import sys; data = sys.stdin.buffer.read(); open(sys.argv[1], 'wb').write(data)"


def test_a_command_gets_the_whole(tmp_path: Path, path: Path) -> None:
    with Secret.of(KEY) as key:
        open_file(path, key, DIGEST, SET, fed(python(KEEP, tmp_path / "got")))
    assert (tmp_path / "got").read_bytes() == SECRET


def test_a_command_is_not_even_started_for_a_damaged_file(tmp_path: Path, path: Path) -> None:
    path.write_bytes(FILE[:-1])
    with Secret.of(KEY) as key, pytest.raises(VerificationError):
        open_file(path, key, DIGEST, SET, fed(python("open(__import__('sys').argv[1], 'w')", tmp_path / "started")))
    assert os.listdir(tmp_path) == [path.name]


@pytest.mark.parametrize("file", [OTHER, FILE[:-1] + b"\0"])
def test_a_command_never_takes_an_altered_file_for_whole(tmp_path: Path, path: Path, file: bytes) -> None:
    """It is killed before its input ends."""

    @contextlib.contextmanager
    def sink() -> Iterator[Write]:
        with fed(python(KEEP, tmp_path / "got")) as write:
            rewritten(path, file)()
            yield write

    with Secret.of(KEY) as key, pytest.raises(VerificationError):
        open_file(path, key, DIGEST, SET, sink())
    assert not (tmp_path / "got").exists()


@pytest.mark.parametrize("code", [0, 3])
def test_a_command_that_has_read_enough(path: Path, code: int) -> None:
    stops = fed(python(f"import os; os.read(0, 10); os._exit({code})"))
    with Secret.of(KEY) as key:
        if code:
            with pytest.raises(CommandFailedError):
                open_file(path, key, DIGEST, SET, stops)
        else:
            assert open_file(path, key, DIGEST, SET, stops) == len(SECRET)
