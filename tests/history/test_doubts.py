"""What is odd about a report is said, and nothing else is.

Source: this project's own; that serials are compared is trade practice (PCI PIN 9-2, from a summary).
"""

from __future__ import annotations

from pathlib import Path

import pytest
from history.making import key, set_folder

from shares.documents.event import make_event
from shares.documents.party import PartyCard
from shares.history.doubts import doubts
from shares.history.folder import SetFolder
from shares.history.holders import known_cards

NAME = "north-pier"


@pytest.fixture
def folder(tmp_path: Path) -> SetFolder:
    return SetFolder(set_folder(tmp_path / "set"))


def odd(folder: SetFolder, what: str, **members: object) -> str:
    event = make_event(what, custodian=NAME, **members)
    return "\n".join(doubts(event, folder.journal(), folder.record))


def odd_card(folder: SetFolder, card: PartyCard) -> str:
    event = make_event("introduced", custodian=NAME, card=card.fingerprint)
    return "\n".join(doubts(event, folder.journal(), folder.record, card))


def test_a_pack_that_arrives_is_held_against_the_one_that_was_sent(folder: SetFolder) -> None:
    assert "no entry tells that the share of north-pier was sent" in odd(folder, "received", serial="HT-1")
    folder.append(make_event("delivered", custodian="south-pier", serial="HT-1"))
    assert "no entry tells" in odd(folder, "received", serial="HT-1")
    for serial in ("HT-0", "HT-1"):
        folder.append(make_event("delivered", custodian=NAME, serial=serial))
    for serial in ("HT-1", "ht-1", None):
        assert odd(folder, "received", serial=serial) == ""
    assert "the serials differ: HT-1 was sent, and HT-0 was received. Open nothing" in odd(
        folder, "received", serial="HT-0"
    )


def test_a_copy_is_entered_once(folder: SetFolder) -> None:
    folder.append(make_event("copied", custodian="south-pier", copy="S-1"))
    assert odd(folder, "copied", copy="S-1") == ""
    folder.append(make_event("copied", custodian=NAME, copy="S-1"))
    assert "entry 3 tells of a copy s-1 of north-pier already" in odd(folder, "copied", copy="s-1")
    assert odd(folder, "copied", copy="S-2") == ""


def test_a_card_is_of_one_custodian_and_not_the_dealers(folder: SetFolder) -> None:
    own, other = key(NAME).card, key("registrar").card
    introduced = make_event("introduced", custodian=NAME, card=own.fingerprint)
    folder.append(introduced, cards=[own])
    assert known_cards(folder.journal(), folder.record, folder.policy)[NAME] == own.fingerprint
    assert odd_card(folder, own) == ""
    assert odd_card(folder, other) == "the card is of registrar, not north-pier."
    folder.append(make_event("introduced", custodian="south-pier", card=other.fingerprint), cards=[other])
    assert "the card is known as that of south-pier" in odd_card(folder, other)
    folder.record = folder.record.signed(key(NAME), "dealer")
    assert "the card is the dealer's" in odd_card(folder, own)


def test_all_else_raises_no_doubt(folder: SetFolder) -> None:
    assert odd(folder, "delivered", serial="HT-1") == ""
