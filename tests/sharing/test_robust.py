"""Quorums against brute force, the search for a right one, and the naming of wrong points.

Checked against: every subset of the points, tried one by one (``strategies.all_quorums``); binomial coefficients of
the standard library; and the definition itself, a wrong point being one that was changed here.
"""

from __future__ import annotations

import hashlib
import itertools
import math
import time
from collections import Counter

import pytest
from hypothesis import assume, example, given
from hypothesis import strategies as st
from strategies import (
    all_quorums,
    copy_of,
    flat,
    inverse,
    moduli,
    octets,
    points_of,
    product,
    revealed,
    rules,
    thresholds,
)

from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing import robust
from shares.sharing.robust import agreeing, count_quorums, covering_quorums, quorums, search
from shares.sharing.rule import Path, Point, Rule, deal, recover_payload
from shares.sharing.shamir import evaluate

LENGTH = 24


@st.composite
def some_paths(draw: st.DrawFn) -> list[Path]:
    """Points of a rule, some left out, some given twice, and some that claim another rule at the same places."""
    paths = [path for _, path in draw(rules(most=7)).points()]
    paths += [path for _, path in draw(rules(depth=2, most=3)).points()] if draw(st.booleans()) else []
    paths = [path for path in paths if draw(st.integers(0, 5))]
    paths += draw(st.lists(st.sampled_from(paths), max_size=2)) if paths else []
    return draw(st.permutations(paths))


@given(some_paths())
def test_quorums_are_all_there_are_and_each_once(paths: list[Path]) -> None:
    found = [frozenset(quorum) for quorum in quorums(paths)]
    assert len(found) == len(set(found)) == count_quorums(paths)
    assert set(found) == all_quorums(paths)


@given(thresholds(most=60))
def test_a_flat_rule_has_as_many_quorums_as_there_are_combinations(size: tuple[int, int]) -> None:
    need, total = size
    assert count_quorums([((need, x),) for x in range(1, total + 1)]) == math.comb(total, need)


def test_quorums_of_a_large_rule_are_counted_at_once_and_come_one_by_one() -> None:
    paths = [((128, x),) for x in range(1, 256)]
    started = time.monotonic()
    assert count_quorums(paths) == math.comb(255, 128)
    few = list(itertools.islice(quorums(paths), 3))
    assert time.monotonic() - started < 5
    assert all(len(set(quorum)) == 128 for quorum in few)


@given(some_paths(), st.integers(1, 30))
def test_where_there_are_too_many_quorums_random_ones_are_taken(paths: list[Path], most: int) -> None:
    there = all_quorums(paths)
    taken = [frozenset(quorum) for quorum in quorums(paths, most=most)]
    assert set(taken) <= there
    assert len(taken) == min(most, len(there))


def test_random_quorums_are_spread_over_all_points() -> None:
    """Ten tries of 3-of-40 that began with the same two points would be no better than one."""
    paths = [((3, x),) for x in range(1, 41)]
    met = Counter(i for quorum in quorums(paths, most=400) for i in quorum)
    # A point is missed by one try with probability 37/40, by all 400 with (37/40)^400 < 3e-14, for any of 40: 2e-12.
    assert set(met) == set(range(40))
    # In order, the first point would stand in all 400. At random it stands in 30 on average, above 100 never (< 1e-20).
    assert max(met.values()) <= 100


def test_where_exactly_as_many_may_be_taken_as_there_are_all_are() -> None:
    paths = [((2, x),) for x in range(1, 8)]
    assert len(set(quorums(paths, most=21))) == 21


def test_every_quorum_can_come_up_at_random_whatever_stands_at_a_place() -> None:
    """A row and a group claim one place, and two thresholds one node; a quorum missed in 600 tries: below 1e-9."""
    paths = [((2, 1),), ((2, 1), (1, 1)), ((2, 1), (1, 2)), ((2, 2),), ((2, 3),), ((1, 5),), ((1, 6),)]
    met = {frozenset(quorum) for _ in range(100) for quorum in quorums(paths, most=6)}
    assert met == all_quorums(paths)


@given(some_paths())
@example([((3, 1),), ((3, 2),)])  # Too few for a quorum: what was yielded here used one point twice.
@example([((1, 1), (3, 2)), ((1, 2),)])  # A point without its neighbours beside one that suffices: a ValueError.
@example([((2, 1),), ((2, 1), (3, 2)), ((2, 2),)])  # The same at one place.
@example([((1, 1), (1, 1)), ((1, 1), (2, 5))])  # Two thresholds claimed for one group; one is met.
def test_covering_quorums_use_every_point_that_can_be_in_a_quorum(paths: list[Path]) -> None:
    there = all_quorums(paths)
    chosen = [frozenset(quorum) for quorum in covering_quorums(paths)]
    assert set(chosen) <= there
    assert frozenset().union(*chosen) == frozenset().union(*there)
    assert len(chosen) <= len(paths)


def test_no_points_have_no_quorum() -> None:
    assert count_quorums([]) == 0
    assert list(quorums([])) == list(covering_quorums([])) == []


# Search.


def bent(points: list[Point], bad: set[int], noise: bytes) -> list[Point]:
    """Copies of points, each bad one changed by noise of its own: never by zero, never on a common polynomial."""

    def row(i: int) -> Secret:
        changed = bytearray(revealed(points[i].row))
        if i in bad:
            pad = hashlib.shake_256(noise + bytes([i])).digest(len(changed))
            changed[:] = bytes(octet ^ (pad[t] | (t == 0)) for t, octet in enumerate(changed))
        return Secret.of(changed)

    return [Point(point.path, row(i)) for i, point in enumerate(points)]


@given(rules(most=7), moduli(), octets(LENGTH, LENGTH), octets(1, 4), st.data())
def test_search_finds_the_payload_exactly_when_a_good_quorum_is_there(rule, modulus, payload, noise, data) -> None:
    field = Field(modulus)
    points = points_of(deal(field, rule, Secret.of(payload)))
    bad = data.draw(st.sets(st.integers(0, len(points) - 1)))
    given_points = bent(points, bad, noise)
    found = search(field, given_points, lambda candidate: revealed(candidate) == payload)
    good_quorums = [quorum for quorum in all_quorums([point.path for point in points]) if not quorum & bad]
    if good_quorums:
        assert found is not None
        assert revealed(found[0]) == payload
    elif found is not None:
        # Wrong points can offset each other: then the payload is right all the same, and came from these points.
        assert revealed(recover_payload(field, [given_points[i] for i in found[1]])) == payload == revealed(found[0])


@pytest.mark.parametrize("wrong", range(4))
def test_search_corrects_as_many_wrong_points_as_leave_a_quorum(wrong: int) -> None:
    field, payload = Field(), bytes(range(LENGTH))
    points = points_of(deal(field, flat(4, 7), Secret.of(payload)))
    for bad in itertools.combinations(range(7), wrong):
        found = search(field, bent(points, set(bad), b"\x55"), lambda candidate: revealed(candidate) == payload)
        assert found is not None
        assert not set(found[1]) & set(bad)


def test_search_gives_up_after_the_tries_it_is_allowed() -> None:
    field = Field()
    points = points_of(deal(field, flat(4, 8), Secret.of(bytes(LENGTH))))
    tried = []
    assert search(field, points, lambda candidate: bool(tried.append(1)), most=20) is None
    assert len(tried) == 20


def tries(paths: list[Path], owners: list[int], most: int) -> list[frozenset[int]]:
    """The quorums that a search tries when nothing is right: each point's row tells which it is."""
    field = Field()
    points = [Point(path, Secret.of(bytes(int(i == t) for t in range(len(paths))))) for i, path in enumerate(paths)]
    met: list[frozenset[int]] = []

    def refuse(candidate: Secret) -> bool:
        met.append(frozenset(t for t, octet in enumerate(revealed(candidate)) if octet))
        return False

    assert search(field, points, refuse, owners=owners, most=most) is None
    return met


@given(some_paths(), st.data())
def test_where_not_too_many_quorums_are_there_every_one_is_tried_whoever_holds_the_points(paths, data) -> None:
    owners = [data.draw(st.integers(0, 3)) for _ in paths]
    there = all_quorums(paths)
    # Interpolation weights of different non-zero points are never zero: the payload names the quorum's points.
    assert set(tries(paths, owners, max(1, len(there)))) == there


def test_exactly_as_many_quorums_as_may_be_tried_are_all_tried_though_one_owner_holds_several_points() -> None:
    """Those tried first, without some owner, once took the place of the last ones."""
    paths: list[Path] = [((3, x),) for x in range(1, 9)]
    assert len(set(tries(paths, [0, 0, 1, 2, 3, 4, 5, 6], 56))) == 56


def found_among(wrong: int, bad_owners: int, right: int, most: int) -> bool:
    """Whether the payload is found among ``wrong`` points of some owners and ``right`` ones, each with its own.

    The right points stand last, where no search in order comes to them.
    """
    field, payload, total = Field(), bytes(range(LENGTH)), wrong + right
    points = points_of(deal(field, Rule(3, tuple(f"pier {i}" for i in range(total))), Secret.of(payload)))
    points = bent(points, set(range(wrong)), b"\1")
    owners = [i % bad_owners for i in range(wrong)] + list(range(bad_owners, bad_owners + right))
    found = search(field, points, lambda candidate: revealed(candidate) == payload, owners=owners, most=most)
    return found is not None and min(found[1]) >= wrong


@pytest.mark.parametrize("bad_owners", [1, 2])
def test_right_points_are_found_before_all_else_though_one_or_two_owners_bring_many_wrong_ones(bad_owners: int) -> None:
    """3 right points of 203: of 1.4 million quorums one is right, and no random one is tried here."""
    assert found_among(200, bad_owners, 3, most=0)


def test_right_points_are_found_though_three_owners_bring_many_wrong_ones() -> None:
    """5 right points of 245. Of 8 owners in random order the first three are right with probability 5/28; that this
    fails 100 times has probability (23/28)^100 < 3e-9. A random quorum of points is right once in 240,000."""
    assert found_among(240, 3, 5, most=200)


def test_right_points_are_found_though_every_owner_holds_a_wrong_one_too() -> None:
    """Half of 60 points are right, no two of one owner: a random pair is right with probability 435/1770, and that 500
    pairs are not has probability below 1e-60. Owners taken singly have no right pair."""
    field, payload = Field(), bytes(range(LENGTH))
    points = points_of(deal(field, Rule(2, tuple(f"pier {i}" for i in range(60))), Secret.of(payload)))
    points = bent(points, set(range(0, 60, 2)), b"\1")
    owners = [i // 2 for i in range(60)]
    found = search(field, points, lambda candidate: revealed(candidate) == payload, owners=owners, most=1000)
    assert found is not None
    assert all(i % 2 for i in found[1])


def test_a_search_stops_when_its_time_is_over(monkeypatch) -> None:
    field, tried = Field(), []
    points = points_of(deal(field, flat(4, 8), Secret.of(bytes(LENGTH))))
    monkeypatch.setattr(robust, "MAX_SECONDS", 0.0)
    assert search(field, points, lambda candidate: bool(tried.append(1))) is None
    assert len(tried) == 1


def test_hundreds_of_steps_on_every_level_do_not_exhaust_the_stack() -> None:
    paths: list[Path] = []
    above: Path = ()
    for _ in range(4):
        paths += [(*above, (250, x)) for x in range(2, 251)]
        above = (*above, (250, 1))
    assert len(next(quorums([*paths, above]))) == 997
    assert count_quorums([*paths, above]) == 1


def test_payloads_that_the_judge_refuses_are_wiped() -> None:
    field = Field()
    points = points_of(deal(field, flat(2, 4), Secret.of(bytes(LENGTH))))
    refused: list[Secret] = []
    assert search(field, points, lambda candidate: bool(refused.append(candidate))) is None
    assert len(refused) == 6
    for candidate in refused:
        with pytest.raises(ValueError, match="closed"):
            candidate.view()


# Agreement.


@given(thresholds(), moduli(), octets(LENGTH, LENGTH), octets(1, 4), st.data())
def test_where_the_good_are_clearly_more_exactly_the_bad_are_named(size, modulus, payload, noise, data) -> None:
    """Two polynomials of degree k - 1 with one payload meet in at most k - 2 other points, so another explanation holds
    at most k - 2 good points and all bad ones."""
    need, total = size
    field = Field(modulus)
    points = points_of(deal(field, flat(need, total), Secret.of(payload)))
    bad = data.draw(st.sets(st.integers(0, total - 1)))
    given_points = bent(points, bad, noise)
    good = set(range(total)) - bad
    assume(len(good) >= need and len(good) > len(bad) + max(need - 2, 0))
    quorum = data.draw(st.permutations(sorted(good)))[:need]
    said = agreeing(field, given_points, Secret.of(payload), tuple(quorum))
    assert said == (good, bad, set())


@pytest.mark.parametrize("first", [0, 24])
def test_a_bad_point_does_not_hide_among_many_quorums(first: int) -> None:
    """3-of-25 has 2,300 quorums, and a bad first point stands in the first 276 of them: it went unnamed once."""
    field, payload = Field(), bytes(range(LENGTH))
    names = tuple(f"pier {i}" for i in range(25))
    points = bent(points_of(deal(field, Rule(3, names), Secret.of(payload))), {first}, b"\1")
    said = agreeing(field, points, Secret.of(payload), (5, 6, 7))
    assert said == (set(range(25)) - {first}, {first}, set())


@pytest.mark.parametrize("inner", [False, True])
def test_the_one_right_quorum_among_many_counts_though_all_others_are_wrong(inner: bool) -> None:
    """Three right points of 25, 2,300 quorums: random ones would miss the right one nine times in ten."""
    field, payload = Field(), bytes(range(LENGTH))
    group = Rule(3, tuple(f"pier {i}" for i in range(25)))
    rule = Rule(1, (group, "registrar")) if inner else group
    for _ in range(5):
        points = bent(points_of(deal(field, rule, Secret.of(payload)))[:25], set(range(25)) - {3, 11, 20}, b"\1")
        said = agreeing(field, points, Secret.of(payload), (3, 11, 20))
        assert said == ({3, 11, 20}, set(range(25)) - {3, 11, 20}, set())


def offsetting(field: Field, points: list[Point]) -> list[Point]:
    """Change points 0 and 1 of a 3-of-n so that with point 2 they still give the payload."""
    weights = field.interpolation_weights([1, 2, 3])
    ratio = product(weights[0], inverse(weights[1], field.modulus), field.modulus)
    one = bytearray(revealed(points[0].row))
    two = bytearray(revealed(points[1].row))
    one[0] ^= 0x01
    two[0] ^= ratio
    return [Point(points[0].path, Secret.of(one)), Point(points[1].path, Secret.of(two)), *points[2:]]


@pytest.mark.parametrize("quorum", [(0, 1, 2), (2, 3, 4)])
def test_two_explanations_with_equally_many_points_name_nobody(quorum: tuple[int, ...]) -> None:
    """Shares 1, 2, 3 and shares 3, 4, 5 both give the payload: only share 3 lies on both dealings."""
    field, payload = Field(), bytes(range(LENGTH))
    points = offsetting(field, points_of(deal(field, flat(3, 5), Secret.of(payload))))
    assert revealed(recover_payload(field, points[:3])) == revealed(recover_payload(field, points[2:])) == payload
    said = agreeing(field, points, Secret.of(payload), quorum)
    assert said == ({2}, set(), {0, 1, 3, 4})


@pytest.mark.parametrize("quorum", [(0, 1, 2), (2, 3, 4), (3, 4, 5)])
def test_one_more_point_on_one_side_decides(quorum: tuple[int, ...]) -> None:
    field, payload = Field(), bytes(range(LENGTH))
    points = offsetting(field, points_of(deal(field, flat(3, 6), Secret.of(payload))))
    assert agreeing(field, points, Secret.of(payload), quorum) == ({2, 3, 4, 5}, {0, 1}, set())


def test_points_of_a_group_without_a_quorum_cannot_be_judged() -> None:
    field, payload = Field(), bytes(range(LENGTH))
    rule = Rule(1, (Rule(2, ("north-pier", "south-pier")), Rule(2, ("registrar", "light-house"))))
    points = points_of(deal(field, rule, Secret.of(payload)))[:3]
    assert agreeing(field, points, Secret.of(payload), (0, 1)) == ({0, 1}, set(), set())


def test_a_group_that_gives_something_else_is_torn_and_names_nobody() -> None:
    field, payload = Field(), bytes(range(LENGTH))
    rule = Rule(1, (Rule(2, ("north-pier", "south-pier")), Rule(2, ("registrar", "light-house"))))
    points = bent(points_of(deal(field, rule, Secret.of(payload))), {3}, b"\1")
    assert agreeing(field, points, Secret.of(payload), (0, 1)) == ({0, 1}, set(), {2, 3})


def test_a_point_that_claims_another_threshold_is_bad() -> None:
    field, payload = Field(), bytes(range(LENGTH))
    points = points_of(deal(field, flat(2, 4), Secret.of(payload)))
    points[3] = Point(((1, 4),), copy_of(points[3].row))
    assert agreeing(field, points, Secret.of(payload), (0, 1)) == ({0, 1, 2}, {3}, set())


@given(rules(most=8), moduli(), octets(LENGTH, LENGTH), st.data())
def test_in_a_tree_an_honest_dealing_is_never_doubted_and_one_bad_point_never_called_good(
    rule, modulus, payload, data
) -> None:
    field = Field(modulus)
    points = points_of(deal(field, rule, Secret.of(payload)))
    there = sorted(all_quorums([point.path for point in points]), key=sorted)
    assert agreeing(field, points, Secret.of(payload), tuple(there[0])) == (set(range(len(points))), set(), set())
    bad = data.draw(st.integers(0, len(points) - 1))
    good = [quorum for quorum in there if bad not in quorum]
    assume(good)
    said = agreeing(field, bent(points, {bad}, b"\1"), Secret.of(payload), tuple(data.draw(st.sampled_from(good))))
    assert bad in said.bad | said.torn
    assert said.bad <= {bad}


def test_other_explanations_are_looked_for_among_random_quorums_only_up_to_a_limit(monkeypatch) -> None:
    field, payload = Field(), bytes(range(LENGTH))
    points = bent(points_of(deal(field, flat(4, 8), Secret.of(payload))), {0}, b"\1")
    tried = []
    monkeypatch.setattr(robust, "_MAX_EXPLANATIONS", 5)
    monkeypatch.setattr(robust, "recover_payload", lambda *a, **k: tried.append(1) or recover_payload(*a, **k))
    agreeing(field, points, Secret.of(payload), (1, 2, 3, 4))
    assert 1 <= len(tried) <= 6


def test_evaluate_and_search_meet_at_the_payload_of_a_published_example() -> None:
    """D. McGrew, P. Patnala, A. Hoenes, draft-mcgrew-tss-03, sec. 9 (values from memory, self-consistent): 2-of-2, with
    the third share derived, one of the three wrong."""
    field, secret = Field(0x11B), bytes.fromhex("7465737400")
    slope = Secret.of(bytes.fromhex("cd9f749585"))
    rows = evaluate(field, [Secret.of(secret), slope], [1, 2, 3])
    assert [revealed(row).hex() for row in rows] == ["b9fa07e185", "f5409b4511", "38dfefd094"]
    points = bent([Point(((2, x),), row) for x, row in zip((1, 2, 3), rows, strict=True)], {1}, b"\1")
    found = search(field, points, lambda candidate: revealed(candidate) == secret)
    assert found is not None
    assert found[1] == (0, 2)
