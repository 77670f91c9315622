"""What the tests of rosters share: published coverings, and the small cases by brute force.

Source: tests/vectors/covering_designs.json, which says of each value where it is from and how it was checked.
"""

from __future__ import annotations

import itertools
import json
from pathlib import Path
from typing import Any

from strategies import minimal_by_trying

from shares.evidence.gathering import Tree, members
from shares.sharing.rule import Rule

VECTORS: dict[str, Any] = json.loads((Path(__file__).parent / "vectors" / "covering_designs.json").read_text())
TABLE = {(row["v"], row["k"]): row["C"] for row in VECTORS["coverings_t2"]} | {
    (row["v"], 3): row["C"] for row in VECTORS["formula_k3"]
}


def parted(rule: Rule, where: str = "") -> Rule:
    """The rule with every custodian at another node somebody else: nobody stands in two branches."""
    return Rule(
        rule.need,
        tuple(
            parted(child, f"{where}{x}") if isinstance(child, Rule) else f"{child}{where}"
            for x, child in enumerate(rule.children)
        ),
    )


def quorums_of(rule: Rule) -> set[frozenset[str]]:
    """Every minimal quorum, found by trying all sets."""
    return minimal_by_trying(rule, {name: name for name in rule.paths()})


def names_in(tree: Tree, places: int) -> set[str]:
    """Whose places these are."""
    return {tree.names[tree.owner[place]] for place in members(places)}


def flat(need: int, total: int) -> Rule:
    """The rule k of n."""
    return Rule(need, tuple(f"custodian {number}" for number in range(total)))


def pairs(sets: list[int]) -> set[tuple[int, int]]:
    """All pairs of those who want one another."""
    return {(a, b) for a, others in enumerate(sets) for b in members(others) if a < b}


def covered(quorums: list[int]) -> set[tuple[int, int]]:
    """All pairs within quorums."""
    return {pair for one in quorums for pair in itertools.combinations(members(one), 2)}


def fewest_by_trying(quorums: list[frozenset[str]], wanted: set[frozenset[str]]) -> int:
    """The least number of quorums that hold all wanted pairs: iterative deepening on the first open pair."""

    def possible(left: set[frozenset[str]], depth: int) -> bool:
        if not left:
            return True
        if depth == 0:
            return False
        first = min(left, key=sorted)
        return any(possible({pair for pair in left if not pair <= one}, depth - 1) for one in quorums if first <= one)

    return next(depth for depth in itertools.count() if possible(wanted, depth))


def pairs_of(quorums: set[frozenset[str]]) -> set[frozenset[str]]:
    """All pairs of custodians who stand in one quorum."""
    return {frozenset(pair) for one in quorums for pair in itertools.combinations(one, 2)}
