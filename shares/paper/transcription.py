"""Lines put together again: those that a person types one after another, and those of a text.

Source: FORMAT.md, sec. 11.
May import: shares.errors, shares.paper.paperform, shares.paper.typedline.
Secret: the characters of the lines. They are Python text, which cannot be wiped.
Public: how many lines there are, which is missing, stands twice, or is at fault and at which character.
Does not: touch a terminal or a file, or know what a share is.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Final

from shares.errors import DocumentError
from shares.paper.paperform import from_text
from shares.paper.typedline import MAX_LINES, Reading, compact, read_line

# Longer than any line, shorter than the shortest code.
_LONGEST_LINE: Final = 40
_MOST_TOLD: Final = 5


class Transcription:
    """The lines of one sheet as a person types them, in order."""

    def __init__(self) -> None:
        self._lines: list[Reading] = []

    @property
    def wanted(self) -> int:
        """The number of the line to be typed next, from 1."""
        return len(self._lines) + 1

    @property
    def total(self) -> int | None:
        """How many lines there are: the first line says so."""
        return _total(self._lines[0]) if self._lines else None

    @property
    def complete(self) -> bool:
        """Whether all lines are there."""
        return len(self._lines) == self.total

    @property
    def corrected(self) -> list[int]:
        """The numbers of the lines in which something was set right."""
        return [line.number for line in self._lines if line.corrections]

    def read(self, text: str) -> Reading:
        """Understand a line, and see that it is the one wanted next. It counts once it is accepted.

        Raises:
            DocumentError: it is not understood, or is another line of the sheet.
        """
        reading = read_line(text)
        if reading.number < self.wanted:
            raise DocumentError(
                f"this is line {reading.number}, which was typed before", hint=f"type line {self.wanted} now"
            )
        if reading.number > self.wanted:
            raise DocumentError(
                f"this is line {reading.number}, and line {self.wanted} comes first", hint="type them in order"
            )
        if not self._lines:
            _total(reading)
        return reading

    def accept(self, reading: Reading) -> None:
        """Take a line that was read."""
        self._lines.append(reading)

    def back(self) -> None:
        """Give up the last line that was accepted, if there is one, to type it again."""
        del self._lines[-1:]

    def data(self) -> bytes:
        """Return the paper form of all lines. Secret; only its reader can tell whether it is one."""
        return from_text("".join(line.letters for line in self._lines))


def _total(first: Reading) -> int:
    total = from_text(first.letters)[0]
    if not 1 <= total <= MAX_LINES:
        raise DocumentError("this is the first line of no sheet", hint="begin with line 1 of the sheet")
    return total


@dataclass(frozen=True, slots=True, repr=False)
class Gathered:
    """A paper form read from text, with what was noticed: public words."""

    data: bytes
    notes: tuple[str, ...]


def gather(text: str) -> Gathered:
    """Read a whole text: the typed lines of one sheet, or what its code holds when scanned.

    Lines may stand in any order and more than once, as long as none is missing and no two contradict each other.

    Raises:
        DocumentError: which lines cannot be read, are missing, or contradict each other.
    """
    rows = [(place, row) for place, row in enumerate(text.splitlines(), start=1) if compact(row)]
    if any(len(compact(row)) > _LONGEST_LINE for _, row in rows):
        return Gathered(from_text("".join(compact(row) for _, row in rows)), ())
    lines: dict[int, Reading] = {}
    notes, problems, before = [], [], 0
    for place, row in rows:
        try:
            line = read_line(row)
        except DocumentError as error:
            problems.append(f"in row {place}, {error.what}")
            continue
        notes += [f"line {line.number}: character {change.place} was set right" for change in line.corrections]
        if line.number in lines:
            if lines[line.number].letters == line.letters:
                notes.append(f"line {line.number} stands twice")
            else:
                problems.append(f"line {line.number} stands twice, and not the same")
        elif line.number < before:
            notes.append(f"line {line.number} stands after line {before}")
        lines.setdefault(line.number, line)
        before = line.number
    problems += _gaps(lines)
    if problems:
        more = len(problems) - _MOST_TOLD
        told = problems[:_MOST_TOLD] + ([f"and {more} more"] if more > 0 else [])
        raise DocumentError("; ".join(told), hint="compare these lines with the sheet")
    return Gathered(from_text("".join(lines[number].letters for number in sorted(lines))), tuple(notes))


def _gaps(lines: dict[int, Reading]) -> Iterator[str]:
    """Say which lines are missing, and which do not belong to the sheet that the first line is of."""
    total = max(lines, default=1)
    if 1 in lines:
        try:
            total = _total(lines[1])
        except DocumentError as error:
            yield error.what
            return
    missing = [number for number in range(1, total + 1) if number not in lines]
    if missing:
        yield f"{_listed(missing)} {'is' if len(missing) == 1 else 'are'} missing"
    beyond = [number for number in sorted(lines) if number > total]
    if beyond:
        yield f"the sheet has {total} lines, and {_listed(beyond)} cannot be of it"


def _listed(numbers: Sequence[int]) -> str:
    return f"line{'s' if len(numbers) > 1 else ''} {', '.join(map(str, numbers))}"
