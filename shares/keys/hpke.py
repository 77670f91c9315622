"""Opening what an ordinary HPKE sender has encrypted, from a Diffie-Hellman value that several parties have computed.

Libraries offer HPKE in one call that wants the private key. Here there is none: custodians compute the KEM's one use of
it together, and all that follows, which is hashing and an AEAD, is done here as the RFC has it.

Source: RFC 9180: sec. 4 (labels), 4.1 (DHKEM), 5.1 (key schedule, base mode), 5.2 (encryption), 7 (numbers of
algorithms); RFC 5869 (HKDF).
May import: shares.errors, shares.memory, shares.documents.task (types).
Secret: the Diffie-Hellman value and all that is derived from it, the plaintext. Public: keys, info, associated data,
ciphertexts, and whether one opens.
Does not: multiply points, or encrypt. It opens the first message of a context, which is the only one a sender who uses
the one-call form makes.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final

from cryptography.exceptions import InvalidTag
from cryptography.hazmat.primitives import hashes, hmac
from cryptography.hazmat.primitives.ciphers.aead import AESGCM, ChaCha20Poly1305
from cryptography.hazmat.primitives.kdf.hkdf import HKDFExpand

from shares.documents.task import Cipher
from shares.errors import VerificationError
from shares.memory import Secret

KEY_SIZE: Final = 32
"""Bytes of an encapsulated key, a public key and a shared secret (RFC 9180, sec. 7.1: Nenc, Npk, Nsecret)."""
TAG: Final = 16
"""Bytes that encryption adds (sec. 7.3: Nt)."""
_HASH: Final = 32  # Nh of HKDF-SHA256, sec. 7.2
_NONCE: Final = 12  # Nn, sec. 7.3
_KEM_ID: Final = (0x0020).to_bytes(2, "big")  # DHKEM(X25519, HKDF-SHA256), sec. 7.1
_KDF_ID: Final = (0x0001).to_bytes(2, "big")  # HKDF-SHA256, sec. 7.2
_BASE_MODE: Final = b"\x00"  # sec. 5, table 1


@dataclass(frozen=True, slots=True)
class Aead:
    """An AEAD of RFC 9180, sec. 7.3.

    Attributes:
        number: its identifier.
        key_size: Nk, bytes.
        algorithm: the library's.
    """

    number: int
    key_size: int
    algorithm: type[AESGCM] | type[ChaCha20Poly1305]


AEADS: Final[Mapping[Cipher, Aead]] = MappingProxyType(
    {"aes-256-gcm": Aead(0x0002, 32, AESGCM), "chacha20-poly1305": Aead(0x0003, 32, ChaCha20Poly1305)}
)


class ReceiverContext:
    """What a receiver holds for one encapsulated key: the AEAD's key and base nonce. ``with`` wipes them.

    Source: RFC 9180, sec. 5.1.
    """

    __slots__ = ("_aead", "key", "nonce")

    def __init__(self, aead: Aead, key: Secret, nonce: Secret) -> None:
        """Take over what ``key_schedule`` has derived."""
        self._aead = aead
        self.key = key
        self.nonce = nonce

    def open(self, ciphertext: bytes | memoryview, associated: bytes) -> Secret:
        """Return the plaintext of the context's first message: sequence number 0, so the nonce is the base nonce.

        Args:
            ciphertext: with its tag.
            associated: HPKE's aad.

        Raises:
            VerificationError: it was changed, or encrypted in another context or with other associated data.

        Source: RFC 9180, sec. 5.2, ContextR.Open.
        """
        plaintext = Secret(max(len(ciphertext) - TAG, 0))
        opened = False
        try:
            with self.key.view() as key, self.nonce.view() as nonce, plaintext.view() as out:
                self._aead.algorithm(key).decrypt_into(nonce, ciphertext, associated, out)
            opened = True
        except InvalidTag:
            pass
        if not opened:
            plaintext.close()
            raise VerificationError("the ciphertext does not open")
        return plaintext

    def __enter__(self) -> ReceiverContext:
        return self

    def __exit__(self, *_: object) -> None:
        self.key.close()
        self.nonce.close()


def shared_secret(dh: Secret, encapsulated: bytes, public_key: bytes) -> Secret:
    """Return the KEM's shared secret, 32 bytes.

    Args:
        dh: X25519 of the receiver's private and the encapsulated key, 32 bytes: what the custodians compute together.
        encapsulated: enc, 32 bytes.
        public_key: pkR, the receiver's, 32 bytes.

    Source: RFC 9180, sec. 4.1, Decap and ExtractAndExpand: kem_context = enc || pkRm.
    """
    suite = b"KEM" + _KEM_ID
    with dh.view() as view, _labeled_extract(suite, bytes(_HASH), b"eae_prk", view) as eae_prk:
        return _labeled_expand(suite, eae_prk, b"shared_secret", encapsulated + public_key, KEY_SIZE)


def key_schedule(shared: Secret, info: bytes, aead: Aead) -> ReceiverContext:
    """Return the receiver's context in base mode.

    Args:
        shared: the KEM's shared secret.
        info: what the sender has bound the context to; often empty.
        aead: the sender's choice, one of ``AEADS``.

    Source: RFC 9180, sec. 5.1, KeySchedule, with the default psk and psk_id: both are empty.
    """
    suite = b"HPKE" + _KEM_ID + _KDF_ID + aead.number.to_bytes(2, "big")
    no_salt = bytes(_HASH)
    with (
        _labeled_extract(suite, no_salt, b"psk_id_hash", b"") as psk_id_hash,
        _labeled_extract(suite, no_salt, b"info_hash", info) as info_hash,
        psk_id_hash.view() as psk_id_view,
        info_hash.view() as info_view,
    ):
        context = b"".join((_BASE_MODE, psk_id_view, info_view))
    with shared.view() as salt, _labeled_extract(suite, salt, b"secret", b"") as secret:
        key = _labeled_expand(suite, secret, b"key", context, aead.key_size)
        nonce = _labeled_expand(suite, secret, b"base_nonce", context, _NONCE)
    return ReceiverContext(aead, key, nonce)


def _labeled_extract(suite: bytes, salt: bytes | memoryview, label: bytes, ikm: bytes | memoryview) -> Secret:
    """RFC 9180, sec. 4: HKDF-Extract(salt, "HPKE-v1" || suite_id || label || ikm), which is one HMAC (RFC 5869).

    An empty salt is written as the zeros that RFC 5869, sec. 2.2, puts in its place.
    """
    mac = hmac.HMAC(salt, hashes.SHA256())
    for part in (b"HPKE-v1", suite, label, ikm):
        mac.update(part)
    return Secret.of(mac.finalize())


def _labeled_expand(suite: bytes, prk: Secret, label: bytes, info: bytes, length: int) -> Secret:
    """RFC 9180, sec. 4: HKDF-Expand(prk, I2OSP(L, 2) || "HPKE-v1" || suite_id || label || info, L)."""
    labeled_info = length.to_bytes(2, "big") + b"HPKE-v1" + suite + label + info
    expanded = Secret(length)
    with prk.view() as key, expanded.view() as out:
        HKDFExpand(hashes.SHA256(), length, labeled_info).derive_into(key, out)
    return expanded
