"""``shares transcribe``: by a person at a terminal, by a script, and from a scanned code.

Source: pty(7), termios(3) (the terminal a person types at); ECMA-48 and the control sequences that terminals agree on
(a screen of its own, wiping). The lines are written by tests/vectors/make/make_paper_v1.py, which shares no code with
the package.
"""

from __future__ import annotations

import contextlib
import json
import os
import pty
import select
import signal
import subprocess
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from cli.harness import PROGRAM, Place, Result, assert_refused, run, spawn
from cli.test_show import leaks, rows_of

from shares.documents.share import Share

VECTORS = Path(__file__).parents[1] / "vectors"
PUBLISHED = json.loads((VECTORS / "paper_v1.json").read_text())["testGroups"][0]["tests"]
[BARE] = [test for test in PUBLISHED if test["comment"] == "a bare share of one point"]
[SEALED] = [test for test in PUBLISHED if test["comment"] == "wrapped by passphrase"]
LINES = BARE["lines"]
RECORD = VECTORS / "golden" / "v1" / "flat" / "record.json"
WIPED = "\x1b[2J\x1b[3J\x1b[H\x1b[?1049l"


class Typist:
    """A person at a terminal: reads what is asked, types, and never waits for ever."""

    def __init__(self, *arguments: str | Path) -> None:
        self.terminal, theirs = pty.openpty()
        self.seen, self.read = "", 0
        self.process = subprocess.Popen(
            [PROGRAM, "transcribe", *arguments],
            stdin=theirs,
            stdout=subprocess.PIPE,
            stderr=theirs,
            start_new_session=True,
        )
        os.close(theirs)

    def read_until(self, words: str) -> str:
        """Read what the program shows up to these words; return it."""
        end = time.monotonic() + 30
        while words not in self.seen[self.read :]:
            assert time.monotonic() < end, f"waited in vain for {words!r} after {self.seen[-300:]!r}"
            if select.select([self.terminal], [], [], 0.1)[0]:
                try:
                    self.seen += os.read(self.terminal, 65536).decode(errors="replace")
                except OSError:  # The other end is closed.
                    assert words in self.seen[self.read :], f"it ended without {words!r} after {self.seen[-300:]!r}"
        start, self.read = self.read, self.seen.index(words, self.read) + len(words)
        return self.seen[start : self.read]

    def type(self, text: str) -> None:
        os.write(self.terminal, text.encode() + b"\n")

    def line(self, number: int, text: str) -> None:
        self.read_until("Line ")
        asked = self.read_until(": ")
        assert asked.split()[0].rstrip(":") == str(number)
        self.type(text)

    def done(self) -> Result:
        self.read_until(WIPED)
        out = self.process.communicate(timeout=30)[0]
        with contextlib.suppress(OSError):
            while select.select([self.terminal], [], [], 0.1)[0]:
                self.seen += os.read(self.terminal, 65536).decode(errors="replace")
        return Result(self.process.returncode, out.decode(), self.seen[self.read :])


@pytest.fixture
def typist(tmp_path: Path) -> Iterator[Typist]:
    typing = Typist("--to", tmp_path / "share.json")
    yield typing
    if typing.process.poll() is None:
        typing.process.kill()
    typing.process.communicate()
    os.close(typing.terminal)


def wrong(line: str, *places: int) -> str:
    return "".join(("B" if c != "B" else "C") if i in places else c for i, c in enumerate(line))


def written(folder: Path) -> Share:
    path = folder / "share.json"
    assert path.stat().st_mode & 0o7777 == 0o600
    return Share.parse(path.read_bytes())


def is_the_share(folder: Path) -> bool:
    golden = Share.parse((VECTORS / "golden" / "v1" / "flat" / "north-pier.share.json").read_bytes())
    return written(folder).commitment() == golden.commitment()


def test_a_person_types_all_lines(typist: Typist, tmp_path: Path) -> None:
    typist.read_until("Type the lines of the sheet")
    for number, line in enumerate(LINES, start=1):
        typist.line(number, " ".join(line[i : i + 4] for i in range(0, 31, 4)).lower())
    done = typist.done()
    assert (done.code, "Share of north-pier, epoch 1" in done.out) == (0, True)
    assert "Line 2 of 13" in typist.seen
    assert is_the_share(tmp_path)
    assert run("verify", tmp_path / "share.json", "--record", RECORD).code == 0


def test_the_screen_is_ones_own_and_wiped(typist: Typist) -> None:
    for number, line in enumerate(LINES, start=1):
        typist.line(number, line)
    done = typist.done()
    assert typist.seen.index("\x1b[?1049h\x1b[2J") < typist.seen.index(LINES[0])
    assert all(line in typist.seen for line in LINES)  # A terminal shows what is typed.
    assert not [line for line in LINES if line[:8] in done.err + done.out]
    assert "Caution: this share is bare" in done.err


def test_what_is_set_right_is_shown_and_confirmed(typist: Typist, tmp_path: Path) -> None:
    typist.line(1, LINES[0])
    typist.line(2, wrong(LINES[1], 8, 20))
    shown = typist.read_until("Does the sheet say so? [y/n]")
    assert f"character 9: read {wrong(LINES[1], 8)[8]} as {LINES[1][8]}" in shown
    assert f"character 21: read {wrong(LINES[1], 20)[20]} as {LINES[1][20]}" in shown
    typist.type("n")
    typist.line(2, LINES[1][:5] + LINES[1][6:])
    assert f"character 6, {LINES[1][5]}, was left out" in typist.read_until("[y/n]")
    typist.type("y")
    typist.line(3, LINES[2][:5] + LINES[2][4:])
    assert f", {LINES[2][4]}, is one too many" in typist.read_until("[y/n]")
    typist.type("yes")
    for number, line in enumerate(LINES[3:], start=4):
        typist.line(number, line)
    assert typist.done().code == 0
    assert is_the_share(tmp_path)


def test_what_cannot_be_read_is_said_and_asked_again(typist: Typist, tmp_path: Path) -> None:
    typist.line(1, LINES[1])
    assert "this is line 2, and line 1 comes first" in typist.read_until("Line 1: ")
    typist.type(wrong(LINES[0], 3, 4, 5))
    assert "more than two characters are wrong" in typist.read_until("Line 1: ")
    typist.type(LINES[0][:9])
    assert "a line has 31 characters, and this has 9" in typist.read_until("Line 1: ")
    typist.type("")
    assert "this has 0" in typist.read_until("Line 1: ")
    os.write(typist.terminal, b"\xe4\xff\n")
    assert "character 1 is none of the letters" in typist.read_until("Line 1: ")
    typist.type(LINES[0])
    typist.line(2, LINES[0])
    assert "this is line 1, which was typed before" in typist.read_until("Line 2 of 13: ")
    typist.type(LINES[1])
    typist.line(3, "back")
    typist.line(2, LINES[1])
    for number, line in enumerate(LINES[2:], start=3):
        typist.line(number, line)
    assert typist.done().code == 0
    assert is_the_share(tmp_path)


def test_a_line_of_another_sheet_shows_at_the_end_and_can_be_mended(typist: Typist, tmp_path: Path) -> None:
    for number, line in enumerate(LINES[:11], start=1):
        typist.line(number, line)
    typist.line(12, SEALED["lines"][11])
    typist.line(13, wrong(LINES[12], 4))
    typist.read_until("[y/n]")
    typist.type("y")
    told = typist.read_until("Line 13 of 13: ")
    assert "the check over the whole does not fit" in told
    assert "Look first at what was set right: line 13." in told
    typist.type("back")
    typist.line(12, LINES[11])
    typist.line(13, LINES[12])
    assert typist.done().code == 0
    assert is_the_share(tmp_path)


def test_a_scanner_that_types_the_code(typist: Typist, tmp_path: Path) -> None:
    import base64

    code = base64.b32encode(bytes.fromhex(BARE["form"])).decode()
    typist.line(1, code[:-24])
    assert "it is not whole" in typist.read_until("Line 1: ")
    typist.type(code)
    assert typist.done().code == 0
    assert is_the_share(tmp_path)


@pytest.mark.parametrize("how", ["interrupt", "end of input", "hang up"])
def test_stopping_wipes_the_screen_and_writes_nothing(typist: Typist, tmp_path: Path, how: str) -> None:
    typist.line(1, LINES[0])
    typist.read_until("Line 2")
    if how == "interrupt":
        typist.process.send_signal(signal.SIGINT)
    elif how == "hang up":
        typist.process.send_signal(signal.SIGHUP)
    else:
        os.write(typist.terminal, b"\x04")
    done = typist.done()
    assert (done.code, done.out) == (1, "")
    assert "stopped before it was done" in done.err
    assert list(tmp_path.iterdir()) == []


def test_without_a_terminal_nothing_is_asked(tmp_path: Path) -> None:
    for stdin in (b"", LINES[0].encode()):
        refused = spawn("transcribe", "--to", tmp_path / "share.json", stdin=stdin)
        assert (refused.code, "there is no terminal to type at" in refused.err) == (2, True)
        assert "\x1b" not in refused.err
    assert list(tmp_path.iterdir()) == []


# By script.


def gathered(folder: Path, text: str, *more: str) -> Result:
    (folder / "typed.txt").write_text(text)
    return run("transcribe", "--from", folder / "typed.txt", "--to", folder / "share.json", *more)


def test_lines_from_a_file(tmp_path: Path) -> None:
    done = gathered(tmp_path, "\n".join([LINES[0], wrong(LINES[1], 6), LINES[3], LINES[2], *LINES[4:], LINES[4]]))
    assert done.code == 0
    assert "Noticed: line 2: character 7 was set right." in done.out
    assert "Noticed: line 3 stands after line 4." in done.out
    assert "Noticed: line 5 stands twice." in done.out
    assert "Caution: this share is bare" in done.err
    assert "\x1b" not in done.out + done.err
    assert is_the_share(tmp_path)


def test_lines_with_their_numbers_and_a_sheet_from_its_end(tmp_path: Path) -> None:
    numbered = "\n".join(f"{i}  {line}" for i, line in enumerate(LINES, start=1))
    done = gathered(tmp_path, f"\N{ZERO WIDTH NO-BREAK SPACE}{numbered}\n")
    assert (done.code, "Noticed" in done.out) == (0, False)
    assert is_the_share(tmp_path)
    (tmp_path / "share.json").unlink()
    done = gathered(tmp_path, "\n".join(LINES[::-1]))
    assert (done.code, done.out.count("Noticed: ")) == (0, 1)
    assert "Noticed: the lines stood in another order than on the sheet, and were put in theirs." in done.out
    assert is_the_share(tmp_path)


def test_lines_by_a_pipe_and_told_as_json(tmp_path: Path) -> None:
    text = "\n".join(LINES).encode()
    done = run("transcribe", "--from", "-", "--to", tmp_path / "share.json", "--json", stdin=text)
    told = done.json
    assert (done.code, done.err, told["done"], told["notes"]) == (0, "", True, [])
    assert (told["kind"], told["custodian"], told["record"]) == ("share", "north-pier", BARE["share"]["record"])
    assert is_the_share(tmp_path)


def test_a_wrapped_share_stays_wrapped(tmp_path: Path) -> None:
    done = gathered(tmp_path, "\n".join(SEALED["lines"]))
    assert (done.code, done.err) == (0, "")
    assert "Wrapped share of north-pier" in done.out
    members = json.loads((tmp_path / "share.json").read_text())
    for name in ("wrapping", "sealed", "set", "record"):
        assert members[name] == SEALED["share"][name]


def test_nothing_of_the_share_is_shown(dealt: Place) -> None:
    rows = rows_of(dealt)
    sheet, typed = dealt.folder / "sheet.html", dealt.folder / "typed.txt"
    assert run("sheet", dealt.shares[0], "--to", sheet).code == 0
    import re

    groups = re.findall(r"<td>([A-Z2-7]{3,4})</td>", sheet.read_text())
    lines = ["".join(groups[i : i + 8]) for i in range(0, len(groups), 8)]
    for number, text in enumerate((lines, lines[1:], [*lines[:2], wrong(lines[2], 1, 2, 3), *lines[3:]])):
        typed.write_text("\n".join(text))
        for option in ([], ["--json"]):
            done = run("transcribe", "--from", typed, "--to", dealt.folder / f"{number}{option}.json", *option)
            assert leaks(done.out + done.err, rows) == []
            assert not [group for group in groups if len(group) == 4 and group in done.out + done.err]


def test_refusals(tmp_path: Path) -> None:
    target, typed = tmp_path / "share.json", tmp_path / "typed.txt"
    command = ["transcribe", "--from", typed, "--to", target]
    for text, words in (
        ("\n".join(LINES[1:]), ("line 1 is missing",)),
        ("\n".join([*LINES[:4], *LINES[6:]]), ("lines 5, 6 are missing", "compare")),
        ("\n".join([*LINES[:11], SEALED["lines"][11], *LINES[12:]]), ("check over the whole", "one sheet")),
        ("", ("line 1 is missing",)),
        ("\n".join(["Secret share on paper", *LINES]), ("row 1 is no line", "nothing in the text but the lines")),
        ("\n".join([*LINES[:2], f"{LINES[2]} hardly to be read"]), ("row 3 is no line", "has 45")),
        ("A" * 100, ("taken for the text of a scanned code, as row 1 is longer", "it has 100 characters")),
        ("\x00\xff" * 50, ("not whole",)),
    ):
        typed.write_text(text)
        assert_refused(command, 4, "typed.txt", *words, watched=tmp_path)
    assert_refused([*command[:2], tmp_path / "none", *command[3:]], 5, "does not exist", watched=tmp_path)
    assert_refused(["transcribe", "--from", typed], 2, "--to", watched=tmp_path)
    assert_refused(["transcribe", "--from", "", "--to", target], 2, "--from", watched=tmp_path)
    target.write_text("here before")
    assert_refused(command, 5, "share.json", "exists already", watched=tmp_path)
    assert_refused(["transcribe", "--to", target], 5, "share.json", "exists already", watched=tmp_path)
