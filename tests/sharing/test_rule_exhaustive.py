"""What an unauthorised set learns of one byte, by trying every byte and every choice of coefficients.

Checked against: the definition of perfect secrecy (C. E. Shannon 1949; Shamir 1979, sec. 2): what the set sees has the
same distribution whatever the byte was. Nothing is assumed about how dealing works: it is run, on every choice. Counted
with numpy.
"""

from __future__ import annotations

import hashlib
import itertools
from collections.abc import Iterator

import numpy as np
import pytest
from strategies import HARBOUR, points_of, revealed, satisfies

from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing import rule as module
from shares.sharing.rule import Path, Rule, deal

A, B, C, D = HARBOUR[:4]

# Trees with one or two coefficients besides the byte: 256 or 65,536 choices for each byte.
TREES = {
    "2 of 2": Rule(2, (A, B)),
    "2 of 3": Rule(2, (A, B, C)),
    "3 of 3": Rule(3, (A, B, C)),
    "3 of 4": Rule(3, (A, B, C, D)),
    "one or both of two": Rule(1, (A, Rule(2, (B, C)))),
    "one and one of two": Rule(2, (A, Rule(1, (B, C)))),
    "one and both of two": Rule(2, (A, Rule(2, (B, C)))),
    "one and two of three": Rule(2, (A, Rule(2, (B, C, D)))),
    "both of two or both of two": Rule(1, (Rule(2, (A, B)), Rule(2, (C, D)))),
    "a name in both branches": Rule(2, (Rule(1, (A, B)), Rule(2, (A, C)))),
    "weight 2 of 3": Rule(3, (A, A, B)),
}


def maximal_unauthorised(rule: Rule) -> list[frozenset[str]]:
    """Sets of custodians that make no quorum, but would with anyone else."""
    names = list(rule.paths())
    unauthorised = [
        frozenset(held)
        for size in range(len(names))
        for held in itertools.combinations(names, size)
        if not satisfies(rule, {path for name in held for path in rule.paths()[name]})
    ]
    return [held for held in unauthorised if not any(held < other for other in unauthorised)]


def every_dealing(rule: Rule, byte: int, monkeypatch: pytest.MonkeyPatch) -> dict[Path, bytes]:
    """Deal one byte with every choice of coefficients: column c of all rows belongs to choice c."""
    drawn = sum(node.need - 1 for _, node in rule.nodes())
    digits = np.arange(256**drawn, dtype=np.uint32)
    choices: Iterator[bytes] = iter([(digits >> 8 * i).astype(np.uint8).tobytes() for i in range(drawn)])

    def chosen_polynomial(field: Field, payload: Secret, need: int, *, place: bytes) -> list[Secret]:
        return [payload, *(Secret.of(next(choices)) for _ in range(need - 1))]

    monkeypatch.setattr(module, "random_polynomial", chosen_polynomial)
    dealing = deal(Field(), rule, Secret.of(bytes([byte]) * 256**drawn))
    assert next(choices, None) is None
    return {point.path: revealed(point.row) for point in points_of(dealing)}


def seen(rule: Rule, held: frozenset[str], rows: dict[Path, bytes]) -> str:
    """A digest of all that a set of custodians sees over all choices, sorted: one value for one distribution."""
    paths = [path for name in sorted(held) for path in rule.paths()[name]]
    assert len(paths) <= 4
    view = np.zeros(len(next(iter(rows.values()))), dtype=np.uint32)
    for path in paths:
        view = view << np.uint32(8) | np.frombuffer(rows[path], dtype=np.uint8)
    return hashlib.sha256(np.sort(view).tobytes()).hexdigest()


@pytest.mark.parametrize("name", TREES)
def test_a_maximal_unauthorised_set_sees_the_same_whatever_the_byte(name: str, monkeypatch) -> None:
    rule = TREES[name]
    sets = maximal_unauthorised(rule)
    assert sets
    first = every_dealing(rule, 0, monkeypatch)
    expected = {held: seen(rule, held, first) for held in sets}
    quorum = frozenset(rule.paths())
    told = {seen(rule, quorum, first)}
    for byte in range(1, 256):
        rows = every_dealing(rule, byte, monkeypatch)
        for held in sets:
            assert seen(rule, held, rows) == expected[held]
        told.add(seen(rule, quorum, rows))
    assert len(told) == 256  # Everyone together sees something else for each byte: the count can tell.
