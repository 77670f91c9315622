"""``shares task next | show | drop``."""

from __future__ import annotations

import os
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import click

from shares import clock
from shares.cli.keys import opening
from shares.cli.output import filled, json_option, print_result, prose, say, warn
from shares.cli.passphrases import passphrase_options
from shares.cli.task_words import (
    LATE,
    about_lines,
    besides,
    failure_lines,
    indented,
    round_words,
    send_lines,
    standing_lines,
    standing_members,
    state_of,
    task_lines,
    task_members,
)
from shares.custody.parties import load_key
from shares.documents.task import Joining
from shares.documents.task_message import MAX_ROUNDS
from shares.errors import ParameterError, SharesError
from shares.history.exchange import Problem, TaskFolder
from shares.history.next import Turn, check_time, close, finish, speak, turn
from shares.history.rounds import Course, Outcome, Part
from shares.history.standing import Standing, standing
from shares.history.steps import OwnSteps
from shares.keys.dropping import costs, give_up, spared
from shares.keys.parts import course_of, part_of


@click.group()
def command() -> None:
    """Do your part in a task, and see where it stands.

    \b
    Example:
      shares task show sign-release
    """


@command.command("next", short_help="Do what is yours to do now in a task.")
@click.argument("path", metavar="TASKDIR", callback=filled)
@click.option("--mine", required=True, metavar="KEYDIR", callback=filled, help="Your own folder; never the task's.")
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
    """Do what is yours to do now in the task of TASKDIR: it says what that is, asks, and writes your messages.

    KEYDIR is your own folder of the key, or for a key that is being born a new one. You are asked before you agree to
    something; what commits you to nothing is done unasked, and so one call may speak in several rounds, but asks once
    at most. A run that is stopped is repeated: the same message is sent.

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
        _warn_of([*besides(at.standing), *_left(own)])
    print_result(call.members(at, code), call.lines(at), as_json=as_json)
    ctx.exit(code)


@command.command(short_help="Show where a task stands.")
@click.argument("path", metavar="TASKDIR", callback=filled)
@json_option
@click.pass_context
def show(ctx: click.Context, path: str, as_json: bool) -> None:
    """Show what the task of TASKDIR is about, who has spoken, who is awaited, and what is wrong. It needs no key.

    \b
    Example:
      shares task show sign-release
    """
    folder = TaskFolder(path)
    found = standing(course_of(folder), folder.read())
    code = 4 if found.failure else 0
    members = {
        "done": code == 0,
        "exit": code,
        "state": state_of(found),
        **task_members(folder, found),
        **standing_members(found),
    }
    lines = [*task_lines(folder), *about_lines(folder, found), *standing_lines(folder, found)]
    print_result(members, lines, as_json=as_json)
    ctx.exit(code)


@command.command(short_help="Give a task up, and erase what you keep for it.")
@click.argument("path", metavar="TASKDIR", callback=filled)
@click.option("--mine", required=True, metavar="KEYDIR", callback=filled, help="Your own folder; never the task's.")
@click.option("--key", "key_file", required=True, metavar="KEY", callback=filled, help="Your party key.")
@click.option("--yes", is_flag=True, help="You give the task up for good: do not ask.")
@passphrase_options
@json_option
def drop(
    path: str,
    mine: str,
    key_file: str,
    yes: bool,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Give up the task of TASKDIR, which has failed or is not wanted: what you keep for it is erased.

    Nonces that it has used are erased too; those that it only names stay. What you have said stays, and you say nothing
    more in it. Your journal tells of it.

    \b
    Example:
      shares task drop sign-release --mine north-pier --key north-pier.key.json --yes \\
        --passphrase-file north-pier.passphrase
    """
    _refuse_within(Path(mine), Path(path))
    folder, key = TaskFolder(path), load_key(key_file)
    own, found = OwnSteps(mine, folder.task, key.card), _standing_if_told(folder)
    if found and found.complete and isinstance(folder.task.work, Joining) and own.done() is None:
        raise ParameterError(
            "the key is born, and what this would erase is your key share",
            where=path,
            hint="`shares task next` writes it into your folder",
        )
    caution, stays = costs(own), spared(own)
    if not yes:
        say(task_lines(folder))
        say(prose(stays) if stays else [])
    if caution:
        say(prose(f"Caution: {caution}"))
    if not yes:
        if not os.isatty(0):
            raise ParameterError("this cannot be undone, and there is no terminal to ask at", hint="--yes agrees")
        if not click.confirm("Give it up for good?", err=True):
            raise SharesError("you did not agree", hint="nothing was erased")
    with opening((), passphrase_files, descriptors) as at_hand:
        given_up = give_up(own, at_hand.party(key), folder.record, found.failure if found else None)
    state = "dropped" if given_up else "finished"
    members = {
        "done": True,
        "exit": 0,
        "state": state,
        **task_members(folder, found),
        "party": own.name,
        "nonces_stay": stays is not None,
    }
    lines = [
        f"{'Given up by' if given_up else 'It had come to its end for'} {own.name}: {folder.task.words()}.",
        *prose("What was kept for it is erased, as far as the medium lets us; what you have said is kept."),
        *(prose(stays) if stays else []),
    ]
    if given_up:
        lines += prose("Next: tell the others, who may be waiting for you.")
    print_result(members, lines, as_json=as_json)


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
        check_time(self.folder.task)  # Nobody is asked about what can no longer be said.
        # Whoever is asked must have read what about, whatever is printed on standard output.
        if not self.as_json or (asks and not self.yes and os.isatty(0)):
            say(task_lines(self.folder) if asks else [f"Task: {self.folder.task.words()}."][len(self.took) :])
            say([f"Now, as {self.own.name}, {round_words(at.standing, at.round)}:"])
            for line in part.prospect(at.round, at.standing.before(at.round)):
                say(indented(line))
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

    @property
    def given_up(self) -> bool:
        done = self.own.done()
        return done is not None and done.given_up

    def state(self, at: Turn) -> str:
        if self.outcome is not None or at.doing in ("done", "failed"):
            return "failed" if at.doing == "failed" else "dropped" if self.given_up else "finished"
        return "spoke" if self.took else "waiting"

    def members(self, at: Turn, code: int) -> dict[str, Any]:
        return {
            "done": code == 0,
            "exit": code,
            "state": self.state(at),
            **task_members(self.folder, at.standing),
            "party": self.own.name,
            "messages": [os.fspath(path) for _, path in self.took],
            "files": [os.fspath(self.own.mine / file.name) for file in self.outcome.files] if self.outcome else [],
            "again": at.doing == "speak" and bool(self.took),
            **standing_members(at.standing),
        }

    def lines(self, at: Turn) -> Iterator[str]:
        for round, path in self.took:
            yield f"Said by {self.own.name}, {round_words(at.standing, round)}: {path}"
        if self.took:
            yield from send_lines(self.folder.task, at.standing)
        if self.outcome is not None:
            yield from (part for line in self.outcome.words for part in prose(line))
        elif at.doing == "failed":
            yield from failure_lines(at.standing)
        elif at.doing == "done" and self.given_up:
            yield f"The task is over for {self.own.name}, who has given it up and says nothing more in it."
            yield from prose("Where giving it up was stopped, run `shares task drop` again: it erases what is left.")
        elif at.doing == "done":
            yield f"The task is over for {self.own.name}; nothing is left to be done."
        elif at.doing == "wait":
            yield f"Awaited, {round_words(at.standing, at.round)}: {', '.join(at.standing.awaited)}."
            if self.folder.task.is_late(clock.now()):
                yield LATE
        else:
            yield "It is your turn again, and you are asked again: repeat the command."


def _standing_if_told(folder: TaskFolder) -> Standing | None:
    """Return where a task stands; None where too much of its folder is missing, which keeps nobody from giving it up.

    Of a key that is being born it must be told: it may be born, and then a key share would be lost.
    """
    try:
        return standing(course_of(folder), folder.read())
    except SharesError:
        if isinstance(folder.task.work, Joining):
            raise
    return None


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
