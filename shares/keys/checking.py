"""Check a key's record against what its reader knows of the key already.

Source: FORMAT_KEYS.md, sec. 21; RFC 8410 (Ed25519 in PEM).
May import: shares.errors, shares.documents.
Secret: nothing. Public: everything.
Does not: say who the parties are: people do, by the fingerprints of their cards.
"""

from __future__ import annotations

from collections.abc import Sequence

from cryptography.exceptions import UnsupportedAlgorithm
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
from cryptography.hazmat.primitives.serialization import load_pem_public_key

from shares.documents.key_record import KeyRecord
from shares.documents.party import PartyCard
from shares.errors import DocumentError, VerificationError


def check_record(record: KeyRecord, *, public_key: bytes | None = None, trusted: Sequence[PartyCard] = ()) -> None:
    """Check a record, which agrees with itself already, against what is known of the key from elsewhere.

    Args:
        record: the key's.
        public_key: the Ed25519 public key that the key is known by, 32 bytes; None where none is.
        trusted: cards whose fingerprints were compared; where some are given, one of these parties signed.

    Raises:
        VerificationError: not all who must have signed have, it is another key's, or nobody trusted has signed.
    """
    if not record.is_confirmed():
        whose = "its dealer has" if record.origin == "dealt" else "all who generated the key have"
        raise VerificationError(
            f"the key record is not signed as it must be: not {whose} signed it",
            hint="ask for the record that was written when the key was born",
        )
    if public_key is not None and public_key != record.public_key.encode():
        raise VerificationError(
            "the record is of another key than the public key given", hint="look which of the two is the one in use"
        )
    known = {card.ed25519 for card in trusted}
    if known and not any(one.card.ed25519 in known for one in record.signatures):
        raise VerificationError(
            "the record is signed by none of the parties you trust",
            hint="ask the dealer or a custodian for the record, and compare its fingerprint aloud",
        )


def public_key_in(pem: bytes, *, where: str | None = None) -> bytes:
    """Return the Ed25519 public key in a PEM file, 32 bytes.

    Args:
        pem: a SubjectPublicKeyInfo (RFC 8410).
        where: what to call it in an error.

    Raises:
        DocumentError: it holds no such key.
    """
    try:
        key = load_pem_public_key(pem)
    except (ValueError, UnsupportedAlgorithm):
        key = None
    if not isinstance(key, Ed25519PublicKey):
        raise DocumentError("it is no Ed25519 public key in PEM", where=where, hint="see RFC 8410")
    return key.public_bytes_raw()
