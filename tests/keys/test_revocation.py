"""Revocation lists that a threshold key issues, judged by the tool that everybody reads them with.

Checked against: ``openssl crl`` and ``openssl verify -crl_check`` (at a time given); RFC 5280, sec. 5.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from cryptography import x509
from cryptography.hazmat.primitives.serialization import Encoding
from hypothesis import given
from hypothesis import strategies as st
from keys.played import (
    KEY,
    OTHER,
    QUORUM,
    ROOT_NAME,
    START,
    a_request,
    a_root,
    after,
    in_other_time,
    issued,
    plain_builder,
    tool,
)

from shares.errors import DocumentError, ParameterError, VerificationError
from shares.keys.certificate_parts import whole
from shares.keys.revocation import REASONS, Revoked, check, finished, revocation_list, serial_of

WHEN = str(int(after(10).timestamp()))
TOP = a_root()


def a_body(*revoked: Revoked, issuer: bytes = TOP, this: float = 5, **more: object) -> bytes:
    return revocation_list(
        KEY, revoked, issuer=issuer, this_update=after(this), next_update=after(this + 30), **more  # type: ignore[arg-type]
    )  # fmt: skip


def a_list(*revoked: Revoked, issuer: bytes = TOP, this: float = 5, **more: object) -> bytes:
    body = a_body(*revoked, issuer=issuer, this=this, **more)
    return finished(body, QUORUM.sign(body), KEY, issuer)


def read(body_or_list: bytes) -> x509.CertificateRevocationList:
    if body_or_list.startswith(b"-----"):
        return x509.load_pem_x509_crl(body_or_list)
    return x509.load_der_x509_crl(whole(body_or_list))


def serials(body_or_list: bytes) -> set[int]:
    return {entry.serial_number for entry in read(body_or_list)}


def revoked_by_openssl(folder: Path, leaf: bytes, listed: bytes) -> bool:
    (folder / "root.pem").write_bytes(TOP)
    (folder / "leaf.pem").write_bytes(leaf)
    (folder / "list.pem").write_bytes(listed)
    options = ("-x509_strict", "-crl_check", "-attime", WHEN, "-CAfile", "root.pem", "-CRLfile", "list.pem")
    said = tool(folder, "openssl", "verify", *options, "leaf.pem")
    output = said.stdout + said.stderr
    assert said.returncode == 0 or b"certificate revoked" in output, output
    return said.returncode != 0


def test_openssl_takes_the_list_and_stops_at_what_is_on_it(tmp_path: Path) -> None:
    leaf, other = issued(a_request(), TOP, "server"), issued(a_request(), TOP, "server")
    serial = serial_of(leaf, issuer=TOP, public_key=KEY)
    listed = a_list(Revoked(serial, after(4), "keyCompromise"), number=7)
    assert revoked_by_openssl(tmp_path, leaf, listed)
    assert not revoked_by_openssl(tmp_path, other, listed)
    assert not revoked_by_openssl(tmp_path, leaf, a_list())
    said = tool(tmp_path, "openssl", "crl", "-in", "list.pem", "-noout", "-CAfile", "root.pem", "-verify")
    assert b"verify OK" in said.stderr
    (tmp_path / "list.pem").write_bytes(listed)
    text = tool(tmp_path, "openssl", "crl", "-in", "list.pem", "-noout", "-text").stdout.decode()
    for expected in (
        "Version 2 (0x1)",
        "Signature Algorithm: ED25519",
        "Issuer: O = Harbour Trust, CN = Harbour Trust Root",
        "Last Update: Dec  6 07:00:00 2026 GMT",
        "Next Update: Jan  5 07:00:00 2027 GMT",
        "X509v3 CRL Number: \n                7",
        f"Serial Number: {serial:040X}",
        "Revocation Date: Dec  5 07:00:00 2026 GMT",
        "X509v3 CRL Reason Code: \n                Key Compromise",
    ):
        assert expected in text


def test_openssl_refuses_a_list_of_another_key(tmp_path: Path) -> None:
    body = a_body()
    (tmp_path / "root.pem").write_bytes(TOP)
    (tmp_path / "list.der").write_bytes(whole(body, OTHER.sign(body)))
    command = ("crl", "-inform", "DER", "-in", "list.der", "-noout", "-CAfile", "root.pem", "-verify")
    assert b"verify failure" in tool(tmp_path, "openssl", *command).stderr


@pytest.mark.parametrize("reason", [None, *REASONS])
def test_each_reason_of_rfc_5280_is_written(reason: str | None) -> None:
    (entry,) = read(a_body(Revoked(5, after(1), reason)))
    assert [found.value.reason.value for found in entry.extensions] == ([reason] if reason else [])
    # RFC 5280, sec. 5.3.1, without 0 unspecified, 6 certificateHold and 8 removeFromCRL.
    assert set(REASONS) == {
        "keyCompromise", "cACompromise", "affiliationChanged", "superseded", "cessationOfOperation",
        "privilegeWithdrawn", "aACompromise",
    }  # fmt: skip


@pytest.mark.parametrize(
    "bad",
    [
        Revoked(0, START),
        Revoked(-1, START),
        Revoked(1 << 159, START),
        Revoked(1, after(6)),
        Revoked(1, START.replace(tzinfo=None)),
        Revoked(1, START.replace(microsecond=1)),
        Revoked(1, START, "certificateHold"),
        Revoked(1, START, "removeFromCRL"),
        Revoked(1, START, "unspecified"),
        Revoked(1, START, ""),
    ],
)
def test_entries_that_cannot_be_are_refused(bad: Revoked) -> None:
    with pytest.raises(ParameterError):
        a_body(bad)
    assert serials(a_body(Revoked(1, after(5)), Revoked((1 << 159) - 1, START))) == {1, (1 << 159) - 1}


def test_a_list_goes_on_from_the_earlier_one() -> None:
    first = a_list(Revoked(1, after(1), "superseded"))
    second = a_list(Revoked(2, after(6)), earlier=first, this=6)
    third = a_list(earlier=second, this=7)
    assert [serials(listed) for listed in (first, second, third)] == [{1}, {1, 2}, {1, 2}]
    numbers = [
        read(listed).extensions.get_extension_for_class(x509.CRLNumber).value.crl_number
        for listed in (first, second, third)
    ]
    assert numbers == [1, 2, 3]
    kept = read(third).get_revoked_certificate_by_serial_number(1)
    assert kept is not None
    assert kept.revocation_date_utc == after(1)
    assert kept.extensions.get_extension_for_class(x509.CRLReason).value.reason is x509.ReasonFlags.superseded


def test_what_contradicts_the_earlier_list_is_refused() -> None:
    first = a_list(Revoked(1, after(1)), number=5)
    for number in (4, 5):
        with pytest.raises(VerificationError, match="numbered and dated after"):
            a_body(earlier=first, number=number, this=6)
    with pytest.raises(VerificationError, match="numbered and dated after"):
        a_body(earlier=first, this=4)
    with pytest.raises(ParameterError, match="twice"):
        a_body(Revoked(1, after(1)), earlier=first)
    with pytest.raises(ParameterError, match="twice"):
        a_body(Revoked(3, START), Revoked(3, after(1)))


def test_a_signer_sees_what_is_left_out() -> None:
    first = a_list(Revoked(0xAB, after(1)), Revoked(0xCD, after(1)))
    forgetful = a_body(Revoked(0xCD, after(1)), number=2, this=6)
    check(forgetful, KEY, TOP)
    with pytest.raises(VerificationError, match="leaves out 1 of what the earlier list revokes, like ab"):
        check(forgetful, KEY, TOP, earlier=first)


def test_an_earlier_list_of_another_hand_is_refused() -> None:
    body = a_body(Revoked(1, after(1)))
    forged = whole(body, OTHER.sign(body))
    with pytest.raises(VerificationError, match="signature"):
        a_body(earlier=forged, this=6)
    with pytest.raises(VerificationError, match="signature"):
        check(a_body(number=2, this=6), KEY, TOP, earlier=forged)


@pytest.mark.parametrize("number", [0, -1, 1 << 63])
def test_numbers_are_in_range(number: int) -> None:
    with pytest.raises(ParameterError, match="number"):
        a_body(number=number)
    assert a_body(number=(1 << 63) - 1)


def test_the_issuer_must_be_an_authority_of_this_key_that_may_issue_lists() -> None:
    authority = x509.BasicConstraints(ca=True, path_length=None)
    certificates_only = x509.KeyUsage(False, False, False, False, False, True, False, False, False)
    builder = plain_builder(ROOT_NAME, key=QUORUM).add_extension(authority, critical=True)
    issuer = builder.add_extension(certificates_only, critical=True).sign(QUORUM, None).public_bytes(Encoding.PEM)
    with pytest.raises(ParameterError, match="does not allow it to sign lists"):
        a_body(issuer=issuer)
    with pytest.raises(VerificationError, match="not for this threshold key"):
        a_body(issuer=a_root(key=OTHER))
    with pytest.raises(ParameterError, match="outside the time of its issuer"):
        a_body(issuer=a_root(days=3))
    other_name = plain_builder("CN=Other", "CN=Other", QUORUM).add_extension(authority, critical=True)
    with pytest.raises(VerificationError, match="does not name this issuer"):
        check(a_body(), KEY, other_name.sign(QUORUM, None).public_bytes(Encoding.PEM))


def test_the_next_list_is_announced() -> None:
    for days in (0, -1):
        with pytest.raises(ParameterError, match="end after"):
            revocation_list(KEY, [], issuer=TOP, this_update=after(5), next_update=after(5 + days))
    without = _changed_times(a_body(), b"")
    with pytest.raises(DocumentError):
        check(without, KEY, TOP)


def _changed_times(body: bytes, new: bytes) -> bytes:
    """Take the time of the next list out of a body, as no builder would."""
    old = b"\x17\x0d" + f"{after(35):%y%m%d%H%M%S}Z".encode()
    assert body.count(old) == 1
    assert body[1] == 0x81
    content = body[3:].replace(old, new)
    return bytes((0x30, 0x81, len(content))) + content


def test_only_what_this_issuer_signed_has_a_serial_number_here() -> None:
    leaf = issued(a_request(), TOP, "server")
    assert serial_of(leaf, issuer=TOP, public_key=KEY) == x509.load_pem_x509_certificate(leaf).serial_number
    forged = plain_builder().sign(OTHER, None).public_bytes(Encoding.PEM)
    with pytest.raises(VerificationError, match="signature"):
        serial_of(forged, issuer=TOP, public_key=KEY)
    foreign = plain_builder(issuer="CN=Other").sign(QUORUM, None).public_bytes(Encoding.PEM)
    with pytest.raises(VerificationError, match="does not name this issuer"):
        serial_of(foreign, issuer=TOP, public_key=KEY)


def test_a_signature_of_anything_else_is_not_put_together() -> None:
    body = a_body(Revoked(1, after(1)))
    signature = QUORUM.sign(body)
    assert finished(body, signature, KEY, TOP)
    for place in range(64):
        with pytest.raises(VerificationError):
            finished(body, signature[:place] + bytes([signature[place] ^ 1]) + signature[place + 1 :], KEY, TOP)
    for other in (OTHER.sign(body), QUORUM.sign(a_body()), signature[:-1], signature + b"\0"):
        with pytest.raises(VerificationError):
            finished(body, other, KEY, TOP)


def test_each_prefix_and_each_longer_body_is_refused() -> None:
    body = a_body(Revoked(1, after(1), "superseded"))
    for length in range(len(body)):
        with pytest.raises(DocumentError):
            check(body[:length], KEY, TOP)
    ed25519 = bytes.fromhex("300506032b6570")
    for other in (
        body + b"\0",
        whole(body),
        body.replace(ed25519, bytes.fromhex("300506032b6571"), 1),
        in_other_time(body, after(5)),
        body.replace(b"\x02\x01\x01" + ed25519, b"\x02\x01\x00" + ed25519, 1),
    ):
        with pytest.raises(DocumentError):
            check(other, KEY, TOP)


def test_each_changed_byte_is_read_anew_or_refused_in_words() -> None:
    body = a_body(Revoked(1, after(1), "superseded"))
    refused = 0
    for place in range(len(body)):
        for mask in (0x01, 0x80):
            try:
                check(body[:place] + bytes([body[place] ^ mask]) + body[place + 1 :], KEY, TOP)
            except (DocumentError, VerificationError, ParameterError):
                refused += 1
    assert refused > len(body) // 2


@given(st.binary(max_size=200))
def test_hostile_bytes_are_refused_in_words(data: bytes) -> None:
    pem = b"-----BEGIN X509 CRL-----\n" + data + b"\n-----END X509 CRL-----\n"
    for hostile in (data, b"\x30" + data, pem):
        with pytest.raises(DocumentError):
            check(hostile, KEY, TOP)
        with pytest.raises(DocumentError):
            check(BODY, KEY, TOP, earlier=hostile)


BODY = a_body()
