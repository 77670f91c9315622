"""Tasks, their messages, and a party's steps: what contradicts itself is refused, and what is sealed stays where it is.

Checked against: shares/documents/FORMAT_KEYS.md, sections 23 to 25; the signer written from FORMAT.md, section 9, alone
(tests/vectors/make/wrapping_v1.py); RFC 9180's boxes by `cryptography`. Low-order points: test_next.py.
"""

from __future__ import annotations

import json
import secrets
from datetime import timedelta
from typing import Any

import pytest
from history.exchanging import MADE, NAMES, new_task
from keys.quorum import a_task, dealt
from keys.samples import ME, bodies, message
from parties import card, unlocked
from vectors.make import wrapping_v1 as by_hand

from shares.documents.key_event import Content
from shares.documents.task import Joining, NonceCommitments, Opening, Task, TaskParty
from shares.documents.task_box import is_box_key, new_box_key, open_box, seal_box
from shares.documents.task_message import MAX_ROUNDS, SealedFor, TaskMessage, box_info
from shares.documents.task_step import TaskStep
from shares.errors import DocumentError, VerificationError, WrongKeyError
from shares.memory import Secret

KEY = dealt()


def signed_anew(task: Task, **changes: Any) -> bytes:
    """The file of a task with members changed and signed again, so that only what it says can be wrong."""
    members = {**json.loads(task.to_file()), **changes}
    del members["signature"]
    with unlocked("harbour-office") as key:
        signature = key._signing_key().sign(by_hand.signed("task", members))
    return json.dumps({**members, "signature": by_hand.b64(signature)}).encode()


NAMED = {"size": 1, "digest": "ab" * 32}


def changed_work(task: Task, **changes: Any) -> dict[str, Any]:
    return {"work": {**json.loads(task.to_file())["work"], **changes}}


def opening(**changes: Any) -> Task:
    work = Opening(
        what="open",
        receiver=NAMES[0],
        encapsulated=bytes(32),
        content=Content(size=1, digest=bytes(32)),
        cipher="aes-256-gcm",
        info=None,
        associated=None,
    )
    return new_task(work=work, record=KEY.record.fingerprint, **changes)


def test_a_task_signed_by_the_text_alone_is_read() -> None:
    for task in (new_task(), a_task(KEY), opening()):
        assert Task.parse(signed_anew(task)) == task


def test_contradictions_are_refused() -> None:
    join, sign, open_ = new_task(), a_task(KEY, NAMES), opening()
    parties = json.loads(join.to_file())["parties"]
    (hiding,) = KEY.record.commitments[:1]
    pairs = [NonceCommitments(signer=name, hiding=hiding, binding=hiding).model_dump(mode="json") for name in NAMES]
    cases: list[tuple[Task, dict[str, Any], str]] = [
        (join, {"parties": [parties[0], {**parties[1], "name": "North-Pier"}]}, "names one party twice"),
        (join, {"parties": [parties[0], {**parties[0], "name": "quay"}]}, "one party key"),
        (join, {"due": json.loads(join.to_file())["created"]}, "due before it was made"),
        (join, {"record": KEY.record.fingerprint}, "unless the key is being born"),
        (join, changed_work(join, need=4), "needs more custodians than there are"),
        (sign, {"record": None}, "names the record of the key"),
        (sign, changed_work(sign, namespace="file"), "and nothing else, has a namespace"),
        (sign, changed_work(sign, form="openssh"), "has a namespace"),
        (sign, changed_work(sign, commitments=pairs[:2]), "one pair of commitments for each signer"),
        (sign, changed_work(sign, commitments=pairs[::-1]), "in their order"),
        (sign, changed_work(sign, issuer=NAMED), "and nothing else, has an issuer"),
        (sign, changed_work(sign, form="openssh", namespace="file", issuer=NAMED), "and nothing else, has an issuer"),
        (sign, changed_work(sign, earlier=NAMED), "and nothing else, continues an earlier one"),
        (sign, changed_work(sign, form="certificate", issuer=NAMED, earlier=NAMED), "continues an earlier one"),
        (sign, changed_work(sign, form="revocation-list"), "issuer's certificate, and it names none"),
        (sign, changed_work(sign, form="revocation-list", earlier=NAMED), "and it names none"),
        (open_, changed_work(open_, receiver="registrar"), "its receiver takes no part"),
    ]
    for task, changes, words in cases:
        with pytest.raises(DocumentError, match=words):
            Task.parse(signed_anew(task, **changes))
    assert Task.parse(signed_anew(sign, **changed_work(sign, commitments=pairs)))
    for form, earlier in (("certificate", None), ("revocation-list", None), ("revocation-list", NAMED)):
        assert Task.parse(signed_anew(sign, **changed_work(sign, form=form, issuer=NAMED, earlier=earlier)))


def test_nobody_else_signs_for_the_author() -> None:
    members = json.loads(new_task().to_file())
    with pytest.raises(DocumentError, match="signature does not fit"):
        Task.parse(json.dumps({**members, "author": json.loads(card(ME).to_file())}).encode())
    with unlocked(ME) as key:
        del members["signature"]
        signature = by_hand.b64(key._signing_key().sign(by_hand.signed("task", members)))
    with pytest.raises(DocumentError, match="signature does not fit"):
        Task.parse(json.dumps({**members, "signature": signature}).encode())


def test_a_task_says_what_it_is() -> None:
    task = new_task()
    assert task.words() == (
        "north-pier, south-pier, light-house: generate a key together (Harbour draw), until 2099-12-08T07:00:00Z"
    )
    assert (task.names, task.party("registrar"), task.party_by(card("registrar"))) == (NAMES, None, None)
    assert task.party_by(card(ME)) == task.party(ME) == task.parties[0]
    assert [task.is_late(task.due + timedelta(seconds=s)) for s in (-1, 0, 1)] == [False, False, True]
    assert len(task.fingerprint) == 39
    assert len({new_task().digest() for _ in range(3)}) == 3


@pytest.mark.parametrize("deep", [False, True])
def test_a_changed_copy_has_a_digest_of_its_own(deep: bool) -> None:
    for one in (new_task(), message(bodies()[0])):
        digest, changes = one.digest(), {"created": one.created - timedelta(days=1)}
        changed = one.model_copy(update=changes, deep=deep)
        fresh = type(one).model_construct(**{**dict(one), **changes})
        assert (changed.digest(), one.digest()) == (fresh.digest(), digest)
        assert changed.digest() != digest
        assert one.model_copy(deep=deep) == one == type(one).parse(one.to_file())


def test_a_message_is_its_senders_alone() -> None:
    for body in bodies():
        one = message(body)
        assert TaskMessage.parse(one.to_file()) == one
        assert (one.is_by(card(ME)), one.is_by(card("south-pier"))) == (True, False)
        members = json.loads(one.to_file())
        unsigned = {name: value for name, value in members.items() if name != "signature"}
        by_hand.verify(json.loads(card(ME).to_file()), members["signature"], "task-message", unsigned)
        for changes in ({"round": 2}, {"sender": "south-pier"}, {"seen": bytes([1]) * 32}, {"sealed": ()}):
            assert not one.model_copy(update=changes).is_by(card(ME))
    assert (message(bodies()[0]).box_for("south-pier"), message(bodies()[0]).box_for(ME)) == (bytes(100), None)


def test_a_message_addresses_each_once() -> None:
    members = json.loads(message(bodies()[0]).to_file())
    members["sealed"] *= 2
    with pytest.raises(DocumentError, match="sealed for one party twice"):
        TaskMessage.parse(json.dumps(members).encode())
    assert SealedFor(to=ME, box=b"x").to == ME


def test_a_box_opens_for_its_key_and_place_alone() -> None:
    task, other = new_task(), new_task()
    (private, public), (another, _) = new_box_key(), new_box_key()
    content = secrets.token_bytes(64)
    assert is_box_key(public)
    with private, another, Secret.of(content) as secret:
        info = box_info(task, 1, NAMES[0], NAMES[1])
        box = seal_box(secret, public, info)
        assert len(box) == 32 + 64 + 16
        opened = open_box(private, box, info)
        assert opened is not None
        with opened, opened.view() as view:
            assert bytes(view) == content
        for wrong in (
            box_info(other, 1, NAMES[0], NAMES[1]),
            *(box_info(task, round, NAMES[0], NAMES[1]) for round in range(MAX_ROUNDS) if round != 1),
            box_info(task, 1, NAMES[2], NAMES[1]),
            box_info(task, 1, NAMES[0], NAMES[2]),
            box_info(task, 1, NAMES[1], NAMES[0]),
            b"",
        ):
            assert open_box(private, box, wrong) is None
        assert open_box(another, box, info) is None
        for i in range(len(box)):
            assert open_box(private, box[:i] + bytes([box[i] ^ 0x80]) + box[i + 1 :], info) is None
            assert open_box(private, box[:i], info) is None


def test_the_infos_of_boxes_are_all_different() -> None:
    task = new_task()
    places = [(r, a, b) for r in range(MAX_ROUNDS) for a in NAMES for b in NAMES]
    assert len({box_info(task, *place) for place in places}) == len(places)


def test_a_step_keeps_its_state_with_its_message() -> None:
    one, other = (message(body, round) for round, body in enumerate(bodies()[:2]))
    with unlocked(ME) as key, unlocked("south-pier") as stranger, Secret.of(b"what I must know") as state:
        step = TaskStep.wrap(one, state, key)
        read = TaskStep.parse(step.to_file())
        with read.state(key) as found, found.view() as view:
            assert bytes(view) == b"what I must know"
        assert b"what I must know" not in step.to_file()
        with pytest.raises(WrongKeyError):
            read.state(stranger)
        moved = step.model_copy(update={"message": other})
        with pytest.raises(VerificationError, match="own digest does not fit"):
            moved.state(key)
        with pytest.raises(VerificationError):
            moved.with_digest().state(key)


def test_a_task_of_a_joint_key_needs_two_at_least() -> None:
    with pytest.raises(ValueError, match="need"):
        Joining(what="join", need=1)
    assert len(new_task(parties=tuple(TaskParty(name=n, card=card(n)) for n in NAMES[:2])).parties) == 2
    assert MADE.tzinfo is not None
