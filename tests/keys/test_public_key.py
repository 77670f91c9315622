"""Public keys in the forms of the world, read back by what is not ours.

Checked against: ``openssl pkey`` and ``ssh-keygen -l``; RFC 8410, sec. 10.1, and RFC 7748, sec. 5.2 and 6.1 (keys);
RFC 8032, sec. 7.1 (signatures).
"""

from __future__ import annotations

import base64
import hashlib
from pathlib import Path

import pytest
from cryptography.hazmat.primitives.serialization import load_pem_public_key, load_ssh_public_key
from hypothesis import given
from hypothesis import strategies as st
from keys.played import KEY, OTHER, QUORUM, tool

from shares.errors import ParameterError, VerificationError
from shares.keys.public_key import check_signature, pem, sealing_pem, ssh_line

# RFC 8410, sec. 10.1: an Ed25519 public key.
RFC_8410 = b"""-----BEGIN PUBLIC KEY-----
MCowBQYDK2VwAyEAGb9ECWmEzf6FQbrBZ9w7lshQhqowtrbLDFw4rXAxZuE=
-----END PUBLIC KEY-----
"""
# RFC 8032, sec. 7.1, test 2: one byte.
PUBLIC_2 = bytes.fromhex("3d4017c3e843895a92b70aa74d1b7ebc9c982ccf2ec4968cc0cd55f12af4660c")
SIGNATURE_2 = bytes.fromhex(
    "92a009a9f0d4cab8720e820b5f642540a2b27b5416503f8fb3762223ebdb69da"
    "085ac1e43e15996e458f3613d0f11d8c387b2eaeb4302aeeb00d291612bb0c00"
)
U_OF_ALICE = bytes.fromhex("8520f0098930a754748b7ddcb43ef75a0dbf3a0d26381af4eba4a98eaa9b4e6a")  # RFC 7748, sec. 6.1.
IDENTITY = (1).to_bytes(32, "little")
P = 2**255 - 19


def test_pem_is_the_one_of_rfc_8410() -> None:
    raw = load_pem_public_key(RFC_8410).public_bytes_raw()
    assert raw.hex() == "19bf44096984cdfe8541bac167dc3b96c85086aa30b6b6cb0c5c38ad703166e1"
    assert pem(raw) == RFC_8410


def test_openssl_reads_both_keys(tmp_path: Path) -> None:
    for written, name, raw in ((pem(KEY), b"ED25519", KEY), (sealing_pem(U_OF_ALICE), b"X25519", U_OF_ALICE)):
        said = tool(tmp_path, "openssl", "pkey", "-pubin", "-noout", "-text", given=written)
        assert said.returncode == 0
        assert said.stdout.startswith(name)
        assert raw.hex() in said.stdout.replace(b"\n", b"").replace(b" ", b"").replace(b":", b"").decode()


def test_ssh_keygen_reads_the_line(tmp_path: Path) -> None:
    line = ssh_line(KEY, "harbour quorum, 3 of 5")
    (tmp_path / "key.pub").write_text(line)
    said = tool(tmp_path, "ssh-keygen", "-l", "-f", "key.pub")
    blob = base64.b64decode(line.split()[1])
    fingerprint = base64.b64encode(hashlib.sha256(blob).digest()).rstrip(b"=").decode()
    assert said.stdout.decode() == f"256 SHA256:{fingerprint} harbour quorum, 3 of 5 (ED25519)\n"
    assert blob == b"\0\0\0\x0bssh-ed25519\0\0\0\x20" + KEY  # RFC 8709, sec. 4.


@given(st.text(max_size=40))
def test_an_ssh_line_stays_one_line(label: str) -> None:
    try:
        line = ssh_line(KEY, label)
    except ParameterError:
        assert not (label.isascii() and label.isprintable() and label == label.strip() != "")
        return
    assert line.endswith(f" {label}\n")
    assert len(line.splitlines()) == 1
    assert load_ssh_public_key(line.encode()).public_bytes_raw() == KEY


@pytest.mark.parametrize(
    "label", ["", " ", "a\nssh-ed25519 AAAA", "a\rb", "a\x1b[2J", "\u202ea", " a", "a ", "a" * 501]
)
def test_labels_that_would_disturb_are_refused(label: str) -> None:
    with pytest.raises(ParameterError):
        ssh_line(KEY, label)


@pytest.mark.parametrize("bad", [b"", KEY[:31], KEY + b"\0", IDENTITY, (P + 3).to_bytes(32, "little"), b"\xff" * 32])
def test_what_is_no_point_is_no_public_key(bad: bytes) -> None:
    for ask in (pem, lambda key: ssh_line(key, "quorum"), lambda key: check_signature(key, b"", bytes(64))):
        with pytest.raises(VerificationError):
            ask(bad)


@pytest.mark.parametrize("bad", [b"", bytes(31), bytes(33), P.to_bytes(32, "little"), b"\xff" * 32])
def test_what_is_no_u_coordinate_is_refused(bad: bytes) -> None:
    with pytest.raises(VerificationError):
        sealing_pem(bad)
    assert sealing_pem((P - 1).to_bytes(32, "little")).startswith(b"-----BEGIN PUBLIC KEY-----\n")


def test_a_signature_of_rfc_8032_is_taken_and_each_change_of_a_byte_refused() -> None:
    check_signature(PUBLIC_2, b"\x72", SIGNATURE_2)
    for place in range(64):
        changed = bytearray(SIGNATURE_2)
        changed[place] ^= 1
        with pytest.raises(VerificationError):
            check_signature(PUBLIC_2, b"\x72", bytes(changed))
    for key, message, signature in (
        (PUBLIC_2, b"\x73", SIGNATURE_2),
        (PUBLIC_2, b"\x72", SIGNATURE_2[:63]),
        (PUBLIC_2, b"\x72", SIGNATURE_2 + b"\0"),
        (PUBLIC_2, b"\x72", b""),
        (KEY, b"\x72", SIGNATURE_2),
        (KEY, b"\x72", OTHER.sign(b"\x72")),
    ):
        with pytest.raises(VerificationError):
            check_signature(key, message, signature)
    check_signature(KEY, b"\x72", QUORUM.sign(b"\x72"))
