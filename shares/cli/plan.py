"""``shares plan``."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from itertools import chain
from pathlib import Path

import click

import shares
from shares.cli.output import filled, json_option, print_result, progress, prose, refuse_taken
from shares.cli.plan_compare import comparison_lines, side_members
from shares.cli.plan_odds import outlook_lines, outlook_members, rest_lines, rest_members, table
from shares.cli.plan_targets import target_lines, target_members
from shares.custody.parties import load_card
from shares.documents.base import MAX_FILE
from shares.documents.party import PartyCard
from shares.documents.policy import Policy
from shares.errors import ParameterError, VerificationError
from shares.planning.advice import outlook
from shares.planning.assumed import assumptions
from shares.planning.compare import side
from shares.planning.examine import Plan, examine
from shares.planning.model import model_of
from shares.planning.odds import days_of, odds
from shares.planning.reckoned import HISTORIES, SEED, instead
from shares.planning.simulate import MAX_HISTORIES
from shares.planning.structure import MAX_LISTED, Bounds
from shares.planning.targets import meeting, parse_targets
from shares.storage import read_file, write_new

CONFIDENTIAL = "Confidential, like the policy itself: it tells whom to coerce, and where."


@click.command()
@click.argument("policy", metavar="POLICY", callback=filled)
@click.option("--years", type=float, default=10.0, show_default=True, help="Over how many years odds are told.")
@click.option("--odds", "full", is_flag=True, help="Tell every cause, change and assumption, however long it takes.")
@click.option(
    "--targets",
    metavar="TARGETS",
    callback=filled,
    help="Find the smallest rule and the longest intervals that have odds like loss=1e-6,exposure=1e-6.",
)
@click.option("--compare", metavar="OTHER", callback=filled, help="Set the policy beside another one.")
@click.option("--html", "page", metavar="FILE", callback=filled, help="Write a page as well, to be read and filed.")
@click.option(
    "--histories",
    type=click.IntRange(1, MAX_HISTORIES),
    metavar="N",
    help=f"Simulate from so many histories, beside exact odds as well; {HISTORIES} where no odds are exact.",
)
@click.option(
    "--seed",
    type=click.IntRange(min=0),
    metavar="S",
    default=SEED,
    show_default=True,
    help="Which histories are drawn: the same for the same seed and version of numpy.",
)
@json_option
@click.pass_context
def command(
    ctx: click.Context,
    policy: str,
    years: float,
    full: bool,
    targets: str | None,
    compare: str | None,
    page: str | None,
    histories: int | None,
    seed: int,
    as_json: bool,
) -> None:
    """Examine the policy in the TOML file POLICY before anything is split. It holds no secret, but is confidential.

    Told are the smallest numbers of custodians, people, sites and reporting lines that make a quorum or block every
    quorum, the minimal quorums, and what is amiss. The party cards that it names are read. Exit code 0; 4 where the
    policy says `strict = true` and a serious finding stands, as `split` refuses it then. With --targets or --compare
    nothing of this is told, and the exit code is 0.

    Serious is that one person, or one site, alone makes a quorum or leaves none when lost; that those of one reporting
    line, or the shares that go one way, make a quorum; that every custodian is needed; that there are fewer than three
    people or sites. A caution needs a decision that only people can make; a note is good to know.

    Then come the odds over --years: that the key is lost, that it is exposed, that no quorum comes together on a day;
    their largest causes; advice; and what to change first. Causes and changes are left out where they would take long
    (more than 24 custodians, or many sites, lines and media that cross one another), unless --odds asks for them.
    Rates come from the policy, or are assumed and said to be. Whether odds are good enough is for people to say.

    Odds are exact where that is not too much work. Where the same custodians stand in many groups, or sites, lines and
    media cross one another in many ways, they are simulated, each with its interval, by numpy: without it (README, 'Two
    commands') the structure is told alone. There --odds simulates every cause and change: seconds for each, and up to
    an hour in all for 200 custodians. With --compare and --targets nothing is simulated that is exact.

    What a policy holds is in FORMAT.md, section 12 (shares --help says where that lies); examples to begin with are in
    examples/policies/ of the source.

    \b
    Example:
      shares plan tide-archive.toml
      shares plan tide-archive.toml --targets loss=0.1%,exposure=0.1% --years 10
      shares plan tide-archive.toml --html plan.html
    """
    days_of(years)
    if page is not None:
        if targets is not None or compare is not None:
            raise ParameterError("--html is the page of a plan, not of --targets or --compare", hint="run it by itself")
        refuse_taken(page)
    if targets is not None and compare is not None:
        raise ParameterError("--targets and --compare answer two questions", hint="ask one after the other")
    wanted = None if targets is None else parse_targets(targets)
    read, code = _read(policy), 0
    open_ = assumptions(read)
    if wanted is not None:
        model = model_of(read)
        now = odds(model, years) or instead(model, years, histories=histories, seed=seed, drawn=_drawn())
        answer = meeting(model, wanted, years, progress=progress("Rules", "rules"))
        members = {"years": years, **target_members(wanted, now, answer)}
        lines = target_lines(wanted, now, answer, years)
    elif compare is not None:
        other = _read(compare)
        first, second = (
            (path, side(one, years, histories=histories, seed=seed, drawn=_drawn()))
            for path, one in ((policy, read), (compare, other))
        )
        open_ = tuple(dict.fromkeys((*open_, *assumptions(other))))
        members = {"years": years, "policies": [side_members(*first), side_members(*second)]}
        lines = comparison_lines(first, second, years)
    else:
        plan = examine(read, cards=_cards(read, Path(policy).parent))
        code = VerificationError.exit_code if plan.refused else 0
        model = model_of(read)
        view = outlook(
            model,
            years,
            full=full,
            histories=histories,
            seed=seed,
            progress=progress("Changes", "changes"),
            drawn=_drawn(),
        )
        if page is not None:
            # The template engine is loaded for a page alone.
            from shares.planning.page import drawn, plan_page

            on_it = drawn(model, years, progress=progress("Page", "rules"))
            program = f"shares {shares.__version__}"
            data = plan_page(plan, model, view, on_it, open_, digest=read.digest(), program=program)
            write_new(page, data, secret=True)
        members = {**_members(plan), **outlook_members(view), "page": page}
        lines = chain(_lines(plan), [""], outlook_lines(view, full=full), _page_lines(page))
    print_result(
        {"done": code == 0, "exit": code, "confidential": CONFIDENTIAL, **members, **rest_members(open_)},
        chain(lines, [""], rest_lines(open_, full=full), [CONFIDENTIAL]),
        as_json=as_json,
    )
    ctx.exit(code)


def _page_lines(page: str | None) -> Iterator[str]:
    if page is not None:
        yield ""
        yield f"Page, confidential like this: {page}"


def _drawn() -> Callable[[int, int | None], None]:
    return progress("Simulation", "histories")


def _read(path: str) -> Policy:
    return Policy.parse(read_file(path, limit=MAX_FILE), where=path)


def _cards(policy: Policy, folder: Path) -> dict[str, PartyCard]:
    """Read the cards that a policy names; a ceremony is a bad time to find that one does not exist."""
    return {one.name: load_card(folder / one.card) for one in policy.custodians if one.card is not None}


def _members(plan: Plan) -> dict[str, object]:
    quorums = plan.quorums
    return {
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
    yield from table(rows)
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
    yield from prose(plan.verdict)


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
