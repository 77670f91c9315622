"""The events of a threshold key's life: how it was born, who has approved what, and what came of tasks.

Source: CA/Browser Forum TLS Baseline Requirements, sec. 5.4.1 (uses of a key are logged); the names of events are ours;
FORMAT_KEYS.md, sec. 26.
May import: shares.documents.base, .members.
Secret: nothing. Confidential: what was signed and opened. Public: the rest.
Does not: judge events.
"""

from __future__ import annotations

from typing import Annotated, Literal, TypeAlias

from pydantic import Field as Member

from shares.documents.base import Document
from shares.documents.members import Digest, Epoch, Fingerprint, Name, SetId, Text

MAX_HOLDERS = 64
"""The most custodians of one key."""
MAX_CONTENT = 64 << 20
"""The largest content that a task is about, in bytes: 64 MiB."""
TaskKind: TypeAlias = Literal["join", "sign", "open"]
Origin: TypeAlias = Literal["dealt", "joint"]
Form: TypeAlias = Literal["plain", "openssh", "certificate", "revocation-list"]


class Content(Document):
    """What a task is about, or a file beside it: its size in bytes, and its SHA-256."""

    size: Annotated[int, Member(ge=0, le=MAX_CONTENT)]
    digest: Digest


class KeyBorn(Document):
    """A threshold key came to be: dealt by one machine that held it, or generated jointly."""

    what: Literal["key-born"]
    key: SetId
    epoch: Epoch
    record: Fingerprint
    origin: Origin
    remark: Text | None = None


class NoncesCommitted(Document):
    """A custodian made nonces beforehand and handed out the commitments to them."""

    what: Literal["nonces-committed"]
    custodian: Name
    count: Annotated[int, Member(ge=1)]
    batch: Digest


class TaskAsked(Document):
    """Custodians were asked for a task."""

    what: Literal["task-asked"]
    task: Digest
    work: TaskKind
    parties: Annotated[tuple[Name, ...], Member(max_length=MAX_HOLDERS + 1)]
    content: Content | None
    form: Form | None
    remark: Text | None = None


class Approved(Document):
    """A custodian has agreed to their part in a task, having been told what it is about.

    Attributes:
        summary: what the custodian was told that it is, in one line.
    """

    what: Literal["approved"]
    task: Digest
    work: TaskKind
    custodian: Name
    content: Content | None
    summary: Text


class TaskFinished(Document):
    """A task came to its end; ``result`` is the SHA-256 of what came of it, where that is public."""

    what: Literal["task-finished"]
    task: Digest
    work: TaskKind
    result: Digest | None
    remark: Text | None = None


class TaskFailed(Document):
    """A task came to nothing, or was given up.

    Attributes:
        by: whose doing it is, as far as messages prove it; None where they do not.
        reason: what was wrong.
    """

    what: Literal["task-failed"]
    task: Digest
    work: TaskKind
    by: Name | None
    reason: Text


KeyEvent: TypeAlias = KeyBorn | NoncesCommitted | TaskAsked | Approved | TaskFinished | TaskFailed
