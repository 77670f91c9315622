"""The journal's entry: one event, chained to the entry before it, and signed by whoever made it.

Source: S. Haber, W. S. Stornetta, "How to time-stamp a digital document", J. Cryptology 3, 1991 (linking by hashes);
FORMAT_EVIDENCE.md, sec. 16.
May import: shares.errors, shares.documents.base, .event, .members, .party, .signing.
Secret: nothing. Confidential: what events tell of persons and places. Public: the rest.
Does not: know its file, or the entries before it; ``history.journal`` does.
"""

from __future__ import annotations

import contextlib
import hashlib
import json
from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import Field as Member
from pydantic import ValidationError

from shares.documents.base import MAX_FILE, Document, read_aloud, sha256
from shares.documents.event import Event, Sequence
from shares.documents.members import Digest, Fingerprint, Signature, Text, Time, Version
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed_text
from shares.errors import DocumentError, ParameterError

MAX_ENTRY_SIGNATURES = 8
_ENCODER = json.JSONEncoder(ensure_ascii=False, sort_keys=True, separators=(",", ":"))


class NamedDigest(Document):
    """A document that an entry speaks of: its path in the set's folder, and the SHA-256 of its bytes."""

    path: Text
    digest: Digest

    @classmethod
    def of(cls, path: str, data: bytes) -> Self:
        """Return a file as an entry names it.

        Args:
            path: in the set's folder, with ``/`` between its parts.
            data: what the file holds.

        Raises:
            ParameterError: the path is too long, or holds what cannot be shown.
        """
        with contextlib.suppress(ValidationError):
            return cls(path=path, digest=hashlib.sha256(data).digest())
        raise ParameterError("a path in a set's folder has 1 to 500 characters that can be shown", where=ascii(path))


class EntrySignature(Document):
    """A party's signature on an entry; the card stands in this entry or one before it."""

    card: Fingerprint
    signature: Signature


class Head(Document):
    """Where a journal stood: the number of its last entry, and what that entry's digest reads aloud as."""

    sequence: Sequence
    head: Fingerprint

    def words(self) -> str:
        """Say it in one line, to be noted elsewhere."""
        return f"entry {self.sequence}, {self.head}"


class Entry(Document):
    """One line of a journal."""

    KIND: ClassVar[str] = "journal-entry"

    kind: Literal["journal-entry"]
    version: Version
    sequence: Sequence
    time: Time
    previous: Digest | None
    event: Annotated[Event, Member(discriminator="what")]
    documents: Annotated[tuple[NamedDigest, ...], Member(max_length=1000)]
    cards: Annotated[tuple[PartyCard, ...], Member(max_length=1000)]
    signatures: Annotated[tuple[EntrySignature, ...], Member(max_length=MAX_ENTRY_SIGNATURES)]

    @classmethod
    def of_line(cls, line: bytes) -> Self:
        """Read the entry of a line that stands in its one canonical form.

        Args:
            line: without the line end, at most 1 MiB.

        Raises:
            DocumentError: it is no entry, or is written in another form.
        """
        # What its own canonical form equals has no member twice, no fraction, and nothing that an entry does not have.
        if len(line) <= MAX_FILE:
            with contextlib.suppress(ValidationError):
                entry = cls.model_validate_json(line)
                if entry.line() == line:
                    return entry
        cls.parse(line)
        raise DocumentError("it is not in canonical form", hint="the file is damaged or was made by something else")

    def unsigned_text(self, line: bytes) -> bytes:
        """Return the entry but its signatures in canonical form, cut from its own line.

        Args:
            line: this entry's, as ``of_line`` has read it.
        """
        # Members are in the order of their names. Within a text a quotation mark has a backslash before it, so that
        # no text holds what is looked for, and no member after this one has its name.
        before, _, after = line.rpartition(b'"signatures":[')
        return before + after.partition(b"],")[2]

    def is_signed(self, one: EntrySignature, card: PartyCard, unsigned: bytes) -> bool:
        """Say whether a signature is one by the party of this card.

        Args:
            one: a signature on this entry.
            card: the signer's.
            unsigned: the entry but its signatures, from ``unsigned_text``.
        """
        members = b'{"card":"' + one.card.encode("ascii") + b'","entry":' + unsigned + b"}"
        return is_signed_text(card.ed25519, one.signature, self.KIND, members)

    def signed_members(self, card: str) -> dict[str, Any]:
        """Return what a signature by the party of this card is over: the signer, and the entry but its signatures."""
        return {"card": card, "entry": self.public(*(set(type(self).model_fields) - {"signatures"}))}

    def signed(self, key: OpenPartyKey) -> Self:
        """Return this entry with one more signature."""
        signature = key.sign(self.KIND, self.signed_members(key.card.fingerprint))
        own = EntrySignature(card=key.card.fingerprint, signature=signature)
        return self.model_copy(update={"signatures": (*self.signatures, own)})

    def line(self) -> bytes:
        """Return the entry's line, without the line end: its canonical form."""
        # For members named in ASCII and texts without control characters this is the form of RFC 8785, and faster.
        return _ENCODER.encode(self.model_dump(mode="json", by_alias=True)).encode("utf-8")

    def head(self) -> Head:
        """Return where a journal stands whose last entry this is."""
        return head_of(self.sequence, line_digest(self.line()))


def line_digest(line: bytes) -> bytes:
    """Return the digest of an entry's line: 32 bytes, what the next entry names as the one before it."""
    return sha256(b"shares/v1/journal", line)


def head_of(sequence: int, digest: bytes) -> Head:
    """Return where a journal stands whose last entry has this number and digest.

    >>> head_of(1, bytes(32)).words()
    'entry 1, AAAA-AAAA-AAAA-AAAA-AAAA-AAAA-AAAA-AAAA'
    """
    return Head(sequence=sequence, head=read_aloud(digest))
