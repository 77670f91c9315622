"""Check a key share against the public record alone, and the record against what its reader knows already.

Source: P. Feldman, "A practical scheme for non-interactive verifiable secret sharing", FOCS 1987 (s B = sum of
x^j A_j); RFC 9591, appendix C.2; FORMAT_KEYS.md, sec. 21 and 22.
May import: shares.errors, shares.documents, shares.group.edwards25519, .own_share.
Secret: the scalar of a key share, while it is compared. Public: the rest.
Does not: say who the parties are: people do, by the fingerprints of their cards.
"""

from __future__ import annotations

from collections.abc import Sequence

from cryptography.exceptions import UnsupportedAlgorithm
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
from cryptography.hazmat.primitives.serialization import load_pem_public_key

from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.party import PartyCard
from shares.documents.wrapping import ByCard, Opener
from shares.errors import DocumentError, EpochMismatchError, SetMismatchError, VerificationError, WrongKeyError
from shares.group.edwards25519 import Scalar
from shares.keys.own_share import own_share

ANOTHER = "find the record that it belongs to; the key share may be perfectly good"


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


def check_belongs(share: KeyShare, record: KeyRecord) -> None:
    """Check that a key share is one of this record's, by all that it shows; nothing is opened.

    Raises:
        SetMismatchError, EpochMismatchError: it is of another key or epoch.
        VerificationError: it contradicts the record, or the file is damaged.
    """
    share.check_whole()
    if share.key != record.key:
        raise SetMismatchError(
            f"the key share is of the key {share.key.hex()}, the record of the key {record.key.hex()}", hint=ANOTHER
        )
    if share.epoch != record.epoch:
        raise EpochMismatchError(
            f"the key share is of epoch {share.epoch}, the record of epoch {record.epoch}", hint=ANOTHER
        )
    holder = next((one for one in record.custodians if one.name == share.custodian), None)
    problem = None
    if share.record != record.fingerprint:
        problem = f"the key share names the record {share.record}, and this one is {record.fingerprint}"
    elif holder is None:
        problem = f"the record names no custodian {share.custodian}"
    elif (share.index, share.need) != (holder.index, record.need):
        problem = "the key share stands elsewhere than the record says, or needs another number of custodians"
    elif isinstance(share.wrapping, ByCard) and share.wrapping.card != holder.card.fingerprint:
        problem = f"the key share is wrapped for the card {share.wrapping.card}, which is not its custodian's"
    if problem:
        raise VerificationError(problem, hint="ask the dealer or the other custodians which record is the right one")


def opened(share: KeyShare, record: KeyRecord, opener: Opener) -> Scalar:
    """Return the scalar of a key share, checked against the record's commitments.

    Args:
        share: of this record.
        record: the key's.
        opener: what opens the share, for instance ``OpenPartyKey.open``.

    Raises:
        WrongKeyError: another party key is needed.
        SetMismatchError, EpochMismatchError, VerificationError: see ``check_belongs``; or the commitments say that
            another number was dealt.
    """
    check_belongs(share, record)
    try:
        return own_share(share, record, share.custodian, opener)
    except WrongKeyError:
        raise
    except VerificationError as error:
        problem = error
    raise VerificationError(
        f"the key share of {share.custodian} does not hold: {problem.what}",
        hint=problem.hint
        or "do not use it: keep the file, and tell the others; whoever dealt it was at fault, or it was exchanged",
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
