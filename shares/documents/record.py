"""The record: the public document of a set and epoch, with all that anyone needs to verify.

Source: FORMAT.md, sec. 5.
May import: shares.errors, shares.field, shares.sharing, shares.documents.base, .members, .share.
Secret: nothing. Public: everything.
Does not: hold persons or sites, which stay in the policy, or check shares; ``custody.verify`` does.
"""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime
from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

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
    Text,
    Time,
)
from shares.documents.share import MAX_ROW, MIN_ROW
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


class Record(Document):
    """The public record of one epoch of one share set.

    ``Record.parse`` reads one and refuses it where its rule, custodians and checks disagree or its fingerprint does
    not fit.
    """

    KIND: ClassVar[str] = "record"

    kind: Literal["record"]
    version: Literal[1]
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
    # Version 1 as written today knows no signatures; a reader that cannot check one must refuse it (FORMAT.md, sec. 5).
    signatures: tuple[()]

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
            "encrypted_file": None,
            "policy": None,
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
        return None

    def own_fingerprint(self) -> str:
        """Compute the fingerprint of what the record holds (signatures apart)."""
        return fingerprint("record", self.public(*(set(type(self).model_fields) - {"fingerprint", "signatures"})))

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
