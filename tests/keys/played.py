"""An ordinary Ed25519 key that plays the quorum, requests to it, and the real tools that judge what comes out.

What a quorum signs is signed here by the library's own Ed25519: the formats cannot tell the difference, and must not.
"""

from __future__ import annotations

import subprocess
from datetime import UTC, datetime, timedelta
from pathlib import Path

from cryptography import x509
from cryptography.hazmat.primitives import hashes
from cryptography.hazmat.primitives.asymmetric import ec, rsa
from cryptography.hazmat.primitives.asymmetric.ed448 import Ed448PrivateKey
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.serialization import Encoding

from shares.keys import certificates

QUORUM = Ed25519PrivateKey.from_private_bytes(bytes(range(32)))
KEY = QUORUM.public_key().public_bytes_raw()
OTHER = Ed25519PrivateKey.from_private_bytes(bytes(range(1, 33)))
START = datetime(2026, 12, 1, 7, 0, 0, tzinfo=UTC)
ROOT_NAME = "CN=Harbour Trust Root,O=Harbour Trust"

PRIVATE_KEYS = {
    "rsa": rsa.generate_private_key(65537, 2048),
    "p256": ec.generate_private_key(ec.SECP256R1()),
    "p384": ec.generate_private_key(ec.SECP384R1()),
    "ed25519": OTHER,
    "ed448": Ed448PrivateKey.generate(),
}
NO_HASH = (Ed25519PrivateKey, Ed448PrivateKey)


def after(days: float) -> datetime:
    return START + timedelta(days=days)


def a_root(path_length: int | None = None, days: float = 3650, key: Ed25519PrivateKey = QUORUM) -> bytes:
    """Return a root certificate, PEM, of the quorum or of another key."""
    public_key = key.public_key().public_bytes_raw()
    body = certificates.root(
        public_key, subject=ROOT_NAME, not_before=START, not_after=after(days), path_length=path_length
    )
    return certificates.finished(body, key.sign(body), public_key)


def a_request(
    private_key=OTHER,  # any that the library signs with
    subject: str = "CN=gate.harbour.example,O=Harbour Trust",
    names: tuple[x509.GeneralName, ...] = (x509.DNSName("gate.harbour.example"),),
    *more: tuple[x509.ExtensionType, bool],
) -> bytes:
    builder = x509.CertificateSigningRequestBuilder().subject_name(x509.Name.from_rfc4514_string(subject))
    if names:
        builder = builder.add_extension(x509.SubjectAlternativeName(names), critical=False)
    for extension, critical in more:
        builder = builder.add_extension(extension, critical=critical)
    algorithm = None if isinstance(private_key, NO_HASH) else hashes.SHA256()
    return builder.sign(private_key, algorithm).public_bytes(Encoding.PEM)


def body_of(builder: x509.CertificateBuilder) -> bytes:
    """Return the body of a certificate of the tests' own making, as an author could bring it to the quorum."""
    return builder.sign(QUORUM, None).tbs_certificate_bytes


def plain_builder(
    subject: str = "CN=gate", issuer: str = ROOT_NAME, key: Ed25519PrivateKey = OTHER, serial: int = 77
) -> x509.CertificateBuilder:
    return (
        x509.CertificateBuilder()
        .subject_name(x509.Name.from_rfc4514_string(subject))
        .issuer_name(x509.Name.from_rfc4514_string(issuer))
        .public_key(key.public_key())
        .serial_number(serial)
        .not_valid_before(START)
        .not_valid_after(after(30))
    )


def issued(
    request: bytes, issuer: bytes, purpose: certificates.Purpose, days: float = 300, path_length: int = 0
) -> bytes:
    """Return a certificate, PEM, that the quorum issues on a request."""
    body = certificates.from_request(
        KEY,
        request,
        issuer=issuer,
        purpose=purpose,
        not_before=START,
        not_after=after(days),
        path_length=path_length,
    )
    return certificates.finished(body, QUORUM.sign(body), KEY, issuer)


def tool(folder: Path, *command: str, given: bytes = b"") -> subprocess.CompletedProcess[bytes]:
    """Run a real tool in a folder and return what it said; whether it agreed is for the test to ask."""
    return subprocess.run(command, cwd=folder, input=given, capture_output=True, check=False)


def in_other_time(body: bytes, moment: datetime) -> bytes:
    """Write one time of a body anew as GeneralizedTime, which RFC 5280 keeps for 2050 and later; lengths are mended."""
    short = b"\x17\x0d" + f"{moment:%y%m%d%H%M%S}Z".encode()
    assert body.count(short) == 1
    place = body.index(short)
    changed = bytearray(body.replace(short, b"\x18\x0f" + f"{moment:%Y%m%d%H%M%S}Z".encode()))
    assert changed[:2] == b"\x30\x81"
    changed[2] += 2
    for header in (place - 2, place - 17):  # The validity of a certificate, which a list has not.
        if changed[header : header + 2] == b"\x30\x1e":
            changed[header + 1] += 2
    return bytes(changed)
