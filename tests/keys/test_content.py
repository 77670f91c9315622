"""What a custodian is told of any bytes: kind, digest and text, whatever the bytes try.

Checked against: ``sha256sum``'s algorithm in the standard library; bodies of certificates, lists and SSH signatures as
the real tools take them (beside, in the tests of each); RFC 8446, sec. 4.4.3 and RFC 4252, sec. 7 (what is signed).
"""

from __future__ import annotations

import base64
import hashlib
import tracemalloc
import zipfile
from contextlib import nullcontext
from io import BytesIO
from pathlib import Path

import pytest
from cryptography import x509
from cryptography.hazmat.primitives.asymmetric.ec import SECP256R1, generate_private_key
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.serialization import (
    Encoding,
    NoEncryption,
    PrivateFormat,
    PublicFormat,
    SSHCertificateBuilder,
    SSHCertificateType,
)
from hypothesis import given
from hypothesis import strategies as st
from keys.played import KEY, OTHER, QUORUM, ROOT_NAME, START, a_root, after, body_of, plain_builder, tool

from shares.errors import ParameterError
from shares.keys.certificate_parts import KEY_USES
from shares.keys.certificates import root
from shares.keys.content import described, refuse_as_plain
from shares.keys.description import in_groups, shown
from shares.keys.revocation import revocation_list
from shares.keys.ssh_signature import to_be_signed


def lines(message: bytes) -> tuple[str, ...]:
    """Return what is said behind size and digest."""
    return described(message, KEY).lines[2:]


def zipped() -> bytes:
    file = BytesIO()
    with zipfile.ZipFile(file, "w") as archive:
        archive.writestr("a", "b")
    return file.getvalue()


@given(st.binary(max_size=500) | st.text(max_size=200).map(str.encode))
def test_size_and_digest_come_first_and_no_line_steers(message: bytes) -> None:
    said = described(message, KEY)
    assert said.lines[0] == f"size: {len(message)} byte{'s' if len(message) != 1 else ''}"
    assert said.lines[1].replace(" ", "") == f"SHA-256:{hashlib.sha256(message).hexdigest()}"
    assert all(line.isprintable() for line in (said.kind, *said.lines, *said.cautions))


@pytest.mark.parametrize(
    ("message", "kind"),
    [
        (b"%PDF-1.7\n%\xe2\xe3", "a PDF document"),
        (b"%PDF-1.7\nall of it text", "a PDF document"),
        (zipped(), "a zip archive"),
        (b"\x7fELF\x02\x01\x01\x00", "a program or library (ELF)"),
        (b"\x1f\x8b\x08\x00", "a gzip file"),
        (b"\xfd7zXZ\x00\x00", "an xz file"),
        (b"\x28\xb5\x2f\xfd\x00", "a zstd file"),
        (b"BZh91AY", "a bzip2 file"),
        (b"\x89PNG\r\n\x1a\n\x00", "a PNG picture"),
        (b"\xff\xd8\xff\xe0", "a JPEG picture"),
        (b"\xff\xfe\x00", "bytes that are no text"),
        (b"a\0b", "bytes that are no text"),
        (b"\xed\xa0\x80", "bytes that are no text"),
    ],
)
def test_what_is_no_text_is_named_and_not_shown(message: bytes, kind: str) -> None:
    said = described(message, KEY)
    assert said.kind == kind
    assert said.lines[2:] == ()
    assert "not shown" in said.cautions[0]


def test_nothing_at_all_is_said_to_be_so() -> None:
    said = described(b"", KEY)
    assert said.kind == "nothing at all"
    assert said.cautions


def test_short_text_is_shown_whole_without_a_caution() -> None:
    said = described("Lösung 7\r\n\tof the tide tables\n".encode(), KEY)
    assert (said.kind, said.lines[2:], said.cautions) == ("text", ("Lösung 7", "    of the tide tables"), ())
    assert lines(b"\n") == ("",)
    assert lines(b"\n\n") == ("", "")


@pytest.mark.parametrize("count", [1, 11, 12, 13, 14, 100])
def test_text_says_how_much_of_it_is_not_shown(count: int) -> None:
    for end in ("", "\n"):
        said = described(("\n".join(f"line {number}" for number in range(count)) + end).encode(), KEY)
        assert said.lines[2:14] == tuple(f"line {number}" for number in range(min(count, 12)))
        more = () if count <= 12 else (f"... and {count - 12} more line{'s' if count > 13 else ''}",)
        assert said.lines[14:] == more
        assert ("Only the beginning is shown: read the file itself before you agree." in said.cautions) == (count > 12)


@pytest.mark.parametrize("count", [99, 100, 101, 102, 5000])
def test_long_lines_say_how_much_is_not_shown(count: int) -> None:
    said = described(b"a" * count, KEY)
    more = "" if count <= 100 else f" ... and {count - 100} more character{'s' if count > 101 else ''}"
    assert said.lines[2:] == ("a" * min(count, 100) + more,)
    assert bool(said.cautions) == (count > 100)


# The last two Python calls printable, but they show as nothing (FORMAT.md, sec. 1).
STEERING = tuple(
    map(chr, (0x1B, 0, 0x202E, 0x200B, 0x2066, 0x7F, 0x85, 0xFEFF, 0x0D, 0x2028, 0xA0, 0x11500, 0x2800, 0x3164))
)


@pytest.mark.parametrize("c", STEERING)
def test_what_steers_is_written_out(c: str) -> None:
    text = f"pay{c}the registrar"
    assert shown(text) == f"pay<U+{ord(c):04X}>the registrar"
    if c == "\x00":
        return  # It makes bytes that are no text.
    said = described(text.encode(), KEY)
    assert said.lines[2:] == (f"pay<U+{ord(c):04X}>the registrar",)
    assert any("invisible" in caution for caution in said.cautions) == (c != "\r")


def test_pem_blocks_are_named_and_a_private_key_is_cried_out() -> None:
    top = a_root()
    (line, *_) = lines(top)
    assert line == "PEM blocks: CERTIFICATE"
    assert lines(b"bundle\n" + top * 3)[0] == "PEM blocks: CERTIFICATE (3)"
    private = OTHER.private_bytes(Encoding.PEM, PrivateFormat.PKCS8, NoEncryption())
    said = described(top + private, KEY)
    assert said.lines[2] == "PEM blocks: CERTIFICATE, PRIVATE KEY"
    assert any("private key" in caution for caution in said.cautions)


# --- What other protocols sign is found, whatever the task calls it.


def test_bodies_of_certificates_lists_and_ssh_signatures_are_read() -> None:
    top = a_root()
    digest = hashlib.sha512(b"release").digest()
    for message, kind, line in (
        (root(KEY, subject=ROOT_NAME, not_before=START, not_after=after(1)), "root certificate", "issuer: itself"),
        (
            revocation_list(KEY, [], issuer=top, this_update=START, next_update=after(1)),
            "revocation list",
            "number: 1",
        ),
        (to_be_signed(digest, "release"), "detached SSH signature", "namespace: release"),
    ):
        said = described(message, KEY)
        assert said.kind.endswith(kind)
        assert line in said.lines
        assert said.cautions
    body = root(KEY, subject=ROOT_NAME, not_before=START, not_after=after(1))
    of_another_algorithm = body.replace(bytes.fromhex("06032b6570"), bytes.fromhex("06032b6571"), 1)
    assert "ASN.1" in described(of_another_algorithm, KEY).kind
    of_another_hash = to_be_signed(digest, "release").replace(b"sha512", b"sha256")
    assert described(of_another_hash, KEY).kind == "the body of an SSH signature in a form that is not read here"


def test_the_proof_of_tls_is_known() -> None:
    # RFC 8446, sec. 4.4.3: 64 spaces, a context string, a zero byte, the transcript's hash.
    message = b" " * 64 + b"TLS 1.3, server CertificateVerify\0" + hashlib.sha256(b"").digest()
    assert described(message, KEY).kind.startswith("a proof of TLS 1.3")


def test_a_login_by_ssh_is_known() -> None:
    # RFC 4252, sec. 7: session identifier, 50, user, service, "publickey", true, algorithm, key.
    def string(data: bytes) -> bytes:
        return len(data).to_bytes(4) + data

    key = string(b"ssh-ed25519") + string(KEY)
    for session in (hashlib.sha1(b""), hashlib.sha256(b""), hashlib.sha512(b"")):  # noqa: S324 - as exchanges have it
        message = string(session.digest()) + b"\x32" + string(b"registrar") + string(b"ssh-connection")
        message += string(b"publickey") + b"\x01" + string(b"ssh-ed25519") + string(key)
        assert described(message, KEY).kind == "a login by SSH"


def test_an_ssh_certificate_is_known() -> None:
    for signer in (OTHER, generate_private_key(SECP256R1())):
        made = (
            SSHCertificateBuilder()
            .public_key(signer.public_key())
            .serial(1)
            .type(SSHCertificateType.USER)
            .key_id(b"registrar")
            .valid_principals([b"registrar"])
            .valid_after(1)
            .valid_before(2)
            .sign(QUORUM)
        )
        message = base64.b64decode(made.public_bytes().split()[1])
        assert described(message, KEY).kind == "the body of an SSH certificate"


def test_any_other_structure_of_asn_1_is_cautioned_against() -> None:
    info = Ed25519PrivateKey.generate().public_key().public_bytes(Encoding.DER, PublicFormat.SubjectPublicKeyInfo)
    long = b"\x30\x82\x01\x00" + bytes(256)
    for message in (info, long, b"\x30\x00"):
        said = described(message, KEY)
        assert "ASN.1" in said.kind
        assert "Other programs" in said.cautions[0]
    for message in (long[:-1], long + b"\0", b"\x30", b"\x30\x82\x01"):
        assert "ASN.1" not in described(message, KEY).kind
    assert described(b"0.1 is the version\n", KEY).kind == "text"


def test_text_that_is_also_something_else_is_shown_with_its_caution() -> None:
    assert described(b"SSHSIG is a word\n", KEY).lines[2:] == ("SSHSIG is a word",)
    token = b"eyJhbGciOiJFZERTQSJ9.eyJzdWIiOiJyb290In0"  # RFC 7515, sec. 5.1; its header by RFC 8037, sec. 3.1.
    for message in (token, base64.urlsafe_b64encode(b'{ "alg":"EdDSA"}').rstrip(b"=") + b".e30"):
        said = described(message, KEY)
        assert said.lines[2:] == (message.decode(),)
        assert said.kind == "what is signed of a token in JSON (JWS)"
        assert "Other programs" in said.cautions[0]
        refuse_as_plain(message, KEY)
    assert described(b"eyesore. It is one.", KEY).cautions == ()


def test_text_is_no_structure_though_it_may_begin_like_one() -> None:
    """As a SEQUENCE of 33 octets begins; what a structure holds has tags, which are control characters."""
    text = b"0!" + b"a" * 0x21
    assert (described(text, KEY).kind, described(text, KEY).cautions) == ("text", ())
    refuse_as_plain(text, KEY)
    for other in (b"0!\x06\x1f" + b"a" * 31, b"0!\xff" + b"a" * 32):
        assert "ASN.1" in described(other, KEY).kind
        with pytest.raises(ParameterError, match=r"ASN\.1"):
            refuse_as_plain(other, KEY)


# Headers for the same octets within: DER's, and others that lenient readers take too (ITU-T X.690, sec. 8.1.2, 8.1.3).
# OpenSSL 3 verifies a certificate with any of them but the last.
SPELLINGS = {
    "definite": (lambda octets: b"\x30\x82" + len(octets).to_bytes(2) + octets),
    "long": (lambda octets: b"\x30\x84" + len(octets).to_bytes(4) + octets),
    "longer": (lambda octets: b"\x30\x88" + len(octets).to_bytes(8) + octets),
    "indefinite": (lambda octets: b"\x30\x80" + octets + b"\0\0"),
    "high tag": (lambda octets: b"\x3f\x10\x82" + len(octets).to_bytes(2) + octets),
    "padded tag": (lambda octets: b"\x3f\x80\x10\x80" + octets + b"\0\0"),
    "set": (lambda octets: b"\x31\x82" + len(octets).to_bytes(2) + octets),
}


def an_authority() -> bytes:
    """The body of a certificate of the tests' own making: an authority below the quorum's root."""
    usage = x509.KeyUsage(**{use: use in ("key_cert_sign", "crl_sign") for use in KEY_USES})
    builder = plain_builder(subject="CN=Dry Dock").add_extension(x509.BasicConstraints(ca=True, path_length=None), True)
    return body_of(builder.add_extension(usage, critical=True))


@pytest.mark.parametrize("name", SPELLINGS)
def test_no_spelling_of_a_certificates_header_passes_as_plain_bytes(name: str, tmp_path: Path) -> None:
    body = an_authority()
    octets = body[4 if body[1] == 0x82 else 3 :]
    spelled = SPELLINGS[name](octets)
    with pytest.raises(ParameterError, match="certificate"):
        refuse_as_plain(spelled, KEY)
    said = described(spelled, KEY)
    assert "certificate" in said.kind
    assert said.cautions
    # What makes it worth refusing: an ordinary verifier takes what the quorum would have signed.
    whole = spelled + bytes.fromhex("300506032b6570034100") + QUORUM.sign(spelled)
    (tmp_path / "c.der").write_bytes(b"\x30\x82" + len(whole).to_bytes(2) + whole)
    (tmp_path / "root.pem").write_bytes(a_root())
    moment = str(int(after(1).timestamp()))
    taken = tool(tmp_path, "openssl", "verify", "-attime", moment, "-CAfile", "root.pem", "c.der")
    if name in ("definite", "indefinite"):
        assert taken.returncode == 0, taken.stderr


def test_attributes_of_cms_are_refused_as_plain_bytes() -> None:
    # RFC 5652, sec. 5.4: the attributes are signed as a SET; content type data, and a digest.
    digest = hashlib.sha512(b"a program").digest()
    kind = bytes.fromhex("301806092a864886f70d010903310b06092a864886f70d010701")
    value = b"\x06\x09\x2a\x86\x48\x86\xf7\x0d\x01\x09\x04\x31\x42\x04\x40" + digest
    attributes = kind + b"\x30" + bytes([len(value)]) + value
    message = b"\x31" + bytes([len(attributes)]) + attributes
    with pytest.raises(ParameterError, match=r"ASN\.1"):
        refuse_as_plain(message, KEY)


def test_bodies_and_proofs_of_other_protocols_are_refused_as_plain_bytes() -> None:
    curve = b"\x03\x00\x1d\x20"  # RFC 8422, sec. 5.4: a named curve, x25519, and the length of its point.
    for message, words in (
        (to_be_signed(hashlib.sha512(b"release").digest(), "release"), "detached SSH signature"),
        (b"SSHSIG and more", "SSH signature"),
        (revocation_list(KEY, [], issuer=a_root(), this_update=START, next_update=after(1)), "revocation list"),
        (root(KEY, subject=ROOT_NAME, not_before=START, not_after=after(1)), "root certificate"),
        (b" " * 64 + b"TLS 1.3, client CertificateVerify\0" + bytes(32), "TLS 1.3"),
        (bytes(64) + curve + bytes(32), "TLS 1.2"),
        (b"\x01\x00\x01\xfc\x03\x03" + bytes(508), "a login by TLS"),  # RFC 5246, sec. 7.4.1.2 and 7.4.8.
        (b'shares/v1/sign/party-card{"contact":null}', "this program signs"),
        (b"shares/v1/task", "this program signs"),
    ):
        with pytest.raises(ParameterError, match=words) as refused:
            refuse_as_plain(message, KEY)
        assert "shares key" in (refused.value.hint or "")
        assert words in described(message, KEY).kind


@given(st.binary(max_size=200) | st.text(max_size=200).map(str.encode))
def test_what_is_refused_is_what_is_cautioned_against(message: bytes) -> None:
    said = described(message, KEY)
    cautioned = any("Other programs" in caution for caution in said.cautions) and "JWS" not in said.kind
    with pytest.raises(ParameterError) if cautioned else nullcontext():
        refuse_as_plain(message, KEY)


def test_a_digest_of_nobody_knows_what_is_cautioned_against() -> None:
    for size in (20, 32, 48, 64):
        assert "digest of something" in described(b"\xff" * size, KEY).cautions[-1]
    assert len(described(b"\xff" * 33, KEY).cautions) == 1


@pytest.mark.parametrize("unit", [b"a\n", b"\n", "é\n".encode(), b"\t", b"-----BEGIN A-----\n"])
def test_large_content_takes_little_more_than_itself(unit: bytes) -> None:
    """Four megabytes of short lines were a hundred of memory, once each line was an object."""
    message = unit * ((4 << 20) // len(unit))
    tracemalloc.start()
    try:
        described(message, KEY)
        assert tracemalloc.get_traced_memory()[1] < 6 * len(message)
    finally:
        tracemalloc.stop()


def test_many_kinds_of_pem_blocks_are_counted() -> None:
    message = b"".join(b"-----BEGIN BLOCK %d-----\n" % number for number in range(500))
    assert lines(message)[0].startswith("PEM blocks: BLOCK 0, BLOCK 1,")
    assert lines(message)[0].endswith("BLOCK 11, and 488 other kinds")


@given(st.binary(max_size=80))
def test_groups_are_the_bytes(data: bytes) -> None:
    groups = in_groups(data)
    assert bytes.fromhex(groups) == data
    assert all(len(group) <= 8 for group in groups.split(" "))
