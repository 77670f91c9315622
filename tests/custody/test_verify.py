"""Verification of shares one by one: each status for its cause, in the order of FORMAT.md, section 7.

Checked against: what was done to each share here.
"""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import (
    HARBOUR,
    copy_of,
    crooked_split,
    flat,
    flipped,
    moduli,
    presented,
    resealed,
    revealed,
    rules,
    with_rows,
)

from shares.custody.presented import Finding, Presented, Status
from shares.custody.split import Dealt
from shares.custody.verify import examine, examine_alone, verify_share
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import EpochMismatchError, SetMismatchError, VerificationError
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.consistency import check
from shares.sharing.rule import Point, Rule
from shares.sharing.shamir import evaluate

SECRET = b"not a real key, made up for a test"
TREE = Rule(2, (Rule(2, ("north-pier", "south-pier", "light-house")), "registrar", Rule(1, ("dry-dock", "registrar"))))


@pytest.fixture(scope="module")
def dealt() -> Dealt:
    return crooked_split(SECRET, TREE)


def found(share: Share, record: Record) -> tuple[str, str]:
    (finding,) = examine(presented([share]), record)
    return finding.status.value, finding.reason


def alone(shares: list[Share]) -> list[str]:
    return [finding.status.value for finding in examine_alone(presented(shares))]


@given(rules(), moduli(), st.integers(1, 2**32 - 1))
def test_every_share_of_an_honest_dealing_is_intact(rule: Rule, modulus: int, epoch: int) -> None:
    dealt = crooked_split(SECRET, rule, field=Field(modulus), epoch=epoch)
    assert {finding.status for finding in examine(presented(dealt.shares), dealt.record)} == {Status.INTACT}
    assert {finding.status for finding in examine_alone(presented(dealt.shares))} == {Status.INTACT}
    for share in dealt.shares:
        verify_share(Share.parse(share.to_file()), Record.parse(dealt.record.to_file()))


# With the record, one cause at a time.


def other_row(share: Share) -> Share:
    return resealed(share, rows=with_rows(share, flipped(13)))


BENT = {
    "digest of another label": (lambda share: share.model_copy(update={"label": "x"}), "damaged", "own digest"),
    "digest of another row": (
        lambda share: share.model_copy(update={"rows": with_rows(share, flipped(0))}),
        "damaged",
        "own digest",
    ),
    "another set": (lambda share: resealed(share, set=bytes(16)), "foreign set", "of set 0000"),
    "another epoch": (lambda share: resealed(share, epoch=2), "other epoch", "of epoch 2, the record of epoch 1"),
    "another name": (lambda share: resealed(share, custodian="wharf"), "not in the record", "no such custodian"),
    "another custodian's name": (lambda share: resealed(share, custodian="dry-dock"), "damaged", "commitment"),
    "another row": (other_row, "damaged", "commitment"),
    "another commitment": (lambda share: resealed(share, secret_commitment=bytes(32)), "damaged", "commitment"),
    "another field": (lambda share: resealed(share, field=Field(0x11D)), "damaged", "commitment"),
    "an encrypted file": (lambda share: resealed(share, encrypted_file=bytes(32)), "damaged", "commitment"),
    "another place": (lambda share: resealed(share, paths=(((2, 9),),)), "damaged", "commitment"),
    "another record": (
        lambda share: resealed(share, record="AAAA-" * 7 + "AAAA"),
        "inconsistent dealing",
        "another record, AAAA",
    ),
    "no notes": (lambda share: resealed(share, record=None, label=None, rule=None, notice=None), "intact", "fit"),
    "another label": (lambda share: resealed(share, label="x"), "intact", "but not the label: go by the record's"),
    "another rule": (
        lambda share: resealed(share, rule="any 1 of x"),
        "intact",
        "but not the rule: go by the record's",
    ),
    "another notice": (lambda share: resealed(share, notice="send it"), "intact", "but not the notice: go by"),
    # Several causes: the first in the order of the format.
    "another set and epoch": (lambda share: resealed(share, set=bytes(16), epoch=2), "foreign set", "of set"),
    "another epoch and name": (lambda share: resealed(share, epoch=2, custodian="wharf"), "other epoch", "of epoch"),
    "another name and row": (
        lambda share: resealed(other_row(share), custodian="wharf"),
        "not in the record",
        "no such",
    ),
    "another set, not sealed": (lambda share: share.model_copy(update={"set": bytes(16)}), "damaged", "own digest"),
}


@pytest.mark.parametrize("name", BENT)
def test_a_bent_share_is_told_by_its_cause(dealt: Dealt, name: str) -> None:
    bend, status, reason = BENT[name]
    share = bend(dealt.shares[0])
    assert found(share, dealt.record)[0] == status
    assert reason in found(share, dealt.record)[1]
    raised = {"foreign set": SetMismatchError, "other epoch": EpochMismatchError}.get(status, VerificationError)
    if status == "intact":
        verify_share(share, dealt.record)
    else:
        with pytest.raises(raised, match=reason) as refusal:
            verify_share(share, dealt.record)
        assert refusal.value.exit_code == 4
        assert str(refusal.value).startswith(f"{share.custodian}: {status}: ")


def test_shares_are_judged_alone_whatever_else_is_given(dealt: Dealt) -> None:
    bad = other_row(dealt.shares[1])
    unread = Presented("a file", None, "it cannot be read", Status.UNREADABLE)
    broken = Presented("another file", None, "it is not JSON")
    given_shares = [unread, *presented([dealt.shares[0], bad, dealt.shares[2]]), broken]
    assert examine(given_shares, dealt.record)[0] == Finding("a file", None, Status.UNREADABLE, "it cannot be read")
    statuses = ["unreadable", "intact", "damaged", "intact", "damaged"]
    assert [finding.status.value for finding in examine(given_shares, dealt.record)] == statuses
    assert [finding.source for finding in examine(given_shares, dealt.record)] == [one.source for one in given_shares]


# A crooked dealer: the shares match their commitments, so the dealing is at fault, and its victim sees that.


def finding_of(dealt: Dealt) -> dict[str, str]:
    return {finding.source: finding.status.value for finding in examine(presented(dealt.shares), dealt.record)}


def caught(dealt: Dealt) -> set[str]:
    return {name for name, status in finding_of(dealt).items() if status == "inconsistent dealing"}


@pytest.mark.parametrize("name", list(TREE.paths()))
def test_a_row_off_the_polynomial_is_caught_by_its_custodian_alone(name: str) -> None:
    def bend(dealing) -> None:
        with dealing.points[name][-1].row.view() as row:
            row[-1] ^= 1

    assert caught(crooked_split(SECRET, TREE, bend=bend)) == {name}


def test_a_raised_degree_is_caught_by_every_custodian_of_the_node() -> None:
    def bend(dealing) -> None:
        extra = Secret.of(bytes(range(len(dealing.polynomials[0][0]))))
        rows = evaluate(Field(), [*dealing.polynomials[0], extra], range(1, 6))
        for points, row in zip(dealing.points.values(), rows, strict=True):
            points[0] = points[0]._replace(row=row)

    assert caught(crooked_split(SECRET, flat(2, 5), bend=bend)) == set(HARBOUR[:5])


def test_a_wrong_check_in_the_record_is_caught_by_every_custodian_it_touches() -> None:
    def bend(checks):
        return [checks[0], (checks[1][0], bytes(16)), *checks[2:]]

    assert caught(crooked_split(SECRET, TREE, bend_checks=bend)) == {"north-pier", "south-pier", "light-house"}


def test_commitments_fixed_after_the_fact_are_caught() -> None:
    """The dealer knows R from an honest dealing, bends a row so that this R does not see it, and commits anew."""
    field, fixed = Field(), bytes(range(16))
    first: list[bytes] = []

    def keep(dealing) -> None:
        first.extend(revealed(point.row) for points in dealing.points.values() for point in points)

    honest = crooked_split(SECRET, flat(2, 3), set_id=fixed, bend=keep)
    matrix, length = honest.record.check_matrix(), honest.record.row_length
    change = bytes([1]) + bytes(length - 17)
    change += check(field, matrix, Secret.of(change + bytes(16)))
    victim = honest.shares[1]
    bent = Secret.of(bytes(a ^ b for a, b in zip(revealed(victim.rows[0]), change, strict=True)))
    # The old R does not see it, so only the share commitment stands in the way of the old record...
    forged = resealed(victim, rows=(copy_of(bent),))
    assert check(field, matrix, bent) == check(field, matrix, victim.rows[0])
    assert found(forged, honest.record)[0] == "damaged"
    # ... and a record with the new commitment has another R, by which the row is caught.
    custodians = tuple(
        custodian.model_copy(update={"share_commitment": forged.commitment()})
        if custodian.name == "south-pier"
        else custodian
        for custodian in honest.record.custodians
    )
    members = {name: getattr(honest.record, name) for name in Record.model_fields} | {"custodians": custodians}
    members["fingerprint"] = Record.model_construct(**members).own_fingerprint()
    record = Record.model_validate(members)
    statuses = [found(resealed(share, record=record.fingerprint), record)[0] for share in (honest.shares[0], forged)]
    # With the checks of the old R everyone is alarmed.
    assert statuses == ["inconsistent dealing"] * 2


@pytest.mark.parametrize(
    "facts",
    [
        {"secret_commitment": bytes(32)},
        {"field": Field(0x11D)},
        {"row_length": 200},
    ],
    ids=lambda facts: next(iter(facts)),
)
def test_a_record_that_says_otherwise_than_the_shares_is_caught_by_all(facts) -> None:
    assert caught(crooked_split(SECRET, flat(2, 3), facts=facts)) == set(HARBOUR[:3])


@pytest.mark.parametrize("x", [2, 9, 255])
def test_a_share_at_another_place_than_the_record_says_is_caught_though_it_lies_on_the_polynomial(x: int) -> None:
    """Two custodians at one x would be one share in two hands."""

    def bend(dealing) -> None:
        (row,) = evaluate(Field(), dealing.polynomials[0], [x])
        dealing.points["light-house"][0] = Point(((2, x),), row)

    assert caught(crooked_split(SECRET, flat(2, 3), bend=bend)) == {"light-house"}


def test_a_share_below_a_node_that_is_not_there_is_caught() -> None:
    def bend(dealing) -> None:
        dealing.points["light-house"][0] = Point(((2, 3), (1, 1)), dealing.points["light-house"][0].row)

    assert caught(crooked_split(SECRET, flat(2, 3), bend=bend)) == {"light-house"}


# Without a record.


def test_without_a_record_the_largest_group_is_what_the_others_are_compared_with(dealt: Dealt) -> None:
    other = crooked_split(b"another made-up secret", TREE)
    a, b, c = dealt.shares[:3]
    assert alone([other.shares[0], a, b]) == ["foreign set", "intact", "intact"]
    assert alone([a, other.shares[0]]) == ["intact", "foreign set"]
    assert alone([resealed(a, epoch=2), b, c]) == ["other epoch", "intact", "intact"]
    assert alone([resealed(a, field=Field(0x11D)), b, c]) == ["inconsistent dealing", "intact", "intact"]
    assert alone([resealed(a, secret_commitment=bytes(32)), b, c]) == ["inconsistent dealing", "intact", "intact"]
    assert alone([resealed(a, record="AAAA-" * 7 + "AAAA"), b, c]) == ["inconsistent dealing", "intact", "intact"]
    assert alone([a.model_copy(update={"label": "x"}), b]) == ["damaged", "intact"]
    assert alone([a.model_copy(update={"label": "x"})]) == ["damaged"]
    assert alone([]) == []
    unread = Presented("a file", None, "it cannot be read", Status.UNREADABLE)
    given_shares = [unread, *presented([a, b])]
    assert [finding.status.value for finding in examine_alone(given_shares)] == ["unreadable", "intact", "intact"]
    assert [finding.status.value for finding in examine_alone([unread])] == ["unreadable"]


def test_without_a_record_shares_that_claim_one_place_or_rule_otherwise_contradict_each_other(dealt: Dealt) -> None:
    a, b, c = dealt.shares[:3]
    assert alone([a, other_row(a), b]) == ["inconsistent dealing", "inconsistent dealing", "intact"]
    assert alone([a, resealed(a, custodian="wharf"), b]) == ["inconsistent dealing", "inconsistent dealing", "intact"]
    assert alone([a, a, b]) == ["intact"] * 3
    claims_less = resealed(c, paths=(((1, 1), (2, 3)),))
    assert alone([a, b, claims_less]) == ["inconsistent dealing"] * 3


def test_without_a_record_a_single_share_is_only_whole(dealt: Dealt) -> None:
    assert alone([dealt.shares[0]]) == ["intact"]
    assert alone([other_row(dealt.shares[0])]) == ["intact"]
    (finding,) = examine_alone(presented([dealt.shares[0]]))
    assert "its own digest fits" in finding.reason


def test_a_typed_share_without_its_notes_contradicts_nobody_in_any_order(dealt: Dealt) -> None:
    typed = [resealed(share, label=None, rule=None, notice=None, record=None) for share in dealt.shares]
    assert alone([typed[0], *dealt.shares[1:]]) == ["intact"] * 5
    assert alone([*dealt.shares[1:], typed[0]]) == ["intact"] * 5
    assert alone(typed) == ["intact"] * 5
    assert alone([*typed[1:], dealt.shares[0]]) == ["intact"] * 5


def test_findings_show_no_row(dealt: Dealt) -> None:
    canary = resealed(dealt.shares[0], rows=(Secret.of(b"canary".ljust(dealt.record.row_length)),))
    for findings in (examine(presented([canary]), dealt.record), examine_alone(presented([canary, dealt.shares[0]]))):
        assert "canary" not in repr(findings)
        assert "Y2FuYXJ5" not in repr(findings)
    assert "canary" not in repr(presented([canary]))


def test_a_record_that_swaps_attestation_keys_is_noticed_by_their_owners(dealt: Dealt) -> None:
    """A dealer who enters a key of his own could attest for a custodian later."""
    one, two, *rest = dealt.record.custodians
    swapped = (
        one.model_copy(update={"attestation_key": two.attestation_key}),
        two.model_copy(update={"attestation_key": one.attestation_key}),
        *rest,
    )
    record = dealt.record.model_copy(update={"custodians": swapped})
    record = record.model_copy(update={"fingerprint": record.own_fingerprint()})
    shares = [resealed(share, record=record.fingerprint) for share in dealt.shares]
    found_by = [finding.status.value for finding in examine(presented(shares), record)]
    assert found_by == ["inconsistent dealing"] * 2 + ["intact"] * len(rest)
