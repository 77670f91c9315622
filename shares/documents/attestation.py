"""The attestation: a custodian's answer to a challenge, signed by the share itself, by the custodian, or by both.

Source: ISO/IEC 9798-3 (the answer names the challenge, whose nonce is fresh); FORMAT_EVIDENCE.md, sec. 17.
May import: shares.documents.base, .entry, .event, .members, .party, .share, .signing.
Secret: the share that signs, and the party key, passed through. Confidential: the answer. Public: its signatures' keys.
Does not: judge: whether the signatures fit, and the answer its challenge, is for ``evidence.judge`` to say.
"""

from __future__ import annotations

import hashlib
from typing import Any, ClassVar, Literal, Self, TypeAlias

from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares.documents.base import Document, write_text
from shares.documents.entry import Head
from shares.documents.event import Grade
from shares.documents.members import Digest, Epoch, Name, SetId, Signature, Text, Time, Version
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.share import SHARE_ATTESTS, Share
from shares.documents.signing import is_signed

Result: TypeAlias = Literal["intact", "damaged", "inconsistent dealing", "seal intact", "seal broken", "present"]
Carrier: TypeAlias = Literal["file", "paper"]

RESULTS: dict[Grade, tuple[Result, ...]] = {
    "content": ("intact", "damaged", "inconsistent dealing"),
    "sealed": ("seal intact", "seal broken"),
    "present": ("present",),
}
"""What may be found, grade by grade; the first word of each is the good one."""


class Attestation(Document):
    """What a custodian answers. ``Attestation.parse`` reads the form alone; the signatures are for a judge.

    Attributes:
        challenge: the digest of the challenge that this answers.
        journal: where the set's journal stood, as that challenge says: a note of it that the custodian signs.
        grade: ``content``: the share was read; ``sealed``: pack and seal were seen; ``present``: attendance.
        result: what was found.
        carrier: what the share was read from, where it was read.
        opened: whether a seal was broken for this answer.
        place: where the answer was given, or the pack is kept.
        serial: of the pack: the one seen, or the new one where a seal was broken.
        card: the custodian's, or of whoever signed in their place; None where the share alone signed.
        share_signature: by the share's attestation key, which the record knows.
        party_signature: by the card's key.
    """

    KIND: ClassVar[str] = "attestation"

    kind: Literal["attestation"]
    version: Version
    set: SetId
    epoch: Epoch
    custodian: Name
    challenge: Digest
    journal: Head | None
    time: Time
    grade: Grade
    result: Result
    carrier: Carrier | None
    opened: bool
    place: Text | None
    serial: Text | None
    remark: Text | None
    card: PartyCard | None
    share_signature: Signature | None
    party_signature: Signature | None

    @model_validator(mode="after")
    def _says_one_thing(self) -> Self:
        is_content = self.grade == "content"
        problem = None
        if self.result not in RESULTS[self.grade]:
            problem = "its result is not one of its grade"
        elif (self.carrier is not None) != is_content:
            problem = "a share that was read, and no other, has a carrier"
        elif self.opened and not is_content:
            problem = "a seal was broken, and yet no content seen"
        elif self.grade == "sealed" and self.serial is None:
            problem = "a sealed pack is known by its serial, and none is given"
        elif (self.card is None) != (self.party_signature is None):
            problem = "a party's signature and its card go together"
        elif self.share_signature is not None and not is_content:
            problem = "a share that was not read cannot have signed"
        elif self.result == "intact" and self.share_signature is None:
            problem = "an intact share signs, and it has not"
        elif self.share_signature is None and self.party_signature is None:
            problem = "nobody signed it"
        if problem:
            raise PydanticCustomError("shares_attestation", "{reason}", {"reason": problem})
        return self

    @property
    def is_good(self) -> bool:
        """Whether what was looked at was found as it should be."""
        return self.result == RESULTS[self.grade][0]

    def signed_members(self) -> dict[str, Any]:
        """Return what both signatures are over: everything but themselves, the card as its fingerprint."""
        facts = self.public(*(set(type(self).model_fields) - {"card", "share_signature", "party_signature"}))
        return facts | {"card": self.card.fingerprint if self.card else None}

    @classmethod
    def signed_by(cls, share: Share | None, key: OpenPartyKey | None, **members: object) -> Self:
        """Return the answer with these members, signed by the share, the custodian's party, or both.

        Args:
            share: the one that was read, where it is to sign.
            key: the custodian's, where there is one.
            **members: all others but kind, version, card and signatures, valid as they are.
        """
        unsigned: dict[str, Any] = {"kind": cls.KIND, "version": 1, **members, "card": key.card if key else None}
        bare = cls.model_construct(**unsigned)
        over = bare.signed_members()
        signatures = {
            "share_signature": share.attest(over) if share else None,
            "party_signature": key.sign(cls.KIND, over) if key else None,
        }
        return cls.model_validate({**unsigned, **signatures})

    def is_signed_by_share(self, attestation_key: bytes) -> bool:
        """Say whether the share whose attestation key a record names has signed this.

        Args:
            attestation_key: Ed25519, 32 bytes.
        """
        signature = self.share_signature
        return signature is not None and is_signed(attestation_key, signature, SHARE_ATTESTS, self.signed_members())

    def is_signed_by_party(self) -> bool:
        """Say whether the party whose card is in this has signed it."""
        if self.card is None or self.party_signature is None:
            return False
        return is_signed(self.card.ed25519, self.party_signature, self.KIND, self.signed_members())

    def digest(self) -> bytes:
        """Return the SHA-256 of its file as this program writes it: 32 bytes, by which a journal names it."""
        return hashlib.sha256(self.to_file()).digest()

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json"))
