"""The golden sample of a journal, with one entry of every event: it stays readable for ever, to the letter.

Source: tests/vectors/golden/v1/journal and .../keyed, made by tests/vectors/make/journal_v1.py and keyed_v1.py from
shares/documents/FORMAT_EVIDENCE.md, section 16, and FORMAT_KEYS.md, section 26, with no code of this package; the
second reader is by_hand.py, written from the same page.
"""

from __future__ import annotations

from pathlib import Path

from history import by_hand

from shares.documents.event import EVENT_NAMES
from shares.documents.key_event import KeyBorn, TaskAsked
from shares.documents.record import Record
from shares.history.files import FolderFiles
from shares.history.journal import load_journal, read_journal
from shares.history.verify import verify
from shares.history.words import words

FOLDER = Path(__file__).parents[1] / "vectors" / "golden" / "v1"
DATA = (FOLDER / "journal" / "journal.jsonl").read_bytes()
RECORD = Record.parse((FOLDER / "flat" / "record.json").read_bytes())
OF_A_KEY = (FOLDER / "keyed" / "journal.jsonl").read_bytes()
OF_A_KEY_SENTENCES = """\
key dealt, epoch 1, record {record}
2 nonces made by north-pier, and commitments to them handed out
north-pier, south-pier, harbour-office asked to open (task {task}): by boat
north-pier agreed to open: a letter, 72 bytes (task {task})
task {task} to open finished
task {task} to open failed, by south-pier: the partial result of south-pier is wrong
"""
SENTENCES = """\
epoch 1 dealt to north-pier, south-pier, light-house, registrar, harbour-office
card of registrar made known: {card}
duties accepted by north-pier: form signed by hand
share of north-pier sent, serial HT-0001, by way of: own boat
share of north-pier received, serial HT-0001
share of north-pier copied, copy HT-0002: on paper, for the dry-dock
share of north-pier typed or scanned, seen by A. Keeper, B. Keeper
share of south-pier handed on to C. Keeper
north-pier, south-pier challenged, due 2026-02-01T12:00:00Z
north-pier attested, intact, at the pier house, serial HT-0001, seal opened
drill of recovery opened for north-pier, south-pier: from storage
shares of north-pier, south-pier brought to drill 11, and opened there
drill 11 rehearsed by north-pier, south-pier in 5400 s: failed, not enough shares
drill 11 closed, failed
secret recovered from north-pier, south-pier, because: the backup store burnt; the key is to be replaced by 2026-02-01T12:00:00Z
B. Keeper leaves, with the share of north-pier; to be dealt with by 2026-02-01T12:00:00Z
incident with south-pier, may be known, to be dealt with by 2026-02-01T12:00:00Z: seal HT-0003 found broken, “as if by a gull” \N{EN DASH} Möwe
task of entry 17 done, key replaced
step 7 of the ceremony done, initials AK
exception at step 8: the clock of the machine was an hour late; remedy: set by the witness
12 bytes of a line that a stopped run did not finish
paths with \\ and quotation marks " stay as they are
copy original of south-pier's share destroyed by C. Keeper, cross-cut, seen by auditor-east
copy HT-0004 of south-pier's share given up as lost by C. Keeper, heard by auditor-east: washed off the quay
set retired, records kept until 2028-02-01T12:00:00Z
"""  # noqa: E501 - one sentence a line


def test_it_is_whole_and_read_alike_by_both_readers() -> None:
    journal = load_journal(FOLDER / "journal")
    assert journal.problems == ()
    assert journal.head is not None
    assert by_hand.check(DATA) == ([], (journal.head.sequence, journal.head.head))
    assert journal.head.words() == "entry 25, JNA2-PQSD-Q3WK-QVX2-7S4H-IKT2-57PZ-BGJE"
    signers = [[card.name for card in journal.signers(entry)] for entry in journal.entries]
    assert signers == [["harbour-office"], ["harbour-office", "registrar"]] * 12 + [["harbour-office"]]


def test_it_and_that_of_a_key_hold_one_entry_of_every_event() -> None:
    told = [entry.event.what for data in (DATA, OF_A_KEY) for entry in read_journal(data).entries]
    assert sorted(told) == sorted(EVENT_NAMES)


def test_that_of_a_key_is_whole_and_said_in_sentences() -> None:
    journal = read_journal(OF_A_KEY)
    assert journal.problems == ()
    assert by_hand.check(OF_A_KEY)[0] == []
    assert b"".join(entry.line() + b"\n" for entry in journal.entries) == OF_A_KEY
    (asked,) = (entry.event for entry in journal.entries if isinstance(entry.event, TaskAsked))
    (born,) = (entry.event for entry in journal.entries if isinstance(entry.event, KeyBorn))
    expected = OF_A_KEY_SENTENCES.format(record=born.record, task=asked.task.hex()[:16])
    assert [words(entry.event) for entry in journal.entries] == expected.splitlines()


def test_what_is_written_of_its_entries_is_the_same_to_the_byte() -> None:
    assert b"".join(entry.line() + b"\n" for entry in read_journal(DATA).entries) == DATA


def test_every_event_is_said_in_one_sentence() -> None:
    entries = read_journal(DATA).entries
    card = entries[1].cards[0].fingerprint
    assert [words(entry.event) for entry in entries] == SENTENCES.format(card=card).splitlines()


def test_it_fits_the_record_of_its_set(tmp_path: Path) -> None:
    problems = verify(load_journal(FOLDER / "journal"), FolderFiles(tmp_path), RECORD, None)
    assert [(problem.line, problem.kind) for problem in problems] == [(5, "missing"), (21, "set-aside")]
