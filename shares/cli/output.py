"""How commands speak: results on standard output, talk on standard error, JSON where it is asked for.

Source: none.
May import: shares.errors.
Secret: nothing. Public: whatever is printed.
Does not: decide exit codes; errors carry theirs.
"""

from __future__ import annotations

import contextlib
import json
import os
import sys
import textwrap
import time
from collections.abc import Callable, Iterable
from typing import Any, TypeVar

import click

from shares.errors import CommandFailedError, ParameterError, SharesError, StorageError

Given = TypeVar("Given")

# A bar of so many places is shown after so many seconds, and anew after each pause; where the end is not known, a line
# after each long one.
_QUIET, _PAUSE, _LONG_PAUSE, _BAR = 2.0, 0.1, 10.0, 24

json_option = click.option("--json", "as_json", is_flag=True, help="Print the result as one JSON object.")


def filled(_: click.Context, parameter: click.Parameter, value: Given) -> Given:
    """Refuse an empty path or text: it would mean this folder, or nothing at all, to whoever reads it on.

    Raises:
        ParameterError: the value, or one of several, is empty.
    """
    given = value if isinstance(value, tuple) else (value,)
    if any(one == "" for one in given):
        raise ParameterError(
            "an empty value is given",
            where=parameter.opts[0] if isinstance(parameter, click.Option) else parameter.metavar,
            hint="in a script, see whether a variable is not set",
        )
    return value


def refuse_taken(target: str) -> None:
    """Refuse a name for a new file that is taken, before anybody is asked for a passphrase.

    Raises:
        StorageError: something has the name.
    """
    if os.path.lexists(target):
        raise StorageError("exists already and is never overwritten", where=target, hint="choose another name")


def print_result(members: dict[str, Any], lines: Iterable[str], *, as_json: bool, aside: bool = False) -> None:
    """Print a result: one JSON object, or calm lines for people.

    Args:
        members: the JSON object; ``exit`` is 0 unless it says otherwise.
        lines: the same for people.
        as_json: which of the two.
        aside: put the lines on standard error, because standard output is a fed command's.
    """
    try:
        if as_json:
            click.echo(json.dumps({"done": True, "exit": 0} | members, indent=2))
        else:
            for line in lines:
                click.echo(_printable(line), err=aside)
    except BrokenPipeError:
        raise
    except OSError as error:
        raise StorageError(
            f"the result could not be printed: {(error.strerror or type(error).__name__).lower()}",
            where="standard error" if aside and not as_json else "standard output",
            hint="what was asked for is done all the same",
        ) from error


def prose(text: str) -> list[str]:
    """Break a sentence for people into lines of at most 100 characters."""
    return textwrap.wrap(text, 100, break_long_words=False, break_on_hyphens=False)


def warn(line: str) -> None:
    """Print a caution to standard error."""
    # Where standard error is full or gone, what was done is still to be told on standard output.
    with contextlib.suppress(OSError):
        click.echo(_printable(f"Caution: {line}"), err=True)


def say(lines: Iterable[str]) -> None:
    """Print lines for people to standard error: what is about to be done."""
    with contextlib.suppress(OSError):
        for line in lines:
            click.echo(_printable(line), err=True)


def print_error(error: SharesError, *, as_json: bool) -> None:
    """Print a refusal: what, where, what next; one line on standard error, or JSON on standard output."""
    if as_json:
        told: dict[str, Any] = {"code": error.code, "what": error.what, "where": error.where, "hint": error.hint}
        if isinstance(error, CommandFailedError):
            told["status"] = error.status
        found = {"shares": error.findings} if error.findings else {}
        click.echo(json.dumps({"done": False, "exit": error.exit_code, "error": told, **found}, indent=2))
    else:
        click.echo(_printable(f"shares: {error}"), err=True)


def _printable(line: str) -> str:
    """Replace what could steer a terminal: labels and file names come from others."""
    return "".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in line)


def progress(what: str, unit: str, stop_here: Callable[[], None] | None = None) -> Callable[[int, int | None], None]:
    """Return a callback that draws a bar on a terminal once the work has taken two seconds.

    Args:
        what: the work, in words.
        unit: what is counted.
        stop_here: called each time; raises where the work is to stop.

    Returns:
        A function of what is done and what there is to do; the latter is None where it is not known.
    """
    start = time.monotonic()
    shown = start + _QUIET - _PAUSE

    def show(done: int, total: int | None) -> None:
        nonlocal shown
        if stop_here:
            stop_here()
        now = time.monotonic()
        is_last = done + 1 == total
        pause = _LONG_PAUSE if total is None else _PAUSE
        if (now - shown < pause and not (is_last and shown > start + _QUIET)) or not sys.stderr.isatty():
            return
        shown = now
        if total is None:
            click.echo(f"{what}: {done + 1:,} {unit} so far", err=True)
        else:
            left = (now - start) / max(done, 1) * (total - done)
            bar = "=" * (_BAR * (done + 1) // total)
            line = f"{what}: [{bar:.<{_BAR}}] {done + 1:,} of {total:,} {unit}, about {left:.0f} s left"
            click.echo(f"{line}   {chr(10) if is_last else chr(13)}", err=True, nl=False)

    return show
