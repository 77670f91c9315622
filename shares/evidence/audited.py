"""What an audit found of one set: plain data, for a terminal, a page or another program.

Source: NIST SP 800-53, CP-4, CP-9 (tests of plan and media, results reviewed); CSA CCM 4, CEK-09 (key management is
audited yearly and after events); the verdicts are ours.
May import: shares.clock, shares.planning.structure.
Secret: nothing. Confidential: all of it, as it tells who holds what, and where. Public: label, set, epoch, rule.
Does not: find out anything; ``evidence.audit`` does. All of it can be compared, pickled and written as JSON.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime, timedelta
from enum import StrEnum
from typing import Literal, TypeAlias

from shares import clock
from shares.planning.structure import Bounds


class Verdict(StrEnum):
    """What an audit says of a set, from best to worst. The worst reason decides.

    ===========  ======================================================================================================
    good         record and journal hold and are signed, a quorum is confirmed, and nothing is due
    unsigned     nobody vouches for the record, or for an entry of the journal, or nobody whom you trust
    due          something is to be done: an attestation, drill or task is overdue, or is yet to come for the first time
    at risk      the confirmed custodians make no quorum, somebody has known one, a recovery drill failed, a record is
                 signed by none of the parties that are trusted, or its policy or journal is missing
    broken       something does not hold: record, chain, signature, digest, or an entry that claims what is not proven
    ===========  ======================================================================================================
    """

    GOOD = "good"
    UNSIGNED = "unsigned"
    DUE = "due"
    AT_RISK = "at risk"
    BROKEN = "broken"

    @property
    def rank(self) -> int:
        """0 for the best, 4 for the worst."""
        return list(Verdict).index(self)


@dataclass(frozen=True, slots=True)
class Reason:
    """Why a verdict is no better than ``level``, and what to do.

    Attributes:
        level: the best verdict that this reason leaves.
        code: a stable slug.
        what: what was found, one sentence.
        next: what to do about it, one sentence.
        about: the custodians, people, entries or files concerned.
    """

    level: Verdict
    code: str
    what: str
    next: str
    about: tuple[str, ...] = ()


Status: TypeAlias = Literal[
    "confirmed",
    "sealed",
    "not yet attested",
    "overdue",
    "unattributed",
    "damaged",
    "in doubt",
    "departed",
    "destroyed",
    "lost",
]
"""How a custodian stands. ``confirmed``: proven the share's content in time; ``sealed``: seen the pack closed in time,
and proven its content in the longer interval; both count toward the margin. ``in doubt``: an incident since.
``lost``: no copy is left, and one of them was not destroyed. The rest says why the custodian does not count."""


@dataclass(frozen=True, slots=True)
class Proof:
    """One attestation as it was judged again.

    Attributes:
        time: when it was given, or entered where only that is known.
        entry: the number of the journal's entry.
        grade: ``content``, ``sealed`` or ``present``.
        result: what the custodian found, in the words of ``verify``, or of the seal.
        counts: whether it confirms the custodian: holds, is intact, signed by the custodian's known party key, and was
            asked for after whatever last touched the share.
        asked: the number of the entry that tells of its challenge; 0 where none does.
    """

    time: datetime
    entry: int
    grade: str
    result: str
    attributed: bool
    late: bool
    opened: bool
    counts: bool
    asked: int = 0


@dataclass(frozen=True, slots=True)
class CustodianRow:
    """How one custodian stands.

    Attributes:
        person: who holds the share now, as far as policy and journal say; else the custodian's own name.
        site: where, by the policy.
        status: see ``Status``.
        why: the status in a few words.
        content: when the share's content was last proven.
        sealed: when the pack was last seen closed.
        due: until when the next proof is to come; None where none is asked for any more.
        card: fingerprint of the custodian's party card, where one is known.
        copies: how many copies of the share are on record and neither destroyed nor lost, with the one that was dealt.
        proofs: all attestations, in the journal's order.
        unanswered: when each challenge was due that passed without an answer, and was not asked anew before.
    """

    name: str
    person: str
    site: str | None
    status: Status
    why: str
    content: datetime | None
    sealed: datetime | None
    due: datetime | None
    card: str | None
    copies: int
    proofs: tuple[Proof, ...] = ()
    unanswered: tuple[datetime, ...] = ()

    @property
    def silent(self) -> datetime | None:
        """Since when the custodian is silent: asked, and no answer of any kind since; None who is not."""
        last = max(self.unanswered, default=None)
        return last if last and all(proof.time < last for proof in self.proofs) else None

    @property
    def counts(self) -> bool:
        """Whether this custodian counts toward the margin."""
        return self.status in ("confirmed", "sealed")


@dataclass(frozen=True, slots=True)
class Margin:
    """How many more may be lost before no quorum is left, in the worst case; -1 where none is left.

    Attributes:
        confirmed: how many custodians count now, of ``total``.
        custodians: the margin in confirmed custodians.
        people, sites: the same in people and sites who are lost with all that they hold, by the policy.
        whole: the margin in custodians if all of them were confirmed.
        missing: the fewest more custodians who must be confirmed until there is a quorum.
    """

    confirmed: int
    total: int
    custodians: Bounds
    people: Bounds | None
    sites: Bounds | None
    whole: Bounds
    missing: Bounds


@dataclass(frozen=True, slots=True)
class MarginSince:
    """The margin in custodians from a time on, until the next of these."""

    time: datetime
    low: int
    high: int


@dataclass(frozen=True, slots=True)
class Known:
    """What somebody has ever known of the shares of one epoch, as far as the journal tells.

    Attributes:
        who: a person, or ``somebody unknown``, or the dealer, or the machine of a recovery.
        kind: which of these.
        epoch: of the shares.
        shares: custodians whose shares, or a part of them, they held, saw, or can work out from those.
        recoveries: entries of the recoveries, real or in drills, at which they were present.
        how: each way by which, in words, with the number of the entry.
        suffices: whether what they held and saw, recoveries apart, makes a quorum by itself; like the next two, None
            where it cannot be told: the rule of an earlier epoch is not in this record.
        missing: the fewest more custodians whose shares they would need, recoveries apart.
        recovered: whether it makes a quorum together with what was recovered in their presence.
        left: since when they are gone.
    """

    who: str
    kind: Literal["person", "unknown", "dealer", "machine"]
    epoch: int
    shares: tuple[str, ...]
    recoveries: tuple[int, ...]
    how: tuple[str, ...]
    suffices: bool | None
    missing: Bounds | None
    recovered: bool | None
    left: datetime | None = None


@dataclass(frozen=True, slots=True)
class DrillRow:
    """One drill.

    Attributes:
        number: of the entry that opened it.
        kind: ``attendance``, ``practice`` or ``recovery``.
        passed: what the report says; None while it is open.
        target: how soon the secret was to be recovered, in seconds from the opening.
        took: seconds from the opening to the first rehearsal that passed.
        outcomes: what came of each rehearsal, in words.
        findings: of the report.
        actions: of the report, in words, with owner and due date.
    """

    number: int
    kind: str
    scope: str
    opened: datetime
    closed: datetime | None
    passed: bool | None
    target: int | None
    took: int | None
    custodians: tuple[str, ...]
    outcomes: tuple[str, ...]
    findings: tuple[str, ...] = ()
    actions: tuple[str, ...] = ()


TaskKind: TypeAlias = Literal[
    "attestation", "answer", "drill", "refresh", "departure", "incident", "loss", "replacement", "action", "closing"
]


@dataclass(frozen=True, slots=True)
class Task:
    """Something to be done until a day.

    Attributes:
        kind: what sort of task.
        what: what is to be done, one sentence.
        due: until when.
        overdue: whether that has passed at the time of the audit.
        about: custodians or people concerned.
        entry: the entry that set the task, which ``resolved`` names, or of the drill that is to be closed; None where
            an attestation or drill ends it.
        action: which action of a drill's report, from 1.
        advice: what the exposure says about how, for departures and incidents.
    """

    kind: TaskKind
    what: str
    due: datetime
    overdue: bool
    about: tuple[str, ...] = ()
    entry: int | None = None
    action: int | None = None
    advice: str = ""


@dataclass(frozen=True, slots=True)
class ExceptionRow:
    """Something that went another way than was written down."""

    entry: int
    time: datetime
    what: str
    remedy: str | None


@dataclass(frozen=True, slots=True)
class Signer:
    """A party that signed the record or the journal.

    Attributes:
        roles: ``dealer`` or ``witness`` of the record, ``journal`` for entries.
        entries: how many entries of the journal.
        trusted: whether the card is among those that the auditor trusts.
    """

    name: str
    card: str
    roles: tuple[str, ...]
    entries: int
    trusted: bool


@dataclass(frozen=True, slots=True)
class Intervals:
    """What the set is held to.

    Attributes:
        assumed: which of them the policy does not say, so that the default was taken.
    """

    attest_every: timedelta
    content_every: timedelta
    drill_every: timedelta
    refresh_every: timedelta | None
    assumed: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Counts:
    """How much was checked; ``heads``: where documents, or the auditor's notes, say that the journal stood."""

    entries: int = 0
    later_entries: int = 0
    unsigned_entries: int = 0
    signatures: int = 0
    documents: int = 0
    attestations: int = 0
    heads: int = 0


@dataclass(frozen=True, slots=True)
class Audit:
    """All that an audit found of one set. What the record would say is None where it cannot be read.

    Attributes:
        where: the folder or pack.
        at: the time of the audit; later entries are not looked at.
        verdict: the worst of the reasons.
        reasons: worst first.
        notes: what is worth knowing and changes no verdict.
        record: the record's fingerprint.
        head: where the journal stands, to be read aloud.
        retired: when the set was retired; ``keep_until``: until when its records are kept.
        margins: the margin over time, from the first dealing on.
    """

    where: str
    at: datetime
    verdict: Verdict
    reasons: tuple[Reason, ...]
    notes: tuple[str, ...] = ()
    label: str | None = None
    set_id: str | None = None
    epoch: int | None = None
    record: str | None = None
    created: datetime | None = None
    rule: str | None = None
    with_policy: bool = False
    intervals: Intervals | None = None
    custodians: tuple[CustodianRow, ...] = ()
    margin: Margin | None = None
    margins: tuple[MarginSince, ...] = ()
    exposure: tuple[Known, ...] = ()
    drills: tuple[DrillRow, ...] = ()
    tasks: tuple[Task, ...] = ()
    exceptions: tuple[ExceptionRow, ...] = ()
    head: str | None = None
    signers: tuple[Signer, ...] = ()
    retired: datetime | None = None
    keep_until: datetime | None = None
    counts: Counts = field(default_factory=Counts)

    def members(self) -> dict[str, object]:
        """Return it as JSON members: times as documents carry them, intervals in days, bounds as low and high."""
        return {one.name: _plain(getattr(self, one.name)) for one in dataclasses.fields(self)}


def _plain(value: object) -> object:
    if isinstance(value, Bounds):
        return value._asdict()
    if isinstance(value, datetime):
        return clock.to_text(value)
    if isinstance(value, timedelta):
        return value.days
    if isinstance(value, tuple):
        return [_plain(one) for one in value]
    if isinstance(value, Mapping):
        return {key: _plain(one) for key, one in value.items()}
    if dataclasses.is_dataclass(value):
        return {one.name: _plain(getattr(value, one.name)) for one in dataclasses.fields(value)}
    return str(value) if isinstance(value, StrEnum) else value
