"""Nonces on disk: each is used for one share at most, whatever is copied or restored.

Checked against: the equation of a signature share (RFC 9591, sec. 5.2), whose value shows whether two were made of one
nonce; the kernel's own kills, renames and links; and cp(1) as what people restore folders with.
"""

from __future__ import annotations

import errno
import json
import os
import shutil
import stat
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest
from keys.quorum import dealt
from keys.stores import ME, ONE, OTHER, Pair, files, share_of, store_in
from parties import unlocked

from shares.documents.nonce_batch import MAX_BATCH, NonceBatch, pair_id
from shares.documents.party import OpenPartyKey
from shares.errors import (
    DocumentError,
    ParameterError,
    StorageError,
    VerificationError,
)
from shares.group.edwards25519 import BASE
from shares.keys import nonces
from shares.keys.nonces import NonceStore

# Used, and used once.


def test_nonces_are_those_of_their_commitments(store: NonceStore, pair: Pair) -> None:
    assert store.holds(*pair)
    assert files(store) == ["batch", "pair"]
    hiding, binding = store.take(*pair, ONE).used()
    assert (hiding * BASE, binding * BASE) == pair
    assert not store.holds(*pair)
    assert files(store) == ["batch", "bound", "spent"]
    assert [path.read_bytes() for path in store.folder.glob("spent-*")] == [b""]


def test_files_are_the_signers_alone(store: NonceStore, pair: Pair) -> None:
    store.take(*pair, ONE)
    modes = {stat.S_IMODE(path.stat().st_mode) for path in store.folder.iterdir()}
    assert modes == {0o600}
    assert stat.S_IMODE(store.folder.stat().st_mode) == 0o700


def test_the_same_purpose_gives_the_same_share(store: NonceStore, pair: Pair) -> None:
    assert share_of(store, pair, b"x") == share_of(store, pair, b"x")


def test_a_run_after_a_killed_one_puts_the_new_name_on_the_medium(
    store: NonceStore, pair: Pair, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The killed run may have renamed the file in memory alone; a power cut would undo that after the share is out."""
    store.take(*pair, ONE)
    synced: list[str] = []
    real = os.fsync

    def watch(descriptor: int) -> None:
        synced.append(os.readlink(f"/proc/self/fd/{descriptor}"))
        real(descriptor)

    monkeypatch.setattr(os, "fsync", watch)
    store.take(*pair, ONE)
    assert synced == [os.fspath(store.folder)]


def test_another_purpose_is_refused(store: NonceStore, pair: Pair) -> None:
    share_of(store, pair, b"x")
    for _ in range(2):
        with pytest.raises(VerificationError, match="this nonce was used for another message"):
            share_of(store, pair, b"y")
    assert share_of(store, pair, b"x")


def test_what_is_erased_is_gone_for_ever(store: NonceStore, pair: Pair) -> None:
    store.take(*pair, ONE)
    for _ in range(2):
        store.erase(*pair)
    assert files(store) == ["batch", "spent"]
    with pytest.raises(VerificationError, match="erased: its share was given out"):
        store.take(*pair, ONE)
    with pytest.raises(VerificationError, match="this nonce was used for another"):
        store.take(*pair, OTHER)


def test_what_was_never_spent_is_erased_as_well(store: NonceStore, pair: Pair) -> None:
    store.erase(*pair)
    assert not store.holds(*pair)
    with pytest.raises(VerificationError, match="do not lie here"):
        store.take(*pair, ONE)


def test_each_pair_of_a_batch_is_its_own(store: NonceStore) -> None:
    pairs = store.make(dealt().scalars[ME], 7)
    assert len(set(pairs)) == 7
    for number, pair in enumerate(pairs):
        assert store.take(*pair, bytes([number]) * 32)
    assert files(store) == ["batch"] + 7 * ["bound"] + 7 * ["spent"]


@pytest.mark.parametrize("count", [0, -1, MAX_BATCH + 1])
def test_a_batch_has_its_limits(store: NonceStore, count: int) -> None:
    with pytest.raises(ParameterError, match="at a time"):
        store.make(dealt().scalars[ME], count)
    assert not store.folder.exists()


def test_what_is_left_is_counted(store: NonceStore) -> None:
    assert (store.unused(), store.leftovers()) == (0, [])
    first, *_ = store.make(dealt().scalars[ME], 3)
    store.make(dealt().scalars[ME], 2)
    assert (store.unused(), store.leftovers()) == (5, [])
    (path,) = store.folder.glob(f"pair-{pair_id(*first)}.json")
    data = path.read_bytes()
    store.take(*first, ONE)
    assert store.unused() == 4
    path.write_bytes(data)  # A spent pair that is put back is none that is left.
    assert (store.unused(), store.leftovers()) == (4, [])
    unpromised = store.folder / f"pair-{'0' * 32}.json"
    unpromised.write_bytes(data[:100])
    assert (store.unused(), store.leftovers()) == (4, [unpromised])


# What is not this signer's, of this key.


def test_unknown_commitments_are_refused(store: NonceStore, pair: Pair) -> None:
    for wrong in ((pair[1], pair[0]), (pair[0], BASE)):
        with pytest.raises(VerificationError, match="do not lie here"):
            store.take(*wrong, ONE)
    assert store.holds(*pair)


def test_nonces_of_another_key_are_refused(tmp_path: Path, own: OpenPartyKey, store: NonceStore, pair: Pair) -> None:
    foreign = store_in(tmp_path, own, dealt(number=1))
    with pytest.raises(VerificationError, match="another key, epoch or signer"):
        foreign.take(*pair, ONE)
    assert store.holds(*pair)
    store.take(*pair, ONE)
    with pytest.raises(VerificationError, match="another key, epoch or signer"):
        foreign.take(*pair, ONE)


def test_another_party_key_opens_nothing(store: NonceStore, pair: Pair) -> None:
    with unlocked("south-pier") as other:
        store.key, own = other, store.key
        with pytest.raises(VerificationError, match="not signed by this signer"):
            store.take(*pair, ONE)
        with pytest.raises(VerificationError, match="not signed by this signer"):
            store.unused()
    store.key = own
    assert store.take(*pair, ONE)


def test_a_file_under_another_ones_name_is_refused(store: NonceStore) -> None:
    first, second = store.make(dealt().scalars[ME], 2)
    place = store.folder / f"pair-{pair_id(*first)}.json"
    place.unlink()
    (store.folder / f"pair-{pair_id(*second)}.json").rename(place)
    with pytest.raises(VerificationError, match="another key, epoch or signer"):
        store.take(*first, ONE)


@pytest.mark.parametrize("member", ["sealed", "hiding", "batch", "digest", "record", "purpose", "mark"])
def test_damaged_nonces_are_refused(store: NonceStore, pair: Pair, member: str) -> None:
    store.take(*pair, ONE)  # From here on no mark of this file is asked for.
    (bound,) = store.folder.glob("bound-*")
    members = json.loads(bound.read_text())
    text = members[member]
    members[member] = ("B" if text[0] == "A" else "A") + text[1:] if member != "batch" else "0" * 32
    if member == "digest":
        members[member] = "0" * 64
    bound.write_text(json.dumps(members))
    with pytest.raises((VerificationError, DocumentError)):
        store.take(*pair, ONE)


# Copied and restored.


def test_a_pair_that_is_put_back_has_a_spent_one_beside_it(store: NonceStore, pair: Pair) -> None:
    (path,) = store.folder.glob("pair-*")
    kept = store.folder.parent / "kept"
    shutil.copy2(path, kept)
    given = {share_of(store, pair, b"x")}
    shutil.copy2(kept, path)
    with pytest.raises(VerificationError, match="this nonce was used for another"):
        share_of(store, pair, b"y")
    given.add(share_of(store, pair, b"x"))
    assert len(given) == 1
    assert files(store) == ["batch", "bound", "spent"]  # The copy is removed.
    shutil.copy2(kept, path)
    store.erase(*pair)
    assert files(store) == ["batch", "spent"]
    shutil.copy2(kept, path)
    for message in (b"x", b"y"):
        with pytest.raises(VerificationError, match="this nonce was used"):
            share_of(store, pair, message)


def by_copy(folder: Path, backup: Path) -> Callable[[], object]:
    subprocess.run(["cp", "-a", folder, backup], check=True)

    def restore() -> None:
        shutil.rmtree(folder)
        subprocess.run(["cp", "-a", backup, folder], check=True)

    return restore


def by_moving_the_copy(folder: Path, backup: Path) -> Callable[[], object]:
    subprocess.run(["cp", "-a", folder, backup], check=True)

    def restore() -> None:
        shutil.rmtree(folder)
        backup.rename(folder)

    return restore


def in_place(folder: Path, backup: Path) -> Callable[[], object]:
    """The folder stays the same; what is in it is removed and put back. Inode numbers may come again."""
    subprocess.run(["cp", "-a", folder, backup], check=True)

    def restore() -> None:
        for path in folder.iterdir():
            path.unlink()
        subprocess.run(["cp", "-a", f"{backup}/.", folder], check=True)

    return restore


def by_hard_links(folder: Path, backup: Path) -> Callable[[], object]:
    subprocess.run(["cp", "-al", folder, backup], check=True)

    def restore() -> None:
        shutil.rmtree(folder)
        backup.rename(folder)

    return restore


def by_archive(folder: Path, backup: Path) -> Callable[[], object]:
    subprocess.run(["tar", "-C", folder.parent, "-cpf", backup, folder.name], check=True)

    def restore() -> None:
        shutil.rmtree(folder)
        subprocess.run(["tar", "-C", folder.parent, "-xpf", backup], check=True)

    return restore


@pytest.mark.parametrize("saving", [by_copy, by_moving_the_copy, in_place, by_hard_links, by_archive])
def test_a_restored_folder_is_refused(
    tmp_path: Path, own: OpenPartyKey, saving: Callable[[Path, Path], Callable[[], object]]
) -> None:
    store = store_in(tmp_path, own)
    (pair,) = store.make(dealt().scalars[ME])
    restore = saving(store.folder, tmp_path / "backup")
    if saving is not by_hard_links:  # A link that is made to the file changes it: it is refused at once.
        share_of(store, pair, b"x")
    restore()
    assert files(store) == ["batch", "pair"]
    for message in (b"x", b"y"):
        with pytest.raises(VerificationError, match=r"copied or restored: its nonces are not safe") as refused:
            share_of(store, pair, message)
        assert "shares key commit" in str(refused.value.hint)
    # New ones are made and used there.
    (fresh,) = store.make(dealt().scalars[ME])
    assert share_of(store, fresh, b"y")


def test_a_folder_that_is_only_moved_is_the_same(
    tmp_path: Path, own: OpenPartyKey, store: NonceStore, pair: Pair
) -> None:
    store.folder.rename(tmp_path / "elsewhere")
    (tmp_path / "moved").mkdir()
    (tmp_path / "elsewhere").rename(tmp_path / "moved" / "nonces")
    assert share_of(store_in(tmp_path / "moved", own), pair, b"x")


def test_without_marks_a_pair_was_never_promised(store: NonceStore, pair: Pair) -> None:
    (marks,) = store.folder.glob("batch-*")
    marks.unlink()
    with pytest.raises(VerificationError, match="copied or restored"):
        store.take(*pair, ONE)


def test_on_a_medium_without_modes_there_are_no_marks(
    tmp_path: Path, own: OpenPartyKey, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The limit that the module names: nonces work there, and a restored folder goes unnoticed."""
    monkeypatch.setattr(nonces, "_KEPT_MODE", 0o755)
    store = store_in(tmp_path, own)
    (pair,) = store.make(dealt().scalars[ME])
    restore = by_copy(store.folder, tmp_path / "backup")
    restore()
    assert share_of(store, pair, b"x")


# In the dark.


def test_nonces_lie_sealed(store: NonceStore, pair: Pair) -> None:
    taken = store.take(*pair, ONE)
    hiding, binding = (one.encode() for one in taken.used())
    everything = b"".join(path.read_bytes() for path in store.folder.iterdir())
    for secret in (hiding, binding, dealt().scalars[ME].encode()):
        assert secret not in everything
        assert secret.hex().encode() not in everything


# Handed out.


def test_a_batch_is_handed_out_signed(store: NonceStore, own: OpenPartyKey) -> None:
    batch = store.batch(dealt().scalars[ME], 5)
    assert NonceBatch.parse(batch.to_file()) == batch
    assert (batch.signer, batch.key, batch.record) == (ME, dealt().record.key, dealt().record.fingerprint)
    assert batch.card == own.card
    assert len(batch.commitments) == 5
    assert all(store.holds(one.hiding, one.binding) for one in batch.commitments)


def test_a_folder_that_cannot_be_listed_has_no_unused_nonces(
    store: NonceStore, monkeypatch: pytest.MonkeyPatch
) -> None:
    ((hiding, binding),) = store.make(dealt().scalars[ME])

    def refused(*_: object) -> list[str]:
        raise PermissionError(errno.EACCES, "as a folder that may be written and not read")

    monkeypatch.setattr(os, "listdir", refused)
    with pytest.raises(StorageError):
        store.holds(hiding, binding)
    with pytest.raises(StorageError):
        store.take(hiding, binding, ONE)
