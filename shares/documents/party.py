"""Parties: the card that everyone may have, and the key that its party alone opens.

Source: RFC 8032 (Ed25519), RFC 7748 (X25519), FIPS 203 (ML-KEM-768); FORMAT.md, sec. 9.
May import: shares.errors, shares.memory, shares.clock, shares.documents.base, .members, .signing, .wrapping.
Secret: the private halves, the passphrase. Public: the card.
Does not: say who a party really is: people do, by comparing the fingerprint that is read aloud.
"""

from __future__ import annotations

import contextlib
import secrets
from datetime import datetime
from typing import Any, ClassVar, Literal, Self

from cryptography.exceptions import UnsupportedAlgorithm
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.asymmetric.mlkem import MLKEM768PrivateKey
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares import clock
from shares.documents.base import Document, canonical, fingerprint, write_text
from shares.documents.members import (
    Fingerprint,
    MlKemPublicKey,
    Name,
    PublicKey,
    Sealed,
    Signature,
    Text,
    Time,
    Version,
    check_name,
    check_text,
)
from shares.documents.signing import is_key, is_signed, signed_bytes
from shares.documents.wrapping import (
    ByCard,
    ByPassphrase,
    Cost,
    Recipient,
    RecipientKey,
    open_by_card,
    open_by_passphrase,
    passphrase_sealer,
)
from shares.errors import SharesError, VerificationError, WrongKeyError
from shares.memory import Secret

# Ed25519 seed, X25519 private key, ML-KEM-768 seed, one after another.
_SIGN, _AGREE, _ENCAPSULATE = slice(0, 32), slice(32, 64), slice(64, 128)
_PRIVATE = 128


class PartyCard(Document):
    """A party's public keys under its name, signed by itself. The fingerprint is read aloud.

    ``PartyCard.parse`` reads one and refuses it where its fingerprint or its own signature does not fit.
    """

    KIND: ClassVar[str] = "party-card"

    kind: Literal["party-card"]
    version: Version
    name: Name
    contact: Text | None
    created: Time
    ed25519: PublicKey
    x25519: PublicKey
    mlkem768: MlKemPublicKey
    fingerprint: Fingerprint
    signature: Signature

    @model_validator(mode="after")
    def _is_its_own(self) -> Self:
        if self.fingerprint != self._own_fingerprint():
            raise PydanticCustomError("shares_card", "its fingerprint does not fit its content")
        if not is_key(self.ed25519):
            raise PydanticCustomError("shares_card", "its Ed25519 key is none that a signature proves anything about")
        if not is_signed(self.ed25519, self.signature, self.KIND, self._signed_members()):
            raise PydanticCustomError("shares_card", "its signature by its own key does not fit its content")
        return self

    def _own_fingerprint(self) -> str:
        return fingerprint(self.KIND, self.public(*(set(type(self).model_fields) - {"fingerprint", "signature"})))

    def _signed_members(self) -> dict[str, Any]:
        return self.public(*(set(type(self).model_fields) - {"signature"}))

    def recipient(self) -> Recipient:
        """What is needed to encrypt to this party."""
        return Recipient(self.fingerprint, self.x25519, self.mlkem768)

    def to_file(self) -> bytes:
        """Return the bytes of the card's file. Public."""
        return write_text(self.model_dump(mode="json"))


class PartyKey(Document):
    """A party's private keys, wrapped by passphrase, beside the card they belong to."""

    KIND: ClassVar[str] = "party-key"

    kind: Literal["party-key"]
    version: Version
    card: PartyCard
    wrapping: ByPassphrase
    sealed: Sealed

    def open(self, passphrase: Secret) -> OpenPartyKey:
        """Return the key ready for use.

        Raises:
            WrongKeyError: it was wrapped with another passphrase.
            VerificationError: it is damaged, or does not belong to the card beside it.
        """
        content = open_by_passphrase(self.wrapping, self.sealed, _bound(self.card), passphrase)
        return OpenPartyKey(self.card, content)

    def to_file(self) -> bytes:
        """Return the bytes of the key's file. Private, though wrapped."""
        return write_text(self.model_dump(mode="json"))


class OpenPartyKey:
    """A party's private keys in locked memory; ``with`` wipes them.

    Args:
        card: the party's card.
        content: 128 bytes, kept and wiped by this object.

    Raises:
        VerificationError: the private halves are not those of the card.
    """

    __slots__ = ("card", "content")

    def __init__(self, card: PartyCard, content: Secret) -> None:
        self.card = card
        self.content = content
        if len(content) != _PRIVATE or self._public_halves() != (card.ed25519, card.x25519, card.mlkem768):
            content.close()
            raise VerificationError(
                "the private keys are not those of the card beside them", hint="the party key was put together wrongly"
            )

    def _public_halves(self) -> tuple[bytes, bytes, bytes]:
        own = self._recipient_key()
        return (
            self._signing_key().public_key().public_bytes_raw(),
            own.x25519.public_key().public_bytes_raw(),
            own.mlkem768.public_key().public_bytes_raw(),
        )

    def _signing_key(self) -> Ed25519PrivateKey:
        # The library takes and keeps copies of its own; they are listed in SECURITY.md.
        with self.content.view() as view:
            return Ed25519PrivateKey.from_private_bytes(view[_SIGN])

    def _recipient_key(self) -> RecipientKey:
        with self.content.view() as view:
            return RecipientKey(
                self.card.fingerprint,
                X25519PrivateKey.from_private_bytes(view[_AGREE]),
                _decapsulation_key(view),
            )

    def sign(self, kind: str, members: dict[str, Any]) -> bytes:
        """Return this party's signature over public members, 64 bytes; see ``signing.signed_bytes``."""
        return self._signing_key().sign(signed_bytes(kind, members))

    def open(self, wrapping: ByPassphrase | ByCard, sealed: bytes, bound: bytes) -> Secret:
        """Return content that was sealed for this party's card.

        Raises:
            WrongKeyError: it was sealed otherwise, or for another card.
            VerificationError: it was changed.
        """
        if not isinstance(wrapping, ByCard):
            raise WrongKeyError("it is wrapped by passphrase, not for a card", hint="give the passphrase")
        return open_by_card(wrapping, sealed, bound, self._recipient_key())

    def wrapped(self, passphrase: Secret, *, cost: Cost | None = None) -> PartyKey:
        """Return this key wrapped under a passphrase, for a file; the card stays."""
        return _wrapped(self.card, self.content, passphrase, cost)

    def close(self) -> None:
        """Wipe the private keys."""
        self.content.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def new_party(
    name: str,
    passphrase: Secret,
    *,
    contact: str | None = None,
    created: datetime | None = None,
    cost: Cost | None = None,
) -> PartyKey:
    """Make a party: fresh keys, wrapped by ``passphrase``, and the self-signed card beside them.

    Args:
        name: as a custodian's.
        passphrase: its bytes as typed.
        contact: how the party is reached, 1 to 500 characters; stands on the card, which is public.
        created: the time to write on the card, UTC to the second; now by default.
        cost: of stretching the passphrase.

    Raises:
        ParameterError: a name, contact or time out of range.
    """
    check_name(name)
    if contact is not None:
        check_text(contact)
    created = clock.now() if created is None else created
    clock.to_text(created)
    with Secret.of(secrets.token_bytes(_PRIVATE)) as content:
        return _wrapped(_card(name, contact, created, content), content, passphrase, cost)


def _decapsulation_key(content: memoryview) -> MLKEM768PrivateKey:
    with contextlib.suppress(UnsupportedAlgorithm):
        return MLKEM768PrivateKey.from_seed_bytes(bytes(content[_ENCAPSULATE]))
    raise SharesError(
        "the cryptography package here was built without ML-KEM-768", hint="install its own wheel, version 48 or later"
    )


def _card(name: str, contact: str | None, created: datetime, content: Secret) -> PartyCard:
    with content.view() as view:
        signing = Ed25519PrivateKey.from_private_bytes(view[_SIGN])
        members: dict[str, Any] = {
            "kind": PartyCard.KIND,
            "version": 1,
            "name": name,
            "contact": contact,
            "created": created,
            "ed25519": signing.public_key().public_bytes_raw(),
            "x25519": X25519PrivateKey.from_private_bytes(view[_AGREE]).public_key().public_bytes_raw(),
            "mlkem768": _decapsulation_key(view).public_key().public_bytes_raw(),
        }
    bare = PartyCard.model_construct(**members, fingerprint="", signature=b"")
    marked = bare.model_copy(update={"fingerprint": bare._own_fingerprint()})
    signature = signing.sign(signed_bytes(PartyCard.KIND, marked._signed_members()))
    return PartyCard(**members, fingerprint=marked.fingerprint, signature=signature)


def _wrapped(card: PartyCard, content: Secret, passphrase: Secret, cost: Cost | None) -> PartyKey:
    wrapping, sealed = passphrase_sealer(passphrase, cost)(content, _bound(card))
    return PartyKey.model_validate(
        {"kind": PartyKey.KIND, "version": 1, "card": card, "wrapping": wrapping, "sealed": sealed}
    )


def _bound(card: PartyCard) -> bytes:
    return canonical({"kind": PartyKey.KIND, "version": 1, "card": card.fingerprint})
