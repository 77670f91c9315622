"""Shares: what is bound by which digest, and that no flipped bit goes unseen.

Checked against: FORMAT.md, section 4, recomputed here with ``hashlib``, ``json`` and ``hmac``; every bit of a small
share's file, one at a time.
"""

from __future__ import annotations

import base64
import contextlib
import copy
import hashlib
import hmac
import json
import pickle
from typing import Any

import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from hypothesis import given
from hypothesis import strategies as st
from strategies import (
    bits_flipped,
    crooked_split,
    flat,
    flipped,
    moduli,
    octets,
    presented,
    resealed,
    revealed,
    rules,
    with_rows,
)

from shares.custody.recover import recover
from shares.documents.members import encode_bytes
from shares.documents.share import HEADER, MAX_ROW, MIN_ROW, NOTES, Share
from shares.errors import DocumentError, SharesError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.rule import Rule

SECRET = b"made up"
DEALT = crooked_split(SECRET, Rule(2, ("north-pier", "south-pier", "north-pier", Rule(1, ("registrar", "north-pier")))))
SHARE = DEALT.shares[0]
FILE = SHARE.to_file()


def raw(text: str) -> bytes:
    return base64.urlsafe_b64decode(text + "=" * (-len(text) % 4))


def sorted_json(members: dict[str, Any], names: tuple[str, ...]) -> bytes:
    """RFC 8785 for these members: no floats, and names whose order is that of their bytes."""
    chosen = {name: members[name] for name in names}
    return json.dumps(chosen, sort_keys=True, separators=(",", ":"), ensure_ascii=False).encode()


@given(rules(most=5), moduli(), octets(1, 20))
def test_commitment_digest_and_key_are_what_the_format_says(rule: Rule, modulus: int, secret: bytes) -> None:
    for share in crooked_split(secret, rule, field=Field(modulus)).shares:
        members = json.loads(share.to_file())
        core = sorted_json(members, HEADER) + b"".join(map(raw, members["rows"]))
        commitment = hashlib.sha256(b"shares/v1/share" + core).digest()
        assert share.commitment() == commitment
        notes = sorted_json(members, ("label", "rule", "notice", "record"))
        assert members["digest"] == hashlib.sha256(b"shares/v1/digest" + commitment + notes).hexdigest()
        assert share.is_whole()
        # RFC 5869 with no salt is a salt of zeros; one block of SHA-256 is all that is asked for.
        extracted = hmac.digest(bytes(32), core, "sha256")
        seed = hmac.digest(extracted, b"shares/v1/attest\x01", "sha256")
        assert share.attestation_key() == Ed25519PrivateKey.from_private_bytes(seed).public_key().public_bytes_raw()


def test_header_and_notes_and_rows_and_digest_are_all_there_is() -> None:
    assert {*HEADER, *NOTES, "rows", "digest"} == set(Share.model_fields) == set(json.loads(FILE))
    assert list(json.loads(FILE))[:2] == ["kind", "version"]


def test_a_share_comes_back_from_its_file() -> None:
    again = Share.parse(FILE)
    assert again.to_file() == FILE
    assert again.points() == SHARE.points()
    assert again.is_whole()


def test_every_flipped_bit_of_a_share_is_refused_or_seen_by_its_digest() -> None:
    """Nothing in the file is outside the digest: no flipped bit is harmless, none crashes, none goes unseen."""
    parsed = 0
    for _, changed in bits_flipped(FILE):
        try:
            share = Share.parse(changed)
        except DocumentError:
            continue
        parsed += 1
        assert not share.is_whole()
    assert parsed > 1000


def test_a_flipped_bit_in_one_of_exactly_k_shares_is_never_a_wrong_secret() -> None:
    """Every bit of one share's file, the k - 1 others good, and no record: the right secret or a refusal."""
    one, other = crooked_split(SECRET, flat(2, 2)).shares
    bare = resealed(one, rule=None, notice=None, record=None)
    right = 0
    for _, changed in bits_flipped(bare.to_file()):
        try:
            recovery = recover(presented([Share.parse(changed), other]))
        except SharesError:
            continue
        assert revealed(recovery.secret) == SECRET
        assert recovery.findings[0].status.value == "damaged"
        right += 1
    # Flips in the name, the label and the digest alone do no harm: the row is right, and the commitment says so.
    assert right > 200


@given(st.integers(1, 4), st.data())
def test_a_flipped_bit_in_each_of_exactly_k_shares_is_never_a_wrong_secret(need: int, data) -> None:
    """In the files as they lie, and in the rows with the digests made to fit again."""
    dealt = crooked_split(SECRET, flat(need, need))
    shares = []
    for share in dealt.shares:
        if data.draw(st.booleans()):
            bit = data.draw(st.integers(0, 8 * share.row_length - 1))
            shares.append(resealed(share, rows=with_rows(share, flipped(bit))))
        else:
            file = bytearray(share.to_file())
            bit = data.draw(st.integers(0, 8 * len(file) - 1))
            file[bit // 8] ^= 1 << bit % 8
            with contextlib.suppress(DocumentError):
                shares.append(Share.parse(bytes(file)))
    try:
        recovery = recover(presented(shares))
    except SharesError:
        return
    assert revealed(recovery.secret) == SECRET


def test_nor_where_whoever_flipped_it_made_the_digest_fit_again() -> None:
    """Every bit of the row, sealed anew: an attacker's share. With just k shares there is nothing to compare with."""
    dealt = crooked_split(b"x", flat(2, 2))
    share, other = dealt.shares
    row = revealed(share.rows[0])
    for _, changed in bits_flipped(row):
        forged = resealed(share, rows=(Secret.of(changed),))
        assert forged.is_whole()
        try:
            recovery = recover(presented([forged, other]))
        except SharesError:
            continue
        # The mask is under no commitment without a record, and the secret does not depend on it.
        assert revealed(recovery.secret) == b"x"
        assert changed[:-16] == row[:-16]


# Forms that are refused.


def bent(**members: Any) -> bytes:
    """The sample with members changed, and the digest left as it is: whether it parses is what is asked."""
    return json.dumps({**json.loads(FILE), **members}).encode()


def row_of(length: int) -> str:
    return encode_bytes(bytes(length))


ROWS, PATHS = json.loads(FILE)["rows"], json.loads(FILE)["paths"]

REFUSED = {
    "no rows": {"rows": []},
    "a row too few": {"rows": ROWS[:2]},
    "a row too many": {"rows": [*ROWS, ROWS[0]]},
    "rows of two lengths": {"rows": [*ROWS[:2], row_of(53)]},
    "rows too short": {"rows": [row_of(MIN_ROW - 1)] * 3},
    "rows too long": {"rows": [row_of(MAX_ROW + 1)] * 3},
    "a row with padding": {"rows": [*ROWS[:2], ROWS[2] + "="]},
    "a row in the other alphabet": {"rows": [*ROWS[:2], "+/" + ROWS[2][2:]]},
    "a row with white space": {"rows": [*ROWS[:2], ROWS[2][:8] + "\n" + ROWS[2][8:]]},
    "a row with unused bits set": {"rows": [row_of(53)[:-1] + "B"] * 3},
    "a row that is null": {"rows": [*ROWS[:2], None]},
    "a row of numbers": {"rows": [*ROWS[:2], [0] * 53]},
    "rows that are one text": {"rows": "".join(ROWS)},
    "no paths": {"paths": []},
    "an empty path": {"paths": [*PATHS[:2], []]},
    "a step of one number": {"paths": [*PATHS[:2], [[2]]]},
    "a step of three numbers": {"paths": [*PATHS[:2], [[2, 1, 1]]]},
    "x = 0": {"paths": [*PATHS[:2], [[2, 0]]]},
    "x = 256": {"paths": [*PATHS[:2], [[2, 256]]]},
    "k = 0": {"paths": [*PATHS[:2], [[0, 9]]]},
    "k = 256": {"paths": [*PATHS[:2], [[256, 9]]]},
    "x that is true": {"paths": [*PATHS[:2], [[2, True]]]},
    "x as text": {"paths": [*PATHS[:2], [[2, "9"]]]},
    "a path twice": {"paths": [PATHS[0], PATHS[1], PATHS[0]]},
    "a path that begins another": {"paths": [PATHS[0], PATHS[1], [PATHS[0][0], [1, 1]]]},
    "a path of 9 steps": {"paths": [*PATHS[:2], [[1, 1]] * 9]},
    "a digest too short": {"digest": "00" * 31},
    "a digest in capitals": {"digest": "AA" * 32},
    "no digest": {"digest": None},
    "no commitment": {"secret_commitment": None},
    "a record's fingerprint in small letters": {"record": "aaaa-" * 7 + "aaaa"},
    "a record's fingerprint with a line end": {"record": "AAAA-" * 7 + "AAAA\n"},
    "an empty label": {"label": ""},
    "a notice of 501 characters": {"notice": "x" * 501},
    "a rule of 65,537 characters": {"rule": "x" * 65_537},
    "a rule with a line end": {"rule": "any 2 of\na, b"},
    "an empty rule": {"rule": ""},
}


@pytest.mark.parametrize("name", REFUSED)
def test_a_share_out_of_form_is_refused(name: str) -> None:
    with pytest.raises(DocumentError):
        Share.parse(bent(**REFUSED[name]))


ACCEPTED = {
    "the notes null": {"label": None, "rule": None, "notice": None, "record": None},
    "the shortest rows": {"rows": [row_of(MIN_ROW)] * 3},
    "the longest rows": {"rows": [row_of(MAX_ROW)] * 3},
    "the largest k and x": {"paths": [*PATHS[:2], [[255, 255]]]},
    "a path of 8 steps": {"paths": [*PATHS[:2], [[1, 9]] * 8]},
    "paths in another order": {"paths": PATHS[::-1]},
    "the last epoch": {"epoch": 2**32 - 1},
    "an encrypted file": {"encrypted_file": "00" * 32},
}


@pytest.mark.parametrize("name", ACCEPTED)
def test_a_share_at_the_edge_of_its_form_is_read(name: str) -> None:
    share = Share.parse(bent(**ACCEPTED[name]))
    assert not share.is_whole()
    assert json.loads(share.to_file()) == json.loads(bent(**ACCEPTED[name]))


# Keeping it dark.


def test_a_share_is_neither_copied_deeply_nor_pickled() -> None:
    for attempt in (copy.deepcopy, pickle.dumps):
        with pytest.raises(TypeError):
            attempt(SHARE)


def test_closing_a_share_wipes_its_rows() -> None:
    share = Share.parse(FILE)
    share.close()
    for row in share.rows:
        with pytest.raises(ValueError, match="closed"):
            row.view()


def test_a_refused_share_leaves_no_row_open_for_long() -> None:
    """Rows decoded before the refusal are wiped when the refusal is over, not at the end of the process."""
    from shares import memory

    before = len(memory._open)
    for changes in (REFUSED["a row with padding"], REFUSED["a path twice"], REFUSED["no digest"]):
        with pytest.raises(DocumentError):
            Share.parse(bent(**changes))
    assert len(memory._open) == before
