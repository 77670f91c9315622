"""The paper form of a share: as few bytes as there can be, a check over all of them, in blocks of one line each.

Source: FORMAT.md, sec. 11; RFC 4648, sec. 6 (base32); FIPS 180-4 (SHA-256).
May import: shares.errors, shares.documents.base, .members, .share.
Secret: the rows, in the form and in every copy that Python makes of it on the way (SECURITY.md).
Public: everything else.
Does not: carry label, rule or notice. Nothing proves those, and a share is whole without them.
"""

from __future__ import annotations

import base64
import binascii
import hashlib
import hmac
from typing import Any, Final

from shares.documents.base import write_text
from shares.documents.members import encode_bytes
from shares.documents.share import Share
from shares.errors import DocumentError, ParameterError

BLOCK: Final = 15
"""Bytes in a block: 24 characters of base32, what a typed line holds beside its number."""
MAX_BLOCKS: Final = 255
CHECK: Final = 4
"""Bytes of the check."""

_VERSION: Final = 1 << 5
_ENCRYPTED_FILE: Final = 1 << 4
_RECORD: Final = 1 << 3
_BARE: Final = 0


def to_paper(share: Share) -> bytes:
    """Return the paper form of a share. Secret.

    Returns:
        1 to 255 blocks of 15 bytes.

    Raises:
        ParameterError: the share is too large for paper.

    Source: FORMAT.md, sec. 11.
    """
    form = bytes([_VERSION | _ENCRYPTED_FILE * (share.encrypted_file is not None) | _RECORD * bool(share.record)])
    body = form + _header(share) + _number(share.row_length)
    for row in share.rows:
        with row.view() as view:
            body += view
    blocks = -(-(1 + len(body) + CHECK) // BLOCK)
    if blocks > MAX_BLOCKS:
        raise ParameterError(
            f"the share is too large for paper: {len(body):,} bytes, where {MAX_BLOCKS * BLOCK - CHECK - 1:,} fit",
            hint="encrypt the secret with a fresh key and split that key; print its shares",
        )
    body = body.ljust(blocks * BLOCK - CHECK - 1, b"\0")
    return bytes([blocks]) + _check(body) + body


def from_paper(data: bytes, *, where: str | None = None) -> Share:
    """Return the share that a paper form holds; its label and rule are null, and its notice is the usual one.

    Args:
        data: the form, whole.
        where: what to call it in an error.

    Raises:
        DocumentError: it is not whole, or not a form that this version knows.
    """
    problem = None
    try:
        return _read(data)
    except DocumentError as error:
        problem = error.what
    raise DocumentError(problem, where=where, hint="compare it with the sheet once more; take all of it from one sheet")


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
    data = None
    if text and len(text) % (BLOCK * 8 // 5) == 0:
        try:
            data = base64.b32decode(text)
        except (binascii.Error, ValueError):
            data = None
    if data is None:
        raise DocumentError("the text is not whole: it is not base32 in blocks of 24 characters")
    return data


def _header(share: Share) -> bytes:
    name = share.custodian.encode("utf-8")
    parts = [share.set, _number(share.epoch), bytes([len(name)]), name, bytes([share.field.modulus & 0xFF])]
    parts.append(_number(len(share.paths)))
    for path in share.paths:
        parts += [bytes([len(path)]), *(bytes(step) for step in path)]
    parts += [share.secret_commitment, share.encrypted_file or b""]
    parts.append(base64.b32decode(share.record.replace("-", "")) if share.record else b"")
    return b"".join(parts)


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


def _read(data: bytes) -> Share:
    reader = _Reader(data)
    if reader.byte() * BLOCK != len(data):
        raise DocumentError("it is not whole: it does not have the length that it begins with")
    if not hmac.compare_digest(reader.take(CHECK), _check(data[1 + CHECK :])):
        raise DocumentError("the check over the whole does not fit")
    form = reader.byte()
    if form & 0xE0 != _VERSION or form & 0x07 != _BARE:
        raise DocumentError("it is no share, or one of a version that this program does not know")
    members = _read_header(reader, form)
    length, count = reader.number(), len(members["paths"])
    members["rows"] = [encode_bytes(reader.take(length)) for _ in range(count)]
    if len(data) - reader.at >= BLOCK or any(data[reader.at :]):
        raise DocumentError("something stands after its end")
    ordered = {"kind": Share.KIND, "version": 1, **members}
    notes = {"label": None, "rule": None, "notice": None, "digest": "00" * 32}
    share = Share.parse(write_text(ordered | notes))
    return share.noted(label=None, rule=None, record=share.record)


def _read_header(reader: _Reader, form: int) -> dict[str, Any]:
    members: dict[str, Any] = {"set": reader.take(16).hex(), "epoch": reader.number()}
    problem = None
    name = reader.take(reader.byte())
    try:
        members["custodian"] = name.decode("utf-8")
    except UnicodeDecodeError:
        problem = "the custodian's name in it is not UTF-8"
    if problem:
        raise DocumentError(problem)
    members["field"] = f"0x1{reader.byte():02x}"
    members["paths"] = [[[reader.byte(), reader.byte()] for _ in range(reader.byte())] for _ in range(reader.number())]
    members["secret_commitment"] = reader.take(32).hex()
    members["encrypted_file"] = reader.take(32).hex() if form & _ENCRYPTED_FILE else None
    letters = base64.b32encode(reader.take(20)).decode("ascii") if form & _RECORD else ""
    members["record"] = "-".join(letters[i : i + 4] for i in range(0, 32, 4)) or None
    return members
