"""The golden samples of threshold keys: a key that was dealt, and a message that is opened by it, as files of a task.

Source: shares/documents/FORMAT_KEYS.md, sections 21 to 29. No curve is needed: an Ed25519 public key is the base point
times a number that its seed gives (RFC 8032, section 5.1.5), so seeds are drawn, and numbers worked out from them.
May import: the standard library, `cryptography` and the `_v1` modules beside it.
Secret: nothing; keys here are made up, and worthless.
Does not: test anything. test_make_set_v1.py and tests/documents/test_keyed_golden.py do.
"""

import hashlib
from typing import Any

import journal_v1
import wrapping_v1 as by_hand
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey, X25519PublicKey
from cryptography.hazmat.primitives.ciphers.aead import AESGCM
from dealer_v1 import pretty
from wrapped_v1 import card, draw, private_keys
from wrapping_v1 import Json, b64, canonical, raw

L = 2**252 + 27742317777372353535851937790883648493
NEED = 2
CUSTODIANS = ["north-pier", "south-pier", "light-house"]
RECEIVER = "harbour-office"
KEY = hashlib.sha256(b"keyed sample").hexdigest()[:32]


def number_of(seed: bytes) -> int:
    """Give the number by which the base point becomes the seed's public key (RFC 8032, section 5.1.5)."""
    half = int.from_bytes(hashlib.sha512(seed).digest()[:32], "little")
    return (half & (1 << 254) - 8 | 1 << 254) % L


def point_of(seed: bytes) -> str:
    """Give that public key, as a document has it."""
    return b64(Ed25519PrivateKey.from_private_bytes(seed).public_key().public_bytes_raw())


def seed(purpose: str) -> bytes:
    return draw(f"keyed/{purpose}", 32)


def share_of(index: int) -> bytes:
    """Give f(x) = a_0 + a_1 x modulo L, 32 bytes, little endian."""
    value = sum(number_of(seed(f"coefficient {j}")) * index**j for j in range(NEED)) % L
    return value.to_bytes(32, "little")


def sign(name: str, purpose: str, members: Json) -> str:
    return b64(private_keys(name).signing.sign(by_hand.signed(purpose, members)))


def sealed_for(to: Json, purpose: str, content: bytes, bound: bytes) -> dict[str, Any]:
    """Give the members ``wrapping`` and ``sealed``."""
    source, ephemeral = seed(f"{purpose}/source"), seed(f"{purpose}/ephemeral")
    return by_hand.for_card(to, "x25519", source, ephemeral, content, bound, lattice=(b"", b""))


def enveloped(start: Json, to: Json, content: bytes, bound: Json) -> Json:
    """Seal content for a card; ``bound``: the members that it is bound to."""
    made = start | sealed_for(to, start["kind"], content, canonical(bound))
    return {**made, "digest": by_hand.envelope_digest(made)}


def some(document: Json, *names: str) -> Json:
    return {name: document[name] for name in names}


def record() -> Json:
    """Make the key record, signed by its dealer."""
    made: Json = {"kind": "key-record", "version": 1, "key": KEY, "epoch": 1, "label": "Tide tables \u2013 Möwe"}
    made |= {
        "created": "2026-03-01T09:00:00Z",
        "origin": "dealt",
        "need": NEED,
        "custodians": [{"name": n, "index": i, "card": card(n, None)} for i, n in enumerate(CUSTODIANS, start=1)],
        "commitments": [point_of(seed(f"coefficient {j}")) for j in range(NEED)],
        "generation": None,
        "previous": None,
    }
    made["fingerprint"] = by_hand.fingerprint("key-record", made)
    dealer, time = card(RECEIVER, None), "2026-03-01T09:05:00Z"
    signature = sign(RECEIVER, "key-record", {"time": time, "card": dealer["fingerprint"], "record": made})
    return {**made, "signatures": [{"time": time, "card": dealer, "signature": signature}]}


def key_share(key: Json) -> Json:
    """Make north-pier's key share."""
    holder = key["custodians"][0]
    start: Json = {"kind": "key-share", "version": 1, **some(key, "key", "epoch", "label")}
    start |= {"record": key["fingerprint"], "custodian": holder["name"], "index": holder["index"], "need": NEED}
    return enveloped(start, holder["card"], share_of(1), by_hand.without(start, "label"))


def message_to_key() -> bytes:
    """Give what is to be opened: an encapsulated key, and what may stand for a ciphertext; nobody opens it here."""
    ephemeral = X25519PrivateKey.from_private_bytes(seed("sender"))
    return ephemeral.public_key().public_bytes_raw() + draw("keyed/ciphertext", 40)


def task(key: Json, content: bytes) -> Json:
    made: Json = {"kind": "task", "version": 1, **some(key, "key", "epoch"), "record": key["fingerprint"]}
    named = {"size": len(content), "digest": hashlib.sha256(content).hexdigest()}
    made |= {
        "label": key["label"],
        "work": {"what": "open", "receiver": RECEIVER, "encapsulated": b64(content[:32]), "content": named,
                 "cipher": "aes-256-gcm", "info": b64(b"tide"), "associated": None},
        "parties": [{"name": name, "card": card(name, None)} for name in [*CUSTODIANS[:2], RECEIVER]],
        "remark": "the letter of the harbour master, “sealed”",
        "nonce": seed("nonce").hex(),
        "created": "2026-03-02T09:00:00Z",
        "due": "2026-03-09T09:00:00Z",
        "author": card(RECEIVER, None),
    }  # fmt: skip
    return {**made, "signature": sign(RECEIVER, "task", made)}


def task_to_sign(key: Json, asked: Json) -> Json:
    """Make a task to sign a revocation list that continues an earlier one, with commitments made beforehand."""

    def named(what: str, size: int) -> Json:
        content = draw(f"keyed/{what}", size)
        return {"size": len(content), "digest": hashlib.sha256(content).hexdigest()}

    names = CUSTODIANS[:NEED]
    pairs = [{what: point_of(seed(f"{what} {i}")) for what in ("hiding", "binding")} for i in range(NEED)]
    work: Json = {"what": "sign", "form": "revocation-list", "namespace": None, "content": named("list", 200)}
    work |= {"issuer": named("issuer", 300), "earlier": named("earlier", 250)}
    work |= {"commitments": [{"signer": name, **pair} for name, pair in zip(names, pairs, strict=True)]}
    made = {**by_hand.without(asked, "signature"), "work": work, "parties": asked["parties"][:NEED], "remark": None}
    return {**made, "signature": sign(RECEIVER, "task", made)}


def digest(kind: str, document: Json) -> bytes:
    return hashlib.sha256(f"shares/v1/{kind}".encode() + canonical(document)).digest()


def message(work: Json, round: int, sender: str, seen: bytes, body: Json, sealed: list[Json]) -> Json:
    made: Json = {"kind": "task-message", "version": 1, "task": digest("task-digest", work).hex(), "round": round}
    made |= {"sender": sender, "seen": seen.hex(), "body": body, "sealed": sealed}
    made |= {"created": f"2026-03-0{round + 3}T09:00:00Z"}
    return {**made, "signature": sign(sender, "task-message", made)}


def seen(work: Json, *before: Json) -> bytes:
    digests = [digest("task-digest", work), *(digest("task-message", one) for one in before)]
    return hashlib.sha256(b"shares/v1/task-seen" + b"".join(digests)).digest()


def box(work: Json, round: int, sender: str, to: str, content: bytes) -> str:
    """Seal for a fresh key, single shot, by RFC 9180."""
    info = b"shares/v1/task-box" + canonical(
        {
            "task": digest("task-digest", work).hex(),
            **some(work, "key", "epoch"),
            "round": round,
            "from": sender,
            "to": to,
        }
    )
    ephemeral = X25519PrivateKey.from_private_bytes(seed("box/ephemeral"))
    public, recipient = ephemeral.public_key().public_bytes_raw(), fresh_key(to).public_key().public_bytes_raw()
    exchanged = ephemeral.exchange(X25519PublicKey.from_public_bytes(recipient))
    schedule = by_hand.key_schedule(by_hand.KEM["x25519"], by_hand.dhkem_secret(exchanged, public, recipient), info)
    return b64(public + AESGCM(schedule["key"]).encrypt(schedule["base_nonce"], content, b""))


def fresh_key(name: str) -> X25519PrivateKey:
    return X25519PrivateKey.from_private_bytes(seed(f"{name}/fresh"))


def step(said: Json, to: Json, state: bytes) -> Json:
    start: Json = {"kind": "task-step", "version": 1, "task": said["task"], "party": said["sender"], "message": said}
    bound = {"kind": "task-step", "version": 1, "message": digest("task-message", said).hex()}
    return enveloped(start, to, state, bound)


def nonces(key: Json) -> dict[str, Json]:
    """Make a batch of two pairs, the first pair, as it is before and after it is spent, and the marks of both."""
    north = key["custodians"][0]["card"]
    pairs = [{what: point_of(seed(f"{what} {i}")) for what in ("hiding", "binding")} for i in range(2)]
    names = [
        hashlib.sha256(b"shares/v1/nonce-pair" + raw(p["hiding"]) + raw(p["binding"])).hexdigest()[:32] for p in pairs
    ]
    start: Json = {"kind": "nonce-pair", "version": 1, **some(key, "key", "epoch"), "record": key["fingerprint"]}
    start |= {"signer": "north-pier", "batch": names[0], **pairs[0]}
    content = b"".join(number_of(seed(f"{what} 0")).to_bytes(32, "little") for what in ("hiding", "binding"))
    batch: Json = {"kind": "nonce-batch", "version": 1, **some(start, "key", "epoch", "record", "signer")}
    batch |= {"commitments": pairs, "created": "2026-03-01T10:00:00Z", "card": north}
    bound = {**start, "kind": "nonce-bound", "purpose": seed("purpose").hex(), "mark": seed("spent mark").hex()}
    marks: Json = {"kind": "nonce-marks", "version": 1, **some(start, "key", "epoch", "record", "signer", "batch")}
    marks |= {"marks": [{"pair": names[0], "mark": seed("mark").hex()}, {"pair": names[1], "mark": None}]}
    return {
        "pair.json": enveloped(start, north, content, start),
        "bound.json": enveloped(bound, north, content, bound),
        "marks.json": {**marks, "signature": sign("north-pier", "nonce-marks", marks)},
        "batch.json": {**batch, "signature": sign("north-pier", "nonce-batch", batch)},
    }


def events(key: Json, work: Json) -> list[Json]:
    """Give one event of each kind in a key's life."""
    about = {"task": digest("task-digest", work).hex(), "work": "open"}
    content = work["work"]["content"]
    born = {"what": "key-born", **some(key, "key", "epoch", "origin"), "record": key["fingerprint"], "remark": None}
    names = [one["name"] for one in work["parties"]]
    return [
        born,
        {"what": "nonces-committed", "custodian": "north-pier", "count": 2, "batch": "ba" * 32},
        {"what": "task-asked", **about, "parties": names, "content": content, "form": None, "remark": "by boat"},
        {"what": "approved", **about, "custodian": "north-pier", "content": content, "summary": "a letter, 72 bytes"},
        {"what": "task-finished", **about, "result": None, "remark": None},
        {"what": "task-failed", **about, "by": "south-pier", "reason": "the partial result of south-pier is wrong"},
    ]


def files() -> dict[str, str]:
    """Make every file: its name below golden/v1/keyed, and its text."""
    key, content = record(), message_to_key()
    work = task(key, content)
    north = key["custodians"][0]["card"]
    public = b64(fresh_key(RECEIVER).public_key().public_bytes_raw())
    first = message(work, 0, RECEIVER, seen(work), {"what": "opening-key", "x25519": public}, [])
    boxed = [{"to": RECEIVER, "box": box(work, 1, "north-pier", RECEIVER, draw("keyed/partial", 96))}]
    second = message(work, 1, "north-pier", seen(work, first), {"what": "partial"}, boxed)
    opened: Json = {"kind": "opened-message", "version": 1, "key": KEY, "encapsulated": b64(content[:32])}
    opened |= {"content": work["work"]["content"], "task": digest("task-digest", work).hex(), "receiver": RECEIVER}
    done: Json = {"kind": "task-done", "version": 1, "task": second["task"], "party": "north-pier", "given_up": False}
    state = private = seed(f"{RECEIVER}/fresh")
    made = {
        "record.json": key,
        "north-pier.share.json": key_share(key),
        "task.json": work,
        "task-to-sign.json": task_to_sign(key, work),
        "0-harbour-office.json": first,
        "1-north-pier.json": second,
        "harbour-office.step-0.json": step(first, card(RECEIVER, None), private),
        "north-pier.step-1.json": step(second, north, b"made up" + state),
        "north-pier.done.json": {**done, "messages": [second]},
        "opened.json": {**opened, "time": "2026-03-04T09:00:00Z"},
        **nonces(key),
    }
    journal = journal_v1.chained(events(key, work), [north])
    lines = {"journal.jsonl": "".join(line.decode() + "\n" for line in journal)}
    return {name: pretty(document) for name, document in made.items()} | lines
