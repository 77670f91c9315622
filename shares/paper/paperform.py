"""The paper form of a share: as few bytes as there can be, a check over all of them, in blocks of one line each.

Source: FORMAT.md, sec. 11; RFC 4648, sec. 6 (base32); FIPS 180-4 (SHA-256).
May import: shares.errors, shares.documents.base, shares.documents.members, shares.documents.share,
shares.documents.wrapped_share, shares.documents.wrapping.
Secret: the rows, in the form and in every copy that Python makes of it on the way (SECURITY.md).
Public: everything else.
Does not: carry label, rule or notice. Nothing proves those, and a share is whole without them.
"""

from __future__ import annotations

import base64
import binascii
import hashlib
import hmac
from typing import Any, Final, TypeAlias

from shares.documents.base import write_text
from shares.documents.members import encode_bytes
from shares.documents.share import NOTES, Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import SUITES, TAG, ByPassphrase
from shares.errors import DocumentError, ParameterError

PaperShare: TypeAlias = Share | WrappedShare

BLOCK: Final = 15
"""Bytes in a block: 24 characters of base32, what a typed line holds beside its number."""
CHARACTERS: Final = BLOCK * 8 // 5
"""Characters of base32 in a block."""
LETTERS: Final = "ABCDEFGHIJKLMNOPQRSTUVWXYZ234567"
"""The characters of base32, in the order of what they stand for (RFC 4648, sec. 6)."""
MAX_BLOCKS: Final = 255
CHECK: Final = 4
"""Bytes of the check."""

_VERSION: Final = 1 << 5
_ENCRYPTED_FILE: Final = 1 << 4
_RECORD: Final = 1 << 3
_BARE, _PASSPHRASE, _CARD = 0, 1, 2
# A card's suite follows the kind of wrapping, in the order of SUITES.
_KINDS: Final = range(_CARD + len(SUITES))


def to_paper(share: PaperShare, *, where: str | None = None) -> bytes:
    """Return the paper form of a share, bare or wrapped. That of a bare one is secret.

    Args:
        share: with its notes or without; only ``record`` is taken over.
        where: what to call it in an error.

    Returns:
        1 to 255 blocks of 15 bytes.

    Raises:
        ParameterError: the share is too large for paper.

    Source: FORMAT.md, sec. 11.
    """
    body = _header(share)
    if isinstance(share, Share):
        for row in share.rows:
            with row.view() as view:
                body += view
    else:
        body += share.sealed
    blocks = -(-(1 + len(body) + CHECK) // BLOCK)
    if blocks > MAX_BLOCKS:
        raise ParameterError(
            f"the share is too large for paper: {len(body):,} bytes, where {MAX_BLOCKS * BLOCK - CHECK - 1:,} fit",
            where=where,
            hint="encrypt the secret with a fresh key and split that key; print its shares",
        )
    body = body.ljust(blocks * BLOCK - CHECK - 1, b"\0")
    return bytes([blocks]) + _check(bytes([blocks]) + body) + body


def from_paper(data: bytes, *, where: str | None = None) -> PaperShare:
    """Return the share that a paper form holds; its label, rule and notice are null.

    Args:
        data: the form, whole.
        where: what to call it in an error.

    Raises:
        DocumentError: it is not whole, or not a form that this version knows.
    """
    try:
        return _read(data)
    except DocumentError as error:
        problem, hint = error.what, error.hint
    raise DocumentError(
        problem, where=where, hint=hint or "compare it with the sheet once more; take all of it from one sheet"
    )


def to_text(data: bytes) -> str:
    """Return a paper form as base32 without padding, which it never needs: 24 characters a block. Secret.

    >>> to_text(bytes(15))
    'AAAAAAAAAAAAAAAAAAAAAAAA'
    """
    return base64.b32encode(data).decode("ascii")


def from_text(text: str) -> bytes:
    """Return the bytes of base32 text, in capital letters and without anything between them.

    Raises:
        DocumentError: it is not base32, or not whole blocks.
    """
    problem = None
    if not text or len(text) % CHARACTERS:
        problem = f"it has {len(text):,} characters, and not a multiple of {CHARACTERS}"
    else:
        try:
            return base64.b32decode(text)
        except (binascii.Error, ValueError):
            place = next((i for i, letter in enumerate(text, start=1) if letter not in LETTERS), len(text))
            problem = f"its character {place:,} is none of the letters A to Z and digits 2 to 7"
    raise DocumentError(f"the text is not whole: {problem}")


def _header(share: PaperShare) -> bytes:
    """Return everything of the form's body that comes before the rows or what they are sealed in."""
    kind, wrapping = _wrapping(share)
    kind |= _VERSION | _ENCRYPTED_FILE * (share.encrypted_file is not None) | _RECORD * (share.record is not None)
    name = share.custodian.encode("utf-8")
    parts = [bytes([kind]), share.set, _number(share.epoch), bytes([len(name)]), name]
    parts += [bytes([share.field.modulus & 0xFF]), _number(len(share.paths))]
    for path in share.paths:
        parts += [bytes([len(path)]), *(bytes(step) for step in path)]
    parts += [share.secret_commitment, share.encrypted_file or b""]
    parts += [_fingerprint_bytes(share.record) if share.record else b"", wrapping, _number(share.row_length)]
    return b"".join(parts)


def _wrapping(share: PaperShare) -> tuple[int, bytes]:
    if isinstance(share, Share):
        return _BARE, b""
    wrapping = share.wrapping
    if isinstance(wrapping, ByPassphrase):
        cost = _number(wrapping.memory) + bytes([wrapping.passes, wrapping.lanes])
        return _PASSPHRASE, cost + wrapping.salt + wrapping.commitment
    key = _number(len(wrapping.key)) + wrapping.key
    return _CARD + SUITES.index(wrapping.suite), _fingerprint_bytes(wrapping.card) + wrapping.commitment + key


def _fingerprint_bytes(fingerprint: str) -> bytes:
    return base64.b32decode(fingerprint.replace("-", ""))


def _number(value: int) -> bytes:
    """Seven bits a byte, the highest first; the top bit says that more follow. No leading zeros."""
    digits = [value & 0x7F]
    while value := value >> 7:
        digits.insert(0, value & 0x7F | 0x80)
    return bytes(digits)


def _check(body: bytes) -> bytes:
    return hashlib.sha256(b"shares/v1/paper" + body).digest()[:CHECK]


class _Reader:
    """Takes a form apart from the front; refuses to read beyond its end."""

    def __init__(self, data: bytes) -> None:
        self.data, self.at = data, 0

    def take(self, count: int) -> bytes:
        self.at += count
        if self.at > len(self.data):
            raise DocumentError("it ends too early")
        return self.data[self.at - count : self.at]

    def byte(self) -> int:
        return self.take(1)[0]

    def number(self) -> int:
        value = 0
        for place in range(5):
            digit = self.byte()
            if place == 0 and digit == 0x80:
                break  # A leading zero: the same number has a shorter form.
            value = value << 7 | digit & 0x7F
            if digit < 0x80:
                return value
        raise DocumentError("a number in it is not in its one form")


def _read(data: bytes) -> PaperShare:
    reader = _Reader(data)
    if reader.byte() * BLOCK != len(data):
        raise DocumentError("it is not whole: it does not have the length that it begins with")
    if not hmac.compare_digest(reader.take(CHECK), _check(data[:1] + data[1 + CHECK :])):
        raise DocumentError("the check over the whole does not fit")
    form = reader.byte()
    kind = form & 0x07
    if form & 0xE0 != _VERSION or kind not in _KINDS:
        raise DocumentError(
            "it is no share, or one of a version that this program does not know",
            hint="use the release of this program that printed it, or a later one",
        )
    members = _read_facts(reader, form) | dict.fromkeys(NOTES[:-1]) | {"version": 1, "digest": "00" * 32}
    if kind != _BARE:
        members["wrapping"] = _read_wrapping(reader, kind)
    length, count = reader.number(), len(members["paths"])
    if kind == _BARE:
        members |= {"kind": Share.KIND, "rows": [encode_bytes(reader.take(length)) for _ in range(count)]}
    else:
        members |= {"kind": WrappedShare.KIND, "sealed": encode_bytes(reader.take(count * length + TAG))}
    if len(data) - reader.at >= BLOCK or any(data[reader.at :]):
        raise DocumentError("something stands after its end")
    if kind == _BARE:
        return Share.parse(write_text(members)).with_notes()
    return WrappedShare.parse(write_text(members)).with_digest()


def _read_facts(reader: _Reader, form: int) -> dict[str, Any]:
    members: dict[str, Any] = {"set": reader.take(16).hex(), "epoch": reader.number()}
    name = reader.take(reader.byte())
    # A name that is no UTF-8 becomes one that is refused as a name.
    members["custodian"] = name.decode("utf-8", "backslashreplace")
    members["field"] = f"0x1{reader.byte():02x}"
    members["paths"] = [[[reader.byte(), reader.byte()] for _ in range(reader.byte())] for _ in range(reader.number())]
    members["secret_commitment"] = reader.take(32).hex()
    members["encrypted_file"] = reader.take(32).hex() if form & _ENCRYPTED_FILE else None
    members["record"] = _read_fingerprint(reader) if form & _RECORD else None
    return members


def _read_wrapping(reader: _Reader, kind: int) -> dict[str, Any]:
    if kind == _PASSPHRASE:
        cost = {"memory": reader.number(), "passes": reader.byte(), "lanes": reader.byte()}
        bound = {"salt": encode_bytes(reader.take(16)), "commitment": encode_bytes(reader.take(32))}
        return {"method": "passphrase", **cost, **bound}
    card, commitment = _read_fingerprint(reader), encode_bytes(reader.take(32))
    key = encode_bytes(reader.take(reader.number()))
    return {"method": "card", "suite": SUITES[kind - _CARD], "card": card, "key": key, "commitment": commitment}


def _read_fingerprint(reader: _Reader) -> str:
    letters = base64.b32encode(reader.take(20)).decode("ascii")
    return "-".join(letters[i : i + 4] for i in range(0, 32, 4))
