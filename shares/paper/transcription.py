"""Lines put together again: those that a person types one after another, and those of a text.

Source: FORMAT.md, sec. 11.
May import: shares.errors, shares.paper.linecode, shares.paper.paperform, shares.paper.typedline.
Secret: the characters of the lines. They are Python text, which cannot be wiped.
Public: how many lines there are, which is missing, stands twice, or is at fault and at which character.
Does not: touch a terminal or a file, or know what a share is.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Final

from shares.errors import DocumentError
from shares.paper.linecode import LENGTH
from shares.paper.paperform import from_text
from shares.paper.typedline import MAX_LINES, Reading, compact, read_line, unnumbered

# Longer than any line, shorter than the shortest code.
_LONGEST_LINE: Final = 40
# A row with more characters than this too few or too many is told as no line: in the text of a page most are words.
_FAR: Final = 2
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

    Lines may stand in any order and more than once, as long as none is missing and no two contradict each other, with
    their numbers before them or without.

    Raises:
        DocumentError: what the text was taken for, and which rows cannot be read, which lines are missing or
            contradict each other.
    """
    rows = [(place, row) for place, row in enumerate(text.splitlines(), start=1) if compact(row)]
    if _is_code([compact(row) for _, row in rows]):
        return Gathered(_scanned("".join(compact(row) for _, row in rows), rows[0][0]), ())
    lines: dict[int, Reading] = {}
    order: list[int] = []
    notes, problems, strangers = list[str](), list[str](), list[tuple[int, int]]()
    for place, row in rows:
        try:
            line = read_line(row)
        except DocumentError as error:
            if abs(len(unnumbered(row)) - LENGTH) > _FAR:
                strangers.append((place, len(unnumbered(row))))
            else:
                problems.append(f"row {place} was taken for a line, but {error.what}")
            continue
        notes += [f"line {line.number}: character {change.place} was set right" for change in line.corrections]
        if line.number not in lines:
            order.append(line.number)
        elif lines[line.number].letters == line.letters:
            notes.append(f"line {line.number} stands twice")
        else:
            problems.append(f"line {line.number} stands twice, and not the same")
        lines.setdefault(line.number, line)
    problems += _gaps(lines)
    hint = "compare these lines with the sheet"
    if strangers:
        problems.insert(0, _no_lines(strangers))
        hint = "leave nothing in the text but the lines, one a row, with their numbers before them or without"
    if problems:
        more = len(problems) - _MOST_TOLD
        told = problems[:_MOST_TOLD] + ([f"and {more} more"] if more > 0 else [])
        raise DocumentError("; ".join(told), hint=hint)
    notes += _disorder(order)
    return Gathered(from_text("".join(lines[number].letters for number in sorted(lines))), tuple(notes))


def _is_code(rows: Sequence[str]) -> bool:
    """Tell a scanned code, in one piece or broken into rows of one length, from lines among which one is too long."""
    widths = [len(row) for row in rows]
    return len(set(widths[:-1])) <= 1 and max(widths, default=0) > _LONGEST_LINE and widths[-1] <= widths[0]


def _scanned(text: str, first: int) -> bytes:
    try:
        return from_text(text)
    except DocumentError as error:
        problem = error.what
    raise DocumentError(
        f"it was taken for the text of a scanned code, as row {first} is longer than a line, but {problem}",
        hint="scan it once more; or give the lines, one a row and nothing else in it",
    )


def _disorder(order: Sequence[int]) -> list[str]:
    """Say once that lines stood in another order: which, where it is one that was misplaced."""
    falls = [
        f"line {after} stands after line {before}" for before, after in itertools.pairwise(order) if after < before
    ]
    return falls if len(falls) < 2 else ["the lines stood in another order than on the sheet, and were put in theirs"]


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


def _no_lines(strangers: Sequence[tuple[int, int]]) -> str:
    """Name rows by their places and lengths; places that follow each other are written as one run."""
    places, lengths = zip(*strangers, strict=True)
    if len(places) == 1:
        return (
            f"row {places[0]} is no line: it has {lengths[0]} characters, and a line {LENGTH} and nothing beside them"
        )
    runs: list[list[int]] = []
    for place in places:
        if runs and place == runs[-1][-1] + 1:
            runs[-1].append(place)
        else:
            runs.append([place])
    told = [str(run[0]) if len(run) == 1 else f"{run[0]} to {run[-1]}" for run in runs[:_MOST_TOLD]]
    more = [f"and {sum(map(len, runs[_MOST_TOLD:]))} more"] if len(runs) > _MOST_TOLD else []
    return f"rows {', '.join([*told, *more])} are no lines: a line has {LENGTH} characters and nothing beside them"


def _listed(numbers: Sequence[int]) -> str:
    return f"line{'s' if len(numbers) > 1 else ''} {', '.join(map(str, numbers))}"
