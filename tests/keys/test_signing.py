"""A quorum signs: rounds, what each signer is told and refuses, who is named, and the forms that come out.

Checked against: ``cryptography`` as the ordinary verifier of signatures, certificates and lists; OpenSSH's own
``ssh-keygen -Y verify`` where it is installed; RFC 9591, sec. 5 and 7, for what is to be refused.
"""

from __future__ import annotations

import hashlib
import itertools
import subprocess
from datetime import timedelta
from pathlib import Path

import pytest
from cryptography import x509
from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
from keys.quorum import CONTENT, NAMES, Key, a_task, committed, dealt, named, part, played, said, speak
from parties import card, namesake, unlocked
from strategies import CREATED

from shares.documents.key_event import Approved, TaskFinished
from shares.documents.task import Joining, Task, TaskParty
from shares.documents.task_message import Commitment, SignatureShare
from shares.errors import DocumentError, ParameterError, SharesError, VerificationError
from shares.group.edwards25519 import BASE, Scalar
from shares.history.rounds import Inbox
from shares.keys import certificates, revocation
from shares.keys.public_key import ssh_line
from shares.keys.signing import SigningCourse, SigningPart, finish_signing
from shares.memory import Secret

ME = NAMES[0]


def is_signed(key: Key, signature: bytes, message: bytes) -> bool:
    try:
        Ed25519PublicKey.from_public_bytes(key.record.public_key.encode()).verify(signature, message)
    except InvalidSignature:
        return False
    return True


def with_share(inbox: Inbox, name: str, share: Scalar) -> Inbox:
    """The inbox with another signature share of one party."""
    *before, last = inbox.rounds
    body = SignatureShare(what="signature-share", share=share)
    wrong = {**last, name: said(inbox.task, name, len(before), body)}
    return Inbox(inbox.task, (*before, wrong), inbox.content)


def share_in(inbox: Inbox, name: str) -> Scalar:
    body = inbox.rounds[-1][name].body
    assert isinstance(body, SignatureShare)
    return body.share


# Signatures.


@pytest.mark.parametrize("beforehand", [False, True])
def test_a_quorum_signs(tmp_path: Path, beforehand: bool) -> None:
    key = dealt()
    signers = (NAMES[4], NAMES[0], NAMES[2])
    task = a_task(key, signers, commitments=committed(tmp_path, key, signers) if beforehand else ())
    course = SigningCourse(task, key.record)
    assert course.rounds == (("signature shares",) if beforehand else ("commitments", "signature shares"))
    assert not course.private
    inbox = played(task, key, tmp_path)
    assert course.failure(inbox) is None
    signature, ending = finish_signing(task, key.record, inbox)
    assert (len(signature), ending) == (64, ".sig")
    assert is_signed(key, signature, CONTENT)
    assert all(course.speakers(round, inbox) == signers for round in range(len(course.rounds)))


@pytest.mark.parametrize("order", list(itertools.permutations(NAMES[:3])))
def test_the_order_of_signers_does_not_matter(tmp_path: Path, order: tuple[str, ...]) -> None:
    key = dealt()
    task = a_task(key, order)
    signature, _ = finish_signing(task, key.record, played(task, key, tmp_path))
    assert is_signed(key, signature, CONTENT)


@pytest.mark.parametrize(("need", "count"), [(2, 2), (2, 5), (4, 4), (5, 5)])
def test_quorums_of_any_size(tmp_path: Path, need: int, count: int) -> None:
    key = dealt(need, NAMES[:count])
    for signers in (NAMES[:need], NAMES[:count]):
        task = a_task(key, signers)
        signature, _ = finish_signing(task, key.record, played(task, key, tmp_path))
        assert is_signed(key, signature, CONTENT)


@pytest.mark.parametrize("size", [0, 1, 10 << 20])
def test_content_of_any_size(tmp_path: Path, size: int) -> None:
    key = dealt(2, NAMES[:2])
    content = bytes(size)
    task = a_task(key, NAMES[:2], content)
    inbox = played(task, key, tmp_path, content)
    assert is_signed(key, finish_signing(task, key.record, inbox)[0], content)


def test_nonces_are_erased_when_the_share_is_kept_and_never_before(tmp_path: Path) -> None:
    key = dealt()
    task = a_task(key)
    inbox = played(task, key, tmp_path)
    nonces = tmp_path / ME / "nonces"
    (bound,) = nonces.glob("bound-*")
    # Asked again, a signer gives the same share, as after a crash.
    again = speak(task, ME, key, tmp_path, 1, Inbox(task, inbox.rounds[:1], CONTENT))
    assert again.body == inbox.rounds[1][ME].body
    with unlocked(ME) as own:
        signer = part(task, ME, key, own, tmp_path)
        signer.kept(0, Inbox(task, (), CONTENT))
        assert bound.exists()
        for _ in range(2):
            signer.kept(1, Inbox(task, inbox.rounds[:1], CONTENT))
        assert sorted(path.name[:5] for path in nonces.iterdir()) == ["batch", "spent"]
        outcome = signer.finish(inbox, Secret(0), ())
    signature, _ = finish_signing(task, key.record, inbox)
    assert isinstance(outcome.event, TaskFinished)
    assert outcome.event.result == hashlib.sha256(signature).digest()
    assert not outcome.files
    with pytest.raises(VerificationError, match="erased"):
        speak(task, ME, key, tmp_path, 1, Inbox(task, inbox.rounds[:1], CONTENT))


# A commitment is used once.


@pytest.mark.parametrize("change", ["content", "task", "signers", "partner"])
def test_one_commitment_in_two_tasks_is_refused_by_its_signer(tmp_path: Path, change: str) -> None:
    key = dealt()
    first, second = committed(tmp_path, key, NAMES[:3]), committed(tmp_path, key, NAMES)
    task = a_task(key, commitments=first)
    assert played(task, key, tmp_path)
    content, signers, named = CONTENT, NAMES[:3], list(first)
    match change:
        case "content":
            content = b"release 8"
        case "signers":
            signers = (*NAMES[:2], NAMES[3])
            named = [*first[:2], second[3]]
        case "partner":
            named = [*first[:2], second[2]]
    other = a_task(key, signers, content, commitments=tuple(named), nonce=bytes([1]) * 32)
    with pytest.raises(VerificationError, match="this nonce was used for another message"):
        speak(other, ME, key, tmp_path, 0, Inbox(other, (), content))


def test_a_changed_first_round_is_refused_by_who_has_answered_it(tmp_path: Path) -> None:
    key = dealt()
    task = a_task(key)
    inbox = played(task, key, tmp_path)
    fresh = speak(task, NAMES[1], key, tmp_path, 0, Inbox(task, (), CONTENT))
    changed = Inbox(task, ({**inbox.rounds[0], NAMES[1]: fresh},), CONTENT)
    with pytest.raises(VerificationError, match="this nonce was used for another message"):
        speak(task, ME, key, tmp_path, 1, changed)


def test_commitments_that_are_not_ones_own_are_refused(tmp_path: Path) -> None:
    key = dealt()
    pairs = committed(tmp_path, key, NAMES[:3])
    foreign = pairs[0].model_copy(update={"hiding": pairs[1].hiding, "binding": pairs[1].binding})
    task = a_task(key, commitments=(foreign, *pairs[1:]))
    with pytest.raises(VerificationError, match="do not lie here"):
        speak(task, ME, key, tmp_path, 0, Inbox(task, (), CONTENT))


# Who misbehaves is named.


@pytest.mark.parametrize("cheating", [(NAMES[0],), (NAMES[2],), (NAMES[1], NAMES[2]), NAMES[:4]])
def test_who_sends_a_wrong_share_is_named(tmp_path: Path, cheating: tuple[str, ...]) -> None:
    key = dealt()
    task = a_task(key, NAMES[:4])
    inbox = played(task, key, tmp_path)
    for number, name in enumerate(cheating, 1):
        inbox = with_share(inbox, name, share_in(inbox, name) + Scalar.of(number))
    failure = SigningCourse(task, key.record).failure(inbox)
    assert failure is not None
    assert failure.by == cheating[0]
    honest = set(NAMES) - set(cheating)
    assert all(name in failure.what for name in cheating)
    assert not any(name in failure.what for name in honest)
    with pytest.raises(VerificationError) as refused:
        finish_signing(task, key.record, inbox)
    assert refused.value.what == failure.what
    with unlocked(ME) as own, pytest.raises(VerificationError, match="is wrong"):
        part(task, ME, key, own, tmp_path).finish(inbox, Secret(0), ())


def test_only_a_signature_that_fails_is_looked_into(tmp_path: Path) -> None:
    """The sum is right, and so is the signature: what counts is what is signed."""
    key = dealt()
    task = a_task(key)
    inbox = played(task, key, tmp_path)
    one, two = share_in(inbox, NAMES[0]), share_in(inbox, NAMES[1])
    exchanged = with_share(with_share(inbox, NAMES[0], two), NAMES[1], one)
    assert SigningCourse(task, key.record).failure(exchanged) is None
    zeros = with_share(inbox, NAMES[0], Scalar.of(0))
    failure = SigningCourse(task, key.record).failure(zeros)
    assert failure is not None
    assert failure.by == NAMES[0]


def test_who_says_something_else_is_named(tmp_path: Path) -> None:
    key = dealt()
    task = a_task(key)
    course = SigningCourse(task, key.record)
    inbox = played(task, key, tmp_path)
    share = said(task, NAMES[1], 0, SignatureShare(what="signature-share", share=Scalar.of(1)))
    first = Inbox(task, ({**inbox.rounds[0], NAMES[1]: share},), CONTENT)
    commitment = said(task, NAMES[2], 1, Commitment(what="commitment", hiding=BASE, binding=BASE))
    second = Inbox(task, (inbox.rounds[0], {**inbox.rounds[1], NAMES[2]: commitment}), CONTENT)
    for wrong, name in ((first, NAMES[1]), (second, NAMES[2])):
        failure = course.failure(wrong)
        assert failure is not None
        assert failure.by == name
    with pytest.raises(VerificationError, match=f"no commitment of {NAMES[1]}"):
        speak(task, ME, key, tmp_path, 1, first)
    with pytest.raises(ParameterError, match="one share by each signer"):
        finish_signing(task, key.record, second)


def test_a_signature_needs_every_share(tmp_path: Path) -> None:
    key = dealt()
    task = a_task(key)
    inbox = played(task, key, tmp_path)
    less = {name: message for name, message in inbox.rounds[1].items() if name != NAMES[1]}
    incomplete = Inbox(task, (inbox.rounds[0], less), CONTENT)
    assert SigningCourse(task, key.record).failure(incomplete) is None
    with pytest.raises(ParameterError, match="one share by each signer"):
        finish_signing(task, key.record, incomplete)


# Tasks and shares that do not fit.


def foreign_tasks() -> dict[str, Task]:
    key = dealt()
    outside = tuple(TaskParty(name=name, card=card(name)) for name in (*NAMES[:2], "auditor-east"))
    exchanged = tuple(TaskParty(name=name, card=namesake(name)) for name in NAMES[:3])
    return {
        "another key": a_task(dealt(number=1)),
        "another epoch": a_task(key, epoch=2),
        "another record": a_task(key, record=dealt(number=1).record.fingerprint),
        "too few": a_task(key, NAMES[:2]),
        "somebody else": a_task(key, parties=outside),
        "exchanged cards": a_task(key, parties=exchanged),
    }


@pytest.mark.parametrize("about", foreign_tasks())
def test_a_task_that_does_not_fit_the_record_is_refused(tmp_path: Path, about: str) -> None:
    key = dealt()
    task = foreign_tasks()[about]
    with pytest.raises(VerificationError):
        SigningCourse(task, key.record)
    with unlocked(ME) as own, pytest.raises(VerificationError):
        SigningPart(task, ME, key.record, key.shares[ME], own, tmp_path)
    assert not list(tmp_path.iterdir())


def test_another_kind_of_task_is_refused() -> None:
    key = dealt()
    joining = a_task(key, work=Joining(what="join", need=3), record=None)
    with pytest.raises(ParameterError, match="not to sign"):
        SigningCourse(joining, key.record)


def test_a_key_share_of_another_key_or_custodian_is_refused(tmp_path: Path) -> None:
    key, other = dealt(), dealt(number=1)
    task = a_task(key)
    for wrong in (other.shares[ME], key.shares[NAMES[1]]):
        with unlocked(ME) as own:
            signer = SigningPart(task, ME, key.record, wrong, own, tmp_path)
            with pytest.raises(SharesError, match="key share"):
                signer.speak(0, Inbox(task, (), CONTENT), Secret(0), ())
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize("content", [None, b"", b"release 8", CONTENT + b"\n", CONTENT[:-1]])
def test_content_that_is_not_the_tasks_is_refused(tmp_path: Path, content: bytes | None) -> None:
    key = dealt()
    task = a_task(key)
    failure = SigningCourse(task, key.record).failure(Inbox(task, (), content))
    assert failure is not None
    assert failure.by is None
    assert "what is to be signed" in failure.what
    with pytest.raises(VerificationError, match="what is to be signed"):
        speak(task, ME, key, tmp_path, 0, Inbox(task, (), content))
    assert not list(tmp_path.iterdir())


def test_content_is_asked_for_again_before_a_share_is_given(tmp_path: Path) -> None:
    key = dealt()
    task = a_task(key)
    inbox = played(task, key, tmp_path)
    with pytest.raises(VerificationError, match="not what the task names"):
        speak(task, NAMES[1], key, tmp_path, 1, Inbox(task, inbox.rounds[:1], b"another"))


# What a signer is told.


def test_a_signer_is_told_what_is_signed_and_for_whom(tmp_path: Path) -> None:
    key = dealt()
    task = a_task(key)
    inbox = Inbox(task, (), CONTENT)
    with unlocked(ME) as own:
        signer = part(task, ME, key, own, tmp_path)
        first, second = ("\n".join(signer.prospect(round, inbox)) for round in (0, 1))
        assert [signer.asks(round) for round in (0, 1)] == [False, True]
        assert signer.event(0, inbox) is None
        event = signer.event(1, inbox)
    digest = hashlib.sha256(CONTENT).hexdigest()
    for words in (first, second):
        assert digest in words.replace(" ", "")
        assert "size: 29 bytes" in words
        assert "release 7 of the tide tables" in words
        assert card("harbour-office").fingerprint in words
        assert "Tide tables" in words
    assert "Nothing is signed by that" in first
    assert "cannot be taken back" in second
    assert isinstance(event, Approved)
    assert (event.custodian, event.work, event.content) == (ME, "sign", task.work.content)
    assert event.summary == "text; release 7 of the tide tables"


def test_strange_content_is_told_safely(tmp_path: Path) -> None:
    key = dealt()
    content = "\n".join(["harbour\u202e\x1b[2J"] + 30 * ["x" * 400]).encode()
    task = a_task(key, NAMES[:3], content)
    with unlocked(ME) as own:
        signer = part(task, ME, key, own, tmp_path)
        words = "\n".join(signer.prospect(1, Inbox(task, (), content)))
        event = signer.event(1, Inbox(task, (), content))
    assert all(c.isprintable() or c == "\n" for c in words)
    assert isinstance(event, Approved)
    assert event.summary.count("x" * 90) == 3
    assert len(event.summary) <= 500


# Forms.


def test_an_ssh_signature(tmp_path: Path) -> None:
    key = dealt()
    task = a_task(key, form="openssh", namespace="release")
    inbox = played(task, key, tmp_path)
    with unlocked(ME) as own:
        words = "\n".join(part(task, ME, key, own, tmp_path).prospect(1, inbox))
    assert "for the namespace release" in words
    assert "release 7 of the tide tables" in words
    signature, ending = finish_signing(task, key.record, inbox)
    assert ending == ".sig"
    line = ssh_line(key.record.public_key.encode(), "Tide tables").split(" ", 2)
    (tmp_path / "signers").write_text(f'harbour namespaces="release" {line[0]} {line[1]}\n')
    (tmp_path / "signature").write_bytes(signature)
    command = ["ssh-keygen", "-Y", "verify", "-f", "signers", "-I", "harbour", "-n", "release", "-s", "signature"]
    for content, accepted in ((CONTENT, True), (CONTENT + b"x", False)):
        done = subprocess.run(command, cwd=tmp_path, input=content, capture_output=True, check=False)
        assert (done.returncode == 0) is accepted


def a_root(key: Key) -> bytes:
    return certificates.root(
        key.record.public_key.encode(),
        subject="CN=Harbour Trust Root",
        not_before=CREATED,
        not_after=CREATED + timedelta(days=3650),
    )


def test_a_root_and_a_revocation_list(tmp_path: Path) -> None:
    key = dealt()
    body = a_root(key)
    task = a_task(key, NAMES[:3], body, form="certificate")
    root, ending = finish_signing(task, key.record, played(task, key, tmp_path, body))
    assert ending == ".pem"
    found = x509.load_pem_x509_certificate(root)
    found.verify_directly_issued_by(found)
    assert found.subject.rfc4514_string() == "CN=Harbour Trust Root"
    listed = revocation.revocation_list(
        key.record.public_key.encode(),
        [revocation.Revoked(77, CREATED)],
        issuer=root,
        this_update=CREATED,
        next_update=CREATED + timedelta(days=30),
    )
    task = a_task(key, NAMES[:3], listed, form="revocation-list", issuer=named(root))
    inbox = played(task, key, tmp_path, listed, issuer=root)
    pem, _ = finish_signing(task, key.record, inbox, issuer=root)
    assert x509.load_pem_x509_crl(pem).is_signature_valid(found.public_key())
    with pytest.raises(VerificationError, match="certificate of its issuer is not beside the task"):
        finish_signing(task, key.record, inbox)


def test_every_signer_checks_by_the_issuer_and_the_earlier_list(tmp_path: Path) -> None:
    """What goes beyond the issuer's certificate, or leaves out what is revoked, no signer helps to sign."""
    key = dealt()
    public_key, until = key.record.public_key.encode(), CREATED + timedelta(days=30)

    def listed(*serials: int, number: int) -> bytes:
        revoked = [revocation.Revoked(serial, CREATED) for serial in serials]
        times = {"this_update": CREATED, "next_update": until}
        return revocation.revocation_list(public_key, revoked, issuer=root, number=number, **times)

    body = a_root(key)
    task = a_task(key, NAMES[:3], body, form="certificate")
    root, _ = finish_signing(task, key.record, played(task, key, tmp_path, body))
    task = a_task(key, NAMES[:3], first := listed(77, number=1), form="revocation-list", issuer=named(root))
    earlier, _ = finish_signing(task, key.record, played(task, key, tmp_path, first, issuer=root), issuer=root)
    long = certificates.root(
        public_key, subject="CN=Harbour Trust Root", not_before=CREATED, not_after=CREATED + timedelta(days=9999)
    )
    both = {"issuer": root, "earlier": earlier}
    for content, form, beside, words in (
        (listed(77, 78, number=2), "revocation-list", both, None),
        (listed(78, number=2), "revocation-list", both, "leaves out 1 of what the earlier list revokes"),
        (listed(77, number=1), "revocation-list", both, "not numbered and dated after"),
        (long, "certificate", {"issuer": root}, "outside the time of its issuer"),
        (long, "certificate", {}, None),
        (listed(77, number=2), "certificate", {"issuer": root}, "not the body of a certificate"),
    ):
        task = a_task(key, NAMES[:3], content, form=form, **{name: named(data) for name, data in beside.items()})
        failure = SigningCourse(task, key.record, **beside).failure(inbox := Inbox(task, (), content))
        assert (failure and failure.what) == failure if words is None else words in failure.what
        if words is None:
            assert isinstance(speak(task, ME, key, tmp_path, 0, inbox, **beside).body, Commitment)
            continue
        with pytest.raises(SharesError, match=words):
            speak(task, ME, key, tmp_path, 0, inbox, **beside)


@pytest.mark.parametrize("name", ["issuer", "earlier"])
def test_another_file_beside_the_task_is_refused(tmp_path: Path, name: str) -> None:
    key = dealt()
    beside = {"issuer": b"the issuer", "earlier": b"the list before"}
    of_task = {what: named(data) for what, data in beside.items()}
    task = a_task(key, form="revocation-list", **of_task)
    for wrong in (beside[name] + b"x", b"", None):
        with pytest.raises(VerificationError, match=f"{name}.* is not"):
            speak(task, ME, key, tmp_path, 0, Inbox(task, (), CONTENT), **{**beside, name: wrong})
    task = a_task(key)
    with pytest.raises(VerificationError, match=f"{name}.* is not what the task names"):
        speak(task, ME, key, tmp_path, 0, Inbox(task, (), CONTENT), **{name: beside[name]})


@pytest.mark.parametrize("content", [b"\x30\x80" + bytes(20), b"shares/v1/sign/task{}", b" " * 64 + b"TLS 1.3, server"])
def test_what_others_act_on_no_signer_signs_as_plain_bytes(tmp_path: Path, content: bytes) -> None:
    key = dealt()
    task = a_task(key, NAMES[:3], content)
    inbox = Inbox(task, (), content)
    failure = SigningCourse(task, key.record).failure(inbox)
    assert failure is not None
    assert "as plain bytes is" in failure.what
    with pytest.raises(SharesError, match="as plain bytes is"):
        speak(task, ME, key, tmp_path, 0, inbox)
    assert not list(tmp_path.iterdir())


def test_a_signer_is_told_what_a_certificate_says(tmp_path: Path) -> None:
    key = dealt()
    body = a_root(key)
    task = a_task(key, NAMES[:3], body, form="certificate")
    with unlocked(ME) as own:
        words = "\n".join(part(task, ME, key, own, tmp_path).prospect(1, Inbox(task, (), body)))
    assert "Harbour Trust Root" in words
    assert "root certificate" in words


def test_what_is_no_certificate_is_not_signed_as_one(tmp_path: Path) -> None:
    key = dealt()
    task = a_task(key, form="certificate")
    assert SigningCourse(task, key.record).failure(Inbox(task, (), CONTENT)) is not None
    with pytest.raises(DocumentError):
        speak(task, ME, key, tmp_path, 0, Inbox(task, (), CONTENT))


def test_a_root_of_another_key_is_not_signed(tmp_path: Path) -> None:
    key = dealt()
    body = a_root(dealt(number=1))
    task = a_task(key, NAMES[:3], body, form="certificate")
    with pytest.raises(SharesError):
        speak(task, ME, key, tmp_path, 0, Inbox(task, (), body))


# In the dark.


def test_nothing_secret_is_said_or_shown(tmp_path: Path) -> None:
    key = dealt()
    task = a_task(key)
    inbox = played(task, key, tmp_path)
    shown = b"".join(message.to_file() for messages in inbox.rounds for message in messages.values())
    kept = b"".join(path.read_bytes() for path in tmp_path.rglob("*") if path.is_file())
    for scalar in key.scalars.values():
        octets = scalar.encode()
        assert octets not in shown + kept
        assert octets.hex().encode() not in shown + kept
    with unlocked(ME) as own:
        state = part(task, ME, key, own, tmp_path).speak(0, Inbox(task, (), CONTENT), Secret(0), ()).state
    assert len(state) == 0
