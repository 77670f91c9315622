"""The custodians of a policy in a line, for plain rules over them: any k of the first n, more being imagined.

They are taken so that as few as possible share a site or a manager. Where more are wanted than there are, each is
imagined like one of these again, from the first on: on the same site, in the same line and on the same medium, but
another person. So more custodians do not bring more sites.

Source: none; as few as possible in common with those before is the greedy choice.
May import: shares.sharing.rule, .changes, .model.
Secret: nothing. Public: nothing either, as for the model.
Does not: work out odds, or know of groups and weights: each custodian counts once.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, replace

from shares.planning.changes import with_another
from shares.planning.model import Model
from shares.sharing.rule import Rule

MAX_CUSTODIANS = 12
IMAGINED = (
    f"Rules are over the policy's custodians, up to {MAX_CUSTODIANS}, taken so that as few as possible share a site or "
    "a manager. Where more are needed, each is imagined like one of these again, from the first on: same site, manager "
    "and medium, another person."
)
"""What such rules rest on, for people."""


@dataclass(frozen=True, slots=True)
class LineUp:
    """Twelve custodians in a line.

    Attributes:
        names: of the custodians, the policy's own first.
        own: how many of them are the policy's own.
    """

    names: tuple[str, ...]
    own: int
    _peopled: Model

    def rule(self, need: int, total: int) -> Model:
        """Return the model in which any ``need`` of the first ``total`` custodians, 1 to 12, are a quorum.

        Raises:
            ParameterError: the threshold is below 1 or above ``total``.
        """
        return replace(self._peopled, rule=Rule(need, self.names[:total]))

    def imagined(self, total: int) -> int:
        """Return how many of the first ``total`` custodians are not the policy's own."""
        return max(0, total - self.own)


def lined_up(model: Model) -> LineUp:
    """Put the custodians of a model in a line.

    Args:
        model: whose custodians, causes and intervals are used; its rule is not.
    """
    names = list(_apart(model))[:MAX_CUSTODIANS]
    own = len(names)
    peopled = replace(model, rule=Rule(1, tuple(names)))
    for i in range(MAX_CUSTODIANS - own):
        before = set(peopled.custodians)
        peopled = with_another(peopled, names[i])
        names += [name for name in peopled.custodians if name not in before]
    return LineUp(tuple(names), own, peopled)


def _apart(model: Model) -> Iterator[str]:
    """Yield the custodians, always the first of those whose person, site, line and medium were met least often."""
    shared = [cause.members for cause in model.causes if len(cause.members) > 1]
    groups = {name: [group for group in shared if name in group] for name in model.custodians}
    met, left = Counter[frozenset[str]](), list(model.custodians)
    while left:
        name = min(left, key=lambda one: sum(met[group] for group in groups[one]))
        left.remove(name)
        met.update(groups[name])
        yield name
