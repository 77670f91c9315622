"""How commands speak: nothing that could steer a terminal, progress only where somebody watches."""

from __future__ import annotations

import io
import json
import os
import signal
import sys
import time
from collections.abc import Callable

import pytest
from cli.harness import Place, run

from shares.cli import split
from shares.cli.output import print_error, progress, prose, warn
from shares.errors import CommandFailedError, SharesError, StorageError


def test_a_refusal_has_what_where_and_what_next(capsys: pytest.CaptureFixture[str]) -> None:
    print_error(StorageError("is full", where="/media/stick", hint="make room"), as_json=False)
    assert capsys.readouterr() == ("", "shares: /media/stick: is full (make room)\n")
    print_error(SharesError("it failed"), as_json=False)
    assert capsys.readouterr() == ("", "shares: it failed\n")


def test_a_refusal_as_json(capsys: pytest.CaptureFixture[str]) -> None:
    print_error(CommandFailedError("it failed", status=9, where="sh"), as_json=True)
    out, err = capsys.readouterr()
    assert err == ""
    told = {"code": "command-failed", "what": "it failed", "where": "sh", "hint": None, "status": 9}
    assert json.loads(out) == {"done": False, "exit": 7, "error": told}


@pytest.mark.parametrize("text", ["a\nb", "\x1b[2J", "\x9b2J", "\u202e", "\x07", "\r", "\u2028", "\udcff", "\x00"])
def test_nothing_unprintable_is_printed(text: str, capsys: pytest.CaptureFixture[str]) -> None:
    print_error(SharesError(text, where=text, hint=text), as_json=False)
    warn(text)
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) == 2
    assert all(line.isprintable() for line in lines)


def test_long_sentences_are_broken() -> None:
    lines = prose("word " * 100)
    assert max(map(len, lines)) <= 100
    assert " ".join(lines) == ("word " * 100).strip()


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def watched(monkeypatch: pytest.MonkeyPatch, stream: io.StringIO, seconds: float) -> str:
    """What is shown of 4 steps that take so many seconds each."""
    clock = [0.0]
    monkeypatch.setattr(time, "monotonic", lambda: clock[0])
    monkeypatch.setattr(sys, "stderr", stream)
    calls = []
    show = progress("Trial recovery", "quorums", lambda: calls.append(clock[0]))
    for step in range(4):
        clock[0] += seconds
        show(step, 4)
    monkeypatch.undo()
    assert len(calls) == 4
    return stream.getvalue()


def test_progress_is_shown_on_a_terminal_after_two_seconds(monkeypatch: pytest.MonkeyPatch) -> None:
    shown = watched(monkeypatch, Terminal(), 1.0)
    assert "Trial recovery: [==================......] 3 of 4 quorums, about 3 s left" in shown
    assert "1 of 4" not in shown
    assert shown.endswith("\n")
    assert shown.count("\n") == 1


def test_progress_is_not_shown_when_quick_or_unwatched(monkeypatch: pytest.MonkeyPatch) -> None:
    assert watched(monkeypatch, Terminal(), 0.4) == ""
    assert watched(monkeypatch, io.StringIO(), 10.0) == ""


def test_a_trial_recovery_stops_where_a_signal_came(place: Place, monkeypatch: pytest.MonkeyPatch) -> None:
    """Between two quorums; then nothing of the split is left."""
    real = split.progress

    def interrupted(what: str, unit: str, stop_here: Callable[[], None] | None = None) -> Callable[[int, int], None]:
        show = real(what, unit, stop_here)

        def step(done: int, total: int) -> None:
            if done == 1:
                os.kill(os.getpid(), signal.SIGTERM)
            show(done, total)

        return step

    monkeypatch.setattr(split, "progress", interrupted)
    result = run(*place.split_arguments())
    monkeypatch.undo()
    # click ends the line on which a terminal has shown ^C.
    told = "\nshares: stopped before it was done (nothing was left half written)\n"
    assert (result.code, result.out, result.err) == (1, "", told)
    assert not place.shares
    assert not place.record.exists()
