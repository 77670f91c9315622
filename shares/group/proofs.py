"""Proofs about logarithms that show nothing of them: that one is known, and that two are equal.

Both are Schnorr's proof made non-interactive: the challenge is a hash of all that is claimed and of the context it is
claimed in, so that a proof is worth nothing anywhere else. A proof is written as challenge and response, and the
commitments are computed again from them.

Source: C. P. Schnorr, "Efficient Signature Generation by Smart Cards", J. Cryptology 4, 1991; C. Komlo, I. Goldberg,
    "FROST: Flexible Round-Optimized Schnorr Threshold Signatures", SAC 2020, fig. 1 (possession); D. Chaum, T. P.
    Pedersen, "Wallet Databases with Observers", CRYPTO '92, sec. 3.2 (equality).
May import: .edwards25519, .hashing, shares.errors.
Secret: the logarithm, and the nonce, which is used once and never leaves its function. Public: the rest.
Does not: know what is in a context: whoever asks for a proof puts everything into it that the proof must not outlive.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from typing import Final, Self

from shares.errors import VerificationError
from shares.group.edwards25519 import BASE, SIZE, Point, Scalar
from shares.group.hashing import hedged

POSSESSION: Final = b"shares/v1/proof/possession"
EQUALITY: Final = b"shares/v1/proof/equality"


@dataclass(frozen=True, slots=True)
class Proof:
    """A proof about one logarithm or two: the challenge c and the response z."""

    challenge: Scalar
    response: Scalar

    @classmethod
    def decode(cls, octets: bytes | memoryview) -> Self:
        """Return the proof with this encoding: 64 bytes, both numbers below the order.

        Raises:
            VerificationError: it is no such encoding.
        """
        if len(octets) != 2 * SIZE:
            raise VerificationError("a proof has 64 bytes")
        return cls(Scalar.decode(octets[:SIZE]), Scalar.decode(octets[SIZE:]))

    def encode(self) -> bytes:
        """Return the proof's one encoding, 64 bytes: challenge, response."""
        return self.challenge.encode() + self.response.encode()


def prove_possession(secret: Scalar, x: int, context: bytes) -> Proof:
    """Prove that the party at index x knows ``secret``, the logarithm of ``secret * BASE``.

    Args:
        secret: not zero.
        x: the party's index, 1 to ORDER - 1.
        context: what the proof is for, any bytes.

    Raises:
        ParameterError: the index is out of range.
        VerificationError: the secret is zero.

    Source: Komlo, Goldberg 2020, fig. 1, round 1, step 2: c = H(i, context, a_0 B, R), z = k + a_0 c.
    """
    bound = Scalar.of_index(x).encode() + context
    public = secret * BASE
    nonce = hedged(secret, _statement(POSSESSION, bound, public))
    challenge = _challenge(POSSESSION, bound, public, nonce * BASE)
    return Proof(challenge, nonce + secret * challenge)


def check_possession(public: Point, proof: Proof, x: int, context: bytes) -> None:
    """Check that the party at index x knows the logarithm of ``public``.

    Raises:
        VerificationError: the proof does not hold, or is another's or another context's.
        ParameterError: the index is out of range.

    Source: Komlo, Goldberg 2020, fig. 1, round 1, step 5: R = z B - c (a_0 B), and c is the hash of it.
    """
    commitment = proof.response * BASE - proof.challenge * public
    if proof.challenge != _challenge(POSSESSION, Scalar.of_index(x).encode() + context, public, commitment):
        raise VerificationError("the proof that the secret of a public value is known does not hold")


def prove_equal(secret: Scalar, base: Point, context: bytes) -> Proof:
    """Prove that ``secret * BASE`` and ``secret * base`` have one logarithm, each to its own base.

    Args:
        secret: the logarithm, not zero.
        base: the second base, any point.
        context: what the proof is for, any bytes.

    Raises:
        VerificationError: the secret is zero.

    Source: Chaum, Pedersen 1992, sec. 3.2.
    """
    public, result = secret * BASE, secret * base
    nonce = hedged(secret, _statement(EQUALITY, context, public, base, result))
    challenge = _challenge(EQUALITY, context, public, base, result, nonce * BASE, nonce * base)
    return Proof(challenge, nonce + secret * challenge)


def check_equal(public: Point, base: Point, result: Point, proof: Proof, context: bytes) -> None:
    """Check that the logarithm of ``result`` to ``base`` is that of ``public`` to ``BASE``.

    Raises:
        VerificationError: the proof does not hold, or is another's or another context's.

    Source: Chaum, Pedersen 1992, sec. 3.2.
    """
    challenge, response = proof.challenge, proof.response
    commitments = response * BASE - challenge * public, response * base - challenge * result
    if challenge != _challenge(EQUALITY, context, public, base, result, *commitments):
        raise VerificationError("the proof that a result was made with the secret of a public value does not hold")


def _challenge(label: bytes, context: bytes, *points: Point) -> Scalar:
    return Scalar.reduced(hashlib.sha512(_statement(label, context, *points)).digest())


def _statement(label: bytes, context: bytes, *points: Point) -> bytes:
    # No two statements are written alike: no label is the beginning of another, the context comes with its length, and
    # points are of one length.
    return label + len(context).to_bytes(8, "big") + context + b"".join(point.encode() for point in points)
