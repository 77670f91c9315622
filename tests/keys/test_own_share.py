"""A key share is used only where it is its custodian's, of the record, and the number that was dealt.

Checked against: the group's base point by hand; what was dealt is put in wrong on purpose.
"""

from __future__ import annotations

import functools
import json
from typing import Any

import pytest
from parties import card, unlocked

from shares.documents.key_share import KeyShare
from shares.documents.wrapping import card_sealer
from shares.errors import EpochMismatchError, SetMismatchError, VerificationError, WrongKeyError
from shares.group.edwards25519 import BASE, Scalar
from shares.keys.deal import DealtKey, deal
from shares.keys.own_share import check_belongs, own_share

NAMES = ("north-pier", "south-pier", "light-house")


@functools.cache
def key(label: str = "Harbour release key") -> DealtKey:
    with unlocked("harbour-office") as dealer:
        return deal(Scalar.drawn(), 2, [card(name) for name in NAMES], label=label, dealer=dealer)


def share(custodian: str = "north-pier", /, **changed: Any) -> KeyShare:
    """A key share some of whose public facts were changed, its own digest made to fit."""
    found = next(one for one in key().shares if one.custodian == custodian)
    return found.model_copy(update=changed).with_digest() if changed else found


def test_each_custodian_checks_their_own() -> None:
    for name in NAMES:
        with unlocked(name) as own:
            scalar = own_share(share(name), key().record, name, own.open)
        assert (scalar * BASE).encode() != key().record.public_key.encode()


def test_another_party_key_is_asked_for() -> None:
    with unlocked("south-pier") as other, pytest.raises(WrongKeyError):
        own_share(share("north-pier"), key().record, "north-pier", other.open)


def test_a_number_that_was_not_dealt_is_named() -> None:
    record = key().record
    for wrong in (Scalar.of(1), Scalar.drawn()):
        false = KeyShare.wrap(wrong, record, "north-pier", card_sealer(card("north-pier").recipient()))
        with unlocked("north-pier") as own, pytest.raises(VerificationError, match="north-pier does not hold: "):
            own_share(false, record, "north-pier", own.open)


def test_the_share_of_another_custodian_is_no_share_of_ones_own() -> None:
    """Wrapped anew as one's own, at one's own index."""
    record = key().record
    with unlocked("south-pier") as other:
        value = own_share(share("south-pier"), record, "south-pier", other.open)
    false = KeyShare.wrap(value, record, "north-pier", card_sealer(card("north-pier").recipient()))
    with unlocked("north-pier") as own, pytest.raises(VerificationError):
        own_share(false, record, "north-pier", own.open)


@pytest.mark.parametrize(
    ("changed", "error"),
    [
        ({"key": bytes(16)}, SetMismatchError),
        ({"epoch": 2}, EpochMismatchError),
        ({"record": "AAAA-AAAA-AAAA-AAAA-AAAA-AAAA-AAAA-AAAA"}, VerificationError),
        ({"custodian": "dry-dock"}, VerificationError),
        ({"custodian": "south-pier"}, VerificationError),
        ({"index": 2}, VerificationError),
        ({"need": 3}, VerificationError),
    ],
    ids=lambda one: str(one) if isinstance(one, dict) else one.__name__,
)
def test_what_the_record_does_not_say_is_refused(changed: dict[str, Any], error: type[Exception]) -> None:
    with pytest.raises(error):
        check_belongs(share(**changed), key().record)


def test_facts_that_were_changed_do_not_open() -> None:
    """Whoever edits a key share so that it seems to be of another record has what was sealed against them."""
    other = key("Another key")
    facts = {"key": other.record.key, "record": other.record.fingerprint}
    with unlocked("north-pier") as own, pytest.raises(VerificationError, match="were changed"):
        own_share(share(**facts), other.record, "north-pier", own.open)


def test_a_share_wrapped_for_somebody_else_is_refused() -> None:
    other = share("south-pier").wrapping
    with pytest.raises(VerificationError, match="not its custodian's"):
        check_belongs(share(wrapping=other), key().record)


def test_damage_is_noticed() -> None:
    members = json.loads(share().to_file())
    members["label"] = "Another label"
    with pytest.raises(VerificationError):
        check_belongs(KeyShare.parse(json.dumps(members).encode()), key().record)
