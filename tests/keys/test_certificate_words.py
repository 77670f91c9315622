"""What signers are told of certificates and lists is what the bytes say, and all of it.

Checked against: ``openssl x509 -text`` (serial number, key, times) and ``openssl pkey`` (the digest of a key);
RFC 5280, sec. 4.1, 4.2 and 5.
"""

from __future__ import annotations

import hashlib
import ipaddress
import re
from pathlib import Path

import pytest
from cryptography import x509
from cryptography.hazmat.primitives.serialization import Encoding, PublicFormat
from hypothesis import given
from hypothesis import strategies as st
from keys.played import (
    KEY,
    OTHER,
    PRIVATE_KEYS,
    QUORUM,
    ROOT_NAME,
    START,
    a_request,
    a_root,
    after,
    body_of,
    issued,
    plain_builder,
    tool,
)

from shares.errors import DocumentError
from shares.keys.certificate_words import described_certificate, described_list
from shares.keys.certificates import from_request, root
from shares.keys.description import Description
from shares.keys.revocation import Revoked, revocation_list

ROOT_BODY = root(KEY, subject=ROOT_NAME, not_before=START, not_after=after(3650), path_length=1)
LIST_BODY = revocation_list(
    KEY, [Revoked(0xAB, after(1), "superseded")], issuer=a_root(), this_update=after(2), next_update=after(32), number=4
)


def said_of(builder: x509.CertificateBuilder) -> Description:
    return described_certificate(body_of(builder), KEY)


def with_extension(value: x509.ExtensionType, critical: bool = False) -> Description:
    return said_of(plain_builder().add_extension(value, critical=critical))


def test_a_root_is_told_whole(tmp_path: Path) -> None:
    said = described_certificate(ROOT_BODY, KEY)
    assert said.kind == "the body of a root certificate"
    info = QUORUM.public_key().public_bytes(Encoding.PEM, PublicFormat.SubjectPublicKeyInfo)
    der = tool(tmp_path, "openssl", "pkey", "-pubin", "-outform", "DER", given=info).stdout
    digest = hashlib.sha256(der).hexdigest()
    serial = re.search(r"serial number: ([0-9a-f]+)", "\n".join(said.lines))
    assert serial is not None
    assert said.lines == (
        "subject: CN=Harbour Trust Root,O=Harbour Trust",
        "issuer: itself",
        "valid: 2026-12-01T07:00:00Z to 2036-11-28T07:00:00Z, 3650 days",
        f"serial number: {serial[1]}",
        f"key: this threshold key, Ed25519, SHA-256 {' '.join(digest[at : at + 8] for at in range(0, 64, 8))}",
        f"name of its key: {hashlib.sha1(KEY).hexdigest()}",  # noqa: S324 - RFC 5280, sec. 4.2.1.2, method 1
        "authority: yes, with at most 1 others below it, one under the other",
        "key usage: key cert sign, crl sign",
    )
    assert any("cannot be taken back" in caution for caution in said.cautions)
    assert len(said.cautions) == 1


def test_the_serial_number_is_openssl_s(tmp_path: Path) -> None:
    leaf = issued(a_request(), a_root(), "server")
    text = tool(tmp_path, "openssl", "x509", "-noout", "-serial", given=leaf).stdout.decode()
    body = x509.load_pem_x509_certificate(leaf).tbs_certificate_bytes
    (line,) = (line for line in described_certificate(body, KEY).lines if line.startswith("serial number: "))
    assert int(line.split(": ")[1], 16) == int(text.split("=")[1], 16)


@pytest.mark.parametrize(
    ("kind", "words"),
    [
        ("rsa", "RSA of 2048 bits"),
        ("p256", "on the curve secp256r1"),
        ("p384", "on the curve secp384r1"),
        ("ed25519", "Ed25519"),
        ("ed448", "Ed448"),
    ],
)
def test_every_key_is_named_by_kind_and_digest(kind: str, words: str) -> None:
    body = from_request(
        KEY,
        a_request(PRIVATE_KEYS[kind]),
        issuer=a_root(),
        purpose="server",
        not_before=START,
        not_after=after(30),
    )
    said = described_certificate(body, KEY)
    info = PRIVATE_KEYS[kind].public_key().public_bytes(Encoding.DER, PublicFormat.SubjectPublicKeyInfo)
    (line,) = (line for line in said.lines if line.startswith("key: "))
    assert line.startswith(f"key: {words}, SHA-256 ")
    assert line.replace(" ", "").endswith(hashlib.sha256(info).hexdigest())
    assert said.kind == "the body of a certificate"
    assert "names: host gate.harbour.example" in said.lines
    assert "purpose: to be a server" in said.lines
    assert "authority: no, it issues nothing" in said.lines
    assert not any("not read here" in caution for caution in said.cautions)


def test_an_authority_is_told_apart() -> None:
    request = a_request(OTHER, "CN=Issuing", ())
    body = from_request(
        KEY, request, issuer=a_root(), purpose="authority", not_before=START, not_after=after(30), path_length=0
    )
    said = described_certificate(body, KEY)
    assert said.kind == "the body of a certificate of an authority"
    assert any("makes its holder an authority" in caution for caution in said.cautions)
    # A name alone makes no root: the key decides.
    impostor = plain_builder(ROOT_NAME, ROOT_NAME, OTHER)
    assert said_of(impostor).kind == "the body of a certificate"
    assert f"issuer: {ROOT_NAME}" in said_of(impostor).lines


def test_what_is_not_understood_is_shown_as_such() -> None:
    unknown = with_extension(x509.UnrecognizedExtension(x509.ObjectIdentifier("1.2.3.4"), bytes(range(40))), True)
    (line,) = (line for line in unknown.lines if "1.2.3.4" in line)
    assert line.startswith("extension 1.2.3.4 (critical), not read here: 40 bytes, 00010203 04050607 ")
    assert line.endswith(" 1c1d1e1f ...")
    limits = with_extension(x509.NameConstraints([x509.DNSName("harbour.example")], None))
    (line,) = (line for line in limits.lines if "2.5.29.30" in line)
    assert "(not critical), not read here: " in line
    assert "..." not in line
    other = x509.AuthorityKeyIdentifier(None, [x509.DirectoryName(x509.Name.from_rfc4514_string("CN=a"))], 5)
    whom = with_extension(other)
    both = with_extension(x509.AuthorityKeyIdentifier(bytes(20), other.authority_cert_issuer, 5))
    assert any(line.startswith("extension 2.5.29.35") for line in whom.lines)
    assert any(line.startswith("extension 2.5.29.35") for line in both.lines)
    purpose = with_extension(x509.ExtendedKeyUsage([x509.ObjectIdentifier("1.2.3.5")]))
    assert "purpose: 1.2.3.5" in purpose.lines
    names = with_extension(x509.SubjectAlternativeName([x509.RegisteredID(x509.ObjectIdentifier("1.2.3"))]))
    assert "names: ?RegisteredID" in names.lines
    for said in (unknown, limits, whom, both, purpose, names):
        assert any("not read here" in caution for caution in said.cautions)


def test_every_kind_of_name_is_shown() -> None:
    names = [
        x509.DNSName("*.harbour.example"),
        x509.RFC822Name("registrar@harbour.example"),
        x509.UniformResourceIdentifier("https://harbour.example/"),
        x509.IPAddress(ipaddress.ip_address("192.0.2.1")),
        x509.IPAddress(ipaddress.ip_network("192.0.2.0/24")),
    ]
    said = with_extension(x509.SubjectAlternativeName(names))
    assert (
        "names: host *.harbour.example (every name of one part before it), mail registrar@harbour.example,"
        " address https://harbour.example/, IP 192.0.2.1, ?IPAddress"
    ) in said.lines


def test_every_use_of_a_key_is_named() -> None:
    every = said_of(plain_builder().add_extension(x509.KeyUsage(*[True] * 9), critical=True))
    assert (
        "key usage: digital signature, content commitment, key encipherment, data encipherment, key agreement,"
        " key cert sign, crl sign, encipher only, decipher only"
    ) in every.lines
    none = said_of(plain_builder().add_extension(x509.KeyUsage(*[False] * 9), critical=True))
    assert "key usage: none" in none.lines


def test_what_is_hidden_in_names_is_written_out() -> None:
    said = said_of(plain_builder("CN=gate\u202eelpmaxe\\0A.harbour"))
    assert "subject: CN=gate<U+202E>elpmaxe<U+000A>.harbour" in said.lines
    said = with_extension(x509.SubjectAlternativeName([x509.DNSName("gate\nsubject: CN=other\0")]))
    assert "names: host gate<U+000A>subject: CN=other<U+0000>" in said.lines


def test_a_list_is_told_whole() -> None:
    said = described_list(LIST_BODY)
    assert said.kind == "the body of a revocation list"
    assert said.lines == (
        f"issuer: {ROOT_NAME}",
        "issued: 2026-12-03T07:00:00Z",
        "next list: 2027-01-02T07:00:00Z",
        "number: 4",
        f"name of its issuer's key: {hashlib.sha1(KEY).hexdigest()}",  # noqa: S324 - as above
        "revoked: 1",
        "ab since 2026-12-02T07:00:00Z, superseded",
    )
    assert len(said.cautions) == 1
    assert "in force again" in said.cautions[0]


def test_a_long_list_says_how_much_is_not_shown() -> None:
    many = [Revoked(number, START) for number in range(1, 73)]
    body = revocation_list(KEY, many, issuer=a_root(), this_update=after(2), next_update=after(32))
    lines = described_list(body).lines
    assert "revoked: 72" in lines
    assert lines[-1] == "and 22 more"
    assert sum(" since " in line for line in lines) == 50


def list_said(*entry_extensions: x509.ExtensionType, more: tuple[x509.ExtensionType, ...] = ()) -> Description:
    entry = x509.RevokedCertificateBuilder(5, START)
    for extension in entry_extensions:
        entry = entry.add_extension(extension, critical=False)
    builder = x509.CertificateRevocationListBuilder(
        x509.Name.from_rfc4514_string(ROOT_NAME), START, after(1), [], [entry.build()]
    )
    for extension in more:
        builder = builder.add_extension(extension, critical=True)
    return described_list(builder.sign(QUORUM, None).tbs_certlist_bytes)


def test_what_a_list_says_otherwise_is_shown_as_such() -> None:
    delta = list_said(more=(x509.DeltaCRLIndicator(1),))
    assert any(line.startswith("extension 2.5.29.27 (critical), not read here") for line in delta.lines)
    dated = list_said(x509.InvalidityDate(START))
    assert "5 since 2026-12-01T07:00:00Z, extensions not read here: 2.5.29.24" in dated.lines
    for said, cried in ((delta, True), (dated, True), (list_said(), False)):
        assert any("not read here" in caution for caution in said.cautions) == cried


# --- Hostile bytes: a refusal in words, or words that steer nothing.

RICH_BODY = body_of(
    plain_builder()
    .add_extension(x509.KeyUsage(*[True] * 9), critical=True)
    .add_extension(x509.ExtendedKeyUsage([x509.ObjectIdentifier("1.2.3.5")]), critical=False)
    .add_extension(x509.SubjectAlternativeName([x509.DNSName("gate.harbour.example")]), critical=False)
    .add_extension(x509.AuthorityKeyIdentifier.from_issuer_public_key(QUORUM.public_key()), critical=False)
    .add_extension(x509.NameConstraints([x509.DNSName("harbour.example")], None), critical=True)
)


@pytest.mark.parametrize("mask", [0x01, 0x04, 0x20, 0x80, 0xFF])
def test_each_changed_byte_is_told_or_refused_in_words(mask: int) -> None:
    refused = 0
    for body, describe in (
        (ROOT_BODY, lambda changed: described_certificate(changed, KEY)),
        (RICH_BODY, lambda changed: described_certificate(changed, KEY)),
        (LIST_BODY, described_list),
    ):
        unchanged = describe(body)
        for place in range(len(body)):
            changed = body[:place] + bytes([body[place] ^ mask]) + body[place + 1 :]
            try:
                said = describe(changed)
            except DocumentError:
                refused += 1
                continue
            assert said.lines != unchanged.lines, place  # Nothing in the bytes goes without a word.
            assert all(line.isprintable() for line in said.lines)
    assert refused > 100


@given(st.binary(max_size=300))
def test_hostile_bytes_are_refused_in_words(data: bytes) -> None:
    for hostile in (data, b"\x30" + data):
        with pytest.raises(DocumentError):
            described_certificate(hostile, KEY)
        with pytest.raises(DocumentError):
            described_list(hostile)
