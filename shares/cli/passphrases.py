"""Where passphrases come from: files, inherited descriptors, or a hidden prompt. Never an option's value.

Source: termios(3) (echo off), NIST SP 800-63B, sec. 5.1.1 (what a chosen one is worth).
May import: shares.errors, shares.memory, shares.storage, shares.custody.passphrase, shares.cli.output,
shares.cli.signals.
Secret: every passphrase, read straight into locked memory. Public: where they come from, and whose they are.
Does not: ask anything where there is no terminal.
"""

from __future__ import annotations

import itertools
import os
import termios
from collections.abc import Callable, Collection, Iterator
from contextlib import contextmanager
from typing import Any, Self, TypeVar

import click

from shares.cli.output import filled, warn
from shares.cli.signals import unsuspended
from shares.custody.passphrase import MAX_PASSPHRASE, weakness
from shares.errors import ParameterError, WrongKeyError
from shares.memory import Secret
from shares.storage import read_secret

Opened = TypeVar("Opened")
Function = TypeVar("Function", bound=Callable[..., Any])

_TRIES = 3
_STDIN, _STDERR = 0, 2


def passphrase_options(function: Function) -> Function:
    """Add the options that say where passphrases come from."""
    for option in (
        click.option(
            "--passphrase-fd",
            "descriptors",
            multiple=True,
            metavar="[NAME=]N",
            callback=filled,
            help="Read a passphrase, of NAME or of anyone, from this inherited file descriptor.",
        ),
        click.option(
            "--passphrase-file",
            "passphrase_files",
            multiple=True,
            metavar="[NAME=]FILE",
            callback=filled,
            help="Read a passphrase, of NAME or of anyone, from this file: one line.",
        ),
    ):
        function = option(function)
    return function


class GivenPassphrases:
    """The passphrases that a command was given, and the terminal, where there is one; ``with`` wipes them.

    Args:
        files: ``[NAME=]FILE``, split at the first sign of equality.
        descriptors: ``[NAME=]N``.
        option: what to advise where one is missing; the options for passphrases by name by default.
    """

    def __init__(self, files: tuple[str, ...], descriptors: tuple[str, ...], *, option: str | None = None) -> None:
        numbered = [(name, _descriptor(number)) for name, number in map(_named, descriptors)]
        self._sources = [*map(_named, files), *numbered]
        self._read: dict[str, Secret] = {}
        self._option = option
        self._chosen: dict[str, Secret] = {}

    def opening(self, name: str, attempt: Callable[[Secret], Opened]) -> Opened:
        """Return what ``attempt`` returns for the first passphrase of ``name`` that fits; those of anyone come next.

        Raises:
            WrongKeyError: none fits, and there is no terminal, or three were typed in vain.
        """
        sources = [source for wanted in (name, None) for owner, source in self._sources if owner == wanted]
        wrong = None
        for source in sources:
            try:
                return attempt(self._passphrase(source))
            except WrongKeyError as error:
                wrong = error
        if os.isatty(_STDIN):
            for left in reversed(range(_TRIES)):
                with _prompt(f"Passphrase of {name}: ") as typed:
                    try:
                        return attempt(typed)
                    except WrongKeyError as error:
                        wrong = error
                if left:
                    warn(f"{wrong.what}. {left} more {'try' if left == 1 else 'tries'}.")
        if wrong is None:
            raise WrongKeyError(
                f"the passphrase of {name} is needed, and there is no terminal to ask for it",
                hint=f"give --passphrase-file {name}=FILE or --passphrase-fd {name}=N",
            )
        raise WrongKeyError(wrong.what, where=wrong.where or f"passphrase of {name}", hint=wrong.hint)

    def new(self, name: str) -> Secret:
        """Return the passphrase that something of ``name`` is to be wrapped under; typed twice where it is typed.

        Raises:
            ParameterError: none is given and there is no terminal; or two were typed that differ.
        """
        for wanted in (name, None):
            for owner, source in self._sources:
                if owner == wanted:
                    return self._noted(name, self._passphrase(source))
        if not os.isatty(_STDIN):
            options = self._option or f"--passphrase-file {name}=FILE or --passphrase-fd {name}=N"
            raise ParameterError(
                f"no passphrase is given for {name}, and there is no terminal to ask for it",
                hint=f"give {options}; `shares passphrase` draws one",
            )
        typed = self._read[f"typed for {name}"] = _prompt(f"New passphrase for {name}: ")
        with _prompt("The same again: ") as again:
            same = len(typed) == len(again) and typed == again
        if not same:
            raise ParameterError(f"the two passphrases typed for {name} differ", hint="start again")
        return self._noted(name, typed)

    def only_for(self, names: Collection[str]) -> None:
        """Refuse a passphrase that is given for nobody who needs one: a slip in a name would go unnoticed.

        Raises:
            ParameterError: says for whom.
        """
        for owner, _ in self._sources:
            if owner is not None and owner not in names:
                raise ParameterError(
                    f"a passphrase is given for {owner}, and nobody of that name needs one here",
                    where="--passphrase-file",
                    hint=f"names here are {', '.join(names)}",
                )

    def is_shared(self) -> bool:
        """Say whether two of those that ``new`` returned are the same."""
        chosen = list(self._chosen.values())
        return any(one is other or one == other for one, other in itertools.combinations(chosen, 2))

    def _passphrase(self, source: str) -> Secret:
        if source not in self._read:
            self._read[source] = _one_line(source)
        return self._read[source]

    def _noted(self, name: str, passphrase: Secret) -> Secret:
        note = weakness(passphrase)
        if note:
            warn(f"the passphrase for {name}: {note}.")
        self._chosen[name] = passphrase
        return passphrase

    def close(self) -> None:
        """Wipe them."""
        for passphrase in self._read.values():
            passphrase.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def _named(text: str) -> tuple[str | None, str]:
    name, equals, source = text.partition("=")
    if equals and not source:
        raise ParameterError("nothing follows the sign of equality", where="--passphrase-file")
    return (name or None, source) if equals else (None, text)


def _descriptor(number: str) -> str:
    if not number.isascii() or not number.isdigit() or int(number) < 3 or len(number) > 6:
        raise ParameterError(
            "it is not the number of an inherited descriptor", where="--passphrase-fd", hint="3 or more, as in 3<file"
        )
    return f"/dev/fd/{number}"


def _one_line(source: str) -> Secret:
    """Read a passphrase: one line, its end left out."""
    with read_secret(source, limit=MAX_PASSPHRASE + 2) as whole, whole.view() as view:
        length = len(view)
        if length and view[length - 1] == 0x0A:
            length -= 1
            if length and view[length - 1] == 0x0D:
                length -= 1
        problem = "is empty" if not length else "is longer than 1,024 bytes" if length > MAX_PASSPHRASE else ""
        if 0x0A in view[:length]:
            problem = "is of more than one line"
        if problem:
            raise ParameterError(f"the passphrase {problem}", where=source, hint="one line, and nothing else")
        return Secret.of(view[:length])


def _prompt(text: str) -> Secret:
    """Ask on the terminal without echo. The bytes go from the terminal into locked memory."""
    with unsuspended(), _without_echo(), Secret(MAX_PASSPHRASE + 1) as room, room.view() as view:
        click.echo(text, nl=False, err=True)
        length = 0
        # In its usual mode the terminal gives whole lines, edited; a longer one comes in parts.
        while length < len(view) and not (length and view[length - 1] == 0x0A):
            with view[length:] as free:
                count = os.readv(_STDIN, [free])
            if not count:
                break
            length += count
        ended = length > 0 and view[length - 1] == 0x0A
        typed = Secret.of(view[: length - ended])
    if not ended or not len(typed):
        typed.close()
        what = "no passphrase was typed" if length <= MAX_PASSPHRASE else "the passphrase is longer than 1,024 bytes"
        raise ParameterError(what, hint="type one line, or give --passphrase-file")
    return typed


@contextmanager
def _without_echo() -> Iterator[None]:
    before = termios.tcgetattr(_STDIN)
    silent = [*before]
    silent[3] = before[3] & ~termios.ECHO | termios.ECHONL
    # What was typed ahead is thrown away: it was shown.
    termios.tcsetattr(_STDIN, termios.TCSAFLUSH, silent)
    try:
        yield
    finally:
        termios.tcsetattr(_STDIN, termios.TCSAFLUSH, before)
