"""The task: work that several parties do in rounds, on machines that exchange nothing but files.

Source: RFC 9591, sec. 5 and 7 (who does what, and what is to be authenticated); FORMAT_KEYS.md, sec. 23.
May import: shares.clock, shares.documents.base, .group_members, .key_event, .key_record, .members,
.party, .signing.
Secret: nothing; the author's party key is passed through. Confidential: what is signed or opened, for whom. Public: the
rest.
Does not: know what is said in a round; ``task_message`` does. What is signed or opened lies beside it, in a file.
"""

from __future__ import annotations

from datetime import datetime, timedelta
from functools import cached_property
from typing import Annotated, Any, ClassVar, Final, Literal, Self, TypeAlias

from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares import clock
from shares.documents.base import Document, canonical, read_aloud, sha256, write_text
from shares.documents.group_members import GroupPoint
from shares.documents.key_event import MAX_HOLDERS, Content, Form
from shares.documents.key_record import Need
from shares.documents.members import (
    Digest,
    Epoch,
    Fingerprint,
    Name,
    PublicKey,
    Sealed,
    SetId,
    Signature,
    Text,
    Time,
    Version,
)
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed

_AHEAD: Final = timedelta(hours=1)
_FAR: Final = timedelta(days=366)
Cipher: TypeAlias = Literal["aes-256-gcm", "chacha20-poly1305"]


class NonceCommitments(Document):
    """What a signer has committed to beforehand: to the hiding and the binding nonce."""

    signer: Name
    hiding: GroupPoint
    binding: GroupPoint


class Joining(Document):
    """Parties generate a key together, of which k will be needed.

    Attributes:
        need: k.
    """

    what: Literal["join"]
    need: Need


class Signing(Document):
    """A quorum signs content.

    Attributes:
        form: what becomes of it: a signature over the content as it is, a detached OpenSSH signature, or a certificate
            or revocation list whose bytes to be signed the content is.
        namespace: of an OpenSSH signature, what it is for; None for other forms.
        issuer: the certificate under which a certificate or list is to stand; None for a root, and for other forms.
        earlier: the list that a revocation list continues; None where it is the first, and for other forms.
        commitments: of every signer, where they were made beforehand; else none, and a first round makes them.
    """

    what: Literal["sign"]
    form: Form
    namespace: Text | None
    content: Content
    issuer: Content | None
    earlier: Content | None
    commitments: Annotated[tuple[NonceCommitments, ...], Member(max_length=MAX_HOLDERS)]

    @model_validator(mode="after")
    def _has_what_its_form_is_checked_by(self) -> Self:
        problem = None
        if self.form == "revocation-list" and self.issuer is None:
            problem = "a revocation list is checked by its issuer's certificate, and it names none"
        elif self.issuer is not None and self.form not in ("certificate", "revocation-list"):
            problem = "a certificate or revocation list, and nothing else, has an issuer"
        elif self.earlier is not None and self.form != "revocation-list":
            problem = "a revocation list, and nothing else, continues an earlier one"
        if problem:
            raise PydanticCustomError("shares_task", "{reason}", {"reason": problem})
        return self


class Opening(Document):
    """A quorum opens a message that was encrypted to the key, for one receiver, who alone learns what is in it.

    Attributes:
        receiver: a party of this task, custodian or not.
        encapsulated: the sender's ephemeral public key: 32 bytes.
        content: the whole message: encapsulated key, then ciphertext.
        cipher: with which the content is encrypted.
        info, associated: what the sender has bound it to: HPKE's info and aad; None where empty.
    """

    what: Literal["open"]
    receiver: Name
    encapsulated: PublicKey
    content: Content
    cipher: Cipher
    info: Sealed | None
    associated: Sealed | None


Work: TypeAlias = Annotated[Joining | Signing | Opening, Member(discriminator="what")]


class TaskParty(Document):
    """Who takes part."""

    name: Name
    card: PartyCard


class Task(Document):
    """Work, who does it, and until when. ``Task.parse`` refuses one that its author has not signed.

    Attributes:
        key: the id of the key that is used, or will be born.
        record: the key's; None while it is being born.
        parties: who takes part, in the order in which they are numbered from 1.
        nonce: 32 fresh bytes, so that no two tasks are alike.
        author: who asks for it.
    """

    KIND: ClassVar[str] = "task"

    kind: Literal["task"]
    version: Version
    key: SetId
    epoch: Epoch
    record: Fingerprint | None
    label: Text
    work: Work
    parties: Annotated[tuple[TaskParty, ...], Member(min_length=2, max_length=MAX_HOLDERS + 1)]
    remark: Text | None
    nonce: Digest
    created: Time
    due: Time
    author: PartyCard
    signature: Signature

    @model_validator(mode="after")
    def _is_the_authors(self) -> Self:
        problem = self._contradiction()
        if problem:
            raise PydanticCustomError("shares_task", "{reason}", {"reason": problem})
        return self

    def _contradiction(self) -> str | None:
        names = self.names
        work = self.work
        if len({name.casefold() for name in names}) != len(names):
            return "it names one party twice"
        if len({one.card.ed25519 for one in self.parties}) != len(names):
            return "two of its parties have one party key"
        if any(one.name != one.card.name for one in self.parties):
            return "it gives a party another name than its card does"
        if self.due <= self.created:
            return "it is due before it was made"
        if (self.record is None) != isinstance(work, Joining):
            return "a task names the record of the key that it uses, unless the key is being born"
        if isinstance(work, Joining) and work.need > len(names):
            return "it needs more custodians than there are"
        if isinstance(work, Signing):
            if (work.namespace is not None) != (work.form == "openssh"):
                return "an OpenSSH signature, and nothing else, has a namespace"
            if work.commitments and [one.signer for one in work.commitments] != list(names):
                return "it does not hold one pair of commitments for each signer, in their order"
        if isinstance(work, Opening) and work.receiver not in names:
            return "its receiver takes no part"
        if not is_signed(self.author.ed25519, self.signature, self.KIND, self._signed_members()):
            return "its signature does not fit its content"
        return None

    def _signed_members(self) -> dict[str, Any]:
        return self.public(*(set(type(self).model_fields) - {"signature"}))

    @classmethod
    def signed_by(cls, key: OpenPartyKey, /, **members: object) -> Self:
        """Return the task with these members, signed.

        Args:
            key: the author's.
            **members: all others but kind, version, author and signature, valid as they are.
        """
        unsigned: dict[str, Any] = {"kind": cls.KIND, "version": 1, **members, "author": key.card}
        signature = key.sign(cls.KIND, cls.model_construct(**unsigned)._signed_members())
        return cls.model_validate({**unsigned, "signature": signature})

    @property
    def names(self) -> tuple[str, ...]:
        """The parties' names, in their order."""
        return tuple(one.name for one in self.parties)

    @property
    def asked(self) -> tuple[str, ...]:
        """The names of those who are asked for something: all parties but a receiver."""
        receiver = self.work.receiver if isinstance(self.work, Opening) else None
        return tuple(name for name in self.names if name != receiver)

    def party(self, name: str) -> TaskParty | None:
        """Return the party of that name, or None."""
        return next((one for one in self.parties if one.name == name), None)

    def party_by(self, card: PartyCard) -> TaskParty | None:
        """Return the party with this card's signing key, or None."""
        return next((one for one in self.parties if one.card.ed25519 == card.ed25519), None)

    def digest(self) -> bytes:
        """Return what every message of the task names: 32 bytes over all of it, its signature included."""
        return self._digest

    @cached_property
    def _digest(self) -> bytes:
        # Every message is compared with it, again and again, and with 60 parties it takes milliseconds.
        return sha256(b"shares/v1/task-digest", canonical(self.model_dump(mode="json")))

    @property
    def fingerprint(self) -> str:
        """What is read aloud of it, to know by another way that it is the one that was sent."""
        return read_aloud(self.digest())

    def is_late(self, time: datetime) -> bool:
        """Say whether a time lies after the one until which the task was to be done."""
        return time > self.due

    def oddities(self, time: datetime) -> tuple[str, ...]:
        """Return what is unusual about its times, each a sentence, for whoever is asked to take part.

        Args:
            time: now, UTC.
        """
        found = []
        if self.created > time + _AHEAD:
            found.append(
                f"It says that it was made at {clock.to_text(self.created)}, which this clock has yet to reach."
            )
        if self.due > time + _FAR:
            found.append(
                f"It is due {clock.to_text(self.due)}, in more than a year: what you say can be used until then."
            )
        return tuple(found)

    def words(self) -> str:
        """Say what is to be done, by whom and until when, in one line, however many spaces its label has."""
        work = {"join": "generate a key together", "sign": "sign", "open": "open a message"}[self.work.what]
        receives = f" for {self.work.receiver}" if isinstance(self.work, Opening) else ""
        label, due = " ".join(self.label.split()), clock.to_text(self.due)
        return f"{', '.join(self.asked)}: {work}{receives} ({label}), until {due}"

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json"))
