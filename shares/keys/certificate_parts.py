"""What certificates and revocation lists share: reading them, putting a signature behind a body, names, times, issuers.

Source: RFC 5280 (X.509 certificates and lists), RFC 8410, sec. 3 and 6 (Ed25519 in them), RFC 2986 (requests), RFC 4514
(names as text), ITU-T X.690, sec. 8.1.3 and 10.1 (DER lengths).
May import: shares.errors, shares.clock, shares.documents.members, .public_key.
Secret: nothing. Public: everything.
Does not: decide what a certificate may say; ``certificates`` and ``revocation`` do.
"""

from __future__ import annotations

import contextlib
import warnings
from collections.abc import Callable, Iterator
from datetime import datetime
from typing import Final, TypeVar

from cryptography import x509
from cryptography.exceptions import UnsupportedAlgorithm
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey, Ed25519PublicKey

from shares import clock
from shares.documents.members import check_text
from shares.errors import DocumentError, ParameterError, VerificationError
from shares.keys.public_key import check_signature

MAX_SIZE: Final = 1 << 20
"""The largest certificate, request or list that is looked at, in bytes: 1 MiB."""
KEY_USES: Final = (
    "digital_signature",
    "content_commitment",
    "key_encipherment",
    "data_encipherment",
    "key_agreement",
    "key_cert_sign",
    "crl_sign",
    "encipher_only",
    "decipher_only",
)
"""What a key may be used for, as the library names it (RFC 5280, sec. 4.2.1.3)."""
_ALGORITHM: Final = bytes.fromhex("300506032b6570")  # SEQUENCE { 1.3.101.112 }, without parameters (RFC 8410, sec. 3).
_SIGNATURE_SIZE = 64
_LIBRARY_REFUSES = (
    ValueError,
    TypeError,
    OverflowError,
    LookupError,  # Of a name in a kind of string that it does not know, up to its version 48.
    NotImplementedError,
    UnsupportedAlgorithm,
    Warning,
    x509.InvalidVersion,
    x509.DuplicateExtension,
    x509.UnsupportedGeneralNameType,
)
_HONOURED = {x509.BasicConstraints.oid, x509.KeyUsage.oid}
Read = TypeVar("Read")


@contextlib.contextmanager
def reading(what: str) -> Iterator[None]:
    """Turn what the library says of bytes that it cannot read into one refusal, its warnings included.

    Raises:
        DocumentError: the bytes are not what they should be.
    """
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        try:
            yield
            return
        except _LIBRARY_REFUSES as error:
            reason = error
    raise DocumentError(f"it is not {what} that can be read here") from reason


def whole(tbs: bytes, signature: bytes = bytes(_SIGNATURE_SIZE)) -> bytes:
    """Return the DER of a certificate or list: ``SEQUENCE { body, algorithm, BIT STRING signature }``.

    Args:
        tbs: the body, the bytes to be signed.
        signature: 64 bytes; zeros where the body is only to be read.

    Source: RFC 5280, sec. 4.1 and 5.1.
    """
    content = tbs + _ALGORITHM + bytes((0x03, 1 + _SIGNATURE_SIZE, 0)) + signature
    length = len(content)
    if length < 0x80:
        return bytes((0x30, length)) + content
    octets = length.to_bytes((length.bit_length() + 7) // 8)
    return bytes((0x30, 0x80 | len(octets))) + octets + content


def read_certificate(data: bytes, *, what: str = "a certificate") -> x509.Certificate:
    """Read a certificate, PEM or DER.

    Args:
        data: the file's bytes.
        what: what they are, for a refusal.

    Raises:
        DocumentError: it is none, or more than one, or larger than 1 MiB.
    """
    certificate = _read(data, what, x509.load_pem_x509_certificate, x509.load_der_x509_certificate)
    with reading(what):
        certificate.subject, certificate.issuer, certificate.extensions, certificate.public_key()
    return certificate


def read_request(data: bytes) -> x509.CertificateSigningRequest:
    """Read a request for a certificate, PEM or DER, and check its own signature.

    Raises:
        DocumentError: it is none, or more than one, or larger than 1 MiB.
        VerificationError: its signature is not by the key that it names.

    Source: RFC 2986, sec. 4.2.
    """
    request = _read(data, "a request for a certificate", x509.load_pem_x509_csr, x509.load_der_x509_csr)
    with reading("a request for a certificate"):
        request.subject, request.extensions, request.attributes, request.public_key()
        valid = request.is_signature_valid
    if not valid:
        raise VerificationError(
            "the request is not signed by the key that it names",
            hint="whoever sent it may not hold that key, or the request was altered: ask for a new one",
        )
    return request


def read_list(data: bytes, *, what: str = "a revocation list") -> x509.CertificateRevocationList:
    """Read a revocation list, PEM or DER.

    Args:
        data: the file's bytes.
        what: what they are, for a refusal.

    Raises:
        DocumentError: it is none, or more than one, or larger than 1 MiB.
    """
    listed = _read(data, what, x509.load_pem_x509_crl, x509.load_der_x509_crl)
    with reading(what):
        listed.issuer, listed.extensions, [entry.extensions for entry in listed]
    return listed


def read_certificate_body(tbs: bytes) -> x509.Certificate:
    """Read the bytes that are signed to make a certificate of version 3 by an Ed25519 key.

    What was read is written again and compared, so the bytes say what is read in them, in its one encoding, and nothing
    beside it.

    Raises:
        DocumentError: they are none.
    """
    what = "the body of a certificate"
    draft = read_certificate(whole(tbs), what=what)
    with reading(what):
        builder = (
            x509.CertificateBuilder()
            .subject_name(draft.subject)
            .issuer_name(draft.issuer)
            .public_key(draft.public_key())
            .serial_number(draft.serial_number)
            .not_valid_before(draft.not_valid_before_utc)
            .not_valid_after(draft.not_valid_after_utc)
        )
        for found in draft.extensions:
            builder = builder.add_extension(found.value, critical=found.critical)
        again = certificate_body(builder)
    if again != tbs:
        raise DocumentError(f"it is not {what} of version 3 in its one encoding, for an Ed25519 key to sign")
    return draft


def read_list_body(tbs: bytes) -> x509.CertificateRevocationList:
    """Read the bytes that are signed to make a revocation list of version 2 by an Ed25519 key, in the same way.

    Raises:
        DocumentError: they are none.
    """
    what = "the body of a revocation list"
    draft = read_list(whole(tbs), what=what)
    with reading(what):
        builder = x509.CertificateRevocationListBuilder(
            draft.issuer, draft.last_update_utc, draft.next_update_utc, revoked_certificates=list(draft)
        )
        for found in draft.extensions:
            builder = builder.add_extension(found.value, critical=found.critical)
        again = list_body(builder)
    if again != tbs:
        raise DocumentError(f"it is not {what} of version 2 in its one encoding, for an Ed25519 key to sign")
    return draft


def certificate_body(builder: x509.CertificateBuilder) -> bytes:
    """Return what is to be signed of a certificate. Its builder wants a key to sign with: it is thrown away."""
    return builder.sign(Ed25519PrivateKey.generate(), None).tbs_certificate_bytes


def list_body(builder: x509.CertificateRevocationListBuilder) -> bytes:
    """Return what is to be signed of a revocation list, likewise."""
    return builder.sign(Ed25519PrivateKey.generate(), None).tbs_certlist_bytes


def name_from_text(text: str) -> x509.Name:
    """Read a distinguished name, the most specific part first.

    Args:
        text: like ``CN=Harbour Trust Root,O=Harbour Trust``.

    Raises:
        ParameterError: it is no such name, or holds what cannot be seen.

    Source: RFC 4514.

    >>> name_from_text("CN=Harbour Trust Root,O=Harbour Trust").rfc4514_string()
    'CN=Harbour Trust Root,O=Harbour Trust'
    """
    try:
        name = x509.Name.from_rfc4514_string(text)
    except ValueError as error:
        reason = error
    else:
        check_name(name)
        return name
    raise ParameterError(
        f"it is no distinguished name: {str(reason) or 'not parts like CN=...,O=...'}",
        hint="write it like CN=Harbour Trust Root,O=Harbour Trust: no space around commas and equals signs, a backslash"
        " before a comma that belongs to a name, and a country as two letters",
    ) from reason


def check_name(name: x509.Name) -> None:
    """Refuse a name that nobody could read.

    Raises:
        ParameterError: it is empty, or a part of it is no text, or holds what cannot be seen.
    """
    if not list(name):
        raise ParameterError("a distinguished name must not be empty", hint="give at least CN=...")
    for part in name:
        check_text(part.value if isinstance(part.value, str) else "", "each part of a distinguished name")


def check_times(start: datetime, end: datetime) -> None:
    """Refuse a period that is none.

    Args:
        start: UTC, to the second.
        end: UTC, to the second.

    Raises:
        ParameterError: a time has no zone, another zone or a fraction of a second, or the end is not after the start.
    """
    if clock.to_text(start) >= clock.to_text(end):
        raise ParameterError("it must end after it starts")


def period(start: datetime, end: datetime) -> str:
    """Say a period as people read it, with both its ends."""
    return f"{clock.to_text(start)} to {clock.to_text(end)}"


def read_issuer(data: bytes, public_key: bytes, *, lists: bool = False) -> x509.Certificate:
    """Read the certificate of an authority whose key is the threshold key.

    A root's own signature is checked. What stands under another authority is taken as given: its key is not at hand.

    Args:
        data: PEM or DER.
        public_key: the threshold key's Edwards point, 32 bytes.
        lists: it is to issue a revocation list, not a certificate.

    Raises:
        DocumentError: it is no certificate.
        VerificationError: its key is another, or it calls itself its own issuer and its signature does not verify.
        ParameterError: it may not issue what is wanted, or under conditions that are not checked here.

    Source: RFC 5280, sec. 4.2.1.3, 4.2.1.9 and 6.1.4.
    """
    issuer = read_certificate(data)
    if key_bytes(issuer) != public_key:
        raise VerificationError(
            "the issuer's certificate is not for this threshold key", hint="give the certificate that names this key"
        )
    if issuer.subject == issuer.issuer:
        check_signature(public_key, issuer.tbs_certificate_bytes, issuer.signature)
    constraints = extension(issuer, x509.BasicConstraints)
    usage = extension(issuer, x509.KeyUsage)
    if issuer.version is not x509.Version.v3 or constraints is None or not constraints.ca:
        raise ParameterError("the issuer's certificate is not that of an authority: nothing that it issues is accepted")
    if usage is not None and not (usage.crl_sign if lists else usage.key_cert_sign):
        raise ParameterError(f"the issuer's certificate does not allow it to sign {'lists' if lists else 'others'}")
    others = [found.oid.dotted_string for found in issuer.extensions if found.critical and found.oid not in _HONOURED]
    if others or extension(issuer, x509.NameConstraints) is not None:
        raise ParameterError(f"the issuer's certificate sets conditions that are not checked here: {', '.join(others)}")
    return issuer


def extension(read: x509.Certificate | x509.CertificateRevocationList, kind: type[Read]) -> Read | None:
    """Return the extension of one kind, or None."""
    return next((found.value for found in read.extensions if isinstance(found.value, kind)), None)


def key_bytes(certificate: x509.Certificate) -> bytes | None:
    """Return the certificate's key if it is an Ed25519 key, 32 bytes, or None."""
    key = certificate.public_key()
    return key.public_bytes_raw() if isinstance(key, Ed25519PublicKey) else None


def key_identifier(issuer: x509.Certificate) -> bytes:
    """Return by what the issued name their issuer's key: as the issuer's certificate has it, or else SHA-1 of the key.

    Source: RFC 5280, sec. 4.2.1.1 and 4.2.1.2, method 1. It is a name, which no security hangs on.
    """
    given = extension(issuer, x509.SubjectKeyIdentifier)
    return (given or x509.SubjectKeyIdentifier.from_public_key(issuer.public_key())).digest


def check_issued_by(draft: x509.Certificate | x509.CertificateRevocationList, issuer: x509.Certificate) -> None:
    """Refuse what does not name this issuer.

    Raises:
        VerificationError: it names another issuer, or another key of its.
    """
    named = extension(draft, x509.AuthorityKeyIdentifier)
    other_key = named is not None and named.key_identifier not in (None, key_identifier(issuer))
    if draft.issuer.public_bytes() != issuer.subject.public_bytes() or other_key:
        raise VerificationError(
            "it does not name this issuer, or another key of this issuer", hint="see whose certificate was given"
        )


def _read(data: bytes, what: str, from_pem: Callable[[bytes], Read], from_der: Callable[[bytes], Read]) -> Read:
    if len(data) > MAX_SIZE:
        raise DocumentError(f"it is larger than {what} that is looked at: {MAX_SIZE} bytes")
    if data.startswith(b"\x30"):  # A SEQUENCE. What looks like PEM within it is a part of some name.
        with reading(what):
            return from_der(data)
    if data.count(b"-----BEGIN ") > 1:
        raise DocumentError("it holds several PEM blocks", hint=f"give {what} alone")
    with reading(what):
        return from_pem(data)
