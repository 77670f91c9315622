"""What an opening asks for: the task that an author writes, and what everybody checks before they take part in it.

Source: RFC 9180, sec. 5.1.1 (encapsulated key, then ciphertext); RFC 7748, sec. 4.1 (which keys have a point);
FORMAT_KEYS.md, sec. 28.
May import: shares.clock, shares.errors, shares.documents, shares.group.edwards25519, shares.group.montgomery, .hpke.
Secret: nothing; the author's party key is passed through. Confidential: the task. Public: the rest.
Does not: open anything, or find out what is in a message; nobody can before it is open.
"""

from __future__ import annotations

import hashlib
import secrets
from collections.abc import Sequence
from datetime import datetime
from typing import Final

from shares import clock
from shares.documents.key_event import MAX_CONTENT, Content
from shares.documents.key_record import KeyRecord
from shares.documents.members import check_text
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.task import Cipher, Opening, Task, TaskParty
from shares.errors import ParameterError, VerificationError
from shares.group.edwards25519 import Point
from shares.group.montgomery import lift
from shares.keys.hpke import KEY_SIZE, TAG

MAX_BOUND: Final = 65_536
"""The longest info, and the longest associated data, in bytes: both stand in the task."""


def new_opening(
    message: bytes,
    record: KeyRecord,
    *,
    custodians: Sequence[str],
    receiver: PartyCard,
    author: OpenPartyKey,
    due: datetime,
    cipher: Cipher = "aes-256-gcm",
    info: bytes = b"",
    associated: bytes = b"",
    label: str | None = None,
    remark: str | None = None,
    created: datetime | None = None,
) -> Task:
    """Return the signed task in which custodians open a message for a receiver.

    Args:
        message: encapsulated key, then ciphertext, as a standard sender writes it.
        record: the key's.
        custodians: who is asked; more than are needed makes up for one that fails.
        receiver: who alone learns what is in it. A custodian of the key who receives takes part as one, too.
        author: who asks; mostly the receiver.
        due: until when.
        cipher: the sender's.
        info, associated: what the sender has bound it to; mostly empty.
        label: what it is about; the key's own label by default.
        remark: for the custodians to read.
        created: now by default.

    Raises:
        ParameterError: too few custodians or one the record does not name, a receiver with a custodian's name, a
            message, info or associated data that is too large, a due time that is past, words that no page can show.
        VerificationError: it is no message to an X25519 key, or its encapsulated key is one that must not be served.
    """
    if len(message) > MAX_CONTENT:
        raise ParameterError(
            f"the message is larger than {MAX_CONTENT >> 20} MiB",
            hint="encrypt the file under a key of its own, and send that key to the custodians' key",
        )
    if len(info) > MAX_BOUND or len(associated) > MAX_BOUND:
        raise ParameterError(f"info and associated data have at most {MAX_BOUND:,} bytes each")
    created = clock.now() if created is None else created
    if due <= created:
        raise ParameterError("the task is due before it is made", hint="give a later time")
    for words in (label, remark):
        if words is not None:
            check_text(words)
    _encapsulated(message)
    known = record.holder_by(receiver)
    asked = {record.holder(name).name for name in custodians} | ({known.name} if known else set())
    parties = [TaskParty(name=one.name, card=one.card) for one in record.custodians if one.name in asked]
    if len(asked) < record.need:
        raise ParameterError(
            f"{record.need} custodians are needed, and {len(asked)} are asked", hint="ask more of them"
        )
    if known is None:
        if receiver.name.casefold() in {one.name.casefold() for one in record.custodians}:
            raise ParameterError(f"the receiver has the name of a custodian, {receiver.name}, and another card")
        parties.append(TaskParty(name=receiver.name, card=receiver))
    work = Opening(
        what="open",
        receiver=known.name if known else receiver.name,
        encapsulated=message[:KEY_SIZE],
        content=_content_of(message),
        cipher=cipher,
        info=info or None,
        associated=associated or None,
    )
    return Task.signed_by(
        author,
        key=record.key,
        epoch=record.epoch,
        record=record.fingerprint,
        label=record.label if label is None else label,
        work=work,
        parties=tuple(parties),
        remark=remark,
        nonce=secrets.token_bytes(32),
        created=created,
        due=due,
    )


def work_of(task: Task) -> Opening:
    """Return the task's work.

    Raises:
        ParameterError: it is not to open a message.
    """
    if not isinstance(task.work, Opening):
        raise ParameterError("the task is not to open a message")
    return task.work


def custodians_of(task: Task, record: KeyRecord) -> tuple[str, ...]:
    """Return who gives a partial result, having checked that everybody is who the record says.

    Raises:
        VerificationError: the task is about another key or epoch, asks too few, or somebody takes part who is neither a
            custodian as the record has them nor the receiver.
    """
    if (task.key, task.epoch, task.record) != (record.key, record.epoch, record.fingerprint):
        raise VerificationError(
            "the task is about another key or epoch than the record", hint="use the record that the task names"
        )
    names = {one.name.casefold() for one in record.custodians}
    found = []
    for party in task.parties:
        holder = record.holder_by(party.card)
        if holder is not None and holder.name == party.name:
            found.append(party.name)
        elif holder is not None or party.name != work_of(task).receiver or party.name.casefold() in names:
            raise VerificationError(
                f"{party.name} takes part with another name or card than the record says",
                hint="ask the author who that is, and do not take part before you know",
            )
    if len(found) < record.need:
        raise VerificationError(f"{record.need} custodians are needed, and the task asks {len(found)}")
    return tuple(found)


def point_of(work: Opening, message: bytes | None) -> Point:
    """Return the encapsulated key as a point, having checked that the message is the task's.

    Args:
        work: the opening.
        message: the whole of it; None to look at the encapsulated key alone.

    Raises:
        VerificationError: it is another message, or its encapsulated key is one that must not be served.
    """
    if message is not None and _content_of(message) != work.content:
        raise VerificationError("the message is not the one that the task names", hint="have it sent again")
    if message is not None and _encapsulated(message) != work.encapsulated:
        raise VerificationError("the task names another encapsulated key than its message begins with")
    return _lifted(work.encapsulated)


def _content_of(message: bytes) -> Content:
    return Content(size=len(message), digest=hashlib.sha256(message).digest())


def _encapsulated(message: bytes) -> bytes:
    if len(message) < KEY_SIZE + TAG:
        raise VerificationError(f"no message is shorter than {KEY_SIZE + TAG} bytes: encapsulated key, then ciphertext")
    _lifted(message[:KEY_SIZE])
    return message[:KEY_SIZE]


def _lifted(encapsulated: bytes) -> Point:
    refused = ""
    try:
        return lift(encapsulated)
    except VerificationError as error:
        refused = error.what
    raise VerificationError(
        f"no honest sender made this encapsulated key: {refused}",
        hint="do not take part: partial results for it could tell something of the key shares",
    )
