"""Options that say a span of time, or a moment.

Source: none.
May import: shares.errors, shares.clock, shares.documents.intervals.
Secret: nothing. Public: everything.
Does not: know what is due when.
"""

from __future__ import annotations

from collections.abc import Callable
from datetime import datetime, timedelta
from typing import TypeVar

import click

from shares import clock
from shares.documents.intervals import parse_interval
from shares.errors import ParameterError

Read = TypeVar("Read")


def interval(_: click.Context, parameter: click.Parameter, value: str) -> timedelta:
    """Read an option like ``14d``, ``2w`` or ``1y``.

    Raises:
        ParameterError: it is not written so; says which option.
    """
    return _read(parse_interval, parameter, value)


def moment(_: click.Context, parameter: click.Parameter, value: str | None) -> datetime | None:
    """Read an option like ``2026-12-01T07:00:00Z``, where it is given.

    Raises:
        ParameterError: it is not written so; says which option.
    """
    return None if value is None else _read(clock.from_text, parameter, value)


def later(moment: datetime, span: timedelta) -> datetime:
    """Return the moment that lies so far ahead of another.

    Raises:
        ParameterError: no calendar has it.
    """
    try:
        return moment + span
    except OverflowError:
        pass
    raise ParameterError("it would end after the year 9999", hint="give a shorter time, like 10y")


def _read(parse: Callable[[str], Read], parameter: click.Parameter, value: str) -> Read:
    try:
        return parse(value)
    except ParameterError as error:
        problem = error
    raise ParameterError(problem.what, where=parameter.opts[0], hint=problem.hint)
