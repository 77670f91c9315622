"""Parties who break the rules of joint generation, each in one place: the key is not born, and they are named.

Source: the rules are those of Gennaro et al. 2007, fig. 2, steps 1 and 4; the raised degree is a disclosed failure of
several implementations (the number of commitments was not checked); equivocation is Byzantine behaviour as ever.
"""

from __future__ import annotations

import base64
import traceback
from collections.abc import Callable
from dataclasses import replace

import pytest
from keys.joining import born, dealing, joint, key
from keys.rounds import Cheat, Exchange, octets

from shares.documents.key_record import KeyRecord
from shares.documents.task_message import (
    Accusation,
    Answer,
    Complaint,
    Confirmation,
    Dealing,
    Reveal,
    Review,
    ShownShare,
    TaskMessage,
)
from shares.errors import DocumentError, SharesError, VerificationError
from shares.group.edwards25519 import BASE, Scalar, total
from shares.group.proofs import prove_possession
from shares.history.rounds import Failure, Said
from shares.keys.generation import Contribution, Dealt
from shares.keys.verdict import proof_context, record_of
from shares.memory import Secret

NORTH, SOUTH, LIGHT, REGISTRAR, DOCK = NAMES = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")


def test_the_names_are_those_of_the_task() -> None:
    assert joint().task.names == NAMES


# What cheats say.


def body(said: Said | None, made: object) -> Said:
    """What was to be said, with another body."""
    assert said is not None
    return replace(said, body=made)  # type: ignore[arg-type]


def wrong_share(*to: str) -> Cheat:
    """Deals other numbers than those committed to."""

    def cheat(exchange: Exchange, said: Said | None) -> Said:
        assert said is not None
        wrong = {name: Dealt(Scalar.drawn(), Scalar.drawn()).encode() for name in to}
        return replace(said, sealed={**said.sealed, **wrong})

    return cheat


def boxed(content: bytes | None, to: str) -> Cheat:
    """Deals something that is no pair of numbers, or nothing."""

    def cheat(exchange: Exchange, said: Said | None) -> Said:
        assert said is not None
        kept = {name: box for name, box in said.sealed.items() if name != to}
        return replace(said, sealed=kept if content is None else {**kept, to: Secret.of(content)})

    return cheat


def degree(need: int) -> Cheat:
    """Deals by a polynomial of another degree, consistently."""
    return lambda exchange, said: dealing(exchange, NORTH, Contribution.drawn(need))


def complains(*against: str) -> Cheat:
    found = tuple(Complaint(against=name, reason="made up") for name in against)
    return lambda exchange, said: body(said, Review(what="review", complaints=found))


def shows(bend: Callable[[tuple[ShownShare, ...]], tuple[ShownShare, ...]]) -> Cheat:
    def cheat(exchange: Exchange, said: Said | None) -> Said:
        assert said is not None
        assert isinstance(said.body, Answer)
        return body(said, Answer(what="answer", shares=bend(said.body.shares)))

    return cheat


def reveals(contribution: Contribution, proven: int = 1) -> Cheat:
    """Reveals this, with a good proof for its constant at this index."""

    def cheat(exchange: Exchange, said: Said | None) -> Said:
        proof = contribution.possession(proven, proof_context(exchange.task, NORTH))
        return body(said, Reveal(what="reveal", commitments=contribution.revealed(), proof=proof.encode()))

    return cheat


def same_constant(exchange: Exchange, said: Said | None) -> Said:
    """Reveals the true constant, truly proved, and one false coefficient."""
    assert said is not None
    assert isinstance(said.body, Reveal)
    first, second, *rest = said.body.commitments
    return body(said, said.body.model_copy(update={"commitments": (first, second + BASE, *rest)}))


def copied_proof(exchange: Exchange, said: Said | None) -> Said:
    """Takes a neighbour's commitments and proof for its own."""
    neighbour = exchange.parts[SOUTH].speak(4, exchange.inbox(SOUTH, 4), Secret.of(exchange.states[SOUTH]), [])
    return body(said, neighbour.body)


def rogue_key(exchange: Exchange, said: Said | None) -> Said:
    """Reveals a constant that makes the public key one of its own choice, though it does not know its logarithm."""
    assert said is not None
    assert isinstance(said.body, Reveal)
    others = []
    for name in NAMES[1:]:
        spoken = exchange.parts[name].speak(4, exchange.inbox(name, 4), Secret.of(exchange.states[name]), []).body
        assert isinstance(spoken, Reveal)
        others.append(spoken.commitments[0])
    chosen = Scalar.of(7) * BASE - total(others)
    changed = {"commitments": (chosen, *said.body.commitments[1:])}
    return body(said, said.body.model_copy(update=changed))


def accuses(share: Scalar | None, blind: Scalar | None, against: str = SOUTH) -> Cheat:
    made = Accusation(what="accusation", against=against, reason="made up", share=share, blind=blind)
    return lambda exchange, said: body(said, made)


def accuses_truly_dealt(exchange: Exchange, said: Said | None) -> Said:
    """Shows what it was dealt, which fits all that was revealed."""
    dealt = Dealt.decode(Secret.of(exchange.boxes[1][NORTH][SOUTH]))
    return accuses(dealt.share, dealt.blind)(exchange, said)  # type: ignore[return-value]


def signs_another(exchange: Exchange, said: Said | None) -> Said:
    record = record_of(exchange.inbox(NORTH, 5))
    other = KeyRecord.of(
        key=record.key,
        label="another label",
        created=record.created,
        origin="joint",
        custodians=record.custodians,
        commitments=record.commitments,
        generation=record.generation,
    )
    return body(said, Confirmation(what="confirmation", signature=other.signature_by(key(NORTH))))


def has_another_sign(exchange: Exchange, said: Said | None) -> Said:
    record = record_of(exchange.inbox(NORTH, 5))
    return body(said, Confirmation(what="confirmation", signature=record.signature_by(key(SOUTH))))


def signs(exchange: Exchange, said: Said | None) -> Said:
    """Signs the record whatever its own program says."""
    signature = record_of(exchange.inbox(NORTH, 5)).signature_by(key(NORTH))
    return Said(Confirmation(what="confirmation", signature=signature), Secret(0))


def and_signs(cheat: Cheat) -> dict[tuple[int, str], Cheat]:
    """Reveals something else, and goes on as if nothing were."""
    return {(4, NORTH): cheat, (5, NORTH): signs}


def silent(exchange: Exchange, said: Said | None) -> None:
    return None


BLAMED = {
    "degree raised": ({(1, NORTH): degree(4)}, NORTH, "the number needed was raised"),
    "degree lowered": ({(1, NORTH): degree(2)}, NORTH, "the number needed was lowered"),
    "wrong share, and shown again": (
        {(1, NORTH): wrong_share(SOUTH), (3, NORTH): shows(lambda s: (_bent(s[0]),))},
        NORTH,
        f"what {NORTH} shows that it has dealt to {SOUTH} does not fit",
    ),
    "complaint not answered": (
        {(1, NORTH): wrong_share(SOUTH, LIGHT), (3, NORTH): shows(lambda s: s[:1])},
        NORTH,
        f"does not show what it has dealt to {SOUTH}, {LIGHT}",
    ),
    "more shown than asked for": (
        {(1, NORTH): wrong_share(SOUTH), (3, NORTH): shows(lambda s: (*s, s[0].model_copy(update={"to": DOCK})))},
        NORTH,
        "and nothing else",
    ),
    "complaint against itself": ({(2, NORTH): complains(NORTH)}, NORTH, "of itself"),
    "complaint against nobody": ({(2, NORTH): complains("auditor-east")}, NORTH, "takes no part"),
    "one complaint twice": ({(2, NORTH): complains(SOUTH, SOUTH)}, NORTH, "one party twice"),
    "degree raised when revealed": ({(4, NORTH): reveals(Contribution.drawn(4))}, NORTH, "was raised"),
    "degree lowered when revealed": ({(4, NORTH): reveals(Contribution.drawn(2))}, NORTH, "was lowered"),
    "another contribution revealed": (
        and_signs(reveals(Contribution.drawn(3))),
        NORTH,
        "revealed other",
    ),
    "one coefficient revealed otherwise": (and_signs(same_constant), NORTH, "revealed other"),
    "proof for another index": (
        and_signs(reveals(Contribution.drawn(3), 2)),
        NORTH,
        "has not proved",
    ),
    "copied proof": (and_signs(copied_proof), NORTH, "has not proved"),
    "rogue key": (and_signs(rogue_key), NORTH, "has not proved"),
    "false accusation": ({(5, NORTH): accuses(Scalar.of(1), Scalar.of(2))}, NORTH, "proves nothing"),
    "accusation with what fits": ({(5, NORTH): accuses_truly_dealt}, NORTH, "proves nothing"),
    "false accusation of a bad proof": ({(5, NORTH): accuses(None, None)}, NORTH, "proves nothing"),
    "half an accusation": ({(5, NORTH): accuses(Scalar.of(1), None)}, NORTH, "proves nothing"),
    "accusation of itself": ({(5, NORTH): accuses(None, None, NORTH)}, NORTH, "accuses itself"),
    "accusation of nobody": ({(5, NORTH): accuses(None, None, "auditor-east")}, NORTH, "takes no part"),
    "another record signed": ({(5, NORTH): signs_another}, NORTH, "has not signed the record"),
    "another party's signature": ({(5, NORTH): has_another_sign}, NORTH, "has not signed the record"),
    **{
        f"something else in round {round}": (
            {(round, NORTH): lambda exchange, said: body(said, Dealing(what="dealing", commitments=(BASE,)))},
            NORTH,
            f"does not belong into round {round}",
        )
        for round in (0, 2, 4, 5)
    },
}


def _bent(shown: ShownShare) -> ShownShare:
    return shown.model_copy(update={"share": shown.share + Scalar.of(1)})


@pytest.mark.parametrize(("cheats", "by", "what"), BLAMED.values(), ids=BLAMED)
def test_who_breaks_a_rule_is_named_by_all(cheats: dict[tuple[int, str], Cheat], by: str, what: str) -> None:
    exchange = joint(cheats=cheats).run()
    found = exchange.failures()
    assert {failure.by for failure in found.values() if failure} == {by}
    assert len(set(found.values())) == 1
    failure = found[DOCK]
    assert failure is not None
    assert what in failure.what


SETTLED = {
    "wrong share": {(1, NORTH): wrong_share(SOUTH)},
    "wrong shares to fewer than are needed": {(1, NORTH): wrong_share(SOUTH, DOCK)},
    "no box": {(1, NORTH): boxed(None, SOUTH)},
    "a short box": {(1, NORTH): boxed(bytes(63), SOUTH)},
    "a long box": {(1, NORTH): boxed(bytes(96), SOUTH)},
    "numbers that are not reduced": {(1, NORTH): boxed(b"\xff" * 64, SOUTH)},
    "zeros": {(1, NORTH): boxed(bytes(64), SOUTH)},
    "a false complaint": {(2, SOUTH): complains(NORTH)},
    "false complaints of all": {(2, SOUTH): complains(NORTH, LIGHT, REGISTRAR, DOCK)},
}


@pytest.mark.parametrize("cheats", SETTLED.values(), ids=SETTLED)
def test_a_complaint_that_is_answered_well_is_told_and_hurts_nobody(cheats: dict[tuple[int, str], Cheat]) -> None:
    exchange = joint(cheats=cheats).run()
    assert set(exchange.failures().values()) == {None}
    assert len({born(exchange, name)[0] for name in NAMES}) == 1
    assert f"complained of {NORTH}, who then showed numbers that hold" in "\n".join(exchange.outcome(DOCK).words)
    assert NORTH in exchange.told[DOCK][3]


@pytest.mark.parametrize(
    "cheats",
    [
        {(1, NORTH): wrong_share(SOUTH, LIGHT, DOCK)},
        {(2, name): complains(NORTH) for name in (SOUTH, LIGHT, DOCK)},
    ],
    ids=["the dealer cheats", "they do"],
)
def test_where_as_many_complain_as_are_needed_it_ends_and_nobody_is_blamed(
    cheats: dict[tuple[int, str], Cheat],
) -> None:
    exchange = joint(cheats=cheats).run()
    (failure,) = set(exchange.failures().values())
    assert failure is not None
    assert failure.by is None
    assert f"{SOUTH}, {LIGHT}, {DOCK} complain of what {NORTH} has dealt: as many as the key will need" in failure.what
    assert not any(exchange.told[DOCK][3:])


def test_before_it_shows_anything_a_party_is_told_what() -> None:
    exchange = joint(cheats=SETTLED["wrong shares to fewer than are needed"]).run(3)
    said = "\n".join(exchange.parts[NORTH].prospect(3, exchange.inbox(NORTH)))
    assert f"{SOUTH} and {DOCK} complain of what you have dealt" in said


@pytest.mark.parametrize("round", [0, 1, 2, 4, 5])
def test_a_silent_party_stops_it_and_is_awaited(round: int) -> None:
    exchange = joint(cheats={(round, NORTH): silent}).run()
    assert exchange.silent == [NORTH]
    assert set(exchange.failures().values()) == {None}
    assert set(exchange.told[DOCK][round]) == set(NAMES) - {NORTH}


def test_who_does_not_answer_a_complaint_is_awaited() -> None:
    exchange = joint(cheats={(1, NORTH): wrong_share(SOUTH), (3, NORTH): silent}).run()
    assert (exchange.silent, exchange.told[DOCK][3]) == ([NORTH], {})


def test_two_different_dealings_are_found_out() -> None:
    def two_dealings(exchange: Exchange, said: Said | None) -> dict[str, Said]:
        assert said is not None
        other = dealing(exchange, NORTH, Contribution.drawn(3))
        return {name: other if name == SOUTH else said for name in NAMES}

    exchange = joint(cheats={(1, NORTH): two_dealings}).run()
    found = exchange.failures()
    # Nobody is blamed for what somebody else has told them.
    assert {failure.by for failure in found.values() if failure} == {None}
    assert all(failure and "has seen other messages" in failure.what for failure in found.values())


def test_two_different_confirmations_leave_no_two_records() -> None:
    # Signatures are all that differs, and each is on the one record.
    exchange = joint(cheats={(5, NORTH): _signs_twice}).run()
    assert set(exchange.failures().values()) == {None}
    assert len({born(exchange, name)[0].fingerprint for name in NAMES[1:]}) == 1


def _signs_twice(exchange: Exchange, said: Said | None) -> dict[str, Said]:
    assert said is not None
    record = record_of(exchange.inbox(NORTH, 5))
    later = Confirmation(what="confirmation", signature=record.signature_by(key(NORTH), time=record.created))
    return {name: body(said, later) if name == SOUTH else said for name in NAMES}


@pytest.mark.parametrize(
    "encoding", [(1).to_bytes(32, "little"), bytes(32), b"\xff" * 32], ids=["identity", "order 4", "not on it"]
)
def test_a_dealing_with_no_point_of_the_group_is_no_message(encoding: bytes) -> None:
    exchange = joint().run(2)
    message = exchange.told[DOCK][1][NORTH]
    good = message.to_file()
    point = base64.urlsafe_b64encode(message.body.commitments[0].encode()).rstrip(b"=")
    assert good.count(point) == 1
    with pytest.raises(DocumentError, match="no point of the group"):
        TaskMessage.parse(good.replace(point, base64.urlsafe_b64encode(encoding).rstrip(b"=")))


def opposites() -> tuple[Contribution, Contribution]:
    """f and -f: each proof holds."""
    one = Contribution.drawn(2)
    return one, Contribution(tuple(-a for a in one.coefficients), tuple(-b for b in one.blinds))


def test_contributions_that_cancel_out_make_no_key() -> None:
    one, other = opposites()
    exchange = joint(2, 2, {(1, NORTH): deals(one, NORTH), (1, SOUTH): deals(other, SOUTH)}).run()
    found = exchange.failures()
    assert {failure.by for failure in found.values() if failure} == {None}
    assert all(failure and "cancel out" in failure.what for failure in found.values())


def test_two_who_cancel_each_other_out_leave_the_key_to_the_rest() -> None:
    one, other = opposites()
    exchange = joint(2, 3, {(1, NORTH): deals(one, NORTH), (1, SOUTH): deals(other, SOUTH)}).run()
    assert set(exchange.failures().values()) == {None}
    reveal = exchange.told[NORTH][4][LIGHT].body
    assert isinstance(reveal, Reveal)
    assert born(exchange, LIGHT)[0].commitments == reveal.commitments


def deals(contribution: Contribution, me: str) -> Cheat:
    return lambda exchange, said: dealing(exchange, me, contribution)


def test_shares_that_cancel_out_are_refused() -> None:
    # The key would be good, but not this party's share of it: it comes to zero, and nobody can be accused.
    exchange = joint().run(5)
    others = [Dealt.decode(Secret.of(exchange.boxes[1][DOCK][name])).share for name in NAMES[:-1]]
    left = -(others[0] + others[1] + others[2] + others[3])
    contribution = Contribution((left - Scalar.of(30), Scalar.of(1), Scalar.of(1)), Contribution.drawn(3).coefficients)
    assert contribution.dealt_to(5).share == left
    proof = prove_possession(contribution.coefficients[0], 5, proof_context(exchange.task, DOCK))
    message = exchange.told[DOCK][4][DOCK]
    made = Reveal(what="reveal", commitments=contribution.revealed(), proof=proof.encode())
    exchange.told[DOCK][4][DOCK] = message.model_copy(update={"body": made})
    exchange.states[DOCK] = left.encode()
    part, received = exchange.parts[DOCK], exchange.received(DOCK, 5)
    with pytest.raises(VerificationError, match="cancels out"):
        part.speak(5, exchange.inbox(DOCK, 5), Secret.of(exchange.states[DOCK]), received)


@pytest.mark.parametrize("cheats", [one[0] for one in BLAMED.values()], ids=BLAMED)
def test_no_failure_shows_a_number(cheats: dict[tuple[int, str], Cheat], monkeypatch: pytest.MonkeyPatch) -> None:
    drawn: list[Contribution] = []
    real = Contribution.drawn

    def watched(need: int) -> Contribution:
        drawn.append(real(need))
        return drawn[-1]

    monkeypatch.setattr(Contribution, "drawn", watched)
    exchange = joint(cheats=cheats)
    seen = []
    try:
        exchange.run()
    except SharesError as error:
        seen.append("".join(traceback.format_exception(error)) + repr(vars(error)))
    failures: list[Failure | None] = list(exchange.failures().values())
    seen += [repr(one) for one in (failures, drawn, exchange.parts, exchange.inbox(DOCK).task.words())]
    secret = b"".join(octets(one.encode()) for one in drawn)
    secret += b"".join(octets(one.dealt_to(x).encode()) for one in drawn for x in range(1, 6))
    numbers = [secret[start : start + 32] for start in range(0, len(secret), 32)]
    forms = [f(one) for one in numbers for f in (bytes.hex, repr, _base64, _decimal)]
    text = "".join(seen)
    assert (len(numbers) >= 5 * 16) == ((0, NORTH) not in cheats)
    assert not any(form in text for form in forms)


def _base64(number: bytes) -> str:
    return base64.urlsafe_b64encode(number).rstrip(b"=").decode()


def _decimal(number: bytes) -> str:
    return str(int.from_bytes(number, "little"))
