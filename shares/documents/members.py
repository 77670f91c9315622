"""The types of members that documents are made of, each with its one encoding.

Source: RFC 4648 (base64url), Unicode Standard Annex 15 (normal form C); FORMAT.md, sec. 1.
May import: shares.errors, shares.memory, shares.clock, shares.field.
Secret: rows, decoded and encoded here (base64 is not constant time, listed in SECURITY.md). Public: every other type.
Does not: know which document a member stands in. Errors name the rule, never the value.
"""

from __future__ import annotations

import base64
import binascii
import re
import unicodedata
from datetime import datetime
from typing import Annotated, Literal

from pydantic import AfterValidator, BeforeValidator, Field, PlainSerializer, PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError

from shares import clock
from shares.errors import ParameterError, PolynomialError
from shares.field import gf256
from shares.memory import Secret

MAX_LONG_TEXT = 65_536
"""The longest rule in words, in characters."""
MAX_TEXT = 500
"""The longest label, notice or remark, in characters."""
_UNPRINTABLE = ("Cc", "Cf", "Cs", "Co", "Zl", "Zp")
# Shown as nothing or as a space although their categories do not say so (FORMAT.md, sec. 1).
_BLANK = frozenset(
    map(chr, (0x034F, 0x115F, 0x1160, 0x17B4, 0x17B5, *range(0x180B, 0x1810), 0x2800, 0x3164, 0xFFA0))
) | frozenset(map(chr, (*range(0xFE00, 0xFE10), *range(0xE0100, 0xE01F0))))


def encode_bytes(data: bytes | memoryview) -> str:
    """Return base64url without padding (RFC 4648, sec. 5)."""
    return base64.urlsafe_b64encode(data).rstrip(b"=").decode("ascii")


def decode_bytes(text: object) -> bytes:
    """Decode base64url canonically: one value, one encoding."""
    data = None
    if isinstance(text, str) and re.fullmatch(r"[A-Za-z0-9_-]+", text):
        try:
            padded = text.translate({0x2D: "+", 0x5F: "/"}) + "=" * (-len(text) % 4)
            data = binascii.a2b_base64(padded, strict_mode=True)
        except binascii.Error:
            data = None
    # The unused low bits of the last character must be zero: only then does encoding give the text back.
    if data is None or not isinstance(text, str) or encode_bytes(data)[-1] != text[-1]:
        raise PydanticCustomError("shares_base64url", "not base64url without padding, in its one canonical form")
    return data


def _decode_secret(text: object) -> Secret:
    return text if isinstance(text, Secret) else Secret.of(decode_bytes(text))


def _encode_secret(row: Secret) -> str:
    with row.view() as view:
        return encode_bytes(view)


def _decode_public(text: object) -> bytes:
    return text if isinstance(text, bytes) else decode_bytes(text)


def _decode_hex(text: object) -> bytes:
    if isinstance(text, bytes):
        return text
    if not isinstance(text, str) or not re.fullmatch(r"(?:[0-9a-f]{2})+", text):
        raise PydanticCustomError("shares_hex", "not lower-case hexadecimal")
    return bytes.fromhex(text)


def _sized(length: int) -> AfterValidator:
    def of_length(data: bytes) -> bytes:
        if len(data) != length:
            raise PydanticCustomError("shares_length", f"not {length} bytes")
        return data

    return AfterValidator(of_length)


def _decode_field(value: object) -> gf256.Field:
    if isinstance(value, gf256.Field):
        return value
    if not isinstance(value, str) or not re.fullmatch(r"0x1[0-9a-f]{2}", value):
        raise PydanticCustomError("shares_field", "not a polynomial of degree 8 as 0x1 and two hexadecimal digits")
    try:
        return gf256.Field(int(value, 16))
    except PolynomialError as error:
        reason = error.what
    raise PydanticCustomError("shares_field", "{reason}", {"reason": reason})


def _decode_time(value: object) -> datetime:
    if isinstance(value, datetime):
        return value
    try:
        return clock.from_text(value if isinstance(value, str) else "")
    except ParameterError:
        pass
    raise PydanticCustomError("shares_time", "not a UTC time like 2026-12-01T07:00:00Z")


def holds_unprintable(text: str) -> bool:
    """Say whether a text holds a character that shows as nothing, steers a terminal or turns the order of others."""
    if text.isascii():  # Most are, and then the control characters are all that there is to look for.
        return not text.isprintable()
    return any(unicodedata.category(c) in _UNPRINTABLE or c in _BLANK or _is_noncharacter(c) for c in text)


def _is_noncharacter(c: str) -> bool:
    """Say whether no Unicode will ever define this one (The Unicode Standard, sec. 23.7)."""
    return 0xFDD0 <= ord(c) <= 0xFDEF or ord(c) & 0xFFFE == 0xFFFE


def _holds_unassigned(text: str) -> bool:
    """Asked when a document is made, never when one is read: a later Unicode may define what this one does not."""
    return any(unicodedata.category(c) == "Cn" for c in text)


def check_name(name: str) -> str:
    """Return a custodian's name if it may be one, and is safe in a file name and on a page.

    Raises:
        ParameterError: which rule it breaks; the name itself is not repeated.
    """
    reason = _name_problem(name)
    if reason is None and _holds_unassigned(name):
        reason = "must not hold characters that Unicode, as known here, does not define"
    if reason:
        raise ParameterError(f"a custodian's name {reason}", hint="use letters, digits and hyphens, like north-pier")
    return name


def _name_problem(name: str) -> str | None:
    if not name:
        return "must not be empty"
    if len(name) > 64 or len(name.encode("utf-8", "surrogatepass")) > 200:
        return "has at most 64 characters and 200 bytes in UTF-8"
    if holds_unprintable(name):
        return "must not hold control or invisible characters"
    if "/" in name or "\\" in name:
        return "must not hold a path separator"
    if name.split(" ") != name.split() or name.startswith((".", "-")):
        return "must not start with a dot or hyphen, nor hold white space but single spaces inside"
    if unicodedata.normalize("NFC", name) != name:
        return "must be in Unicode normal form C"
    return None


def _valid_name(name: str) -> str:
    reason = _name_problem(name)
    if reason:
        raise PydanticCustomError("shares_name", "{reason}", {"reason": f"a name {reason}"})
    return name


def check_text(text: str, what: str = "a label") -> str:
    """Return a label, notice or other text if it may be one: 1 to 500 characters, nothing unprintable.

    Args:
        text: the text.
        what: what it is, for the refusal.

    Raises:
        ParameterError: which rule it breaks.
    """
    if not 1 <= len(text) <= MAX_TEXT:
        raise ParameterError(f"{what} has 1 to {MAX_TEXT} characters")
    if holds_unprintable(text) or _holds_unassigned(text):
        raise ParameterError(f"{what} must not hold control or invisible characters")
    return text


def _not_bool(value: object) -> object:
    """Refuse true where 1 is wanted: Python takes them to be equal."""
    if isinstance(value, bool):
        raise PydanticCustomError("shares_version", "not a number")
    return value


def _printable(text: str) -> str:
    if holds_unprintable(text):
        raise PydanticCustomError("shares_text", "it holds control or invisible characters")
    return text


_B64 = r"^[A-Za-z0-9_-]+$"


def _hex_type(length: int) -> tuple[object, ...]:
    return (
        PlainValidator(_decode_hex),
        _sized(length),
        PlainSerializer(bytes.hex, return_type=str),
        WithJsonSchema({"type": "string", "pattern": f"^[0-9a-f]{{{2 * length}}}$"}),
    )


def _b64_type(length: int | None) -> tuple[object, ...]:
    letters = "+" if length is None else f"{{{-(-length * 4 // 3)}}}"
    return (
        PlainValidator(_decode_public),
        *(() if length is None else (_sized(length),)),
        PlainSerializer(encode_bytes, return_type=str),
        WithJsonSchema({"type": "string", "pattern": f"^[A-Za-z0-9_-]{letters}$"}),
    )


SetId = Annotated[bytes, *_hex_type(16)]
Digest = Annotated[bytes, *_hex_type(32)]
PublicKey = Annotated[bytes, *_b64_type(32)]
MlKemPublicKey = Annotated[bytes, *_b64_type(1184)]
Signature = Annotated[bytes, *_b64_type(64)]
Salt = Annotated[bytes, *_b64_type(16)]
KeyCommitment = Annotated[bytes, *_b64_type(32)]
Sealed = Annotated[bytes, *_b64_type(None)]
Check = Annotated[bytes, *_b64_type(16)]
SecretRow = Annotated[
    Secret,
    PlainValidator(_decode_secret),
    PlainSerializer(_encode_secret, return_type=str),
    WithJsonSchema({"type": "string", "pattern": _B64}),
]
FieldName = Annotated[
    gf256.Field,
    PlainValidator(_decode_field),
    PlainSerializer(lambda field: f"0x{field.modulus:x}", return_type=str),
    WithJsonSchema({"type": "string", "pattern": "^0x1[0-9a-f]{2}$"}),
]
Time = Annotated[
    datetime,
    PlainValidator(_decode_time),
    PlainSerializer(clock.to_text, return_type=str),
    WithJsonSchema({"type": "string", "pattern": "^[0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9]{2}:[0-9]{2}:[0-9]{2}Z$"}),
]
Name = Annotated[str, AfterValidator(_valid_name), Field(min_length=1, max_length=64)]
Text = Annotated[str, AfterValidator(_printable), Field(min_length=1, max_length=MAX_TEXT)]
LongText = Annotated[str, AfterValidator(_printable), Field(min_length=1, max_length=MAX_LONG_TEXT)]
Fingerprint = Annotated[str, Field(pattern=r"^[A-Z2-7]{4}(-[A-Z2-7]{4}){7}$")]
Version = Annotated[Literal[1], BeforeValidator(_not_bool)]
Epoch = Annotated[int, Field(ge=1, le=2**32 - 1)]
Byte = Annotated[int, Field(ge=1, le=255)]
