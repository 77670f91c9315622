"""The payload: a secret framed, padded, blinded and masked, and its commitment.

Source: FORMAT.md, sec. 2 and 8; FIPS 180-4 (SHA-256).
May import: shares.errors, shares.memory, shares.field, shares.sharing.shamir.
Secret: the secret, message, blind, mask. Public: lengths, and the commitment: the blind hides, computationally, what
it is to.
Does not: decide whether a secret is worth keeping.
"""

from __future__ import annotations

import hashlib
import hmac

from shares.errors import ParameterError, VerificationError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.shamir import draw

COMMITMENT_LABEL = b"shares/v1/secret"
MAX_SECRET = 65_536
"""The longest secret that is itself shared, in bytes: 64 KiB."""
DEFAULT_PAD = 16
MAX_PAD = 4096
_FRAME = 4
_BLIND = 32
_MASK = 16


def make_payload(field: Field, secret: Secret, *, pad: int = DEFAULT_PAD) -> Secret:
    """Return length || secret || zeros || blind || mask, ready to be shared.

    Args:
        field: any GF(2^8); only its addition is used.
        secret: 1 to 65,536 bytes.
        pad: the message is filled with zeros to a multiple of this, 1 to 4,096 bytes, so that sizes tell little.

    Raises:
        ParameterError: secret or pad out of range.
        TypeError: the secret is given as anything else than a ``Secret``.
    """
    if not isinstance(secret, Secret):
        # Python's own complaint would carry the object, bytes most likely, as an attribute.
        raise TypeError("the secret must be a Secret: see Secret.of")
    if not 1 <= len(secret) <= MAX_SECRET:
        if not len(secret):
            raise ParameterError("the secret is empty", hint="see what was to be written into its file or pipe")
        raise ParameterError(
            f"the secret is larger than {MAX_SECRET:,} bytes",
            hint="encrypt a large file with a fresh key and split the key",
        )
    if not 1 <= pad <= MAX_PAD:
        raise ParameterError(f"pad must be from 1 to {MAX_PAD} bytes")
    message_length = -(-(_FRAME + len(secret)) // pad) * pad
    with Secret(message_length) as message:
        with message.view() as view, secret.view() as inside:
            view[:_FRAME] = len(secret).to_bytes(_FRAME, "big")
            view[_FRAME : _FRAME + len(secret)] = inside
        payload = Secret(message_length + _BLIND + _MASK)
        with draw(field, message, _BLIND + _MASK) as drawn, payload.view() as view:
            with message.view() as inside:
                view[:message_length] = inside
            with drawn.view() as inside:
                view[message_length:] = inside
    return payload


def commitment(set_id: bytes, payload: Secret) -> bytes:
    """Return SHA-256(label || set id || message || blind): 32 bytes, public. The mask is not in it."""
    digest = hashlib.sha256(COMMITMENT_LABEL + set_id)
    with payload.view() as view, view[:-_MASK] as committed:
        digest.update(committed)
    return digest.digest()


def is_committed(set_id: bytes, payload: Secret, secret_commitment: bytes) -> bool:
    """Say whether ``payload`` is the one that ``secret_commitment`` was made of."""
    return hmac.compare_digest(commitment(set_id, payload), secret_commitment)


def open_payload(payload: Secret) -> Secret:
    """Return the secret inside a payload whose commitment has been checked.

    Raises:
        VerificationError: the framing is wrong, which no honest dealer makes.
    """
    with payload.view() as view:
        message = view[: -(_BLIND + _MASK)]
        length = int.from_bytes(message[:_FRAME], "big")  # public: lengths are
        filling = len(message) - _FRAME - length
        if length < 1 or filling < 0 or not hmac.compare_digest(message[_FRAME + length :], bytes(filling)):
            raise VerificationError(
                "the recovered bytes are the ones committed to, but are not framed as a secret",
                hint="whoever dealt this set used faulty or hostile software; keep the shares and ask for help",
            )
        return Secret.of(message[_FRAME : _FRAME + length])
