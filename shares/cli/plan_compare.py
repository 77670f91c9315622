"""How ``shares plan --compare`` tells two policies side by side.

Source: none.
May import: shares.planning, .output, .plan_odds.
Secret: nothing. Public: nothing either, as for the policies.
Does not: say which danger matters more.
"""

from __future__ import annotations

from collections.abc import Iterator

from shares.cli.output import prose
from shares.cli.plan_odds import odds_members, table
from shares.planning import numbers
from shares.planning.compare import Side, verdict


def side_members(path: str, side: Side) -> dict[str, object]:
    """Return one of two policies, for JSON."""
    plan = side.plan
    return {
        "policy": path,
        "label": plan.label,
        "rule": plan.rule.words(),
        "quorum": {what: count.quorum._asdict() for what, count in plan.counts.items()},
        "block": {what: count.block._asdict() for what, count in plan.counts.items()},
        "serious": [finding.code for finding in plan.serious],
        "attest_every_days": side.model.attest_every,
        "refresh_every_days": side.model.refresh_every,
        "odds": odds_members(side.odds),
    }


def comparison_lines(first: tuple[str, Side], second: tuple[str, Side], years: float) -> Iterator[str]:
    """Yield two policies side by side, for people; each comes with its path."""
    for which, (path, side) in (("First", first), ("Second", second)):
        yield from prose(f"{which}: {path}, {side.plan.label}. To recover: {side.plan.rule.words()}.")
    yield ""
    columns = [list(_column(side)) for _, side in (first, second)]
    yield from table(
        [("", "first", "second")] + [(what, one, other) for (what, one), (_, other) in zip(*columns, strict=True)]
    )
    yield f"Odds are over {numbers.horizon(years)}."
    if first[1].odds and second[1].odds:
        yield from prose(verdict(first[1].odds, second[1].odds))


def _column(side: Side) -> Iterator[tuple[str, str]]:
    plan, odds = side.plan, side.odds
    yield "custodians", str(plan.counts["custodians"].total)
    for what in ("people", "sites"):
        yield f"fewest {what} that make a quorum", str(plan.counts[what].quorum)
        yield f"fewest {what} that block every quorum", str(plan.counts[what].block)
    yield "serious findings", str(len(plan.serious))
    yield "attested", numbers.every(side.model.attest_every)
    yield "refreshed", numbers.every(side.model.refresh_every)
    unknown = "too large"
    yield "loss", numbers.chance(odds.loss) if odds else unknown
    yield "exposure", numbers.chance(odds.exposure) if odds else unknown
    yield "no quorum on a given day", numbers.chance(odds.absence) if odds else unknown
    yield "mean time until the first loss", numbers.years(odds.years_to_loss) if odds else unknown
