"""The command line as a whole: what every command has, where its words go, and how it ends when something is missing.

Exit codes: the project's own table (README). Streams that are closed, full or broken: write(2), pipe(7).
"""

from __future__ import annotations

import contextlib
import json
import os
import re
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import click
import pytest
from cli.harness import PROGRAM, SECRET, Place, Result, assert_one_line, assert_refused, run

import shares
from shares.cli import main
from shares.errors import SharesError
from shares.field import kernel

COMMANDS = {name: main.commands.get_command(click.Context(main.commands), name) for name in main.COMMANDS}
GROUP = COMMANDS["polynomial"]
LEAVES = {(name,): command for name, command in COMMANDS.items() if not isinstance(command, click.Group)} | {
    ("polynomial", name): GROUP.get_command(click.Context(GROUP), name)
    for name in GROUP.list_commands(click.Context(GROUP))
}


# What every command has.


@pytest.mark.parametrize("group", ["attest", "ceremony", "journal", "party", "record", "retire"])
def test_no_line_of_a_groups_help_is_cut_off(group: str) -> None:
    told = run(group, "--help").out
    assert "Commands:" in told
    assert "..." not in told.partition("Commands:")[2]


def test_the_version_names_the_kernel() -> None:
    result = run("--version")
    running = kernel()
    assert result == Result(0, f"shares {shares.__version__}, kernel {running.name} ({running.path})\n", "")


@pytest.mark.parametrize("arguments", [(), ("polynomial",)])
def test_no_arguments_show_the_help_as_a_usage_error(arguments: tuple[str, ...]) -> None:
    result = run(*arguments)
    assert (result.code, result.out) == (2, "")
    assert "Usage: shares" in result.err


@pytest.mark.parametrize("option", ["--help", "-h"])
def test_the_help_tells_commands_and_exit_codes(option: str) -> None:
    result = run(option)
    assert (result.code, result.err) == (0, "")
    assert all(f"  {name}" in result.out for name in main.COMMANDS)
    said = dict(re.findall(r"(\d) ([a-z][^,.]*)", result.out[result.out.index("Exit codes:") :].replace("\n", " ")))
    assert sorted(said) == list("01234567")
    for error in all_errors(SharesError):
        assert str(error.exit_code) in said


def test_the_help_says_where_the_format_page_lies() -> None:
    (line,) = (line.strip() for line in run("--help").out.splitlines() if line.endswith("FORMAT.md"))
    assert Path(line).is_absolute()
    assert re.search(r"^## 12\. ", Path(line).read_text("utf-8"), flags=re.MULTILINE)


def all_errors(kind: type[SharesError]) -> list[type[SharesError]]:
    return [kind, *(error for child in kind.__subclasses__() for error in all_errors(child))]


@pytest.mark.parametrize("name", [*LEAVES, ("polynomial",)], ids=" ".join)
def test_every_command_has_help_with_an_example(name: tuple[str, ...]) -> None:
    result = run(*name, "--help")
    assert (result.code, result.err) == (0, "")
    assert re.search(rf"Examples?:\n\s+shares {name[0]} ", result.out + " ") or name == ("selftest",)
    assert f"shares {' '.join(name)}" in result.out


@pytest.mark.parametrize("name", LEAVES, ids=" ".join)
def test_every_command_takes_json(name: tuple[str, ...]) -> None:
    assert "--json" in [option for parameter in LEAVES[name].params for option in parameter.opts]


@pytest.mark.parametrize("name", [*LEAVES, ("polynomial",), ()], ids=lambda name: " ".join(name) or "shares")
def test_an_unknown_option_is_a_usage_error(name: tuple[str, ...]) -> None:
    assert_refused([*name, "--loud"], 2, "--loud", "--help")


@pytest.mark.parametrize(
    "arguments",
    [
        ("combine",),
        ("Split",),
        ("polynomial", "factor"),
        ("completion",),
        ("completion", "tcsh"),
        ("show",),
        ("verify",),
    ],
    ids=" ".join,
)
def test_a_command_that_is_not_there_or_lacks_something(arguments: tuple[str, ...]) -> None:
    assert_refused(arguments, 2, "--help")


def test_no_choice_is_lost_in_a_message_of_several_lines() -> None:
    line = assert_refused(["completion"], 2, "bash", "zsh", "fish")
    assert "\N{REPLACEMENT CHARACTER}" not in line


@pytest.mark.parametrize("arguments", [("show", ""), ("verify", ""), ("verify", "a", "--record", ""), ("recover", "")])
def test_an_empty_path_is_refused_and_stands_for_nothing(arguments: tuple[str, ...]) -> None:
    """An unset variable of a script must not pass for 'without a record' or 'this folder'."""
    assert_refused(arguments, 2, "an empty value is given", "variable")


def test_json_belongs_to_this_program_only_before_a_fed_command(dealt: Place) -> None:
    result = run("recover", *dealt.shares[:2], "--", "printf", "--json")
    assert_one_line(result)
    assert result.code == 3


def test_json_is_plain_ascii_and_tells_strange_names_exactly(dealt: Place) -> None:
    path = os.fsencode(dealt.folder) + b"/\xff\xe9\n.share.json"
    os.link(dealt.shares[0], path)
    result = run("verify", os.fsdecode(path), "--json")
    assert result.out.isascii()
    assert result.json["shares"][0]["file"] == os.fsdecode(path)
    by_hand = run("verify", os.fsdecode(path))
    assert by_hand.code == 0
    assert by_hand.out.splitlines()[0].isprintable()


def test_python_m_is_the_same_program() -> None:
    done = subprocess.run([sys.executable, "-m", "shares", "--version"], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout) == (0, run("--version").out)
    refused = subprocess.run([sys.executable, "-m", "shares", "show", "x"], capture_output=True, text=True, check=False)
    assert (refused.returncode, refused.stderr) == (5, "shares: x: does not exist (check the path)\n")


def test_asking_for_little_loads_little() -> None:
    code = "import sys; from shares.cli.main import run\ntry: run()\nfinally: print(*sys.modules, file=sys.stderr)"
    done = subprocess.run([sys.executable, "-c", code, "--version"], capture_output=True, text=True, check=True)
    assert "click" in done.stderr.split()
    assert not {"pydantic", "cryptography", "rfc8785"} & set(done.stderr.split())


def test_a_fault_in_the_program_is_one_line_without_its_text(dealt: Place, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(*_: object, **__: object) -> None:
        raise KeyError("hidden text")

    monkeypatch.setattr("shares.cli.show.regular_file", broken)
    result = run("show", "x")
    assert (result.code, result.out, result.err.count("\n")) == (1, "", 1)
    assert "a fault in this program: KeyError at cli" in result.err.replace("tests.", "")
    assert "hidden text" not in result.err
    assert run("show", "x", "--json").json["error"]["code"] == "failed"


# The streams.


def shell(script: str, place: Place, *arguments: str | Path) -> Result:
    """Run a line of bash in which "$@" is the program and its arguments."""
    done = subprocess.run(
        ["bash", "-c", script, "bash", PROGRAM, *arguments],
        cwd=place.folder,
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )
    return Result(done.returncode, done.stdout, done.stderr)


SHOWN: dict[str, Callable[[Place], list[str | Path]]] = {
    "result": lambda place: ["show", place.shares[0]],
    "result as JSON": lambda place: ["show", place.shares[0], "--json"],
    "refusal as JSON": lambda place: ["show", "nothing", "--json"],
    "help": lambda place: ["--help"],
    "version": lambda place: ["--version"],
}


@pytest.mark.parametrize("shown", SHOWN)
def test_a_reader_that_has_gone_gets_no_traceback(shown: str, dealt: Place) -> None:
    # The left side waits until the pipe has no reader; then it prints.
    script = '{ until ! { : ; printf x 2>/dev/null; }; do sleep 0.01; done; "$@"; echo "code $?" >&2; } | true'
    result = shell(f"trap '' PIPE; {script}", dealt, *SHOWN[shown](dealt))
    expected = 5 if shown == "refusal as JSON" else 1
    assert result.err.splitlines()[-1:] == [f"code {expected}"]
    assert len(result.err.splitlines()) == 1


@pytest.mark.parametrize("shown", SHOWN)
def test_a_full_medium_behind_standard_output(shown: str, dealt: Place) -> None:
    result = shell('"$@" >/dev/full', dealt, *SHOWN[shown](dealt))
    assert result.code == 5
    assert "Traceback" not in result.err
    assert result.err.count("\n") <= 1
    if shown == "result":
        assert "standard output: the result could not be printed: no space left on device" in result.err


def test_a_split_that_cannot_tell_says_that_it_is_done(place: Place) -> None:
    result = shell('"$@" >/dev/full', place, *place.split_arguments())
    assert result.code == 5
    assert "what was asked for is done all the same" in result.err.splitlines()[-1]
    assert run("verify", *place.shares, "--record", place.record).code == 0


@pytest.mark.parametrize("closed", ["<&-", ">&-", "2>&-", "<&- >&-", "<&- >&- 2>&-"])
def test_closed_streams_do_not_matter(closed: str, place: Place) -> None:
    result = shell(f'"$@" {closed}', place, *place.split_arguments())
    assert result.code == 0
    assert "Traceback" not in result.err
    assert run("verify", *place.shares, "--record", place.record).code == 0
    # Whatever else was printed, nothing of it went into a file that took a closed descriptor's number.
    assert {path.read_bytes()[:1] + path.read_bytes()[-2:] for path in (*place.shares, place.record)} == {b"{}\n"}


@pytest.mark.parametrize("closed", [">&-", "2>&-"])
def test_a_fed_command_gets_the_secret_whatever_is_closed(closed: str, dealt: Place) -> None:
    result = shell(f'"$@" {closed}', dealt, "recover", *dealt.shares[:3], "--json", "--", "tee", "fed")
    assert result.code == 0
    assert (dealt.folder / "fed").read_bytes() == SECRET


@pytest.mark.parametrize("encoding", ["ascii", "latin-1", "utf-8", "koi8-r"])
@pytest.mark.parametrize("json_option", [[], ["--json"]])
def test_no_encoding_of_the_terminal_stops_the_report(place: Place, encoding: str, json_option: list[str]) -> None:
    names = ["Łódź quay", "埠頭"]
    arguments = place.split_arguments(names=names, label="Süd \U0001f512", more=["--plain", *json_option])
    done = subprocess.run(
        [PROGRAM, *arguments],
        env={**os.environ, "PYTHONIOENCODING": encoding},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        timeout=60,
        check=False,
    )
    assert done.returncode == 0
    assert b"fault" not in done.stderr
    if json_option:
        assert list(json.loads(done.stdout.decode("ascii"))["shares"]) == names


# Signals.


@contextlib.contextmanager
def waiting_split(place: Place) -> Iterator[subprocess.Popen[bytes]]:
    """The program, started and waiting for a secret that nobody writes."""
    pipe = place.folder / "pipe"
    os.mkfifo(pipe)
    arguments = [PROGRAM, *place.split_arguments(source=pipe)]
    process = subprocess.Popen(
        arguments, stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=subprocess.PIPE, start_new_session=True
    )
    deadline, writer = time.monotonic() + 30, None
    try:
        while writer is None:
            assert time.monotonic() < deadline
            # A pipe without a reader refuses to be opened without waiting.
            with contextlib.suppress(OSError):
                writer = os.open(pipe, os.O_WRONLY | os.O_NONBLOCK)
            time.sleep(0.02)
        yield process
    finally:
        process.kill()
        process.communicate()
        if writer is not None:
            os.close(writer)


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM, signal.SIGHUP])
def test_a_signal_before_anything_is_written(place: Place, number: signal.Signals) -> None:
    with waiting_split(place) as process:
        process.send_signal(number)
        out, err = process.communicate(timeout=30)
    assert (process.returncode, out) == (1, b"")
    # click itself ends the line on which a terminal has shown ^C.
    assert err.decode().lstrip("\n") == "shares: stopped before it was done (nothing was left half written)\n"
    assert not place.set.exists()
    assert not place.shares


def test_a_signal_that_was_switched_off_stays_so(place: Place) -> None:
    """nohup(1) starts a program with SIGHUP ignored; it must not be switched on again."""
    code = (
        "import signal, sys; signal.signal(signal.SIGHUP, signal.SIG_IGN); from shares.cli.signals import *\n"
        "heed_signals()\nwith held_signals(): pass\n"
        "sys.exit(signal.getsignal(signal.SIGHUP) is not signal.SIG_IGN or signal.getsignal(signal.SIGTERM) in (0, 1))"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


def test_held_signals_wait_and_are_told_where_stopping_is_safe() -> None:
    code = (
        "import os, signal\nfrom shares.cli.signals import *\nheed_signals()\n"
        "with held_signals() as stop_here:\n"
        "    stop_here()\n"
        "    for number in STOP: os.kill(os.getpid(), number)\n"
        "    print('still here')\n"
        "    try: stop_here()\n"
        "    except KeyboardInterrupt as stop: print('stopped by', stop.args[0])\n"
        "try: os.kill(os.getpid(), signal.SIGTERM)\n"
        "except KeyboardInterrupt as stop: print('then by', stop.args[0])\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines() == ["still here", "stopped by 2", "then by 15"]


# What is said of this machine.


def test_a_refused_memory_lock_is_told_once_and_stops_nothing(place: Place) -> None:
    code = (
        "import os, resource, sys\nresource.setrlimit(resource.RLIMIT_MEMLOCK, (0, 0))\n"
        "import shares.cli.split, shares.field\n"
        "if os.geteuid() == 0: drop()\n"
        "from shares.cli.main import run\nrun()"
    )
    # Root may lock without limit: that ability alone is given up, and the files stay within reach.
    drop = (
        "def drop():\n"
        "    import ctypes\n"
        "    PR_CAPBSET_DROP, CAP_IPC_LOCK = 24, 14\n"
        "    header = (ctypes.c_uint32 * 2)(0x20080522, 0); data = (ctypes.c_uint32 * 6)()\n"
        "    libc = ctypes.CDLL(None)\n"
        "    assert libc.capget(header, data) == 0\n"
        "    data[0] &= ~(1 << CAP_IPC_LOCK)\n"
        "    assert libc.capset(header, data) == 0\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", drop + code, *place.split_arguments()],
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )
    assert done.returncode == 0
    assert done.stderr.count("memory could not be locked") == 1
    assert "ulimit -l" in done.stderr


def test_core_dumps_are_off(place: Place) -> None:
    with waiting_split(place) as process:
        limits = Path(f"/proc/{process.pid}/limits").read_text()
    assert re.search(r"Max core file size\s+0\s+0\s", limits)
