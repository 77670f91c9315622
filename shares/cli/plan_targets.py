"""How ``shares plan --targets`` tells which rules and intervals have the odds that are wanted.

Source: none.
May import: shares.planning, .output, .plan_odds, .plan_simulated.
Secret: nothing. Public: nothing either, as for the policy.
Does not: search.
"""

from __future__ import annotations

from collections.abc import Iterator

from shares.cli.plan_odds import cause_members, odds_members, sentences, table
from shares.cli.plan_simulated import extra_missing, simulated_members
from shares.planning import numbers
from shares.planning.advice import largest
from shares.planning.lineup import IMAGINED, MAX_CUSTODIANS
from shares.planning.reckoned import Reckoned, words
from shares.planning.simulate import INSTALL, Simulated
from shares.planning.targets import INTERVALS, Answer, Targets
from shares.planning.telling import why

TRIED = (
    "Rules of one group were tried, in which no custodian, person, site or reporting line makes a quorum alone, and "
    f"no custodian, person or site is needed by every quorum. {IMAGINED}"
)
NONE_SOUND = (
    f"Serious: in every rule any k of n, n up to {MAX_CUSTODIANS}, over these people, sites and managers, one of them "
    "alone makes a quorum or is needed by every quorum. More people and sites come first."
)
_TRIED_ALL = (
    f"Rules of one group were tried, in which neither one custodian makes a quorum nor all are needed. {IMAGINED}"
)


def tried(answer: Answer) -> str:
    """Return in words what was looked at."""
    rules = TRIED if answer.sound else _TRIED_ALL
    if answer.attested == INTERVALS:
        return rules
    shortest = answer.attested[-1]
    oftenest = f"no oftener than {numbers.every(shortest)}" if shortest else "not at all"
    return f"{rules} Attestations were tried {oftenest}: a lost share is not made good in less time (repair_after)."


def target_members(targets: Targets, now: Reckoned | None, answer: Answer) -> dict[str, object]:
    """Return targets and what was found for them, for JSON."""
    odds, simulated = (None, now) if isinstance(now, Simulated) else (now, None)
    return {
        "targets": targets._asdict(),
        "free": list(targets.free),
        "odds": odds_members(odds),
        "simulated": simulated_members(simulated),
        "missing_extra": extra_missing(odds, simulated),
        "met_by_the_policy": None if now is None else targets.met_by(now),
        "met": answer.met,
        "sound": answer.sound,
        "choices": [
            {
                "need": choice.need,
                "total": choice.total,
                "imagined": choice.imagined,
                "attest_every_days": choice.attest_every,
                "refresh_every_days": choice.refresh_every,
                "odds": odds_members(choice.odds),
            }
            for choice in answer.choices
        ],
        "causes": cause_members(answer.causes),
        "imagined": tried(answer),
    }


def target_lines(targets: Targets, now: Reckoned | None, answer: Answer, years: float) -> Iterator[str]:
    """Yield for people what was found for targets."""
    over = numbers.horizon(years)
    wanted = " and ".join(
        f"{what} at most {_asked(chance)}" for what, chance in targets._asdict().items() if chance < 1
    )
    yield from sentences(f"Wanted over {over}: {wanted}. {_of_the_policy(targets, now)}")
    yield ""
    if answer.met:
        yield "The smallest rule that has these odds, and larger ones with less to do:"
    else:
        yield from sentences(
            "No rule that was tried has these odds. What comes nearest, as it misses its worse target by the smallest "
            "factor:"
        )
    rows = [("rule", "attest", "refresh", "loss", "exposure", "imagined")]
    rows += [
        (
            f"{choice.need} of {choice.total}",
            numbers.every(choice.attest_every),
            numbers.every(choice.refresh_every),
            numbers.chance(choice.odds.loss),
            numbers.chance(choice.odds.exposure),
            str(choice.imagined or "none"),
        )
        for choice in answer.choices
    ]
    yield from (f"  {line}" for line in table(rows))
    if not answer.sound:
        yield from sentences(NONE_SOUND)
    for what in targets.free:
        most = max(getattr(choice.odds, what) for choice in answer.choices)
        yield from sentences(
            f"No bound was asked for {what}: with these rules it is up to {_asked(most)}. Ask for one as well, like "
            f"{what}=1%."
        )
    if answer.causes:
        yield from sentences(_in_the_way(targets, answer))
    yield ""
    yield from sentences(tried(answer))


def _asked(chance: float) -> str:
    """Write a target, which is a bound, as nothing but what it is."""
    told = numbers.chance(chance)
    return f"{100 * chance:.6g} %" if told == "none" or told.startswith(("above", "below")) else told


def _of_the_policy(targets: Targets, now: Reckoned | None) -> str:
    if now is None:
        return (
            "The policy itself is too large for exact odds, and to simulate them takes numpy, which is not installed: "
            f"{INSTALL}."
        )
    told = f"The policy as it is: loss {words(now, 'loss')}, exposure {words(now, 'exposure')}"
    met = targets.met_by(now)
    enough = (
        "enough" if met else "not enough" if met is False else "not to be told from so many histories, enough or not"
    )
    return f"{told}; that is {enough}.{f' {why([now], None)}' if isinstance(now, Simulated) else ''}"


def _in_the_way(targets: Targets, answer: Answer) -> str:
    odds = answer.choices[0].odds
    told = [
        f"of {what}, {' and '.join(largest(answer.causes, what))}"
        for what in ("loss", "exposure")
        if getattr(odds, what) > getattr(targets, what) and largest(answer.causes, what)
    ]
    return f"What stands in the way: {'; '.join(told)}. More sites and managers help where more custodians do not."
