"""What becomes of a signature: who asks and every signer check and read the same, and the file holds.

Checked against: RFC 5280, sec. 5.2.3 (numbers of lists); ``cryptography`` as the reader of what comes out; SHA-256 of a
certificate as ``openssl x509 -fingerprint -sha256`` has it: of its DER.
"""

from __future__ import annotations

import hashlib

import pytest
from cryptography import x509
from cryptography.hazmat.primitives.serialization import Encoding
from keys.played import KEY, OTHER, QUORUM, ROOT_NAME, START, a_request, a_root, after, plain_builder

from shares.errors import ParameterError, SharesError, VerificationError
from shares.keys import certificates
from shares.keys.forms import Signable
from shares.keys.revocation import Revoked, revocation_list

TEXT = b"release 7 of the tide tables\n"
ROOT = a_root()


def a_list(*serials: int, number: int, issuer: bytes = ROOT) -> bytes:
    revoked = [Revoked(serial, START) for serial in serials]
    return revocation_list(KEY, revoked, issuer=issuer, this_update=START, next_update=after(30), number=number)


def signed(wanted: Signable) -> bytes:
    return wanted.finished(KEY, QUORUM.sign(wanted.message(KEY)))[0]


FIRST = signed(Signable(a_list(77, number=4), "revocation-list", issuer=ROOT))


def a_body(days: float = 300, issuer: bytes = ROOT) -> bytes:
    return certificates.from_request(
        KEY, a_request(), issuer=issuer, purpose="server", not_before=START, not_after=after(days)
    )


def above() -> bytes:
    """The quorum's certificate under another authority."""
    builder = plain_builder(ROOT_NAME, "CN=Coast Root", QUORUM)
    builder = builder.add_extension(x509.BasicConstraints(ca=True, path_length=None), critical=True)
    return builder.sign(OTHER, None).public_bytes(Encoding.PEM)


GOOD = (
    (Signable(TEXT, "plain"), ".sig"),
    (Signable(TEXT, "openssh", "release"), ".sig"),
    (Signable(a_body(), "certificate", issuer=ROOT), ".pem"),
    (Signable(a_list(77, number=1), "revocation-list", issuer=ROOT), ".pem"),
    (Signable(a_list(77, 78, number=5), "revocation-list", issuer=ROOT, earlier=FIRST), ".pem"),
)


@pytest.mark.parametrize(("wanted", "ending"), GOOD)
def test_a_file_comes_of_the_right_signature_alone(wanted: Signable, ending: str) -> None:
    message = wanted.message(KEY)
    assert wanted.finished(KEY, QUORUM.sign(message))[1] == ending
    for false in (bytes(64), OTHER.sign(message), QUORUM.sign(message + b"\0")):
        with pytest.raises(VerificationError, match="signature"):
            wanted.finished(KEY, false)


@pytest.mark.parametrize(
    ("wanted", "words"),
    [
        (Signable(a_body(), "plain"), "the body of a certificate"),
        (Signable(a_body(), "certificate"), "no root of this threshold key"),
        (Signable(a_body(), "certificate", issuer=a_root(key=OTHER)), "not for this threshold key"),
        (Signable(a_body(), "certificate", issuer=a_root(days=200)), "outside the time of its issuer"),
        (Signable(a_list(77, number=5), "revocation-list"), "belongs to a certificate"),
        (Signable(a_list(78, number=5), "revocation-list", issuer=ROOT, earlier=FIRST), "leaves out 1"),
        (Signable(a_list(77, number=4), "revocation-list", issuer=ROOT, earlier=FIRST), "not numbered"),
        (Signable(a_list(77, number=5), "revocation-list", issuer=ROOT, earlier=ROOT), "not a revocation list"),
        (Signable(TEXT, "openssh", "a b"), "white space"),
    ],
)
def test_what_goes_further_is_refused_before_and_after(wanted: Signable, words: str) -> None:
    with pytest.raises(SharesError, match=words):
        wanted.message(KEY)
    with pytest.raises(SharesError, match=words):
        wanted.finished(KEY, bytes(64))


def test_it_is_told_what_was_checked_by_what() -> None:
    told = Signable(a_list(77, 78, number=5), "revocation-list", issuer=ROOT, earlier=FIRST).described(KEY)
    der = x509.load_pem_x509_certificate(ROOT).public_bytes(Encoding.DER)
    digest = hashlib.sha256(der).hexdigest()
    assert any("certificate of its issuer" in line and digest in line.replace(" ", "") for line in told.lines)
    assert any("number 4 of 2026-12-01" in line for line in told.lines)
    assert told.cautions[-1] == "See that no list after number 4 has been issued."
    first = Signable(a_list(77, number=1), "revocation-list", issuer=ROOT).described(KEY)
    assert "continues no earlier list" in first.cautions[-1]
    ssh = Signable(TEXT, "openssh", "release").described(KEY)
    assert ssh.lines[-1] == "as an SSH signature for the namespace release"
    assert ssh.lines[2] == "release 7 of the tide tables"


def test_an_issuer_below_another_authority_is_cautioned_of() -> None:
    issuer = above()
    wanted = Signable(a_body(20, issuer), "certificate", issuer=issuer)
    wanted.message(KEY)
    assert any("CN=Coast Root" in caution for caution in wanted.described(KEY).cautions)
    assert not any("not at hand" in caution for caution in GOOD[2][0].described(KEY).cautions)


def test_a_list_without_an_issuer_is_refused_as_a_usage() -> None:
    with pytest.raises(ParameterError):
        Signable(a_list(77, number=1), "revocation-list").message(KEY)
