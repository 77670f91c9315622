"""Who has known what: what shares determine one another, and what the events of a journal lay open to whom.

Checked against: linear algebra over GF(2^8), written here with the schoolbook product of strategies.py: a row is known
exactly when its coefficients are in the span of those of the rows that are held.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path as FilePath

import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from kept import NAMES, PEOPLE, Kept, day, policy_text
from strategies import inverse, product, rules, sets_of

from shares.documents.event import (
    Attested,
    Departed,
    Event,
    HandedOn,
    Incident,
    Lost,
    Recovered,
    Resolved,
    Transcribed,
)
from shares.evidence.audited import Known
from shares.evidence.exposure import UNKNOWN, exposed_by, exposure
from shares.evidence.life import Life
from shares.sharing.rule import Path, Rule


def functionals(rule: Rule) -> dict[Path, list[int]]:
    """Each leaf's row as coefficients over the dealing's free choices: the payload, and k - 1 for each node."""
    size = 1 + sum(node.need - 1 for _, node in rule.nodes())
    used = 1
    found: dict[Path, list[int]] = {}

    def deal(node: Rule, value: list[int], path: Path) -> None:
        nonlocal used
        own = [value]
        for _ in range(node.need - 1):
            own.append([1 if i == used else 0 for i in range(size)])
            used += 1
        for x, child in enumerate(node.children, start=1):
            row, power = [0] * size, 1
            for coefficient in own:
                row = [a ^ product(power, b) for a, b in zip(row, coefficient, strict=True)]
                power = product(power, x)
            place = (*path, (node.need, x))
            if isinstance(child, Rule):
                deal(child, row, place)
            else:
                found[place] = row

    deal(rule, [1] + [0] * (size - 1), ())
    return found


def rank(rows: Sequence[Sequence[int]]) -> int:
    """Rank by elimination."""
    left, count = [list(row) for row in rows], 0
    for column in range(len(left[0]) if left else 0):
        pivot = next((row for row in left if row[column]), None)
        if pivot is None:
            continue
        left.remove(pivot)
        count += 1
        scale = inverse(pivot[column])
        for row in left:
            factor = product(row[column], scale)
            row[:] = [a ^ product(factor, b) for a, b in zip(row, pivot, strict=True)]
    return count


@given(rules(most=8), st.data())
@example(Rule(2, ("a", "b", Rule(2, ("c", "d")))), None)
@example(Rule(3, ("a", Rule(1, ("b", "c")), Rule(2, ("b", "d")))), None)
def test_exposed_is_exactly_what_linear_algebra_says(rule: Rule, data: st.DataObject | None) -> None:
    known = functionals(rule)
    tried = sets_of(known) if data is None else [data.draw(st.frozensets(st.sampled_from(sorted(known))))]
    for held in tried:
        rows = [known[path] for path in held]
        of_held = rank(rows)
        spanned = {path for path, row in known.items() if rank([*rows, row]) == of_held}
        assert exposed_by(rule, held) == spanned


def test_a_group_never_asked_is_laid_open_by_the_node_above() -> None:
    """The root is known from two shares, hence the group's own value; with one share of the group, the other too."""
    rule = Rule(2, ("a", "b", Rule(2, ("c", "d"))))
    paths = rule.paths()
    assert exposed_by(rule, [*paths["a"], *paths["b"]]) == {*paths["a"], *paths["b"]}
    assert exposed_by(rule, [*paths["a"], *paths["b"], *paths["c"]]) == {path for own in paths.values() for path in own}


@pytest.fixture
def kept(tmp_path: FilePath) -> Kept:
    return Kept.make(tmp_path / "set", policy_text())


def known(kept: Kept, who: str = "keeper one") -> Known:
    """What somebody has known, after all that the journal tells."""
    (row,) = (row for row in exposure(life(kept)) if row.who == who)
    return row


def life(kept: Kept) -> Life:
    return Life.until(day(400), kept.record, kept.set.policy, kept.set.journal().entries)


def test_at_the_split_each_knows_their_own_and_the_dealer_all(kept: Kept) -> None:
    rows = exposure(life(kept))
    assert {row.who: row.shares for row in rows if row.kind == "person"} == {PEOPLE[name]: (name,) for name in NAMES}
    assert all(
        row.missing == (2, 2) and row.suffices is False and not row.recovered for row in rows if row.kind == "person"
    )
    (dealer,) = (row for row in rows if row.kind == "dealer")
    assert (dealer.shares, dealer.suffices) == (NAMES, True)


SEEN: list[tuple[Event, str, tuple[str, ...]]] = [
    (
        Transcribed(what="transcribed", custodian="dry-dock", persons=("Keeper  ONE",)),
        "keeper one",
        ("north-pier", "dry-dock"),
    ),
    (Transcribed(what="transcribed", custodian="dry-dock", persons=()), "keeper five", ("dry-dock",)),
    (HandedOn(what="handed-on", custodian="dry-dock", to="keeper six"), "keeper six", ("dry-dock",)),
    (HandedOn(what="handed-on", custodian="dry-dock", to="keeper one"), "keeper five", ("dry-dock",)),
    (
        Incident(what="incident", custodians=("registrar",), persons=(), exposed=True, due=day(9), remark="a lost bag"),
        UNKNOWN,
        ("registrar",),
    ),
    (
        Incident(
            what="incident",
            custodians=("registrar", "dry-dock"),
            persons=("keeper one",),
            exposed=True,
            due=day(9),
            remark="an open safe",
        ),
        "keeper one",
        # Three of five were seen: they make a quorum, and determine the others.
        NAMES,
    ),
    (
        Lost(what="lost", custodian="registrar", copy="original", by="keeper four", witness="keeper one", reason="?"),
        UNKNOWN,
        ("registrar",),
    ),
    (
        Attested(
            what="attested",
            challenge=bytes(32),
            custodian="dry-dock",
            grade="content",
            result="intact",
            attributed=True,
            late=False,
            opened=True,
        ),
        "keeper five",
        ("dry-dock",),
    ),
]


@pytest.mark.parametrize(("event", "who", "shares"), SEEN)
def test_what_an_event_lays_open(kept: Kept, event: Event, who: str, shares: tuple[str, ...]) -> None:
    kept.append(event, day(5))
    row = known(kept, who)
    assert row.shares == shares
    assert "entry 2" in " ".join(row.how) or isinstance(event, HandedOn)
    assert row.suffices == (len(shares) >= 3)


def test_after_handing_on_the_new_holder_is_who_opens(kept: Kept) -> None:
    kept.append(HandedOn(what="handed-on", custodian="dry-dock", to="keeper six"), day(1))
    kept.append(Transcribed(what="transcribed", custodian="dry-dock", persons=()), day(2))
    assert "entry 3" in known(kept, "keeper six").how[-1]
    assert len(known(kept, "keeper five").how) == 1


def test_an_incident_that_turned_out_harmless_lays_nothing_open(kept: Kept) -> None:
    incident = Incident(
        what="incident", custodians=("registrar",), persons=("keeper one",), exposed=True, due=day(9), remark="?"
    )
    number = kept.append(incident, day(5)).sequence
    assert known(kept).shares == ("north-pier", "registrar")
    kept.append(Resolved(what="resolved", entry=number, how="no exposure"), day(6))
    assert known(kept).shares == ("north-pier",)


def test_a_recovery_is_told_apart_and_a_practice_lays_nothing_open(kept: Kept) -> None:
    kept.drill("practice", day(5), NAMES[:3])
    assert not known(kept).recoveries
    kept.drill("recovery", day(6), NAMES[:3])
    event = Recovered(
        what="recovered",
        custodians=NAMES[2:],
        persons=("keeper five",),
        reason="the archive burnt",
        disposition="destroyed",
    )
    kept.append(event, day(8))
    row = known(kept)
    assert (row.shares, row.suffices, row.missing, row.recovered) == (("north-pier",), False, (2, 2), True)
    assert len(row.recoveries) == 1
    assert known(kept, "keeper four").recovered is False
    assert known(kept, "keeper five").recovered is True
    (machine,) = (row for row in exposure(life(kept)) if row.kind == "machine")
    assert (machine.shares, len(machine.recoveries)) == (NAMES, 2)


def test_who_has_left_still_knows(kept: Kept) -> None:
    kept.append(Departed(what="departed", person="KEEPER two", custodians=("south-pier",), due=day(6)), day(5))
    row = known(kept, "keeper two")
    assert (row.shares, row.left) == (("south-pier",), day(5))
    assert known(kept).left is None


def test_without_policy_custodians_stand_for_their_persons(tmp_path: FilePath) -> None:
    kept = Kept.make(tmp_path / "set", rule=Rule(2, ("north-pier", Rule(1, ("south-pier", "registrar")))))
    assert known(kept, "south-pier").shares == ("south-pier", "registrar")  # 'any 1 of' gives both one value
    assert known(kept, "south-pier").missing == (1, 1)


def test_one_person_with_two_places_has_known_both(tmp_path: FilePath) -> None:
    text = policy_text().replace(b'"keeper two"', b'"Keeper One"')
    kept = Kept.make(tmp_path / "set", text)
    assert known(kept).shares == ("north-pier", "south-pier")
    assert known(kept).missing == (1, 1)


def test_worst_comes_first(kept: Kept) -> None:
    kept.append(Transcribed(what="transcribed", custodian="dry-dock", persons=("keeper four",)), day(3))
    rows = exposure(life(kept))
    assert rows[0].who == "keeper four"
    assert [row.kind for row in rows][-1] == "dealer"
