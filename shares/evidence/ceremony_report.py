"""What a ceremony's log amounts to: exceptions first, then each step with its entries, and the shares by serial.

Source: ETSI EN 319 411-1, sec. 6.5.1 (what a ceremony's report tells; from a summary, its signature rule from memory);
CA/Browser Forum TLS Baseline Requirements, sec. 6.1.1.1; published root-zone practice (exceptions);
FORMAT_EVIDENCE.md, sec. 19.
May import: shares.errors, shares.documents, shares.history, shares.evidence.ceremony, .inventory.
Secret: nothing. Confidential: persons, and where shares are. Public: nothing.
Does not: call a ceremony good or bad: it tells what was entered, and what is missing. People judge.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import datetime
from functools import cached_property

from shares.documents.base import MAX_FILE
from shares.documents.ceremony_script import CeremonyScript, CeremonyStep
from shares.documents.entry import Entry, Head
from shares.documents.event import Deviation, ScriptStep
from shares.documents.record import Record
from shares.errors import ParameterError, VerificationError
from shares.evidence.ceremony import script_name
from shares.evidence.inventory import Copy, take_inventory
from shares.history.files import RECORD_NAME, Files
from shares.history.journal import JOURNAL_NAME, MAX_JOURNAL, Journal, read_journal


@dataclass(frozen=True, slots=True)
class StepDone:
    """One step, and what was entered of it.

    Attributes:
        number: of the step.
        step: as the script has it.
        entries: that logged it, in order; none where it is missing.
        signers: who signed those entries, by name.
    """

    number: int
    step: CeremonyStep
    entries: tuple[Entry, ...]
    signers: tuple[str, ...]

    @property
    def times(self) -> tuple[datetime, ...]:
        """When it was logged."""
        return tuple(entry.time for entry in self.entries)

    @property
    def initials(self) -> tuple[str, ...]:
        """Whose initials the entries have."""
        return tuple(e.event.initials for e in self.entries if isinstance(e.event, ScriptStep))

    @property
    def remarks(self) -> tuple[str, ...]:
        """What was noted."""
        return tuple(e.event.remark for e in self.entries if isinstance(e.event, ScriptStep) and e.event.remark)


@dataclass(frozen=True, slots=True)
class Exceptional:
    """Something that went another way.

    Attributes:
        what: in words.
        remedy: what was done about it, where somebody said so.
        step: at which step, where it was at one.
        time: of the entry that tells of it; None where the log itself shows it, and no entry does.
        initials: of whoever entered it.
        entry: its number.
    """

    what: str
    remedy: str | None = None
    step: int | None = None
    time: datetime | None = None
    initials: str | None = None
    entry: int | None = None


@dataclass(frozen=True)
class CeremonyReport:
    """A ceremony as its log tells it.

    Attributes:
        script: that was followed.
        steps: every step of it.
        exceptions: those that people entered, and then those that the log itself shows.
        missing: the steps that have no entry.
        record: of the set, where there is one by now.
        copies: of its shares, by serial, as the journal has them now.
        head: where the journal stands.
        problems: what is wrong with the journal, so that the rest may not be believed.
    """

    script: CeremonyScript
    steps: tuple[StepDone, ...]
    exceptions: tuple[Exceptional, ...]
    missing: tuple[int, ...]
    record: Record | None
    copies: tuple[Copy, ...]
    head: Head | None
    problems: tuple[str, ...]

    @cached_property
    def began(self) -> datetime | None:
        """When the first step was logged."""
        return min((time for step in self.steps for time in step.times), default=None)

    @cached_property
    def ended(self) -> datetime | None:
        """When the last step was logged."""
        return max((time for step in self.steps for time in step.times), default=None)


def ceremony_report(files: Files, *, script: bytes | None = None) -> CeremonyReport:
    """Return what the log of a ceremony amounts to, from what lies in a set's folder or pack.

    Args:
        files: of the set.
        script: the digest of the script, 32 bytes, where the journal tells of several ceremonies.

    Raises:
        StorageError: the journal, the script or the record cannot be read.
        DocumentError: script or record are none.
        VerificationError: the script was changed since it was logged.
        ParameterError: the journal tells of no ceremony, or of several and none of them was chosen.
    """
    names = files.names()
    journal = read_journal(files.read(JOURNAL_NAME, limit=MAX_JOURNAL)) if JOURNAL_NAME in names else Journal()
    digest = _chosen(journal, script, files.where)
    followed = _script(files, digest)
    record = None
    if RECORD_NAME in names:
        record = Record.parse(files.read(RECORD_NAME, limit=MAX_FILE), where=f"{files.where}/{RECORD_NAME}")
    own = [entry for entry in journal.entries if _is_about(entry, digest)]
    steps = tuple(_step_done(number, step, own, journal) for number, step in enumerate(followed.steps, start=1))
    inventory = take_inventory(journal, record)
    shown = [*_entered(journal, own, digest), *_shown(followed, own, record, inventory.copies)]
    return CeremonyReport(
        script=followed,
        steps=steps,
        exceptions=(*shown, *(Exceptional(what) for what in (*inventory.problems, *_worth_knowing(journal)))),
        missing=tuple(one.number for one in steps if not one.entries),
        record=record,
        copies=inventory.copies if record is not None else (),
        head=journal.head,
        problems=tuple(f"line {problem.line}: {problem.what}" for problem in journal.problems if problem.breaks),
    )


def _worth_knowing(journal: Journal) -> list[str]:
    """Return what is odd about the journal and does not break it: a clock that ran backwards, a line half written."""
    return [f"line {problem.line} of the journal: {problem.what}" for problem in journal.problems if not problem.breaks]


def _chosen(journal: Journal, wanted: bytes | None, where: str) -> bytes:
    told = dict.fromkeys(entry.event.script for entry in journal.entries if isinstance(entry.event, ScriptStep))
    if wanted is not None:
        if wanted not in told:
            raise ParameterError("the journal tells of no step of this script", where=where)
        return wanted
    if len(told) != 1:
        raise ParameterError(
            f"the journal tells of {len(told)} ceremonies, so say which"
            if told
            else "the journal tells of no ceremony",
            where=where,
            hint="give the script's file with --script" if told else "`shares ceremony log` enters its steps",
        )
    return next(iter(told))


def _script(files: Files, digest: bytes) -> CeremonyScript:
    name = script_name(digest)
    where = f"{files.where}/{name}"
    data = files.read(name, limit=MAX_FILE)
    if hashlib.sha256(data).digest() != digest:
        raise VerificationError(
            "it is not the script that the journal names: it was changed since",
            where=where,
            hint="bring back the script's file as it was; its SHA-256 is printed on the paper of the ceremony",
        )
    return CeremonyScript.parse(data, where=where)


def _is_about(entry: Entry, digest: bytes) -> bool:
    return isinstance(entry.event, ScriptStep | Deviation) and entry.event.script == digest


def _step_done(number: int, step: CeremonyStep, own: list[Entry], journal: Journal) -> StepDone:
    entries = tuple(e for e in own if isinstance(e.event, ScriptStep) and e.event.step == number)
    signers = dict.fromkeys(card.name for entry in entries for card in journal.signers(entry))
    return StepDone(number, step, entries, tuple(signers))


def _entered(journal: Journal, own: list[Entry], digest: bytes) -> Iterator[Exceptional]:
    """Yield the exceptions that people entered: of this script, or of none while its ceremony went on."""
    first, last = own[0].sequence, own[-1].sequence
    for entry in journal.entries:
        event = entry.event
        if not isinstance(event, Deviation):
            continue
        if event.script == digest or (event.script is None and first <= entry.sequence <= last):
            yield Exceptional(event.remark, event.remedy, event.step, entry.time, event.initials, entry.sequence)


def _shown(
    script: CeremonyScript, own: list[Entry], record: Record | None, copies: tuple[Copy, ...]
) -> Iterator[Exceptional]:
    """Yield what the log itself shows, though nobody entered it as an exception."""
    seen: dict[int, Entry] = {}
    furthest = 0
    for entry in own:
        event = entry.event
        if not isinstance(event, ScriptStep):
            continue
        if event.step > len(script.steps):
            yield Exceptional(f"entry {entry.sequence} logs step {event.step}, which the script does not have")
        elif event.step in seen and not event.repeats:
            first = seen[event.step].sequence
            yield Exceptional(
                f"it was logged twice, by entries {first} and {entry.sequence}, and the second does not say that it "
                "repeats the step",
                step=event.step,
            )
        elif event.step not in seen and event.step < furthest:
            yield Exceptional(f"it was logged out of order, after step {furthest}", step=event.step)
        seen.setdefault(event.step, entry)
        furthest = max(furthest, event.step)
        if script.dual_control and len({one.card for one in entry.signatures}) < 2:
            yield Exceptional(f"entry {entry.sequence} lacks the two signatures of dual control", step=event.step)
    if record is not None and record.policy != script.policy:
        yield Exceptional("the set was split by another policy than the one that the script was made for")
    if record is not None and record.label != script.label:
        yield Exceptional("the set bears another label than the script")
    for copy in copies:
        if copy.mismatch:
            yield Exceptional(
                f"the pack of {copy.custodian} was sent with the serial {copy.sent}, and arrived with {copy.received}"
            )
