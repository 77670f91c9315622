"""What a custodian is told of any bytes that the key is to sign: their size, digest and kind, and what they say.

A quorum that signs plain bytes may, without knowing, sign a certificate or the login of some other protocol. So what
those look like is looked for first, whatever the task calls the bytes.

Source: FIPS 180-4 (SHA-256); RFC 7468 (PEM); RFC 8446, sec. 4.4.3, RFC 4252, sec. 7 and RFC 5280 (what other protocols
sign); the magic numbers of the formats in the table, each by its own specification.
May import: shares.errors, .certificate_words, .description, .ssh_signature.
Secret: nothing. Public: everything.
Does not: understand what is signed. Whoever agrees to sign does.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterator
from typing import Final

from shares.errors import DocumentError
from shares.keys.certificate_words import described_certificate, described_list
from shares.keys.description import Description, in_groups, is_hidden, shown
from shares.keys.ssh_signature import described as described_ssh_signature

_MOST_LINES, _MOST_COLUMNS = 12, 100
_KINDS: Final = (
    (b"%PDF-", "a PDF document"),
    (b"PK\x03\x04", "a zip archive"),
    (b"\x7fELF", "a program or library (ELF)"),
    (b"\x1f\x8b", "a gzip file"),
    (b"\xfd7zXZ\x00", "an xz file"),
    (b"\x28\xb5\x2f\xfd", "a zstd file"),
    (b"BZh", "a bzip2 file"),
    (b"\x89PNG\r\n\x1a\n", "a PNG picture"),
    (b"\xff\xd8\xff", "a JPEG picture"),
)
# What other protocols sign: with it, whoever asked for the signature could be this key there.
_PROTOCOLS: Final = (
    (re.compile(rb" {64}TLS 1\.3, "), "a proof of TLS 1.3 that this key is at the other end"),
    (re.compile(rb"SSHSIG"), "the body of an SSH signature in a form that is not read here"),
    (re.compile(rb"\0\0\0.[a-z0-9-]{1,60}-cert-v01@openssh\.com", re.DOTALL), "the body of an SSH certificate"),
    (re.compile(rb"\0\0\0[\x14-\x40].{20,64}\x32.{8,600}ssh-connection", re.DOTALL), "a login by SSH"),
)
_PEM = re.compile(rb"^-----BEGIN ([A-Z0-9 ]{1,60})-----\r?$", re.MULTILINE)


def described(message: bytes, public_key: bytes) -> Description:
    """Say what bytes are that the key is to sign.

    Args:
        message: the bytes, of any length.
        public_key: the threshold key's Edwards point, 32 bytes.

    Returns:
        Size and SHA-256 first, then what could be found in the bytes.

    >>> described(b"release 7 of the tide tables\\n", bytes(32)).lines[2:]
    ('release 7 of the tide tables',)
    """
    found = _recognised(message, public_key) or _plain(message)
    size = f"{len(message)} byte{'' if len(message) == 1 else 's'}"
    head = (f"size: {size}", f"SHA-256: {in_groups(hashlib.sha256(message).digest())}")
    return Description(found.kind, (*head, *found.lines), found.cautions)


def _recognised(message: bytes, public_key: bytes) -> Description | None:
    """Return what a body that is read here says; None where it is none."""
    for read in (described_ssh_signature, lambda body: described_certificate(body, public_key), described_list):
        try:
            return read(message)
        except DocumentError:
            continue
    return None


def _plain(message: bytes) -> Description:
    text = _text(message)
    lines = () if text is None else (*_pem_blocks(message), *_first_lines(text))
    foreign = next((kind for form, kind in _PROTOCOLS if form.match(message)), None)
    if foreign is None and _is_sequence(message):
        foreign = "a structure in ASN.1 DER, as certificates are, of a kind that is not read here"
    if foreign:
        caution = "Other programs act on a signature of such bytes. Sign only if you know who takes it, and for what."
        return Description(foreign, lines, (caution,))
    if not message:
        return Description("nothing at all", (), ("An empty file is signed. See that it is the one that was meant.",))
    kind = next((kind for magic, kind in _KINDS if message.startswith(magic)), None)
    if kind is None and text is not None:
        return Description("text", lines, tuple(_text_cautions(message, text)))
    caution = "It is not shown: compare the SHA-256 with one that you worked out of a copy that you trust."
    return Description(kind or "bytes that are no text", (), (caution,))


def _is_sequence(message: bytes) -> bool:
    """Say whether the bytes are one SEQUENCE in DER, by its header (ITU-T X.690, sec. 8.1.3)."""
    if len(message) < 2 or message[0] != 0x30:
        return False
    octets = message[1] & 0x7F if message[1] & 0x80 else 0
    length = int.from_bytes(message[2 : 2 + octets]) if octets else message[1]
    return len(message) == 2 + octets + length


def _text(message: bytes) -> str | None:
    try:
        return None if b"\0" in message else message.decode("utf-8")
    except UnicodeDecodeError:
        return None


def _first_lines(text: str) -> Iterator[str]:
    lines = text.removesuffix("\n").split("\n")
    for line in lines[:_MOST_LINES]:
        line = line.removesuffix("\r").replace("\t", "    ")
        more = len(line) - _MOST_COLUMNS
        safe = shown(line[:_MOST_COLUMNS])
        yield safe if more <= 0 else f"{safe} ... and {more} more character{'' if more == 1 else 's'}"
    if len(lines) > _MOST_LINES:
        more = len(lines) - _MOST_LINES
        yield f"... and {more} more line{'' if more == 1 else 's'}"


def _pem_blocks(message: bytes) -> Iterator[str]:
    names = [found[1].decode("ascii") for found in _PEM.finditer(message)]
    if names:
        counted = (f"{name} ({names.count(name)})" if names.count(name) > 1 else name for name in dict.fromkeys(names))
        yield f"PEM blocks: {', '.join(counted)}"


def _text_cautions(message: bytes, text: str) -> Iterator[str]:
    if any(is_hidden(c) for c in set(text) - {"\n", "\r", "\t"}):
        yield "It holds characters that are invisible or reorder others: they are written out here, like <U+202E>."
    if any(b"PRIVATE KEY" in found[1] for found in _PEM.finditer(message)):
        yield "It holds a private key. Whoever has this file has that key."
    lines = text.split("\n", _MOST_LINES)
    if lines[_MOST_LINES:] not in ([], [""]) or any(len(line) > _MOST_COLUMNS for line in lines[:_MOST_LINES]):
        yield "Only the beginning is shown: read the file itself before you agree."
