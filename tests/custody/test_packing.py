"""Packing: what goes into a file comes back as the share, and what comes back changed is refused.

Checked against: the shares that were packed.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest
from parties import QUICK, card, party, passphrase
from strategies import crooked_split, flat

from shares.custody import packing
from shares.custody.packing import Packing
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import SUITES, card_sealer, passphrase_sealer
from shares.errors import DocumentError, SharesError, VerificationError, WrongKeyError

NORTH, SOUTH = crooked_split(b"made up", flat(2, 2)).shares
NAME = "north-pier"


@pytest.fixture(autouse=True)
def quick(monkeypatch: pytest.MonkeyPatch) -> None:
    """Stretching by its default cost is tested where wrapping is."""
    monkeypatch.setattr(packing, "passphrase_sealer", lambda secret: passphrase_sealer(secret, QUICK))


PACKINGS: dict[str, tuple[Callable[[], Packing], str, str, bool]] = {
    "bare": (Packing.bare, ".share.json", "bare", False),
    "passphrase": (lambda: Packing.by_passphrase(passphrase(NAME)), ".wrapped.json", "wrapped by passphrase", False),
    **{
        suite: (
            lambda suite=suite: Packing.for_card(card(NAME), suite),  # type: ignore[misc]
            ".wrapped.json",
            f"wrapped for the card {card(NAME).fingerprint}",
            True,
        )
        for suite in SUITES
    },
}


@pytest.mark.parametrize("name", PACKINGS)
def test_a_share_comes_back(name: str) -> None:
    make, suffix, words, is_sealed = PACKINGS[name]
    packed = make()
    assert (packed.suffix, packed.words, packed.is_sealed) == (suffix, words, is_sealed)
    data = packed.pack(NORTH)
    assert packed.unpack(data, "it", NORTH).to_file() == NORTH.to_file()
    kind = json.loads(data)["kind"]
    assert kind == ("share" if name == "bare" else "wrapped-share")
    if name in SUITES:
        assert json.loads(data)["wrapping"]["suite"] == name
        with party(NAME).open(passphrase(NAME)) as key:
            assert WrappedShare.parse(data).open(key.open).to_file() == NORTH.to_file()


def test_the_hybrid_suite_is_the_default() -> None:
    assert json.loads(Packing.for_card(card(NAME)).pack(NORTH))["wrapping"]["suite"] == SUITES[0]


@pytest.mark.parametrize("name", PACKINGS)
def test_what_comes_back_changed_is_not_taken_for_the_share(name: str) -> None:
    packed = PACKINGS[name][0]()
    data = packed.pack(NORTH)
    for changed in (data[:-9], b"", data.replace(b'"epoch": 1', b'"epoch": 2'), data.replace(b"pier", b"peer")):
        try:
            share = packed.unpack(changed, "it", NORTH)
        except SharesError:
            continue
        # A bare share that was changed is read all the same: whoever judges shares finds it out.
        assert (name, share.is_whole()) == ("bare", False)


@pytest.mark.parametrize("name", ["passphrase", *SUITES])
def test_anothers_share_packed_alike_is_not_taken_for_it(name: str) -> None:
    """It is opened, and is another share; or it is compared byte by byte, and is none that was packed."""
    packed = PACKINGS[name][0]()
    packed.pack(NORTH)
    other = PACKINGS[name][0]().pack(SOUTH)
    if name == "passphrase":
        assert packed.unpack(other, "it", NORTH).custodian == "south-pier"
    else:
        with pytest.raises(VerificationError, match="it: what was written reads back changed"):
            packed.unpack(other, "it", NORTH)


def test_what_comes_back_wrapped_otherwise_is_refused() -> None:
    packed = Packing.by_passphrase(passphrase(NAME))
    with pytest.raises(VerificationError, match="wrapped for a card, not by passphrase"):
        packed.unpack(WrappedShare.wrap(NORTH, card_sealer(card(NAME).recipient())).to_file(), "it", NORTH)
    with pytest.raises(DocumentError, match="it: a wrapped share is wanted here, but it is a share"):
        packed.unpack(NORTH.to_file(), "it", NORTH)
    with pytest.raises(WrongKeyError):
        packed.unpack(Packing.by_passphrase(passphrase("south-pier")).pack(NORTH), "it", NORTH)
    with pytest.raises(DocumentError, match="it: a share is wanted here, but it is a wrapped share"):
        Packing.bare().unpack(packed.pack(NORTH), "it", NORTH)


def test_the_maker_of_a_packing_keeps_the_passphrase(tmp_path: Path) -> None:
    """It wraps every share under it until the caller wipes it."""
    secret = passphrase(NAME)
    packed = Packing.by_passphrase(secret)
    shares: list[Share] = [packed.unpack(packed.pack(share), "it", share) for share in (NORTH, SOUTH)]
    assert [share.custodian for share in shares] == ["north-pier", "south-pier"]
    secret.close()
    with pytest.raises(ValueError, match="closed"):
        packed.pack(NORTH)
