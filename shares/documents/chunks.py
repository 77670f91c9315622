"""The form of an encrypted file: its header, where its chunks lie, their nonces, and its digest.

Source: Hoang, Reyhanitabar, Rogaway, Vizar 2015, "Online authenticated-encryption and its nonce-reuse
misuse-resistance", sec. 7 (chunks under a counter and a last-chunk flag); FIPS 180-4 (SHA-256); FORMAT.md, sec. 13.
May import: shares.errors, shares.streams.
Secret: nothing: chunks are encrypted, and the digest is of encrypted ones. Public: all of it.
Does not: encrypt or decrypt, or decide whether a digest is the right one.
"""

from __future__ import annotations

import hashlib
from collections import deque
from collections.abc import Callable, Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from typing import Final, Self

from shares.errors import DocumentError, ParameterError, StorageError, VerificationError
from shares.streams import Reader

KIND: Final = b"shares encrypted file\n"
VERSION: Final = 1
LABEL: Final = b"shares/v1/encrypted-file"
CHUNK: Final = 1 << 20
"""Secret bytes in each chunk but the last, as written here: 1 MiB."""
SMALLEST_CHUNK: Final = 1 << 16
LARGEST_CHUNK: Final = 1 << 24
MOST_CHUNKS: Final = 1 << 24
"""16 TiB as written here, 2^40 blocks under one key. What tells AES from a random function then has a chance of 2^-49:
blocks squared over 2^129, the switching lemma for a permutation of 128 bits."""
TAG: Final = 16
SET_LENGTH: Final = 16

# Chunk digests are worked out beside the main thread: hashing lets go of the interpreter's lock, and is what takes
# longest. One hasher would make the main thread wait; a third finds nothing to do.
_HASHERS: Final = 2
BUFFERS: Final = _HASHERS + 1
"""So many chunks are in memory at once: those being hashed, and the one being read or written."""


@dataclass(frozen=True, slots=True)
class Header:
    """What stands before the chunks, and is authenticated with each of them.

    Attributes:
        set: 16 bytes, the share set that protects the key.
        chunk: secret bytes in each chunk but the last.
    """

    set: bytes
    chunk: int = CHUNK

    def __post_init__(self) -> None:
        if len(self.set) != SET_LENGTH:
            raise ParameterError(f"the identifier of a set has {SET_LENGTH} bytes")

    def to_bytes(self) -> bytes:
        """Return the header as it stands in the file, 44 bytes."""
        return KIND + VERSION.to_bytes(2, "big") + self.set + self.chunk.to_bytes(4, "big")

    @classmethod
    def read(cls, reader: Reader) -> Self:
        """Read the header of an open file.

        Raises:
            DocumentError: it is not one, of this version, with chunks from 64 KiB to 16 MiB.
            StorageError: the medium refuses.
        """
        data = bytearray(HEADER_LENGTH)
        is_whole = reader.fill(memoryview(data)) == len(data)
        kind, version = data[: len(KIND)], int.from_bytes(data[len(KIND) : len(KIND) + 2], "big")
        if not is_whole or kind != KIND:
            raise DocumentError(
                "it does not say that it is an encrypted file of this program",
                where=reader.where,
                hint="check that it is the right file; for a damaged one use another copy",
            )
        if version != VERSION:
            raise DocumentError(
                f"it is an encrypted file of a version that this program does not know (it reads version {VERSION})",
                where=reader.where,
                hint="use the release of this program that wrote it, or a later one",
            )
        header = cls(bytes(data[len(KIND) + 2 : -4]), int.from_bytes(data[-4:], "big"))
        if not SMALLEST_CHUNK <= header.chunk <= LARGEST_CHUNK:
            raise DocumentError(
                f"it names chunks of {header.chunk:,} bytes; from {SMALLEST_CHUNK:,} to {LARGEST_CHUNK:,} are possible",
                where=reader.where,
                hint="the file is damaged: use another copy",
            )
        return header


HEADER_LENGTH: Final = len(Header(bytes(SET_LENGTH)).to_bytes())


def nonce(number: int, *, last: bool) -> bytes:
    """Return a chunk's nonce: its number, from 0, in 11 bytes, and in one byte whether it is the last.

    >>> nonce(258, last=True).hex()
    '000000000000000000010201'
    """
    return number.to_bytes(11, "big") + bytes([last])


class Chunks:
    """The chunks of an encrypted file that is open, where its header and its length put them.

    Args:
        reader: a regular file, at its start.

    Attributes:
        count: how many chunks there are, 1 or more.
        secret_length: bytes in all of them together.

    Raises:
        DocumentError: no encrypted file, or none of this version.
        VerificationError: it has a length that no whole one has.
        StorageError: the medium refuses.
    """

    def __init__(self, reader: Reader) -> None:
        self.reader = reader
        self.header = Header.read(reader)
        self._full = self.header.chunk + TAG
        body = (reader.size or 0) - HEADER_LENGTH
        self.count = -(-body // self._full)
        self._last = body - (self.count - 1) * self._full
        if not 1 <= self.count <= MOST_CHUNKS or self._last <= TAG:
            raise VerificationError(
                "no whole encrypted file has this length: it was cut short or extended",
                where=reader.where,
                hint="use another copy",
            )
        self.secret_length = body - self.count * TAG

    def is_last(self, number: int) -> bool:
        """Say whether the chunk of this number, from 0, is the last."""
        return number == self.count - 1

    def each(self, tell: Callable[[int], None]) -> Iterator[tuple[int, memoryview]]:
        """Read all chunks once, from the first.

        Args:
            tell: called before each chunk with the number of chunks done.

        Yields:
            The number of a chunk, from 0, and its bytes: they are there until ``BUFFERS`` - 1 more have been read.

        Raises:
            StorageError: the file became shorter, or the medium refuses.
        """
        buffers = [memoryview(bytearray(self._full)) for _ in range(BUFFERS)]
        self.reader.go_to(HEADER_LENGTH)
        for number in range(self.count):
            tell(number)
            chunk = buffers[number % BUFFERS][: self._last if self.is_last(number) else self._full]
            if self.reader.fill(chunk) < len(chunk):
                raise StorageError("became shorter while it was read", where=self.reader.where, hint="use another copy")
            yield number, chunk


class Digesting:
    """The digest of a file, worked out beside the main thread from its header and then its chunks, in order."""

    def __init__(self, header: Header) -> None:
        self._total = hashlib.sha256(LABEL + header.to_bytes())
        self._hashers = ThreadPoolExecutor(_HASHERS)
        self._pending: deque[Future[bytes]] = deque()

    def add(self, chunk: memoryview) -> None:
        """Take the next chunk. It must stay as it is until ``BUFFERS`` - 1 more have been added."""
        if len(self._pending) == _HASHERS:
            self._take()
        self._pending.append(self._hashers.submit(_sha256, chunk))

    def digest(self) -> bytes:
        """Return SHA-256(label || header || SHA-256 of each chunk), 32 bytes."""
        while self._pending:
            self._take()
        return self._total.digest()

    def _take(self) -> None:
        self._total.update(self._pending.popleft().result())

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self._hashers.shutdown()


def _sha256(chunk: memoryview) -> bytes:
    return hashlib.sha256(chunk).digest()
