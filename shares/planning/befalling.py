"""What befalls whom: the rates that a model's odds rest on, stated or assumed alike, as rows to be checked by people.

Source: the model itself, told back.
May import: .model, .numbers.
Secret: nothing. Public: nothing either, as for the model.
Does not: know which of the rates the policy states (``assumed`` says what is assumed where it does not).
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

from shares.planning import numbers
from shares.planning.model import Cause, Model

_MOST_NAMED = 8
_WHAT = {
    "share": "single shares",
    "person": "people, with all shares that they hold",
    "site": "sites, with all shares there",
    "line": "reporting lines, with all shares in them",
    "medium": "media, with all shares on them",
}


@dataclass(frozen=True, slots=True)
class Befalling:
    """Rates that several causes of one kind have in common.

    Attributes:
        what: of which kind they are, in words.
        names: custodians, people, sites, managers or media.
        loss, leak: chances within a year, 0 to 1.
        absent: the part of days, 0 to 1.
    """

    what: str
    names: tuple[str, ...]
    loss: float
    leak: float
    absent: float

    @property
    def named(self) -> str:
        """The names, of many the first ones."""
        more = len(self.names) - _MOST_NAMED
        return ", ".join(self.names[:_MOST_NAMED]) + (f" and {more} more" if more > 0 else "")

    @property
    def words(self) -> tuple[str, str, str]:
        """Loss, leak and absence as they are told."""
        return numbers.chance(self.loss), numbers.chance(self.leak), numbers.chance(self.absent)


def befalling(model: Model) -> Iterator[Befalling]:
    """Yield all rates of a model, causes of one kind with the same rates together, in the order of the model.

    >>> from shares.sharing.rule import Rule
    >>> piers = (Cause("site", name, frozenset({name}), loss=0.01005034) for name in ("north pier", "south pier"))
    >>> [(one.named, one.words) for one in befalling(Model(Rule(1, ("north pier", "south pier")), tuple(piers)))]
    [('north pier, south pier', ('1 %', 'none', 'none'))]
    """
    found: dict[tuple[str, float, float, float], list[Cause]] = {}
    for cause in model.causes:
        found.setdefault((cause.kind, cause.loss, cause.leak, cause.absent), []).append(cause)
    for (kind, loss, leak, absent), causes in found.items():
        yield Befalling(_WHAT[kind], tuple(one.name for one in causes), -math.expm1(-loss), -math.expm1(-leak), absent)
