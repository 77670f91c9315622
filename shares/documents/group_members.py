"""The types of members that are points or scalars of a group, each with its one encoding.

Source: RFC 9591, sec. 6.1 (encodings of FROST(Ed25519, SHA-512)); FORMAT_KEYS.md, sec. 21.
May import: shares.errors, shares.group.edwards25519, shares.documents.members.
Secret: nothing that stands in a document as it is. Public: every point; scalars that are shown to all.
Does not: hold key shares: those are sealed.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import PlainSerializer, PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError

from shares.documents.members import decode_bytes, encode_bytes
from shares.errors import VerificationError
from shares.group.edwards25519 import Point, Scalar

_SCHEMA = WithJsonSchema({"type": "string", "pattern": "^[A-Za-z0-9_-]{43}$"})


def _point(value: object) -> Point:
    if isinstance(value, Point):
        return value
    try:
        return Point.decode(decode_bytes(value))
    except VerificationError as error:
        reason = error.what
    raise PydanticCustomError("shares_point", "{reason}", {"reason": reason})


def _scalar(value: object) -> Scalar:
    if isinstance(value, Scalar):
        return value
    try:
        return Scalar.decode(decode_bytes(value))
    except VerificationError as error:
        reason = error.what
    raise PydanticCustomError("shares_scalar", "{reason}", {"reason": reason})


def _encode(value: Point | Scalar) -> str:
    return encode_bytes(value.encode())


GroupPoint = Annotated[Point, PlainValidator(_point), PlainSerializer(_encode, return_type=str), _SCHEMA]
ShownScalar = Annotated[Scalar, PlainValidator(_scalar), PlainSerializer(_encode, return_type=str), _SCHEMA]
"""A scalar that everybody may see: a share of a signature, an answer to a complaint."""
