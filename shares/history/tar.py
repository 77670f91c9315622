"""The one form of tar archive that this program writes and reads: for given names and contents there is one archive.

Source: IEEE Std 1003.1-2017 (POSIX), pax, sec. "ustar Interchange Format" and "pax Extended Header Keyword/Value".
May import: shares.errors, shares.streams, shares.history.files.
Secret: nothing. Confidential: what the archive holds. Public: its form.
Does not: put anything on a disk. A reader that makes each header anew and compares it needs no care for links, devices,
sparse files, owners, modes or times: whatever is not exactly what the writer writes is refused. So the standard
library's reader, which takes every form that ever was and would have to be told what to refuse, is not used.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

from shares.errors import DocumentError, StorageError
from shares.history.files import is_name_in_set
from shares.streams import Reader

BLOCK: Final = 512
END: Final = bytes(2 * BLOCK)
"""What ends an archive."""
MAX_MEMBERS: Final = 100_000
MAX_NAME: Final = 500
"""The longest name, in bytes of UTF-8."""
_NAME, _PREFIX = 100, 155
_LONG_NAME: Final = "long-name"
_HINT: Final = "ask for a pack that `shares audit pack` has made"

# What a header may say that it is, in words (POSIX, and the letters of programs that extend it).
_TYPES: Final = {
    b"1": "a hard link",
    b"2": "a symbolic link",
    b"3": "a character device",
    b"4": "a block device",
    b"5": "a folder of its own",
    b"6": "a pipe",
    b"7": "a contiguous file",
    b"g": "an extended header for the whole archive",
    b"x": "an extended header that tells more than a long name",
    b"K": "an extended header of a form that POSIX does not have",
    b"L": "an extended header of a form that POSIX does not have",
    b"S": "a sparse file",
}
_PACKED: Final = {
    b"\x1f\x8b": "gzip",
    b"BZh": "bzip2",
    b"\xfd7zXZ": "xz",
    b"\x28\xb5\x2f\xfd": "zstd",
    b"PK\x03\x04": "zip",
}


@dataclass(frozen=True, slots=True)
class Member:
    """A file in an archive: where its content begins, and how long it is, in bytes."""

    start: int
    size: int


def header(name: str, size: int) -> bytes:
    """Return what stands before a file's content: one block, or three where the name is too long for one.

    Args:
        name: of the file, with ``/`` between its parts; at most MAX_NAME bytes.
        size: its length in bytes, below 8 GiB.

    >>> len(header("record.json", 700)), header("record.json", 700)[257:263]
    (512, b'ustar\\x00')
    """
    raw = name.encode("utf-8")
    if len(raw) <= _NAME:
        return _block(raw, size)
    # The shortest prefix that leaves a name of at most 100 bytes.
    cut = raw.find(b"/", len(raw) - _NAME - 1)
    if 0 < cut <= _PREFIX:
        return _block(raw[cut + 1 :], size, prefix=raw[:cut])
    record = _record(raw)
    return _block(_LONG_NAME.encode(), len(record), kind=b"x") + _padded(record) + _block(raw[:_NAME], size)


def padding(size: int) -> bytes:
    """Return the zeros that fill the last block of a file of this length."""
    return bytes(-size % BLOCK)


def index(reader: Reader, *, limit_of: Callable[[str], int]) -> dict[str, Member]:
    """Find the files of an archive, after looking at every byte of it that is not a file's content.

    Args:
        reader: the open archive, a regular file.
        limit_of: returns the most bytes that the file of a name may have.

    Returns:
        Where each file's content lies, by name, in the archive's order, which is that of the names.

    Raises:
        DocumentError: it is no archive of this form; says what it is instead, and of which file.
        StorageError: the medium refuses.
    """
    found: dict[str, Member] = {}
    place, last = 0, ""
    size = reader.size or 0
    _check_kind(_read(reader, 0, BLOCK), reader.where)
    while (block := _read(reader, place, BLOCK)) not in (b"", END[:BLOCK]):
        name, member = _member(reader, place, block)
        if name <= last:
            what = "twice" if name in found else "after one that it should stand before"
            raise _refused(f"{_quoted(name)} stands {what}", reader.where)
        if member.size > limit_of(name):
            raise _refused(f"{_quoted(name)} is larger than {limit_of(name):,} bytes", reader.where)
        place = member.start + member.size + len(padding(member.size))
        if place > size:
            raise _refused(f"it is cut short within {_quoted(name)}", reader.where)
        if any(_read(reader, member.start + member.size, len(padding(member.size)))):
            raise _refused(f"bytes that belong to no file stand after {_quoted(name)}", reader.where)
        found[name], last = member, name
        if len(found) > MAX_MEMBERS:
            raise _refused(f"it holds more than {MAX_MEMBERS:,} files", reader.where)
    if _read(reader, place, len(END)) != END:
        raise _refused("it is cut short at its end", reader.where)
    if place + len(END) != size:
        raise _refused("bytes that belong to no file stand at its end", reader.where)
    return found


def content(reader: Reader, name: str, member: Member) -> bytes:
    """Return a file's content, from an archive that was opened again since its files were found.

    Raises:
        StorageError: something else stands there by now, or the medium refuses.
    """
    before = header(name, member.size)
    same = _read(reader, member.start - len(before), len(before)) == before
    data = _read(reader, member.start, member.size)
    if not same or len(data) != member.size:
        raise StorageError("was changed while it was read", where=reader.where, hint="repeat with a copy at rest")
    return data


def _member(reader: Reader, place: int, block: bytes) -> tuple[str, Member]:
    """Return a file's name and place, where its header is the one that the writer would have written."""
    given, kind = block, block[156:157]
    prefix = _text(block, 345, _PREFIX)
    raw = (prefix + b"/" if prefix else b"") + _text(block, 0, _NAME)
    if kind == b"x":
        given += _read(reader, place + BLOCK, 2 * BLOCK)
        if long := _long_name(given[BLOCK : 2 * BLOCK]):
            raw, block, kind = long, given[2 * BLOCK :], given[2 * BLOCK + 156 : 2 * BLOCK + 157]
    if len(block) < BLOCK:
        raise _refused("it is cut short within a header", reader.where)
    name, size = raw.decode("utf-8", "replace"), _size(block)
    shown = _quoted(name)
    if block[257:265] != b"ustar\x0000":
        raise _refused(f"{shown} has a header of another form of archive, or none", reader.where)
    if kind != b"0":
        raise _refused(f"{shown} is {_TYPES.get(kind, 'of a kind that POSIX does not have')}, not a file", reader.where)
    if not is_name_in_set(name):
        raise _refused(f"{shown} would lead out of the set's folder", reader.where)
    if size is None or header(name, size) != given:
        raise _refused(f"the header of {shown} is not as `shares audit pack` writes it", reader.where)
    return name, Member(place + len(given), size)


def _long_name(block: bytes) -> bytes:
    """Return the name in an extended header that tells nothing else; else nothing."""
    length, _, rest = block.partition(b" ")
    raw = rest.removeprefix(b"path=").partition(b"\n")[0]
    return raw if length.isdigit() and _padded(_record(raw)) == block else b""


def _record(raw: bytes) -> bytes:
    """Return a record of an extended header: its own length in decimal, then what it tells.

    A name that needs one has more than 100 bytes and at most MAX_NAME, so its record's length has three digits.
    """
    told = b" path=" + raw + b"\n"
    return b"%d" % (len(told) + 3) + told


def _block(raw: bytes, size: int, *, prefix: bytes = b"", kind: bytes = b"0") -> bytes:
    """Return one header: mode 0644, owner 0 without a name, the beginning of 1970, the checksum in its place."""
    before = raw.ljust(_NAME, b"\0") + b"0000644\0" + 2 * b"0000000\0" + b"%011o\0" % size + b"%011o\0" % 0
    after = kind + bytes(100) + b"ustar\x0000" + bytes(64) + 2 * b"0000000\0" + prefix.ljust(_PREFIX, b"\0") + bytes(12)
    checksum = sum(before) + sum(after) + 8 * ord(" ")
    return before + b"%06o\0 " % checksum + after


def _padded(data: bytes) -> bytes:
    return data + padding(len(data))


def _text(block: bytes, at: int, length: int) -> bytes:
    return block[at : at + length].partition(b"\0")[0]


def _size(block: bytes) -> int | None:
    digits = block[124:135]
    return int(digits, 8) if all(digit in b"01234567" for digit in digits) else None


def _check_kind(first: bytes, where: str) -> None:
    for magic, form in _PACKED.items():
        if first.startswith(magic):
            raise _refused(f"it is compressed ({form}), and a pack is not", where, hint="unpack it first, with care")
    if len(first) < BLOCK:
        raise _refused("it is no archive: it is shorter than one header", where)
    if first == END[:BLOCK]:
        raise _refused("it holds no file", where)


def _read(reader: Reader, place: int, length: int) -> bytes:
    """Return the bytes at a place: fewer only at the end of the file."""
    reader.go_to(place)
    buffer = bytearray(length)
    with memoryview(buffer) as view:
        count = reader.fill(view)
    return bytes(buffer[:count])


def _quoted(name: str) -> str:
    """Name a file in a refusal: what comes from a stranger may be long, and steer a terminal."""
    shown = name if len(name) <= 80 else f"{name[:79]}\N{HORIZONTAL ELLIPSIS}"
    return ascii(shown) if not shown.isprintable() else f"'{shown}'"


def _refused(what: str, where: str, *, hint: str = _HINT) -> DocumentError:
    return DocumentError(what, where=where, hint=hint)
