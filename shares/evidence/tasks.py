"""What is to be done until when: attestations, drills, and what departures, incidents, recoveries and reports ask for.

For a leaver and an incident, what the exposure shows says how: replace the key where somebody has known a quorum;
reassign where a place is empty; refresh where shares became known, which makes them worthless.

Source: CA/Browser Forum Network Security Requirements (a leaver's access ends within 24 hours) and BR 5.7.1.1 (yearly
test); PCI DSS 3.2.1, 3.6.5 (a leaver with knowledge of a component: retire or replace); A. Herzberg et al. 1995
(renewing shares); NIST SP 800-57 Part 1, app. B; NIST SP 800-84, sec. 6.5 (actions with owners).
May import: shares.documents, shares.evidence.
Secret: nothing. Confidential: persons and places. Public: nothing.
Does not: store tasks: the journal sets them and ends them. People decide; a practised professional is asked.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from datetime import datetime, timedelta

from shares.documents.drill_report import DrillReport
from shares.documents.event import Departed, DrillClosed, Incident, Lost, Recovered, Resolved
from shares.documents.policy import folded
from shares.evidence.asked import still_asked
from shares.evidence.audited import CustodianRow, DrillRow, Known, Task, TaskKind
from shares.evidence.exposure import UNKNOWN
from shares.evidence.life import Life

DECIDE = "A practised key-management professional decides."
OPEN_FOR = timedelta(days=7)
"""How long a drill may stay open: what it showed is told while those who were there remember it."""
OUTLIVES: tuple[TaskKind, ...] = ("departure", "incident", "loss", "replacement")
"""What is still to be done when a set is retired: the key may be known, and in use."""
_MOST_NAMED = 6


def tasks(
    life: Life,
    rows: Sequence[CustodianRow],
    drills: Sequence[DrillRow],
    reports: Mapping[int, DrillReport],
    exposure: Sequence[Known],
) -> tuple[Task, ...]:
    """Return what is still to be done, the earliest due first.

    Args:
        life: of the set, up to the time of the audit.
        rows: how the custodians stand.
        drills: the drills so far.
        reports: the report of each drill, by its number.
        exposure: who has known what.
    """
    found = [
        *_attestations(life, rows),
        *_silent(life),
        _drill(life, drills),
        *_closings(life, drills),
        *_refresh(life),
        *_set_by_entries(life, exposure),
        *_actions(life, reports),
    ]
    return tuple(sorted(found, key=lambda task: (task.due, task.kind, task.entry or 0, task.about)))


def _task(
    life: Life,
    kind: TaskKind,
    what: str,
    due: datetime,
    *,
    about: Sequence[str] = (),
    entry: int | None = None,
    action: int | None = None,
    advice: str = "",
) -> Task:
    return Task(kind, what, due, due < life.at, tuple(about), entry, action, advice)


def _attestations(life: Life, rows: Sequence[CustodianRow]) -> Iterator[Task]:
    due_then: dict[datetime, list[str]] = {}
    for row in rows:
        if row.due is not None:
            due_then.setdefault(row.due, []).append(row.name)
    for due, names in due_then.items():
        yield _task(life, "attestation", f"attest: {listed(names)}", due, about=names)


def _silent(life: Life) -> Iterator[Task]:
    """Yield one task for each challenge with custodians who have neither answered it nor a later one."""
    for one in still_asked(life):
        if one.silent:
            names = list(one.silent)
            what = f"answer the challenge of entry {one.number}: {listed(names)}"
            yield _task(life, "answer", what, one.due, about=names)


def _drill(life: Life, drills: Sequence[DrillRow]) -> Task:
    # What was shown was shown when it was rehearsed: a report that comes late moves nothing.
    passed = [
        row.opened + timedelta(seconds=row.took)
        for row in drills
        if row.passed and row.took is not None and row.kind != "attendance"
    ]
    since = max(passed, default=life.start)
    last = f"the last one passed {since:%Y-%m-%d}" if passed else "none has passed yet"
    return _task(life, "drill", f"hold a drill of recovery or practice: {last}", since + life.intervals.drill_every)


def _closings(life: Life, drills: Sequence[DrillRow]) -> Iterator[Task]:
    for row in drills:
        if row.closed is None:
            what = f"close drill {row.number}, of {row.kind}, open since {row.opened:%Y-%m-%d}"
            yield _task(life, "closing", what, row.opened + OPEN_FOR, about=row.custodians, entry=row.number)


def _refresh(life: Life) -> Iterator[Task]:
    every = life.intervals.refresh_every
    if every is not None:
        yield _task(life, "refresh", f"renew the shares, dealt {life.start:%Y-%m-%d}", life.start + every)


def _set_by_entries(life: Life, exposure: Sequence[Known]) -> Iterator[Task]:
    # Nothing else ends it: shares that are renewed or reassigned leave the key as it was.
    replaced = {event.entry for _, event in life.each(Resolved) if event.how == "key replaced" and not event.action}
    known: dict[str, list[Known]] = {}
    for row in exposure:
        if row.kind in ("person", "unknown"):
            known.setdefault(folded(row.who), []).append(row)
    for entry in life.entries:
        number, event = entry.sequence, entry.event
        if (number, None) in life.resolved and not isinstance(event, Recovered):
            continue
        match event:
            case Departed():
                what = f"{event.person} has left: end what they could still do"
                advice = departure_advice(event, life.leaving[number], known)
                about = (event.person, *life.leaving[number])
                yield _task(life, "departure", what, event.due, about=about, entry=number, advice=advice)
            case Incident():
                what = f"deal with the incident: {event.remark}"
                advice = incident_advice(event, known)
                about = (*event.custodians, *event.persons)
                yield _task(life, "incident", what, event.due, about=about, entry=number, advice=advice)
            case Lost():
                what = f"deal with the lost copy of {event.custodian}: {event.copy_}, {event.reason}"
                due = entry.time + life.respond_within
                advice = loss_advice(event, known)
                yield _task(life, "loss", what, due, about=(event.custodian,), entry=number, advice=advice)
            case Recovered(disposition="replace", by=datetime() as by) if number not in replaced:
                what = f"replace the key that was recovered: {event.reason}"
                yield _task(life, "replacement", what, by, about=event.custodians, entry=number)


def _actions(life: Life, reports: Mapping[int, DrillReport]) -> Iterator[Task]:
    for entry, event in life.each(DrillClosed):
        report = reports.get(event.drill)
        for number, action in enumerate(report.actions if report else (), start=1):
            # A report is known by the entry that closed the drill, and by the drill's own number.
            if not {(entry.sequence, number), (event.drill, number)} & life.resolved.keys():
                what = f"{action.what} (drill {event.drill})"
                about, closed = (action.owner,), entry.sequence
                yield _task(life, "action", what, action.due, about=about, entry=closed, action=number)


def departure_advice(event: Departed, places: Sequence[str], exposure: Mapping[str, Sequence[Known]]) -> str:
    """Say how a departure is dealt with, from what the leaver has known.

    Args:
        event: the departure.
        places: the custodians whose place it empties.
        exposure: what each person, or somebody unknown, has known: by the folded name.
    """
    known = [row for row in exposure.get(folded(event.person), ()) if row.kind == "person"]
    said = _worst(known)
    if said:
        return said
    shares = listed(list(dict.fromkeys(name for row in known for name in row.shares)))
    if places:
        return (
            f"Reassign: the place of {listed(places)} goes to somebody else. A pack can be handed over, the "
            f"knowledge of {shares or 'its share'} stays with who left{_missing(known)}: new shares make it worthless, "
            f"handing the old one on does not. {DECIDE}"
        )
    if shares:
        return f"Refresh: {event.person} has known {shares}{_missing(known)}; new shares make that worthless. {DECIDE}"
    return f"No share is known to have been seen by {event.person}: enter how it was settled, and why."


def incident_advice(event: Incident, exposure: Mapping[str, Sequence[Known]]) -> str:
    """Say how an incident is dealt with, from what those concerned have known.

    Args:
        event: the incident.
        exposure: what each person, or somebody unknown, has known: by the folded name.
    """
    names = listed(event.custodians)
    if not event.exposed:
        return (
            f"Fill the place of {names} again: find a good copy, or reassign. Where it may turn up in other hands, "
            f"enter it as exposed. Whoever still has the share attests anew. {DECIDE}"
        )
    people = [folded(person) for person in event.persons] or [folded(UNKNOWN)]
    known = [row for person in dict.fromkeys(people) for row in exposure.get(person, ())]
    said = _worst(known)
    if said:
        return said
    who = listed(event.persons) if event.persons else UNKNOWN
    return f"Refresh: {who} may know {names}{_missing(known)}; new shares make that worthless. {DECIDE}"


def loss_advice(event: Lost, exposure: Mapping[str, Sequence[Known]]) -> str:
    """Say how a loss is dealt with: as an incident, since somebody unknown may have found the copy.

    Args:
        event: the loss.
        exposure: what each person, or somebody unknown, has known: by the folded name.
    """
    known = [row for row in exposure.get(folded(UNKNOWN), ()) if row.kind == "unknown"]
    return _worst(known) or (
        f"Treat it as an incident: it may turn up with anybody{_missing(known)}. Refresh, so that it is worth nothing, "
        f"or reassign the place of {event.custodian}. {DECIDE}"
    )


def _worst(known: Sequence[Known]) -> str:
    """Say that the key is to be replaced, where somebody has known a quorum; else nothing."""
    for row in known:
        if row.suffices:
            return (
                f"Replace the key, and retire this set: {row.who} has known {listed(row.shares)}, which make a quorum. "
                f"New shares do not help against that. {DECIDE}"
            )
        if row.recovered:
            entries = listed([str(number) for number in row.recoveries])
            return (
                f"Replace the key: {row.who} was present when it was recovered (entry {entries}), and may know it. "
                f"New shares do not help against that. {DECIDE}"
            )
        if row.suffices is None:
            return (
                f"{row.who} has known shares of epoch {row.epoch}, whose rule this record does not hold: find that "
                f"record, and see whether they made a quorum; then the key is to be replaced. {DECIDE}"
            )
    return ""


def _missing(known: Sequence[Known]) -> str:
    counts = [row.missing for row in known if row.missing is not None]
    if not counts:
        return ""
    fewest = min(counts, key=lambda bounds: bounds.low)
    return f" ({fewest} more would make a quorum)"


def listed(names: Sequence[str]) -> str:
    """Write names in one line, the first few of them where there are many.

    >>> listed(["north-pier", "south-pier"]), listed(list("abcdefgh"))
    ('north-pier, south-pier', 'a, b, c, d, e, f and 2 more')
    """
    more = f" and {len(names) - _MOST_NAMED:,} more" if len(names) > _MOST_NAMED else ""
    return ", ".join(names[:_MOST_NAMED]) + more
