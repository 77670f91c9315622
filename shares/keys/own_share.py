"""A custodian's own key share, checked against the public record before anything is done with it.

Source: P. Feldman, "A Practical Scheme for Non-interactive Verifiable Secret Sharing", FOCS 1987.
May import: shares.errors, shares.documents, shares.group.edwards25519, shares.sharing.verifiable.
Secret: the share. Public: the record, and whether the share fits it.
Does not: read files, or ask for passphrases.
"""

from __future__ import annotations

from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.wrapping import Opener
from shares.errors import VerificationError
from shares.group.edwards25519 import Scalar
from shares.sharing.verifiable import check_feldman


def own_share(share: KeyShare, record: KeyRecord, custodian: str, opener: Opener) -> Scalar:
    """Open a key share and return it, once it is known to be this custodian's of this very record.

    Args:
        share: the document.
        record: of the key and epoch that is to be used.
        custodian: whose it has to be.
        opener: what opens the wrapping, for instance ``OpenPartyKey.open``.

    Raises:
        ParameterError: the record names no such custodian.
        VerificationError: it is a share of another key, epoch or custodian, is damaged, or does not fit the record.
        WrongKeyError: another party key is needed.
    """
    holder = record.holder(custodian)
    if (share.key, share.epoch, share.record) != (record.key, record.epoch, record.fingerprint):
        raise VerificationError(
            "the key share is of another key or epoch than the record",
            hint="the record of each epoch is beside the key shares of that epoch",
        )
    if (share.custodian, share.index, share.need) != (custodian, holder.index, record.need):
        raise VerificationError(
            f"the key share is not that of {custodian}", hint="give the key share of that custodian"
        )
    value = share.open(opener)
    check_feldman(value, holder.index, record.commitments, record.need)
    return value
