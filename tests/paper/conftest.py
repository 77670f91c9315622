"""What the tests of paper are given: shares bare and wrapped, and the published forms of some."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from cryptography.hazmat.primitives.asymmetric.mlkem import MLKEM768PrivateKey
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey

from shares.documents.base import write_text
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import Cost, Recipient, card_sealer, passphrase_sealer
from shares.memory import Secret
from shares.paper.paperform import PaperShare

VECTORS = Path(__file__).parents[1] / "vectors"
GOLDEN = VECTORS / "golden" / "v1"
CARD = "TU2E-ZXSG-BZMB-ATU6-Z4LY-ZPBQ-FBCN-PRVF"


@pytest.fixture(scope="session")
def share() -> Share:
    """A bare share of a 32-byte key, 3 of 5."""
    return Share.parse((GOLDEN / "flat" / "north-pier.share.json").read_bytes())


@pytest.fixture(scope="session")
def two_points() -> Share:
    """A bare share of two points."""
    return Share.parse((GOLDEN / "tree" / "light-house.share.json").read_bytes())


@pytest.fixture(scope="session")
def sealed(share: Share) -> WrappedShare:
    """The bare share wrapped by passphrase, at a cost for tests."""
    return WrappedShare.wrap(share, passphrase_sealer(Secret.of(b"made up"), Cost(64, 1, 1)))


@pytest.fixture(scope="session")
def for_card(share: Share) -> WrappedShare:
    """The bare share wrapped for a party card, hybrid."""
    curve, lattice = X25519PrivateKey.generate(), MLKEM768PrivateKey.generate()
    recipient = Recipient(CARD, curve.public_key().public_bytes_raw(), lattice.public_key().public_bytes_raw())
    return WrappedShare.wrap(share, card_sealer(recipient))


def published() -> tuple[list[dict[str, Any]], list[dict[str, Any]]]:
    """The valid and the invalid cases of the paper form."""
    vectors = json.loads((VECTORS / "paper_v1.json").read_text())
    valid, invalid = (group["tests"] for group in vectors["testGroups"])
    assert vectors["numberOfTests"] == len(valid) + len(invalid)
    assert {flag for test in valid + invalid for flag in test["flags"]} == vectors["notes"].keys()
    return valid, invalid


def document(members: dict[str, Any]) -> PaperShare:
    """The share of a published case, with the digest that comes back from paper: notes are not on it."""
    noted = {**members, "label": None, "rule": None, "notice": None, "digest": "00" * 32}
    if members["kind"] == Share.KIND:
        return Share.parse(write_text(noted)).with_notes()
    return WrappedShare.parse(write_text(noted)).with_digest()


def identity(share: PaperShare) -> object:
    """All that two documents must have in common to be the same one."""
    return share.to_file()
