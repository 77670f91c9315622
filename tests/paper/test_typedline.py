"""One line as people type it: what is understood, what is set right and said, what is refused.

Source: RFC 4648, section 6 (the alphabet); tests/vectors/paper_v1.json (lines of a second implementation). The
look-alikes are this project's own table, in the docstring of ``read_line``.
"""

from __future__ import annotations

import itertools

import pytest
from hypothesis import given
from hypothesis import strategies as st
from paper.conftest import published

from shares.errors import DocumentError
from shares.paper.linecode import LENGTH
from shares.paper.paperform import LETTERS
from shares.paper.typedline import grouped, read_line, to_lines

VALID = [test for test in published()[0] if test["lines"]]
LINES = VALID[0]["lines"]
LINE = LINES[4]
blocks = st.one_of(st.binary(min_size=15, max_size=15), st.binary(min_size=1, max_size=1).map(lambda one: one * 15))


def words(reading):
    return [correction.words() for correction in reading.corrections]


def replaced(line, places):
    """The line with characters replaced at places (from 0)."""
    return "".join(places.get(i, character) for i, character in enumerate(line))


def other(character, step=1):
    return LETTERS[(LETTERS.index(character) + step) % 32]


def refusal(text):
    with pytest.raises(DocumentError) as caught:
        read_line(text)
    return str(caught.value)


@pytest.mark.parametrize("test", VALID, ids=lambda test: test["comment"])
def test_published_lines(test):
    form = bytes.fromhex(test["form"])
    assert to_lines(form) == test["lines"]
    readings = [read_line(line) for line in test["lines"]]
    assert [reading.number for reading in readings] == list(range(1, len(readings) + 1))
    assert not any(reading.corrections for reading in readings)
    assert "".join(reading.letters for reading in readings) == "".join(line[1:25] for line in test["lines"])


@given(st.lists(blocks, min_size=32, max_size=32))
def test_thirty_two_lines_and_each_is_its_own(found):
    lines = to_lines(b"".join(found))
    assert [read_line(line).number for line in lines] == list(range(1, 33))
    assert "".join(line[0] for line in lines) == LETTERS


def test_groups_are_of_four():
    assert [len(group) for group in grouped(LINE).split()] == [4] * 7 + [3]


@pytest.mark.parametrize(
    "text",
    [
        grouped(LINE),
        LINE.lower(),
        f"  {grouped(LINE)}  \n",
        "-".join(grouped(LINE).split()),
        "\u00a0".join(grouped(LINE).split()),
        f"5 {grouped(LINE)}",
        f"5. {LINE}",
        f"05: {grouped(LINE).lower()}",
        f"5\t{LINE}",
    ],
)
def test_spaces_case_and_printed_numbers_do_not_matter(text):
    reading = read_line(text)
    assert (reading.number, reading.letters, reading.corrections) == (5, LINE[1:25], ())


def test_a_group_is_not_taken_for_a_printed_number():
    for start in range(1, LENGTH - 2):
        if LINE[:start].isdigit():
            continue
        assert not read_line(f"{LINE[:start]} {LINE[start:]}").corrections
    digits = to_lines(b"".join(bytes([i]) * 15 for i in range(28)))[27]
    assert digits[0] == "3"
    assert read_line(f"{digits[0]} {digits[1:]}").letters == digits[1:25]


@given(st.data())
def test_any_two_wrong_characters_are_set_right_and_told(draw):
    places = sorted(draw.draw(st.permutations(range(LENGTH)))[: draw.draw(st.integers(1, 2))])
    wrong = {place: other(LINE[place], draw.draw(st.integers(1, 31))) for place in places}
    reading = read_line(replaced(LINE, wrong))
    assert (reading.number, reading.letters) == (5, LINE[1:25])
    assert words(reading) == [f"character {place + 1}: read {wrong[place]} as {LINE[place]}" for place in places]


@given(st.data())
def test_three_or_four_wrong_characters_are_refused(draw):
    places = draw.draw(st.permutations(range(LENGTH)))[: draw.draw(st.integers(3, 4))]
    typed = replaced(LINE, {place: other(LINE[place], draw.draw(st.integers(1, 31))) for place in places})
    said = refusal(typed)
    assert "more than two characters are wrong" in said
    assert typed not in said


def test_two_neighbours_exchanged_are_set_right():
    for i in range(LENGTH - 1):
        reading = read_line(LINE[:i] + LINE[i + 1] + LINE[i] + LINE[i + 2 :])
        assert reading.letters == LINE[1:25]
        assert len(reading.corrections) == (2 if LINE[i] != LINE[i + 1] else 0)


def line_with(letters):
    """A line that holds certain letters, and the places of each."""
    for number in range(256):
        [line] = to_lines(bytes([number]) * 8 + bytes(range(number % 199, number % 199 + 7)))
        if all(line.count(letter) >= count for letter, count in letters.items()):
            return line, {letter: [i for i, found in enumerate(line) if found == letter] for letter in letters}
    raise AssertionError("no line has them")


def test_what_looks_like_one_letter_is_that_letter():
    line, at = line_with({"O": 1, "B": 1})
    reading = read_line(line.replace("O", "0").replace("B", "8"))
    assert reading.letters == line[1:25]
    for place in at["O"]:
        assert f"character {place + 1}: read 0 as O" in words(reading)
    for place in at["B"]:
        assert f"character {place + 1}: read 8 as B" in words(reading)


def test_two_look_alikes_leave_room_for_two_wrong_characters():
    line, at = line_with({"O": 1, "B": 1})
    typed = replaced(line, {at["O"][0]: "0", at["B"][0]: "8"})
    free = [i for i in range(LENGTH) if i not in (at["O"][0], at["B"][0])][:2]
    reading = read_line(replaced(typed, {i: other(line[i]) for i in free}))
    assert reading.letters == line[1:25]
    assert len(reading.corrections) == 4


@pytest.mark.parametrize(("letter", "mark"), [("I", "1"), ("L", "1"), ("I", "|"), ("L", "!"), ("G", "9"), ("Q", "9")])
def test_what_looks_like_two_letters_is_found_out(letter, mark):
    line, at = line_with({letter: 1})
    place = at[letter][0]
    reading = read_line(replaced(line, {place: mark}))
    assert reading.letters == line[1:25]
    assert words(reading) == [f"character {place + 1}: read {mark} as {letter}"]


def test_three_look_alikes_of_two_letters_are_found_out_and_four_are_not():
    line, at = line_with({"I": 2, "L": 2})
    places = [*at["I"][:2], *at["L"][:2]]
    assert read_line(replaced(line, dict.fromkeys(places[:3], "1"))).letters == line[1:25]
    refusal(replaced(line, dict.fromkeys(places, "1")))


def test_a_look_alike_that_was_another_letter_counts_as_wrong():
    # 1 in place of A is as wrong as any letter: one more wrong character is set right beside it, and not two.
    line, at = line_with({"A": 1})
    place = at["A"][0]
    others = [i for i in range(LENGTH) if i != place][:2]
    typed = replaced(line, {place: "1"})
    assert read_line(typed).letters == line[1:25]
    assert read_line(replaced(typed, {others[0]: other(line[others[0]])})).letters == line[1:25]
    refusal(replaced(typed, {i: other(line[i]) for i in others}))


def test_look_alikes_that_were_other_letters_use_up_the_budget():
    line, at = line_with({"A": 2, "I": 2})
    (a, also_a), (i, also_i) = at["A"][:2], at["I"][:2]
    wrong = next(place for place in range(LENGTH) if line[place] not in "AI")
    # Two that may be I and are, and one wrong: 4. If one of the two is no I, it is as if two were wrong besides: 5.
    assert read_line(replaced(line, {i: "1", also_i: "1", wrong: other(line[wrong])})).letters == line[1:25]
    refusal(replaced(line, {i: "1", a: "1", wrong: other(line[wrong])}))
    refusal(replaced(line, {i: "1", a: "1", also_a: "1"}))


def test_two_explanations_are_none():
    """Two lines that become the same one when a character is left out, here or there; found by linear algebra."""
    import galois

    field = galois.GF(2**5, irreducible_poly="x^5 + x^2 + 1", compile="python-calculate")
    here, there = 4, 19
    # The unknowns: the 31 characters of one line, and the one that the other has in place of that which it lacks.
    one = [[int(i == j) for j in range(LENGTH + 1)] for i in range(LENGTH)]
    unknown = [[0] * LENGTH + [1]]
    two = one[:here] + one[here + 1 : there + 1] + unknown + one[there + 1 :]
    powers = [[int(field(2) ** (j * (LENGTH - 1 - i))) for i in range(LENGTH)] for j in range(1, 7)]
    sums = field([1, 0, 0, 0, 0, 0])
    equations = [field(powers) @ field(one), field(powers) @ field(two)]
    rows = field(
        [[*map(int, row), int(value)] for system in equations for row, value in zip(system, sums, strict=True)]
    )
    reduced = rows.row_reduce(ncols=LENGTH + 1)
    free = {i: 7 * i % 31 + 1 for i in range(LENGTH + 1)}
    leading = [next(i for i in range(LENGTH + 1) if row[i]) for row in reduced]
    solution = [0 if i in leading else free[i] for i in range(LENGTH + 1)]
    for row, lead in zip(reduced, leading, strict=True):
        solution[lead] = int(row[-1] - row[:-1] @ field(solution))
    first = "".join(LETTERS[symbol] for symbol in solution[:LENGTH])
    second = first[:here] + first[here + 1 : there + 1] + LETTERS[solution[-1]] + first[there + 1 :]
    assert [read_line(line).corrections for line in (first, second)] == [(), ()]
    assert first != second
    assert "a character is missing" in refusal(first[:here] + first[here + 1 :])


def test_unreadable_characters_are_filled_in():
    for places in itertools.combinations(range(0, LENGTH, 3), 3):
        reading = read_line(replaced(LINE, dict.fromkeys(places, "?")))
        assert reading.letters == LINE[1:25]
        assert words(reading) == [f"character {place + 1}: read ? as {LINE[place]}" for place in places]


@pytest.mark.parametrize("line", [*LINES[:4], LINES[12]])
def test_a_character_left_out_is_found_anywhere(line):
    for place in range(LENGTH):
        reading = read_line(line[:place] + line[place + 1 :])
        assert reading.letters == line[1:25]
        [correction] = reading.corrections
        assert (correction.typed, correction.meant) == ("", line[place])
        # In a run of equal characters it is the run that counts.
        assert line[correction.place - 1 : place + 1].strip(line[place]) == ""
        assert words(reading) == [f"character {correction.place}, {line[place]}, was left out"]


@pytest.mark.parametrize("line", [*LINES[:4], LINES[12]])
def test_a_character_doubled_is_found_anywhere(line):
    for place in range(LENGTH):
        reading = read_line(line[: place + 1] + line[place:])
        assert reading.letters == line[1:25]
        [correction] = reading.corrections
        assert words(reading) == [f"character {correction.place}, {line[place]}, is one too many"]
        assert line[correction.place - 1 : place + 1].strip(line[place]) == ""


def test_a_strange_character_put_in_is_found_anywhere():
    for place in range(LENGTH + 1):
        reading = read_line(LINE[:place] + "7" + LINE[place:])
        assert reading.letters == LINE[1:25]


def test_left_out_beside_a_look_alike():
    line, at = line_with({"I": 1, "O": 1})
    places = at["I"][0], at["O"][0]
    typed = replaced(line, {places[0]: "1", places[1]: "0"})
    gone = next(i for i in range(LENGTH) if i not in places)
    reading = read_line(typed[:gone] + typed[gone + 1 :])
    assert reading.letters == line[1:25]
    assert f"character {places[0] + 1}: read 1 as I" in words(reading)
    assert len(reading.corrections) == 3
    doubled = read_line(typed[: gone + 1] + typed[gone:])
    assert doubled.letters == line[1:25]
    assert len(doubled.corrections) == 3


def test_left_out_and_wrong_besides_is_refused_and_said():
    typed = replaced(LINE, {20: other(LINE[20])})
    assert "a character is missing: this has 30" in refusal(typed[:3] + typed[4:])
    assert "a character is too many: this has 32" in refusal(typed[:4] + typed[3:])
    # Two that may be several are one too many to tell where something is missing.
    line, at = line_with({"I": 2})
    typed = replaced(line, dict.fromkeys(at["I"][:2], "1"))
    gone = next(i for i in range(LENGTH) if i not in at["I"])
    assert "is missing" in refusal(typed[:gone] + typed[gone + 1 :])


@given(st.data())
def test_left_out_and_badly_wrong_is_never_another_line(draw):
    places = draw.draw(st.permutations(range(LENGTH)))
    typed = replaced(LINE, {place: other(LINE[place], draw.draw(st.integers(1, 31))) for place in places[:3]})
    refusal(typed[: places[4]] + typed[places[4] + 1 :])
    refusal(typed[: places[4]] + LETTERS[draw.draw(st.integers(0, 31))] + typed[places[4] :])


@pytest.mark.parametrize("length", [0, 1, 4, 29, 33, 62])
def test_other_lengths_are_refused(length):
    assert f"a line has 31 characters, and this has {length}" in refusal((LINE * 2)[:length])


@pytest.mark.parametrize("character", ["#", "\u0130", "\u0415", "\u00df", "\uff21", "/", "=", "\x1b", "\u0662"])
def test_what_is_no_character_of_a_line_is_named_by_its_place(character):
    said = refusal(replaced(LINE, {7: character}))
    assert "character 8 is none of the letters" in said
    assert character not in said
