"""A task about a key is given up: what it has used is erased, what it only names is not, and what ended did not fail.

Checked against: nothing outside; the order of giving up is this project's own (shares/documents/FORMAT_KEYS.md,
sec. 25 and 26). RFC 9591, sec. 5.1: nonces that were used are deleted.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from unittest import mock

import pytest
from cli.asked import FIRST, SECOND, commit, events, finish, sent
from cli.harness import Result, run
from cli.keyed import OFFICE, Keyed, request

from shares.documents.key_event import TaskFailed, TaskFinished
from shares.errors import StorageError
from shares.history.steps import OwnSteps
from shares.keys import finishing
from shares.keys.nonces import NonceStore


@pytest.fixture(scope="module")
def once(tmp_path_factory: pytest.TempPathFactory) -> Keyed:
    keyed = Keyed.make(tmp_path_factory.mktemp("keyed") / "harbour").dealt()
    assert run("key", "show", keyed.key, "--x25519-pem", keyed.path("x.pem")).code == 0
    return keyed


@pytest.fixture
def keyed(once: Keyed, tmp_path: Path) -> Keyed:
    """A key dealt 2 of 3, and a public half in x.pem."""
    return once.copy(tmp_path / "harbour")


def drop(keyed: Keyed, task: Path, name: str = FIRST, own: Path | None = None) -> Result:
    """Give a task up; it must succeed."""
    mine = ["--mine", own or keyed.own(name), *keyed.as_(name, "--key")]
    done = run("task", "drop", task, *mine, "--yes", "--json")
    assert done.code == 0, done.err
    return done


def stopped(owner: object, name: str, doing: Callable[[], Result]) -> None:
    """Let something be done that is stopped where it comes to this."""
    with mock.patch.object(owner, name, side_effect=StorageError("no space left")):
        done = doing()
    assert (done.code, "no space left" in done.err) == (5, True)


# Nonces.


def test_a_signature_that_is_given_up_leaves_no_nonces(keyed: Keyed) -> None:
    nonces = keyed.own(FIRST) / "nonces"
    beforehand = ["--batch", *[str(commit(keyed, name)) for name in (FIRST,)]]
    more = [*beforehand, f"--batch={commit(keyed, SECOND)}"]
    known = {path.name for path in nonces.iterdir()}
    first = keyed.ask("sign", keyed.path("release.txt"), task="one", more=more)
    second = keyed.ask("sign", keyed.path("release.txt"), task="two")
    assert keyed.next(first, FIRST).code == 0
    assert keyed.next(second, FIRST).code == 0
    for task in (first, second):
        own = ["--mine", keyed.own(FIRST), *keyed.as_(FIRST, "--key")]
        done = run("task", "drop", task, *own, "--yes")
        assert done.code == 0, done.err
    left = {path.name for path in nonces.glob("pair-*")}
    assert left < known
    assert len(left) == 2
    assert all(path.stat().st_size == 0 for path in nonces.glob("spent-*"))
    assert len(list(nonces.glob("spent-*"))) == 1
    assert not list((keyed.own(FIRST) / "tasks").rglob("step-*"))


def test_nonces_are_erased_by_repeating_a_drop_that_was_stopped_before(keyed: Keyed) -> None:
    task = keyed.ask("sign", keyed.path("release.txt"), task="one")
    nonces = keyed.own(FIRST) / "nonces"
    assert keyed.next(task, FIRST).code == 0
    assert len(list(nonces.glob("pair-*"))) == 1
    stopped(NonceStore, "erase", lambda: run(*drop_arguments(keyed, task)))
    assert len(list(nonces.glob("pair-*"))) == 1
    assert "has given it up" in keyed.next(task, FIRST).out
    assert drop(keyed, task).json["nonces_stay"] is False
    assert not list(nonces.glob("pair-*"))
    assert len(events(keyed.own(FIRST), TaskFailed)) == 1


def drop_arguments(keyed: Keyed, task: Path) -> list[str | Path]:
    return ["task", "drop", task, "--mine", keyed.own(FIRST), *keyed.as_(FIRST, "--key"), "--yes"]


@pytest.fixture
def two(keyed: Keyed) -> tuple[Path, Path]:
    """Two tasks that name one commitment of each signer: the second by somebody who was not told to."""
    batches = [f"--batch={commit(keyed, name, 1)}" for name in (FIRST, SECOND)]
    first = keyed.ask("sign", keyed.path("release.txt"), task="one", more=batches)
    for kept in (keyed.key / "asked").iterdir():
        kept.unlink()
    return first, keyed.ask("sign", keyed.path("release.txt"), task="two", more=batches)


def in_nonces(keyed: Keyed) -> list[str]:
    return sorted(path.name.split("-")[0] for path in (keyed.own(FIRST) / "nonces").glob("[bps][aop]*-*"))


def test_who_gives_up_a_task_that_names_anothers_nonces_keeps_them_for_the_other(
    keyed: Keyed, two: tuple[Path, Path]
) -> None:
    before = in_nonces(keyed)
    assert drop(keyed, two[1]).json["nonces_stay"] is True
    assert in_nonces(keyed) == before == ["batch", "pair"]
    keyed.answer(two[0], FIRST, SECOND, rounds=1)
    assert len(keyed.finish(two[0], "sig").read_bytes()) == 64
    assert in_nonces(keyed) == ["batch", "spent"]


def test_what_a_stopped_run_has_bound_for_one_task_is_kept_from_giving_up_the_other(
    keyed: Keyed, two: tuple[Path, Path]
) -> None:
    stopped(OwnSteps, "keep", lambda: keyed.next(two[0], FIRST))
    assert in_nonces(keyed) == ["batch", "bound", "spent"]
    drop(keyed, two[1])
    assert in_nonces(keyed) == ["batch", "bound", "spent"]
    keyed.answer(two[0], FIRST, SECOND, rounds=1)
    assert len(keyed.finish(two[0], "sig").read_bytes()) == 64


def test_nonces_of_a_share_that_was_given_are_erased_with_its_task(keyed: Keyed, two: tuple[Path, Path]) -> None:
    stopped(NonceStore, "erase", lambda: keyed.next(two[0], FIRST))
    assert in_nonces(keyed) == ["batch", "bound", "spent"]
    assert drop(keyed, two[0]).json["nonces_stay"] is False
    assert in_nonces(keyed) == ["batch", "spent"]
    # And never serve the other one.
    assert "nonce was used" in keyed.next(two[1], FIRST).err


def test_what_stays_is_said_before_and_after(keyed: Keyed, two: tuple[Path, Path]) -> None:
    """Before it is asked, which without a terminal it refuses; and once it is done."""
    refused = run(*drop_arguments(keyed, two[0])[:-1])
    assert refused.code == 2
    done = run(*drop_arguments(keyed, two[0]))
    assert done.code == 0
    for told in (refused.err, done.out):
        assert "Nonces made beforehand, to which this task names your commitments, stay" in " ".join(told.split())


# What has ended has not failed.


def kept(keyed: Keyed, owner: Path) -> list[str]:
    return sorted(path.name for path in (owner / "tasks").glob("*/*"))


def test_a_signature_that_was_finished_but_for_its_last_step_is_not_entered_as_failed(keyed: Keyed) -> None:
    task = keyed.ask("sign", keyed.path("release.txt"), task="t")
    for name in (FIRST, SECOND):
        assert keyed.next(task, name).code == 0
    stopped(OwnSteps, "close", lambda: keyed.next(task, FIRST))
    assert "done.json" not in kept(keyed, keyed.own(FIRST))
    told = drop(keyed, task).json
    assert (told["state"], told["nonces_stay"]) == ("finished", False)
    assert kept(keyed, keyed.own(FIRST)) == ["done.json"]
    assert (len(events(keyed.own(FIRST), TaskFinished)), events(keyed.own(FIRST), TaskFailed)) == (1, [])
    assert keyed.next(task, FIRST, "--json").json["state"] == "finished"


def test_nor_is_a_message_that_its_receiver_has_read(keyed: Keyed) -> None:
    task = keyed.ask("open", sent(keyed), task="t", names=(FIRST, SECOND))
    keyed.answer(task, FIRST, SECOND, rounds=1)
    stopped(finishing, "close", lambda: run(*finish(keyed, task, "--to", keyed.path("opened"))))
    assert "step-0.json" in kept(keyed, keyed.key)
    assert drop(keyed, task, OFFICE, keyed.key).json["state"] == "finished"
    assert kept(keyed, keyed.key) == ["done.json"]
    assert (len(events(keyed.key, TaskFinished)), events(keyed.key, TaskFailed)) == (1, [])


def test_what_another_task_came_to_is_no_end_of_this_one(keyed: Keyed) -> None:
    task = keyed.ask("sign", keyed.path("release.txt"), task="t")
    keyed.answer(task, FIRST, SECOND)
    other = keyed.ask("sign", keyed.path("release.txt"), task="u")
    assert keyed.next(other, FIRST).code == 0
    assert drop(keyed, other).json["state"] == "dropped"
    assert (len(events(keyed.own(FIRST), TaskFinished)), len(events(keyed.own(FIRST), TaskFailed))) == (1, 1)


# A damaged folder.


@pytest.mark.parametrize("name", ["issuer", "content"])
def test_a_task_is_given_up_although_files_of_it_are_missing(keyed: Keyed, name: str) -> None:
    root = keyed.ask("root", "CN=Harbour Trust Root", task="t-root")
    keyed.answer(root, FIRST, SECOND)
    request(keyed.path("request.pem"))
    more = ["--issuer", str(keyed.finish(root, "root.pem")), "--for", "server"]
    task = keyed.ask("certify", keyed.path("request.pem"), task="t", more=more)
    assert keyed.next(task, FIRST).code == 0
    (task / name).unlink()
    own = ["--mine", keyed.own(FIRST), *keyed.as_(FIRST, "--key")]
    done = run("task", "drop", task, *own, "--yes", "--json")
    assert (done.code, done.json["state"], done.json["about"]) == (0, "dropped", None)
    assert len(events(keyed.own(FIRST), TaskFailed)) == 1
    assert not list((keyed.own(FIRST) / "tasks").rglob("step-*"))
