"""How ``shares plan --compare`` tells two policies side by side.

Source: none.
May import: shares.planning, .output, .plan_odds, .plan_simulated.
Secret: nothing. Public: nothing either, as for the policies.
Does not: say which danger matters more.
"""

from __future__ import annotations

from collections.abc import Iterator

from shares.cli.output import prose
from shares.cli.plan_odds import odds_members, sentences, table
from shares.cli.plan_simulated import extra_missing, simulated_members
from shares.planning import numbers
from shares.planning.compare import Side, verdict
from shares.planning.reckoned import parts
from shares.planning.simulate import INSTALL
from shares.planning.telling import why, years_parts

_UNKNOWN = "too large"


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
        "simulated": simulated_members(side.simulated),
        "missing_extra": extra_missing(side.odds, side.simulated),
    }


def comparison_lines(first: tuple[str, Side], second: tuple[str, Side], years: float) -> Iterator[str]:
    """Yield two policies side by side, for people; each comes with its path."""
    for which, (path, side) in (("First", first), ("Second", second)):
        yield from prose(f"{which}: {path}, {side.plan.label}. To recover: {side.plan.rule.words()}.")
    yield ""
    simulated = [side.simulated for _, side in (first, second) if side.simulated]
    heads = (
        f"{which}{', odds simulated' if side.simulated else ''}"
        for which, (_, side) in (("first", first), ("second", second))
    )
    columns = [_rows(side, intervals=bool(simulated)) for _, side in (first, second)]
    yield from table([("", *heads), *((what, one, other) for (what, one), (_, other) in zip(*columns, strict=True))])
    yield f"Odds are over {numbers.horizon(years)}."
    if simulated:
        yield from sentences(why(simulated, None))
    if first[1].now and second[1].now:
        yield from sentences(verdict(first[1].now, second[1].now))
    else:
        yield from sentences(
            f"What is too large for exact odds is simulated by numpy, which is not installed: {INSTALL}."
        )


def _rows(side: Side, *, intervals: bool) -> Iterator[tuple[str, str]]:
    """Yield what is compared of a policy. Intervals are in rows of their own: beside the odds they would make a table
    of two simulated policies too wide for a terminal.

    Args:
        side: the policy.
        intervals: whether there are such rows, as there are where one of both is simulated.
    """
    plan = side.plan
    yield "custodians", str(plan.counts["custodians"].total)
    for what in ("people", "sites"):
        yield f"fewest {what} that make a quorum", str(plan.counts[what].quorum)
        yield f"fewest {what} that block every quorum", str(plan.counts[what].block)
    yield "serious findings", str(len(plan.serious))
    yield "attested", numbers.every(side.model.attest_every)
    yield "refreshed", numbers.every(side.model.refresh_every)
    for what, (told, within) in _told(side).items():
        yield what, told
        if intervals:
            yield "  its 95 % interval", within


def _told(side: Side) -> dict[str, tuple[str, str]]:
    names = {"loss": "loss", "exposure": "exposure", "absence": "no quorum on a given day"}
    told = {what: parts(side.now, of) if side.now else (_UNKNOWN, "") for of, what in names.items()}
    mean = (_UNKNOWN, "")
    if side.odds:
        mean = (numbers.years(side.odds.years_to_loss), "")
    elif side.simulated:
        mean = years_parts(side.simulated)
    return {**told, "mean time until the first loss": mean}
