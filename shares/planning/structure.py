"""The structure of a rule: how few make a quorum, how few block every quorum, and which quorums are minimal.

Counted by custodians or by any label they share: a person, a site, a reporting line; ``relabelled`` gives the rule over
those. Exact where no name stands in two branches, and up to 24 names; beyond that the questions are hard in general
(the smallest satisfying set is NP-hard, counting minimal ones #P-hard), and the answers are bounds.

Source: J. Benaloh, J. Leichter 1988 (threshold trees); M. R. Garey, D. S. Johnson, "Computers and Intractability",
1979 (hitting set); L. G. Valiant, "The complexity of enumeration and reliability problems", SIAM J. Comput. 8(3), 1979.
May import: shares.sharing.rule, .truth_table.
Secret: nothing. Public: the rule, which is confidential.
Does not: say what is good or bad (``findings`` does), or how likely anything is.
"""

from __future__ import annotations

import itertools
import math
from collections import Counter
from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import NamedTuple, TypeAlias

from shares.planning.truth_table import MAX_NAMES, TruthTable
from shares.sharing.rule import Rule

MAX_LISTED = 40
"""So many minimal quorums are listed; more are counted."""
_TRIES = 8


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
    """How a rule counts in the names it is over: custodians, people, sites or reporting lines.

    Attributes:
        total: how many there are.
        quorum: the smallest number that makes a quorum.
        block: the smallest number whose loss or refusal leaves no quorum.
    """

    total: int
    quorum: Bounds
    block: Bounds

    @classmethod
    def of(cls, rule: Rule, *, most_tried: int = MAX_NAMES) -> Count:
        """Count the names of a rule: exact where none stands in two branches, where there are at most 24, or where the
        bounds meet.

        Args:
            rule: over custodians, or over any label that they share.
            most_tried: up to how many names all sets are tried, at most 24; that takes seconds at 24 and no time at 20.

        >>> piers = Rule(2, ("north-pier", "south-pier", "light-house", "registrar"))
        >>> Count.of(piers)
        Count(total=4, quorum=Bounds(low=2, high=2), block=Bounds(low=3, high=3))
        >>> Count.of(relabelled(piers, {"north-pier": "A", "south-pier": "A", "light-house": "B", "registrar": "B"}))
        Count(total=2, quorum=Bounds(low=1, high=1), block=Bounds(low=2, high=2))
        """
        total, quorum, block = len(rule.paths()), _fewest(rule), _fewest(dual(rule))
        if total <= most_tried and not (quorum.exact and block.exact):
            tried = _try_all(rule)
            quorum, block = Bounds(tried.fewest, tried.fewest), Bounds(tried.fewest_blocking, tried.fewest_blocking)
        return cls(total, quorum, block)


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


def relabelled(rule: Rule, label_of: Mapping[str, str]) -> Rule:
    """Return the rule over labels: each custodian's name replaced by their label, wherever it stands.

    >>> relabelled(Rule(1, ("north-pier", "south-pier")), {"north-pier": "A", "south-pier": "A"})
    Rule(need=1, children=('A', 'A'))
    """
    return Rule(
        rule.need,
        tuple(relabelled(child, label_of) if isinstance(child, Rule) else label_of[child] for child in rule.children),
    )


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


def minimal_quorums(rule: Rule) -> Quorums:
    """Return the minimal quorums, as sets of custodians: listed where they are few, else counted.

    Returns:
        Exact where no custodian stands in two branches, or with at most 24 custodians; else bounds of their number.

    >>> minimal_quorums(Rule(2, (Rule(1, ("north-pier", "south-pier")), "registrar"))).listed
    (('north-pier', 'registrar'), ('south-pier', 'registrar'))
    """
    order = {name: place for place, name in enumerate(rule.paths())}
    counted = _count(rule)
    if max(_places(rule).values()) == 1:
        count, idle = counted, _idle(rule)
        found = list(_minimal(rule)) if count <= MAX_LISTED else []
    elif len(order) <= MAX_NAMES:
        tried = _try_all(rule)
        count, found, idle = tried.count, list(tried.listed), tried.idle
    else:
        # Each minimal quorum is one of places; several of places may be one of custodians, or none that is minimal.
        return Quorums(Bounds(len(set(_reduced(rule))), counted), (), ())
    listed = [tuple(sorted(quorum, key=order.__getitem__)) for quorum in found]
    listed.sort(key=lambda quorum: (len(quorum), [order[name] for name in quorum]))
    return Quorums(Bounds(count, count), tuple(listed), idle)


@dataclass(frozen=True, slots=True)
class _Tried:
    """What trying all sets tells; ``listed`` holds the minimal ones where they are few."""

    fewest: int
    fewest_blocking: int
    count: int
    listed: tuple[tuple[str, ...], ...]
    idle: tuple[str, ...]


def _try_all(rule: Rule) -> _Tried:
    # Where everyone is a person with a site and a manager of their own, the rules over all of these differ in names
    # alone: under numbers instead of names they are one, and tried once.
    names = list(rule.paths())
    tried = _try_numbered(relabelled(rule, {name: str(number) for number, name in enumerate(names)}))
    listed = tuple(tuple(names[int(number)] for number in quorum) for quorum in tried.listed)
    return replace(tried, listed=listed, idle=tuple(names[int(number)] for number in tried.idle))


@lru_cache(maxsize=16)
def _try_numbered(rule: Rule) -> _Tried:
    table = TruthTable(rule)
    listed = tuple(table.minimal_sets()) if table.count <= MAX_LISTED else ()
    return _Tried(table.fewest, table.fewest_blocking, table.count, listed, table.idle)


# A node as a choice among items: a name with as many leaves as it has here, or a branch, which counts once.

_Item: TypeAlias = tuple[str | Rule, int]


def _items(node: Rule) -> list[_Item]:
    leaves = Counter(child for child in node.children if isinstance(child, str))
    return [*leaves.items(), *((child, 1) for child in node.children if isinstance(child, Rule))]


def _places(node: Rule) -> Counter[str]:
    """Count the nodes at which each name has leaves; a group that stands twice counts twice."""
    places = Counter[str]()
    for item, _ in _items(node):
        places.update(_places(item) if isinstance(item, Rule) else [item])
    return places


def _fewest(rule: Rule) -> Bounds:
    """Return bounds of the smallest number of names that satisfy a rule; exact where each has one place."""
    places = _places(rule)
    # A name pays a part of its price at each of its places. Whoever satisfies the rule pays no more than one for each
    # name, and just that where each has one place: so the cheapest way is a lower bound, and exact there.
    # Prices are in parts of one that make them whole numbers.
    one = math.lcm(*places.values())
    low = -(-_cheapest(rule, {name: one // count for name, count in places.items()}) // one)
    return Bounds(low, low if max(places.values()) == 1 else min(map(len, _reduced(rule))))


def _cheapest(node: Rule, prices: Mapping[str, int]) -> int:
    """Return the least that satisfying a node costs, with every place paid for on its own (a knapsack)."""
    # cheapest[met]: the least price of items that count for ``met`` or more.
    cheapest: list[int | None] = [0, *[None] * node.need]
    for item, weight in _items(node):
        price = _cheapest(item, prices) if isinstance(item, Rule) else prices[item]
        for met in range(node.need, 0, -1):
            before, now = cheapest[max(met - weight, 0)], cheapest[met]
            if before is not None and (now is None or before + price < now):
                cheapest[met] = before + price
    return cheapest[node.need] or 0


def _reduced(rule: Rule) -> Iterator[tuple[str, ...]]:
    """Yield some minimal sets of names: all names, less one after the other as long as the rule stays satisfied.

    Names with few places go first, so that what remains is small; each of a few others is kept to the last in turn.
    """
    places = _places(rule)
    order = sorted(places, key=places.__getitem__)
    for last in order[: -_TRIES - 1 : -1]:
        kept = set(order)
        for name in [*(name for name in order if name != last), last]:
            if rule.satisfied_by(kept - {name}):
                kept.remove(name)
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
