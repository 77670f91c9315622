"""What a certificate or revocation list says, in words for those who are asked to sign it.

All of it is found in the bytes to be signed, and nothing in what their author says of them. What is not understood is
shown as such, never left out.

Source: RFC 5280, sec. 4.1, 4.2, 5.1 and 5.2.
May import: shares.clock, .certificate_parts, .description.
Secret: nothing. Public: everything.
Does not: judge; ``certificates.check`` and ``revocation.check`` refuse.
"""

from __future__ import annotations

import hashlib
import ipaddress
from collections.abc import Iterator
from typing import Final

from cryptography import x509
from cryptography.hazmat.primitives.asymmetric import ec, rsa
from cryptography.hazmat.primitives.asymmetric.types import CertificatePublicKeyTypes
from cryptography.hazmat.primitives.serialization import Encoding, PublicFormat
from cryptography.x509.oid import ExtendedKeyUsageOID

from shares import clock
from shares.keys import certificate_parts as parts
from shares.keys.certificate_parts import extension
from shares.keys.description import Description, in_groups, shown

_USES: Final = {
    ExtendedKeyUsageOID.SERVER_AUTH: "to be a server",
    ExtendedKeyUsageOID.CLIENT_AUTH: "to be a client",
    ExtendedKeyUsageOID.CODE_SIGNING: "to sign programs",
    ExtendedKeyUsageOID.EMAIL_PROTECTION: "to protect mail",
    ExtendedKeyUsageOID.TIME_STAMPING: "to date documents",
    ExtendedKeyUsageOID.OCSP_SIGNING: "to answer for revocations",
    ExtendedKeyUsageOID.ANY_EXTENDED_KEY_USAGE: "for anything",
}
_MOST_ENTRIES = 50
_MOST_OCTETS = 32
_NOT_READ = "It says things that are not read here. Sign only if you know from elsewhere what they mean."


def described_certificate(body: bytes, public_key: bytes) -> Description:
    """Say what a certificate says before it is signed.

    Args:
        body: the bytes to be signed.
        public_key: the threshold key's Edwards point, 32 bytes, which is to sign it.

    Raises:
        DocumentError: they are not the body of a certificate that an Ed25519 key can sign.
    """
    draft = parts.read_certificate_body(body)
    own = parts.key_bytes(draft) == public_key
    is_root = own and draft.subject == draft.issuer
    constraints = extension(draft, x509.BasicConstraints)
    is_authority = constraints is not None and constraints.ca
    start, end = draft.not_valid_before_utc, draft.not_valid_after_utc
    more = tuple(_extensions(draft.extensions))
    lines = (
        f"subject: {_name(draft.subject)}",
        f"issuer: {'itself' if is_root else _name(draft.issuer)}",
        f"valid: {parts.period(start, end)}, {(end - start).days} days",
        f"serial number: {draft.serial_number:x}",
        f"key: {'this threshold key, ' if own else ''}{_key(draft.public_key())}",
        *(line for line, _ in more),
    )
    cautions = [_NOT_READ] if not all(understood for _, understood in more) else []
    if is_root:
        cautions.append(
            "A signature cannot be taken back: whoever comes to trust this root trusts all that this key ever signs."
        )
    elif is_authority:
        cautions.append(
            "It makes its holder an authority: what they issue is trusted as if this key had issued it, until it is"
            " revoked or ends. Compare the key with its holder before you sign."
        )
    else:
        cautions.append("Compare the key and the names with its holder before you sign.")
    kind = "root certificate" if is_root else "certificate of an authority" if is_authority else "certificate"
    return Description(f"the body of a {kind}", lines, tuple(cautions))


def described_list(body: bytes) -> Description:
    """Say what a revocation list says before it is signed.

    Args:
        body: the bytes to be signed.

    Raises:
        DocumentError: they are not the body of a revocation list that an Ed25519 key can sign.
    """
    draft = parts.read_list_body(body)
    more = tuple(_extensions(draft.extensions))
    entries = [_entry(entry) for entry in draft]
    until = "no time given" if draft.next_update_utc is None else clock.to_text(draft.next_update_utc)
    lines = (
        f"issuer: {_name(draft.issuer)}",
        f"issued: {clock.to_text(draft.last_update_utc)}",
        f"next list: {until}",
        *(line for line, _ in more),
        f"revoked: {len(entries)}",
        *(line for line, _ in entries[:_MOST_ENTRIES]),
        *([f"and {len(entries) - _MOST_ENTRIES} more"] if len(entries) > _MOST_ENTRIES else []),
    )
    cautions = ["What an earlier list revoked and this one leaves out is in force again. Compare the two."]
    if not all(understood for _, understood in (*more, *entries)):
        cautions.insert(0, _NOT_READ)
    return Description("the body of a revocation list", lines, tuple(cautions))


def _name(name: x509.Name) -> str:
    return shown(name.rfc4514_string()) or "nobody (empty)"


def _key(key: CertificatePublicKeyTypes) -> str:
    if isinstance(key, rsa.RSAPublicKey):
        kind = f"RSA of {key.key_size} bits"
    elif isinstance(key, ec.EllipticCurvePublicKey):
        kind = f"on the curve {key.curve.name}"
    else:
        kind = type(key).__name__.removesuffix("PublicKey")
    info = key.public_bytes(Encoding.DER, PublicFormat.SubjectPublicKeyInfo)
    return f"{kind}, SHA-256 {in_groups(hashlib.sha256(info).digest())}"


def _extensions(found: x509.Extensions) -> Iterator[tuple[str, bool]]:
    """Yield a line for each extension, and whether all of it is understood."""
    for one in found:
        said = _value(one.value)
        if said is None:
            critical = "critical" if one.critical else "not critical"
            yield f"extension {one.oid.dotted_string} ({critical}), not read here: {_octets(one.value)}", False
        else:
            yield said


def _value(value: x509.ExtensionType) -> tuple[str, bool] | None:
    """Return the line of an extension that is understood, and whether everything in it is."""
    match value:
        case x509.BasicConstraints(ca=False):
            return "authority: no, it issues nothing", True
        case x509.BasicConstraints(path_length=None):
            return "authority: yes, with any number of others below it", True
        case x509.BasicConstraints(path_length=length):
            below = f"at most {length} others below it, one under the other" if length else "no other below it"
            return f"authority: yes, with {below}", True
        case x509.KeyUsage():
            # The library refuses to say of these two what means nothing where keys are not agreed on.
            asked = [use for use in parts.KEY_USES if value.key_agreement or not use.endswith("cipher_only")]
            uses = [use.replace("_", " ") for use in asked if getattr(value, use)]
            return f"key usage: {', '.join(uses) or 'none'}", True
        case x509.ExtendedKeyUsage():
            said = [_USES.get(use, use.dotted_string) for use in value]
            return f"purpose: {', '.join(said)}", all(use in _USES for use in value)
        case x509.SubjectAlternativeName():
            names = [_general_name(name) for name in value]
            return f"names: {', '.join(names)}", not any(name.startswith("?") for name in names)
        case x509.SubjectKeyIdentifier():
            return f"name of its key: {value.digest.hex()}", True
        case x509.AuthorityKeyIdentifier(authority_cert_issuer=None, key_identifier=bytes(identifier)):
            return f"name of its issuer's key: {identifier.hex()}", True
        case x509.CRLNumber():
            return f"number: {value.crl_number}", True
        case _:
            return None


def _general_name(name: x509.GeneralName) -> str:
    match name:
        case x509.DNSName():
            every = " (every name of one part before it)" if name.value.startswith("*.") else ""
            return f"host {shown(name.value)}{every}"
        case x509.RFC822Name():
            return f"mail {shown(name.value)}"
        case x509.UniformResourceIdentifier():
            return f"address {shown(name.value)}"
        case x509.IPAddress(value=ipaddress.IPv4Address() | ipaddress.IPv6Address()):
            return f"IP {name.value}"
        case _:
            return f"?{type(name).__name__}"


def _entry(entry: x509.RevokedCertificate) -> tuple[str, bool]:
    reason = next((found.value for found in entry.extensions if isinstance(found.value, x509.CRLReason)), None)
    others = [found.oid.dotted_string for found in entry.extensions if not isinstance(found.value, x509.CRLReason)]
    said = f"{entry.serial_number:x} since {clock.to_text(entry.revocation_date_utc)}"
    said += f", {reason.reason.value}" if reason else ""
    said += f", extensions not read here: {', '.join(others)}" if others else ""
    return said, not others


def _octets(value: x509.ExtensionType) -> str:
    octets = value.public_bytes()
    cut = " ..." if len(octets) > _MOST_OCTETS else ""
    return f"{len(octets)} bytes, {in_groups(octets[:_MOST_OCTETS])}{cut}"
