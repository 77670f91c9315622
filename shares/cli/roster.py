"""``shares drill roster``."""

from __future__ import annotations

from datetime import timedelta

import click

from shares import clock
from shares.cli.intervals import interval
from shares.cli.output import filled, json_option, print_result, prose
from shares.evidence.drill import rehearsed_together
from shares.evidence.roster import Covers, roster
from shares.history.folder import SetFolder


@click.command("roster", short_help="Say who should rehearse with whom.")
@click.argument("folder", metavar="SET", callback=filled)
@click.option(
    "--cycle",
    default="2y",
    show_default=True,
    metavar="INTERVAL",
    callback=interval,
    help="How far back rehearsals count as done.",
)
@click.option(
    "--covers",
    type=click.Choice(["pairs", "quorums"]),
    help="What is to be covered.  [default: every quorum where there are 12 at most, else every pair]",
)
@click.option("--seed", type=int, default=0, show_default=True, help="Decides among rosters that are equally good.")
@json_option
def command(folder: str, cycle: timedelta, covers: Covers | None, seed: int, as_json: bool) -> None:
    """Say who should rehearse with whom, so that all who can need each other recover together in few drills.

    What past rehearsals of the SET have covered is left out. It tells who can recover: keep it like the policy.

    \b
    Example:
      shares drill roster tide-archive
    """
    of_set = SetFolder(folder)
    past = rehearsed_together(of_set.journal(), clock.now() - cycle)
    found = roster(of_set.record.rule.to_rule(), past, covers=covers, seed=seed)
    unit = "pair" if found.covers == "pairs" else "quorum"
    lines = [
        f"{len(found.drills)} drills for {of_set.record.label}, no fewer than {found.bound} ({found.bound_by}).",
        *(f"  {number}: {', '.join(names)}" for number, names in enumerate(found.drills, 1)),
        f"Found by: {found.method}. A whole cycle has {found.cycle}, and no cycle fewer than {found.cycle_bound}.",
        f"Covered by past drills: {len(found.covered):,}; by these: {len(found.left):,}; counted by {unit}.",
        *(line for note in found.notes for line in prose(note)),
    ]
    members = {
        "done": True,
        "covers": found.covers,
        "drills": found.drills,
        "bound": found.bound,
        "bound_by": found.bound_by,
        "method": found.method,
        "cycle": found.cycle,
        "cycle_bound": found.cycle_bound,
        "covered": found.covered,
        "left": found.left,
        "apart": found.apart,
        "notes": found.notes,
    }
    print_result(members, lines, as_json=as_json)
