"""The golden samples of keys and tasks: readable for ever, to the letter, and what they say of each other holds.

Checked against: files made by tests/vectors/make/keyed_v1.py from shares/documents/FORMAT_KEYS.md, with no code of this
package; its numbers come from seeds (RFC 8032, section 5.1.5), its boxes and wrappings from RFC 9180 by hand.
"""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

from shares.documents.base import Document, canonical
from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.nonce_batch import BoundPair, NonceBatch, NonceMarks, NoncePair, pair_id
from shares.documents.opened_message import OpenedMessage
from shares.documents.party import OpenPartyKey
from shares.documents.task import Signing, Task
from shares.documents.task_box import open_box
from shares.documents.task_message import OpeningKey, TaskMessage, box_info
from shares.documents.task_step import TaskDone, TaskStep
from shares.group.edwards25519 import BASE, Scalar
from shares.history.rounds import Inbox
from shares.memory import Secret

VECTORS = Path(__file__).parents[1] / "vectors"
FOLDER = VECTORS / "golden" / "v1" / "keyed"
KINDS: dict[str, type[Document]] = {
    "record.json": KeyRecord,
    "north-pier.share.json": KeyShare,
    "task.json": Task,
    "task-to-sign.json": Task,
    "0-harbour-office.json": TaskMessage,
    "1-north-pier.json": TaskMessage,
    "harbour-office.step-0.json": TaskStep,
    "north-pier.step-1.json": TaskStep,
    "north-pier.done.json": TaskDone,
    "opened.json": OpenedMessage,
    "pair.json": NoncePair,
    "bound.json": BoundPair,
    "marks.json": NonceMarks,
    "batch.json": NonceBatch,
}


def data(name: str) -> bytes:
    return (FOLDER / name).read_bytes()


RECORD = KeyRecord.parse(data("record.json"))
TASK = Task.parse(data("task.json"))
FIRST, SECOND = (TaskMessage.parse(data(name)) for name in ("0-harbour-office.json", "1-north-pier.json"))


@pytest.fixture(scope="module")
def drawn():
    """What the maker has drawn, by its own names for it."""
    with pytest.MonkeyPatch.context() as patch:
        patch.syspath_prepend(VECTORS / "make")
        import keyed_v1
        from wrapped_v1 import private_keys

        yield keyed_v1, private_keys
    sys.modules.pop("keyed_v1", None)


def party_key(drawn, name: str) -> OpenPartyKey:
    holder = RECORD.signatures[0].card if name == "harbour-office" else RECORD.holder(name).card
    return OpenPartyKey(holder, Secret.of(drawn[1](name).content))


def octets(secret: Secret | None) -> bytes:
    assert secret is not None
    with secret, secret.view() as view:
        return bytes(view)


@pytest.mark.parametrize("name", KINDS)
def test_they_are_read_and_written_to_the_letter(name: str) -> None:
    document = KINDS[name].parse(data(name))
    assert document.to_file() == data(name)  # type: ignore[attr-defined]


def test_there_is_a_sample_in_every_file() -> None:
    assert {path.name for path in FOLDER.iterdir()} == {*KINDS, "journal.jsonl"}


def test_the_key_share_is_of_the_record(drawn) -> None:
    share = KeyShare.parse(data("north-pier.share.json"))
    with party_key(drawn, "north-pier") as key:
        value = share.open(key.open)
    assert value.encode() == drawn[0].share_of(1)
    assert value * BASE == RECORD.commitments[0] + Scalar.of(share.index) * RECORD.commitments[1]
    assert RECORD.is_confirmed()
    assert (share.record, share.key) == (RECORD.fingerprint, RECORD.key)


def test_the_messages_are_of_the_task(drawn) -> None:
    assert TASK.digest() == drawn[0].digest("task-digest", drawn[0].task(drawn[0].record(), drawn[0].message_to_key()))
    for message, round in ((FIRST, 0), (SECOND, 1)):
        party = TASK.party(message.sender)
        assert party is not None
        assert (message.task, message.round, message.is_by(party.card)) == (TASK.digest(), round, True)
    assert FIRST.seen == Inbox(TASK, ()).seen(0)
    assert SECOND.seen == Inbox(TASK, ({FIRST.sender: FIRST},)).seen(1)
    assert (
        SECOND.digest()
        == drawn[0].hashlib.sha256(b"shares/v1/task-message" + canonical(SECOND.model_dump(mode="json"))).digest()
    )


def test_a_task_to_sign_names_what_it_is_checked_by() -> None:
    work = Task.parse(data("task-to-sign.json")).work
    assert isinstance(work, Signing)
    assert work.issuer is not None
    assert work.earlier is not None
    assert (work.form, work.content.size, work.issuer.size, work.earlier.size) == ("revocation-list", 200, 300, 250)


def test_the_box_opens_with_the_fresh_key_of_round_0(drawn) -> None:
    step = TaskStep.parse(data("harbour-office.step-0.json"))
    assert isinstance(FIRST.body, OpeningKey)
    with party_key(drawn, "harbour-office") as key, step.state(key) as private:
        assert octets(Secret.of(private.view())) == drawn[0].seed("harbour-office/fresh")
        box = SECOND.box_for("harbour-office")
        assert box is not None
        found = open_box(private, box, box_info(TASK, 1, "north-pier", "harbour-office"))
        assert open_box(private, box, box_info(TASK, 0, "north-pier", "harbour-office")) is None
    assert octets(found) == drawn[0].draw("keyed/partial", 96)


def test_steps_and_what_is_left_of_them(drawn) -> None:
    step, done = TaskStep.parse(data("north-pier.step-1.json")), TaskDone.parse(data("north-pier.done.json"))
    with party_key(drawn, "north-pier") as key:
        assert octets(step.state(key)) == b"made up" + drawn[0].seed("harbour-office/fresh")
    assert (step.message, done.messages, step.task, done.party) == (SECOND, (SECOND,), TASK.digest(), "north-pier")


def test_nonces_are_those_that_were_handed_out(drawn) -> None:
    pair, batch = NoncePair.parse(data("pair.json")), NonceBatch.parse(data("batch.json"))
    marks, bound = NonceMarks.parse(data("marks.json")), BoundPair.parse(data("bound.json"))
    with party_key(drawn, "north-pier") as key:
        content = octets(pair.content(key.open))
        assert octets(bound.content(key.open)) == content
    assert Scalar.decode(content[:32]) * BASE == pair.hiding == batch.commitments[0].hiding
    assert Scalar.decode(content[32:]) * BASE == pair.binding == batch.commitments[0].binding
    assert [one.pair for one in marks.marks] == [pair_id(one.hiding, one.binding) for one in batch.commitments]
    assert marks.is_by(batch.card)
    assert (bound.purpose, bound.mark) == (drawn[0].seed("purpose"), drawn[0].seed("spent mark"))
    assert pair.batch == bound.batch == marks.batch == marks.marks[0].pair
