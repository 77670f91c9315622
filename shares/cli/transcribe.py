"""``shares transcribe``."""

from __future__ import annotations

import contextlib
import os
from collections.abc import Iterator

import click

from shares.cli.output import filled, json_option, print_result, prose, refuse_taken, warn
from shares.cli.signals import held_signals, unsuspended
from shares.documents.share import Share
from shares.errors import DocumentError, ParameterError
from shares.paper.paperform import PaperShare, from_paper
from shares.paper.transcription import Gathered, Transcription, gather
from shares.paper.typedline import Reading, compact
from shares.storage import read_secret, write_new

BACK = "back"
STDIN, STDERR = 0, 2
LONGEST_INPUT = 4096  # What a terminal hands over at once (termios(3), canonical mode).
# The largest code and the longest sheet are far smaller.
LARGEST_FILE = 65_536
# The longest line; more is a code, typed by a scanner that acts as a keyboard.
LONGEST_LINE = 40
# A screen of its own, and its end: wiped, with what was scrolled off it, and the old screen as it was before.
OWN_SCREEN = "\x1b[?1049h\x1b[2J\x1b[H"
WIPED = "\x1b[2J\x1b[3J\x1b[H\x1b[?1049l"
INTRODUCTION = f"""\
Type the lines of the sheet as they are printed, one at a time. Spaces and small letters do not matter.
Put ? for a character that cannot be read. Type {BACK} to do the line before again; Ctrl-C stops and writes nothing.
"""

PROVES = "This proves that the share was read as it was printed. It does not prove that it is the one that was dealt."
CHECK_NEXT = "Next: shares verify {target} --record R, with the record R whose fingerprint is {fingerprint}"


@click.command()
@click.option(
    "--to",
    "target",
    required=True,
    metavar="FILE",
    callback=filled,
    help="Write the share to this new file, mode 0600.",
)
@click.option(
    "--from",
    "source",
    metavar="FILE|-",
    callback=filled,
    help="Read the lines, or the text of a scanned code, from here instead of the keyboard.",
)
@json_option
def command(target: str, source: str | None, as_json: bool) -> None:
    """Read a sheet back into a share file: typed line by line, or from a file.

    Each line is checked as soon as it is typed. Up to two wrong characters, or one left out or typed twice, are found,
    shown and set right once you agree. The screen is wiped at the end. With --from nothing is asked; what was set right
    is told by line and place, and the check over the whole share decides. The file holds the lines, one a row, with
    their numbers before them or without, and nothing else; or the text of the code. A scanner that types the code into
    the first line is understood as well.

    \b
    Examples:
      shares transcribe --to north-pier.share.json
      shares transcribe --from scanned.txt --to north-pier.share.json
    """
    refuse_taken(target)
    if source is not None:
        gathered = _from_source(source)
        share, notes = from_paper(gathered.data, where=_called(source)), list(gathered.notes)
    else:
        share, notes = _from_person(), []
    with held_signals():
        write_new(target, share.to_file(), secret=True)
        if isinstance(share, Share) and not as_json:
            warn("this share is bare: whoever reads the file has it. Destroy it when it has served.")
        print_result(_members(share, target, notes), _lines(share, target, notes), as_json=as_json)


def _called(source: str) -> str:
    return "standard input" if source == "-" else source


def _from_source(source: str) -> Gathered:
    problem = hint = None
    with read_secret(source, limit=LARGEST_FILE) as read, read.view() as view:
        try:
            # Some programs put a mark of the encoding before the first character.
            return gather(str(view, "utf-8-sig", "replace"))
        except DocumentError as error:
            problem, hint = error.what, error.hint
    raise DocumentError(problem, where=_called(source), hint=hint)


def _from_person() -> PaperShare:
    if not (os.isatty(STDIN) and os.isatty(STDERR)):
        raise ParameterError("there is no terminal to type at", hint="give the lines in a file with --from FILE")
    with unsuspended(), _own_screen():
        click.echo(INTRODUCTION, err=True)
        typed = Transcription()
        while True:
            share = _take_line(typed)
            if share:
                return share
            if not typed.complete:
                continue
            try:
                return from_paper(typed.data())
            except DocumentError as error:
                _tell(f"All lines are there, but {error.what}. {_suspects(typed)}")
                typed.back()


@contextlib.contextmanager
def _own_screen() -> Iterator[None]:
    """Type on a screen that is wiped at the end, whatever the end is."""
    click.echo(OWN_SCREEN, err=True, nl=False)
    try:
        yield
    finally:
        click.echo(WIPED, err=True, nl=False)


def _take_line(typed: Transcription) -> PaperShare | None:
    """Ask for one line, and take it if it is right; return the share where a whole code came instead."""
    of = f" of {typed.total}" if typed.total else ""
    text = _ask(f"Line {typed.wanted}{of}: ")
    if text.strip().lower() == BACK:
        typed.back()
        return None
    try:
        if len(compact(text)) > LONGEST_LINE:
            return from_paper(gather(text).data)
        reading = typed.read(text)
    except DocumentError as error:
        _tell(f"  {error}")
        return None
    if _agreed(reading):
        typed.accept(reading)
    return None


def _agreed(reading: Reading) -> bool:
    """Show what was set right, and have it compared with the sheet."""
    for correction in reading.corrections:
        _tell(f"  {correction.words()}")
    return not reading.corrections or _ask("  Does the sheet say so? [y/n] ").strip().lower() in ("y", "yes")


def _suspects(typed: Transcription) -> str:
    lines = ", ".join(map(str, typed.corrected))
    doubt = f"Look first at what was set right: line {lines}. " if lines else ""
    return f"{doubt}Type {BACK} to go back, and see that all lines are of one sheet."


def _ask(question: str) -> str:
    click.echo(question, err=True, nl=False)
    # Straight from the terminal, a line at a time: no buffer or history of Python's keeps what was typed.
    typed = os.read(STDIN, LONGEST_INPUT)
    if not typed:
        raise KeyboardInterrupt
    return typed.decode("utf-8", "replace")


def _tell(line: str) -> None:
    click.echo(line, err=True)


def _members(share: PaperShare, target: str, notes: list[str]) -> dict[str, object]:
    return {
        "done": True,
        "file": target,
        "kind": share.kind,
        "custodian": share.custodian,
        "set": share.set.hex(),
        "epoch": share.epoch,
        "record": share.record,
        "notes": notes,
    }


def _lines(share: PaperShare, target: str, notes: list[str]) -> list[str]:
    bare = isinstance(share, Share)
    return [
        *(f"Noticed: {note}." for note in notes),
        f"{'Share' if bare else 'Wrapped share'} of {share.custodian}, epoch {share.epoch}, written to {target}",
        *prose(PROVES),
        *prose(CHECK_NEXT.format(target=target, fingerprint=share.record or "you were told")),
    ]
