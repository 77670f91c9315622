"""Records: read strictly, refused where they contradict themselves.

Checked against: FORMAT.md, sections 1 and 5. A record that was bent here gets a fingerprint that fits again, so that
the rule under test is the one that refuses it.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import pytest
from strategies import CREATED, bits_flipped, crooked_split, flat

from shares.documents.base import fingerprint
from shares.documents.record import Record
from shares.errors import DocumentError
from shares.sharing.rule import Rule

TREE = Rule(2, (Rule(2, ("north-pier", "south-pier", "light-house")), "registrar", "dry-dock", "registrar"))


@pytest.fixture(scope="module")
def record() -> Record:
    return crooked_split(b"made up", TREE).record


def file_of(members: dict[str, Any]) -> bytes:
    """The file of a record whose fingerprint fits whatever the other members are."""
    counted = {name: value for name, value in members.items() if name not in ("fingerprint", "signatures")}
    return json.dumps({**members, "fingerprint": fingerprint("record", counted)}).encode()


def test_a_record_comes_back_from_its_file(record: Record) -> None:
    again = Record.parse(record.to_file())
    assert again.model_dump(mode="json") == record.model_dump(mode="json")
    assert again.to_file() == record.to_file()
    assert again.rule.to_rule() == TREE
    assert again.created == CREATED
    assert again.check_matrix() == record.check_matrix()


def test_the_fingerprint_is_over_everything_but_itself_and_the_signatures(record: Record) -> None:
    members = json.loads(record.to_file())
    assert json.loads(file_of(members)) == members
    for name in members:
        if name not in ("fingerprint", "signatures"):
            fewer = {
                other: value for other, value in members.items() if other not in (name, "fingerprint", "signatures")
            }
            assert fingerprint("record", fewer) != record.fingerprint


def members_in_order(record: Record) -> list[str]:
    return list(json.loads(record.to_file()))


def test_kind_and_version_stand_first(record: Record) -> None:
    assert members_in_order(record)[:2] == ["kind", "version"]


def test_every_flipped_bit_of_a_small_record_is_refused() -> None:
    """The fingerprint covers every value, and there is nothing else in the file that a flipped bit leaves valid."""
    small = crooked_split(b"x", flat(1, 2)).record.to_file()
    for _, changed in bits_flipped(small):
        with pytest.raises(DocumentError):
            Record.parse(changed)


Bend = Callable[[dict[str, Any]], None]


def swap(name: str, i: int, j: int) -> Bend:
    def bend(members: dict[str, Any]) -> None:
        members[name][i], members[name][j] = members[name][j], members[name][i]

    return bend


def setting(*path: Any, to: Any) -> Bend:
    def bend(members: dict[str, Any]) -> None:
        inner = members
        for step in path[:-1]:
            inner = inner[step]
        inner[path[-1]] = to

    return bend


def without(*path: Any) -> Bend:
    def bend(members: dict[str, Any]) -> None:
        inner = members
        for step in path[:-1]:
            inner = inner[step]
        del inner[path[-1]]

    return bend


CHECK = "A" * 22

REFUSED: dict[str, tuple[Bend, str]] = {
    "a custodian missing": (without("custodians", 0), "custodians are not those of its rule"),
    "custodians in another order": (swap("custodians", 0, 1), "custodians are not those of its rule"),
    "a custodian twice": (lambda m: m["custodians"].append(m["custodians"][0]), "custodians are not those of its rule"),
    "a custodian of another name": (setting("custodians", 0, "name", to="wharf"), "custodians are not those"),
    "a name in the rule that is no custodian": (setting("rule", "from", 1, to="wharf"), "custodians are not those"),
    "names that differ in case": (
        lambda m: (setting("rule", "from", 2, to="REGISTRAR")(m), setting("custodians", 4, "name", to="REGISTRAR")(m)),
        "differ only in case",
    ),
    "a node without checks": (without("checks", 1), "one list of checks for each node"),
    "checks without a node": (lambda m: m["checks"].append(m["checks"][0]), "one list of checks for each node"),
    "a check too few": (without("checks", 0, 1), "checks contradict its rule"),
    "a check too many": (lambda m: m["checks"][1].append(CHECK), "checks contradict its rule"),
    "a child that contradicts its parent": (setting("checks", 1, 0, to=CHECK), "checks contradict its rule"),
    "a parent that contradicts its child": (setting("checks", 0, 1, to=CHECK), "checks contradict its rule"),
    "another threshold": (setting("rule", "need", to=1), "checks contradict its rule"),
    "a threshold above the children": (setting("rule", "need", to=5), "threshold of 5"),
    "a threshold of 0": (setting("rule", "need", to=0), "rule.need"),
    "no children": (setting("rule", "from", to=[]), "rule.from"),
    "children by the name of the program": (
        lambda m: m.__setitem__("rule", {"need": m["rule"]["need"], "children": m["rule"]["from"]}),
        "the member rule.from is missing|does not know",
    ),
    "children by both names": (setting("rule", "children", to=["north-pier"]), "does not know"),
    "a threshold that is text": (setting("rule", "need", to="2"), "rule.need"),
    "a threshold that is true": (setting("rule", "need", to=True), "rule.need"),
    "a rule of 9 levels": (
        lambda m: m.__setitem__("rule", deep(8, m["rule"])),
        "at most 8 groups deep",
    ),
    "a rule of 90 levels": (lambda m: m.__setitem__("rule", deep(89, m["rule"])), "at most 8 groups deep"),
    "more than 1,000 places": (setting("rule", "from", 0, to={"need": 1, "from": ["x"] * 255}), "custodians are not"),
    "more than 255 children": (setting("rule", "from", to=["x"] * 256), "rule.from"),
    "a reducible polynomial": (setting("field", to="0x101"), r"field.*\(x \+ 1\)\^8"),
    "a field of degree 7": (setting("field", to="0x0ff"), "field"),
    "a field in capitals": (setting("field", to="0x11B"), "field"),
    "a field that is a number": (setting("field", to=283), "field"),
    "a set in capitals": (lambda m: m.__setitem__("set", m["set"].upper()), "set"),
    "a set too short": (lambda m: m.__setitem__("set", m["set"][2:]), "set.*16 bytes"),
    "epoch 0": (setting("epoch", to=0), "epoch"),
    "epoch 2^32": (setting("epoch", to=1 << 32), "epoch"),
    "an epoch that is true": (setting("epoch", to=True), "epoch"),
    "an unknown version": (setting("version", to=2), "version"),
    "a version that is true": (setting("version", to=True), "version"),
    "another kind": (setting("kind", to="share"), "it is a share"),
    "an unknown kind": (setting("kind", to="chart"), "does not say"),
    "a kind that is a list": (setting("kind", to=["record"]), "does not say"),
    "a row length too small": (setting("row_length", to=52), "row_length"),
    "a row length too large": (setting("row_length", to=131_073), "row_length"),
    "a time with a fraction": (setting("created", to="2026-12-01T07:00:00.5Z"), "created"),
    "a time in another zone": (setting("created", to="2026-12-01T07:00:00+00:00"), "created"),
    "a time that does not exist": (setting("created", to="2026-02-30T07:00:00Z"), "created"),
    "an empty label": (setting("label", to=""), "label"),
    "no label": (setting("label", to=None), "label"),
    "a label of 501 characters": (setting("label", to="x" * 501), "label"),
    "a label that turns text around": (setting("label", to="a\u202eb"), "label"),
    "a name with a separator": (setting("custodians", 0, "name", to="a/b"), "path separator"),
    "a name not in normal form C": (setting("custodians", 0, "name", to="n\u0303"), "normal form C"),
    "a check too short": (setting("checks", 0, 0, to="AAAA"), "checks"),
    "a check in another encoding": (setting("checks", 0, 0, to="+" + "A" * 21), "checks"),
    "a check with padding": (lambda m: setting("checks", 0, 0, to=m["checks"][0][0] + "==")(m), "checks"),
    "a check with unused bits set": (setting("checks", 0, 0, to="A" * 21 + "B"), "checks"),
    "a key of 31 bytes": (setting("custodians", 0, "attestation_key", to="A" * 42), "attestation_key"),
    "an unknown member": (setting("colour", to="blue"), "does not know"),
    "an unknown member of a custodian": (setting("custodians", 0, "person", to="x"), "does not know"),
    "a missing member": (without("policy"), "policy is missing"),
    "a signature that nobody can check": (setting("signatures", to=[{}]), "signatures"),
    "signatures that are null": (setting("signatures", to=None), "signatures"),
}


def deep(levels: int, rule: dict[str, Any]) -> dict[str, Any]:
    return rule if levels == 0 else {"need": 1, "from": [deep(levels - 1, rule)]}


@pytest.mark.parametrize("name", REFUSED)
def test_a_record_that_is_wrong_is_refused_with_the_reason(record: Record, name: str) -> None:
    bend, reason = REFUSED[name]
    members = json.loads(record.to_file())
    bend(members)
    with pytest.raises(DocumentError, match=reason) as refusal:
        Record.parse(file_of(members), where="record.json")
    assert str(refusal.value).startswith("record.json: ")
    assert refusal.value.__cause__ is refusal.value.__context__ is None


def test_a_fingerprint_that_does_not_fit_is_refused(record: Record) -> None:
    members = json.loads(record.to_file())
    members["label"] += "!"
    with pytest.raises(DocumentError, match="fingerprint does not fit"):
        Record.parse(json.dumps(members).encode())


def test_a_fingerprint_has_one_spelling(record: Record) -> None:
    members = json.loads(record.to_file())
    for spelling in (
        members["fingerprint"].lower(),
        members["fingerprint"].replace("-", ""),
        members["fingerprint"] + "\n",
        " " + members["fingerprint"],
    ):
        with pytest.raises(DocumentError, match="fingerprint"):
            Record.parse(json.dumps({**members, "fingerprint": spelling}).encode())
