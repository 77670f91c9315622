"""The key share: one custodian's share of a threshold key, wrapped for that custodian's card.

Source: FORMAT_KEYS.md, sec. 22.
May import: shares.errors, shares.group.edwards25519, shares.memory, shares.documents.base, .key_record, .members,
.wrapping.
Secret: the scalar inside. Public: all that the file shows.
Does not: check the scalar against the record; ``keys`` does.
"""

from __future__ import annotations

from typing import Any, ClassVar, Literal, Self

from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares.documents.key_record import Index, KeyRecord, Need
from shares.documents.members import Epoch, Fingerprint, Name, SetId, Text, Version
from shares.documents.wrapping import TAG, Envelope, Opener, Sealer
from shares.group.edwards25519 import SIZE, Scalar
from shares.memory import Secret


class KeyShare(Envelope):
    """A key share, sealed."""

    KIND: ClassVar[str] = "key-share"
    BOUND = ("kind", "version", "key", "epoch", "record", "custodian", "index", "need")

    kind: Literal["key-share"]
    version: Version
    key: SetId
    epoch: Epoch
    label: Text
    record: Fingerprint
    custodian: Name
    index: Index
    need: Need

    @model_validator(mode="after")
    def _is_one_scalar(self) -> Self:
        if len(self.sealed) != SIZE + TAG:
            raise PydanticCustomError("shares_key_share", "it does not hold one sealed number of 32 bytes")
        return self

    @classmethod
    def wrap(cls, value: Scalar, record: KeyRecord, custodian: str, seal: Sealer) -> Self:
        """Return a custodian's key share, sealed.

        Args:
            value: the share.
            record: the key's.
            custodian: whose it is, as the record names them.
            seal: see ``wrapping.card_sealer``.

        Raises:
            ParameterError: the record does not name the custodian.
        """
        facts: dict[str, Any] = {
            "kind": cls.KIND,
            "version": 1,
            "key": record.key,
            "epoch": record.epoch,
            "label": record.label,
            "record": record.fingerprint,
            "custodian": custodian,
            "index": record.holder(custodian).index,
            "need": record.need,
        }
        with Secret.of(value.encode()) as content:
            wrapping, sealed = seal(content, cls.model_construct(**facts).bound())
        return cls.model_validate({**facts, "wrapping": wrapping, "sealed": sealed, "digest": bytes(32)}).with_digest()

    def open(self, opener: Opener) -> Scalar:
        """Return the share inside.

        Args:
            opener: what opens the wrapping, for instance ``OpenPartyKey.open``.

        Raises:
            WrongKeyError: another passphrase or party key is needed.
            VerificationError: the file is damaged or was altered.
        """
        with self.content(opener) as content, content.view() as view:
            return Scalar.decode(view)
