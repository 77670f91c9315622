"""A folder in which a threshold key is at work: the parties' files, the office's key folder, and each custodian's own.

What is at work here in one folder would in earnest be as many machines: two look at nothing but a task's folder.
"""

from __future__ import annotations

import shutil
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from cli.harness import NAMES, Result, run
from parties import party

from shares.custody.parties import write_party
from shares.documents.key_record import KeyRecord

OFFICE, AUDITOR = "harbour-office", "auditor-east"
LABEL = "Harbour release key"


@dataclass(frozen=True)
class Keyed:
    """The folder."""

    folder: Path
    names: tuple[str, ...] = NAMES[:3]
    need: int = 2

    @classmethod
    def make(cls, folder: Path, names: Sequence[str] = NAMES[:3], need: int = 2) -> Keyed:
        """The parties' files, and no key yet."""
        folder.mkdir()
        for name in (*NAMES, OFFICE, AUDITOR):
            write_party(party(name), folder)
            (folder / f"{name}.passphrase").write_text(f"the passphrase of {name}\n")
        (folder / "made").mkdir()
        (folder / "release.txt").write_text("release 7 of the tide tables\n")
        return cls(folder, tuple(names), need)

    def copy(self, folder: Path) -> Keyed:
        """The same elsewhere. Nonces that were made before would be refused there."""
        shutil.copytree(self.folder, folder)
        return Keyed(folder, self.names, self.need)

    @property
    def key(self) -> Path:
        return self.folder / "release-key"

    @property
    def record(self) -> KeyRecord:
        return KeyRecord.parse((self.key / "record.json").read_bytes())

    def own(self, name: str) -> Path:
        """A custodian's folder."""
        return self.folder / "made" / name

    def path(self, name: str) -> Path:
        return self.folder / name

    def as_(self, name: str, option: str = "--sign") -> list[str]:
        """The options by which a party does something."""
        return [f"{option}={self.folder / f'{name}.key.json'}", self.phrase(name)]

    def phrase(self, name: str) -> str:
        return f"--passphrase-file={name}={self.folder / f'{name}.passphrase'}"

    def deal_arguments(self, **changes: object) -> list[str]:
        """The arguments of a dealing that would succeed, with some changed; None leaves one out."""
        given: dict[str, object] = {
            "need": self.need,
            "label": LABEL,
            "key-folder": self.key,
            "deliver": self.folder / "made",
            **changes,
        }
        cards = [f"--custodian={self.folder / f'{name}.card.json'}" for name in self.names]
        options = [f"--{name}={value}" for name, value in given.items() if value is not None]
        return ["key", "deal", *cards, *options, *self.as_(OFFICE)]

    def dealt(self) -> Keyed:
        """This, with a key dealt; it must succeed."""
        done = run(*self.deal_arguments())
        assert done.code == 0, done.err
        return self

    def next(self, task: Path, name: str, *more: str) -> Result:
        """One step of a custodian in a task."""
        own = ["--mine", self.own(name), *self.as_(name, "--key")]
        return run("task", "next", task, *own, "--yes", *more)

    def answer(self, task: Path, *names: str, rounds: int = 3) -> None:
        """Let these custodians speak until nothing is left to be said."""
        for _ in range(rounds):
            for name in names:
                done = self.next(task, name)
                assert done.code == 0, done.err

    def ask(
        self, verb: str, *arguments: str | Path, task: str, names: Sequence[str] = (), more: Sequence[str] = ()
    ) -> Path:
        """Ask for a task as the office; it must succeed."""
        option = "--custodian" if verb == "open" else "--signer"
        chosen = [f"{option}={name}" for name in names or self.names[: self.need]]
        done = run("key", verb, self.key, *arguments, "--task", self.path(task), *chosen, *more, *self.as_(OFFICE))
        assert done.code == 0, done.err
        return self.path(task)

    def finish(self, task: Path, target: str) -> Path:
        """Put together what came of a task; it must succeed."""
        done = run("key", "finish", self.key, task, "--to", self.path(target), *self.as_(OFFICE))
        assert done.code == 0, done.err
        return self.path(target)
