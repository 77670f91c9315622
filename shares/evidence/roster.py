"""The roster: who rehearses with whom, so that over a cycle all who can need each other have recovered together.

Where a rule has few minimal quorums, each of them rehearses. Else every two custodians who stand in one minimal quorum
do, with few drills: a covering design. Each drill is a minimal quorum: with one less nothing is recovered, so that
everyone's share is put to use. Two who stand in no minimal quorum together never need each other, and do not have to
meet; whoever recovers alone rehearses alone.

For: ``drill``, which records what was rehearsed.
Source: W. H. Mills, R. C. Mullin, "Coverings and packings", 1992; J. Schonheim, "On coverings", Pacific J. Math. 14,
    1964 (the bound); the modules below for each construction.
May import: shares.errors, shares.planning.structure, shares.sharing.rule, .covering, .design, .gathering.
Secret: nothing. Public: nothing either: a roster tells who can recover, and is as confidential as the rule.
Does not: set dates, read or write drills, or find the fewest drills for sure: it says a bound beside their number.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Literal, TypeAlias

from shares.errors import ParameterError
from shares.evidence.covering import Chance, lower_bound, meet, partners, trimmed
from shares.evidence.design import Design, design, no_planes
from shares.evidence.gathering import Tree, members
from shares.planning.structure import MAX_LISTED, minimal_quorums
from shares.sharing.rule import Rule

Covers: TypeAlias = Literal["pairs", "quorums"]
Group: TypeAlias = tuple[str, ...]

FEW_QUORUMS = 12
"""Up to so many minimal quorums all of them rehearse: one a month for a year."""

_NAMED = 3
_OWN = "each minimal quorum is a drill of its own"


@dataclass(frozen=True, slots=True)
class Roster:
    """Who rehearses with whom.

    Attributes:
        covers: what is covered: all "pairs" who can need each other, or all minimal "quorums".
        drills: who rehearses together, each a minimal quorum. Without any one of them something of ``left`` is missed.
        bound: no roster for ``left`` has fewer drills.
        bound_by: where the bound is from, in words.
        method: how the drills were found, in words.
        cycle: the drills of a whole cycle, with nothing covered by past drills.
        cycle_bound: no whole cycle has fewer drills.
        covered: the pairs or quorums that past drills have covered; whoever recovers alone is a pair of one.
        left: the pairs or quorums that the drills cover.
        apart: pairs who stand in no minimal quorum together, and do not have to meet.
        notes: what else to know, in sentences.
    """

    covers: Covers
    drills: tuple[Group, ...]
    bound: int
    bound_by: str
    method: str
    cycle: int
    cycle_bound: int
    covered: tuple[Group, ...]
    left: tuple[Group, ...]
    apart: tuple[Group, ...]
    notes: tuple[str, ...]

    @property
    def shortest(self) -> bool:
        """Whether it is certain that no roster for ``left`` has fewer drills."""
        return len(self.drills) == self.bound


def roster(rule: Rule, past: Sequence[Collection[str]] = (), *, covers: Covers | None = None, seed: int = 0) -> Roster:
    """Say who should rehearse with whom, with as few drills as can be found in about a second.

    Args:
        rule: who can recover.
        past: who took part in each past drill of this cycle in which the secret, or its practice twin, was recovered.
            Any quorum counts, a minimal one or not, for all pairs or quorums in it; names that the rule does not know
            are left aside.
        covers: "pairs" or "quorums"; by default quorums where there are 12 at most, else pairs.
        seed: decides among equals. The same rule, past and seed give the same roster.

    Returns:
        The roster. One without past drills can be followed: with some of its drills in ``past`` the next has no more
        drills than are left of it.

    Raises:
        ParameterError: every quorum is asked for, and there are more than 40 or too many to tell.

    Source: Mills, Mullin 1992.

    >>> names = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock", "east-quay", "west-quay")
    >>> found = roster(Rule(3, names))
    >>> len(found.drills), found.bound, found.method
    (7, 7, 'the projective plane of order 2')
    >>> after = roster(Rule(3, names), past=found.drills[:2])
    >>> len(after.drills), len(after.covered), len(after.left)
    (5, 6, 15)
    """
    quorums = minimal_quorums(rule)
    held = [frozenset(company) for company in past if rule.satisfied_by(frozenset(company))]
    notes = []
    if len(held) < len(past):
        notes.append(f"{_counted(len(past) - len(held), 'past drill')} of no quorum of this rule: not counted.")
    if covers == "quorums" and not quorums.listed:
        raise ParameterError(
            f"this rule has {quorums.count} minimal quorums, and {MAX_LISTED} at most can be put on a roster",
            hint="let every pair rehearse",
        )
    if covers is None:
        covers = "quorums" if 1 <= len(quorums.listed) <= FEW_QUORUMS else "pairs"
    if covers == "quorums":
        return _of_quorums(quorums.listed, held, notes)
    return _of_pairs(rule, held, seed, notes)


def _of_quorums(quorums: Sequence[Group], held: Sequence[frozenset[str]], notes: Sequence[str]) -> Roster:
    left = tuple(quorum for quorum in quorums if not any(company.issuperset(quorum) for company in held))
    return Roster(
        covers="quorums",
        drills=left,
        bound=len(left),
        bound_by=_OWN,
        method="every minimal quorum",
        cycle=len(quorums),
        cycle_bound=len(quorums),
        covered=tuple(quorum for quorum in quorums if quorum not in left),
        left=left,
        apart=(),
        notes=tuple(notes),
    )


def _of_pairs(rule: Rule, held: Sequence[frozenset[str]], seed: int, notes: Sequence[str]) -> Roster:
    tree = Tree(rule)
    alone = [(name,) for name in rule.paths() if rule.satisfied_by({name})]
    alone_left = [one for one in alone if not any(company.issuperset(one) for company in held)]
    wanted, known = partners(tree, Chance(seed))
    whole = design(tree, wanted, seed=seed, known=known)
    left = list(wanted)
    for company in held:
        meet(left, sum(1 << number for number, name in enumerate(tree.names) if name in company))
    best = whole
    if left != wanted:
        # What remains of the whole is kept unless another design for the rest is really shorter.
        kept = Design(trimmed(whole.quorums, left), whole.method)
        best = min(kept, design(tree, left, seed=seed, known=known), key=lambda one: len(one.quorums))

    place = {name: number for number, name in enumerate(rule.paths())}

    def named(quorums: Iterable[int]) -> list[Group]:
        names = [[tree.names[number] for number in members(quorum)] for quorum in quorums]
        groups = [tuple(sorted(group, key=place.__getitem__)) for group in names]
        return sorted(groups, key=lambda group: [place[name] for name in group])

    covered = [others & ~left[number] for number, others in enumerate(wanted)]
    needed = sum(1 << number for number, others in enumerate(wanted) if others)
    apart = [needed & ~others & ~(1 << number) if others else 0 for number, others in enumerate(wanted)]
    pairs_apart = named(_pairs(apart))
    if not needed:  # Everyone recovers alone, or is never needed.
        bound_by, method = _OWN, "every minimal quorum"
    else:
        bound_by = "Schonheim 1964" if tree.flat else "Schonheim's argument at each node of the rule"
        method = best.method if tree.largest()[0] > 2 else "every pair is a quorum"
    idle = [name for number, name in enumerate(tree.names) if not wanted[number] and (name,) not in alone]
    return Roster(
        covers="pairs" if needed else "quorums",
        drills=(*alone_left, *named(best.quorums)),
        bound=lower_bound(tree, left) + len(alone_left),
        bound_by=bound_by,
        method=method,
        cycle=len(alone) + len(whole.quorums),
        cycle_bound=len(alone) + lower_bound(tree, wanted),
        covered=(*(one for one in alone if one not in alone_left), *named(_pairs(covered))),
        left=(*alone_left, *named(_pairs(left))),
        apart=tuple(pairs_apart),
        notes=(*notes, *no_planes(tree), *_notes_on_apart(tree, pairs_apart, idle)),
    )


def _pairs(sets: Sequence[int]) -> Iterator[int]:
    """Yield each pair once: two who are in each other's sets."""
    for number, others in enumerate(sets):
        for other in members(others >> number << number):
            yield 1 << number | 1 << other


def _notes_on_apart(tree: Tree, apart: Sequence[Group], idle: Sequence[str]) -> Iterator[str]:
    certain = not tree.tangled or tree.table is not None
    if idle:
        found = "" if certain else " that was found (there may be one, as some custodians stand in several branches)"
        yield f"{_listed(idle)}: in no minimal quorum{found}, so on no roster."
    if apart:
        pairs = f"{_listed([' and '.join(pair) for pair in apart])}: {_counted(len(apart), 'pair')}"
        if certain:
            yield f"{pairs} in no minimal quorum together, who never need each other and do not have to meet."
        else:
            yield (
                f"{pairs} for whom no quorum that needs both was found. There may be one, as some custodians stand in "
                f"several branches: let these pairs meet in a larger company."
            )


def _listed(things: Sequence[str]) -> str:
    """Say the first few of many.

    >>> _listed("abcde"), _listed("ab")
    ('a, b, c and 2 more', 'a, b')
    """
    more = f" and {len(things) - _NAMED} more" if len(things) > _NAMED else ""
    return ", ".join(things[:_NAMED]) + more


def _counted(count: int, what: str) -> str:
    return f"{count:,} {what}{'s' * (count != 1)}"
