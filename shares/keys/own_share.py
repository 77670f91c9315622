"""A custodian's own key share, checked against the public record before anything is done with it.

Source: P. Feldman, "A practical scheme for non-interactive verifiable secret sharing", FOCS 1987 (s B = sum of
x^j A_j); RFC 9591, appendix C.2; FORMAT_KEYS.md, sec. 22.
May import: shares.errors, shares.documents, shares.group.edwards25519, shares.sharing.verifiable.
Secret: the scalar of a key share, while it is compared. Public: the rest, and whether the share fits it.
Does not: read files, or ask for passphrases.
"""

from __future__ import annotations

from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.wrapping import ByCard, Opener
from shares.errors import EpochMismatchError, SetMismatchError, VerificationError, WrongKeyError
from shares.group.edwards25519 import Scalar
from shares.sharing.verifiable import check_feldman

ANOTHER = "find the record that it belongs to; the key share may be perfectly good"


def own_share(share: KeyShare, record: KeyRecord, custodian: str, opener: Opener) -> Scalar:
    """Open a key share and return it, once it is known to be this custodian's of this very record.

    Args:
        share: the document.
        record: of the key and epoch that is to be used.
        custodian: whose it has to be.
        opener: what opens the wrapping, for instance ``OpenPartyKey.open``.

    Raises:
        ParameterError: the record names no such custodian.
        SetMismatchError, EpochMismatchError, VerificationError: see ``check_belongs``; or it is another custodian's, is
            damaged, or is not the number that the record's commitments say was dealt.
        WrongKeyError: another party key is needed.
    """
    holder = record.holder(custodian)
    check_is_of(custodian, share, record)
    try:
        value = share.open(opener)
        check_feldman(value, holder.index, record.commitments, record.need)
        return value
    except WrongKeyError:
        raise
    except VerificationError as error:
        problem = error
    raise VerificationError(
        f"the key share of {custodian} does not hold: {problem.what}",
        hint=problem.hint
        or "do not use it: keep the file, and tell the others; whoever dealt it was at fault, or it was exchanged",
    )


def check_is_of(custodian: str, share: KeyShare, record: KeyRecord) -> None:
    """Check that a key share is this custodian's of this record, by all that it shows; nothing is opened.

    Raises:
        SetMismatchError, EpochMismatchError, VerificationError: see ``check_belongs``; or it is another custodian's.
    """
    check_belongs(share, record)
    if share.custodian != custodian:
        raise VerificationError(
            f"the key share is not that of {custodian}, but of {share.custodian}",
            hint=f"name the folder, or give the key share, of {custodian}",
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
