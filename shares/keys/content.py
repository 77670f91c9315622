"""What a custodian is told of any bytes that the key is to sign: their size, digest and kind, and what they say.

A quorum that signs plain bytes may, without knowing, sign a certificate or the login of some other protocol. So what
those look like is looked for first, whatever the task calls the bytes; and as plain bytes it is not signed at all.

Source: FIPS 180-4 (SHA-256); RFC 7468 (PEM); RFC 8446, sec. 4.4.3, RFC 5246, sec. 7.4.8, RFC 8422, sec. 5.4, RFC 4252,
sec. 7, RFC 4253, sec. 8, RFC 5280, RFC 5652, sec. 5.4 and RFC 7515, sec. 5.1 (what other protocols sign); ITU-T X.690,
sec. 8.1 (identifiers and lengths); the magic numbers of the formats in the table, each by its own specification.
May import: shares.errors, .certificate_words, .description, .ssh_signature.
Secret: nothing. Public: everything.
Does not: understand what is signed. Whoever agrees to sign does.
"""

from __future__ import annotations

import hashlib
import re
from collections import Counter
from collections.abc import Iterator
from typing import Final

from shares.errors import DocumentError, ParameterError
from shares.keys.certificate_words import described_certificate, described_list
from shares.keys.description import Description, in_groups, is_hidden, shown
from shares.keys.ssh_signature import described as described_ssh_signature

_MOST_LINES, _MOST_COLUMNS, _MOST_BLOCKS = 12, 100, 12
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
# What other protocols sign: with it, whoever asked for the signature could be this key there. Of TLS 1.2 what a server
# says of its key is 64 random bytes, then the parameters of a named curve; what a client signs begins as it began.
_PROTOCOLS: Final = (
    (re.compile(rb" {64}TLS 1\.3, "), "a proof of TLS 1.3 that this key is at the other end"),
    (re.compile(rb"SSHSIG"), "the body of an SSH signature in a form that is not read here"),
    (re.compile(rb"\0\0\0.[a-z0-9-]{1,60}-cert-v01@openssh\.com", re.DOTALL), "the body of an SSH certificate"),
    (re.compile(rb"\0\0\0[\x14-\x40].{20,64}\x32.{8,600}ssh-connection", re.DOTALL), "a login by SSH"),
    (
        re.compile(rb".{64}\x03\0[\x17-\x19\x1d\x1e][\x20\x38\x41\x61\x85].{32,133}\Z", re.DOTALL),
        "a proof of TLS 1.2 that this key is at the other end",
    ),
    (re.compile(rb"\x01\0..\x03[\x01-\x03]", re.DOTALL), "a login by TLS"),
    (re.compile(rb"shares/v1/"), "what this program signs of documents of its own"),
)
# The beginning of a JSON object in base64url, then a dot.
_TOKEN = re.compile(rb"e(?:y[AJ]|w[0ko])[A-Za-z0-9_-]*\.")
# Every universal tag that holds something is one of these, but for three that no signed structure is made of alone.
_CONTROL = re.compile(rb"[\x00-\x08\x0b\x0c\x0e-\x1f]")
_SEQUENCE, _SET = 0x10, 0x11
_DIGEST_SIZES = (20, 32, 48, 64)
_ELSEWHERE = "Other programs act on a signature of such bytes. Sign only if you know who takes it, and for what."
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


def refuse_as_plain(message: bytes, public_key: bytes) -> None:
    """Refuse to sign bytes as they are that other programs, or this one, would act on.

    Args:
        message: as for ``described``.
        public_key: the threshold key's Edwards point, 32 bytes.

    Raises:
        ParameterError: they are the body of a certificate, revocation list or SSH signature, a proof or login of
            another protocol, one structure of ASN.1, or begin with a label of this program's own.
    """
    found = _recognised(message, public_key)
    kind = found.kind if found else _foreign(message)
    if kind:
        raise ParameterError(
            f"what is to be signed as plain bytes is {kind}",
            hint="certificates are asked for with `shares key root` and `certify`, lists with `revoke`, and a signature"
            " over any file whatever is made with `shares key sign --openssh`",
        )


def _recognised(message: bytes, public_key: bytes) -> Description | None:
    """Return what a body that is read here says; None where it is none."""
    try:
        if message.startswith(b"SSHSIG"):
            return described_ssh_signature(message)
        if message.startswith(b"\x30"):
            return described_certificate(message, public_key)
    except DocumentError:
        pass
    try:
        return described_list(message) if message.startswith(b"\x30") else None
    except DocumentError:
        return None


def _foreign(message: bytes) -> str | None:
    """Return what the bytes are if another protocol might sign such; None where none is known to."""
    found = next((kind for form, kind in _PROTOCOLS if form.match(message)), None)
    if found is None and _is_structure(message):
        found = "a structure in ASN.1, as certificates are, of a kind that is not read here"
    return found


def _plain(message: bytes) -> Description:
    text = _text(message)
    lines = () if text is None else (*_pem_blocks(message), *_first_lines(text))
    foreign = _foreign(message)
    if foreign:
        return Description(foreign, lines, (_ELSEWHERE,))
    if not message:
        return Description("nothing at all", (), ("An empty file is signed. See that it is the one that was meant.",))
    kind = next((kind for magic, kind in _KINDS if message.startswith(magic)), None)
    if kind is None and text is not None:
        token = _TOKEN.match(message) is not None
        cautions = (*([_ELSEWHERE] if token else []), *_text_cautions(message, text))
        return Description("what is signed of a token in JSON (JWS)" if token else "text", lines, cautions)
    cautions = ("It is not shown: compare the SHA-256 with one that you worked out of a copy that you trust.",)
    if len(message) in _DIGEST_SIZES:
        cautions += (
            "It may be the digest of something, of what nobody can see; SSH signs such. Have the thing shown.",
        )
    return Description(kind or "bytes that are no text", (), cautions)


def _is_structure(message: bytes) -> bool:
    """Say whether the bytes are one SEQUENCE or SET by their header, in any spelling that a lenient reader takes.

    Text may begin so by chance: 51 bytes, the first two of them "01". It is no structure, as that would hold tags,
    which are control characters.
    """
    head = message[:160]
    if not head or head[0] & 0xC0:  # Not of the universal class.
        return False
    tag, at = head[0] & 0x1F, 1
    if tag == 0x1F:  # The long form of a tag, which the standard has for higher ones alone.
        tag = 0
        while at < len(head):
            tag, at = tag << 7 | head[at] & 0x7F, at + 1
            if head[at - 1] < 0x80:
                break
    if tag not in (_SEQUENCE, _SET) or at >= len(head):
        return False
    octets = head[at] & 0x7F if head[at] & 0x80 else 0
    length = int.from_bytes(head[at + 1 : at + 1 + octets]) if octets else head[at]
    ends = head[at] == 0x80 or len(message) == at + 1 + octets + length
    return ends and (_CONTROL.search(message) is not None or _text(message) is None)


def _text(message: bytes) -> str | None:
    try:
        return None if b"\0" in message else message.decode("utf-8")
    except UnicodeDecodeError:
        return None


def _first_lines(text: str) -> Iterator[str]:
    lines = text.removesuffix("\n").split("\n", _MOST_LINES)  # The last of them holds all that is not shown.
    for line in lines[:_MOST_LINES]:
        line = line.removesuffix("\r")
        more = len(line) - _MOST_COLUMNS
        safe = shown(line[:_MOST_COLUMNS].replace("\t", "    "))
        yield safe if more <= 0 else f"{safe} ... and {more} more character{'' if more == 1 else 's'}"
    if len(lines) > _MOST_LINES:
        more = lines[_MOST_LINES].count("\n") + 1
        yield f"... and {more} more line{'' if more == 1 else 's'}"


def _pem_blocks(message: bytes) -> Iterator[str]:
    names = Counter(found[1].decode("ascii") for found in _PEM.finditer(message))
    if names:
        counted = [f"{name} ({count})" if count > 1 else name for name, count in names.items()]
        more = len(counted) - _MOST_BLOCKS
        yield f"PEM blocks: {', '.join(counted[:_MOST_BLOCKS])}{f', and {more} other kinds' if more > 0 else ''}"


def _text_cautions(message: bytes, text: str) -> Iterator[str]:
    if any(is_hidden(c) for c in set(text) - {"\n", "\r", "\t"}):
        yield "It holds characters that are invisible or reorder others: they are written out here, like <U+202E>."
    if any(b"PRIVATE KEY" in found[1] for found in _PEM.finditer(message)):
        yield "It holds a private key. Whoever has this file has that key."
    lines = text.split("\n", _MOST_LINES)
    if lines[_MOST_LINES:] not in ([], [""]) or any(len(line) > _MOST_COLUMNS for line in lines[:_MOST_LINES]):
        yield "Only the beginning is shown: read the file itself before you agree."
