"""What ``shares task`` tells of a task and of where it stands, for people and for programs.

Source: none.
May import: shares.clock, shares.errors, shares.documents, shares.history, shares.keys, shares.cli.output.
Secret: nothing. Confidential: what is signed or opened. Public: the rest.
Does not: print. What others have written stays on lines that begin as theirs, however many spaces it holds.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Sequence
from typing import Any

from shares import clock
from shares.cli.output import prose
from shares.documents.task import Joining, Opening, Signing, Task
from shares.errors import SharesError
from shares.history.exchange import EARLIER_NAME, ISSUER_NAME, Problem, TaskFolder
from shares.history.rounds import Failure
from shares.history.standing import Standing
from shares.keys.about import about
from shares.keys.description import Description

_WIDTH = 96
ASKED_BY = "Compare the task's fingerprint with whoever asks, by another way than the one the folder came by."
SEND = (
    "Next: send the task's folder, or the new message in it, to the others. Run this again with their messages, until "
    "the task is over for you: then what your folder keeps for it is erased."
)
SEND_TO = (
    "Next: send the task's folder, or the new message in it, to {name}, who puts it together: `shares key finish`."
)
DAMAGED = (
    "Next: that says nothing of the task itself. Do nothing with this copy, and ask whoever made the task for the "
    "whole folder."
)
FAILED = (
    "Next: do not go on with this task. Keep its folder, find out what happened, and begin a new task; without whoever "
    "is named, if somebody is. `shares task drop` then erases what this machine keeps for it."
)
BORN_ELSEWHERE = (
    "If another custodian says that the key is born: have them send their whole folder of the task, and run "
    "`shares task next` on that. With everybody's confirmation in it, the key is born here too. Ask them all before "
    "you give the task up: your key share would be lost."
)


ALL_SAID = {
    "join": "Everything has been said. Next: each party runs `shares task next`, and has what comes of it.",
    "sign": "Everything has been said. Next: whoever asked runs `shares key finish`, and each signer runs "
    "`shares task next` once more, which erases what is left.",
    "open": "Everything has been said. Next: the receiver runs `shares key finish`, and each other custodian runs "
    "`shares task next` once more, which erases what is left.",
}
ENOUGH = "Enough have spoken, if their partial results hold. Next: the receiver runs `shares key finish`."
LATE = "The task is past its due date: nobody can speak in it any more. Next: begin a new task."


def round_words(found: Standing, round: int) -> str:
    """Name a round, by number and by what is said in it."""
    return f"round {round}, {found.names[round]}"


def is_damaged(found: Standing) -> bool:
    """Say whether this copy of a task lacks what the task is about, or has something else in its place."""
    return any(problem.kind == "content" for problem in found.problems)


def state_of(found: Standing) -> str:
    """Say in one word where a task stands."""
    if is_damaged(found):
        return "damaged"
    return "failed" if found.failure else "complete" if found.complete else "waiting"


def task_members(folder: TaskFolder, found: Standing | None) -> dict[str, Any]:
    """Return what programs are told of a task; not what it is about, where its folder could not be read."""
    task = folder.task
    told = _told(folder, found) if found else None
    return {
        "task": task.digest().hex(),
        "fingerprint": task.fingerprint,
        "work": task.work.what,
        "author": task.author.public("name", "fingerprint"),
        "due": clock.to_text(task.due),
        "about": None if told is None else {"kind": told.kind, "lines": told.lines, "cautions": told.cautions},
        "cautions": task.oddities(clock.now()),
    }


def standing_members(found: Standing) -> dict[str, Any]:
    """Return what programs are told of where a task stands."""
    failure = found.failure
    return {
        "round": found.round,
        "rounds": list(found.names),
        "spoken": list(found.spoken),
        "awaited": list(found.awaited),
        "failure": {"by": failure.by, "what": failure.what} if failure else None,
        "maybe_complete_elsewhere": failure is not None and found.ending,
        "problems": [
            {"kind": one.kind, "sender": one.sender, "what": one.what, "stops": one.stops} for one in found.problems
        ],
    }


def task_lines(folder: TaskFolder) -> Iterator[str]:
    """Yield what a task is, and who asks for it."""
    task = folder.task
    yield f"Task: {task.words()}."
    work = task.work
    if isinstance(work, Joining):
        yield f"  A new key, of whose {len(task.parties)} custodians {work.need} will be needed."
    else:
        content = work.content
        yield f"  About: {content.size:,} bytes, SHA-256 {content.digest.hex()}"
    if folder.record is not None:
        yield f"  By the key: {' '.join(folder.record.label.split())}, record {folder.record.fingerprint}"
    if isinstance(work, Signing):
        yield f"  Form: {work.form}{f', namespace {work.namespace}' if work.namespace else ''}"
    if isinstance(work, Opening):
        yield f"  Who will learn what is in it: {work.receiver}"
    if task.remark:
        remark = " ".join(task.remark.split())
        yield from textwrap.wrap(f"Remark: {remark}", _WIDTH, initial_indent="  ", subsequent_indent="    | ")
    yield f"  Asked for by {task.author.name}, card {task.author.fingerprint}"
    yield f"  Fingerprint of the task: {task.fingerprint}"
    yield f"  {ASKED_BY}"
    for caution in task.oddities(clock.now()):
        yield from indented(f"Caution: {caution}")


def about_lines(folder: TaskFolder, found: Standing) -> Iterator[str]:
    """Yield what the content is, as whoever is asked to agree is told."""
    told = _told(folder, found)
    if told is None:
        return
    verb = "opened" if isinstance(folder.task.work, Opening) else "signed"
    yield f"What is {verb} is {told.kind}."
    for line in (*(f"  {one}" for one in told.lines), *(f"Caution: {one}" for one in told.cautions)):
        yield from indented(line)


def indented(line: str) -> list[str]:
    """Break a line of what is about to be done, so that nothing in it begins a line of its own."""
    if line[:1].strip():
        line, first = " ".join(line.split()), "  - "
    else:
        first = "  "  # Of what the content says, each space counts.
    return textwrap.wrap(line, _WIDTH, initial_indent=first, subsequent_indent="    ")


def send_lines(task: Task, found: Standing) -> list[str]:
    """Say to whom what was just said is sent."""
    if found.complete and not isinstance(task.work, Joining):
        name = task.work.receiver if isinstance(task.work, Opening) else task.author.name
        return prose(SEND_TO.format(name=name))
    return prose(SEND)


def standing_lines(folder: TaskFolder, found: Standing) -> Iterator[str]:
    """Yield where a task stands: which rounds are complete, who is awaited, what is wrong."""
    task = folder.task
    for round, name in enumerate(found.names[: found.round]):
        yield f"Round {round}, {name}: {'complete' if found.inbox.of(round) else 'not needed'}."
    if found.failure:
        yield from failure_lines(found)
    elif found.complete:
        yield from prose(ALL_SAID[task.work.what])
    else:
        words = round_words(found, found.round).capitalize()
        yield f"{words}: {', '.join(found.spoken) or 'nobody'} spoke so far."
        yield f"Awaited: {', '.join(found.awaited)}."
        if _suffices(folder, found):
            yield from prose(ENOUGH)
        elif task.is_late(clock.now()):
            yield LATE
    for problem in besides(found):
        yield f"Problem: {problem.what}."


def failure_lines(found: Standing) -> Iterator[str]:
    """Yield why a task has failed, and what next."""
    failure: Failure | None = found.failure
    if failure is None:
        return
    if is_damaged(found):
        yield from prose(f"This copy of the task is damaged: {failure.what}.")
        yield from prose(DAMAGED)
        return
    yield from prose(f"{failure.words()[:1].upper()}{failure.words()[1:]}.")
    yield from prose(FAILED)
    if isinstance(found.inbox.task.work, Joining) and found.ending:
        yield from prose(BORN_ELSEWHERE)


def besides(found: Standing) -> Sequence[Problem]:
    """Return the problems that are not said already, as what the task has failed by."""
    return [problem for problem in found.problems if not found.failure or problem.what != found.failure.what]


def _suffices(folder: TaskFolder, found: Standing) -> bool:
    """Say whether as many have spoken as the key needs, where not all who were asked have to."""
    if not isinstance(folder.task.work, Opening) or folder.record is None:
        return False
    return found.round == len(found.names) - 1 and len(found.spoken) >= folder.record.need


def _told(folder: TaskFolder, found: Standing) -> Description | None:
    issuer, earlier = (_beside(folder, name) for name in (ISSUER_NAME, EARLIER_NAME))
    return about(folder.task, folder.record, found.inbox.content, issuer=issuer, earlier=earlier)


def _beside(folder: TaskFolder, name: str) -> bytes | None:
    """Return a file that the task is checked by; None where it is missing or another one, which the course tells."""
    try:
        return folder.beside(name)
    except SharesError:
        return None
