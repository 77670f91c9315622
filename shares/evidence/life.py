"""The life of a set as its journal tells it up to a time: what exposure, margin, drills and tasks are worked out from.

Source: none.
May import: shares.documents, shares.history.holders, shares.history.reports, shares.planning.labels,
shares.sharing.rule, shares.evidence.audited, .belief.
Secret: nothing. Confidential: persons, sites and events. Public: the record.
Does not: judge what the journal says, or whether it can be believed; ``evidence.audit`` does.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from datetime import datetime, timedelta
from functools import cached_property
from typing import TypeVar

from shares.documents.entry import Entry
from shares.documents.event import Dealt, Departed, Event, Resolved
from shares.documents.policy import Policy
from shares.documents.record import Record
from shares.evidence.audited import Intervals
from shares.evidence.belief import ALL_BELIEVED, Belief
from shares.history.holders import Holders
from shares.history.reports import RESPOND_WITHIN
from shares.planning import labels
from shares.sharing.rule import Rule

One = TypeVar("One", bound=Event)

DEFAULT_INTERVAL = timedelta(days=365)
"""How often custodians attest and drills are held where no policy says: once a year, the least that CA/Browser Forum
BR 5.7.1.1 (yearly test of the plan) and the yearly inventory of published custody practice (from memory) ask for."""


@dataclass(frozen=True, eq=False)
class Life:
    """A set's record and policy, and the entries of its journal up to a time, in the journal's order.

    Attributes:
        record: the set's record.
        policy: its policy, where it has one that fits.
        entries: no later than ``at``.
        at: the time that counts as now.
        belief: whose good news is believed.
    """

    record: Record
    policy: Policy | None
    entries: tuple[Entry, ...]
    at: datetime
    belief: Belief = ALL_BELIEVED

    @classmethod
    def until(
        cls,
        at: datetime,
        record: Record,
        policy: Policy | None,
        entries: Iterable[Entry],
        belief: Belief = ALL_BELIEVED,
    ) -> Life:
        """Return the life of a set up to a time: without entries of a later one, and without what is not believed."""
        told = (belief.told(entry) for entry in entries if entry.time <= at)
        return cls(record, policy, tuple(entry for entry in told if entry is not None), at, belief)

    @cached_property
    def rule(self) -> Rule:
        """Who can recover, by the record."""
        return self.record.rule.to_rule()

    @cached_property
    def names(self) -> tuple[str, ...]:
        """The custodians of the record."""
        return tuple(custodian.name for custodian in self.record.custodians)

    @cached_property
    def people(self) -> dict[str, str]:
        """Each custodian's person: by the policy, else the custodian's own name."""
        return self._labels("person")

    @cached_property
    def sites(self) -> dict[str, str] | None:
        """Each custodian's site, where there is a policy."""
        return self._labels("site") if self.policy else None

    def _labels(self, what: str) -> dict[str, str]:
        said = {}
        if self.policy:
            said = labels.people(self.policy) if what == "person" else labels.sites(self.policy)
        return {name: said.get(name, name) for name in self.names}

    @cached_property
    def intervals(self) -> Intervals:
        """What the set is held to."""
        policy = self.policy
        said = {
            "attest_every": policy.attest_every if policy else None,
            "content_every": policy.content_every if policy else None,
            "drill_every": policy.drill_every if policy else None,
        }
        return Intervals(
            attest_every=said["attest_every"] or DEFAULT_INTERVAL,
            content_every=said["content_every"] or DEFAULT_INTERVAL,
            drill_every=said["drill_every"] or DEFAULT_INTERVAL,
            refresh_every=policy.refresh_every if policy else None,
            assumed=tuple(name for name, interval in said.items() if interval is None),
        )

    @property
    def respond_within(self) -> timedelta:
        """How soon an incident is dealt with: by the policy, else within a day."""
        return self.policy.respond_within if self.policy else RESPOND_WITHIN

    @cached_property
    def dealt(self) -> Entry | None:
        """The entry by which this record was dealt, where the journal has it."""
        found = [entry for entry, event in self.each(Dealt) if event.record == self.record.fingerprint]
        return found[-1] if found else None

    @property
    def start(self) -> datetime:
        """When the record's epoch began."""
        return self.dealt.time if self.dealt else self.record.created

    @cached_property
    def leaving(self) -> dict[int, tuple[str, ...]]:
        """Whose places each departure empties, by the number of its entry: all that the person held then among them."""
        holders, found = Holders(self.names, self.policy), dict[int, tuple[str, ...]]()
        for entry in self.entries:
            event = self.belief.held(entry)
            names = holders.take(event) if event else ()
            if isinstance(event, Departed):
                found[entry.sequence] = names
        return found

    def each(self, kind: type[One]) -> Iterator[tuple[Entry, One]]:
        """Return all events of one kind with their entries."""
        return ((entry, entry.event) for entry in self.entries if isinstance(entry.event, kind))

    @cached_property
    def resolved(self) -> dict[tuple[int, int | None], Resolved]:
        """The last word on each task that an entry has set: by the number of that entry, and of the action or None."""
        found: dict[tuple[int, int | None], Resolved] = {}
        for entry, event in self.each(Resolved):
            if event.entry < entry.sequence:  # What is not yet there cannot be done.
                found[event.entry, event.action] = event
        return found
