"""Detached SSH signatures, judged by the tool that everybody verifies them with.

Checked against: ``ssh-keygen -Y`` (verify, check-novalidate, and its own signatures byte for byte); OpenSSH's
PROTOCOL.sshsig.
"""

from __future__ import annotations

import base64
import hashlib
from pathlib import Path

import pytest
from cryptography.hazmat.primitives.serialization import Encoding, NoEncryption, PrivateFormat
from hypothesis import given
from hypothesis import strategies as st
from keys.played import KEY, OTHER, QUORUM, tool

from shares.errors import DocumentError, ParameterError, VerificationError
from shares.keys.public_key import ssh_line
from shares.keys.ssh_signature import armoured, described, to_be_signed

RELEASE = b"release 7 of the tide tables\n" * 1000
DIGEST = hashlib.sha512(RELEASE).digest()
SPACE = "release"


def signed(digest: bytes = DIGEST, namespace: str = SPACE) -> bytes:
    return armoured(KEY, digest, namespace, QUORUM.sign(to_be_signed(digest, namespace)))


def verified(folder: Path, signature: bytes, content: bytes = RELEASE, namespace: str = SPACE, key: bytes = KEY) -> int:
    (folder / "signature").write_bytes(signature)
    (folder / "allowed").write_text(f'quorum@harbour.example namespaces="{namespace}" {ssh_line(key, "quorum")}')
    command = ("-f", "allowed", "-I", "quorum@harbour.example", "-n", namespace, "-s", "signature")
    said = tool(folder, "ssh-keygen", "-Y", "verify", *command, given=content)
    assert said.returncode in (0, 255)
    assert (said.returncode == 0) == (b"Good" in said.stdout)
    return said.returncode


def test_ssh_keygen_verifies_it(tmp_path: Path) -> None:
    assert verified(tmp_path, signed()) == 0
    said = tool(tmp_path, "ssh-keygen", "-Y", "check-novalidate", "-n", SPACE, "-s", "signature", given=RELEASE)
    assert said.returncode == 0
    assert verified(tmp_path, signed(hashlib.sha512(b"").digest()), b"") == 0


def test_ssh_keygen_refuses_what_was_not_signed(tmp_path: Path) -> None:
    assert verified(tmp_path, signed(), RELEASE + b"\n") == 255
    assert verified(tmp_path, signed(), namespace="mail") == 255
    assert verified(tmp_path, signed(), key=OTHER.public_key().public_bytes_raw()) == 255
    blob = bytearray(base64.b64decode(b"".join(signed().splitlines()[1:-1])))
    blob[-1] ^= 1
    altered = b"-----BEGIN SSH SIGNATURE-----\n" + base64.b64encode(blob) + b"\n-----END SSH SIGNATURE-----\n"
    assert verified(tmp_path, altered) == 255


def test_it_is_what_ssh_keygen_itself_signs(tmp_path: Path) -> None:
    # Ed25519 is deterministic (RFC 8032, sec. 5.1.6), so the same key over the same bytes must give the same blob.
    private = QUORUM.private_bytes(Encoding.PEM, PrivateFormat.OpenSSH, NoEncryption())
    (tmp_path / "key").write_bytes(private)
    (tmp_path / "key").chmod(0o600)
    (tmp_path / "release").write_bytes(RELEASE)
    assert tool(tmp_path, "ssh-keygen", "-Y", "sign", "-n", SPACE, "-f", "key", "release").returncode == 0
    theirs = (tmp_path / "release.sig").read_bytes().splitlines()
    ours = signed().splitlines()
    assert ours[0] == theirs[0]
    assert ours[-1] == theirs[-1]
    assert b"".join(ours[1:-1]) == b"".join(theirs[1:-1])
    assert {len(line) for line in ours[1:-2]} == {76}  # PROTOCOL.sshsig, "Armored format"


@pytest.mark.parametrize("digest", [b"", DIGEST[:63], DIGEST + b"\0", hashlib.sha256(RELEASE).digest()])
def test_other_digests_are_refused(digest: bytes) -> None:
    with pytest.raises(ParameterError):
        to_be_signed(digest, SPACE)


@pytest.mark.parametrize("namespace", ["", "a b", "a\n", "a\0", "\u202ea", "a" * 501])
def test_namespaces_that_would_disturb_are_refused(namespace: str) -> None:
    with pytest.raises(ParameterError):
        to_be_signed(DIGEST, namespace)


def test_a_signature_of_anything_else_is_not_put_together() -> None:
    signature = QUORUM.sign(to_be_signed(DIGEST, SPACE))
    for key, digest, namespace, given_signature in (
        (KEY, DIGEST, "mail", signature),
        (KEY, hashlib.sha512(b"").digest(), SPACE, signature),
        (OTHER.public_key().public_bytes_raw(), DIGEST, SPACE, signature),
        (KEY, DIGEST, SPACE, QUORUM.sign(RELEASE)),
        (KEY, DIGEST, SPACE, signature[:63]),
    ):
        with pytest.raises(VerificationError):
            armoured(key, digest, namespace, given_signature)


def test_the_words_are_those_of_the_body() -> None:
    said = described(to_be_signed(DIGEST, SPACE))
    assert said.lines[0] == "namespace: release"
    assert said.lines[1].replace(" ", "").endswith(DIGEST.hex())
    assert said.cautions


def test_each_prefix_and_each_longer_body_is_refused() -> None:
    body = to_be_signed(DIGEST, SPACE)
    for length in range(len(body)):
        with pytest.raises(DocumentError):
            described(body[:length])
    for other in (body + b"\0", b"\0" + body, body.replace(b"sha512", b"sha256"), body.replace(b"SSHSIG", b"SSHSIH")):
        with pytest.raises(DocumentError):
            described(other)


@given(st.binary(max_size=300))
def test_hostile_bodies_are_refused_in_words(tail: bytes) -> None:
    for body in (tail, b"SSHSIG" + tail, to_be_signed(DIGEST, SPACE)[:20] + tail):
        with pytest.raises(DocumentError):
            described(body)
