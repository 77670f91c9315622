"""The JSON Schemas in the tree are current, and draw the line where the documents do, as far as a schema can.

Checked against: the general-purpose validator ``jsonschema`` (JSON Schema, draft 2020-12).
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from hypothesis import given
from strategies import crooked_split, flat, moduli, octets, rules

from shares.documents.record import Record
from shares.documents.schema import FOLDER, schema, schema_files
from shares.documents.share import Share
from shares.errors import DocumentError
from shares.field.gf256 import Field

GOLDEN = sorted((Path(__file__).parents[1] / "vectors" / "golden" / "v1").rglob("*.json"))
DEALT = crooked_split(b"made up", flat(2, 3))
SAMPLES = {"share": json.loads(DEALT.shares[0].to_file()), "record": json.loads(DEALT.record.to_file())}
KINDS = {"share": Share, "record": Record}


def validator(kind: str) -> jsonschema.Draft202012Validator:
    found = json.loads((FOLDER / f"{kind}_v1.json").read_text())
    jsonschema.Draft202012Validator.check_schema(found)
    return jsonschema.Draft202012Validator(found)


VALIDATORS = {kind: validator(kind) for kind in KINDS}


def test_the_files_are_current() -> None:
    """If this fails: python -m shares.documents.schema, and look at what changed. Version 1 is frozen."""
    assert {path: json.loads(path.read_text()) for path in FOLDER.iterdir()} == {
        path: json.loads(text) for path, text in schema_files().items()
    }


def test_the_schemas_hold_no_words_about_code() -> None:
    for kind in KINDS.values():
        assert "``" not in json.dumps(schema(kind))


@pytest.mark.parametrize("path", GOLDEN, ids=lambda path: f"{path.parent.name}-{path.name}")
def test_golden_samples_validate(path: Path) -> None:
    members = json.loads(path.read_text())
    VALIDATORS[members["kind"]].validate(members)


@given(rules(most=6), moduli(), octets(1, 20))
def test_whatever_is_dealt_validates(rule, modulus, secret) -> None:
    dealt = crooked_split(secret, rule, field=Field(modulus))
    VALIDATORS["record"].validate(json.loads(dealt.record.to_file()))
    for share in dealt.shares:
        VALIDATORS["share"].validate(json.loads(share.to_file()))


MUTATED: dict[str, dict[str, Any]] = {
    "another kind": {"kind": "sheet"},
    "another version": {"version": 2},
    "version as text": {"version": "1"},
    "set too short": {"set": "00" * 15},
    "set in capitals": {"set": "AB" * 16},
    "epoch 0": {"epoch": 0},
    "epoch 2^32": {"epoch": 2**32},
    "a fraction": {"epoch": 1.5},
    "field of degree 7": {"field": "0x0ff"},
    "field as number": {"field": 283},
    "commitment too long": {"secret_commitment": "00" * 33},
    "encrypted file as text": {"encrypted_file": "none"},
    "label too long": {"label": "x" * 501},
    "label empty": {"label": ""},
    "unknown member": {"colour": "blue"},
}
OF_SHARE: dict[str, dict[str, Any]] = {
    "x = 0": {"paths": [[[2, 0]]]},
    "k = 256": {"paths": [[[256, 1]]]},
    "a step of one": {"paths": [[[2]]]},
    "a step of three": {"paths": [[[2, 1, 1]]]},
    "a path of nine": {"paths": [[[1, 1]] * 9]},
    "no paths": {"paths": []},
    "no rows": {"rows": []},
    "a padded row": {"rows": ["QUJD="]},
    "a row with a space": {"rows": ["QU JD"]},
    "rule too long": {"rule": "x" * 65_537},
    "record in small letters": {"record": "aaaa-" * 7 + "aaaa"},
    "custodian too long": {"custodian": "x" * 65},
    "digest null": {"digest": None},
}
OF_RECORD: dict[str, dict[str, Any]] = {
    "row too short": {"row_length": 52},
    "row too long": {"row_length": 131_073},
    "a rule without children": {"rule": {"need": 1, "from": []}},
    "a rule by the program's names": {"rule": {"need": 1, "children": ["a"]}},
    "a threshold of 0": {"rule": {"need": 0, "from": ["a"]}},
    "no custodians": {"custodians": []},
    "a custodian with a person": {"custodians": [{**SAMPLES["record"]["custodians"][0], "person": "x"}]},
    "a short key": {"custodians": [{**SAMPLES["record"]["custodians"][0], "attestation_key": "AAAA"}]},
    "no checks": {"checks": []},
    "a short check": {"checks": [["AAAA"]]},
    "a local time": {"created": "2026-12-01T07:00:00+01:00"},
    "a signature": {"signatures": [{}]},
    "no label": {"label": None},
    "fingerprint null": {"fingerprint": None},
}
CASES = [
    *(("share", name, change) for name, change in {**MUTATED, **OF_SHARE}.items()),
    *(("record", name, change) for name, change in {**MUTATED, **OF_RECORD}.items()),
]


@pytest.mark.parametrize(("kind", "name", "change"), CASES, ids=[f"{kind}: {name}" for kind, name, _ in CASES])
def test_mutated_documents_do_not_validate_and_do_not_parse(kind: str, name: str, change: dict[str, Any]) -> None:
    members = {**SAMPLES[kind], **change}
    assert not VALIDATORS[kind].is_valid(members)
    with pytest.raises(DocumentError):
        KINDS[kind].parse(json.dumps(members).encode())


@pytest.mark.parametrize("kind", KINDS)
def test_every_member_is_required_and_typed(kind: str) -> None:
    for name in SAMPLES[kind]:
        fewer = {other: value for other, value in SAMPLES[kind].items() if other != name}
        assert not VALIDATORS[kind].is_valid(fewer), name
        assert not VALIDATORS[kind].is_valid({**SAMPLES[kind], name: {"x": True}}), name
        with pytest.raises(DocumentError):
            KINDS[kind].parse(json.dumps(fewer).encode())
