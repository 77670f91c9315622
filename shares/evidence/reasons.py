"""Why a set's verdict is what it is: each finding of an audit weighed, with what to do about it.

Source: the table of ``audited.Verdict``; PCI PIN 3.1, 21-2.4 (nobody knows enough shares; read in a summary); NIST SP
800-53, CP-4, CP-9 (what was not tested counts as unproven).
May import: shares.documents, shares.history.journal, shares.evidence.
Secret: nothing. Confidential: persons and places. Public: nothing.
Does not: find anything out itself.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from datetime import datetime
from typing import get_args

from shares.documents.event import Remedy
from shares.documents.party import PartyCard
from shares.documents.policy import folded
from shares.documents.record import Record
from shares.evidence.audited import CustodianRow, DrillRow, Known, Margin, Reason, Status, Task, TaskKind, Verdict
from shares.evidence.life import Life
from shares.evidence.tasks import listed
from shares.history.journal import Problem

_MOST_PROBLEMS = 20
"""So many problems of a journal are told one by one; where there are more, their number is."""
_WORTH_KNOWING = ("time", "torn", "set-aside", "renamed")
"""Kinds of problems that take nothing away from what the journal proves."""
_ASK = "`shares attest challenge` asks them; silence is no consent."
_STATUS: dict[Status, tuple[str, str, str]] = {
    "damaged": (
        "custodian-damaged",
        "The share is not whole",
        "Keep the file as it is and look for another copy; else the place is to be reassigned.",
    ),
    "in doubt": (
        "custodian-in-doubt",
        "Nothing has been proven of the share since an incident",
        "Ask for an attestation of content; where there is nothing to attest, reassign the place.",
    ),
    "departed": (
        "custodian-departed",
        "The custodian has left, and nobody has the place",
        "Reassign the place, or enter to whom the share was handed on, who then attests.",
    ),
    "destroyed": (
        "custodian-destroyed",
        "Every copy of the share was destroyed",
        "Reassign the place, or retire the set.",
    ),
    "lost": (
        "custodian-lost",
        "No copy of the share is left, and it was lost, not destroyed",
        "Treat it as an incident: whoever finds it knows the share. Decide on refreshing, which makes it worthless, or "
        "on reassigning the place.",
    ),
    "unattributed": (
        "custodian-unattributed",
        "The share answered, and the custodian's known party key did not sign",
        "Compare the fingerprint of the custodian's card with them, introduce it, and ask again: whoever once had the "
        "share could have answered.",
    ),
}
_OVERDUE: dict[TaskKind, tuple[str, str]] = {
    "answer": ("Find out, by the known way, why they are silent; then challenge anew.", "An answer is overdue"),
    "drill": ("`shares drill open` calls one.", "A drill is overdue"),
    "closing": (
        "Close it with a report of what it showed: `shares drill close SET --drill {drill}`.",
        "A drill is open",
    ),
    "refresh": ("Renew the shares, or say in a new policy that it is not needed.", "Renewal is overdue"),
    "replacement": ("Replace the key.", "A replacement is overdue"),
    "action": ("See to it.", "An action of a drill's report is overdue"),
}


def record_reasons(record: Record, trusted: Sequence[PartyCard]) -> Iterator[Reason]:
    """Yield what is amiss with who signed the record. That each signature fits was seen when it was read."""
    if not record.signatures:
        yield Reason(
            Verdict.UNSIGNED,
            "record-unsigned",
            "The record is unsigned: nobody vouches for it.",
            "Compare its fingerprint with the one read aloud at the split, and have dealer or witness sign it: "
            "`shares record sign`.",
        )
    if trusted and not record.is_signed_by(trusted):
        yield Reason(
            Verdict.AT_RISK,
            "record-not-trusted",
            "The record is signed by none of the parties that you trust.",
            "Ask, by the known way, for the signed record; this one may be somebody else's.",
        )


def journal_reasons(problems: Iterable[Problem]) -> tuple[list[Reason], list[str]]:
    """Weigh what is wrong with a journal.

    Returns:
        Reasons, and what is worth knowing and no more.
    """
    reasons, notes, broken = list[Reason](), list[str](), list[Problem]()
    for problem in problems:
        place = f"Journal, line {problem.line}" if problem.line else "Journal"
        if problem.kind in ("trust", "control"):
            place = "Journal"  # They name entries, of which the line is only the first.
        if problem.kind in _WORTH_KNOWING:
            notes.append(f"{place}: {problem.what}.")
        elif problem.kind in ("trust", "control"):
            code = "journal-not-vouched" if problem.kind == "trust" else "journal-not-dual"
            reasons.append(
                Reason(
                    Verdict.UNSIGNED,
                    code,
                    f"{place}: {problem.what}.",
                    "What is written cannot be signed later: see that each entry is signed from now on (--sign), and "
                    "that somebody else keeps the head.",
                )
            )
        else:
            broken.append(problem)
    for problem in broken[:_MOST_PROBLEMS]:
        place = f"Journal, line {problem.line}" if problem.line else "Journal"
        reasons.append(_broken("journal", f"{place}: {problem.what}."))
    if len(broken) > _MOST_PROBLEMS:
        reasons.append(_broken("journal", f"Journal: {len(broken) - _MOST_PROBLEMS:,} more problems like these."))
    return reasons, notes


def _broken(code: str, what: str) -> Reason:
    return Reason(
        Verdict.BROKEN,
        code,
        what,
        "Keep everything as it is, compare with copies and with heads that others noted, and find out who changed it.",
    )


def claim_reasons(claims: Sequence[str]) -> Iterator[Reason]:
    """Yield what entries claim that their documents do not prove."""
    for claim in claims[:_MOST_PROBLEMS]:
        yield _broken("claim", f"Journal: {claim}.")
    if len(claims) > _MOST_PROBLEMS:
        yield _broken("claim", f"Journal: {len(claims) - _MOST_PROBLEMS:,} more claims like these.")


def stray_reasons(names: Sequence[str], *, journal: bool) -> Iterator[Reason]:
    """Yield that documents lie there of which no entry tells.

    Args:
        names: their files.
        journal: whether there is a journal at all.
    """
    said = f"{len(names):,} {'document lies' if len(names) == 1 else 'documents lie'}"
    if names and journal:
        yield Reason(
            Verdict.DUE,
            "entry-missing",
            f"{said} there that no entry names: {listed(names)}. An entry is missing: somebody removed it, or a run "
            "was stopped.",
            "Compare the journal with copies, and with heads that others noted (--head). Where a run was stopped, "
            "enter what it left: `shares journal add SET noted --remark TEXT --document FILE`.",
            tuple(names),
        )
    elif names:
        yield Reason(
            Verdict.BROKEN,
            "journal-removed",
            f"The set has no journal, and {said} there that come of one: {listed(names)}. It was removed.",
            "Bring it back from a copy, and compare its head with one that was noted elsewhere. Begin no other.",
            tuple(names),
        )


def margin_reasons(life: Life, margin: Margin, rows: Sequence[CustodianRow]) -> Iterator[Reason]:
    """Yield what the margin says: too little is at risk, unless it is only that the first round is not yet due."""
    if margin.custodians.low < 0:
        fresh = [row.name for row in rows if row.counts or row.status == "not yet attested"]
        missing = (
            f"{margin.confirmed} of {margin.total} are confirmed, and the fewest that are missing: {margin.missing}"
        )
        if life.rule.satisfied_by(set(fresh)):
            yield Reason(
                Verdict.DUE,
                "not-yet-attested",
                f"Nobody knows yet whether a quorum can recover: {missing}.",
                f"Ask for the first attestations now. {_ASK}",
            )
        else:
            yield Reason(
                Verdict.AT_RISK,
                "no-quorum",
                f"The confirmed custodians cannot recover the secret: {missing}.",
                "Ask everybody at once to attest. If no quorum answers, replace the key while it is still in use.",
            )
    elif margin.custodians.low == 0 and margin.whole.high > 0:
        yield Reason(
            Verdict.DUE,
            "no-margin",
            "With one more custodian lost, no quorum may be left.",
            "Ask those who are not confirmed to attest, and fill the places of those who cannot.",
        )


def custodian_reasons(rows: Sequence[CustodianRow]) -> Iterator[Reason]:
    """Yield what is amiss with custodians: one reason for each status."""
    overdue = [row.name for row in rows if row.status == "overdue"]
    if overdue:
        yield Reason(
            Verdict.DUE, "attestation-overdue", f"Attestations are overdue: {listed(overdue)}.", _ASK, tuple(overdue)
        )
    for status, (code, what, step) in _STATUS.items():
        found = [row for row in rows if row.status == status]
        if found:
            names = tuple(row.name for row in found)
            why = "; ".join(dict.fromkeys(row.why for row in found[:3]))
            yield Reason(Verdict.DUE, code, f"{what}: {listed(names)} ({why}).", step, names)


def card_reasons(rows: Sequence[CustodianRow], cards: Mapping[str, PartyCard]) -> Iterator[Reason]:
    """Yield that one party's card stands for several custodians: whoever has its key answers for all of them.

    Args:
        rows: how the custodians stand.
        cards: those that the journal has introduced, by fingerprint; two with one signing key are one party.
    """
    by_key: dict[bytes | str, list[CustodianRow]] = {}
    for row in rows:
        if row.card is not None:
            by_key.setdefault(cards[row.card].ed25519 if row.card in cards else row.card, []).append(row)
    for found in by_key.values():
        # Where policy or journal name one person for them, the margin in people tells what that means.
        if len({folded(row.person) for row in found}) > 1:
            names = tuple(row.name for row in found)
            yield Reason(
                Verdict.DUE,
                "card-shared",
                f"One party's card, {found[0].card}, stands for several custodians: {listed(names)}.",
                "Have each custodian make a party key of their own, introduce its card, and ask them again.",
                names,
            )


def exposure_reasons(exposure: Sequence[Known], epoch: int) -> Iterator[Reason]:
    """Yield who has known a quorum of the epoch. Recoveries that were decided on are told apart, in the exposure."""
    people = [row for row in exposure if row.kind in ("person", "unknown")]
    able = list(dict.fromkeys(row.who for row in people if row.suffices and row.epoch == epoch))
    if able:
        yield Reason(
            Verdict.AT_RISK,
            "one-knows-a-quorum",
            f"One alone has known shares that make a quorum: {listed(able)}.",
            "Replace the key and retire this set; new shares do not help. Where the rule itself lets one person "
            "suffice, change it.",
            tuple(able),
        )
    for row in people:
        if row.suffices is None and len(row.shares) > 1:
            yield Reason(
                Verdict.DUE,
                "exposure-unknown",
                f"{row.who} has known shares of epoch {row.epoch}, whose rule is not in this record: "
                f"{listed(row.shares)}.",
                "Find the record of that epoch, and see whether they made a quorum.",
                (row.who,),
            )


def drill_reasons(drills: Sequence[DrillRow]) -> Iterator[Reason]:
    """Yield that the last drill of a kind failed; a recovery makes up for practice as well, and not the other way.

    One that is still open has failed as soon as a rehearsal did, until another passes: left open it is worth no more.
    """
    settled = {"attendance"}
    for row in reversed(drills):
        failed_so_far = row.passed is None and row.outcomes and row.took is None
        if row.kind in settled or (row.passed is None and not failed_so_far):
            continue
        settled |= {row.kind, "practice"} if row.passed else {row.kind}
        if not row.passed:
            # A recovery that only took too long did recover.
            level = Verdict.AT_RISK if row.kind == "recovery" and row.took is None else Verdict.DUE
            said = "; ".join(row.findings) or "see its report"
            what = f"The last {row.kind} drill, {row.number}, failed: {said}."
            if failed_so_far:
                what = f"The {row.kind} drill {row.number} is still open, and failed so far: {'; '.join(row.outcomes)}."
            yield Reason(level, f"{row.kind}-drill-failed", what, "Find out why, put it right, and repeat the drill.")


def task_reasons(tasks: Sequence[Task]) -> Iterator[Reason]:
    """Yield what is overdue; a departure, incident or loss is urgent from the first hour on."""
    for task in tasks:
        until = f"due {task.due:%Y-%m-%d %H:%M} UTC"
        if task.kind in ("departure", "incident", "loss"):
            urgent = "Overdue: " if task.overdue else ""
            step = f"{task.advice} {_resolve(task)}"
            yield Reason(Verdict.DUE, f"{task.kind}-open", f"{urgent}{task.what} ({until}).", step, task.about)
        elif task.overdue and task.kind in _OVERDUE:
            step, what = _OVERDUE[task.kind]
            if task.kind == "closing":
                step = step.format(drill=task.entry)
            elif task.entry is not None:
                step = f"{step} {_resolve(task)}"
            yield Reason(Verdict.DUE, f"{task.kind}-overdue", f"{what}: {task.what} ({until}).", step, task.about)


def _resolve(task: Task) -> str:
    """Say by which command the end of a task is entered."""
    action = f" --action {task.action}" if task.action is not None else ""
    usual = {"replacement": '"key replaced"', "action": "done"}.get(task.kind)
    command = f"`shares journal add SET resolved --entry {task.entry}{action} --how {usual or 'HOW'}`"
    others = ", ".join(f'"{how}"' if " " in how else how for how in get_args(Remedy))
    return f"Then enter it: {command}." if usual else f"Then enter it: {command}, HOW being one of: {others}."


def retired_reasons(rows: Sequence[CustodianRow], when: datetime) -> Iterator[Reason]:
    """Yield what is amiss with a set's end: copies left unaccounted for, and those that only were given up as lost."""
    held = [row.name for row in rows if row.copies]
    if held:
        yield Reason(
            Verdict.AT_RISK,
            "retired-with-copies",
            f"The set was retired on {when:%Y-%m-%d}, and copies are not accounted for: {listed(held)}.",
            "Find and destroy each of them before a witness: `shares retire status` lists them.",
            tuple(held),
        )
    lost = [row.name for row in rows if row.status == "lost"]
    if lost:
        yield Reason(
            Verdict.AT_RISK,
            "retired-with-lost",
            f"The set was retired on {when:%Y-%m-%d}, and copies were lost, not destroyed: {listed(lost)}.",
            "They may turn up with anybody: see that the key is replaced, and protects nothing any more.",
            tuple(lost),
        )
