"""A signer's folder on disk, two tasks that name one nonce, and the command by which the signer takes a step."""

from __future__ import annotations

import json
from collections.abc import Sequence
from datetime import timedelta
from pathlib import Path

from keys.quorum import NAMES, a_task, committed, dealt
from parties import party, passphrase

from shares import clock
from shares.history.exchange import TaskFolder

ME, SIGNERS = NAMES[0], NAMES[:2]
ONE, OTHER = b"release 7 of the tide tables\n", b"release 8 of the tide tables\n"


def prepared(folder: Path) -> Sequence[str | Path]:
    """A signer's folder and two tasks that name one nonce; the arguments of the signer's step in the first."""
    key = dealt(2, SIGNERS)
    mine = folder / ME
    mine.mkdir(parents=True)
    commitments = committed(folder, key, SIGNERS)
    now = clock.now()
    for name, content in (("one", ONE), ("other", OTHER)):
        task = a_task(key, SIGNERS, content, commitments=commitments, created=now, due=now + timedelta(days=7))
        TaskFolder.create(folder / name, task, content=content, record=key.record)
    (mine / "share.json").write_bytes(key.shares[ME].to_file())
    (folder / "key.json").write_bytes(party(ME).to_file())
    with passphrase(ME) as words, words.view() as view:
        (folder / "passphrase").write_bytes(view)
    return step(folder, "one")


def step(folder: Path, task: str) -> Sequence[str | Path]:
    own = ("--mine", folder / ME, "--key", folder / "key.json", "--passphrase-file", folder / "passphrase")
    return ("task", "next", folder / task, *own, "--yes", "--json")


def given(folder: Path) -> set[str]:
    """Every signature share that is to be found in any file."""
    found = set()
    for path in folder.rglob("*.json"):
        members = json.loads(path.read_text())
        bodies = [members, members.get("message"), *members.get("messages", ())]
        found |= {
            one["body"]["share"] for one in bodies if one and one.get("body", {}).get("what") == "signature-share"
        }
    return found
