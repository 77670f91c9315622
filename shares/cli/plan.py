"""``shares plan``."""

from __future__ import annotations

import math
from collections.abc import Iterator
from pathlib import Path

import click

from shares.cli.output import filled, json_option, print_result, prose
from shares.custody.parties import load_card
from shares.documents.base import MAX_FILE
from shares.documents.party import PartyCard
from shares.documents.policy import Policy
from shares.errors import VerificationError
from shares.planning.examine import Plan, examine
from shares.planning.structure import MAX_LISTED, Bounds
from shares.storage import read_file

CONFIDENTIAL = "Confidential, like the policy itself: it tells whom to coerce, and where."


@click.command()
@click.argument("policy", metavar="POLICY", callback=filled)
@json_option
@click.pass_context
def command(ctx: click.Context, policy: str, as_json: bool) -> None:
    """Examine the policy in the TOML file POLICY before anything is split. It holds no secret, but is confidential.

    Told are the smallest numbers of custodians, people, sites and reporting lines that make a quorum or block every
    quorum, the minimal quorums, and what is amiss. The party cards that it names are read. Exit code 0; 4 where the
    policy says `strict = true` and a serious finding stands, as `split` refuses it then.

    Serious is that one person, or one site, alone makes a quorum or leaves none when lost; that those of one reporting
    line, or the shares that go one way, make a quorum; that every custodian is needed; that there are fewer than three
    people or sites. A caution needs a decision that only people can make; a note is good to know.

    What a policy holds is in FORMAT.md, section 12; examples to begin with are in examples/policies/ of the source.

    \b
    Example:
      shares plan tide-archive.toml
    """
    read = Policy.parse(read_file(policy, limit=MAX_FILE), where=policy)
    plan = examine(read, cards=_cards(read, Path(policy).parent))
    code = VerificationError.exit_code if plan.refused else 0
    print_result({"done": code == 0, "exit": code, **_members(plan)}, _lines(plan), as_json=as_json)
    ctx.exit(code)


def _cards(policy: Policy, folder: Path) -> dict[str, PartyCard]:
    """Read the cards that a policy names; a ceremony is a bad time to find that one does not exist."""
    return {one.name: load_card(folder / one.card) for one in policy.custodians if one.card is not None}


def _members(plan: Plan) -> dict[str, object]:
    quorums = plan.quorums
    return {
        "confidential": CONFIDENTIAL,
        "label": plan.label,
        "rule": plan.rule.words(),
        "points": plan.rule.size,
        "exact": plan.exact,
        "counts": {
            what: {"total": count.total, "quorum": count.quorum._asdict(), "block": count.block._asdict()}
            for what, count in plan.counts.items()
        },
        "minimal_quorums": {**quorums.count._asdict(), "listed": [list(quorum) for quorum in quorums.listed]},
        "findings": [
            {
                "severity": finding.severity,
                "code": finding.code,
                "what": finding.what,
                "advice": finding.advice,
                "about": list(finding.about),
            }
            for finding in plan.findings
        ],
        "strict": plan.strict,
        "refused": plan.refused,
    }


def _lines(plan: Plan) -> Iterator[str]:
    yield from prose(f"Plan: {plan.label}. To recover: {plan.rule.words()}.")
    yield ""
    rows = [("", "in all", "make a quorum", "block every quorum")] + [
        (what, str(count.total), str(count.quorum), str(count.block)) for what, count in plan.counts.items()
    ]
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    for what, *numbers in rows:
        cells = [f"{number:>{width}}" for number, width in zip(numbers, widths[1:], strict=True)]
        yield "  ".join([f"{what:<{widths[0]}}", *cells]).rstrip()
    yield "The last two columns: the fewest that can do so. If all who block every quorum are lost, so is the key."
    if not plan.exact:
        yield from prose(
            "Where two numbers stand for one, it lies between them: names stand in several places of this rule, and "
            "are too many to try all sets (the general problem is NP-hard, and counting #P-hard)."
        )
    yield ""
    yield from _quorum_lines(plan)
    for finding in plan.findings:
        yield ""
        yield from prose(f"{finding.severity.capitalize()}: {finding.what} {finding.advice}")
    yield ""
    yield from prose(_verdict(plan))
    yield CONFIDENTIAL


def _quorum_lines(plan: Plan) -> Iterator[str]:
    quorums = plan.quorums
    if quorums.listed:
        yield f"Minimal quorums, {len(quorums.listed)} in all:"
        yield from (f"  {', '.join(quorum)}" for quorum in quorums.listed)
    else:
        yield from prose(f"Minimal quorums: {_counted(quorums.count)}, too many to list (up to {MAX_LISTED} are).")


def _counted(count: Bounds) -> str:
    """Write a number that may have hundreds of digits."""
    low, high = (f"{n:,}" if n < 10**15 else f"about 10^{round(math.log10(n))}" for n in count)
    return low if count.exact else f"{low} to {high}"


def _verdict(plan: Plan) -> str:
    if plan.refused:
        return "The policy is strict: `shares split` refuses it while a serious finding stands. Change the policy."
    if plan.serious:
        return (
            "Serious findings stand. `shares split` tells them and goes on, since the policy does not say "
            "`strict = true`. Better change the policy first."
        )
    return "Nothing serious was found in the structure. How likely losses are is not part of this."
