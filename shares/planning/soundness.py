"""Who makes a quorum alone, or is needed by every quorum: what a change must not bring, and a rule not have.

The same that ``findings`` calls serious, asked of a model, so that rules nobody has written down yet can be asked.

Source: ``findings`` names the demands of the trade.
May import: shares.sharing.rule, .model, .structure.
Secret: nothing. Public: nothing either, as for the model.
Does not: know by which ways shares travel, or how many sites there are.
"""

from __future__ import annotations

from collections.abc import Iterator

from shares.planning.model import Model
from shares.planning.structure import dual


class Soundness:
    """What of a model's structure a change must not make worse."""

    def __init__(self, model: Model) -> None:
        self._custodians = frozenset(model.custodians)
        self._before = [list(found) for found in _alone(model, frozenset())]

    def stays(self, changed: Model) -> bool:
        """Say whether nobody newly makes a quorum alone, and nobody is newly needed by all.

        Whoever includes one who could do so before is not new.
        """
        # One more custodian changes nothing for those who do not include the newcomer.
        newcomers = frozenset(changed.custodians) - self._custodians
        return all(
            any(one <= members for one in before)
            for before, after in zip(self._before, _alone(changed, newcomers), strict=True)
            for members in after
        )


def sound(model: Model) -> bool:
    """Say whether no custodian, person, site or line makes a quorum alone, and no custodian, person or site is needed
    by every quorum.

    >>> from shares.planning.model import Cause
    >>> from shares.sharing.rule import Rule
    >>> piers = ("north-pier", "south-pier", "light-house")
    >>> office = Cause("site", "harbour office", frozenset(piers[:2]))
    >>> sound(Model(Rule(2, piers), ())), sound(Model(Rule(2, piers), (office,))), sound(Model(Rule(3, piers), ()))
    (True, False, False)
    """
    return not any(True for found in _alone(model, frozenset()) for _ in found)


def wholes(model: Model, kind: str) -> set[frozenset[str]]:
    """Return the custodians of each person, site, line or medium of a model."""
    return {cause.members for cause in model.causes if cause.kind == kind}


def _alone(model: Model, including: frozenset[str]) -> Iterator[Iterator[frozenset[str]]]:
    """Yield those who make a quorum alone, and then those who block every one, each as a set of custodians."""
    for rule, kinds in ((model.rule, ("person", "site", "line")), (dual(model.rule), ("person", "site"))):
        groups = {frozenset({name}) for name in model.custodians}.union(*(wholes(model, kind) for kind in kinds))
        yield (members for members in groups if including <= members and rule.satisfied_by(members))
