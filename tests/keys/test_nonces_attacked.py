"""Somebody who writes into a signer's folder of nonces, keeps what lay there and kills runs, but has no party key.

Checked against: the equation of a signature share (RFC 9591, sec. 5.2): three shares of one nonce, in three tasks, are
three equations in three unknowns, one of them the key share. So no second one may be had. Who knows the nonces of one
share has the key share from that alone: z = d + e rho + lambda c s, all else being public.
"""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from cli.harness import run
from keys.quorum import CONTENT, NAMES, a_task, committed, dealt, part, speak
from keys.signer import ME, given, prepared, step
from keys.stores import ONE, OTHER, Pair, fresh, in_child, or_nothing, share_of, store_in
from parties import card, unlocked

from shares.documents.base import sha256
from shares.documents.nonce_batch import BoundPair, NonceMark, NonceMarks, NoncePair, pair_id
from shares.documents.party import OpenPartyKey
from shares.documents.wrapping import card_sealer
from shares.errors import SharesError, VerificationError
from shares.group.edwards25519 import BASE, Scalar
from shares.history.exchange import TaskFolder
from shares.history.rounds import Inbox
from shares.keys import frost, nonces
from shares.keys.nonces import NonceStore
from shares.keys.signing import SigningCourse
from shares.memory import Secret


def one(folder: Path, pattern: str) -> Path:
    (found,) = folder.glob(pattern)
    return found


# A second purpose, between two tasks.


def public_purpose(course: SigningCourse, inbox: Inbox) -> str:
    """The name under which a nonce is spent, from what everybody can see."""
    listed = frost.encode_group_commitment_list(course.agreed(inbox).commitment_list)
    parts = (listed, course.message(inbox))
    return sha256(
        b"shares/v1/nonce-purpose",
        course.task.digest(),
        course.record.fingerprint.encode(),
        *(sha256(part) for part in parts),
    ).hex()


def move_the_name(folder: Path, saved: dict[str, bytes], wanted: str) -> None:
    one(folder, "spent-*").rename(folder / wanted)


def move_the_name_and_put_all_back(folder: Path, saved: dict[str, bytes], wanted: str) -> None:
    one(folder, "spent-*").rename(folder / wanted)
    put_back(folder, saved)


def copy_the_pair_to_the_name(folder: Path, saved: dict[str, bytes], wanted: str) -> None:
    one(folder, "spent-*").unlink()
    (folder / wanted).write_bytes(saved["pair"])


def copy_the_pair_to_what_is_bound(folder: Path, saved: dict[str, bytes], wanted: str) -> None:
    move_the_name(folder, saved, wanted)
    (folder / f"bound-{wanted.split('-')[1]}.json").write_bytes(saved["pair"])


def take_away_the_mark(folder: Path, saved: dict[str, bytes], wanted: str) -> None:
    for path in folder.glob("spent-*"):
        path.unlink()
    put_back(folder, {"pair": saved["pair"]})
    marks = one(folder, "batch-*")
    members = json.loads(marks.read_text())
    members["marks"][0]["mark"] = None
    marks.write_text(json.dumps(members))


def put_back(folder: Path, saved: dict[str, bytes]) -> None:
    name = one(folder, "batch-*")  # It names no pair; the others are named after the only one.
    listed = json.loads(name.read_text())["marks"][0]["pair"]
    for what, data in saved.items():
        (folder / f"{what}-{listed}.json").write_bytes(data)
        (folder / f"{what}-{listed}.json").chmod(0o600)


@pytest.mark.parametrize("stopped", [True, False])
@pytest.mark.parametrize(
    "attack",
    [
        move_the_name,
        move_the_name_and_put_all_back,
        copy_the_pair_to_the_name,
        copy_the_pair_to_what_is_bound,
        take_away_the_mark,
    ],
)
def test_a_nonce_gives_no_second_share(
    tmp_path: Path, attack: Callable[[Path, dict[str, bytes], str], None], stopped: bool
) -> None:
    """Whether the run of the first task was stopped before its share was kept, or has erased the nonces."""
    signers = NAMES[:2]
    key = dealt(2, signers)
    commitments = committed(tmp_path, key, signers)
    folder, id = tmp_path / ME / "nonces", pair_id(commitments[0].hiding, commitments[0].binding)
    saved = {"pair": one(folder, "pair-*").read_bytes()}
    shares = []
    for number in range(3):
        content = f"harmless text {number}\n".encode()
        task = a_task(key, signers, content, commitments=commitments, nonce=bytes([number]) * 32)
        inbox = Inbox(task, (), content)
        if number:
            attack(folder, saved, f"spent-{id}-{public_purpose(SigningCourse(task, key.record), inbox)}")
        try:
            shares.append(speak(task, ME, key, tmp_path, 0, inbox))
        except SharesError:
            assert number
        for bound in folder.glob("bound-*"):
            saved.setdefault("bound", bound.read_bytes())
        if not stopped:
            with unlocked(ME) as own:
                part(task, ME, key, own, tmp_path).kept(0, inbox)
    assert len(shares) == 1


def test_the_name_is_the_one_that_anybody_can_work_out(tmp_path: Path) -> None:
    """Else the attacks above would not be any."""
    signers = NAMES[:2]
    key = dealt(2, signers)
    commitments = committed(tmp_path, key, signers)
    task = a_task(key, signers, commitments=commitments)
    inbox = Inbox(task, (), CONTENT)
    speak(task, ME, key, tmp_path, 0, inbox)
    name = one(tmp_path / ME / "nonces", "spent-*").name
    assert name.split("-")[2] == public_purpose(SigningCourse(task, key.record), inbox)


# A second purpose, by killing the run of the first.


@pytest.mark.parametrize("how", ["written", "moved", "linked"])
def test_killed_at_any_call_and_put_back_a_nonce_gives_one_share(tmp_path: Path, how: str) -> None:
    """The run for x is killed. Whatever says so is put away, y is tried, all is put back, and both are tried again."""
    given_for = set()
    number = 0
    while True:
        share, _ = fresh(tmp_path, number)
        folder, aside = tmp_path / str(number) / "nonces", tmp_path / f"{number} aside"
        status, first = in_child(lambda share=share: share(b"x"), number // 2, after=bool(number % 2))  # type: ignore[misc]
        aside.mkdir()
        kept = [*folder.glob("spent-*"), *folder.glob("bound-*"), *folder.glob("pair-*")]
        for path in kept:
            {"written": shutil.copy2, "moved": shutil.copy2, "linked": os.link}[how](path, aside / path.name)
        for path in (path for path in kept if not path.name.startswith("pair-")):
            path.rename(aside / path.name) if how == "moved" else path.unlink()
        shares = {first, or_nothing(share, b"y")}
        for path in [*folder.glob("spent-*"), *folder.glob("bound-*")]:
            path.unlink()
        for path in kept:
            if how == "written":
                shutil.copy2(aside / path.name, path)
            else:
                path.unlink(missing_ok=True)
                (aside / path.name).rename(path)
        for message in (b"x", b"y"):
            shares.add(or_nothing(share, message))
        shares -= {None, b""}
        assert len(shares) <= 1, (how, number)
        given_for |= {"x" if first in shares else "y" for _ in shares}
        if status == 0:
            break
        number += 1
    assert number > 20
    assert given_for == ({"x"} if how == "linked" else {"x", "y"})


def test_without_marks_what_is_bound_serves_its_own_purpose_alone(
    tmp_path: Path, own: OpenPartyKey, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(nonces, "_KEPT_MODE", 0o755)
    store = store_in(tmp_path, own)
    (pair,) = store.make(dealt().scalars[ME])
    store.take(*pair, ONE)
    spent, bound = one(store.folder, "spent-*"), one(store.folder, "bound-*")
    spent.rename(spent.with_name(spent.name.replace(ONE.hex(), OTHER.hex())))
    with pytest.raises(VerificationError, match="this nonce was used for another message"):
        store.take(*pair, OTHER)
    members = json.loads(bound.read_text()) | {"purpose": OTHER.hex()}
    bound.write_bytes(BoundPair.model_validate_json(json.dumps(members)).with_digest().to_file())
    with pytest.raises(VerificationError, match="bound to were changed"):
        store.take(*pair, OTHER)


def test_a_name_that_lies_there_beforehand_is_made_anew(store: NonceStore, pair: Pair) -> None:
    """With another mode it would have no mark, and might be put back later."""
    before = store.folder / f"spent-{pair_id(*pair)}-{ONE.hex()}"
    before.touch(mode=0o644)
    store.take(*pair, ONE)
    bound = BoundPair.parse(one(store.folder, "bound-*").read_bytes())
    assert bound.mark is not None
    before.chmod(0o644)
    with pytest.raises(VerificationError, match="copied or restored"):
        store.take(*pair, ONE)


def test_a_name_without_a_mark_binds_nothing(store: NonceStore, pair: Pair, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where the pair has a mark, the medium keeps modes: whoever takes them away is at work there."""
    real = nonces.write_many_new

    def changed(folder: Path, made: dict[str, bytes]) -> None:
        real(folder, made)
        for name in made:
            (Path(folder) / name).chmod(0o644)

    monkeypatch.setattr(nonces, "write_many_new", changed)
    with pytest.raises(VerificationError, match="copied or restored"):
        store.take(*pair, ONE)
    assert not list(store.folder.glob("bound-*"))


def test_the_pair_is_gone_before_its_share_is_worked_out(store: NonceStore, pair: Pair) -> None:
    """Also when it is put back beside what is bound, and removed in memory alone."""
    before = one(store.folder, "pair-*")
    data = before.read_bytes()
    store.take(*pair, ONE)
    before.write_bytes(data)
    store.take(*pair, ONE)
    assert not before.exists()


# Nonces that somebody else has made.


def known() -> tuple[Scalar, Scalar, Pair]:
    hiding, binding = Scalar.drawn(), Scalar.drawn()
    return hiding, binding, (hiding * BASE, binding * BASE)


def forged(store: NonceStore, pair: Pair, content: bytes, batch: str) -> NoncePair:
    """Nonces of anybody's making, sealed for the signer's card, which is public."""
    with Secret.of(content) as secret:
        return NoncePair.wrap(
            secret,
            record=store.record,
            signer=ME,
            batch=batch,
            hiding=pair[0],
            binding=pair[1],
            seal=card_sealer(card(ME).recipient()),
        )


def forged_bound(store: NonceStore, pair: Pair, content: bytes, batch: str) -> None:
    """What a run that was killed might have left, for a purpose, with its mark."""
    spent = store.folder / f"spent-{pair_id(*pair)}-{ONE.hex()}"
    spent.touch(mode=0o600)
    with Secret.of(content) as secret:
        bound = BoundPair.of(
            forged(store, pair, content, batch),
            secret,
            purpose=ONE,
            mark=nonces._mark(spent),
            seal=card_sealer(card(ME).recipient()),
        )
    (store.folder / f"bound-{pair_id(*pair)}.json").write_bytes(bound.to_file())


@pytest.mark.parametrize("listed", ["nowhere", "unsigned", "by another"])
@pytest.mark.parametrize("bound", [True, False])
def test_nonces_that_the_signer_did_not_make_are_refused(
    store: NonceStore, pair: Pair, listed: str, bound: bool
) -> None:
    """Their commitments may stand in a task: its author writes what it likes there."""
    hiding, binding, theirs = known()
    content, batch = hiding.encode() + binding.encode(), "0" * 32
    marks: dict[str, Any] = {"batch": batch, "marks": [NonceMark(pair=pair_id(*theirs), mark=None)]}
    with unlocked("south-pier") as other:
        signed = NonceMarks.signed_by(other, record=store.record, signer=ME, **marks)
    if listed == "unsigned":
        mine = NonceMarks.parse(one(store.folder, "batch-*").read_bytes())
        signed = signed.model_copy(update={"signature": mine.signature})
    if listed != "nowhere":
        (store.folder / f"batch-{batch}.json").write_bytes(signed.to_file())
    if bound:
        forged_bound(store, theirs, content, batch)
    else:
        path = store.folder / f"pair-{pair_id(*theirs)}.json"
        path.write_bytes(forged(store, theirs, content, batch).to_file())
        path.chmod(0o600)
    with pytest.raises(VerificationError, match=r"copied or restored|not signed by this signer"):
        store.take(*theirs, ONE)


def test_lists_are_of_this_key_and_of_their_own_batch(
    tmp_path: Path, own: OpenPartyKey, store: NonceStore, pair: Pair
) -> None:
    """A list that the same party has signed, for another key or another batch, says nothing here."""
    foreign = store_in(tmp_path / "other", own, dealt(number=1))
    foreign.make(dealt(number=1).scalars[ME])
    theirs, mine = one(foreign.folder, "batch-*"), one(store.folder, "batch-*")
    for data, place in ((theirs.read_bytes(), theirs.name), (mine.read_bytes(), f"batch-{'0' * 32}.json")):
        (store.folder / place).write_bytes(data)
        with pytest.raises(VerificationError, match="not signed by this signer, for this key"):
            store.unused()
        (store.folder / place).unlink()
    assert store.unused() == 1


@pytest.mark.parametrize("bound", [True, False])
def test_other_nonces_in_the_place_of_the_signers_are_refused(
    tmp_path: Path, own: OpenPartyKey, bound: bool, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Without marks, even: what does not fit the commitments is never used."""
    monkeypatch.setattr(nonces, "_KEPT_MODE", 0o755)
    store = store_in(tmp_path, own)
    (pair,) = store.make(dealt().scalars[ME])
    before = one(store.folder, "pair-*")
    batch = NoncePair.parse(before.read_bytes()).batch
    hiding, binding, _ = known()
    before.unlink()
    if bound:
        forged_bound(store, pair, hiding.encode() + binding.encode(), batch)
    else:
        before.write_bytes(forged(store, pair, hiding.encode() + binding.encode(), batch).to_file())
    with pytest.raises(VerificationError, match="not those of their commitments"):
        share_of(store, pair, ONE)


# What is left.


def test_after_one_visit_no_nonces_are_left(tmp_path: Path) -> None:
    """The signer says its share, never to come back: neither end nor failure of the task is waited for."""
    assert run(*prepared(tmp_path)).code == 0
    assert len(given(tmp_path)) == 1
    assert sorted(path.name[:5] for path in (tmp_path / ME / "nonces").iterdir()) == ["batch", "spent"]


def test_by_command_a_renamed_nonce_gives_no_second_share(tmp_path: Path) -> None:
    assert run(*prepared(tmp_path)).code == 0
    spent = one(tmp_path / ME / "nonces", "spent-*")
    other = a_course_of(tmp_path / "other")
    spent.rename(spent.with_name("-".join((*spent.name.split("-")[:2], public_purpose(*other)))))
    refused = run(*step(tmp_path, "other"))
    assert refused.code == 4
    assert "its share was given out" in refused.out
    assert len(given(tmp_path)) == 1


def a_course_of(folder: Path) -> tuple[SigningCourse, Inbox]:
    task = TaskFolder(folder)
    return SigningCourse(task.task, dealt(2, NAMES[:2]).record), task.read().inbox
