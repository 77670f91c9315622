"""Shares that must be refused beside those that must not, each with the record that it is verified against.

Source: shares/documents/FORMAT.md, sections 1, 4, 6, 7.
May import: the standard library, `dealer_v1`, `cases_v1`.
Secret: nothing.
Does not: cover recovery (`recovery_cases_v1`).
"""

import copy
from collections.abc import Callable
from dataclasses import replace
from typing import Any

from cases_v1 import (
    ALPHABET,
    EPOCHS,
    FIELDS,
    FINGERPRINTS,
    GOOD_TEXTS,
    NAMES,
    Document,
    Test,
    case,
    flip,
    formatting,
    header_faults,
    hex_faults,
    json_faults,
    other_hex,
    sealed,
    sealed_if_possible,
    text_faults,
)
from dealer_v1 import Dealing, b64, deal, pretty, renew


def share_faults(share: Document) -> list[Test]:
    """List shares out of the form of section 4, sealed again."""
    path, row = share["paths"][0], share["rows"][0]
    length = len(row) * 6 // 8
    other = b64(bytes(length))
    paths: dict[str, Any] = {
        "none": [],
        "one that is empty": [[]],
        "x = 0": [[[path[0][0], 0]]],
        "x = 256": [[[path[0][0], 256]]],
        "x = -1": [[[path[0][0], -1]]],
        "k = 0": [[[0, path[0][1]]]],
        "k = 256": [[[256, path[0][1]]]],
        "x as a string": [[[path[0][0], "1"]]],
        "x true": [[[path[0][0], True]]],
        "x null": [[[path[0][0], None]]],
        "a step of one number": [[[path[0][0]]]],
        "a step of three numbers": [[[*path[0], 1]]],
        "a step too few lists deep": [path[0]],
        "a step as an object": [[{"k": path[0][0], "x": path[0][1]}]],
        "9 steps": [9 * [path[0]]],
        "a string": "1",
        "null": None,
        "one more than rows": [path, [[path[0][0], 200]]],
    }
    pairs: dict[str, Any] = {
        "the same path twice": [path, path],
        "the same x twice at one node, deeper and not": [path, [*path, [1, 1]]],
        "a path that begins an earlier one": [[*path, [2, 1]], path],
    }
    rows: dict[str, Any] = {
        "padded": row + "=" * (-len(row) % 4 or 4),
        "with + of the other alphabet": row[:3] + "+" + row[4:],
        "with / of the other alphabet": row[:3] + "/" + row[4:],
        "with a newline inside": row[:8] + "\n" + row[8:],
        "with a space at the end": row + " ",
        "with a character too few": row[:-1],
        "with a character too many": row + "A",
        "52 bytes": b64(bytes(52)),
        "empty": "",
        "a number": 1,
        "null": None,
    }
    cases: list[tuple[str, str, Document]] = [
        *header_faults(FIELDS, EPOCHS),
        *((f"custodian: {comment}", "Name", {"custodian": value}) for comment, value in NAMES.items()),
        ("custodian: null", "Name", {"custodian": None}),
        *((f"paths: {comment}", "Point", {"paths": value}) for comment, value in paths.items()),
        *((f"paths: {comment}", "Point", {"paths": value, "rows": [row, other]}) for comment, value in pairs.items()),
        *((f"a row {comment}", "Row", {"rows": [value]}) for comment, value in rows.items()),
        ("rows: none", "Row", {"rows": []}),
        ("rows: a string", "Row", {"rows": row}),
        ("rows: null", "Row", {"rows": None}),
        ("rows: two for one path", "Row", {"rows": [row, other]}),
        ("rows: of two lengths", "Row", {"paths": [path, [[path[0][0], 200]]], "rows": [row, b64(bytes(length + 16))]}),
        *text_faults("label", 500, nullable=True),
        *text_faults("rule", 65536, nullable=True),
        *text_faults("notice", 500, nullable=True),
        *((f"record: {comment}", "Text", {"record": value}) for comment, value in FINGERPRINTS.items()),
    ]
    tests = [
        case(comment, flag, sealed_if_possible({**share, **change}), "document") for comment, flag, change in cases
    ]
    surrogate = pretty(share).replace('"label": "', '"label": "\\ud800')
    tests += [case("label: half a surrogate pair", "Text", surrogate, "document")]
    surrogate = pretty(share).replace('"custodian": "', '"custodian": "\\udc00')
    tests += [case("custodian: half a surrogate pair", "Name", surrogate, "document")]
    digests = hex_faults("digest", 32, flag="Text")
    return tests + [case(comment, flag, pretty({**share, **change}), "document") for comment, flag, change in digests]


def belonging(dealing: Dealing, name: str, others: list[tuple[str, Dealing]]) -> list[Test]:
    """List well-formed shares that are not the one of this record: section 7, steps 2 to 6."""
    share, row = dealing.shares[name], dealing.shares[name]["rows"][0]
    second = next(n for n in dealing.shares if n != name)
    later = renew(dealing)
    kept_rows = {**share, "rows": [flip(row), *share["rows"][1:]]}
    moved = copy.deepcopy(share["paths"])
    moved[0][-1][1] += 100
    free: list[Document] = [
        {"label": None, "rule": None, "notice": None, "record": None},
        {"label": None},
        {"notice": "Another notice."},
        *({"label": text, "rule": text, "notice": text} for text in GOOD_TEXTS.values()),
    ]
    altered: dict[str, Document] = {
        "a bit of the first row": {"rows": kept_rows["rows"]},
        "the last bit of the last row": {"rows": [*share["rows"][:-1], flip(share["rows"][-1], -1)]},
        "the label": {"label": "Tide archive backup rood"},
        "the rule in words": {"rule": share["rule"].replace("2 of", "1 of").replace("3 of", "2 of")},
        "the notice": {"notice": None},
        "the record": {"record": None},
        "the epoch": {"epoch": 2},
        "the set": {"set": other_hex(share["set"])},
        "the custodian": {"custodian": second},
        "the field": {"field": "0x11d"},
        "an x": {"paths": moved},
        "the secret commitment": {"secret_commitment": other_hex(share["secret_commitment"])},
        "the encrypted file": {"encrypted_file": 64 * "0"},
        "the digest": {"digest": other_hex(share["digest"])},
    }
    forged: dict[str, tuple[Document, str]] = {
        "a bit of the first row": ({"rows": kept_rows["rows"]}, "damaged"),
        "the field": ({"field": "0x11d"}, "damaged"),
        "an x": ({"paths": moved}, "damaged"),
        "the secret commitment": ({"secret_commitment": other_hex(share["secret_commitment"])}, "damaged"),
        "the encrypted file": ({"encrypted_file": 64 * "0"}, "damaged"),
        "the custodian, to another of the set": ({"custodian": second}, "damaged"),
        "the custodian, to one who is not of the set": ({"custodian": "dry-dock"}, "not in the record"),
        "the set": ({"set": other_hex(share["set"])}, "foreign set"),
        "the set and the epoch": ({"set": other_hex(share["set"]), "epoch": 2}, "foreign set"),
        "the epoch": ({"epoch": 2}, "other epoch"),
        "the epoch, and the custodian to one who is not of the set": (
            {"epoch": 2, "custodian": "dry-dock"},
            "other epoch",
        ),
        "the record": ({"record": later.record["fingerprint"]}, "inconsistent dealing"),
    }
    tests = [case(f"other texts, {i}", "Basic", sealed({**share, **c}), None) for i, c in enumerate(free, 1)]
    tests += [case(f"altered: {what}", "Damage", pretty({**share, **c}), "damaged") for what, c in altered.items()]
    tests += [case(f"altered, sealed anew: {w}", "Forgery", sealed({**share, **c}), r) for w, (c, r) in forged.items()]
    next_one = later.shares[name]
    tests += [
        case("the same custodian's share of the next epoch", "Belonging", pretty(next_one), "other epoch"),
        case(
            "the next epoch's row under this epoch's number",
            "Forgery",
            sealed({**next_one, "epoch": 1, "record": share["record"]}),
            "damaged",
        ),
    ]
    return tests + [
        case(f"a share of {what}", "Belonging", pretty(other.shares[next(iter(other.shares))]), "foreign set")
        for what, other in others
    ]


def faulty_dealings(dealing: Dealing) -> list[tuple[str, Dealing, dict[str, str | None]]]:
    """List dealers' faults: what is wrong, the dealing, and the refusal for each custodian's share (null: accepted)."""
    plan = dealing.plan
    names = list(dealing.shares)
    victim = names[1]
    every, none = dict.fromkeys(names, "inconsistent dealing"), dict.fromkeys(names)

    def flip_row(rows: dict[str, list[bytes]], at: int) -> None:
        row = bytearray(rows[victim][0])
        row[at] ^= 1
        rows[victim][0] = bytes(row)

    def swap(rows: dict[str, list[bytes]]) -> None:
        rows[names[0]], rows[victim] = rows[victim], rows[names[0]]

    def lie(header: Document) -> None:
        if header["custodian"] == victim:
            header["paths"][0][-1][1] += 100

    def set_in(name: str, value: Any) -> Callable[[Document], None]:
        def change(document: Document) -> None:
            document[name] = value(document[name]) if callable(value) else value

        return change

    def only_victim(name: str, value: Any) -> Callable[[Document], None]:
        def change(header: Document) -> None:
            if header["custodian"] == victim:
                header[name] = value

        return change

    def shift_check(record: Document) -> None:
        record["checks"][0][-1] = flip(record["checks"][0][-1], 0)

    one, two = (
        {**none, victim: "inconsistent dealing"},
        {**none, victim: "inconsistent dealing", names[0]: "inconsistent dealing"},
    )
    faults: list[tuple[str, dict[str, Any], dict[str, str | None]]] = [
        ("a row off the polynomial, in its first bit", {"spoil_rows": lambda rows: flip_row(rows, 0)}, one),
        ("a row off the polynomial, in its mask", {"spoil_rows": lambda rows: flip_row(rows, -1)}, one),
        ("two custodians' rows exchanged", {"spoil_rows": swap}, two),
        ("polynomials of a degree too high", {"raise_degree": 1}, every),
        ("a wrong check in the record", {"spoil_record": shift_check}, every),
        ("one custodian's x not the one of the rule", {"spoil_header": lie}, one),
        ("one custodian's field not the record's", {"spoil_header": only_victim("field", "0x11d")}, one),
        (
            "one custodian's secret commitment not the record's",
            {"spoil_header": only_victim("secret_commitment", 64 * "0")},
            one,
        ),
        (
            "one custodian's encrypted file not the record's",
            {"spoil_header": only_victim("encrypted_file", 64 * "0")},
            one,
        ),
        ("a field in the record that no share has", {"spoil_record": set_in("field", "0x11d")}, every),
        (
            "a row length in the record that no share has",
            {"spoil_record": set_in("row_length", lambda n: n + 16)},
            every,
        ),
    ]
    return [(what, deal(replace(plan, name=f"{plan.name}, {what}", **how)), verdicts) for what, how, verdicts in faults]


def shares(flat: Dealing, tree: Dealing, short: Dealing) -> list[Document]:
    """Make the groups of share_v1.json: each with a record, and shares to verify against it."""

    def group(section: str, about: str, dealing: Dealing, tests: list[Test]) -> Document:
        return {"section": section, "about": about, "record": pretty(dealing.record), "tests": tests}

    pier, house, odd = flat.shares["north-pier"], tree.shares["light-house"], short.shares["north-pier"]
    row = odd["rows"][0]
    unused = row[:-1] + ALPHABET[ALPHABET.index(row[-1]) + 1]
    groups = [
        group("1", "the file", flat, [*formatting(pier), *json_faults(pier, sealed)]),
        group("4", "the members", flat, share_faults(pier)),
        group(
            "1",
            "a row whose last character is not full",
            short,
            [
                case("canonical", "Basic", sealed(odd), None),
                case("unused bits not zero", "Row", sealed({**odd, "rows": [unused]}), "document"),
                case("padded", "Row", sealed({**odd, "rows": [row + "=="]}), "document"),
            ],
        ),
        group(
            "7", "belonging to a flat set", flat, belonging(flat, "north-pier", [("a tree", tree), ("1 byte", short)])
        ),
        group(
            "7",
            "belonging to a tree",
            tree,
            [*formatting(house), *belonging(tree, "light-house", [("a flat set", flat)])],
        ),
        group("7", "paths of a tree", tree, _path_forgeries(house)),
    ]
    for what, dealing, verdicts in faulty_dealings(flat):
        tests = [case(name, "Dealer", pretty(dealing.shares[name]), verdicts[name]) for name in dealing.shares]
        groups.append(group("6, 7", f"faulty dealer: {what}", dealing, tests))
    for group_of in groups:
        for test in group_of["tests"]:
            if test["result"] == "valid" and test["flags"] == ["Dealer"]:
                test["flags"] = ["Basic"]
    return groups


def _path_forgeries(share: Document) -> list[Test]:
    """List shares with two points, their points dropped, exchanged or doubled, sealed anew."""
    (first, second), (one, two) = share["paths"], share["rows"]
    cases: dict[str, tuple[list[Any], list[str], str]] = {
        "only the first point": ([first], [one], "damaged"),
        "only the second point": ([second], [two], "damaged"),
        "both points in the other order": ([second, first], [two, one], "damaged"),
        "the rows exchanged": ([first, second], [two, one], "damaged"),
        "the first point twice": ([first, first], [one, one], "document"),
        "a point above the first": ([first[:-1], second], [one, two], "damaged"),
        "a point above the first, and the first": ([first[:-1], first], [one, one], "document"),
    }
    return [
        case(what, "Point" if refusal == "document" else "Forgery", sealed({**share, "paths": p, "rows": r}), refusal)
        for what, (p, r, refusal) in cases.items()
    ]
