"""The time as documents carry it: UTC, to the second, in one text form.

Source: RFC 3339, section 5.6 (``date-time``), narrowed to one spelling: capital ``T`` and ``Z``, no fraction.
May import: errors.
Secret: nothing.
Does not: keep a settable clock. Whoever needs another time than now takes it as an argument.
"""

from __future__ import annotations

import re
from datetime import UTC, datetime
from typing import Final

from shares.errors import ParameterError

_FORM: Final = re.compile(r"([0-9]{4})-([0-9]{2})-([0-9]{2})T([0-9]{2}):([0-9]{2}):([0-9]{2})Z")


def now() -> datetime:
    """Return the present time in UTC, cut to the second."""
    return datetime.now(UTC).replace(microsecond=0)


def to_text(moment: datetime) -> str:
    """Write a time as documents carry it.

    Args:
        moment: an aware time in UTC, to the second.

    Returns:
        Twenty ASCII characters, ``2026-12-01T07:00:00Z``.

    Raises:
        ParameterError: the time has no zone, another zone, or a fraction of a second.

    Source: RFC 3339, section 5.6.

    >>> to_text(datetime(2026, 12, 1, 7, 0, tzinfo=UTC))
    '2026-12-01T07:00:00Z'
    """
    offset = moment.utcoffset()
    if offset is None or offset or moment.microsecond:
        raise ParameterError("a time must be in UTC and to the second")
    return moment.replace(tzinfo=None).isoformat(timespec="seconds") + "Z"


def from_text(text: str) -> datetime:
    """Read a time as documents carry it; any other spelling of the same time is refused.

    Args:
        text: twenty ASCII characters, ``2026-12-01T07:00:00Z``.

    Returns:
        The aware time in UTC.

    Raises:
        ParameterError: another form, or a date or time that does not exist.

    Source: RFC 3339, section 5.6. A leap second (``:60``) is refused: no document of ours is dated to one.

    >>> from_text("2026-12-01T07:00:00Z")
    datetime.datetime(2026, 12, 1, 7, 0, tzinfo=datetime.timezone.utc)
    """
    form = _FORM.fullmatch(text)
    if form is None:
        raise ParameterError("a time must be written in UTC and to the second, like 2026-12-01T07:00:00Z")
    year, month, day, hour, minute, second = map(int, form.groups())
    try:
        return datetime(year, month, day, hour, minute, second, tzinfo=UTC)
    except ValueError as error:
        raise ParameterError("a time must be one that the calendar and the clock have") from error
