"""What is amiss with a policy, by how much it matters.

A finding is *serious* where a demand of the trade is broken outright (one person recovers alone, one loss ends the
key), a *caution* where something needs a decision that only people can make, a *note* where it is good to know.

Source: NIST SP 800-57 Part 1 (key types); CA/Browser Forum TLS Baseline Requirements, 5.2.2 and 6.2.4 (dual control);
PCI PIN Security Requirements 3.1, 8-1 (no quorum on one channel), 21-2 (thresholds in people), 25-1 (from memory: no
quorum under one manager); PCI DSS 3.2.1, 3.5.2 (fewest custodians).
May import: shares.sharing.rule, shares.documents.policy, .labels, .structure.
Secret: nothing. Public: nothing either: findings name people and places, and are as confidential as the policy.
Does not: say how likely a loss is.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Literal, NamedTuple, TypeAlias

from shares.documents.policy import Policy
from shares.planning import labels
from shares.planning.structure import Bounds, Count, Quorums, alone, dual
from shares.sharing.rule import Rule

Severity: TypeAlias = Literal["serious", "caution", "note"]

AMPLE_LOSSES = 3
"""Losses beyond which it is noted that a policy provides for many. Of seven custodians, any four of whom recover, with
each unavailable one time in ten, a quorum is missing 3 times in 1,000; every further share is one more to protect."""
_MOST_NAMED = 6


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that an examination found.

    Attributes:
        severity: "serious", "caution" or "note".
        code: a stable slug.
        what: what was found, one sentence or more.
        advice: what to do about it, likewise.
        about: the people, sites, managers, channels or custodians concerned.
    """

    severity: Severity
    code: str
    what: str
    advice: str
    about: tuple[str, ...] = ()


class _Check(NamedTuple):
    """A question asked of everyone: do you satisfy, or block, the rule without any other?"""

    severity: Severity
    code: str
    holders: Callable[[Policy], Mapping[str, Collection[str]]]
    what: str
    advice: str


def _by(label_of: Callable[[Policy], dict[str, str]]) -> Callable[[Policy], dict[str, set[str]]]:
    return lambda policy: labels.holders(label_of(policy))


_SUFFICE = (
    _Check(
        "serious",
        "person-suffices",
        _by(labels.people),
        "One person alone makes a quorum",
        "Nobody may hold such a key alone: ask for more custodians, or give this person fewer places.",
    ),
    _Check(
        "serious",
        "site-suffices",
        _by(labels.sites),
        "The shares at one site make a quorum",
        "One break-in would give the key: spread the shares over more sites.",
    ),
    _Check(
        "serious",
        "line-suffices",
        labels.commanded,
        "Those who report to one manager, with the manager's own shares, make a quorum",
        "One order would give the key: see that every quorum needs someone of another line.",
    ),
    _Check(
        "serious",
        "channel-suffices",
        _by(labels.channels),
        "The shares on one delivery channel make a quorum",
        "Whoever watches it has the key, on whatever days they travel: send some shares by another way.",
    ),
    _Check(
        "serious",
        "carrier-suffices",
        _by(labels.carriers),
        "The shares that one carrier brings make a quorum",
        "Whoever carries them has the key, on whatever days: have some shares brought by another.",
    ),
)
_BLOCK = (
    _Check(
        "serious",
        "person-blocks",
        _by(labels.people),
        "No quorum is left without one person",
        "If this person is lost, so is the key: put someone beside them, in a group of which one is needed.",
    ),
    _Check(
        "serious",
        "site-blocks",
        _by(labels.sites),
        "No quorum is left without the shares at one site",
        "One fire there would end the key: move some of them to another site.",
    ),
    _Check(
        "caution",
        "line-blocks",
        labels.commanded,
        "No quorum is left without those who report to one manager",
        "Such a manager can prevent a recovery: make sure that this is meant.",
    ),
)


def findings(policy: Policy, people: Count, quorums: Quorums) -> tuple[Finding, ...]:
    """Return what is amiss with a policy, serious findings first.

    Args:
        policy: what is examined.
        people: how its rule counts in people.
        quorums: the minimal quorums of its rule.
    """
    found = [*_too_few(policy), *_who_suffice(policy), *_who_block(policy), *_key_type(policy), *_delivery(policy)]
    found += [*_margin(people), *_too_many(people, quorums)]
    return sorted_by_severity(found)


def sorted_by_severity(found: Iterable[Finding]) -> tuple[Finding, ...]:
    """Return findings in their order, serious ones first and notes last."""
    order = ("serious", "caution", "note")
    return tuple(sorted(found, key=lambda finding: order.index(finding.severity)))


def _too_few(policy: Policy) -> Iterator[Finding]:
    """Say where no other rule or distribution would do: the findings on single sites or people then stand for ever.

    Of two, either the second suffices, or the first blocks. With three, two of which are needed, neither happens.
    """
    for what, one, them in (("people", "person", labels.people(policy)), ("sites", "site", labels.sites(policy))):
        about = tuple(labels.holders(them))
        if len(about) == 1:
            yield Finding(
                "serious",
                f"too-few-{what}",
                f"With one {one} only, that {one} makes a quorum, and without it none is left: {about[0]}.",
                f"Two more are needed: no rule can change this with fewer than three {what}.",
                about,
            )
        elif len(about) == 2:
            yield Finding(
                "serious",
                f"too-few-{what}",
                f"With two {what}, one of them always makes a quorum or blocks every quorum, whatever the rule and "
                f"however the shares are spread over them: {_some(about)}.",
                f"A third {one} is needed.",
                about,
            )


def _who_suffice(policy: Policy) -> Iterator[Finding]:
    return _alone(policy, policy.rule(), _SUFFICE)


def _who_block(policy: Policy) -> Iterator[Finding]:
    blocking, names = dual(policy.rule()), labels.custodians(policy)
    if len(names) > 1 and len(alone(blocking, labels.holders(names))) == len(names):
        yield Finding(
            "serious",
            "all-needed",
            "Every custodian is needed: with one lost share the key is lost.",
            "Ask for fewer of them, or add custodians, so that some may be lost.",
            tuple(names),
        )
    else:
        yield from _alone(policy, blocking, _BLOCK)


def _alone(policy: Policy, rule: Rule, checks: tuple[_Check, ...]) -> Iterator[Finding]:
    for check in checks:
        holders = check.holders(policy)
        about = alone(rule, holders)
        if about:
            told = _some([f"{one} ({_some(_in_order(policy, holders[one]))})" for one in about], "; ")
            yield Finding(check.severity, check.code, f"{check.what}: {told}.", check.advice, about)


def _in_order(policy: Policy, names: Collection[str]) -> list[str]:
    return [custodian.name for custodian in policy.custodians if custodian.name in names]


def _some(texts: Sequence[str], mark: str = ", ") -> str:
    """Join a few, and count the rest."""
    more = [f"and {len(texts) - _MOST_NAMED} more"] if len(texts) > _MOST_NAMED else []
    return mark.join([*texts[:_MOST_NAMED], *more])


def _key_type(policy: Policy) -> Iterator[Finding]:
    if policy.key_type is None:
        yield Finding(
            "note",
            "key-type-not-stated",
            "The policy does not say what type of key this is.",
            "State key_type: whether a key may be backed up at all depends on it.",
        )
    if policy.key_type == "signature":
        yield Finding(
            "caution",
            "signature-key",
            f'A signature key is to be split, for this reason: "{policy.reason}".',
            "Signature keys are not backed up or archived as a rule (NIST SP 800-57 Part 1): if a new key can take its "
            "place, do not split this one.",
        )


def _delivery(policy: Policy) -> Iterator[Finding]:
    open_ways = [c.name for c in policy.custodians if c.channel is None and c.carrier is None]
    if open_ways:
        yield Finding(
            "note",
            "delivery-not-stated",
            f"How the share travels is not stated for {_some(open_ways)}.",
            "State channel or carrier: shares enough for a quorum must not go one way.",
            tuple(open_ways),
        )


def _margin(people: Count) -> Iterator[Finding]:
    if people.block == Bounds(2, 2):
        yield Finding(
            "note",
            "one-loss-left",
            "Any one person may be lost, but there are two without whom no quorum is left.",
            "After the first loss, replace the share at once.",
        )


def _too_many(people: Count, quorums: Quorums) -> Iterator[Finding]:
    if quorums.idle:
        yield Finding(
            "caution",
            "never-needed",
            f"No quorum ever needs the share of {_some(quorums.idle)}.",
            "Leave such custodians out, or give them a place that counts: each share is one more to protect.",
            quorums.idle,
        )
    if people.block.low - 1 > AMPLE_LOSSES:
        yield Finding(
            "note",
            "more-than-needed",
            f"Any {people.block.low - 1} people may be lost and a quorum is left.",
            "More custodians are more shares to protect: the odds of loss and exposure tell whether that is worth it.",
        )
