"""FROST(Ed25519, SHA-512): a quorum signs, and the signature is an ordinary Ed25519 one.

Source: RFC 9591, "The Flexible Round-Optimized Schnorr Threshold (FROST) Protocol for Two-Round Schnorr Signatures",
    sec. 3 to 6, in its names and its order; C. Komlo, I. Goldberg, "FROST", SAC 2020; RFC 8032 (what is verified).
May import: shares.errors, shares.group.edwards25519, shares.sharing.verifiable.
Secret: key shares and nonces, as scalars that only the library computes with. Public: everything else; time depends on
identifiers, commitments and messages.
Does not: keep nonces, of which ``nonces`` takes care, or know who a signer is: here they are numbers.

Whoever gets two shares of a signature that were made with one nonce works out the signer's key share (sec. 7.3). So
``Nonces`` are used up by signing, and there is no way to look into them and go on.
"""

from __future__ import annotations

import hashlib
import secrets
from collections.abc import Callable, Iterable, Mapping
from typing import Final, NamedTuple, NoReturn, Self, final

from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

from shares.errors import ParameterError, VerificationError
from shares.group.edwards25519 import BASE, SIZE, Point, Scalar, total
from shares.sharing import verifiable

CONTEXT_STRING: Final = b"FROST-ED25519-SHA512-v1"
"""Sec. 6.1."""


def H1(m: bytes) -> Scalar:
    """Hash to a binding factor (sec. 6.1)."""
    return Scalar.reduced(_hash(CONTEXT_STRING + b"rho" + m))


def H2(*m: bytes) -> Scalar:
    """Hash to a challenge: plain SHA-512, as RFC 8032 has it (sec. 6.1)."""
    return Scalar.reduced(_hash(*m))


def H3(m: bytes) -> Scalar:
    """Hash to a nonce (sec. 6.1)."""
    return Scalar.reduced(_hash(CONTEXT_STRING + b"nonce" + m))


def H4(m: bytes) -> bytes:
    """Hash a message (sec. 6.1)."""
    return _hash(CONTEXT_STRING + b"msg", m)


def H5(m: bytes) -> bytes:
    """Hash a list of commitments (sec. 6.1)."""
    return _hash(CONTEXT_STRING + b"com" + m)


def _hash(*m: bytes) -> bytes:
    hashed = hashlib.sha512()
    for part in m:  # A message may be large: it is hashed where it is.
        hashed.update(part)
    return hashed.digest()


class Commitment(NamedTuple):
    """What a signer has published: identifier, and the commitments to its hiding and binding nonce (sec. 4.3)."""

    identifier: int
    hiding: Point
    binding: Point


@final
class Nonces:
    """A signer's pair of nonces and the commitments to them, for one signature share; using them empties them.

    Attributes:
        hiding_commitment, binding_commitment: public.
    """

    __slots__ = ("_pair", "binding_commitment", "hiding_commitment")
    __hash__ = None  # type: ignore[assignment]

    def __init__(self, hiding: Scalar, binding: Scalar) -> None:
        """Hold nonces; ``commit`` draws them."""
        self._pair: tuple[Scalar, Scalar] | None = (hiding, binding)
        self.hiding_commitment, self.binding_commitment = hiding * BASE, binding * BASE

    @classmethod
    def decode(cls, octets: bytes | memoryview, commitments: tuple[Point, Point]) -> Self:
        """Return the nonces of these 64 bytes, as ``encode`` gave them, if they are those of these commitments.

        Raises:
            VerificationError: they are not two scalars, or those of other commitments. Whoever signs with nonces that
                somebody else has put in the place of its own gives its key share away.
        """
        if len(octets) != 2 * SIZE:
            raise VerificationError("nonces are two numbers of 32 bytes")
        nonces = cls(Scalar.decode(octets[:SIZE]), Scalar.decode(octets[SIZE:]))
        if (nonces.hiding_commitment, nonces.binding_commitment) != commitments:
            raise VerificationError("these nonces are not those of their commitments")
        return nonces

    def encode(self) -> bytes:
        """Return both nonces for safe-keeping, 64 bytes, and be empty. Whoever takes them keeps what they say."""
        hiding, binding = self.used()
        return hiding.encode() + binding.encode()

    def used(self) -> tuple[Scalar, Scalar]:
        """Return hiding and binding nonce, and be empty.

        Raises:
            ParameterError: they were used before.
        """
        pair, self._pair = self._pair, None
        if pair is None:
            raise ParameterError("these nonces were used before", hint="commit to new ones")
        return pair

    def __repr__(self) -> str:
        return "Nonces(<hidden>)"

    def __reduce_ex__(self, protocol: object) -> NoReturn:
        raise TypeError("nonces are neither copied nor pickled")


def nonce_generate(secret: Scalar, random_bytes: Callable[[int], bytes] = secrets.token_bytes) -> Scalar:
    """Return a nonce: a hash of fresh random bytes and of the key share, so that a weak source alone gives none away.

    Args:
        secret: the signer's key share.
        random_bytes: the source; another one than the system's is for published vectors alone.

    Source: RFC 9591, sec. 4.1, and sec. 7.3: it must be random. Were it derived from the message, as RFC 8032 does, the
    other signers could have it repeated beside other commitments.
    """
    return H3(random_bytes(32) + secret.encode())


def commit(share: Scalar, random_bytes: Callable[[int], bytes] = secrets.token_bytes) -> Nonces:
    """Round one: draw nonces and commit to them. Before a message is known, as many as are wanted.

    Args:
        share: the signer's key share, sk_i.
        random_bytes: as for ``nonce_generate``.

    Source: RFC 9591, sec. 5.1.
    """
    return Nonces(nonce_generate(share, random_bytes), nonce_generate(share, random_bytes))


def derive_interpolating_value(identifiers: Iterable[int], identifier: int) -> Scalar:
    """Return lambda_i, by which a signer's share counts among these signers.

    Raises:
        ParameterError: identifiers that are not different, that are 0 or not below the order, or without this one.

    Source: RFC 9591, sec. 4.2. All of it is public.
    """
    return Scalar.of(verifiable.weight(identifier, identifiers))


def encode_group_commitment_list(commitment_list: Iterable[Commitment]) -> bytes:
    """Return the encoding of a sorted list: identifier, hiding and binding commitment of each (sec. 4.3).

    Raises:
        ParameterError: an identifier is not from 1 to the order less 1.
    """
    return b"".join(
        Scalar.of_index(identifier).encode() + hiding.encode() + binding.encode()
        for identifier, hiding, binding in commitment_list
    )


def compute_binding_factors(
    group_public_key: Point, commitment_list: Iterable[Commitment], msg: bytes
) -> dict[int, Scalar]:
    """Return rho_i of each signer: it binds every share to the key, the message and all commitments (sec. 4.4)."""
    listed = tuple(commitment_list)
    prefix = group_public_key.encode() + H4(msg) + H5(encode_group_commitment_list(listed))
    return {one.identifier: H1(prefix + Scalar.of_index(one.identifier).encode()) for one in listed}


def compute_commitment_shares(
    commitment_list: Iterable[Commitment], binding_factors: Mapping[int, Scalar]
) -> dict[int, Point]:
    """Return D_i + rho_i E_i of each signer, the terms of the group commitment (sec. 4.5 and 5.4: comm_share).

    In this order nobody can make a sum the identity, which a ``Point`` never is: each rho_i depends on the whole list.
    """
    return {i: hiding + binding_factors[i] * binding for i, hiding, binding in commitment_list}


def compute_group_commitment(commitment_shares: Mapping[int, Point]) -> Point:
    """Return R, the sum of D_i + rho_i E_i (sec. 4.5)."""
    return total(commitment_shares.values())


def compute_challenge(group_commitment: Point, group_public_key: Point, msg: bytes) -> Scalar:
    """Return c, the challenge of an Ed25519 signature (sec. 4.6; RFC 8032, sec. 5.1.6, step 4)."""
    return H2(group_commitment.encode(), group_public_key.encode(), msg)


@final
class Agreed:
    """What the signers and whoever aggregates agree on, and what each of them works out of it. It holds no secret.

    ``sign``, ``aggregate`` and ``verify_signature_share`` of the RFC begin with the same lines; here they stand once.

    Args:
        group_public_key: PK.
        msg: the message.
        commitment_list: of every signer, in any order.

    Attributes:
        commitment_list: sorted by identifier (sec. 4.3).
        binding_factors: rho_i by identifier (sec. 4.4).
        commitment_shares: D_i + rho_i E_i by identifier.
        group_commitment: R (sec. 4.5).
        challenge: c (sec. 4.6).

    Raises:
        ParameterError: no signer, one identifier twice, or one that is not from 1 to the order less 1.
    """

    __slots__ = ("binding_factors", "challenge", "commitment_list", "commitment_shares", "group_commitment")

    def __init__(self, group_public_key: Point, msg: bytes, commitment_list: Iterable[Commitment]) -> None:
        self.commitment_list = tuple(sorted(commitment_list, key=lambda one: one.identifier))
        if len(set(self.identifiers)) < len(self.identifiers) or not self.identifiers:
            raise ParameterError("a signature is made by one signer or more, each of them once")
        self.binding_factors = compute_binding_factors(group_public_key, self.commitment_list, msg)
        self.commitment_shares = compute_commitment_shares(self.commitment_list, self.binding_factors)
        self.group_commitment = compute_group_commitment(self.commitment_shares)
        self.challenge = compute_challenge(self.group_commitment, group_public_key, msg)

    @property
    def identifiers(self) -> tuple[int, ...]:
        """The signers, in the order of the list."""
        return tuple(one.identifier for one in self.commitment_list)

    def interpolating_value(self, identifier: int) -> Scalar:
        """Return lambda_i of a signer."""
        return derive_interpolating_value(self.identifiers, identifier)


def sign(identifier: int, share: Scalar, nonces: Nonces, agreed: Agreed) -> Scalar:
    """Round two: return this signer's share of the signature, and use up the nonces.

    Args:
        identifier: the signer's.
        share: the key share, sk_i.
        nonces: those committed to in the list.
        agreed: key, message and commitments.

    Raises:
        ParameterError: the nonces were used before.
        VerificationError: the list does not hold this signer's own commitments as they were made.

    Source: RFC 9591, sec. 5.2.
    """
    own = Commitment(identifier, nonces.hiding_commitment, nonces.binding_commitment)
    if own not in agreed.commitment_list:
        raise VerificationError("the list does not hold this signer's commitments as they were made")
    binding_factor = agreed.binding_factors[identifier]
    lambda_i = agreed.interpolating_value(identifier)
    hiding_nonce, binding_nonce = nonces.used()
    return hiding_nonce + binding_nonce * binding_factor + lambda_i * share * agreed.challenge


def verify_signature_share(identifier: int, public_share: Point, sig_share: Scalar, agreed: Agreed) -> bool:
    """Say whether a share of the signature is right: z_i B = D_i + rho_i E_i + c lambda_i PK_i.

    Args:
        identifier: the signer's.
        public_share: PK_i, the signer's key share times the base point.
        sig_share: z_i.
        agreed: key, message and commitments.

    Raises:
        ParameterError: no such signer is in the list.

    Source: RFC 9591, sec. 5.4.
    """
    lambda_i = agreed.interpolating_value(identifier)
    if sig_share.is_zero():  # The identity, which is on no right side but with probability 2^-252.
        return False
    return sig_share * BASE == agreed.commitment_shares[identifier] + (agreed.challenge * lambda_i) * public_share


def aggregate(sig_shares: Mapping[int, Scalar], agreed: Agreed) -> bytes:
    """Return the signature that comes of everybody's shares, right or not: 64 bytes, R and z.

    Args:
        sig_shares: z_i by identifier, of every signer in the list and nobody else.
        agreed: key, message and commitments.

    Raises:
        ParameterError: a share is missing, or is nobody's.

    Source: RFC 9591, sec. 5.3. ``verify`` says whether it is one; single shares are looked at only when it is not.
    """
    if sig_shares.keys() != set(agreed.identifiers):
        raise ParameterError("a signature is made of one share by each signer in the list")
    z = Scalar.of(0)
    for sig_share in sig_shares.values():
        z = z + sig_share
    return agreed.group_commitment.encode() + z.encode()


def verify(group_public_key: Point, msg: bytes, signature: bytes) -> bool:
    """Say whether a signature is one by this key over this message, as any Ed25519 verifier does.

    Source: RFC 8032, sec. 5.1.7, by ``cryptography``.
    """
    try:
        Ed25519PublicKey.from_public_bytes(group_public_key.encode()).verify(signature, msg)
    except InvalidSignature:
        return False
    return True


def misbehaving(
    sig_shares: Mapping[int, Scalar], public_share: Callable[[int], Point], agreed: Agreed
) -> tuple[int, ...]:
    """Return the signers whose shares are wrong, in the order of the list.

    Args:
        sig_shares: z_i by identifier, of every signer in the list.
        public_share: gives PK_i.
        agreed: key, message and commitments.

    Source: RFC 9591, sec. 5.4 (identifiable abort).
    """
    return tuple(i for i in agreed.identifiers if not verify_signature_share(i, public_share(i), sig_shares[i], agreed))
