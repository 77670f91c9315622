"""Where passphrases come from: files, descriptors, and a terminal that does not show them.

Checked against: termios(3) (the state of echo before, during and after), and what opens by what was typed.
"""

from __future__ import annotations

import os
import signal
import subprocess
import termios
from pathlib import Path
from typing import Any

import pytest
from cli.harness import PROGRAM, assert_refused, files_in
from cli.terminal import Terminal, on_terminal
from parties import QUICK, passphrase
from strategies import crooked_split, flat, revealed

from shares import memory
from shares.cli import passphrases
from shares.cli.passphrases import GivenPassphrases
from shares.cli.signals import STOP
from shares.custody.parties import load_key, write_party
from shares.documents.party import new_party
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import passphrase_sealer
from shares.errors import ParameterError, StorageError, WrongKeyError
from shares.memory import Secret

TYPED = "made up: gulls over the slipway"
OTHER = "made up: ropes along the north wall"


@pytest.fixture
def files(tmp_path: Path) -> dict[str, str]:
    """Files that hold a passphrase of a name each."""
    made = {name: tmp_path / f"{name}.passphrase" for name in ("north", "south", "light")}
    for name, path in made.items():
        path.write_text(f"the passphrase of {name}\n")
    return {name: os.fspath(path) for name, path in made.items()}


def tried(given: GivenPassphrases, name: str, right: str) -> list[str]:
    """The passphrases tried for a name, in order, until the right one comes."""
    seen: list[str] = []

    def attempt(secret: Secret) -> str:
        seen.append(revealed(secret).decode())
        if seen[-1] != right:
            raise WrongKeyError("the passphrase does not open it")
        return right

    try:
        assert given.opening(name, attempt) == right
    except WrongKeyError:
        seen.append("none")
    return seen


@pytest.fixture(autouse=True)
def no_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    """Whoever runs these tests may sit at a terminal."""
    monkeypatch.setattr(passphrases.os, "isatty", lambda _: False)


# Files and descriptors.


def test_the_passphrases_of_a_name_come_first_and_then_those_of_anyone(files: dict[str, str]) -> None:
    with GivenPassphrases((files["light"], f"south={files['south']}", f"north={files['north']}"), ()) as given:
        assert tried(given, "north", "the passphrase of north") == ["the passphrase of north"]
        assert tried(given, "south", "the passphrase of light") == [
            "the passphrase of south",
            "the passphrase of light",
        ]
        assert tried(given, "dry-dock", "the passphrase of light") == ["the passphrase of light"]
        # What is of another name is never tried.
        assert tried(given, "dry-dock", "the passphrase of north") == ["the passphrase of light", "none"]


def test_a_new_one_is_the_names_own_or_else_anyones(files: dict[str, str]) -> None:
    with GivenPassphrases((files["light"], f"north={files['north']}"), ()) as given:
        assert revealed(given.new("north")) == b"the passphrase of north"
        assert revealed(given.new("south")) == b"the passphrase of light"


def test_each_source_is_read_once_and_wiped_at_the_end(files: dict[str, str]) -> None:
    before = set(memory._open)
    with GivenPassphrases((files["north"],), ()) as given:
        first = given.new("a")
        Path(files["north"]).unlink()
        assert given.new("b") is first
        assert len(set(memory._open) - before) == 1
    assert set(memory._open) <= before


def test_a_shared_one_is_noticed(files: dict[str, str], tmp_path: Path) -> None:
    copy = tmp_path / "copy"
    copy.write_bytes(Path(files["north"]).read_bytes())
    for sources, names, shared in (
        ((files["light"], f"north={files['north']}"), ("south", "dry-dock"), True),
        ((files["light"], f"north={files['north']}"), ("north", "south"), False),
        ((f"south={copy}", f"north={files['north']}"), ("north", "south"), True),
        ((files["light"],), ("south",), False),
    ):
        with GivenPassphrases(sources, ()) as given:
            for name in names:
                given.new(name)
            assert given.is_shared() is shared


def test_one_for_nobody_is_refused(files: dict[str, str]) -> None:
    with GivenPassphrases((f"nort={files['north']}", files["light"]), ()) as given:
        with pytest.raises(ParameterError, match="nobody of that name"):
            given.only_for(["north", "south"])
        given.only_for(["nort"])


@pytest.mark.parametrize(
    ("content", "expected"),
    [
        (b"one line\n", b"one line"),
        (b"one line", b"one line"),
        (b"one line\r\n", b"one line"),
        (b" with spaces \n", b" with spaces "),
        (b"a\rb\n", b"a\rb"),
        ("die Brücke\n".encode(), "die Brücke".encode()),
        (b"\xff\x00\xfe\n", b"\xff\x00\xfe"),
        (b"x" * 1024, b"x" * 1024),
        (b"x" * 1024 + b"\r\n", b"x" * 1024),
    ],
    ids=lambda value: repr(value)[:20],
)
def test_a_file_holds_one_line_and_its_end_does_not_count(tmp_path: Path, content: bytes, expected: bytes) -> None:
    path = tmp_path / "a = b"
    path.write_bytes(content)
    # A path with a sign of equality is written after one.
    with GivenPassphrases((f"={path}",), ()) as given:
        assert revealed(given.new("north")) == expected


@pytest.mark.parametrize(
    ("content", "error", "reason"),
    [
        (b"", ParameterError, "is empty"),
        (b"\n", ParameterError, "is empty"),
        (b"\r\n", ParameterError, "is empty"),
        (b"\n\n", ParameterError, "more than one line"),
        (b"one\ntwo\n", ParameterError, "more than one line"),
        (b"one\n\n", ParameterError, "more than one line"),
        (b"\none", ParameterError, "more than one line"),
        (b"x" * 1025, ParameterError, "longer than 1,024 bytes"),
        (b"x" * 1025 + b"\n", ParameterError, "longer than 1,024 bytes"),
        (b"x" * 1027, StorageError, "larger than"),
    ],
    ids=lambda value: repr(value)[:20],
)
def test_a_file_that_is_not_one_line_is_refused(
    tmp_path: Path, content: bytes, error: type[Exception], reason: str
) -> None:
    path = tmp_path / "p"
    path.write_bytes(content)
    before = set(memory._open)
    with GivenPassphrases((os.fspath(path),), ()) as given, pytest.raises(error, match=f"{path}.*{reason}"):
        given.new("north")
    assert set(memory._open) <= before


@pytest.mark.parametrize("number", ["0", "1", "2", "-1", "x", "", "3.0", "٣", "1234567", "/dev/fd/3"])
def test_a_descriptor_is_a_number_of_three_or_more(number: str) -> None:
    with pytest.raises(ParameterError, match=r"not the number of an inherited descriptor|nothing follows"):
        GivenPassphrases((), (f"north={number}",))


def test_nothing_after_the_sign_of_equality_is_refused() -> None:
    with pytest.raises(ParameterError, match="nothing follows the sign of equality"):
        GivenPassphrases(("north=",), ())


@pytest.mark.parametrize("owner", ["", "north="])
def test_a_descriptor_is_read(owner: str) -> None:
    reading, writing = os.pipe()
    os.write(writing, b"out of a pipe\n")
    os.close(writing)
    with GivenPassphrases((), (f"{owner}{reading}",)) as given:
        assert revealed(given.new("north")) == b"out of a pipe"
        assert revealed(given.new("north")) == b"out of a pipe"
    os.close(reading)


def test_a_descriptor_that_is_not_open_is_refused() -> None:
    with GivenPassphrases((), ("987",)) as given, pytest.raises(StorageError, match="/dev/fd/987"):
        given.new("north")


def test_without_a_terminal_nothing_is_asked() -> None:
    with GivenPassphrases((), ()) as given:
        with pytest.raises(ParameterError, match="no passphrase is given for north, and there is no terminal"):
            given.new("north")
        with pytest.raises(WrongKeyError, match="the passphrase of north is needed, and there is no terminal"):
            given.opening("north", lambda _: None)


def test_a_weak_one_is_told_and_taken(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "p").write_bytes(b"short\n")
    with GivenPassphrases((os.fspath(tmp_path / "p"),), ()) as given:
        assert len(given.new("north")) == 5
        out, err = capsys.readouterr()
        assert (out, err.startswith("Caution: the passphrase for north: it is shorter than 16 characters;")) == (
            "",
            True,
        )
        given.opening("north", lambda _: None)
        assert capsys.readouterr().err == ""


def test_the_program_takes_descriptors_of_its_caller(tmp_path: Path) -> None:
    """As a shell hands them over: 3<file, and <(command)."""
    (tmp_path / "p").write_bytes(TYPED.encode() + b"\n")
    line = '"$0" party new north-pier --in "$1" --passphrase-fd 3 3<"$1/p"'
    done = subprocess.run(["bash", "-c", line, PROGRAM, tmp_path], capture_output=True, timeout=60, check=False)
    assert (done.returncode, done.stderr) == (0, b"")
    line = '"$0" party passphrase "$1/north-pier.key.json" --to "$1/new" --new-passphrase-file <(echo "$2") \\\n'
    line += '--passphrase-fd north-pier=9 9< <(cat "$1/p")'
    done = subprocess.run(["bash", "-c", line, PROGRAM, tmp_path, OTHER], capture_output=True, timeout=60, check=False)
    assert (done.returncode, done.stderr) == (0, b"")
    load_key(tmp_path / "new").open(Secret.of(OTHER.encode())).close()


# At a terminal.


def new_party_at(folder: Path, *more: str) -> Any:
    return on_terminal("party", "new", "north-pier", "--in", folder, *more)


def opens(folder: Path, text: str) -> None:
    load_key(folder / "north-pier.key.json").open(Secret.of(text.encode())).close()


def test_a_new_one_is_typed_twice_and_never_shown(tmp_path: Path) -> None:
    with new_party_at(tmp_path) as terminal:
        assert terminal.echoes
        for prompt in ("New passphrase for north-pier: ", "The same again: "):
            terminal.wait_for(prompt)
            assert not terminal.echoes
            terminal.type(TYPED + "\n")
        code, out = terminal.finish()
        assert (code, terminal.echoes) == (0, True)
    assert TYPED not in terminal.shown.decode() + out
    # The line ends that were typed are shown, so that what follows begins on a line of its own.
    assert terminal.shown.decode() == "New passphrase for north-pier: \r\nThe same again: \r\n"
    assert "Made: the party north-pier." in out
    opens(tmp_path, TYPED)


def test_json_asks_as_well_where_there_is_a_terminal(tmp_path: Path) -> None:
    with new_party_at(tmp_path, "--json") as terminal:
        for _ in range(2):
            terminal.answer(": ", TYPED)
        code, out = terminal.finish()
    assert (code, out.startswith("{")) == (0, True)


def test_two_that_differ_make_nothing(tmp_path: Path) -> None:
    with new_party_at(tmp_path) as terminal:
        terminal.answer("New passphrase", TYPED)
        terminal.answer("again: ", TYPED + " ")
        assert terminal.finish() == (2, "")
        assert terminal.echoes
    assert "the two passphrases typed for north-pier differ" in terminal.shown.decode()
    assert os.listdir(tmp_path) == []


def test_a_weak_one_that_is_typed_is_told(tmp_path: Path) -> None:
    with new_party_at(tmp_path) as terminal:
        for _ in range(2):
            terminal.answer(": ", "short")
        assert terminal.finish()[0] == 0
    assert "shorter than 16 characters" in terminal.shown.decode()
    opens(tmp_path, "short")


@pytest.mark.parametrize("keys", ["\n", "\x04", "half\x04\x04"], ids=["empty", "end", "end in the middle"])
def test_nothing_typed_is_no_passphrase(tmp_path: Path, keys: str) -> None:
    with new_party_at(tmp_path) as terminal:
        terminal.wait_for("New passphrase")
        terminal.type(keys)
        assert terminal.finish() == (2, "")
        assert terminal.echoes
    assert "no passphrase was typed" in terminal.shown.decode()
    assert os.listdir(tmp_path) == []


def test_the_longest_is_taken_and_a_longer_one_is_told(tmp_path: Path) -> None:
    with new_party_at(tmp_path) as terminal:
        for _ in range(2):
            terminal.answer(": ", "x" * 1023 + "y")
        assert terminal.finish()[0] == 0
    opens(tmp_path, "x" * 1023 + "y")
    (tmp_path / "more").mkdir()
    with new_party_at(tmp_path / "more") as terminal:
        terminal.answer(": ", "x" * 1025)
        assert terminal.finish() == (2, "")
    assert "longer than 1,024 bytes" in terminal.shown.decode()
    assert "x" * 10 not in terminal.shown.decode()
    assert os.listdir(tmp_path / "more") == []


def test_what_was_typed_before_the_prompt_is_thrown_away(tmp_path: Path) -> None:
    """It was shown on the terminal."""
    with new_party_at(tmp_path) as terminal:
        terminal.type("typed ahead, for all to see\n")
        for _ in range(2):
            terminal.answer(": ", TYPED)
        assert terminal.finish()[0] == 0
    opens(tmp_path, TYPED)


@pytest.fixture
def wrapped(tmp_path: Path) -> Path:
    share = crooked_split(b"made up", flat(1, 1)).shares[0]
    path = tmp_path / "north-pier.wrapped.json"
    path.write_bytes(WrappedShare.wrap(share, passphrase_sealer(Secret.of(TYPED.encode()), QUICK)).to_file())
    return path


def test_one_to_open_has_three_tries(wrapped: Path, tmp_path: Path) -> None:
    with on_terminal("verify", wrapped) as terminal:
        for text in (OTHER, TYPED.upper(), TYPED):
            terminal.wait_for("Passphrase of north-pier: ")
            assert not terminal.echoes
            terminal.type(text + "\n")
        code, out = terminal.finish()
        assert (code, terminal.echoes) == (0, True)
    shown = terminal.shown.decode()
    assert shown.count("Passphrase of north-pier: ") == 3
    assert "Caution: the passphrase does not open it. 2 more tries." in shown
    assert "Caution: the passphrase does not open it. 1 more try." in shown
    assert "intact" in out
    assert not [text for text in (OTHER, TYPED, TYPED.upper()) if text in shown + out]


def test_after_three_in_vain_it_stays_closed(wrapped: Path, tmp_path: Path) -> None:
    with on_terminal("unwrap", wrapped, "--to", tmp_path / "bare") as terminal:
        for _ in range(3):
            terminal.answer("Passphrase of north-pier: ", OTHER)
        assert terminal.finish() == (4, "")
        assert terminal.echoes
    assert terminal.shown.decode().rstrip().endswith("upper and lower case, spaces and hyphens count)")
    assert "0 more" not in terminal.shown.decode()
    assert os.listdir(tmp_path) == [wrapped.name]


def test_files_are_tried_before_anything_is_asked(wrapped: Path, tmp_path: Path) -> None:
    (tmp_path / "p").write_text(TYPED)
    with on_terminal("verify", wrapped, "--passphrase-file", tmp_path / "p") as terminal:
        assert terminal.finish()[0] == 0
    assert terminal.shown == b""
    (tmp_path / "p").write_text(OTHER)
    with on_terminal("verify", wrapped, "--passphrase-file", tmp_path / "p") as terminal:
        terminal.answer("Passphrase of north-pier: ", TYPED)
        assert terminal.finish()[0] == 0


def interrupted_by_key(terminal: Terminal) -> None:
    terminal.type("half of it\x03")


def interrupted_by(number: signal.Signals) -> Any:
    return lambda terminal: terminal.process.send_signal(number)


STOPS = {
    "Ctrl-C": interrupted_by_key,
    **{number.name: interrupted_by(number) for number in STOP},
}


@pytest.mark.parametrize("stop", STOPS)
@pytest.mark.parametrize("prompt", ["New passphrase", "The same again"])
def test_a_stop_at_a_new_one_restores_echo_and_leaves_nothing(tmp_path: Path, stop: str, prompt: str) -> None:
    with new_party_at(tmp_path) as terminal:
        if prompt == "The same again":
            terminal.answer("New passphrase", TYPED)
        terminal.wait_for(prompt)
        assert not terminal.echoes
        STOPS[stop](terminal)
        assert terminal.finish() == (1, "")
        assert terminal.echoes
    assert "stopped before it was done" in terminal.shown.decode()
    assert not [text for text in (TYPED, "half of it") if text in terminal.shown.decode()]
    assert os.listdir(tmp_path) == []


@pytest.mark.parametrize("stop", STOPS)
def test_a_stop_at_one_to_open_restores_echo_and_leaves_nothing(wrapped: Path, tmp_path: Path, stop: str) -> None:
    with on_terminal("unwrap", wrapped, "--to", tmp_path / "bare") as terminal:
        terminal.answer("Passphrase", OTHER)
        terminal.wait_for("Passphrase")
        STOPS[stop](terminal)
        assert terminal.finish() == (1, "")
        assert terminal.echoes
    assert "stopped before it was done" in terminal.shown.decode()
    assert os.listdir(tmp_path) == [wrapped.name]


def test_echo_is_restored_though_nothing_can_be_shown(tmp_path: Path) -> None:
    """Standard error is a full medium: the prompt cannot be written, and the terminal is not left silent."""
    with (
        open("/dev/full", "wb") as full,
        on_terminal("party", "new", "north-pier", "--in", tmp_path, stderr=full) as terminal,
    ):
        code, _ = terminal.finish()
        assert code != 0
        assert terminal.echoes
    assert os.listdir(tmp_path) == []


def test_the_key_that_suspends_is_off_meanwhile(wrapped: Path) -> None:
    """Suspended at the prompt, the terminal would stay without echo."""
    with on_terminal("verify", wrapped) as terminal:
        assert terminal.suspends
        terminal.wait_for("Passphrase")
        assert not terminal.suspends
        terminal.type(TYPED + "\n")
        assert terminal.finish()[0] == 0
        assert terminal.suspends


def test_the_terminal_is_left_as_it_was_found(tmp_path: Path) -> None:
    with new_party_at(tmp_path) as terminal:
        before = termios.tcgetattr(terminal._follower)
        terminal.answer("New passphrase", TYPED)
        terminal.answer("again: ", TYPED)
        assert terminal.finish()[0] == 0
        assert termios.tcgetattr(terminal._follower) == before


def test_the_new_passphrase_of_a_key_is_typed_twice(tmp_path: Path) -> None:
    write_party(new_party("north-pier", passphrase("north-pier"), cost=QUICK), tmp_path)
    (tmp_path / "old").write_text("the passphrase of north-pier\n")
    arguments = ["party", "passphrase", tmp_path / "north-pier.key.json", "--to", tmp_path / "new.key.json"]
    with on_terminal(*arguments) as terminal:
        terminal.answer("Passphrase of north-pier: ", "the passphrase of north-pier")
        terminal.answer("New passphrase for north-pier: ", TYPED)
        terminal.answer("The same again: ", TYPED)
        assert terminal.finish()[0] == 0
    load_key(tmp_path / "new.key.json").open(Secret.of(TYPED.encode())).close()
    # Before anything is asked it is seen whether there is a place for the answer.
    with on_terminal(*arguments) as terminal:
        assert terminal.finish() == (5, "")
    assert "Passphrase" not in terminal.shown.decode()
    before = files_in(tmp_path)
    assert_refused(
        [*arguments[:-1], tmp_path / "other", "--passphrase-file", tmp_path / "old"],
        2,
        "no passphrase is given for north-pier",
        "--new-passphrase-file",
    )
    assert files_in(tmp_path) == before
