"""Heads noted by hand, read aloud, or quoted in documents.

Source: FORMAT_EVIDENCE.md, section 16: eight groups of four characters, and the number of the entry.
"""

from __future__ import annotations

import json

import pytest
from attested import answered, challenge
from history.making import events, lines_of, text_of
from hypothesis import given
from hypothesis import strategies as st

from shares.documents.entry import Head, head_of
from shares.errors import ParameterError
from shares.history.heads import heads_in
from shares.history.journal import read_journal

HEAD = head_of(57, bytes(range(32)))


@pytest.mark.parametrize(
    "text",
    [
        f"57 {HEAD.head}",
        f"57, {HEAD.head.lower()}",
        HEAD.words(),
        f"Monday, at the pier: {HEAD.words()}.\n",
        json.dumps(HEAD.public("sequence", "head")),
        json.dumps({"kind": "challenge", "journal": HEAD.public("sequence", "head"), "n": [1]}, indent=2),
        json.dumps({"steps": [{"seen": HEAD.public("sequence", "head")}]}),
    ],
)
def test_a_head_is_found_however_it_was_noted(text: str) -> None:
    assert heads_in(text) == [HEAD]


def test_one_is_found_in_an_answer_to_a_challenge() -> None:
    assert heads_in(answered(challenge(head=HEAD)).to_file().decode()) == [HEAD]


def test_several_are_found_in_their_order() -> None:
    other = head_of(4, bytes(32))
    assert heads_in(f"{HEAD.words()}\n{other.words()}\n") == [HEAD, other]


@pytest.mark.parametrize(
    "text",
    [
        "", "57", HEAD.head, f"57 {HEAD.head[:-1]}", f"57 {HEAD.head}-AAAA", "{}", '{"journal": null}', "[" * 100_000,
        f"0 {HEAD.head}", f"{2**32} {HEAD.head}", f"{10**30} {HEAD.head}",
        f'{{"sequence": true, "head": "{HEAD.head}"}}',
        '{"sequence": 1, "head": "x"}', "\ud800",
    ],
)  # fmt: skip
def test_what_holds_none_is_refused(text: str) -> None:
    with pytest.raises(ParameterError):
        heads_in(text)


@given(st.integers(1, 2**32 - 1), st.binary(min_size=32, max_size=32))
def test_what_is_said_is_what_is_read(number: int, digest: bytes) -> None:
    head = head_of(number, digest)
    assert heads_in(head.words()) == [head]


def test_a_journal_stood_at_each_of_its_entries_and_nowhere_else() -> None:
    journal = read_journal(text_of(lines_of(events(5))))
    for entry in journal.entries:
        assert journal.holds(entry.head())
        assert not journal.holds(Head(sequence=entry.sequence, head=HEAD.head))
        assert not journal.holds(Head(sequence=entry.sequence + 1, head=entry.head().head))
