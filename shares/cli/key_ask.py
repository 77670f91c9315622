"""``shares key sign`` and ``open``: what custodians are asked to do with a key; and the options that all asking shares.

Source: none.
May import: shares.errors, shares.clock, shares.storage, shares.custody, shares.documents, shares.history, shares.keys,
shares.cli.
Secret: the author's party key, passed through. Confidential: what is signed. Public: what is printed.
Does not: answer a task; ``shares task next`` does, on each custodian's machine.
"""

from __future__ import annotations

import functools
import shlex
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import timedelta
from typing import Any, TypeVar

import click

from shares import clock
from shares.cli.intervals import interval, later
from shares.cli.keys import opening, signers
from shares.cli.output import filled, json_option, print_result, prose, warn
from shares.cli.passphrases import passphrase_options
from shares.cli.signals import held_signals
from shares.documents.base import MAX_FILE
from shares.documents.key_event import MAX_CONTENT, Form
from shares.documents.members import check_text
from shares.documents.nonce_batch import NonceBatch
from shares.documents.task import Task
from shares.keys.asking import ask, check_free, check_signers, new_signing, unused
from shares.keys.folder import KeyFolder
from shares.keys.forms import Signable
from shares.storage import read_file

Function = TypeVar("Function", bound=Callable[..., Any])

NEXT = (
    "Next: carry the folder {path} to each of them, or send copies and bring the messages together in its folder "
    "messages; each runs `shares task next {path} --mine KEYDIR --key KEY`, until `shares task show {path}` says that "
    "all have spoken. Then:"
)
FINISH = "  shares key finish {folder} {path} --to FILE --sign {signer}"
LONG = timedelta(days=90)
KEEPS = (
    "until {due} or the task's end each of them keeps what they need for it, sealed, in their folder. A shorter --due "
    "leaves that about for less long."
)


@dataclass(frozen=True, slots=True)
class Asked:
    """What the options say that all asking commands share."""

    path: str
    names: tuple[str, ...]
    batches: tuple[str, ...]
    due: timedelta
    remark: str | None
    signer_file: str
    passphrase_files: tuple[str, ...]
    descriptors: tuple[str, ...]
    as_json: bool


def short_text(_: click.Context, parameter: click.Parameter, value: str | None) -> str | None:
    """Read a text that goes into a task, where it is given.

    Raises:
        ParameterError: it is no text of a document.
    """
    return None if value is None else check_text(value, parameter.opts[0])


due_option = click.option(
    "--due", default="7d", show_default=True, metavar="INTERVAL", callback=interval, help="How long there is to answer."
)
remark_option = click.option("--remark", metavar="TEXT", callback=short_text, help="For the custodians to read.")
author_option = click.option(
    "--sign", "signer_file", required=True, metavar="KEY", callback=filled, help="Party key of whoever asks."
)
task_option = click.option(
    "--task", "path", required=True, metavar="TASKDIR", callback=filled, help="New folder for the task."
)
batch_option = click.option(
    "--batch",
    "batches",
    multiple=True,
    metavar="FILE",
    callback=filled,
    help="A signer's commitments, made beforehand with `shares key commit`: one round less.",
)


def asking_options(*options: Callable[[Function], Function]) -> Callable[[Function], Function]:
    """Add the options that all asking commands share, and these; the command gets them as one ``asked``."""

    def added(function: Function) -> Function:
        @functools.wraps(function)
        def packed(**given: object) -> object:
            fields: dict[str, Any] = {"batches": ()}
            fields |= {name: given.pop(name) for name in Asked.__slots__ if name in given}
            return function(**given, asked=Asked(**fields))

        made: Any = packed
        for option in (
            json_option,
            passphrase_options,
            author_option,
            remark_option,
            due_option,
            *reversed(options),
            task_option,
        ):
            made = option(made)
        return made  # type: ignore[no-any-return]

    return added


signer_option = click.option(
    "--signer", "names", multiple=True, required=True, metavar="NAME", callback=filled, help="Who signs; once for each."
)
asked_custodian_option = click.option(
    "--custodian",
    "names",
    multiple=True,
    required=True,
    metavar="NAME",
    callback=filled,
    help="Who is asked; more than are needed make up for one who fails.",
)


def ask_to_sign(folder: KeyFolder, wanted: Signable, asked: Asked, *, words: Sequence[str] = ()) -> None:
    """Ask for a signature as the options say, and print what was asked.

    Args:
        folder: the key's.
        wanted: what is to be signed.
        asked: the options.
        words: about the content, for whoever asks.
    """
    wanted.message(folder.record.public_key.encode())  # What it refuses nobody is asked for.
    check_signers(folder.record, asked.names)
    check_free(asked.path)
    batches = [NonceBatch.parse(read_file(path, limit=MAX_FILE), where=path) for path in asked.batches]
    commitments = unused(folder, batches, asked.names) if batches else None
    with opening((), asked.passphrase_files, asked.descriptors) as at_hand:
        author = signers((asked.signer_file,), at_hand)[0]
        task = new_signing(
            wanted.content,
            folder.record,
            signers=asked.names,
            author=author,
            due=later(clock.now(), asked.due),
            form=wanted.form,
            namespace=wanted.namespace,
            issuer=wanted.issuer,
            earlier=wanted.earlier,
            commitments=commitments,
            remark=asked.remark,
        )
        with held_signals():
            ask(folder, task, asked.path, wanted.content, author, issuer=wanted.issuer, earlier=wanted.earlier)
            print_asked(task, asked.path, words, as_json=asked.as_json, then=finish_line(folder, asked))


def finish_line(folder: KeyFolder, asked: Asked) -> str:
    """Return the command that will put together what comes of a task, to be pasted."""
    words = {"folder": folder.where, "path": asked.path, "signer": asked.signer_file}
    return FINISH.format(**{name: shlex.quote(word) for name, word in words.items()})


def print_asked(
    task: Task, path: str, words: Sequence[str], *, as_json: bool, after: str = NEXT, then: str | None = None
) -> None:
    """Print what was asked, and what comes next.

    Args:
        task: as it was asked for.
        path: its folder.
        words: about its content, for whoever asked.
        as_json: whether a program reads it.
        after: what comes next; ``{path}`` in it is the folder.
        then: a command for the end, on a line of its own.
    """
    if task.due - task.created > LONG and not as_json:
        warn(KEEPS.format(due=clock.to_text(task.due)))
    members = {
        "done": True,
        "task": path,
        "digest": task.digest().hex(),
        "fingerprint": task.fingerprint,
        "work": task.work.what,
        "parties": list(task.asked),
        "due": clock.to_text(task.due),
    }
    lines = [
        *prose(f"Asked: {task.words()}."),
        *words,
        f"Fingerprint of the task, to read aloud: {task.fingerprint}",
        *prose(after.format(path=shlex.quote(path))),
        *([then] if then else []),
    ]
    print_result(members, lines, as_json=as_json)


@click.command("sign", short_help="Ask custodians to sign a file.")
@click.argument("folder", metavar="KEYDIR", callback=filled)
@click.argument("content", metavar="FILE", callback=filled)
@click.option(
    "--openssh",
    "namespace",
    metavar="NAMESPACE",
    callback=short_text,
    help='Make an OpenSSH signature for this namespace, like "file"; else a plain one of 64 bytes.',
)
@asking_options(signer_option, batch_option)
def sign_command(folder: str, content: str, namespace: str | None, asked: Asked) -> None:
    """Ask custodians to sign FILE with the key. What comes of it verifies with ordinary programs, as Ed25519.

    The task goes to a new folder, which is carried or sent to the signers. Every signer named has to sign; each is
    shown what it is, and asked. With --batch they need to be visited once instead of twice.

    \b
    Example:
      shares key sign release-key release.txt --task to-sign --signer north-pier --signer light-house \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    form: Form = "plain" if namespace is None else "openssh"
    ask_to_sign(KeyFolder(folder), Signable(read_file(content, limit=MAX_CONTENT), form, namespace), asked)
