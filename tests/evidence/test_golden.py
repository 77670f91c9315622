"""The golden samples of format version 1, section 17, stay readable, and their signatures fit, by any path.

Source: tests/vectors/golden/v1/attested, made by tests/vectors/make/attested_v1.py from FORMAT.md with no code of this
package. Signatures are checked here by the package and by the command ``openssl`` (RFC 8032), over bytes put together
from the format's text.
"""

from __future__ import annotations

import base64
import hashlib
import json
import subprocess
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest
from vectors.make import wrapping_v1 as by_hand

from shares.custody.presented import load_record
from shares.documents.attestation import Attestation
from shares.documents.challenge import Challenge
from shares.evidence.judge import Flaw, judge

VECTORS = Path(__file__).parents[1] / "vectors" / "golden" / "v1"
FOLDER = VECTORS / "attested"
ASKED = Challenge.parse((FOLDER / "challenge.json").read_bytes())
RECORD = load_record(VECTORS / "flat" / "record.json")
RECEIVED = datetime(2026, 4, 5, tzinfo=UTC)
# RFC 8410, section 4: what stands before the 32 bytes of an Ed25519 public key.
SPKI = bytes.fromhex("302a300506032b6570032100")


def members(name: str) -> dict[str, Any]:
    found = json.loads((FOLDER / f"{name}.json").read_text())
    assert isinstance(found, dict)
    return found


def answer(name: str) -> Attestation:
    return Attestation.parse((FOLDER / f"{name}.answer.json").read_bytes())


@pytest.mark.parametrize("path", sorted(FOLDER.glob("*.json")), ids=lambda path: path.name)
def test_golden_files_stay_readable_for_ever(path: Path) -> None:
    kind = Challenge if path.name == "challenge.json" else Attestation
    assert json.loads(kind.parse(path.read_bytes()).to_file()) == json.loads(path.read_bytes())


def test_the_answers_are_worth_what_they_should_be() -> None:
    def judged(name: str) -> Any:
        made = answer(name)
        card = made.card.fingerprint if made.card else None
        return judge(made, ASKED, RECORD, card=card, received=RECEIVED, earlier={})

    assert (judged("registrar").counts, judged("registrar").flaws) == (True, frozenset())
    assert (judged("north-pier").counts, judged("north-pier").flaws) == (False, {Flaw.NO_PARTY})
    assert (judged("harbour-office").counts, judged("harbour-office").flaws) == (False, {Flaw.NO_CONTENT})


def test_the_challenge_is_named_by_the_digest_of_the_format() -> None:
    digest = hashlib.sha256(b"shares/v1/challenge" + by_hand.canonical(members("challenge"))).digest()
    assert ASKED.digest() == answer("registrar").challenge == digest
    assert ASKED.fingerprint.replace("-", "") == base64.b32encode(digest[:20]).decode()


def fits(key: str, purpose: str, over: dict[str, Any], signature: str, folder: Path) -> bool:
    """Ask openssl whether a signature fits."""
    (folder / "key").write_bytes(SPKI + by_hand.raw(key))
    (folder / "message").write_bytes(b"shares/v1/sign/" + purpose.encode() + by_hand.canonical(over))
    (folder / "signature").write_bytes(by_hand.raw(signature))
    command = ["openssl", "pkeyutl", "-verify", "-pubin", "-keyform", "DER", "-inkey", "key", "-rawin"]
    done = subprocess.run(
        [*command, "-in", "message", "-sigfile", "signature"], cwd=folder, capture_output=True, check=False
    )
    return done.returncode == 0


@pytest.mark.parametrize("name", ["registrar", "north-pier", "harbour-office"])
def test_another_program_finds_that_the_signatures_fit(name: str, tmp_path: Path) -> None:
    told = members(f"{name}.answer")
    card = told["card"]
    over = {member: value for member, value in told.items() if not member.endswith("_signature")}
    over["card"] = card["fingerprint"] if card else None
    record = json.loads((VECTORS / "flat" / "record.json").read_text())
    (named,) = [one for one in record["custodians"] if one["name"] == name]
    checked = 0
    for key, purpose, signature in (
        (named["attestation_key"], "attestation-share", told["share_signature"]),
        (card and card["ed25519"], "attestation", told["party_signature"]),
    ):
        if signature is not None:
            assert fits(key, purpose, over, signature, tmp_path)
            assert not fits(key, purpose, over | {"opened": not over["opened"]}, signature, tmp_path)
            assert not fits(key, "attestation-of-another-kind", over, signature, tmp_path)
            checked += 1
    assert checked == (2 if name == "registrar" else 1)


def test_another_program_finds_that_the_challenge_is_the_askers(tmp_path: Path) -> None:
    told = members("challenge")
    over = {member: value for member, value in told.items() if member != "signature"}
    over["card"] = told["card"]["fingerprint"]
    assert fits(told["card"]["ed25519"], "challenge", over, told["signature"], tmp_path)
    assert not fits(told["card"]["ed25519"], "challenge", over | {"epoch": 2}, told["signature"], tmp_path)
