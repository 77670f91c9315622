"""The events of a set's life, as its journal tells them: one class for each, told apart by ``what``.

Source: CA/Browser Forum TLS Baseline Requirements, sec. 5.4.1, wants life-cycle events of keys logged with date, person
and description; the names of events are ours; FORMAT_EVIDENCE.md, sec. 16.
May import: shares.errors, shares.sharing.rule, shares.documents.base, .key_event, .members.
Secret: nothing. Confidential: persons, places and serials. Public: the rest.
Does not: judge events or follow from one to another; ``evidence`` does.
"""

from __future__ import annotations

from typing import Annotated, Literal, TypeAlias, get_args

from pydantic import Field as Member
from pydantic import ValidationError, model_validator
from pydantic_core import PydanticCustomError

from shares.documents.base import Document
from shares.documents.key_event import KeyEvent
from shares.documents.members import Digest, Epoch, Fingerprint, Name, SetId, Text, Time
from shares.errors import ParameterError
from shares.sharing.rule import MAX_POINTS

Sequence = Annotated[int, Member(ge=1, le=2**32 - 1)]
"""The number of an entry in its journal, from 1."""
Names = Annotated[tuple[Name, ...], Member(max_length=MAX_POINTS)]
Texts = Annotated[tuple[Text, ...], Member(max_length=MAX_POINTS)]
Seconds = Annotated[int, Member(ge=0, le=2**32 - 1)]
Packed: TypeAlias = Literal["bare", "passphrase", "card"]
Disposition: TypeAlias = Literal["returned", "replace", "destroyed"]
Grade: TypeAlias = Literal["content", "sealed", "present"]
DrillKind: TypeAlias = Literal["attendance", "practice", "recovery"]
Remedy: TypeAlias = Literal["refreshed", "reassigned", "key replaced", "share destroyed", "no exposure", "done"]


class DealtShare(Document):
    """How one custodian's share left the split: packed how, and for which card, where one is known."""

    name: Name
    packed: Packed
    card: Fingerprint | None


class Dealt(Document):
    """A set, or a new epoch of it, was dealt. The dealer's machine held the secret and every share."""

    what: Literal["dealt"]
    set: SetId
    epoch: Epoch
    record: Fingerprint
    custodians: Annotated[tuple[DealtShare, ...], Member(min_length=1, max_length=MAX_POINTS)]
    practice: Fingerprint | None
    """The record of the worthless twin set for rehearsals, where one was dealt."""


class Introduced(Document):
    """A custodian's party card is made known; the card itself stands in the entry."""

    what: Literal["introduced"]
    custodian: Name
    card: Fingerprint
    remark: Text | None = None


class Acknowledged(Document):
    """A custodian has accepted the duties; the entry names the document."""

    what: Literal["acknowledged"]
    custodian: Name
    remark: Text | None = None


class Delivered(Document):
    """A share was sent to its custodian."""

    what: Literal["delivered"]
    custodian: Name
    serial: Text | None = None
    channel: Text | None = None
    remark: Text | None = None


class Received(Document):
    """A custodian has received the share and seen to its pack."""

    what: Literal["received"]
    custodian: Name
    serial: Text | None = None
    remark: Text | None = None


class Copied(Document):
    """A share has one more copy, on paper or any other medium; ``copy`` says which, by its serial."""

    what: Literal["copied"]
    custodian: Name
    copy_: Annotated[Text, Member(alias="copy")]
    remark: Text | None = None


class Transcribed(Document):
    """A share was typed or scanned from paper, and the persons named have known it."""

    what: Literal["transcribed"]
    custodian: Name
    persons: Texts
    remark: Text | None = None


class HandedOn(Document):
    """A share went to another person as it is: that person knows it, and the one before has known it."""

    what: Literal["handed-on"]
    custodian: Name
    to: Text
    remark: Text | None = None


class Challenged(Document):
    """Custodians were asked to attest, or to show that they are there."""

    what: Literal["challenged"]
    challenge: Digest
    custodians: Names
    due: Time
    drill: Sequence | None = None


class Attested(Document):
    """An answer to a challenge was checked and filed.

    Attributes:
        grade: ``content``: the share's own key signed; ``sealed``: pack and seal were seen; ``present``: attendance.
        result: what the custodian found, in the words of ``verify``, or of the seal.
        attributed: whether the custodian's known party key signed as well: only then it counts toward the margin.
        opened: whether a seal was broken for it, so that whoever was present may have seen the share.
    """

    what: Literal["attested"]
    challenge: Digest
    custodian: Name
    grade: Grade
    result: Text
    attributed: bool
    late: bool
    opened: bool
    place: Text | None = None
    serial: Text | None = None


class DrillOpened(Document):
    """A drill was called. Its number is that of this entry."""

    what: Literal["drill-opened"]
    kind: DrillKind
    scope: Text
    objectives: Texts
    custodians: Names
    target: Seconds | None
    """How soon the secret is to be recovered, in seconds from the opening."""


class Brought(Document):
    """Shares of the set were brought to a rehearsal and opened there, before anything was done with them.

    Whatever comes of it, that machine and whoever was present may have known them since.
    """

    what: Literal["brought"]
    drill: Sequence
    custodians: Names
    persons: Texts


class Rehearsed(Document):
    """A quorum tried to recover in a drill, or custodians answered in one of attendance.

    Attributes:
        drill: the number of the entry that opened it.
        custodians: whose shares were used, or who answered.
        persons: who was present.
        outcome: ``passed``, with what was set aside, or what went wrong.
        seconds: how long the recovery itself took.
        probe: the exit code of the command that was fed, where one was.
    """

    what: Literal["rehearsed"]
    drill: Sequence
    custodians: Names
    persons: Texts
    passed: bool
    outcome: Text
    seconds: Seconds
    probe: Annotated[int, Member(ge=0, le=255)] | None = None
    probe_seconds: Seconds | None = None


class DrillClosed(Document):
    """A drill was closed with a report, which the entry names."""

    what: Literal["drill-closed"]
    drill: Sequence
    passed: bool


class Recovered(Document):
    """The secret was recovered in earnest: why, from whose shares, and what becomes of key and shares."""

    what: Literal["recovered"]
    custodians: Names
    persons: Texts
    reason: Text
    disposition: Disposition
    by: Time | None = None
    """Until when the key is replaced, where that is the disposition."""

    @model_validator(mode="after")
    def _has_its_date(self) -> Recovered:
        if (self.by is not None) != (self.disposition == "replace"):
            raise PydanticCustomError("shares_event", "a date, and only then, where the key is to be replaced")
        return self


class Departed(Document):
    """A person leaves: what they could still do is to be ended until ``due``."""

    what: Literal["departed"]
    person: Text
    custodians: Names
    due: Time
    remark: Text | None = None


class Incident(Document):
    """A share was lost, damaged, opened or seen, or is suspected to be; to be dealt with until ``due``.

    Attributes:
        custodians: whose shares.
        persons: who may have known them since.
        exposed: whether anyone may have come to know them.
    """

    what: Literal["incident"]
    custodians: Names
    persons: Texts
    exposed: bool
    due: Time
    remark: Text


class Resolved(Document):
    """A dated task is done: of a departure, an incident or a recovery, or an action of a drill's report.

    Attributes:
        entry: the number of the entry that set the task.
        action: which of the report's actions, from 1, where it is one.
    """

    what: Literal["resolved"]
    entry: Sequence
    action: Sequence | None = None
    how: Remedy
    remark: Text | None = None


class ScriptStep(Document):
    """A step of a ceremony was done; bound to the script by its digest.

    Attributes:
        repeats: whether the step had been done before, and was done again on purpose.
    """

    what: Literal["step"]
    script: Digest
    step: Sequence
    initials: Text
    repeats: bool = False
    remark: Text | None = None


class Deviation(Document):
    """Something went another way than was written down; kept, never erased."""

    what: Literal["exception"]
    remark: Text
    remedy: Text | None = None
    script: Digest | None = None
    step: Sequence | None = None
    initials: Text | None = None


class Destroyed(Document):
    """A copy of a share was destroyed, and a witness saw it who is not its custodian.

    Attributes:
        copy_: which copy, by its serial; ``original`` for the one that was dealt.
    """

    what: Literal["destroyed"]
    custodian: Name
    copy_: Annotated[Text, Member(alias="copy")]
    by: Text
    witness: Text
    method: Text | None = None


class Lost(Document):
    """A copy of a share cannot be found, and is given up: it was not destroyed, and may turn up with anybody.

    Attributes:
        copy_: which copy, as in ``Destroyed``.
        by: who says so.
        witness: who has heard them, and is not the custodian.
        reason: how it was lost, and where it was looked for.
    """

    what: Literal["lost"]
    custodian: Name
    copy_: Annotated[Text, Member(alias="copy")]
    by: Text
    witness: Text
    reason: Text


class Retired(Document):
    """The set's end: every copy is accounted for, and its records are kept until ``keep_until``."""

    what: Literal["retired"]
    keep_until: Time
    remark: Text | None = None


class Noted(Document):
    """Anything else that is worth keeping."""

    what: Literal["noted"]
    remark: Text


class SetAside(Document):
    """What a stopped run left at the end of the journal, which is no entry, was moved to the file that is named."""

    what: Literal["set-aside"]
    remark: Text


Event: TypeAlias = (
    Dealt
    | Introduced
    | Acknowledged
    | Delivered
    | Received
    | Copied
    | Transcribed
    | HandedOn
    | Challenged
    | Attested
    | DrillOpened
    | Brought
    | Rehearsed
    | DrillClosed
    | Recovered
    | Departed
    | Incident
    | Resolved
    | ScriptStep
    | Deviation
    | Destroyed
    | Lost
    | Retired
    | Noted
    | SetAside
    | KeyEvent
)
EVENTS: tuple[type[Event], ...] = get_args(Event)
_BY_WHAT = {get_args(event.model_fields["what"].annotation)[0]: event for event in EVENTS}
EVENT_NAMES: tuple[str, ...] = tuple(_BY_WHAT)


def make_event(what: str, **members: object) -> Event:
    """Return an event of what somebody has entered.

    Args:
        what: which event, like ``delivered``.
        members: of it, by the names that they have in the document, like ``copy``.

    Raises:
        ParameterError: there is no such event, or a member is missing, unknown or not as the format says.
    """
    event = _BY_WHAT.get(what)
    if event is None:
        raise ParameterError(f"there is no event {what!a}", hint=f"one of {', '.join(_BY_WHAT)}")
    try:
        return event.model_validate(members | {"what": what})
    except ValidationError as error:
        details = error.errors(include_input=False, include_context=False, include_url=False)[0]
    member = ".".join(str(part) for part in details["loc"]) or "it"
    said = "is missing" if details["type"] == "missing" else f"is not as it should be: {details['msg']}"
    raise ParameterError(f"{member} {said}", where=what)
