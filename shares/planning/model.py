"""What is assumed to befall the custodians of a policy: independent events, each of which hits one of them or several.

A *cause* is what events come from: one share (mislaid, unreadable), one person (who leaves, tells, is away, with all
shares they hold), one site, one reporting line, one kind of medium. Events that lose or leak what they hit come at a
constant rate; on each day a cause may keep away what it hits. Nothing else links two custodians: this independence is
itself an assumption, and the first one to doubt.

Source: Barlow, Proschan 1975 (exponential lives); A. W. Marshall, I. Olkin, "A multivariate exponential distribution",
J. Amer. Stat. Assoc. 62, 1967 (shocks that strike one or several at once).
May import: shares.errors, shares.sharing.rule, shares.documents.policy, shares.documents.rates, .assumed, .labels.
Secret: nothing. Public: nothing either: a model is as confidential as the policy it comes from.
Does not: work out odds (``odds`` does).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from datetime import timedelta
from typing import Literal

from shares.documents.policy import Policy, folded
from shares.documents.rates import CommonRates
from shares.errors import ParameterError
from shares.planning import assumed, labels
from shares.planning.assumed import Assumed, Kind
from shares.sharing.rule import Rule

DAYS_OF_A_YEAR = 365


@dataclass(frozen=True, slots=True)
class Cause:
    """What events come from, each of which hits all members at once.

    Attributes:
        kind: "share", "person", "site", "line" or "medium".
        name: the custodian, person, site, manager or medium.
        members: the custodians hit.
        loss: events a year after which the members' shares are gone.
        leak: events a year after which their shares are known to someone who must not know them.
        absent: the part of days on which the members cannot be had, 0 to 1.
    """

    kind: Kind
    name: str
    members: frozenset[str]
    loss: float = 0.0
    leak: float = 0.0
    absent: float = 0.0

    def __post_init__(self) -> None:
        for what, rate in (("loss", self.loss), ("leak", self.leak)):
            if not 0 <= rate < math.inf:
                raise ParameterError("a rate is a number of events a year, 0 or more", where=what)
        if not 0 <= self.absent <= 1:
            raise ParameterError("a part of days is from 0 to 1", where="absent")


@dataclass(frozen=True, slots=True)
class Model:
    """A rule, what befalls its custodians, and what is done about it.

    Attributes:
        rule: who can recover.
        causes: what losses, leaks and absences come from.
        attest_every: days between attestations; None where nobody asks.
        repair_after: days from an attestation until what it found lost is made good, 0 or more.
        refresh_every: days between refreshes, each of which makes earlier leaks worthless; None for none.
        recover_within: days within which a quorum is to be together, 1 or more.
        absent_for: days that an absence lasts on the average.
    """

    rule: Rule
    causes: tuple[Cause, ...]
    attest_every: int | None = None
    repair_after: int = 14
    refresh_every: int | None = None
    recover_within: float = 1.0
    absent_for: float = assumed.ABSENT_FOR

    def __post_init__(self) -> None:
        for what, days in (("attest_every", self.attest_every), ("refresh_every", self.refresh_every)):
            if days is not None and days < 1:
                raise ParameterError("an interval is at least one day", where=what, hint="leave it out for never")
        if self.repair_after < 0:
            raise ParameterError("it is a number of days, 0 or more", where="repair_after")
        if not (self.recover_within >= 1 and self.absent_for > 0):
            raise ParameterError("recover_within is at least one day, and absent_for above 0")

    @property
    def custodians(self) -> tuple[str, ...]:
        """The custodians, in the order in which the rule first meets them."""
        return tuple(self.rule.paths())

    @property
    def patience(self) -> float:
        """The chance that an absence lasts longer than there is time: 1 where all must come within a day."""
        return math.exp(-(self.recover_within - 1) / self.absent_for)


def yearly(chance: float) -> float:
    """Return the rate, in events a year, of what happens within a year with this chance, 0 or more and below 1.

    >>> round(yearly(0.05), 6)
    0.051293
    """
    return -math.log1p(-chance)


def model_of(policy: Policy) -> Model:
    """Return what a policy states, and for all that it leaves open what ``assumed`` says.

    What befalls a person befalls all shares that they hold: where these state different rates of leaks, departures or
    absences, the highest holds. A departure that hands the share on changes nothing; any other loses the share, and
    leaks it, as it is then in the hands of someone without a duty.

    Source: FORMAT.md, sec. 12.
    """
    rates = policy.rates
    return Model(
        policy.rule(),
        (*_shares(policy), *_persons(policy), *_common(policy)),
        attest_every=_days(policy.attest_every),
        repair_after=math.ceil(policy.rates.repair_after / timedelta(days=1)),
        refresh_every=_days(policy.refresh_every),
        recover_within=max(1.0, (policy.recover_within or timedelta()) / timedelta(days=1)),
        absent_for=assumed.ABSENT_FOR if rates.absent_for is None else rates.absent_for / timedelta(days=1),
    )


def _days(interval: timedelta | None) -> int | None:
    return None if interval is None else interval.days


def _shares(policy: Policy) -> Iterator[Cause]:
    for custodian in policy.custodians:
        usual = assumed.SHARE_LOSS_ON.get(folded(custodian.medium or ""), assumed.SHARE.loss)
        loss = _first(custodian.loss, policy.rates.loss, usual)
        yield Cause("share", custodian.name, frozenset({custodian.name}), loss=yearly(loss))


def _persons(policy: Policy) -> Iterator[Cause]:
    kept = 1 - _first(policy.rates.handed_on, assumed.HANDED_ON)
    for person, names in labels.holders(labels.people(policy)).items():
        taken = kept * yearly(_highest(policy, names, "departure", assumed.DEPARTURE))
        leak = yearly(_highest(policy, names, "leak", assumed.PERSON.leak))
        absent = _highest(policy, names, "absent", assumed.PERSON.absent)
        yield Cause("person", person, frozenset(names), taken, leak + taken, absent)


def _highest(policy: Policy, names: set[str], key: Literal["departure", "leak", "absent"], usual: float) -> float:
    general: float | None = getattr(policy.rates, key)
    return max(_first(getattr(one, key), general, usual) for one in policy.custodians if one.name in names)


def _common(policy: Policy) -> Iterator[Cause]:
    yield from _all_of("site", labels.holders(labels.sites(policy)), policy.sites, lambda _: assumed.SITE)
    yield from _all_of("line", labels.commanded(policy), policy.lines, lambda _: assumed.LINE)
    yield from _all_of(
        "medium",
        labels.holders(labels.media(policy)),
        policy.media,
        lambda medium: assumed.MEDIUM_FAILING.get(medium, assumed.MEDIUM),
    )


def _all_of(
    kind: Kind, groups: dict[str, set[str]], tables: tuple[CommonRates, ...], usual: Callable[[str], Assumed]
) -> Iterator[Cause]:
    stated = {folded(table.name): table for table in tables}
    for name, members in groups.items():
        given, else_ = stated.get(folded(name)), usual(folded(name))
        loss = _first(given.loss if given else None, else_.loss)
        leak = _first(given.leak if given else None, else_.leak)
        absent = _first(given.absent if given else None, else_.absent)
        yield Cause(kind, name, frozenset(members), yearly(loss), yearly(leak), absent)


def _first(*rates: float | None) -> float:
    """Return the first rate that is stated; the last one always is."""
    return next(rate for rate in rates if rate is not None)
