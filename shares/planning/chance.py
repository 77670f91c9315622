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

from shares.planning.diagram import MAX_CUSTODIANS, Diagram, Level
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
        names = rule.paths().keys()
        known = tuple(frozenset(event & names) for event in shared)
        if len(names) > MAX_CUSTODIANS or (found := _order(rule, known)) is None:
            return None
        order, kept = tuple(found), tuple(found.values())
        diagram = Diagram.of(rule, order)
        if diagram is None:
            return None
        if sum(len(level) << count for level, count in zip(diagram.levels, kept, strict=True)) > MAX_WORK:
            return None
        place = {name: i for i, name in enumerate(order)}
        first = [min((place[name] for name in event), default=-1) for event in known]
        last = [max((place[name] for name in event), default=-1) for event in known]
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


def _order(rule: Rule, shared: Sequence[frozenset[str]]) -> dict[str, int] | None:
    """Return the custodians in an order that keeps those of a group together, and few events in mind at once.

    Returns:
        How many events are kept in mind while each is asked; None where that alone is too much work, with a single node
        for each custodian. It is found out before much has been done: see ``_asked``.
    """
    bits = {name: 1 << i for i, name in enumerate(rule.paths())}
    hitting: dict[str, list[int]] = {name: [] for name in bits}
    for event, members in enumerate(shared):
        for name in members:
            hitting[name].append(event)
    # All events that hit a custodian are in mind while that custodian is asked.
    if 1 << max(map(len, hitting.values())) > MAX_WORK:
        return None
    whole = [sum(bits[name] for name in event) for event in shared]
    left = whole.copy()
    order: dict[str, int] = {}
    in_mind = work = 0
    for name in _asked(rule, bits, hitting, whole, left):
        if name in order:
            continue
        in_mind += sum(left[event] == whole[event] for event in hitting[name])
        order[name] = in_mind
        work += 1 << in_mind
        if work > MAX_WORK:
            return None
        for event in hitting[name]:
            left[event] &= ~bits[name]
        in_mind -= sum(not left[event] for event in hitting[name])
    return order


def _asked(
    node: Rule, bits: Mapping[str, int], hitting: Mapping[str, Sequence[int]], whole: Sequence[int], left: Sequence[int]
) -> Iterator[str]:
    """Yield a node's custodians, always going on with the child that leaves the fewest events in mind after it.

    Only events that hit somebody below a child count for it, and no custodian is hit by more than some 17: so each
    step is cheap, however many events there are.

    Args:
        bits: a bit for each custodian.
        hitting: which events hit each.
        whole: whom each event hits, as bits.
        left: whom of them it hits that have not been asked yet; kept up to date by whoever takes what is yielded.
    """
    waiting = []
    for child in dict.fromkeys(node.children):
        below = child.paths().keys() if isinstance(child, Rule) else (child,)
        spared = ~sum(bits[name] for name in below)
        waiting.append((child, spared, sorted({event for name in below for event in hitting[name]})))

    def more_in_mind(place: int) -> int:
        _, spared, touched = waiting[place]
        return sum(
            (0 != left[event] & spared != whole[event]) - (0 != left[event] != whole[event]) for event in touched
        )

    while waiting:
        child, _, _ = waiting.pop(min(range(len(waiting)), key=more_in_mind) if whole else 0)
        if isinstance(child, Rule):
            yield from _asked(child, bits, hitting, whole, left)
        else:
            yield child
