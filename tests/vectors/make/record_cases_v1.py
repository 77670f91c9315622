"""Records that must be refused beside those that must not.

Source: shares/documents/FORMAT.md, sections 1, 3, 5, 6.
May import: the standard library, `dealer_v1`, `cases_v1`.
Secret: nothing.
Does not: hold signed records: version 1 does not say yet what a signature looks like.
"""

import copy
from typing import Any

from cases_v1 import (
    ALPHABET,
    EPOCHS,
    FIELDS,
    FINGERPRINTS,
    GOOD_NAMES,
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
    sealed_record,
    text_faults,
    without,
)
from dealer_v1 import Dealing, b64, pretty


def _with(record: Document, *path: Any, value: Any) -> Document:
    """Give a copy of a record with one value, however deep, replaced."""
    changed = copy.deepcopy(record)
    inner = changed
    for step in path[:-1]:
        inner = inner[step]
    inner[path[-1]] = value
    return changed


def record_faults(flat: Document, tree: Document) -> list[Test]:
    """List records out of the form of sections 3 and 5, their fingerprints set anew."""
    names = list(flat["rule"]["from"])
    c_0 = flat["checks"][0][0]

    def renamed(name: str) -> Document:
        return _with(_with(flat, "custodians", 0, "name", value=name), "rule", "from", 0, value=name)

    def alone(rule: Document, nodes: int) -> Document:
        """Give a record in which each node needs one, and all are north-pier: so every check is the same, and fits."""
        return {**flat, "rule": rule, "custodians": flat["custodians"][:1], "checks": nodes * [[c_0]]}

    def deep(depth: int) -> Document:
        return {"need": 1, "from": [deep(depth - 1) if depth > 1 else "north-pier"]}

    def places(count: int) -> Document:
        return {"need": 1, "from": [{"need": 1, "from": n * ["north-pier"]} for n in (250, 250, 250, count - 750)]}

    times: dict[str, Any] = {
        "with a fraction": "2026-01-05T09:00:00.0Z",
        "without seconds": "2026-01-05T09:00Z",
        "with an offset": "2026-01-05T09:00:00+00:00",
        "in small letters": "2026-01-05t09:00:00z",
        "with a space": "2026-01-05 09:00:00Z",
        "without Z": "2026-01-05T09:00:00",
        "on 30 February": "2026-02-30T09:00:00Z",
        "at 24 hours": "2026-01-05T24:00:00Z",
        "a number": 1767603600,
        "null": None,
    }
    rules: dict[str, Any] = {
        "a name": "north-pier",
        "null": None,
        "need -1": {"need": -1, "from": names},
        "need true": {"need": True, "from": names},
        "need as a string": {"need": "3", "from": names},
        "a child null": {"need": 3, "from": [*names[:4], None]},
        "a child empty": {"need": 3, "from": [*names[:4], ""]},
        "a child as a list": {"need": 3, "from": [*names[:4], [names[4]]]},
        "an unknown member": {"need": 3, "from": names, "of": 5},
        "no member need": {"from": names},
        "no member from": {"need": 3},
        "a name that no custodian bears": {"need": 3, "from": [*names[:4], "dry-dock"]},
        "a custodian who does not stand in it": {"need": 3, "from": names[:4]},
    }
    custodians, checks = flat["custodians"], flat["checks"]
    twins = copy.deepcopy(custodians)
    twins[1]["name"] = "NORTH-PIER"
    keys: dict[str, Any] = {
        "in hex": 64 * "0",
        "31 bytes": b64(bytes(31)),
        "33 bytes": b64(bytes(33)),
        "padded": b64(bytes(32)) + "=",
    }
    values: dict[str, Any] = {
        "15 bytes": b64(bytes(15)),
        "17 bytes": b64(bytes(17)),
        "padded": c_0 + "==",
        "null": None,
    }
    values["with unused bits not zero"] = c_0[:-1] + ALPHABET[ALPHABET.index(c_0[-1]) + 1]
    cases: list[tuple[str, Document]] = [
        *((comment, {**flat, **change}) for comment, _, change in header_faults(FIELDS, EPOCHS)),
        *((comment, {**flat, **change}) for comment, _, change in text_faults("label", 500, nullable=False)),
        *((f"created {comment}", {**flat, "created": value}) for comment, value in times.items()),
        *((f"row_length: {n}", {**flat, "row_length": n}) for n in (0, -96, 52, 131073, True, "96", None)),
        *((f"rule: {comment}", {**flat, "rule": value}) for comment, value in rules.items()),
        ("rule: need 0", {**flat, "rule": {"need": 0, "from": names}, "checks": [[]]}),
        (
            "rule: need above the number of children",
            {**flat, "rule": {"need": 6, "from": names}, "checks": [6 * [c_0]]},
        ),
        ("rule: no children", {**flat, "rule": {"need": 1, "from": []}, "custodians": [], "checks": [[c_0]]}),
        ("rule: 256 children", alone({"need": 1, "from": 256 * ["north-pier"]}, 1)),
        ("rule: 9 nodes deep", alone(deep(9), 9)),
        ("rule: 1,001 names", alone(places(1001), 5)),
        *((f"name: {comment}", renamed(name)) for comment, name in NAMES.items()),
        ("custodians: none", {**flat, "custodians": []}),
        ("custodians: one missing", {**flat, "custodians": custodians[:-1]}),
        ("custodians: one twice", {**flat, "custodians": [*custodians, custodians[0]]}),
        ("custodians: in another order", {**flat, "custodians": custodians[::-1]}),
        ("custodians: null", {**flat, "custodians": None}),
        (
            "custodians: two names equal but for their case",
            {**flat, "custodians": twins, "rule": {"need": 3, "from": [c["name"] for c in twins]}},
        ),
        ("custodians: an unknown member", _with(flat, "custodians", 0, "person", value="a keeper")),
        ("custodians: a member missing", _with(flat, "custodians", 0, value=without(custodians[0], "attestation_key"))),
        *(
            (
                f"share_commitment{comment.removeprefix('digest')}",
                _with(flat, "custodians", 0, "share_commitment", value=c["digest"]),
            )
            for comment, _, c in hex_faults("digest", 32)
        ),
        *((f"attestation_key {c}", _with(flat, "custodians", 0, "attestation_key", value=v)) for c, v in keys.items()),
        ("checks: none", {**flat, "checks": []}),
        ("checks: one node too many", {**flat, "checks": [*checks, checks[0]]}),
        ("checks: one node too few", {**tree, "checks": tree["checks"][:-1]}),
        ("checks: one value too few", _with(flat, "checks", 0, value=checks[0][:-1])),
        ("checks: one value too many", _with(flat, "checks", 0, value=[*checks[0], c_0])),
        ("checks: nodes in another order", {**tree, "checks": tree["checks"][::-1]}),
        *((f"a check {comment}", _with(flat, "checks", 0, 0, value=value)) for comment, value in values.items()),
        *((comment, {**flat, **change}) for comment, _, change in hex_faults("policy", 32, nullable=True)),
        *((f"previous: {comment}", {**flat, "previous": value}) for comment, value in FINGERPRINTS.items()),
        ("signatures: null", {**flat, "signatures": None}),
        (
            "signatures: one that nobody can check",
            {**flat, "signatures": [{"party": "dealer", "signature": b64(bytes(64))}]},
        ),
        ("signatures: a null", {**flat, "signatures": [None]}),
    ]
    tests = [case(comment, "Record", sealed_record(record), "document") for comment, record in cases]
    forms = [
        case(f"fingerprint: {c}", "Record", pretty({**flat, "fingerprint": v}), "document")
        for c, v in FINGERPRINTS.items()
    ]
    forms.append(case("fingerprint: null", "Record", pretty({**flat, "fingerprint": None}), "document"))
    edges = [
        ("rule: 255 children", alone({"need": 1, "from": 255 * ["north-pier"]}, 1)),
        ("rule: 8 nodes deep", alone(deep(8), 8)),
        ("rule: 1,000 names", alone(places(1000), 5)),
        *((f"name: {comment}", renamed(name)) for comment, name in GOOD_NAMES.items()),
        *((f"label: {comment}", {**flat, "label": label}) for comment, label in GOOD_TEXTS.items()),
        ("epoch: 2^32 - 1", {**flat, "epoch": 2**32 - 1}),
        ("field: the last of the 30", {**flat, "field": "0x1f9"}),
        ("created on 29 February", {**flat, "created": "2028-02-29T23:59:59Z"}),
    ]
    return tests + forms + [case(comment, "Basic", sealed_record(record), None) for comment, record in edges]


def records(flat: Dealing, tree: Dealing, wide: Dealing) -> list[Document]:
    """Make the groups of record_v1.json."""
    altered: dict[str, Document] = {
        "the label": {"label": "Tide archive backup rood"},
        "the time": {"created": "2026-01-05T09:00:01Z"},
        "a check": {"checks": [[flip(flat.record["checks"][0][0], 0), *flat.record["checks"][0][1:]]]},
        "the fingerprint": {"fingerprint": wide.record["fingerprint"]},
        "a commitment": {
            "custodians": [
                {**flat.record["custodians"][0], "share_commitment": 64 * "0"},
                *flat.record["custodians"][1:],
            ]
        },
    }
    at_odds = []
    for node in (1, 2):
        checks = copy.deepcopy(tree.record["checks"])
        checks[node][0] = flip(checks[node][0], 0)
        at_odds.append(
            (f"c_0 of inner node {node} is not its parent's check at its x", {**tree.record, "checks": checks})
        )
    checks = copy.deepcopy(tree.record["checks"])
    checks[0][1] = flip(checks[0][1], 0)
    at_odds.append(("c_1 of the root changed", {**tree.record, "checks": checks}))
    return [
        {
            "section": "1, 5",
            "about": "the file and its members",
            "tests": [
                *formatting(flat.record),
                *formatting(tree.record),
                *formatting(wide.record),
                *json_faults(flat.record, sealed_record),
                *record_faults(flat.record, tree.record),
            ],
        },
        {
            "section": "1, 6",
            "about": "the fingerprint, and the checks among each other",
            "tests": [
                *(
                    case(f"altered: {what}", "Fingerprint", pretty({**flat.record, **c}), "damaged")
                    for what, c in altered.items()
                ),
                *(case(what, "Record", sealed_record(record), "inconsistent dealing") for what, record in at_odds),
            ],
        },
    ]
