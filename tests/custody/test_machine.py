"""A game against recovery: split, damage, forge, mix, recover, in any order. Never a wrong secret, never a traceback.

Checked against: the secret of the dealing whose commitment the recovered shares carry. Whatever is done, recovery gives
exactly that secret, or an error of this package's tree; and where a quorum of untouched shares is given with the
record, or alone, it gives it.
"""

from __future__ import annotations

from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import Bundle, RuleBasedStateMachine, initialize, rule
from strategies import (
    crooked_split,
    flipped,
    moduli,
    octets,
    resealed,
    revealed,
    rules,
    satisfies,
    with_rows,
)

from shares.custody.presented import Presented, Status
from shares.custody.recover import recover
from shares.custody.split import Dealt
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import DocumentError, NotEnoughSharesError, ShareError, SharesError, VerificationError
from shares.field.gf256 import Field
from shares.memory import Secret

MOST = 40  # Shares on the table: enough for every kind of mix, few enough to be quick.


class Game(RuleBasedStateMachine):
    """Several dealings, and a table onto which their shares are put, some as they are and some not."""

    dealings: Bundle = Bundle("dealings")

    def __init__(self) -> None:
        super().__init__()
        # What is committed to, by set and commitment: the only secrets that may ever come out.
        self.secret_of: dict[tuple[bytes, bytes], bytes] = {}
        self.table: list[Presented] = []
        self.honest: list[tuple[Dealt, Share]] = []
        self.rule_of: dict[bytes, object] = {}

    def put(self, share: Share | None, what: str) -> None:
        if len(self.table) < MOST:
            self.table.append(Presented(f"{what} {len(self.table)}", share, "" if share else "unreadable"))

    @initialize(target=dealings, rule_=rules(most=6), modulus=moduli(), secret=octets(1, 30))
    def first_dealing(self, rule_, modulus, secret) -> Dealt:
        return self.deal(rule_, modulus, secret, set_id=None)

    def deal(self, rule_, modulus, secret, *, set_id, epoch=1) -> Dealt:
        dealt = crooked_split(secret, rule_, field=Field(modulus), set_id=set_id, epoch=epoch)
        self.secret_of[dealt.record.set, dealt.record.secret_commitment] = secret
        return dealt

    @rule(target=dealings, rule_=rules(most=5), modulus=moduli(), secret=octets(1, 30))
    def another_dealing(self, rule_, modulus, secret) -> Dealt:
        return self.deal(rule_, modulus, secret, set_id=None)

    @rule(target=dealings, dealt=dealings, rule_=rules(most=5), secret=octets(1, 30), epoch=st.integers(1, 3))
    def an_impostor_under_the_same_identifier(self, dealt, rule_, secret, epoch) -> Dealt:
        return self.deal(rule_, dealt.record.field.modulus, secret, set_id=dealt.record.set, epoch=epoch)

    @rule(dealt=dealings, data=st.data())
    def give_a_share(self, dealt, data) -> None:
        share = data.draw(st.sampled_from(dealt.shares))
        if len(self.table) < MOST:
            self.honest.append((dealt, share))
        self.put(Share.parse(share.to_file()), "good")

    @rule(dealt=dealings)
    def give_all_shares(self, dealt) -> None:
        for share in dealt.shares:
            if len(self.table) < MOST:
                self.honest.append((dealt, share))
            self.put(share, "good")

    @rule(dealt=dealings, data=st.data())
    def give_a_share_without_its_notes(self, dealt, data) -> None:
        share = data.draw(st.sampled_from(dealt.shares))
        if len(self.table) < MOST:
            self.honest.append((dealt, share))
        self.put(resealed(share, label=None, rule=None, notice=None, record=None), "typed")

    @rule(dealt=dealings, data=st.data())
    def give_a_file_with_flipped_bits(self, dealt, data) -> None:
        file = bytearray(data.draw(st.sampled_from(dealt.shares)).to_file())
        for bit in data.draw(st.lists(st.integers(0, 8 * len(file) - 1), min_size=1, max_size=3)):
            file[bit // 8] ^= 1 << bit % 8
        try:
            self.put(Share.parse(bytes(file)), "flipped")
        except DocumentError:
            self.put(None, "unreadable")

    @rule(dealt=dealings, data=st.data())
    def give_a_share_with_a_forged_row(self, dealt, data) -> None:
        share = data.draw(st.sampled_from(dealt.shares))
        bit = data.draw(st.integers(0, 8 * share.row_length - 1))
        self.put(resealed(share, rows=with_rows(share, flipped(bit))), "forged")

    @rule(dealt=dealings, data=st.data())
    def give_a_share_with_another_row(self, dealt, data) -> None:
        """Another share's row, or the payload of all zeros, at this share's place."""
        share, other = data.draw(st.sampled_from(dealt.shares)), data.draw(st.sampled_from(dealt.shares))
        row = data.draw(st.sampled_from([revealed(other.rows[0]), bytes(share.row_length)]))
        self.put(resealed(share, rows=tuple(Secret.of(row) for _ in share.rows)), "forged")

    @rule(dealt=dealings, data=st.data())
    def give_a_share_with_a_forged_header(self, dealt, data) -> None:
        share = data.draw(st.sampled_from(dealt.shares))
        change = data.draw(
            st.sampled_from(
                [
                    {"epoch": share.epoch + 1},
                    {"set": bytes(16)},
                    {"secret_commitment": bytes(32)},
                    {"custodian": "wharf"},
                    {"encrypted_file": bytes(32)},
                    {"field": Field(0x1F5)},
                ]
            )
        )
        self.put(resealed(share, **change), "forged")

    @rule(dealt=dealings, need=st.integers(1, 5), x=st.integers(1, 9), data=st.data())
    def give_a_share_that_claims_another_place(self, dealt, need, x, data) -> None:
        share = data.draw(st.sampled_from(dealt.shares))
        self.put(resealed(share, paths=(((need, x),),), rows=share.rows[:1]), "forged")

    @rule()
    def take_the_last_away(self) -> None:
        if self.table:
            last = self.table.pop()
            if last.source.startswith(("good", "typed")):
                self.honest.pop()

    @rule()
    def clear_the_table(self) -> None:
        self.table.clear()
        self.honest.clear()

    @rule(data=st.data())
    def recover_without_a_record(self, data) -> None:
        given = data.draw(st.permutations(self.table))
        try:
            recovery = recover(given)
        except (NotEnoughSharesError, VerificationError, ShareError):
            assert not self.clear_case()
            return
        share = recovery.share
        assert revealed(recovery.secret) == self.secret_of[share.set, share.secret_commitment]
        self.check_findings(given, recovery)

    @rule(dealt=dealings, data=st.data())
    def recover_with_a_record(self, dealt, data) -> None:
        record = Record.parse(dealt.record.to_file())
        given = data.draw(st.permutations(self.table))
        held = {path for known, share in self.honest if known is dealt for path in share.paths}
        authorised = satisfies(record.rule.to_rule(), held)
        try:
            recovery = recover(given, record)
        except SharesError:
            assert not authorised
            return
        assert revealed(recovery.secret) == self.secret_of[record.set, record.secret_commitment]
        assert recovery.share.set == record.set
        self.check_findings(given, recovery)
        committed = {custodian.name: custodian.share_commitment for custodian in record.custodians}
        for one, finding in zip(given, recovery.findings, strict=True):
            if finding.status is Status.INTACT:
                assert one.share is not None
                assert one.share.commitment() == committed[one.share.custodian]

    def check_findings(self, given, recovery) -> None:
        assert [finding.source for finding in recovery.findings] == [one.source for one in given]
        assert set(recovery.used) <= {one.share.custodian for one in given if one.share is not None}
        assert all(finding.reason for finding in recovery.findings)

    def clear_case(self) -> bool:
        """Only shares as they were dealt, all of one dealing, and enough of them."""
        if len(self.honest) != len(self.table) or len({id(dealt) for dealt, _ in self.honest}) != 1:
            return False
        dealt = self.honest[0][0]
        return satisfies(dealt.record.rule.to_rule(), {path for _, share in self.honest for path in share.paths})


TestGame = Game.TestCase
# A game is worth many examples of one step; a quarter of the profile's number keeps its time in proportion.
TestGame.settings = settings(max_examples=max(5, settings.default.max_examples // 4), stateful_step_count=30)
