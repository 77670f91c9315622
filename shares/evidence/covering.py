"""Coverings: few minimal quorums of a rule such that any two custodians who can need each other are in one of them.

For a rule k of n this is a covering design (n, k, 2); for other rules the same question on the rule's own quorums.
Custodians are numbers here, and sets of them integers (bit i stands for number i); ``wanted[i]`` is the set of those
whom i is still to meet, and i is in ``wanted[j]`` wherever j is in ``wanted[i]``.

For: the roster of rehearsals.
Source: J. Schonheim, "On coverings", Pacific J. Math. 14, 1964 (the bound); D. M. Gordon, G. Kuperberg, O. Patashnik,
    "New constructions for covering designs", J. Combin. Designs 3, 1995 (greedy coverings); D. E. Knuth, "The Art of
    Computer Programming", vol. 2, sec. 3.3.4 (the generator), vol. 4A, sec. 7.1.3 (addition side by side).
May import: .gathering.
Secret: nothing. Public: the rule, which is confidential.
Does not: improve what it finds (``improving`` does), or know past drills and planes.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from typing import NamedTuple

from shares.evidence.gathering import Gathering, Tree, members

_TRIES = 8
_PATIENCE = 2_000


class Chance:
    """Numbers that look random and are the same for the same seed. For choices among equals; they protect nothing.

    Source: Knuth, vol. 2, sec. 3.3.4: the linear congruential generator modulo 2^64 of C. Haynes (from memory). Its low
        bits are poor and stay unused.
    """

    __slots__ = ("_state",)

    def __init__(self, seed: int) -> None:
        self._state = seed

    def below(self, limit: int) -> int:
        """Return a number from 0 to limit - 1; the limit is at most 2^31."""
        self._state = (6364136223846793005 * self._state + 1442695040888963407) % (1 << 64)
        return (self._state >> 33) * limit >> 31

    def member(self, chosen: int) -> int:
        """Return a member of a set that is not empty, not quite evenly chosen where the set has gaps."""
        start = self.below(chosen.bit_length())
        upper = chosen >> start << start or chosen
        return (upper & -upper).bit_length() - 1


def schonheim_bound(v: int, k: int, t: int = 2) -> int:
    """Return the Schonheim lower bound of the blocks that a covering design (v, k, t) has.

    Args:
        v: points, k or more.
        k: points of a block, t or more.
        t: how many points together are to be in a block.

    Source: Schonheim 1964; as Gordon, Kuperberg and Patashnik 1995 write it:
        ceil(v/k * ceil((v-1)/(k-1) * ... ceil((v-t+1)/(k-t+1)) ...)).

    >>> schonheim_bound(7, 3), schonheim_bound(9, 4), schonheim_bound(8, 4, 3)
    (7, 7, 14)
    """
    # The blocks of one point, without it, cover (v-1, k-1, t-1); and every block is counted at each of its k points.
    inner = schonheim_bound(v - 1, k - 1, t - 1) if t > 1 else 1
    return -(-v * inner // k)


def lower_bound(tree: Tree, wanted: Sequence[int]) -> int:
    """Return a number of minimal quorums below which no covering goes.

    Whoever is to meet d custodians below a node stands in d / m quorums or more, where a quorum with them has m others
    there at most. And where a quorum takes m custodians at most below a node, there are as many quorums as all of these
    custodians stand in, taken together, divided by m, or more. For k of n both steps are those of the Schonheim bound.

    Source: Schonheim 1964, his two steps taken at every node.

    >>> from shares.sharing.rule import Rule
    >>> tree = Tree(Rule(3, tuple("abcdefg")))
    >>> lower_bound(tree, partners(tree, Chance(0)).wanted)
    7
    """
    everyone = (1 << len(tree.names)) - 1
    sizes, sizes_with = tree.largest(), tree.largest_with()
    seats = [max(sizes_with[place] for place in members(places)) - 1 for places in tree.places_of]
    stands_in = [-(-others.bit_count() // max(room, 1)) for others, room in zip(wanted, seats, strict=True)]
    if tree.tangled:
        # A quorum may hold a custodian below a node for their place elsewhere, so that only the root tells.
        groups = [(everyone, sizes[0])]
    else:
        groups = [(node.places, size) for node, size in zip(tree.nodes, sizes, strict=True)]
    for group, size in groups:
        for one, others in enumerate(wanted):
            if met := (others & group).bit_count():
                stands_in[one] = max(stands_in[one], -(-met // (size - (group >> one & 1))))
    return max(*stands_in, *(-(-sum(stands_in[one] for one in members(group)) // size) for group, size in groups))


class Partners(NamedTuple):
    """Who can need whom.

    Attributes:
        wanted: for each custodian those with whom they stand in one minimal quorum; none for whoever recovers alone.
        known: with tangles, minimal quorums that hold all these pairs.
    """

    wanted: list[int]
    known: list[int]


def partners(tree: Tree, chance: Chance) -> Partners:
    """Find out who can need whom.

    It is certain where no custodian stands in two branches, and up to 24 custodians. Else there may be a quorum for two
    who are called no partners here: to tell is hard in general.
    """
    # Whoever recovers alone needs nobody: that would be found out as well, by searching in vain.
    alone = [tree.rule.satisfied_by({name}) for name in tree.names]
    needed = sum(
        1 << number for number, places in enumerate(tree.places_of) if places & tree.joinable and not alone[number]
    )
    wanted = [needed & ~(1 << number) if needed >> number & 1 else 0 for number in range(len(tree.names))]
    if tree.tangled:
        known, apart = _cover(tree, wanted, chance, ())
        for one, other in apart:
            meet(wanted, 1 << one | 1 << other)
        return Partners(wanted, known)
    for number in members(needed):
        gathering = Gathering(tree)
        gathering.add(number)
        wanted[number] = gathering.open
    return Partners(wanted, [])


def greedy(tree: Tree, wanted: Sequence[int], chance: Chance, *, known: Sequence[int] = ()) -> list[int]:
    """Cover what is wanted by minimal quorums, gathered one after the other; none of them is superfluous.

    Args:
        tree: the rule, laid out.
        wanted: whom each custodian is to meet, of their ``partners``.
        chance: decides among equals.
        known: with tangles, minimal quorums to fall back on.
    """
    quorums, _ = _cover(tree, wanted, chance, known)
    return trimmed(quorums, wanted)


def _cover(
    tree: Tree, wanted: Sequence[int], chance: Chance, known: Sequence[int]
) -> tuple[list[int], list[tuple[int, int]]]:
    """Cover what is wanted; return also the pairs for whom no quorum was found."""
    left, quorums, apart = list(wanted), list[int](), list[tuple[int, int]]()
    left_places = [tree.places(others) for others in left] if tree.tangled else left
    for number in range(len(left)):
        while left[number]:
            other = chance.member(left[number])
            both = 1 << number | 1 << other
            # Each failure takes long; with very many of them the search ends, and the answer is as uncertain as before.
            quorum = gather(tree, (number, other), left_places, chance) if len(apart) < _PATIENCE else None
            quorum = quorum or next((one for one in known if one & both == both), None)
            if quorum is None:
                apart.append((number, other))
            else:
                quorums.append(quorum)
            meet(left, quorum or both)
            if tree.tangled:
                for one in members(quorum or both):
                    left_places[one] &= ~tree.places(quorum or both)
    return quorums, apart


def meet(wanted: list[int], together: int) -> None:
    """Take from what is wanted, in place, all pairs within a set."""
    for number in members(together):
        wanted[number] &= ~together


def trimmed(quorums: Sequence[int], wanted: Sequence[int]) -> list[int]:
    """Leave out quorums, the last ones first, whose wanted pairs are all in others."""
    pairs = [[(a, b) for a in members(one) for b in members(one & wanted[a]) if a < b] for one in quorums]
    count = Counter(pair for those in pairs for pair in those)
    kept = []
    for quorum, those in reversed(list(zip(quorums, pairs, strict=True))):
        if all(count[pair] > 1 for pair in those):
            count.subtract(those)
        else:
            kept.append(quorum)
    return kept[::-1]


def gather(tree: Tree, first: Sequence[int], wanted: Sequence[int], chance: Chance) -> int | None:
    """Gather a minimal quorum around some custodians: always whoever is still to meet most of those in it.

    Args:
        tree: the rule, laid out.
        first: who must be in it.
        wanted: for each custodian the places of those whom they are still to meet.
        chance: decides among equals.

    Returns:
        The quorum, or None where there is none; with tangles and more than 24 custodians, where none was found.
    """
    if not tree.tangled:
        return _gathered(tree, first, wanted, chance)
    for _ in range(_TRIES):
        quorum = _gathered(tree, first, wanted, chance)
        if quorum is not None:
            quorum = _reduced(tree, quorum, first)
            if all(quorum >> number & 1 for number in first):
                return quorum
    if tree.table:
        witness = tree.table.minimal_set_with(*(tree.names[number] for number in first))
        return sum(1 << tree.names.index(name) for name in witness) if witness else None
    return None


def _gathered(tree: Tree, first: Sequence[int], wanted: Sequence[int], chance: Chance) -> int | None:
    """Gather a minimal quorum of places, and return whose they are; None where a place is not to be had."""
    gathering, chosen = Gathering(tree), 0
    digits = list[
        int
    ]()  # How many of those chosen a place's owner is to meet: digit i of that is in the set digits[i].

    def join(place: int) -> None:
        nonlocal chosen
        gathering.add(place)
        number = tree.owner[place]
        if not chosen >> number & 1:
            chosen |= 1 << number
            carry = wanted[number]
            for i, digit in enumerate(digits):
                digits[i], carry = digit ^ carry, digit & carry
            digits.append(carry)

    for number in first:
        places = tree.places_of[number] & gathering.open
        if not places:
            return None
        join(chance.member(places))
    while gathering.open:
        # Who is there already brings no other custodian in: without tangles there is nobody like that.
        best = gathering.open & tree.places(chosen) or gathering.open
        for digit in reversed(digits):
            best = best & digit or best
        join(chance.member(best))
    return chosen


def _reduced(tree: Tree, quorum: int, first: Sequence[int]) -> int:
    """Leave out whoever can be left out, those who must be in it last."""
    if not quorum & tree.several:
        return quorum  # Everyone stands for one place, and without any place it is no quorum.
    kept = {tree.names[number] for number in members(quorum)}
    for number in [*(number for number in members(quorum) if number not in first), *first]:
        if tree.rule.satisfied_by(kept - {tree.names[number]}):
            kept.discard(tree.names[number])
    return sum(1 << number for number in members(quorum) if tree.names[number] in kept)
