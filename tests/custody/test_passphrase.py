"""Passphrases: drawn from 256 words, evenly, and weak ones told.

Checked against: arithmetic (256 words are 8 bits each); NIST SP 800-63B, sec. 5.1.1 (length before composition).
"""

from __future__ import annotations

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import revealed

from shares import memory
from shares.custody import passphrase
from shares.custody.passphrase import (
    DEFAULT_WORDS,
    MAX_PASSPHRASE,
    MAX_WORDS,
    MIN_WORDS,
    WORDS,
    draw_passphrase,
    weakness,
)
from shares.errors import ParameterError
from shares.memory import Secret


def test_the_list_holds_256_words_that_three_letters_tell_apart() -> None:
    assert len(WORDS) == len(set(WORDS)) == 2**8
    assert len({word[:3] for word in WORDS}) == 2**8
    assert all(re.fullmatch("[a-z]{3,10}", word) for word in WORDS)
    assert list(WORDS) == sorted(WORDS)


@pytest.mark.parametrize("count", [MIN_WORDS, DEFAULT_WORDS, MAX_WORDS])
def test_as_many_words_are_drawn_as_asked(count: int) -> None:
    drawn = revealed(draw_passphrase(count)).decode()
    words = drawn.split("-")
    assert len(words) == count
    assert set(words) <= set(WORDS)
    assert len(drawn) <= MAX_PASSPHRASE


def test_ten_words_are_the_default() -> None:
    """80 bits."""
    assert revealed(draw_passphrase()).count(b"-") == DEFAULT_WORDS - 1 == 9


@pytest.mark.parametrize("count", [MIN_WORDS - 1, 0, -1, MAX_WORDS + 1])
def test_counts_out_of_range_are_refused(count: int) -> None:
    with pytest.raises(ParameterError, match="6 to 32 words"):
        draw_passphrase(count)


def test_every_word_is_drawn_with_the_systems_source(monkeypatch: pytest.MonkeyPatch) -> None:
    """Nothing stands between the source and the words: each choice is one of the whole list."""
    chosen: list[int] = []

    def choice(words: tuple[str, ...]) -> str:
        assert words == WORDS
        chosen.append(len(chosen))
        return words[chosen[-1]]

    monkeypatch.setattr(passphrase.secrets, "choice", choice)
    assert revealed(draw_passphrase(6)).decode().split("-") == list(WORDS[:6])
    assert len(chosen) == 6


def test_in_many_draws_every_word_comes() -> None:
    """12,800 words: that one of the 256 stays away has a chance of 256 * (255/256)^12800, below 10^-19."""
    drawn = [word for _ in range(400) for word in revealed(draw_passphrase(32)).decode().split("-")]
    assert set(drawn) == set(WORDS)
    assert len({revealed(draw_passphrase(6)) for _ in range(100)}) == 100


def test_what_is_drawn_looks_strong() -> None:
    assert [weakness(draw_passphrase(6)) for _ in range(50)] == [None] * 50


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("", "shorter than 16"),
        ("short", "shorter than 16"),
        ("fifteen letters", "shorter than 16"),
        ("sixteen letters!", None),
        ("aaaaaaaaaaaaaaaaaaaaaaaa", "fewer than 6 different"),
        ("abcdeabcdeabcdeabcde", "fewer than 6 different"),
        ("abcdefabcdefabcdef", None),
        ("correct horse, battery", None),
        ("die Brücke über den Fluss", "another keyboard"),
        ("with a\ttab inside it, and more", "another keyboard"),
        ("with \x7f inside it, and more", "another keyboard"),
    ],
)
def test_a_chosen_one_that_looks_weak_is_told(text: str, reason: str | None) -> None:
    found = weakness(Secret.of(text.encode()))
    assert found is None if reason is None else found is not None and reason in found
    assert found is None or not found.endswith(".")


@given(st.binary(max_size=60))
def test_a_note_says_nothing_of_what_it_is_about(data: bytes) -> None:
    """The notes are four, and fixed."""
    before = set(memory._open)
    note = weakness(Secret.of(data))
    assert note is None or re.fullmatch(r"it (?:is shorter than 16|has fewer than 6|holds characters that) .*", note)
    assert set(memory._open) <= before
