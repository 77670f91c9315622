"""Odds in words: as many digits as are meant, in the form in which people compare them.

Rates are guesses to one digit or two, so no number that follows from them is told with more than two.

Source: practice of risk communication (from memory: "1 in 20" is understood by more people than 0.05 is).
May import: nothing of this package.
Secret: nothing. Public: whatever is written.
Does not: judge what is large or small.
"""

from __future__ import annotations

import math
from decimal import ROUND_CEILING, ROUND_FLOOR, Decimal

_CERTAIN = 0.995
_ONE_DIGIT_BELOW = 1e-4
_PERCENT_FROM = 1e-6
LEAST = 1e-12
"""What is less likely is told as that: no rate is known well enough to tell it apart."""
MOST_YEARS = 1e6
"""No longer time is told in numbers."""
_UNITS = ((1e12, "trillion"), (1e9, "billion"), (1e6, "million"))


def chance(p: float) -> str:
    """Write a chance, 0 to 1: a percentage, with one digit below 0.01 %; as one in so many below a millionth.

    >>> [chance(p) for p in (0.0, 4.2e-7, 0.000096, 0.00096, 0.0532, 0.57499, 0.996)]
    ['none', '1 in 2.4 million', '0.01 %', '0.096 %', '5.3 %', '57 %', 'above 99 %']
    """
    if p == 0:
        return "none"
    if p >= _CERTAIN:
        return "above 99 %"
    if p < LEAST:
        return "below 1 in a trillion"
    if p < _PERCENT_FROM:
        return f"1 in {_in_words(1 / p)}"
    if p < _ONE_DIGIT_BELOW:
        return f"{Decimal(f'{100 * p:.0e}').normalize():f} %"
    return f"{_two_digits(100 * p)} %"


def one_in(p: float) -> str:
    """Write a chance as one in so many; nothing where that reads worse than a percentage does.

    >>> [one_in(p) for p in (0.0532, 0.0009, 4e-7, 0.19, 0.0)]
    ['1 in 19', '1 in 1,100', '', '', '']
    """
    # Of a chance above a tenth it would take a fraction to say it, as in "1 in 5.3".
    return f"1 in {_two_digits(1 / p)}" if _PERCENT_FROM <= p <= 1 / 10 else ""


def interval(low: float, high: float) -> str:
    """Write the ends of an interval of chances, 0 to 1, ``low`` below ``high``: rounded away from one another, to as
    many digits as make the rounding no wider than the interval. An end at 0 or 1 was not reached: nothing seen is not
    never.

    >>> [interval(*ends) for ends in ((0.3885, 0.3946), (0.0004, 0.0011), (2.5e-7, 5.57e-5), (0, 3.7e-5), (0.99996, 1))]
    ['38.8 % to 39.5 %', '0.04 % to 0.11 %', '0.00002 % to 0.006 %', 'below 0.004 %', 'above 99.996 %']
    """
    finest = math.floor(math.log10(high - low))
    if low == 0:
        return f"below {_rounded(high, finest, ROUND_CEILING)}"
    if high == 1:
        return f"above {_rounded(low, finest, ROUND_FLOOR)}"
    return f"{_rounded(low, finest, ROUND_FLOOR)} to {_rounded(high, finest, ROUND_CEILING)}"


def _rounded(p: float, finest: int, which_way: str) -> str:
    """Round a chance above 0 to the digits that ``chance`` tells, or down to 10^finest."""
    last = math.floor(math.log10(p)) - (p >= _ONE_DIGIT_BELOW)
    rounded = Decimal(str(p)).quantize(Decimal(1).scaleb(min(last, finest)), which_way).normalize()
    return f"{(100 * rounded).normalize():f} %"


def years(span: float) -> str:
    """Write a mean time in years, of which none is too long.

    >>> [years(span) for span in (0.04, 1.0, 10.9, 181.99, 2.6e5, 1.3e17, math.inf)]
    ['15 days', '1 year', '11 years', '180 years', '260,000 years', 'more than a million years', 'never']
    """
    if span == math.inf:
        return "never"
    if span > MOST_YEARS:
        return "more than a million years"
    told, unit = (_two_digits(365 * span), "day") if span < 1 else (_two_digits(span), "year")
    return f"{told} {unit}" if told == "1" else f"{told} {unit}s"


def histories(count: int) -> str:
    """Write how many histories were drawn.

    >>> histories(1), histories(100_000)
    ('1 history', '100,000 histories')
    """
    return "1 history" if count == 1 else f"{count:,} histories"


def horizon(span: float) -> str:
    """Write a number of years that somebody gave, as they meant it; below one year, in the days that are counted.

    >>> horizon(10.0), horizon(1.0), horizon(2.5), horizon(0.5), horizon(1 / 365)
    ('10 years', '1 year', '2.5 years', '182 days', '1 day')
    """
    if span < 1:
        days = max(1, round(365 * span))
        return "1 day" if days == 1 else f"{days} days"
    return "1 year" if span == 1 else f"{span:,.6g} years"


def every(days: int | None) -> str:
    """Write an interval of 1 day or more; None is none at all.

    >>> every(None), every(1), every(90), every(365), every(730)
    ('never', 'every day', 'every 90 days', 'every year', 'every 2 years')
    """
    if days is None:
        return "never"
    number, unit = (days // 365, "year") if days % 365 == 0 else (days, "day")
    return f"every {unit}" if number == 1 else f"every {number:,} {unit}s"


def _two_digits(number: float) -> str:
    """Round to two digits, with no exponent and no trailing point.

    >>> [_two_digits(n) for n in (0.52, 1.0, 5.32, 57.499, 1880.5)]
    ['0.52', '1', '5.3', '57', '1,900']
    """
    rounded = float(f"{number:.1e}")
    return f"{rounded:,.0f}" if rounded >= 10 else f"{rounded:g}"


def _in_words(number: float) -> str:
    """Write a million or more, to two digits.

    >>> [_in_words(n) for n in (1e6, 2.38e6, 9.96e8, 4.04e11)]
    ['1 million', '2.4 million', '1 billion', '400 billion']
    """
    rounded = float(f"{number:.1e}")
    unit, name = next((unit, name) for unit, name in _UNITS if rounded >= unit)
    return f"{rounded / unit:g} {name}"
