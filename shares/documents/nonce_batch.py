"""Nonces of a signer: sealed each by itself, before and after they are spent; marks; and the commitments handed out.

Source: RFC 9591, sec. 5.1 (commitments may be made before a message is known); FORMAT_KEYS.md, sec. 29.
May import: shares.clock, shares.errors, shares.documents.base, .group_members, .key_record, .members, .party, .signing,
.wrapping; shares.group.edwards25519, shares.memory.
Secret: the nonces inside a ``NoncePair`` or ``BoundPair``. Private: ``NonceMarks``. Public: the batch.
Does not: see to it that nonces are used once; ``keys.nonces`` does.
"""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime
from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares import clock
from shares.documents.base import Document, canonical, sha256, write_text
from shares.documents.group_members import GroupPoint
from shares.documents.key_record import KeyRecord
from shares.documents.members import Digest, Epoch, Fingerprint, Name, SetId, Signature, Time, Version
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed
from shares.documents.wrapping import TAG, Envelope, Sealer
from shares.group.edwards25519 import SIZE, Point
from shares.memory import Secret

MAX_BATCH = 1000
"""The most pairs of nonces in one batch."""

PairId = Annotated[str, Member(pattern="^[0-9a-f]{32}$")]


def pair_id(hiding: Point, binding: Point) -> str:
    """Return the name of a pair of nonces in files: 32 hexadecimal digits of a digest over its commitments."""
    return sha256(b"shares/v1/nonce-pair", hiding.encode(), binding.encode()).hex()[:32]


class SealedPair(Envelope):
    """A hiding and a binding nonce, sealed for the signer's own card.

    Anybody can seal to a card. That the nonces are the signer's own making, its signed ``NonceMarks`` say, and that
    they are those of the commitments, whoever opens them computes.

    Attributes:
        batch: with which it was made.
        hiding, binding: commitments to the nonces.
    """

    kind: str
    version: Version
    key: SetId
    epoch: Epoch
    record: Fingerprint
    signer: Name
    batch: PairId
    hiding: GroupPoint
    binding: GroupPoint

    @model_validator(mode="after")
    def _is_two_scalars(self) -> Self:
        if len(self.sealed) != 2 * SIZE + TAG:
            raise PydanticCustomError("shares_nonces", "it does not hold two sealed numbers of 32 bytes")
        return self

    @classmethod
    def _wrapped(cls, content: Secret, facts: dict[str, Any], seal: Sealer) -> Self:
        wrapping, sealed = seal(content, cls.model_construct(**facts).bound())
        return cls.model_validate({**facts, "wrapping": wrapping, "sealed": sealed, "digest": bytes(32)}).with_digest()


class NoncePair(SealedPair):
    """Nonces that may be used, once, for anything; whether they still may, their file's mark tells."""

    KIND: ClassVar[str] = "nonce-pair"
    BOUND = ("kind", "version", "key", "epoch", "record", "signer", "batch", "hiding", "binding")

    kind: Literal["nonce-pair"]

    @classmethod
    def wrap(
        cls, content: Secret, *, record: KeyRecord, signer: str, batch: str, hiding: Point, binding: Point, seal: Sealer
    ) -> Self:
        """Return a pair of nonces, sealed.

        Args:
            content: hiding and binding nonce, 64 bytes.
            record: of the key that they are for.
            signer: whose they are.
            batch: with which they are made.
            hiding, binding: the commitments to them.
            seal: for the signer's own card.
        """
        facts: dict[str, Any] = {
            "kind": cls.KIND,
            "version": 1,
            "key": record.key,
            "epoch": record.epoch,
            "record": record.fingerprint,
            "signer": signer,
            "batch": batch,
            "hiding": hiding,
            "binding": binding,
        }
        return cls._wrapped(content, facts, seal)


class BoundPair(SealedPair):
    """Nonces that are spent: sealed anew for one purpose, and of use for no other.

    Attributes:
        purpose: a digest of all that the signature share depends on, and of the task.
        mark: of the file that says they are spent; None on a medium where copies are not to be told from it.
    """

    KIND: ClassVar[str] = "nonce-bound"
    BOUND = (*NoncePair.BOUND, "purpose", "mark")

    kind: Literal["nonce-bound"]
    purpose: Digest
    mark: Digest | None

    @classmethod
    def of(cls, pair: NoncePair, content: Secret, *, purpose: bytes, mark: bytes | None, seal: Sealer) -> Self:
        """Return the nonces of a pair, sealed for a purpose.

        Args:
            pair: the nonces as they were before.
            content: what it holds.
            purpose: 32 bytes.
            mark: of the file that says they are spent.
            seal: for the signer's own card.
        """
        same = {name: getattr(pair, name) for name in NoncePair.BOUND}
        return cls._wrapped(content, {**same, "kind": cls.KIND, "purpose": purpose, "mark": mark}, seal)


class NonceMark(Document):
    """How a file of nonces is known to be the one that was written: a digest of what no copy has alike.

    Attributes:
        mark: None on a medium where copies are not to be told from it.
    """

    pair: PairId
    mark: Digest | None


class NonceMarks(Document):
    """The marks of all files of one batch, signed by the signer. Nonces without one are no promise and never used.

    Whose signature it should bear, whoever reads it knows, and asks ``is_by``.
    """

    KIND: ClassVar[str] = "nonce-marks"

    kind: Literal["nonce-marks"]
    version: Version
    key: SetId
    epoch: Epoch
    record: Fingerprint
    signer: Name
    batch: PairId
    marks: Annotated[tuple[NonceMark, ...], Member(min_length=1, max_length=MAX_BATCH)]
    signature: Signature

    @classmethod
    def signed_by(
        cls, key: OpenPartyKey, *, record: KeyRecord, signer: str, batch: str, marks: Sequence[NonceMark]
    ) -> Self:
        """Return the marks of a batch, signed by the signer."""
        unsigned: dict[str, Any] = {
            "kind": cls.KIND,
            "version": 1,
            "key": record.key,
            "epoch": record.epoch,
            "record": record.fingerprint,
            "signer": signer,
            "batch": batch,
            "marks": tuple(marks),
        }
        signature = key.sign(cls.KIND, cls.model_construct(**unsigned)._signed_members())
        return cls.model_validate({**unsigned, "signature": signature})

    def is_by(self, card: PartyCard) -> bool:
        """Say whether the party of a card has signed them."""
        return is_signed(card.ed25519, self.signature, self.KIND, self._signed_members())

    def _signed_members(self) -> dict[str, Any]:
        return self.public(*(set(type(self).model_fields) - {"signature"}))

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json"))


class CommitmentPair(Document):
    """The commitments to a hiding and a binding nonce."""

    hiding: GroupPoint
    binding: GroupPoint


class NonceBatch(Document):
    """The commitments that a signer hands out for signatures to come, signed by the signer.

    ``NonceBatch.parse`` refuses one whose signature does not fit; whether its card is a custodian's, the record tells.
    """

    KIND: ClassVar[str] = "nonce-batch"

    kind: Literal["nonce-batch"]
    version: Version
    key: SetId
    epoch: Epoch
    record: Fingerprint
    signer: Name
    commitments: Annotated[tuple[CommitmentPair, ...], Member(min_length=1, max_length=MAX_BATCH)]
    created: Time
    card: PartyCard
    signature: Signature

    @model_validator(mode="after")
    def _is_the_signers(self) -> Self:
        if len({pair_id(one.hiding, one.binding) for one in self.commitments}) != len(self.commitments):
            raise PydanticCustomError("shares_nonces", "it holds one pair of commitments twice")
        if not is_signed(self.card.ed25519, self.signature, self.KIND, self._signed_members()):
            raise PydanticCustomError("shares_nonces", "its signature does not fit its content")
        return self

    def _signed_members(self) -> dict[str, Any]:
        return self.public(*(set(type(self).model_fields) - {"signature"}))

    @classmethod
    def signed_by(
        cls,
        key: OpenPartyKey,
        *,
        record: KeyRecord,
        signer: str,
        commitments: Sequence[tuple[Point, Point]],
        created: datetime | None = None,
    ) -> Self:
        """Return a batch, signed by its signer; ``created`` is now by default."""
        unsigned: dict[str, Any] = {
            "kind": cls.KIND,
            "version": 1,
            "key": record.key,
            "epoch": record.epoch,
            "record": record.fingerprint,
            "signer": signer,
            "commitments": tuple(CommitmentPair(hiding=hiding, binding=binding) for hiding, binding in commitments),
            "created": clock.now() if created is None else created,
            "card": key.card,
        }
        signature = key.sign(cls.KIND, cls.model_construct(**unsigned)._signed_members())
        return cls.model_validate({**unsigned, "signature": signature})

    def digest(self) -> bytes:
        """Return 32 bytes over the whole batch, its signature included."""
        return sha256(b"shares/v1/nonce-batch", canonical(self.model_dump(mode="json")))

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json"))
