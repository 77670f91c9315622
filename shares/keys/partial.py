"""Partial results: what each custodian adds to one Diffie-Hellman value, with a proof that it is the right thing.

With s the key, s_i custodian i's share of it and E the encapsulated key, D_i = s_i E; k of them give s E by Lagrange's
formula. Nobody ever has s, nor any multiple of it but this one.

Source: Y. Desmedt, Y. Frankel, "Threshold cryptosystems", CRYPTO '89; D. Chaum, T. P. Pedersen, "Wallet Databases with
Observers", CRYPTO '92, sec. 3.2 (the proof); V. Shoup, R. Gennaro, "Securing Threshold Cryptosystems against Chosen
Ciphertext Attack", J. Cryptology 15, 2002 (parts proved and checked one by one).
May import: shares.memory, shares.documents, shares.group, shares.sharing.verifiable.
Secret: key shares, partial results, and what comes of them. Public: the key's commitments, E, proofs.
Does not: know who is asked, or open anything with the result.
"""

from __future__ import annotations

from collections.abc import Mapping

from shares.documents.base import canonical
from shares.documents.key_record import KeyRecord
from shares.documents.task import Task
from shares.group.edwards25519 import SIZE, Point, Scalar
from shares.group.montgomery import agreed
from shares.group.proofs import Proof, check_equal, prove_equal
from shares.memory import Secret
from shares.sharing.verifiable import public_share, recombine


def proof_context(task: Task, record: KeyRecord, index: int) -> bytes:
    """Return what a proof is bound to beside its points, so that it proves nothing in another task or for another.

    Args:
        task: whose digest covers the receiver, and the message with its encapsulated key.
        record: the key's, of this epoch.
        index: of the custodian.
    """
    bound = {"task": task.digest().hex(), "record": record.fingerprint, "index": index}
    return b"shares/v1/partial-result" + canonical(bound)


def partial_result(share: Scalar, encapsulated: Point, context: bytes) -> Secret:
    """Return D_i = s_i E and the proof that its logarithm to E is that of s_i B to B: 96 bytes.

    Args:
        share: s_i.
        encapsulated: E.
        context: see ``proof_context``.

    Raises:
        VerificationError: the share is zero.
    """
    proof = prove_equal(share, encapsulated, context)
    return Secret.of((share * encapsulated).encode() + proof.encode())


def checked_result(partial: Secret, record: KeyRecord, index: int, encapsulated: Point, context: bytes) -> Point:
    """Return D_i, its proof having been checked against the public commitments alone.

    Args:
        partial: as it came from the custodian at ``index``.
        record: the key's.
        index: where the custodian's key share stands.
        encapsulated: E.
        context: see ``proof_context``.

    Raises:
        VerificationError: it is no partial result of this custodian for E in this task.
    """
    with partial.view() as view:
        result, proof = Point.decode(view[:SIZE]), Proof.decode(view[SIZE:])
    check_equal(public_share(record.commitments, index), encapsulated, result, proof, context)
    return result


def agreement(results: Mapping[int, Point]) -> Secret:
    """Return the X25519 value of the key and E, 32 bytes, as the sender has it.

    Args:
        results: checked partial results by index, of k custodians.

    Source: RFC 7748, sec. 4.1 and 6.1: u of s E.
    """
    return Secret.of(agreed(recombine(results)))
