"""Wrapped shares: the share comes back with every member, and any change of what it is bound to is refused.

Checked against: FORMAT.md, sections 9 and 10, by the opener written from its text alone
(tests/vectors/make/wrapping_v1.py), and by the samples made with it (tests/vectors/golden/v1/wrapped).
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from parties import QUICK, by, card, edited, file_of, passphrase, unlocked
from strategies import bits_flipped, crooked_split, flat, octets, resealed, revealed, rules
from vectors.make import wrapping_v1 as by_hand

from shares import memory
from shares.documents.party import PartyKey
from shares.documents.share import HEADER, NOTES, Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import SUITES, card_sealer, passphrase_sealer
from shares.errors import DocumentError, VerificationError, WrongKeyError
from shares.memory import Secret
from shares.sharing.rule import Rule

NAME = "north-pier"
# One custodian in two places, so that there are two rows.
DEALT = crooked_split(b"made up", Rule(2, (NAME, "south-pier", NAME)))
SHARE = DEALT.shares[0]
GOLDEN = Path(__file__).parents[1] / "vectors" / "golden" / "v1"
WRAPPED = WrappedShare.wrap(SHARE, passphrase_sealer(passphrase(NAME), QUICK))
FOR_CARD = WrappedShare.wrap(SHARE, card_sealer(card(NAME).recipient()))


def rows(share: Share) -> list[bytes]:
    return [revealed(row) for row in share.rows]


def same(one: Share, other: Share) -> bool:
    return one.to_file() == other.to_file()


def digested(members: dict[str, Any]) -> bytes:
    """The file with its own digest made to fit, as a forger would."""
    return file_of({**members, "digest": by_hand.envelope_digest(members)})


# What comes back.


@settings(max_examples=20)
@given(rules(most=6), octets(1, 40))
def test_every_share_comes_back_by_passphrase(rule: Rule, secret: bytes) -> None:
    for share in crooked_split(secret, rule).shares:
        wrapped = WrappedShare.wrap(share, passphrase_sealer(passphrase("x"), QUICK))
        again = WrappedShare.parse(wrapped.to_file())
        assert again == wrapped
        assert again.is_whole()
        assert again.row_length == share.row_length
        opened = again.open(by("x"))
        assert opened.is_whole()
        assert same(opened, share)


@pytest.mark.parametrize("suite", SUITES)
def test_a_share_comes_back_by_the_key_of_the_card(suite: Any) -> None:
    wrapped = WrappedShare.parse(WrappedShare.wrap(SHARE, card_sealer(card(NAME).recipient(), suite)).to_file())
    with unlocked(NAME) as key:
        assert same(wrapped.open(key.open), SHARE)
    with unlocked("south-pier") as key, pytest.raises(WrongKeyError):
        wrapped.open(key.open)


@pytest.mark.parametrize("notes", [dict.fromkeys(NOTES), {"label": "Lock gates: “west” \U0001f512"}, {"notice": None}])
def test_notes_come_back_as_they_were(notes: dict[str, Any]) -> None:
    share = resealed(SHARE, **notes)
    opened = WrappedShare.wrap(share, passphrase_sealer(passphrase(NAME), QUICK)).open(by(NAME))
    assert same(opened, share)
    assert opened.commitment() == SHARE.commitment()


def test_a_damaged_share_comes_back_whole_in_its_digest_alone() -> None:
    """Wrapping makes the digest anew. Whoever wraps is to look first, as ``shares wrap`` does."""
    bent = SHARE.model_copy(update={"digest": bytes(32)})
    opened = WrappedShare.wrap(bent, passphrase_sealer(passphrase(NAME), QUICK)).open(by(NAME))
    assert same(opened, SHARE)


def test_the_file_shows_facts_first_and_no_row() -> None:
    members = json.loads(WRAPPED.to_file())
    assert list(members)[:2] == ["kind", "version"]
    assert list(members)[-3:] == ["wrapping", "sealed", "digest"]
    assert set(members) == {*HEADER, *NOTES, "wrapping", "sealed", "digest"}
    for row in json.loads(SHARE.to_file())["rows"]:
        assert row[:10] not in WRAPPED.to_file().decode()


def test_a_share_of_the_largest_rows_is_wrapped() -> None:
    share = crooked_split(bytes(65_536), flat(1, 1)).shares[0]
    opened = WrappedShare.parse(WrappedShare.wrap(share, passphrase_sealer(passphrase(NAME), QUICK)).to_file())
    assert same(opened.open(by(NAME)), share)


def test_no_secret_is_left_open() -> None:
    secret = passphrase(NAME)
    before = set(memory._open)
    opened = WrappedShare.wrap(SHARE, passphrase_sealer(secret, QUICK)).open(by(secret))
    assert set(memory._open) - before == {row._number for row in opened.rows}


# Against the outside.


@pytest.mark.parametrize("wrapped", [WRAPPED, FOR_CARD], ids=["passphrase", "card"])
def test_the_opener_by_hand_opens_it(wrapped: WrappedShare) -> None:
    members = json.loads(wrapped.to_file())
    assert members["digest"] == by_hand.envelope_digest(members)
    with unlocked(NAME) as key:
        private = by_hand.Private(revealed(key.content))
    opener = revealed(passphrase(NAME)) if wrapped is WRAPPED else private
    assert by_hand.opened(members, opener) == b"".join(rows(SHARE))


def test_what_it_is_bound_to_is_what_the_format_says() -> None:
    assert by_hand.bound_of(json.loads(WRAPPED.to_file())) == WRAPPED.bound()
    assert set(WrappedShare.BOUND) == set(by_hand.BOUND["wrapped-share"])


@pytest.mark.parametrize("name", ["north-pier", "registrar", "registrar.x25519"])
def test_golden_samples_stay_readable_for_ever(name: str) -> None:
    vectors = json.loads((GOLDEN.parents[1] / "wrapped_v1.json").read_text())
    owner = name.split(".")[0]
    known = {test["comment"]: test for test in vectors["testGroups"][0]["tests"]}
    wrapped = WrappedShare.parse((GOLDEN / "wrapped" / f"{name}.wrapped.json").read_bytes())
    bare = Share.parse((GOLDEN / "flat" / f"{owner}.share.json").read_bytes())
    assert json.loads(wrapped.to_file()) == json.loads((GOLDEN / "wrapped" / f"{name}.wrapped.json").read_bytes())
    if owner == "north-pier":
        opened = wrapped.open(by(Secret.of(bytes.fromhex(known["wrapped-share of north-pier"]["passphrase"]))))
    else:
        key = PartyKey.parse((GOLDEN / "wrapped" / "registrar.key.json").read_bytes())
        secret = Secret.of(bytes.fromhex(known["party-key of registrar"]["passphrase"]))
        with key.open(secret) as unlocked_key:
            opened = wrapped.open(unlocked_key.open)
    assert same(opened, bare)


# What is refused.


def test_another_passphrase_and_another_way_do_not_open_it() -> None:
    with pytest.raises(WrongKeyError, match="the passphrase does not open it"):
        WRAPPED.open(by("south-pier"))
    with unlocked(NAME) as key, pytest.raises(WrongKeyError, match="by passphrase"):
        WRAPPED.open(key.open)


def test_every_flipped_bit_of_the_file_is_refused() -> None:
    """By the reader, or by the file's own digest, before anybody is asked for a passphrase."""
    data = json.dumps(json.loads(WRAPPED.to_file()), separators=(",", ":")).encode()
    asked: list[int] = []
    for _, changed in bits_flipped(data):
        with pytest.raises((DocumentError, VerificationError)):
            WrappedShare.parse(changed).open(lambda *_: asked.append(1))  # type: ignore[arg-type, return-value]
    assert asked == []


@pytest.mark.parametrize("wrapped", [WRAPPED, FOR_CARD], ids=["passphrase", "card"])
@pytest.mark.parametrize(
    ("member", "to"),
    [
        ("set", "00" * 16),
        ("epoch", 2),
        ("custodian", "south-pier"),
        ("field", "0x11d"),
        ("paths", [[[2, 1]], [[2, 2]]]),
        ("secret_commitment", "00" * 32),
        ("encrypted_file", "00" * 32),
        ("record", None),
        ("record", "-".join(["AAAA"] * 8)),
    ],
)
def test_whoever_changes_a_bound_member_is_found_out_though_the_digest_fits(
    wrapped: WrappedShare, member: str, to: Any
) -> None:
    members = edited(wrapped.to_file(), member, to=to)
    changed = WrappedShare.parse(digested(members))
    assert changed.is_whole()
    with unlocked(NAME) as key, pytest.raises(VerificationError, match="were changed") as refusal:
        changed.open(by(NAME) if wrapped is WRAPPED else key.open)
    assert not isinstance(refusal.value, WrongKeyError)


def test_every_bound_member_was_tried() -> None:
    """Kind and version are bound as well, and have one value each."""
    tried = {"set", "epoch", "custodian", "field", "paths", "secret_commitment", "encrypted_file", "record"}
    assert set(WrappedShare.BOUND) == tried | {"kind", "version"}
    assert set(WrappedShare.model_fields) - set(WrappedShare.BOUND) == {
        *("label", "rule", "notice"),
        *("wrapping", "sealed", "digest"),
    }


def test_notes_that_nothing_proves_may_be_changed_by_whoever_makes_the_digest_fit() -> None:
    """As of a bare share: FORMAT.md, section 10. The digest guards them against accidents."""
    members = edited(WRAPPED.to_file(), "label", to="Another label")
    with pytest.raises(VerificationError, match="own digest does not fit"):
        WrappedShare.parse(file_of(members)).open(by(NAME))
    assert WrappedShare.parse(digested(members)).open(by(NAME)).label == "Another label"


@settings(max_examples=60)
@given(st.data())
def test_whoever_changes_what_is_sealed_is_found_out_though_the_digest_fits(data: st.DataObject) -> None:
    wrapped = data.draw(st.sampled_from([WRAPPED, FOR_CARD]))
    members = json.loads(wrapped.to_file())
    place = data.draw(
        st.sampled_from(["sealed", "salt", "commitment"] if wrapped is WRAPPED else ["sealed", "key", "commitment"])
    )
    holder = members if place == "sealed" else members["wrapping"]
    octets_ = bytearray(by_hand.raw(holder[place]))
    octets_[data.draw(st.integers(0, len(octets_) - 1))] ^= data.draw(st.integers(1, 255))
    holder[place] = by_hand.b64(octets_)
    with unlocked(NAME) as key, pytest.raises(VerificationError) as refusal:
        WrappedShare.parse(digested(members)).open(by(NAME) if wrapped is WRAPPED else key.open)
    # Another salt or commitment cannot be told from another passphrase: the key is another one.
    assert isinstance(refusal.value, WrongKeyError) is (place in ("salt", "commitment") and wrapped is WRAPPED)


def test_the_sealed_rows_of_another_share_do_not_fit() -> None:
    other = WrappedShare.wrap(
        crooked_split(b"other", Rule(2, (NAME, "x", NAME))).shares[0], passphrase_sealer(passphrase(NAME), QUICK)
    )
    members = json.loads(WRAPPED.to_file())
    for names in (("sealed",), ("wrapping",), ("sealed", "wrapping")):
        mixed = members | {name: json.loads(other.to_file())[name] for name in names}
        with pytest.raises(VerificationError):
            WrappedShare.parse(digested(mixed)).open(by(NAME))


LENGTH = WRAPPED.row_length


@pytest.mark.parametrize(
    ("path", "to", "reason"),
    [
        (("sealed",), by_hand.b64(bytes(2 * LENGTH + 15)), "as many sealed rows as paths"),
        (("sealed",), by_hand.b64(bytes(2 * LENGTH + 17)), "as many sealed rows as paths"),
        (("sealed",), by_hand.b64(bytes(2 * 52 + 16)), "53 to 131,072"),
        (("sealed",), by_hand.b64(bytes(2 * 131_073 + 16)), "53 to 131,072"),
        (("sealed",), by_hand.b64(bytes(16)), "53 to 131,072"),
        (("sealed",), by_hand.b64(bytes(1)), "sealed rows|53 to 131,072"),
        (("sealed",), "", "sealed"),
        (("sealed",), None, "sealed"),
        (("sealed",), "A" * 142 + "=", "base64url"),
        (("paths",), [[[2, 1]]] * 2, "no path twice"),
        (("paths",), [], "paths"),
        (("kind",), "share", "it is a share"),
        (("version",), 2, "version"),
        (("rows",), ["AAAA"], "does not know"),
        (("wrapping",), None, "wrapping"),
        (("wrapping",), {}, "wrapping"),
        (("wrapping", "method"), "sesame", "wrapping"),
        (("wrapping", "memory"), (1 << 21) + 1, "wrapping.passphrase.memory"),
        (("wrapping", "passes"), 11, "wrapping.passphrase.passes"),
        (("wrapping", "lanes"), 17, "wrapping.passphrase.lanes"),
        (("wrapping", "lanes"), 2, "8 KiB of memory for each lane"),
        (("wrapping", "suite"), "x25519", "does not know"),
        (("field",), "0x101", "field"),
        (("custodian",), "a/b", "path separator"),
    ],
    ids=lambda value: str(value)[:40],
)
def test_a_file_that_is_not_as_the_format_says_is_refused(path: tuple[Any, ...], to: Any, reason: str) -> None:
    with pytest.raises(DocumentError, match=reason) as refusal:
        WrappedShare.parse(digested(edited(WRAPPED.to_file(), *path, to=to)), where="it")
    assert refusal.value.__cause__ is refusal.value.__context__ is None


@pytest.mark.parametrize(
    ("path", "to", "reason"),
    [
        (("wrapping", "suite"), "p256", "wrapping.card.suite"),
        (("wrapping", "card"), "nobody", "wrapping.card.card"),
        (("wrapping", "key"), "", "wrapping.card.key"),
        (("wrapping", "salt"), "AAAA", "does not know"),
    ],
)
def test_a_wrapping_for_a_card_that_is_not_as_the_format_says(path: tuple[Any, ...], to: Any, reason: str) -> None:
    with pytest.raises(DocumentError, match=reason):
        WrappedShare.parse(digested(edited(FOR_CARD.to_file(), *path, to=to)))
