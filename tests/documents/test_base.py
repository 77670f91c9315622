"""Strict reading: whatever the bytes are, a document comes out or a DocumentError that shows none of them.

Checked against: RFC 8259 and FORMAT.md, section 1. Each text that JSON leaves open (members twice, fractions, huge
numbers, deep nesting, lone surrogates) is given to both kinds of document.
"""

from __future__ import annotations

import json
import logging
import traceback
from pathlib import Path

import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from strategies import crooked_split, flat, resealed

from shares.documents.base import MAX_FILE, Document, fingerprint, parse_object, write_text
from shares.documents.members import encode_bytes
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import DocumentError
from shares.memory import Secret

# The row of a share that must never be seen again: 60 bytes, 80 characters of base64url.
CANARY = b"canary row, told by its words wherever it would come out...."
DEALT = crooked_split(b"made up", flat(1, 2))
SHARE = resealed(DEALT.shares[0], rows=(Secret.of(CANARY),)).to_file()
RECORD = DEALT.record.to_file()
BOTH = [(Share, SHARE), (Record, RECORD)]


def read(kind: type[Document], data: bytes) -> Document | None:
    """Parse; None where it is refused. Whatever else comes up fails the test."""
    try:
        return kind.parse(data, where="a file")
    except DocumentError as error:
        assert_dark(error)
        return None


def assert_dark(error: BaseException) -> None:
    """No part of the canary, in either form, in anything that an error carries or prints."""
    assert error.__cause__ is None
    assert error.__context__ is None
    seen = "".join([str(error), repr(error), repr(error.args), repr(vars(error)), *traceback.format_exception(error)])
    text = encode_bytes(CANARY)
    shown = [i for i in range(0, len(text) - 8, 4) if text[i : i + 8] in seen]
    assert not shown, "some of the row is shown"
    assert "canary" not in seen


def replaced(data: bytes, **members: object) -> bytes:
    return json.dumps({**json.loads(data), **members}).encode()


def members_of(document: Document) -> dict[str, object]:
    """The members as a file would hold them."""
    return json.loads(document.to_file())


@pytest.mark.parametrize(("kind", "data"), BOTH)
def test_the_samples_parse(kind: type[Document], data: bytes) -> None:
    assert read(kind, data) is not None


# Texts that are no document.


def nested(levels: int, opening: str, closing: str) -> bytes:
    return (opening * levels + closing * levels).encode()


TEXTS = {
    "nothing": b"",
    "white space": b" \n",
    "a byte-order mark": b"\xef\xbb\xbf" + SHARE,
    "UTF-16": SHARE.decode().encode("utf-16"),
    "UTF-32": SHARE.decode().encode("utf-32"),
    "Latin 1": SHARE.replace(b"Tide", b"T\xecde"),
    "an overlong sequence": SHARE.replace(b"Tide", b"T\xc1\xa9de"),
    "a surrogate in UTF-8": SHARE.replace(b"Tide", b"T\xed\xa0\x80de"),
    "a lone surrogate, escaped": SHARE.replace(b"Tide", b"T\\ud800de"),
    "two low surrogates": SHARE.replace(b"Tide", b"T\\udc00\\udc00de"),
    "a zero byte": SHARE.replace(b"Tide", b"T\0de"),
    "a zero byte at the end": SHARE + b"\0",
    "a control character": SHARE.replace(b"Tide", b"T\tde"),
    "a control character, escaped": SHARE.replace(b"Tide", b"T\\tde"),
    "garbage after it": SHARE + b"x",
    "another document after it": SHARE + SHARE,
    "a comma after it": SHARE.rstrip() + b",",
    "a comment": SHARE.replace(b"{", b"{ // a comment\n", 1),
    "single quotes": SHARE.replace(b'"', b"'"),
    "a comma too many": SHARE.replace(b"\n}", b",\n}"),
    "cut short": SHARE[:-3],
    "a list": b"[" + SHARE + b"]",
    "text": b'"share"',
    "a number": b"1",
    "null": b"null",
    "a deep list": nested(100_000, "[", "]"),
    "a deep list, not closed": b"[" * 500_000,
    "deep objects": nested(100_000, '{"a":', "1}"),
    "a deep member": SHARE.replace(b'"notice"', b'"deep": ' + nested(5_000, "[", "]") + b', "notice"'),
    "not a number": SHARE.replace(b'"epoch": 1', b'"epoch": NaN'),
    "infinity": SHARE.replace(b'"epoch": 1', b'"epoch": Infinity'),
    "minus infinity": SHARE.replace(b'"epoch": 1', b'"epoch": -Infinity'),
    "a fraction": SHARE.replace(b'"epoch": 1', b'"epoch": 1.0'),
    "an exponent": SHARE.replace(b'"epoch": 1', b'"epoch": 1e0'),
    "a huge exponent": SHARE.replace(b'"epoch": 1', b'"epoch": 1e999999999'),
    "a huge number": SHARE.replace(b'"epoch": 1', b'"epoch": ' + b"9" * 100_000),
    "a negative number": SHARE.replace(b'"epoch": 1', b'"epoch": -1'),
    "minus zero": SHARE.replace(b'"epoch": 1', b'"epoch": -0'),
    "a leading zero": SHARE.replace(b'"epoch": 1', b'"epoch": 01'),
    "a leading plus": SHARE.replace(b'"epoch": 1', b'"epoch": +1'),
    "a number as text": SHARE.replace(b'"epoch": 1', b'"epoch": "1"'),
    "a member twice": SHARE.replace(b'"epoch": 1', b'"epoch": 1, "epoch": 1'),
    "a member twice, escaped once": SHARE.replace(b'"epoch": 1', b'"epoch": 1, "\\u0065poch": 1'),
    "rows twice": SHARE.replace(b'"label"', b'"rows": ["AAAA"], "label"'),
    "an unknown member": SHARE.replace(b'"epoch": 1', b'"epoch": 1, "colour": 1'),
    "an unknown member with the row in its name": SHARE.replace(
        b'"epoch": 1', b'"epoch": 1, "%s": 1' % encode_bytes(CANARY).encode()
    ),
    "a row where a text belongs": SHARE.replace(b'"kind": "share"', b'"kind": "%s"' % encode_bytes(CANARY).encode()),
}


@pytest.mark.parametrize("name", TEXTS)
@pytest.mark.parametrize("kind", [Share, Record])
def test_what_is_no_document_is_refused(kind: type[Document], name: str) -> None:
    assert TEXTS[name] != SHARE
    assert read(kind, TEXTS[name]) is None


def test_the_size_is_looked_at_before_anything_else() -> None:
    assert read(Share, SHARE.ljust(MAX_FILE)) is not None
    for filler in (b" ", b"\n", b"[", b"\xff"):
        with pytest.raises(DocumentError, match="larger than 1 MiB"):
            Share.parse(SHARE + filler * (MAX_FILE + 1 - len(SHARE)))


@pytest.mark.parametrize(("kind", "data"), BOTH)
def test_white_space_and_order_are_free(kind: type[Document], data: bytes) -> None:
    members = json.loads(data)
    for text in (
        json.dumps(members),
        json.dumps(members, indent=7),
        json.dumps(members, separators=(",", ":"), ensure_ascii=True),
        json.dumps(dict(reversed(members.items()))),
        "\r\n\t " + json.dumps(members) + " \t\r\n",
    ):
        document = read(kind, text.encode())
        assert document is not None
        assert members_of(document) == members


def test_escaped_or_not_a_text_is_the_same() -> None:
    share = Share.parse(replaced(SHARE, label="\U0001f512 Tid\u00e9"))
    escaped = Share.parse(replaced(SHARE, label="\U0001f512 Tid\u00e9").replace(b"Tid", b"\\u0054id"))
    plain = Share.parse(json.dumps({**json.loads(SHARE), "label": "\U0001f512 Tid\u00e9"}, ensure_ascii=False).encode())
    assert share.label == escaped.label == plain.label
    assert share._digest() == escaped._digest() == plain._digest()


# Versions and kinds.


@pytest.mark.parametrize(
    ("data", "reason"),
    [
        (RECORD, "a share is wanted here, but it is a record"),
        (replaced(SHARE, kind="sheet"), "does not say that it is one of"),
        (replaced(SHARE, kind=None), "does not say that it is one of"),
        (replaced(SHARE, kind=["share"]), "does not say that it is one of"),
        (replaced(SHARE, version=2), "of a version that this program does not know"),
        (replaced(SHARE, version=0), "of a version"),
        (replaced(SHARE, version="1"), "of a version"),
        (replaced(SHARE, version=True), "of a version"),
        (replaced(SHARE, version=None), "of a version"),
        (b"{}", "does not say that it is one of"),
    ],
)
def test_kind_and_version_are_told_before_all_else(data: bytes, reason: str) -> None:
    with pytest.raises(DocumentError, match=reason):
        Share.parse(data)


def test_an_unknown_version_is_told_even_where_its_members_are_others() -> None:
    with pytest.raises(DocumentError, match="of a version that this program does not know"):
        Share.parse(b'{"kind": "share", "version": 2, "points": []}')


# Mutations at random.


@st.composite
def mutated(draw: st.DrawFn) -> bytes:
    """A sample with bytes changed, cut out, put in, moved or cut off."""
    data = bytearray(draw(st.sampled_from([SHARE, RECORD])))
    for _ in range(draw(st.integers(1, 4))):
        at = draw(st.integers(0, len(data)))
        match draw(st.sampled_from(["set", "cut", "insert", "copy", "end"])):
            case "set" if at < len(data):
                data[at] = draw(st.integers(0, 255))
            case "cut":
                del data[at : at + draw(st.integers(1, 40))]
            case "insert":
                data[at:at] = draw(st.sampled_from(INSERTED) | st.binary(min_size=1, max_size=8))
            case "copy":
                start = draw(st.integers(0, len(data)))
                data[at:at] = data[start : start + draw(st.integers(1, 60))]
            case "end":
                del data[at:]
    return bytes(data)


INSERTED = (
    b'"',
    b"\\",
    b"{",
    b"}",
    b"[",
    b"]",
    b",",
    b":",
    b"null",
    b"-",
    b".5",
    b"e9",
    b"\\u0000",
    b"\\ud800",
    b"\xc3",
)


@given(mutated(), st.sampled_from([Share, Record]))
def test_a_mutated_file_is_a_document_or_a_document_error(data: bytes, kind: type[Document]) -> None:
    document = read(kind, data)
    if isinstance(document, Record):
        assert members_of(document) == json.loads(RECORD)
    elif isinstance(document, Share) and document.is_whole():
        assert members_of(document) == json.loads(SHARE)


JSON_VALUES = st.recursive(
    st.none() | st.booleans() | st.integers(-(2**70), 2**70) | st.floats() | st.text(max_size=8),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=6), inner, max_size=3),
    max_leaves=8,
)


@given(st.sampled_from(BOTH), st.data())
def test_any_value_in_place_of_a_member_is_read_as_it_stands_or_refused(both, data) -> None:
    kind, sample = both
    name = data.draw(st.sampled_from(sorted(json.loads(sample))))
    value = data.draw(JSON_VALUES)
    document = read(kind, replaced(sample, **{name: value}))
    if document is not None:
        assert members_of(document)[name] == value


@given(st.binary(max_size=40) | JSON_VALUES.map(lambda value: json.dumps(value).encode()))
@example(b"\xff\xfe{\0}\0")
@example(b'{"\\ud800": 1}')
def test_any_bytes_are_one_object_or_a_document_error(data: bytes) -> None:
    try:
        members = parse_object(data)
    except DocumentError as error:
        assert_dark(error)
    else:
        assert members == json.loads(data)


@pytest.mark.parametrize("number", ["NaN", "Infinity", "-Infinity", "1.0", "1e0", "1E5", "-1", "-0", "9" * 11])
def test_no_number_but_a_small_integer_is_read_wherever_it_stands(number: str) -> None:
    for text in (f'{{"a": {number}}}', f'{{"a": [{{"b": {number}}}]}}'):
        with pytest.raises(DocumentError, match="a number is"):
            parse_object(text.encode())
    assert parse_object(b'{"a": 4294967295}') == {"a": 2**32 - 1}


def test_nothing_is_logged_or_warned_about(caplog, capfd, recwarn) -> None:
    with caplog.at_level(logging.DEBUG):
        for data in TEXTS.values():
            read(Share, data)
    assert caplog.records == []
    assert capfd.readouterr() == ("", "")
    assert [str(warning.message) for warning in recwarn] == []


# Writing.


def test_a_file_is_indented_utf_8_with_one_newline_at_the_end() -> None:
    text = write_text({"a": ["\u00e9"], "b": None})
    assert text == '{\n  "a": [\n    "\u00e9"\n  ],\n  "b": null\n}\n'.encode()


def test_a_fingerprint_is_160_bits_in_8_groups() -> None:
    import hashlib

    members = {"b": 1, "a": "\u00e9"}
    whole = hashlib.sha256(b"shares/v1/fingerprintrecord" + '{"a":"\u00e9","b":1}'.encode()).digest()
    number = int.from_bytes(whole[:20], "big")
    letters = "".join("ABCDEFGHIJKLMNOPQRSTUVWXYZ234567"[number >> 5 * (31 - i) & 31] for i in range(32))
    assert fingerprint("record", members).replace("-", "") == letters
    assert [len(group) for group in fingerprint("record", members).split("-")] == [4] * 8


def test_a_document_cannot_be_changed_and_tells_no_row() -> None:
    share = Share.parse(SHARE)
    with pytest.raises(ValueError, match="frozen"):
        share.label = "another"
    for text in (str(share), repr(share), f"{share}", repr(share.rows), repr(share.points())):
        assert "<hidden>" in text
        assert encode_bytes(CANARY)[:8] not in text
        assert "canary" not in text


@pytest.mark.parametrize("place", [["version"], ["signatures", 0, "card", "version"]], ids=str)
def test_true_is_no_version(place: list[str | int]) -> None:
    """Python takes 1 and true to be equal, and JSON does not. Deep within a document it was once accepted."""
    golden = Path(__file__).parents[1] / "vectors" / "golden" / "v1" / "wrapped" / "record.json"
    members = json.loads(golden.read_text())
    Record.parse(json.dumps(members).encode())
    inner = members
    for step in place[:-1]:
        inner = inner[step]
    inner[place[-1]] = True
    with pytest.raises(DocumentError, match="version"):
        Record.parse(json.dumps(members).encode())
