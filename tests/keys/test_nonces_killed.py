"""Runs that are killed at any call, raced, or stopped by their medium: a nonce gives one share, and nothing is left.

Checked against: the equation of a signature share (RFC 9591, sec. 5.2), whose value shows whether two were made of one
nonce; the kernel's own kills, renames and links.
"""

from __future__ import annotations

import errno
import os
import signal
import warnings
from pathlib import Path

import pytest
from keys.quorum import dealt
from keys.stores import ME, ONE, OTHER, Pair, files, fresh, in_child, kills, or_nothing, refuse, share_of, store_in
from parties import unlocked

from shares import streams
from shares.documents.nonce_batch import NoncePair, pair_id
from shares.errors import DocumentError, SharesError, StorageError, VerificationError
from shares.group.edwards25519 import BASE
from shares.keys.nonces import NonceStore


@pytest.mark.parametrize("then", [b"x", b"y"])
def test_killed_at_any_call_a_nonce_gives_one_share(tmp_path: Path, medium: str, then: bytes) -> None:
    def attempt(number: int, after: bool) -> int:
        share, _ = fresh(tmp_path, 2 * number + after)
        status, first = in_child(lambda: share(b"x"), number, after=after)
        # The next run is for the same message, or for another; then each is tried once more.
        given = {first} - {b""} | {or_nothing(share, message) for message in (then, b"x", b"y", b"x")} - {None}
        assert len(given) == 1, (medium, number, after)
        if then == b"x":
            # A crash is harmless: the next run signs the same message.
            assert given == {or_nothing(share, b"x")}
        return status

    assert kills(attempt) > 10


def test_killed_while_erasing(tmp_path: Path) -> None:
    outcomes = set()

    def attempt(number: int, after: bool) -> int:
        share, pair = fresh(tmp_path, 2 * number + after)
        first = share(b"x")

        def erase() -> bytes:
            with unlocked(ME) as own:
                store_in(tmp_path / str(2 * number + after), own).erase(*pair)
            return b"done"

        status, _ = in_child(erase, number, after=after)
        again = or_nothing(share, b"x")
        assert again in (first, None)
        assert or_nothing(share, b"y") is None
        outcomes.add((status, again is None))
        return status

    assert kills(attempt) >= 4
    assert outcomes >= {(0, True), (-signal.SIGKILL, False)}


def test_killed_while_nonces_are_made(tmp_path: Path) -> None:
    """What is left was never promised: it is refused, or whole."""
    seen = set()

    def attempt(number: int, after: bool) -> int:
        place = tmp_path / f"{number}-{after}"

        def make() -> bytes:
            with unlocked(ME) as own:
                store_in(place, own).make(dealt().scalars[ME])
            return b"done"

        status, _ = in_child(make, number, after=after)
        with unlocked(ME) as own:
            store = store_in(place, own)
            for path in store.folder.glob("pair-*") if store.folder.exists() else ():
                try:
                    left = NoncePair.parse(path.read_bytes())
                    outcome = taken_or_why(store, (left.hiding, left.binding))
                except DocumentError:
                    outcome = "incomplete"
                assert outcome == "whole" or (outcome in ("refused", "incomplete") and status != 0)
                seen.add(outcome)
        return status

    assert kills(attempt) > 10
    assert seen == {"whole", "refused", "incomplete"}


def taken_or_why(store: NonceStore, pair: Pair) -> str:
    try:
        hiding, binding = store.take(*pair, ONE).used()
    except VerificationError as error:
        return "refused" if "copied or restored" in error.what else error.what
    return "whole" if (hiding * BASE, binding * BASE) == pair else "other nonces"


@pytest.mark.parametrize("messages", [(b"x", b"y"), (b"x", b"x"), (b"x", b"y", b"z", b"x")])
def test_processes_that_race_for_a_nonce(tmp_path: Path, medium: str, messages: tuple[bytes, ...]) -> None:
    """They start together, in front of one closed gate."""
    won = 0
    for trial in range(12):
        share, _ = fresh(tmp_path, trial)
        gate = tmp_path / f"gate{trial}"
        children = []
        for message in messages:
            reader, writer = os.pipe()
            with warnings.catch_warnings():
                warnings.simplefilter("ignore", DeprecationWarning)
                child = os.fork()
            if child == 0:
                signal.alarm(30)
                status = 1
                try:
                    while not gate.exists():
                        pass
                    os.write(writer, share(message))
                    status = 0
                except SharesError:
                    status = 4
                finally:
                    os._exit(status)
            os.close(writer)
            children.append((child, reader))
        gate.touch()
        given = set()
        for child, reader in children:
            with os.fdopen(reader, "rb") as stream:
                given.add(stream.read())
            assert os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]) in (0, 4)
        given.discard(b"")
        assert len(given) <= 1, (medium, trial)
        won += len(given)
    assert won >= 6


def test_a_pair_put_back_while_another_is_spent_is_noticed(store: NonceStore, pair: Pair) -> None:
    """Two spent names of one pair: nobody gets a share, not even who had one."""
    (path,) = store.folder.glob("pair-*")
    data = path.read_bytes()
    store.take(*pair, ONE)
    (store.folder / f"spent-{pair_id(*pair)}-{OTHER.hex()}").write_bytes(data)
    for purpose in (ONE, OTHER):
        with pytest.raises(VerificationError, match="this nonce was used for another"):
            store.take(*pair, purpose)


def test_a_medium_without_a_rename_will_do(store: NonceStore, pair: Pair, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(streams, "_rename_new", refuse)
    monkeypatch.setattr(os, "link", refuse)
    assert share_of(store, pair, b"x") == share_of(store, pair, b"x")
    with pytest.raises(VerificationError, match="this nonce was used"):
        share_of(store, pair, b"y")


def test_on_a_full_medium_no_share_is_given_and_the_same_purpose_goes_on(
    store: NonceStore, pair: Pair, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(*_: object, **__: object) -> None:
        raise OSError(errno.ENOSPC, "full")

    with monkeypatch.context() as patch:
        patch.setattr(streams, "_rename_new", full)
        with pytest.raises(StorageError, match="full"):
            store.take(*pair, ONE)
    assert files(store) == ["batch", "pair", "spent"]
    with pytest.raises(VerificationError, match="this nonce was used for another"):
        store.take(*pair, OTHER)
    assert store.take(*pair, ONE)


def test_what_a_killed_run_began_to_bind_is_erased_too(store: NonceStore) -> None:
    """A run that dies in the middle of a file leaves it under a temporary name, with the sealed nonces in it."""
    ((hiding, binding),) = store.make(dealt().scalars[ME])
    begun = store.folder / f".bound-{pair_id(hiding, binding)}.json.{'0' * 16}.partial"
    other = store.folder / f".bound-{'0' * 32}.json.{'0' * 16}.partial"
    for path in (begun, other):
        path.write_bytes(b"sealed nonces")
    store.erase(hiding, binding)
    assert not begun.exists()
    assert other.exists()
