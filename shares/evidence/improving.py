"""Improving a covering: leave one quorum out, and exchange custodians in the others until all pairs are covered again.

For: the roster of rehearsals, where no finite plane fits.
Source: K. J. Nurmela, P. R. J. Ostergard, "Upper bounds for covering designs by simulated annealing", Congr. Numer. 96,
    1993 (exchanges in a fixed number of blocks); F. Glover, "Tabu search", ORSA J. Computing 1, 1989 (what was just
    exchanged stays for a while).
May import: .covering, .gathering.
Secret: nothing. Public: the rule, which is confidential.
Does not: find the fewest for sure. It stops after a number of steps that depends on the input alone, not on any clock.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence

from shares.evidence.covering import Chance, trimmed
from shares.evidence.gathering import Tree, members

_TENURE = 12
"""Tried on the published coverings with up to 33 points: 3 and 6 miss more of them than 12."""


def improved(
    tree: Tree, quorums: Sequence[int], wanted: Sequence[int], chance: Chance, *, fewest: int, work: int
) -> list[int]:
    """Try to cover the same pairs with fewer quorums.

    Args:
        tree: the rule, laid out, without tangles.
        quorums: minimal quorums that cover all that is wanted.
        wanted: whom each custodian is to meet.
        chance: decides among equals.
        fewest: a number of quorums to be content with.
        work: how many pairs to look at, about: a million take half a second or so.

    Returns:
        Minimal quorums that cover the same, no more than before and none of them superfluous.
    """
    best = list(quorums)
    while len(best) > max(fewest, 1) and work > 0:
        search = _Search(tree, _without_the_least(best, wanted, chance), wanted, chance)
        work = search.run(work - search.size)
        if search.open:
            break
        best = trimmed(search.quorums(), wanted)
    return best


def _without_the_least(quorums: Sequence[int], wanted: Sequence[int], chance: Chance) -> list[int]:
    """Leave out the quorum with the fewest pairs that no other has."""
    pairs = [[(a, b) for a in members(one) for b in members(one & wanted[a]) if a < b] for one in quorums]
    count = Counter(pair for those in pairs for pair in those)
    own = [sum(count[pair] == 1 for pair in those) for those in pairs]
    least = chance.member(sum(1 << i for i, number in enumerate(own) if number == min(own)))
    return [one for i, one in enumerate(quorums) if i != least]


class _Search:
    """A fixed number of quorums, and the wanted pairs that none of them holds: ``open``. ``size`` counts all pairs."""

    def __init__(self, tree: Tree, quorums: Sequence[int], wanted: Sequence[int], chance: Chance) -> None:
        total = len(wanted)
        self._chance = chance
        self._sets = list(quorums)
        self._blocks = [list(members(one)) for one in quorums]
        # Custodians of one node and one weight stand for one another: an exchange leaves a minimal quorum minimal.
        kinds = [(number, tree.nodes[number].items[item][0]) for number, item in tree.at]
        self._alike = [[kind == other for other in kinds] for kind in kinds]
        # Pairs that are not wanted count as covered for ever, so that no exchange gains or loses them.
        self._count = [[0 if others >> b & 1 else total * total for b in range(total)] for others in wanted]
        for block in self._blocks:
            for a in block:
                for b in block:
                    self._count[a][b] += a != b
        self.open = [(a, b) for a in range(total) for b in range(a) if not self._count[a][b]]
        self._place = {pair: place for place, pair in enumerate(self.open)}
        self._tabu: dict[tuple[int, int], int] = {}
        self._step = 0
        self.size = total * total + 4 * sum(len(block) ** 2 for block in self._blocks)

    def quorums(self) -> list[int]:
        """Return the quorums as they are now."""
        return list(self._sets)

    def run(self, work: int) -> int:
        """Exchange until no pair is open or the work is done; return how much work is left."""
        while self.open and work > 0:
            self._step += 1
            a, b = self.open[self._chance.below(len(self.open))]
            best, found = 1 << 30, list[tuple[int, int, int]]()
            for number, block in enumerate(self._blocks):
                if not (self._sets[number] >> a ^ self._sets[number] >> b) & 1:
                    continue
                work -= len(block) * len(block)
                stays, comes = (a, b) if self._sets[number] >> a & 1 else (b, a)
                row = self._count[comes]
                gains = sum(not row[other] for other in block)
                for goes in block:
                    if goes == stays or not self._alike[goes][comes]:
                        continue
                    here = self._count[goes]
                    cost = sum(here[other] == 1 for other in block) - gains + (not row[goes])
                    if cost > best or (cost >= 0 and self._is_tabu(number, goes, comes)):
                        continue
                    if cost < best:
                        best, found = cost, []
                    found.append((number, goes, comes))
            work -= 50 + len(self._blocks)  # Looking for the two is work as well.
            if found:
                self._exchange(*found[self._chance.below(len(found))])
        return work

    def _is_tabu(self, number: int, goes: int, comes: int) -> bool:
        return max(self._tabu.get((number, goes), 0), self._tabu.get((number, comes), 0)) > self._step

    def _exchange(self, number: int, goes: int, comes: int) -> None:
        block = self._blocks[number]
        self._sets[number] ^= 1 << goes | 1 << comes
        block.remove(goes)
        for other in block:
            self._add(goes, other, -1)
            self._add(comes, other, 1)
        block.append(comes)
        # Neither of the two moves again for some steps, unless that covers more: or the search goes round in a circle.
        for one in (goes, comes):
            self._tabu[number, one] = self._step + 2 + self._chance.below(_TENURE)

    def _add(self, a: int, b: int, change: int) -> None:
        self._count[a][b] += change
        self._count[b][a] += change
        pair = (a, b) if a > b else (b, a)
        if change > 0 and self._count[a][b] == 1:
            place, last = self._place.pop(pair), self.open.pop()
            if last != pair:
                self.open[place], self._place[last] = last, place
        elif change < 0 and not self._count[a][b]:
            self._place[pair] = len(self.open)
            self.open.append(pair)
