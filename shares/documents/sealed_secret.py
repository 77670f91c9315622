"""The sealed secret: a recovered secret that leaves only encrypted to its receiver's card.

Source: FORMAT.md, sec. 10.
May import: shares.memory, shares.documents.members, .wrapping.
Secret: the secret. Public: which set it is of, and for whose card it is sealed.
Does not: recover anything.
"""

from __future__ import annotations

from typing import Any, ClassVar, Literal, Self

from shares.documents.members import Digest, Epoch, SetId, Text
from shares.documents.wrapping import ByCard, Envelope, Sealer
from shares.memory import Secret


class SealedSecret(Envelope):
    """A secret for one receiver, with the public facts of the recovery it comes from.

    ``content`` opens it with the receiver's party key. Where ``encrypted_file`` is not null the content is the 32-byte
    key of that file, and not the secret itself.
    """

    KIND: ClassVar[str] = "sealed-secret"
    BOUND = ("kind", "version", "set", "epoch", "label", "encrypted_file")

    kind: Literal["sealed-secret"]
    version: Literal[1]
    set: SetId
    epoch: Epoch
    label: Text | None
    encrypted_file: Digest | None
    wrapping: ByCard

    @classmethod
    def seal(
        cls,
        secret: Secret,
        seal: Sealer,
        *,
        set_id: bytes,
        epoch: int,
        label: str | None,
        encrypted_file: bytes | None = None,
    ) -> Self:
        """Return the secret sealed.

        Args:
            secret: the bytes; the caller keeps and wipes them.
            seal: see ``wrapping.card_sealer``.
            set_id: of the shares it was recovered from, 16 bytes.
            epoch: likewise.
            label: what it is, for people.
            encrypted_file: digest of the file whose key it is, or None.
        """
        facts: dict[str, Any] = {
            "kind": cls.KIND,
            "version": 1,
            "set": set_id,
            "epoch": epoch,
            "label": label,
            "encrypted_file": encrypted_file,
        }
        wrapping, sealed = seal(secret, cls.model_construct(**facts).bound())
        made = cls.model_validate({**facts, "wrapping": wrapping, "sealed": sealed, "digest": bytes(32)})
        return made.with_digest()
