"""The golden samples of a challenge and of answers to it, made of the flat set and the parties of `wrapped_v1`.

Source: shares/documents/FORMAT_EVIDENCE.md, section 17. Everything drawn comes from a stated seed.
May import: the standard library and the `_v1` modules beside it.
Secret: nothing; keys here are made up, and worthless.
Does not: test anything. test_make_set_v1.py does.
"""

import hashlib
from typing import Any

import wrapping_v1 as by_hand
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from dealer_v1 import Dealing, pretty
from wrapped_v1 import card, draw, private_keys
from wrapping_v1 import Json, b64

HEAD = {"sequence": 12, "head": "MWWV-AEU2-J6FP-IMWQ-W6L6-5ILL-Q6O7-KBX4"}


def signature(name: str, purpose: str, members: Json) -> str:
    """Sign as a party."""
    return b64(private_keys(name).signing.sign(by_hand.signed(purpose, members)))


def challenge(flat: Dealing, asker: Json) -> Json:
    """Make the challenge."""
    made: Json = {"kind": "challenge", "version": 1}
    made |= {name: flat.record[name] for name in ("set", "epoch")}
    made |= {
        "record": flat.record["fingerprint"],
        "label": flat.record["label"],
        "purpose": "attestation",
        "drill": None,
        "custodians": ["north-pier", "registrar", "harbour-office"],
        "nonce": draw("challenge/nonce", 32).hex(),
        "created": "2026-04-01T09:00:00Z",
        "due": "2026-04-15T09:00:00Z",
        "journal": HEAD,
    }
    signed = signature(asker["name"], "challenge", made | {"card": asker["fingerprint"]})
    return made | {"card": asker, "signature": signed}


def answer(flat: Dealing, asked: Json, custodian: str, signer: Json | None, **said: Any) -> Json:
    """Make an answer, signed by the share where its content was seen, and by the party, where there is one."""
    digest = hashlib.sha256(b"shares/v1/challenge" + by_hand.canonical(asked)).hexdigest()
    made: Json = {"kind": "attestation", "version": 1, "set": asked["set"], "epoch": asked["epoch"]}
    made |= {"custodian": custodian, "challenge": digest, "journal": asked["journal"]}
    for name in ("time", "grade", "result", "carrier", "opened", "place", "serial", "remark"):
        made[name] = said.get(name)
    over = made | {"card": signer["fingerprint"] if signer else None}
    share = None
    if made["grade"] == "content":
        key = Ed25519PrivateKey.from_private_bytes(flat.attestation_seeds[custodian])
        share = b64(key.sign(by_hand.signed("attestation-share", over)))
    party = signature(signer["name"], "attestation", over) if signer else None
    return made | {"card": signer, "share_signature": share, "party_signature": party}


def files(flat: Dealing) -> dict[str, str]:
    """Make every file: its name below golden/v1/attested, and its text."""
    registrar, office = card("registrar", None), card("harbour-office", "the office on the quay, \u00ab2nd floor\u00bb")
    asked = challenge(flat, office)
    content = {"grade": "content", "result": "intact"}
    made = {
        "challenge.json": asked,
        "registrar.answer.json": answer(
            flat, asked, "registrar", registrar, time="2026-04-02T10:00:00Z", carrier="file", opened=False, **content
        ),
        "north-pier.answer.json": answer(
            flat,
            asked,
            "north-pier",
            None,
            time="2026-04-03T11:00:00Z",
            carrier="paper",
            opened=True,
            place="the pier house, \u00ab2nd shelf\u00bb",
            serial="TB-0018",
            remark="dry, and the ink is good",
            **content,
        ),
        "harbour-office.answer.json": answer(
            flat,
            asked,
            "harbour-office",
            office,
            time="2026-04-04T12:00:00Z",
            grade="sealed",
            result="seal intact",
            opened=False,
            serial="TB-0017",
        ),
    }
    return {name: pretty(document) for name, document in made.items()}
