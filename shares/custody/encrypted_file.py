"""The encrypted file: a secret of any size under a fresh 32-byte key, which is split in its stead.

Source: NIST SP 800-38D (GCM), FIPS 197 (AES), by way of ``cryptography``; Hoang, Reyhanitabar, Rogaway, Vizar 2015
(chunks); FORMAT.md, sec. 13.
May import: shares.errors, shares.memory, shares.streams, shares.documents.chunks.
Secret: the key, and the plaintext, which passes through locked memory chunk by chunk. Public: the encrypted file, its
length (which tells that of the secret), its digest.
Does not: hide the length, keep the key, or reach copies outside: the key schedule in OpenSSL's memory, which OpenSSL
wipes when the cipher goes, and what the system's pipes and file cache hold of the plaintext.
"""

from __future__ import annotations

import hashlib
import hmac
from collections.abc import Callable
from contextlib import AbstractContextManager
from pathlib import Path
from typing import Final, Self, TypeAlias

from cryptography.exceptions import InvalidTag
from cryptography.hazmat.primitives.ciphers.aead import AESGCM

from shares.documents.chunks import BUFFERS, MOST_CHUNKS, TAG, Chunks, Digesting, Header, nonce
from shares.errors import ParameterError, SetMismatchError, VerificationError
from shares.memory import Secret
from shares.streams import Reader, StrPath, Write, new_file, regular_file, secret_source

KEY_LENGTH: Final = 32

Progress: TypeAlias = Callable[[int, int | None], None]
"""Called before each chunk with (chunks done, chunks in all); the latter is None where a pipe does not say."""
_Tell: TypeAlias = Callable[[int], None]


def encrypt_file(
    source: StrPath, target: Path, set_id: bytes, *, progress: Progress | None = None
) -> tuple[Secret, bytes]:
    """Encrypt a secret of any size to a new file, under a fresh key that is used for nothing else.

    Args:
        source: a path, or ``-`` for standard input (a file of that name is ``./-``).
        target: the new file, of mode 0600. With a quorum of shares it is the secret; without it no shares are: keep
            copies of it, apart from the shares.
        set_id: 16 bytes, the identifier of the share set that will protect the key.
        progress: see ``Progress``; whatever it raises stops the act.

    Returns:
        The key, 32 bytes, to be split and then wiped; and the digest of the file, 32 bytes, to be named in every share.

    Raises:
        ParameterError: the secret is empty or larger than 16 TiB, or the set's identifier is not of 16 bytes.
        StorageError: the source cannot be read, or changed meanwhile; or the target exists or cannot be written.
            Whatever is raised, no file of this call is left.

    Source: FORMAT.md, sec. 13.
    """
    header = Header(set_id)
    key = Secret.drawn(KEY_LENGTH)
    try:
        # The target comes first: to open the source may be to wait for a writer.
        with new_file(target, secret=True) as write, secret_source(source) as reader:
            digest = _encrypt(reader, write, key, header, progress)
    except BaseException:
        key.close()
        raise
    return key, digest


def open_file(
    source: StrPath,
    key: Secret,
    digest: bytes,
    set_id: bytes,
    sink: AbstractContextManager[Write],
    *,
    progress: Progress | None = None,
) -> int:
    """Check an encrypted file whole, and only then decrypt it into a sink, checking all of it again.

    Args:
        source: the encrypted file; it is opened once, so that another cannot take its place.
        key: 32 bytes, as recovered.
        digest: 32 bytes, as the shares name it.
        set_id: 16 bytes, the set of these shares.
        sink: where the secret goes: ``new_file(path, secret=True)`` or ``deliver.fed(command)``, not entered yet. It is
            entered after the first pass; where the second pass differs it is left by the exception, and undoes itself.
        progress: see ``Progress``; the chunks are counted in both passes. Whatever it raises stops the act.

    Returns:
        The length of the secret, in bytes.

    Raises:
        DocumentError: no encrypted file, or none of this version.
        SetMismatchError: it belongs to another set.
        VerificationError: it is damaged, cut short, extended, put together from parts, or not the one that the shares
            name; or the key does not open it. Then nothing was written. Or it was altered between the two passes.
        StorageError: it cannot be read. Whatever the sink raises passes as well.

    Source: FORMAT.md, sec. 13.
    """
    with regular_file(source) as reader:
        chunks = Chunks(reader)
        cipher, checked = _cipher(chunks, key, set_id), _Seen.first()
        with Secret(chunks.header.chunk) as room:
            _check(chunks, cipher, digest, room, _teller(progress, chunks, 2, 0), checked)
            with sink as write:
                _decrypt(chunks, cipher, checked, room, write, _teller(progress, chunks, 2, 1))
        return chunks.secret_length


def check_file(source: StrPath, key: Secret, digest: bytes, set_id: bytes, *, progress: Progress | None = None) -> int:
    """Prove that a key opens an encrypted file, and that the file is the one which the shares name; write nothing.

    Args, Returns and Raises are those of ``open_file``, of its first pass.
    """
    with regular_file(source) as reader:
        chunks = Chunks(reader)
        cipher = _cipher(chunks, key, set_id)
        with Secret(chunks.header.chunk) as room:
            _check(chunks, cipher, digest, room, _teller(progress, chunks, 1, 0), _Seen.first())
        return chunks.secret_length


def digest_of(source: StrPath, *, progress: Progress | None = None) -> bytes:
    """Return the digest of an encrypted file, without any key. Where it is the record's, the file is whole.

    Args:
        source: the encrypted file.
        progress: see ``Progress``.

    Returns:
        32 bytes, public.

    Raises:
        DocumentError: no encrypted file, or none of this version.
        VerificationError: it has a length that no whole one has.
        StorageError: it cannot be read.

    Source: FORMAT.md, sec. 13.
    """
    with regular_file(source) as reader:
        chunks = Chunks(reader)
        with Digesting(chunks.header) as digesting:
            for _, chunk in chunks.each(_teller(progress, chunks, 1, 0)):
                digesting.add(chunk)
            return digesting.digest()


def _encrypt(reader: Reader, write: Write, key: Secret, header: Header, progress: Progress | None) -> bytes:
    """Encrypt all that the reader gives, and return the digest. Tests choose key and size of chunks here."""
    associated = header.to_bytes()
    buffers = [memoryview(bytearray(header.chunk + TAG)) for _ in range(BUFFERS)]
    total = None if reader.size is None else -(-reader.size // header.chunk)
    with key.view() as key_bytes:
        cipher = AESGCM(key_bytes)
    with (
        Secret(header.chunk) as one,
        Secret(header.chunk) as other,
        one.view() as here,
        other.view() as ahead,
        Digesting(header) as digesting,
    ):
        read = length = reader.fill(here)
        if not length:
            raise ParameterError("the secret is empty", hint="see what was to be written into its file or pipe")
        write(associated)
        for number in range(MOST_CHUNKS):
            if progress:
                progress(number, total)
            # Whether a chunk is the last must be known before it is encrypted, so one more is read ahead.
            following = reader.fill(ahead) if length == header.chunk else 0
            read += following
            if not following or (reader.size is not None and read > reader.size):
                reader.check_unchanged(read)
            chunk = buffers[number % BUFFERS][: length + TAG]
            with here[:length] as plain:
                cipher.encrypt_into(nonce(number, last=not following), plain, associated, chunk)
            digesting.add(chunk)
            write(chunk)
            if not following:
                return digesting.digest()
            here, ahead, length = ahead, here, following
    raise ParameterError(f"the secret is larger than {MOST_CHUNKS * header.chunk:,} bytes")


def _cipher(chunks: Chunks, key: Secret, set_id: bytes) -> AESGCM:
    """Return the cipher of a file, after seeing that file, set and key can belong together at all."""
    if chunks.header.set != set_id:
        raise SetMismatchError(
            f"the encrypted file is of set {chunks.header.set.hex()}, the shares are of set {set_id.hex()}",
            where=chunks.reader.where,
            hint="find the encrypted file that belongs to these shares",
        )
    if len(key) != KEY_LENGTH:
        raise VerificationError(
            f"what the shares hold is not the key of an encrypted file, which has {KEY_LENGTH} bytes",
            hint="they protect another secret, or the dealer was in error",
        )
    with key.view() as key_bytes:
        return AESGCM(key_bytes)


class _Seen:
    """What was seen of a file in one reading, so that a second reading of anything else is noticed.

    A code of each chunk under a key that is drawn for this alone and never leaves: who does not know it cannot make
    another chunk of the same code, not even who has the file's own key (GMAC, SP 800-38D; a chunk of 16 MiB passes
    with a chance of 2^-108). It takes a tenth of the time of the digest, and of memory the same for any file.
    """

    def __init__(self, mac: AESGCM) -> None:
        self._mac = mac
        self._codes = hashlib.sha256()

    @classmethod
    def first(cls) -> Self:
        """Return one for a first reading."""
        with Secret.drawn(KEY_LENGTH) as key, key.view() as key_bytes:
            return cls(AESGCM(key_bytes))

    def again(self) -> Self:
        """Return one for a second reading."""
        return type(self)(self._mac)

    def add(self, number: int, chunk: memoryview) -> None:
        self._codes.update(self._mac.encrypt(nonce(number, last=False), b"", chunk))

    def is_same(self, other: _Seen) -> bool:
        return hmac.compare_digest(self._codes.digest(), other._codes.digest())


def _check(chunks: Chunks, cipher: AESGCM, digest: bytes, room: Secret, tell: _Tell, seen: _Seen) -> None:
    """The first pass: every tag, and the digest. What is decrypted on the way is overwritten where it stands."""
    bad: int | None = None
    with room.view() as view, Digesting(chunks.header) as digesting:
        for number, chunk in chunks.each(tell):
            digesting.add(chunk)
            seen.add(number, chunk)
            if bad is None and not _opens(chunks, cipher, number, chunk, view):
                bad = number
        is_named = hmac.compare_digest(digesting.digest(), digest)
    if bad is None and is_named:
        return
    if bad is None:
        what = "the key opens it, but it is not the encrypted file that the shares name: whoever made it had the key"
        hint = "find the file whose digest the record names"
    elif is_named:
        what = "it is the encrypted file that the shares name, whole, but their key does not open it"
        hint = "the dealer was in error: stop using the set"
    else:
        what = "it was altered, or is not the encrypted file that the shares name: "
        what += f"chunk {bad + 1:,} of {chunks.count:,} is damaged, out of place, another file's, or not the last"
        hint = "use another copy"
    raise VerificationError(what, where=chunks.reader.where, hint=hint)


def _decrypt(chunks: Chunks, cipher: AESGCM, checked: _Seen, room: Secret, write: Write, tell: _Tell) -> None:
    """The second pass: a chunk is written when its tag is seen to fit again, and all must be what was seen before.

    Only who has the key could make a tag fit to another chunk. Of such a one's file a fed command may see a part, but
    the end never comes, and no file gets its name.
    """
    seen = checked.again()
    with room.view() as view:
        for number, chunk in chunks.each(tell):
            seen.add(number, chunk)
            if not _opens(chunks, cipher, number, chunk, view):
                raise _altered(chunks)
            with view[: len(chunk) - TAG] as plain:
                write(plain)
    if not seen.is_same(checked):
        raise _altered(chunks)


def _altered(chunks: Chunks) -> VerificationError:
    return VerificationError(
        "it was altered while it was being opened; what a command was already given is a part, or false",
        where=chunks.reader.where,
        hint="copy the file to where nobody else writes, and open it there",
    )


def _opens(chunks: Chunks, cipher: AESGCM, number: int, chunk: memoryview, room: memoryview) -> bool:
    """Decrypt one chunk into the room; say whether its tag fits. If not, what the room holds means nothing."""
    with room[: len(chunk) - TAG] as plain:
        try:
            last = chunks.is_last(number)
            cipher.decrypt_into(nonce(number, last=last), chunk, chunks.header.to_bytes(), plain)
        except InvalidTag:
            return False
    return True


def _teller(progress: Progress | None, chunks: Chunks, passes: int, before: int) -> _Tell:
    """Return what tells of the chunks done in one of several passes, after so many whole ones."""

    def tell(done: int) -> None:
        if progress:
            progress(before * chunks.count + done, passes * chunks.count)

    return tell
