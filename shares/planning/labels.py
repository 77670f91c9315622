"""By what the custodians of a policy are counted together: person, site, reporting line, medium, and way of delivery.

Two spellings that differ in case, width or spacing are one label, shown as it is first written.

Source: PCI PIN Security Requirements 3.1, 21-2 (a threshold counts in people) and 25-1 (from memory: no quorum reports
to one manager); FORMAT.md, sec. 12.
May import: shares.documents.policy.
Secret: nothing. Public: nothing either: who holds what and where is confidential.
Does not: follow a reporting line further up than to the next manager.
"""

from __future__ import annotations

from collections.abc import Iterable

from shares.documents.policy import Policy, folded


def _spelled_alike(texts: Iterable[tuple[str, str]]) -> dict[str, str]:
    first: dict[str, str] = {}
    return {name: first.setdefault(folded(text), text) for name, text in texts}


def custodians(policy: Policy) -> dict[str, str]:
    """Return each custodian's own name, as a label."""
    return {custodian.name: custodian.name for custodian in policy.custodians}


def people(policy: Policy) -> dict[str, str]:
    """Return each custodian's person. One person may be several custodians."""
    return _spelled_alike((custodian.name, custodian.person) for custodian in policy.custodians)


def sites(policy: Policy) -> dict[str, str]:
    """Return the site at which each custodian keeps their share."""
    return _spelled_alike((custodian.name, custodian.site) for custodian in policy.custodians)


def lines(policy: Policy) -> dict[str, str]:
    """Return whom each custodian reports to."""
    return _spelled_alike((custodian.name, custodian.reports_to) for custodian in policy.custodians)


def channels(policy: Policy) -> dict[str, str]:
    """Return by which channel each share travels, where that is stated."""
    return _spelled_alike(
        (custodian.name, custodian.channel) for custodian in policy.custodians if custodian.channel is not None
    )


def carriers(policy: Policy) -> dict[str, str]:
    """Return who brings each share to its custodian, where that is stated."""
    return _spelled_alike(
        (custodian.name, custodian.carrier) for custodian in policy.custodians if custodian.carrier is not None
    )


def media(policy: Policy) -> dict[str, str]:
    """Return on what each share is kept, where that is stated."""
    return _spelled_alike(
        (custodian.name, custodian.medium) for custodian in policy.custodians if custodian.medium is not None
    )


def holders(label_of: dict[str, str]) -> dict[str, set[str]]:
    """Return the custodians of each label, labels in the order in which they first stand.

    >>> holders({"north-pier": "A", "south-pier": "B", "light-house": "A"}) == {
    ...     "A": {"north-pier", "light-house"}, "B": {"south-pier"}}
    True
    """
    found: dict[str, set[str]] = {}
    for name, label in label_of.items():
        found.setdefault(label, set()).add(name)
    return found


def commanded(policy: Policy) -> dict[str, set[str]]:
    """Return the custodians whom each manager commands: those who report there, and the manager's own custodians."""
    found = holders(lines(policy))
    for manager, names in found.items():
        names |= {custodian.name for custodian in policy.custodians if folded(custodian.person) == folded(manager)}
    return found
