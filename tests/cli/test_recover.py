"""``shares recover``: where the secret goes, byte for byte, and that it goes nowhere else; who is named as bad.

Sources: execve(2) and pipe(7) for what a fed command sees; the exit codes are this project's own (README).
"""

from __future__ import annotations

import hashlib
import itertools
import json
import os
import stat
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest
from cli.harness import (
    LABEL,
    NAMES,
    PROGRAM,
    PURPOSE,
    SECRET,
    Place,
    assert_one_line,
    assert_refused,
    run,
    spawn,
    with_json,
)

from shares.documents.share import Share

# A command that tells of what it was given without giving it away: its length, its digest, what came after the end.
WITNESS = (
    "import hashlib, os, sys; data = sys.stdin.buffer.read(); "
    "print(len(data), hashlib.sha256(data).hexdigest(), os.read(0, 1), sys.argv[1:])"
)


def witnessed(secret: bytes, *arguments: str) -> str:
    return f"{len(secret)} {hashlib.sha256(secret).hexdigest()} b'' {list(arguments)}\n"


def fed(*arguments: str) -> list[str]:
    return ["--", sys.executable, "-c", WITNESS, *arguments]


# To a file.


@pytest.mark.parametrize("with_record", [True, False])
def test_to_a_new_private_file(dealt: Place, with_record: bool) -> None:
    record = ["--record", dealt.record, *PURPOSE] if with_record else []
    target = dealt.folder / "out"
    result = run("recover", *dealt.shares[:3], *record, "--to", target)
    assert (result.code, result.err) == (0, "")
    assert target.read_bytes() == SECRET
    assert stat.S_IMODE(target.stat().st_mode) == 0o600
    assert f"Recovered: {LABEL}, from north-pier, light-house, dry-dock." in result.out
    assert str(target) in result.out
    assert ("the record with fingerprint" in result.out) is with_record
    assert "the commitment that each share carries" in result.out or with_record
    assert "this machine has now held the secret" in result.out


def test_an_existing_file_is_never_touched(dealt: Place) -> None:
    target = dealt.folder / "out"
    for occupy in (lambda: target.write_bytes(b"older"), target.mkdir, lambda: target.symlink_to("nowhere")):
        occupy()
        assert_refused(
            ["recover", *dealt.shares[:3], "--to", target], 5, str(target), "never overwritten", watched=dealt.folder
        )
        if target.is_dir():
            target.rmdir()
        else:
            target.unlink()


def test_an_existing_file_is_refused_before_the_secret_is_recovered(dealt: Place) -> None:
    """Even with shares that recover nothing it is the file that is complained of."""
    dealt.key.write_bytes(b"older")
    assert_refused(["recover", dealt.shares[0], "--to", dealt.key], 5, "never overwritten")


@pytest.mark.parametrize(
    ("target", "code", "word"),
    [
        ("nowhere/out", 5, "does not exist"),
        ("key/out", 5, "not a folder"),
        ("/proc/out", 5, "/proc/out"),
        ("", 2, "an empty value"),
        ("-", 2, "the secret is not printed"),
        ("a\0b", 5, "not a possible path"),
    ],
    ids=ascii,
)
def test_where_no_file_can_be_written(
    dealt: Place, target: str, code: int, word: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(dealt.folder)
    assert_refused(["recover", *dealt.shares[:3], "--to", target], code, word, watched=dealt.folder)


def test_a_stopped_run_s_leftover_is_named(dealt: Place) -> None:
    left = dealt.folder / ".out.0123456789abcdef.partial"
    left.write_bytes(SECRET[:10])
    result = run("recover", *dealt.shares[:3], "--to", dealt.folder / "out")
    assert result.code == 0
    assert f"Caution: {left} was left by a run that was stopped" in result.err
    assert "may hold a secret" in result.err
    assert left.exists()  # it may be another run's that is at work


# Nowhere.


def test_check_writes_the_secret_nowhere(dealt: Place) -> None:
    before = sorted(dealt.folder.rglob("*"))
    result = run("recover", *dealt.shares[1:4], "--check")
    assert (result.code, result.err) == (0, "")
    assert "written nowhere" in result.out
    assert sorted(dealt.folder.rglob("*")) == before


@pytest.mark.parametrize(
    "ways",
    [[], ["--to", "x", "--check"], ["--check", "--", "cat"], ["--to", "x", "--", "cat"], ["--"], ["--check", "--"]],
    ids=" ".join,
)
def test_exactly_one_way_is_to_be_given(dealt: Place, ways: list[str], monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(dealt.folder)
    arguments = ["recover", *dealt.shares[:3], *ways]
    assert_refused(arguments, 2, "exactly one of --to FILE, --check, or -- COMMAND", watched=dealt.folder)


def test_a_command_without_shares() -> None:
    assert_refused(["recover", "--", "cat"], 2, "SHARE")


def test_json_says_what_became_of_it(dealt: Place) -> None:
    result = run("recover", *dealt.shares[:4], "--check", "--json")
    told = result.json
    assert (result.code, result.err, told["done"]) == (0, "", True)
    assert told["used"] == ["north-pier", "light-house", "registrar"]
    assert (told["label"], told["secret"], told["epoch"]) == (LABEL, "written nowhere", 1)
    assert [one["status"] for one in told["shares"]] == ["intact"] * 4
    assert SECRET.decode() not in result.out


# To a command.


@pytest.mark.parametrize("secret", [b"\n", b"no newline", b"\x00\xff" * 500, bytes(65536), b"two\nlines\n"], ids=len)
def test_the_command_gets_the_exact_bytes_and_then_the_end(tmp_path: Path, secret: bytes) -> None:
    place = Place.make(tmp_path / "place", secret)
    place.split()
    result = run("recover", *place.shares[:2], *fed("-x", "--json", "two words", "--", "$HOME"))
    assert result.code == 0
    assert result.out == witnessed(secret, "-x", "--json", "two words", "--", "$HOME")
    assert "Recovered: " in result.err
    assert "given to " in result.err


def test_the_command_s_output_is_untouched(dealt: Place) -> None:
    raw = b"\x00\xff\n\xfe no newline"
    script = f"import sys; sys.stdin.read(); sys.stdout.buffer.write({raw!r}); sys.stderr.write('its talk\\n')"
    done = subprocess.run(
        [PROGRAM, "recover", *dealt.shares[:3], "--", sys.executable, "-c", script],
        stdin=subprocess.DEVNULL,
        capture_output=True,
        check=False,
        timeout=60,
    )
    assert (done.returncode, done.stdout) == (0, raw)
    assert done.stderr.decode().startswith("its talk\nRecovered: ")


def test_with_json_the_command_s_output_stands_aside(dealt: Place) -> None:
    result = run("recover", *dealt.shares[:3], "--json", *fed())
    assert (result.code, result.json["done"], result.err) == (0, True, witnessed(SECRET))
    assert result.json["secret"] == f"given to {sys.executable}"


@pytest.mark.parametrize(("status", "how"), [(1, "ended with code 1"), (3, "ended with code 3"), (255, "code 255")])
def test_a_command_that_fails(dealt: Place, status: int, how: str) -> None:
    arguments = ["recover", *dealt.shares[:3], "--", "sh", "-c", f"cat >/dev/null; exit {status}"]
    assert_refused(arguments, 7, "sh: the command was given the secret", how)
    assert run(*with_json(arguments)).json["error"]["status"] == status


def test_a_command_that_is_killed(dealt: Place) -> None:
    arguments = ["recover", *dealt.shares[:3], "--", "sh", "-c", "kill -KILL $$"]
    assert_refused(arguments, 7, "was ended by signal 9")
    assert run(*with_json(arguments)).json["error"]["status"] == -9


@pytest.mark.parametrize(
    ("command", "word"),
    [
        (["./no-such-command"], "No such file"),
        (["/"], "Permission denied"),
        (["/dev/null"], "Permission denied"),
        ([""], "not started"),
        (["key"], "not started"),
    ],
    ids=ascii,
)
def test_a_command_that_cannot_start_gets_nothing(dealt: Place, command: list[str], word: str) -> None:
    assert_refused(["recover", *dealt.shares[:3], "--", *command], 5, "the command was not started", word)


def test_no_shell_reads_the_command(dealt: Place) -> None:
    assert_refused(["recover", *dealt.shares[:3], "--", "cat >stolen; true"], 5, "not started", watched=dealt.folder)


@pytest.mark.parametrize("size", [32, 65536])
def test_a_command_that_reads_nothing_decides_by_its_code(tmp_path: Path, size: int) -> None:
    place = Place.make(tmp_path / "place", bytes(size))
    place.split()
    assert run("recover", *place.shares[:2], "--", "true").code == 0
    assert run("recover", *place.shares[:2], "--", "false").code == 7


def test_a_command_is_not_started_when_nothing_is_recovered(dealt: Place) -> None:
    assert_refused(
        ["recover", *dealt.shares[:2], "--", "touch", dealt.folder / "started"], 3, "3 different", watched=dealt.folder
    )


def test_the_secret_is_in_no_argument_and_no_environment(dealt: Place) -> None:
    """Asked of the system, while the command runs: its own lists, and those of the program that started it."""
    script = (
        "import hashlib, os, sys; secret = sys.stdin.buffer.read()\n"
        "for process in ('self', os.getppid()):\n"
        "    for name in ('cmdline', 'environ'):\n"
        "        try: found = open(f'/proc/{process}/{name}', 'rb').read()\n"
        "        except PermissionError: print(process == 'self', name, 'closed'); continue\n"
        "        print(process == 'self', name, secret in found or secret.strip() in found)\n"
    )
    result = spawn("recover", *dealt.shares[:3], "--", sys.executable, "-c", script)
    lines = result.out.splitlines()
    assert lines[:2] == ["True cmdline False", "True environ False"]
    assert set(lines[2:]) <= {f"False {name} {how}" for name in ("cmdline", "environ") for how in ("False", "closed")}
    assert len(lines) == 4


def test_no_open_file_of_this_program_reaches_the_command(dealt: Place) -> None:
    script = "import os, sys; sys.stdin.read(); print(sorted(map(int, os.listdir('/proc/self/fd')))[:4])"
    result = spawn("recover", *dealt.shares[:3], "--", sys.executable, "-c", script)
    assert result.out in ("[0, 1, 2, 3]\n",)  # 3 is the listing itself


def test_it_runs_without_a_terminal_and_asks_nothing(dealt: Place) -> None:
    done = subprocess.run(
        [PROGRAM, "recover", *dealt.shares[:3], "--check"],
        stdin=subprocess.DEVNULL,
        capture_output=True,
        start_new_session=True,
        check=False,
        timeout=60,
    )
    assert (done.returncode, done.stderr) == (0, b"")


def test_a_slow_command_is_waited_for(dealt: Place) -> None:
    start = time.monotonic()
    result = run("recover", *dealt.shares[:3], "--", "sh", "-c", "sleep 0.5; cat >/dev/null; echo done")
    assert (result.code, result.out) == (0, "done\n")
    assert time.monotonic() - start >= 0.5


# Which shares.


def test_every_quorum_recovers_and_fewer_do_not(dealt: Place) -> None:
    for size in (2, 3, 4, 5):
        for some in itertools.combinations(dealt.shares, size):
            assert run("recover", *some, "--check").code == (0 if size >= 3 else 3)


def test_too_few_says_how_many(dealt: Place) -> None:
    assert_refused(["recover", *dealt.shares[:2], "--check"], 3, "3 different shares are needed, 2 given", "bring more")


def damage(path: Path) -> None:
    """Flip one bit of a share's row, another in each, so that none undoes another; leave its digest as it was."""
    share = Share.parse(path.read_bytes())
    (((_, x),),) = share.paths
    with share.rows[0].view() as row:
        row[x] ^= 0x10
    path.write_bytes(share.to_file())


def forge(path: Path) -> None:
    """Flip one bit of a share's row and make its digest fit: only record or commitment can tell."""
    damage(path)
    share = Share.parse(path.read_bytes())
    path.write_bytes(share.model_copy(update={"digest": share._digest()}).to_file())


@pytest.mark.parametrize("change", [damage, forge])
@pytest.mark.parametrize("with_record", [True, False])
@pytest.mark.parametrize("bad", [(0,), (4,), (0, 1), (1, 3)])
def test_bad_shares_among_enough_are_named(
    dealt: Place, change: Callable[[Path], None], with_record: bool, bad: tuple[int, ...]
) -> None:
    for i in bad:
        change(dealt.shares[i])
    record = ["--record", dealt.record, *PURPOSE] if with_record else []
    result = run("recover", *dealt.shares, *record, "--to", dealt.folder / "out")
    assert result.code == 0
    assert (dealt.folder / "out").read_bytes() == SECRET
    named = [line for line in result.err.splitlines() if line.startswith("Caution: ")]
    assert len(named) == len(result.err.splitlines()) == len(bad)
    assert all(f"{dealt.shares[i]} is damaged: " in line for i, line in zip(bad, named, strict=True))
    told = run("recover", *dealt.shares, *record, "--check", "--json").json
    assert [one["status"] for one in told["shares"]] == ["damaged" if i in bad else "intact" for i in range(5)]
    used = {NAMES.index(name) for name in told["used"]}
    assert not used & {NAMES.index(dealt.shares[i].name.removesuffix(".share.json")) for i in bad}


@pytest.mark.parametrize("change", [damage, forge])
@pytest.mark.parametrize("with_record", [True, False])
def test_too_many_bad_shares_are_a_refusal(dealt: Place, change: Callable[[Path], None], with_record: bool) -> None:
    for path in dealt.shares[:3]:
        change(path)
    record = ["--record", dealt.record, *PURPOSE] if with_record else []
    result = run("recover", *dealt.shares, *record, "--to", dealt.folder / "out")
    assert_one_line(result)
    assert result.code == (4 if change is forge and not with_record else 3)
    assert not (dealt.folder / "out").exists()


@pytest.mark.parametrize("with_record", [True, False])
def test_exactly_a_quorum_with_one_forged_is_never_a_wrong_secret(dealt: Place, with_record: bool) -> None:
    forge(dealt.shares[1])
    record = ["--record", dealt.record, *PURPOSE] if with_record else []
    result = run("recover", *dealt.shares[:3], *record, "--to", dealt.folder / "out")
    assert_one_line(result)
    assert result.code in (3, 4)
    assert not (dealt.folder / "out").exists()


def test_shares_are_enough_with_record_and_notes_lost(dealt: Place) -> None:
    """What people are told may be missing: the core and the digest recover."""
    for path in dealt.shares[:3]:
        share = Share.parse(path.read_bytes())
        bare = share.model_copy(update={"label": None, "rule": None, "notice": None, "record": None})
        path.write_bytes(bare.model_copy(update={"digest": bare._digest()}).to_file())
    result = run("recover", *dealt.shares[:3], "--check")
    assert result.code == 0
    assert result.out.startswith("Recovered, from ")


def test_formatting_does_not_matter(dealt: Place) -> None:
    for path in dealt.shares[:3]:
        path.write_text(json.dumps(json.loads(path.read_bytes()), separators=(",", ":"), sort_keys=True))
    assert run("recover", *dealt.shares[:3], "--record", dealt.record, *PURPOSE, "--check").code == 0


def test_a_closed_standard_error_hides_no_failure(dealt: Place) -> None:
    done = subprocess.run(
        ["bash", "-c", '"$@" 2>&-', "bash", PROGRAM, "recover", *dealt.shares[:2], "--check"],
        capture_output=True,
        check=False,
        timeout=60,
    )
    assert (done.returncode, done.stdout) == (3, b"")
    assert os.listdir(dealt.drop)
