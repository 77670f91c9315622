"""The journal's entry: one event, chained to the entry before it, and signed by whoever made it.

Source: S. Haber, W. S. Stornetta, "How to time-stamp a digital document", J. Cryptology 3, 1991 (linking by hashes);
FORMAT.md, sec. 16.
May import: shares.errors, shares.documents.base, .event, .members, .party, .signing.
Secret: nothing. Confidential: what events tell of persons and places. Public: the rest.
Does not: know its file, or the entries before it; ``history.journal`` does.
"""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import Field as Member

from shares.documents.base import Document, canonical, read_aloud, sha256
from shares.documents.event import Event, Sequence
from shares.documents.members import Digest, Fingerprint, Signature, Text, Time, Version
from shares.documents.party import OpenPartyKey, PartyCard

MAX_ENTRY_SIGNATURES = 8


class NamedDigest(Document):
    """A document that an entry speaks of: its path in the set's folder, and the SHA-256 of its bytes."""

    path: Text
    digest: Digest


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
        return canonical(self.model_dump(mode="json", by_alias=True))


def line_digest(line: bytes) -> bytes:
    """Return the digest of an entry's line: 32 bytes, what the next entry names as the one before it."""
    return sha256(b"shares/v1/journal", line)


def head_of(sequence: int, digest: bytes) -> Head:
    """Return where a journal stands whose last entry has this number and digest.

    >>> head_of(1, bytes(32)).words()
    'entry 1, AAAA-AAAA-AAAA-AAAA-AAAA-AAAA-AAAA-AAAA'
    """
    return Head(sequence=sequence, head=read_aloud(digest))
