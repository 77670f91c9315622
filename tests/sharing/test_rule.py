"""Rules as trees: who they authorise, what they deal, what the others learn.

Checked against: the rule followed by hand (``strategies.satisfies``) for every set of leaves; linear algebra over the
field, written here: what a set of points tells is the space spanned by its rows, as functions of what was drawn.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import (
    HARBOUR,
    copy_of,
    flat,
    inverse,
    moduli,
    octets,
    points_of,
    product,
    revealed,
    rules,
    satisfies,
    sets_of,
)

from shares.errors import NotEnoughSharesError, ParameterError, ShareError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing import rule as module
from shares.sharing.robust import count_quorums, quorums
from shares.sharing.rule import MAX_CHILDREN, MAX_DEPTH, MAX_POINTS, Point, Rule, deal, recover_payload

A, B, C, D, E = HARBOUR[:5]

SMALL_TREES = {
    "1 of 1": Rule(1, (A,)),
    "1 of 3": Rule(1, (A, B, C)),
    "2 of 3": Rule(2, (A, B, C)),
    "3 of 3": Rule(3, (A, B, C)),
    "3 of 5": Rule(3, (A, B, C, D, E)),
    "weight 2 of 3": Rule(3, (A, A, B, C)),
    "a chain": Rule(1, (Rule(1, (Rule(1, (A,)),)),)),
    "a group and one": Rule(2, (Rule(2, (A, B, C)), D)),
    "one or a group": Rule(1, (A, Rule(2, (B, C)))),
    "two of three groups": Rule(2, (Rule(2, (A, B)), Rule(1, (C, D)), Rule(2, (A, E)))),
    "a name inside and outside": Rule(2, (A, Rule(2, (A, B)), C)),
    "all of a group in a group": Rule(2, (A, Rule(2, (B, Rule(2, (C, D)))))),
    "weights in groups": Rule(2, (Rule(3, (A, A, B, C)), Rule(1, (D,)), E)),
}


def subsets(total: int) -> Iterator[tuple[int, ...]]:
    return itertools.chain.from_iterable(itertools.combinations(range(total), size) for size in range(total + 1))


def recover_from(field: Field, points: Sequence[Point]) -> Secret | None:
    """Recover from some quorum among the points, if there is one."""
    quorum = next(quorums([point.path for point in points]), None)
    return None if quorum is None else recover_payload(field, [points[i] for i in quorum])


@pytest.mark.parametrize("name", SMALL_TREES)
def test_exactly_the_authorised_sets_recover(name: str) -> None:
    rule, field, payload = SMALL_TREES[name], Field(), bytes(range(20))
    points = points_of(deal(field, rule, Secret.of(payload)))
    for chosen in subsets(len(points)):
        held = [points[i] for i in chosen]
        recovered = recover_from(field, held)
        if satisfies(rule, {point.path for point in held}):
            assert recovered is not None
            assert revealed(recovered) == payload
        else:
            assert recovered is None


@given(rules(), moduli(), octets(1, 6))
def test_every_quorum_of_any_rule_recovers(rule: Rule, modulus: int, payload: bytes) -> None:
    field = Field(modulus)
    points = points_of(deal(field, rule, Secret.of(payload)))
    for quorum in itertools.islice(quorums([point.path for point in points]), 40):
        held = [points[i] for i in quorum]
        assert revealed(recover_payload(field, held)) == payload
        assert satisfies(rule, {point.path for point in held})
        for left_out in range(len(held)):
            assert not satisfies(rule, {point.path for point in held[:left_out] + held[left_out + 1 :]})


# Secrecy, by rank.


class Space:
    """Vectors over the field, reduced step by step: says whether another one lies in what they span."""

    def __init__(self, modulus: int) -> None:
        self.modulus = modulus
        self.basis: dict[int, bytes] = {}

    def reduced(self, vector: bytes) -> bytes:
        for lead, known in sorted(self.basis.items()):
            if vector[lead]:
                factor = vector[lead]
                vector = bytes(v ^ product(factor, w, self.modulus) for v, w in zip(vector, known, strict=True))
        return vector

    def add(self, vector: bytes) -> None:
        vector = self.reduced(vector)
        lead = next((i for i, v in enumerate(vector) if v), None)
        if lead is not None:
            factor = inverse(vector[lead], self.modulus)
            self.basis[lead] = bytes(product(factor, v, self.modulus) for v in vector)

    def __contains__(self, vector: bytes) -> bool:
        return not any(self.reduced(vector))


def symbolic(field: Field, rule: Rule, monkeypatch: pytest.MonkeyPatch) -> tuple[bytes, dict, list[list[bytes]]]:
    """Deal with unit vectors in place of the payload and of every coefficient that is drawn.

    The package works on rows byte by byte. So where variable number v is a row that is 1 at place v and 0 elsewhere,
    every row that comes out is the vector of factors with which the variables enter it: dealing is linear.

    Returns:
        The payload's vector, each path's vector, and the vectors of each node's coefficients.
    """
    size = 1 + sum(node.need - 1 for _, node in rule.nodes())
    units = iter(bytes(int(place == v) for place in range(size)) for v in range(size))

    def unit_polynomial(field: Field, payload: Secret, need: int, *, place: bytes) -> list[Secret]:
        return [payload, *(Secret.of(next(units)) for _ in range(need - 1))]

    monkeypatch.setattr(module, "random_polynomial", unit_polynomial)
    payload = next(units)
    dealing = deal(field, rule, Secret.of(payload))
    assert next(units, None) is None
    rows = {point.path: revealed(point.row) for point in points_of(dealing)}
    return payload, rows, [[revealed(f) for f in polynomial] for polynomial in dealing.polynomials]


@pytest.mark.parametrize("name", SMALL_TREES)
def test_an_unauthorised_set_learns_nothing_about_the_payload(name: str, monkeypatch) -> None:
    """Nothing: the payload is no combination of what the set knows, so every payload fits it equally often."""
    rule, field = SMALL_TREES[name], Field()
    payload, rows, _ = symbolic(field, rule, monkeypatch)
    for chosen in subsets(len(rows)):
        held = [list(rows)[i] for i in chosen]
        known = Space(field.modulus)
        for path in held:
            known.add(rows[path])
        assert (payload in known) == satisfies(rule, set(held))


@pytest.mark.parametrize("name", SMALL_TREES)
def test_the_public_checks_do_not_help_an_unauthorised_set(name: str, monkeypatch) -> None:
    """One message byte and one mask byte, with every non-zero factor R in turn standing in for the matrix.

    The record holds R * f_j[message] + f_j[mask] for every coefficient f_j of every node; message and mask are shared
    with coefficients of their own, so the variables double.
    """
    rule, field = SMALL_TREES[name], Field()
    payload, rows, polynomials = symbolic(field, rule, monkeypatch)
    none = bytes(len(payload))
    for factor in (0x01, 0x02, 0x53, 0xFF):
        checks = [
            bytes(product(factor, v) for v in coefficient) + coefficient
            for polynomial in polynomials
            for coefficient in polynomial
        ]
        for chosen in subsets(len(rows)):
            held = [list(rows)[i] for i in chosen]
            known = Space(field.modulus)
            for vector in checks:
                known.add(vector)
            for path in held:
                known.add(rows[path] + none)
                known.add(none + rows[path])
            assert (payload + none in known) == satisfies(rule, set(held))


def test_the_rank_test_sees_checks_without_a_mask(monkeypatch) -> None:
    """Without the mask the root's check gives the payload away: the test above must not pass then."""
    payload, _, polynomials = symbolic(Field(), flat(2, 3), monkeypatch)
    known = Space(0x11B)
    for coefficient in polynomials[0]:
        known.add(bytes(product(0x53, v) for v in coefficient))
    assert payload in known


# What a rule is.


@given(rules())
def test_the_parts_of_a_rule_agree(rule: Rule) -> None:
    nodes, points = list(rule.nodes()), list(rule.points())
    assert rule.size == len(points) == sum(len(paths) for paths in rule.paths().values())
    assert rule.depth == 1 + max(len(path) for path, _ in nodes) == max(len(path) for _, path in points)
    assert len({path for path, _ in nodes}) == len(nodes)
    assert len({path for _, path in points}) == len(points)
    assert list(rule.paths()) == list(dict.fromkeys(name for name, _ in points))
    # Parents before children, from left to right: the order of the x met on the way down.
    assert [path for path, _ in nodes] == sorted((path for path, _ in nodes), key=lambda path: [x for _, x in path])
    assert [path for _, path in points] == sorted((path for _, path in points), key=lambda path: [x for _, x in path])
    assert count_quorums([path for _, path in points]) >= 1


def test_weight_is_a_name_that_stands_several_times() -> None:
    rule = Rule(2, (A, B, A))
    assert rule.paths() == {A: (((2, 1),), ((2, 3),)), B: (((2, 2),),)}


@pytest.mark.parametrize(
    ("rule", "words"),
    [
        (Rule(1, (A,)), "north-pier"),
        (Rule(2, (A, B)), "both of north-pier, south-pier"),
        (Rule(3, (A, B, C)), "all 3 of north-pier, south-pier, light-house"),
        (Rule(1, (A, B)), "any 1 of north-pier, south-pier"),
        (Rule(2, (A, B, C)), "any 2 of north-pier, south-pier, light-house"),
        (Rule(2, (Rule(2, (A, B, C)), D)), "any 2 of north-pier, south-pier, light-house; and registrar"),
        (Rule(1, (D, Rule(2, (A, B)))), "registrar; or both of north-pier, south-pier"),
        (
            Rule(2, (Rule(2, (A, B, C)), Rule(1, (D, Rule(2, (E, "wharf")))))),
            "any 2 of north-pier, south-pier, light-house; and (registrar; or both of dry-dock, wharf)",
        ),
        (
            Rule(1, (Rule(2, (Rule(1, (A, B)), C)), D)),
            "(any 1 of north-pier, south-pier; and light-house); or registrar",
        ),
        (
            Rule(2, (Rule(2, (A, B)), Rule(2, (C, D)), E)),
            "any 2 of (both of north-pier, south-pier), (both of light-house, registrar), dry-dock",
        ),
        (Rule(1, (Rule(1, (Rule(2, (A, B, C)),)),)), "any 2 of north-pier, south-pier, light-house"),
        (Rule(3, (A, A, B, C)), "any 3 of north-pier (weight 2), south-pier, light-house"),
        (Rule(3, (A, A, B)), "both of north-pier, south-pier"),
        (Rule(1, (A, A, B)), "any 1 of north-pier, south-pier"),
        (Rule(2, (A, A)), "north-pier"),
        (Rule(2, (A, A, A)), "any 2 of north-pier (weight 3)"),
        (
            Rule(2, (Rule(2, (A, B)), Rule(2, (A, B)), C)),
            "any 2 of (both of north-pier, south-pier) (weight 2), light-house",
        ),
    ],
)
def test_a_rule_in_words(rule: Rule, words: str) -> None:
    assert rule.words() == words


@given(rules(), st.data())
def test_words_name_everyone_and_say_different_things_of_different_rules(rule: Rule, data: st.DataObject) -> None:
    words = rule.words()
    assert all(name in words for name in rule.paths())
    assert words.count("(") == words.count(")")
    other = data.draw(rules())
    if words == other.words():
        for held in sets_of([*rule.paths(), *other.paths()]):
            assert rule.satisfied_by(held) == other.satisfied_by(held)


@given(rules())
def test_a_rule_is_satisfied_by_exactly_the_authorised_sets(rule: Rule) -> None:
    for held in sets_of(rule.paths()):
        assert rule.satisfied_by(held) == satisfies(rule, {path for name in held for path in rule.paths()[name]})
        assert rule.satisfied_by([*held, "wharf"]) == rule.satisfied_by(held)


@pytest.mark.parametrize("need", [0, -1, 4])
def test_a_threshold_out_of_range_is_refused(need: int) -> None:
    with pytest.raises(ParameterError, match="threshold"):
        Rule(need, (A, B, C))


def test_as_many_children_levels_and_places_as_the_format_allows_and_no_more() -> None:
    wide = tuple(f"pier {i}" for i in range(MAX_CHILDREN))
    assert Rule(1, wide).size == 255
    with pytest.raises(ParameterError, match="1 to 255"):
        Rule(1, (*wide, "one more"))
    with pytest.raises(ParameterError, match="1 to 255"):
        Rule(1, ())
    deep = Rule(1, (A,))
    for _ in range(MAX_DEPTH - 1):
        deep = Rule(1, (deep,))
    with pytest.raises(ParameterError, match="8 groups deep"):
        Rule(1, (deep,))
    many = Rule(1, (Rule(1, wide[:250]),) * 4)
    assert many.size == MAX_POINTS == 1000
    with pytest.raises(ParameterError, match="1000 places"):
        Rule(1, (many, A))


# Dealing and recovery.


def test_a_dealing_wipes_its_coefficients_and_keeps_its_points() -> None:
    field = Field()
    dealing = deal(field, SMALL_TREES["two of three groups"], Secret.of(bytes(16)))
    dealing.close_polynomials()
    for polynomial in dealing.polynomials:
        for coefficient in polynomial:
            with pytest.raises(ValueError, match="closed"):
                coefficient.view()
    recovered = recover_from(field, points_of(dealing))
    assert recovered is not None
    assert revealed(recovered) == bytes(16)


def test_a_dealing_shows_nothing() -> None:
    dealing = deal(Field(), flat(2, 3), Secret.of(b"canary canary canary"))
    assert "canary" not in repr(dealing)
    assert "object at" in repr(dealing)
    assert dealing != deal(Field(), flat(2, 3), Secret.of(b"canary canary canary"))


def test_points_that_are_no_quorum_are_refused() -> None:
    field = Field()
    points = points_of(deal(field, SMALL_TREES["a group and one"], Secret.of(bytes(16))))
    with pytest.raises(NotEnoughSharesError, match="2 points are needed, 1 given"):
        recover_payload(field, points[:2])
    with pytest.raises(NotEnoughSharesError):
        recover_payload(field, [points[0], points[3]])
    with pytest.raises(ShareError, match="do not agree how many"):
        recover_payload(field, [points[3], Point(((3, 1),), copy_of(points[0].row))])
    with pytest.raises(ShareError, match="do not agree how many"):
        recover_payload(field, [])
    with pytest.raises(ShareError, match="same place"):
        recover_payload(field, [points[3], points[3], points[0], points[1]])
    with pytest.raises(ShareError, match="same place"):
        recover_payload(field, [Point(((2, 1),), copy_of(points[0].row)), *points])
