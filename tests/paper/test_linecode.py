"""The line code: what is set right, what is refused, and that nothing is made into something else.

Source: tests/vectors/reed_solomon.json (codes as in S. Lin, D. J. Costello, "Error Control Coding", 2nd ed., 2004,
chapter 7; each value there recomputed); galois, a general-purpose library, as encoder and decoder of the code without
the fixed word; F. J. MacWilliams, N. J. A. Sloane, "The Theory of Error-Correcting Codes", 1977, chapter 11 (how many
words of each weight there are, hence how often a heavy error is taken for a light one).
"""

from __future__ import annotations

import itertools
import json
import random
from math import comb
from pathlib import Path

import numpy
import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.errors import ParameterError
from shares.field.extension import ExtensionField
from shares.field.polynomial import Polynomial
from shares.paper.linecode import BUDGET, DATA, LENGTH, MAX_ERASED, decode, encode

VECTORS = Path(__file__).parents[1] / "vectors"
FIXED = encode([0] * DATA)
symbols = st.integers(0, 31)
data = st.one_of(
    st.lists(symbols, min_size=DATA, max_size=DATA), symbols.map(lambda symbol: [symbol] * DATA), st.just([0] * DATA)
)


@pytest.fixture(scope="module")
def code():
    """RS(31, 25) of galois, over the same GF(32)."""
    import galois

    field = galois.GF(2**5, irreducible_poly="x^5 + x^2 + 1", compile="python-calculate")
    return galois.ReedSolomon(31, 25, field=field, alpha=2, c=1, systematic=True)


def plain(line):
    """The codeword of the cyclic code that a line is, without the fixed word."""
    return [a ^ b for a, b in zip(line, FIXED, strict=True)]


def with_errors(line, errors):
    """The line with something added at places."""
    wrong = list(line)
    for place, error in errors.items():
        wrong[place] ^= error
    return wrong


def random_line(chance):
    return encode([chance.randrange(32) for _ in range(DATA)])


def random_errors(chance, weight):
    return {place: chance.randrange(1, 32) for place in chance.sample(range(LENGTH), weight)}


def published():
    codes = json.loads((VECTORS / "reed_solomon.json").read_text())["codes"]
    [found] = [entry for entry in codes if (entry["n"], entry["k"]) == (31, 25)]
    return found


def test_the_published_code():
    found = published()
    assert (found["field_polynomial"], found["alpha"], found["first_root_exponent"]) == ("100101", 2, 1)
    assert found["min_distance"] == 7
    line = encode(found["systematic_example"]["message"])
    assert plain(line) == found["systematic_example"]["message"] + found["systematic_example"]["parity"]
    # The generator itself is a codeword: 24 zeros, then its seven coefficients.
    generator = [0] * 24 + found["generator_polynomial_high_first"]
    assert plain(encode(generator[:DATA])) == generator


def test_the_fixed_word_has_one_sum_and_no_other():
    field = ExtensionField(Polynomial.parse("x^5 + x^2 + 1"))
    sums = []
    for j in range(1, 7):
        value = 0
        for symbol in FIXED:
            value = field.add(field.multiply(value, field.power(2, j)), symbol)
        sums.append(value)
    assert sums == [1, 0, 0, 0, 0, 0]


def test_encoding_is_that_of_galois(code):
    assert (code.n, code.k, code.d) == (LENGTH, DATA, 7)
    chance = random.Random(31)
    messages = [[chance.randrange(32) for _ in range(DATA)] for _ in range(200)]
    encoded = numpy.array(code.encode(code.field(messages)))
    assert [list(map(int, word)) for word in encoded] == [plain(encode(message)) for message in messages]


def test_decoding_is_that_of_galois_where_both_decode(code):
    chance = random.Random(25)
    for weight in (0, 1, 2):
        lines = [random_line(chance) for _ in range(30)]
        wrong = [with_errors(line, random_errors(chance, weight)) for line in lines]
        theirs = numpy.array(code.decode(code.field([plain(word) for word in wrong])))
        for line, word, message in zip(lines, wrong, theirs, strict=True):
            assert decode(word) == line
            assert list(map(int, message)) == plain(line)[:DATA]


@given(data)
def test_a_line_begins_with_its_data_and_is_its_own_decoding(message):
    line = encode(message)
    assert (line[:DATA], len(line)) == (message, LENGTH)
    assert decode(line) == line


def test_every_single_error_is_set_right():
    line = random_line(random.Random(1))
    for place in range(LENGTH):
        for error in range(1, 32):
            assert decode(with_errors(line, {place: error})) == line


def test_two_errors_at_every_two_places_are_set_right():
    line = random_line(random.Random(2))
    for number, (first, second) in enumerate(itertools.combinations(range(LENGTH), 2)):
        for step in range(8):
            errors = {first: (number + 4 * step) % 31 + 1, second: (7 * number + step) % 31 + 1}
            assert decode(with_errors(line, errors)) == line


@pytest.mark.slow
def test_every_double_error_is_set_right():
    line = random_line(random.Random(3))
    for first, second in itertools.combinations(range(LENGTH), 2):
        for a, b in itertools.product(range(1, 32), repeat=2):
            assert decode(with_errors(line, {first: a, second: b})) == line


@given(data, st.data())
def test_unreadable_and_wrong_within_the_budget_are_set_right(message, draw):
    line = encode(message)
    erased = draw.draw(st.integers(0, MAX_ERASED))
    wrong = draw.draw(st.integers(0, (BUDGET - erased) // 2))
    places = draw.draw(st.permutations(range(LENGTH)))[: erased + wrong]
    read = list(line)
    for place in places[:erased]:
        read[place] = None
    for place in places[erased:]:
        read[place] ^= draw.draw(st.integers(1, 31))
    assert decode(read) == line


def test_every_three_unreadable_are_filled_in_and_four_are_not():
    line = random_line(random.Random(4))
    for places in itertools.combinations(range(LENGTH), 3):
        assert decode([None if place in places else symbol for place, symbol in enumerate(line)]) == line
    for start in range(LENGTH - 3):
        assert decode([None if start <= place < start + 4 else symbol for place, symbol in enumerate(line)]) is None


@given(data, st.data())
def test_three_or_four_wrong_or_unreadable_are_never_made_into_another_line(message, draw):
    line = encode(message)
    places = draw.draw(st.permutations(range(LENGTH)))[: draw.draw(st.integers(3, 4))]
    read = list(line)
    for place in places:
        read[place] = draw.draw(st.none() | symbols)
    assert decode(read) in (line, None)


def miscorrected(chance, count, *, least, most, erased=0):
    """How many of ``count`` lines with ``least`` to ``most`` wrong symbols, and some unreadable, pass as another."""
    passed = 0
    for _ in range(count):
        line = random_line(chance)
        errors = random_errors(chance, chance.randint(least, most) + erased)
        read = with_errors(line, errors)
        for place in list(errors)[:erased]:
            read[place] = None
        found = decode(read)
        assert found != line
        passed += found is not None
    return passed


def test_three_and_four_errors_never_pass():
    assert miscorrected(random.Random(5), 5_000, least=3, most=4) == 0


def test_fewer_than_one_in_a_thousand_of_worse_lines_pass():
    assert miscorrected(random.Random(6), 20_000, least=5, most=LENGTH) < 20


@pytest.mark.parametrize(("erased", "never", "worse"), [(1, 4, 5), (2, 3, 4), (3, 3, 4)])
def test_unreadable_symbols_keep_the_promise(erased, never, worse):
    # With e unreadable, what is accepted has at most w = (4 - e) // 2 wrong; 7 - e - w wrong are needed for another.
    assert miscorrected(random.Random(erased), 2_000, least=2, most=never, erased=erased) == 0
    assert miscorrected(random.Random(erased), 8_000, least=worse, most=LENGTH - erased, erased=erased) < 16


@pytest.mark.slow
def test_how_many_of_a_million_heavy_errors_pass(capsys):
    passed = miscorrected(random.Random(7), 1_000_000, least=5, most=LENGTH)
    with capsys.disabled():
        print(f"\n1,000,000 lines with 5 to 31 wrong characters: {passed} taken for another ({passed / 10_000:.4f} %)")
    # A random word lies within two of a codeword with probability (1 + 31 * 31 + C(31, 2) * 31^2) / 32^6 = 0.0417 %.
    expected = (1 + 31 * 31 + comb(31, 2) * 31**2) / 32**6 * 1_000_000
    assert passed < 1_000
    assert abs(passed - expected) < 5 * expected**0.5


def test_a_line_begun_elsewhere_is_no_line():
    chance = random.Random(8)
    for _ in range(20):
        line = random_line(chance)
        for start in range(1, LENGTH):
            turned = line[start:] + line[:start]
            for weight in range(4):
                assert decode(with_errors(turned, random_errors(chance, weight))) is None


def test_what_only_seems_to_be_one_place_is_refused(code):
    """Sums j X^j vanish when the place of X is taken out twice, and yet no symbol there explains them."""
    field = code.field
    ends = field([[int(field(2) ** (j * i)) for i in range(5, -1, -1)] for j in range(1, 7)])
    for place in range(DATA):
        locator = field(2) ** (LENGTH - 1 - place)
        sums = field([int(locator**j) if j % 2 else 0 for j in range(1, 7)])
        added = [int(symbol) for symbol in numpy.linalg.solve(ends, sums)]
        line = random_line(random.Random(place))
        read = [*line[:DATA], *(a ^ b for a, b in zip(line[DATA:], added, strict=True))]
        assert decode(read) is None
        assert decode([None if i == place else symbol for i, symbol in enumerate(read)]) is None


def test_without_the_fixed_word_it_would_be_one(code):
    word = plain(random_line(random.Random(9)))
    assert not numpy.array(code.field(word[1:] + word[:1]) @ code.H.T).any()


@pytest.mark.parametrize("length", [0, 24, 26])
def test_data_of_another_length_are_refused(length):
    with pytest.raises(ParameterError):
        encode([0] * length)


@pytest.mark.parametrize("length", [0, 30, 32])
def test_lines_of_another_length_are_refused(length):
    with pytest.raises(ParameterError):
        decode([0] * length)
