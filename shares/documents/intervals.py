"""Spans of time as policies and options write them: intervals in days, weeks and years, durations in minutes and hours.

Source: FORMAT.md, sec. 12.
May import: shares.errors.
Secret: nothing. Public: everything.
Does not: know what recurs after an interval. A year is 365 days, since what is due is due on a day, not on a date.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from datetime import timedelta
from typing import Annotated

from pydantic import PlainValidator
from pydantic_core import PydanticCustomError

from shares.errors import ParameterError

DAYS = {"d": 1, "w": 7, "y": 365}
UNITS = {"min": timedelta(minutes=1), "h": timedelta(hours=1), "d": timedelta(days=1)}


def parse_duration(text: str) -> timedelta:
    """Return a duration as policies write it.

    Args:
        text: a number from 1 to 9999, and ``min``, ``h`` or ``d``.

    Raises:
        ParameterError: it is not written so.

    >>> parse_duration("90min").total_seconds()
    5400.0
    """
    form = re.fullmatch(r"([1-9][0-9]{0,3})(min|h|d)", text)
    if form is None:
        raise ParameterError('should be a duration like "90min", "4h" or "2d": 1 to 9999 and min, h or d')
    return int(form[1]) * UNITS[form[2]]


def parse_interval(text: str) -> timedelta:
    """Return an interval as policies write it.

    Args:
        text: a number from 1 to 9999, and ``d``, ``w`` or ``y`` for 1, 7 or 365 days.

    Raises:
        ParameterError: it is not written so.

    >>> parse_interval("2w").days
    14
    """
    form = re.fullmatch(r"([1-9][0-9]{0,3})([dwy])", text)
    if form is None:
        raise ParameterError(
            'should be an interval of a day or more, like "90d", "26w" or "1y": 1 to 9999 and d, w or y'
        )
    return timedelta(days=int(form[1]) * DAYS[form[2]])


def _read_by(parse: Callable[[str], timedelta]) -> PlainValidator:
    def read(value: object) -> timedelta:
        try:
            return parse(value if isinstance(value, str) else "")
        except ParameterError as error:
            reason = error.what
        raise PydanticCustomError("shares_interval", "{reason}", {"reason": reason})

    return PlainValidator(read)


Interval = Annotated[timedelta, _read_by(parse_interval)]
Duration = Annotated[timedelta, _read_by(parse_duration)]
