"""Audits of the demo harbour for the tests of pages: made by hand, so that every state occurs.

Source: none; the numbers tell a story and were worked out by nothing.
"""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta

from shares.evidence.audited import (
    Audit,
    Counts,
    CustodianRow,
    DrillRow,
    ExceptionRow,
    Intervals,
    Known,
    Margin,
    MarginSince,
    Proof,
    Reason,
    Signer,
    Task,
    Verdict,
)
from shares.planning.structure import Bounds

AT = datetime(2026, 12, 1, 7, 0, tzinfo=UTC)
DEALT = datetime(2025, 12, 3, 9, 30, tzinfo=UTC)
HEAD = "entry 57, QFZA-4XHT-MB2C-ZLLQ-UWVB-AAAA-7NKD-35SM"
CARD = "TU2E-ZXSG-BZMB-ATU6-Z4LY-ZPBQ-FBCN-PRVF"
RECORD = "MWWV-AEU2-J6FP-IMWQ-W6L6-5ILL-Q6O7-KBX4"
EXACT = Bounds(1, 1)


def on(month: int, day: int = 1, year: int = 2026) -> datetime:
    return datetime(year, month, day, 12, 0, tzinfo=UTC)


def proof(time: datetime, entry: int, grade: str = "content", **changes: object) -> Proof:
    result = {"content": "intact", "sealed": "seal intact", "present": "present"}[grade]
    plain = Proof(time, entry, grade, result, attributed=True, late=False, opened=False, counts=grade != "present")
    return replace(plain, **changes)


def custodian(name: str, person: str, status: str, why: str, *proofs: Proof, **changes: object) -> CustodianRow:
    content = max((one.time for one in proofs if one.grade == "content" and one.counts), default=None)
    sealed = max((one.time for one in proofs if one.grade == "sealed" and one.counts), default=None)
    last = max((time for time in (content, sealed) if time), default=DEALT)
    plain = CustodianRow(
        name, person, "outer harbour", status, why, content, sealed, last + timedelta(days=90), CARD, 1, proofs
    )
    return replace(plain, **changes)


def a_year() -> Audit:
    """A year of one set: two rounds, one custodian silent, one share damaged, drills, a departure."""
    return Audit(
        where="/sets/tide-archive",
        at=AT,
        verdict=Verdict.AT_RISK,
        reasons=(
            Reason(Verdict.AT_RISK, "no-quorum", "The confirmed custodians make no quorum.",
                   "Have at least 1 more custodian attest, from the copies that are said to be whole.", ("dry-dock",)),
            Reason(Verdict.DUE, "overdue", "Two custodians have not attested in time.",
                   "Send a challenge, and find out by another way why they are silent.", ("registrar", "dry-dock")),
            Reason(Verdict.UNSIGNED, "unsigned-entries", "3 entries of the journal are signed by nobody.",
                   "Sign entries from now on, with --sign."),
        ),
        notes=("a line that a stopped run left was set aside (entry 12)",),
        label="Tide archive backup root",
        set_id="00112233445566778899aabbccddeeff",
        epoch=1,
        record=RECORD,
        created=DEALT,
        rule="any 3 of north-pier, south-pier, light-house, registrar, dry-dock",
        with_policy=True,
        intervals=Intervals(timedelta(days=90), timedelta(days=365), timedelta(days=365), None, ("content_every",)),
        custodians=(
            custodian("north-pier", "A. Keel", "confirmed", "content proven in time", proof(on(3, 2), 11),
                      proof(on(9, 3), 40), proof(on(11, 20), 52)),
            custodian("south-pier", "B. Mast", "sealed", "pack seen closed in time", proof(on(3, 4), 12, late=True),
                      proof(on(10, 3), 41, "sealed"), proof(on(11, 2), 50, "present")),
            custodian("light-house", "C. Lamp", "damaged", "the share was found damaged",
                      proof(on(3, 9), 13), proof(on(9, 9), 42, result="damaged", counts=False, opened=True)),
            custodian("registrar", "registrar", "overdue", "no proof in time", proof(on(3, 10), 14), site=None,
                      unanswered=(on(9, 15),)),
            custodian("dry-dock", "E. Hull", "departed", "left on 2026-11-10", due=None, copies=2, card=None),
        ),
        margin=Margin(2, 5, Bounds(-1, -1), Bounds(-1, -1), Bounds(-1, -1), Bounds(2, 2), EXACT),
        margins=(
            MarginSince(DEALT, -1, -1), MarginSince(on(3, 9), 0, 0), MarginSince(on(3, 10), 1, 1),
            MarginSince(on(6, 8), -1, -1), MarginSince(on(9, 3), 0, 1), MarginSince(on(9, 9), -1, -1),
        ),
        exposure=(
            Known("A. Keel", "person", 1, ("north-pier",), (), ("dealt to them (entry 1)",), False, Bounds(2, 2),
                  False),
            Known("E. Hull", "person", 1, ("dry-dock", "light-house", "registrar"), (46,),
                  ("dealt to them (entry 1)", "typed in (entry 20)", "handed on (entry 21)"), True, Bounds(0, 0), True,
                  on(11, 10)),
            Known("the dealer", "dealer", 1, ("north-pier", "south-pier", "light-house", "registrar", "dry-dock"), (),
                  ("ran the split (entry 1)",), True, Bounds(0, 0), True),
            Known("the machines of recoveries", "machine", 1, (), (46,), ("drill 46 (entry 47)",), False, EXACT, True),
            Known("B. Mast", "person", 0, ("south-pier",), (), ("an earlier epoch",), None, None, None),
        ),
        drills=(
            DrillRow(20, "practice", "all custodians, with practice shares", on(4, 20), on(4, 20), True, 14_400, 2_500,
                     ("north-pier", "south-pier", "light-house"), ("passed",)),
            DrillRow(46, "recovery", "the real secret, in memory alone", on(10, 12), on(10, 13), False, 14_400, 93_600,
                     ("north-pier", "south-pier", "registrar"), ("one share is damaged", "passed"),
                     ("recovered 1 d 2 h after the call; the target is 4 h",),
                     ("call by telephone first (harbour-office, until 2026-12-15)",)),
            DrillRow(55, "attendance", "who answers within a day", on(11, 28), None, None, None, None, (), ()),
        ),
        tasks=(
            Task("attestation", "The registrar is to attest", on(6, 8), True, ("registrar",)),
            Task("departure", "E. Hull has left: end what they could still do", on(11, 11), True, ("E. Hull",), 49,
                 advice="Replace the key: what they have known makes a quorum. A professional judges whether sooner."),
            Task("action", "Call by telephone first", on(12, 15), False, ("harbour-office",), 46, 1),
            Task("drill", "The next drill of recovery", on(4, 20, 2027), False),
        ),
        exceptions=(
            ExceptionRow(8, on(12, 3, 2025), "A pack was numbered twice", "A new pack, number TM-118, was used"),
            ExceptionRow(9, on(12, 3, 2025), "The clock of the machine was three minutes slow", None),
        ),
        head=HEAD,
        signers=(
            Signer("harbour-office", CARD, ("dealer", "journal"), 51, True),
            Signer("auditor-east", CARD.replace("T", "U"), ("witness",), 0, False),
        ),
        counts=Counts(entries=57, later_entries=2, unsigned_entries=3, signatures=72, documents=19, attestations=9),
    )  # fmt: skip


def good() -> Audit:
    """The same set, were all of it well."""
    return replace(
        a_year(),
        where="/sets/buoy-log",
        verdict=Verdict.GOOD,
        reasons=(),
        notes=(),
        label="Buoy log signing key",
        tasks=(),
        exceptions=(),
        drills=a_year().drills[:1],
        custodians=tuple(
            custodian(name, name, "confirmed", "content proven in time", proof(on(11, 3), 40 + i))
            for i, name in enumerate(("north-pier", "south-pier", "light-house"))
        ),
        margin=Margin(3, 3, EXACT, EXACT, None, EXACT, Bounds(0, 0)),
        margins=(MarginSince(DEALT, -1, -1), MarginSince(on(11, 3), 1, 1)),
    )


def unreadable() -> Audit:
    """A folder whose record cannot be read."""
    reason = Reason(Verdict.BROKEN, "record", "Record.json is not one JSON object.", "Bring back a whole copy.")
    return Audit("/sets/lost", AT, Verdict.BROKEN, (reason,))


def of_verdict(verdict: Verdict) -> Audit:
    """A set of some verdict, with a name of its own."""
    made = replace(good(), verdict=verdict, label=f"Sluice gate key, {verdict.value}")
    reason = Reason(verdict, "made-up", f"It is {verdict.value} for a test.", "Nothing.")
    return made if verdict is Verdict.GOOD else replace(made, reasons=(reason,))
