"""What tests of tasks about a key ask for, commit to, put together, send to the key, and find in journals."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from pathlib import Path

from cli.harness import run
from cli.keyed import OFFICE, Keyed
from cli.test_key import tool

from shares.history.journal import load_journal

SENDER = Path(__file__).resolve().parents[2] / "examples" / "send_to_key.py"
FIRST, SECOND, THIRD = "north-pier", "south-pier", "light-house"
CONTENT = b"the berth plan, not for everybody\n"


def events(folder: Path, kind: type) -> list:
    return [entry.event for entry in load_journal(folder).entries if isinstance(entry.event, kind)]


def sign_arguments(keyed: Keyed, *more: str | Path, names: Sequence[str] = (FIRST, SECOND), task: str = "t") -> list:
    signers = [f"--signer={name}" for name in names]
    return ["key", "sign", keyed.key, keyed.path("release.txt"), "--task", keyed.path(task), *signers, *more]


def finish(keyed: Keyed, task: Path, *more: str | Path) -> list:
    return ["key", "finish", keyed.key, task, *keyed.as_(OFFICE), *more]


def commit(keyed: Keyed, name: str, count: int = 3) -> Path:
    target = keyed.path(f"{name}.commitments.json")
    done = run("key", "commit", keyed.own(name), "--count", str(count), "--to", target, *keyed.as_(name, "--key"))
    assert done.code == 0, done.err
    return target


def sent(keyed: Keyed, content: bytes = CONTENT, name: str = "message.bin") -> Path:
    """A message to the key, by the sender in examples/."""
    keyed.path("plain").write_bytes(content)
    tool(sys.executable, SENDER, keyed.path("x.pem"), keyed.path("plain"), keyed.path(name))
    keyed.path("plain").unlink()
    return keyed.path(name)
