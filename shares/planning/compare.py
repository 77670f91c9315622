"""Two policies side by side: which one is less likely to lose its key, to expose it, or to stand without a quorum.

Source: none.
May import: shares.documents.policy, .examine, .model, .odds.
Secret: nothing. Public: nothing either: a plan is as confidential as its policy.
Does not: weigh one danger against another.
"""

from __future__ import annotations

from dataclasses import dataclass

from shares.documents.policy import Policy
from shares.planning.examine import Plan, examine
from shares.planning.model import Model, model_of
from shares.planning.odds import Odds, odds

ALIKE = 1.1
"""Odds that differ by less than a tenth of themselves are called alike: no rate is known that well."""


@dataclass(frozen=True, slots=True)
class Side:
    """What is compared of a policy.

    Attributes:
        plan: what its examination found.
        model: what its odds are worked out from.
        odds: None where they are too much work for an exact answer.
    """

    plan: Plan
    model: Model
    odds: Odds | None


def side(policy: Policy, years: float) -> Side:
    """Examine a policy and work out its odds.

    Args:
        policy: as ``Policy.parse`` returns it.
        years: as for ``odds``.

    Raises:
        ParameterError: a span of years that is out of range.
    """
    model = model_of(policy)
    return Side(examine(policy), model, odds(model, years))


def verdict(first: Odds, second: Odds) -> str:
    """Return in one sentence which of two policies is the better one.

    >>> verdict(Odds(0.01, 0.01, 0.1, 100.0), Odds(0.02, 0.005, 0.1, 50.0))
    'The first policy is better in loss, the second in exposure: it is for you to weigh them.'
    """
    better: dict[str, list[str]] = {"first": [], "second": []}
    for what in ("loss", "exposure", "absence"):
        one, other = getattr(first, what), getattr(second, what)
        if max(one, other) > ALIKE * min(one, other):
            better["first" if one < other else "second"].append(what)
    here, there = (_listed(whats) for whats in better.values())
    if here and there:
        return f"The first policy is better in {here}, the second in {there}: it is for you to weigh them."
    if here or there:
        return f"The {'first' if here else 'second'} policy is better in {here or there}, and worse in nothing."
    return "The odds of both policies are alike, to within a tenth."


def _listed(whats: list[str]) -> str:
    return " and ".join(filter(None, (", ".join(whats[:-1]), *whats[-1:])))
