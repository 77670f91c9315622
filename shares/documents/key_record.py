"""The key record: the public document of a threshold key, what anyone needs to verify its shares and its use.

Source: P. Feldman, "A practical scheme for non-interactive verifiable secret sharing", FOCS 1987 (the commitments);
RFC 9591, appendix C; FORMAT_KEYS.md, sec. 21.
May import: shares.errors, shares.clock, shares.group, shares.sharing, shares.documents.base, .group_members,
.key_event, .members, .party, .signing.
Secret: nothing; the signer's party key is passed through. Public: everything.
Does not: say who the parties are: people do, by the fingerprints of their cards.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from datetime import datetime
from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares import clock
from shares.documents.base import Document, fingerprint, write_text
from shares.documents.group_members import GroupPoint
from shares.documents.key_event import MAX_HOLDERS, Origin
from shares.documents.members import Digest, Epoch, Fingerprint, Name, SetId, Signature, Text, Time, Version
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed
from shares.errors import ParameterError
from shares.group.edwards25519 import Point

Index = Annotated[int, Member(ge=1, le=2**16 - 1)]
"""Where a custodian's key share stands: the polynomial's argument, never 0."""
Need = Annotated[int, Member(ge=2, le=MAX_HOLDERS)]


class Holder(Document):
    """A custodian of the key: where the key share stands, and whose it is."""

    name: Name
    index: Index
    card: PartyCard


class KeySignature(Document):
    """A party's signature on a key record: the dealer's, or that of a custodian who took part in its birth."""

    time: Time
    card: PartyCard
    signature: Signature


class KeyRecord(Document):
    """The public record of one epoch of a threshold key.

    ``KeyRecord.parse`` refuses one that contradicts itself, or one of whose signatures does not fit.

    Attributes:
        key: the key's id; the same in every epoch, as the public key is.
        origin: ``dealt`` by one machine that held the key, or ``joint``: it was in no one place ever.
        need: how many custodians use it, k.
        commitments: to the coefficients of the polynomial of degree k - 1; the first is the public key.
        generation: the transcript of the joint generation, 32 bytes; None for a dealt key.
        previous: the record of the epoch before.
    """

    KIND: ClassVar[str] = "key-record"

    kind: Literal["key-record"]
    version: Version
    key: SetId
    epoch: Epoch
    label: Text
    created: Time
    origin: Origin
    need: Need
    custodians: Annotated[tuple[Holder, ...], Member(min_length=2, max_length=MAX_HOLDERS)]
    commitments: Annotated[tuple[GroupPoint, ...], Member(min_length=2, max_length=MAX_HOLDERS)]
    generation: Digest | None
    previous: Fingerprint | None
    fingerprint: Fingerprint
    signatures: Annotated[tuple[KeySignature, ...], Member(max_length=MAX_HOLDERS + 1)]

    @classmethod
    def of(
        cls,
        *,
        key: bytes,
        label: str,
        created: datetime,
        origin: Origin,
        custodians: Sequence[Holder],
        commitments: Sequence[Point],
        generation: bytes | None = None,
    ) -> Self:
        """Return the unsigned record of a key's first epoch, its fingerprint filled in; k is as many as commitments."""
        members: dict[str, Any] = {
            "kind": cls.KIND,
            "version": 1,
            "key": key,
            "epoch": 1,
            "label": label,
            "created": created,
            "origin": origin,
            "need": len(commitments),
            "custodians": tuple(custodians),
            "commitments": tuple(commitments),
            "generation": generation,
            "previous": None,
            "signatures": (),
        }
        own = cls.model_construct(**members, fingerprint="").own_fingerprint()
        return cls.model_validate({**members, "fingerprint": own})

    @model_validator(mode="after")
    def _agrees_with_itself(self) -> Self:
        problem = self._contradiction()
        if problem:
            raise PydanticCustomError("shares_key_record", "{reason}", {"reason": problem})
        return self

    def _contradiction(self) -> str | None:
        holders = self.custodians
        if len({one.name.casefold() for one in holders}) != len(holders):
            return "two custodians have one name"
        if len({one.index for one in holders}) != len(holders):
            return "two key shares stand at one index"
        if len({one.card.ed25519 for one in holders}) != len(holders):
            return "two custodians have one party key"
        if any(one.name != one.card.name for one in holders):
            return "it gives a custodian another name than their card does"
        if self.need > len(holders):
            return "it needs more custodians than there are"
        if len(self.commitments) != self.need:
            return "it does not hold as many commitments as custodians are needed"
        if (self.generation is None) != (self.origin == "dealt"):
            return "a key that was generated jointly, and no other, has a transcript of that"
        if self.fingerprint != self.own_fingerprint():
            return "its fingerprint does not fit its content"
        return self._signature_problem()

    def _signature_problem(self) -> str | None:
        for one in self.signatures:
            if not is_signed(one.card.ed25519, one.signature, self.KIND, self._signed_members(one)):
                return f"the signature by {one.card.name} does not fit its content"
        if len({one.card.ed25519 for one in self.signatures}) != len(self.signatures):
            return "one party signed it twice"
        return None

    def _signed_members(self, one: KeySignature) -> dict[str, Any]:
        """Return what a signature is over: time and signer, and the whole record but its signatures."""
        signer = {"time": clock.to_text(one.time), "card": one.card.fingerprint}
        return signer | {"record": self.public(*(set(type(self).model_fields) - {"signatures"}))}

    def own_fingerprint(self) -> str:
        """Compute the fingerprint of what the record holds (signatures apart)."""
        return fingerprint(self.KIND, self.public(*(set(type(self).model_fields) - {"fingerprint", "signatures"})))

    def signature_by(self, key: OpenPartyKey, *, time: datetime | None = None) -> KeySignature:
        """Return a party's signature on this record.

        Args:
            key: the signer's.
            time: of signing, UTC to the second; now by default.
        """
        unsigned = KeySignature(time=clock.now() if time is None else time, card=key.card, signature=bytes(64))
        return unsigned.model_copy(update={"signature": key.sign(self.KIND, self._signed_members(unsigned))})

    def signed(self, signatures: Iterable[KeySignature]) -> Self:
        """Return this record with more signatures. What it holds besides stays as it is, and so the fingerprint.

        Raises:
            ParameterError: one does not fit, or its party has signed already.
        """
        made = self.model_copy(update={"signatures": (*self.signatures, *signatures)})
        problem = made._signature_problem()
        if problem:
            raise ParameterError(problem)
        return made

    def is_confirmed(self) -> bool:
        """Say whether everyone who must have signed has: each custodian of a joint key, somebody for a dealt one."""
        signed = {one.card.ed25519 for one in self.signatures}
        if self.origin == "dealt":
            return bool(signed)
        return all(one.card.ed25519 in signed for one in self.custodians)

    @property
    def public_key(self) -> Point:
        """The key's public half: an Ed25519 public key."""
        return self.commitments[0]

    def holder(self, name: str) -> Holder:
        """Return a custodian of this key.

        Raises:
            ParameterError: the record names none of that name.
        """
        found = next((one for one in self.custodians if one.name == name), None)
        if found is None:
            names = ", ".join(one.name for one in self.custodians)
            raise ParameterError(f"{name} is no custodian of this key", hint=f"they are {names}")
        return found

    def holder_by(self, card: PartyCard) -> Holder | None:
        """Return the custodian with this card's signing key, or None."""
        return next((one for one in self.custodians if one.card.ed25519 == card.ed25519), None)

    def to_file(self) -> bytes:
        """Return the bytes of the record's file. Public."""
        return write_text(self.model_dump(mode="json"))
