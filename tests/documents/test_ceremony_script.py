"""Ceremony scripts: read as they were written, bound to the bytes of their file, signed as the format says.

Checked against: FORMAT_EVIDENCE.md, section 19, by a script made and signed from its text alone
(tests/vectors/make/ceremony_v1.py); sha256sum(1) for the digest.
"""

from __future__ import annotations

import json
import shutil
import subprocess
from pathlib import Path
from typing import Any

import pytest
from parties import file_of, unlocked
from strategies import CREATED

from shares.documents.ceremony_script import MAX_SCRIPT_SIGNATURES, CeremonyScript
from shares.errors import DocumentError, ParameterError

GOLDEN = Path(__file__).parents[1] / "vectors/golden/v1/ceremony/script.json"
DATA = GOLDEN.read_bytes()
MEMBERS: dict[str, Any] = json.loads(DATA)


def test_the_golden_sample_stays_readable_for_ever() -> None:
    script = CeremonyScript.parse(DATA)
    assert script.to_file() == DATA
    assert [step.role for step in script.steps] == ["everyone", "dealer", "everyone"]
    assert script.signatures[0].card.name == "harbour-office"


def test_the_digest_is_over_the_file_as_it_stands() -> None:
    script = CeremonyScript.parse(DATA)
    told = subprocess.run([shutil.which("sha256sum") or "", GOLDEN], capture_output=True, check=True).stdout
    assert script.digest().hex() == told.split()[0].decode()
    spaced = CeremonyScript.parse(DATA + b"\n")
    assert spaced.text == DATA + b"\n"
    assert spaced.digest() != script.digest()
    assert script.spoken() != spaced.spoken()


@pytest.mark.parametrize(
    "change",
    [
        {"label": "Another"},
        {"created": "2026-12-01T07:00:01Z"},
        {"policy": "00" * 32},
        {"rule": "any 1 of north-pier, registrar"},
        {"software": {**MEMBERS["software"], "version": "0.2.0"}},
        {"dual_control": True},
        {"planned": None},
        {"standby": "2027-01-22"},
        {"roles": MEMBERS["roles"][:1]},
        {"steps": MEMBERS["steps"][::-1]},
        {"steps": MEMBERS["steps"][:2]},
        {"signatures": [{**MEMBERS["signatures"][0], "time": "2026-12-02T09:30:01Z"}]},
    ],
    ids=lambda change: next(iter(change)),
)
def test_a_signed_one_that_was_altered_is_refused(change: dict[str, Any]) -> None:
    with pytest.raises(DocumentError, match="signature by harbour-office does not fit"):
        CeremonyScript.parse(file_of({**MEMBERS, **change}))


def test_a_party_signs_once_and_there_are_not_many() -> None:
    unsigned = CeremonyScript.parse(file_of({**MEMBERS, "signatures": []}))
    with unlocked("registrar") as key:
        signed = unsigned.signed(key, time=CREATED)
        assert CeremonyScript.parse(signed.to_file()).signatures == signed.signatures
        assert signed.digest() != unsigned.digest()
        with pytest.raises(ParameterError, match="registrar has signed this script already"):
            signed.signed(key)
    twice = file_of({**MEMBERS, "signatures": MEMBERS["signatures"] * 2})
    with pytest.raises(DocumentError, match="one party signed it twice"):
        CeremonyScript.parse(twice)
    names = (
        "north-pier",
        "south-pier",
        "light-house",
        "registrar",
        "dry-dock",
        "east-quay",
        "west-quay",
        "auditor-east",
    )
    for name in names[:MAX_SCRIPT_SIGNATURES]:
        with unlocked(name) as key:
            unsigned = unsigned.signed(key)
    with unlocked("auditor-west") as key, pytest.raises(ParameterError, match="at most 8 signatures"):
        unsigned.signed(key)
