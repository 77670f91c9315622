"""Signing by a quorum: the task's course, each signer's part, and the signature in the form that was asked for.

Source: RFC 9591, sec. 5 (two rounds; the first may be over beforehand), 5.4 (who misbehaves is named) and 7 (what a
    signer checks, and that it agrees to each message); FORMAT_KEYS.md, sec. 23 and 24.
May import: shares.errors, shares.memory, shares.documents, shares.history.rounds, shares.group.edwards25519,
shares.sharing.verifiable, .description, .forms, .frost, .nonces, .own_share.
Secret: the key share and the nonces, while a share of the signature is worked out. Public: all else that is said.
Confidential: what is signed.
Does not: carry messages or write files: ``history`` and the caller do.
"""

from __future__ import annotations

import hashlib
from collections.abc import Collection, Sequence
from pathlib import Path
from typing import Final

from shares.documents.base import sha256
from shares.documents.event import Event
from shares.documents.key_event import Approved, TaskFinished
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.party import OpenPartyKey
from shares.documents.task import Task
from shares.documents.task_message import Commitment, SignatureShare, TaskMessage
from shares.errors import SharesError, VerificationError
from shares.group.edwards25519 import Point
from shares.history.rounds import Failure, Inbox, Outcome, Received, Said
from shares.keys import frost
from shares.keys.description import Description
from shares.keys.forms import Signable, signable, work_of
from shares.keys.nonces import NonceStore
from shares.keys.own_share import own_share
from shares.memory import Secret
from shares.sharing.verifiable import public_share

COMMITMENTS: Final = "commitments"
SHARES: Final = "signature shares"
NONCES: Final = "nonces"
"""The folder, within a signer's own, where the nonces lie."""


class SigningCourse:
    """The rounds of a signature, for everybody to follow: commitments unless they were made beforehand, then shares.

    Args:
        task: to sign.
        record: of the key and epoch that it names.
        issuer, earlier: the files of these names beside the task, where it names them.

    Raises:
        ParameterError: the task is not to sign.
        VerificationError: task and record do not belong together, or its parties are not the record's custodians.
    """

    private = False

    def __init__(
        self, task: Task, record: KeyRecord, *, issuer: bytes | None = None, earlier: bytes | None = None
    ) -> None:
        self.task = task
        self.record = record
        self._beside = (issuer, earlier)
        self._found: tuple[bytes, bytes] | None = None
        self.work = work_of(task)
        check_signers(task, record)
        self.rounds: Sequence[str] = (SHARES,) if self.work.commitments else (COMMITMENTS, SHARES)

    def speakers(self, round: int, inbox: Inbox) -> Sequence[str]:
        """Return who speaks: every signer, in every round. A signature is made by all whom the task names."""
        return self.task.names

    def failure(self, inbox: Inbox) -> Failure | None:
        """Say whether the content is not the task's, or whose share does not hold, once all shares are there."""
        author = self.task.party_by(self.task.author)
        try:
            self.message(inbox)
        except SharesError as error:
            return Failure(author.name if author else None, error.what)
        for number, about in enumerate(self.rounds):
            wanted = Commitment if about == COMMITMENTS else SignatureShare
            for name, message in inbox.of(number).items():
                if not isinstance(message.body, wanted):
                    return _misplaced(name, about)
        if len(inbox.of(self.last)) < len(self.task.names):
            return None
        signed, wrong = self._aggregated(inbox)
        if signed is not None:
            return None
        return Failure(wrong[0] if wrong else None, _misbehaved(wrong))

    def holds(self, message: TaskMessage, inbox: Inbox) -> bool:
        """Say whether a share of the signature verifies (RFC 9591, sec. 5.4); of one signer, one number does."""
        body, index = message.body, self.record.holder(message.sender).index
        public = public_share(self.record.commitments, index)
        return isinstance(body, SignatureShare) and frost.verify_signature_share(
            index, public, body.share, self.agreed(inbox)
        )

    def fault(self, message: TaskMessage, inbox: Inbox) -> Failure | None:
        """Say whether somebody says no share, or one that does not verify for the commitments that lie here."""
        name = message.sender
        if not isinstance(message.body, SignatureShare):
            return _misplaced(name, SHARES)
        if message.seen != inbox.seen(self.last) or self.holds(message, inbox):
            return None
        return Failure(name, _misbehaved((name,)))

    def spares(self, names: Collection[str]) -> bool:
        """Say that everybody has to sign whom the task names."""
        return not names

    @property
    def last(self) -> int:
        """The number of the round in which shares are said."""
        return len(self.rounds) - 1

    def signable(self, inbox: Inbox) -> Signable:
        """Return what is to be signed and what it is checked by; see ``signable``."""
        return signable(self.task, inbox.content, *self._beside)

    def message(self, inbox: Inbox) -> bytes:
        """Return the bytes that the key signs, checked as each signer must.

        Raises:
            SharesError: they are not what the task names, or not what its form promises; see ``Signable.message``.
        """
        # The same bytes are not checked again: a long list takes its time.
        if self._found is None or self._found[0] is not inbox.content:
            checked = self.signable(inbox)
            self._found = checked.content, checked.message(self.record.public_key.encode())
        return self._found[1]

    def commitments(self, inbox: Inbox) -> dict[str, tuple[Point, Point]]:
        """Return everybody's commitments by name: those of the task, or of the first round.

        Raises:
            VerificationError: one is missing.
        """
        if self.work.commitments:
            return {one.signer: (one.hiding, one.binding) for one in self.work.commitments}
        bodies = {name: message.body for name, message in inbox.of(0).items()}
        said = {name: (body.hiding, body.binding) for name, body in bodies.items() if isinstance(body, Commitment)}
        missing = [name for name in self.task.names if name not in said]
        if missing:
            raise VerificationError(f"there is no commitment of {', '.join(missing)}")
        return said

    def agreed(self, inbox: Inbox) -> frost.Agreed:
        """Return what all signers agree on: key, message and commitments.

        Raises:
            SharesError: the content is not the task's or not what its form wants, or a commitment is missing.
        """
        listed = [
            frost.Commitment(self.record.holder(name).index, *pair) for name, pair in self.commitments(inbox).items()
        ]
        return frost.Agreed(self.record.public_key, self.message(inbox), listed)

    def signature(self, inbox: Inbox) -> bytes:
        """Return the signature, 64 bytes, verified as any verifier does. It takes no secret.

        Raises:
            VerificationError: it does not verify: who sent a wrong share is named.
            ParameterError: a share is missing.
        """
        signed, wrong = self._aggregated(inbox)
        if signed is None:
            raise VerificationError(
                _misbehaved(wrong), hint="begin a new task without them, and find out what happened to their machines"
            )
        return signed

    def _aggregated(self, inbox: Inbox) -> tuple[bytes | None, tuple[str, ...]]:
        """Return the signature; or None, and who misbehaved. Single shares are looked at only then."""
        agreed, message = self.agreed(inbox), self.message(inbox)
        names = {self.record.holder(name).index: name for name in self.task.names}
        bodies = {name: said.body for name, said in inbox.of(self.last).items()}
        shares = {i: body.share for i, name in names.items() if isinstance(body := bodies.get(name), SignatureShare)}
        signed = frost.aggregate(shares, agreed)
        if frost.verify(self.record.public_key, message, signed):
            return signed, ()
        wrong = frost.misbehaving(shares, lambda i: public_share(self.record.commitments, i), agreed)
        return None, tuple(names[i] for i in wrong)


class SigningPart:
    """What one signer does.

    Args:
        task: to sign.
        me: the signer's name in it.
        record: of the key and epoch that it names.
        share: the signer's key share.
        key: the signer's party key.
        folder: the signer's own folder of this key; nonces lie in it.
        issuer, earlier: as for ``SigningCourse``.

    Raises:
        ParameterError, VerificationError: as for ``SigningCourse``.
    """

    def __init__(
        self,
        task: Task,
        me: str,
        record: KeyRecord,
        share: KeyShare,
        key: OpenPartyKey,
        folder: Path,
        *,
        issuer: bytes | None = None,
        earlier: bytes | None = None,
    ) -> None:
        self._course = SigningCourse(task, record, issuer=issuer, earlier=earlier)
        self._me = me
        self._share = share
        self._key = key
        self._store = NonceStore(folder / NONCES, record, me, key)

    def prospect(self, round: int, inbox: Inbox) -> Sequence[str]:
        """Return what is signed, found in the bytes themselves, who asks for it, and what this round does.

        Raises:
            SharesError: the content is not the task's, or not what its form wants.
        """
        course = self._course
        told = self._told(inbox)
        by = f"{course.task.author.name} ({course.task.author.fingerprint})"
        lines = [
            f"{by} asks for a signature by the key {course.record.label}.",
            f"What is signed is {told.kind}.",
            *(f"  {line}" for line in told.lines),
            *(f"Caution: {caution}" for caution in told.cautions),
        ]
        if course.rounds[round] == COMMITMENTS:
            return [
                *lines,
                "You commit to fresh nonces. Nothing is signed by that, and you will be asked before it is.",
            ]
        return [
            *lines,
            "You give your share of the signature. A signature cannot be taken back: agree only if you know what it is "
            "that is signed, and for whom.",
        ]

    def asks(self, round: int) -> bool:
        """Say whether the signer must agree: to the signature, not to commitments."""
        return self._course.rounds[round] == SHARES

    def event(self, round: int, inbox: Inbox) -> Event | None:
        """Return the signer's agreement, with what the signer was told."""
        if self._course.rounds[round] == COMMITMENTS:
            return None
        told = self._told(inbox)
        return Approved(
            what="approved",
            task=self._course.task.digest(),
            work="sign",
            custodian=self._me,
            content=self._course.work.content,
            summary=told.summary(),
        )

    def speak(self, round: int, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Said:
        """Commit, or give a share of the signature. Nothing secret is kept with the step: nonces have their own files.

        Before a share is worked out its nonces are spent on the medium, for exactly this share: after a crash the same
        comes out, and for anything else they are refused.

        Raises:
            SharesError: the content is not the task's; the key share is not the record's; the nonces were used, were
                made elsewhere, or their folder was copied or restored.
        """
        course, record = self._course, self._course.record
        agreed = course.agreed(inbox) if course.rounds[round] == SHARES else None
        share = own_share(self._share, record, self._me, self._key.open)
        if agreed is None:
            course.message(inbox)  # Nonces are not made for what will be refused.
            ((hiding, binding),) = self._store.make(share)
            return Said(body=Commitment(what="commitment", hiding=hiding, binding=binding), state=Secret(0))
        nonces = self._store.take(*course.commitments(inbox)[self._me], self._purpose(agreed, inbox))
        signed = frost.sign(record.holder(self._me).index, share, nonces, agreed)
        return Said(body=SignatureShare(what="signature-share", share=signed), state=Secret(0))

    def kept(self, round: int, inbox: Inbox) -> None:
        """Erase the nonces of a share that is kept, whatever becomes of the task.

        Raises:
            StorageError: the folder of nonces refuses.
        """
        if self._course.rounds[round] == SHARES:
            self._store.erase(*self._course.commitments(inbox)[self._me])

    def finish(self, inbox: Inbox, state: Secret, received: Sequence[Received]) -> Outcome:
        """Check the signature. Whoever asked puts it together.

        Raises:
            VerificationError: it does not verify: who sent a wrong share is named.
        """
        course = self._course
        signature = course.signature(inbox)
        task = course.task.digest()
        finished = TaskFinished(what="task-finished", task=task, work="sign", result=hashlib.sha256(signature).digest())
        words = ("The signature is made, and verifies with the key's public half. Your nonces are erased.",)
        return Outcome(files=(), event=finished, words=words)

    def _told(self, inbox: Inbox) -> Description:
        self._course.message(inbox)  # What would be refused is not described.
        return self._course.signable(inbox).described(self._course.record.public_key.encode())

    def _purpose(self, agreed: frost.Agreed, inbox: Inbox) -> bytes:
        """Return a digest of all that the share depends on, and of the task."""
        return sha256(
            b"shares/v1/nonce-purpose",
            self._course.task.digest(),
            self._course.record.fingerprint.encode("ascii"),
            hashlib.sha256(frost.encode_group_commitment_list(agreed.commitment_list)).digest(),
            hashlib.sha256(self._course.message(inbox)).digest(),
        )


def check_signers(task: Task, record: KeyRecord) -> None:
    """Check that a task is for this key and epoch, and that those who sign are custodians of it, and enough.

    Raises:
        VerificationError: it is not so; who is not the record's is named.
    """
    if (task.key, task.epoch, task.record) != (record.key, record.epoch, record.fingerprint):
        raise VerificationError(
            "the task is about another key or epoch than the record", hint="use the record that the task names"
        )
    for party in task.parties:
        holder = record.holder_by(party.card)
        if holder is None or holder.name != party.name:
            raise VerificationError(
                f"{party.name} is to sign with another name or card than the record says",
                hint="ask the author who that is, and do not sign before you know",
            )
    if len(task.parties) < record.need:
        raise VerificationError(f"{record.need} signers are needed, and the task names {len(task.parties)}")


def finish_signing(
    task: Task, record: KeyRecord, inbox: Inbox, *, issuer: bytes | None = None, earlier: bytes | None = None
) -> tuple[bytes, str]:
    """Put the signature together in the form that the task asks for. Anybody can: it takes no secret.

    Args:
        task: to sign.
        record: of the key and epoch that it names.
        inbox: complete, with the content.
        issuer, earlier: as for ``SigningCourse``.

    Returns:
        The file, and the ending that its name usually has; see ``Signable.finished``.

    Raises:
        VerificationError: the signature does not verify: who sent a wrong share is named.
        SharesError: a share is missing; or as for ``SigningCourse.message``.
    """
    course = SigningCourse(task, record, issuer=issuer, earlier=earlier)
    signature = course.signature(inbox)
    return course.signable(inbox).finished(record.public_key.encode(), signature)


def _misbehaved(names: Sequence[str]) -> str:
    if not names:  # With a record that agrees with itself this does not happen.
        return "the signature does not verify, though every share holds: the record is not that of one key"
    return f"the signature does not verify, and the share of {' and that of '.join(names)} is wrong"


def _misplaced(name: str, about: str) -> Failure:
    return Failure(name, f"{name} says something else than {about}")
