"""Opening by a quorum: what opens, what nobody serves, who takes part, what agreeing means, what stays in the dark.

Checked against: RFC 9180, appendix A, with the receiver's key among custodians; senders of ``cryptography`` and of
``openings``; the curve in plain integers (``curve``), for points that no honest sender has.
"""

from __future__ import annotations

import itertools
import secrets
import subprocess
import sys
import traceback
from collections.abc import Callable
from pathlib import Path

import curve
import pytest
from cryptography.hazmat.primitives import hpke
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PublicKey
from keys.openings import (
    DUE,
    PLAINTEXT,
    Quorum,
    asked,
    bad_partials,
    by_hand,
    clamped,
    flipped,
    message_of,
    octets,
    sealed,
    told,
    two_with_one_key,
)
from parties import QUICK, card, namesake, passphrase, unlocked

from shares.documents.key_event import Approved, TaskFinished
from shares.documents.key_share import KeyShare
from shares.documents.members import encode_bytes
from shares.documents.party import new_party
from shares.documents.task import Joining, Task
from shares.documents.wrapping import card_sealer
from shares.errors import (
    ParameterError,
    SharesError,
    VerificationError,
)
from shares.group.edwards25519 import BASE, Point, Scalar
from shares.group.montgomery import lift, public_of
from shares.keys import opening_task
from shares.keys.hpke import AEADS
from shares.keys.opening import OpeningCourse, combine, outcome
from shares.keys.own_share import own_share
from shares.keys.public_key import sealing_pem
from shares.memory import Secret
from shares.sharing.verifiable import recombine


@pytest.fixture
def quorum(tmp_path: Path) -> Quorum:
    """2 of 3."""
    return Quorum(tmp_path)


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
    assert "You are the receiver" in " ".join(quorum.part(task, "north-pier").prospect(1, asked(task, message)))
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
    # The card tells the name: no task gives a party another one.
    for crossed in (
        north.model_copy(update={"card": card("dry-dock")}),
        north.model_copy(update={"name": "dry-dock"}),
    ):
        with pytest.raises(ValueError, match="another name than its card does"):
            crooked(quorum, task, parties=(crossed, south, light, auditor))
    stranger = north.model_copy(update={"card": namesake("north-pier")})
    dock = auditor.model_copy(update={"card": card("dry-dock"), "name": "dry-dock"})
    for parties, work, what in (
        ((stranger, south, light, auditor), {}, "another name or card"),
        ((north, south, light, auditor, dock), {}, "another name or card"),
        ((stranger, south, light), {"receiver": "north-pier"}, "another name or card"),
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
            (share, record, "south-pier", key.open, "not that of south-pier"),
            (share, record, "dry-dock", key.open, "dry-dock is no custodian"),
            (share, record, "north-pier", other_key.open, "wrapped for the card"),
            (share, Quorum(tmp_path / "other").record, "north-pier", key.open, "of the key|names the record"),
            (changed(share, epoch=2), record, "north-pier", key.open, "of epoch 2"),
            (changed(share, index=2), record, "north-pier", key.open, "stands elsewhere"),
            (changed(share, need=3), record, "north-pier", key.open, "another number of custodians"),
            (share.model_copy(update={"label": "x"}), record, "north-pier", key.open, "damaged or edited"),
            (flipped_share(share), record, "north-pier", key.open, "were changed"),
            (swapped, record, "north-pier", key.open, "does not fit the public commitments"),
        ):
            with pytest.raises(SharesError, match=error):
                own_share(given, of, name, opener)
    message = message_of(quorum)
    task = quorum.task(message)
    quorum.shares["north-pier"] = swapped
    with pytest.raises(VerificationError, match="does not fit the public commitments"):
        quorum.part(task, "north-pier").speak(1, asked(task, message), Secret(0), [{}])
    assert not quorum.folders["north-pier"].exists()


def changed(share: KeyShare, **facts: object) -> KeyShare:
    return share.model_copy(update=facts).with_digest()


def flipped_share(share: KeyShare) -> KeyShare:
    return share.model_copy(update={"sealed": flipped(share.sealed, [3])}).with_digest()


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
    given = quorum.spoken(task, message, *quorum.names) | {"light-house": Secret(96)}
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
