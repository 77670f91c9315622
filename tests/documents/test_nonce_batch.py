"""Batches of commitments, and the files of nonces: what is refused at reading, and that the largest fit.

Checked against: RFC 9591, sec. 6.1 (which points are refused); RFC 8032, sec. 5.1 (the points whose order divides 8).
"""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import pytest
from keys.quorum import dealt
from parties import card, unlocked

from shares.documents.members import encode_bytes
from shares.documents.nonce_batch import (
    MAX_BATCH,
    BoundPair,
    NonceBatch,
    NonceMark,
    NonceMarks,
    NoncePair,
    pair_id,
)
from shares.documents.wrapping import card_sealer
from shares.errors import DocumentError, VerificationError
from shares.group.edwards25519 import BASE, Point, Scalar
from shares.memory import Secret

ME = "north-pier"
P = 2**255 - 19
Y8 = 0x7A03AC9277FDC74EC6CC392CFA53202A0F67100D760B3CBA4FD84D3D706A17C7
SMALL_ORDER = [(y | sign << 255).to_bytes(32, "little") for y in (1, P - 1, 0, Y8, P - Y8) for sign in (0, 1)]
NOT_CANONICAL = [(P + y).to_bytes(32, "little") for y in (0, 1, 3, 18)]


def points(count: int) -> list[tuple[Point, Point]]:
    return [(Scalar.of(2 * number + 1) * BASE, Scalar.of(2 * number + 2) * BASE) for number in range(count)]


def batch(count: int = 2) -> NonceBatch:
    with unlocked(ME) as own:
        return NonceBatch.signed_by(own, record=dealt().record, signer=ME, commitments=points(count))


def pair() -> NoncePair:
    hiding, binding = points(1)[0]
    seal = card_sealer(card(ME).recipient())
    with Secret.of(bytes(64)) as content:
        return NoncePair.wrap(
            content, record=dealt().record, signer=ME, batch="0" * 32, hiding=hiding, binding=binding, seal=seal
        )


def bound() -> BoundPair:
    seal = card_sealer(card(ME).recipient())
    with Secret.of(bytes(64)) as content:
        return BoundPair.of(pair(), content, purpose=bytes(32), mark=None, seal=seal)


def marks(count: int = 1) -> NonceMarks:
    listed = [NonceMark(pair=pair_id(*one), mark=bytes(32)) for one in points(count)]
    with unlocked(ME) as own:
        return NonceMarks.signed_by(own, record=dealt().record, signer=ME, batch="0" * 32, marks=listed)


def test_they_are_read_as_they_were_written() -> None:
    for made in (batch(), pair(), bound(), marks()):
        again = type(made).parse(made.to_file())
        assert again == made
        assert again.to_file() == made.to_file()
    assert NonceBatch.parse(batch().to_file()).digest() != batch(3).digest()


def test_a_pair_is_named_by_both_commitments() -> None:
    (one, two), (three, _) = points(2)
    assert len({pair_id(one, two), pair_id(two, one), pair_id(one, three), pair_id(three, two)}) == 4


def first(members: dict[str, Any]) -> dict[str, str]:
    return members["commitments"][0]  # type: ignore[no-any-return]


CHANGES: dict[str, Callable[[dict[str, Any]], None]] = {
    "signer": lambda members: members.update(signer="south-pier"),
    "epoch": lambda members: members.update(epoch=2),
    "card": lambda members: members.update(card=json.loads(card("south-pier").to_file())),
    "twice": lambda members: members.update(commitments=2 * [first(members)]),
    "none": lambda members: members.update(commitments=[]),
    "fewer": lambda members: members.update(commitments=members["commitments"][1:]),
    "other order": lambda members: members.update(commitments=members["commitments"][::-1]),
    "swapped": lambda members: first(members).update(
        hiding=first(members)["binding"], binding=first(members)["hiding"]
    ),
    "more": lambda members: members.update(more=1),
    "too many": lambda members: members.update(commitments=(MAX_BATCH + 1) * [first(members)]),
}


@pytest.mark.parametrize("change", CHANGES)
def test_an_altered_batch_is_refused(change: str) -> None:
    members = json.loads(batch().to_file())
    CHANGES[change](members)
    with pytest.raises(DocumentError):
        NonceBatch.parse(json.dumps(members).encode())


@pytest.mark.parametrize("member", ["hiding", "binding"])
def test_points_outside_the_group_are_refused(member: str) -> None:
    members = json.loads(batch().to_file())
    for encoding in (*SMALL_ORDER, *NOT_CANONICAL):
        first(members)[member] = encode_bytes(encoding)
        with pytest.raises(DocumentError, match="no point of the group"):
            NonceBatch.parse(json.dumps(members).encode())


@pytest.mark.parametrize("length", [63, 65, 0])
@pytest.mark.parametrize("made", [pair, bound])
def test_a_pair_holds_two_numbers(made: Callable[[], NoncePair | BoundPair], length: int) -> None:
    document = made()
    members = json.loads(document.to_file())
    members["sealed"] = encode_bytes(bytes(length + 16))
    with pytest.raises(DocumentError, match="two sealed numbers"):
        type(document).parse(json.dumps(members).encode())


@pytest.mark.parametrize("member", BoundPair.BOUND)
def test_what_is_bound_opens_as_it_was_sealed_alone(member: str) -> None:
    """No member can be exchanged, and a pair is not read as one that is bound: it has no purpose and no mark."""
    changes = {"kind": "nonce-pair", "version": 2, "epoch": 2, "mark": bytes(32), "purpose": bytes([1]) * 32}
    changes |= dict(zip(("hiding", "binding"), points(2)[1], strict=True))
    other = dealt(number=1).record
    changes |= {"key": other.key, "record": other.fingerprint, "signer": "dry-dock", "batch": "1" * 32}
    with unlocked(ME) as own:
        assert len(bound().content(own.open)) == 64
        changed = bound().model_copy(update={member: changes[member]}).with_digest()
        with pytest.raises(VerificationError, match="bound to were changed"):
            changed.content(own.open)
    with pytest.raises(DocumentError):
        BoundPair.parse(pair().to_file())


def test_marks_are_signed() -> None:
    signed, other = marks(2), dealt(number=1).record
    assert signed.is_by(card(ME))
    assert not signed.is_by(card("south-pier"))
    for change in (
        {"marks": signed.marks[:1]},
        {"marks": (signed.marks[0], signed.marks[1].model_copy(update={"mark": None}))},
        {"batch": "1" * 32},
        {"key": other.key},
        {"epoch": 2},
        {"record": other.fingerprint},
        {"signer": "south-pier"},
        {"signature": bytes(64)},
    ):
        assert not signed.model_copy(update=change).is_by(card(ME)), change


def test_the_largest_batch_and_its_marks_can_be_read() -> None:
    listed = batch(MAX_BATCH)
    assert NonceBatch.parse(listed.to_file()) == listed
    kept = marks(MAX_BATCH)
    assert NonceMarks.parse(kept.to_file()) == kept
