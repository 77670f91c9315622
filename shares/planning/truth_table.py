"""What a rule says of every set of names at once: one big integer, whose bit S stands for the set S.

With n names there are 2^n sets, and one operation on integers of 2^n bits treats all of them together; so this is
exhaustive search, exact whatever the rule, for up to 24 names (integers of 2 MiB).

Source: D. E. Knuth, "The Art of Computer Programming", vol. 4A, sec. 7.1.3 (bitwise operations on whole tables, and
addition side by side).
May import: shares.sharing.rule.
Secret: nothing. Public: the rule, which is confidential.
Does not: handle more names; ``structure`` gives bounds there.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence
from functools import reduce
from operator import and_, or_

from shares.sharing.rule import Rule

MAX_NAMES = 24


class TruthTable:
    """Which sets of names satisfy a rule of at most 24 names.

    >>> table = TruthTable(Rule(2, ("a", "b", Rule(1, ("b", "c")))))
    >>> table.fewest, table.fewest_blocking, list(table.minimal_sets())
    (1, 2, [('b',), ('a', 'c')])
    """

    def __init__(self, rule: Rule) -> None:
        self.names = tuple(rule.paths())
        self._all = (1 << (1 << len(self.names))) - 1
        self._with = {name: self._sets_with(i) for i, name in enumerate(self.names)}
        self._satisfying = self._table(rule)
        smaller = ((self._satisfying & ~table) << (1 << i) for i, table in enumerate(self._with.values()))
        self._minimal = self._satisfying & ~reduce(or_, smaller)

    @property
    def fewest(self) -> int:
        """The size of the smallest set that satisfies the rule."""
        left, found = self._minimal, 0
        for i, digit in reversed(list(enumerate(self._sizes()))):
            if left & ~digit:
                left &= ~digit
            else:
                found |= 1 << i
        return found

    @property
    def fewest_blocking(self) -> int:
        """The size of the smallest set without which the rest does not satisfy the rule."""
        left, largest = self._all ^ self._satisfying, 0
        for i, digit in reversed(list(enumerate(self._sizes()))):
            if left & digit:
                left &= digit
                largest |= 1 << i
        return len(self.names) - largest

    @property
    def count(self) -> int:
        """The number of minimal sets: those that satisfy the rule, and with any one name less do not."""
        return self._minimal.bit_count()

    @property
    def idle(self) -> tuple[str, ...]:
        """The names that stand in no minimal set: they never make a difference."""
        return tuple(name for name, table in self._with.items() if not self._minimal & table)

    def minimal_sets(self) -> Iterator[tuple[str, ...]]:
        """Yield each minimal set, names in the rule's order."""
        return self._members(self._minimal)

    def minimal_set_with(self, *names: str) -> tuple[str, ...] | None:
        """Return a minimal set that holds all of these names, or None where there is none.

        >>> TruthTable(Rule(2, ("a", "b", Rule(1, ("b", "c"))))).minimal_set_with("a", "c")
        ('a', 'c')
        """
        holding = reduce(and_, (self._with[name] for name in names), self._minimal)
        return next(self._members(holding), None)

    def _members(self, left: int) -> Iterator[tuple[str, ...]]:
        """Yield each set of a table, names in the rule's order."""
        while left:
            lowest = left & -left
            left ^= lowest
            members = lowest.bit_length() - 1
            yield tuple(name for i, name in enumerate(self.names) if members >> i & 1)

    def _sets_with(self, i: int) -> int:
        """The table of 'name i is in the set': runs of 2^i zeros and 2^i ones."""
        table, width, whole = ((1 << (1 << i)) - 1) << (1 << i), 2 << i, 1 << len(self.names)
        while width < whole:
            table |= table << width
            width *= 2
        return table

    def _sizes(self) -> list[int]:
        """The size of each set, digit by digit."""
        return self._added([(table, 1) for table in self._with.values()])

    def _table(self, rule: Rule) -> int:
        weights = Counter(child for child in rule.children if isinstance(child, str))
        below = [(self._table(child), 1) for child in rule.children if isinstance(child, Rule)]
        items = [(self._with[name], weight) for name, weight in weights.items()] + below
        # The ends of the scale, alternatives and vetoes, are common and need no sums.
        if rule.need == 1:
            return reduce(or_, (table for table, _ in items))
        if rule.need == len(rule.children):
            return reduce(and_, (table for table, _ in items))
        return self._at_least(rule.need, self._added(items))

    def _added(self, items: Sequence[tuple[int, int]]) -> list[int]:
        """Add weights for each set side by side: digit i of all the sums is one table."""
        digits = [0] * sum(weight for _, weight in items).bit_length()
        for table, weight in items:
            carry = 0
            for i in range(len(digits)):
                addend = table if weight >> i & 1 else 0
                if not addend and not carry:
                    continue
                either = digits[i] ^ addend
                digits[i], carry = either ^ carry, (digits[i] & addend) | (carry & either)
        return digits

    def _at_least(self, need: int, digits: Sequence[int]) -> int:
        table = self._all  # So far equal; the most significant digit, which comes last, decides.
        for i, digit in enumerate(digits):
            table = digit & table if need >> i & 1 else digit | table
        return table
