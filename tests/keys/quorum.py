"""A threshold key of the demo harbour, dealt in memory, tasks for it, and signers who speak one after another."""

from __future__ import annotations

import functools
import hashlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import timedelta
from pathlib import Path
from typing import Any

from parties import card, unlocked
from strategies import CREATED

from shares.documents.key_event import Content
from shares.documents.key_record import Holder, KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.task import NonceCommitments, Signing, Task, TaskParty
from shares.documents.task_message import Body, TaskMessage
from shares.documents.wrapping import card_sealer
from shares.group.edwards25519 import Scalar
from shares.history.rounds import Inbox
from shares.keys.signing import SigningCourse, SigningPart
from shares.memory import Secret
from shares.sharing import verifiable

NAMES = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")
CONTENT = b"release 7 of the tide tables\n"


@dataclass(frozen=True)
class Key:
    """A key, and what its custodians hold."""

    record: KeyRecord
    shares: Mapping[str, KeyShare]
    scalars: Mapping[str, Scalar]

    def index(self, name: str) -> int:
        return self.record.holder(name).index


@functools.cache
def dealt(need: int = 3, names: tuple[str, ...] = NAMES, number: int = 0) -> Key:
    """A key that these parties hold; another one for each number."""
    coefficients = verifiable.polynomial(Scalar.drawn(), need)
    holders = tuple(Holder(name=name, index=x, card=card(name)) for x, name in enumerate(names, 1))
    record = KeyRecord.of(
        key=number.to_bytes(16),
        label="Tide tables",
        created=CREATED,
        origin="dealt",
        custodians=holders,
        commitments=verifiable.feldman(coefficients),
    )
    scalars = {one.name: verifiable.evaluate(coefficients, one.index) for one in holders}
    shares = {
        name: KeyShare.wrap(value, record, name, card_sealer(card(name).recipient())) for name, value in scalars.items()
    }
    return Key(record, shares, scalars)


def named(content: bytes) -> Content:
    """A file as a task names it."""
    return Content(size=len(content), digest=hashlib.sha256(content).digest())


def a_task(key: Key, signers: Sequence[str] = NAMES[:3], content: bytes = CONTENT, **changes: Any) -> Task:
    """A task to sign content; ``changes`` are members of the work or of the task."""
    work = {
        "what": "sign",
        "form": "plain",
        "namespace": None,
        "content": named(content),
        "issuer": None,
        "earlier": None,
        "commitments": (),
    }
    work |= {name: changes.pop(name) for name in tuple(changes) if name in work}
    members: dict[str, Any] = {
        "key": key.record.key,
        "epoch": key.record.epoch,
        "record": key.record.fingerprint,
        "label": key.record.label,
        "work": Signing.model_validate(work),
        "parties": tuple(TaskParty(name=name, card=card(name)) for name in signers),
        "remark": None,
        "nonce": bytes(32),
        "created": CREATED,
        "due": CREATED + timedelta(days=7),
    }
    with unlocked("harbour-office") as author:
        return Task.signed_by(author, **members | changes)


def committed(folder: Path, key: Key, signers: Sequence[str]) -> tuple[NonceCommitments, ...]:
    """A pair of commitments of each signer, made beforehand."""
    from shares.keys.nonces import NonceStore

    made = []
    for name in signers:
        with unlocked(name) as own:
            store = NonceStore(folder / name / "nonces", key.record, name, own)
            ((hiding, binding),) = store.make(key.scalars[name])
        made.append(NonceCommitments(signer=name, hiding=hiding, binding=binding))
    return tuple(made)


def said(task: Task, name: str, round: int, body: Body) -> TaskMessage:
    """What a party says, signed."""
    with unlocked(name) as own:
        return TaskMessage.signed_by(own, task=task.digest(), round=round, sender=name, seen=bytes(32), body=body)


def part(task: Task, name: str, key: Key, own: Any, folder: Path, **beside: bytes) -> SigningPart:
    return SigningPart(task, name, key.record, key.shares[name], own, folder / name, **beside)


def speak(task: Task, name: str, key: Key, folder: Path, round: int, inbox: Inbox, **beside: bytes) -> TaskMessage:
    """What a signer says in a round."""
    with unlocked(name) as own:
        body = part(task, name, key, own, folder, **beside).speak(round, inbox, Secret(0), ()).body
    return said(task, name, round, body)


def played(task: Task, key: Key, folder: Path, content: bytes | None = CONTENT, **beside: bytes) -> Inbox:
    """All rounds of a task, each signer in its own folder."""
    inbox = Inbox(task, (), content)
    for round in range(len(SigningCourse(task, key.record).rounds)):
        messages = {name: speak(task, name, key, folder, round, inbox, **beside) for name in task.names}
        inbox = Inbox(task, (*inbox.rounds, messages), content)
    return inbox
