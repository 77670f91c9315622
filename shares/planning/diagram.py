"""A rule as a decision diagram: custodians are asked one after another, and questions that lead to the same are one.

Whether a set of custodians satisfies the rule is then a walk, and a probability is one pass over the diagram, however
many quorums there are. A threshold over custodians who each stand once takes k(n - k + 1) nodes; rules whose custodians
stand in several branches take as many as their function needs, which can be too many.

Source: R. E. Bryant, "Graph-based algorithms for Boolean function manipulation", IEEE Trans. Comput. C-35(8), 1986
(reduced ordered diagrams, and the composition of two); A. Rauzy, "New algorithms for fault trees analysis", Reliability
Engineering and System Safety 40(3), 1993 (from memory: failure trees by such diagrams).
May import: shares.sharing.rule.
Secret: nothing. Public: the rule, which is confidential.
Does not: know probabilities (``chance`` does), or choose the order of the questions.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypeAlias

from shares.sharing.rule import Rule

MAX_CUSTODIANS = 255
"""The diagram is made by a recursion as deep as there are custodians; so many share any one threshold."""
MAX_STEPS = 100_000
"""So many steps of composition are made before a rule is called too entangled; about a second."""
FEW, MAX_STEPS_OF_FEW = 24, 300_000
"""So many custodians are worth more steps: as many as the structure of a rule is exact for, whatever the rule."""

_NO, _YES = 0, 1

Level: TypeAlias = tuple[tuple[int, int], ...]


@dataclass(frozen=True, slots=True)
class Diagram:
    """What a rule asks of one custodian after another.

    Attributes:
        order: the custodians, in the order in which they are asked.
        levels: for each of them, the nodes: where in the next level it goes on without the custodian, and with.
            The first level has one node, the root.
        ends: what stands below the last level: whether the rule is satisfied there.
    """

    order: tuple[str, ...]
    levels: tuple[Level, ...]
    ends: tuple[bool, ...]

    @classmethod
    def of(cls, rule: Rule, order: Sequence[str]) -> Diagram | None:
        """Make the diagram of a rule.

        Args:
            rule: any rule.
            order: its custodians, each once. Those of one group are best asked one after another.

        Returns:
            None where there are more than 255 custodians, or making the diagram takes too many steps. Up to 24
            custodians in as many as ten groups that overlap at random are none too many.

        >>> Diagram.of(Rule(2, ("north-pier", "south-pier")), ("north-pier", "south-pier")).levels
        (((0, 1),), ((0, 0), (0, 1)))
        """
        if len(order) > MAX_CUSTODIANS:
            return None
        nodes = _Nodes(order)
        try:
            top = nodes.of_rule(rule)
        except _TooEntangledError:
            return None
        return cls(tuple(order), *nodes.below(top))


class _TooEntangledError(Exception):
    """The composition took more steps than are worth it."""


class _Nodes:
    """Nodes while a diagram is made: each is (place of its custodian, node without, node with), and is there once."""

    def __init__(self, order: Sequence[str]) -> None:
        self._place = {name: place for place, name in enumerate(order)}
        self._most = MAX_STEPS_OF_FEW if len(order) <= FEW else MAX_STEPS
        end = len(order)
        self._nodes = [(end, _NO, _NO), (end, _YES, _YES)]
        self._known: dict[tuple[int, int, int], int] = {}
        self._composed: dict[tuple[int, int, int], int] = {}

    def of_rule(self, rule: Rule) -> int:
        """Return the node of a rule, made from its last child to its first."""
        items = [
            (self.of_rule(child) if isinstance(child, Rule) else self._node(self._place[child], _NO, _YES), weight)
            for child, weight in Counter(rule.children).items()
        ]
        # The lowest in the order come first, so that what is made grows from its end.
        items.sort(key=lambda item: -self._nodes[item[0]][0])
        # enough[met]: whether the items so far bring the ``met`` that are still needed.
        enough = [_YES] + [_NO] * rule.need
        for item, weight in items:
            for met in range(rule.need, 0, -1):
                enough[met] = self._choose(item, enough[max(met - weight, 0)], enough[met])
        return enough[rule.need]

    def _node(self, place: int, without: int, held: int) -> int:
        if without == held:
            return held
        node = self._known.setdefault((place, without, held), len(self._nodes))
        if node == len(self._nodes):
            self._nodes.append((place, without, held))
        return node

    def _choose(self, asked: int, held: int, without: int) -> int:
        """Return the node of 'if ``asked`` then ``held``, else ``without``'."""
        if asked == _YES or held == without:
            return held
        if asked == _NO:
            return without
        key = (asked, held, without)
        if key not in self._composed:
            if len(self._composed) >= self._most:
                raise _TooEntangledError
            place = min(self._nodes[node][0] for node in key)
            halves = [self._nodes[node][1:] if self._nodes[node][0] == place else (node, node) for node in key]
            low, high = (self._choose(*(half[i] for half in halves)) for i in (0, 1))
            self._composed[key] = self._node(place, low, high)
        return self._composed[key]

    def below(self, top: int) -> tuple[tuple[Level, ...], tuple[bool, ...]]:
        """Return what is reached from a node, level by level. A node that does not ask a level's custodian passes
        through it."""
        here, levels = [top], list[Level]()
        for place in range(len(self._place)):
            there: dict[int, int] = {}
            level = []
            for node in here:
                asked, without, held = self._nodes[node]
                ways = (without, held) if asked == place else (node, node)
                level.append((there.setdefault(ways[0], len(there)), there.setdefault(ways[1], len(there))))
            levels.append(tuple(level))
            here = list(there)
        return tuple(levels), tuple(node == _YES for node in here)
