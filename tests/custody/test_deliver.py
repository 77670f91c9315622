"""Delivery: a private file, or one command's input, whole or with an error that says how it ended.

Checked against: what really arrives. The commands are the test run's own Python, and a shell's exit codes are never
involved, as no shell is.
"""

from __future__ import annotations

import hashlib
import json
import os
import signal
import stat
import subprocess
import sys
from pathlib import Path

import pytest
from parties import card, unlocked
from strategies import crooked_split, flat, presented, revealed
from vectors.make import wrapping_v1 as by_hand

from shares import streams
from shares.custody.deliver import fed, open_sealed, sealed_for, to_command, to_file
from shares.custody.recover import recover
from shares.documents.sealed_secret import SealedSecret
from shares.documents.wrapping import SUITES, card_sealer
from shares.errors import (
    CommandFailedError,
    SetMismatchError,
    SharesError,
    StorageError,
    VerificationError,
    WrongKeyError,
)
from shares.memory import Secret

SECRET = b"not a real key\0with a zero byte and no line end"


def python(code: str, *arguments: str) -> list[str]:
    return [sys.executable, "-c", code, *arguments]


KEEP = "import sys; got = sys.stdin.buffer.read(); open(sys.argv[1], 'wb').write(got)"


def test_a_file_is_new_private_and_whole(tmp_path: Path) -> None:
    target = tmp_path / "key"
    to_file(Secret.of(SECRET), target)
    assert target.read_bytes() == SECRET
    assert stat.S_IMODE(target.stat().st_mode) == 0o600
    with pytest.raises(StorageError, match="never overwritten"):
        to_file(Secret.of(b"other"), target)
    assert target.read_bytes() == SECRET
    assert os.listdir(tmp_path) == ["key"]


@pytest.mark.parametrize("length", [1, 4096, 65_536, 1 << 20])
def test_a_command_gets_every_byte_and_then_the_end(tmp_path: Path, length: int) -> None:
    """Beyond the pipe's 64 KiB as well, where one write is not enough."""
    secret = hashlib.shake_256(b"made up").digest(length)
    to_command(Secret.of(secret), python(KEEP, str(tmp_path / "got")))
    assert (tmp_path / "got").read_bytes() == secret


def test_writes_that_stop_half_way_are_gone_on_with(tmp_path: Path, monkeypatch) -> None:
    real = os.write
    monkeypatch.setattr(streams.os, "write", lambda descriptor, data: real(descriptor, data[:7]))
    to_command(Secret.of(SECRET), python(KEEP, str(tmp_path / "got")))
    assert (tmp_path / "got").read_bytes() == SECRET


@pytest.mark.parametrize("error", [KeyboardInterrupt(), OSError("the pipe is gone"), MemoryError()])
def test_a_command_never_takes_a_part_of_the_secret_for_the_whole(tmp_path: Path, monkeypatch, error) -> None:
    """Stopped half way, the command is killed before it sees the end of its input."""
    real, calls = os.write, []

    def stopped(descriptor, data):
        calls.append(1)
        if len(calls) > 2:
            raise error
        return real(descriptor, data[:7])

    monkeypatch.setattr(streams.os, "write", stopped)
    with pytest.raises(type(error)):
        to_command(Secret.of(SECRET), python(KEEP, str(tmp_path / "got")))
    assert not (tmp_path / "got").exists()


def test_no_shell_sees_the_words(tmp_path: Path) -> None:
    target = tmp_path / "$HOME; `echo` * 'x'"
    to_command(Secret.of(SECRET), python(KEEP, str(target)))
    assert target.read_bytes() == SECRET


def test_what_the_command_prints_goes_where_it_is_told(capfd) -> None:
    to_command(Secret.of(SECRET), python("print('done')"))
    assert capfd.readouterr() == ("done\n", "")
    to_command(Secret.of(SECRET), python("print('done')"), output=sys.__stderr__.fileno())
    assert capfd.readouterr() == ("", "done\n")


@pytest.mark.parametrize("code", [1, 2, 7, 127, 255])
def test_a_command_that_fails_is_told_with_its_code(code: int) -> None:
    with pytest.raises(CommandFailedError, match=f"ended with code {code}") as failure:
        to_command(Secret.of(SECRET), python(f"import sys; sys.stdin.buffer.read(); sys.exit({code})"))
    assert failure.value.status == code
    assert failure.value.exit_code == 7


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGKILL, signal.SIGSEGV])
def test_a_command_that_dies_is_told_with_its_signal(number: signal.Signals) -> None:
    code = f"import os, resource; resource.setrlimit(resource.RLIMIT_CORE, (0, 0)); os.kill(os.getpid(), {int(number)})"
    with pytest.raises(CommandFailedError, match=f"by signal {int(number)}$|by signal {int(number)} ") as failure:
        to_command(Secret.of(SECRET), python(code))
    assert failure.value.status == -number


LARGE = bytes(1 << 20)


def test_a_command_that_has_read_enough_is_content() -> None:
    """It closes its end while there is more to write: EPIPE here, and its own exit code decides."""
    to_command(Secret.of(LARGE), python("import os; os.read(0, 10)"))
    to_command(Secret.of(LARGE), python("import os; os.close(0)"))


def test_a_command_that_stops_reading_and_fails_is_told_by_its_code() -> None:
    with pytest.raises(CommandFailedError, match="ended with code 3"):
        to_command(Secret.of(LARGE), python("import os; os.read(0, 10); os._exit(3)"))


def test_the_signal_for_a_broken_pipe_does_not_end_this_process() -> None:
    """Python ignores SIGPIPE; a program that restores it would die here instead of raising."""
    assert signal.getsignal(signal.SIGPIPE) is signal.SIG_IGN


@pytest.mark.parametrize(
    ("command", "reason"),
    [
        (["/nowhere/at/all"], "No such file"),
        (["no-such-command-in-this-harbour"], "No such file"),
        (["/"], "Permission denied"),
        (["/etc/passwd"], "Permission denied"),
        (["a\0b"], "cannot pass on its words"),
        (["\ud800"], "cannot pass on its words"),
        ([""], "No such file|Permission denied"),
    ],
)
def test_a_command_that_cannot_be_started_is_an_error_of_files(command: list[str], reason: str) -> None:
    with pytest.raises(StorageError, match=reason) as refusal:
        to_command(Secret.of(SECRET), command)
    assert refusal.value.exit_code == 5


def test_a_file_that_is_no_program_is_told(tmp_path: Path) -> None:
    script = tmp_path / "script"
    script.write_bytes(b"\x7fELF but not really")
    script.chmod(0o700)
    with pytest.raises(StorageError, match="Exec format error"):
        to_command(Secret.of(SECRET), [str(script)])


def test_no_failure_shows_the_secret() -> None:
    for command in (python("raise SystemExit(1)"), ["/nowhere/at/all"], ["a\0b"]):
        with pytest.raises((CommandFailedError, StorageError)) as failure:
            to_command(Secret.of(SECRET), command)
        seen = f"{failure.value} {failure.value!r} {vars(failure.value)} {failure.value.__context__}"
        assert "real key" not in seen


def test_the_command_inherits_no_descriptor_but_the_three(tmp_path: Path) -> None:
    (tmp_path / "held").write_bytes(b"")
    with open(tmp_path / "held") as held:
        os.set_inheritable(held.fileno(), True)
        to_command(
            Secret.of(SECRET),
            python(
                "import os, sys; open(sys.argv[1], 'w').write(str(os.path.exists(sys.argv[2])))",
                str(tmp_path / "seen"),
                f"/proc/self/fd/{held.fileno()}",
            ),
        )
    assert (tmp_path / "seen").read_text() == "False"


def test_the_secret_is_neither_in_the_words_nor_in_the_environment_of_the_command(tmp_path: Path) -> None:
    read = "b''.join(open('/proc/self/' + name, 'rb').read() for name in ('cmdline', 'environ'))"
    code = f"import sys; open(sys.argv[1], 'wb').write({read})"
    to_command(Secret.of(SECRET), python(code, str(tmp_path / "seen")))
    seen = (tmp_path / "seen").read_bytes()
    assert b"/proc/self" in seen
    assert b"real key" not in seen


# A command is fed in pieces.


def test_pieces_arrive_as_one(tmp_path: Path) -> None:
    with fed(python(KEEP, str(tmp_path / "got"))) as write:
        for i in range(0, len(LARGE), 100_003):
            write(LARGE[i : i + 100_003])
    assert (tmp_path / "got").read_bytes() == LARGE


def test_nothing_is_started_before_it_is_needed(tmp_path: Path) -> None:
    fed(python("open(__import__('sys').argv[1], 'w')", str(tmp_path / "started")))
    assert os.listdir(tmp_path) == []


@pytest.mark.parametrize("error", [KeyboardInterrupt(), SharesError("it was altered"), MemoryError()])
def test_a_command_is_killed_when_the_pieces_stop(tmp_path: Path, error: BaseException) -> None:
    def feed() -> None:
        with fed(python(KEEP, str(tmp_path / "got"))) as write:
            write(SECRET)
            raise error

    with pytest.raises(type(error)):
        feed()
    assert os.listdir(tmp_path) == []


def test_a_command_is_killed_before_its_input_ends(monkeypatch) -> None:
    """However quick it is: at the first kill the pipe is still open."""
    open_at_kill: list[bool] = []
    real = subprocess.Popen.kill

    def kill(process: subprocess.Popen[bytes]) -> None:
        open_at_kill.append(process.stdin is not None and not process.stdin.closed)
        real(process)

    def feed() -> None:
        with fed(python("import sys; sys.stdin.read()")):
            raise KeyboardInterrupt

    monkeypatch.setattr(subprocess.Popen, "kill", kill)
    with pytest.raises(KeyboardInterrupt):
        feed()
    assert open_at_kill[0]


def test_a_command_that_has_read_enough_ends_the_feeding() -> None:
    pieces = 0
    with fed(python("import os; os.read(0, 10)")) as write:
        for _ in range(100):
            write(LARGE)
            pieces += 1
    assert pieces < 100


# Encrypted to its receiver.

DEALT = crooked_split(SECRET, flat(2, 3))


@pytest.mark.parametrize("suite", SUITES)
@pytest.mark.parametrize("record", [DEALT.record, None], ids=["record", "alone"])
def test_a_secret_for_a_receiver_opens_by_the_receivers_key_alone(suite, record) -> None:
    recovery = recover(presented(DEALT.shares[:2]), record)
    data = sealed_for(card("harbour-office"), recovery, suite)
    assert b"real key" not in data
    sealed = SealedSecret.parse(data)
    facts = (sealed.set, sealed.epoch, sealed.label, sealed.encrypted_file, sealed.wrapping.suite)
    assert facts == (DEALT.record.set, 1, DEALT.record.label, None, suite)
    with unlocked("harbour-office") as key:
        assert revealed(sealed.content(key.open)) == revealed(recovery.payload)
        assert revealed(open_sealed(sealed, lambda one: one.content(key.open), DEALT.record)) == SECRET
        # FORMAT.md, sections 9 and 10, by the opener written from its text alone.
        assert by_hand.opened(json.loads(data), by_hand.Private(revealed(key.content))) == revealed(recovery.payload)
    with unlocked("registrar") as key, pytest.raises(WrongKeyError):
        sealed.content(key.open)
    # The recovery keeps the secret, for its caller to wipe.
    assert revealed(recovery.secret) == SECRET


def test_a_secret_that_anybody_sealed_is_not_taken_for_the_recovered_one() -> None:
    """All that is sealed with is public: a courier can make such a file of their own."""
    own, label = Secret.of(bytes(100)), DEALT.record.label
    seal = card_sealer(card("harbour-office").recipient())
    forged = SealedSecret.seal(
        own, seal, set_id=DEALT.record.set, epoch=1, label=label, secret_commitment=DEALT.record.secret_commitment
    )
    other = recover(presented(crooked_split(b"forged", flat(1, 1)).shares), None)
    foreign = SealedSecret.parse(sealed_for(card("harbour-office"), other, SUITES[0]))
    renamed = SealedSecret.seal(
        other.payload, seal, set_id=DEALT.record.set, epoch=1, label=label, secret_commitment=bytes(32)
    )
    with unlocked("harbour-office") as key:
        for sealed, record, reason in (
            (forged, None, "not the secret that its commitment names"),
            (forged, DEALT.record, "not the secret that its commitment names"),
            (foreign, DEALT.record, "the record of set"),
            (renamed, DEALT.record, "another secret than the record"),
        ):
            with pytest.raises((VerificationError, SetMismatchError), match=reason):
                open_sealed(sealed, lambda one: one.content(key.open), record)
        assert revealed(open_sealed(foreign, lambda one: one.content(key.open), None)) == b"forged"


def test_a_secret_goes_to_no_card_without_usable_keys() -> None:
    recovery = recover(presented(DEALT.shares[:2]))
    useless = card("harbour-office").model_copy(update={"x25519": bytes(32)})
    with pytest.raises(VerificationError, match="no usable public keys"):
        sealed_for(useless, recovery, SUITES[0])
