"""The page of an audit: verdicts first, then what they rest on, for a manager to read and an auditor to file.

Source: W3C, "Web Content Accessibility Guidelines 2.2" (text for what is drawn, headings, contrast, reflow); NIST SP
800-53, CP-4 (results are reviewed); the order, worst first, is ours.
May import: shares.clock, shares.documents, shares.paper.page, shares.evidence.after_action, .audited, .calendar,
.chart.
Secret: nothing. Confidential: the page: it tells who holds what, and where. Public: nothing.
Does not: find out or judge anything: all of it is the audit's.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Final

from shares.clock import to_text
from shares.documents.entry import Head
from shares.documents.party import PartyCard
from shares.evidence import chart as chart_frame
from shares.evidence.after_action import in_words
from shares.evidence.audited import Audit, Known, Task, Verdict
from shares.evidence.calendar import Calendar, calendar, day
from shares.evidence.chart import Chart, chart, margin_in_words
from shares.paper.page import REPORT, render

_TEMPLATE: Final = Path(__file__).with_name("audit.html")
_STYLE: Final = Path(__file__).with_name("audit.css")

MEANS: Final = {
    Verdict.GOOD: "a quorum is confirmed, everything is signed, and nothing is due",
    Verdict.UNSIGNED: "nobody, or nobody whom you trust, vouches for all of it",
    Verdict.DUE: "something is to be done",
    Verdict.AT_RISK: "recovery, or the secret itself, is not safe as things stand",
    Verdict.BROKEN: "something in the evidence does not hold",
}
CAUTIONS: Final = (
    "An attestation proves that whoever signed it had the whole share when they answered, and a drill that a quorum "
    "recovered on that day. Nothing proves that it will be so tomorrow: media age, and people leave.",
    "It records who attested to what. It proves no erasure, no physical control of a share or pack, and nobody's "
    "honesty: nothing shows that a share was never copied.",
    "It is only as complete as the journal. What nobody entered is not in it, and whoever holds the keys that sign it "
    'could write another one: compare its head, which stands under "What was checked", with one '
    "that was noted elsewhere at the time.",
    "It knows the parties by their cards alone. Whose card each is shows when people compare fingerprints in person.",
    "Whether this meets a law, standard or contract is for a professional to judge.",
)
"""The limits of an audit, at the place where somebody relies on it."""
MOST_DETAILED: Final = 500
"""So many sets, the worst, are told in full: a page of more than about 10 MB is slow to open."""
_AT_ONCE: Final = {"dealer": "had all of it at the split", "machine": "had all of it at the recovery"}


@dataclass(frozen=True, slots=True)
class _Shown:
    """One set on the page: the audit, what is drawn of it, and where it lies in characters that can be shown."""

    audit: Audit
    title: str
    calendar: Calendar | None
    chart: Chart | None
    tasks: tuple[Task, ...]
    where: str


def audit_page(
    audits: Sequence[Audit], *, program: str, trusted: Sequence[PartyCard] = (), heads: Sequence[Head] = ()
) -> bytes:
    """Return the page of one or more audits: HTML in UTF-8, which loads and runs nothing.

    Of several, a table names all, worst first; the worst MOST_DETAILED are told in full.

    Args:
        audits: one for each set, at least one.
        program: what made them, like ``shares 1.0``.
        trusted: the cards that were trusted in them, so that the page says how to come to the same result.
        heads: the heads that they were given, likewise.
    """
    shown = sorted((_shown(audit) for audit in audits), key=lambda one: -one.audit.verdict.rank)
    return render(
        _TEMPLATE,
        REPORT,
        _STYLE,
        sets=shown,
        detailed=shown[:MOST_DETAILED],
        program=program,
        again=_again(audits[0].at, trusted, heads),
        trusted=trusted,
        counted=[(verdict, sum(one.audit.verdict == verdict for one in shown)) for verdict in reversed(Verdict)],
        means=MEANS,
        cautions=CAUTIONS,
        frame=chart_frame,
        day=day,
        minute=minute,
        duration=in_words,
        margin=lambda bounds: margin_in_words(bounds.low, bounds.high),
        knows=knows,
    )


def _again(at: datetime, trusted: Sequence[PartyCard], heads: Sequence[Head]) -> str:
    """Return the command that comes to the same result: without the time of the audit, it would be that of another."""
    options = [f"--at {to_text(at)}", *(f"--trust CARD{i}" for i in range(1, len(trusted) + 1))]
    options += [f'--head "{head.sequence} {head.head}"' for head in heads]
    return " ".join(["shares audit SET", *options])


def _shown(audit: Audit) -> _Shown:
    return _Shown(
        audit=audit,
        title=audit.label or ("A set that cannot be read" if audit.head is None else "A set that is not split yet"),
        calendar=calendar(audit) if audit.custodians or audit.drills or audit.tasks else None,
        chart=chart(audit.margins, audit.at, most=audit.margin.whole.high if audit.margin else 0),
        tasks=tuple(sorted(audit.tasks, key=lambda task: task.due)),
        where="".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in audit.where),
    )


def minute(time: datetime) -> str:
    """Return a time as pages write it.

    >>> minute(datetime(2026, 12, 1, 7, 0, 59))
    '2026-12-01 07:00'
    """
    return time.strftime("%Y-%m-%d %H:%M")


def knows(known: Known) -> str:
    """Say how near to a quorum somebody has come.

    >>> from shares.planning.structure import Bounds
    >>> knows(Known("A. Keel", "person", 1, ("north-pier",), (), (), False, Bounds(2, 2), False))
    'at least 2 more are needed'
    """
    if known.suffices:
        return _AT_ONCE.get(known.kind, "makes a quorum alone")
    if known.recovered:
        return "makes a quorum with what was recovered in their presence"
    if known.missing is None:
        return "cannot be told: the rule of that epoch is not in this record"
    return f"at least {known.missing.low:,} more {'is' if known.missing.low == 1 else 'are'} needed"
