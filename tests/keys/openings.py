"""A threshold key among custodians of the demo harbour, and a sender of HPKE that shares no code with the package.

Source: RFC 9180, sec. 4, 5.1 and 5.2, written with ``hashlib`` and ``hmac``. X25519 and the AEADs are
``cryptography``'s.
"""

from __future__ import annotations

import hashlib
import hmac
from collections.abc import Sequence
from datetime import timedelta
from pathlib import Path

from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey, X25519PublicKey
from cryptography.hazmat.primitives.ciphers.aead import AESGCM, ChaCha20Poly1305
from parties import card, unlocked
from strategies import CREATED, HARBOUR

from shares.documents.key_record import Holder, KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.task import Task
from shares.documents.task_message import Body, OpeningKey, Partial, TaskMessage
from shares.documents.wrapping import card_sealer
from shares.group.edwards25519 import BASE, Scalar
from shares.group.montgomery import lift, public_of
from shares.group.proofs import prove_equal
from shares.history.rounds import Inbox, Received
from shares.keys.opening import OpeningPart, combine
from shares.keys.opening_task import new_opening
from shares.keys.partial import partial_result, proof_context
from shares.memory import Secret
from shares.sharing.verifiable import evaluate, feldman, polynomial

PLAINTEXT = b"the words that open the harbour gate"
DUE = CREATED + timedelta(days=7)
AEADS = {"aes-256-gcm": (2, AESGCM), "chacha20-poly1305": (3, ChaCha20Poly1305)}


class Quorum:
    """A key dealt to custodians, each with a folder of their own."""

    def __init__(self, folder: Path, need: int = 2, count: int = 3, secret: Scalar | None = None) -> None:
        self.secret = Scalar.drawn() if secret is None else secret
        self.names = HARBOUR[:count]
        coefficients = polynomial(self.secret, need)
        self.record = KeyRecord.of(
            key=bytes(16),
            label="Tide archive opening key",
            created=CREATED,
            origin="dealt",
            custodians=[Holder(name=name, index=i + 1, card=card(name)) for i, name in enumerate(self.names)],
            commitments=feldman(coefficients),
        )
        self.scalars = {name: evaluate(coefficients, i + 1) for i, name in enumerate(self.names)}
        self.shares = {
            name: KeyShare.wrap(value, self.record, name, card_sealer(card(name).recipient(), "x25519"))
            for name, value in self.scalars.items()
        }
        self.folders = {name: folder / name for name in self.names}
        self.public_key = public_of(self.record.public_key)

    def task(self, message: bytes, *custodians: str, receiver: str = "auditor-east", **more: object) -> Task:
        """A task to open a message; by default all are asked."""
        with unlocked(receiver) as author:
            return new_opening(
                message,
                self.record,
                custodians=custodians or self.names,
                receiver=card(receiver),
                author=author,
                **{"due": DUE, "created": CREATED, **more},  # type: ignore[arg-type]
            )

    def part(self, task: Task, name: str) -> OpeningPart:
        """A custodian's part; the party key stays open, as nothing here is worth wiping."""
        folder = self.folders.get(name, Path())
        return OpeningPart(task, name, self.record, self.shares.get(name), unlocked(name), folder)

    def spoken(self, task: Task, message: bytes, *custodians: str) -> dict[str, Secret | None]:
        """What custodians give the receiver."""
        given = {}
        for name in custodians:
            said = self.part(task, name).speak(1, asked(task, message), Secret(0), [{}])
            assert list(said.sealed) == [task.work.receiver]
            given[name] = said.sealed[task.work.receiver]
        return given

    def opened(self, task: Task, message: bytes, given: Received) -> bytes:
        """What the receiver makes of it, nothing being set aside."""
        plaintext, set_aside = combine(task, self.record, told(task, message, given), [{}, given])
        assert set_aside == ()
        return octets(plaintext)


def asked(task: Task, message: bytes | None) -> Inbox:
    """What a custodian knows in round 1."""
    first = _message(task, 0, task.work.receiver, OpeningKey(what="opening-key", x25519=bytes([9]) + bytes(31)))
    return Inbox(task, ({task.work.receiver: first},), message)


def told(task: Task, message: bytes | None, given: Received, body: Body | None = None) -> Inbox:
    """What the receiver knows, these custodians having spoken."""
    said = {name: _message(task, 1, name, body or Partial(what="partial")) for name in given}
    return Inbox(task, (*asked(task, message).rounds, said), message)


def _message(task: Task, round: int, sender: str, body: Body) -> TaskMessage:
    with unlocked(sender) as key:
        return TaskMessage.signed_by(
            key, task=task.digest(), round=round, sender=sender, seen=bytes(32), body=body, created=CREATED
        )


def octets(secret: Secret) -> bytes:
    with secret as open_secret, open_secret.view() as view:
        return bytes(view)


def clamped(private: bytes) -> Scalar:
    """The scalar that X25519 makes of 32 bytes (RFC 7748, sec. 5), modulo the order of the group."""
    number = int.from_bytes(private, "little") & ~7 & (1 << 255) - 1
    return Scalar.of(number & ((1 << 254) - 1) | 1 << 254)


def sent(
    public_key: bytes,
    plaintext: bytes,
    *,
    cipher: str = "aes-256-gcm",
    info: bytes = b"",
    associated: bytes = b"",
    ephemeral: X25519PrivateKey | None = None,
) -> bytes:
    """A message by RFC 9180, base mode: encapsulated key, then ciphertext."""
    private = ephemeral or X25519PrivateKey.generate()
    dh = private.exchange(X25519PublicKey.from_public_bytes(public_key))
    encapsulated = private.public_key().public_bytes_raw()
    return encapsulated + sealed(dh, encapsulated, public_key, plaintext, cipher, info, associated)


def sealed(
    dh: bytes,
    encapsulated: bytes,
    public_key: bytes,
    plaintext: bytes,
    cipher: str = "aes-256-gcm",
    info: bytes = b"",
    associated: bytes = b"",
) -> bytes:
    """The ciphertext that follows from a Diffie-Hellman value."""
    number, algorithm = AEADS[cipher]
    kem, suite = b"KEM\x00\x20", b"HPKE\x00\x20\x00\x01\x00" + bytes([number])
    prk = _extract(kem, b"", b"eae_prk", dh)
    shared = _expand(kem, prk, b"shared_secret", encapsulated + public_key, 32)
    context = b"\x00" + _extract(suite, b"", b"psk_id_hash", b"") + _extract(suite, b"", b"info_hash", info)
    secret = _extract(suite, shared, b"secret", b"")
    key, nonce = _expand(suite, secret, b"key", context, 32), _expand(suite, secret, b"base_nonce", context, 12)
    return algorithm(key).encrypt(nonce, plaintext, associated)


def _extract(suite: bytes, salt: bytes, label: bytes, ikm: bytes) -> bytes:
    return hmac.new(salt, b"HPKE-v1" + suite + label + ikm, hashlib.sha256).digest()


def _expand(suite: bytes, prk: bytes, label: bytes, info: bytes, length: int) -> bytes:
    labeled = length.to_bytes(2, "big") + b"HPKE-v1" + suite + label + info
    return hmac.new(prk, labeled + b"\x01", hashlib.sha256).digest()[:length]


def flipped(data: bytes, bits: Sequence[int]) -> bytes:
    """Bytes with some bits the other way."""
    number = int.from_bytes(data, "little")
    for bit in bits:
        number ^= 1 << bit
    return number.to_bytes(len(data), "little")


def message_of(quorum: Quorum, plaintext: bytes = PLAINTEXT, **more: object) -> bytes:
    return sent(quorum.public_key, plaintext, **more)  # type: ignore[arg-type]


def two_with_one_key(quorum: Quorum) -> tuple[bytes, bytes]:
    """Two messages with one encapsulated key, as no honest sender makes them."""
    ephemeral = X25519PrivateKey.generate()
    first, second = (message_of(quorum, text, ephemeral=ephemeral) for text in (PLAINTEXT, b"another secret"))
    assert first[:32] == second[:32]
    return first, second


def by_hand(quorum: Quorum, task: Task) -> dict[str, Secret | None]:
    """Partial results of custodians who remember nothing."""
    point = lift(task.work.encapsulated)
    return {
        name: partial_result(quorum.scalars[name], point, proof_context(task, quorum.record, i + 1))
        for i, name in enumerate(quorum.names)
    }


def bad_partials(quorum: Quorum, task: Task, message: bytes) -> dict[str, Secret | None]:
    """What light-house may give instead of its partial result, and none of which may count."""
    point, record = lift(message[:32]), quorum.record
    index, share = record.holder("light-house").index, quorum.scalars["light-house"]
    context = proof_context(task, record, index)
    good = octets(partial_result(share, point, context))
    other_share = quorum.scalars["north-pier"]
    another = message_of(quorum)
    other_task = quorum.task(another)
    same_message = quorum.task(message)
    shifted = share + Scalar.of(1)
    made = {
        "another's share": partial_result(other_share, point, context),
        "another's share under another's name": partial_result(other_share, point, proof_context(task, record, 1)),
        "a share that was changed": partial_result(shifted, point, context),
        "a right point with another's proof": good[:32] + prove_equal(other_share, point, context).encode(),
        "a wrong point with a right proof": (shifted * point).encode() + good[32:],
        "from another task": partial_result(share, lift(another[:32]), proof_context(other_task, record, index)),
        "from another task about this very message": partial_result(
            share, point, proof_context(same_message, record, index)
        ),
        "for another index": partial_result(share, point, proof_context(task, record, 1)),
        "for another point": partial_result(share, BASE, context),
        "without its end": good[:-1],
        "with something at its end": good + b"\0",
        "nothing": b"",
        "zeros": bytes(96),
        "the identity": b"\1" + bytes(31) + good[32:],
        "nothing that opens": None,
    }
    return {name: Secret.of(value) if isinstance(value, bytes) else value for name, value in made.items()}
