"""How each custodian stands: what they have proven of their share, what has come between, and when proof is due again.

A custodian is confirmed by a proof of content within the policy's ``attest_every``; or by a pack seen closed within it,
together with a proof of content within ``content_every``. Whatever may have touched the share voids earlier proofs: an
incident, a departure, a copy destroyed or lost, a new holder or card, somebody else who typed it, a broken seal, a
share found damaged. What was asked for before that proves nothing since. A finding of the share stays with the share,
whoever holds it, until its content is proven anew.

Source: NIST SP 800-53, CP-9(1) (media tested at a defined frequency); PCI PIN 9-2 (a tamper sign is analysed; read in a
summary); trade practice: a seal is no proof of content, and silence is no consent.
May import: shares.documents, shares.history.journal, shares.evidence.asked, .audited, .inventory,
.life.
Secret: nothing. Confidential: persons, sites, proofs. Public: nothing.
Does not: judge attestations; it is given what each of them proves.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from datetime import datetime
from typing import Literal, NamedTuple

from shares.documents.event import (
    Attested,
    Dealt,
    Departed,
    Destroyed,
    Event,
    HandedOn,
    Incident,
    Introduced,
    Lost,
    Resolved,
    Transcribed,
)
from shares.documents.policy import folded
from shares.evidence.asked import unanswered
from shares.evidence.audited import CustodianRow, Proof, Status
from shares.evidence.inventory import take_inventory
from shares.evidence.life import Life
from shares.history.journal import Journal

_FILLED = ("done", "no exposure", "reassigned", "refreshed")
"""Ways to resolve a departure after which the custodian's place is filled again."""


class Span(NamedTuple):
    """A time during which a custodian was confirmed: from ``since`` on, and no longer at ``until``."""

    custodian: str
    since: datetime
    until: datetime


@dataclass(slots=True, eq=False)
class _Standing:
    """One custodian's, while the journal is read."""

    name: str
    person: str
    since: datetime
    card: str | None = None
    # The entry that last touched the share, its card or its holder: what was asked for before proves nothing since.
    touched: int = 0
    content: datetime | None = None
    sealed: datetime | None = None
    unattributed: datetime | None = None
    # A finding of the share, until its content is proven anew; and beside it, why the place is empty. The one outlives
    # the other: whoever takes the place over takes the finding with it.
    doubt: Literal["damaged", "in doubt"] | None = None
    why: str = ""
    doubted: datetime | None = None
    gone: Literal["departed", "destroyed", "lost"] | None = None
    gone_why: str = ""
    proofs: list[Proof] = field(default_factory=list)

    def forget(self, entry: int) -> None:
        """Let nothing that was proven count any more, nor what was asked for: something may have touched the share."""
        self.touched = entry
        self.content = self.sealed = self.unattributed = None

    def void(self, doubt: Literal["damaged", "in doubt"], why: str, time: datetime, entry: int) -> None:
        """Doubt the share. Damage that was found is not made less by a doubt, and the first finding sets the date."""
        self.forget(entry)
        if self.doubt != "damaged":
            self.doubt, self.why, self.doubted = doubt, why, self.doubted or time

    def leave(self, gone: Literal["departed", "destroyed", "lost"], why: str, entry: int) -> None:
        """Empty the place. Whose share is destroyed or lost stays so, whoever leaves."""
        self.forget(entry)
        if gone != "departed" or self.gone is None:
            self.gone, self.gone_why = gone, why

    def fill(self, time: datetime, entry: int) -> None:
        """Let the place be filled again after a departure; what was proven before counts no more."""
        if self.gone == "departed":
            self.forget(entry)
            self.gone, self.gone_why, self.since = None, "", time

    def prove(self, proof: Proof) -> None:
        """Take what an attestation proves, or shows to be amiss."""
        if proof.counts and proof.asked <= self.touched:
            proof = replace(proof, counts=False)
        self.proofs.append(proof)
        if proof.result in ("damaged", "inconsistent dealing"):
            self.void("damaged", f"found {proof.result}, entry {proof.entry}", proof.time, proof.entry)
        elif proof.result == "seal broken":
            self.void("in doubt", f"seal found broken, entry {proof.entry}", proof.time, proof.entry)
        elif proof.grade == "content" and proof.counts:
            self.content = max(proof.time, self.content or proof.time)
            self.doubt, self.why, self.doubted = None, "", None
        elif proof.grade == "sealed" and proof.counts:
            self.sealed = max(proof.time, self.sealed or proof.time)
        elif proof.grade == "content" and proof.result == "intact" and proof.asked > self.touched:
            self.unattributed = proof.time


class Standings:
    """How the custodians stand at the time of a life, and when they were confirmed before.

    Args:
        life: of the set, up to the time of the audit.
        proofs: what each attestation of the journal proves, by the number of its entry.

    Attributes:
        notes: what is worth knowing of it: each change of a custodian's card.
    """

    def __init__(self, life: Life, proofs: Mapping[int, Proof]) -> None:
        self._life = life
        self._all = {name: _Standing(name, life.people[name], life.start) for name in life.names}
        copies = take_inventory(Journal(life.entries), life.record).copies
        own = {
            name: [copy for copy in copies if (copy.custodian, copy.epoch) == (name, life.record.epoch)]
            for name in life.names
        }
        self._held = {name: sum(copy.fate == "held" for copy in copies) for name, copies in own.items()}
        # Of shares of which no copy is left, by which entry the last one came to its end, and which copies were lost.
        self._ended = {
            name: (
                max(copy.entry or 0 for copy in own[name]),
                [copy.entry for copy in own[name] if copy.fate == "lost"],
            )
            for name, held in self._held.items()
            if own[name] and not held
        }
        self.notes: list[str] = []
        self._departed: dict[int, tuple[str, ...]] = {}
        self._unanswered = unanswered(life)
        self._spans: list[Span] = []
        self._confirmed: dict[str, Span] = {}
        time = life.start
        for entry in life.entries:
            # A clock that ran backwards makes no proof last longer.
            time = max(time, entry.time)
            for one in self._touched(entry.sequence, entry.event, time, proofs):
                self._note(one, time)

    def rows(self) -> tuple[CustodianRow, ...]:
        """Return how each custodian stands, in the record's order."""
        return tuple(self._row(one) for one in self._all.values())

    def spans(self) -> list[Span]:
        """Return when each custodian was confirmed; those still confirmed until their proof expires."""
        return [*self._spans, *self._confirmed.values()]

    def _touched(self, number: int, event: Event, time: datetime, proofs: Mapping[int, Proof]) -> list[_Standing]:
        """Let an event have its effect; return whose standing it may have changed."""
        match event:
            case Dealt() if event.record == self._life.record.fingerprint:
                for share in event.custodians:
                    if share.name in self._all:
                        person = self._life.people[share.name]
                        self._all[share.name] = _Standing(share.name, person, time, share.card, number)
                return list(self._all.values())
            case Introduced():
                for one in (touched := self._of(event.custodian)):
                    if one.card not in (None, event.card):
                        one.forget(number)
                        self.notes.append(
                            f"Entry {number} changed the card of {one.name}: what was proven before counts no more."
                        )
                    one.card = event.card
                return touched
            case Transcribed():
                for one in (touched := self._of(event.custodian)):
                    if any(folded(person) != folded(one.person) for person in event.persons):
                        one.forget(number)
                return touched
            case Resolved(action=None):
                for one in self._of(*self._departed.get(event.entry, ())):
                    if event.how in _FILLED:
                        one.fill(time, number)
            case Attested() if number in proofs:
                for one in (touched := self._of(event.custodian)):
                    one.prove(proofs[number])
                return touched
            case Incident():
                for one in (touched := self._of(*event.custodians)):
                    one.void("in doubt", f"an incident, entry {number}", time, number)
                return touched
            case Departed():
                self._departed[number] = names = self._life.leaving[number]
                for one in (touched := self._of(*names)):
                    one.leave("departed", f"{event.person} has left, entry {number}", number)
                    one.card = None
                return touched
            case HandedOn():
                # Handing on changes who holds the share, and not what was found of it.
                for one in (touched := self._of(event.custodian)):
                    one.fill(time, number)
                    one.forget(number)
                    one.person, one.since, one.card = event.to, time, None
                return touched
            case Destroyed() | Lost():
                for one in (touched := self._of(event.custodian)):
                    one.void("in doubt", f"a copy was {event.what}, entry {number}", time, number)
                    self._ends(one, number)
                return touched
        return []

    def _ends(self, one: _Standing, number: int) -> None:
        """Empty the place where the last copy came to its end; what was lost is not said to be destroyed."""
        ended, lost = self._ended.get(one.name, (0, []))
        if ended == number and lost:
            entries = ", ".join(f"entry {entry}" for entry in lost)
            one.leave("lost", f"no copy is left: lost, {entries}; it may turn up with anybody", number)
        elif ended == number:
            one.leave("destroyed", f"no copy is left, entry {number}", number)

    def _of(self, *names: str) -> list[_Standing]:
        return [self._all[name] for name in names if name in self._all]

    def _until(self, one: _Standing) -> datetime | None:
        """Return until when a custodian is confirmed, by what they have proven so far; None where by nothing."""
        held = self._life.intervals
        if one.content is None or one.doubt is not None or one.gone is not None:
            return None
        until = one.content + held.attest_every
        if one.sealed is not None:
            until = max(until, min(one.sealed + held.attest_every, one.content + held.content_every))
        return until

    def _note(self, one: _Standing, time: datetime) -> None:
        """Keep from when until when a custodian was confirmed, once that has changed."""
        before, until = self._confirmed.pop(one.name, None), self._until(one)
        if before is not None:
            time_before = min(before.until, time)
            if until is not None and before.until >= time:
                self._confirmed[one.name] = Span(one.name, before.since, until)
                return
            self._spans.append(Span(one.name, before.since, time_before))
        if until is not None and until > time:
            self._confirmed[one.name] = Span(one.name, time, until)

    def _row(self, one: _Standing) -> CustodianRow:
        status, why, due = self._stands(one)
        return CustodianRow(
            name=one.name,
            person=one.person,
            site=self._life.sites.get(one.name) if self._life.sites else None,
            status=status,
            why=why,
            content=one.content,
            sealed=one.sealed,
            due=due,
            card=one.card,
            copies=self._held[one.name],
            proofs=tuple(one.proofs),
            unanswered=self._unanswered.get(one.name, ()),
        )

    def _stands(self, one: _Standing) -> tuple[Status, str, datetime | None]:
        life, until = self._life, self._until(one)
        if one.gone is not None:
            return one.gone, one.gone_why, None
        if one.doubt is not None:
            return one.doubt, one.why, one.doubted
        if until is not None and until > life.at:
            if one.content is not None and one.content + life.intervals.attest_every > life.at:
                return "confirmed", f"content proven {one.content:%Y-%m-%d}", until
            return "sealed", f"pack seen closed {one.sealed:%Y-%m-%d}, content proven {one.content:%Y-%m-%d}", until
        due = until or one.since + life.intervals.attest_every
        if one.unattributed is not None and one.unattributed + life.intervals.attest_every > life.at:
            return "unattributed", "the share answered, and no known party key of the custodian signed", due
        if until is None and due > life.at:
            return "not yet attested", f"nothing proven since {one.since:%Y-%m-%d}", due
        return "overdue", "no proof in time", due
