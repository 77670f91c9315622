"""The margin, now and over time.

Checked against: brute force: every set of losses is tried on the rule followed by hand (strategies.satisfies), and the
margin over time is worked out again at every hour that matters.
"""

from __future__ import annotations

import itertools
from collections.abc import Collection, Mapping
from datetime import timedelta
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from kept import NAMES, START, Kept, day, policy_text
from parties import card
from strategies import HARBOUR, labelled, rules, satisfies, sets_of

from shares.documents.event import HandedOn, Introduced
from shares.evidence.margin import counted, margin_of, margins
from shares.evidence.standing import Span
from shares.planning.structure import Bounds
from shares.sharing.rule import Rule


def by_trying(rule: Rule, confirmed: Collection[str], label_of: Mapping[str, str]) -> int:
    """The most that may be lost, whichever they are: one less than the fewest whose loss leaves no quorum."""
    paths = rule.paths()
    held = [name for name in paths if name in confirmed]
    fatal = [
        len(lost)
        for lost in sets_of(label_of[name] for name in held)
        if not satisfies(rule, {path for name in held if label_of[name] not in lost for path in paths[name]})
    ]
    return min(fatal) - 1


@given(labelled(), st.data())
def test_margin_is_what_trying_all_losses_finds(drawn: tuple[Rule, dict[str, str]], data: st.DataObject) -> None:
    rule, label_of = drawn
    confirmed = data.draw(st.sets(st.sampled_from(sorted(label_of))))
    expected = by_trying(rule, confirmed, label_of)
    assert margin_of(rule, confirmed, label_of) == Bounds(expected, expected)
    own = {name: name for name in label_of}
    assert margin_of(rule, confirmed).exact
    assert margin_of(rule, confirmed).low == by_trying(rule, confirmed, own)


@given(rules(most=9), st.data())
def test_one_loss_takes_off_one_at_most_and_never_adds(rule: Rule, data: st.DataObject) -> None:
    names = sorted(rule.paths())
    confirmed = data.draw(st.sets(st.sampled_from(names), min_size=1))
    before = margin_of(rule, confirmed).low
    after = [margin_of(rule, confirmed - {name}).low for name in confirmed]
    assert all(one in (before - 1, before) or before == -1 == one for one in after)
    # In the worst case every step counts: some loss does take one off.
    assert before < 0 or min(after) == before - 1


def test_beyond_24_names_in_two_places_there_are_bounds_that_hold() -> None:
    names = [f"custodian-{i}" for i in range(26)]
    rule = Rule(2, (Rule(20, tuple(names)), Rule(7, tuple(names[:13]))))
    found = margin_of(rule, names)
    # Losing 7 of all 26 leaves 19 for the first group; losing 7 of the first 13 leaves 6 for the second.
    assert found.low <= 6 <= found.high


def test_rules_that_differ_in_names_alone_are_counted_once() -> None:
    first = counted(Rule(2, ("a", "b", "c")))
    assert counted(Rule(2, ("x", "y", "z"))) is first
    assert counted(Rule(2, ("x", "y", "x"))) != first


HOURS = st.integers(-50, 300)


@st.composite
def spans(draw: st.DrawFn) -> list[Span]:
    """Times of confirmation, none of one custodian overlapping."""
    found = []
    for name in HARBOUR[:4]:
        ends = sorted(draw(st.sets(HOURS, max_size=6)))
        pairs = zip(ends[::2], ends[1::2], strict=False)
        found += [Span(name, START + timedelta(hours=a), START + timedelta(hours=b)) for a, b in pairs]
    return draw(st.permutations(found))


@given(spans(), rules(most=6))
@settings(max_examples=50)
def test_margin_over_time_is_the_margin_at_each_time(times: list[Span], rule: Rule) -> None:
    end = START + timedelta(hours=250)
    found = margins(rule, times, START, end)
    assert found[0].time == START
    assert all(a.time < b.time and (a.low, a.high) != (b.low, b.high) for a, b in itertools.pairwise(found))
    for hour in range(251):
        now = START + timedelta(hours=hour)
        confirmed = {span.custodian for span in times if span.since <= now < span.until}
        told = [one for one in found if one.time <= now][-1]
        assert Bounds(told.low, told.high) == margin_of(rule, confirmed)


@pytest.fixture
def kept(tmp_path: Path) -> Kept:
    return Kept.make(tmp_path / "set", policy_text())


def test_by_custodians_people_and_sites(kept: Kept) -> None:
    kept.round(day(1))
    margin = kept.audit(day(3)).margin
    assert margin
    # Two piers lie at one site, registrar and dry-dock at another: the loss of two sites leaves too few.
    assert (margin.custodians, margin.people, margin.sites) == (Bounds(2, 2), Bounds(2, 2), Bounds(1, 1))
    assert (margin.confirmed, margin.total, margin.missing) == (5, 5, Bounds(0, 0))


def test_after_handing_on_people_are_who_holds_now(kept: Kept) -> None:
    for name in ("south-pier", "light-house"):
        kept.append(HandedOn(what="handed-on", custodian=name, to="Keeper ONE"), day(1))
        kept.append(
            Introduced(what="introduced", custodian=name, card=card(name).fingerprint), day(1), cards=[card(name)]
        )
    kept.round(day(2))
    margin = kept.audit(day(4)).margin
    assert margin
    assert (margin.custodians, margin.people) == (Bounds(2, 2), Bounds(0, 0))


def test_without_policy_only_custodians_are_counted(tmp_path: Path) -> None:
    kept = Kept.make(tmp_path / "set")
    kept.round(day(1), NAMES[:3])
    margin = kept.audit(day(3)).margin
    assert margin
    assert (margin.custodians, margin.people, margin.sites) == (Bounds(0, 0), None, None)


def test_over_time_ends_where_the_margin_is_now(kept: Kept) -> None:
    kept.round(day(10))
    challenge = kept.ask(day(60))
    kept.answer(challenge, NAMES[:2], day(61))
    kept.answer(challenge, ["dry-dock"], day(62), damaged=True)
    for at in (0, 5, 11, 30, 61, 62, 63, 100, 101, 102, 151, 152, 200):
        audited = kept.audit(day(at))
        assert audited.margin
        assert (audited.margins[-1].low, audited.margins[-1].high) == audited.margin.custodians, at
    # Each line: the day, and the margin from then on. 3 of 5; proof lasts 90 days.
    assert [((one.time - START).days, one.low) for one in audited.margins] == [(0, -1), (11, 2), (62, 1), (101, -1)]
