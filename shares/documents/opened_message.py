"""The opened message: what a custodian remembers of a message in whose opening they took part.

Source: FORMAT_KEYS.md, sec. 28.
May import: shares.documents.base, .key_event, .members.
Secret: nothing. Confidential: what was opened, for whom. Public: the rest.
Does not: hold the message, or what was in it.
"""

from __future__ import annotations

from typing import ClassVar, Literal

from shares.documents.base import Document, write_text
from shares.documents.key_event import Content
from shares.documents.members import Digest, Name, PublicKey, SetId, Time, Version


class OpenedMessage(Document):
    """One encapsulated key that this custodian has served, and the only message that it was served for.

    Attributes:
        key: the threshold key's id. Its epochs have one private key: what was served in one was served in all.
        encapsulated: the sender's ephemeral public key.
        content: the whole message.
        task: the task in which this custodian first took part in opening it.
        receiver: for whom.
    """

    KIND: ClassVar[str] = "opened-message"

    kind: Literal["opened-message"]
    version: Version
    key: SetId
    encapsulated: PublicKey
    content: Content
    task: Digest
    receiver: Name
    time: Time

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json"))
