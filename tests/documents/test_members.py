"""The types of members: one value, one encoding.

Checked against: the standard library's codecs and its Unicode database; FORMAT.md, section 1. Where the space is small
every text is tried.
"""

from __future__ import annotations

import base64
import itertools
import string
import unicodedata

import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from pydantic_core import PydanticCustomError
from strategies import HARBOUR, octets

from shares.documents.members import (
    _decode_field,
    _decode_hex,
    _decode_time,
    _printable,
    _valid_name,
    check_name,
    check_text,
    decode_bytes,
    encode_bytes,
)
from shares.errors import ParameterError

ALPHABET = string.ascii_uppercase + string.ascii_lowercase + string.digits + "-_"


def refused(decode, value: object) -> bool:
    try:
        decode(value)
    except PydanticCustomError:
        return True
    return False


@given(octets(1, 70))
def test_base64url_comes_back_and_is_the_standard_librarys(data: bytes) -> None:
    text = encode_bytes(data)
    assert text == base64.urlsafe_b64encode(data).decode().rstrip("=")
    assert decode_bytes(text) == data
    assert encode_bytes(memoryview(data)) == text


@pytest.mark.parametrize("length", [1, 2, 3])
def test_of_all_short_texts_exactly_the_canonical_ones_decode(length: int) -> None:
    """1 character never; 2 where the last 4 bits are zero, 3 where the last 2 are: 256 and 65,536 texts."""
    if length == 3:
        texts = ("".join(text) for text in itertools.product("A-_9", ALPHABET, ALPHABET))
        accepted = [text for text in texts if not refused(decode_bytes, text)]
        assert len(accepted) == 4 * 64 * 16
    else:
        accepted = [
            text for text in map("".join, itertools.product(ALPHABET, repeat=length)) if not refused(decode_bytes, text)
        ]
        assert len(accepted) == {1: 0, 2: 256}[length]
    assert all(encode_bytes(decode_bytes(text)) == text for text in accepted)


@given(st.text(max_size=12) | st.text(ALPHABET + "+/= \n\u00e9", max_size=12))
@example("")
@example("QQ==")
@example("QR")
@example("Q Q")
@example("QQ\n")
@example("+/++")
@example("\u0661\u0662\u0663\u0664")  # Digits, but not of ASCII.
def test_a_text_that_decodes_is_the_only_one_for_its_bytes(text: str) -> None:
    if not refused(decode_bytes, text):
        assert encode_bytes(decode_bytes(text)) == text
        assert set(text) <= set(ALPHABET)


@pytest.mark.parametrize("value", [None, 1, True, b"QQ", ["QQ"], {"QQ": 1}, 1.5])
def test_what_is_no_text_is_no_base64url(value: object) -> None:
    assert refused(decode_bytes, value)


@given(octets(1, 40))
def test_hexadecimal_is_lower_case_and_whole(data: bytes) -> None:
    assert _decode_hex(data.hex()) == data
    assert refused(_decode_hex, data.hex()[1:])
    assert refused(_decode_hex, data.hex() + " ")
    assert refused(_decode_hex, "0x" + data.hex())
    if data.hex() != data.hex().upper():
        assert refused(_decode_hex, data.hex().upper())


@pytest.mark.parametrize("value", ["", None, 1, "\uff10\uff11", "zz", "0 0", ["00"]])
def test_what_is_not_hexadecimal_is_refused(value: object) -> None:
    assert refused(_decode_hex, value)


def test_exactly_the_thirty_irreducible_polynomials_are_fields() -> None:
    """Thirty by Gauss's formula: (2^8 - 2^4) / 8. Which they are is checked in tests/field."""
    accepted = [number for number in range(0x200) if not refused(_decode_field, f"0x{number:x}")]
    assert len(accepted) == (2**8 - 2**4) // 8 == 30
    assert min(accepted) > 0xFF
    for spelling in ("0x11B", "0X11b", "11b", "0x011b", "283", "x^8 + x^4 + x^3 + x + 1", "", 0x11B, None):
        assert refused(_decode_field, spelling)


@pytest.mark.parametrize("value", ["", None, 0, "2026-12-01", "2026-12-01T07:00:00", "2026-12-01t07:00:00z"])
def test_a_time_has_one_spelling(value: object) -> None:
    assert refused(_decode_time, value)


# Names.


# FORMAT.md, section 1: what shows as nothing or as a space.
BLANK = {
    chr(number)
    for first, last in [
        *((0x034F, 0x034F), (0x115F, 0x1160), (0x17B4, 0x17B5), (0x180B, 0x180F), (0x2800, 0x2800), (0x3164, 0x3164)),
        *((0xFFA0, 0xFFA0), (0xFE00, 0xFE0F), (0xE0100, 0xE01EF)),
    ]
    for number in range(first, last + 1)
}


def may_be_a_name(text: str) -> bool:
    """FORMAT.md, section 1, word for word."""
    return (
        1 <= len(text) <= 64
        and unicodedata.normalize("NFC", text) == text
        and not set(text) & set("/\\")
        and not {unicodedata.category(c) for c in text} & {"Cc", "Cf", "Cs", "Co", "Cn"}
        and not set(text) & BLANK
        and not any(c.isspace() and c != " " for c in text)
        and "  " not in text
        and text == text.strip()
        and text[0] not in ".-"
        and len(text.encode()) <= 200
    )


def is_name(text: str) -> bool:
    try:
        return check_name(text) == text
    except ParameterError:
        return False


@given(st.text(max_size=70) | st.text("aB .-/\\\u00e9e\u0301\u00a0\u2028\u4e00\U0001f512", max_size=80))
@example("")
@example(".")
@example("..")
@example("-rf")
@example("a" * 64)
@example("a" * 65)
@example("\U0001f512" * 50)
@example("\U0001f512" * 51)  # 204 bytes.
@example("a  b")
@example(" a")
@example("a ")
@example("a\u00a0b")
@example("e\u0301")
@example("\u2126")  # The ohm sign, whose normal form C is the letter omega.
@example("a\u200db")
@example("a\u2028b")
@example("\ud800")
@example("\ue000")
@example("\u0378")  # Not assigned.
def test_names_are_as_the_format_says(text: str) -> None:
    assert is_name(text) == may_be_a_name(text)


def test_every_single_character_that_may_be_a_name_is_as_the_format_says() -> None:
    for number in [*range(0x3000), *range(0xD7F0, 0xE010), *range(0xFE00, 0x10020)]:
        assert is_name(chr(number)) == may_be_a_name(chr(number)), hex(number)


@given(st.text(max_size=70))
def test_a_name_is_safe_as_part_of_a_file_name(text: str) -> None:
    if is_name(text):
        file_name = f".{text}.share.json.{'0' * 16}.partial"
        assert len(file_name.encode()) <= 255
        assert not set(file_name) & {"/", "\0", "\n"}


@pytest.mark.parametrize("name", HARBOUR)
def test_the_harbours_custodians_have_names(name: str) -> None:
    assert check_name(name) == name


@pytest.mark.parametrize(
    ("name", "reason"),
    [
        ("", "must not be empty"),
        ("a" * 65, "64 characters"),
        ("\U0001f512" * 51, "200 bytes"),
        ("a\x1bb", "control"),
        ("a/b", "path separator"),
        ("a\\b", "path separator"),
        (".a", "dot or hyphen"),
        ("a  b", "white space"),
        ("e\u0301", "normal form C"),
    ],
)
def test_a_refused_name_is_told_why_and_not_repeated(name: str, reason: str) -> None:
    with pytest.raises(ParameterError, match=reason) as refusal:
        check_name(name)
    assert len(name) < 3 or name not in str(refusal.value)


@given(st.text(max_size=510))
@example("")
@example("x" * 500)
@example("x" * 501)
@example("a\nb")
@example("a\x7fb")
@example("\u202e")
@example("\ud800")
@example("c1\ufe0f")
@example("\u3164")
def test_labels_are_printable_and_of_one_line(text: str) -> None:
    hidden = {"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"}
    may_be = 1 <= len(text) <= 500 and not {unicodedata.category(c) for c in text} & hidden and not set(text) & BLANK
    try:
        accepted = check_text(text) == text
    except ParameterError:
        accepted = False
    assert accepted == may_be


@pytest.mark.parametrize("text", ["\u0378", "a\u0378b", "\U0003fffd"])
def test_a_character_that_a_later_unicode_may_define_is_read_but_not_written(text: str) -> None:
    """Whoever has an older Unicode can still recover; nobody deals under a name that nobody can check."""
    assert unicodedata.category(text[-2:][0]) == "Cn"
    assert _valid_name(text) == _printable(text) == text
    for check in (check_name, check_text):
        with pytest.raises(ParameterError):
            check(text)


@pytest.mark.parametrize("number", [0xFDD0, 0xFDEF, 0xFFFE, 0xFFFF, 0x1FFFE, 0x10FFFF])
def test_a_character_that_no_unicode_will_ever_define_is_not_read_either(number: int) -> None:
    """The Unicode Standard, section 23.7: 66 noncharacters."""
    assert refused(_valid_name, chr(number))
    assert refused(_printable, chr(number))


def test_there_are_66_noncharacters() -> None:
    unassigned = (chr(n) for n in range(0x110000) if unicodedata.category(chr(n)) == "Cn")
    assert sum(refused(_printable, c) for c in unassigned) == 66
