"""Asking for tasks: what is asked is what was meant, and no commitment is named by two tasks."""

from __future__ import annotations

import hashlib
import itertools
from datetime import timedelta
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from parties import card, unlocked

from shares import clock
from shares.documents.base import parse_object
from shares.documents.key_event import MAX_CONTENT, TaskAsked
from shares.documents.nonce_batch import NonceBatch
from shares.documents.task import Signing, Task
from shares.errors import (
    DocumentError,
    NotEnoughSharesError,
    ParameterError,
    SharesError,
    StorageError,
    VerificationError,
)
from shares.group.edwards25519 import BASE, Point, Scalar
from shares.keys import certificates
from shares.keys.asking import ask, new_joining, new_signing, unused
from shares.keys.deal import deal
from shares.keys.folder import KeyFolder
from shares.keys.handover import hand_over

NAMES = ("north-pier", "south-pier", "light-house")
CONTENT = b"release 7\n"


def dealt(tmp_path: Path, label: str = "Harbour key") -> KeyFolder:
    tmp_path.mkdir(exist_ok=True)
    with unlocked("harbour-office") as dealer:
        made = deal(Scalar.drawn(), 2, [card(name) for name in NAMES], label=label, dealer=dealer)
        hand_over(made, dealer, tmp_path / "key", dict.fromkeys(NAMES, tmp_path))
    return KeyFolder(tmp_path / "key")


@pytest.fixture
def folder(tmp_path: Path) -> KeyFolder:
    """The office's."""
    return dealt(tmp_path / "harbour")


def soon() -> object:
    return clock.now() + timedelta(days=7)


def signing(folder: KeyFolder, names: tuple[str, ...] = NAMES[:2], content: bytes = CONTENT, **more: object) -> Task:
    with unlocked("harbour-office") as author:
        given = {"signers": names, "author": author, "due": soon(), **more}
        return new_signing(content, folder.record, **given)  # type: ignore[arg-type]


def asked(folder: KeyFolder, task: Task, place: Path, **more: object) -> None:
    with unlocked("harbour-office") as author:
        ask(folder, task, place, CONTENT, author, **more)  # type: ignore[arg-type]


def batch(folder: KeyFolder, name: str, count: int = 2, by: str | None = None) -> NonceBatch:
    """Commitments to nonces that nobody keeps: the author sees no difference."""
    pairs: list[tuple[Point, Point]] = [(Scalar.drawn() * BASE, Scalar.drawn() * BASE) for _ in range(count)]
    with unlocked(by or name) as own:
        return NonceBatch.signed_by(own, record=folder.record, signer=name, commitments=pairs)


@pytest.mark.parametrize("names", [one for n in (2, 3) for one in itertools.permutations(NAMES, n)])
def test_signers_are_the_records_in_its_order(folder: KeyFolder, names: tuple[str, ...]) -> None:
    task = signing(folder, names)
    assert task.names == tuple(name for name in NAMES if name in names)
    assert [one.card for one in task.parties] == [card(name) for name in task.names]
    assert isinstance(task.work, Signing)
    assert task.work.content.digest == hashlib.sha256(CONTENT).digest()
    assert (task.key, task.record) == (folder.record.key, folder.record.fingerprint)


def test_what_cannot_be_asked_is_refused(folder: KeyFolder) -> None:
    with pytest.raises(ParameterError, match="64 MiB"):
        signing(folder, content=bytes(MAX_CONTENT + 1))
    with pytest.raises(ParameterError, match="in the past"):
        signing(folder, due=clock.now())
    for names in ((), NAMES[:1], (NAMES[0], NAMES[0]), (NAMES[0], "dry-dock")):
        with pytest.raises(ParameterError):
            signing(folder, names)
    with unlocked("harbour-office") as author:
        for need, count in ((1, 3), (4, 3), (2, 1)):
            with pytest.raises(ParameterError):
                new_joining([card(name) for name in NAMES[:count]], need, label="x", author=author, due=soon())  # type: ignore[arg-type]


def test_a_task_is_kept_entered_and_then_written(folder: KeyFolder, tmp_path: Path) -> None:
    public_key = folder.record.public_key.encode()
    body = certificates.root(public_key, subject="CN=Harbour", not_before=clock.now(), not_after=soon())  # type: ignore[arg-type]
    task = signing(folder, content=body, form="certificate")
    with unlocked("harbour-office") as author:
        ask(folder, task, tmp_path / "t", body, author)
    entry = folder.journal().entries[-1]
    assert isinstance(entry.event, TaskAsked)
    assert (entry.event.task, entry.event.form) == (task.digest(), "certificate")
    (kept,) = (folder.path / one.path for one in entry.documents)
    assert Task.parse(kept.read_bytes()) == task == Task.parse((tmp_path / "t" / "task.json").read_bytes())
    with pytest.raises(StorageError, match="a task is here already"):
        asked(folder, signing(folder), tmp_path / "t")


def test_what_every_signer_would_refuse_is_not_asked_for(folder: KeyFolder) -> None:
    body = b"\x30\x80" + bytes(20)
    for form, content in (("plain", body), ("certificate", body), ("revocation-list", CONTENT), ("openssh", CONTENT)):
        with pytest.raises(SharesError) as refused:
            signing(folder, content=content, form=form)
        assert refused.value.hint or form != "plain"


@given(st.lists(st.integers(1, 4), min_size=2, max_size=2), st.booleans())
@settings(max_examples=8, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_no_pair_is_named_by_two_tasks(
    tmp_path_factory: pytest.TempPathFactory, counts: list[int], read_anew: bool
) -> None:
    """Every pair is used once, in turn, until a signer has none left; a folder read anew remembers."""
    place = tmp_path_factory.mktemp("asking")
    folder = dealt(place / "harbour")
    batches = [batch(folder, name, count) for name, count in zip(NAMES, counts, strict=False)]
    seen: list[bytes] = []
    for number in range(min(counts)):
        folder = KeyFolder(folder.path) if read_anew else folder
        chosen = unused(folder, batches, NAMES[:2])
        seen += [one.hiding.encode() for one in chosen.values()]
        asked(folder, signing(folder, commitments=chosen), place / f"t{number}")
    assert len(set(seen)) == len(seen) == 2 * min(counts)
    with pytest.raises(NotEnoughSharesError) as refused:
        unused(folder, batches, NAMES[:2])
    assert all(
        (name in refused.value.what) is (count == min(counts)) for name, count in zip(NAMES, counts, strict=False)
    )


def test_batches_that_are_not_the_signers_are_refused(folder: KeyFolder, tmp_path: Path) -> None:
    other = dealt(tmp_path / "other")
    with pytest.raises(VerificationError, match="another key"):
        unused(folder, [batch(other, NAMES[0])], NAMES[:1])
    for signer, by in ((NAMES[0], NAMES[1]), (NAMES[0], "dry-dock")):
        with pytest.raises(VerificationError, match=f"not by {signer}"):
            unused(folder, [batch(folder, signer, by=by)], NAMES[:1])
    with pytest.raises(NotEnoughSharesError, match="south-pier"):
        unused(folder, [batch(folder, NAMES[0])], NAMES[:2])


def test_an_altered_task_that_was_kept_is_noticed(folder: KeyFolder, tmp_path: Path) -> None:
    """Whoever edits what was asked for, to have a pair named twice, is found out: the author has signed it."""
    batches = [batch(folder, name) for name in NAMES[:2]]
    task = signing(folder, commitments=unused(folder, batches, NAMES[:2]))
    asked(folder, task, tmp_path / "t")
    (kept,) = (folder.path / "asked").iterdir()
    assert parse_object(kept.read_bytes())["kind"] == "task"
    kept.write_bytes(kept.read_bytes().replace(b"Harbour key", b"Harbour KEY"))
    with pytest.raises(DocumentError, match="signature does not fit"):
        unused(folder, batches, NAMES[:2])
