"""How probable it is that those who are hit satisfy a rule, when some are hit alone and some all at once.

Each custodian is hit by an event of their own, or by any event that they share with others: all events are independent
of one another. An event that several share is decided before the first of them is asked and kept in mind until the last
one has been: so events that follow one another cost little, and only those that overlap multiply.

Only products and sums of what is not negative are formed, and never one minus a sum: a chance of 10^-20 is as exact,
relative to itself, as one of a half.

Source: R. E. Barlow, F. Proschan, "Statistical Theory of Reliability and Life Testing", 1975 (k-out-of-n systems, and
pivotal decomposition); Bryant 1986 (one pass over a decision diagram).
May import: shares.sharing.rule, .diagram.
Secret: nothing. Public: the rule, which is confidential.
Does not: know what an event is, or how its chance comes about.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence, Set
from dataclasses import dataclass

from shares.planning.diagram import Diagram, Level
from shares.sharing.rule import Rule

MAX_WORK = 200_000
"""So many nodes, each counted for every combination of the shared events kept in mind there, are gone through in one
pass; about a twentieth of a second."""


@dataclass(frozen=True, slots=True)
class _Stage:
    """One custodian's turn: the shared events decided before it, those that hit the custodian, those forgotten after
    it (as places in ``Chance.shared``, or as a bit for each)."""

    name: str
    level: Level
    decided: tuple[int, ...]
    hit_by: int
    forgotten: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Chance:
    """The chance that whoever is hit satisfies a rule, ready to be worked out for any chances of the events.

    Attributes:
        shared: whom each event hits that hits several.
    """

    shared: tuple[frozenset[str], ...]
    _stages: tuple[_Stage, ...]
    _ends: tuple[float, ...]

    @classmethod
    def of(cls, rule: Rule, shared: Sequence[Set[str]] = ()) -> Chance | None:
        """Prepare for a rule and for the events that several custodians share.

        Args:
            rule: what is satisfied by those who are hit.
            shared: whom each shared event hits; names that the rule does not know count for nothing.

        Returns:
            None where the rule, or the way the events overlap, is too entangled for an exact answer.
        """
        names = set(rule.paths())
        known = tuple(frozenset(event & names) for event in shared)
        order = _order(rule, known)
        first = [min((order.index(name) for name in event), default=-1) for event in known]
        last = [max((order.index(name) for name in event), default=-1) for event in known]
        kept = [sum(begin <= i <= end for begin, end in zip(first, last, strict=True)) for i in range(len(order))]
        if max(kept) > MAX_WORK.bit_length():
            return None
        diagram = Diagram.of(rule, order)
        if diagram is None:
            return None
        if sum(len(level) << count for level, count in zip(diagram.levels, kept, strict=True)) > MAX_WORK:
            return None
        stages = tuple(
            _Stage(
                name,
                level,
                tuple(event for event, begin in enumerate(first) if begin == i),
                sum(1 << event for event, hit in enumerate(known) if name in hit),
                tuple(event for event, end in enumerate(last) if end == i),
            )
            for i, (name, level) in enumerate(zip(order, diagram.levels, strict=True))
        )
        return cls(known, stages, tuple(map(float, diagram.ends)))

    def at(self, alone: Mapping[str, float], together: Sequence[float] = ()) -> float:
        """Return the chance that those who are hit satisfy the rule.

        Args:
            alone: how probably each custodian is hit by an event of their own, 0 to 1.
            together: how probable each shared event is, in the order of ``shared``.

        >>> two_of_three = Chance.of(Rule(2, ("north-pier", "south-pier", "light-house")))
        >>> round(two_of_three.at({"north-pier": 0.1, "south-pier": 0.1, "light-house": 0.1}), 12)
        0.028
        """
        # values[events]: the chances at the nodes of a level, when exactly these of the events kept in mind have hit.
        values = {0: list(self._ends)}
        for stage in reversed(self._stages):
            for event in stage.forgotten:
                values |= {events | 1 << event: chances for events, chances in values.items()}
            hit = alone[stage.name]
            spared = 1 - hit
            level, hit_by = stage.level, stage.hit_by
            values = {
                events: [chances[held] for _, held in level]
                if events & hit_by
                else [spared * chances[without] + hit * chances[held] for without, held in level]
                for events, chances in values.items()
            }
            for event in stage.decided:
                hit, bit = together[event], 1 << event
                spared = 1 - hit
                values = {
                    events: [spared * no + hit * yes for no, yes in zip(chances, values[events | bit], strict=True)]
                    for events, chances in values.items()
                    if not events & bit
                }
        return values[0][0]


def _order(rule: Rule, shared: Sequence[frozenset[str]]) -> list[str]:
    """Return the custodians in an order that keeps those of a group together, and few events in mind at once."""
    left = [set(event) for event in shared]
    return list(dict.fromkeys(_asked(rule, shared, left)))


def _asked(node: Rule, shared: Sequence[frozenset[str]], left: Sequence[set[str]]) -> Iterator[str]:
    """Yield a node's custodians, always going on with the child that leaves the fewest events in mind after it.

    Args:
        left: whom each event hits that has not been asked yet; kept up to date.
    """
    below = {child: set(child.paths()) if isinstance(child, Rule) else {child} for child in node.children}

    def kept_after(child: Rule | str) -> int:
        after = [len(event - below[child]) for event in left]
        return sum(0 < still < len(event) for still, event in zip(after, shared, strict=True))

    while below:
        child = min(below, key=kept_after) if shared else next(iter(below))
        if isinstance(child, Rule):
            yield from _asked(child, shared, left)
        else:
            for event in left:
                event.discard(child)
            yield child
        del below[child]
