"""The form of an encrypted file: where chunks lie, for every length; nonces that never repeat; the digest.

Checked against: FORMAT.md, sec. 13, worked out here by plain counting; hashlib in one piece.
"""

from __future__ import annotations

import hashlib
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.documents import chunks
from shares.documents.chunks import BUFFERS, CHUNK, HEADER_LENGTH, TAG, Chunks, Digesting, Header, nonce
from shares.errors import ParameterError, VerificationError
from shares.streams import regular_file

SET = bytes(range(16))


def test_the_header_is_as_the_format_says() -> None:
    assert Header(SET).to_bytes() == b"shares encrypted file\n\0\1" + SET + b"\0\x10\0\0"
    assert (HEADER_LENGTH, CHUNK, chunks.MOST_CHUNKS) == (44, 1_048_576, 2**24)
    with pytest.raises(ParameterError):
        Header(SET[:15])


def test_the_most_chunks_keep_the_cipher_far_from_its_bound() -> None:
    """Blocks squared over 2^129, at the size of chunks that is written; at most 2^-40 at the largest that is read."""
    blocks = chunks.MOST_CHUNKS * CHUNK // 16
    assert blocks == 2**40
    assert blocks**2 == 2**129 // 2**49
    assert (chunks.MOST_CHUNKS * chunks.LARGEST_CHUNK // 16) ** 2 <= 2**129 // 2**40
    # One chunk stays within what SP 800-38D, sec. 5.2.1.1, allows for one nonce: 2^39 - 256 bits.
    assert 8 * chunks.LARGEST_CHUNK < 2**39 - 256


@given(st.integers(0, chunks.MOST_CHUNKS), st.integers(0, chunks.MOST_CHUNKS), st.booleans(), st.booleans())
def test_nonces_differ(one: int, other: int, last: bool, other_last: bool) -> None:
    assert len(nonce(one, last=last)) == 12
    assert (nonce(one, last=last) == nonce(other, last=other_last)) == ((one, last) == (other, other_last))


def placed(path: Path, size: int, chunk: int) -> Chunks | None:
    """The chunks of a file of this size, holes but for the header; None where no whole file is so long."""
    with open(path, "wb") as file:
        file.write(Header(SET, chunk).to_bytes())
        file.truncate(size)
    with regular_file(path) as reader:
        try:
            return Chunks(reader)
        except VerificationError:
            return None


def test_every_length_near_a_multiple_of_a_chunk(tmp_path: Path) -> None:
    for chunk in (65_536, 65_537, CHUNK):
        full = chunk + TAG
        for n in range(4):
            for off in range(-20, 40):
                size = HEADER_LENGTH + n * full + off
                if size < HEADER_LENGTH:
                    continue
                # By counting: whole chunks are taken off until no more than one is left.
                rest, count = size - HEADER_LENGTH, 1
                while rest > full:
                    rest, count = rest - full, count + 1
                found = placed(tmp_path / "file", size, chunk)
                if rest <= TAG:
                    assert found is None, size
                else:
                    assert found is not None, size
                    assert (found.count, found.secret_length) == (count, size - HEADER_LENGTH - count * TAG)
                    assert [found.is_last(i) for i in range(count)] == [False] * (count - 1) + [True]


def test_too_many_chunks_are_no_whole_file(tmp_path: Path) -> None:
    """A file of holes, as long as they come: one chunk within the limit, and one beyond."""
    full = 65_536 + TAG
    assert placed(tmp_path / "file", HEADER_LENGTH + chunks.MOST_CHUNKS * full, 65_536) is not None
    assert placed(tmp_path / "file", HEADER_LENGTH + chunks.MOST_CHUNKS * full + 17, 65_536) is None


@given(st.lists(st.binary(min_size=17, max_size=40), min_size=1, max_size=40))
def test_the_digest_is_of_header_and_chunks_in_order(parts: list[bytes]) -> None:
    header = Header(SET)
    buffers = [memoryview(bytearray(40)) for _ in range(BUFFERS)]
    with Digesting(header) as digesting:
        for i, part in enumerate(parts):
            chunk = buffers[i % BUFFERS][: len(part)]
            chunk[:] = part
            digesting.add(chunk)
        digest = digesting.digest()
    listed = b"".join(hashlib.sha256(part).digest() for part in parts)
    assert digest == hashlib.sha256(b"shares/v1/encrypted-file" + header.to_bytes() + listed).digest()
