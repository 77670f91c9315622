"""Partial results that are no good: each is named, and set aside where enough others are there.

Checked against: a sender that shares no code with the package (``openings``); the sender's plaintext is what comes out.
"""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import curve
import pytest
from hypothesis import given
from hypothesis import strategies as st
from keys.openings import (
    PLAINTEXT,
    Quorum,
    asked,
    bad_partials,
    by_hand,
    flipped,
    message_of,
    octets,
    told,
)

from shares.documents.task_message import OpeningKey
from shares.errors import (
    NotEnoughSharesError,
    VerificationError,
)
from shares.group.montgomery import lift
from shares.keys.opening import combine
from shares.keys.partial import checked_result, partial_result, proof_context
from shares.memory import Secret


@pytest.fixture
def quorum(tmp_path: Path) -> Quorum:
    """2 of 3."""
    return Quorum(tmp_path)


def test_a_bad_partial_result_is_named(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    bad = bad_partials(quorum, task, message)
    for what, partial in bad.items():
        # As many as are needed: it cannot be done, and light-house is why.
        given = quorum.spoken(task, message, "north-pier") | {"light-house": partial}
        with pytest.raises(NotEnoughSharesError, match=r"and 1 do; that of light-house does not: ") as refusal:
            combine(task, quorum.record, told(task, message, given), [{}, given])
        assert refusal.value.hint == "awaited: south-pier", what
        # One more: it is set aside.
        given = quorum.spoken(task, message, "north-pier", "south-pier") | {"light-house": partial}
        plaintext, aside = combine(task, quorum.record, told(task, message, given), [{}, given])
        assert octets(plaintext) == PLAINTEXT, what
        assert [one.by for one in aside] == ["light-house"], what
    assert len(bad) == 15


def test_all_bad_ones_are_named(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    given = quorum.spoken(task, message, "light-house") | {"north-pier": None, "south-pier": Secret(96)}
    with pytest.raises(NotEnoughSharesError, match=r"north-pier does not: .*south-pier does not: ") as refusal:
        combine(task, quorum.record, told(task, message, given), [{}, given])
    assert "new task" in str(refusal.value.hint)


def test_a_message_that_says_something_else_is_no_partial_result(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    given = quorum.spoken(task, message, "north-pier", "south-pier")
    inbox = told(task, message, given, OpeningKey(what="opening-key", x25519=bytes([9]) + bytes(31)))
    with pytest.raises(NotEnoughSharesError):
        combine(task, quorum.record, inbox, [{}, given])
    with pytest.raises(NotEnoughSharesError, match="and 0 do"):
        combine(task, quorum.record, asked(task, message), [{}])


def test_each_byte_of_a_partial_result_counts(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    point, index = lift(message[:32]), quorum.record.holder("north-pier").index
    context = proof_context(task, quorum.record, index)
    good = octets(partial_result(quorum.scalars["north-pier"], point, context))
    assert checked_result(Secret.of(good), quorum.record, index, point, context)
    for bit in range(8 * 7):  # Every byte, and every place in a byte.
        with pytest.raises(VerificationError):
            checked_result(Secret.of(flipped(good, [bit])), quorum.record, index, point, context)


@given(bits=st.sets(st.integers(0, 8 * 96 - 1), min_size=1, max_size=20))
def test_no_alteration_of_a_partial_result_passes(tmp_path_factory, bits) -> None:
    quorum = Quorum(tmp_path_factory.mktemp("k"))
    point = lift(message_of(quorum)[:32])
    good = octets(partial_result(quorum.scalars["north-pier"], point, b""))
    with pytest.raises(VerificationError):
        checked_result(Secret.of(flipped(good, sorted(bits))), quorum.record, 1, point, b"")


def test_a_message_that_does_not_open_is_told_from_a_wrong_key(quorum) -> None:
    message = message_of(quorum, info=b"tide", associated=b"table")
    bound = {"info": b"tide", "associated": b"table"}
    wrong = [
        (message, {}),
        (message, {"info": b"tide"}),
        (message, {"associated": b"table"}),
        (message, {"info": b"table", "associated": b"tide"}),
        (message, {**bound, "cipher": "chacha20-poly1305"}),
        (flipped(message, [8 * 40]), bound),
        (message[:-1], bound),
        (message + b"\0", bound),
        (message[:32] + bytes(16), bound),
    ]
    for altered, facts in wrong:
        task = quorum.task(altered, **facts)
        given = by_hand(quorum, task)
        with pytest.raises(VerificationError, match="the key is right"):
            combine(task, quorum.record, told(task, altered, given), [{}, given])
    task = quorum.task(message, **bound)
    assert quorum.opened(task, message, quorum.spoken(task, message, "north-pier", "south-pier")) == PLAINTEXT


def test_a_partial_result_is_what_the_format_page_says(quorum) -> None:
    """Section 28 of FORMAT_KEYS.md, computed again in plain integers with the standard library."""
    message = message_of(quorum)
    task = quorum.task(message)
    index, share = 2, int.from_bytes(quorum.scalars["south-pier"].encode(), "little")
    u = int.from_bytes(message[:32], "little")
    e = curve.decode(((u - 1) * pow(u + 1, -1, curve.P) % curve.P).to_bytes(32, "little"))
    given = octets(quorum.spoken(task, message, "south-pier")["south-pier"])
    d, c, z = given[:32], *(int.from_bytes(given[i : i + 32], "little") for i in (32, 64))
    assert d == curve.encode(curve.multiply(share, e))
    facts = {"index": index, "record": quorum.record.fingerprint, "task": task.digest().hex()}
    context = b"shares/v1/partial-result" + json.dumps(facts, separators=(",", ":")).encode()
    public = curve.multiply(share, curve.BASE)
    nonces = [
        curve.add(curve.multiply(z, base), curve.multiply(-c, of))
        for base, of in ((curve.BASE, public), (e, curve.decode(d)))
    ]
    points = b"".join(curve.encode(point) for point in (public, e, curve.decode(d), *nonces))
    hashed = b"shares/v1/proof/equality" + len(context).to_bytes(8, "big") + context + points
    assert c == int.from_bytes(hashlib.sha512(hashed).digest(), "little") % curve.L
