"""Opening: by what is at hand, asking only where something can be opened, and blaming only what is at fault.

Checked against: the shares that were wrapped.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import pytest
from parties import QUICK, card, party, passphrase
from strategies import crooked_split, flat, revealed

from shares import memory
from shares.custody.opening import Opening
from shares.documents.party import PartyKey
from shares.documents.sealed_secret import SealedSecret
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import card_sealer, passphrase_sealer
from shares.errors import VerificationError, WrongKeyError
from shares.memory import Secret

NORTH, SOUTH, LIGHT = crooked_split(b"made up", flat(2, 3)).shares
BY_PHRASE = WrappedShare.wrap(NORTH, passphrase_sealer(passphrase("north-pier"), QUICK))
FOR_CARD = WrappedShare.wrap(SOUTH, card_sealer(card("south-pier").recipient()))


class Known:
    """Passphrases by name; notes who was asked for."""

    def __init__(self, *names: str) -> None:
        self.names, self.asked = names, []

    def opening(self, name: str, attempt: Callable[[Secret], Any]) -> Any:
        self.asked.append(name)
        return attempt(passphrase(name if name in self.names else "nobody"))


def at_hand(*names: str, keys: Sequence[PartyKey] = ()) -> tuple[Known, Opening]:
    known = Known(*names)
    return known, Opening(known, keys)


def test_a_share_opens_by_the_passphrase_of_its_custodian() -> None:
    known, opening = at_hand("north-pier")
    assert opening.share(BY_PHRASE).to_file() == NORTH.to_file()
    assert known.asked == ["north-pier"]
    _, wrong = at_hand("south-pier")
    with pytest.raises(WrongKeyError, match="the passphrase does not open it"):
        wrong.share(BY_PHRASE)


def test_a_share_opens_by_the_key_of_its_card_and_the_key_is_opened_once() -> None:
    known, opening = at_hand("south-pier", keys=[party("north-pier"), party("south-pier")])
    with opening:
        for _ in range(3):
            assert opening.share(FOR_CARD).to_file() == SOUTH.to_file()
    assert known.asked == ["south-pier"]


def test_the_keys_that_were_opened_are_wiped_at_the_end() -> None:
    _, opening = at_hand("south-pier")
    before = set(memory._open)
    with opening:
        key = opening.party(party("south-pier"))
        assert opening.party(party("south-pier")) is key
        assert len(set(memory._open) - before) == 1
    assert set(memory._open) <= before
    with pytest.raises(ValueError, match="closed"):
        key.content.view()


def test_they_are_wiped_where_something_fails_as_well() -> None:
    before = set(memory._open)
    with pytest.raises(RuntimeError):  # noqa: SIM117, PT012
        with at_hand("south-pier")[1] as opening:
            opening.party(party("south-pier"))
            raise RuntimeError
    assert set(memory._open) <= before


def test_nobody_is_asked_where_the_key_is_not_at_hand() -> None:
    known, opening = at_hand("south-pier", keys=[party("north-pier")])
    with pytest.raises(WrongKeyError, match=f"card {card('south-pier').fingerprint}.*no party key") as refusal:
        opening.share(FOR_CARD)
    assert refusal.value.hint == "give it with --key"
    assert known.asked == []


@pytest.mark.parametrize("wrapped", [BY_PHRASE, FOR_CARD], ids=["passphrase", "card"])
def test_nobody_is_asked_for_a_damaged_file(wrapped: WrappedShare) -> None:
    known, opening = at_hand("north-pier", "south-pier", keys=[party("south-pier")])
    with pytest.raises(VerificationError, match="its own digest does not fit"):
        opening.share(wrapped.model_copy(update={"label": "Another label"}))
    assert known.asked == []


def test_a_damaged_share_is_told_from_a_wrong_passphrase() -> None:
    _, opening = at_hand("north-pier")
    bent = BY_PHRASE.model_copy(update={"epoch": 2}).with_digest()
    with pytest.raises(VerificationError, match="the key is right") as refusal:
        opening.share(bent)
    assert not isinstance(refusal.value, WrongKeyError)


def test_a_party_key_that_does_not_open_is_no_fault_of_the_share() -> None:
    """Neither a wrong passphrase nor a damaged party key says that the share is damaged."""
    damaged = party("south-pier").model_copy(update={"sealed": bytes(144)})
    for keys, names, reason in (
        ([party("south-pier")], (), "the party key of south-pier does not open: the passphrase does not open it"),
        ([damaged], ("south-pier",), "the party key of south-pier does not open: the key is right, but"),
    ):
        _, opening = at_hand(*names, keys=keys)
        with pytest.raises(WrongKeyError, match=reason):
            opening.share(FOR_CARD)


def test_other_content_opens_as_shares_do() -> None:
    seal = card_sealer(card("south-pier").recipient())
    sealed = SealedSecret.seal(
        Secret.of(b"made up"), seal, set_id=bytes(16), epoch=1, label=None, secret_commitment=bytes(32)
    )
    known, opening = at_hand("south-pier", keys=[party("south-pier")])
    with opening:
        assert revealed(opening.content(sealed, "the secret")) == b"made up"
    assert known.asked == ["south-pier"]
    known, opening = at_hand("someone")
    wrapped = WrappedShare.wrap(LIGHT, passphrase_sealer(passphrase("someone"), QUICK))
    assert revealed(opening.content(wrapped, "someone")) == revealed(LIGHT.rows[0])
    assert known.asked == ["someone"]
