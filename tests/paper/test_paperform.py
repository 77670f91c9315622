"""The paper form: the same share comes back, in as few bytes as promised, and nothing else is read.

Source: tests/vectors/paper_v1.json, worked out from FORMAT.md, section 11, by a program that shares no code with the
package (tests/vectors/make/make_paper_v1.py); RFC 4648, section 10 (base32).
"""

from __future__ import annotations

import base64
import contextlib
import hashlib
import secrets
import subprocess
import sys

import pytest
from hypothesis import given
from hypothesis import strategies as st
from paper.conftest import VECTORS, document, identity, published
from strategies import crooked_split, flat, rules

from shares.custody.split import flat_rule, split
from shares.documents.share import Share
from shares.errors import DocumentError, ParameterError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.paper.paperform import BLOCK, MAX_BLOCKS, from_paper, from_text, to_paper, to_text
from shares.sharing.rule import Point

VALID, INVALID = published()


def checked(blocks: int, body: bytes) -> bytes:
    """A form around any body, with the right check."""
    return bytes([blocks]) + hashlib.sha256(b"shares/v1/paper" + bytes([blocks]) + body).digest()[:4] + body


@pytest.mark.parametrize("test", VALID, ids=lambda test: test["comment"])
def test_published_forms(test):
    share = document(test["share"])
    form = bytes.fromhex(test["form"])
    assert to_paper(share) == form
    assert identity(from_paper(form)) == identity(share)


@pytest.mark.parametrize("test", INVALID, ids=lambda test: test["comment"])
def test_published_forms_that_are_refused(test):
    with pytest.raises(DocumentError):
        from_paper(bytes.fromhex(test["form"]))


def test_the_maker_makes_what_is_kept(tmp_path):
    subprocess.run([sys.executable, "-W", "error", VECTORS / "make" / "make_paper_v1.py", tmp_path], check=True)
    assert (tmp_path / "paper_v1.json").read_bytes() == (VECTORS / "paper_v1.json").read_bytes()


@given(rules(), st.integers(1, 2**32 - 1), st.integers(1, 40))
def test_every_share_comes_back(rule, epoch, length):
    dealt = crooked_split(bytes(length), rule, epoch=epoch, field=Field(0x1F5))
    for share in dealt.shares:
        with contextlib.suppress(ParameterError):
            form = to_paper(share)
            assert len(form) % BLOCK == 0
            assert len(form) == form[0] * BLOCK
            back = from_paper(form)
            assert identity(back) == identity(share.with_notes(label=None, rule=None, notice=None))
            assert back.is_whole()


def test_wrapped_shares_come_back_and_open(share, sealed, for_card):
    for wrapped in (sealed, for_card):
        back = from_paper(to_paper(wrapped))
        assert (back.bound(), back.sealed, back.wrapping) == (wrapped.bound(), wrapped.sealed, wrapped.wrapping)
        assert back.is_whole()
    from shares.documents.wrapping import open_by_passphrase

    def opener(wrapping, sealed_bytes, bound):
        return open_by_passphrase(wrapping, sealed_bytes, bound, Secret.of(b"made up"))

    assert from_paper(to_paper(sealed)).open(opener).commitment() == share.commitment()


@pytest.mark.parametrize("longest", ["north-pier", "harbour-office", "harbour-office-12"])
def test_a_32_byte_key_3_of_5_takes_13_blocks(longest):
    names = [longest, "south-pier", "light-house", "registrar", "dry-dock"]
    with Secret(32) as key:
        dealt = split(key, flat_rule(3, names), label="Tide archive root")
    assert {len(to_paper(share)) for share in dealt.shares} == {13 * BLOCK}


@pytest.mark.parametrize(
    ("epoch", "written"), [(1, "01"), (127, "7f"), (128, "8100"), (300, "822c"), (2**32 - 1, "8fffffff7f")]
)
def test_numbers(share, epoch, written):
    form = to_paper(share.model_copy(update={"epoch": epoch}))
    assert form[6 + 16 :].startswith(bytes.fromhex(written) + bytes([len("north-pier")]))


@given(st.integers(5, 194), st.integers(0, 255))
def test_what_is_read_is_what_is_written(share, place, value):
    """Any one byte of the body changed and the check made right: it is refused, or is the one form of some share."""
    form = bytearray(to_paper(share))
    form[place] = value
    form = checked(form[0], bytes(form[5:]))
    with contextlib.suppress(DocumentError):
        assert to_paper(from_paper(form)) == form


@given(st.binary(max_size=300))
def test_anything_else_is_refused(body):
    filled = body.ljust(max(10, -(-(len(body) + 5) // BLOCK) * BLOCK - 5), b"\0")
    with pytest.raises(DocumentError):
        from_paper(checked((len(filled) + 5) // BLOCK, filled))


def test_every_flipped_bit_is_noticed(share):
    form = to_paper(share)
    for bit in range(8 * len(form)):
        changed = bytearray(form)
        changed[bit // 8] ^= 1 << bit % 8
        with pytest.raises(DocumentError):
            from_paper(bytes(changed))


def test_a_refusal_says_where_and_what_next(share):
    with pytest.raises(DocumentError) as caught:
        from_paper(to_paper(share)[:-15], where="scanned.txt")
    assert (caught.value.where, "whole" in caught.value.what, bool(caught.value.hint)) == ("scanned.txt", True, True)


def test_what_is_too_large_is_refused_with_a_hint():
    many = [Point(((2, x),), Secret.of(secrets.token_bytes(96))) for x in range(1, 41)]
    share = Share.of(
        set_id=bytes(16), epoch=1, custodian="north-pier", points=many, field=Field(), secret_commitment=bytes(32)
    )
    with pytest.raises(ParameterError, match="too large for paper") as caught:
        to_paper(share)
    assert "encrypt" in str(caught.value.hint)
    (large, *_) = crooked_split(bytes(65_536), flat(2, 3)).shares
    with pytest.raises(ParameterError, match="too large for paper"):
        to_paper(large)


def test_the_largest_form_comes_back():
    room = MAX_BLOCKS * BLOCK - 5
    (share, *_) = crooked_split(bytes(16), flat(2, 3)).shares
    longest = room - (len(to_paper(share)) - 5) + share.row_length
    for length in range(longest, longest + 20):
        point = Point(share.paths[0], Secret.of(secrets.token_bytes(length)))
        larger = share.model_copy(update={"rows": (point.row,)}).with_notes()
        try:
            form = to_paper(larger)
        except ParameterError:
            break
        assert identity(from_paper(form)) == identity(larger.with_notes(label=None, rule=None, notice=None))
    else:
        pytest.fail("nothing was too large")
    assert length > longest


def test_text_is_base32():
    for plain in (b"foobar foobar f", bytes(15), b"\xff" * 30):
        text = to_text(plain)
        assert text == base64.b32encode(plain).decode()
        assert from_text(text) == plain


@pytest.mark.parametrize(
    "text", ["", "A", "A" * 23, "A" * 25, "a" * 24, "A" * 23 + "1", "A" * 16 + "=" * 8, "\u0130" * 24]
)
def test_other_text_is_refused(text):
    with pytest.raises(DocumentError):
        from_text(text)
