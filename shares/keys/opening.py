"""Opening a message that was encrypted to a threshold key: the task's course, each party's part, and its end.

Anyone encrypts with a standard HPKE sender to the key's X25519 public key. k custodians each compute a partial result
for the message's encapsulated key and send it, sealed, to the receiver, who alone puts them together. What they have
put together is the Diffie-Hellman value of this one message: the key itself is never assembled.

Source: RFC 9180 (HPKE); RFC 7748, sec. 4.1 (the key's image on curve25519); Desmedt, Frankel, CRYPTO '89; Chaum,
Pedersen, CRYPTO '92 (proofs of partial results); Shoup, Gennaro, J. Cryptology 15, 2002 (what a sender who proves
nothing leaves open); FORMAT_KEYS.md, sec. 28.
May import: shares.clock, shares.errors, shares.memory, shares.documents, shares.history.rounds,
shares.group.montgomery, shares.group.edwards25519, .description, .hpke, .opened, .opening_task, .own_share, .partial.
Secret: key shares, partial results, what they give, the plaintext. Public: the message, the task, who is bad.
Does not: carry messages or write the plaintext: ``history`` and the caller do.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence
from pathlib import Path
from typing import Final, NamedTuple

from shares import clock
from shares.documents.event import Event
from shares.documents.key_event import Approved, TaskFinished
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.members import MAX_TEXT
from shares.documents.opened_message import OpenedMessage
from shares.documents.party import OpenPartyKey
from shares.documents.task import Opening, Task
from shares.documents.task_message import Partial, TaskMessage
from shares.errors import NotEnoughSharesError, ParameterError, VerificationError
from shares.group.edwards25519 import Point
from shares.group.montgomery import public_of
from shares.history.rounds import Failure, Inbox, Outcome, Received, Said
from shares.keys.description import in_groups
from shares.keys.hpke import AEADS, KEY_SIZE, key_schedule, shared_secret
from shares.keys.opened import earlier, remember
from shares.keys.opening_task import custodians_of, point_of, work_of
from shares.keys.own_share import own_share
from shares.keys.partial import agreement, checked_result, partial_result, proof_context
from shares.memory import Secret

RECEIVERS_KEY: Final = 0
PARTIAL_RESULTS: Final = 1


class Opened(NamedTuple):
    """What was in the message, and whose partial results were no good though enough others were."""

    plaintext: Secret
    set_aside: tuple[Failure, ...]


class OpeningCourse:
    """The two rounds of an opening, for everybody to follow.

    Args:
        task: an opening.
        record: of the key and epoch that it names.

    Raises:
        VerificationError: the task and the record do not belong together, or its custodians are not the record's.
    """

    rounds: Sequence[str] = ("the receiver's key", "partial results")
    private = True

    def __init__(self, task: Task, record: KeyRecord) -> None:
        self.task = task
        self.record = record
        self.work = work_of(task)
        self.custodians = custodians_of(task, record)

    def speakers(self, round: int, inbox: Inbox) -> Sequence[str]:
        """Return who speaks: the receiver first, then the custodians, a receiver who is one of them included."""
        return (self.work.receiver,) if round == RECEIVERS_KEY else self.custodians

    def failure(self, inbox: Inbox) -> Failure | None:
        """Say whether the message is one that no custodian may serve. Partial results the receiver alone can judge."""
        problem = None
        try:
            point_of(self.work, inbox.content)
        except VerificationError as error:
            problem = error.what
        if problem is None:
            return None
        author = self.task.party_by(self.task.author)
        return Failure(author.name if author else None, problem)

    def holds(self, message: TaskMessage, inbox: Inbox) -> bool:
        """Say whether a partial result is in it. Whether it holds, the receiver alone can tell, and looks at each."""
        return isinstance(message.body, Partial) and message.box_for(self.work.receiver) is not None

    def fault(self, message: TaskMessage, inbox: Inbox) -> Failure | None:
        """Say whether a custodian has given no partial result at all. Of one that was given the receiver alone can."""
        if self.holds(message, inbox):
            return None
        return Failure(message.sender, f"{message.sender} says something else than a partial result for the receiver")

    def spares(self, names: Collection[str]) -> bool:
        """Say whether without these custodians there are still as many as are needed."""
        return len(set(self.custodians) - set(names)) >= self.record.need


class OpeningPart:
    """What one party does in an opening.

    Args:
        task: an opening.
        me: the party's name in it.
        record: of the key and epoch that the task names.
        share: the custodian's key share; None for a receiver who is no custodian.
        key: the party's own.
        folder: the party's own, where what was served is remembered.

    Raises:
        VerificationError: as for ``OpeningCourse``.
    """

    def __init__(
        self,
        task: Task,
        me: str,
        record: KeyRecord,
        share: KeyShare | None,
        key: OpenPartyKey,
        folder: Path,
    ) -> None:
        self._course = OpeningCourse(task, record)
        self._work = self._course.work
        self._me = me
        self._share = share
        self._key = key
        self._folder = folder

    def prospect(self, round: int, inbox: Inbox) -> Sequence[str]:
        """Return what the party is about to do. A message whose encapsulated key was served for another is refused.

        Raises:
            VerificationError: the message must not be served.
        """
        if round == RECEIVERS_KEY:
            return ("You make a fresh key for this task alone: the custodians seal their partial results for it.",)
        task, work, record = self._course.task, self._work, self._course.record
        point_of(work, _message(inbox))
        known = earlier(self._folder, self._served())
        lines = [
            f"You help to open a message of {work.content.size:,} bytes, encrypted to the key {record.label}.",
            f"Its SHA-256 is {in_groups(work.content.digest)}; its encapsulated key is {in_groups(work.encapsulated)}.",
            self._receiver_words(),
            f"{task.author.name} ({task.author.fingerprint}) asks for it. Nobody sees what is in it before it is open.",
            *(f"Caution: {caution}" for caution in cautions_of(work)),
        ]
        if known is not None and known.task != task.digest():  # A run of this task that was stopped is no news.
            when = clock.to_text(known.time)
            lines.insert(3, f"You have helped to open this very message before, for {known.receiver}, at {when}.")
        return lines

    def _receiver_words(self) -> str:
        task, work = self._course.task, self._work
        party = task.party(work.receiver)
        if work.receiver == self._me:
            return "You are the receiver, who alone learns what is in it."
        if work.receiver in self._course.custodians or party is None:
            return f"The receiver, who alone learns what is in it, is {work.receiver}, a custodian of this key."
        return (
            f"The receiver, who alone learns what is in it, is {work.receiver}, no custodian of this key, with the "
            f"card {party.card.fingerprint}: have it read to you by a person you know."
        )

    def asks(self, round: int) -> bool:
        """Say whether the party must agree: a custodian, to the opening."""
        return round == PARTIAL_RESULTS

    def event(self, round: int, inbox: Inbox) -> Event | None:
        """Return the custodian's agreement."""
        if round == RECEIVERS_KEY:
            return None
        return Approved(
            what="approved",
            task=self._course.task.digest(),
            work="open",
            custodian=self._me,
            content=self._work.content,
            summary=f"a message of {self._work.content.size:,} bytes, opened for {self._work.receiver}",
        )

    def speak(self, round: int, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Said:
        """Return the custodian's partial result, sealed for the receiver; what is served is on the medium before.

        Raises:
            VerificationError: the message must not be served, or the key share is not the one the record asks for.
            ParameterError: a custodian speaks, in round 1, and has a key share.
            StorageError: the custodian's memory cannot be read or written.
        """
        if round != PARTIAL_RESULTS or self._me not in self._course.custodians or self._share is None:
            raise ParameterError("a custodian with a key share, and nobody else, gives a partial result")
        task, record = self._course.task, self._course.record
        encapsulated = point_of(self._work, _message(inbox))
        share = own_share(self._share, record, self._me, self._key.open)
        remember(self._folder, self._served())
        partial = partial_result(share, encapsulated, proof_context(task, record, record.holder(self._me).index))
        return Said(body=Partial(what="partial"), state=Secret(0), sealed={self._work.receiver: partial})

    def kept(self, round: int, inbox: Inbox) -> None:
        """Nothing has to be erased before a message is released."""

    def finish(self, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Outcome:
        """Return a custodian's end of it. The receiver's state is kept until ``combine`` has made use of it."""
        task, receiver = self._course.task, self._work.receiver
        if self._me == receiver:
            words = "All partial results are here. `shares key finish` puts them together and takes the message out."
            return Outcome(files=(), event=None, words=(words,), ends=False)
        words = f"Your part is done. {receiver} can open the message; you have learnt nothing of what is in it."
        return Outcome(files=(), event=_finished(task, None), words=(words,))

    def _served(self) -> OpenedMessage:
        return OpenedMessage(
            kind="opened-message",
            version=1,
            key=self._course.record.key,
            encapsulated=self._work.encapsulated,
            content=self._work.content,
            task=self._course.task.digest(),
            receiver=self._work.receiver,
            time=clock.now(),
        )


def cautions_of(work: Opening) -> tuple[str, ...]:
    """Return what a custodian is to think of before they help to open any message."""
    return (
        f"You open every message with this encapsulated key, not this one alone, and {work.receiver} learns what is in "
        "them.",
        "Who has seen another message to this key can make one out of it that opens both, and you cannot see that. "
        "Agree only for a receiver who may read whatever was encrypted to this key.",
        "X25519 does not withstand quantum computers. It is not for secrets that must last ten years.",
    )


def combine(
    task: Task,
    record: KeyRecord,
    inbox: Inbox,
    received: Sequence[Received],
    *,
    besides: Sequence[Received] = (),
) -> Opened:
    """Return what is in the message, as soon as k partial results hold. The receiver wipes it.

    Args:
        task: an opening.
        record: of the key and epoch that it names.
        inbox: with the message itself; the round of partial results need not be complete.
        received: what was sealed for the receiver, opened, by round.
        besides: what custodians who have given several partial results have sealed besides. One that holds counts.

    Raises:
        NotEnoughSharesError: fewer than k hold; those that do not are named, and so is who is awaited.
        VerificationError: k hold, and yet the message does not open: it was changed, or bound to something else.
    """
    work, message = work_of(task), _message(inbox)
    encapsulated = point_of(work, message)
    said = inbox.of(PARTIAL_RESULTS)
    partials = received[PARTIAL_RESULTS] if len(received) > PARTIAL_RESULTS else {}
    results: dict[int, Point] = {}
    bad: list[Failure] = []
    custodians = custodians_of(task, record)
    for name in custodians:
        if name not in said:
            continue
        index = record.holder(name).index
        problem = "nothing that opens was sealed for the receiver"
        for partial in (partials.get(name), *(one.get(name) for one in besides)):
            if partial is None or not isinstance(said[name].body, Partial):
                continue
            try:
                context = proof_context(task, record, index)
                results[index] = checked_result(partial, record, index, encapsulated, context)
                break
            except VerificationError as error:
                problem = error.what
        if index in results:
            continue
        bad.append(Failure(name, problem))
    if len(results) < record.need:
        named = "".join(f"; that of {one.by} does not: {one.what}" for one in bad)
        awaited = ", ".join(name for name in custodians if name not in said)
        raise NotEnoughSharesError(
            f"{record.need} partial results that hold are needed, and {len(results)} do{named}",
            hint=f"awaited: {awaited}" if awaited else "begin a new task, and ask other custodians as well",
        )
    enough = dict(list(results.items())[: record.need])
    return Opened(_decrypted(work, record, message, agreement(enough)), tuple(bad))


def outcome(task: Task, opened: Opened) -> Outcome:
    """Return what the receiver's journal and the receiver are told, once the plaintext is where it belongs.

    Args:
        task: an opening.
        opened: what came of it; of the plaintext, its length alone is told.
    """
    words = [f"The message is open: {len(opened.plaintext):,} bytes. The key was not assembled for it."]
    words += [f"Set aside is the partial result of {one.by}: {one.what}." for one in opened.set_aside]
    names = ", ".join(str(one.by) for one in opened.set_aside)
    return Outcome(files=(), event=_finished(task, f"set aside: {names}"[:MAX_TEXT] if names else None), words=words)


def _finished(task: Task, remark: str | None) -> TaskFinished:
    return TaskFinished(what="task-finished", task=task.digest(), work="open", result=None, remark=remark)


def _decrypted(work: Opening, record: KeyRecord, message: bytes, dh: Secret) -> Secret:
    """Return the plaintext, by RFC 9180, sec. 5.1.1 and 5.2, from what the custodians have agreed on."""
    with (
        dh,
        shared_secret(dh, work.encapsulated, public_of(record.public_key)) as shared,
        key_schedule(shared, work.info or b"", AEADS[work.cipher]) as context,
    ):
        try:
            return context.open(memoryview(message)[KEY_SIZE:], work.associated or b"")
        except VerificationError:
            pass
    raise VerificationError(
        f"the key is right, for {record.need} partial results hold; and yet the message does not open",
        hint="it is damaged, is to another key, or was bound to other info or associated data or encrypted with the "
        "other cipher: ask the sender, and begin a new task with what they say",
    )


def _message(inbox: Inbox) -> bytes:
    if inbox.content is None:
        raise VerificationError("the message that is to be opened is not beside the task", hint="have it sent again")
    return inbox.content
