"""The typed line: how a block of a share is written for people, and how one line is read as a person types it.

Source: RFC 4648, sec. 6 (base32); the line code is ``linecode``; FORMAT.md, sec. 11.
May import: shares.errors, shares.paper.linecode, shares.paper.paperform.
Secret: the characters of a line. They are Python text, which cannot be wiped, and are not handled in constant time.
Public: how many characters were typed, and which one is at fault.
Does not: know whether the line is the one that is wanted; ``transcription`` does.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from shares.errors import DocumentError
from shares.paper import linecode
from shares.paper.paperform import CHARACTERS, LETTERS, to_text

MAX_LINES: Final = 32
"""Most lines of a sheet: the first character of each is its number."""
UNREADABLE: Final = "?"

# What is typed in place of a letter because it looks like it. With two, either is possible.
_ALIKE: Final = {"0": "O", "8": "B", "1": "IL", "|": "IL", "!": "IL", "9": "GQ", UNREADABLE: LETTERS}
_BETWEEN: Final = " \t-.,:_"
_NUMBERED: Final = re.compile(r"\s*(?:line\s+)?[0-9]{1,2}\s*[.:)-]?\s+(.*)", re.DOTALL | re.IGNORECASE)


def to_lines(data: bytes) -> list[str]:
    """Return the lines that a paper form is typed as, 31 characters each. Secret.

    Args:
        data: 1 to 32 blocks of 15 bytes.

    Source: FORMAT.md, sec. 11.

    >>> grouped(to_lines(b"nothing secret.")[0])
    'ANZX XI2D JNZT SA43 FMNZ GK5B OR5L XJD'
    """
    text = to_text(data)
    starts = range(0, len(text), CHARACTERS)
    return [_line(number, text[start : start + CHARACTERS]) for number, start in enumerate(starts)]


def _line(number: int, letters: str) -> str:
    return _as_text(linecode.encode([number, *(LETTERS.index(letter) for letter in letters)]))


def _as_text(symbols: Sequence[int]) -> str:
    return "".join(LETTERS[symbol] for symbol in symbols)


def grouped(line: str) -> str:
    """Return a line as it is printed: groups of four characters, the last one of three."""
    return " ".join(line[i : i + 4] for i in range(0, len(line), 4))


@dataclass(frozen=True, slots=True, repr=False)
class Correction:
    """One character that was read as another, was left out, or is one too many; ``place`` counts from 1."""

    place: int
    typed: str
    meant: str

    def words(self) -> str:
        """Return what was set right. It names characters of the share: for whoever types it, and nobody else."""
        if not self.typed:
            return f"character {self.place}, {self.meant}, was left out"
        if not self.meant:
            return f"character {self.place}, {self.typed}, is one too many"
        return f"character {self.place}: read {self.typed} as {self.meant}"


@dataclass(frozen=True, slots=True, repr=False)
class Reading:
    """A line as it was understood."""

    number: int
    letters: str
    corrections: tuple[Correction, ...]


def read_line(text: str) -> Reading:
    """Understand one typed line.

    Spaces and hyphens do not matter, nor does the number printed before a line. Small letters are read as capitals,
    0 as O, 8 as B; 1 may be I or L, 9 may be G or Q, and ? stands for a character that cannot be read.

    Returns:
        The line, with what was set right: at most two wrong characters, or one left out or too many.

    Raises:
        DocumentError: it cannot be told which line this is; the message does not repeat what was typed.
    """
    typed = unnumbered(text)
    for place, character in enumerate(typed, start=1):
        if character not in LETTERS and character not in _ALIKE:
            raise DocumentError(
                f"character {place} is none of the letters A to Z and digits 2 to 7",
                hint=f"type {UNREADABLE} for one that cannot be read",
            )
    understood = {0: _same_length, -1: _one_missing, 1: _one_too_many}.get(len(typed) - linecode.LENGTH)
    if understood is None:
        raise DocumentError(
            f"a line has {linecode.LENGTH} characters, and this has {len(typed)}", hint="compare it group by group"
        )
    return understood(typed)


def unnumbered(text: str) -> str:
    """Return the characters of a row, compact, without the number that stands before a whole line.

    >>> unnumbered("7  ANZX XI2D JNZT SA43 FMNZ GK5B OR5L XJD") == unnumbered("ANZXXI2DJNZTSA43FMNZGK5BOR5LXJD")
    True
    """
    numbered = _NUMBERED.fullmatch(text)
    if numbered and len(compact(numbered[1])) >= linecode.LENGTH - 1:
        text = numbered[1]
    return compact(text)


def compact(text: str) -> str:
    """Return text without what may stand between characters, in capital letters."""
    kept = (character for character in text if not character.isspace() and character not in _BETWEEN)
    return "".join(character.upper() if character.isascii() else character for character in kept)


def _same_length(typed: str) -> Reading:
    symbols = _decoded([_ALIKE.get(character, character) for character in typed], linecode.BUDGET)
    if symbols is None:
        raise DocumentError("more than two characters are wrong", hint="compare it group by group")
    changed = enumerate(zip(typed, _as_text(symbols), strict=True), start=1)
    return _reading(symbols, [Correction(place, was, is_) for place, (was, is_) in changed if was != is_])


def _decoded(marks: Sequence[str], budget: int) -> list[int] | None:
    """Return the line that fits the letters possible at each place, or None.

    A wrong character costs 2 of the budget. One that may be several costs 1, yet 2 where it turns out to be none.
    """
    symbols = linecode.decode([LETTERS.index(mark) if len(mark) == 1 else None for mark in marks])
    if symbols is None:
        return None
    letters = zip(marks, _as_text(symbols), strict=True)
    cost = sum((letter not in mark) * 2 or len(mark) > 1 for mark, letter in letters)
    return symbols if cost <= budget else None


def _one_missing(typed: str) -> Reading:
    found: dict[str, int] = {}
    for place in range(linecode.LENGTH):
        marks = [_ALIKE.get(character, character) for character in typed]
        marks.insert(place, LETTERS)
        # One more that may be several is let pass, but nothing wrong.
        symbols = _decoded(marks, 1 + _several(marks[:place] + marks[place + 1 :]))
        if symbols:
            found.setdefault(_as_text(symbols), place)
    line, place = _only(found, f"a character is missing: this has {len(typed)}, and a line has {linecode.LENGTH}")
    changes = [Correction(place + 1, "", line[place])]
    rest = zip(typed, line[:place] + line[place + 1 :], strict=True)
    changes += [Correction(i + 1 + (i >= place), was, is_) for i, (was, is_) in enumerate(rest) if was != is_]
    return _reading([LETTERS.index(letter) for letter in line], changes)


def _one_too_many(typed: str) -> Reading:
    found: dict[str, int] = {}
    for place in range(len(typed)):
        marks = [_ALIKE.get(character, character) for character in typed[:place] + typed[place + 1 :]]
        symbols = _decoded(marks, _several(marks))
        if symbols:
            found.setdefault(_as_text(symbols), place)
    line, place = _only(found, f"a character is too many: this has {len(typed)}, and a line has {linecode.LENGTH}")
    changes = [Correction(place + 1, typed[place], "")]
    rest = zip(typed[:place] + typed[place + 1 :], line, strict=True)
    changes += [Correction(i + 1 + (i >= place), was, is_) for i, (was, is_) in enumerate(rest) if was != is_]
    return _reading([LETTERS.index(letter) for letter in line], changes)


def _several(marks: Sequence[str]) -> int:
    """Count the places that may be several letters, up to the one that is let pass."""
    return min(1, sum(len(mark) > 1 for mark in marks))


def _only(found: dict[str, int], otherwise: str) -> tuple[str, int]:
    if len(found) != 1:
        raise DocumentError(otherwise, hint="compare it group by group")
    return next(iter(found.items()))


def _reading(symbols: Sequence[int], corrections: Sequence[Correction]) -> Reading:
    return Reading(
        symbols[0] + 1, _as_text(symbols[1 : linecode.DATA]), tuple(sorted(corrections, key=lambda one: one.place))
    )
