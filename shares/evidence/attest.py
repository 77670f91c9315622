"""Asking custodians to attest, and a custodian's truthful answer.

Source: FORMAT_EVIDENCE.md, sec. 17; ISO/IEC 9798-3 (the fresh nonce).
May import: shares.errors, shares.clock, shares.documents, shares.custody, shares.evidence.judge.
Secret: the share that is looked at, and the party keys that sign. Confidential: what answers tell of places.
Public: the rest.
Does not: write anything, or believe anybody; ``evidence.rounds`` files, ``evidence.judge`` judges.
"""

from __future__ import annotations

import secrets
from collections.abc import Collection, Sequence
from datetime import datetime
from typing import Literal

from shares import clock
from shares.custody.presented import Presented, Status
from shares.custody.verify import examine
from shares.documents.attestation import Attestation, Carrier, Result
from shares.documents.challenge import Challenge, Purpose
from shares.documents.entry import Head
from shares.documents.event import Grade
from shares.documents.members import check_text
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import (
    EpochMismatchError,
    ParameterError,
    SetMismatchError,
    SharesError,
    StorageError,
    VerificationError,
    WrongKeyError,
)
from shares.evidence.judge import TOLERANCE, check_challenge

NONCE = 32
"""Length of a challenge's nonce, in bytes."""

_ANSWERS: dict[Status, Result] = {
    Status.INTACT: "intact",
    Status.DAMAGED: "damaged",
    Status.INCONSISTENT: "inconsistent dealing",
}
# What is found of a share that is no custodian's answer, but a slip or a hindrance on this machine.
_NO_ANSWER: dict[Status, tuple[type[SharesError], str]] = {
    Status.FOREIGN: (SetMismatchError, "find the share of this set; the one given may be perfectly good"),
    Status.OTHER_EPOCH: (EpochMismatchError, "find the share of this epoch; without it, tell whoever asks"),
    Status.UNKNOWN: (VerificationError, "ask whoever asks which record your share belongs to"),
    Status.LOCKED: (WrongKeyError, "give its passphrase or party key; if it stays closed, tell whoever asks"),
    Status.UNREADABLE: (StorageError, "see the reason given; if the medium is spoilt, tell whoever asks"),
}


def make_challenge(
    record: Record,
    custodians: Sequence[str],
    *,
    key: OpenPartyKey,
    due: datetime,
    head: Head | None,
    purpose: Purpose = "attestation",
    drill: int | None = None,
    created: datetime | None = None,
) -> Challenge:
    """Make a fresh challenge.

    Args:
        record: of the set and epoch.
        custodians: who is asked, each once.
        key: the asker's party key.
        due: until when to answer, UTC to the second.
        head: where the set's journal stands; None where it has no entry.
        purpose: what is asked.
        drill: the number of the entry that opened the drill; for attendance, and only then.
        created: now by default.

    Raises:
        ParameterError: nobody is asked, somebody twice or whom the record does not name; ``due`` is past; or a
            time is not in UTC and to the second.
    """
    created = clock.now() if created is None else created
    for moment in (created, due):
        clock.to_text(moment)
    unknown = [name for name in custodians if record.custodian(name) is None]
    if unknown:
        names = ", ".join(custodian.name for custodian in record.custodians)
        raise ParameterError(f"the record names no custodian {', '.join(unknown)}", hint=f"it names {names}")
    if not custodians or len(set(custodians)) != len(custodians):
        raise ParameterError("a challenge asks one custodian or more, and each of them once")
    if due <= created:
        raise ParameterError("a challenge is due after it is made", hint="name a later day")
    if (drill is not None) != (purpose == "attendance"):
        raise ParameterError("attendance, and nothing else, is asked for in a drill")
    return Challenge.signed_by(
        key,
        set=record.set,
        epoch=record.epoch,
        record=record.fingerprint,
        label=record.label,
        purpose=purpose,
        drill=drill,
        custodians=tuple(custodians),
        nonce=secrets.token_bytes(NONCE),
        created=created,
        due=due,
        journal=head,
    )


def check_asked(
    challenge: Challenge,
    record: Record,
    custodian: str,
    *,
    trusted: Collection[PartyCard] = (),
    time: datetime | None = None,
) -> None:
    """Refuse a challenge that is not for this custodian to answer, before anything secret is opened.

    Args:
        challenge: as it came.
        record: the custodian's own copy.
        custodian: who would answer.
        trusted: cards whose fingerprints were compared; where any are given, the asker's must be one of them.
        time: now by default.

    Raises:
        SetMismatchError, EpochMismatchError: it is about another set or epoch.
        VerificationError: it is about another record, by a party that is not trusted, or dated ahead of this machine.
        ParameterError: it asks others, or the time is not in UTC and to the second.
    """
    time = clock.now() if time is None else time
    now = clock.to_text(time)
    check_challenge(challenge, record)
    if trusted and challenge.card.fingerprint not in {card.fingerprint for card in trusted}:
        raise VerificationError(
            f"the challenge is by {challenge.card.name}, card {challenge.card.fingerprint}, who is not trusted here",
            hint="answer nothing; ask, by the known way, who sent it",
        )
    if custodian not in challenge.custodians:
        raise ParameterError(
            f"the challenge does not ask {custodian}", hint=f"it asks {', '.join(challenge.custodians)}"
        )
    if time < challenge.created - TOLERANCE:
        raise VerificationError(
            f"the challenge is dated {clock.to_text(challenge.created)}, and it is {now} here",
            hint="set the clock of this machine, or ask for another challenge",
        )


def answer(
    challenge: Challenge,
    record: Record,
    custodian: str,
    *,
    grade: Grade,
    share: Presented | None = None,
    key: OpenPartyKey | None = None,
    trusted: Collection[PartyCard] = (),
    carrier: Carrier | None = None,
    opened: bool = False,
    seal: Literal["intact", "broken"] = "intact",
    place: str | None = None,
    serial: str | None = None,
    remark: str | None = None,
    time: datetime | None = None,
) -> Attestation:
    """Answer a challenge for a custodian: look at what there is, and say what was found, good or bad.

    A damaged share makes an answer as well, which the custodian's party key signs.

    Args:
        challenge: as it came.
        record: the custodian's own copy of the record.
        custodian: who answers.
        grade: ``content`` for a share that is given, ``sealed`` for a pack that stays closed, ``present`` for
            attendance.
        share: the custodian's share, for ``content``.
        key: the custodian's party key; without it the answer is not attributed, and only a share can sign.
        trusted: as for ``check_asked``.
        carrier: what the share was read from, for ``content``; a file by default.
        opened: whether a seal was broken for this answer.
        seal: how the seal of a closed pack was found, for ``sealed``.
        place: where the pack is, or the answer was given, 1 to 500 characters.
        serial: of the pack; needed for ``sealed``.
        remark: anything else, 1 to 500 characters.
        time: now by default.

    Raises:
        SetMismatchError, EpochMismatchError, VerificationError, ParameterError: as for ``check_asked``; or the share
            is of another set or epoch, or another custodian's; or it is damaged and nobody is there to sign that.
        WrongKeyError, StorageError: the share could not be opened or read, which says nothing of it.
    """
    time = clock.now() if time is None else time
    check_asked(challenge, record, custodian, trusted=trusted, time=time)
    _check_fits(challenge, grade, share, key, serial, opened=opened)
    for text in (place, serial, remark):
        if text is not None:
            check_text(text)
    signing: Share | None = None
    result: Result = "present" if grade == "present" else "seal intact" if seal == "intact" else "seal broken"
    if share is not None:
        result, reason = _found(share, record, custodian)
        signing = _signing(share, record, custodian)
        if signing is None and key is None:
            raise VerificationError(
                f"the share is {result}: {reason}; and there is no party key to sign that with",
                where=share.source,
                hint="give your party key, or tell whoever asks at once, by the known way; keep the share as it is",
            )
    return Attestation.signed_by(
        signing,
        key,
        set=record.set,
        epoch=record.epoch,
        custodian=custodian,
        challenge=challenge.digest(),
        journal=challenge.journal,
        time=time,
        grade=grade,
        result=result,
        carrier=(carrier or "file") if grade == "content" else None,
        opened=opened,
        place=place,
        serial=serial,
        remark=remark,
    )


def _check_fits(
    challenge: Challenge,
    grade: Grade,
    share: Presented | None,
    key: OpenPartyKey | None,
    serial: str | None,
    *,
    opened: bool,
) -> None:
    problem = hint = None
    if (grade == "present") != (challenge.purpose == "attendance"):
        asked = "who is there" if challenge.purpose == "attendance" else "for the share, or its sealed pack"
        problem, hint = f"the challenge asks {asked}, and this would answer something else", "answer what is asked"
    elif (share is not None) != (grade == "content"):
        problem = "a share is given for an answer about content, and for no other"
    elif opened and grade != "content":
        problem = "a seal is broken to look at the share, and no share is given"
    elif grade == "sealed" and serial is None:
        problem, hint = "a closed pack is known by its serial, and none is given", "read it from the pack"
    elif grade != "content" and key is None:
        problem = "without a share, only the custodian's party key can sign, and none is given"
        hint = "give your party key; an answer that nobody signed proves nothing"
    if problem:
        raise ParameterError(problem, hint=hint)


def _found(share: Presented, record: Record, custodian: str) -> tuple[Result, str]:
    """Say what the share is, in the answer's words; or refuse where that is no answer."""
    (finding,) = examine([share], record)
    result = _ANSWERS.get(finding.status)
    if result is not None:
        if finding.status is not Status.DAMAGED and finding.custodian != custodian:
            raise ParameterError(
                f"it is the share of {finding.custodian}, and {custodian} would answer", where=share.source
            )
        return result, finding.reason
    error, hint = _NO_ANSWER[finding.status]
    raise error(f"{finding.status}: {finding.reason}", where=share.source, hint=hint)


def _signing(share: Presented, record: Record, custodian: str) -> Share | None:
    """Return the share where it can sign: where its attestation key is the one that the record names."""
    named = record.custodian(custodian)
    if share.share is None or named is None or share.share.attestation_key() != named.attestation_key:
        return None
    return share.share
