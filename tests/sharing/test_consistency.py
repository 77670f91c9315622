"""The public check: honest dealings pass, each crooked one is caught by a custodian it wrongs, and nothing leaks.

Checked against: FORMAT.md, section 6, with ``hashlib`` and schoolbook products; counting over a subfield of 4 elements,
where every dealing can be enumerated.
"""

from __future__ import annotations

import hashlib
import itertools
from collections import Counter

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import MODULI, copy_of, flat, inverse, moduli, octets, points_of, product, revealed, rules

from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing import consistency
from shares.sharing.consistency import CHECK_LENGTH, check, check_matrix, checks_of, expected, inconsistent_nodes
from shares.sharing.rule import Dealing, Path, Rule, deal
from shares.sharing.shamir import evaluate

SET, LENGTH = bytes(range(16)), 60
TREE = Rule(2, (Rule(2, ("north-pier", "south-pier", "light-house")), "registrar", Rule(1, ("dry-dock", "registrar"))))


def commitments(dealing: Dealing) -> list[bytes]:
    """Stand-ins for the share commitments: anything that fixes every row before R is known."""
    return [
        hashlib.sha256(b"".join(revealed(point.row) for point in points)).digest() for points in dealing.points.values()
    ]


def matrix_of(field: Field, dealing: Dealing, length: int = LENGTH) -> bytes:
    return check_matrix(SET, 1, field, commitments(dealing), length)


def accepting(field: Field, rule: Rule, dealing: Dealing, matrix: bytes, checks: list[tuple[bytes, ...]]) -> set[Path]:
    """The paths whose holders accept their rows."""
    of_node = dict(zip((path for path, _ in rule.nodes()), checks, strict=True))
    return {
        point.path
        for point in points_of(dealing)
        if check(field, matrix, point.row) == expected(field, of_node[point.path[:-1]], point.path[-1][1])
    }


def honest(field: Field, rule: Rule, payload: bytes) -> tuple[Dealing, bytes, list[tuple[bytes, ...]]]:
    dealing = deal(field, rule, Secret.of(payload))
    matrix = matrix_of(field, dealing, len(payload))
    return dealing, matrix, [checks_of(field, matrix, polynomial) for polynomial in dealing.polynomials]


def all_paths(dealing: Dealing) -> set[Path]:
    return {point.path for point in points_of(dealing)}


# The definition.


@given(moduli(), octets(17, 40), st.integers(1, 2**32 - 1), st.lists(st.binary(min_size=32, max_size=32), max_size=4))
def test_matrix_and_check_are_what_the_format_says(modulus, row, epoch, committed) -> None:
    field, wide = Field(modulus), len(row) - 16
    matrix = check_matrix(SET, epoch, field, committed, len(row))
    start = b"shares/v1/check" + SET + epoch.to_bytes(4, "big") + modulus.to_bytes(2, "big")
    assert matrix == hashlib.shake_256(start + b"".join(committed)).digest(16 * wide)
    value = bytearray(row[wide:])
    for i in range(16):
        for j in range(wide):
            value[i] ^= product(matrix[i * wide + j], row[j], modulus)
    assert check(field, matrix, Secret.of(row)) == value


def test_the_matrix_depends_on_everything_that_is_fixed_before_it() -> None:
    field, committed = Field(), [bytes(32), b"\1" * 32]
    base = check_matrix(SET, 1, field, committed, LENGTH)
    others = [
        check_matrix(SET[::-1], 1, field, committed, LENGTH),
        check_matrix(SET, 2, field, committed, LENGTH),
        check_matrix(SET, 1, Field(0x11D), committed, LENGTH),
        check_matrix(SET, 1, field, committed[::-1], LENGTH),
        check_matrix(SET, 1, field, committed[:1], LENGTH),
        check_matrix(SET, 1, field, [committed[0], b"\2" + committed[1][1:]], LENGTH),
    ]
    assert len({base, *others}) == 1 + len(others)


@given(moduli(), st.lists(octets(16, 16), min_size=1, max_size=5), st.integers(1, 255))
def test_what_a_row_must_check_to_is_the_polynomial_of_the_checks(modulus, checks, x) -> None:
    value = bytes(16)
    for c in reversed(checks):
        value = bytes(product(v, x, modulus) ^ octet for v, octet in zip(value, c, strict=True))
    assert expected(Field(modulus), checks, x) == value


# Honest dealings.


@given(rules(), moduli(), octets(17, 60))
def test_an_honest_dealing_is_accepted_by_everyone(rule: Rule, modulus: int, payload: bytes) -> None:
    field = Field(modulus)
    dealing, matrix, checks = honest(field, rule, payload)
    assert accepting(field, rule, dealing, matrix, checks) == all_paths(dealing)
    assert inconsistent_nodes(field, rule, checks) == []


# Crooked dealings. A wrong row passes with probability 2^-128, so these tests do not fail by chance.


@pytest.mark.parametrize("modulus", MODULI)
@pytest.mark.parametrize("octet", [0, 20, LENGTH - 17, LENGTH - 16, LENGTH - 1])
def test_a_row_off_the_polynomial_is_refused_by_its_holder_alone(modulus: int, octet: int) -> None:
    field = Field(modulus)
    for wrong in range(6):
        dealing = deal(field, TREE, Secret.of(bytes(range(LENGTH))))
        point = points_of(dealing)[wrong]
        with point.row.view() as row:
            row[octet] ^= 0x80
        matrix = matrix_of(field, dealing)
        checks = [checks_of(field, matrix, polynomial) for polynomial in dealing.polynomials]
        assert accepting(field, TREE, dealing, matrix, checks) == all_paths(dealing) - {point.path}


def test_a_raised_degree_is_refused_by_everyone_below_the_node() -> None:
    """One more coefficient than the threshold says: any three would still agree, any two would not recover."""
    field, rule = Field(), flat(2, 5)
    dealing = deal(field, rule, Secret.of(bytes(range(LENGTH))))
    [polynomial] = dealing.polynomials
    raised = [*polynomial, Secret.of(bytes(range(1, LENGTH + 1)))]
    for points, row in zip(dealing.points.values(), evaluate(field, raised, range(1, 6)), strict=True):
        points[0] = points[0]._replace(row=row)
    matrix = matrix_of(field, dealing)
    checks = [checks_of(field, matrix, polynomial)]
    assert accepting(field, rule, dealing, matrix, checks) == set()
    # Whichever two c_0 and c_1 the dealer writes instead, at most two custodians can be satisfied: three points of a
    # parabola are on no line. Here the line through the first two.
    rows = [check(field, matrix, points[0].row) for points in dealing.points.values()]
    slope = bytes(product(inverse(1 ^ 2), a ^ b) for a, b in zip(rows[0], rows[1], strict=True))
    fitted = [(bytes(a ^ b for a, b in zip(rows[0], slope, strict=True)), slope)]
    assert accepting(field, rule, dealing, matrix, fitted) == {((2, 1),), ((2, 2),)}


def test_a_wrong_check_is_refused_by_everyone_whose_row_it_touches() -> None:
    field = Field()
    dealing, matrix, checks = honest(field, TREE, bytes(range(LENGTH)))
    for node, (path, _) in enumerate(TREE.nodes()):
        for j in range(len(checks[node])):
            bent = [list(of_node) for of_node in checks]
            bent[node][j] = bytes([bent[node][j][0] ^ 1]) + bent[node][j][1:]
            crooked = [tuple(of_node) for of_node in bent]
            below = {place for place in all_paths(dealing) if place[:-1] == path}
            assert accepting(field, TREE, dealing, matrix, crooked) == all_paths(dealing) - below
            # A reader of the record sees it too, unless the node has neither parent nor child nodes that fix it.
            assert (path in inconsistent_nodes(field, TREE, crooked)) == (j == 0 and path != ())
            if path == ():
                assert inconsistent_nodes(field, TREE, crooked) == [((2, 1),), ((2, 3),)]


def test_a_node_with_too_few_or_too_many_checks_contradicts_the_rule() -> None:
    field = Field()
    _, _, checks = honest(field, TREE, bytes(range(LENGTH)))
    assert inconsistent_nodes(field, TREE, [checks[0], checks[1][:1], checks[2]]) == [((2, 1),)]
    assert inconsistent_nodes(field, TREE, [checks[0], checks[1], (*checks[2], bytes(16))]) == [((2, 3),)]


def fitting(field: Field, matrix: bytes, length: int) -> bytes:
    """A change of a row that the check by this matrix does not see: d with R d[:L-16] + d[L-16:] = 0."""
    change = bytes([0x35]) + bytes(length - 17)
    return change + check(field, matrix, Secret.of(change + bytes(16)))


def test_rows_fitted_to_the_matrix_pass_it_which_is_why_commitments_come_first() -> None:
    """A dealer who knows R bends a row unseen. But the row is in a commitment, the commitments are in R: R is another
    then, and the row is caught. Against the old R, kept after the fact, everyone would be fooled."""
    field, rule = Field(), flat(2, 3)
    dealing, matrix, checks = honest(field, rule, bytes(range(LENGTH)))
    change = fitting(field, matrix, LENGTH)
    victim = dealing.points["south-pier"][0]
    with victim.row.view() as row:
        for t, octet in enumerate(change):
            row[t] ^= octet
    assert accepting(field, rule, dealing, matrix, checks) == all_paths(dealing)
    recomputed = matrix_of(field, dealing)
    assert recomputed != matrix
    rechecked = [checks_of(field, recomputed, polynomial) for polynomial in dealing.polynomials]
    assert accepting(field, rule, dealing, recomputed, rechecked) == all_paths(dealing) - {victim.path}
    assert accepting(field, rule, dealing, recomputed, checks) == set()


# Secrecy, by counting.


@pytest.mark.parametrize("need", [2, 3])
def test_k_minus_1_shares_and_all_checks_fit_every_message_equally_often(need: int, monkeypatch) -> None:
    """One message symbol and one mask symbol with a check of one symbol, over the subfield of 4 elements: every
    polynomial of message and mask is enumerated, through the package's own evaluation and check."""
    monkeypatch.setattr(consistency, "CHECK_LENGTH", 1)
    field = Field()
    few = bytes(a for a in range(256) if field.power(a, 4) == a)
    xs = few[1:]
    matrix = few[2:3]
    met: dict[tuple[int, ...], Counter] = {}
    for symbols in itertools.product(few, repeat=2 * need):
        polynomial = [Secret.of(bytes(symbols[2 * j : 2 * j + 2])) for j in range(need)]
        checks = checks_of(field, matrix, polynomial)
        rows = [revealed(row) for row in evaluate(field, polynomial, xs)]
        for known in itertools.combinations(range(len(xs)), need - 1):
            view = (*known, *(rows[i] for i in known), *checks)
            met.setdefault(view, Counter())[symbols[0]] += 1
    assert all(set(counts) == set(few) and len(set(counts.values())) == 1 for counts in met.values())


def test_k_shares_do_fit_one_message_only(monkeypatch) -> None:
    """The count above would see a leak: with k shares each view fits one message alone, and so without the mask."""
    monkeypatch.setattr(consistency, "CHECK_LENGTH", 1)
    field = Field()
    few = bytes(a for a in range(256) if field.power(a, 4) == a)
    shares: dict[tuple[int, ...], set[int]] = {}
    unmasked: dict[tuple[int, ...], set[int]] = {}
    for symbols in itertools.product(few, repeat=4):
        polynomial = [Secret.of(bytes(symbols[:2])), Secret.of(bytes(symbols[2:]))]
        rows = [revealed(row) for row in evaluate(field, polynomial, few[1:3])]
        shares.setdefault(tuple(rows), set()).add(symbols[0])
        open_checks = checks_of(field, few[2:3], [Secret.of(bytes([s, 0])) for s in symbols[::2]])
        unmasked.setdefault((rows[0], *open_checks), set()).add(symbols[0])
    assert all(len(messages) == 1 for messages in shares.values())
    assert all(len(messages) == 1 for messages in unmasked.values())


def test_the_check_of_a_row_is_uniform_whatever_the_row_holds() -> None:
    """The mask is a one-time pad: 256 masks give 256 checks in each place, for a row of zeros as for any other."""
    field = Field()
    matrix = check_matrix(SET, 1, field, [bytes(32)], 17)
    for octet in (0x00, 0x5A, 0xFF):
        met = [check(field, matrix, Secret.of(bytes([octet]) + bytes([mask]) * 16)) for mask in range(256)]
        for place in range(CHECK_LENGTH):
            assert len({value[place] for value in met}) == 256


def test_checking_does_not_change_the_row() -> None:
    field, row = Field(), Secret.of(bytes(range(LENGTH)))
    before = copy_of(row)
    check(field, check_matrix(SET, 1, field, [], LENGTH), row)
    assert row == before
