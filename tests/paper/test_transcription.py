"""Lines put together again: typed in order, or gathered from a text; what is swapped, missing or repeated is named.

Source: tests/vectors/paper_v1.json (forms and lines of a second implementation).
"""

from __future__ import annotations

import base64
import itertools

import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from paper.conftest import published

from shares.errors import DocumentError
from shares.paper.paperform import LETTERS, to_text
from shares.paper.transcription import Transcription, gather
from shares.paper.typedline import grouped, to_lines

BARE, TWO, *_ = (test for test in published()[0] if test["lines"])
LINES, FORM = BARE["lines"], bytes.fromhex(BARE["form"])


def text(lines):
    return "\n".join(map(grouped, lines)) + "\n"


def refusal(lines):
    with pytest.raises(DocumentError) as caught:
        gather(text(lines))
    return caught.value.what


def wrong(line, count=2, start=6):
    """The line with some characters replaced."""
    changed = [LETTERS[(LETTERS.index(c) + 1) % 32] if start <= i < start + count else c for i, c in enumerate(line)]
    return "".join(changed)


def test_lines_in_order():
    gathered = gather(text(LINES))
    assert (gathered.data, gathered.notes) == (FORM, ())
    spaced = gather("\n\n" + "\r\n \n".join(f"{i}. {line.lower()}" for i, line in enumerate(LINES, start=1)))
    assert (spaced.data, spaced.notes) == (FORM, ())


def test_swapped_lines_are_put_right_and_named():
    lines = [*LINES[:2], LINES[3], LINES[2], *LINES[4:]]
    gathered = gather(text(lines))
    assert (gathered.data, gathered.notes) == (FORM, ("line 3 stands after line 4",))


@given(st.permutations(LINES))
@example(LINES[::-1])
@example(LINES[6:] + LINES[:6])
def test_any_order_will_do_and_is_told_once(lines):
    gathered = gather(text(lines))
    assert gathered.data == FORM
    assert len(gathered.notes) == (lines != LINES)


def test_a_sheet_typed_from_its_end_is_told_once():
    assert gather(text(LINES[::-1])).notes == (
        "the lines stood in another order than on the sheet, and were put in theirs",
    )


@pytest.mark.parametrize(
    "mark", ["{}  ", "{}\t", "{:02} ", "{}. ", "{}) ", "{}: ", "{} - ", "line {}: ", "Line {} ", " {}\t "]
)
def test_the_numbers_that_a_sheet_prints_may_stand_before_the_lines(mark):
    for written in (grouped, str.lower, "\t".join):
        rows = [f"{mark.format(i)}{written(line)}" for i, line in enumerate(LINES, start=1)]
        gathered = gather("\n".join(rows))
        assert (gathered.data, gathered.notes) == (FORM, ())
    # A number does not make up for a character, and hides none that is wrong.
    rows[4] = f"{mark.format(5)}{wrong(LINES[4], 1)}"
    assert gather("\n".join(rows)).notes == ("line 5: character 7 was set right",)


def told(given_text):
    with pytest.raises(DocumentError) as caught:
        gather(given_text)
    assert not any(group in str(caught.value) for line in LINES for group in grouped(line).split())
    return caught.value


def test_a_row_with_a_note_behind_the_line_is_named():
    """One long row once made a scanned code of all rows, without a word of it."""
    for note, said in (
        ("smudged", "is no line: it has 38 characters, and a line 31 and nothing beside them"),
        ("could hardly be read, see page", "is no line: it has 55 characters"),
        ("ok", "was taken for a line, but a line has 31 characters, and this has 33"),
    ):
        for number, mark in itertools.product((1, 3, 13), ("", "{}  ")):
            rows = [f"{mark.format(i)}{grouped(line)}" for i, line in enumerate(LINES, start=1)]
            rows[number - 1] += f"   {note}"
            problem = told("\n".join(rows))
            assert f"row {number} {said}" in problem.what
            assert f"; line {number} is missing" in problem.what
            assert "code" not in problem.what
            assert problem.hint


def test_the_text_of_a_whole_page_names_the_rows_that_are_no_lines():
    """As a program that makes text of a printed page writes it: headings and facts before, what to do behind."""
    lines = [f"{i} {grouped(line)}" for i, line in enumerate(LINES, start=1)]
    before = [
        "Secret share on paper   Sheet AAAA-AAAA, page 1 of 2",
        "Custodian north-pier",
        "",
        "Line 1\u20134 5\u20138",
    ]
    behind = [
        "What to do, and when",
        "1. On receipt: compare the record",
        "the receipt, and give only that back",
        "\fAcknowledgement and receipt",
    ]
    problem = told("\n".join([*before, *lines, *behind]))
    assert problem.what == (
        "rows 1 to 2, 4, 18 to 19, 22 are no lines: a line has 31 characters and nothing beside them; "
        "row 20 was taken for a line, but a line has 31 characters, and this has 29"
    )
    assert "leave nothing in the text but the lines" in problem.hint
    assert gather("\n".join(lines)).data == FORM


def test_what_is_taken_for_a_code_is_said_so():
    code = to_text(FORM)
    for changed, said in (
        (
            code[:-1],
            "as row 1 is longer than a line, but the text is not whole: it has 311 characters, and not a multi",
        ),
        (
            f"\n{code[:200]}1{code[201:]}",
            "as row 2 is longer than a line, but the text is not whole: its character 201 is",
        ),
    ):
        problem = told(changed)
        assert problem.what.startswith("it was taken for the text of a scanned code, ")
        assert said in problem.what
        assert "scan it once more" in problem.hint


@given(st.sets(st.integers(0, 12), min_size=1, max_size=12))
def test_missing_lines_are_named(gone):
    said = refusal([line for i, line in enumerate(LINES) if i not in gone])
    # Without the first line it is not known how many there are.
    known = set(range(13)) if 0 not in gone else set(range(max(set(range(13)) - gone)))
    named = sorted(number + 1 for number in gone & known)
    assert f"line{'s' if len(named) > 1 else ''} {', '.join(map(str, named))} " in said
    assert "missing" in said


def test_repeated_lines_are_named():
    assert gather(text([*LINES[:3], LINES[2], *LINES[3:]])).notes == ("line 3 stands twice",)
    assert refusal([*LINES[:3], TWO["lines"][2], *LINES[3:]]) == "line 3 stands twice, and not the same"


def test_lines_of_a_longer_sheet_are_named():
    assert refusal([*LINES, *TWO["lines"][13:15]]) == "the sheet has 13 lines, and lines 14, 15 cannot be of it"


def test_a_line_of_another_sheet_is_not_noticed_before_the_check():
    """Lines do not say what sheet they are of; the check over the whole does (test_paperform)."""
    assert gather(text([*LINES[:4], TWO["lines"][4], *LINES[5:]])).data != FORM


def test_all_faults_are_told_at_once_and_nothing_of_the_lines():
    said = refusal([LINES[0], wrong(LINES[1], 5), LINES[2][:20], *LINES[3:8], *LINES[9:]])
    assert "row 2 was taken for a line, but more than two characters are wrong" in said
    assert "row 3 is no line: it has 20 characters, and a line 31 and nothing beside them" in said
    assert "lines 2, 3, 9 are missing" in said
    assert not any(group in said for line in LINES for group in grouped(line).split())


def test_of_many_faults_the_first_are_told():
    said = refusal(["A" * 29] * 40)
    assert said.count("was taken for a line, but a line has 31 characters, and this has 29") == 5
    assert said.endswith("; and 36 more")
    assert refusal(["A" * 9, LINES[0]] * 20).startswith(
        "rows 1, 3, 5, 7, 9, and 15 more are no lines: a line has 31 characters and nothing beside them; lines 2, 3, "
    )


def test_what_was_set_right_is_noted_by_place_alone():
    gathered = gather(text([LINES[0], wrong(LINES[1]), *LINES[2:]]))
    assert gathered.data == FORM
    assert gathered.notes == ("line 2: character 7 was set right", "line 2: character 8 was set right")
    left_out = gather(text([*LINES[:12], LINES[12][1:]]))
    assert (left_out.data, left_out.notes) == (FORM, ("line 13: character 1 was set right",))


@pytest.mark.parametrize("given_text", ["", "\n \n"])
def test_nothing_at_all(given_text):
    with pytest.raises(DocumentError, match="line 1 is missing"):
        gather(given_text)


def test_a_first_line_of_no_sheet():
    [first] = to_lines(bytes([200]) + bytes(14))
    with pytest.raises(DocumentError, match="first line of no sheet"):
        gather(first)
    with pytest.raises(DocumentError, match="first line of no sheet"):
        Transcription().read(first)


def test_a_scanned_code_is_understood():
    code = base64.b32encode(FORM).decode()
    assert code == to_text(FORM)
    for scanned in (code, code + "\n", code.lower(), "\n".join(code[i : i + 76] for i in range(0, len(code), 76))):
        assert gather(scanned).data == FORM


@pytest.mark.parametrize("change", [lambda code: code[:-1], lambda code: code + "A", lambda code: "1" + code[1:]])
def test_a_code_that_is_not_whole_is_refused(change):
    with pytest.raises(DocumentError, match="not whole"):
        gather(change(to_text(FORM)))


def typed(*lines):
    transcription = Transcription()
    for line in lines:
        transcription.accept(transcription.read(line))
    return transcription


def test_typing_line_by_line():
    transcription = Transcription()
    assert (transcription.wanted, transcription.total, transcription.complete) == (1, None, False)
    for number, line in enumerate(LINES, start=1):
        assert (transcription.wanted, transcription.complete) == (number, False)
        transcription.accept(transcription.read(grouped(line)))
        assert transcription.total == 13
    assert transcription.complete
    assert transcription.data() == FORM


def test_a_line_that_is_read_counts_once_it_is_accepted():
    transcription = Transcription()
    transcription.read(LINES[0])
    assert transcription.wanted == 1


def test_other_lines_than_the_one_wanted_are_named():
    transcription = typed(*LINES[:3])
    with pytest.raises(DocumentError, match="this is line 2, which was typed before"):
        transcription.read(LINES[1])
    with pytest.raises(DocumentError, match="this is line 6, and line 4 comes first"):
        transcription.read(LINES[5])
    assert transcription.wanted == 4


def test_going_back():
    transcription = typed(*LINES[:3])
    transcription.back()
    assert (transcription.wanted, transcription.total) == (3, 13)
    for _ in range(5):
        transcription.back()
    assert (transcription.wanted, transcription.total) == (1, None)
    for line in LINES:
        transcription.accept(transcription.read(line))
    assert transcription.data() == FORM


def test_lines_that_were_set_right_are_remembered():
    transcription = typed(LINES[0], wrong(LINES[1]), LINES[2], LINES[3][:-1])
    assert transcription.corrected == [2, 4]
    transcription.back()
    assert transcription.corrected == [2]


def test_nothing_shows_what_was_typed():
    reading = Transcription().read(wrong(LINES[0]))
    shown = repr([reading, *reading.corrections, gather(text(LINES))])
    assert not any(group in shown for line in LINES for group in grouped(line).split())
