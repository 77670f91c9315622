"""A threshold key's public half in the forms that an ordinary world reads, and the check of a finished signature.

Source: RFC 8032 (Ed25519), RFC 8410 (SubjectPublicKeyInfo of Ed25519 and X25519), RFC 7468 (PEM), RFC 8709 (Ed25519
among the keys of SSH), RFC 7748, sec. 5 (u coordinates).
May import: shares.errors, shares.documents.members, shares.group.
Secret: nothing. Public: everything.
Does not: hold or make a private key; there is none.
"""

from __future__ import annotations

from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PublicKey
from cryptography.hazmat.primitives.serialization import Encoding, PublicFormat

from shares.documents.members import check_text
from shares.errors import ParameterError, VerificationError
from shares.group.edwards25519 import SIZE, Point

_P = 2**255 - 19


def loaded(public_key: bytes) -> Ed25519PublicKey:
    """Return a public key for the library, if it is one that a signature proves something about.

    Args:
        public_key: the Edwards point, 32 bytes.

    Raises:
        VerificationError: it is no point of the group of prime order in its one encoding.
    """
    return Ed25519PublicKey.from_public_bytes(Point.decode(public_key).encode())


def check_signature(public_key: bytes, message: bytes, signature: bytes) -> None:
    """Check a finished signature as any verifier of Ed25519 would; nothing that a quorum signed is put together before.

    Args:
        public_key: the Edwards point, 32 bytes.
        message: what was signed.
        signature: 64 bytes.

    Raises:
        VerificationError: it is no signature of these bytes by this key, or the key is no point of the group.

    Source: RFC 8032, sec. 5.1.7.
    """
    try:
        loaded(public_key).verify(signature, message)
        return
    except InvalidSignature:
        pass
    raise VerificationError(
        "the signature is not one of these bytes by this key",
        hint="see that it belongs to this task; a quorum that signs anew finds who sent a wrong part",
    )


def pem(public_key: bytes) -> bytes:
    """Return the public key as PEM, by which signatures are verified.

    Args:
        public_key: the Edwards point, 32 bytes.

    Raises:
        VerificationError: it is no point of the group.

    Source: RFC 8410, sec. 4.
    """
    return loaded(public_key).public_bytes(Encoding.PEM, PublicFormat.SubjectPublicKeyInfo)


def sealing_pem(u: bytes) -> bytes:
    """Return the key's X25519 image as PEM, for whoever encrypts to it.

    Args:
        u: the Montgomery coordinate, 32 bytes, little endian.

    Raises:
        VerificationError: it is not 32 bytes, or not below the field's prime.

    Source: RFC 8410, sec. 4; RFC 7748, sec. 5. One value, one encoding: what a receiver might reduce is refused.
    """
    if len(u) != SIZE or int.from_bytes(u, "little") >= _P:
        raise VerificationError("it is no u coordinate: 32 bytes, little endian, below 2^255 - 19")
    return X25519PublicKey.from_public_bytes(u).public_bytes(Encoding.PEM, PublicFormat.SubjectPublicKeyInfo)


def ssh_line(public_key: bytes, label: str) -> str:
    """Return the public key as the one line that SSH programs keep in their files.

    Args:
        public_key: the Edwards point, 32 bytes.
        label: the comment behind the key, 1 to 500 characters.

    Returns:
        The line, ended by a newline.

    Raises:
        VerificationError: it is no point of the group.
        ParameterError: the label holds what would end or disturb the line, or stands apart from nothing.

    Source: RFC 8709, sec. 4 (the key); the comment is free text up to the end of the line.
    """
    if check_text(label, "the comment of a key").strip() != label:
        raise ParameterError("the comment of a key neither starts nor ends with white space")
    line = loaded(public_key).public_bytes(Encoding.OpenSSH, PublicFormat.OpenSSH).decode("ascii")
    return f"{line} {label}\n"
