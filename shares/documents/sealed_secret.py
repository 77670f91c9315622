"""The sealed secret: a recovered secret that leaves only encrypted to its receiver's card.

Source: FORMAT.md, sec. 10.
May import: shares.memory, shares.documents.members, .wrapping.
Secret: the secret. Public: which set it is of, and for whose card it is sealed.
Does not: recover anything, or say who sealed it: anybody can encrypt to a card. ``custody.deliver`` checks it.
"""

from __future__ import annotations

from typing import Any, ClassVar, Literal, Self

from shares.documents.members import Digest, Epoch, SetId, Text, Version
from shares.documents.wrapping import ByCard, Envelope, Sealer
from shares.memory import Secret


class SealedSecret(Envelope):
    """A secret for one receiver, with the public facts of the recovery it comes from.

    ``content`` opens it with the receiver's party key: the payload that the shares share, which the commitment is over.
    Where ``encrypted_file`` is not null the secret in it is the 32-byte key of that file.
    """

    KIND: ClassVar[str] = "sealed-secret"
    BOUND = ("kind", "version", "set", "epoch", "label", "secret_commitment", "encrypted_file")

    kind: Literal["sealed-secret"]
    version: Version
    set: SetId
    epoch: Epoch
    label: Text | None
    secret_commitment: Digest
    encrypted_file: Digest | None
    wrapping: ByCard

    @classmethod
    def seal(
        cls,
        payload: Secret,
        seal: Sealer,
        *,
        set_id: bytes,
        epoch: int,
        label: str | None,
        secret_commitment: bytes,
        encrypted_file: bytes | None = None,
    ) -> Self:
        """Return the secret sealed, with all that its commitment is over, so that the receiver can check it.

        Args:
            payload: message, blind and mask, as recovered; the caller keeps and wipes it.
            seal: see ``wrapping.card_sealer``.
            set_id: of the shares it was recovered from, 16 bytes.
            epoch: likewise.
            label: what it is, for people.
            secret_commitment: as in the shares, 32 bytes.
            encrypted_file: digest of the file whose key it is, or None.
        """
        facts: dict[str, Any] = {
            "kind": cls.KIND,
            "version": 1,
            "set": set_id,
            "epoch": epoch,
            "label": label,
            "secret_commitment": secret_commitment,
            "encrypted_file": encrypted_file,
        }
        wrapping, sealed = seal(payload, cls.model_construct(**facts).bound())
        made = cls.model_validate({**facts, "wrapping": wrapping, "sealed": sealed, "digest": bytes(32)})
        return made.with_digest()
