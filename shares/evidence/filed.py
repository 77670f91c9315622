"""The documents that a journal names, read and judged again: attestations with their challenges, and drill reports.

An entry is a claim. What an attestation proves is worked out from the attestation itself, and an entry that claims more
is named.

Source: FORMAT.md, sec. 16 to 18.
May import: shares.errors, shares.documents, shares.history, shares.sharing.rule, shares.evidence.
Secret: nothing. Confidential: the documents. Public: the record.
Does not: say that a file is missing or altered: ``history.verify`` does. What cannot be read proves nothing here.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import datetime
from typing import TypeVar

from shares.documents.attestation import Attestation
from shares.documents.base import MAX_FILE, Document
from shares.documents.challenge import Challenge
from shares.documents.drill_report import DrillReport
from shares.documents.entry import Entry, Head, NamedDigest
from shares.documents.event import (
    Attested,
    Challenged,
    Dealt,
    Destroyed,
    DrillClosed,
    DrillOpened,
    Lost,
    Rehearsed,
)
from shares.documents.policy import Policy, folded
from shares.documents.record import Record
from shares.errors import SharesError
from shares.evidence.audited import Proof
from shares.evidence.judge import Earlier, Judgement, judge
from shares.history.files import Files
from shares.history.holders import Holders
from shares.history.journal import Journal
from shares.sharing.rule import Rule

One = TypeVar("One", bound=Document)


@dataclass(slots=True, eq=False)
class Filed:
    """What the documents say, as far as they hold.

    Attributes:
        proofs: what each attestation proves, by the number of its entry; of entries of the record's epoch alone.
        reports: each drill's report, by the number of the drill.
        heads: where challenges and reports say that the journal stood.
        read: the files of these.
        claims: what entries claim and their documents do not prove, in words that begin with the entry's number.
    """

    proofs: dict[int, Proof] = field(default_factory=dict)
    reports: dict[int, DrillReport] = field(default_factory=dict)
    heads: list[Head] = field(default_factory=list)
    read: set[str] = field(default_factory=set)
    claims: list[str] = field(default_factory=list)


def read_filed(journal: Journal, files: Files, record: Record, policy: Policy | None = None) -> Filed:
    """Read what a journal names, and judge it again with public material alone; never raises for what files hold.

    Args:
        journal: as it was read.
        files: of the set.
        record: the set's.
        policy: the set's, where it has one: who leaves, and with which shares.
    """
    # Attestations of an earlier epoch cannot be judged by this record, and prove nothing of it.
    holders = Holders((custodian.name for custodian in record.custodians), policy)
    reader = _Reader(
        files, record, holders, record.rule.to_rule(), begun=not any(_deals(entry, record) for entry in journal.entries)
    )
    for entry in journal.entries:
        reader.read(entry)
    return reader.filed


@dataclass(slots=True, eq=False)
class _Reader:
    files: Files
    record: Record
    holders: Holders
    rule: Rule
    begun: bool
    filed: Filed = field(default_factory=Filed)
    challenges: dict[bytes, Challenge | None] = field(default_factory=dict)
    asked: dict[bytes, int] = field(default_factory=dict)
    answered: dict[bytes, dict[str, Earlier]] = field(default_factory=dict)
    drills: dict[int, tuple[Entry, DrillOpened]] = field(default_factory=dict)
    # By the number of the drill: when the first rehearsal passed, and who answered in time.
    rehearsed: dict[int, datetime] = field(default_factory=dict)
    attended: dict[int, set[str]] = field(default_factory=dict)
    # Which drill a challenge was for.
    called: dict[bytes, int] = field(default_factory=dict)

    def read(self, entry: Entry) -> None:
        event = entry.event
        self.holders.take(event)
        match event:
            case Dealt():
                self.begun = self.begun or _deals(entry, self.record)
            case Challenged():
                self._challenged(entry, event)
            case Attested() if self.begun:
                self._attested(entry, event)
            case DrillOpened():
                self.drills[entry.sequence] = entry, event
            case Rehearsed(passed=True):
                # Of an earlier epoch this record does not tell the rule.
                if self.begun and not self.rule.satisfied_by(event.custodians):
                    self._claim(entry, f"says that a rehearsal of drill {event.drill} passed, and no quorum was there")
                else:
                    self.rehearsed.setdefault(event.drill, entry.time)
            case DrillClosed():
                self._closed(entry, event)
            case Destroyed() | Lost():
                by = folded(event.witness) == folded(event.by)
                if by or self.holders.is_party(event.custodian, event.witness):
                    what = f"says that a copy of {event.custodian} was {event.what}, and its witness is no third party"
                    self._claim(entry, what)

    def _claim(self, entry: Entry, what: str) -> None:
        self.filed.claims.append(f"entry {entry.sequence} {what}")

    def _challenged(self, entry: Entry, event: Challenged) -> None:
        challenge = self._document(entry, Challenge)
        if challenge and challenge.journal:
            self.filed.heads.append(challenge.journal)
        if challenge and (challenge.digest(), challenge.custodians) != (event.challenge, event.custodians):
            self._claim(entry, "tells of another challenge than the one that it names")
            challenge = None
        self.challenges.setdefault(event.challenge, challenge)
        self.asked.setdefault(event.challenge, entry.sequence)
        if event.drill is not None:
            self.called.setdefault(event.challenge, event.drill)

    def _attested(self, entry: Entry, event: Attested) -> None:
        if event.challenge not in self.challenges:
            self._claim(entry, "tells of an answer to a challenge that no entry before it tells of")
            return
        challenge, attestation = self.challenges[event.challenge], self._document(entry, Attestation)
        judgement = None
        if challenge and attestation:
            judgement = self._judged(entry, attestation, challenge)
            if judgement and not _says(event, attestation, judgement):
                self._claim(entry, f"claims of {event.custodian} what the attestation that it names does not prove")
                judgement = None
        if judgement is None:
            # Its bad news are heeded, and its good ones are not believed.
            proof = Proof(
                time=entry.time,
                entry=entry.sequence,
                grade=event.grade,
                result=event.result,
                attributed=False,
                late=event.late,
                opened=event.opened,
                counts=False,
                asked=self.asked[event.challenge],
            )
        else:
            proof = Proof(
                time=min(attestation.time, entry.time) if attestation else entry.time,
                entry=entry.sequence,
                grade=event.grade,
                result=event.result,
                attributed=judgement.attributed,
                late=judgement.late,
                opened=event.opened,
                counts=judgement.accepted and judgement.attributed and judgement.whole,
                asked=self.asked[event.challenge],
            )
        self.filed.proofs[entry.sequence] = proof
        if judgement and judgement.accepted and not judgement.late and event.challenge in self.called:
            self.attended.setdefault(self.called[event.challenge], set()).add(event.custodian)

    def _judged(self, entry: Entry, attestation: Attestation, challenge: Challenge) -> Judgement | None:
        earlier = self.answered.setdefault(attestation.challenge, {})
        try:
            judgement = judge(
                attestation,
                challenge,
                self.record,
                card=self.holders.cards.get(attestation.custodian),
                received=entry.time,
                earlier=earlier,
            )
        except SharesError as error:
            self._claim(entry, f"names an answer that proves nothing of this record: {error.what}")
            return None
        before = earlier.get(attestation.custodian)
        if before is None or (judgement.attributed and not before.attributed):
            earlier[attestation.custodian] = Earlier(attestation.digest(), judgement.attributed)
        return judgement

    def _closed(self, entry: Entry, event: DrillClosed) -> None:
        report = self._document(entry, DrillReport)
        if report is None:
            return
        self.filed.heads.append(report.journal)
        opened = self.drills.get(event.drill)
        told = (report.set, report.drill, report.passed, opened[1].kind if opened else None)
        if told != (self.record.set, event.drill, event.passed, report.drill_kind):
            self._claim(entry, f"tells otherwise of drill {event.drill} than the report that it names")
        elif not report.signatures:
            self._claim(entry, f"names a report of drill {event.drill} that nobody signed")
        elif opened and report.passed and (failed := self._failed(event.drill, *opened)):
            self._claim(entry, f"says that drill {event.drill} passed, and {failed}")
        else:
            self.filed.reports[event.drill] = report

    def _failed(self, drill: int, opened: Entry, event: DrillOpened) -> str:
        """Say why a drill did not pass, by the entries before its closing; nothing where it did."""
        if event.kind == "attendance":
            answered = self.attended.get(drill, set())
            return "" if self.rule.satisfied_by(answered) or not self.begun else "no quorum answered in time"
        if drill not in self.rehearsed:
            return "no rehearsal of it did"
        took = (self.rehearsed[drill] - opened.time).total_seconds()
        return "it took longer than its target" if event.target is not None and took > event.target else ""

    def _document(self, entry: Entry, kind: type[One]) -> One | None:
        """Return the document of a kind that an entry names, where it is there, unaltered and valid."""
        if not entry.documents:
            self._claim(entry, f"names no {kind.KIND.replace('-', ' ')}: what it tells is not proven")
            return None
        return next((found for named in entry.documents if (found := self._read(entry, named, kind))), None)

    def _read(self, entry: Entry, named: NamedDigest, kind: type[One]) -> One | None:
        try:
            data = self.files.read(named.path, limit=MAX_FILE)
        except SharesError:
            return None
        if NamedDigest.of(named.path, data) != named:
            return None
        try:
            document = kind.parse(data, where=named.path)
        except SharesError as error:
            self._claim(entry, f"names {named.path}, which is no valid {kind.KIND.replace('-', ' ')}: {error.what}")
            return None
        self.filed.read.add(named.path)
        return document


def _deals(entry: Entry, record: Record) -> bool:
    return isinstance(entry.event, Dealt) and entry.event.record == record.fingerprint


def _says(event: Attested, attestation: Attestation, judgement: Judgement) -> bool:
    """Say whether an entry claims what its attestation proves, and no more."""
    claimed = (event.challenge, event.custodian, event.grade, event.result, event.opened)
    answered = (
        attestation.challenge,
        attestation.custodian,
        attestation.grade,
        attestation.result,
        attestation.opened,
    )
    worth = (True, judgement.attributed, judgement.late)
    return claimed == answered and (judgement.accepted, event.attributed, event.late) == worth
