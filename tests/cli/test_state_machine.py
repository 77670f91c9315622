"""A harbour that splits, damages, mixes and recovers as it likes: never a wrong secret, never a traceback.

What the machine knows from outside the program: which secret it gave, which files it touched since, and that a quorum
of untouched shares of one set recovers it. Everything else may be refused, but in one line and with a known code.
"""

from __future__ import annotations

import json
import shutil
import tempfile
from dataclasses import dataclass, field
from pathlib import Path

from cli.harness import PURPOSE, Place, Result, files_in, run
from hypothesis import HealthCheck, settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, initialize, invariant, precondition, rule
from strategies import HARBOUR, flipped, octets, resealed, with_rows

from shares.documents.share import Share
from shares.errors import DocumentError

MOST_SETS = 2
MEMBERS = ("rows", "paths", "set", "secret_commitment", "custodian", "epoch", "digest")


@dataclass
class Dealt:
    """A set as the machine remembers it."""

    place: Place
    secret: bytes
    need: int
    untouched: set[Path] = field(default_factory=set)
    record_untouched: bool = True


@settings(
    max_examples=min(settings.default.max_examples, 60),
    stateful_step_count=24,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow],
)
class Harbour(RuleBasedStateMachine):
    def __init__(self) -> None:
        super().__init__()
        self.folder = Path(tempfile.mkdtemp())
        self.sets: list[Dealt] = []
        self.made = 0

    def teardown(self) -> None:
        shutil.rmtree(self.folder)

    def fresh(self, name: str) -> Path:
        self.made += 1
        return self.folder / f"{self.made}-{name}"

    def ran(self, *arguments: str | Path) -> Result:
        """Run a command and see that it ended in a way that is allowed."""
        result = run(*arguments)
        assert result.code in (0, 2, 3, 4, 5)
        assert "Traceback" not in result.err + result.out
        assert "a fault in this program" not in result.err + result.out
        if result.err.startswith("shares: "):
            assert (result.out, result.err.count("\n")) == ("", 1)
        return result

    @initialize(secret=octets(1, 40), total=st.integers(2, 4), data=st.data())
    def first_split(self, secret: bytes, total: int, data: st.DataObject) -> None:
        self.split_and_remember(secret, total, data)

    @precondition(lambda self: len(self.sets) < MOST_SETS)
    @rule(secret=octets(1, 40), total=st.integers(2, 4), data=st.data())
    def split(self, secret: bytes, total: int, data: st.DataObject) -> None:
        self.split_and_remember(secret, total, data)

    def split_and_remember(self, secret: bytes, total: int, data: st.DataObject) -> None:
        place = Place.make(self.fresh("set"), secret)
        need = data.draw(st.integers(1, total))
        assert self.ran(*place.split_arguments(need=need, names=HARBOUR[:total])).code == 0
        self.sets.append(Dealt(place, secret, need, set(place.shares)))

    def some(self, data: st.DataObject) -> Path:
        """Draw one of all shares."""
        return data.draw(st.sampled_from([path for dealt in self.sets for path in dealt.place.shares]))

    def touched(self, path: Path) -> None:
        for dealt in self.sets:
            dealt.untouched.discard(path)
            dealt.record_untouched &= dealt.place.record != path

    @rule(data=st.data(), bit=st.integers(0, 10**6))
    def flip_a_bit(self, data: st.DataObject, bit: int) -> None:
        path = self.some(data)
        content = bytearray(path.read_bytes())
        if content:
            content[bit // 8 % len(content)] ^= 1 << bit % 8
            path.write_bytes(content)
            self.touched(path)

    @rule(data=st.data(), bit=st.integers(32, 39) | st.integers(0, 10**6), sealed=st.booleans())
    def flip_a_bit_of_the_row(self, data: st.DataObject, bit: int, sealed: bool) -> None:
        """Damage that parses, and forgery: with the share's own digest made to fit again.

        Bits 32 to 39 of a row are those of the secret's first byte: the message begins with four bytes of length.
        """
        path = self.some(data)
        try:
            share = Share.parse(path.read_bytes())
        except DocumentError:
            return
        rows = with_rows(share, flipped(bit % (8 * share.row_length)))
        bent = resealed(share, rows=rows) if sealed else share.model_copy(update={"rows": rows})
        path.write_bytes(bent.to_file())
        self.touched(path)
        self.ran("show", path)

    @rule(data=st.data(), keep=st.integers(0, 900))
    def truncate(self, data: st.DataObject, keep: int) -> None:
        path = self.some(data)
        content = path.read_bytes()
        path.write_bytes(content[:keep])
        if keep < len(content):
            self.touched(path)

    @rule(data=st.data(), name=st.sampled_from(MEMBERS))
    def graft_a_member(self, data: st.DataObject, name: str) -> None:
        """Put a member of one share into another, as a hand that repairs a file might."""
        path, other = self.some(data), self.some(data)
        try:
            taker, giver = json.loads(path.read_bytes()), json.loads(other.read_bytes())
        except ValueError:
            return
        if isinstance(taker, dict) and isinstance(giver, dict) and name in giver and taker.get(name) != giver[name]:
            path.write_text(json.dumps(taker | {name: giver[name]}))
            self.touched(path)

    @rule(data=st.data())
    def exchange(self, data: st.DataObject) -> None:
        path, other = self.some(data), self.some(data)
        one, two = path.read_bytes(), other.read_bytes()
        if one != two:
            path.write_bytes(two)
            other.write_bytes(one)
            self.touched(path)
            self.touched(other)

    @rule(data=st.data(), bit=st.integers(0, 10**6))
    def flip_a_bit_of_a_record(self, data: st.DataObject, bit: int) -> None:
        path = data.draw(st.sampled_from(self.sets)).place.record
        content = bytearray(path.read_bytes())
        content[bit // 8 % len(content)] ^= 1 << bit % 8
        path.write_bytes(content)
        self.touched(path)

    @rule(few=st.booleans(), data=st.data())
    def recover(self, few: bool, data: st.DataObject) -> None:
        """Exactly as many shares of one set as are needed, or what comes to hand; with its record and without."""
        dealt = data.draw(st.sampled_from(self.sets))
        own = data.draw(st.permutations(dealt.place.shares))
        given_ = own[: dealt.need + (0 if few else data.draw(st.integers(-1, 3)))]
        given_ += [] if few else [self.some(data) for _ in range(data.draw(st.integers(0, 2)))]
        for record in ([], ["--record", dealt.place.record, *PURPOSE]) if given_ else ():
            target = self.fresh("out")
            result = self.ran("recover", *given_, *record, "--to", target)
            assert target.exists() is (result.code == 0)
            if result.code == 0:
                # Without an untouched record the files say which set is meant: one of them whole, and no mixture.
                meant = {dealt.secret} if record and dealt.record_untouched else {one.secret for one in self.sets}
                right = target.read_bytes() in meant
                assert right

    @rule(data=st.data(), with_record=st.booleans())
    def recover_what_must_be_recoverable(self, data: st.DataObject, with_record: bool) -> None:
        dealt = data.draw(st.sampled_from(self.sets))
        if len(dealt.untouched) < dealt.need or (with_record and not dealt.record_untouched):
            return
        target = self.fresh("out")
        record = ["--record", dealt.place.record, *PURPOSE] if with_record else []
        # All that is left of the set, the damaged among them; with the record they can do no harm.
        chosen = dealt.place.shares if with_record else sorted(dealt.untouched)
        assert self.ran("recover", *chosen, *record, "--to", target).code == 0
        right = target.read_bytes() == dealt.secret
        assert right

    @rule(with_record=st.booleans(), data=st.data())
    def verify(self, with_record: bool, data: st.DataObject) -> None:
        dealt = data.draw(st.sampled_from(self.sets))
        given_ = [self.some(data) for _ in range(data.draw(st.integers(1, 4)))]
        if not with_record:
            assert self.ran("verify", *given_).code in (0, 4)
            return
        result = self.ran("verify", *given_, "--record", dealt.place.record, "--json")
        if dealt.record_untouched:
            found = [one["status"] for one in result.json["shares"]]
            for path, status in zip(given_, found, strict=True):
                if path in dealt.untouched:
                    assert status == "intact"
                elif not any(path in one.untouched for one in self.sets):
                    # Touched: what is still said to be intact holds what the record commits to, wherever it now lies.
                    assert status != "intact" or self.same_core(path, dealt)
                else:
                    assert status == "foreign set"

    def same_core(self, path: Path, dealt: Dealt) -> bool:
        """Say whether the record holds this share's commitment, by what ``show`` tells of both."""
        told = self.ran("show", path, "--json").json
        members = json.loads(dealt.place.record.read_bytes())
        return told["share_commitment"] in [one["share_commitment"] for one in members["custodians"]]

    @invariant()
    def the_records_stand_where_they_were(self) -> None:
        for dealt in self.sets:
            assert list(files_in(dealt.place.set)) == ["journal.jsonl", "practice.json", "record.json"]


TestHarbour = Harbour.TestCase
