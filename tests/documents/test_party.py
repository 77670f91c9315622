"""Parties: a card that is its own, and a key that only its passphrase opens and only with its own card.

Checked against: FORMAT.md, section 9, by the reader written from its text alone (tests/vectors/make/wrapping_v1.py);
RFC 8032 and RFC 7748 for lengths; FIPS 203, table 3, for the encapsulation key's 1,184 bytes.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any

import pytest
from cryptography.exceptions import UnsupportedAlgorithm
from parties import QUICK, by, card, edited, file_of, party, passphrase, unlocked
from strategies import CREATED, bits_flipped, revealed
from vectors.make import wrapping_v1 as by_hand

from shares import memory
from shares.documents.party import OpenPartyKey, PartyCard, PartyKey, new_party
from shares.documents.wrapping import SUITES, Cost, card_sealer, passphrase_sealer
from shares.errors import DocumentError, ParameterError, SharesError, VerificationError, WrongKeyError
from shares.memory import Secret

NAME = "north-pier"
CARD = card(NAME)
KEY = party(NAME)


def rewritten(data: bytes, signer: by_hand.Private | None = None, **changes: Any) -> bytes:
    """A card with members changed and fingerprint (and, by the signer, signature) made to fit, as a forger would."""
    members = json.loads(data) | changes
    members["fingerprint"] = by_hand.fingerprint("party-card", members)
    if signer is not None:
        body = by_hand.without(members, "signature")
        members["signature"] = by_hand.b64(signer.signing.sign(by_hand.signed("party-card", body)))
    return file_of(members)


def private(name: str = NAME) -> by_hand.Private:
    with unlocked(name) as key:
        return by_hand.Private(revealed(key.content))


# The card.


def test_a_card_comes_back_from_its_file() -> None:
    again = PartyCard.parse(CARD.to_file())
    assert again == CARD
    assert again.to_file() == CARD.to_file()
    assert list(json.loads(CARD.to_file()))[:2] == ["kind", "version"]
    assert (CARD.name, CARD.contact) == (NAME, None)
    assert [len(key) for key in (CARD.ed25519, CARD.x25519, CARD.mlkem768)] == [32, 32, 1184]


def test_a_card_is_what_the_format_says() -> None:
    members = json.loads(CARD.to_file())
    assert members["fingerprint"] == by_hand.fingerprint("party-card", members)
    by_hand.verify(members, members["signature"], "party-card", by_hand.without(members, "signature"))
    assert private().public() == {name: members[name] for name in ("ed25519", "x25519", "mlkem768")}


def test_a_card_made_by_hand_is_read() -> None:
    data = rewritten(CARD.to_file(), private(), name="dry-dock", contact="quay 4")
    assert PartyCard.parse(data).contact == "quay 4"


def test_every_flipped_bit_of_a_card_is_refused() -> None:
    """Fingerprint and signature cover every value; the file is compact, so nothing in it is free."""
    data = json.dumps(json.loads(CARD.to_file()), separators=(",", ":")).encode()
    # One character in sixteen of the long key is enough; all of the rest.
    start = data.index(b'"mlkem768":"') + 12
    for bit, changed in bits_flipped(data):
        if not start <= bit // 8 < start + 1579 or bit // 8 % 16 == 0:
            with pytest.raises(DocumentError):
                PartyCard.parse(changed)


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        ({"name": "south-pier"}, "signature by its own key"),
        ({"contact": "elsewhere"}, "signature by its own key"),
        ({"created": "2026-12-01T07:00:01Z"}, "signature by its own key"),
        ({"x25519": card("south-pier").public("x25519")["x25519"]}, "signature by its own key"),
        ({"mlkem768": card("south-pier").public("mlkem768")["mlkem768"]}, "signature by its own key"),
        ({"ed25519": card("south-pier").public("ed25519")["ed25519"]}, "signature by its own key"),
        ({"signature": card("south-pier").public("signature")["signature"]}, "signature by its own key"),
        ({"name": "a/b"}, "path separator"),
        ({"contact": ""}, "contact"),
        ({"contact": "x" * 501}, "contact"),
        ({"contact": "a\u202eb"}, "contact"),
        ({"created": "2026-12-01"}, "created"),
        ({"mlkem768": "AAAA"}, "1184 bytes"),
        ({"x25519": "A" * 42}, "32 bytes"),
        ({"signature": "A" * 85 + "Q"}, "signature"),
        ({"colour": "blue"}, "does not know"),
        ({"version": 2}, "version"),
        ({"kind": "party-key"}, "it is a party key"),
    ],
    # Keys are drawn anew in each process, and names of tests are to be the same in all.
    ids=lambda value: "-".join(value) if isinstance(value, dict) else value,
)
def test_a_card_that_is_not_its_own_is_refused(change: dict[str, Any], reason: str) -> None:
    with pytest.raises(DocumentError, match=reason) as refusal:
        PartyCard.parse(rewritten(CARD.to_file(), **change), where="the card")
    assert str(refusal.value).startswith("the card: ")
    assert refusal.value.__cause__ is refusal.value.__context__ is None


def test_a_fingerprint_that_does_not_fit_is_refused_though_it_is_signed() -> None:
    members = json.loads(CARD.to_file()) | {"fingerprint": card("south-pier").fingerprint}
    body = by_hand.without(members, "signature")
    members["signature"] = by_hand.b64(private().signing.sign(by_hand.signed("party-card", body)))
    with pytest.raises(DocumentError, match="fingerprint does not fit"):
        PartyCard.parse(file_of(members))


def test_two_parties_of_one_name_have_different_cards() -> None:
    made = [new_party(NAME, passphrase(NAME), created=CREATED, cost=QUICK).card for _ in range(8)]
    for member in ("fingerprint", "ed25519", "x25519", "mlkem768", "signature"):
        assert len({getattr(one, member) for one in made}) == 8


# Making a party.


@pytest.mark.parametrize(
    ("name", "choices", "reason"),
    [
        ("", {}, "must not be empty"),
        ("a/b", {}, "path separator"),
        ("x" * 65, {}, "64 characters"),
        (NAME, {"contact": ""}, "1 to 500"),
        (NAME, {"contact": "a\nb"}, "control"),
        (NAME, {"created": datetime(2026, 12, 1)}, "UTC"),
        (NAME, {"created": datetime(2026, 12, 1, 0, 0, 0, 5, tzinfo=UTC)}, "second"),
    ],
)
def test_names_contacts_and_times_out_of_range_make_no_party(name: str, choices: dict[str, Any], reason: str) -> None:
    with pytest.raises(ParameterError, match=reason):
        new_party(name, passphrase("x"), cost=QUICK, **choices)


def test_a_party_is_made_with_the_default_cost() -> None:
    made = new_party(NAME, passphrase(NAME), contact="quay 4", created=CREATED)
    assert (made.wrapping.memory, made.wrapping.passes, made.wrapping.lanes) == (65_536, 3, 4)
    assert (made.card.contact, made.card.created) == ("quay 4", CREATED)


def test_no_private_half_is_left_open() -> None:
    before = set(memory._open)
    secret = passphrase("x")
    made = new_party(NAME, secret, cost=QUICK)
    with made.open(secret) as key:
        assert len(key.content) == 128
        key.wrapped(secret, cost=QUICK)
    assert set(memory._open) - before == {secret._number}


# The key.


def test_a_key_comes_back_from_its_file_and_opens() -> None:
    again = PartyKey.parse(KEY.to_file())
    assert again == KEY
    assert again.to_file() == KEY.to_file()
    with again.open(passphrase(NAME)) as key:
        assert key.card == CARD
    assert len(again.sealed) == 128 + 16


def test_the_opener_by_hand_opens_a_party_key() -> None:
    """And the private halves inside are those of the card: FORMAT.md, section 9."""
    content = by_hand.opened(json.loads(KEY.to_file()), revealed(passphrase(NAME)))
    assert by_hand.Private(content).public() == CARD.public("ed25519", "x25519", "mlkem768")


def test_a_new_passphrase_leaves_the_card() -> None:
    fresh = passphrase("the second year")
    with unlocked(NAME) as key:
        rewrapped = key.wrapped(fresh, cost=Cost(memory=16, passes=2, lanes=2))
    assert (rewrapped.card, rewrapped.wrapping.memory) == (CARD, 16)
    assert rewrapped.sealed != KEY.sealed
    with rewrapped.open(fresh) as key:
        assert revealed(key.content) == private().content
    with pytest.raises(WrongKeyError):
        rewrapped.open(passphrase(NAME))


def test_another_passphrase_does_not_open_it() -> None:
    with pytest.raises(WrongKeyError, match="the passphrase does not open it"):
        KEY.open(passphrase("south-pier"))


def test_a_key_beside_anothers_card_does_not_open() -> None:
    """Its content is bound to its own card."""
    swapped = KEY.model_copy(update={"card": card("south-pier")})
    with pytest.raises(VerificationError, match="facts it is bound to") as refusal:
        swapped.open(passphrase(NAME))
    assert not isinstance(refusal.value, WrongKeyError)


def sealed_for(content: bytes, made: PartyCard) -> PartyKey:
    wrapping, sealed = passphrase_sealer(passphrase(NAME), QUICK)(
        Secret.of(content), by_hand.canonical({"kind": "party-key", "version": 1, "card": made.fingerprint})
    )
    return KEY.model_copy(update={"card": made, "wrapping": wrapping, "sealed": sealed})


def exchanged(part: slice) -> bytes:
    content = bytearray(private().content)
    content[part] = private("south-pier").content[part]
    return bytes(content)


@pytest.mark.parametrize(
    "content",
    [
        lambda: exchanged(slice(0, 32)),
        lambda: exchanged(slice(32, 64)),
        lambda: exchanged(slice(64, 128)),
        lambda: exchanged(slice(64, 96)),
        # FIPS 203, section 6.1: z does not enter the public key, and is not seen until a ciphertext is damaged.
        lambda: private().content[:127],
        lambda: private().content + b"\0",
        lambda: private().content[:64],
        lambda: b"",
    ],
    ids=["ed25519", "x25519", "mlkem768", "d of mlkem768", "127 bytes", "129 bytes", "64 bytes", "none"],
)
def test_private_halves_that_are_not_the_cards_are_refused(content: Callable[[], bytes]) -> None:
    before = set(memory._open)
    made, secret = sealed_for(content(), CARD), passphrase(NAME)
    with pytest.raises(VerificationError, match="not those of the card") as refusal:
        made.open(secret)
    # Wiped at once, though the traceback keeps what the frames held.
    assert refusal.tb is not None
    assert set(memory._open) - before == {secret._number}


def test_every_flipped_bit_of_a_key_file_is_refused() -> None:
    """By the reader, or when it is opened; never does anything else come out."""
    data = json.dumps(json.loads(KEY.to_file()), separators=(",", ":")).encode()
    start = data.index(b'"wrapping"')
    # The reader bounds what a file may ask of memory; to spend that here for each bit of the number proves no more.
    bent = [changed for _, changed in bits_flipped(data[start:]) if b'"memory":8,' in changed]
    assert len(bent) > 8 * (len(data) - start) - 100
    for changed in bent:
        with pytest.raises((DocumentError, VerificationError)):
            PartyKey.parse(data[:start] + changed).open(passphrase(NAME))


@pytest.mark.parametrize(
    ("path", "to", "reason"),
    [
        (("card", "name"), "south-pier", "card is not as the format says: its fingerprint does not fit"),
        (("wrapping", "memory"), 1 << 22, "wrapping.memory"),
        (("wrapping", "passes"), 11, "wrapping.passes"),
        (("wrapping", "lanes"), 17, "wrapping.lanes"),
        (("wrapping", "lanes"), 2, "at least 8 KiB of memory for each lane"),
        (("wrapping", "method"), "card", "wrapping.method"),
        (("wrapping", "pepper"), 1, "does not know"),
        (("sealed",), "", "sealed"),
        (("sealed",), "A", "sealed"),
        (("digest",), "00" * 32, "does not know"),
    ],
)
def test_a_key_that_is_not_as_the_format_says_is_refused(path: tuple[str, ...], to: Any, reason: str) -> None:
    with pytest.raises(DocumentError, match=reason):
        PartyKey.parse(file_of(edited(KEY.to_file(), *path, to=to)))


# What an open key does.


def test_a_signature_is_that_of_the_card() -> None:
    with unlocked(NAME) as key:
        signature = key.sign("record", {"a": 1})
    by_hand.verify(CARD.public("ed25519"), by_hand.b64(signature), "record", {"a": 1})


@pytest.mark.parametrize("suite", SUITES)
def test_what_is_sealed_for_a_card_opens_by_its_key_alone(suite: Any) -> None:
    wrapping, sealed = card_sealer(CARD.recipient(), suite)(Secret.of(b"made up"), b"bound")
    with unlocked(NAME) as key:
        assert revealed(key.open(wrapping, sealed, b"bound")) == b"made up"
    with unlocked("south-pier") as other, pytest.raises(WrongKeyError, match="wrapped for the card"):
        other.open(wrapping, sealed, b"bound")


def test_what_is_sealed_by_passphrase_is_none_of_its_business() -> None:
    wrapping, sealed = passphrase_sealer(passphrase(NAME), QUICK)(Secret.of(b"made up"), b"")
    with unlocked(NAME) as key, pytest.raises(WrongKeyError, match="by passphrase"):
        key.open(wrapping, sealed, b"")
    assert revealed(by(NAME)(wrapping, sealed, b"")) == b"made up"


def test_a_closed_key_does_nothing_more() -> None:
    key = unlocked(NAME)
    key.close()
    for attempt in (lambda: key.sign("record", {}), lambda: key.wrapped(passphrase(NAME), cost=QUICK)):
        with pytest.raises(ValueError, match="closed"):
            attempt()


def test_an_open_key_shows_nothing() -> None:
    with unlocked(NAME) as key:
        assert isinstance(key, OpenPartyKey)
        assert "content" not in f"{key!r} {key}"
        with pytest.raises(AttributeError):
            key.note = "x"  # type: ignore[attr-defined]


def test_without_ml_kem_it_is_said_what_to_install(monkeypatch: pytest.MonkeyPatch) -> None:
    """A cryptography package that was built elsewhere may lack it."""

    class Without:
        @staticmethod
        def from_seed_bytes(_: bytes) -> None:
            raise UnsupportedAlgorithm("ML-KEM-768 is not supported by this backend.")

    monkeypatch.setattr("shares.documents.party.MLKEM768PrivateKey", Without)
    with pytest.raises(SharesError, match="built without ML-KEM-768"):
        new_party("north-pier", Secret.of(b"made up"), cost=QUICK)
