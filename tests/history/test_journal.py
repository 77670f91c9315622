"""The journal: whatever was done to it is found, and named with its line.

Checked against: a reader written from FORMAT_EVIDENCE.md, section 16, alone (by_hand.py), which uses hashlib and the
library ``cryptography`` and nothing of the package; RFC 8785 by the library ``rfc8785``. Ed25519 itself is held against
RFC 8032 in tests/documents/test_signing.py.
"""

from __future__ import annotations

import itertools
import json
import subprocess
import sys
from collections.abc import Callable, Sequence
from datetime import timedelta
from pathlib import Path

import pytest
from history import by_hand
from history.making import START, dealt, events, key, lines_of, note, set_folder, text_of
from hypothesis import given
from hypothesis import strategies as st

from shares.documents.base import canonical, parse_object
from shares.documents.entry import Entry, Head, NamedDigest, line_digest
from shares.documents.event import make_event
from shares.documents.party import OpenPartyKey, _card
from shares.errors import ParameterError, StorageError
from shares.history import journal as module
from shares.history.journal import MAX_UNREADABLE, Journal, append, first_line, load_journal, read_journal

SIGNED = lines_of(events(6), "harbour-office", "registrar")
OTHER = lines_of(events(8), "harbour-office", start=START + timedelta(minutes=1))


def found(lines: Sequence[bytes]) -> dict[int, set[str]]:
    """What breaks a journal: the kinds, by line."""
    problems = [problem for problem in read_journal(text_of(lines)).problems if problem.breaks]
    return {line: {one.kind for one in group} for line, group in itertools.groupby(problems, lambda one: one.line)}


def edited(line: bytes, before: bytes, after: bytes) -> bytes:
    assert line.count(before) == 1
    return line.replace(before, after)


def test_a_sound_journal_has_no_problem_and_says_where_it_stands() -> None:
    journal = read_journal(text_of(SIGNED))
    assert (len(journal.entries), journal.problems, journal.torn) == (6, (), b"")
    assert [[card.name for card in journal.signers(entry)] for entry in journal.entries] == 6 * [
        ["harbour-office", "registrar"]
    ]
    assert journal.head is not None
    assert journal.head.sequence == 6


def test_an_empty_journal_stands_nowhere(tmp_path: Path) -> None:
    for journal in (read_journal(b""), load_journal(tmp_path), Journal()):
        assert (journal.entries, journal.problems, journal.head) == ((), (), None)
        assert not journal.holds(Head(sequence=1, head="-".join(["AAAA"] * 8)))


@pytest.mark.parametrize("signers", [(), ("harbour-office",), ("harbour-office", "registrar")])
def test_the_reader_written_from_the_format_agrees(signers: tuple[str, ...], tmp_path: Path) -> None:
    lines = lines_of([*events(4), note('Ölkanne, 3 \u00d7 „geprüft“ \\ " / \u2019 \U0001f6a2')], *signers)
    path = tmp_path / "journal.jsonl"
    path.write_bytes(text_of(lines))
    done = subprocess.run([sys.executable, by_hand.__file__, path], capture_output=True, check=False)
    journal = load_journal(tmp_path)
    assert journal.head is not None
    assert (done.returncode, json.loads(done.stdout)) == (
        0, {"wrong": [], "head": [journal.head.sequence, journal.head.head]},
    )  # fmt: skip
    assert journal.problems == ()


@pytest.mark.parametrize(
    ("change", "wanted"),
    [
        (lambda lines: edited(lines[2], b"HT-0001", b"HT-0007"), {3: {"signature"}, 4: {"chain"}}),
        (lambda lines: edited(lines[5], b"HT-0004", b"HT-0007"), {6: {"signature"}}),
        (lambda lines: edited(lines[2], b'"version":1}', b'"version":1 }'), {3: {"entry"}, 4: {"chain"}}),
        (lambda lines: b"nothing", {3: {"entry"}, 4: {"chain"}}),
    ],
)
def test_an_edited_line_is_named(change: Callable[[list[bytes]], bytes], wanted: dict[int, set[str]]) -> None:
    place = min(wanted) - 1
    assert found([*SIGNED[:place], change(SIGNED), *SIGNED[place + 1 :]]) == wanted


def test_reordered_lines_are_named() -> None:
    swapped = [*SIGNED[:2], SIGNED[3], SIGNED[2], *SIGNED[4:]]
    assert found(swapped) == {3: {"sequence", "chain"}, 4: {"sequence", "chain"}, 5: {"sequence", "chain"}}


def test_a_repeated_line_is_named() -> None:
    assert found([*SIGNED[:3], SIGNED[2], *SIGNED[3:]]) == {4: {"sequence", "chain"}}


def test_a_removed_line_is_named() -> None:
    assert found([*SIGNED[:2], *SIGNED[3:]]) == {3: {"sequence", "chain"}}
    assert found(SIGNED[1:])[1] >= {"sequence", "chain"}


def test_a_spliced_journal_is_named_at_the_joint() -> None:
    assert found([*SIGNED[:3], *OTHER[3:]]) == {4: {"chain"}}


def test_an_added_line_is_named_where_its_writer_has_no_key() -> None:
    forged = Entry.of_line(SIGNED[5])
    forged = forged.model_copy(update={"sequence": 7, "previous": line_digest(SIGNED[5])})
    assert found([*SIGNED, forged.line()]) == {7: {"signature"}}


def test_a_removed_tail_is_told_by_a_head_noted_elsewhere() -> None:
    whole, cut, other = (read_journal(text_of(lines)) for lines in (SIGNED, SIGNED[:4], OTHER))
    assert cut.problems == ()
    assert whole.head is not None
    assert cut.head is not None
    assert other.head is not None
    assert whole.holds(whole.head)
    assert whole.holds(cut.head)
    assert not cut.holds(whole.head)
    assert not whole.holds(other.head)
    # The same digest under another number is no place where it stood.
    assert not whole.holds(whole.head.model_copy(update={"sequence": 5}))


def test_every_flipped_bit_is_found() -> None:
    """Exhaustive over a journal of two entries, the second of which nothing follows."""
    lines = lines_of([note("a"), note("b")], "harbour-office")
    data = text_of(lines)
    card = len(lines[0])
    missed = []
    for place in range(len(data)):
        # The card is a document of its own, whose every flipped bit tests/documents/test_party.py finds: a few suffice.
        if 100 < place < card - 400 and place % 16:
            continue
        for bit in range(8):
            flipped = data[:place] + bytes([data[place] ^ 1 << bit]) + data[place + 1 :]
            if not read_journal(flipped).problems:
                missed.append((place, bit))
    assert missed == []


def test_a_clock_that_runs_backwards_is_told_and_breaks_nothing() -> None:
    lines = lines_of(events(3), "harbour-office")
    entry = Entry.of_line(lines[2]).model_copy(update={"time": START - timedelta(days=1), "signatures": ()})
    (problem,) = read_journal(text_of([*lines[:2], entry.signed(key()).line()])).problems
    assert (problem.line, problem.kind, problem.breaks) == (3, "time", False)
    assert "2026-01-04T09:00:00Z" in problem.what


def test_a_signature_by_a_card_that_nobody_introduced_is_told() -> None:
    entry = Entry.of_line(SIGNED[0]).model_copy(update={"cards": (), "signatures": ()}).signed(key())
    journal = read_journal(text_of([entry.line()]))
    assert [(one.line, one.kind) for one in journal.problems] == [(1, "signature")]
    assert journal.signers(journal.entries[0]) == []


def test_a_card_that_is_introduced_later_proves_nothing_before() -> None:
    first = Entry.of_line(SIGNED[0]).model_copy(update={"cards": (), "signatures": ()}).signed(key())
    second = Entry.of_line(SIGNED[1]).model_copy(
        update={"previous": line_digest(first.line()), "cards": (key().card,), "signatures": ()}
    )
    assert found([first.line(), second.signed(key()).line()]) == {1: {"signature"}}


def test_one_party_is_not_two() -> None:
    """A second signature by the same card counts once, and so does one by another card of the same signing key."""
    entry = Entry.of_line(SIGNED[0]).model_copy(update={"signatures": ()}).signed(key())
    doubled = entry.signed(key())
    journal = read_journal(text_of([doubled.line()]))
    assert [one.kind for one in journal.problems] == ["signature"]
    assert [card.name for card in journal.signers(journal.entries[0])] == ["harbour-office"]
    with pytest.raises(ParameterError, match="given twice"):
        first_line(dealt(), keys=[key(), key()])


def test_two_cards_of_one_signing_key_are_one_party() -> None:
    first, again = key(), OpenPartyKey(_card("registrar", None, START, key().content), key().content)
    assert again.card.fingerprint != first.card.fingerprint
    with pytest.raises(ParameterError, match="given twice"):
        first_line(dealt(), keys=[first, again])
    entry = Entry.of_line(SIGNED[0]).model_copy(update={"cards": (first.card, again.card), "signatures": ()})
    journal = read_journal(text_of([entry.signed(first).signed(again).line()]))
    assert [one.what for one in journal.problems] == ["one party signed it twice, the second time as registrar"]
    assert len(journal.signers(journal.entries[0])) == 1


def test_signers_are_those_whose_signature_fits() -> None:
    line = edited(SIGNED[2], b"HT-0001", b"HT-0007")
    journal = read_journal(text_of([*SIGNED[:2], line]))
    assert journal.signers(journal.entries[2]) == []
    assert len(journal.signers(journal.entries[1])) == 2


HOSTILE = {
    "nothing": b"",
    "zero bytes": bytes(40),
    "no UTF-8": b"\xff\xfe{}",
    "nested deeply": b"[" * 100_000,
    "objects nested deeply": b'{"event":' * 50_000,
    "a huge number": SIGNED[0].replace(b'"sequence":1', b'"sequence":' + b"1" * 100_000),
    "a fraction": SIGNED[0].replace(b'"sequence":1', b'"sequence":1.0'),
    "an exponent": SIGNED[0].replace(b'"sequence":1', b'"sequence":1e0'),
    "a truth value": SIGNED[0].replace(b'"version":1', b'"version":true'),
    "a member twice": SIGNED[0].replace(b'"version":1', b'"version":1,"version":1'),
    "a member twice, hidden": SIGNED[0].replace(b'"sequence":1', b'"sequence":9,"sequence":1'),
    "a member too many": SIGNED[0].replace(b'"version":1', b'"version":1,"words":1'),
    "a member too few": SIGNED[1].replace(b'"channel":null,', b""),
    "an unknown event": SIGNED[1].replace(b'"what":"delivered"', b'"what":"forgotten"'),
    "an escape that is not needed": SIGNED[1].replace(b'"HT-0000"', b'"\\u0048T-0000"'),
    "white space": b" " + SIGNED[0],
    "a line end of another system": SIGNED[0] + b"\r",
    "a byte-order mark": b"\xef\xbb\xbf" + SIGNED[0],
    "a lone surrogate": SIGNED[1].replace(b'"HT-0000"', b'"\\ud800"'),
    "a control character": SIGNED[1].replace(b'"HT-0000"', b'"\\u0007"'),
    "a padded signature": SIGNED[1].replace(b'"}],"time"', b'="}],"time"'),
    "members in another order": b'{"version":1,' + SIGNED[0][1:].replace(b',"version":1}', b"}"),
    "two mebibytes": b'{"kind":"' + b"x" * (2 << 20) + b'"}',
    "another document": b'{"kind":"record","version":1}',
    "a list": b"[1]",
}  # fmt: skip


@pytest.mark.parametrize("line", HOSTILE.values(), ids=HOSTILE)
def test_a_hostile_line_is_no_entry_and_stops_nothing(line: bytes) -> None:
    assert line not in SIGNED
    lines = [*SIGNED[:1], line, *SIGNED[2:]]
    assert found(lines) == {2: {"entry"}, 3: {"chain"}}
    assert len(read_journal(text_of(lines)).entries) == 5


def test_binary_rubbish_is_told_whatever_it_is() -> None:
    data = bytes(range(256)) * 20
    journal = read_journal(data)
    assert (journal.entries, len(journal.problems)) == ((), 21)
    assert journal.torn


@given(st.lists(st.text(min_size=1, max_size=40), min_size=1, max_size=3))
def test_a_line_has_the_form_of_rfc_8785(remarks: list[str]) -> None:
    for remark in remarks:
        try:
            event = note(remark)
        except ParameterError:
            continue  # it holds what a text may not hold
        (line,) = lines_of([event], "harbour-office")
        assert line == canonical(parse_object(line))
        entry = Entry.of_line(line)
        assert entry.unsigned_text(line) == canonical(entry.public(*(set(Entry.model_fields) - {"signatures"})))
        assert read_journal(text_of([line])).problems == ()


def test_texts_that_look_like_members_do_not_lead_the_reader_astray(tmp_path: Path) -> None:
    sly = '"signatures":[{"card":"x"}],"time":"", "fingerprint":"' + key().card.fingerprint + '"'
    append(tmp_path, note(sly))
    append(tmp_path, note(sly), keys=[key()])
    journal = load_journal(tmp_path)
    assert journal.problems == ()
    # The text names the card's fingerprint; only the card introduces it.
    assert [len(entry.cards) for entry in journal.entries] == [0, 1]


def test_a_card_is_introduced_once(tmp_path: Path) -> None:
    for names in (("harbour-office",), ("harbour-office", "registrar"), ("registrar",)):
        append(tmp_path, note("seen"), keys=[key(name) for name in names], cards=[key("registrar").card])
    journal = load_journal(tmp_path)
    assert journal.problems == ()
    assert [[card.name for card in entry.cards] for entry in journal.entries] == [
        ["harbour-office", "registrar"],
        [],
        [],
    ]
    assert set(journal.cards) == {key(name).card.fingerprint for name in ("harbour-office", "registrar")}


def test_the_first_line_is_a_journal(tmp_path: Path) -> None:
    data = first_line(dealt(), keys=[key()], cards=[key("registrar").card, key().card], time=START)
    (tmp_path / "journal.jsonl").write_bytes(data)
    append(tmp_path, note("kept"), keys=[key()])
    journal = load_journal(tmp_path)
    assert (journal.problems, len(journal.entries), len(journal.cards)) == ((), 2, 2)


@pytest.mark.parametrize(
    "last",
    [
        b"\n",
        b"rubbish\n",
        b'rubbish\n{"torn',
        SIGNED[5] + b" \n",
        bytes(100) + b"\n",
        b"x" * (3 << 20) + b"\n",
        b"x" * (3 << 20),
    ],
)
def test_nothing_is_added_after_what_is_no_entry(last: bytes, tmp_path: Path) -> None:
    path = tmp_path / "journal.jsonl"
    path.write_bytes(text_of(SIGNED) + last)
    with pytest.raises(StorageError, match="nothing was added"):
        append(tmp_path, note("more"))
    assert path.read_bytes() == text_of(SIGNED) + last
    assert [one.name for one in tmp_path.iterdir()] == ["journal.jsonl"]


def test_an_entry_that_is_too_large_is_refused(tmp_path: Path) -> None:
    set_folder(tmp_path)
    before = (tmp_path / "journal.jsonl").read_bytes()
    cards = [key(name).card for name in ("harbour-office", "registrar")]
    event = dealt().model_copy(update={"custodians": dealt().custodians * 30_000})
    with pytest.raises(StorageError, match="larger than 1 MiB"):
        append(tmp_path, event, cards=cards)
    assert (tmp_path / "journal.jsonl").read_bytes() == before


def test_a_line_that_is_too_long_is_no_entry_however_well_formed() -> None:
    persons, papers = ("x" * 500,) * 1000, (NamedDigest(path="x" * 500, digest=bytes(32)),) * 1000
    event = make_event("incident", custodians=(), persons=persons, exposed=True, due=START, remark="long")
    entry = Entry.of_line(lines_of([event])[0])
    assert read_journal(text_of([entry.line()])).problems == ()
    line = entry.model_copy(update={"documents": papers}).line()
    assert len(line) > 1 << 20
    (problem,) = read_journal(text_of([line])).problems
    assert "larger than 1 MiB" in problem.what


def test_times_that_are_none_are_refused(tmp_path: Path) -> None:
    for time in (START.replace(tzinfo=None), START.replace(microsecond=1)):
        with pytest.raises(ParameterError, match="UTC"):
            append(tmp_path, note("when"), time=time)


def test_a_journal_beyond_its_bound_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    assert module.MAX_JOURNAL == 1 << 30
    with (tmp_path / "journal.jsonl").open("wb") as made:
        made.truncate(module.MAX_JOURNAL + 1)
    monkeypatch.setattr(module, "MAX_JOURNAL", 1 << 20)
    with pytest.raises(StorageError, match="larger than"):
        load_journal(tmp_path)


def test_progress_is_told() -> None:
    told: list[tuple[int, int | None]] = []
    read_journal(text_of(SIGNED), progress=lambda done, total: told.append((done, total)))
    assert told == [(i, 6) for i in range(6)]


def test_a_flood_of_lines_that_are_no_entries_is_not_read_through() -> None:
    flood = text_of(SIGNED[:1])
    seen: list[int] = []
    journal = read_journal(flood + b"\n" * 50_000 + b"torn", progress=lambda done, _: seen.append(done))
    assert len(journal.entries) == 1
    assert (len(seen), journal.torn) == (MAX_UNREADABLE + 1, b"torn")
    *told, last, torn = journal.problems
    assert [problem.line for problem in told] == list(range(2, MAX_UNREADABLE + 2))
    assert (last.line, last.breaks, torn.kind) == (MAX_UNREADABLE + 2, True, "torn")
    assert last.what == "1,000 lines are no entries: from this one on, 49,000 lines were not read"
    # One fewer, and all is read.
    assert len(read_journal(b"\n" * MAX_UNREADABLE).problems) == MAX_UNREADABLE
