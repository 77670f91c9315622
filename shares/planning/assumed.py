"""What is assumed of losses, leaks and absences where a policy states nothing: the numbers, and why they are these.

They are starting points to be replaced by an organisation's own. Chances are within a year; where no source is given
there is none, and the number is common practice or a guess that is said to be one.

Source: the 5 % of shares a year that planning arithmetic commonly takes as lost unnoticed; else
``reason`` says.
May import: shares.documents.policy, shares.documents.rates.
Secret: nothing. Public: the numbers; which of them a policy needs is as confidential as the policy.
Does not: put them in place; ``model`` does.
"""

from __future__ import annotations

from collections.abc import Iterable, Set
from datetime import timedelta
from typing import Final, Literal, NamedTuple, TypeAlias

from shares.documents.policy import Policy, folded
from shares.documents.rates import CommonRates

Kind: TypeAlias = Literal["share", "person", "site", "line", "medium"]


class Assumed(NamedTuple):
    """Rates of one kind of event, and why.

    Attributes:
        loss, leak: chances within a year, 0 to 1.
        absent: the part of days, 0 to 1.
        reason: why, in one sentence or two.
    """

    loss: float
    leak: float
    absent: float
    reason: str


SHARE: Final = Assumed(
    0.04,
    0.0,
    0.0,
    "4 % of shares a year are mislaid, thrown away or unreadable; those that leavers take along make it the 5 % that "
    "planning commonly counts on. Where the medium is stated it is 3 % on paper, 2 % on paper in a safe, 4 % on a card "
    "and 6 % on a stick, which forgets without power (guesses).",
)
SHARE_LOSS_ON: Final = {"paper": 0.03, "safe": 0.02, "stick": 0.06, "card": 0.04}
"""``SHARE.loss`` by medium, where it is one of these."""

DEPARTURE: Final = 0.10
HANDED_ON: Final = 0.90
ABSENT_FOR: Final = 7.0

PERSON: Final = Assumed(
    0.0,
    0.01,
    0.10,
    "Of 100 custodians one a year tells, copies or is made to give up a share (a guess); 10 % leave within a year "
    "(common turnover), and one leaver in ten takes the share along, which loses and leaks it; 25 days of leave and 10 "
    "of illness make 10 % of days away, a week at a time.",
)
SITE: Final = Assumed(
    0.002,
    0.002,
    0.005,
    "Fire or flood destroys all shares at a site, and a break-in takes all, once in 500 years each (guesses); a site "
    "is closed two days a year.",
)
LINE: Final = Assumed(
    0.001,
    0.002,
    0.0,
    "One order, or the end of a department, destroys all shares of a reporting line once in 1,000 years and gathers "
    "all once in 500 (guesses).",
)
MEDIUM: Final = Assumed(0.0, 0.0, 0.0, "Shares on paper do not fail together, nor on a medium not known here.")
MEDIUM_OF_ONE_MAKE: Final = Assumed(
    0.002, 0.0, 0.0, "Sticks, and cards, are bought together and fail together once in 500 years (a guess)."
)
MEDIUM_FAILING: Final = {"stick": MEDIUM_OF_ONE_MAKE, "card": MEDIUM_OF_ONE_MAKE}
"""What befalls all shares on one kind of medium, where it is one of these; ``MEDIUM`` is for the others."""

INDEPENDENT: Final = (
    "Custodians have nothing in common but persons, sites, reporting lines and media; all else befalls each of them "
    "independently of the others."
)

NO_DRILLS: Final = "Drills have no part in the odds: drill_every changes none of them."
WITHIN_A_DAY: Final = (
    "Odds count in whole days: recover_within, which is less than a day here, counts as one day in the odds."
)


def assumptions(policy: Policy) -> tuple[str, ...]:
    """Return what the odds of a policy rest on beside what it states: one text for each kind of event that it leaves
    open, wholly or partly. The independence of custodians comes first, and what drills do comes last, and both always.

    Args:
        policy: as ``Policy.parse`` returns it.
    """
    rates, custodians = policy.rates, policy.custodians
    of_person = [
        getattr(one, key) is None and getattr(rates, key) is None
        for one in custodians
        for key in ("leak", "departure", "absent")
    ]
    media = {folded(one.medium) for one in custodians if one.medium is not None}
    open_: dict[str, bool] = {
        SHARE.reason: any(one.loss is None and rates.loss is None for one in custodians),
        PERSON.reason: any(of_person) or rates.handed_on is None or rates.absent_for is None,
        SITE.reason: _left_open(policy.sites, {folded(one.site) for one in custodians}),
        LINE.reason: _left_open(policy.lines, {folded(one.reports_to) for one in custodians}),
        MEDIUM.reason: _left_open(policy.media, media - MEDIUM_FAILING.keys()),
        MEDIUM_OF_ONE_MAKE.reason: _left_open(policy.media, media & MEDIUM_FAILING.keys()),
    }
    within_a_day = policy.recover_within is not None and policy.recover_within < timedelta(days=1)
    return (
        INDEPENDENT,
        *(reason for reason, is_open in open_.items() if is_open),
        *((WITHIN_A_DAY,) if within_a_day else ()),
        NO_DRILLS,
    )


def _left_open(tables: Iterable[CommonRates], names: Set[str]) -> bool:
    stated = {folded(one.name) for one in tables if None not in (one.loss, one.leak, one.absent)}
    return not names <= stated
