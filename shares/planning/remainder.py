"""A rule when some of it is gone, or is there already: what those who are left can still do, and what is still missing.

Source: J. Benaloh, J. Leichter 1988 (threshold trees); setting some variables of a monotone function to false or true.
May import: shares.sharing.rule.
Secret: nothing. Public: the rule, which is confidential.
Does not: count; ``structure`` does, on what is returned here.
"""

from __future__ import annotations

from collections.abc import Collection

from shares.sharing.rule import Path, Rule


def without(rule: Rule, lost: Collection[str]) -> Rule | None:
    """Return the rule over those who are left: exactly what satisfies ``rule`` without the lost ones satisfies it.

    Args:
        rule: who can recover.
        lost: names in any order, best a set.

    Returns:
        None where nobody who is left can satisfy it.

    >>> without(Rule(2, ("north-pier", "south-pier", "light-house")), {"south-pier"})
    Rule(need=2, children=('north-pier', 'light-house'))
    >>> without(Rule(2, ("north-pier", "south-pier")), {"south-pier"}) is None
    True
    """
    left: list[Rule | str] = []
    for child in rule.children:
        if isinstance(child, Rule):
            inner = without(child, lost)
            left += () if inner is None else (inner,)
        elif child not in lost:
            left.append(child)
    return Rule(rule.need, tuple(left)) if len(left) >= rule.need else None


def still_needed(rule: Rule, places: Collection[Path]) -> Rule | None:
    """Return what is still to be satisfied by whoever has the points at these places: exactly those satisfy it who
    together with them satisfy ``rule``.

    Args:
        rule: who can recover.
        places: paths of leaves, as ``Rule.paths`` has them, best a set.

    Returns:
        None where nothing is missing.

    >>> rule = Rule(2, ("north-pier", "south-pier", "light-house"))
    >>> still_needed(rule, rule.paths()["south-pier"])
    Rule(need=1, children=('north-pier', 'light-house'))
    """
    return _needed(rule, places, ())


def _needed(rule: Rule, places: Collection[Path], path: Path) -> Rule | None:
    missing, left = rule.need, list[Rule | str]()
    for x, child in enumerate(rule.children, start=1):
        place = (*path, (rule.need, x))
        needed = _needed(child, places, place) if isinstance(child, Rule) else None if place in places else child
        if needed is None:
            missing -= 1
        else:
            left.append(needed)
    return Rule(missing, tuple(left)) if missing > 0 else None
