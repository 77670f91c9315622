"""A party's own steps in a task: what it has said, and in one file with it, sealed, what it must know to go on.

Source: FORMAT_KEYS.md, sec. 25.
May import: shares.documents.base, .members, .party, .task, .task_message, .wrapping; shares.memory.
Secret: the state inside. Public: the message.
Does not: release messages; ``history.steps`` does, after the step is on the medium.
"""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import Field as Member

from shares.documents.base import Document, canonical, write_text
from shares.documents.members import Digest, Name, Version
from shares.documents.party import OpenPartyKey
from shares.documents.task_message import MAX_ROUNDS, TaskMessage
from shares.documents.wrapping import Envelope, card_sealer
from shares.memory import Secret


class TaskStep(Envelope):
    """One step: the message of a round, and the state after it, sealed for the party's own card."""

    KIND: ClassVar[str] = "task-step"

    kind: Literal["task-step"]
    version: Version
    task: Digest
    party: Name
    message: TaskMessage

    @classmethod
    def wrap(cls, message: TaskMessage, state: Secret, key: OpenPartyKey) -> Self:
        """Return a step with its state sealed for the card of ``key``."""
        facts: dict[str, Any] = {
            "kind": cls.KIND,
            "version": 1,
            "task": message.task,
            "party": message.sender,
            "message": message,
        }
        wrapping, sealed = card_sealer(key.card.recipient())(state, cls.model_construct(**facts).bound())
        return cls.model_validate({**facts, "wrapping": wrapping, "sealed": sealed, "digest": bytes(32)}).with_digest()

    def bound(self) -> bytes:
        """Return the public bytes that the state is bound to: the message it goes with."""
        return canonical({"kind": self.KIND, "version": 1, "message": self.message.digest().hex()})

    def state(self, key: OpenPartyKey) -> Secret:
        """Return the state after this step.

        Raises:
            WrongKeyError: another party key is needed.
            VerificationError: the file is damaged or was altered.
        """
        return self.content(key.open)


class TaskDone(Document):
    """What is left of a party's steps when a task is over for it: its messages, and no secret.

    Attributes:
        given_up: whether the party has given the task up. Then it says nothing more; else it sends its messages again
            where others still need them.
    """

    KIND: ClassVar[str] = "task-done"

    kind: Literal["task-done"]
    version: Version
    task: Digest
    party: Name
    given_up: bool
    messages: Annotated[tuple[TaskMessage, ...], Member(max_length=MAX_ROUNDS)]

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json"))
