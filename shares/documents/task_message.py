"""The message of a task: what one party says in one round, to all in the open and to single ones sealed.

Source: R. Gennaro et al., "Secure distributed key generation for discrete-log based cryptosystems", J. Cryptology 20,
2007 (what is said in joint generation); RFC 9591, sec. 5 (in signing); FORMAT_KEYS.md, sec. 24.
May import: shares.clock, shares.documents.base, .group_members, .key_event, .key_record, .members, .party, .signing,
.task.
Secret: nothing that is not sealed; the sender's party key is passed through. Public: what is said to all, and lengths.
Does not: judge what is said; ``keys`` does.
"""

from __future__ import annotations

from datetime import datetime
from functools import cached_property
from typing import Annotated, Any, ClassVar, Literal, Self, TypeAlias

from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares import clock
from shares.documents.base import Document, canonical, sha256, write_text
from shares.documents.group_members import GroupPoint, ShownScalar
from shares.documents.key_event import MAX_HOLDERS
from shares.documents.key_record import KeySignature
from shares.documents.members import Digest, Name, PublicKey, Sealed, Signature, Text, Time, Version
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed
from shares.documents.task import Task

MAX_ROUNDS = 8
Proof = Signature
"""A challenge and a response, 32 bytes each."""


class OpeningKey(Document):
    """Round 0: a fresh HPKE key of this party, for this task alone. Its private half is erased at the end."""

    what: Literal["opening-key"]
    x25519: PublicKey


class Dealing(Document):
    """Joint generation: Pedersen's commitments to this party's polynomial; share and blind go to each, sealed."""

    what: Literal["dealing"]
    commitments: Annotated[tuple[GroupPoint, ...], Member(min_length=1, max_length=MAX_HOLDERS)]


class Complaint(Document):
    """A dealing that does not hold, and why, in words without a secret."""

    against: Name
    reason: Text


class Review(Document):
    """Joint generation: whose dealings do not hold, or nobody's."""

    what: Literal["review"]
    complaints: Annotated[tuple[Complaint, ...], Member(max_length=MAX_HOLDERS)]


class ShownShare(Document):
    """What a party was dealt, shown to all, since it is disputed.

    Attributes:
        to: whose it is.
        share, blind: the two numbers that it was dealt.
    """

    to: Name
    share: ShownScalar
    blind: ShownScalar


class Answer(Document):
    """Joint generation: what this party has dealt to each that complained of it."""

    what: Literal["answer"]
    shares: Annotated[tuple[ShownShare, ...], Member(min_length=1, max_length=MAX_HOLDERS)]


class Reveal(Document):
    """Joint generation: Feldman's commitments to the same polynomial, and a proof that its constant is known."""

    what: Literal["reveal"]
    commitments: Annotated[tuple[GroupPoint, ...], Member(min_length=1, max_length=MAX_HOLDERS)]
    proof: Proof


class Confirmation(Document):
    """Joint generation: this party's signature on the key record that comes of it."""

    what: Literal["confirmation"]
    signature: KeySignature


class Accusation(Document):
    """Joint generation: a party whose revealed commitments are not to what it has dealt, with what proves it."""

    what: Literal["accusation"]
    against: Name
    reason: Text
    share: ShownScalar | None
    blind: ShownScalar | None


class Commitment(Document):
    """Signing: commitments to this signer's hiding and binding nonce."""

    what: Literal["commitment"]
    hiding: GroupPoint
    binding: GroupPoint


class SignatureShare(Document):
    """Signing: this signer's share of the signature."""

    what: Literal["signature-share"]
    share: ShownScalar


class Partial(Document):
    """Opening: this custodian's partial result and its proof, sealed for the receiver."""

    what: Literal["partial"]


Body: TypeAlias = Annotated[
    OpeningKey | Dealing | Review | Answer | Reveal | Confirmation | Accusation | Commitment | SignatureShare | Partial,
    Member(discriminator="what"),
]


class SealedFor(Document):
    """What one party alone can read: encapsulated key and ciphertext, by HPKE to its key of round 0."""

    to: Name
    box: Sealed


class TaskMessage(Document):
    """What a party says in one round.

    ``TaskMessage.parse`` reads one; whether its signature is its sender's, the task's cards tell: ``is_by``.

    Attributes:
        task: the task's digest.
        round: from 0.
        seen: digest over all messages of earlier rounds, as this party has seen them: all must have seen the same.
    """

    KIND: ClassVar[str] = "task-message"

    kind: Literal["task-message"]
    version: Version
    task: Digest
    round: Annotated[int, Member(ge=0, lt=MAX_ROUNDS)]
    sender: Name
    seen: Digest
    body: Body
    sealed: Annotated[tuple[SealedFor, ...], Member(max_length=MAX_HOLDERS + 1)]
    created: Time
    signature: Signature

    @model_validator(mode="after")
    def _addresses_each_once(self) -> Self:
        if len({one.to for one in self.sealed}) != len(self.sealed):
            raise PydanticCustomError("shares_message", "it is sealed for one party twice")
        return self

    def _signed_members(self) -> dict[str, Any]:
        return self.public(*(set(type(self).model_fields) - {"signature"}))

    @classmethod
    def signed_by(
        cls,
        key: OpenPartyKey,
        *,
        task: bytes,
        round: int,
        sender: str,
        seen: bytes,
        body: Body,
        sealed: tuple[SealedFor, ...] = (),
        created: datetime | None = None,
    ) -> Self:
        """Return the message, signed by its sender; ``created`` is now by default."""
        unsigned: dict[str, Any] = {
            "kind": cls.KIND,
            "version": 1,
            "task": task,
            "round": round,
            "sender": sender,
            "seen": seen,
            "body": body,
            "sealed": sealed,
            "created": clock.now() if created is None else created,
        }
        signature = key.sign(cls.KIND, cls.model_construct(**unsigned)._signed_members())
        return cls.model_validate({**unsigned, "signature": signature})

    def is_by(self, card: PartyCard) -> bool:
        """Say whether the party of this card has signed it."""
        return is_signed(card.ed25519, self.signature, self.KIND, self._signed_members())

    def digest(self) -> bytes:
        """Return 32 bytes over the whole message, its signature included."""
        return self._digest

    @cached_property
    def _digest(self) -> bytes:
        # Each of a party's messages names all earlier ones by it, and is checked so at every look into a folder.
        return sha256(b"shares/v1/task-message", canonical(self.model_dump(mode="json")))

    def box_for(self, name: str) -> bytes | None:
        """Return what is sealed for a party, or None."""
        return next((one.box for one in self.sealed if one.to == name), None)

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json"))


def box_info(task: Task, round: int, sender: str, to: str) -> bytes:
    """Return HPKE's info for what one party seals for another in a round: public, and the same nowhere else."""
    return b"shares/v1/task-box" + canonical(
        {
            "task": task.digest().hex(),
            "key": task.key.hex(),
            "epoch": task.epoch,
            "round": round,
            "from": sender,
            "to": to,
        }
    )
