"""Options that say a span of time.

Source: none.
May import: shares.documents.intervals.
Secret: nothing. Public: everything.
Does not: know what is due when.
"""

from __future__ import annotations

from datetime import timedelta

import click

from shares.documents.intervals import parse_interval


def interval(_: click.Context, __: click.Parameter, value: str) -> timedelta:
    """Read an option like ``14d``, ``2w`` or ``1y``.

    Raises:
        ParameterError: it is not written so.
    """
    return parse_interval(value)
