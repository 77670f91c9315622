"""Revocation lists that a threshold key issues: which of its certificates are no longer to be trusted.

Like a certificate, a list is a body that its author builds once and that every signer checks with ``check``: a list
that leaves out what an earlier one revoked would put it in force again.

Source: RFC 5280, sec. 5 (lists), 5.3.1 (reasons) and 5.2.3 (numbers).
May import: shares.errors, shares.clock, .certificate_parts, .public_key.
Secret: nothing. Public: everything.
Does not: keep the earlier lists, or sign.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Final

from cryptography import x509
from cryptography.hazmat.primitives.serialization import Encoding

from shares import clock
from shares.errors import ParameterError, VerificationError
from shares.keys import certificate_parts as parts
from shares.keys.certificate_parts import extension
from shares.keys.public_key import check_signature

# What is on hold or comes off a list again is left aside: here nothing that was revoked comes back.
_REASONS: Final = {
    reason.value: reason
    for reason in x509.ReasonFlags
    if reason not in (x509.ReasonFlags.unspecified, x509.ReasonFlags.certificate_hold, x509.ReasonFlags.remove_from_crl)
}
REASONS: Final = tuple(_REASONS)
"""The reasons that can be given, as RFC 5280, sec. 5.3.1, names them."""


@dataclass(frozen=True, slots=True)
class Revoked:
    """One certificate that is no longer to be trusted.

    Attributes:
        serial: its serial number, which ``serial_of`` reads from it.
        since: from when on, UTC.
        reason: one of ``REASONS``, or None for none given.
    """

    serial: int
    since: datetime
    reason: str | None = None


def serial_of(certificate: bytes, *, issuer: bytes, public_key: bytes) -> int:
    """Return the serial number of a certificate that this issuer has signed.

    Args:
        certificate: PEM or DER.
        issuer: the issuer's certificate, PEM or DER.
        public_key: the threshold key's Edwards point, 32 bytes.

    Raises:
        DocumentError: one of them cannot be read.
        ParameterError: the issuer may not issue lists.
        VerificationError: the issuer's key is another, or it did not issue the certificate.
    """
    read = parts.read_certificate(certificate)
    parts.check_issued_by(read, parts.read_issuer(issuer, public_key, lists=True))
    check_signature(public_key, read.tbs_certificate_bytes, read.signature)
    return read.serial_number


def revocation_list(
    public_key: bytes,
    revoked: Sequence[Revoked],
    *,
    issuer: bytes,
    this_update: datetime,
    next_update: datetime,
    number: int | None = None,
    earlier: bytes | None = None,
) -> bytes:
    """Return the body of a revocation list.

    Args:
        public_key: the threshold key's Edwards point, 32 bytes.
        revoked: what is added, in any order.
        issuer: the certificate of the threshold key, PEM or DER.
        this_update: when the list is issued, UTC.
        next_update: by when the next one will be there, UTC; verifiers take this one no longer.
        number: the list's number, 1 to 2^63 - 1; None for one more than the earlier list's, or 1.
        earlier: the list before, PEM or DER, all of whose entries are kept.

    Returns:
        DER.

    Raises:
        DocumentError: the issuer's certificate or the earlier list cannot be read.
        VerificationError: the issuer's key is another, or the earlier list is not by this issuer.
        ParameterError: the issuer may not issue lists; or a number, time, serial number or reason cannot be.

    Source: RFC 5280, sec. 5.1 and 5.2.
    """
    above = parts.read_issuer(issuer, public_key, lists=True)
    parts.check_times(this_update, next_update)
    before = None if earlier is None else _earlier(earlier, above, public_key)
    if number is None:
        number = 1 if before is None else number_of(before) + 1
    if not 1 <= number < 1 << 63:
        raise ParameterError("the number of a list is 1 to 2^63 - 1")
    entries = [*(before or ()), *(_entry(one, this_update) for one in revoked)]
    if len({entry.serial_number for entry in entries}) != len(entries):
        raise ParameterError("a serial number is there twice: in what is added, or there and in the earlier list")
    builder = x509.CertificateRevocationListBuilder(
        issuer_name=above.subject, last_update=this_update, next_update=next_update, revoked_certificates=entries
    ).add_extension(x509.CRLNumber(number), critical=False)
    builder = builder.add_extension(
        x509.AuthorityKeyIdentifier(parts.key_identifier(above), None, None), critical=False
    )
    body = parts.list_body(builder)
    check(body, public_key, issuer, earlier=earlier)
    return body


def check(body: bytes, public_key: bytes, issuer: bytes, *, earlier: bytes | None = None) -> None:
    """Check that a body is that of a list which the threshold key may sign; each signer does.

    Args:
        body: the bytes to be signed.
        public_key: the threshold key's Edwards point, 32 bytes.
        issuer: the certificate of the threshold key, PEM or DER.
        earlier: the list before, where there is one, PEM or DER: nothing that it revoked may be missing.

    Raises:
        DocumentError: it is no such body, or the issuer's certificate or the earlier list cannot be read.
        VerificationError: it names another issuer, is not numbered or dated after the earlier list, or leaves out what
            that revoked.
        ParameterError: the issuer may not issue lists, or no longer at that time.
    """
    draft = parts.read_list_body(body)
    above = parts.read_issuer(issuer, public_key, lists=True)
    parts.check_issued_by(draft, above)
    start, end = above.not_valid_before_utc, above.not_valid_after_utc
    if not start <= draft.last_update_utc <= end:
        raise ParameterError(f"it is issued outside the time of its issuer, {parts.period(start, end)}")
    if earlier is None:
        return
    before = _earlier(earlier, above, public_key)
    if number_of(draft) <= number_of(before) or draft.last_update_utc < before.last_update_utc:
        raise VerificationError("it is not numbered and dated after the earlier list")
    missing = {entry.serial_number for entry in before} - {entry.serial_number for entry in draft}
    if missing:
        raise VerificationError(
            f"it leaves out {len(missing)} of what the earlier list revokes, like {min(missing):x}",
            hint="build it anew from the earlier list: what is left out would be in force again",
        )


def finished(body: bytes, signature: bytes, public_key: bytes, issuer: bytes, *, earlier: bytes | None = None) -> bytes:
    """Check the quorum's signature and return the list.

    Args:
        body: the bytes that were signed.
        signature: 64 bytes.
        public_key: the threshold key's Edwards point, 32 bytes.
        issuer: the certificate of the threshold key, PEM or DER.
        earlier: as for ``check``.

    Returns:
        PEM.

    Raises:
        DocumentError, ParameterError: as for ``check``.
        VerificationError: as for ``check``, or the signature is not by this key of this body.
    """
    check(body, public_key, issuer, earlier=earlier)
    check_signature(public_key, body, signature)
    listed = parts.read_list(parts.whole(body, signature))
    check_signature(public_key, listed.tbs_certlist_bytes, listed.signature)
    return listed.public_bytes(Encoding.PEM)


def number_of(listed: x509.CertificateRevocationList) -> int:
    """Return the number of a list; 0 where it has none (RFC 5280, sec. 5.2.3)."""
    found = extension(listed, x509.CRLNumber)
    return 0 if found is None else found.crl_number


def _earlier(data: bytes, issuer: x509.Certificate, public_key: bytes) -> x509.CertificateRevocationList:
    listed = parts.read_list(data)
    parts.check_issued_by(listed, issuer)
    check_signature(public_key, listed.tbs_certlist_bytes, listed.signature)
    return listed


def _entry(one: Revoked, this_update: datetime) -> x509.RevokedCertificate:
    if not 1 <= one.serial < 1 << 159:
        raise ParameterError("a serial number is 1 to 2^159 - 1", hint="read it from the certificate itself")
    if clock.to_text(one.since) > clock.to_text(this_update):
        raise ParameterError("a certificate cannot be revoked from after the list's own date on")
    if one.reason is not None and one.reason not in _REASONS:
        raise ParameterError("a reason is none of those of RFC 5280", hint=f"give {', '.join(REASONS)}, or none")
    builder = x509.RevokedCertificateBuilder(one.serial, one.since)
    if one.reason is not None:
        builder = builder.add_extension(x509.CRLReason(_REASONS[one.reason]), critical=False)
    return builder.build()
