"""The challenge: a fresh, dated and signed question to custodians, which one answer fits and no earlier one.

Source: ISO/IEC 9798-3 (a nonce and a signature show that an answer is fresh); FORMAT_EVIDENCE.md, sec. 17.
May import: shares.clock, shares.sharing.rule, shares.documents.base, .entry, .event, .members, .party, .signing.
Secret: nothing; the asker's party key is passed through. Confidential: who is asked, and when. Public: the rest.
Does not: say who the asker is: people do, by the fingerprint of the card in it.
"""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal, Self, TypeAlias

from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares import clock
from shares.documents.base import Document, canonical, read_aloud, sha256, write_text
from shares.documents.entry import Head
from shares.documents.event import Sequence
from shares.documents.members import Digest, Epoch, Fingerprint, Name, SetId, Signature, Text, Time, Version
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed
from shares.sharing.rule import MAX_POINTS

Purpose: TypeAlias = Literal["attestation", "attendance"]


class Challenge(Document):
    """What custodians are asked, by whom, and until when.

    ``Challenge.parse`` refuses one whose signature does not fit.

    Attributes:
        purpose: ``attestation`` asks whether the share is there and whole; ``attendance``, in a drill, who is there.
        drill: the number of the journal entry that opened the drill, for attendance.
        custodians: who is asked.
        nonce: 32 fresh bytes.
        journal: where the set's journal stood; None before its first entry.
        card: the asker's.
    """

    KIND: ClassVar[str] = "challenge"

    kind: Literal["challenge"]
    version: Version
    set: SetId
    epoch: Epoch
    record: Fingerprint
    label: Text
    purpose: Purpose
    drill: Sequence | None
    custodians: Annotated[tuple[Name, ...], Member(min_length=1, max_length=MAX_POINTS)]
    nonce: Digest
    created: Time
    due: Time
    journal: Head | None
    card: PartyCard
    signature: Signature

    @model_validator(mode="after")
    def _is_the_askers(self) -> Self:
        problem = None
        if len({name.casefold() for name in self.custodians}) != len(self.custodians):
            problem = "it asks one custodian twice"
        elif self.due <= self.created:
            problem = "it is due before it was made"
        elif (self.drill is not None) != (self.purpose == "attendance"):
            problem = "attendance, and nothing else, is asked for in a drill"
        elif not is_signed(self.card.ed25519, self.signature, self.KIND, self._signed_members()):
            problem = "its signature does not fit its content"
        if problem:
            raise PydanticCustomError("shares_challenge", "{reason}", {"reason": problem})
        return self

    def _signed_members(self) -> dict[str, Any]:
        facts = self.public(*(set(type(self).model_fields) - {"card", "signature"}))
        return facts | {"card": self.card.fingerprint}

    @classmethod
    def signed_by(cls, key: OpenPartyKey, **members: object) -> Self:
        """Return the challenge with these members, signed.

        Args:
            key: the asker's.
            **members: all others but kind, version, card and signature, valid as they are.
        """
        unsigned: dict[str, Any] = {"kind": cls.KIND, "version": 1, **members, "card": key.card}
        bare = cls.model_construct(**unsigned)
        signature = key.sign(cls.KIND, bare._signed_members())
        return cls.model_validate({**unsigned, "signature": signature})

    def digest(self) -> bytes:
        """Return what an answer names: 32 bytes over the whole challenge, its signature included."""
        return sha256(b"shares/v1/challenge", canonical(self.model_dump(mode="json")))

    @property
    def fingerprint(self) -> str:
        """What is read aloud of it, to know by another way that it is the one that was sent."""
        return read_aloud(self.digest())

    def words(self) -> str:
        """Say whom it asks for what, and until when."""
        asked = "whether the share is there and whole" if self.purpose == "attestation" else "who is there"
        verb = "is" if len(self.custodians) == 1 else "are"
        return f"{', '.join(self.custodians)} {verb} asked {asked}, until {clock.to_text(self.due)}"

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json"))
