"""How the tests of the command line call it: within this process, in one of its own, or as another user.

``run`` goes through the same door as the program, ``shares.cli.main.run``, on the real descriptors 0, 1 and 2, so that
what a fed command or a library writes there is seen as well. Only the protection of the process is left out: it would
bind this process for good. ``spawn`` is the whole program.
"""

from __future__ import annotations

import contextlib
import json
import os
import signal
import subprocess
import sys
import tempfile
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from unittest import mock

from shares.cli import main, selftest
from shares.cli.signals import STOP
from shares.memory import Protection

PROGRAM = Path(sys.executable).with_name("shares")
NOBODY = 65534
SECRET = b"Kj4qVz9Lm2Xw7RtB-made-up-8hPd\n"
NAMES = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")
LABEL = "Tide archive root"
# What a recovery with a journal beside the record is asked for.
PURPOSE = ("--reason=the archive's disk failed", "--disposition=destroyed")


@dataclass(frozen=True)
class Result:
    """What one run of the command line gave."""

    code: int
    out: str
    err: str

    @property
    def json(self) -> dict[str, Any]:
        """Standard output as the one JSON object that it must be."""
        found = json.loads(self.out)
        assert isinstance(found, dict)
        return found


def run(*arguments: str | Path, stdin: bytes = b"") -> Result:
    """Run a command within this process."""
    with contextlib.ExitStack() as undo:
        streams = [undo.enter_context(tempfile.TemporaryFile()) for _ in range(3)]
        streams[0].write(stdin)
        streams[0].seek(0)
        for number, stream in enumerate(streams):
            undo.callback(lambda number, saved: (os.dup2(saved, number), os.close(saved)), number, os.dup(number))
            os.dup2(stream.fileno(), number)
        for number in STOP:
            undo.callback(signal.signal, number, signal.getsignal(number))
        for name, number, mode in (("stdin", 0, "r"), ("stdout", 1, "w"), ("stderr", 2, "w")):
            text = undo.enter_context(open(number, mode, encoding="utf-8", closefd=False))
            undo.enter_context(mock.patch.object(sys, name, text))
        undo.enter_context(mock.patch.object(sys, "argv", ["shares", *map(os.fspath, arguments)]))
        undo.enter_context(mock.patch.object(main, "protect_process"))
        undo.enter_context(mock.patch.object(selftest, "protect_process", return_value=Protection(True, True)))
        code = 0
        try:
            main.run()
        except SystemExit as leaving:
            code = int(leaving.code or 0)
        sys.stdout.flush()
        sys.stderr.flush()
        for stream in streams:
            stream.seek(0)
        return Result(code, streams[1].read().decode(), streams[2].read().decode())


def spawn(
    *arguments: str | Path,
    stdin: bytes | None = b"",
    env: Mapping[str, str] | None = None,
    before: Sequence[str | Path] = (),
    **options: Any,
) -> Result:
    """Run the program itself, after ``before`` (a tracer, a limit), and wait for it."""
    done = subprocess.run(
        [*before, PROGRAM, *arguments],
        input=stdin,
        env={**os.environ, **(env or {})},
        capture_output=True,
        check=False,
        timeout=60,
        **options,
    )
    return Result(done.returncode, done.stdout.decode(), done.stderr.decode())


def run_unprivileged(*arguments: str | Path) -> Result:
    """Run the program as a user whom permissions bind; root is bound by none.

    It loads everything first: another user may not be allowed where this installation lies.
    """
    code = (
        "import ctypes, encodings.utf_16_be, importlib, os, pkgutil, pydantic.plugin._loader, resource, shares\n"
        "for module in pkgutil.walk_packages(shares.__path__, 'shares.'):\n"
        "    '__main__' in module.name or importlib.import_module(module.name)\n"
        "if os.geteuid() == 0:\n"
        f"    os.setgroups([]); os.setgid({NOBODY}); os.setuid({NOBODY})\n"
        "from shares.cli.main import run; run()"
    )
    done = subprocess.run(
        [sys.executable, "-P", "-c", code, *arguments],
        stdin=subprocess.DEVNULL,
        capture_output=True,
        check=False,
        timeout=60,
    )
    return Result(done.returncode, done.stdout.decode(), done.stderr.decode())


@dataclass(frozen=True)
class Place:
    """A folder prepared for one test: a secret, a delivery folder, and where a set will go."""

    folder: Path

    @property
    def key(self) -> Path:
        return self.folder / "key"

    @property
    def drop(self) -> Path:
        return self.folder / "drop"

    @property
    def set(self) -> Path:
        return self.folder / "set"

    @property
    def record(self) -> Path:
        return self.set / "record.json"

    @property
    def shares(self) -> list[Path]:
        """The share files, in alphabetical order."""
        return sorted(self.drop.glob("*.share.json"))

    def share(self, name: str) -> Path:
        return self.drop / f"{name}.share.json"

    @classmethod
    def make(cls, folder: Path, secret: bytes = SECRET) -> Place:
        place = cls(folder)
        place.drop.mkdir(parents=True, mode=0o700)
        place.key.write_bytes(secret)
        return place

    def split_arguments(
        self,
        *,
        source: str | Path | None = None,
        need: object = 2,
        names: Sequence[str] = NAMES[:3],
        label: str = LABEL,
        folder: str | Path | None = None,
        deliver: Sequence[str | Path] | None = None,
        more: Sequence[str] = ("--plain",),
    ) -> list[str]:
        """The arguments of a split that would succeed, with some of them changed."""
        arguments = ["split", os.fspath(self.key if source is None else source), f"--need={need}", f"--label={label}"]
        arguments += [f"--custodian={name}" for name in names]
        arguments += [f"--set={os.fspath(self.set if folder is None else folder)}"]
        arguments += [f"--deliver={os.fspath(to)}" for to in ((self.drop,) if deliver is None else deliver)]
        return [*arguments, *more]

    def split(self, **changes: Any) -> Result:
        """Split in this process; it must succeed."""
        done = run(*self.split_arguments(**changes))
        assert (done.code, "Split: " in done.out) == (0, True)
        return done


def files_in(folder: Path) -> dict[str, tuple[int, bytes | None]]:
    """Everything below a folder: its mode, and its content where it has one. Never waits for a pipe."""
    found = {}
    for path in sorted(folder.rglob("*")):
        content = path.read_bytes() if path.is_file() and not path.is_symlink() else None
        found[os.fspath(path.relative_to(folder))] = (path.lstat().st_mode, content)
    return found


def with_json(arguments: Sequence[str | Path]) -> list[str | Path]:
    """The same arguments with ``--json``, before a command that is fed."""
    at = list(arguments).index("--") if "--" in arguments else len(arguments)
    return [*arguments[:at], "--json", *arguments[at:]]


def assert_one_line(result: Result) -> str:
    """See that a refusal is one clear line on standard error and nothing else; return the line."""
    assert result.out == ""
    assert result.err.startswith("shares: ")
    assert result.err.endswith("\n")
    assert result.err.count("\n") == 1
    assert result.err[:-1].isprintable()
    assert "Traceback" not in result.err
    assert "a fault in this program" not in result.err
    return result.err


def assert_refused(
    arguments: Sequence[str | Path], code: int, *words: str, watched: Path | None = None, stdin: bytes = b""
) -> str:
    """See that a command is refused, by hand and by script alike, and changes nothing in the folder watched."""
    before = files_in(watched) if watched else None
    by_hand = run(*arguments, stdin=stdin)
    line = assert_one_line(by_hand)
    missing = [word for word in words if word not in line]
    assert not missing, line
    assert by_hand.code == code, line
    by_script = run(*with_json(arguments), stdin=stdin)
    told = by_script.json
    assert (by_script.code, told["done"], told["exit"], by_script.err) == (code, False, code, "")
    error = told["error"]
    assert set(error) - {"status"} == {"code", "what", "where", "hint"}
    assert error["code"]
    assert error["what"]
    # Both tell the same. What a terminal could not show was replaced on the line.
    assert not [word for word in words if word not in f"{error['where']}: {error['what']} ({error['hint']})"]
    assert (files_in(watched) if watched else None) == before
    return line
