"""Gathering a minimal quorum custodian by custodian: who may still join, so that in the end nobody can be left out.

Sets are integers: bit i stands for number i, so that one operation treats a thousand custodians together.

For: choosing a good minimal quorum where a rule has too many to list.
Source: J. Benaloh, J. Leichter 1988 (threshold trees); D. E. Knuth, "The Art of Computer Programming", vol. 4A, sec.
    7.1.3 (sets as integers); R. Bellman 1957 (the sums that some of given weights reach).
May import: shares.planning.truth_table, shares.sharing.rule.
Secret: nothing. Public: the rule, which is confidential.
Does not: say whom to choose. Where a custodian stands in two branches it gathers places, and the caller leaves out who
    is superfluous then.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache, reduce
from operator import or_

from shares.planning.truth_table import MAX_NAMES, TruthTable
from shares.sharing.rule import Rule


def members(chosen: int) -> Iterator[int]:
    """Yield the numbers in a set, in ascending order.

    >>> list(members(0b1101))
    [0, 2, 3]
    """
    while chosen:
        lowest = chosen & -chosen
        yield lowest.bit_length() - 1
        chosen ^= lowest


@dataclass(frozen=True, slots=True)
class Node:
    """A node of a rule as a choice among items: a custodian with all leaves they have here, or a branch, counting 1.

    Attributes:
        need: the weight that is needed.
        up: the parent's number and this node's item there; None for the root.
        items: the weight of each item, and the places below it.
        places: all places below this node.
        even: whether every item has weight 1.
    """

    need: int
    up: tuple[int, int] | None
    items: tuple[tuple[int, int], ...]
    places: int
    even: bool


class Tree:
    """A rule laid out for gathering. A place is a custodian at a node.

    Attributes:
        rule: the rule itself.
        names: the custodians, in the order of their first places; without tangles, of their places.
        owner: of each place, the custodian's number.
        places_of: of each custodian, their places.
        at: of each place, its node and its item there.
        nodes: parents before children.
        flat: whether the rule is just k of n, everyone of weight 1.
        several: those custodians, as a set, who stand in several branches.
        tangled: whether a custodian stands in two branches.
        table: what the rule says of every set of custodians, where it is tangled and they are few enough.
        joinable: the places that stand in a minimal quorum of places at all.
    """

    def __init__(self, rule: Rule) -> None:
        self.rule = rule
        self.owner: list[int] = []
        self.at: list[tuple[int, int]] = []
        self.nodes: list[Node] = []
        number_of: dict[str, int] = {}
        self._lay_out(rule, None, number_of)
        self.names = tuple(number_of)
        self.places_of = [0] * len(self.names)
        for place, number in enumerate(self.owner):
            self.places_of[number] |= 1 << place
        self.flat = len(self.nodes) == 1 and self.nodes[0].even
        self.tangled = len(self.owner) > len(self.names)
        self.table = TruthTable(rule) if self.tangled and len(self.names) <= MAX_NAMES else None
        self.several = sum(1 << number for number, places in enumerate(self.places_of) if places.bit_count() > 1)
        self._measure()
        self.joinable = self.nodes[0].places
        for node in self.nodes:
            self.joinable &= ~_closed(node, _Met())

    def places(self, custodians: int) -> int:
        """Return the places of some custodians."""
        if not self.tangled:
            return custodians
        return reduce(or_, (self.places_of[number] for number in members(custodians)), 0)

    def _lay_out(self, rule: Rule, up: tuple[int, int] | None, number_of: dict[str, int]) -> int:
        """Append a node and all below it; return its places."""
        number = len(self.nodes)
        self.nodes.append(Node(rule.need, up, (), 0, True))  # Its place in the order; the rest follows below.
        items = list[tuple[int, int]]()
        for name, weight in Counter(child for child in rule.children if isinstance(child, str)).items():
            self.at.append((number, len(items)))
            items.append((weight, 1 << len(self.owner)))
            self.owner.append(number_of.setdefault(name, len(number_of)))
        for child in rule.children:
            if isinstance(child, Rule):
                items.append((1, self._lay_out(child, (number, len(items)), number_of)))
        places = sum(places for _, places in items)  # A place is below one item only: the sum is the union.
        self.nodes[number] = Node(rule.need, up, tuple(items), places, all(weight == 1 for weight, _ in items))
        return places

    def largest(self) -> list[int]:
        """Return for each node the most places that a minimal quorum takes below it; where there are weights, a bound.

        >>> Tree(Rule(2, (Rule(2, ("a", "b", "c")), "d", "d", "e"))).largest()
        [3, 2]
        """
        return self._sizes[:]

    def largest_with(self) -> list[int]:
        """Return for each place the most places that a minimal quorum with it takes; where there are weights, a bound.

        >>> tree = Tree(Rule(3, ("a", "a", "b", "c", "d")))  # a has weight 2
        >>> tree.largest(), tree.largest_with()
        ([3], [2, 3, 3, 3])
        """
        return [1 + self._besides(*step) for step in self.at]

    def _besides(self, number: int, item: int) -> int:
        """Return the most places that a minimal quorum takes beside those below an item of a node."""
        node, below = self.nodes[number], self._below[number]
        weight, _ = node.items[item]
        others = sorted(other for i, (other, _) in enumerate(node.items) if i != item)
        sizes = sorted((size for i, size in enumerate(below) if i != item), reverse=True)
        here = sum(sizes[: _room(weight, others, node.need)])
        return here + self._besides(*node.up) if node.up else here

    def _measure(self) -> None:
        """Work out the most places of a minimal quorum below each node, the deepest nodes first."""
        self._sizes = [0] * len(self.nodes)
        self._below = [[1] * len(node.items) for node in self.nodes]
        for number, node in reversed(list(enumerate(self.nodes))):
            lightest, *others = sorted(weight for weight, _ in node.items)
            most = 1 + _room(lightest, others, node.need)
            self._sizes[number] = sum(sorted(self._below[number], reverse=True)[:most])
            if node.up:
                parent, item = node.up
                self._below[parent][item] = self._sizes[number]


def _room(weight: int, others: Sequence[int], need: int) -> int:
    """Return how many others, given in ascending order, a minimal choice holds at most beside an item of a weight.

    A minimal choice falls short without its lightest item. The lightest others leave most room: taking a heavier one
    adds as much to the weight as to the lightest weight at least.
    """
    total = weight
    for room, other in enumerate(others):
        total += other
        if total - min(weight, others[0]) >= need:
            return room
    return len(others)


@dataclass(slots=True)
class _Met:
    """What was chosen at a node: items and the places below them as sets, their weight, and the lightest of them."""

    items: int = 0
    places: int = 0
    weight: int = 0
    lightest: int = 0


class Gathering:
    """Places chosen one by one, and those that may still join.

    Invariant: what is chosen is part of a minimal quorum of places, and so it is together with each open place alone.

    >>> tree = Tree(Rule(2, ("registrar", Rule(1, ("north-pier", "south-pier")), "dry-dock")))
    >>> gathering = Gathering(tree)
    >>> gathering.add(2)  # The places are counted from 0, leaves before branches: this is the north pier.
    >>> [tree.names[tree.owner[place]] for place in members(gathering.open)]
    ['registrar', 'dry-dock']
    """

    __slots__ = ("_met", "_tree", "chosen", "open")

    def __init__(self, tree: Tree) -> None:
        self._tree = tree
        self._met: dict[int, _Met] = {}
        self.chosen = 0
        self.open = tree.joinable
        """Who may join; none when a minimal quorum is together."""

    def add(self, place: int) -> None:
        """Choose a place that is open."""
        self.chosen |= 1 << place
        self.open &= ~self.chosen
        step: tuple[int, int] | None = self._tree.at[place]
        while step:
            number, item = step
            node, met = self._tree.nodes[number], self._met.setdefault(number, _Met())
            if met.items >> item & 1:
                return  # This branch was met before, and so were all nodes above it.
            weight, places = node.items[item]
            met.lightest = min(met.lightest or weight, weight)
            met.items |= 1 << item
            met.places |= places
            met.weight += weight
            self.open &= ~_closed(node, met)
            step = node.up


def _closed(node: Node, met: _Met) -> int:
    """Return the places below all items that no minimal choice at this node has besides those met."""
    if node.even:
        return node.places & ~met.places if met.weight >= node.need else 0  # The same, at once.
    left = Counter(weight for item, (weight, _) in enumerate(node.items) if not met.items >> item & 1)
    closed = 0
    for weight in left:
        others = tuple(sorted((left - Counter([weight])).items()))
        if not _completable(node.need - met.weight - weight, min(met.lightest or weight, weight), others):
            closed |= sum(places for w, places in node.items if w == weight)
    return closed & ~met.places


@lru_cache(maxsize=1 << 14)
def _completable(missing: int, lightest: int, others: tuple[tuple[int, int], ...]) -> bool:
    """Say whether some of the others, or none, bring what is missing so that the lightest of all cannot be left out.

    Args:
        missing: the weight that is missing; 0 or less where nothing is.
        lightest: the least weight of those who were chosen.
        others: each weight, and how many have it.
    """
    for least in {lightest, *(weight for weight, _ in others if weight < lightest)}:
        # With nobody lighter than ``least``: what is brought must be enough, and too little with that much less.
        sums = 1  # Bit s: some of the others bring s.
        for weight, count in others:
            if weight >= least:
                for _ in range(count):
                    sums |= sums << weight
        low, high = max(missing, 0), missing + least - 1
        if high >= low and sums >> low & ((1 << (high - low + 1)) - 1):
            return True
    return False
