"""Exposure: who has ever known which share of which epoch, worked out from the journal each time and never stored.

A custodian knows their own share from the dealing on. Whoever transcribes a share, is handed it, or finds it, knows it.
A recovery is told apart: those present, and the machine, may have known every share that the shares used determine;
it was decided on, and ends with a disposition. The dealer's machine knew everything at the dealing: told apart as well.

Source: PCI PIN Security Requirements 3.1, 21-2.4 (no custodian has present or past knowledge of enough shares; read in
a summary); A. Shamir 1979 and J. Benaloh, J. Leichter 1988 (what shares determine one another).
May import: shares.documents, shares.planning.remainder, shares.planning.structure, shares.sharing.rule,
shares.evidence.
Secret: nothing. Confidential: all of it. Public: the rule.
Does not: know what nobody entered; a journal tells what its writers told it.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator
from dataclasses import dataclass, field
from datetime import datetime
from typing import Literal

from shares.documents.event import (
    Attested,
    Brought,
    Dealt,
    Departed,
    DrillKind,
    DrillOpened,
    HandedOn,
    Incident,
    Lost,
    Recovered,
    Rehearsed,
    Transcribed,
)
from shares.documents.policy import folded
from shares.evidence.audited import Known
from shares.evidence.life import Life
from shares.evidence.margin import counted
from shares.planning.remainder import still_needed
from shares.planning.structure import Bounds
from shares.sharing.rule import Path, Rule

UNKNOWN = "somebody unknown"
MACHINES = "the machines of recoveries"
Kind = Literal["person", "unknown", "dealer", "machine"]


def exposed_by(rule: Rule, places: Collection[Path]) -> frozenset[Path]:
    """Return the places of all leaves whose rows are determined by the rows at ``places``, these among them.

    A node's polynomial is known as soon as ``need`` of its values are: rows of its children, and its value at 0, which
    is the row of the node itself in the node above. So a node that was not asked for may be laid open by the one above.

    Args:
        rule: who can recover.
        places: paths of leaves, as ``Rule.paths`` has them.

    Source: Shamir 1979, sec. 2, up the tree and down again.

    >>> rule = Rule(2, ("north-pier", "south-pier", "light-house"))
    >>> len(exposed_by(rule, [path for name in ("north-pier", "south-pier") for path in rule.paths()[name]]))
    3
    """
    held, known = frozenset(places), set(places)
    _spread(rule, (), held, known, from_above=False)
    return frozenset(known)


def _is_known(node: Rule, path: Path, held: frozenset[Path]) -> bool:
    """Say whether the row of a node follows from what is held below it."""
    return _children_known(node, path, held) >= node.need


def _children_known(node: Rule, path: Path, held: frozenset[Path]) -> int:
    return sum(
        _is_known(child, place, held) if isinstance(child, Rule) else place in held
        for child, place in _children(node, path)
    )


def _spread(node: Rule, path: Path, held: frozenset[Path], known: set[Path], *, from_above: bool) -> None:
    open_here = _children_known(node, path, held) + from_above >= node.need
    for child, place in _children(node, path):
        if isinstance(child, Rule):
            _spread(child, place, held, known, from_above=open_here)
        elif open_here:
            known.add(place)


def _children(node: Rule, path: Path) -> Iterator[tuple[Rule | str, Path]]:
    return ((child, (*path, (node.need, x))) for x, child in enumerate(node.children, start=1))


@dataclass(slots=True, eq=False)
class _Knower:
    who: str
    kind: Kind
    names: dict[str, None] = field(default_factory=dict)
    seen: dict[str, None] = field(default_factory=dict)
    recoveries: list[int] = field(default_factory=list)
    how: list[str] = field(default_factory=list)


class _Ledger:
    """What is known of the shares of one epoch, person by person, while the journal is read."""

    def __init__(self, life: Life, number: int, dealt: Dealt | None, when: datetime) -> None:
        self.life = life
        self.epoch = dealt.epoch if dealt else life.record.epoch
        self.holders = dict(life.people)
        self.knowers: dict[tuple[str, str], _Knower] = {}
        names = [share.name for share in dealt.custodians] if dealt else list(life.names)
        place = f"entry {number}" if dealt else f"the record, {when:%Y-%m-%d}"
        self._add("dealer", "the dealer's machine", names, f"dealt all of it, {place}")
        for name in names:
            self.add_person(self.holder(name), [name], f"holds the share of {name}, dealt in {place}")

    def holder(self, custodian: str) -> str:
        return self.holders.get(custodian, custodian)

    def _add(self, kind: Kind, who: str, names: Collection[str], how: str) -> _Knower:
        knower = self.knowers.setdefault((kind, folded(who)), _Knower(who, kind))
        knower.names.update(dict.fromkeys(names))
        knower.how.append(how)
        return knower

    def add_person(self, who: str, names: Collection[str], how: str) -> None:
        self._add("person", who, names, how)

    def add_people(self, people: Collection[str], names: Collection[str], how: str) -> None:
        for who in people:
            self.add_person(who, names, how)
        if not people:
            self._add("unknown", UNKNOWN, names, how)

    def add_recovery(self, number: int, people: Collection[str], names: Collection[str], what: str) -> None:
        how = f"{what}, entry {number}, from the shares of {', '.join(names)}"
        present = [self._add("person", who, (), f"was present at {how}") for who in people]
        for knower in (self._add("machine", MACHINES, (), how), *present):
            knower.recoveries.append(number)
            knower.seen.update(dict.fromkeys(names))


def exposure(life: Life) -> tuple[Known, ...]:
    """Return what each person, and whoever else, has ever known of the shares, whoever needs fewest more first.

    Args:
        life: of the set, up to the time of the audit.
    """
    kinds: dict[int, DrillKind] = {entry.sequence: event.kind for entry, event in life.each(DrillOpened)}
    brought: dict[int, frozenset[str]] = {}
    withdrawn = {entry for (entry, action), event in life.resolved.items() if not action and event.how == "no exposure"}
    ledgers = [_Ledger(life, 0, None, life.record.created)] if life.dealt is None else []
    left: dict[str, datetime] = {}
    for entry in life.entries:
        event, number = entry.event, entry.sequence
        if isinstance(event, Dealt) and event.set == life.record.set:
            ledgers.append(_Ledger(life, number, event, entry.time))
        elif isinstance(event, Departed):
            left[folded(event.person)] = entry.time
        if not ledgers:
            continue
        ledger = ledgers[-1]
        match event:
            case Transcribed():
                people = event.persons or (ledger.holder(event.custodian),)
                ledger.add_people(people, [event.custodian], f"typed the share of {event.custodian}, entry {number}")
            case HandedOn():
                ledger.holders[event.custodian] = event.to
                ledger.add_person(
                    event.to, [event.custodian], f"was handed the share of {event.custodian}, entry {number}"
                )
            case Attested(opened=True):
                who = ledger.holder(event.custodian)
                ledger.add_person(who, [event.custodian], f"opened the pack of {event.custodian}, entry {number}")
            case Incident(exposed=True) if number not in withdrawn:
                what = f"may know the shares of {', '.join(event.custodians)} by the incident of entry {number}"
                ledger.add_people(event.persons, event.custodians, what)
            case Lost():
                what = f"may have found the lost copy of {event.custodian}, entry {number}"
                ledger.add_people((), [event.custodian], what)
            case Brought():
                brought[event.drill] = frozenset(event.custodians)
                ledger.add_recovery(number, event.persons, event.custodians, "a drill")
            case Rehearsed() if not brought.get(event.drill, frozenset()).issuperset(event.custodians) and (
                kinds.get(event.drill, "recovery") == "recovery"
            ):
                ledger.add_recovery(number, event.persons, event.custodians, "a recovery drill")
            case Recovered():
                ledger.add_recovery(number, event.persons, event.custodians, "a recovery")
    rows = [_row(ledger, knower, left) for ledger in ledgers for knower in ledger.knowers.values()]
    return tuple(sorted(rows, key=_order))


def _order(row: Known) -> tuple[bool, bool, int, int]:
    return row.kind in ("dealer", "machine"), row.missing is None, row.missing.low if row.missing else 0, -row.epoch


def _row(ledger: _Ledger, knower: _Knower, left: dict[str, datetime]) -> Known:
    life, names = ledger.life, tuple(knower.names)
    shares, suffices, missing, recovered = names, None, None, None
    if ledger.epoch == life.record.epoch:
        paths = life.rule.paths()
        held = frozenset(path for name in names for path in paths.get(name, ()))
        seen = held | {path for name in knower.seen for path in paths.get(name, ())}
        known = exposed_by(life.rule, seen if knower.kind == "machine" else held)
        shares = tuple(name for name in paths if not known.isdisjoint(paths[name]))
        needed = still_needed(life.rule, known)
        suffices, missing = needed is None, counted(needed).quorum if needed else Bounds(0, 0)
        recovered = still_needed(life.rule, seen) is None
    return Known(
        who=knower.who,
        kind=knower.kind,
        epoch=ledger.epoch,
        shares=shares,
        recoveries=tuple(knower.recoveries),
        how=tuple(knower.how),
        suffices=suffices,
        missing=missing,
        recovered=recovered,
        left=left.get(folded(knower.who)) if knower.kind == "person" else None,
    )
