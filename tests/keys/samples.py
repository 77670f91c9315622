"""One document of each kind that threshold keys and tasks have, and ways in which each must not be.

Source: shares/documents/FORMAT_KEYS.md, sections 21 to 26.
"""

from __future__ import annotations

import json
from typing import Any

from history.exchanging import new_task
from keys.quorum import NAMES, a_task, dealt
from parties import card, unlocked
from strategies import CREATED

from shares.documents.base import Document
from shares.documents.nonce_batch import BoundPair, NonceBatch, NonceMark, NonceMarks, NoncePair, pair_id
from shares.documents.task_message import (
    Accusation,
    Answer,
    Body,
    Commitment,
    Complaint,
    Confirmation,
    Dealing,
    OpeningKey,
    Partial,
    Reveal,
    Review,
    SealedFor,
    ShownShare,
    SignatureShare,
    TaskMessage,
)
from shares.documents.task_step import TaskDone, TaskStep
from shares.documents.wrapping import card_sealer
from shares.group.edwards25519 import BASE, Scalar
from shares.memory import Secret

ME = "north-pier"
NUMBER, POINT = Scalar.of(4711), Scalar.of(4711) * BASE
OTHER = Scalar.of(815) * BASE


def bodies() -> list[Body]:
    """What a message can say, each once, in what it has to have."""
    with unlocked(ME) as key:
        signature = dealt().record.signature_by(key, time=CREATED)
    shown = ShownShare(to="south-pier", share=NUMBER, blind=NUMBER)
    return [
        OpeningKey(what="opening-key", x25519=bytes([9]) + bytes(31)),
        Dealing(what="dealing", commitments=(POINT, OTHER)),
        Review(what="review", complaints=(Complaint(against="south-pier", reason="it holds no box"),)),
        Answer(what="answer", shares=(shown,)),
        Reveal(what="reveal", commitments=(POINT, OTHER), proof=bytes(64)),
        Confirmation(what="confirmation", signature=signature),
        Accusation(what="accusation", against="south-pier", reason="it does not fit", share=NUMBER, blind=None),
        Commitment(what="commitment", hiding=POINT, binding=OTHER),
        SignatureShare(what="signature-share", share=NUMBER),
        Partial(what="partial"),
    ]


def message(body: Body, round: int = 1) -> TaskMessage:
    """A message of north-pier, with something sealed for south-pier."""
    with unlocked(ME) as key:
        return TaskMessage.signed_by(
            key,
            task=new_task(nonce=bytes(32)).digest(),
            round=round,
            sender=ME,
            seen=bytes(32),
            body=body,
            sealed=(SealedFor(to="south-pier", box=bytes(100)),),
            created=CREATED,
        )


def key_documents() -> dict[str, Document]:
    """One document of each kind, and of some several."""
    key, own = dealt(), card_sealer(card(ME).recipient())
    with unlocked(ME) as signer:
        signed = key.record.signed([key.record.signature_by(signer, time=CREATED)])
        step = TaskStep.wrap(message(bodies()[0], 0), Secret.of(b"made up"), signer)
        batch = NonceBatch.signed_by(
            signer, record=key.record, signer=ME, commitments=[(POINT, OTHER)], created=CREATED
        )
        marks = NonceMarks.signed_by(
            signer,
            record=key.record,
            signer=ME,
            batch=pair_id(POINT, OTHER),
            marks=[
                NonceMark(pair=pair_id(POINT, OTHER), mark=bytes(32)),
                NonceMark(pair=pair_id(OTHER, POINT), mark=None),
            ],
        )
    pair = NoncePair.wrap(
        Secret.of(bytes(64)),
        record=key.record,
        signer=ME,
        batch=pair_id(POINT, OTHER),
        hiding=POINT,
        binding=OTHER,
        seal=own,
    )
    bound = BoundPair.of(pair, Secret.of(bytes(64)), purpose=bytes(32), mark=bytes(32), seal=own)
    messages = {f"task-message: {body.what}": message(body) for body in bodies()}
    return {
        "key-record": signed,
        "key-share": key.shares[ME],
        "task": new_task(nonce=bytes(32)),
        "task to sign": a_task(key, NAMES[:3], namespace="file", form="openssh", remark="in a hurry"),
        "task-step": step,
        "task-done": TaskDone(
            kind="task-done",
            version=1,
            task=step.task,
            party=ME,
            given_up=True,
            messages=(step.message, message(bodies()[1])),
        ),
        "nonce-pair": pair,
        "nonce-bound": bound,
        "nonce-marks": marks,
        "nonce-batch": batch,
        **messages,
    }


def key_mutations(samples: dict[str, Any]) -> dict[str, dict[str, dict[str, Any]]]:
    """What must not be in each of them, by sample and name: members, changed."""
    common: dict[str, dict[str, Any]] = {
        "another kind": {"kind": "sheet"},
        "another version": {"version": 2},
        "version as text": {"version": "1"},
        "unknown member": {"colour": "blue"},
    }
    of_key = {"a short key id": {"key": "00" * 15}, "epoch 0": {"epoch": 0}}
    sealed = {"sealed empty": {"sealed": ""}, "digest null": {"digest": None}, "no wrapping": {"wrapping": None}}
    record, task, sign = samples["key-record"], samples["task"], samples["task to sign"]
    holder, first = record["custodians"][0], samples["task-message: dealing"]
    body, box = first["body"], first["sealed"][0]
    batch = samples["nonce-batch"]
    return {
        "key-record": {
            **common,
            **of_key,
            "another origin": {"origin": "found"},
            "need 1": {"need": 1},
            "need 65": {"need": 65},
            "index 0": {"custodians": [{**holder, "index": 0}, *record["custodians"][1:]]},
            "index 2^16": {"custodians": [{**holder, "index": 2**16}, *record["custodians"][1:]]},
            "one custodian": {"custodians": [holder]},
            "a person": {"custodians": [{**holder, "person": "x"}, *record["custodians"][1:]]},
            "a short commitment": {"commitments": ["A" * 42] * 3},
            "one commitment": {"commitments": record["commitments"][:1]},
            "a short transcript": {"generation": "00" * 31},
            "a local time": {"created": "2026-12-01T07:00:00+01:00"},
            "66 signatures": {"signatures": record["signatures"] * 66},
        },
        "key-share": {**common, **of_key, **sealed, "index 0": {"index": 0}, "need 1": {"need": 1}},
        "task": {
            **common,
            **of_key,
            "another work": {"work": {**task["work"], "what": "burn"}},
            "need 1": {"work": {**task["work"], "need": 1}},
            "a work with a member too many": {"work": {**task["work"], "form": "plain"}},
            "one party": {"parties": task["parties"][:1]},
            "66 parties": {"parties": task["parties"] * 22},
            "a party without a card": {"parties": [{"name": "north-pier"}] * 2},
            "a short nonce": {"nonce": "00" * 31},
            "a local time": {"due": "2099-12-01T07:00:00+01:00"},
            "a short signature": {"signature": "A" * 85},
            "an empty remark": {"remark": ""},
        },
        "task to sign": {
            "another form": {"work": {**sign["work"], "form": "wax"}},
            "more than 64 MiB": {"work": {**sign["work"], "content": {"size": (64 << 20) + 1, "digest": "00" * 32}}},
            "a commitment without its binding": {
                "work": {**sign["work"], "commitments": [{"signer": "north-pier", "hiding": body["commitments"][0]}]}
            },
        },
        "task-message: dealing": {
            **common,
            "round 8": {"round": 8},
            "round -1": {"round": -1},
            "nobody's": {"sender": ""},
            "a short view": {"seen": "00" * 31},
            "another body": {"body": {**body, "what": "song"}},
            "no commitments": {"body": {**body, "commitments": []}},
            "65 commitments": {"body": {**body, "commitments": body["commitments"][:1] * 65}},
            "a body with a member too many": {"body": {**body, "share": "A" * 43}},
            "66 boxes": {"sealed": [box] * 66},
            "a box for nobody": {"sealed": [{"box": box["box"]}]},
            "an empty box": {"sealed": [{**box, "box": ""}]},
            "a short signature": {"signature": "A" * 85},
        },
        "task-message: reveal": {
            "a short proof": {"body": {**samples["task-message: reveal"]["body"], "proof": "A" * 85}},
        },
        "task-step": {**common, **sealed, "no message": {"message": None}, "nobody's": {"party": ""}},
        "task-done": {**common, "nine messages": {"messages": samples["task-done"]["messages"][:1] * 9}},
        "nonce-pair": {**common, **of_key, **sealed, "a short batch": {"batch": "0" * 31}},
        "nonce-bound": {**common, **of_key, **sealed, "a short purpose": {"purpose": "0" * 63}, "no mark": {"mark": 1}},
        "nonce-marks": {
            **common,
            "no marks": {"marks": []},
            "a short mark": {"marks": [{"pair": "0" * 32, "mark": "00"}]},
        },
        "nonce-batch": {
            **common,
            **of_key,
            "no commitments": {"commitments": []},
            "1,001 commitments": {"commitments": batch["commitments"] * 1001},
            "a short signature": {"signature": "A" * 85},
        },
    }


def as_json(documents: dict[str, Document]) -> dict[str, Any]:
    """The documents as their files say them."""
    return {name: json.loads(document.to_file()) for name, document in documents.items()}  # type: ignore[attr-defined]
