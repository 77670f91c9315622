"""Sealed secrets: for one receiver alone, with the facts of the recovery they come from.

Checked against: FORMAT.md, sections 9 and 10, by the opener written from its text alone
(tests/vectors/make/wrapping_v1.py), and by the sample made with it (tests/vectors/golden/v1/wrapped).
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from parties import QUICK, card, edited, file_of, passphrase, unlocked
from strategies import bits_flipped, octets, revealed
from vectors.make import wrapping_v1 as by_hand

from shares.documents.party import PartyKey
from shares.documents.sealed_secret import SealedSecret
from shares.documents.wrapping import SUITES, card_sealer, passphrase_sealer
from shares.errors import DocumentError, VerificationError, WrongKeyError
from shares.memory import Secret

NAME = "harbour-office"
VECTORS = Path(__file__).parents[1] / "vectors"
SECRET = b"not a real key, made up for a test"
FACTS: dict[str, Any] = {
    "set_id": bytes(range(16)),
    "epoch": 3,
    "label": "Tide archive",
    "secret_commitment": bytes(32),
}


def sealed(content: bytes = SECRET, suite: Any = SUITES[0], **changes: Any) -> SealedSecret:
    seal = card_sealer(card(NAME).recipient(), suite)
    return SealedSecret.seal(Secret.of(content), seal, **{**FACTS, **changes})


SAMPLE = sealed()


def digested(members: dict[str, Any]) -> bytes:
    return file_of({**members, "digest": by_hand.envelope_digest(members)})


@pytest.mark.parametrize("suite", SUITES)
@settings(max_examples=20)
@given(content=octets(0, 200))
def test_the_secret_comes_back_by_the_receivers_key(suite: Any, content: bytes) -> None:
    again = SealedSecret.parse(sealed(content, suite).to_file())
    assert again.is_whole()
    with unlocked(NAME) as key:
        assert revealed(again.content(key.open)) == content


@pytest.mark.parametrize("changes", [{"label": None}, {"encrypted_file": bytes(32)}, {"epoch": 2**32 - 1}], ids=str)
def test_the_facts_come_back(changes: dict[str, Any]) -> None:
    made = SealedSecret.parse(sealed(**changes).to_file())
    facts = {**FACTS, "encrypted_file": None, **changes}
    assert (made.set, made.epoch, made.label, made.secret_commitment, made.encrypted_file) == tuple(facts.values())
    with unlocked(NAME) as key:
        assert revealed(made.content(key.open)) == SECRET


def test_the_largest_secret_fits_into_a_file() -> None:
    made = SealedSecret.parse(sealed(bytes(65_536)).to_file())
    with unlocked(NAME) as key:
        assert len(made.content(key.open)) == 65_536


@pytest.mark.parametrize("suite", SUITES)
def test_the_opener_by_hand_opens_it(suite: Any) -> None:
    members = json.loads(sealed(suite=suite).to_file())
    assert members["digest"] == by_hand.envelope_digest(members)
    with unlocked(NAME) as key:
        assert by_hand.opened(members, by_hand.Private(revealed(key.content))) == SECRET


def test_the_golden_sample_stays_readable_for_ever() -> None:
    folder = VECTORS / "golden" / "v1" / "wrapped"
    tests = json.loads((VECTORS / "wrapped_v1.json").read_text())["testGroups"][0]["tests"]
    known = {test["comment"]: test for test in tests}
    made = SealedSecret.parse((folder / f"{NAME}.sealed.json").read_bytes())
    assert json.loads(made.to_file()) == json.loads((folder / f"{NAME}.sealed.json").read_bytes())
    key = PartyKey.parse((folder / f"{NAME}.key.json").read_bytes())
    with key.open(Secret.of(bytes.fromhex(known[f"party-key of {NAME}"]["passphrase"]))) as opened:
        assert revealed(made.content(opened.open)).hex() == known[f"sealed-secret of {NAME}"]["content"]


def test_another_receiver_does_not_open_it() -> None:
    with unlocked("registrar") as key, pytest.raises(WrongKeyError, match="wrapped for the card"):
        SAMPLE.content(key.open)


def test_every_flipped_bit_of_the_file_is_refused() -> None:
    data = json.dumps(json.loads(SAMPLE.to_file()), separators=(",", ":")).encode()
    asked: list[int] = []
    for _, changed in bits_flipped(data):
        with pytest.raises((DocumentError, VerificationError)):
            SealedSecret.parse(changed).content(lambda *_: asked.append(1))  # type: ignore[arg-type, return-value]
    assert asked == []


@pytest.mark.parametrize(
    ("member", "to"),
    [
        ("set", "00" * 16),
        ("epoch", 4),
        ("label", "Another label"),
        ("label", None),
        ("encrypted_file", "00" * 32),
    ],
)
def test_whoever_changes_a_bound_member_is_found_out_though_the_digest_fits(member: str, to: Any) -> None:
    changed = SealedSecret.parse(digested(edited(SAMPLE.to_file(), member, to=to)))
    assert changed.is_whole()
    with unlocked(NAME) as key, pytest.raises(VerificationError, match="were changed"):
        changed.content(key.open)


def test_every_bound_member_was_tried() -> None:
    assert set(SealedSecret.BOUND) == {
        "kind",
        "version",
        "set",
        "epoch",
        "label",
        "secret_commitment",
        "encrypted_file",
    }
    assert set(SealedSecret.model_fields) - set(SealedSecret.BOUND) == {"wrapping", "sealed", "digest"}
    assert by_hand.bound_of(json.loads(SAMPLE.to_file())) == SAMPLE.bound()


@pytest.mark.parametrize(
    ("path", "to", "reason"),
    [
        (("kind",), "wrapped-share", "it is a wrapped share"),
        (("version",), 2, "version"),
        (("label",), "", "label"),
        (("epoch",), 0, "epoch"),
        (("sealed",), "", "sealed"),
        (("wrapping", "method"), "passphrase", "wrapping"),
        (("wrapping", "suite"), "p256", "wrapping.suite"),
        (("custodian",), "x", "does not know"),
    ],
)
def test_a_file_that_is_not_as_the_format_says_is_refused(path: tuple[str, ...], to: Any, reason: str) -> None:
    with pytest.raises(DocumentError, match=reason):
        SealedSecret.parse(digested(edited(SAMPLE.to_file(), *path, to=to)))


def test_a_secret_is_never_sealed_by_passphrase() -> None:
    """A receiver is a party: what a passphrase opens, whoever typed it for another has known."""
    with pytest.raises(ValueError, match="wrapping"):
        SealedSecret.seal(Secret.of(SECRET), passphrase_sealer(passphrase(NAME), QUICK), **FACTS)
