"""The end of a drill: a report of what it showed, drawn from the journal, signed and filed.

Source: NIST SP 800-84, sec. 6.5 (after-action report: scope, objectives, observations, recommendations, participants;
actions with their owners); FORMAT.md, sec. 18.
May import: shares.errors, shares.clock, shares.documents, shares.history, shares.paper.page,
shares.evidence.drill.
Secret: party keys that sign, passed through. Confidential: the rest. Public: nothing.
Does not: hide a drill that failed: that is its result.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from datetime import datetime
from pathlib import Path

from shares import clock
from shares.documents.drill_report import Action, DrillReport, DrillStep, Participant
from shares.documents.entry import Entry, NamedDigest
from shares.documents.event import Attested, DrillClosed, Rehearsed
from shares.documents.members import MAX_TEXT, check_text
from shares.documents.party import OpenPartyKey
from shares.errors import ParameterError, VerificationError
from shares.evidence.drill import Drill, seconds_between, the_drill
from shares.history.folder import SetFolder
from shares.paper.page import REPORT, render


def close_drill(
    folder: SetFolder,
    drill: Drill,
    *,
    findings: Sequence[str] = (),
    actions: Sequence[Action] = (),
    keys: Sequence[OpenPartyKey],
    at: datetime | None = None,
) -> tuple[DrillReport, NamedDigest, Entry]:
    """Close a drill with a signed report, filed in the set's folder and entered into the journal.

    Args:
        folder: the set's.
        drill: an open one.
        findings: what people observed; what the journal itself shows is added.
        actions: what is to be done, by whom, until when.
        keys: of the parties that sign the report and the entry.
        at: the time; now by default.

    Returns:
        The report, the file that it is in, and the entry that names it.

    Raises:
        ParameterError: nobody signs, or a text out of range.
        StorageError: report or entry cannot be written.
    """
    if not keys:
        raise ParameterError("a drill report is signed", hint="give the party key that signs it, with --sign")
    folder.require_signers(keys)
    for text in findings:
        check_text(text)
    # As it stands now: since the caller looked, it may have been rehearsed, or closed by another.
    drill = the_drill(folder.journal(), drill.number)
    report = _report(folder, drill, findings, actions, clock.now() if at is None else at)
    for key in keys:
        report = report.signed(key)
    filed = folder.add(folder.free_name(f"drills/{drill.number}/report.json"), report.to_file())
    event = DrillClosed(what="drill-closed", drill=drill.number, passed=report.passed)
    return report, filed, folder.append(event, keys=keys, documents=[filed], time=at)


def _report(
    folder: SetFolder, drill: Drill, findings: Sequence[str], actions: Sequence[Action], closed: datetime
) -> DrillReport:
    record, journal, event = folder.record, folder.journal(), drill.event
    head = journal.head
    if head is None:
        raise VerificationError("the journal is empty", hint="a drill that was opened stands in it")
    took_part = drill.took_part
    return DrillReport(
        kind="drill-report",
        version=1,
        set=record.set,
        epoch=record.epoch,
        record=record.fingerprint,
        label=record.label,
        drill=drill.number,
        drill_kind=event.kind,
        scope=event.scope,
        objectives=event.objectives,
        opened=drill.opened,
        closed=closed,
        participants=tuple(_participant(name, drill, took_part.get(name)) for name in event.custodians),
        persons=tuple(dict.fromkeys(person for entry in drill.rehearsals for person in _persons(entry))),
        steps=tuple(_steps(drill, closed)),
        recovery_seconds=drill.recovered,
        target_seconds=event.target,
        passed=passed(folder, drill),
        findings=(*_shown(folder, drill), *findings),
        actions=tuple(actions),
        journal=head,
        signatures=(),
    )


def passed(folder: SetFolder, drill: Drill) -> bool:
    """Say whether a drill showed what it was to show: a quorum answered, or recovered within the target."""
    if drill.event.kind == "attendance":
        in_time = [name for name, entry in drill.answers.items() if not _is_late(entry)]
        return folder.record.rule.to_rule().satisfied_by(in_time)
    return drill.recovered is not None and not _too_slow(drill)


def _too_slow(drill: Drill) -> bool:
    return drill.recovered is not None and drill.event.target is not None and drill.recovered > drill.event.target


def _is_late(entry: Entry) -> bool:
    return isinstance(entry.event, Attested) and entry.event.late


def _shown(folder: SetFolder, drill: Drill) -> Iterator[str]:
    """Yield what the journal itself shows of a drill that went less than well."""
    if drill.event.kind == "attendance":
        for name in drill.event.custodians:
            if name not in drill.answers:
                yield f"{name} did not answer"
            elif _is_late(drill.answers[name]):
                yield f"{name} answered late"
        if not passed(folder, drill):
            yield "those who answered in time make no quorum"
        return
    if not drill.rehearsals:
        yield "nothing was rehearsed"
    for entry in drill.rehearsals:
        if isinstance(entry.event, Rehearsed) and entry.event.outcome != "passed":
            yield entry.event.outcome if entry.event.passed else f"a rehearsal failed: {entry.event.outcome}"[:MAX_TEXT]
    if _too_slow(drill):
        took, target = in_words(drill.recovered or 0), in_words(drill.event.target or 0)
        yield f"recovered {took} after the call; the target is {target}"


def _participant(name: str, drill: Drill, entry: Entry | None) -> Participant:
    place = entry.event.place if entry and isinstance(entry.event, Attested) else None
    seconds = seconds_between(drill.opened, entry.time) if entry else None
    return Participant(custodian=name, took_part=entry is not None, seconds=seconds, place=place)


def _persons(entry: Entry) -> tuple[str, ...]:
    return entry.event.persons if isinstance(entry.event, Rehearsed) else ()


def _steps(drill: Drill, closed: datetime) -> Iterator[DrillStep]:
    yield DrillStep(time=drill.opened, what=f"called: {drill.event.kind}, entry {drill.number}")
    entries = sorted((*drill.answers.values(), *drill.rehearsals), key=lambda entry: entry.sequence)
    for entry in entries:
        event = entry.event
        if isinstance(event, Attested):
            yield DrillStep(time=entry.time, what=f"{event.custodian} answered{', late' if event.late else ''}")
        elif isinstance(event, Rehearsed):
            yield DrillStep(time=entry.time, what=_rehearsed_in_words(event)[:MAX_TEXT])
    yield DrillStep(time=closed, what="closed")


def _rehearsed_in_words(event: Rehearsed) -> str:
    probed = ""
    if event.probe is not None:
        probed = f"; the probe ended with code {event.probe} after {in_words(event.probe_seconds or 0)}"
    names = ", ".join(event.custodians) or "no usable share"
    return f"rehearsed by {names}, in {in_words(event.seconds)}: {how_it_went(event)}{probed}"


def how_it_went(event: Rehearsed) -> str:
    """Say how a rehearsal went, in words."""
    return event.outcome if event.passed else f"failed: {event.outcome}"


def report_page(report: DrillReport) -> bytes:
    """Return the report as a page for people."""
    return render(Path(__file__).with_name("drill_report.html"), REPORT, report=report, words=in_words)


def in_words(seconds: int) -> str:
    """Say a duration in days, hours and minutes.

    >>> in_words(15_000), in_words(42), in_words(0)
    ('4 h 10 min', '42 s', 'less than a second')
    """
    days, rest = divmod(seconds, 86_400)
    hours, rest = divmod(rest, 3600)
    minutes, left = divmod(rest, 60)
    parts = [f"{count} {unit}" for count, unit in ((days, "d"), (hours, "h"), (minutes, "min")) if count]
    return " ".join(parts[:2]) if parts else f"{left} s" if left else "less than a second"
