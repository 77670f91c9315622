"""Wrapping: content encrypted under a passphrase or to a party card, with a commitment to the key.

Source: RFC 9106 (Argon2id); RFC 9180 (HPKE), with the hybrid KEM of draft-ietf-hpke-pq; RFC 5869 (HKDF); NIST SP
800-38D (AES-GCM); A. Albertini et al., "How to abuse and fix authenticated encryption without key commitment", 2022
(why the commitment); FORMAT.md, sec. 9.
May import: shares.errors, shares.memory, shares.documents.base, .members.
Secret: the content, the passphrase, every key. Public: the wrapping itself, the sealed bytes, lengths.
Does not: know what the content is, or ask for passphrases.
"""

from __future__ import annotations

import hmac
import secrets
from collections.abc import Callable
from dataclasses import dataclass
from typing import Annotated, ClassVar, Literal, Self, TypeAlias

from cryptography.exceptions import InvalidTag, UnsupportedAlgorithm
from cryptography.hazmat.primitives import hashes, hpke
from cryptography.hazmat.primitives.asymmetric.mlkem import MLKEM768PrivateKey, MLKEM768PublicKey
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey, X25519PublicKey
from cryptography.hazmat.primitives.ciphers.aead import AESGCM
from cryptography.hazmat.primitives.kdf.argon2 import Argon2id
from cryptography.hazmat.primitives.kdf.hkdf import HKDF
from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares.documents.base import Document, canonical, sha256, write_text
from shares.documents.members import Digest, Fingerprint, KeyCommitment, Salt, Sealed
from shares.errors import SharesError, VerificationError, WrongKeyError
from shares.memory import Secret

TAG = 16
"""What sealing adds to the content, in bytes."""
MAX_MEMORY, MAX_PASSES, MAX_LANES = 1 << 21, 10, 16
"""What a file may demand of a reader: 2 GiB (in KiB), 10 passes, 16 lanes."""
_KEY = 32
# One key seals one content, ever: a nonce has nothing to tell apart.
_NONCE = bytes(12)

Suite: TypeAlias = Literal["mlkem768-x25519", "x25519"]
SUITES: tuple[Suite, ...] = ("mlkem768-x25519", "x25519")
"""Ways to encrypt to a card; the first, hybrid, is the default and newer than RFC 9180."""


class ByPassphrase(Document):
    """The content is sealed under a passphrase, stretched by Argon2id."""

    method: Literal["passphrase"]
    memory: Annotated[int, Member(ge=8, le=MAX_MEMORY)]
    passes: Annotated[int, Member(ge=1, le=MAX_PASSES)]
    lanes: Annotated[int, Member(ge=1, le=MAX_LANES)]
    salt: Salt
    commitment: KeyCommitment

    @model_validator(mode="after")
    def _lanes_have_memory(self) -> Self:
        if self.memory < 8 * self.lanes:  # RFC 9106, sec. 3.1
            raise PydanticCustomError("shares_cost", "at least 8 KiB of memory for each lane")
        return self


class ByCard(Document):
    """The content is sealed under a random key, which is encrypted to a party card."""

    method: Literal["card"]
    suite: Suite
    card: Fingerprint
    key: Sealed
    commitment: KeyCommitment


Wrapping: TypeAlias = Annotated[ByPassphrase | ByCard, Member(discriminator="method")]

Sealer: TypeAlias = Callable[[Secret, bytes], tuple[ByPassphrase | ByCard, bytes]]
"""Takes content and the public bytes that it is bound to; returns the wrapping and the sealed content."""
Opener: TypeAlias = Callable[[ByPassphrase | ByCard, bytes, bytes], Secret]
"""Takes a wrapping, the sealed content and the bytes that it is bound to; returns the content."""


class Envelope(Document):
    """What every document with sealed content has: how it is wrapped, the sealed bytes, and its own digest."""

    BOUND: ClassVar[tuple[str, ...]] = ()
    """The public members that the sealed content is bound to."""

    wrapping: Wrapping
    sealed: Sealed
    digest: Digest

    def is_whole(self) -> bool:
        """Say whether the file's own digest fits: a guard against accidents that needs no key."""
        return hmac.compare_digest(self.digest, self._digest())

    def with_digest(self) -> Self:
        """Return this document with its own digest."""
        return self.model_copy(update={"digest": self._digest()})

    def content(self, opener: Opener) -> Secret:
        """Return what was sealed.

        Args:
            opener: what opens the wrapping, for instance ``OpenPartyKey.open``.

        Raises:
            WrongKeyError: another passphrase or party key is needed.
            VerificationError: the file is damaged or was altered.
        """
        self.check_whole()
        return opener(self.wrapping, self.sealed, self.bound())

    def check_whole(self) -> None:
        """Refuse a damaged file before anybody is asked for what opens it.

        Raises:
            VerificationError: its own digest does not fit.
        """
        if not self.is_whole():
            raise VerificationError(
                "its own digest does not fit: the file was damaged or edited",
                hint="use another copy, and keep this one",
            )

    def bound(self) -> bytes:
        """Return the public bytes that the sealed content is bound to."""
        return canonical(self.public(*self.BOUND))

    def _digest(self) -> bytes:
        return sha256(b"shares/v1/envelope", canonical(self.public(*(set(type(self).model_fields) - {"digest"}))))

    def to_file(self) -> bytes:
        """Return the bytes of the file, facts first. Of no use without what opens it, yet not to be shown around."""
        facts = self.model_dump(mode="json")
        return write_text(facts | {name: facts.pop(name) for name in Envelope.model_fields})


@dataclass(frozen=True, slots=True)
class Cost:
    """What stretching a passphrase costs: KiB of memory, passes, lanes.

    The default is the second recommended set of RFC 9106, sec. 4: 64 MiB, 3 passes, 4 lanes.
    """

    memory: int = 65_536
    passes: int = 3
    lanes: int = 4


@dataclass(frozen=True, slots=True)
class Recipient:
    """The public halves that content is encrypted to, and the fingerprint of the card they stand on."""

    card: str
    x25519: bytes
    mlkem768: bytes


@dataclass(frozen=True, slots=True, repr=False)
class RecipientKey:
    """The private halves, as the library holds them. Its copies are out of reach (SECURITY.md)."""

    card: str
    x25519: X25519PrivateKey
    mlkem768: MLKEM768PrivateKey


def passphrase_sealer(passphrase: Secret, cost: Cost | None = None) -> Sealer:
    """Return what seals content under a passphrase, each time with a salt of its own.

    Args:
        passphrase: its bytes as typed, at least one.
        cost: of stretching; the default of ``Cost`` by default.
    """
    chosen = Cost() if cost is None else cost

    def seal(content: Secret, bound: bytes) -> tuple[ByPassphrase, bytes]:
        salt = secrets.token_bytes(16)
        with _stretch(passphrase, salt, chosen) as stretched, _Keys(stretched) as keys:
            made = ByPassphrase(
                method="passphrase",
                memory=chosen.memory,
                passes=chosen.passes,
                lanes=chosen.lanes,
                salt=salt,
                commitment=keys.commitment,
            )
            return made, keys.seal(content, bound)

    return seal


def card_sealer(recipient: Recipient, suite: Suite = SUITES[0]) -> Sealer:
    """Return what seals content for a party card, each time under a fresh key.

    Args:
        recipient: whose card it is.
        suite: the way to encrypt the key.
    """

    def seal(content: Secret, bound: bytes) -> tuple[ByCard, bytes]:
        with Secret.of(secrets.token_bytes(_KEY)) as key, _Keys(key) as keys:
            encrypted = _encrypt(key, recipient, suite, bound)
            made = ByCard(method="card", suite=suite, card=recipient.card, key=encrypted, commitment=keys.commitment)
            return made, keys.seal(content, bound)

    return seal


def passphrase_opener(passphrase: Secret) -> Opener:
    """Return what opens content that was sealed under ``passphrase``; see ``open_by_passphrase``."""

    def opener(wrapping: ByPassphrase | ByCard, sealed: bytes, bound: bytes) -> Secret:
        if isinstance(wrapping, ByCard):
            raise WrongKeyError("it is wrapped for a card, not by passphrase", hint="give the party key of that card")
        return open_by_passphrase(wrapping, sealed, bound, passphrase)

    return opener


def open_by_passphrase(wrapping: ByPassphrase, sealed: bytes, bound: bytes, passphrase: Secret) -> Secret:
    """Return the content that was sealed under ``passphrase``.

    Raises:
        WrongKeyError: another passphrase was used, as the key commitment shows.
        VerificationError: the passphrase is right, and the sealed bytes or what they are bound to were changed.
        SharesError: this machine has not the memory that the file asks for.
    """
    cost = Cost(wrapping.memory, wrapping.passes, wrapping.lanes)
    with _stretch(passphrase, wrapping.salt, cost) as stretched, _Keys(stretched) as keys:
        # public: whether a passphrase fits is told to whoever typed it.
        if not hmac.compare_digest(keys.commitment, wrapping.commitment):
            raise WrongKeyError(
                "the passphrase does not open it", hint="try again: upper and lower case, spaces and hyphens count"
            )
        return keys.open(sealed, bound)


def open_by_card(wrapping: ByCard, sealed: bytes, bound: bytes, own: RecipientKey) -> Secret:
    """Return the content that was sealed for the card of ``own``.

    Raises:
        WrongKeyError: it was sealed for another card.
        VerificationError: the encrypted key, the sealed bytes or what they are bound to were changed.
    """
    if wrapping.card != own.card:
        raise WrongKeyError(
            f"it is wrapped for the card {wrapping.card}, and this party key belongs to {own.card}",
            hint="give the party key of that card",
        )
    private = own.x25519 if wrapping.suite == "x25519" else hpke.MLKEM768X25519PrivateKey(own.mlkem768, own.x25519)
    try:
        plain = _suite(wrapping.suite).decrypt(wrapping.key, private, _info(bound))
    except (InvalidTag, ValueError):
        plain = b""
    if len(plain) != _KEY:
        raise _damaged()
    with Secret.of(plain) as key, _Keys(key) as keys:
        if not hmac.compare_digest(keys.commitment, wrapping.commitment):
            raise _damaged()
        return keys.open(sealed, bound)


class _Keys:
    """The content key and the commitment to it, derived side by side from 32 bytes that were never used before."""

    def __init__(self, source: Secret) -> None:
        kdf = HKDF(algorithm=hashes.SHA256(), length=2 * _KEY, salt=None, info=b"shares/v1/wrap")
        with source.view() as view, Secret.of(kdf.derive(view)) as both, both.view() as halves:
            self._key = Secret.of(halves[:_KEY])
            self.commitment = bytes(halves[_KEY:])

    def __enter__(self) -> _Keys:
        return self

    def __exit__(self, *_: object) -> None:
        self._key.close()

    def seal(self, content: Secret, bound: bytes) -> bytes:
        with self._key.view() as key, content.view() as view:
            return AESGCM(key).encrypt(_NONCE, view, bound)

    def open(self, sealed: bytes, bound: bytes) -> Secret:
        if len(sealed) < TAG:
            raise _damaged()
        content = Secret(len(sealed) - TAG)
        try:
            with self._key.view() as key, content.view() as view:
                AESGCM(key).decrypt_into(_NONCE, sealed, bound, view)
        except InvalidTag:
            content.close()
            raise _damaged() from None
        return content


def _damaged() -> VerificationError:
    return VerificationError(
        "the key is right, but the sealed content or the facts it is bound to were changed",
        hint="it is damaged or forged: keep it as it is, and use another copy",
    )


def _stretch(passphrase: Secret, salt: bytes, cost: Cost) -> Secret:
    kdf = Argon2id(salt=salt, length=_KEY, iterations=cost.passes, lanes=cost.lanes, memory_cost=cost.memory)
    stretched = Secret(_KEY)
    reason = ""
    try:
        with passphrase.view() as view, stretched.view() as out:
            kdf.derive_into(view, out)  # type: ignore[arg-type]  # It takes any buffer, and its stub says bytes.
    except MemoryError:
        reason = f"this machine did not give the {cost.memory // 1024:,} MiB that the passphrase asks for"
    except UnsupportedAlgorithm:
        reason = "the cryptography package here was built without Argon2id"
    if reason:
        stretched.close()
        raise SharesError(reason, hint="use a machine with more memory, or a later cryptography package")
    return stretched


def _encrypt(key: Secret, recipient: Recipient, suite: Suite, bound: bytes) -> bytes:
    public: X25519PublicKey | hpke.MLKEM768X25519PublicKey
    try:
        public = curve = X25519PublicKey.from_public_bytes(recipient.x25519)
        if suite == "mlkem768-x25519":
            lattice = MLKEM768PublicKey.from_public_bytes(recipient.mlkem768)
            public = hpke.MLKEM768X25519PublicKey(lattice, curve)
        with key.view() as view:
            return _suite(suite).encrypt(view, public, _info(bound))
    except ValueError:
        # A point of low order, or coefficients out of range: the library refuses what no honest party makes.
        pass
    raise VerificationError(f"the card {recipient.card} holds no usable public keys", hint="ask its party for another")


def _suite(suite: Suite) -> hpke.Suite:
    kem = hpke.KEM.X25519 if suite == "x25519" else hpke.KEM.MLKEM768_X25519
    return hpke.Suite(kem, hpke.KDF.HKDF_SHA256, hpke.AEAD.AES_256_GCM)


def _info(bound: bytes) -> bytes:
    return b"shares/v1/hpke" + bound
