"""Whether an answer to a challenge is to be believed, and what it is worth: from public material alone.

Source: FORMAT_EVIDENCE.md, sec. 17; that silence is no consent, and a seal no content, is common practice.
May import: shares.errors, shares.clock, shares.documents.
Secret: nothing. Confidential: what answers tell of persons and places. Public: the judgement.
Does not: touch files or the journal; ``evidence.rounds`` does. It believes the challenge, whose asker people know.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime, timedelta
from enum import StrEnum

from shares import clock
from shares.documents.attestation import RESULTS, Attestation, Result
from shares.documents.challenge import Challenge
from shares.documents.event import Grade
from shares.documents.record import Record
from shares.errors import EpochMismatchError, SetMismatchError, VerificationError

TOLERANCE = timedelta(days=1)
"""By how much the clocks of two machines may differ."""


class Flaw(StrEnum):
    """What can be wrong with an answer."""

    OTHER_SET = "another set"
    OTHER_EPOCH = "another epoch"
    OTHER_CHALLENGE = "another challenge"
    NOT_ASKED = "not asked"
    OTHER_GRADE = "not what was asked"
    REPLAY = "given before"
    ANSWERED = "answered before"
    TOO_EARLY = "before the challenge"
    IN_FUTURE = "in the future"
    FORGED_SHARE = "the share's signature does not fit"
    FORGED_PARTY = "the party's signature does not fit"
    STRANGER = "no known signer"
    NO_PARTY = "not attributed"
    OTHER_CARD = "another party"
    UNKNOWN_CARD = "unknown card"
    LATE = "late"
    NOT_WHOLE = "not whole"
    NO_CONTENT = "no proof of content"


KEPT = frozenset({Flaw.NO_PARTY, Flaw.OTHER_CARD, Flaw.UNKNOWN_CARD, Flaw.LATE, Flaw.NOT_WHOLE, Flaw.NO_CONTENT})
"""Flaws of an answer that is accepted all the same, since it tells a fact; every other one refuses it."""


@dataclass(frozen=True, slots=True)
class Problem:
    """One flaw of an answer, in a word and in a sentence."""

    flaw: Flaw
    what: str


@dataclass(frozen=True, slots=True)
class Judgement:
    """What an answer is worth.

    Attributes:
        custodian: who answers, as the answer says.
        grade: what the custodian has looked at.
        result: what the custodian found.
        attributed: whether the custodian's known party key signed it.
        problems: what is wrong with it.
    """

    custodian: str
    grade: Grade
    result: Result
    attributed: bool
    problems: tuple[Problem, ...]

    @property
    def flaws(self) -> frozenset[Flaw]:
        """What is wrong with it, without the words."""
        return frozenset(problem.flaw for problem in self.problems)

    @property
    def accepted(self) -> bool:
        """Whether it is an answer to this challenge by whom it says: damaged and late ones are, as they tell facts."""
        return self.flaws <= KEPT

    @property
    def late(self) -> bool:
        """Whether it came, or says that it was made, after the day that was named."""
        return Flaw.LATE in self.flaws

    @property
    def whole(self) -> bool:
        """Whether what was looked at was found as it should be."""
        return self.result == RESULTS[self.grade][0]

    @property
    def counts(self) -> bool:
        """Whether it shows that this custodian could help to recover: then it counts toward the margin."""
        return self.accepted and self.attributed and self.grade == "content" and self.whole


def check_challenge(challenge: Challenge, record: Record) -> None:
    """Refuse a challenge that is not about this record.

    Raises:
        SetMismatchError, EpochMismatchError: it is of another set or epoch.
        VerificationError: it names another record, or a custodian whom this one does not.
    """
    hint = "get the record and the challenge that belong together from whoever asks"
    if challenge.set != record.set:
        raise SetMismatchError(
            f"the challenge is about the set {challenge.set.hex()}, the record about {record.set.hex()}", hint=hint
        )
    if challenge.epoch != record.epoch:
        raise EpochMismatchError(
            f"the challenge is about epoch {challenge.epoch}, the record about {record.epoch}", hint=hint
        )
    if challenge.record != record.fingerprint:
        raise VerificationError(f"the challenge is about another record, {challenge.record}", hint=hint)
    unknown = [name for name in challenge.custodians if record.custodian(name) is None]
    if unknown:
        raise VerificationError(f"the challenge asks {', '.join(unknown)}, whom the record does not name", hint=hint)


@dataclass(frozen=True, slots=True)
class Earlier:
    """An answer that a custodian has given to a challenge before.

    Attributes:
        digest: of the answer, 32 bytes.
        attributed: whether the custodian's known party key signed it.
    """

    digest: bytes
    attributed: bool


def judge(
    attestation: Attestation,
    challenge: Challenge,
    record: Record,
    *,
    card: str | None,
    received: datetime,
    earlier: Mapping[str, Earlier],
) -> Judgement:
    """Judge one answer to a challenge, with public material alone.

    Args:
        attestation: the answer.
        challenge: the challenge that it is to answer.
        record: of the set and epoch that the challenge is about.
        card: the fingerprint of the custodian's party card, where one is known.
        received: when the answer came.
        earlier: who has answered this challenge before, and how.

    Raises:
        SetMismatchError, EpochMismatchError, VerificationError: the challenge is not about this record.
    """
    check_challenge(challenge, record)
    party = attestation.is_signed_by_party()
    attributed = party and attestation.card is not None and attestation.card.fingerprint == card
    problems = _foreign(attestation, challenge, record)
    if not problems:
        problems += _repeated(attestation, earlier.get(attestation.custodian), attributed=attributed)
        problems += _untimely(attestation, challenge, received)
        problems += _signatures(attestation, record, card, party=party)
        problems += _worth(attestation)
    return Judgement(
        custodian=attestation.custodian,
        grade=attestation.grade,
        result=attestation.result,
        attributed=attributed,
        problems=tuple(problems),
    )


def _foreign(attestation: Attestation, challenge: Challenge, record: Record) -> list[Problem]:
    """Say why the answer does not belong here; nothing else about it is then of interest."""
    if attestation.set != record.set:
        return [Problem(Flaw.OTHER_SET, f"it is about the set {attestation.set.hex()}, not {record.set.hex()}")]
    if attestation.epoch != record.epoch:
        return [Problem(Flaw.OTHER_EPOCH, f"it is about epoch {attestation.epoch}, not {record.epoch}")]
    if attestation.challenge != challenge.digest():
        return [Problem(Flaw.OTHER_CHALLENGE, "it answers another challenge: an old answer proves nothing now")]
    if attestation.journal != challenge.journal:
        what = "it says that the journal stood elsewhere than the challenge says: it answers another challenge"
        return [Problem(Flaw.OTHER_CHALLENGE, what)]
    if attestation.custodian not in challenge.custodians:
        return [Problem(Flaw.NOT_ASKED, "this challenge does not ask this custodian")]
    if (attestation.grade == "present") != (challenge.purpose == "attendance"):
        return [Problem(Flaw.OTHER_GRADE, f"the challenge asks for {challenge.purpose}, and it answers something else")]
    return []


def _repeated(attestation: Attestation, before: Earlier | None, *, attributed: bool) -> list[Problem]:
    """Say whether the custodian has answered before. An attributed answer may follow one that is not: that one can have
    been given by whoever ever had the share, or without the party key by mistake."""
    if before is None:
        return []
    if before.digest == attestation.digest():
        return [Problem(Flaw.REPLAY, "this very answer was given before")]
    if attributed and not before.attributed:
        return []
    return [Problem(Flaw.ANSWERED, "this custodian has answered before; a new answer needs a new challenge")]


def _untimely(attestation: Attestation, challenge: Challenge, received: datetime) -> list[Problem]:
    said = clock.to_text(attestation.time)
    if attestation.time < challenge.created - TOLERANCE:
        what = f"it says that it was made on {said}, a day or more before the challenge: a clock is wrong"
        return [Problem(Flaw.TOO_EARLY, what)]
    if attestation.time > received + TOLERANCE:
        return [Problem(Flaw.IN_FUTURE, f"it says that it was made on {said}, which is yet to come: a clock is wrong")]
    if max(attestation.time, received) > challenge.due:
        what = f"it was made on {said} and came on {clock.to_text(received)}: due was {clock.to_text(challenge.due)}"
        return [Problem(Flaw.LATE, what)]
    return []


def _signatures(attestation: Attestation, record: Record, card: str | None, *, party: bool) -> list[Problem]:
    named = record.custodian(attestation.custodian)
    by_share = named is not None and attestation.is_signed_by_share(named.attestation_key)
    problems = []
    if attestation.share_signature is not None and not by_share:
        what = "the share's signature is not by the attestation key that the record names, or not over this answer"
        problems.append(Problem(Flaw.FORGED_SHARE, what))
    if attestation.card is None:
        what = "no party signed it: whoever ever had the whole share could have made it"
        problems.append(Problem(Flaw.NO_PARTY, what))
    elif not party:
        what = f"the signature in the name of {attestation.card.name} does not fit its content"
        problems.append(Problem(Flaw.FORGED_PARTY, what))
    elif card is None:
        what = (
            f"it is signed by the card {attestation.card.fingerprint} of {attestation.card.name}, and which card is "
            "the custodian's is not known: compare the fingerprint with them"
        )
        problems.append(Problem(Flaw.UNKNOWN_CARD, what))
    elif attestation.card.fingerprint != card:
        what = f"it is signed by the card {attestation.card.fingerprint}, and the custodian's is {card}"
        problems.append(Problem(Flaw.OTHER_CARD, what))
    if not by_share and not (party and attestation.card and attestation.card.fingerprint == card):
        problems.append(Problem(Flaw.STRANGER, "neither the share nor the custodian's known card has signed it"))
    return problems


def _worth(attestation: Attestation) -> list[Problem]:
    problems = []
    if not attestation.is_good:
        what = {
            "damaged": "the share is damaged: it is as good as lost until another copy is found",
            "inconsistent dealing": "the share does not lie on the dealing: the dealer was faulty or dishonest",
        }.get(attestation.result, "the seal was found broken: the share may have been seen")
        problems.append(Problem(Flaw.NOT_WHOLE, what))
    if attestation.grade == "sealed":
        problems.append(Problem(Flaw.NO_CONTENT, "pack and seal were seen, and no proof of content was given"))
    return problems
