"""Scripts, reports and affidavits for people: as pages to print, and as text.

Source: FORMAT_EVIDENCE.md, sec. 19, for what they show; PCI PIN 3.1, 24-2 (an affidavit of destruction; from memory).
May import: shares.clock, shares.documents, shares.paper, shares.evidence.ceremony_report, .inventory, .steps.
Secret: nothing. Confidential: persons, and where shares are. Public: nothing.
Does not: decide anything. Whatever comes from documents is escaped on pages.
"""

from __future__ import annotations

import itertools
import textwrap
from collections.abc import Iterator, Sequence
from datetime import datetime
from pathlib import Path
from typing import Final

from shares import clock
from shares.documents.ceremony_script import CeremonyScript, CeremonyStep
from shares.documents.record import Record
from shares.evidence.ceremony_report import CeremonyReport, Exceptional
from shares.evidence.inventory import Copy
from shares.evidence.steps import folder_name, signing
from shares.paper.page import REPORT, SHEET, render

_HERE: Final = Path(__file__).parent
_STYLE: Final = _HERE / "ceremony.css"
_WIDTH: Final = 78
_LINE: Final = "_" * 24


def log_command(script: CeremonyScript) -> str:
    """Return what the internal witness types after each step of a ceremony."""
    log = f"shares ceremony log {folder_name(script.label)} --script script.json --step N --initials XX"
    return log + signing(script.dual_control)


def script_page(script: CeremonyScript) -> bytes:
    """Return the script as the paper that lies on the table: HTML, UTF-8."""
    template = _HERE / "ceremony_script.html"
    parts = [(part, list(steps)) for part, steps in itertools.groupby(_numbered(script), lambda one: one[1].part)]
    return render(template, REPORT, _STYLE, script=script, parts=parts, log=log_command(script), time=_time)


def report_page(report: CeremonyReport) -> bytes:
    """Return the report of a ceremony as a page: HTML, UTF-8."""
    template = _HERE / "ceremony_report.html"
    return render(template, REPORT, _STYLE, report=report, verdict=verdict(report), time=_time, ranges=ranges)


def affidavit_page(record: Record, copy: Copy) -> bytes:
    """Return the form on which the destruction of a copy is declared, by hand: HTML, UTF-8."""
    return render(_HERE / "affidavit.html", SHEET, record=record, copy=copy)


def ranges(numbers: Sequence[int]) -> str:
    """Say rising numbers in few words.

    >>> ranges([1, 3, 4, 5, 8, 9])
    '1, 3 to 5, 8, 9'
    """
    runs: list[list[int]] = []
    for number in numbers:
        if runs and number == runs[-1][-1] + 1:
            runs[-1].append(number)
        else:
            runs.append([number])
    words = [f"{run[0]} to {run[-1]}" if len(run) > 2 else ", ".join(map(str, run)) for run in runs]
    return ", ".join(words)


def verdict(report: CeremonyReport) -> str:
    """Say in one line how the log of a ceremony looks."""
    entered, shown = _counted(report)
    done = len(report.steps) - len(report.missing)
    parts = [f"{done} of {len(report.steps)} steps logged"]
    parts.append(f"{entered or 'no'} exception{'s' if entered != 1 else ''} entered")
    parts += [f"{shown} more shown by the log"] if shown else []
    return ("THE JOURNAL DOES NOT HOLD. " if report.problems else "") + ", ".join(parts) + "."


def script_text(script: CeremonyScript) -> str:
    """Return the script as text, for where no browser is at hand."""
    lines = [
        "SCRIPT OF A KEY CEREMONY: CONFIDENTIAL",
        *_wrapped(script.label),
        "",
        *_fact("Script", f"{script.spoken()} (read aloud)"),
        *_fact("", f"SHA-256 of script.json: {script.digest().hex()}"),
        *_fact("Made", _time(script.created)),
        *_fact("To recover", script.rule),
        *_fact("Policy", f"SHA-256: {script.policy.hex()}"),
        *_fact("Software", f"shares {script.software.version}, {script.software.digest.hex()}"),
        *_fact("Day, place", script.planned or _LINE),
        *_fact("Second day", script.standby or _LINE),
        *_fact("Agreed by", "; ".join(f"{s.card.name}, {s.card.fingerprint}" for s in script.signatures) or "unsigned"),
        "",
        "Nothing secret stands here, and nothing secret is ever written on it.",
        "After each step the internal witness logs it:",
        f"  $ {log_command(script)}",
        "What goes another way is logged with --exception TEXT --remedy TEXT.",
        "",
        "ROLES",
    ]
    for role in script.roles:
        lines += _wrapped(f"{role.role}: {role.person or _LINE}  signature {_LINE}", 2)
        lines += _wrapped(role.duty, 4)
    part = ""
    for number, step in _numbered(script):
        if step.part != part:
            part = step.part
            lines += ["", part.upper()]
        lines += _step_text(number, step)
    lines += ["", "EXCEPTIONS (step, what happened, remedy, initials, time)", "", "", "", "SIGNATURES"]
    for role in script.roles:
        lines += ["", f"  {role.role}", f"  name {_LINE}  signature {_LINE}"]
    return "\n".join(lines) + "\n"


def _step_text(number: int, step: CeremonyStep) -> Iterator[str]:
    yield ""
    yield f"{number:>4}. [{step.role}]   initials ________  time (UTC) ________"
    yield from _wrapped(step.what, 6)
    if step.command:
        yield f"      $ {step.command}"
    yield from _wrapped(f"To be seen: {step.expected}", 6)
    if step.note:
        yield f"      {step.note}: {_LINE}"


def report_lines(report: CeremonyReport) -> Iterator[str]:
    """Yield the report as lines of text: exceptions first."""
    yield f"Ceremony: {report.script.label}"
    yield verdict(report)
    for problem in report.problems:
        yield from _wrapped(f"The journal does not hold, {problem}", 2)
    yield ""
    yield "Exceptions:" if report.exceptions else "Exceptions: none was entered, and the log shows none."
    for one in report.exceptions:
        yield from _wrapped(_exception_text(one), 2)
    if report.missing:
        yield from _wrapped(f"Steps without an entry: {ranges(report.missing)}.")
    yield ""
    yield from _fact("Script", f"{report.script.spoken()}, SHA-256 {report.script.digest().hex()}")
    yield from _fact("Time", f"{_time(report.began)} to {_time(report.ended)}")
    yield from _fact("Record", report.record.fingerprint if report.record else "none yet: nothing has been split")
    signers = [f"{s.card.name} as {s.role}" for s in report.record.signatures] if report.record else []
    yield from _fact("Signed by", ", ".join(signers) or "nobody")
    yield ""
    yield "Roles:"
    for role in report.script.roles:
        yield from _wrapped(f"{role.role}: {role.person or 'on the paper alone'}", 2)
    yield ""
    yield "Steps:"
    for done in report.steps:
        logged = "; ".join(f"{_time(e.time)} (entry {e.sequence})" for e in done.entries) or "NO ENTRY"
        by = f", {'; '.join(done.initials)}" if done.initials else ""
        signed = f", signed by {', '.join(done.signers)}" if done.signers else ""
        yield from _wrapped(f"{done.number}. {done.step.role}: {logged}{by}{signed}", 2)
        yield from (line for remark in done.remarks for line in _wrapped(f"remark: {remark}", 6))
    if report.copies:
        yield ""
        yield "Shares, by serial:"
    for copy in report.copies:
        sent, got = copy.sent or "not entered", copy.received or "not entered"
        yield from _wrapped(f"{copy.custodian}, {copy.name}: sent {sent}, received {got}; {copy.fate}", 2)
    yield ""
    yield from _wrapped(f"The journal stands at {report.head.words()}." if report.head else "The journal is empty.")


def _exception_text(one: Exceptional) -> str:
    step = f"step {one.step}: " if one.step else ""
    entered = f"entry {one.entry}, {_time(one.time)}" if one.entry else "entered by nobody: the log shows it"
    by = f", {one.initials}" if one.initials else ""
    return f"{step}{one.what} - remedy: {one.remedy or 'none stated'} ({entered}{by})"


def _counted(report: CeremonyReport) -> tuple[int, int]:
    entered = sum(1 for one in report.exceptions if one.entry is not None)
    return entered, len(report.exceptions) - entered


def _numbered(script: CeremonyScript) -> Iterator[tuple[int, CeremonyStep]]:
    return enumerate(script.steps, start=1)


def _fact(name: str, value: str) -> list[str]:
    return textwrap.wrap(value, _WIDTH, initial_indent=f"{name + ':' if name else '':<12}", subsequent_indent=" " * 12)


def _wrapped(text: str, indent: int = 0) -> list[str]:
    return textwrap.wrap(text, _WIDTH, initial_indent=" " * indent, subsequent_indent=" " * (indent + 2))


def _time(time: datetime | None) -> str:
    """Return a time with a space where a line may end, which documents do not have."""
    return "not logged" if time is None else clock.to_text(time).replace("T", " ")
