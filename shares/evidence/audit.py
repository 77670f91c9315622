"""Audit one set, offline and from public material: everything that its folder or pack says, held against itself.

Source: NIST SP 800-53, CP-4, CP-9; CSA CCM 4, CEK-09 (key management is audited); FORMAT.md, sec. 15 to 20.
May import: shares.errors, shares.clock, shares.storage, shares.documents, shares.history, shares.evidence.
Secret: nothing; no share is looked at. Confidential: the policy, and what the journal tells. Public: the record.
Does not: raise for anything that the files hold, or prove what nobody can: that a file was erased, a pack kept closed,
a person honest, or that whoever holds every signing key did not write another journal from its start.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from datetime import datetime

from shares import clock
from shares.documents.base import MAX_FILE
from shares.documents.entry import Head
from shares.documents.event import (
    Acknowledged,
    Dealt,
    Deviation,
    Introduced,
    Noted,
    Retired,
    ScriptStep,
    SetAside,
)
from shares.documents.party import PartyCard
from shares.documents.policy import Policy
from shares.documents.record import Record
from shares.errors import SharesError
from shares.evidence import reasons
from shares.evidence.audited import Audit, Counts, DrillRow, ExceptionRow, Reason, Signer, Verdict
from shares.evidence.drill import drills
from shares.evidence.exposure import exposure
from shares.evidence.filed import Filed, read_filed
from shares.evidence.life import Life
from shares.evidence.margin import margin, margins
from shares.evidence.standing import Standings
from shares.evidence.strays import find_strays
from shares.evidence.tasks import OUTLIVES, tasks
from shares.history.files import POLICY_NAME, PRACTICE_RECORD, RECORD_NAME, Files
from shares.history.journal import JOURNAL_NAME, MAX_JOURNAL, Journal, read_journal
from shares.history.verify import head_problems, verify

_BEFORE_SPLIT = (ScriptStep, Deviation, Noted, Introduced, Acknowledged, SetAside)
"""All that happens before a split."""


def audit(
    files: Files, *, at: datetime | None = None, trusted: Sequence[PartyCard] = (), heads: Sequence[Head] = ()
) -> Audit:
    """Audit one set.

    Args:
        files: its folder or pack.
        at: the time that counts as now, UTC to the second; entries that bear a later one are checked, and not looked
            at otherwise. Now by default, and then an entry of the future is a finding.
        trusted: cards whose fingerprints were compared: one of these parties must have signed the record, and every
            entry of the journal.
        heads: where its journal is known to have stood: noted elsewhere, or read aloud.

    Returns:
        What was found. Whatever the files hold, it is named there; nothing is raised for it.
    """
    now = clock.now() if at is None else at
    found = _Findings(_names(files), tuple(heads))
    begun = _before_split(files, found, now)
    if begun is not None:
        return _sorted(begun)
    record = found.record(files)
    if record is None:
        return _sorted(Audit(files.where, now, Verdict.BROKEN, tuple(found.reasons)))
    found.reasons += reasons.record_reasons(record, trusted)
    policy = found.policy(files, record)
    journal, filed = found.journal(files, record, policy, trusted)
    life = Life.until(now, record, policy, journal.entries)
    later = len(journal.entries) - len(life.entries)
    found.later(later, by_choice=at is not None)
    found.practice(files, life)
    audited = _worked_out(files, life, journal, filed, found)
    return _sorted(
        replace(
            audited,
            signers=_signers(record, journal, trusted),
            head=journal.head.words() if journal.head else None,
            counts=Counts(
                entries=len(journal.entries),
                later_entries=later,
                unsigned_entries=sum(not entry.signatures for entry in journal.entries),
                signatures=len(record.signatures) + sum(len(entry.signatures) for entry in journal.entries),
                documents=len({named.path for entry in journal.entries for named in entry.documents}),
                attestations=len(filed.proofs),
                heads=len(found.heads),
            ),
            reasons=tuple(found.reasons),
            notes=tuple(found.notes),
        )
    )


def _before_split(files: Files, found: _Findings, now: datetime) -> Audit | None:
    """Return the audit of a folder in which a ceremony is under way and nothing was split; None of any other."""
    if RECORD_NAME in found.names or JOURNAL_NAME not in found.names:
        return None
    try:
        journal = read_journal(files.read(JOURNAL_NAME, limit=MAX_JOURNAL))
    except SharesError:
        return None
    events = [entry.event for entry in journal.entries]
    if not any(isinstance(event, ScriptStep) for event in events):
        return None
    # A set that was split leaves more behind than its record.
    if not all(isinstance(event, _BEFORE_SPLIT) for event in events):
        return None
    if find_strays(files, found.names, journal).names:
        return None
    found.before_split()
    problems, found.notes = reasons.journal_reasons((*journal.problems, *head_problems(journal, found.heads)))
    return Audit(
        where=files.where,
        at=now,
        verdict=Verdict.DUE,
        reasons=(*found.reasons, *problems),
        notes=tuple(found.notes),
        head=journal.head.words() if journal.head else None,
        counts=Counts(
            entries=len(events),
            unsigned_entries=sum(not entry.signatures for entry in journal.entries),
            signatures=sum(len(entry.signatures) for entry in journal.entries),
            heads=len(found.heads),
        ),
    )


def _worked_out(files: Files, life: Life, journal: Journal, filed: Filed, found: _Findings) -> Audit:
    """Return what follows from the journal, and weigh it unless the set has come to its end."""
    record = life.record
    standings = Standings(life, filed.proofs)
    rows = standings.rows()
    drilled = tuple(_drill_rows(life, filed))
    known = exposure(life)
    now = margin(life, rows)
    to_do = tasks(life, rows, drilled, filed.reports, known)
    retired = next((found_here for found_here in life.each(Retired)), None)
    if retired is None:
        found.reasons += [
            *reasons.margin_reasons(life, now, rows),
            *reasons.custodian_reasons(rows),
            *reasons.card_reasons(rows, journal.cards),
            *reasons.exposure_reasons(known, record.epoch),
            *reasons.drill_reasons(drilled),
            *reasons.task_reasons(to_do),
        ]
    else:
        to_do = tuple(task for task in to_do if task.kind in OUTLIVES)
        found.reasons += [
            *reasons.retired_reasons(rows, retired[0].time),
            *reasons.exposure_reasons(known, record.epoch),
            *reasons.task_reasons(to_do),
        ]
    found.notes += standings.notes
    for name in life.intervals.assumed:
        days = getattr(life.intervals, name).days
        found.notes.append(f"The policy says no {name}: {days} days are taken.")
    return Audit(
        where=files.where,
        at=life.at,
        verdict=Verdict.GOOD,
        reasons=(),
        label=record.label,
        set_id=record.set.hex(),
        epoch=record.epoch,
        record=record.fingerprint,
        created=record.created,
        rule=life.rule.words(),
        with_policy=life.policy is not None,
        intervals=life.intervals,
        custodians=rows,
        margin=now,
        margins=margins(life.rule, standings.spans(), life.start, life.at),
        exposure=known,
        drills=drilled,
        tasks=to_do,
        exceptions=tuple(
            ExceptionRow(entry.sequence, entry.time, event.remark, event.remedy)
            for entry, event in life.each(Deviation)
        ),
        retired=retired[0].time if retired else None,
        keep_until=retired[1].keep_until if retired else None,
    )


@dataclass(slots=True, eq=False)
class _Findings:
    """Reasons and notes, gathered while one file after the other is read."""

    names: frozenset[str]
    heads: tuple[Head, ...]
    reasons: list[Reason] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)

    def _add(self, level: Verdict, code: str, what: str, step: str) -> None:
        self.reasons.append(Reason(level, code, what, step))

    def before_split(self) -> None:
        """Say that nothing is split yet."""
        what = "Nothing is split yet: a ceremony is under way, by the journal."
        step = "Go on with the next step of its script: `shares ceremony report` tells which were done."
        self._add(Verdict.DUE, "not-split", what, step)

    def record(self, files: Files) -> Record | None:
        """Read the record, or say why it cannot be read."""
        try:
            return Record.parse(files.read(RECORD_NAME, limit=MAX_FILE))
        except SharesError as error:
            step = "Bring the record back from a copy: every custodian may have one. Compare its fingerprint."
            self._add(Verdict.BROKEN, "record-unreadable", f"The record cannot be read: {error.what}.", step)
            return None

    def policy(self, files: Files, record: Record) -> Policy | None:
        """Read the policy that the record names, or say what is wrong with it."""
        if record.policy is None:
            self.notes.append("The set was split without a policy: persons, sites and intervals are not known.")
            return None
        if POLICY_NAME not in self.names:
            what = "The policy that the record names is missing: persons, sites and intervals are not known."
            self._add(Verdict.AT_RISK, "policy-missing", what, "Bring back the copy that was made at the split.")
            return None
        step = "Bring back the copy that was made at the split; a new policy goes with a new split."
        try:
            policy = Policy.parse(files.read(POLICY_NAME, limit=MAX_FILE))
        except SharesError as error:
            self._add(Verdict.BROKEN, "policy-unreadable", f"The policy cannot be read: {error.what}.", step)
            return None
        if policy.digest() != record.policy:
            what = "The policy is not the one that the record names: it was changed since the split."
            self._add(Verdict.BROKEN, "policy-altered", what, step)
            return None
        if policy.rule() != record.rule.to_rule():
            what = "The policy has another rule than the record that names it."
            self._add(Verdict.BROKEN, "policy-other-rule", what, step)
            return None
        return policy

    def journal(
        self, files: Files, record: Record, policy: Policy | None, trusted: Sequence[PartyCard]
    ) -> tuple[Journal, Filed]:
        """Read the journal and what it names, and say what is wrong with them."""
        if JOURNAL_NAME not in self.names:
            strays = find_strays(files, self.names, Journal(), set_id=record.set)
            self.reasons += reasons.stray_reasons(strays.names, journal=False)
            self.heads = tuple(dict.fromkeys((*strays.heads, *self.heads)))
            self.reasons += reasons.journal_reasons(head_problems(Journal(), self.heads))[0]
            if strays.names or self.heads:
                return Journal(), Filed()
            what = "The set has no journal: nothing is known of what became of its shares."
            step = "Look for it in copies; where there never was one, begin it: `shares journal add`."
            self._add(Verdict.AT_RISK, "no-journal", what, step)
            return Journal(), Filed()
        try:
            journal = read_journal(files.read(JOURNAL_NAME, limit=MAX_JOURNAL))
            filed = read_filed(journal, files, record, policy)
            strays = find_strays(files, self.names, journal, set_id=record.set, read=filed.read)
            self.heads = tuple(dict.fromkeys((*filed.heads, *strays.heads, *self.heads)))
            problems = verify(journal, files, record, policy, heads=self.heads, trusted=trusted)
        except SharesError as error:
            step = "See the reason given, and read the journal from a copy."
            self._add(Verdict.BROKEN, "journal-unreadable", f"The journal cannot be read: {error.what}.", step)
            return Journal(), Filed()
        found, notes = reasons.journal_reasons(problems)
        missing = reasons.stray_reasons(strays.names, journal=True)
        self.reasons += [*found, *reasons.claim_reasons(filed.claims), *missing]
        self.notes += notes
        return journal, filed

    def later(self, count: int, *, by_choice: bool) -> None:
        """Say that entries bear a later time than that of the audit."""
        if count and by_choice:
            self.notes.append(f"{count:,} entries bear a later time than this audit; they were checked, not looked at.")
        elif count:
            what = f"{count:,} entries of the journal are dated in the future; what they tell was left out."
            self._add(Verdict.DUE, "entries-in-future", what, "Find out which machine's clock was wrong, and note it.")

    def practice(self, files: Files, life: Life) -> None:
        """Say what is wrong with the record of the practice set, where one was dealt."""
        dealt = life.dealt.event if life.dealt else None
        if not isinstance(dealt, Dealt) or dealt.practice is None:
            return
        if PRACTICE_RECORD not in self.names:
            what = "The record of the practice set is missing, so that nobody can rehearse with practice shares."
            self._add(Verdict.DUE, "practice-missing", what, "Bring it back from a copy of the set's folder.")
            return
        try:
            problem = Record.parse(files.read(PRACTICE_RECORD, limit=MAX_FILE)).fingerprint != dealt.practice
            what = "it is not the one that the journal names"
        except SharesError as error:
            problem, what = True, error.what
        if problem:
            what = f"The record of the practice set does not hold: {what}."
            self._add(Verdict.BROKEN, "practice-altered", what, "Bring it back from a copy of the set's folder.")


def _names(files: Files) -> frozenset[str]:
    """Return the names of the files; where they cannot be listed, those that are read, and reading them says why."""
    try:
        return frozenset(files.names())
    except SharesError:
        return frozenset([RECORD_NAME, POLICY_NAME, JOURNAL_NAME, PRACTICE_RECORD])


def _drill_rows(life: Life, filed: Filed) -> Iterator[DrillRow]:
    for drill in drills(Journal(life.entries)):
        report = filed.reports.get(drill.number) if drill.closed else None
        yield DrillRow(
            number=drill.number,
            kind=drill.event.kind,
            scope=drill.event.scope,
            opened=drill.opened,
            closed=drill.closed.time if drill.closed else None,
            # A drill whose report is not there, or tells otherwise, has not been shown to pass.
            passed=None if drill.closed is None else report is not None and report.passed,
            target=drill.event.target,
            took=drill.recovered,
            custodians=tuple(drill.took_part),
            outcomes=tuple(entry.event.outcome for entry in drill.rehearsals if entry.event.what == "rehearsed"),
            findings=report.findings if report else (),
            actions=tuple(
                f"{action.what} ({action.owner}, {action.due:%Y-%m-%d})"
                for action in (report.actions if report else ())
            ),
        )


def _signers(record: Record, journal: Journal, trusted: Sequence[PartyCard]) -> tuple[Signer, ...]:
    roles: dict[str, list[str]] = {}
    entries: dict[str, int] = {}
    names: dict[str, str] = {}
    for one in record.signatures:
        roles.setdefault(one.card.fingerprint, []).append(one.role)
        names[one.card.fingerprint] = one.card.name
    for entry in journal.entries:
        for card in journal.signers(entry):
            entries[card.fingerprint] = entries.get(card.fingerprint, 0) + 1
            names.setdefault(card.fingerprint, card.name)
    known = {card.fingerprint for card in trusted}
    return tuple(
        Signer(
            name=name,
            card=card,
            roles=(*roles.get(card, ()), *(("journal",) if card in entries else ())),
            entries=entries.get(card, 0),
            trusted=card in known,
        )
        for card, name in names.items()
    )


def _sorted(audited: Audit) -> Audit:
    """Return an audit with its worst reasons first, and the verdict that they leave."""
    ordered = tuple(sorted(audited.reasons, key=lambda reason: -reason.level.rank))
    return replace(audited, reasons=ordered, verdict=ordered[0].level if ordered else Verdict.GOOD)
