"""``shares task next | show``."""

from __future__ import annotations

import os
import textwrap
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import click

from shares import clock
from shares.cli.keys import opening
from shares.cli.output import filled, json_option, print_result, prose, say, warn
from shares.cli.passphrases import passphrase_options
from shares.custody.parties import load_key
from shares.documents.task import Joining, Opening, Signing, Task
from shares.documents.task_message import MAX_ROUNDS
from shares.errors import ParameterError, SharesError
from shares.history.exchange import Problem, TaskFolder
from shares.history.next import Standing, Turn, close, finish, speak, standing, turn
from shares.history.rounds import Course, Failure, Outcome, Part
from shares.history.steps import OwnSteps
from shares.keys.parts import course_of, part_of

ASKED_BY = "Compare the task's fingerprint with whoever asks, by another way than the one the folder came by."
SEND = "Next: send the task's folder, or the new message in it, to the others."
FAILED = (
    "Next: do not go on with this task. Keep its folder, find out what happened, and begin a new task; without whoever "
    "is named, if somebody is."
)


@click.group()
def command() -> None:
    """Do your part in a task, and see where it stands.

    \b
    Example:
      shares task show sign-release
    """


@command.command("next", short_help="Do what is yours to do now in a task.")
@click.argument("path", metavar="FOLDER", callback=filled)
@click.option("--mine", required=True, metavar="DIR", callback=filled, help="Your own folder; never the task's.")
@click.option("--key", "key_file", required=True, metavar="KEY", callback=filled, help="Your party key.")
@click.option("--yes", is_flag=True, help="You have read what the task is about, and agree: do not ask.")
@passphrase_options
@json_option
@click.pass_context
def take_next(
    ctx: click.Context,
    path: str,
    mine: str,
    key_file: str,
    yes: bool,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Do what is yours to do now in the task of FOLDER: it says what that is, asks, and writes your messages.

    One call does one thing that it asks about, at most. A run that is stopped is repeated: the same message is sent.

    \b
    Example:
      shares task next sign-release --mine north-pier --key north-pier.key.json --yes \\
        --passphrase-file north-pier.passphrase
    """
    _refuse_within(Path(mine), Path(path))
    folder, key = TaskFolder(path), load_key(key_file)
    own, course = OwnSteps(mine, folder.task, key.card), course_of(folder)
    call = _Call(folder, course, own, yes=yes, as_json=as_json)
    at = turn(folder, course, own)
    if at.doing == "erase":
        close(own)
        at = turn(folder, course, own)
    if at.doing in ("speak", "repeat", "finish"):
        with opening((), passphrase_files, descriptors) as at_hand:
            opened = at_hand.party(key)
            part = part_of(folder, own.name, own.mine, opened)
            for _ in range(2 * MAX_ROUNDS):
                if at.doing == "finish":
                    call.outcome = finish(at, course, part, own, opened)
                    break
                if at.doing not in ("speak", "repeat") or not call.agrees(at, part):
                    break
                call.took.append((at.round, speak(folder, at, course, part, own, opened)))
                at = turn(folder, course, own)
    code = 4 if at.doing == "failed" else 0
    if not as_json:
        _warn_of([*_besides(at.standing), *_left(own)])
    print_result(call.members(at, code), call.lines(at), as_json=as_json)
    ctx.exit(code)


@command.command(short_help="Show where a task stands.")
@click.argument("path", metavar="FOLDER", callback=filled)
@json_option
@click.pass_context
def show(ctx: click.Context, path: str, as_json: bool) -> None:
    """Show what the task of FOLDER is about, who has spoken, who is awaited, and what is wrong. It needs no key.

    \b
    Example:
      shares task show sign-release
    """
    folder = TaskFolder(path)
    found = standing(course_of(folder), folder.read())
    code = 4 if found.failure or any(problem.stops for problem in found.problems) else 0
    members = {"done": code == 0, "exit": code, "state": _state(found), **_task_members(folder.task), **_members(found)}
    print_result(members, [*_task_lines(folder.task), *_standing_lines(folder.task, found)], as_json=as_json)
    ctx.exit(code)


@dataclass
class _Call:
    """What one call of ``next`` does: at most one thing that it asks about."""

    folder: TaskFolder
    course: Course
    own: OwnSteps
    yes: bool
    as_json: bool
    took: list[tuple[int, Path]] = field(default_factory=list)
    outcome: Outcome | None = None
    asked: bool = False

    def agrees(self, at: Turn, part: Part) -> bool:
        """Say what is about to be done and have it agreed to; False where that is for another call."""
        if at.doing == "repeat":
            return True
        asks = part.asks(at.round)
        if asks and self.asked:
            return False
        if not self.as_json:
            # What the task is, whoever is asked must read; else it is said in one line.
            say(_task_lines(self.folder.task) if asks else [f"Task: {self.folder.task.words()}."][len(self.took) :])
            say([f"Now, as {self.own.name}, {_round(at.standing, at.round)}:"])
            for line in part.prospect(at.round, at.standing.before(at.round)):
                say(
                    textwrap.wrap(
                        line, 96, initial_indent="  - " if line[:1].strip() else "  ", subsequent_indent="    "
                    )
                )
        if asks and not self.yes:
            if not os.isatty(0):
                raise ParameterError(
                    "this asks for your agreement, and there is no terminal to ask at",
                    where=os.fspath(self.folder.path),
                    hint="read what `shares task show` says; --yes agrees",
                )
            if not click.confirm("Do you agree?", err=True):
                raise SharesError("you did not agree", hint="nothing was written; ask whoever made the task")
        self.asked = self.asked or asks
        return True

    def state(self, at: Turn) -> str:
        if self.outcome is not None or at.doing in ("done", "failed"):
            return "failed" if at.doing == "failed" else "finished"
        return "spoke" if self.took else "waiting"

    def members(self, at: Turn, code: int) -> dict[str, Any]:
        return {
            "done": code == 0,
            "exit": code,
            "state": self.state(at),
            **_task_members(self.folder.task),
            "party": self.own.name,
            "messages": [os.fspath(path) for _, path in self.took],
            "files": [os.fspath(self.own.mine / file.name) for file in self.outcome.files] if self.outcome else [],
            "again": at.doing == "speak" and bool(self.took),
            **_members(at.standing),
        }

    def lines(self, at: Turn) -> Iterator[str]:
        for round, path in self.took:
            yield f"Said by {self.own.name}, {_round(at.standing, round)}: {path}"
        if self.took:
            yield SEND
        if self.outcome is not None:
            yield from (part for line in self.outcome.words for part in prose(line))
        elif at.doing == "failed":
            yield from _failure_lines(at.standing.failure)
        elif at.doing == "done":
            yield f"The task is over for {self.own.name}; nothing is left to be done."
        elif at.doing == "wait":
            yield f"Awaited, {_round(at.standing, at.round)}: {', '.join(at.standing.awaited)}."
        else:
            yield "It is your turn again, and you are asked again: repeat the command."


def _refuse_within(mine: Path, path: Path) -> None:
    """Refuse a party's own folder that would travel with the task's."""
    if mine.resolve().is_relative_to(path.resolve()):
        raise ParameterError(
            "your own folder lies within the task's, which is given to others",
            where=f"--mine {mine}",
            hint="name a folder of your own: what you keep for the task is sealed, and still nobody else's",
        )


def _left(own: OwnSteps) -> list[Problem]:
    what = "was left by a run that was stopped, or belongs to one at work now"
    return [Problem("leftover", f"{path}: {what}") for path in own.leftovers()]


def _warn_of(problems: Sequence[Problem]) -> None:
    for problem in problems:
        warn(f"{problem.what}.")


def _besides(found: Standing) -> list[Problem]:
    """Return the problems that are not said already, as what the task has failed by."""
    return [problem for problem in found.problems if not found.failure or problem.what != found.failure.what]


def _round(found: Standing, round: int) -> str:
    return f"round {round}, {found.names[round]}"


def _state(found: Standing) -> str:
    return "failed" if found.failure else "complete" if found.complete else "waiting"


def _task_members(task: Task) -> dict[str, Any]:
    return {
        "task": task.digest().hex(),
        "fingerprint": task.fingerprint,
        "work": task.work.what,
        "author": task.author.public("name", "fingerprint"),
        "due": clock.to_text(task.due),
    }


def _members(found: Standing) -> dict[str, Any]:
    failure = found.failure
    return {
        "round": found.round,
        "rounds": list(found.names),
        "spoken": list(found.spoken),
        "awaited": list(found.awaited),
        "failure": {"by": failure.by, "what": failure.what} if failure else None,
        "problems": [
            {"kind": one.kind, "sender": one.sender, "what": one.what, "stops": one.stops} for one in found.problems
        ],
    }


def _task_lines(task: Task) -> Iterator[str]:
    yield f"Task: {task.words()}."
    work = task.work
    if isinstance(work, Joining):
        yield f"  A new key, of whose {len(task.parties)} custodians {work.need} will be needed."
    else:
        content = work.content
        yield f"  About: {content.size:,} bytes, SHA-256 {content.digest.hex()}"
    if isinstance(work, Signing):
        yield f"  Form: {work.form}{f', namespace {work.namespace}' if work.namespace else ''}"
    if isinstance(work, Opening):
        yield f"  Who will learn what is in it: {work.receiver}"
    if task.remark:
        yield f"  Remark: {task.remark}"
    yield f"  Asked for by {task.author.name}, card {task.author.fingerprint}"
    yield f"  Fingerprint of the task: {task.fingerprint}"
    yield f"  {ASKED_BY}"


def _standing_lines(task: Task, found: Standing) -> Iterator[str]:
    for round, name in enumerate(found.names[: found.round]):
        yield f"Round {round}, {name}: complete."
    if found.failure:
        yield from _failure_lines(found.failure)
    elif found.complete:
        yield "Everything has been said. Next: each party runs `shares task next`, and has what comes of it."
    else:
        yield f"{_round(found, found.round).capitalize()}: {', '.join(found.spoken) or 'nobody'} spoke so far."
        yield f"Awaited: {', '.join(found.awaited)}."
        if task.is_late(clock.now()):
            yield "The task is past its due date: nobody can speak in it any more. Next: begin a new task."
    for problem in _besides(found):
        yield f"Problem: {problem.what}."


def _failure_lines(failure: Failure | None) -> Iterator[str]:
    if failure is not None:
        yield from prose(f"The task has failed{f', by {failure.by}' if failure.by else ''}: {failure.what}.")
        yield from prose(FAILED)
