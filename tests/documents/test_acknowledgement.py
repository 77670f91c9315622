"""Acknowledgements: one party's acceptance of these duties for this set, and of nothing else.

Checked against: FORMAT.md, section 14, by the signer written from the text of section 9
(tests/vectors/make/wrapping_v1.py).
"""

from __future__ import annotations

import json
from typing import Any

import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
from parties import card, file_of, unlocked
from strategies import CREATED, bits_flipped
from vectors.make import wrapping_v1 as by_hand

from shares.documents.acknowledgement import Acknowledgement
from shares.errors import DocumentError, ParameterError

with unlocked("north-pier") as KEY:
    SIGNED = Acknowledgement.signed_by(KEY, custodian="north-pier", label="Tide archive", time=CREATED)
BY_HAND = Acknowledgement.of_form(bytes(range(32)), custodian="dry-dock", label="Tide archive", time=CREATED)


@pytest.mark.parametrize("made", [SIGNED, BY_HAND], ids=["signed", "by hand"])
def test_it_comes_back(made: Acknowledgement) -> None:
    assert Acknowledgement.parse(made.to_file()) == made


def test_the_signature_is_over_what_the_format_says() -> None:
    members = json.loads(SIGNED.to_file())
    over = {name: members[name] for name in ("kind", "version", "custodian", "label", "duties", "time")}
    signed = by_hand.signed("acknowledgement", over | {"card": card("north-pier").fingerprint})
    Ed25519PublicKey.from_public_bytes(card("north-pier").ed25519).verify(SIGNED.signature or b"", signed)


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        ({"custodian": "dry-dock"}, "its signature does not fit"),
        ({"label": "Another"}, "its signature does not fit"),
        ({"time": "2026-12-01T07:00:01Z"}, "its signature does not fit"),
        ({"duties": ["I keep nothing."]}, "its signature does not fit"),
        ({"form": "00" * 32}, "not both"),
        ({"card": None}, "neither a printed form nor a signature"),
        ({"signature": None}, "neither a printed form nor a signature"),
        ({"colour": "blue"}, "does not know"),
        ({"custodian": "a/b"}, "path separator"),
        ({"version": True}, "version"),
    ],
    ids=str,
)
def test_one_that_was_altered_is_refused(change: dict[str, Any], reason: str) -> None:
    with pytest.raises(DocumentError, match=reason):
        Acknowledgement.parse(file_of(json.loads(SIGNED.to_file()) | change))


def test_every_flipped_bit_of_what_is_signed_is_refused() -> None:
    members = json.loads(SIGNED.to_file())
    data = json.dumps({**members, "card": None}, separators=(",", ":")).encode()
    whole = json.dumps(members["card"], separators=(",", ":")).encode()
    for _, changed in bits_flipped(data):
        with pytest.raises(DocumentError):
            Acknowledgement.parse(changed.replace(b'"card":null', b'"card":' + whole))


def test_names_that_may_not_be_are_refused_when_made() -> None:
    for custodian, label in (("", "Tide archive"), ("a/b", "Tide archive"), ("dry-dock", ""), ("dry-dock", "a\nb")):
        with pytest.raises(ParameterError):
            Acknowledgement.of_form(bytes(32), custodian=custodian, label=label)
