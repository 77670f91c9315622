"""The record: the public document of a set and epoch, with all that anyone needs to verify.

Source: FORMAT.md, sec. 5.
May import: shares.errors, shares.clock, shares.field, shares.sharing, shares.documents.base, .members, .party, .share,
.signing.
Secret: nothing. Public: everything; a party's key that signs is passed through.
Does not: hold persons or sites, which stay in the policy, or check shares; ``custody.verify`` does.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from datetime import datetime
from typing import Annotated, Any, ClassVar, Literal, Self, TypeAlias

from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares import clock
from shares.documents.base import Document, fingerprint, write_text
from shares.documents.members import (
    Byte,
    Check,
    Digest,
    Epoch,
    FieldName,
    Fingerprint,
    Name,
    PublicKey,
    SetId,
    Signature,
    Text,
    Time,
    Version,
)
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.share import MAX_ROW, MIN_ROW
from shares.documents.signing import is_signed
from shares.errors import ParameterError
from shares.field.gf256 import Field
from shares.sharing.consistency import check_matrix, inconsistent_nodes
from shares.sharing.rule import MAX_CHILDREN, MAX_DEPTH, MAX_POINTS, Rule


class RuleNode(Document):
    """A node of the rule as JSON: any ``need`` of ``from``."""

    need: Byte
    children: Annotated[tuple[RuleNode | Name, ...], Member(alias="from", min_length=1, max_length=MAX_CHILDREN)]

    @classmethod
    def of(cls, rule: Rule) -> RuleNode:
        """Return the JSON form of a rule."""
        children = tuple(cls.of(child) if isinstance(child, Rule) else child for child in rule.children)
        return cls.model_validate({"need": rule.need, "from": children})

    def to_rule(self) -> Rule:
        """Return the rule. Raises ParameterError where it is out of bounds."""
        return Rule(
            self.need, tuple(child.to_rule() if isinstance(child, RuleNode) else child for child in self.children)
        )


class Custodian(Document):
    """What the record says of one custodian's share."""

    name: Name
    share_commitment: Digest
    attestation_key: PublicKey


Role: TypeAlias = Literal["dealer", "witness"]
MAX_SIGNATURES = 64


class RecordSignature(Document):
    """A party's signature on a record: as its dealer, or as a witness to the split."""

    role: Role
    time: Time
    card: PartyCard
    signature: Signature


class Record(Document):
    """The public record of one epoch of one share set.

    ``Record.parse`` reads one and refuses it where its rule, custodians and checks disagree or its fingerprint does
    not fit.
    """

    KIND: ClassVar[str] = "record"

    kind: Literal["record"]
    version: Version
    set: SetId
    epoch: Epoch
    label: Text
    created: Time
    field: FieldName
    row_length: Annotated[int, Member(ge=MIN_ROW, le=MAX_ROW)]
    rule: RuleNode
    custodians: Annotated[tuple[Custodian, ...], Member(min_length=1, max_length=MAX_POINTS)]
    checks: Annotated[
        tuple[Annotated[tuple[Check, ...], Member(min_length=1, max_length=MAX_CHILDREN)], ...],
        Member(min_length=1, max_length=MAX_POINTS * MAX_DEPTH),
    ]
    secret_commitment: Digest
    encrypted_file: Digest | None
    policy: Digest | None
    previous: Fingerprint | None
    fingerprint: Fingerprint
    signatures: Annotated[tuple[RecordSignature, ...], Member(max_length=MAX_SIGNATURES)]

    @classmethod
    def of(
        cls,
        *,
        set_id: bytes,
        epoch: int,
        label: str,
        created: datetime,
        field: Field,
        row_length: int,
        rule: Rule,
        custodians: Sequence[Custodian],
        checks: Sequence[tuple[bytes, ...]],
        secret_commitment: bytes,
        encrypted_file: bytes | None = None,
        policy: bytes | None = None,
    ) -> Self:
        """Return an unsigned record of a first dealing, its fingerprint filled in, checked for agreement with
        itself."""
        members: dict[str, Any] = {
            "kind": "record",
            "version": 1,
            "set": set_id,
            "epoch": epoch,
            "label": label,
            "created": created,
            "field": field,
            "row_length": row_length,
            "rule": RuleNode.of(rule),
            "custodians": tuple(custodians),
            "checks": tuple(checks),
            "secret_commitment": secret_commitment,
            "encrypted_file": encrypted_file,
            "policy": policy,
            "previous": None,
            "signatures": (),
        }
        own = cls.model_construct(**members, fingerprint="").own_fingerprint()
        return cls.model_validate({**members, "fingerprint": own})

    @model_validator(mode="after")
    def _agrees_with_itself(self) -> Self:
        reason: str | None
        try:
            rule = self.rule.to_rule()
        except ParameterError as error:
            reason = error.what
        else:
            reason = self._contradiction(rule)
        if reason:
            raise PydanticCustomError("shares_record", "{reason}", {"reason": reason})
        return self

    def _contradiction(self, rule: Rule) -> str | None:
        names = [custodian.name for custodian in self.custodians]
        if names != list(rule.paths()):
            return "its custodians are not those of its rule, in the rule's order"
        if len({name.casefold() for name in names}) != len(names):
            return "two custodians' names differ only in case"
        if len(self.checks) != sum(1 for _ in rule.nodes()):
            return "it does not hold one list of checks for each node of its rule"
        if inconsistent_nodes(self.field, rule, self.checks):
            return "its checks contradict its rule"
        if self.fingerprint != self.own_fingerprint():
            return "its fingerprint does not fit its content"
        return self._signature_problem()

    def _signature_problem(self) -> str | None:
        for one in self.signatures:
            if not is_signed(one.card.ed25519, one.signature, self.KIND, self._signed_members(one)):
                return f"the signature by {one.card.name} does not fit its content"
        if len({(one.role, one.card.fingerprint) for one in self.signatures}) != len(self.signatures):
            return "one party signed it twice as the same"
        if sum(1 for one in self.signatures if one.role == "dealer") > 1:
            return "more than one party signed it as its dealer"
        return None

    def _signed_members(self, signature: RecordSignature) -> dict[str, Any]:
        """Return what a signature is over: role, time and signer, and the whole record but its signatures."""
        signer = {"role": signature.role, "time": clock.to_text(signature.time), "card": signature.card.fingerprint}
        return signer | {"record": self.public(*(set(type(self).model_fields) - {"signatures"}))}

    def signed(self, key: OpenPartyKey, role: Role, *, time: datetime | None = None) -> Self:
        """Return this record with one more signature. What it holds besides stays as it is, and so the fingerprint.

        Args:
            key: the signer's.
            role: ``"dealer"`` for whoever ran the split, once; ``"witness"`` for anyone who saw it.
            time: of signing, UTC to the second; now by default.

        Raises:
            ParameterError: this party, or a dealer, has signed already, or there are too many signatures.
        """
        unsigned = RecordSignature(
            role=role, time=clock.now() if time is None else time, card=key.card, signature=bytes(64)
        )
        own = unsigned.model_copy(update={"signature": key.sign(self.KIND, self._signed_members(unsigned))})
        made = self.model_copy(update={"signatures": (*self.signatures, own)})
        problem = made._signature_problem()
        if problem or len(made.signatures) > MAX_SIGNATURES:
            raise ParameterError(
                problem or f"a record holds at most {MAX_SIGNATURES} signatures",
                hint="`shares show RECORD` says who has signed it",
            )
        return made

    def own_fingerprint(self) -> str:
        """Compute the fingerprint of what the record holds (signatures apart)."""
        return fingerprint("record", self.public(*(set(type(self).model_fields) - {"fingerprint", "signatures"})))

    def is_signed_by(self, cards: Iterable[PartyCard]) -> bool:
        """Say whether one of these parties has signed it, in any role."""
        fingerprints = {card.fingerprint for card in cards}
        return any(one.card.fingerprint in fingerprints for one in self.signatures)

    def custodian(self, name: str) -> Custodian | None:
        """Return what the record says of a custodian, or None where it does not name them."""
        return next((custodian for custodian in self.custodians if custodian.name == name), None)

    def set_key(self) -> tuple[bytes, int, int, bytes, bytes | None, int]:
        """What every share of this dealing must name as the record does: see ``Share.set_key``."""
        common = (self.set, self.epoch, self.field.modulus, self.secret_commitment, self.encrypted_file)
        return (*common, self.row_length)

    def check_matrix(self) -> bytes:
        """Return R of FORMAT.md, sec. 6, for this record: 16 rows of L - 16 field elements."""
        commitments = [custodian.share_commitment for custodian in self.custodians]
        return check_matrix(self.set, self.epoch, self.field, commitments, self.row_length)

    def to_file(self) -> bytes:
        """Return the bytes of the record's file. Public."""
        return write_text(self.model_dump(mode="json", by_alias=True))
