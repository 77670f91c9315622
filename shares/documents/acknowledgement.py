"""The acknowledgement: a custodian's statement, before a share is handed over, that its duties are accepted.

Source: the duties are common practice, no source; FORMAT.md, sec. 14.
May import: shares.errors, shares.clock, shares.documents.base, .members, .party, .signing.
Secret: nothing. Public: everything, though it names a person's role in keeping a key.
Does not: say that a share was received, or whole; an attestation does.
"""

from __future__ import annotations

from datetime import datetime
from typing import Any, ClassVar, Literal, Self

from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares import clock
from shares.documents.base import Document, write_text
from shares.documents.members import Digest, Name, Signature, Text, Time, Version, check_name, check_text
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed

DUTIES: tuple[str, ...] = (
    "I keep this share where only I can reach it, and tell nobody where.",
    "I never bring it together with other shares but at a recovery or drill that I was called to by the known way.",
    "I check it when I receive it, and answer each challenge by the day that is named.",
    "I report loss, damage, opening or suspicion at once, and change of my post or absence before it begins.",
    "I make no copy that is not recorded, and return or destroy the share when I am told to by the known way.",
)
"""What a custodian accepts, one sentence each."""


class Acknowledgement(Document):
    """A custodian's acceptance of the duties: signed by a party key, or on a printed form whose scan's digest it holds.

    ``Acknowledgement.parse`` refuses one whose signature does not fit.
    """

    KIND: ClassVar[str] = "acknowledgement"

    kind: Literal["acknowledgement"]
    version: Version
    custodian: Name
    label: Text
    duties: tuple[Text, ...]
    time: Time
    form: Digest | None
    card: PartyCard | None
    signature: Signature | None

    @model_validator(mode="after")
    def _is_signed_one_way(self) -> Self:
        if self.form is not None:
            if self.card is not None or self.signature is not None:
                raise PydanticCustomError("shares_acknowledgement", "either a printed form or a signature, not both")
        elif self.card is None or self.signature is None:
            raise PydanticCustomError("shares_acknowledgement", "neither a printed form nor a signature")
        elif not is_signed(self.card.ed25519, self.signature, self.KIND, self._signed_members(self.card)):
            raise PydanticCustomError("shares_acknowledgement", "its signature does not fit its content")
        return self

    def _signed_members(self, card: PartyCard) -> dict[str, Any]:
        facts = self.public("kind", "version", "custodian", "label", "duties", "time")
        return facts | {"card": card.fingerprint}

    @classmethod
    def signed_by(cls, key: OpenPartyKey, *, custodian: str, label: str, time: datetime | None = None) -> Self:
        """Return the acknowledgement, signed.

        Args:
            key: the custodian's.
            custodian: the name that the policy has.
            label: what the set protects, as the policy says.
            time: of signing; now by default.

        Raises:
            ParameterError: a name or label that may not be.
        """
        bare = cls._bare(custodian, label, time)
        signature = key.sign(cls.KIND, bare._signed_members(key.card))
        return cls.model_validate({**_members(bare), "card": key.card, "signature": signature})

    @classmethod
    def of_form(cls, digest: bytes, *, custodian: str, label: str, time: datetime | None = None) -> Self:
        """Return the acknowledgement that stands for a printed and signed form.

        Args:
            digest: SHA-256 of the scan, 32 bytes.
            custodian: as for ``signed_by``.
            label: as for ``signed_by``.
            time: of entering it; now by default.

        Raises:
            ParameterError: a name or label that may not be.
        """
        return cls.model_validate({**_members(cls._bare(custodian, label, time)), "form": digest})

    @classmethod
    def _bare(cls, custodian: str, label: str, time: datetime | None) -> Acknowledgement:
        return cls.model_construct(
            kind="acknowledgement",
            version=1,
            custodian=check_name(custodian),
            label=check_text(label),
            duties=DUTIES,
            time=clock.now() if time is None else time,
            form=None,
            card=None,
            signature=None,
        )

    def words(self) -> str:
        """Say who accepted, how and when."""
        how = f"a form with SHA-256 {self.form.hex()}" if self.form is not None else "nobody"
        if self.card is not None:
            how = f"{self.card.name}, card {self.card.fingerprint}"
        return f"{self.custodian}: by {how}, {clock.to_text(self.time)}"

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json"))


def _members(document: Document) -> dict[str, Any]:
    return {name: getattr(document, name) for name in type(document).model_fields}
