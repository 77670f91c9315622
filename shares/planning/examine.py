"""Examine a policy before anything is split: how its rule counts, who makes a quorum, and what is amiss.

The odds of a loss are worked out by ``odds``, on the same policy.

Source: PCI PIN Security Requirements 3.1, 21-2 (count in people as well as in shares); G. R. Blakley 1979 (from memory:
losing a share and giving it away are two budgets, so both the smallest quorum and the smallest blocking set count).
May import: shares.errors, shares.sharing.rule, shares.documents.party, shares.documents.policy, .cards, .findings,
.labels, .structure.
Secret: nothing. Public: nothing either: a plan is as confidential as its policy.
Does not: touch files or terminals.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from shares.documents.policy import Policy
from shares.errors import VerificationError
from shares.planning import labels
from shares.planning.cards import card_findings
from shares.planning.findings import Finding, findings, sorted_by_severity
from shares.planning.structure import Count, Quorums, minimal_quorums, relabelled
from shares.sharing.rule import Rule

if TYPE_CHECKING:
    from shares.documents.party import PartyCard

COUNTED = {
    "custodians": labels.custodians,
    "people": labels.people,
    "sites": labels.sites,
    "reporting lines": labels.lines,
}


@dataclass(frozen=True, slots=True)
class Plan:
    """What an examination found: confidential, like the policy.

    Attributes:
        label: what the secret is.
        rule: who can recover.
        strict: whether serious findings forbid a split.
        counts: how the rule counts in "custodians", "people", "sites" and "reporting lines".
        quorums: the minimal quorums.
        findings: what is amiss, serious findings first.
    """

    label: str
    rule: Rule
    strict: bool
    counts: dict[str, Count]
    quorums: Quorums
    findings: tuple[Finding, ...]

    @property
    def exact(self) -> bool:
        """Whether every number is known, and none of them just bounded."""
        bounds = [bounds for count in self.counts.values() for bounds in (count.quorum, count.block)]
        return all(bound.exact for bound in [*bounds, self.quorums.count])

    @property
    def serious(self) -> tuple[Finding, ...]:
        """The serious findings."""
        return tuple(finding for finding in self.findings if finding.severity == "serious")

    @property
    def refused(self) -> bool:
        """Whether the policy forbids its own split: it is strict, and a serious finding stands."""
        return self.strict and bool(self.serious)

    @property
    def verdict(self) -> str:
        """What the findings come to, and what next."""
        if self.refused:
            return "The policy is strict: `shares split` refuses it while a serious finding stands. Change the policy."
        if self.serious:
            return (
                "Serious findings stand. `shares split` tells them and goes on, since the policy does not say "
                "`strict = true`. Better change the policy first."
            )
        return "Nothing serious was found in the structure."

    def require_sound(self) -> None:
        """Let a plan pass unless it is refused.

        Raises:
            VerificationError: the policy is strict and a serious finding stands; the message tells the first.
        """
        if self.refused:
            others = f" (and {len(self.serious) - 1} more)" if len(self.serious) > 1 else ""
            raise VerificationError(
                f"the policy is strict, and a serious finding stands{others}: {self.serious[0].what.rstrip('.')}",
                hint="see all of it with `shares plan`, and change the policy",
            )


def examine(policy: Policy, *, cards: Mapping[str, PartyCard] | None = None) -> Plan:
    """Examine the structure of a policy, and the cards that it names.

    Args:
        policy: a policy as ``Policy.parse`` returns it.
        cards: the party card of each custodian who has one, by the custodian's name; None where nobody looked.

    Returns:
        Numbers and findings. A number is exact where none of those counted stands in two branches of the rule, or there
        are at most 24 of them; else there are bounds (``Plan.exact`` is False). Who alone makes or blocks a quorum is
        always exact.
    """
    rule = policy.rule()
    counts = {what: Count.of(relabelled(rule, label_of(policy))) for what, label_of in COUNTED.items()}
    quorums = minimal_quorums(rule)
    found = sorted_by_severity([*findings(policy, counts["people"], quorums), *card_findings(cards or {})])
    return Plan(policy.label, rule, policy.strict, counts, quorums, found)
