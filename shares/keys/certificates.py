"""Certificates that a threshold key issues: a root of its own, and others from requests.

Each is a body (the bytes to be signed) that its author builds once; every signer gets those bytes, checks them with
``check`` against the issuer's certificate, and reads what ``certificate_words`` finds in them.

Source: RFC 5280, sec. 4 (certificates) and 6 (paths), RFC 2986 (requests), RFC 9525, sec. 3 (names of servers),
RFC 8410 (Ed25519), NIST SP 800-131A rev. 2, sec. 3 (sizes of RSA keys).
May import: shares.errors, .certificate_parts, .public_key.
Secret: nothing. Public: everything.
Does not: sign.
"""

from __future__ import annotations

import ipaddress
import re
from datetime import datetime
from typing import Final, Literal

from cryptography import x509
from cryptography.hazmat.primitives.asymmetric import ec, rsa
from cryptography.hazmat.primitives.asymmetric.ed448 import Ed448PublicKey
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
from cryptography.hazmat.primitives.asymmetric.types import CertificatePublicKeyTypes
from cryptography.hazmat.primitives.serialization import Encoding
from cryptography.x509.oid import ExtendedKeyUsageOID, ExtensionOID

from shares.errors import ParameterError, VerificationError
from shares.keys import certificate_parts as parts
from shares.keys.certificate_parts import check_name, check_times, extension
from shares.keys.public_key import check_signature, loaded

Purpose = Literal["authority", "server", "client"]
"""What a requested certificate is for: to issue others, or to stand for a server or a client."""
_USES: Final = {"server": ExtendedKeyUsageOID.SERVER_AUTH, "client": ExtendedKeyUsageOID.CLIENT_AUTH}
_LEAST_RSA_BITS = 2048
_CURVES = (ec.SECP256R1, ec.SECP384R1, ec.SECP521R1)
_ADDRESSES = (ipaddress.IPv4Address, ipaddress.IPv6Address)  # Not a network, which the library would take as well.
_MAX_NAMES = 100
_LABEL = r"[A-Za-z0-9]([A-Za-z0-9-]{0,61}[A-Za-z0-9])?"
_HOST = re.compile(rf"(?=.{{1,253}}\Z)(\*\.)?{_LABEL}(\.{_LABEL})*")
_MAILBOX = re.compile(r"[!#-'*+\-/-9=?A-Z^-~.]{1,64}@[A-Za-z0-9.-]{1,253}")
_URI = re.compile(r"[A-Za-z][A-Za-z0-9+.-]*:[!-~]{1,500}")


def root(
    public_key: bytes, *, subject: str, not_before: datetime, not_after: datetime, path_length: int | None = None
) -> bytes:
    """Return the body of a root certificate: of the threshold key, to be signed by itself.

    Args:
        public_key: the Edwards point, 32 bytes.
        subject: a distinguished name, like ``CN=Harbour Trust Root,O=Harbour Trust`` (RFC 4514).
        not_before: the first second at which it is valid, UTC.
        not_after: the last.
        path_length: how many authorities may stand below it, one under the other; None for any number.

    Returns:
        DER. The serial number is drawn anew (159 bits), so building twice gives two bodies.

    Raises:
        ParameterError: the name, the times or the path length cannot be.
        VerificationError: the key is no point of the group.

    Source: RFC 5280, sec. 4.1, 4.2.1.2, 4.2.1.3, 4.2.1.9.
    """
    name = parts.name_from_text(subject)
    builder = _begun(name, name, loaded(public_key), not_before, not_after)
    body = parts.certificate_body(_with_authority(builder, path_length))
    check(body, public_key)
    return body


def from_request(
    public_key: bytes,
    request: bytes,
    *,
    issuer: bytes,
    purpose: Purpose,
    not_before: datetime,
    not_after: datetime,
    path_length: int = 0,
) -> bytes:
    """Return the body of a certificate for whoever holds the key of a request.

    The request gives its key, its subject and, for servers and clients, its alternative names. Whatever else it asks
    for is left out: ``left_out`` says what.

    Args:
        public_key: the threshold key's Edwards point, 32 bytes.
        request: PKCS #10, PEM or DER.
        issuer: the certificate of the threshold key under which this one is to stand, PEM or DER.
        purpose: what it is for.
        not_before: the first second at which it is valid, UTC; not before the issuer's.
        not_after: the last; not after the issuer's.
        path_length: for an authority, how many others may stand below it, one under the other.

    Returns:
        DER, with a new serial number (159 bits).

    Raises:
        DocumentError: the request or the issuer's certificate cannot be read.
        VerificationError: the request is not signed by its own key, or the issuer's key is not the threshold key.
        ParameterError: the key is too weak, or names, times or path length cannot be, or go beyond the issuer's.

    Source: RFC 5280, sec. 4.2; RFC 2986, sec. 4.2.
    """
    asked, above = parts.read_request(request), parts.read_issuer(issuer, public_key)
    key = _strong(asked)
    names = None if purpose == "authority" else _names(asked)
    if purpose == "server" and names is None:
        raise ParameterError(
            "the request holds no alternative name, by which alone a server is known today",
            hint="have it made anew with subjectAltName, like DNS:gate.harbour.example",
        )
    if names is None or list(asked.subject):
        check_name(asked.subject)
    builder = _begun(asked.subject, above.subject, key, not_before, not_after).add_extension(
        x509.AuthorityKeyIdentifier(parts.key_identifier(above), None, None), critical=False
    )
    if purpose == "authority":
        builder = _with_authority(builder, path_length)
    else:
        builder = builder.add_extension(x509.BasicConstraints(ca=False, path_length=None), critical=True)
        builder = builder.add_extension(_usage("digital_signature"), critical=True)
        builder = builder.add_extension(x509.ExtendedKeyUsage([_USES[purpose]]), critical=False)
    if names is not None:
        builder = builder.add_extension(names, critical=not list(asked.subject))
    body = parts.certificate_body(builder)
    check(body, public_key, issuer)
    return body


def left_out(request: bytes, purpose: Purpose) -> tuple[str, ...]:
    """Return what a request asks for and ``from_request`` leaves out: its names, where known, and object identifiers.

    Args:
        request: PKCS #10, PEM or DER.
        purpose: as for ``from_request``.

    Raises:
        DocumentError: the request cannot be read.
        VerificationError: it is not signed by its own key.
    """
    asked = parts.read_request(request)
    copied = set() if purpose == "authority" else {x509.SubjectAlternativeName.oid}
    extensions = [_named(found.oid) for found in asked.extensions if found.oid not in copied]
    # The extensions are themselves one attribute, which is told of item by item.
    attributes = [_named(found.oid) for found in asked.attributes if found.oid != _EXTENSION_REQUEST]
    return (*extensions, *attributes)


def _named(oid: x509.ObjectIdentifier) -> str:
    name = next((name for name, known in vars(ExtensionOID).items() if known == oid), None)
    return f"{name.lower().replace('_', ' ')} ({oid.dotted_string})" if name else oid.dotted_string


def check(body: bytes, public_key: bytes, issuer: bytes | None = None) -> None:
    """Check that a body is that of a certificate which the threshold key may sign; each signer does.

    Args:
        body: the bytes to be signed.
        public_key: the threshold key's Edwards point, 32 bytes.
        issuer: the certificate above it, PEM or DER; None for a root.

    Raises:
        DocumentError: it is no such body, or the issuer's certificate cannot be read.
        VerificationError: it is not a root of this key, or names another issuer.
        ParameterError: it goes beyond what the issuer's certificate allows: in time, or in what it may issue.

    Source: RFC 5280, sec. 6.1.
    """
    draft = parts.read_certificate_body(body)
    if issuer is None:
        if draft.subject != draft.issuer or parts.key_bytes(draft) != public_key:
            raise VerificationError(
                "it is no root of this threshold key", hint="give the certificate of the issuer that it names"
            )
        return
    above = parts.read_issuer(issuer, public_key)
    parts.check_issued_by(draft, above)
    start, end = above.not_valid_before_utc, above.not_valid_after_utc
    if draft.not_valid_before_utc < start or draft.not_valid_after_utc > end:
        raise ParameterError(
            f"it is to be valid outside the time of its issuer, {parts.period(start, end)}",
            hint="end it earlier, or renew the issuer's certificate first",
        )
    constraints, limits = extension(draft, x509.BasicConstraints), extension(above, x509.BasicConstraints)
    if constraints is None or not constraints.ca or limits is None or limits.path_length is None:
        return
    if limits.path_length == 0:
        raise ParameterError("the issuer's certificate lets no authority stand below it: its path length is 0")
    if constraints.path_length is None or constraints.path_length >= limits.path_length:
        raise ParameterError(
            f"it is to have a path length that its issuer, of path length {limits.path_length}, cannot give",
            hint=f"give at most {limits.path_length - 1}",
        )


def finished(body: bytes, signature: bytes, public_key: bytes, issuer: bytes | None = None) -> bytes:
    """Check the quorum's signature and return the certificate.

    Args:
        body: the bytes that were signed.
        signature: 64 bytes.
        public_key: the threshold key's Edwards point, 32 bytes.
        issuer: as for ``check``.

    Returns:
        PEM.

    Raises:
        DocumentError, ParameterError: as for ``check``.
        VerificationError: as for ``check``, or the signature is not by this key of this body.
    """
    check(body, public_key, issuer)
    check_signature(public_key, body, signature)
    certificate = parts.read_certificate(parts.whole(body, signature))
    check_signature(public_key, certificate.tbs_certificate_bytes, certificate.signature)
    return certificate.public_bytes(Encoding.PEM)


_EXTENSION_REQUEST = x509.ObjectIdentifier("1.2.840.113549.1.9.14")  # RFC 2985, sec. 5.4.2.


def _begun(
    subject: x509.Name, issuer: x509.Name, key: CertificatePublicKeyTypes, start: datetime, end: datetime
) -> x509.CertificateBuilder:
    check_times(start, end)
    try:
        return (
            x509.CertificateBuilder()
            .subject_name(subject)
            .issuer_name(issuer)
            .public_key(key)
            .serial_number(x509.random_serial_number())
            .not_valid_before(start)
            .not_valid_after(end)
            .add_extension(x509.SubjectKeyIdentifier.from_public_key(key), critical=False)
        )
    except ValueError as error:
        reason = error
    raise ParameterError(f"no certificate can say so: {reason}") from reason


def _with_authority(builder: x509.CertificateBuilder, path_length: int | None) -> x509.CertificateBuilder:
    if path_length is not None and not 0 <= path_length <= 255:
        raise ParameterError("a path length is 0 to 255, or none for any")
    constraints = x509.BasicConstraints(ca=True, path_length=path_length)
    return builder.add_extension(constraints, critical=True).add_extension(
        _usage("key_cert_sign", "crl_sign"), critical=True
    )


def _usage(*uses: str) -> x509.KeyUsage:
    return x509.KeyUsage(**{use: use in uses for use in parts.KEY_USES})


def _strong(request: x509.CertificateSigningRequest) -> CertificatePublicKeyTypes:
    """Return the request's key, unless it is of a kind or size that nobody should be known by for years."""
    key = request.public_key()
    rsa_is_long = isinstance(key, rsa.RSAPublicKey) and key.key_size >= _LEAST_RSA_BITS
    curve_is_known = isinstance(key, ec.EllipticCurvePublicKey) and isinstance(key.curve, _CURVES)
    if not (rsa_is_long or curve_is_known or isinstance(key, (Ed25519PublicKey, Ed448PublicKey))):
        raise ParameterError(
            f"the request's key is neither RSA of at least {_LEAST_RSA_BITS} bits, nor on P-256, P-384 or P-521, nor"
            " Ed25519 or Ed448"
        )
    return key


def _names(request: x509.CertificateSigningRequest) -> x509.SubjectAlternativeName | None:
    """Return the request's alternative names if each is of a kind and form that everybody reads alike."""
    names = next((found.value for found in request.extensions if found.oid == x509.SubjectAlternativeName.oid), None)
    if not isinstance(names, x509.SubjectAlternativeName):
        return None
    if not 1 <= len(list(names)) <= _MAX_NAMES:
        raise ParameterError(f"a request has 1 to {_MAX_NAMES} alternative names")
    for number, name in enumerate(names, 1):
        kinds = ((x509.DNSName, _HOST), (x509.RFC822Name, _MAILBOX), (x509.UniformResourceIdentifier, _URI))
        known = any(isinstance(name, kind) and form.fullmatch(name.value) for kind, form in kinds)
        if not known and not (isinstance(name, x509.IPAddress) and isinstance(name.value, _ADDRESSES)):
            raise ParameterError(
                f"alternative name {number} of the request is no host name, IP address, mail address or URI in plain"
                " letters",
                hint="have the request made anew without it",
            )
    return names
