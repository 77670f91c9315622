"""Where a journal is known to have stood: heads noted by hand, read aloud, or quoted in other documents.

Source: FORMAT_EVIDENCE.md, sec. 16.
May import: shares.errors, shares.documents.
Secret: nothing. Public: heads.
Does not: say whether a journal stood there; ``Journal.holds`` does.
"""

from __future__ import annotations

import re
from collections.abc import Iterator

from shares.documents.base import parse_object
from shares.documents.entry import Head
from shares.errors import DocumentError, ParameterError

_WRITTEN = re.compile(r"(?<![\w-])(\d{1,10}),?\s+([A-Za-z2-7]{4}(?:-[A-Za-z2-7]{4}){7})(?![\w-])")


def heads_in(text: str) -> list[Head]:
    """Return the heads that a note or a document holds, in the order in which they stand there.

    Args:
        text: like ``57 ABCD-...`` or what ``journal head`` prints, one or more; or a JSON document that quotes some.

    Raises:
        ParameterError: there is none in it, or a number is out of range.

    >>> [head.words() for head in heads_in("Noted on Monday: entry 57, aaaa-bbbb-cccc-dddd-eeee-ffff-gggg-2222")]
    ['entry 57, AAAA-BBBB-CCCC-DDDD-EEEE-FFFF-GGGG-2222']
    """
    try:
        written = list(_quoted(parse_object(text.encode("utf-8", "surrogatepass"))))
    except DocumentError:
        written = [(int(number), head.upper()) for number, head in _WRITTEN.findall(text)]
    if not written:
        raise ParameterError(
            "it holds no head of a journal", hint="write its number and its eight groups, as `shares journal head` does"
        )
    if not all(1 <= number < 2**32 for number, _ in written):
        raise ParameterError("the number of an entry is from 1 to 4,294,967,295")
    return [Head(sequence=number, head=head) for number, head in written]


def _quoted(value: object) -> Iterator[tuple[int, str]]:
    """Find what has the form of a head, however deep: documents quote them under names of their own."""
    match value:
        case {"sequence": bool()}:
            return  # JSON's true is a number to Python, and none here.
        case {"sequence": int(number), "head": str(head)} if re.fullmatch(r"[A-Z2-7]{4}(-[A-Z2-7]{4}){7}", head):
            yield number, head
        case dict():
            for inner in value.values():
                yield from _quoted(inner)
        case list():
            for inner in value:
                yield from _quoted(inner)
