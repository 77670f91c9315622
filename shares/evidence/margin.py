"""The margin: how many more of the confirmed custodians may be lost before no quorum is left, now and over time.

Silence is not consent: whoever has not proven their share counts as lost.

Source: J. Benaloh, J. Leichter 1988 (threshold trees); trade practice: count what is confirmed, not what was dealt (the
"live margin"). Exact where nobody stands in two branches of the rule, and up to 24 who do; else bounds that say so.
May import: shares.documents.policy, shares.planning, shares.sharing.rule, shares.evidence.audited, .life, .standing.
Secret: nothing. Confidential: people and sites. Public: the rule.
Does not: say how likely a loss is, or who is confirmed; ``standing`` does.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from datetime import datetime
from functools import lru_cache

from shares.documents.policy import folded
from shares.evidence.audited import CustodianRow, Margin, MarginSince
from shares.evidence.life import Life
from shares.evidence.standing import Span
from shares.planning.remainder import still_needed, without
from shares.planning.structure import Bounds, Count, relabelled
from shares.planning.truth_table import MAX_NAMES
from shares.sharing.rule import Rule

_QUICK = 20
"""Up to so many names all sets are tried in no time; for the margin over time, which has many points, no more are."""
NONE_LEFT = Bounds(-1, -1)


def counted(rule: Rule, *, most_tried: int = _QUICK) -> Count:
    """Return how a rule counts; rules that differ in names alone are counted once.

    Args:
        rule: over custodians, or over any label that they share.
        most_tried: up to how many names all sets are tried, where the bounds do not meet.
    """
    numbers = {name: str(number) for number, name in enumerate(rule.paths())}
    return _counted(relabelled(rule, numbers), most_tried)


@lru_cache(maxsize=1024)
def _counted(rule: Rule, most_tried: int) -> Count:
    return Count.of(rule, most_tried=most_tried)


def margin_of(
    rule: Rule,
    confirmed: Collection[str],
    label_of: Mapping[str, str] | None = None,
    *,
    most_tried: int = MAX_NAMES,
) -> Bounds:
    """Return how many of the confirmed may be lost, in the worst case, while the rest still makes a quorum.

    Args:
        rule: who can recover.
        confirmed: the custodians who count.
        label_of: each custodian's person or site, where these are what is lost, each with all that they hold.
        most_tried: up to how many names all sets are tried.

    Returns:
        -1 where the confirmed make no quorum even now.

    >>> margin_of(Rule(2, ("north-pier", "south-pier", "light-house")), {"north-pier", "light-house"})
    Bounds(low=0, high=0)
    """
    left = without(rule, {name for name in rule.paths() if name not in confirmed})
    if left is None:
        return NONE_LEFT
    block = counted(relabelled(left, label_of) if label_of else left, most_tried=most_tried).block
    return Bounds(block.low - 1, block.high - 1)


def margin(life: Life, rows: Sequence[CustodianRow]) -> Margin:
    """Return the margin at the time of the audit.

    Args:
        life: of the set, up to that time.
        rows: how the custodians stand.
    """
    confirmed = {row.name for row in rows if row.counts}
    paths = life.rule.paths()
    needed = still_needed(life.rule, {path for name in confirmed for path in paths[name]})
    people = {row.name: folded(row.person) for row in rows}
    sites = {row.name: folded(row.site) for row in rows if row.site is not None}
    return Margin(
        confirmed=len(confirmed),
        total=len(rows),
        custodians=margin_of(life.rule, confirmed),
        people=margin_of(life.rule, confirmed, people) if life.policy else None,
        sites=margin_of(life.rule, confirmed, sites) if life.policy else None,
        whole=margin_of(life.rule, paths),
        missing=counted(needed, most_tried=MAX_NAMES).quorum if needed else Bounds(0, 0),
    )


def margins(rule: Rule, spans: Sequence[Span], start: datetime, end: datetime) -> tuple[MarginSince, ...]:
    """Return the margin in custodians over time, wherever it changes.

    Args:
        rule: who can recover.
        spans: from when until when each custodian was confirmed, in any order, none of one custodian overlapping.
        start: where to begin.
        end: the last moment that is looked at.
    """
    changes: dict[datetime, list[tuple[str, bool]]] = {start: []}
    for span in spans:
        changes.setdefault(span.since, []).append((span.custodian, True))
        changes.setdefault(span.until, []).append((span.custodian, False))
    confirmed, known, found = set[str](), dict[frozenset[str], Bounds](), list[MarginSince]()
    for time in sorted(changes):
        # Whoever is confirmed anew at the moment at which the last proof expires stays so.
        for name, counts in sorted(changes[time], key=lambda change: change[1]):
            (confirmed.add if counts else confirmed.discard)(name)
        if not start <= time <= end:
            continue
        now = frozenset(confirmed)
        if now not in known:
            known[now] = margin_of(rule, now, most_tried=_QUICK)
        if not found or (found[-1].low, found[-1].high) != known[now]:
            found.append(MarginSince(time, *known[now]))
    return tuple(found)
