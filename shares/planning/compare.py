"""Two policies side by side: which one is less likely to lose its key, to expose it, or to stand without a quorum.

Source: none.
May import: shares.documents.policy, .examine, .model, .odds, .reckoned, .simulate.
Secret: nothing. Public: nothing either: a plan is as confidential as its policy.
Does not: weigh one danger against another.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import count

from shares.documents.policy import Policy
from shares.planning.examine import Plan, examine
from shares.planning.model import Model, model_of
from shares.planning.odds import Odds, odds
from shares.planning.reckoned import HISTORIES, SEED, Reckoned, apart, instead, usual, value
from shares.planning.simulate import Simulated

ALIKE = 1.1
"""Odds that differ by less than a tenth of themselves are called alike: no rate is known that well."""


@dataclass(frozen=True, slots=True)
class Side:
    """What is compared of a policy.

    Attributes:
        plan: what its examination found.
        model: what its odds are worked out from.
        odds: None where they are too much work for an exact answer.
        simulated: the odds where they are; None where numpy is not installed.
    """

    plan: Plan
    model: Model
    odds: Odds | None
    simulated: Simulated | None

    @property
    def now(self) -> Reckoned | None:
        """The odds, exact where they can be; None where numpy is needed for them and not installed."""
        return self.odds or self.simulated


def sides(
    policies: Sequence[Policy],
    years: float,
    *,
    histories: int | None = None,
    seed: int = SEED,
    drawn: Callable[[int, int | None], None] | None = None,
) -> tuple[Side, ...]:
    """Examine policies and work out their odds, or simulate them where that is too much work: each from as many
    histories as the others.

    Args:
        policies: as ``Policy.parse`` returns them.
        years: as for ``odds``.
        histories, seed, drawn: as for ``instead``; all that is drawn is told as one.

    Returns:
        One for each policy.

    Raises:
        ParameterError: the years, the histories or the seed are out of range.
        ExtraMissingError: a number of histories is asked for and needed, and numpy is not installed.
    """
    models = [model_of(policy) for policy in policies]
    exact = [odds(model, years) for model in models]
    inexact = [model for model, now in zip(models, exact, strict=True) if not now]
    usually = min((usual(model, years) for model in inexact), default=HISTORIES)
    each = usually if histories is None else histories
    place = count()

    def guess(model: Model) -> Simulated | None:
        before, total = next(place) * each, len(inexact) * each
        told = None if drawn is None else lambda done, _: drawn(before + done, total)
        return instead(model, years, histories=histories, seed=seed, drawn=told, usually=usually)

    return tuple(
        Side(examine(policy), model, now, None if now else guess(model))
        for policy, model, now in zip(policies, models, exact, strict=True)
    )


def verdict(first: Reckoned, second: Reckoned) -> str:
    """Return in one sentence which of two policies is the better one, as far as can be told from what chance makes.

    >>> verdict(Odds(0.01, 0.01, 0.1, 100.0), Odds(0.02, 0.005, 0.1, 50.0))
    'The first policy is better in loss, the second in exposure: it is for you to weigh them.'
    """
    exact = isinstance(first, Odds) + isinstance(second, Odds)
    better: dict[str, list[str]] = {"first": [], "second": []}
    for what in ("loss", "exposure", "absence"):
        one, other = value(first, what), value(second, what)
        if max(one, other) > ALIKE * min(one, other) and apart(first, second, what):
            better["first" if one < other else "second"].append(what)
    here, there = (_listed(whats) for whats in better.values())
    if here and there:
        return f"The first policy is better in {here}, the second in {there}: it is for you to weigh them."
    if here or there:
        seen = " that so many histories show" if exact < 2 else ""
        return f"The {'first' if here else 'second'} policy is better in {here or there}, and worse in nothing{seen}."
    if exact < 2:
        return "So many histories do not show that one policy is better than the other."
    return "The odds of both policies are alike, to within a tenth."


def _listed(whats: list[str]) -> str:
    return " and ".join(filter(None, (", ".join(whats[:-1]), *whats[-1:])))
