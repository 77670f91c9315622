"""Recovery: the right secret or a refusal, with the bad shares named, with the record and without.

Checked against: the secret that was split, and the definition of what was done to each share here. That a set recovers
by a general-purpose library alone is checked in ``test_by_reference.py``.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import (
    HARBOUR,
    crooked_split,
    flat,
    flipped,
    inverse,
    moduli,
    octets,
    presented,
    product,
    resealed,
    revealed,
    rules,
    satisfies,
    with_rows,
)

from shares.custody.presented import Status
from shares.custody.recover import Recovery, recover
from shares.custody.split import split
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import (
    AmbiguousError,
    EpochMismatchError,
    NotEnoughSharesError,
    SetMismatchError,
    VerificationError,
)
from shares.field.gf256 import Field
from shares.memory import Secret
from shares.sharing.rule import Path, Rule

SECRET = b"not a real key, made up for a test"


def dealt_flat(need: int, total: int, secret: bytes = SECRET):
    return split(Secret.of(secret), flat(need, total), label="Tide archive")


def recovered(shares: Sequence[Share], record: Record | None = None) -> bytes:
    recovery = recover(presented(shares), record)
    return revealed(recovery.secret)


def statuses(recovery: Recovery) -> list[str]:
    return [finding.status.value for finding in recovery.findings]


# Without any harm.


@pytest.mark.parametrize("total", range(1, 9))
def test_every_quorum_recovers_and_every_smaller_set_is_refused(total: int) -> None:
    for need in range(1, total + 1):
        dealt = dealt_flat(need, total)
        for size in (need - 1, need):
            for chosen in itertools.combinations(dealt.shares, size):
                for record in (None, dealt.record):
                    if size == need:
                        assert recovered(chosen, record) == SECRET
                    else:
                        with pytest.raises(NotEnoughSharesError):
                            recover(presented(chosen), record)


@given(rules(), moduli(), octets(1, 80), st.data())
def test_who_the_rule_authorises_recovers_and_nobody_else(rule, modulus, secret, data) -> None:
    dealt = split(Secret.of(secret), rule, label="Tide archive", field=Field(modulus))
    shares = data.draw(st.lists(st.sampled_from(dealt.shares), unique_by=lambda share: share.custodian))
    held = {path for share in shares for path in share.paths}
    for record in (None, dealt.record):
        if satisfies(rule, held):
            assert recovered(shares, record) == secret
        else:
            with pytest.raises(NotEnoughSharesError):
                recover(presented(shares), record)


def test_a_share_given_twice_counts_once() -> None:
    dealt = dealt_flat(3, 5)
    one, two, three = dealt.shares[:3]
    with pytest.raises(NotEnoughSharesError, match="3 different shares are needed, 2 given"):
        recover(presented([one, two, two]))
    recovery = recover(presented([one, two, two, three]))
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery) == ["intact"] * 4


# Wrong shares, without a record.


def test_a_bad_share_is_named_and_the_others_recover() -> None:
    dealt = dealt_flat(3, 5)
    for bad in range(5):
        shares = list(dealt.shares)
        shares[bad] = resealed(shares[bad], rows=with_rows(shares[bad], flipped(40)))
        for order in (shares, shares[::-1]):
            recovery = recover(presented(order))
            assert revealed(recovery.secret) == SECRET
            named = [finding.custodian for finding in recovery.findings if finding.status is not Status.INTACT]
            assert named == [HARBOUR[bad]]
            assert HARBOUR[bad] not in recovery.used


def test_a_bad_first_share_of_many_is_named() -> None:
    """With 25 shares it stands in more quorums than are looked at in order, and once went unnamed."""
    dealt = split(Secret.of(SECRET), module_rule(3, 25), label="Tide archive")
    shares = list(dealt.shares)
    shares[0] = resealed(shares[0], rows=with_rows(shares[0], flipped(0)))
    recovery = recover(presented(shares))
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery) == ["damaged"] + ["intact"] * 24


def module_rule(need: int, total: int):
    from shares.custody.split import flat_rule

    return flat_rule(need, [f"pier {i}" for i in range(total)])


def test_where_two_dealings_explain_the_secret_equally_well_nobody_is_called_intact_or_damaged() -> None:
    """Shares 1 and 2 are wrong such that with share 3 they still give the secret: a tie of 1, 2, 3 and 3, 4, 5."""
    field = Field()
    dealt = dealt_flat(3, 5)
    weights = field.interpolation_weights([1, 2, 3])
    ratio = product(weights[0], inverse(weights[1]))

    def first(row: bytearray) -> None:
        row[0] ^= 1

    def second(row: bytearray) -> None:
        row[0] ^= ratio

    shares = list(dealt.shares)
    shares[0] = resealed(shares[0], rows=with_rows(shares[0], first))
    shares[1] = resealed(shares[1], rows=with_rows(shares[1], second))
    recovery = recover(presented(shares))
    assert revealed(recovery.secret) == SECRET
    torn = "inconsistent dealing"
    assert statuses(recovery) == [torn, torn, "intact", torn, torn]
    # The record knows.
    assert statuses(recover(presented(shares), dealt.record)) == ["damaged"] * 2 + ["intact"] * 3


def test_a_share_whose_file_is_damaged_but_whose_row_is_right_still_helps() -> None:
    dealt = dealt_flat(2, 3)
    edited = dealt.shares[0].model_copy(update={"label": "Another label"})
    assert not edited.is_whole()
    for record in (None, dealt.record):
        recovery = recover(presented([edited, dealt.shares[1]]), record)
        assert revealed(recovery.secret) == SECRET
        assert statuses(recovery) == ["damaged", "intact"]
        assert "replace the file" in recovery.findings[0].reason


def test_a_share_typed_from_paper_without_its_notes_contradicts_nobody() -> None:
    dealt = dealt_flat(2, 3)
    typed = resealed(dealt.shares[0], label=None, rule=None, notice=None, record=None)
    for record in (None, dealt.record):
        for order in ([typed, *dealt.shares[1:]], [*dealt.shares[1:], typed], [typed, dealt.shares[1]]):
            recovery = recover(presented(order), record)
            assert revealed(recovery.secret) == SECRET
            assert set(statuses(recovery)) == {"intact"}


def test_two_shares_for_one_place_do_not_hide_the_right_one() -> None:
    dealt = dealt_flat(2, 3)
    forged = resealed(dealt.shares[0], rows=with_rows(dealt.shares[0], flipped(7)))
    for order in ([forged, *dealt.shares], [*dealt.shares, forged]):
        recovery = recover(presented(order))
        assert revealed(recovery.secret) == SECRET
        expected = ["damaged" if share is forged else "intact" for share in order]
        assert statuses(recovery) == expected


def test_of_a_share_with_one_right_row_and_one_wrong_it_is_said_that_it_is_wrong() -> None:
    dealt = split(
        Secret.of(SECRET), Rule(2, ("north-pier", "north-pier", "registrar", "dry-dock")), label="Tide archive"
    )
    half = resealed(dealt.shares[0], rows=with_rows(dealt.shares[0], flipped(3)))
    edited = half.model_copy(update={"label": "Another label"})
    for share in (half, edited):
        recovery = recover(presented([share, *dealt.shares[1:]]))
        assert revealed(recovery.secret) == SECRET
        assert statuses(recovery) == ["damaged", "intact", "intact"]
        assert "does not lie on the dealing" in recovery.findings[0].reason


def test_what_is_said_of_the_recovered_set_comes_from_a_share_that_was_used() -> None:
    dealt = dealt_flat(2, 3)
    forged = resealed(dealt.shares[0], rows=with_rows(dealt.shares[0], flipped(3)), label="Forged label")
    recovery = recover(presented([forged, *dealt.shares[1:]]))
    assert recovery.share.label == "Tide archive"
    assert recovery.share.custodian in recovery.used == ("south-pier", "light-house")


# Wrong shares, with the record.


def test_with_the_record_only_shares_it_commits_to_are_used() -> None:
    dealt = dealt_flat(2, 4)
    forged = resealed(dealt.shares[0], rows=with_rows(dealt.shares[0], flipped(3)))
    recovery = recover(presented([forged, *dealt.shares[1:3]]), dealt.record)
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery) == ["damaged", "intact", "intact"]
    with pytest.raises(NotEnoughSharesError, match="1 given can be used; north-pier was set aside"):
        recover(presented([forged, dealt.shares[1]]), dealt.record)


def test_with_the_record_a_right_row_in_a_share_it_does_not_commit_to_is_not_used() -> None:
    dealt = dealt_flat(2, 4)
    renamed = resealed(dealt.shares[0], custodian="registrar")
    assert recovered([renamed, dealt.shares[1]]) == SECRET
    with pytest.raises(NotEnoughSharesError, match="1 given can be used"):
        recover(presented([renamed, dealt.shares[1]]), dealt.record)


def test_a_share_whose_mask_is_off_is_not_used_with_the_record() -> None:
    """The secret would be right all the same; but what the record's checks do not confirm is not relied on."""

    def bend(dealing) -> None:
        with dealing.points["north-pier"][0].row.view() as row:
            row[-1] ^= 1

    dealt = crooked_split(SECRET, flat(2, 4), bend=bend)
    recovery = recover(presented(dealt.shares), dealt.record)
    assert revealed(recovery.secret) == SECRET
    assert "north-pier" not in recovery.used
    assert statuses(recovery) == ["inconsistent dealing", "intact", "intact", "intact"]


def test_a_record_that_names_another_secret_than_the_shares_recovers_nothing() -> None:
    """FORMAT.md, section 8: with the record, the secret is the one which the record names. A dishonest dealer's shares
    once recovered another one, and were called intact."""
    dealt = crooked_split(SECRET, flat(2, 3), facts={"secret_commitment": bytes(32)})
    with pytest.raises(NotEnoughSharesError, match="inconsistent dealing"):
        recover(presented(dealt.shares), dealt.record)
    assert recovered(dealt.shares) == SECRET


def test_an_inconsistent_share_is_still_called_so_after_recovery() -> None:
    def bend(dealing) -> None:
        with dealing.points["registrar"][0].row.view() as row:
            row[0] ^= 1

    dealt = crooked_split(SECRET, flat(2, 4), bend=bend)
    recovery = recover(presented(dealt.shares), dealt.record)
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery) == ["intact"] * 3 + ["inconsistent dealing"]


# Several sets and epochs.


def test_shares_of_two_sets_never_combine() -> None:
    ours, theirs = dealt_flat(3, 5), dealt_flat(3, 5, b"another made-up secret")
    with pytest.raises(SetMismatchError):
        recover(presented([*ours.shares[:2], *theirs.shares[2:4]]))
    recovery = recover(presented([*theirs.shares[:2], *ours.shares[1:4]]))
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery) == ["foreign set"] * 2 + ["intact"] * 3


def test_equally_many_shares_of_two_sets_are_ambiguous_unless_the_record_says_which() -> None:
    ours, theirs = dealt_flat(2, 3), dealt_flat(2, 3, b"another made-up secret")
    mixed = presented([*theirs.shares, *ours.shares])
    with pytest.raises(AmbiguousError):
        recover(mixed)
    recovery = recover(mixed, ours.record)
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery) == ["foreign set"] * 3 + ["intact"] * 3


def test_equally_many_shares_of_a_set_that_does_not_recover_are_ambiguous_too() -> None:
    ours, theirs = dealt_flat(2, 3), dealt_flat(3, 5, b"another made-up secret")
    with pytest.raises(AmbiguousError, match="equally many"):
        recover(presented([*ours.shares[:2], *theirs.shares[:2]]))


def test_shares_that_fit_their_record_and_recover_nothing_are_the_dealers_fault(monkeypatch) -> None:
    """A dealer who committed, in shares and record alike, to something else than what was shared."""
    monkeypatch.setattr("strategies.commitment", lambda set_id, payload: bytes(32))
    dealt = crooked_split(SECRET, flat(2, 3))
    with pytest.raises(VerificationError, match="although the shares that fit the record make a quorum"):
        recover(presented(dealt.shares), dealt.record)
    with pytest.raises(VerificationError, match="none gives what the commitment names"):
        recover(presented(dealt.shares))


def test_one_share_that_claims_to_suffice_does_not_win_over_true_ones_that_are_one_short() -> None:
    ours, forged = dealt_flat(5, 6), dealt_flat(1, 1, b"forged")
    with pytest.raises(SetMismatchError, match="the one that most belong to has no quorum"):
        recover(presented([*ours.shares[:4], *forged.shares]))


def test_one_share_given_often_counts_once_when_it_is_asked_which_set_is_meant() -> None:
    ours, other = dealt_flat(2, 3), dealt_flat(2, 3, b"forged")
    recovery = recover(presented([*other.shares[:1] * 3, *ours.shares[:2]]))
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery) == ["foreign set"] * 3 + ["intact"] * 2


def test_shares_of_two_epochs_never_combine() -> None:
    dealt = dealt_flat(2, 3)
    later = [resealed(share, epoch=2) for share in dealt.shares]
    with pytest.raises(EpochMismatchError):
        recover(presented([dealt.shares[0], later[1]]))
    recovery = recover(presented([*dealt.shares[:2], later[2]]))
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery) == ["intact", "intact", "other epoch"]


def test_the_findings_are_about_the_dealing_that_was_recovered() -> None:
    """Two whole shares of another set stand first; ours are three, one of them with a damaged file."""
    ours, theirs = dealt_flat(3, 5), dealt_flat(3, 5, b"another made-up secret")
    edited = ours.shares[0].model_copy(update={"label": "Another label"})
    recovery = recover(presented([*theirs.shares[:2], edited, *ours.shares[1:3]]))
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery) == ["foreign set", "foreign set", "damaged", "intact", "intact"]
    assert recovery.share.set == ours.record.set


def test_damaged_files_count_when_it_is_asked_which_set_is_meant() -> None:
    """Three whole shares of another set were given, but four of ours, two of them with damaged files."""
    ours, theirs = dealt_flat(4, 5), dealt_flat(4, 5, b"another made-up secret")
    edited = [share.model_copy(update={"label": "Another label"}) for share in ours.shares[:2]]
    recovery = recover(presented([*theirs.shares[:3], *edited, *ours.shares[2:4]]))
    assert revealed(recovery.secret) == SECRET
    with pytest.raises(AmbiguousError):
        recover(presented([*theirs.shares[:4], *edited, *ours.shares[2:4]]))


def test_a_second_explanation_is_refused_however_many_files_it_brings() -> None:
    """Forged shares that are a quorum each by themselves: with true ones beside them neither secret is chosen."""
    ours, forged = dealt_flat(3, 5), dealt_flat(1, 9, b"forged")
    for count in (1, 2, 3, 4, 9):
        with pytest.raises(AmbiguousError):
            recover(presented([*ours.shares[:3], *forged.shares[:count]]))
    recovery = recover(presented([*ours.shares[:3], *forged.shares]), ours.record)
    assert revealed(recovery.secret) == SECRET


def many_points(share: Share, paths: list[Path]) -> Share:
    """Return a forged share of the same set with a row of nothing at each path."""
    rows = tuple(Secret(share.row_length) for _ in paths)
    return resealed(share, custodian="forger", paths=tuple(paths), rows=rows)


def test_one_share_with_many_wrong_points_does_not_hide_the_right_ones() -> None:
    dealt = dealt_flat(3, 5)
    forged = many_points(dealt.shares[3], [((3, x),) for x in range(4, 254)])
    recovery = recover(presented([forged, *dealt.shares[:3]]))
    assert revealed(recovery.secret) == SECRET
    assert statuses(recovery)[1:] == ["intact"] * 3


def test_a_deep_and_wide_forgery_does_not_stop_the_right_shares() -> None:
    """997 points, 250 of 250 below 250 of 250: as many steps as one file can hold."""
    dealt = dealt_flat(3, 5)
    paths: list[Path] = []
    above: Path = ()
    for _ in range(4):
        paths += [(*above, (250, x)) for x in range(2, 251)]
        above = (*above, (250, 1))
    forged = many_points(dealt.shares[3], [*paths[:996], above])
    recovery = recover(presented([*dealt.shares[:3], forged]))
    assert revealed(recovery.secret) == SECRET


def test_with_the_record_the_label_is_the_record_s() -> None:
    dealt = dealt_flat(2, 3)
    relabelled = [resealed(share, label="Other key") for share in dealt.shares]
    assert recover(presented(relabelled), dealt.record).label == dealt.record.label
    assert recover(presented(relabelled)).label == "Other key"
