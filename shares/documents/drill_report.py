"""The drill report: what a rehearsal was to show, who took part, what happened when, and what is to be done about it.

Source: NIST SP 800-84, sec. 6.5 (after-action report: scope, objectives, observations, recommendations, participants;
actions with their owners); FORMAT.md, sec. 18.
May import: shares.sharing.rule, shares.documents.base, .entry, .event, .members, .party, .signing.
Secret: nothing. Confidential: persons, places, findings.
Public: nothing.
Does not: judge a drill; ``evidence.drill`` does.
"""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import Field as Member
from pydantic import model_validator
from pydantic_core import PydanticCustomError

from shares.documents.base import Document, write_text
from shares.documents.entry import MAX_ENTRY_SIGNATURES, Head
from shares.documents.event import DrillKind, Seconds, Sequence, Texts
from shares.documents.members import Epoch, Fingerprint, Name, SetId, Signature, Text, Time, Version
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.signing import is_signed
from shares.sharing.rule import MAX_POINTS

MAX_ACTIONS = 100


class Participant(Document):
    """A custodian who was called to a drill.

    Attributes:
        took_part: whether they answered, or their share was used.
        seconds: how long after the opening that was.
        place: where they said that they were.
    """

    custodian: Name
    took_part: bool
    seconds: Seconds | None
    place: Text | None


class DrillStep(Document):
    """Something that happened in a drill, and when."""

    time: Time
    what: Text


class Action(Document):
    """What is to be done, by whom, until when."""

    owner: Text
    due: Time
    what: Text


class ReportSignature(Document):
    """A party's signature on a report."""

    card: PartyCard
    signature: Signature


class DrillReport(Document):
    """A signed report of one drill.

    ``DrillReport.parse`` refuses one with a signature that does not fit.
    """

    KIND: ClassVar[str] = "drill-report"

    kind: Literal["drill-report"]
    version: Version
    set: SetId
    epoch: Epoch
    record: Fingerprint
    label: Text
    drill: Sequence
    drill_kind: DrillKind
    scope: Text
    objectives: Texts
    opened: Time
    closed: Time
    participants: Annotated[tuple[Participant, ...], Member(max_length=MAX_POINTS)]
    persons: Texts
    steps: Annotated[tuple[DrillStep, ...], Member(max_length=MAX_POINTS)]
    recovery_seconds: Seconds | None
    target_seconds: Seconds | None
    passed: bool
    findings: Texts
    actions: Annotated[tuple[Action, ...], Member(max_length=MAX_ACTIONS)]
    journal: Head
    signatures: Annotated[tuple[ReportSignature, ...], Member(max_length=MAX_ENTRY_SIGNATURES)]

    @model_validator(mode="after")
    def _signatures_fit(self) -> Self:
        for one in self.signatures:
            if not is_signed(one.card.ed25519, one.signature, self.KIND, self._signed_members(one.card)):
                reason = f"the signature by {one.card.name} does not fit its content"
                raise PydanticCustomError("shares_report", "{reason}", {"reason": reason})
        return self

    def _signed_members(self, card: PartyCard) -> dict[str, Any]:
        report = self.public(*(set(type(self).model_fields) - {"signatures"}))
        return {"card": card.fingerprint, "report": report}

    def signed(self, key: OpenPartyKey) -> Self:
        """Return this report with one more signature."""
        signature = key.sign(self.KIND, self._signed_members(key.card))
        own = ReportSignature(card=key.card, signature=signature)
        return self.model_copy(update={"signatures": (*self.signatures, own)})

    def to_file(self) -> bytes:
        """Return the bytes of the file."""
        return write_text(self.model_dump(mode="json", by_alias=True))
