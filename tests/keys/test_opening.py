"""Opening by a quorum: what opens, what is refused, who is named, what is remembered, and what stays in the dark.

Checked against: RFC 9180, appendix A, with the receiver's key among custodians; senders of ``cryptography`` and of
``quorum``; the curve in plain integers (``curve``), for points that no honest sender has.
"""

from __future__ import annotations

import itertools
import secrets
import shutil
import subprocess
import sys
import traceback
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path

import curve
import pytest
from cryptography.hazmat.primitives import hpke
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PrivateKey, X25519PublicKey
from hypothesis import given
from hypothesis import strategies as st
from keys.quorum import (
    DUE,
    Quorum,
    asked,
    clamped,
    flipped,
    octets,
    sealed,
    sent,
    told,
)
from parties import QUICK, card, passphrase, unlocked
from strategies import CREATED

from shares import storage
from shares.documents.key_event import Approved, TaskFinished
from shares.documents.key_share import KeyShare
from shares.documents.members import encode_bytes
from shares.documents.opened_message import OpenedMessage
from shares.documents.party import new_party
from shares.documents.task import Joining, Task
from shares.documents.task_message import OpeningKey
from shares.documents.wrapping import card_sealer
from shares.errors import (
    DocumentError,
    NotEnoughSharesError,
    ParameterError,
    SharesError,
    StorageError,
    VerificationError,
    WrongKeyError,
)
from shares.group.edwards25519 import BASE, Point, Scalar
from shares.group.montgomery import lift, public_of
from shares.group.proofs import prove_equal
from shares.history import next as engine
from shares.history.exchange import TaskFolder
from shares.history.steps import OwnSteps
from shares.keys import opened as memory_of
from shares.keys import opening_task
from shares.keys.hpke import AEADS
from shares.keys.opening import Opened, OpeningCourse, OpeningPart, combine, outcome
from shares.keys.own_share import own_share
from shares.keys.partial import PARTIAL_SIZE, checked_result, partial_result, proof_context
from shares.keys.public_key import sealing_pem
from shares.memory import Secret
from shares.sharing.verifiable import recombine

PLAINTEXT = b"the words that open the harbour gate"


@pytest.fixture
def quorum(tmp_path: Path) -> Quorum:
    """2 of 3."""
    return Quorum(tmp_path)


def message_of(quorum: Quorum, plaintext: bytes = PLAINTEXT, **more: object) -> bytes:
    return sent(quorum.public_key, plaintext, **more)  # type: ignore[arg-type]


# What opens.


@pytest.mark.parametrize("number", [2, 3])
def test_the_published_messages_open(tmp_path, vectors, number) -> None:
    """RFC 9180's own, with their associated data, by each quorum of three of four."""
    vector = next(v for v in vectors("rfc9180_hpke_x25519_base")["vectors"] if v["aead_id"] == number)
    first = {name: bytes.fromhex(value) for name, value in vector["encryptions"][0].items() if isinstance(value, str)}
    quorum = Quorum(tmp_path, 3, 4, clamped(bytes.fromhex(vector["skRm"])))
    message = bytes.fromhex(vector["enc"]) + first["ct"]
    task = quorum.task(
        message,
        cipher=next(name for name, aead in AEADS.items() if aead.number == number),
        info=bytes.fromhex(vector["info"]),
        associated=first["aad"],
    )
    for who in itertools.combinations(quorum.names, 3):
        assert quorum.opened(task, message, quorum.spoken(task, message, *who)) == first["pt"]


@pytest.mark.parametrize("cipher", AEADS)
@pytest.mark.parametrize("size", [0, 1, 10 << 20])
def test_messages_of_all_sizes_open(quorum, cipher, size) -> None:
    plaintext = secrets.token_bytes(size)
    message = message_of(quorum, plaintext, cipher=cipher, info=b"tide", associated=b"table")
    task = quorum.task(message, cipher=cipher, info=b"tide", associated=b"table")
    assert quorum.opened(task, message, quorum.spoken(task, message, "north-pier", "light-house")) == plaintext


@pytest.mark.parametrize(
    ("cipher", "aead"), [("aes-256-gcm", hpke.AEAD.AES_256_GCM), ("chacha20-poly1305", hpke.AEAD.CHACHA20_POLY1305)]
)
def test_the_librarys_own_sender_is_understood(quorum, cipher, aead) -> None:
    suite = hpke.Suite(hpke.KEM.X25519, hpke.KDF.HKDF_SHA256, aead)
    message = suite.encrypt(PLAINTEXT, X25519PublicKey.from_public_bytes(quorum.public_key))
    task = quorum.task(message, "south-pier", "light-house", cipher=cipher)
    assert quorum.opened(task, message, quorum.spoken(task, message, "south-pier", "light-house")) == PLAINTEXT


def test_a_custodian_may_receive(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message, "south-pier", receiver="north-pier")
    course = OpeningCourse(task, quorum.record)
    assert task.names == ("north-pier", "south-pier")
    assert course.speakers(0, asked(task, message)) == ("north-pier",)
    assert course.speakers(1, asked(task, message)) == ("north-pier", "south-pier")
    assert quorum.opened(task, message, quorum.spoken(task, message, "north-pier", "south-pier")) == PLAINTEXT
    assert "a custodian of this key" in " ".join(quorum.part(task, "south-pier").prospect(1, asked(task, message)))


def test_a_receiver_who_is_no_custodian_only_receives(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    course = OpeningCourse(task, quorum.record)
    assert course.speakers(0, asked(task, message)) == ("auditor-east",)
    assert course.speakers(1, asked(task, message)) == quorum.names
    assert course.private
    assert len(course.rounds) == 2
    with pytest.raises(ParameterError, match="nobody else"):
        quorum.part(task, "auditor-east").speak(1, asked(task, message), Secret(0), [{}])
    with pytest.raises(ParameterError, match="nobody else"):
        quorum.part(task, "north-pier").speak(0, asked(task, message), Secret(0), [])


# What the receiver is given that is no good.


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
        "zeros": bytes(PARTIAL_SIZE),
        "the identity": b"\1" + bytes(31) + good[32:],
        "nothing that opens": None,
    }
    return {name: Secret.of(value) if isinstance(value, bytes) else value for name, value in made.items()}


def test_a_bad_partial_result_is_named(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    bad = bad_partials(quorum, task, message)
    for what, partial in bad.items():
        # As many as are needed: it cannot be done, and light-house is why.
        given = quorum.spoken(task, message, "north-pier") | {"light-house": partial}
        with pytest.raises(NotEnoughSharesError, match=r"and 1 do; that of light-house does not: ") as refusal:
            combine(task, quorum.record, told(task, message, given), [{}, given])
        assert refusal.value.hint == "awaited: south-pier", what
        # One more: it is set aside.
        given = quorum.spoken(task, message, "north-pier", "south-pier") | {"light-house": partial}
        plaintext, aside = combine(task, quorum.record, told(task, message, given), [{}, given])
        assert octets(plaintext) == PLAINTEXT, what
        assert [one.by for one in aside] == ["light-house"], what
    assert len(bad) == 15


def test_all_bad_ones_are_named(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    given = quorum.spoken(task, message, "light-house") | {"north-pier": None, "south-pier": Secret(PARTIAL_SIZE)}
    with pytest.raises(NotEnoughSharesError, match=r"north-pier does not: .*south-pier does not: ") as refusal:
        combine(task, quorum.record, told(task, message, given), [{}, given])
    assert "new task" in str(refusal.value.hint)


def test_a_message_that_says_something_else_is_no_partial_result(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    given = quorum.spoken(task, message, "north-pier", "south-pier")
    inbox = told(task, message, given, OpeningKey(what="opening-key", x25519=bytes([9]) + bytes(31)))
    with pytest.raises(NotEnoughSharesError):
        combine(task, quorum.record, inbox, [{}, given])
    with pytest.raises(NotEnoughSharesError, match="and 0 do"):
        combine(task, quorum.record, asked(task, message), [{}])


def test_each_byte_of_a_partial_result_counts(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    point, index = lift(message[:32]), quorum.record.holder("north-pier").index
    context = proof_context(task, quorum.record, index)
    good = octets(partial_result(quorum.scalars["north-pier"], point, context))
    assert checked_result(Secret.of(good), quorum.record, index, point, context)
    for bit in range(0, 8 * PARTIAL_SIZE, 7):  # Every byte, and every place in a byte.
        with pytest.raises(VerificationError):
            checked_result(Secret.of(flipped(good, [bit])), quorum.record, index, point, context)


@given(bits=st.sets(st.integers(0, 8 * PARTIAL_SIZE - 1), min_size=1, max_size=20))
def test_no_alteration_of_a_partial_result_passes(tmp_path_factory, bits) -> None:
    quorum = Quorum(tmp_path_factory.mktemp("k"))
    point = lift(message_of(quorum)[:32])
    good = octets(partial_result(quorum.scalars["north-pier"], point, b""))
    with pytest.raises(VerificationError):
        checked_result(Secret.of(flipped(good, sorted(bits))), quorum.record, 1, point, b"")


def test_a_message_that_does_not_open_is_told_from_a_wrong_key(quorum) -> None:
    message = message_of(quorum, info=b"tide", associated=b"table")
    bound = {"info": b"tide", "associated": b"table"}
    wrong = [
        (message, {}),
        (message, {"info": b"tide"}),
        (message, {"associated": b"table"}),
        (message, {"info": b"table", "associated": b"tide"}),
        (message, {**bound, "cipher": "chacha20-poly1305"}),
        (flipped(message, [8 * 40]), bound),
        (message[:-1], bound),
        (message + b"\0", bound),
        (message[:32] + bytes(16), bound),
    ]
    for altered, facts in wrong:
        task = quorum.task(altered, **facts)
        given = by_hand(quorum, task)
        with pytest.raises(VerificationError, match="the key is right"):
            combine(task, quorum.record, told(task, altered, given), [{}, given])
    task = quorum.task(message, **bound)
    assert quorum.opened(task, message, quorum.spoken(task, message, "north-pier", "south-pier")) == PLAINTEXT


def by_hand(quorum: Quorum, task: Task) -> dict[str, Secret | None]:
    """Partial results of custodians who remember nothing."""
    point = lift(task.work.encapsulated)
    return {
        name: partial_result(quorum.scalars[name], point, proof_context(task, quorum.record, i + 1))
        for i, name in enumerate(quorum.names)
    }


# Messages that must not be served.


def points_off() -> dict[str, bytes]:
    """Encapsulated keys that no honest sender makes."""
    p = curve.P
    sample = curve.multiply(12345, curve.BASE)
    orders = zip((8, 4, 8, 2), curve.TORSION[1:5], strict=True)
    mixed = {f"of order {n} L, {i}": curve.add(sample, torsion) for i, (n, torsion) in enumerate(orders)}
    small = {curve.u_of(point) for point in curve.TORSION[1:]}
    numbers = {
        "p": p,
        "p + 9: another encoding of 9": p + 9,
        "2^255 - 1": 2**255 - 1,
        "9 with the top bit set": 9 + 2**255,
        "-1": p - 1,
        "on the twist": next(u for u in range(2, 99) if pow(u**3 + 486662 * u * u + u, (p - 1) // 2, p) == p - 1),
        **{f"of small order: {u}": u for u in small},
        **{name: curve.u_of(point) for name, point in mixed.items()},
    }
    assert {0, 1} <= small
    assert len(small) == 4
    return {name: number.to_bytes(32, "little") for name, number in numbers.items()}


@pytest.mark.parametrize("what", points_off())
def test_an_encapsulated_key_that_no_honest_sender_makes_is_refused_by_all(quorum, what) -> None:
    encapsulated = points_off()[what]
    message = encapsulated + sealed(secrets.token_bytes(32), encapsulated, quorum.public_key, PLAINTEXT)
    with pytest.raises(VerificationError, match="no honest sender made this"):
        quorum.task(message)
    # The author may not care. The custodians do.
    with pytest.MonkeyPatch.context() as careless:
        careless.setattr(opening_task, "_lifted", lambda octets: BASE)
        task = quorum.task(message)
    failure = OpeningCourse(task, quorum.record).failure(asked(task, message))
    assert failure is not None
    assert failure.by == "auditor-east"
    part = quorum.part(task, "north-pier")
    with pytest.raises(VerificationError, match="no honest sender made this"):
        part.prospect(1, asked(task, message))
    with pytest.raises(VerificationError, match="no honest sender made this"):
        part.speak(1, asked(task, message), Secret(0), [{}])
    assert not quorum.folders["north-pier"].exists()


@pytest.mark.parametrize("size", [0, 1, 31, 32, 47])
def test_what_is_too_short_is_no_message(quorum, size) -> None:
    with pytest.raises(VerificationError, match="shorter than 48 bytes"):
        quorum.task(message_of(quorum)[:size])


def test_another_message_than_the_tasks_is_not_served(quorum) -> None:
    message, other = message_of(quorum), message_of(quorum)
    task = quorum.task(message)
    part = quorum.part(task, "north-pier")
    given = by_hand(quorum, task)
    for content in (other, message[:-1], message + b"\0", b"", flipped(message, [300]), None):
        for act in (
            lambda inbox: part.prospect(1, inbox),
            lambda inbox: part.speak(1, inbox, Secret(0), [{}]),
            lambda inbox: combine(task, quorum.record, inbox, [{}, given]),
        ):
            with pytest.raises(VerificationError, match=r"is not the one|is not beside") as refusal:
                act(told(task, content, given))
            assert refusal.value.hint
    assert not quorum.folders["north-pier"].exists()
    course = OpeningCourse(task, quorum.record)
    assert course.failure(asked(task, message)) is None
    assert course.failure(asked(task, None)) is None
    wrong = course.failure(asked(task, other))
    assert wrong is not None
    assert wrong.by == "auditor-east"


def test_a_task_whose_encapsulated_key_is_not_its_messages_is_refused(quorum) -> None:
    message, other = message_of(quorum), message_of(quorum)
    task = crooked(quorum, quorum.task(message), work={"encapsulated": other[:32]})
    with pytest.raises(VerificationError, match="another encapsulated key than its message"):
        quorum.part(task, "north-pier").speak(1, asked(task, message), Secret(0), [{}])


def crooked(quorum: Quorum, task: Task, *, work: dict[str, object] | None = None, **members: object) -> Task:
    """A task that its author has written otherwise than this program would."""
    facts = {name: getattr(task, name) for name in Task.model_fields if name not in ("kind", "version", "author")}
    facts |= {"work": task.work.model_copy(update=work or {}), **members}
    facts.pop("signature")
    with unlocked("auditor-east") as author:
        return Task.signed_by(author, **facts)


# Who takes part.


def test_only_the_records_custodians_and_the_receiver_take_part(quorum, tmp_path) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    north, south, light, auditor = task.parties
    stranger = north.model_copy(update={"card": card("dry-dock")})
    renamed = north.model_copy(update={"name": "dry-dock"})
    posing = auditor.model_copy(update={"card": card("dry-dock"), "name": "north-pier"})
    for parties, work, what in (
        ((stranger, south, light, auditor), {}, "another name or card"),
        ((renamed, south, light, auditor), {}, "another name or card"),
        ((north, south, light, auditor, stranger.model_copy(update={"name": "dry-dock"})), {}, "another name or card"),
        ((posing, south, light), {"receiver": "north-pier"}, "another name or card"),
        ((renamed, south, light), {"receiver": "dry-dock"}, "another name or card"),
        ((north, auditor), {}, "2 custodians are needed, and the task asks 1"),
    ):
        bad = crooked(quorum, task, parties=parties, work=work)
        with pytest.raises(VerificationError, match=what):
            OpeningCourse(bad, quorum.record)
        with pytest.raises(VerificationError, match=what):
            quorum.part(bad, "south-pier")
        with pytest.raises(VerificationError, match=what):
            combine(bad, quorum.record, told(bad, message, {}), [{}, {}])
    other = Quorum(tmp_path / "other").record
    for record in (other, other.model_copy(update={"fingerprint": task.record, "epoch": 2})):
        with pytest.raises(VerificationError, match="another key or epoch"):
            OpeningCourse(task, record)


def test_what_an_author_cannot_ask_for(quorum) -> None:
    message = message_of(quorum)
    for more, what in (
        ({"custodians": ["north-pier"]}, "2 custodians are needed, and 1 are asked"),
        ({"custodians": ["north-pier", "north-pier"]}, "2 custodians are needed, and 1 are asked"),
        ({"custodians": ["north-pier", "dry-dock"]}, "dry-dock is no custodian"),
        ({"info": bytes(65_537)}, "at most 65,536"),
        ({"associated": bytes(65_537)}, "at most 65,536"),
        ({"created": quorum.task(message).due}, "due before it is made"),
        ({"label": "two\nlines"}, "a label"),
        ({"remark": ""}, "a label"),
    ):
        with pytest.raises(ParameterError, match=what):
            quorum.task(message, *more.pop("custodians", ()), **more)
    other = new_party("North-Pier", passphrase("dry-dock"), cost=QUICK)
    with unlocked("auditor-east") as author, pytest.raises(ParameterError, match="the name of a custodian, North-Pier"):
        opening_task.new_opening(
            message, quorum.record, custodians=quorum.names, receiver=other.card, author=author, due=DUE
        )
    with pytest.MonkeyPatch.context() as small:
        small.setattr(opening_task, "MAX_CONTENT", len(message) - 1)
        with pytest.raises(ParameterError, match="larger than 0 MiB"):
            quorum.task(message)


def test_a_task_of_another_kind_is_no_opening(quorum) -> None:
    task = quorum.task(message_of(quorum)).model_copy(update={"work": Joining(what="join", need=2)})
    with pytest.raises(ParameterError, match="not to open a message"):
        OpeningCourse(task, quorum.record)


def test_a_custodian_uses_the_right_key_share_alone(quorum, tmp_path) -> None:
    record, share = quorum.record, quorum.shares["north-pier"]
    with unlocked("north-pier") as key, unlocked("south-pier") as other_key:
        assert own_share(share, record, "north-pier", key.open) == quorum.scalars["north-pier"]
        swapped = KeyShare.wrap(
            quorum.scalars["south-pier"], record, "north-pier", card_sealer(card("north-pier").recipient(), "x25519")
        )
        for given, of, name, opener, error in (
            (share, record, "south-pier", key.open, VerificationError),
            (share, record, "dry-dock", key.open, ParameterError),
            (share, record, "north-pier", other_key.open, WrongKeyError),
            (share, Quorum(tmp_path / "other").record, "north-pier", key.open, VerificationError),
            (share.model_copy(update={"epoch": 2}), record, "north-pier", key.open, VerificationError),
            (share.model_copy(update={"index": 2}), record, "north-pier", key.open, VerificationError),
            (share.model_copy(update={"need": 3}), record, "north-pier", key.open, VerificationError),
            (flipped_share(share), record, "north-pier", key.open, VerificationError),
            (swapped, record, "north-pier", key.open, VerificationError),
        ):
            with pytest.raises(error):
                own_share(given, of, name, opener)
    message = message_of(quorum)
    task = quorum.task(message)
    quorum.shares["north-pier"] = swapped
    with pytest.raises(VerificationError, match="does not fit the public commitments"):
        quorum.part(task, "north-pier").speak(1, asked(task, message), Secret(0), [{}])
    assert not quorum.folders["north-pier"].exists()


def flipped_share(share: KeyShare) -> KeyShare:
    return share.model_copy(update={"sealed": flipped(share.sealed, [3])}).with_digest()


# What is remembered.


def two_with_one_key(quorum: Quorum) -> tuple[bytes, bytes]:
    """Two messages with one encapsulated key, as no honest sender makes them."""
    ephemeral = X25519PrivateKey.generate()
    first, second = (message_of(quorum, text, ephemeral=ephemeral) for text in (PLAINTEXT, b"another secret"))
    assert first[:32] == second[:32]
    return first, second


def test_a_second_ciphertext_for_one_encapsulated_key_is_refused(quorum) -> None:
    first, second = two_with_one_key(quorum)
    task, later = quorum.task(first), quorum.task(second)
    quorum.spoken(task, first, "north-pier")
    part = quorum.part(later, "north-pier")
    for act in (lambda: part.prospect(1, asked(later, second)), lambda: quorum.spoken(later, second, "north-pier")):
        with pytest.raises(VerificationError, match="served already, for another message") as refusal:
            act()
        assert "do not take part" in str(refusal.value.hint)
    # Another custodian has served neither, and knows nothing of it.
    assert quorum.spoken(later, second, "south-pier")
    with pytest.raises(VerificationError, match="served already"):
        quorum.spoken(task, first, "south-pier")


def test_the_same_message_again_is_allowed_and_said(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    part = quorum.part(task, "north-pier")
    assert not any("very message before" in line for line in part.prospect(1, asked(task, message)))
    quorum.spoken(task, message, "north-pier")
    (path,) = (quorum.folders["north-pier"] / "opened").iterdir()
    before = path.read_bytes()
    again = quorum.task(message, receiver="auditor-west")
    lines = quorum.part(again, "north-pier").prospect(1, asked(again, message))
    assert any("this very message before, for auditor-east" in line for line in lines)
    given = quorum.spoken(again, message, "north-pier", "south-pier")
    assert quorum.opened(again, message, given) == PLAINTEXT
    assert path.read_bytes() == before
    assert path.stat().st_mode & 0o777 == 0o600


def test_what_is_served_is_on_the_medium_before_it_leaves(quorum, monkeypatch) -> None:
    """A run that dies in between has served nothing and remembers: the same message goes on, another does not."""
    first, second = two_with_one_key(quorum)
    task, later = quorum.task(first), quorum.task(second)
    with monkeypatch.context() as broken:
        broken.setattr("shares.keys.opening.partial_result", lambda *_: (_ for _ in ()).throw(KeyboardInterrupt))
        with pytest.raises(KeyboardInterrupt):
            quorum.spoken(task, first, "north-pier")
    with pytest.raises(VerificationError, match="served already"):
        quorum.spoken(later, second, "north-pier")
    assert quorum.spoken(task, first, "north-pier")


def test_of_two_processes_one_is_first(quorum, monkeypatch) -> None:
    first, second = two_with_one_key(quorum)
    task, later = quorum.task(first), quorum.task(second)
    write = storage.write_new

    def after_another(path, data, *, secret) -> None:
        monkeypatch.setattr(storage, "write_new", write)
        quorum.spoken(later, second, "north-pier")
        write(path, data, secret=secret)

    monkeypatch.setattr(storage, "write_new", after_another)
    with pytest.raises(VerificationError, match="served already, for another message"):
        quorum.spoken(task, first, "north-pier")

    def after_itself(path, data, *, secret) -> None:
        monkeypatch.setattr(storage, "write_new", write)
        quorum.spoken(task, first, "south-pier")
        write(path, data, secret=secret)

    monkeypatch.setattr(storage, "write_new", after_itself)
    assert quorum.spoken(task, first, "south-pier")


def test_without_a_memory_nothing_is_served(quorum, monkeypatch) -> None:
    message = message_of(quorum)
    task = quorum.task(message)

    def full(path, data, *, secret) -> None:
        raise StorageError("the medium is full", where=str(path))

    with monkeypatch.context() as broken:
        broken.setattr(storage, "write_new", full)
        with pytest.raises(StorageError, match="full"):
            quorum.spoken(task, message, "north-pier")
    path = memory_of.file_of(quorum.folders["north-pier"], message[:32])
    served = OpenedMessage(
        kind="opened-message",
        version=1,
        key=quorum.record.key,
        encapsulated=secrets.token_bytes(32),
        content=task.work.content,
        task=task.digest(),
        receiver="auditor-east",
        time=CREATED,
    )
    for damaged, error in (
        (b"", DocumentError),
        (b"{}", DocumentError),
        (quorum.record.to_file(), DocumentError),
        (served.to_file(), VerificationError),
        (
            served.model_copy(update={"encapsulated": message[:32], "key": bytes([1] * 16)}).to_file(),
            VerificationError,
        ),
    ):
        path.write_bytes(damaged)
        with pytest.raises(error) as refusal:
            quorum.spoken(task, message, "north-pier")
        assert refusal.value.where == str(path)
    path.unlink()
    path.symlink_to("nowhere")
    with pytest.raises(StorageError):
        quorum.spoken(task, message, "north-pier")
    path.unlink()
    path.write_bytes(served.model_copy(update={"encapsulated": message[:32]}).to_file())
    assert quorum.spoken(task, message, "north-pier")
    assert OpenedMessage.parse(path.read_bytes()).to_file() == path.read_bytes()


def test_a_restored_folder_has_forgotten(quorum) -> None:
    """Not a promise but its limit, which the format page states."""
    first, second = two_with_one_key(quorum)
    task, later = quorum.task(first), quorum.task(second)
    quorum.spoken(task, first, "north-pier")
    shutil.rmtree(quorum.folders["north-pier"])
    assert quorum.spoken(later, second, "north-pier")


# What agreeing means.


def test_agreeing_to_one_message_opens_every_message_with_its_encapsulated_key(quorum) -> None:
    """The caution is true: this is what a receiver can do with what the custodians gave for the first message."""
    first, second = two_with_one_key(quorum)
    task = quorum.task(first)
    given = quorum.spoken(task, first, "north-pier", "south-pier")
    later = quorum.task(second)
    point = recombine({i + 1: Point.decode(octets(given[name])[:32]) for i, name in enumerate(quorum.names[:2])})
    assert second[32:] == sealed(public_of(point), second[:32], quorum.public_key, b"another secret")
    assert later.work.encapsulated == task.work.encapsulated


def test_a_receiver_can_make_one_message_out_of_another(quorum) -> None:
    """The other caution is true as well: E' = r E looks like any encapsulated key, and D / r belongs to E."""
    secret_of_others = message_of(quorum)
    factor = Scalar.drawn()
    made = public_of(factor * lift(secret_of_others[:32])) + bytes(48)
    task = quorum.task(made)
    given = quorum.spoken(task, made, "north-pier", "south-pier")
    point = recombine({i + 1: Point.decode(octets(given[name])[:32]) for i, name in enumerate(quorum.names[:2])})
    dh = public_of(factor.inverse() * point)
    assert secret_of_others[32:] == sealed(dh, secret_of_others[:32], quorum.public_key, PLAINTEXT)


def test_a_custodian_is_told_what_they_agree_to(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    part = quorum.part(task, "north-pier")
    text = " ".join(part.prospect(1, asked(task, message)))
    for said in (
        f"{len(message):,} bytes",
        task.work.content.digest.hex()[:8],
        message[:4].hex(),
        f"auditor-east, no custodian of this key, with the card {card('auditor-east').fingerprint}",
        "every message with this encapsulated key",
        "can make one out of it",
        "not for secrets that must last ten years",
    ):
        assert said in text
    assert part.asks(1)
    event = part.event(1, asked(task, message))
    assert isinstance(event, Approved)
    assert (event.task, event.custodian, event.content) == (task.digest(), "north-pier", task.work.content)
    receiver = quorum.part(task, "auditor-east")
    assert not receiver.asks(0)
    assert receiver.event(0, asked(task, message)) is None
    assert "fresh key" in receiver.prospect(0, asked(task, message))[0]


# The end.


def test_the_receiver_keeps_what_opens_until_it_is_used(quorum) -> None:
    message = message_of(quorum)
    task = quorum.task(message)
    given = quorum.spoken(task, message, *quorum.names) | {"light-house": Secret(PARTIAL_SIZE)}
    inbox = told(task, message, given)
    kept = quorum.part(task, "auditor-east").finish(inbox, Secret(0), [{}, given])
    assert (kept.ends, kept.event, kept.files) == (False, None, ())
    assert "shares key finish" in kept.words[0]
    told_all = outcome(task, combine(task, quorum.record, inbox, [{}, given]))
    assert isinstance(told_all.event, TaskFinished)
    assert (told_all.event.result, told_all.event.remark) == (None, "set aside: light-house")
    assert [f"{len(PLAINTEXT)} bytes" in told_all.words[0], "light-house" in told_all.words[1]] == [True, True]
    good = {name: given[name] for name in ("north-pier", "south-pier")}
    told_few = outcome(task, combine(task, quorum.record, told(task, message, good), [{}, good]))
    assert isinstance(told_few.event, TaskFinished)
    assert told_few.event.remark is None
    custodian = quorum.part(task, "north-pier").finish(inbox, Secret(0), [{}, {}])
    assert (custodian.ends, custodian.files) == (True, ())
    assert isinstance(custodian.event, TaskFinished)


def test_nothing_secret_shows(quorum, tmp_path, caplog) -> None:
    """Neither plaintext nor key share nor partial result is in words, events, messages, errors or files."""
    message = message_of(quorum)
    task = quorum.task(message)
    point = lift(message[:32])
    hidden = [PLAINTEXT, *(value.encode() for value in quorum.scalars.values()), quorum.secret.encode()]
    hidden += [(value * point).encode() for value in quorum.scalars.values()]
    hidden += [(quorum.secret * point).encode(), public_of(quorum.secret * point)]
    shown: list[str] = []
    part = quorum.part(task, "north-pier")
    said = part.speak(1, asked(task, message), Secret(0), [{}])
    shown += part.prospect(1, asked(task, message))
    shown += [repr(said), repr(part), said.body.model_dump_json(), repr(part.event(1, asked(task, message)))]
    given = quorum.spoken(task, message, *quorum.names)
    whole = told(task, message, given)
    result = combine(task, quorum.record, whole, [{}, given])
    shown += [repr(result), repr(outcome(task, result)), repr(part.finish(whole, Secret(0), [{}, {}]))]
    wrong = quorum.task(message, info=b"tide")
    for bad in (*bad_partials(quorum, task, message).values(), Secret(0)):
        mixed = {"north-pier": given["north-pier"], "south-pier": bad}
        shown += refused(lambda mixed=mixed: combine(task, quorum.record, told(task, message, mixed), [{}, mixed]))
    results = by_hand(quorum, wrong)
    shown += refused(lambda: combine(wrong, quorum.record, told(wrong, message, results), [{}, results]))
    quorum.shares["south-pier"] = quorum.shares["north-pier"]
    shown += refused(lambda: quorum.spoken(task, message, "south-pier"))
    text = "\n".join([*shown, caplog.text]).encode()
    text += b"".join(path.read_bytes() for path in tmp_path.rglob("*") if path.is_file())
    assert len(shown) > 40
    for secret in hidden:
        for form in (secret, secret.hex().encode(), repr(secret)[2:-1].encode(), encode_bytes(secret).encode()):
            assert (form in text) is False


def refused(act: Callable[[], object]) -> list[str]:
    """All that an error would show."""
    with pytest.raises(SharesError) as refusal:
        act()
    error: BaseException | None = refusal.value
    shown = [str(error), repr(error), *traceback.format_exception(refusal.value)]
    while error is not None:
        shown += [repr(vars(error)), repr(error.args)]
        error = error.__context__
    return shown


def test_the_ten_line_sender_is_understood(quorum, tmp_path) -> None:
    script = Path(__file__).resolve().parents[2] / "examples" / "send_to_key.py"
    lines = [line for line in script.read_text().split('"""')[2].splitlines() if line.strip()]
    assert len(lines) <= 10
    assert {line.split()[1].split(".")[0] for line in lines if line.startswith(("import", "from"))} == {
        "sys",
        "pathlib",
        "cryptography",
    }
    key, content, message = (tmp_path / name for name in ("key.pem", "content", "message"))
    key.write_bytes(sealing_pem(quorum.public_key))
    content.write_bytes(PLAINTEXT)
    command = [sys.executable, str(script), str(key), str(content), str(message)]
    assert subprocess.run(command, capture_output=True, check=True).stdout == b""
    octets_sent = message.read_bytes()
    task = quorum.task(octets_sent)
    assert quorum.opened(task, octets_sent, quorum.spoken(task, octets_sent, "north-pier", "light-house")) == PLAINTEXT
    assert subprocess.run(command, capture_output=True, check=False).returncode  # It replaces nothing.
    assert message.read_bytes() == octets_sent


# With the engine: folders, sealed boxes, files, journals.


class Desk:
    """One party's machine: its own copy of the task's folder, and its own folder."""

    def __init__(self, root: Path, quorum: Quorum, task: Task, message: bytes, name: str) -> None:
        self.task, self.name = task, name
        self.mine = root / name / "mine"
        self.mine.mkdir(parents=True)
        self.folder = TaskFolder.create(root / name / "task", task, content=message, record=quorum.record)
        self.course = OpeningCourse(task, quorum.record)
        self.own = OwnSteps(self.mine, task, card(name))
        self.record = quorum.record
        with unlocked(name) as key:
            self.part = OpeningPart(task, name, quorum.record, quorum.shares.get(name), key, self.mine)

    def take(self) -> str:
        at = engine.turn(self.folder, self.course, self.own)
        with unlocked(self.name) as key:
            part = OpeningPart(self.task, self.name, self.record, self.part._share, key, self.mine)
            if at.doing in ("speak", "repeat"):
                engine.speak(self.folder, at, self.course, part, self.own, key)
            elif at.doing == "finish":
                engine.finish(at, self.course, part, self.own, key)
        return at.doing

    def opened(self) -> Opened:
        found = engine.standing(self.course, self.folder.read())
        with unlocked(self.name) as key, engine.opened(found.inbox, self.course, self.own, key) as (_, received):
            return combine(self.task, self.record, found.inbox, received)

    def send(self, other: Desk) -> None:
        shutil.copytree(self.folder.path / "messages", other.folder.path / "messages", dirs_exist_ok=True)


def desks(root: Path, quorum: Quorum, receiver: str, *custodians: str) -> tuple[Desk, list[Desk]]:
    message = message_of(quorum)
    task = quorum.task(message, *custodians, receiver=receiver, due=datetime(2099, 12, 8, tzinfo=UTC))
    made = {name: Desk(root, quorum, task, message, name) for name in task.names}
    return made[receiver], [made[name] for name in OpeningCourse(task, quorum.record).custodians]


def test_an_opening_goes_from_folder_to_folder(tmp_path) -> None:
    quorum = Quorum(tmp_path, 2, 3)
    receiver, custodians = desks(tmp_path / "desks", quorum, "auditor-east")
    assert [one.take() for one in custodians] == ["wait"] * 3
    assert receiver.take() == "speak"
    for one in custodians[:2]:
        receiver.send(one)
        assert one.take() == "speak"
        one.send(receiver)
    # Two of three are enough, though the third is still awaited.
    assert receiver.take() == "wait"
    assert octets(receiver.opened().plaintext) == PLAINTEXT
    receiver.send(custodians[2])
    assert custodians[2].take() == "speak"
    custodians[2].send(receiver)
    assert receiver.take() == "finish"
    assert receiver.take() == "finish"  # What opens the message stays until it was used.
    opened = receiver.opened()
    assert opened.set_aside == ()
    assert octets(opened.plaintext) == PLAINTEXT
    engine.close(receiver.own)
    assert receiver.take() == "done"
    with pytest.raises(NotEnoughSharesError):  # And is gone afterwards.
        receiver.opened()
    receiver.send(custodians[0])
    assert custodians[0].take() == "finish"
    assert custodians[0].take() == "done"
    assert PLAINTEXT not in b"".join(path.read_bytes() for path in tmp_path.rglob("*") if path.is_file())


def test_a_receiver_who_is_a_custodian_seals_for_themselves_as_well(tmp_path) -> None:
    quorum = Quorum(tmp_path, 2, 3)
    receiver, custodians = desks(tmp_path / "desks", quorum, "south-pier", "south-pier", "north-pier")
    assert receiver in custodians
    assert receiver.take() == "speak"
    assert receiver.take() == "speak"
    north = custodians[0]
    receiver.send(north)
    assert north.take() == "speak"
    north.send(receiver)
    assert octets(receiver.opened().plaintext) == PLAINTEXT


def test_a_custodian_who_cheats_is_named_from_folder_to_folder(tmp_path) -> None:
    quorum = Quorum(tmp_path, 2, 3)
    receiver, custodians = desks(tmp_path / "desks", quorum, "auditor-east")
    receiver.take()
    for one in custodians:
        receiver.send(one)
        with pytest.MonkeyPatch.context() as cheat:
            if one.name == "south-pier":
                cheat.setattr("shares.keys.opening.partial_result", lambda *_: Secret.of(secrets.token_bytes(96)))
            one.take()
        one.send(receiver)
    opened = receiver.opened()
    assert [one.by for one in opened.set_aside] == ["south-pier"]
    assert octets(opened.plaintext) == PLAINTEXT
