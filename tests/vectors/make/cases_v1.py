"""Parts that the cases are made of: texts of documents, and faults of the members that several documents share.

Each document that is wrong in its form is sealed again where that can be done (digest or fingerprint set anew), so that
the fault named in its comment is the only one.

Source: shares/documents/FORMAT.md, section 1.
May import: the standard library, `dealer_v1`.
Secret: nothing.
Does not: say how a program words its refusal. The classes are: document (sections 1, 3, 4, 5); damaged, foreign set,
other epoch, not in the record, inconsistent dealing (sections 6, 7); and for a recovery: too few, never mix, wrong
share, faulty dealer (section 8).
"""

import json
from collections.abc import Callable
from typing import Any

from dealer_v1 import canonical, pretty, seal_record, seal_share

Document = dict[str, Any]
Test = dict[str, Any]


def note(bug: str, description: str, effect: str) -> dict[str, Any]:
    return {"bugType": bug, "description": description, "effect": effect, "links": []}


NOTES = {
    "Basic": note("BASIC", "A correct document or selection.", "a custodian's good share is turned away"),
    "Formatting": note("LEGACY", "Correct, but spaced, ordered or escaped otherwise.", "a good share is turned away"),
    "Json": note("MALFORMED", "Not one JSON object in UTF-8 with integers only.", "two readers see two documents"),
    "Members": note("MALFORMED", "A member missing, unknown, or given twice.", "two readers see two documents"),
    "Version": note("MALFORMED", "Another kind or version.", "bytes are given a meaning they were not written with"),
    "Header": note("MALFORMED", "A member of the header out of its form.", "one value has two encodings, or none"),
    "Name": note(
        "MALFORMED", "A custodian's name that the page forbids.", "names look alike, or steer a path or terminal"
    ),
    "Point": note(
        "EDGE_CASE", "x or k is 0 or above 255, or points coincide.", "the share is the secret, or a division by 0"
    ),
    "Row": note(
        "MALFORMED", "A row that is not canonical base64url, or of a wrong length.", "one share has many encodings"
    ),
    "Text": note("MALFORMED", "A label, rule, notice, record or digest out of its form.", "text steers a terminal"),
    "Damage": note("MODIFIED", "Altered after the digest was set: an accident.", "a wrong share is used"),
    "Forgery": note("MODIFIED", "Altered, and the digest set anew: on purpose.", "a wrong share is used"),
    "Belonging": note("MODIFIED", "Of another set, epoch or custodian.", "shares are mixed that never fit"),
    "Dealer": note("FUNCTIONALITY", "Dealt wrongly, and committed to as it is.", "recovery fails when it is needed"),
    "Record": note(
        "MALFORMED", "A record out of its form, or at odds with itself.", "shares are checked against nonsense"
    ),
    "Fingerprint": note(
        "MODIFIED", "Altered after the fingerprint was set.", "another record passes for the one read aloud"
    ),
    "Quorum": note("FUNCTIONALITY", "Too few shares for the rule.", "a wrong secret is given out"),
    "Wrong": note("FUNCTIONALITY", "Some shares are wrong, though their digests fit.", "a wrong secret is given out"),
}


def case(comment: str, flag: str, document: str | bytes, refusal: str | None, **more: Any) -> Test:
    body = {"document": document} if isinstance(document, str) else {"document_hex": document.hex()}
    return {
        "tcId": 0,
        "comment": comment,
        "flags": [flag],
        **body,
        **more,
        "result": "valid" if refusal is None else "invalid",
        **({} if refusal is None else {"refusal": refusal}),
    }


def without(document: Document, name: str) -> Document:
    return {member: value for member, value in document.items() if member != name}


ALPHABET = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789-_"


def flip(row: str, at: int = 5) -> str:
    """Flip the lowest bit of one character's value; away from the end, so that the text stays canonical."""
    at %= len(row)
    return row[:at] + ALPHABET[ALPHABET.index(row[at]) ^ 1] + row[at + 1 :]


def sealed_if_possible(share: Document) -> str:
    """Give the text of a share, its digest set anew unless its form forbids that."""
    try:
        return pretty(seal_share(share))
    except (TypeError, ValueError):
        return pretty(share)


def json_faults(document: Document, made_of: Callable[[Document], str]) -> list[Test]:
    """List what is wrong with any document, whatever its kind: section 1."""
    text = pretty(document)
    first = '  "version": 1,\n'
    last = list(document)[-1]
    faults: list[tuple[str, str, str | bytes]] = [
        ("an empty file", "Json", ""),
        ("null", "Json", "null\n"),
        ("a list around the object", "Json", f"[{text}]"),
        ("a list of the members as pairs", "Json", json.dumps([[k, v] for k, v in document.items()])),
        ("a string", "Json", json.dumps(text)),
        ("cut off in the middle", "Json", text[: len(text) // 2]),
        ("the closing brace missing", "Json", text.rstrip().removesuffix("}")),
        ("a word after the object", "Json", text + "end"),
        ("a second object after the first", "Json", text + text),
        ("a NUL byte after the object", "Json", text + "\0"),
        ("a no-break space after the object", "Json", text + "\u00a0"),
        ("a comma after the last member", "Json", text.rstrip().removesuffix("\n}") + ",\n}\n"),
        ("a comment", "Json", text.replace("{", "{ // a document\n", 1)),
        ("single quotation marks", "Json", text.replace('"', "'")),
        ("a byte-order mark", "Json", "\ufeff" + text),
        ("UTF-16", "Json", text.encode("utf-16-le")),
        ("a byte that is not UTF-8", "Json", text.encode().replace(b'"kind"', b'"k\xffind"')),
        ("a surrogate in UTF-8", "Json", text.encode().replace(b'"kind"', b'"k\xed\xa0\x80ind"')),
        ("version as a float", "Json", text.replace(first, '  "version": 1.0,\n')),
        ("version with an exponent", "Json", text.replace(first, '  "version": 1e0,\n')),
        ("version with a leading zero", "Json", text.replace(first, '  "version": 01,\n')),
        ("version as NaN", "Json", text.replace(first, '  "version": NaN,\n')),
        ("version as Infinity", "Json", text.replace(first, '  "version": Infinity,\n')),
        ("version with 5,000 digits", "Json", text.replace(first, '  "version": 1' + 4999 * "0" + ",\n")),
        ("3,000 lists, one in another", "Json", text.replace(first, '  "version": ' + 3000 * "[" + 3000 * "]" + ",\n")),
        ("version given twice", "Members", text.replace(first, first + first)),
        ("version given twice, once in escapes", "Members", text.replace(first, first + '  "\\u0076ersion": 1,\n')),
        ("an unknown member", "Members", pretty({**document, "remark": None})),
        ("an unknown member of no name", "Members", pretty({**document, "": None})),
        (
            "the last member's name in capitals",
            "Members",
            pretty({**without(document, last), last.upper(): document[last]}),
        ),
        ("no members", "Members", "{}\n"),
        ("version 0", "Version", made_of({**document, "version": 0})),
        ("version 2", "Version", made_of({**document, "version": 2})),
        ("version as a string", "Version", made_of({**document, "version": "1"})),
        ("version true", "Version", made_of({**document, "version": True})),
        ("kind null", "Version", made_of({**document, "kind": None})),
        ("kind in capitals", "Version", made_of({**document, "kind": document["kind"].upper()})),
        ("kind unknown", "Version", made_of({**document, "kind": "practice"})),
    ]
    faults += [(f"no member {name}", "Members", pretty(without(document, name))) for name in document]
    tests = [case(comment, flag, body, "document") for comment, flag, body in faults]
    return [
        *tests,
        case("followed by spaces up to a length of 1 MiB and a byte", "Json", text, "document", pad_to=2**20 + 1),
        case("followed by spaces up to a length of 1 MiB", "Formatting", text, None, pad_to=2**20),
    ]


def formatting(document: Document) -> list[Test]:
    """List other texts of the same document, all correct: section 1."""
    backwards = {name: document[name] for name in reversed(document)}
    escaped = pretty(document).replace('"kind"', '"\\u006bind"').replace('"label"', '"\\u006C\\u0061bel"')
    return [
        case("as a program writes it", "Basic", pretty(document), None),
        case("without white space", "Formatting", canonical(document).decode(), None),
        case("members in the opposite order", "Formatting", pretty(backwards), None),
        case(
            "white space before, after and between",
            "Formatting",
            f" \t\r\n{json.dumps(document, indent=9)}\r\n\t ",
            None,
        ),
        case("letters of member names as escapes", "Formatting", escaped, None),
        case("no newline at the end", "Formatting", pretty(document).rstrip(), None),
    ]


def sealed(share: Document) -> str:
    """Give the text of a share with its digest set anew."""
    return pretty(seal_share(share))


def sealed_record(record: Document) -> str:
    """Give the text of a record with its fingerprint set anew, its signatures as they are."""
    return pretty({**seal_record(record), "signatures": record["signatures"]})


NAMES = {
    "empty": "",
    "65 characters": 65 * "n",
    "64 characters of 4 bytes each, 256 bytes": 64 * "\U0001f512",
    "an oblique": "pier/north",
    "a backslash": "pier\\north",
    "a leading dot": ".pier",
    "two dots": "..",
    "a leading hyphen": "-pier",
    "a leading space": " pier",
    "a space at the end": "pier ",
    "two spaces inside": "north  pier",
    "a tab": "north\tpier",
    "a newline": "north\npier",
    "NUL": "north\0pier",
    "DEL": "north\x7fpier",
    "a C1 control": "north\x9bpier",
    "a no-break space": "north\u00a0pier",
    "a line separator": "north\u2028pier",
    "an ideographic space": "north\u3000pier",
    "a zero-width joiner": "north\u200dpier",
    "a right-to-left override": "north\u202epier",
    "a soft hyphen": "north\u00adpier",
    "a byte-order mark": "north\ufeffpier",
    "a private character": "north\ue000pier",
    "a noncharacter, never assigned": "north\ufdd0pier",
    "not in NFC": "cha\u0302telet",
    "an ohm sign, which NFC replaces": "\u2126",
}
GOOD_NAMES = {
    "one character": "n",
    "64 characters": 64 * "n",
    "50 characters of 4 bytes each, 200 bytes": 50 * "\U0001f512",
    "dots and hyphens inside and last": "n.o-r..t--h.-",
    "punctuation of JSON and shells": "\"n\" {o} $(r) 'th' & #; *?",
    "single spaces inside": "the north pier",
    "letters without case": "\u6e2f\u53e3",
    "a combining mark that NFC keeps": "q\u0307",
}
GOOD_TEXTS = {
    "one character": "t",
    "a space": " ",
    "500 characters of 4 bytes each": 500 * "\U0001f512",
    "not in NFC": "cha\u0302telet",
    "characters that other encoders of JSON escape": "</script> \u2028 \u2029 & ' / \\ \"",
    "format characters": "\u200d \ufeff \u202e",
}
TEXTS = {
    "empty": "",
    "a newline": "one\ntwo",
    "a tab": "one\ttwo",
    "an escape sequence": "\x1b[2J",
    "DEL": "one\x7ftwo",
    "a C1 control": "one\x85two",
}


def text_faults(name: str, longest: int, *, nullable: bool) -> list[tuple[str, str, Document]]:
    """List faults of a member that holds text."""
    faults = {**TEXTS, "one character too long": (longest + 1) * "n"}
    cases = [(f"{name}: {comment}", "Text", {name: value}) for comment, value in faults.items()]
    cases += [(f"{name}: a number", "Text", {name: 1}), (f"{name}: a list", "Text", {name: ["text"]})]
    return cases if nullable else [*cases, (f"{name}: null", "Text", {name: None})]


def hex_faults(
    name: str, length: int, *, nullable: bool = False, flag: str = "Header"
) -> list[tuple[str, str, Document]]:
    """List faults of a member that holds bytes in hex."""
    good = (length * "0a1b2c3d4e5f6978")[: 2 * length]
    faults: dict[str, Any] = {
        "empty": "",
        "a digit too few": good[:-1],
        "a byte too few": good[:-2],
        "a byte too many": good + "00",
        "in capitals": good.upper(),
        "led by 0x": "0x" + good[2:],
        "with a space": good[:2] + " " + good[3:],
        "with a newline at the end": good + "\n",
        "with a letter that is no digit": good[:-1] + "g",
        "with digits of another script": good[:-1] + "\u0661",
        "a number": 10,
    }
    cases = [(f"{name}: {comment}", flag, {name: value}) for comment, value in faults.items()]
    return cases if nullable else [*cases, (f"{name}: null", flag, {name: None})]


FIELDS = {
    "in capitals": "0x11B",
    "without 0x": "11b",
    "decimal": "283",
    "a number": 283,
    "x^8, reducible": "0x100",
    "(x + 1)(x^7 + ...), reducible": "0x11a",
    "the square of x^4 + x + 1, reducible": "0x105",
    "of degree 7": "0x0b7",
    "of degree 9": "0x211",
    "with a zero in front": "0x011b",
    "null": None,
}
EPOCHS = {"0": 0, "-1": -1, "2^32": 2**32, "2^64": 2**64, "true": True, "a string": "1", "null": None}
FINGERPRINTS = {
    "in small letters": "abcd-" * 7 + "abcd",
    "without hyphens": 8 * "ABCD",
    "7 groups": "ABCD-" * 6 + "ABCD",
    "9 groups": "ABCD-" * 8 + "ABCD",
    "a digit that is not of the alphabet": "ABC1-" + "ABCD-" * 6 + "ABCD",
    "padded": "ABCD-" * 7 + "ABC=",
    "in hex": 40 * "a",
    "empty": "",
    "a number": 1,
}


def header_faults(fields: dict[str, Any], epochs: dict[str, Any]) -> list[tuple[str, str, Document]]:
    """List faults of the members that shares and records have in common."""
    return [
        *hex_faults("set", 16),
        *hex_faults("secret_commitment", 32),
        *hex_faults("encrypted_file", 32, nullable=True),
        *((f"field: {comment}", "Header", {"field": value}) for comment, value in fields.items()),
        *((f"epoch: {comment}", "Header", {"epoch": value}) for comment, value in epochs.items()),
    ]


def other_hex(text: str) -> str:
    """Change the first hex digit."""
    return ("1" if text[0] == "0" else "0") + text[1:]
