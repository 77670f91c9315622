"""Detached signatures as SSH programs make and verify them: the bytes to be signed, and the armoured result.

Source: OpenSSH's published protocol file PROTOCOL.sshsig, version 1; RFC 4251, sec. 5 (string, uint32); RFC 8709 (keys
and signatures of Ed25519).
May import: shares.errors, shares.documents.members, .description, .public_key.
Secret: nothing. Public: everything.
Does not: sign, or read the file that is signed; whoever does hands over its digest.
"""

from __future__ import annotations

import base64
import textwrap
from typing import Final

from shares.documents.members import holds_unprintable
from shares.errors import DocumentError, ParameterError
from shares.keys.description import Description, in_groups, shown
from shares.keys.public_key import check_signature

DIGEST_SIZE: Final = 64
"""The bytes of SHA-512, the hash that is used here of the two that the format knows."""
_MAGIC, _VERSION, _HASH, _KEY_TYPE = b"SSHSIG", 1, b"sha512", b"ssh-ed25519"
_COLUMNS = 76  # The width that the protocol file recommends.


def to_be_signed(digest: bytes, namespace: str) -> bytes:
    """Return the bytes that the key signs.

    Args:
        digest: SHA-512 of the file, 64 bytes.
        namespace: what signatures of this use are for, like 'release'; the verifier must name the same. 1 to 500
            characters without white space.

    Raises:
        ParameterError: the digest or the namespace cannot be one.

    Source: PROTOCOL.sshsig, "Signed Data".
    """
    if len(digest) != DIGEST_SIZE:
        raise ParameterError(f"a SHA-512 digest has {DIGEST_SIZE} bytes")
    return b"".join((_MAGIC, *map(_string, (_namespace(namespace), b"", _HASH, digest))))


def armoured(public_key: bytes, digest: bytes, namespace: str, signature: bytes) -> bytes:
    """Check a signature and put it into the file that a verifier reads.

    Args:
        public_key: the Edwards point, 32 bytes.
        digest: SHA-512 of the file, 64 bytes.
        namespace: as it was signed.
        signature: 64 bytes.

    Returns:
        ASCII text.

    Raises:
        ParameterError: the digest or the namespace cannot be one.
        VerificationError: the signature is not by this key, of this digest in this namespace.

    Source: PROTOCOL.sshsig, "Blob format" and "Armored format".
    """
    check_signature(public_key, to_be_signed(digest, namespace), signature)
    key = _string(_KEY_TYPE) + _string(public_key)
    signed = _string(_KEY_TYPE) + _string(signature)
    blob = b"".join((_MAGIC, _VERSION.to_bytes(4), *map(_string, (key, _namespace(namespace), b"", _HASH, signed))))
    body = textwrap.wrap(base64.b64encode(blob).decode("ascii"), _COLUMNS)
    return "\n".join(("-----BEGIN SSH SIGNATURE-----", *body, "-----END SSH SIGNATURE-----", "")).encode("ascii")


def described(message: bytes) -> Description:
    """Say what bytes mean that begin as those of an SSH signature do.

    Args:
        message: what is to be signed.

    Raises:
        DocumentError: they are not the body of such a signature over SHA-512, with nothing behind it.
    """
    namespace, digest = _read(message)
    return Description(
        kind="the body of a detached SSH signature",
        lines=(f"namespace: {shown(namespace)}", f"SHA-512 of the file: {in_groups(digest)}"),
        cautions=(
            "The file itself is not among these bytes. Work out its SHA-512 on a machine that you trust, and compare.",
        ),
    )


def _read(message: bytes) -> tuple[str, bytes]:
    """Return namespace and digest. There is one spelling of each body: what is read is written again and compared."""
    fields: list[bytes] = []
    rest = message.removeprefix(_MAGIC)
    while len(rest) >= 4 and len(fields) < 4:
        end = 4 + int.from_bytes(rest[:4])
        fields.append(rest[4:end])
        rest = rest[end:]
    try:
        namespace, digest = fields[0].decode("utf-8"), fields[-1]
        if to_be_signed(digest, namespace) == message:
            return namespace, digest
    except (IndexError, UnicodeDecodeError, ParameterError):
        pass
    raise DocumentError("it is not the body of an SSH signature over SHA-512")


def _namespace(namespace: str) -> bytes:
    if not 1 <= len(namespace) <= 500 or any(c.isspace() for c in namespace) or holds_unprintable(namespace):
        raise ParameterError(
            "a namespace has 1 to 500 characters, no white space and nothing invisible",
            hint="name the use of the signature, like release",
        )
    return namespace.encode("utf-8")


def _string(data: bytes) -> bytes:
    """Write a string as SSH does (RFC 4251, sec. 5)."""
    return len(data).to_bytes(4) + data
