"""Keys that parties generate together: what comes of it, what each sees on the way, and what it costs.

Source: Gennaro et al. 2007 (C1 to C3: any k shares give the one secret whose public key all know); shares and public
keys are worked out again by the integers of ``curve`` (RFC 8032) and Lagrange's formula.
"""

from __future__ import annotations

import itertools
import random
from collections import Counter

import nacl.bindings
import pytest
from curve import L, add, encode, multiply
from curve import decode as decode_point
from keys.joining import born, interpolated, joint, key, public_half, task
from keys.rounds import Exchange, octets

from shares.documents.key_event import Approved, KeyBorn
from shares.documents.key_record import KeyRecord
from shares.documents.members import encode_bytes
from shares.documents.task_message import Confirmation, Dealing, Reveal
from shares.errors import ParameterError, VerificationError
from shares.keys.generation import Contribution
from shares.keys.joint import JointCourse, JointPart
from shares.keys.verdict import record_of
from shares.memory import Secret

SIZES = [(2, 2), (2, 3), (3, 3), (3, 5), (5, 5), (10, 20)]


@pytest.mark.parametrize(("need", "count"), SIZES)
def test_any_quorum_has_the_key_and_all_have_one_record(need: int, count: int) -> None:
    exchange = joint(need, count).run(6 if count <= 5 else 0)
    for round in range(6 if count > 5 else 0):
        exchange.speak(round)  # Run would ask each party after each round; once, below, is enough.
    assert set(exchange.failures().values()) == {None}
    found = {name: born(exchange, name) for name in exchange.task.names}
    record = next(iter(found.values()))[0]
    assert all(other == record for other, _ in found.values())
    assert record.is_confirmed()
    assert (record.need, record.epoch, record.origin, record.key) == (need, 1, "joint", exchange.task.key)
    assert [(one.name, one.index, one.card) for one in record.custodians] == [
        (one.name, place, one.card) for place, one in enumerate(exchange.task.parties, 1)
    ]
    shares = dict(enumerate((share for _, share in found.values()), 1))
    public = record.public_key.encode()
    quorums = list(itertools.combinations(shares, need))
    for quorum in random.Random(1).sample(quorums, min(len(quorums), 10)):
        assert public_half(interpolated({x: shares[x] for x in quorum})) == public
    # One share fewer gives another key, and every share alone is on the polynomial that the record commits to.
    assert public_half(interpolated({x: shares[x] for x in range(1, need)})) != public
    for x, share in itertools.islice(shares.items(), 3):
        terms = [multiply(pow(x, j, L), decode_point(one.encode())) for j, one in enumerate(record.commitments)]
        assert public_half(share) == encode(add(*terms))


@pytest.mark.slow
def test_as_many_as_a_key_may_have() -> None:
    exchange = joint(33, 64)
    for round in range(6):
        exchange.speak(round)
    assert exchange.course.failure(exchange.inbox("registrar")) is None
    shares = {x: born(exchange, name)[1] for x, name in enumerate(exchange.task.names, 1) if x > 31}
    assert public_half(interpolated(shares)) == record_of(exchange.inbox("north-pier")).public_key.encode()


def test_nothing_of_the_public_key_shows_before_all_are_bound() -> None:
    exchange = joint().run(4)
    public = encode_bytes(born(exchange.run(), "registrar")[0].public_key.encode()).encode()
    said = [octets_of(exchange, round) for round in range(4)]
    assert not any(public in text for text in said)
    assert [bool(exchange.told["registrar"][round]) for round in range(6)] == [True, True, True, False, True, True]


def octets_of(exchange: Exchange, round: int) -> bytes:
    return b"".join(one.to_file() for one in exchange.told["registrar"][round].values())


def test_nobody_speaks_who_has_nothing_to_answer() -> None:
    exchange = joint().run(3)
    assert exchange.course.speakers(3, exchange.inbox("registrar")) == ()
    assert exchange.course.speakers(4, exchange.inbox("registrar")) == exchange.task.names


def test_what_is_kept_shrinks_to_a_share() -> None:
    exchange = joint()
    lengths = []
    for round in range(6):
        exchange.speak(round)
        lengths.append(len(exchange.states["light-house"]))
    # Both polynomials while they may be asked for, then what this party deals to itself, then its key share.
    assert lengths == [0, 6 * 32, 6 * 32, 6 * 32, 32, 32]
    assert exchange.states["light-house"] == born(exchange, "light-house")[1].to_bytes(32, "little")


def test_what_comes_of_it_is_told_to_the_journal() -> None:
    outcome = joint().run().outcome("dry-dock")
    assert isinstance(outcome.event, KeyBorn)
    record = KeyRecord.parse(outcome.files[-1].data)
    assert (outcome.event.record, outcome.event.origin, outcome.event.epoch) == (record.fingerprint, "joint", 1)


def test_the_words_say_what_to_compare() -> None:
    exchange = joint().run()
    record, _ = born(exchange, "registrar")
    words = "\n".join(exchange.outcome("registrar").words)
    assert record.fingerprint in words
    assert record.public_key.encode().hex() in words
    assert "3 of 5" in words
    part, inbox = exchange.parts["registrar"], exchange.inbox("registrar", 5)
    said = ["\n".join(part.prospect(round, inbox)) for round in (0, 1, 2, 4, 5)]
    assert all(one.card.fingerprint in said[0] for one in exchange.task.parties)
    assert record.fingerprint in said[-1]
    assert [round for round in range(6) if part.asks(round)] == [0, 5]
    agreed = part.event(0, inbox)
    assert isinstance(agreed, Approved)
    assert (agreed.custodian, agreed.task) == ("registrar", exchange.task.digest())
    assert not any(part.event(round, inbox) for round in range(1, 5))
    signed = part.event(5, inbox)
    assert isinstance(signed, Approved)
    assert signed.summary.endswith(f"to sign its record {record.fingerprint}")


@pytest.mark.parametrize(
    ("me", "whose", "error"), [("registrar", "dry-dock", ParameterError), ("nobody", "dry-dock", ParameterError)]
)
def test_a_part_is_played_by_the_party_of_that_card(me: str, whose: str, error: type[Exception]) -> None:
    with pytest.raises(error, match="this party key is not that of"):
        JointPart(task(), me, key(whose))


@pytest.mark.parametrize("round", [0, 6])
def test_nothing_is_said_in_rounds_of_others(round: int) -> None:
    exchange = joint()
    with pytest.raises(ParameterError, match=f"nothing is said in round {round}"):
        exchange.parts["registrar"].speak(round, exchange.inbox("registrar"), Secret(0), [])


def test_a_task_of_another_purpose_is_refused() -> None:
    other = task().model_copy(update={"work": None})
    with pytest.raises(ParameterError, match="is not one to generate a key"):
        JointCourse(other)


def test_a_task_that_no_key_can_come_of_is_refused() -> None:
    with pytest.raises(VerificationError, match="no key can come of this task"):
        JointCourse(task(epoch=2))
    with pytest.raises(VerificationError, match="at most 64 custodians"):
        JointCourse(task(2, 65))


def test_a_kept_share_that_does_not_fit_is_refused() -> None:
    exchange, other = joint().run(), joint().run()
    for wrong in (other.states["registrar"], exchange.states["dry-dock"], bytes(32)):
        exchange.states["registrar"] = wrong
        with pytest.raises(VerificationError, match="does not fit the record"):
            exchange.outcome("registrar")


def test_nothing_is_finished_before_all_have_signed() -> None:
    exchange = joint(cheats={(5, "dry-dock"): lambda exchange, said: None}).run()
    assert exchange.silent == ["dry-dock"]
    with pytest.raises(VerificationError, match="does not fit the record that all have signed"):
        exchange.outcome("registrar")


def test_a_dealing_that_opened_must_still_open() -> None:
    exchange = joint().run(5)
    del exchange.boxes[1]["registrar"]["dry-dock"]
    with pytest.raises(VerificationError, match="what dry-dock dealt to registrar no longer opens"):
        exchange.speak(5)


def test_a_party_that_forgot_what_it_said_does_not_sign() -> None:
    exchange = joint().run(5)
    exchange.states["registrar"] = (7).to_bytes(32, "little")
    with pytest.raises(VerificationError, match="does not fit what this party has said"):
        exchange.speak(5)


MULTIPLICATIONS = ("crypto_scalarmult_ed25519_base_noclamp", "crypto_scalarmult_ed25519_noclamp")
CHECKS = ("crypto_core_ed25519_is_valid_point",)


def test_a_party_multiplies_less_than_sixty_times(monkeypatch: pytest.MonkeyPatch) -> None:
    # 3 of 5, from the first round to the files, counted at the library: how much work it is, not how long it takes.
    counted: Counter[str] = Counter()
    for name in MULTIPLICATIONS + CHECKS:
        real = getattr(nacl.bindings, name)

        def counting(*given: bytes, name: str = name, real: object = real) -> object:
            counted[name] += 1
            return real(*given)  # type: ignore[operator]

        monkeypatch.setattr(nacl.bindings, name, counting)
    exchange = joint()
    me, part = "registrar", exchange.parts["registrar"]
    total: Counter[str] = Counter()

    def spent(act: object) -> object:
        before = Counter(counted)
        result = act()  # type: ignore[operator]
        total.update(counted - before)
        return result

    def counted_part(round: int, *given: object) -> object:
        return spent(lambda: part.speak(round, *given))  # type: ignore[arg-type]

    class Watched:
        speak = staticmethod(counted_part)

    exchange.parts = {**exchange.parts, me: Watched()}  # type: ignore[dict-item]
    for round in range(6):
        exchange.speak(round)
        others = [one for name, one in exchange.told[me][round].items() if name != me]
        spent(lambda others=others: [exchange.parsed(one) for one in others])
        assert spent(lambda round=round: exchange.course.failure(exchange.inbox(me, round + 1))) is None
    exchange.parts = {**exchange.parts, me: part}
    spent(lambda: exchange.outcome(me))
    assert sum(total[name] for name in MULTIPLICATIONS) == 41
    # Each point of the four others' two messages is checked once, when it is read.
    assert total[CHECKS[0]] == 4 * 2 * 3


def test_messages_hold_no_number_of_anybody(monkeypatch: pytest.MonkeyPatch) -> None:
    drawn = []
    real = Contribution.drawn.__func__  # type: ignore[attr-defined]
    monkeypatch.setattr(
        Contribution, "drawn", classmethod(lambda cls, need: drawn.append(real(cls, need)) or drawn[-1])
    )
    exchange = joint().run()
    assert len(drawn) == 5
    secret = [octets(one.encode()) for one in drawn]
    secret += [octets(one.dealt_to(x).encode()) for one in drawn for x in range(1, 6)]
    secret += [born(exchange, name)[1].to_bytes(32, "little") for name in exchange.task.names]
    numbers = {text[start : start + 32] for text in secret for start in range(0, len(text), 32)}
    said = b"".join(octets_of(exchange, round) for round in range(6))
    outcome = exchange.outcome("registrar")
    said += b"".join(one.data for one in outcome.files) + repr((outcome, exchange.parts["registrar"])).encode()
    assert not any(form in said for one in numbers for form in (one, one.hex().encode(), encode_bytes(one).encode()))
    kinds = [type(one.body) for one in exchange.told["registrar"][1].values()]
    assert kinds == [Dealing] * 5
    assert [type(exchange.told["registrar"][round]["dry-dock"].body) for round in (4, 5)] == [Reveal, Confirmation]
    assert "<hidden>" in repr((drawn[0], Secret(3)))
