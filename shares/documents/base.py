"""What all documents share: strict reading, canonical bytes, fingerprints.

Source: RFC 8259 (JSON), RFC 8785 (canonical form), RFC 4648 (base32), FIPS 180-4 (SHA-256); FORMAT.md, sec. 1.
May import: shares.errors.
Secret: the text of a share, on its way through the JSON parser (listed in SECURITY.md). Public: everything else;
only public
members are ever made canonical.
Does not: touch files. Errors name members and rules, never a value.
"""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Mapping
from typing import Any, ClassVar, NoReturn, Self

import rfc8785
from pydantic import BaseModel, ConfigDict, ValidationError

from shares.errors import DocumentError, OtherKindError

MAX_FILE = 1 << 20
"""The largest document, in bytes: 1 MiB."""

_MAX_INTEGER_DIGITS = 10
KINDS = (
    "share",
    "record",
    "wrapped-share",
    "sealed-secret",
    "party-key",
    "party-card",
    "acknowledgement",
    "journal-entry",
    "challenge",
    "attestation",
    "drill-report",
    "ceremony-script",
    "key-record",
    "key-share",
    "task",
    "task-message",
    "task-step",
    "task-done",
    "nonce-batch",
    "nonce-pair",
    "nonce-bound",
    "nonce-marks",
    "opened-message",
)
VERSION = 1


class Document(BaseModel):
    """The base of every document: strict, frozen, nothing extra, no input in its errors."""

    KIND: ClassVar[str] = ""
    model_config = ConfigDict(
        strict=True,
        frozen=True,
        extra="forbid",
        hide_input_in_errors=True,
        defer_build=True,  # A command pays for the documents that it meets, not for all kinds.
        json_schema_serialization_defaults_required=True,  # What a program may leave out, a document has.
        cache_strings="none",  # The parser would keep short strings of any document in a cache of its own.
    )

    @classmethod
    def parse(cls, data: bytes, *, where: str | None = None) -> Self:
        """Read a document from the bytes of a file.

        Args:
            data: the file, at most 1 MiB.
            where: what to call it in an error, normally its path.

        Raises:
            DocumentError: not one JSON object of this kind and version with exactly the members it must have.
        """
        _check_kind(parse_object(data, where=where), cls.KIND, where)
        try:
            return cls.model_validate_json(data)
        except ValidationError as error:
            problem = _first_problem(error)
        # Raised outside the handler: a ValidationError carries its input, and would travel along as the context.
        raise DocumentError(problem, where=where, hint="the file is damaged or was made by something else")

    def public(self, *members: str) -> dict[str, Any]:
        """Return the members named, as JSON values."""
        return self.model_dump(mode="json", by_alias=True, include=set(members))

    def model_copy(self, *, update: Mapping[str, Any] | None = None, deep: bool = False) -> Self:
        """Return a copy, some members changed, which remembers nothing that was worked out from the old ones."""
        copied = super().model_copy(update=update, deep=deep)
        for name in copied.__dict__.keys() - type(self).model_fields.keys():
            del copied.__dict__[name]
        return copied


def _check_kind(members: dict[str, Any], wanted: str, where: str | None) -> None:
    kind, version = members.get("kind"), members.get("version")
    if kind != wanted:
        if kind in KINDS:
            is_key = str(kind).startswith("key-") and not wanted.startswith("key-")
            raise OtherKindError(
                f"{_a(wanted)} is wanted here, but it is {_a(str(kind))}",
                where=where,
                hint="a threshold key has commands of its own: see `shares key --help`" if is_key else None,
            )
        raise DocumentError(
            f"{_a(wanted)} is wanted here, but it does not say that it is one of this program's documents", where=where
        )
    if version != VERSION or isinstance(version, bool):
        raise DocumentError(
            f"it is {_a(wanted)} of a version that this program does not know (it reads version {VERSION})",
            where=where,
            hint="use the release of this program that wrote it, or a later one",
        )


def _a(kind: str) -> str:
    return f"{'an' if kind[0] in 'aeiou' else 'a'} {kind.replace('-', ' ')}"


def _first_problem(error: ValidationError) -> str:
    details = error.errors(include_input=False, include_context=False, include_url=False)[0]
    unknown = details["type"] == "extra_forbidden"
    parts = [part for part in details["loc"] if not (unknown and part == details["loc"][-1])]
    place = "".join(f"[{part}]" if isinstance(part, int) else f".{part}" for part in parts).lstrip(".")
    if unknown:
        return f"{place or 'the document'} has a member that this version does not know"
    if details["type"] == "missing":
        return f"the member {place} is missing"
    rule = details["msg"] if details["type"].startswith("shares_") else details["type"].replace("_", " ")
    return f"{place or 'the document'} is not as the format says: {rule}"


def parse_object(data: bytes, *, where: str | None = None) -> dict[str, Any]:
    """Return the JSON object in ``data``, refusing what JSON leaves open: repeated names, fractions, huge numbers,
    deep nesting.

    Raises:
        DocumentError: too large, not UTF-8, not JSON, not one object.
    """
    if len(data) > MAX_FILE:
        raise DocumentError("the document is larger than 1 MiB", where=where, hint="no share or record is that large")
    problem = None
    try:
        found = json.loads(
            data.decode("utf-8"),
            object_pairs_hook=_unique,
            parse_int=_integer,
            parse_float=_no_fraction,
            parse_constant=_no_fraction,
        )
    except UnicodeDecodeError:
        problem = "it is not UTF-8 text"
    except RecursionError:
        problem = "it is nested too deeply"
    except json.JSONDecodeError as error:
        problem = f"it is not one JSON object: line {error.lineno}, column {error.colno}"
    except DocumentError as error:
        problem = error.what
    if problem is None:
        if isinstance(found, dict):
            return found
        problem = "it is JSON, but not an object"
    raise DocumentError(problem, where=where, hint="the file is damaged or was made by something else")


def _unique(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    members = dict(pairs)
    if len(members) != len(pairs):
        raise DocumentError("a member name stands twice in one object")
    return members


def _integer(text: str) -> int:
    if len(text) > _MAX_INTEGER_DIGITS or text.startswith("-"):
        raise DocumentError("a number is out of range")
    return int(text)


def _no_fraction(_: str) -> NoReturn:
    raise DocumentError("a number is not an integer")


def write_text(members: dict[str, Any]) -> bytes:
    """Return the file form of a document: indented JSON, UTF-8, one newline at the end."""
    return (json.dumps(members, indent=2, ensure_ascii=False) + "\n").encode("utf-8")


def canonical(value: dict[str, Any]) -> bytes:
    """Return the RFC 8785 form of a public JSON value."""
    return rfc8785.dumps(value)


def sha256(label: bytes, *parts: bytes) -> bytes:
    """Return SHA-256(label || parts): 32 bytes."""
    digest = hashlib.sha256(label)
    for part in parts:
        digest.update(part)
    return digest.digest()


def fingerprint(kind: str, members: dict[str, Any]) -> str:
    """Return the 160-bit fingerprint of a document's public members, 8 groups of 4 base32 characters.

    >>> fingerprint("record", {})
    'MWWV-AEU2-J6FP-IMWQ-W6L6-5ILL-Q6O7-KBX4'
    """
    return read_aloud(sha256(b"shares/v1/fingerprint", kind.encode("ascii"), canonical(members)))


def read_aloud(digest: bytes) -> str:
    """Return the first 160 bits of a digest as 8 groups of 4 base32 characters.

    Args:
        digest: 20 bytes or more.
    """
    letters = base64.b32encode(digest[:20]).decode("ascii")
    return "-".join(letters[i : i + 4] for i in range(0, 32, 4))
