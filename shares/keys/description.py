"""What a custodian is told, before agreeing, of the bytes that a threshold key is to sign.

Source: The Unicode Standard, sec. 23 (special characters), by the rule of ``documents.members``; FIPS 180-4 (SHA-256).
May import: shares.documents.members.
Secret: nothing. Public: everything.
Does not: look at what is to be signed; the module of each format does, and finds all that it says in the bytes alone.
"""

from __future__ import annotations

import textwrap
from dataclasses import dataclass
from typing import Final

from shares.documents.members import MAX_TEXT, holds_unprintable

_MOST_SUMMED: Final = 4
"""How many lines a summary has: of a certificate subject, issuer, time and number."""


@dataclass(frozen=True, slots=True)
class Description:
    """What some bytes are, in words that nothing in them can disturb.

    Attributes:
        kind: what they are, as it follows 'this is'.
        lines: what they say, one fact a line.
        cautions: what to think of before they are signed, one sentence or two each.
    """

    kind: str
    lines: tuple[str, ...]
    cautions: tuple[str, ...] = ()

    def summary(self) -> str:
        """Say it in one text of a journal: the kind, and what comes first of the rest but size and digest."""
        said = "; ".join((self.kind, *self.lines[2 : 2 + _MOST_SUMMED]))
        return said if len(said) <= MAX_TEXT else f"{said[: MAX_TEXT - 4].rsplit(' ', 1)[0]} ..."


def shown(text: str) -> str:
    """Return a text of unknown origin with all that is invisible, or turns or moves other text, written out.

    Args:
        text: anything that came from elsewhere.

    >>> shown("harbour\\u202ecod.exe")
    'harbour<U+202E>cod.exe'
    """
    return "".join(f"<U+{ord(c):04X}>" if is_hidden(c) else c for c in text)


def is_hidden(c: str) -> bool:
    """Say whether a character shows as nothing or as a space that is none, or steers, or is not known to show at all.

    Args:
        c: one character.
    """
    return not c.isprintable() or holds_unprintable(c)


def in_groups(data: bytes) -> str:
    """Return bytes as lower-case hexadecimal in groups of eight, to be compared by eye.

    >>> in_groups(bytes(range(6)))
    '00010203 0405'
    """
    return " ".join(textwrap.wrap(data.hex(), 8))
