"""The structure of a rule: how few make a quorum, how few block every quorum, and which quorums are minimal.

Counted by custodians or by any label they share: a person, a site, a reporting line. Exact where no label repeats, and
up to 24 labels; beyond that the questions are hard in general (the smallest satisfying set is NP-hard, counting minimal
ones #P-hard), and the answers are bounds that say so.

Source: J. Benaloh, J. Leichter 1988 (threshold trees); M. R. Garey, D. S. Johnson, "Computers and Intractability",
1979 (hitting set); L. G. Valiant, "The complexity of enumeration and reliability problems", SIAM J. Comput. 8(3), 1979.
May import: shares.sharing.rule, .truth_table.
Secret: nothing. Public: the rule and the labels, which are confidential.
Does not: say what is good or bad (``examine`` does), or how likely anything is.
"""

from __future__ import annotations

import itertools
import math
from collections import Counter
from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple, TypeAlias

from shares.planning.truth_table import MAX_LABELS, TruthTable
from shares.sharing.rule import Rule

MAX_LISTED = 40
"""So many minimal quorums are listed; more are counted."""
_TRIES = 8

Labels: TypeAlias = Mapping[str, str]
"""Each custodian's label."""


class Bounds(NamedTuple):
    """A number that lies between two others; exact where they are equal.

    >>> str(Bounds(2, 2)), str(Bounds(2, 4))
    ('2', '2 to 4')
    """

    low: int
    high: int

    @property
    def exact(self) -> bool:
        """Whether the number itself is known."""
        return self.low == self.high

    def __str__(self) -> str:
        return f"{self.low:,}" if self.exact else f"{self.low:,} to {self.high:,}"


@dataclass(frozen=True, slots=True)
class Count:
    """How a rule counts in custodians, people, sites or reporting lines.

    Attributes:
        total: how many there are.
        quorum: the smallest number that makes a quorum.
        block: the smallest number whose loss or refusal leaves no quorum.
    """

    total: int
    quorum: Bounds
    block: Bounds

    @classmethod
    def of(cls, rule: Rule, label_of: Labels) -> Count:
        """Count a rule by the labels of its custodians."""
        return cls(len(set(label_of.values())), fewest(rule, label_of), fewest(dual(rule), label_of))


@dataclass(frozen=True, slots=True)
class Quorums:
    """The minimal quorums of a rule: no custodian of one can be left out.

    Attributes:
        count: how many there are.
        listed: all of them, where the count is exact and at most 40; else none.
        idle: custodians who stand in none, as far as that is known: without them nothing changes.
    """

    count: Bounds
    listed: tuple[tuple[str, ...], ...]
    idle: tuple[str, ...]


def dual(rule: Rule) -> Rule:
    """Return the rule that exactly those satisfy who block ``rule``: whose loss leaves no quorum.

    Of n children of which k are needed, n - k + 1 block.

    >>> dual(Rule(2, ("north-pier", "south-pier", "light-house", "registrar"))).need
    3
    """
    children = tuple(dual(child) if isinstance(child, Rule) else child for child in rule.children)
    return Rule(len(children) - rule.need + 1, children)


def alone(rule: Rule, holders: Mapping[str, Collection[str]]) -> tuple[str, ...]:
    """Return those who satisfy the rule without any other, in the order given; always exact.

    Whoever blocks the rule alone satisfies ``dual(rule)`` alone.

    Args:
        rule: who can recover.
        holders: the custodians that each one holds, or can command.

    >>> piers = Rule(2, ("north-pier", "south-pier", "light-house"))
    >>> alone(piers, {"A": {"north-pier", "south-pier"}, "B": {"light-house"}})
    ('A',)
    """
    return tuple(one for one, names in holders.items() if rule.satisfied_by(names))


def fewest(rule: Rule, label_of: Labels) -> Bounds:
    """Return the smallest number of labels whose custodians together satisfy the rule.

    Args:
        rule: who can recover.
        label_of: each custodian's label.

    Returns:
        The number itself where no label stands in two branches, where there are at most 24 labels, or where the
        bounds meet; else bounds.

    >>> piers = Rule(2, ("north-pier", "south-pier", "light-house"))
    >>> fewest(piers, {"north-pier": "A", "south-pier": "A", "light-house": "B"})
    Bounds(low=1, high=1)
    """
    places = _places(rule, label_of)
    # A label pays a part of its price at each of its places. Whoever satisfies the rule pays no more than one for each
    # label, and just that where each label has one place: so the cheapest way is a lower bound, and exact there.
    low = math.ceil(_cheapest(rule, label_of, {label: Fraction(1, count) for label, count in places.items()}))
    if max(places.values()) == 1:
        return Bounds(low, low)
    high = min(len(found) for found in _reduced(rule, label_of, places))
    if low < high and len(places) <= MAX_LABELS:
        low = high = TruthTable(rule, label_of).fewest
    return Bounds(low, high)


def minimal_quorums(rule: Rule) -> Quorums:
    """Return the minimal quorums, as sets of custodians: listed where they are few, else counted.

    Returns:
        Exact where no custodian stands in two branches, or with at most 24 custodians; else bounds of their number.

    >>> minimal_quorums(Rule(2, (Rule(1, ("north-pier", "south-pier")), "registrar"))).listed
    (('north-pier', 'registrar'), ('south-pier', 'registrar'))
    """
    names = {name: name for name in rule.paths()}
    places = _places(rule, names)
    counted = _count(rule)
    if max(places.values()) == 1:
        count, found, idle = Bounds(counted, counted), _minimal(rule), _idle(rule)
    elif len(names) <= MAX_LABELS:
        table = TruthTable(rule, names)
        count, found, idle = Bounds(table.count, table.count), table.minimal_sets(), table.idle
    else:
        # Each minimal quorum is one of places; several of places may be one of custodians, or none that is minimal.
        count = Bounds(len(set(_reduced(rule, names, places))), counted)
        return Quorums(count, (), ())
    order = {name: place for place, name in enumerate(names)}
    listed = [tuple(sorted(set(quorum), key=order.__getitem__)) for quorum in found] if count.high <= MAX_LISTED else []
    return Quorums(count, tuple(sorted(listed, key=lambda quorum: (len(quorum), [order[n] for n in quorum]))), idle)


# A node as a choice among items: a label with as many leaves as it has here, or a branch, which counts once.

_Item: TypeAlias = tuple[str | Rule, int]


def _items(node: Rule, label_of: Labels | None = None) -> list[_Item]:
    """The items of a node; without labels custodians count by their own names."""
    named = [child for child in node.children if isinstance(child, str)]
    leaves = Counter(label_of[name] for name in named) if label_of else Counter(named)
    return [*leaves.items(), *((child, 1) for child in node.children if isinstance(child, Rule))]


def _places(node: Rule, label_of: Labels) -> Counter[str]:
    """Count the nodes at which each label has leaves; a group that stands twice counts twice."""
    places = Counter[str]()
    for item, _ in _items(node, label_of):
        places.update(_places(item, label_of) if isinstance(item, Rule) else [item])
    return places


def _cheapest(node: Rule, label_of: Labels, prices: Mapping[str, Fraction]) -> Fraction:
    """Return the least that satisfying a node costs, with every place paid for on its own (a knapsack)."""
    # cheapest[met]: the least price of items that count for ``met`` or more.
    cheapest: list[Fraction | None] = [Fraction(0), *[None] * node.need]
    for item, weight in _items(node, label_of):
        price = _cheapest(item, label_of, prices) if isinstance(item, Rule) else prices[item]
        for met in range(node.need, 0, -1):
            before = cheapest[max(met - weight, 0)]
            now = cheapest[met]
            if before is not None and (now is None or before + price < now):
                cheapest[met] = before + price
    return cheapest[node.need] or Fraction(0)


def _reduced(rule: Rule, label_of: Labels, places: Mapping[str, int]) -> Iterator[tuple[str, ...]]:
    """Yield some minimal sets of labels: all labels, less one after the other as long as the rule stays satisfied.

    Labels with few places go first, so that what remains is small; then each of a few labels is kept to the last.
    """
    order = sorted(places, key=places.__getitem__)
    for last in range(min(_TRIES, len(order))):
        kept = dict.fromkeys([*order[: len(order) - 1 - last], *order[len(order) - last :], order[-1 - last]])
        for label in list(kept):
            del kept[label]
            if not rule.satisfied_by({name for name in label_of if label_of[name] in kept}):
                kept[label] = None
        yield tuple(sorted(kept))


# Minimal quorums where every place is a custodian's only one. At a node, items are taken heaviest first: a choice is
# minimal exactly when it meets the need with its last, lightest item and not before.


def _heaviest_first(node: Rule) -> list[_Item]:
    return sorted(_items(node), key=lambda item: -item[1])


def _count(node: Rule) -> int:
    """Count the minimal quorums of places."""
    partial, complete = [1] + [0] * (node.need - 1), 0
    for item, weight in _heaviest_first(node):
        ways = _count(item) if isinstance(item, Rule) else 1
        for met in range(node.need - 1, -1, -1):
            if met + weight >= node.need:
                complete += partial[met] * ways
            else:
                partial[met + weight] += partial[met] * ways
    return complete


def _minimal(node: Rule) -> Iterator[tuple[str, ...]]:
    for chosen in _choices(_heaviest_first(node), node.need):
        parts = [list(_minimal(item)) if isinstance(item, Rule) else [(item,)] for item in chosen]
        for combined in itertools.product(*parts):
            yield tuple(itertools.chain.from_iterable(combined))


def _choices(items: Sequence[_Item], missing: int) -> Iterator[tuple[str | Rule, ...]]:
    """Yield the minimal choices of items that count for ``missing``."""
    if missing <= 0:
        yield ()
    elif sum(weight for _, weight in items) >= missing:
        (item, weight), rest = items[0], items[1:]
        for others in _choices(rest, missing - weight):
            yield (item, *others)
        yield from _choices(rest, missing)


def _idle(node: Rule) -> tuple[str, ...]:
    """Return the custodians who stand in no minimal quorum: with whom no choice at some node falls short by less than
    they bring."""
    items, idle = _items(node), list[str]()
    for i, (item, weight) in enumerate(items):
        sums = 1  # Bit s: some of the others count for s.
        for _, other in items[:i] + items[i + 1 :]:
            sums |= sums << other
        of_use = sums & ((1 << node.need) - 1) & ~((1 << max(node.need - weight, 0)) - 1)
        if isinstance(item, Rule):
            idle += _idle(item) if of_use else item.paths()
        elif not of_use:
            idle.append(item)
    return tuple(idle)
