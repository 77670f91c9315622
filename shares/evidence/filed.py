"""The documents that a journal names, read and judged again: attestations with their challenges, and drill reports.

An entry is a claim. What an attestation proves is worked out from the attestation itself, and an entry that claims more
is named.

Source: FORMAT.md, sec. 16 to 18.
May import: shares.errors, shares.documents, shares.history, shares.evidence.
Secret: nothing. Confidential: the documents. Public: the record.
Does not: say that a file is missing or altered: ``history.verify`` does. What cannot be read proves nothing here.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TypeVar

from shares.documents.attestation import Attestation
from shares.documents.base import MAX_FILE, Document
from shares.documents.challenge import Challenge
from shares.documents.drill_report import DrillReport
from shares.documents.entry import Entry, Head, NamedDigest
from shares.documents.event import Attested, Challenged, Dealt, DrillClosed, DrillOpened, Introduced, Rehearsed
from shares.documents.record import Record
from shares.errors import SharesError
from shares.evidence.audited import Proof
from shares.evidence.judge import Earlier, Judgement, judge
from shares.history.files import Files
from shares.history.journal import Journal

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


def read_filed(journal: Journal, files: Files, record: Record) -> Filed:
    """Read what a journal names, and judge it again with public material alone; never raises for what files hold.

    Args:
        journal: as it was read.
        files: of the set.
        record: the set's.
    """
    # Attestations of an earlier epoch cannot be judged by this record, and prove nothing of it.
    reader = _Reader(files, record, begun=not any(_deals(entry, record) for entry in journal.entries))
    for entry in journal.entries:
        reader.read(entry)
    return reader.filed


@dataclass(slots=True, eq=False)
class _Reader:
    files: Files
    record: Record
    begun: bool
    filed: Filed = field(default_factory=Filed)
    cards: dict[str, str] = field(default_factory=dict)
    challenges: dict[bytes, Challenge | None] = field(default_factory=dict)
    answered: dict[bytes, dict[str, Earlier]] = field(default_factory=dict)
    drills: dict[int, DrillOpened] = field(default_factory=dict)
    rehearsed: set[int] = field(default_factory=set)

    def read(self, entry: Entry) -> None:
        event = entry.event
        match event:
            case Dealt():
                self.begun = self.begun or _deals(entry, self.record)
                self.cards |= {share.name: share.card for share in event.custodians if share.card is not None}
            case Introduced():
                self.cards[event.custodian] = event.card
            case Challenged():
                self._challenged(entry, event)
            case Attested() if self.begun:
                self._attested(entry, event)
            case DrillOpened():
                self.drills[entry.sequence] = event
            case Rehearsed(passed=True):
                self.rehearsed.add(event.drill)
            case DrillClosed():
                self._closed(entry, event)

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
                entry.time, entry.sequence, event.grade, event.result, False, event.late, event.opened, counts=False
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
            )
        self.filed.proofs[entry.sequence] = proof

    def _judged(self, entry: Entry, attestation: Attestation, challenge: Challenge) -> Judgement | None:
        earlier = self.answered.setdefault(attestation.challenge, {})
        try:
            judgement = judge(
                attestation,
                challenge,
                self.record,
                card=self.cards.get(attestation.custodian),
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
        told = (report.set, report.drill, report.passed, opened.kind if opened else None)
        if told != (self.record.set, event.drill, event.passed, report.drill_kind):
            self._claim(entry, f"tells otherwise of drill {event.drill} than the report that it names")
        elif report.passed and report.drill_kind != "attendance" and event.drill not in self.rehearsed:
            self._claim(entry, f"says that drill {event.drill} passed, and no rehearsal of it did")
        else:
            self.filed.reports[event.drill] = report

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
