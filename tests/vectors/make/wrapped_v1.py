"""The golden samples of parties, signatures and wrapping, made of the flat set.

Source: shares/documents/FORMAT.md, sections 9 and 10, worked out by `wrapping_v1`. Every draw comes from a stated seed,
but the one that ML-KEM makes inside: a ciphertext for the registrar's card, drawn once by `cryptography` and kept in
`mlkem768_ciphertext.txt` beside this file; the shared secret in it is had by raw decapsulation.
May import: the standard library and the `_v1` modules beside it.
Secret: nothing; keys and passphrases here are made up, and worthless.
Does not: test anything. test_make_set_v1.py does.
"""

from pathlib import Path
from typing import Any

import wrapping_v1 as by_hand
from dealer_v1 import Dealing, pretty, shake
from wrapping_v1 import Json, Private, b64, raw

SEED = "harbour sample wrapped"
PASSPHRASES = {
    "north-pier": "made up: the tide turns twice a day",
    "registrar": "made up: the ledger is bound in blue",
    "harbour-office": "made up: Lotsen \u00fcber die Br\u00fccke, \u2693",
}
CREATED = "2026-01-04T08:00:00Z"
FULL, QUICK = (65_536, 3, 4), (8, 1, 1)


def draw(purpose: str, length: int) -> bytes:
    """Give what is drawn for a purpose."""
    return shake(length, f"{SEED}/{purpose}".encode())


def private_keys(name: str) -> Private:
    return Private(draw(f"{name}/private keys", 128))


def card(name: str, contact: str | None) -> Json:
    """Make a party's card."""
    private = private_keys(name)
    made: Json = {"kind": "party-card", "version": 1, "name": name, "contact": contact, "created": CREATED}
    made |= private.public()
    made["fingerprint"] = by_hand.fingerprint("party-card", made)
    made["signature"] = b64(private.signing.sign(by_hand.signed("party-card", made)))
    return made


def key(made: Json) -> Json:
    """Wrap a party's key under its passphrase."""
    name = made["name"]
    start: Json = {"kind": "party-key", "version": 1, "card": made}
    passphrase, salt = PASSPHRASES[name].encode(), draw(f"{name}/salt", 16)
    content, bound = private_keys(name).content, by_hand.bound_of(start)
    return start | by_hand.by_passphrase(passphrase, salt, QUICK, content, bound)


def lattice_draw(private: Private) -> tuple[bytes, bytes]:
    """Give the kept ciphertext, and the shared secret in it."""
    ciphertext = raw("".join(Path(__file__).with_name("mlkem768_ciphertext.txt").read_text().split()))
    return ciphertext, private.lattice.decapsulate(ciphertext)


def wrapped_share(share: Json, packed: Any) -> Json:
    """Wrap a share; ``packed`` takes content and bound bytes."""
    made = {**by_hand.without(share, "rows", "digest"), "kind": "wrapped-share"}
    return digested(made, packed, b"".join(map(raw, share["rows"])))


def digested(start: Json, packed: Any, content: bytes) -> Json:
    made = start | packed(content, by_hand.bound_of(start))
    return {**made, "digest": by_hand.envelope_digest(made)}


def signature(record: Json, made: Json, role: str, time: str) -> Json:
    """Sign a record."""
    entry = {"role": role, "time": time, "card": made}
    members = by_hand.signed_of_record(record, entry)
    return {**entry, "signature": b64(private_keys(made["name"]).signing.sign(by_hand.signed("record", members)))}


def documents(flat: Dealing) -> dict[str, Json]:
    """Make every document, by its file name."""
    registrar, office = card("registrar", None), card("harbour-office", "the office on the quay, \u00ab2nd floor\u00bb")

    def for_card(made: Json, suite: str, purpose: str) -> Any:
        lattice = lattice_draw(private_keys("registrar")) if suite != "x25519" else (b"", b"")
        source, ephemeral = draw(f"{purpose}/source", 32), draw(f"{purpose}/ephemeral", 32)
        return lambda content, bound: by_hand.for_card(made, suite, source, ephemeral, content, bound, lattice=lattice)

    def by_passphrase(content: bytes, bound: bytes) -> Json:
        passphrase = PASSPHRASES["north-pier"].encode()
        return by_hand.by_passphrase(passphrase, draw("north-pier share/salt", 16), FULL, content, bound)

    signed = {**flat.record}
    for made, role, time in (
        (office, "dealer", "2026-01-05T09:10:00Z"),
        (registrar, "witness", "2026-01-05T09:12:00Z"),
    ):
        signed["signatures"] = [*signed["signatures"], signature(signed, made, role, time)]
    start: Json = {name: flat.record[name] for name in ("set", "epoch", "label", "secret_commitment", "encrypted_file")}
    start = {"kind": "sealed-secret", "version": 1, **start}
    return {
        "registrar.card.json": registrar,
        "registrar.key.json": key(registrar),
        "harbour-office.card.json": office,
        "harbour-office.key.json": key(office),
        "north-pier.wrapped.json": wrapped_share(flat.shares["north-pier"], by_passphrase),
        "registrar.wrapped.json": wrapped_share(
            flat.shares["registrar"], for_card(registrar, "mlkem768-x25519", "registrar share, hybrid")
        ),
        "registrar.x25519.wrapped.json": wrapped_share(
            flat.shares["registrar"], for_card(registrar, "x25519", "registrar share, x25519")
        ),
        "harbour-office.sealed.json": digested(
            start, for_card(office, "x25519", "harbour-office secret"), flat.payload
        ),
        "record.json": signed,
    }


def files(flat: Dealing) -> dict[str, str]:
    """Make every file: its name below golden/v1/wrapped, and its text."""
    return {name: pretty(document) for name, document in documents(flat).items()}


FLAGS = {
    "Passphrase": "Content sealed under a passphrase, which Argon2id stretches.",
    "Card": "Content sealed under a key that is encrypted to a party card by HPKE.",
    "Hybrid": "HPKE with the hybrid KEM of ML-KEM-768 and X25519.",
}


def tests(flat: Dealing) -> list[Json]:
    """Give the values on the way from each sealed document to its content."""
    made = documents(flat)
    found = []
    for name, document in made.items():
        if "sealed" not in document:
            continue
        wrapping, bound = document["wrapping"], by_hand.bound_of(document)
        owner = name.split(".")[0]
        test: Json = {"comment": f"{document['kind']} of {owner}", "file": f"golden/v1/wrapped/{name}"}
        if wrapping["method"] == "passphrase":
            opener: bytes | Private = PASSPHRASES[owner].encode()
            test |= {"flags": ["Passphrase"], "passphrase": opener.hex()}
            source = by_hand.stretched(opener, wrapping)
        else:
            opener = private = private_keys(owner)
            test |= {"flags": ["Card", *(["Hybrid"] if wrapping["suite"] != "x25519" else [])]}
            test |= {"private_keys": private.content.hex()}
            enc = raw(wrapping["key"])[:-48]
            test |= {"shared_secret": private.shared_secret(wrapping["suite"], enc).hex()}
            source = by_hand.decrypted(private, wrapping, bound)
        content_key, commitment = by_hand.key_and_commitment(source)
        found.append(
            {
                **test,
                "bound": bound.decode(),
                "source": source.hex(),
                "key": content_key.hex(),
                "commitment": commitment.hex(),
                "content": by_hand.opened(document, opener).hex(),
                "result": "valid",
            }
        )
    return found
