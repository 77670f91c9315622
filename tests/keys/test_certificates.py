"""Certificates that a threshold key issues, judged by the tool that everybody verifies them with.

Checked against: ``openssl verify`` (at a time given, so that no test ages), ``openssl x509 -text``; RFC 5280, sec. 4
and 6; the library's own check of who issued what.
"""

from __future__ import annotations

import ipaddress
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import pytest
from cryptography import x509
from cryptography.hazmat.primitives import hashes
from cryptography.hazmat.primitives.asymmetric import ec, rsa
from cryptography.hazmat.primitives.serialization import Encoding
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
    in_other_time,
    issued,
    plain_builder,
    tool,
)

from shares.errors import DocumentError, ParameterError, VerificationError
from shares.keys.certificate_parts import MAX_SIZE, name_from_text, whole
from shares.keys.certificates import check, finished, from_request, left_out, root

WHEN = str(int(after(10).timestamp()))


def verify(folder: Path, *chain: bytes, purpose: str = "any", when: str = WHEN) -> tuple[int, str]:
    """Ask openssl whether the last certificate stands under the first; the code and what it said."""
    names = [f"{number}.pem" for number in range(len(chain))]
    for name, certificate in zip(names, chain, strict=True):
        (folder / name).write_bytes(certificate)
    between = [word for name in names[1:-1] for word in ("-untrusted", name)]
    options = ("-x509_strict", "-check_ss_sig", "-attime", when, "-purpose", purpose, "-CAfile", names[0], *between)
    said = tool(folder, "openssl", "verify", *options, names[-1])
    return said.returncode, (said.stdout + said.stderr).decode()


def a_body(issuer: bytes | None = None, **changed: object) -> bytes:
    """Return a server's body as the quorum is asked for; what a test changes is given by name."""
    asked = {
        "request": a_request(),
        "issuer": issuer or a_root(),
        "purpose": "server",
        "not_before": START,
        "not_after": after(300),
    }
    return from_request(KEY, **{**asked, **changed})  # type: ignore[arg-type]


# --- What is issued, and what openssl says of it.


def test_openssl_verifies_a_chain(tmp_path: Path) -> None:
    top = a_root()
    between = issued(a_request(QUORUM, "CN=Harbour Trust Issuing,O=Harbour Trust", ()), top, "authority", 1000)
    leaf = issued(a_request(), between, "server")
    assert verify(tmp_path, top, top)[0] == 0
    assert verify(tmp_path, top, between)[0] == 0
    assert verify(tmp_path, top, between, leaf, purpose="sslserver")[0] == 0
    assert verify(tmp_path, top, between, leaf, purpose="sslclient")[0] != 0
    assert verify(tmp_path, top, between, leaf, when=str(int(after(301).timestamp())))[0] != 0
    client = issued(a_request(), between, "client")
    assert verify(tmp_path, top, between, client, purpose="sslclient")[0] == 0
    assert verify(tmp_path, a_root(key=OTHER), between, leaf)[0] != 0


def test_an_authority_with_a_key_of_its_own_issues(tmp_path: Path) -> None:
    top = a_root(path_length=1)
    between = issued(a_request(PRIVATE_KEYS["p256"], "CN=Harbour Trust Issuing", ()), top, "authority")
    read = x509.load_pem_x509_certificate(between)
    leaf = (
        plain_builder(issuer="CN=Harbour Trust Issuing")
        .add_extension(x509.BasicConstraints(ca=False, path_length=None), critical=True)
        .add_extension(x509.SubjectAlternativeName([x509.DNSName("gate.harbour.example")]), critical=False)
        .add_extension(x509.SubjectKeyIdentifier.from_public_key(OTHER.public_key()), critical=False)
        .add_extension(
            x509.AuthorityKeyIdentifier.from_issuer_public_key(read.public_key()),  # type: ignore[arg-type]
            critical=False,
        )
        .sign(PRIVATE_KEYS["p256"], hashes.SHA256())
        .public_bytes(Encoding.PEM)
    )
    assert verify(tmp_path, top, between, leaf)[0] == 0


def test_openssl_reads_what_was_asked_for(tmp_path: Path) -> None:
    (tmp_path / "root.pem").write_bytes(a_root(path_length=2))
    text = tool(tmp_path, "openssl", "x509", "-in", "root.pem", "-noout", "-text").stdout.decode()
    for expected in (
        "Version: 3 (0x2)",
        "Signature Algorithm: ED25519",
        "Subject: O = Harbour Trust, CN = Harbour Trust Root",
        "Issuer: O = Harbour Trust, CN = Harbour Trust Root",
        "Not Before: Dec  1 07:00:00 2026 GMT",
        "X509v3 Basic Constraints: critical\n                CA:TRUE, pathlen:2",
        "X509v3 Key Usage: critical\n                Certificate Sign, CRL Sign",
        "X509v3 Subject Key Identifier",
    ):
        assert expected in text
    names = (x509.DNSName("*.harbour.example"), x509.IPAddress(ipaddress.ip_address("2001:db8::1")))
    (tmp_path / "leaf.pem").write_bytes(issued(a_request(OTHER, "CN=gate", names), a_root(), "server"))
    text = tool(tmp_path, "openssl", "x509", "-in", "leaf.pem", "-noout", "-text").stdout.decode()
    for expected in (
        "X509v3 Basic Constraints: critical\n                CA:FALSE",
        "X509v3 Key Usage: critical\n                Digital Signature\n",
        "X509v3 Extended Key Usage: \n                TLS Web Server Authentication\n",
        "DNS:*.harbour.example, IP Address:2001:DB8:0:0:0:0:0:1",
        "X509v3 Authority Key Identifier",
    ):
        assert expected in text


@pytest.mark.parametrize("kind", PRIVATE_KEYS)
def test_keys_of_every_usual_kind_are_certified(kind: str, tmp_path: Path) -> None:
    top = a_root()
    leaf = issued(a_request(PRIVATE_KEYS[kind]), top, "server")
    assert verify(tmp_path, top, leaf, purpose="sslserver")[0] == 0
    read = x509.load_pem_x509_certificate(leaf)
    read.verify_directly_issued_by(x509.load_pem_x509_certificate(top))
    assert read.public_key() == PRIVATE_KEYS[kind].public_key()


def test_a_name_in_other_letters_is_kept(tmp_path: Path) -> None:
    body = root(KEY, subject='CN=Häfen \\"Süd\\"\\, Trust,C=DE', not_before=START, not_after=after(9))
    top = finished(body, QUORUM.sign(body), KEY)
    assert verify(tmp_path, top, top, when=str(int(after(1).timestamp())))[0] == 0
    (tmp_path / "root.pem").write_bytes(top)
    said = tool(tmp_path, "openssl", "x509", "-in", "root.pem", "-noout", "-subject", "-nameopt", "utf8,sep_comma_plus")
    assert said.stdout.decode() == 'subject=C=DE,CN=Häfen "Süd", Trust\n'


def test_a_server_without_a_subject_is_known_by_its_names(tmp_path: Path) -> None:
    top = a_root()
    leaf = issued(a_request(OTHER, ""), top, "server")
    assert verify(tmp_path, top, leaf, purpose="sslserver")[0] == 0
    read = x509.load_pem_x509_certificate(leaf)
    assert read.extensions.get_extension_for_class(x509.SubjectAlternativeName).critical  # RFC 5280, sec. 4.2.1.6.


def test_serial_numbers_are_drawn_anew() -> None:
    serials = [x509.load_der_x509_certificate(whole(a_body())).serial_number for _ in range(20)]
    assert len(set(serials)) == 20
    assert all(0 < serial < 1 << 159 for serial in serials)
    assert max(serials) > 1 << 150


# --- Requests.


def test_a_request_that_its_key_did_not_sign_is_refused() -> None:
    der = bytearray(x509.load_pem_x509_csr(a_request()).public_bytes(Encoding.DER))
    der[-1] ^= 1
    for ask in (lambda: a_body(request=bytes(der)), lambda: left_out(bytes(der), "server")):
        with pytest.raises(VerificationError, match="not signed by the key that it names"):
            ask()


WEAK = (rsa.generate_private_key(65537, 1024), ec.generate_private_key(ec.SECP224R1()))  # noqa: S505


@pytest.mark.parametrize("key", WEAK)
def test_weak_keys_are_refused(key: object) -> None:
    with pytest.raises(ParameterError, match="neither RSA"):
        a_body(request=a_request(key))


def test_what_else_a_request_asks_for_is_left_out_and_told() -> None:
    asked = (x509.BasicConstraints(ca=True, path_length=None), True), (x509.OCSPNoCheck(), False)
    request = a_request(OTHER, "CN=gate", (x509.DNSName("gate.harbour.example"),), *asked)
    read = x509.load_der_x509_certificate(whole(a_body(request=request)))
    assert not read.extensions.get_extension_for_class(x509.BasicConstraints).value.ca
    assert {found.oid.dotted_string for found in read.extensions} == {
        "2.5.29.14", "2.5.29.15", "2.5.29.17", "2.5.29.19", "2.5.29.35", "2.5.29.37",
    }  # fmt: skip
    constraints, check = "basic constraints (2.5.29.19)", "ocsp no check (1.3.6.1.5.5.7.48.1.5)"
    assert left_out(request, "server") == (constraints, check)
    assert left_out(request, "authority") == ("subject alternative name (2.5.29.17)", constraints, check)
    assert left_out(a_request(), "client") == ()
    with_attribute = (
        x509.CertificateSigningRequestBuilder()
        .subject_name(x509.Name.from_rfc4514_string("CN=gate"))
        .add_attribute(x509.oid.AttributeOID.CHALLENGE_PASSWORD, b"tide")
        .sign(OTHER, None)
        .public_bytes(Encoding.DER)
    )
    assert left_out(with_attribute, "client") == ("1.2.840.113549.1.9.7",)


def test_a_server_without_names_is_refused_and_a_client_is_not() -> None:
    with pytest.raises(ParameterError, match="alternative name"):
        a_body(request=a_request(names=()))
    assert a_body(request=a_request(names=()), purpose="client")
    for purpose in ("client", "authority"):
        with pytest.raises(ParameterError, match="must not be empty"):
            a_body(request=a_request(subject="", names=()), purpose=purpose)


@pytest.mark.parametrize(
    "name",
    [
        x509.DNSName("gate .harbour.example"),
        x509.DNSName("gate\0.harbour.example"),
        x509.DNSName("gate\n"),
        x509.DNSName("*"),
        x509.DNSName("a.*.example"),
        x509.DNSName("-a.example"),
        x509.DNSName(".".join(["a" * 60] * 5)),
        x509.DNSName(""),
        x509.RFC822Name("a b@harbour.example"),
        x509.UniformResourceIdentifier("https://harbour.example/ a"),
        x509.UniformResourceIdentifier("harbour"),
        x509.IPAddress(ipaddress.ip_network("10.0.0.0/8")),
        x509.DirectoryName(x509.Name.from_rfc4514_string("CN=a")),
        x509.RegisteredID(x509.ObjectIdentifier("1.2.3")),
        x509.OtherName(x509.ObjectIdentifier("1.2.3"), b"\x05\0"),
    ],
)
def test_names_that_are_read_in_two_ways_are_refused(name: x509.GeneralName) -> None:
    good = x509.DNSName("gate.harbour.example")
    with pytest.raises((ParameterError, DocumentError)):
        a_body(request=a_request(OTHER, "CN=gate", (good, name)))


def test_names_of_every_usual_kind_are_copied() -> None:
    names = (
        x509.DNSName("localhost"),
        x509.DNSName("xn--hfen-loa.example"),
        x509.RFC822Name("registrar@harbour.example"),
        x509.UniformResourceIdentifier("https://harbour.example/a?b=c"),
        x509.IPAddress(ipaddress.ip_address("192.0.2.1")),
    )
    read = x509.load_der_x509_certificate(whole(a_body(request=a_request(OTHER, "CN=gate", names))))
    assert tuple(read.extensions.get_extension_for_class(x509.SubjectAlternativeName).value) == names
    many = tuple(x509.DNSName(f"g{number}.example") for number in range(101))
    assert a_body(request=a_request(OTHER, "CN=gate", many[:100]))
    with pytest.raises(ParameterError, match="1 to 100"):
        a_body(request=a_request(OTHER, "CN=gate", many))


# --- Subjects.


@pytest.mark.parametrize(
    "text",
    [
        "", "Harbour Trust", "CN=", "CN=a\\0Ab", "CN=a\nb", "CN=a\\E2\\80\\AEb", "C=abc", "CN=#0403414243", "CN=a\\",
        'CN="a"', "CN=" + "a" * 65, "CN=a,,O=b", "=a", "1.2.3=\u200b",
    ],
)  # fmt: skip
def test_subjects_that_nobody_could_read_are_refused(text: str) -> None:
    with pytest.raises(ParameterError):
        root(KEY, subject=text, not_before=START, not_after=after(1))


def test_an_unreadable_subject_of_a_request_is_refused() -> None:
    for subject in ("CN=a\\0Ab", "CN=a\\E2\\80\\AEb"):
        with pytest.raises(ParameterError):
            a_body(request=a_request(OTHER, subject))


@given(st.text(max_size=70))
def test_any_subject_is_taken_whole_or_refused(text: str) -> None:
    escaped = "".join(f"\\{c}" if c in '\\",;+<>#= ' else c for c in text)
    try:
        name = name_from_text(f"CN={escaped},O=Harbour")
    except ParameterError:
        return
    assert [part.value for part in name] == ["Harbour", text]


# --- Issuers.


def an_issuer(
    *extensions: tuple[x509.ExtensionType, bool], key=QUORUM, signer=QUORUM, issuer: str = ROOT_NAME
) -> bytes:
    builder = plain_builder(ROOT_NAME, issuer, key)
    for extension, critical in extensions:
        builder = builder.add_extension(extension, critical=critical)
    return builder.sign(signer, None).public_bytes(Encoding.PEM)


CA = (x509.BasicConstraints(ca=True, path_length=None), True)


def test_the_issuer_must_be_an_authority_of_this_key() -> None:
    assert a_body(an_issuer(CA), not_after=after(20))
    with pytest.raises(VerificationError, match="not for this threshold key"):
        a_body(an_issuer(CA, key=OTHER, signer=OTHER))
    with pytest.raises(VerificationError, match="not for this threshold key"):
        a_body(issued(a_request(PRIVATE_KEYS["rsa"], names=()), a_root(), "authority"))
    with pytest.raises(VerificationError, match="signature"):
        a_body(an_issuer(CA, signer=OTHER))
    for no_authority in (an_issuer(), an_issuer((x509.BasicConstraints(ca=False, path_length=None), True))):
        with pytest.raises(ParameterError, match="not that of an authority"):
            a_body(no_authority)
    signs_only = x509.KeyUsage(True, False, False, False, False, False, True, False, False)
    with pytest.raises(ParameterError, match="does not allow it to sign others"):
        a_body(an_issuer(CA, (signs_only, True)))
    limits = x509.NameConstraints([x509.DNSName("harbour.example")], None)
    for critical in (True, False):
        with pytest.raises(ParameterError, match="not checked here"):
            a_body(an_issuer(CA, (limits, critical)))
    with pytest.raises(ParameterError, match=r"not checked here: 2\.5\.29\.36"):
        a_body(an_issuer(CA, (x509.PolicyConstraints(0, None), True)))
    assert a_body(an_issuer(CA, (x509.PolicyConstraints(0, None), False)), not_after=after(20))


def test_the_issuer_must_outlive_what_it_issues() -> None:
    short = a_root(days=100)
    assert a_body(short, not_after=after(100))
    for start, end in ((START, after(100) + timedelta(seconds=1)), (START - timedelta(seconds=1), after(10))):
        with pytest.raises(ParameterError, match="outside the time of its issuer"):
            a_body(short, not_before=start, not_after=end)
    with pytest.raises(ParameterError, match="outside the time of its issuer"):  # The issuer has ended.
        a_body(short, not_before=after(101), not_after=after(102))


@pytest.mark.parametrize(("above", "below"), [(a, b) for a in (None, 0, 1, 3) for b in (0, 1, 2, 3, 255)])
def test_path_lengths_go_down(above: int | None, below: int, tmp_path: Path) -> None:
    issuer = a_root(path_length=above)
    request = a_request(QUORUM, "CN=Harbour Trust Issuing", ())
    allowed = above is None or below < above
    if allowed:
        read = x509.load_pem_x509_certificate(issued(request, issuer, "authority", path_length=below))
        assert read.extensions.get_extension_for_class(x509.BasicConstraints).value.path_length == below
    else:
        with pytest.raises(ParameterError, match="path length"):
            issued(request, issuer, "authority", path_length=below)
    assert issued(a_request(), issuer, "server")


def test_openssl_too_refuses_an_authority_below_path_length_0(tmp_path: Path) -> None:
    # The rule that stops it here is seen to be the one that the verifier has: it is signed past the check.
    top = a_root(path_length=0)
    between_body = from_request(
        KEY,
        a_request(QUORUM, "CN=Issuing", ()),
        issuer=a_root(),
        purpose="authority",
        not_before=START,
        not_after=after(300),
    )
    with pytest.raises(ParameterError, match="path length is 0"):
        finished(between_body, QUORUM.sign(between_body), KEY, top)
    (tmp_path / "between.der").write_bytes(whole(between_body, QUORUM.sign(between_body)))
    between = tool(tmp_path, "openssl", "x509", "-inform", "DER", "-in", "between.der").stdout
    code, said = verify(tmp_path, top, between, issued(a_request(), between, "server"))
    assert code != 0
    assert "path length constraint exceeded" in said


@pytest.mark.parametrize("length", [-1, 256])
def test_path_lengths_are_in_range(length: int) -> None:
    with pytest.raises(ParameterError, match="0 to 255"):
        root(KEY, subject=ROOT_NAME, not_before=START, not_after=after(1), path_length=length)


@pytest.mark.parametrize(
    ("start", "end"),
    [
        (START, START),
        (after(2), after(1)),
        (START.replace(tzinfo=None), after(1)),
        (START, after(1).astimezone(timezone(timedelta(hours=1)))),
        (START.replace(microsecond=1), after(1)),
        (datetime(1900, 1, 1, tzinfo=UTC), after(1)),
    ],
)
def test_times_are_utc_to_the_second_and_in_order(start: datetime, end: datetime) -> None:
    with pytest.raises(ParameterError):
        root(KEY, subject=ROOT_NAME, not_before=start, not_after=end)


def test_times_beyond_2049_are_kept(tmp_path: Path) -> None:
    body = root(KEY, subject=ROOT_NAME, not_before=START, not_after=datetime(2061, 5, 6, 7, 8, 9, tzinfo=UTC))
    (tmp_path / "root.pem").write_bytes(finished(body, QUORUM.sign(body), KEY))
    said = tool(tmp_path, "openssl", "x509", "-in", "root.pem", "-noout", "-enddate")
    assert said.stdout == b"notAfter=May  6 07:08:09 2061 GMT\n"


# --- What a signer checks.


def test_a_root_of_another_key_is_not_signed() -> None:
    body = root(OTHER.public_key().public_bytes_raw(), subject=ROOT_NAME, not_before=START, not_after=after(1))
    with pytest.raises(VerificationError, match="no root of this threshold key"):
        check(body, KEY)
    with pytest.raises(VerificationError, match="no root of this threshold key"):
        check(a_body(), KEY)
    with pytest.raises(VerificationError, match="no root of this threshold key"):
        check(body_of(plain_builder("CN=gate", key=QUORUM)), KEY)


def test_a_body_under_another_issuer_is_not_signed() -> None:
    top = a_root()
    check(a_body(top), KEY, top)
    with pytest.raises(VerificationError, match="does not name this issuer"):
        check(body_of(plain_builder(issuer="CN=Other")), KEY, top)
    wrong = x509.AuthorityKeyIdentifier.from_issuer_public_key(OTHER.public_key())
    with pytest.raises(VerificationError, match="does not name this issuer"):
        check(body_of(plain_builder().add_extension(wrong, critical=False)), KEY, top)
    any_below = x509.BasicConstraints(ca=True, path_length=None)
    with pytest.raises(ParameterError, match="path length"):
        check(body_of(plain_builder().add_extension(any_below, critical=True)), KEY, a_root(path_length=1))


def test_bodies_that_this_key_cannot_sign_are_refused() -> None:
    good = a_body()
    top = a_root()
    ed25519 = bytes.fromhex("300506032b6570")
    changes = [
        good.replace(ed25519, bytes.fromhex("300506032b6571"), 1),  # Ed448 inside
        good.replace(bytes.fromhex("a003020102"), bytes.fromhex("a003020101"), 1),  # version 2
        plain_of_serial(b"\x00"),
        plain_of_serial(b"\xff"),
        plain_of_serial(b"\x01" + bytes(20)),
        plain_of_serial(b"\x00\x01"),  # not minimal
        whole(good),
        good + b"\0",
    ]
    for body in changes:
        with pytest.raises(DocumentError):
            check(body, KEY, top)
    check(plain_of_serial(b"\x01"), KEY, top)
    check(plain_of_serial(b"\x00\x80"), KEY, top)
    check(plain_of_serial(b"\x7f" + bytes(19)), KEY, top)


def test_a_time_in_its_other_encoding_is_refused() -> None:
    body = body_of(plain_builder())
    check(body, KEY, a_root())
    for moment in (START, after(30)):
        with pytest.raises(DocumentError):
            check(in_other_time(body, moment), KEY, a_root())


def test_a_name_longer_than_names_may_be_is_refused() -> None:
    # RFC 5280, appendix A.1: ub-common-name is 64. The library reads more, and warns.
    def named(letters: int) -> bytes:
        body = body_of(plain_builder("CN=" + "a" * 64))
        longer = body.replace(b"\x0c\x40" + b"a" * 64, bytes((0x0C, letters)) + b"a" * letters)
        place = body.index(b"\x06\x03\x55\x04\x03\x0c\x40")
        changed, more = bytearray(longer), letters - 64
        for length in (2, place - 1, place - 3, place - 5):
            changed[length] += more
        return bytes(changed)

    check(named(64), KEY, a_root())
    with pytest.raises(DocumentError):
        check(named(65), KEY, a_root())


def plain_of_serial(octets: bytes) -> bytes:
    """Write a body whose serial number has these octets, which a builder would not all allow."""
    body = body_of(plain_builder(serial=0x55))
    old, new = b"\x02\x01\x55", bytes((2, len(octets))) + octets
    content = body[3:].replace(old, new, 1)
    assert body[:3] == bytes((0x30, 0x81, len(body) - 3))
    return bytes((0x30, 0x81, len(content))) + content


def test_a_signature_of_anything_else_is_not_put_together() -> None:
    top = a_root()
    body = a_body(top)
    signature = QUORUM.sign(body)
    assert finished(body, signature, KEY, top)
    for place in range(64):
        changed = bytearray(signature)
        changed[place] ^= 0x80
        with pytest.raises(VerificationError):
            finished(body, bytes(changed), KEY, top)
    for other in (OTHER.sign(body), QUORUM.sign(a_body(top)), signature[:-1], signature + b"\0", b""):
        with pytest.raises(VerificationError):
            finished(body, other, KEY, top)


# --- Hostile bytes.

FIXED = a_body()


def test_each_prefix_of_each_input_is_refused() -> None:
    top = a_root()
    body, request = a_body(top), x509.load_pem_x509_csr(a_request()).public_bytes(Encoding.DER)
    issuer = x509.load_pem_x509_certificate(top).public_bytes(Encoding.DER)
    for length in range(len(body)):
        with pytest.raises(DocumentError):
            check(body[:length], KEY, top)
    for length in range(len(request)):
        with pytest.raises(DocumentError):
            left_out(request[:length], "server")
    for length in range(len(issuer)):
        with pytest.raises(DocumentError):
            check(body, KEY, issuer[:length])


def test_each_changed_byte_of_a_body_is_refused_in_words_or_changes_what_is_read() -> None:
    top = a_root()
    body = a_body(top)
    refused = 0
    for place in range(len(body)):
        for mask in (0x01, 0x80):
            changed = body[:place] + bytes([body[place] ^ mask]) + body[place + 1 :]
            try:
                check(changed, KEY, top)
            except (DocumentError, VerificationError, ParameterError):
                refused += 1
    assert refused > len(body) // 2


@given(st.binary(max_size=200))
def test_hostile_bytes_are_refused_in_words(data: bytes) -> None:
    pem = b"-----BEGIN CERTIFICATE-----\n" + data + b"\n-----END CERTIFICATE-----\n"
    for hostile in (data, b"\x30" + data, pem):
        with pytest.raises(DocumentError):
            check(hostile, KEY)
        with pytest.raises(DocumentError):
            left_out(hostile, "client")
        with pytest.raises(DocumentError):
            check(FIXED, KEY, hostile)


def test_large_and_doubled_inputs_are_refused() -> None:
    top = a_root()
    with pytest.raises(DocumentError, match="larger"):
        check(b"\x30" + bytes(MAX_SIZE), KEY, top)
    with pytest.raises(DocumentError, match="larger"):
        check(a_body(top), KEY, top + b"\n" * MAX_SIZE)
    with pytest.raises(DocumentError, match="several"):
        check(a_body(top), KEY, top + a_root(key=OTHER))
    with pytest.raises(DocumentError):
        left_out(top, "server")


def test_what_looks_like_pem_within_a_name_is_a_name() -> None:
    name = x509.DNSName("gate.harbour.example")
    subject = "CN=-----BEGIN CERTIFICATE-----,O=-----BEGIN CERTIFICATE-----"
    assert a_body(request=x509.load_pem_x509_csr(a_request(OTHER, subject, (name,))).public_bytes(Encoding.DER))
