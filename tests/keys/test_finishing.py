"""The end of a task, stopped at each place: nothing is lost, nothing is told twice, and what is kept is erased once."""

from __future__ import annotations

from collections.abc import Iterable
from datetime import timedelta
from pathlib import Path

import pytest
from cli.asked import CONTENT, FIRST, SECOND, commit, sent
from cli.harness import run
from cli.keyed import OFFICE, Keyed
from parties import unlocked

from shares.documents.key_event import TaskFailed
from shares.documents.task_message import Body, Commitment, SignatureShare, TaskMessage
from shares.errors import NotEnoughSharesError, ParameterError, StorageError, VerificationError
from shares.group.edwards25519 import BASE, Scalar
from shares.history.exchange import TaskFolder
from shares.keys import finishing
from shares.keys.finishing import begin_opening, open_message, signed
from shares.keys.folder import KeyFolder
from shares.memory import Secret


@pytest.fixture(scope="module")
def once(tmp_path_factory: pytest.TempPathFactory) -> Keyed:
    keyed = Keyed.make(tmp_path_factory.mktemp("keyed") / "harbour").dealt()
    assert run("key", "show", keyed.key, "--x25519-pem", keyed.path("x.pem")).code == 0
    return keyed


@pytest.fixture
def opening(once: Keyed, tmp_path: Path) -> tuple[KeyFolder, TaskFolder]:
    """The office's folder, and that of a task to open a message, answered by two."""
    keyed = once.copy(tmp_path / "harbour")
    path = keyed.ask("open", sent(keyed), task="t", names=(FIRST, SECOND))
    keyed.answer(path, FIRST, SECOND, rounds=1)
    return KeyFolder(keyed.key), TaskFolder(path)


class Taken(list[bytes]):
    """What was delivered."""

    def __call__(self, plaintext: Secret) -> None:
        with plaintext.view() as view:
            self.append(bytes(view))


def told(folder: KeyFolder) -> list[str]:
    return [entry.event.what for entry in folder.journal().entries]


def steps(folder: KeyFolder) -> list[str]:
    return sorted(path.name for path in (folder.path / "tasks").rglob("*.json"))


def test_a_message_is_opened_once(opening: tuple[KeyFolder, TaskFolder]) -> None:
    taken = Taken()
    with unlocked(OFFICE) as office:
        assert steps(opening[0]) == ["step-0.json"]
        open_message(*opening, office, taken)
        assert (taken, steps(opening[0])) == ([CONTENT], ["done.json"])
        with pytest.raises(ParameterError, match="over"):
            open_message(*opening, office, taken)
        assert len(taken) == 1


@pytest.mark.parametrize("place", ["deliver", "enter_once", "close"])
def test_whatever_stops_it_it_is_done_again(
    opening: tuple[KeyFolder, TaskFolder], place: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    folder, taken = opening[0], Taken()

    def stop(*_: object) -> None:
        raise StorageError("no space left")

    with unlocked(OFFICE) as office:
        with monkeypatch.context() as patched:
            if place != "deliver":
                patched.setattr(finishing, place, stop)
            with pytest.raises(StorageError):
                open_message(*opening, office, stop if place == "deliver" else taken)
        open_message(*opening, office, taken)
    assert set(taken) == {CONTENT}
    assert told(folder).count("task-finished") == 1
    assert steps(folder) == ["done.json"]


def test_round_0_may_be_said_again(opening: tuple[KeyFolder, TaskFolder]) -> None:
    """A run that was stopped before its message was released; what is released then is the same to the byte."""
    folder, task = opening
    (said,) = (task.path / "messages").glob("0-*.json")
    before = said.read_bytes()
    for answer in (task.path / "messages").iterdir():
        answer.unlink()
    with unlocked(OFFICE) as office:
        assert begin_opening(folder, task, office) == said
        with pytest.raises(NotEnoughSharesError, match="needed"):
            open_message(folder, task, office, Taken())
    assert said.read_bytes() == before


def test_a_receiver_who_has_not_spoken_is_awaited(opening: tuple[KeyFolder, TaskFolder]) -> None:
    """A run that was stopped when the task was written, and no more."""
    folder, task = opening
    for path in (*(task.path / "messages").iterdir(), *(folder.path / "tasks").rglob("*.json")):
        path.unlink()
    with unlocked(OFFICE) as office:
        with pytest.raises(NotEnoughSharesError, match="harbour-office has still to speak"):
            open_message(folder, task, office, Taken())
        assert begin_opening(folder, task, office).name == "0-harbour-office.json"


def test_without_what_was_kept_nothing_opens(opening: tuple[KeyFolder, TaskFolder]) -> None:
    """Another copy of the office's folder, older than the task."""
    folder, task = opening
    for path in (folder.path / "tasks").rglob("*.json"):
        path.unlink()
    with unlocked(OFFICE) as office, pytest.raises(VerificationError):
        open_message(folder, task, office, Taken())


def test_an_opening_is_no_signature(opening: tuple[KeyFolder, TaskFolder]) -> None:
    with pytest.raises(ParameterError):
        put_together(*opening)


def put_together(folder: KeyFolder, task: TaskFolder) -> bytes:
    """The signature, as the office has it."""
    with unlocked(OFFICE) as office:
        return signed(folder, task, office)


@pytest.fixture
def signing(once: Keyed, tmp_path: Path) -> tuple[KeyFolder, TaskFolder]:
    """The office's folder, and that of a task to sign, answered by all."""
    keyed = once.copy(tmp_path / "harbour")
    path = keyed.ask("sign", keyed.path("release.txt"), task="s", names=(FIRST, SECOND))
    keyed.answer(path, FIRST, SECOND, rounds=2)
    return KeyFolder(keyed.key), TaskFolder(path)


def test_a_signature_that_is_complete_is_stopped_by_nothing_that_is_said_besides(
    signing: tuple[KeyFolder, TaskFolder],
) -> None:
    folder, task = signing
    before = put_together(folder, task)
    inbox = task.read().inbox
    with unlocked(SECOND) as key:
        for round, body in (
            (0, Commitment(what="commitment", hiding=BASE, binding=BASE)),
            (1, SignatureShare(what="signature-share", share=Scalar.of(7))),
            (1, Commitment(what="commitment", hiding=BASE, binding=BASE)),
        ):
            for seen in (inbox.seen(round), bytes(32)):
                more = TaskMessage.signed_by(
                    key, task=task.task.digest(), round=round, sender=SECOND, seen=seen, body=body
                )
                task.release(more)
                assert put_together(folder, task) == before


WRONG_SHARES = (SignatureShare(what="signature-share", share=Scalar.of(7)), True)
MISPLACED = (Commitment(what="commitment", hiding=BASE, binding=BASE), False)


@pytest.mark.parametrize(
    "said",
    [(WRONG_SHARES, WRONG_SHARES), (WRONG_SHARES, (WRONG_SHARES[0], False)), (MISPLACED,), (MISPLACED, MISPLACED)],
    ids=["two wrong shares", "one, and one for other commitments", "no share", "two that are none"],
)
def test_whose_share_does_not_hold_is_named_whatever_else_it_says_that_it_has_seen(
    signing: tuple[KeyFolder, TaskFolder], said: tuple[tuple[Body, bool], ...]
) -> None:
    folder, task = signing
    put_instead(task, SECOND, 1, said)
    with pytest.raises(VerificationError, match=f"failed, by {SECOND}"):
        put_together(folder, task)
    assert blamed(folder) == [SECOND]


def test_nobody_is_blamed_for_a_share_of_what_may_have_been_shown_to_them_alone(
    signing: tuple[KeyFolder, TaskFolder],
) -> None:
    folder, task = signing
    put_instead(task, SECOND, 1, [(WRONG_SHARES[0], False)])
    with pytest.raises(VerificationError, match=f"{SECOND} answered in round 1 to other messages"):
        put_together(folder, task)
    assert blamed(folder) == [None]


@pytest.mark.parametrize("count", [1, 2])
def test_with_commitments_made_beforehand_nobody_can_have_seen_anything_else(
    once: Keyed, tmp_path: Path, count: int
) -> None:
    keyed = once.copy(tmp_path / "harbour")
    batches = [f"--batch={commit(keyed, name)}" for name in (FIRST, SECOND)]
    task = TaskFolder(keyed.ask("sign", keyed.path("release.txt"), task="s", more=batches))
    assert keyed.next(task.path, FIRST).code == 0
    put_instead(task, SECOND, 0, [(WRONG_SHARES[0], False)] * count)
    with pytest.raises(VerificationError, match=f"failed, by {SECOND}"):
        put_together(KeyFolder(keyed.key), task)
    told = run("task", "show", task.path, "--json").json["failure"]
    assert (told["by"], SECOND in told["what"], blamed(KeyFolder(keyed.key))) == (SECOND, True, [SECOND])


def test_who_gives_no_partial_result_is_named_whatever_it_says_that_it_has_seen(
    opening: tuple[KeyFolder, TaskFolder],
) -> None:
    folder, task = opening
    put_instead(task, SECOND, 1, [MISPLACED])
    with unlocked(OFFICE) as office, pytest.raises(VerificationError, match=f"failed, by {SECOND}"):
        open_message(folder, task, office, Taken())
    assert blamed(folder) == [SECOND]


def put_instead(task: TaskFolder, name: str, round: int, said: Iterable[tuple[Body, bool]]) -> None:
    """Let a party say these in a round, and nothing else: each an answer to what lies here, or to something else."""
    seen = task.read().inbox.seen(round)
    (task.path / "messages" / f"{round}-{name}.json").unlink(missing_ok=True)
    with unlocked(name) as key:
        for minute, (body, right) in enumerate(said):
            message = TaskMessage.signed_by(
                key,
                task=task.task.digest(),
                round=round,
                sender=name,
                seen=seen if right else bytes(32),
                body=body,
                created=task.task.created + timedelta(minutes=minute),
            )
            task.release(message)


def blamed(folder: KeyFolder) -> list[str | None]:
    """Whom the journal names for what has failed."""
    return [one.event.by for one in folder.journal().entries if isinstance(one.event, TaskFailed)]
