"""What a rule says of every set of labels at once: one big integer, whose bit S stands for the set S.

A label is whatever custodians are counted by: their own name, their person, their site, their reporting line. With n
labels there are 2^n sets, and one operation on integers of 2^n bits treats all of them together; so this is exhaustive
search, exact whatever the rule, for up to 24 labels (integers of 2 MiB).

Source: G. Boole 1854 (truth tables); D. E. Knuth, "The Art of Computer Programming", vol. 4A, sec. 7.1.3 (bitwise
addition side by side).
May import: shares.sharing.rule.
Secret: nothing. Public: the rule and the labels, which are confidential.
Does not: handle more labels; ``structure`` gives bounds there.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from functools import reduce
from operator import and_, or_

from shares.sharing.rule import Rule

MAX_LABELS = 24


class TruthTable:
    """Which sets of labels satisfy a rule.

    Args:
        rule: who can recover.
        label_of: each custodian's label, at most 24 different ones.

    >>> table = TruthTable(Rule(2, ("a", "b", Rule(1, ("b", "c")))), {"a": "a", "b": "b", "c": "c"})
    >>> table.fewest, list(table.minimal_sets())
    (1, [('b',), ('a', 'c')])
    """

    def __init__(self, rule: Rule, label_of: Mapping[str, str]) -> None:
        self.labels = tuple(dict.fromkeys(label_of[name] for name in rule.paths()))
        self._all = (1 << (1 << len(self.labels))) - 1
        self._with = {label: self._sets_with(i) for i, label in enumerate(self.labels)}
        self._satisfying = self._table(rule, label_of)
        smaller = ((self._satisfying & ~table) << (1 << i) for i, table in enumerate(self._with.values()))
        self._minimal = self._satisfying & ~reduce(or_, smaller)

    @property
    def fewest(self) -> int:
        """The number of labels in the smallest set that satisfies the rule."""
        size = self._added([(table, 1) for table in self._with.values()])
        left, found = self._minimal, 0
        for i, digit in reversed(list(enumerate(size))):
            if left & ~digit:
                left &= ~digit
            else:
                found |= 1 << i
        return found

    @property
    def count(self) -> int:
        """The number of minimal sets: those that satisfy the rule, and with any one label less do not."""
        return self._minimal.bit_count()

    @property
    def idle(self) -> tuple[str, ...]:
        """The labels that stand in no minimal set: they never make a difference."""
        return tuple(label for label, table in self._with.items() if not self._minimal & table)

    def minimal_sets(self) -> Iterator[tuple[str, ...]]:
        """Yield each minimal set, labels in the rule's order."""
        left = self._minimal
        while left:
            lowest = left & -left
            left ^= lowest
            members = lowest.bit_length() - 1
            yield tuple(label for i, label in enumerate(self.labels) if members >> i & 1)

    def _sets_with(self, i: int) -> int:
        """The table of 'label i is in the set': runs of 2^i zeros and 2^i ones."""
        table, width, whole = ((1 << (1 << i)) - 1) << (1 << i), 2 << i, 1 << len(self.labels)
        while width < whole:
            table |= table << width
            width *= 2
        return table

    def _table(self, rule: Rule, label_of: Mapping[str, str]) -> int:
        weights = Counter(label_of[child] for child in rule.children if isinstance(child, str))
        below = [(self._table(child, label_of), 1) for child in rule.children if isinstance(child, Rule)]
        items = [(self._with[label], weight) for label, weight in weights.items()] + below
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
