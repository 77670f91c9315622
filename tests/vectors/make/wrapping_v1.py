"""Signatures and wrapping of FORMAT.md, sections 9 and 10, by hand: both ways, and every draw is handed in.

Source: shares/documents/FORMAT.md; RFC 5869 (HKDF) by hmac alone; RFC 9180, sections 4, 4.1, 5.1 and 5.2 (HPKE), by
that HKDF, the raw exchange of X25519 (RFC 7748) and the raw decapsulation of ML-KEM-768 (FIPS 203); NIST SP 800-38D.
May import: the standard library, and `cryptography` for X25519, ML-KEM, Ed25519, AES-GCM and Argon2id; no HPKE and no
    HKDF of that library, and nothing of the package, for it is a second opinion on both.
Secret: nothing. Every key here is made up, and worthless.
Does not: draw anything, or keep anything secret.
"""

import base64
import hashlib
import hmac
import json
from dataclasses import dataclass
from typing import Any

from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey, Ed25519PublicKey
from cryptography.hazmat.primitives.asymmetric.mlkem import MLKEM768PrivateKey
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey, X25519PublicKey
from cryptography.hazmat.primitives.ciphers.aead import AESGCM
from cryptography.hazmat.primitives.kdf.argon2 import Argon2id

KEM = {"x25519": 0x0020, "mlkem768-x25519": 0x647A}
HKDF_SHA256, AES_256_GCM = 0x0001, 0x0002
MLKEM_CIPHERTEXT = 1088
HYBRID_LABEL = bytes([0x5C, 0x2E, 0x2F, 0x2F, 0x5E, 0x5C])
BOUND = {
    "wrapped-share": (
        "kind",
        "version",
        "set",
        "epoch",
        "custodian",
        "field",
        "paths",
        "secret_commitment",
        "encrypted_file",
        "record",
    ),
    "sealed-secret": ("kind", "version", "set", "epoch", "label", "secret_commitment", "encrypted_file"),
}

Json = dict[str, Any]


def b64(data: bytes) -> str:
    """Encode as base64url without padding (RFC 4648 section 5)."""
    return base64.urlsafe_b64encode(data).decode().rstrip("=")


def raw(text: str) -> bytes:
    """Decode it."""
    return base64.urlsafe_b64decode(text + "=" * (-len(text) % 4))


def canonical(value: Any) -> bytes:
    """Give the RFC 8785 form; enough for the strings, integers, nulls and ASCII member names of version 1."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False).encode()


def without(document: Json, *names: str) -> Json:
    """Give the document without some members."""
    return {name: value for name, value in document.items() if name not in names}


# HKDF and HPKE.


def extract(salt: bytes, secret: bytes) -> bytes:
    """RFC 5869, section 2.2."""
    return hmac.digest(salt or bytes(32), secret, "sha256")


def expand(key: bytes, info: bytes, length: int) -> bytes:
    """RFC 5869, section 2.3."""
    out, block = b"", b""
    for i in range(1, -(-length // 32) + 1):
        block = hmac.digest(key, block + info + bytes([i]), "sha256")
        out += block
    return out[:length]


def labeled_extract(suite_id: bytes, salt: bytes, label: bytes, secret: bytes) -> bytes:
    """RFC 9180, section 4."""
    return extract(salt, b"HPKE-v1" + suite_id + label + secret)


def labeled_expand(suite_id: bytes, key: bytes, label: bytes, info: bytes, length: int) -> bytes:
    """RFC 9180, section 4."""
    return expand(key, length.to_bytes(2) + b"HPKE-v1" + suite_id + label + info, length)


def dhkem_secret(exchanged: bytes, ephemeral: bytes, recipient: bytes) -> bytes:
    """RFC 9180, section 4.1: the shared secret of DHKEM(X25519, HKDF-SHA256)."""
    suite_id = b"KEM" + KEM["x25519"].to_bytes(2)
    key = labeled_extract(suite_id, b"", b"eae_prk", exchanged)
    return labeled_expand(suite_id, key, b"shared_secret", ephemeral + recipient, 32)


def hybrid_secret(decapsulated: bytes, exchanged: bytes, ephemeral: bytes, recipient: bytes) -> bytes:
    """FORMAT.md, section 9: the shared secret of ML-KEM-768 and X25519 together."""
    return hashlib.sha3_256(decapsulated + exchanged + ephemeral + recipient + HYBRID_LABEL).digest()


def key_schedule(kem: int, shared_secret: bytes, info: bytes, aead: int = AES_256_GCM) -> dict[str, bytes]:
    """RFC 9180, section 5.1, mode base: key and nonce of the first message, and what leads there."""
    suite_id = b"HPKE" + kem.to_bytes(2) + HKDF_SHA256.to_bytes(2) + aead.to_bytes(2)
    context = b"\0" + labeled_extract(suite_id, b"", b"psk_id_hash", b"")
    context += labeled_extract(suite_id, b"", b"info_hash", info)
    secret = labeled_extract(suite_id, shared_secret, b"secret", b"")
    return {
        "key_schedule_context": context,
        "secret": secret,
        "key": labeled_expand(suite_id, secret, b"key", context, 32),
        "base_nonce": labeled_expand(suite_id, secret, b"base_nonce", context, 12),
    }


@dataclass(frozen=True)
class Private:
    """A party's 128 private bytes, taken apart, and the public halves that follow from them."""

    content: bytes

    @property
    def signing(self) -> Ed25519PrivateKey:
        return Ed25519PrivateKey.from_private_bytes(self.content[:32])

    @property
    def curve(self) -> X25519PrivateKey:
        return X25519PrivateKey.from_private_bytes(self.content[32:64])

    @property
    def lattice(self) -> MLKEM768PrivateKey:
        return MLKEM768PrivateKey.from_seed_bytes(self.content[64:])

    def public(self) -> dict[str, str]:
        """Give the members of a card that hold keys."""
        keys = {"ed25519": self.signing, "x25519": self.curve, "mlkem768": self.lattice}
        return {name: b64(key.public_key().public_bytes_raw()) for name, key in keys.items()}

    def shared_secret(self, suite: str, enc: bytes) -> bytes:
        """Decapsulate: the KEM's shared secret from ``enc``."""
        ephemeral, recipient = enc[-32:], self.curve.public_key().public_bytes_raw()
        exchanged = self.curve.exchange(X25519PublicKey.from_public_bytes(ephemeral))
        if suite == "x25519":
            return dhkem_secret(exchanged, ephemeral, recipient)
        return hybrid_secret(self.lattice.decapsulate(enc[:-32]), exchanged, ephemeral, recipient)


# Signatures and fingerprints.


def fingerprint(kind: str, document: Json) -> str:
    """Section 1: over the document without ``fingerprint``, ``signature`` and ``signatures``."""
    body = canonical(without(document, "fingerprint", "signature", "signatures"))
    digest = hashlib.sha256(b"shares/v1/fingerprint" + kind.encode() + body).digest()
    text = base64.b32encode(digest[:20]).decode()
    return "-".join(text[i : i + 4] for i in range(0, 32, 4))


def signed(purpose: str, members: Json) -> bytes:
    """Section 9: what a signature is over."""
    return b"shares/v1/sign/" + purpose.encode() + canonical(members)


def verify(card: Json, signature: str, purpose: str, members: Json) -> None:
    """Raise InvalidSignature where it is not the card's."""
    Ed25519PublicKey.from_public_bytes(raw(card["ed25519"])).verify(raw(signature), signed(purpose, members))


def signed_of_record(record: Json, entry: Json) -> Json:
    """Section 9: the members that a signature in a record is over."""
    signer = {"role": entry["role"], "time": entry["time"], "card": entry["card"]["fingerprint"]}
    return {**signer, "record": without(record, "signatures")}


# Wrapping.


def key_and_commitment(source: bytes) -> tuple[bytes, bytes]:
    """Section 9: what is made of the source."""
    both = expand(extract(b"", source), b"shares/v1/wrap", 64)
    return both[:32], both[32:]


def stretched(passphrase: bytes, wrapping: Json) -> bytes:
    """Section 9: the source of a wrapping by passphrase."""
    return Argon2id(
        salt=raw(wrapping["salt"]),
        length=32,
        iterations=wrapping["passes"],
        lanes=wrapping["lanes"],
        memory_cost=wrapping["memory"],
    ).derive(passphrase)


def decrypted(private: Private, wrapping: Json, bound: bytes) -> bytes:
    """Section 9: the source of a wrapping for a card."""
    suite, whole = wrapping["suite"], raw(wrapping["key"])
    length = 32 + (MLKEM_CIPHERTEXT if suite == "mlkem768-x25519" else 0)
    enc, ciphertext = whole[:length], whole[length:]
    schedule = key_schedule(KEM[suite], private.shared_secret(suite, enc), b"shares/v1/hpke" + bound)
    return AESGCM(schedule["key"]).decrypt(schedule["base_nonce"], ciphertext, b"")


def bound_of(document: Json) -> bytes:
    """The public bytes that a document's sealed content is bound to: sections 9 and 10."""
    if document["kind"] == "party-key":
        return canonical({"kind": "party-key", "version": 1, "card": document["card"]["fingerprint"]})
    return canonical({name: document[name] for name in BOUND[document["kind"]]})


def opened(document: Json, opener: bytes | Private) -> bytes:
    """Give the content of a document, by a passphrase or by a party's private keys; refuse it as section 9 says."""
    wrapping, bound = document["wrapping"], bound_of(document)
    if isinstance(opener, Private):
        if wrapping["method"] != "card":
            raise ValueError("not wrapped for a card")
        source = decrypted(opener, wrapping, bound)
    else:
        if wrapping["method"] != "passphrase":
            raise ValueError("not wrapped by passphrase")
        source = stretched(opener, wrapping)
    key, commitment = key_and_commitment(source)
    if b64(commitment) != wrapping["commitment"]:
        raise ValueError("another key")
    return AESGCM(key).decrypt(bytes(12), raw(document["sealed"]), bound)


def envelope_digest(document: Json) -> str:
    """Section 10: the document's own digest."""
    return hashlib.sha256(b"shares/v1/envelope" + canonical(without(document, "digest"))).hexdigest()


def sealed(source: bytes, content: bytes, bound: bytes) -> tuple[str, str]:
    """Give commitment and sealed content, both as they stand in a document."""
    key, commitment = key_and_commitment(source)
    return b64(commitment), b64(AESGCM(key).encrypt(bytes(12), content, bound))


def by_passphrase(
    passphrase: bytes, salt: bytes, cost: tuple[int, int, int], content: bytes, bound: bytes
) -> dict[str, Any]:
    """Give the members ``wrapping`` and ``sealed``."""
    memory, passes, lanes = cost
    wrapping = {"method": "passphrase", "memory": memory, "passes": passes, "lanes": lanes, "salt": b64(salt)}
    commitment, closed = sealed(stretched(passphrase, wrapping), content, bound)
    return {"wrapping": {**wrapping, "commitment": commitment}, "sealed": closed}


def for_card(
    card: Json,
    suite: str,
    source: bytes,
    ephemeral: bytes,
    content: bytes,
    bound: bytes,
    *,
    lattice: tuple[bytes, bytes],
) -> dict[str, Any]:
    """Give the members ``wrapping`` and ``sealed``.

    Args:
        card: the recipient's.
        suite: as the wrapping names it.
        source: 32 bytes.
        ephemeral: an X25519 private key, 32 bytes.
        content: what is sealed.
        bound: what it is bound to.
        lattice: an ML-KEM ciphertext for the card, and the shared secret in it; not used by suite "x25519".
    """
    private = X25519PrivateKey.from_private_bytes(ephemeral)
    public, recipient = private.public_key().public_bytes_raw(), raw(card["x25519"])
    exchanged = private.exchange(X25519PublicKey.from_public_bytes(recipient))
    if suite == "x25519":
        enc, shared = public, dhkem_secret(exchanged, public, recipient)
    else:
        enc, shared = lattice[0] + public, hybrid_secret(lattice[1], exchanged, public, recipient)
    schedule = key_schedule(KEM[suite], shared, b"shares/v1/hpke" + bound)
    encrypted = enc + AESGCM(schedule["key"]).encrypt(schedule["base_nonce"], source, b"")
    commitment, closed = sealed(source, content, bound)
    return {
        "wrapping": {
            "method": "card",
            "suite": suite,
            "card": card["fingerprint"],
            "key": b64(encrypted),
            "commitment": commitment,
        },
        "sealed": closed,
    }
