"""Rates and portions as text: what is read, and that nothing else is.

Source: FORMAT.md, sec. 12; exact fractions for the numbers.
"""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.documents.rates import parse_absence, parse_portion, parse_rate
from shares.errors import ParameterError


@given(st.decimals(0, 100, places=4))
def test_percentages_are_read_as_the_numbers_they_are(percent: object) -> None:
    expected = float(Fraction(str(percent)) / 100)
    assert abs(parse_portion(f"{percent} %") - expected) < 1e-15
    if expected < 1:
        for text in (f"{percent} %/y", f"{percent}%/y", f"{percent} % / y"):
            assert abs(parse_rate(text) - expected) < 1e-15


@given(st.decimals(0, "0.999999", places=6))
def test_numbers_a_year_are_read_as_they_are(number: object) -> None:
    assert parse_rate(f"{number}/y") == float(Fraction(str(number)))


NO_RATES = (
    *("", "4", "0.04", "4 %", "4 %/d", "4 %/Y", "-4 %/y", "+4 %/y", "4e-2/y", ".5 %/y", "5. %/y", "nan/y", "inf %/y"),
    *("4  %/y", "4 %/y ", "\u0664 %/y", "1000 %/y", "4 %/y\n", "0.0000000000001/y", "1/y", "100 %/y"),
)


@pytest.mark.parametrize("text", NO_RATES)
def test_what_is_no_rate(text: str) -> None:
    with pytest.raises(ParameterError, match="%/y"):
        parse_rate(text)


@pytest.mark.parametrize(
    "text", ["", "10", "0.1", "10 %/y", "-1 %", "100.1 %", "101 %", "1e1 %", "10 % ", "\u0661\u0660 %"]
)
def test_what_is_no_portion(text: str) -> None:
    with pytest.raises(ParameterError, match="%"):
        parse_portion(text)


def test_the_whole_is_a_portion() -> None:
    assert (parse_portion("0 %"), parse_portion("100%")) == (0.0, 1.0)


def test_an_absence_is_any_portion_but_the_whole() -> None:
    assert (parse_absence("0 %"), parse_absence("99.999999999999 %")) == (0.0, 0.99999999999999)
    for text in ("100 %", "100.000%", "101 %", "10"):
        with pytest.raises(ParameterError, match="%"):
            parse_absence(text)
