"""Ask custodians for a task: to generate a key, or to sign. What is asked for is kept, and entered into the journal.

Source: RFC 9591, sec. 5 (a coordinator without secrets chooses signers and message) and 5.1 (commitments made
beforehand are used once).
May import: shares.errors, shares.clock, shares.storage, shares.documents, shares.history, .deal, .folder,
.forms.
Secret: nothing; the author's party key is passed through. Confidential: what is to be signed or opened. Public: the
rest.
Does not: answer. Each custodian's own machine decides, and refuses a commitment that it has used already.
"""

from __future__ import annotations

import hashlib
import os
import secrets
from collections.abc import Mapping, Sequence
from datetime import datetime
from pathlib import Path

from shares import clock
from shares.documents.base import MAX_FILE
from shares.documents.key_event import MAX_CONTENT, Content, Form, TaskAsked
from shares.documents.key_record import KeyRecord
from shares.documents.nonce_batch import NonceBatch
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.task import Joining, NonceCommitments, Signing, Task, TaskParty
from shares.errors import NotEnoughSharesError, ParameterError, StorageError, VerificationError
from shares.history.exchange import TASK_NAME, TaskFolder
from shares.keys.deal import KEY_ID, check_custodians
from shares.keys.folder import KeyFolder
from shares.keys.forms import Signable
from shares.storage import StrPath, read_file

ASKED = "asked"
"""The folder, within a key's, of the tasks that were asked for."""
TASK_SUFFIX = ".json"


def new_joining(
    cards: Sequence[PartyCard],
    need: int,
    *,
    label: str,
    author: OpenPartyKey,
    due: datetime,
    remark: str | None = None,
) -> Task:
    """Return the signed task in which custodians generate a key together.

    Args:
        cards: of the custodians, 2 to 64; their order numbers them from 1.
        need: k, 2 to as many as there are custodians.
        label: what the key is, for people; 1 to 500 characters, public.
        author: who asks; need not be a custodian, and learns no more than anybody.
        due: until when, UTC to the second.
        remark: for the custodians to read.

    Raises:
        ParameterError: need, cards or label are out of range, or it is due in the past.
    """
    check_custodians(need, cards, label)
    return _signed(
        author,
        due,
        key=secrets.token_bytes(KEY_ID),
        epoch=1,
        record=None,
        label=label,
        work=Joining(what="join", need=need),
        parties=tuple(TaskParty(name=card.name, card=card) for card in cards),
        remark=remark,
    )


def new_signing(
    content: bytes,
    record: KeyRecord,
    *,
    signers: Sequence[str],
    author: OpenPartyKey,
    due: datetime,
    form: Form = "plain",
    namespace: str | None = None,
    issuer: bytes | None = None,
    earlier: bytes | None = None,
    commitments: Mapping[str, NonceCommitments] | None = None,
    remark: str | None = None,
) -> Task:
    """Return the signed task in which custodians sign.

    Args:
        content: what is to be signed, or of a certificate or revocation list the body; at most 64 MiB.
        record: the key's.
        signers: names of custodians, as many as are needed or more: every one of them has to sign.
        author: who asks.
        due: until when, UTC to the second.
        form: what becomes of it.
        namespace: of an OpenSSH signature.
        issuer: the certificate above, PEM or DER: for a revocation list, and for any certificate but a root.
        earlier: the revocation list before, where there is one.
        commitments: of each signer, where they were made beforehand; without them a first round makes them.
        remark: for the custodians to read.

    Raises:
        ParameterError: too few signers, one that the record does not name or names twice, content that is too large,
            or it is due in the past.
        SharesError: what every signer would refuse as well; see ``Signable.message``.
    """
    check_signers(record, signers)
    if len(content) > MAX_CONTENT:
        raise ParameterError(
            f"what is to be signed is larger than {MAX_CONTENT >> 20} MiB",
            hint="sign a file that holds its SHA-256",
        )
    Signable(content, form, namespace, issuer, earlier).message(record.public_key.encode())
    chosen = [one for one in record.custodians if one.name in signers]
    return _signed(
        author,
        due,
        key=record.key,
        epoch=record.epoch,
        record=record.fingerprint,
        label=record.label,
        work=Signing(
            what="sign",
            form=form,
            namespace=namespace,
            content=_named(content),
            issuer=None if issuer is None else _named(issuer),
            earlier=None if earlier is None else _named(earlier),
            commitments=tuple(commitments[one.name] for one in chosen) if commitments else (),
        ),
        parties=tuple(TaskParty(name=one.name, card=one.card) for one in chosen),
        remark=remark,
    )


def _named(data: bytes) -> Content:
    return Content(size=len(data), digest=hashlib.sha256(data).digest())


def check_signers(record: KeyRecord, signers: Sequence[str]) -> None:
    """Refuse signers that are no quorum of this key, before anything is done.

    Raises:
        ParameterError: one is named twice, is no custodian, or they are too few.
    """
    for name in signers:
        record.holder(name)
    if len(set(signers)) != len(signers):
        raise ParameterError("a signer is named twice", hint="name each once")
    if len(signers) < record.need:
        raise ParameterError(
            f"{record.need} custodians are needed, and {len(signers)} are named",
            hint=f"they are {', '.join(one.name for one in record.custodians)}",
        )


def _signed(author: OpenPartyKey, due: datetime, **members: object) -> Task:
    created = clock.now()
    if due <= created:
        raise ParameterError("the task is due in the past", hint="give those who are asked some days")
    return Task.signed_by(author, **members, nonce=secrets.token_bytes(32), created=created, due=due)


def ask(
    folder: KeyFolder,
    task: Task,
    path: StrPath,
    content: bytes,
    author: OpenPartyKey,
    *,
    issuer: bytes | None = None,
    earlier: bytes | None = None,
) -> TaskFolder:
    """Make the folder of a task about a key, which is then carried to the custodians.

    The task is kept in the key's folder and entered into its journal first: a commitment that it names is known to be
    used from then on, whatever stops this run.

    Args:
        folder: of the key.
        task: signed by its author.
        path: a new folder.
        content: what is signed or opened.
        author: who signs the entry.
        issuer, earlier: what else the task names; see ``new_signing``.

    Raises:
        ParameterError: these are not what the task names; the task is kept all the same.
        StorageError: the folder holds a task already, or a medium refuses.
    """
    check_free(path)
    kept = folder.add(f"{ASKED}/{task.digest().hex()[:32]}{TASK_SUFFIX}", task.to_file())
    folder.append(asked(task), keys=(author,), documents=[kept])
    return TaskFolder.create(path, task, content=content, issuer=issuer, earlier=earlier, record=folder.record)


def check_free(path: StrPath) -> None:
    """Refuse a folder that holds a task already.

    Raises:
        StorageError: it does.
    """
    where = os.fspath(Path(path) / TASK_NAME)
    if os.path.lexists(where):
        raise StorageError("a task is here already", where=where, hint="each task has a new folder")


def asked(task: Task) -> TaskAsked:
    """Return what a journal says of a task that was asked for."""
    work = task.work
    return TaskAsked(
        what="task-asked",
        task=task.digest(),
        work=work.what,
        parties=task.asked,
        content=None if isinstance(work, Joining) else work.content,
        form=work.form if isinstance(work, Signing) else None,
        remark=task.remark,
    )


def unused(folder: KeyFolder, batches: Sequence[NonceBatch], signers: Sequence[str]) -> dict[str, NonceCommitments]:
    """Return for each signer the first pair of commitments that no task asked for here has named.

    Another party that asks for tasks may have named it: then the signer refuses, and nothing is lost but time.

    Args:
        folder: of the key.
        batches: what the signers have handed out.
        signers: who is to sign.

    Raises:
        VerificationError: a batch is of another key or epoch, or not by the custodian it names.
        NotEnoughSharesError: a signer's commitments are all used, or there is no batch by that signer.
    """
    used = {pair for task in _tasks_asked(folder) for pair in _pairs(task)}
    free: dict[str, NonceCommitments] = {}
    for batch in batches:
        _check_batch(batch, folder.record)
        for one in batch.commitments:
            if batch.signer not in free and (one.hiding.encode(), one.binding.encode()) not in used:
                free[batch.signer] = NonceCommitments(signer=batch.signer, hiding=one.hiding, binding=one.binding)
    without = [name for name in signers if name not in free]
    if without:
        raise NotEnoughSharesError(
            f"no commitment that is still unused is at hand of {', '.join(without)}",
            hint="have them make new ones with `shares key commit`, or leave --batch out: a first round makes them",
        )
    return {name: free[name] for name in signers}


def _check_batch(batch: NonceBatch, record: KeyRecord) -> None:
    if (batch.key, batch.epoch, batch.record) != (record.key, record.epoch, record.fingerprint):
        raise VerificationError(
            f"the commitments of {batch.signer} are for another key or epoch", hint="ask for those of this key"
        )
    holder = record.holder_by(batch.card)
    if holder is None or holder.name != batch.signer:
        raise VerificationError(
            f"the commitments are not by {batch.signer} of this key", hint="ask who sent them, and do not use them"
        )


def _tasks_asked(folder: KeyFolder) -> list[Task]:
    place = folder.path / ASKED
    names = sorted(os.listdir(place)) if place.is_dir() else []
    return [
        Task.parse(read_file(place / name, limit=MAX_FILE), where=os.fspath(place / name))
        for name in names
        if name.endswith(TASK_SUFFIX) and not name.startswith(".")
    ]


def _pairs(task: Task) -> list[tuple[bytes, bytes]]:
    commitments = task.work.commitments if isinstance(task.work, Signing) else ()
    return [(one.hiding.encode(), one.binding.encode()) for one in commitments]
