"""``shares key commit``, ``open`` and ``finish``: what needs a party's own folder, before and after others answer.

Source: none.
May import: shares.clock, shares.errors, shares.memory, shares.storage, shares.custody, shares.documents,
shares.history, shares.keys, shares.cli.
Secret: party keys, nonces and key share while they are used; the content of an opened message. Public: what is printed.
Does not: print what was in a message.
"""

from __future__ import annotations

import hashlib
import shlex
from pathlib import Path
from typing import get_args

import click

from shares import clock
from shares.cli.feeding import FeedsCommand
from shares.cli.intervals import later
from shares.cli.key_ask import Asked, asked_custodian_option, asking_options, author_option, finish_line, print_asked
from shares.cli.keys import opening, signers
from shares.cli.output import filled, json_option, print_result, prose, refuse_taken
from shares.cli.passphrases import passphrase_options
from shares.cli.signals import held_signals
from shares.custody.deliver import to_command, to_file
from shares.documents.base import MAX_FILE
from shares.documents.key_event import MAX_CONTENT, Form, NoncesCommitted
from shares.documents.party import OpenPartyKey
from shares.documents.task import Cipher, Opening, Signing
from shares.errors import ParameterError
from shares.history.exchange import CONTENT_NAME, TaskFolder
from shares.keys.asking import ask, check_free
from shares.keys.finishing import begin_opening, enter_once, finished, open_message, signed
from shares.keys.folder import KeyFolder
from shares.keys.nonces import NonceStore
from shares.keys.opening_task import new_opening
from shares.keys.own_share import own_share
from shares.keys.signing import NONCES
from shares.memory import Secret
from shares.storage import read_file, write_new

STANDARD_ERROR = 2
COPIES = (
    "Never copy or restore this folder, nor the disk or virtual machine it lies on: two signatures with one nonce give "
    "the key share away. After a restore throw the folder nonces away, and commit anew."
)
OPEN_NEXT = (
    "Next: carry the folder {path} to each of them, or send copies and bring the messages together in its folder "
    "messages; each runs `shares task next {path} --mine KEYDIR --key KEY`. As soon as enough have, the message is "
    "opened here, where the key that they seal for lies:"
)
NOT_FOR_LONG = (
    "Caution: X25519 does not withstand quantum computers. It is not for what must stay secret for ten years."
)
VERIFY: dict[Form, tuple[str, ...]] = {
    "plain": (
        "Next: verify it as others will, with the public key in a new file PEM:",
        "  shares key show {folder} --pem PEM",
        "  openssl pkeyutl -verify -pubin -inkey PEM -rawin -in {content} -sigfile {target}",
    ),
    "openssh": (
        "Next: verify it as others will, with the public key in a new file PUB, and in ALLOWED who may sign:",
        "  shares key show {folder} --openssh PUB",
        '  echo "{name} $(cat PUB)" > ALLOWED',
        "  ssh-keygen -Y verify -f ALLOWED -I {name} -n {namespace} -s {target} < {content}",
    ),
    "certificate": (
        "Next: look at what it says, and verify it as others will, with the root certificate in ROOT:",
        "  openssl x509 -in {target} -noout -text",
        "  openssl verify -CAfile ROOT {target}",
    ),
    "revocation-list": (
        "Next: look at what it says, verify it with the certificate of the key in ISSUER, and publish it:",
        "  openssl crl -in {target} -noout -text -verify -CAfile ISSUER",
    ),
}
ERASE = (
    "The others keep what they needed for it until they run `shares task next` once more with all messages: bring the "
    "folder {path} around again, or send copies; what is left of the task is erased then, and nothing is asked."
)


@click.command("commit", short_help="Make nonces beforehand, for signatures to come.")
@click.argument("folder", metavar="KEYDIR", callback=filled)
@click.option("--key", "key_file", required=True, metavar="KEY", callback=filled, help="The custodian's party key.")
@click.option("--count", type=int, default=100, show_default=True, metavar="N", help="For how many signatures.")
@click.option("--to", "target", required=True, metavar="FILE", callback=filled, help="New file for the commitments.")
@passphrase_options
@json_option
def commit_command(
    folder: str,
    key_file: str,
    count: int,
    target: str,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Make nonces in a custodian's KEYDIR, and write the commitments to them for whoever asks for signatures.

    A signer who has committed speaks once for a signature instead of twice. The nonces stay here, wrapped for your
    card; each is used once, and the commitments in FILE are public. One more visit, when all have spoken, erases what
    is left of the task in KEYDIR.

    \b
    Example:
      shares key commit north-pier --key north-pier.key.json --to north-pier.commitments.json \\
        --passphrase-file north-pier.passphrase
    """
    refuse_taken(target)
    key_folder = KeyFolder(folder)
    share = key_folder.share()
    with opening((), passphrase_files, descriptors) as at_hand:
        key = signers((key_file,), at_hand)[0]
        value = own_share(share, key_folder.record, share.custodian, key.open)
        store = NonceStore(key_folder.path / NONCES, key_folder.record, share.custodian, key)
        with held_signals():
            batch = store.batch(value, count)
            committed = NoncesCommitted(
                what="nonces-committed", custodian=share.custodian, count=count, batch=batch.digest()
            )
            key_folder.append(committed, keys=(key,))
            write_new(target, batch.to_file(), secret=False)
            members = {"done": True, "custodian": share.custodian, "count": count, "commitments": target}
            lines = [
                f"Made: {count:,} pairs of nonces of {share.custodian}, in {key_folder.path / NONCES}.",
                f"Commitments to them (public): {target}",
                *prose(f"Caution: {COPIES}"),
                *prose("Next: give the commitments to whoever asks for signatures (`shares key sign --batch`)."),
            ]
            print_result(members, lines, as_json=as_json)


@click.command("open", short_help="Ask custodians to open a message for you.")
@click.argument("folder", metavar="KEYDIR", callback=filled)
@click.argument("message", metavar="MESSAGE", callback=filled)
@click.option(
    "--cipher",
    type=click.Choice(get_args(Cipher)),
    default="aes-256-gcm",
    show_default=True,
    help="With which the sender has encrypted it.",
)
@click.option("--info", "info_file", metavar="FILE", callback=filled, help="What the sender gave as info, if anything.")
@click.option("--aad", "aad_file", metavar="FILE", callback=filled, help="The associated data that it was sent with.")
@asking_options(asked_custodian_option)
def open_command(
    folder: str, message: str, cipher: Cipher, info_file: str | None, aad_file: str | None, asked: Asked
) -> None:
    """Ask custodians to open MESSAGE, which was encrypted (HPKE, RFC 9180) to the key, for you alone to read.

    Whoever asks (--sign) is the receiver, and keeps what it needs to read the answers in KEYDIR: a custodian's own
    folder, or for somebody who is no custodian a folder with the key's record. `shares key finish` puts the answers
    together.

    \b
    Example:
      shares key open release-key message.bin --task to-open --custodian north-pier --custodian light-house \\
        --custodian south-pier --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    key_folder, data = KeyFolder(folder), read_file(message, limit=MAX_CONTENT)
    check_free(asked.path)
    info, aad = (b"" if path is None else read_file(path, limit=MAX_FILE) for path in (info_file, aad_file))
    with opening((), asked.passphrase_files, asked.descriptors) as at_hand:
        author = signers((asked.signer_file,), at_hand)[0]
        key_folder.check_own(author.card)
        task = new_opening(
            data,
            key_folder.record,
            custodians=asked.names,
            receiver=author.card,
            author=author,
            due=later(clock.now(), asked.due),
            cipher=cipher,
            info=info,
            associated=aad,
            remark=asked.remark,
        )
        with held_signals():
            begin_opening(key_folder, ask(key_folder, task, asked.path, data, author), author)
            print_asked(
                task,
                asked.path,
                prose(NOT_FOR_LONG),
                as_json=asked.as_json,
                after=OPEN_NEXT,
                then=finish_line(key_folder, asked),
            )


@click.command("finish", cls=FeedsCommand, short_help="Put together what came of a task.")
@click.argument("folder", metavar="KEYDIR", callback=filled)
@click.argument("path", metavar="TASKDIR", callback=filled)
@click.option("--to", "target", metavar="FILE", callback=filled, help="New file for what came of it.")
@author_option
@passphrase_options
@json_option
@click.pass_context
def finish_command(
    ctx: click.Context,
    folder: str,
    path: str,
    target: str | None,
    signer_file: str,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Put together the answers in TASKDIR: a signature, a certificate, a revocation list, or what was in a message.

    KEYDIR is the folder in which the task was asked for. A signature is checked before it is written; whoever has sent
    a wrong part of it is named. What was in a message goes to a new file of mode 0600, or to the standard input of
    COMMAND (run without a shell), and never to the terminal; what COMMAND prints is the output then.

    \b
    Example:
      shares key finish release-key to-sign --to release.txt.sig --sign harbour-office.key.json \\
        --passphrase-file harbour-office.passphrase
    """
    fed: list[str] | None = ctx.meta.get("command")
    if (target is None) == (fed is None) or fed == []:
        raise ParameterError("give exactly one of --to FILE or -- COMMAND", hint="see --help")
    if target == "-":
        raise ParameterError("nothing of it is printed", where="--to -", hint="name a new file, or a command after --")
    if target is not None:
        refuse_taken(target)
    key_folder, task = KeyFolder(folder), TaskFolder(path)
    if fed and not isinstance(task.task.work, Opening):
        raise ParameterError("only what was in a message is fed to a command", hint="give --to FILE")
    members: dict[str, object] = {
        "done": True,
        "task": path,
        "digest": task.task.digest().hex(),
        "fingerprint": task.task.fingerprint,
        "work": task.task.work.what,
        "written": target,
    }
    with opening((), passphrase_files, descriptors) as at_hand:
        author = signers((signer_file,), at_hand)[0]
        with held_signals():
            if isinstance(task.task.work, Signing) and target is not None:
                data = signed(key_folder, task, author)
                write_new(target, data, secret=False)
                entered = enter_once(key_folder, finished(task.task, data), author)
                members |= {"signers": list(task.task.names), "sha256": hashlib.sha256(data).hexdigest()}
                members |= {"again": not entered}
                lines = [
                    f"Signed by {', '.join(task.task.names)}: {key_folder.record.label}, in {target}.",
                    *([] if entered else ["It was put together before: this is the same again."]),
                    "Checked: it verifies with the key's public half.",
                    *_verifying(folder, path, task.task.work, target),
                ]
            else:
                lines = _opened(key_folder, task, author, target, fed, as_json=as_json)
            lines += prose(ERASE.format(path=path))
            print_result(members, lines, as_json=as_json, aside=bool(fed))


def _verifying(folder: str, path: str, work: Signing, target: str) -> list[str]:
    """Return how others verify what was signed: commands to be pasted."""
    words = {
        "folder": folder,
        "content": str(Path(path) / CONTENT_NAME),
        "target": target,
        "name": "the-quorum",
        "namespace": work.namespace or "",
    }
    quoted = {name: shlex.quote(word) for name, word in words.items()}
    return [line.format(**quoted) for line in VERIFY[work.form]]


def _opened(
    folder: KeyFolder,
    task: TaskFolder,
    author: OpenPartyKey,
    target: str | None,
    fed: list[str] | None,
    *,
    as_json: bool,
) -> list[str]:
    if not isinstance(task.task.work, Opening):
        raise ParameterError(
            "a key that is generated jointly is finished by each custodian", hint="with `shares task next`"
        )

    def deliver(plaintext: Secret) -> None:
        if target is not None:
            to_file(plaintext, Path(target))
        elif fed:
            to_command(plaintext, fed, output=STANDARD_ERROR if as_json else None)

    words = open_message(folder, task, author, deliver)
    went = f"written to {target}" if target is not None else f"given to {fed[0]}" if fed else ""
    return [
        *(line for one in words for line in prose(one)),
        f"What was in it was {went}.",
        *prose("Next: this machine has held it in the open. Decide what becomes of it here."),
    ]
