"""``shares task``: what a custodian is told, asked and given, by hand and by script; exit codes as the README has them.

Checked against: nothing outside; the task is a real one, a key that three parties generate together.
"""

from __future__ import annotations

import json
import shutil
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path
from unittest import mock

import pytest
from cli.harness import Result, assert_one_line, assert_refused, files_in, run, spawn, with_json
from cli.terminal import on_terminal
from history.exchanging import NAMES, new_task
from parties import party, unlocked

from shares.documents.key_record import KeyRecord
from shares.documents.task_message import Accusation, Complaint, OpeningKey, Review, TaskMessage
from shares.errors import StorageError
from shares.history.exchange import TaskFolder
from shares.history.journal import load_journal
from shares.history.rounds import Inbox
from shares.history.steps import OwnSteps


@dataclass(frozen=True)
class Harbour:
    """A task's folder that everybody reaches, and a folder of their own for each party."""

    root: Path

    @property
    def task(self) -> Path:
        return self.root / "task"

    def mine(self, name: str) -> Path:
        return self.root / name

    def arguments(self, name: str, *more: str | Path) -> list[str | Path]:
        key, phrase = self.root / f"{name}.key.json", self.root / f"{name}.passphrase"
        return ["task", "next", self.task, "--mine", self.mine(name), "--key", key, "--passphrase-file", phrase, *more]

    def next(self, name: str, *more: str) -> Result:
        return run(*self.arguments(name, "--yes", *more))

    def show(self, *more: str) -> Result:
        return run("task", "show", self.task, *more)


@pytest.fixture
def harbour(tmp_path: Path) -> Harbour:
    for name in (*NAMES, "registrar"):
        (tmp_path / f"{name}.key.json").write_bytes(party(name).to_file())
        (tmp_path / f"{name}.passphrase").write_text(f"the passphrase of {name}\n")
    TaskFolder.create(tmp_path / "task", new_task())
    return Harbour(tmp_path)


def state(result: Result) -> tuple[int, str]:
    told = result.json
    assert (told["exit"], told["done"]) == (result.code, result.code == 0)
    return result.code, told["state"]


def test_three_parties_have_a_key_in_the_end(harbour: Harbour) -> None:
    ends: dict[str, dict[str, object]] = {}
    for _ in range(7):
        for name in NAMES:
            done = harbour.next(name, "--json")
            assert (done.code, done.err) == (0, "")
            if done.json["files"]:
                ends[name] = done.json
    assert {name: end["state"] for name, end in ends.items()} == dict.fromkeys(NAMES, "finished")
    records = {(harbour.mine(name) / "record.json").read_bytes() for name in NAMES}
    assert len(records) == 1
    assert KeyRecord.parse(records.pop()).is_confirmed()
    for name in NAMES:
        again = harbour.next(name)
        assert again.out == f"The task is over for {name}; nothing is left to be done.\n"
        assert [entry.event.what for entry in load_journal(harbour.mine(name)).entries] == [
            "approved",
            "approved",
            "key-born",
        ]
    assert harbour.show("--json").json["state"] == "complete"
    assert "Everything has been said." in harbour.show().out


def test_what_is_said_before_anything_is_done(harbour: Harbour) -> None:
    done = harbour.next("north-pier")
    task = TaskFolder(harbour.task).task
    for words in (task.fingerprint, "harbour-office", "Compare", "Now, as north-pier, round 0, fresh keys:"):
        assert words in done.err
    assert done.out.splitlines() == [
        f"Said by north-pier, round 0, fresh keys: {harbour.task}/messages/0-north-pier.json",
        "Next: send the task's folder, or the new message in it, to the others. Run this again with their",
        "messages, until the task is over for you: then what your folder keeps for it is erased.",
        "Awaited, round 0, fresh keys: south-pier, light-house.",
    ]
    waiting = harbour.next("north-pier")
    assert (waiting.code, waiting.out, waiting.err) == (
        0,
        "Awaited, round 0, fresh keys: south-pier, light-house.\n",
        "",
    )
    assert state(harbour.next("north-pier", "--json")) == (0, "waiting")


def test_without_a_terminal_it_asks_nothing_and_does_nothing(harbour: Harbour) -> None:
    refused = run(*harbour.arguments("north-pier"))
    assert (refused.code, refused.out) == (2, "")
    assert "You join in generating the key" in refused.err
    assert "--yes agrees" in refused.err.splitlines()[-1]
    told = run(*harbour.arguments("north-pier", "--json"))
    assert (told.code, told.err, told.json["error"]["code"]) == (2, "", "parameter")
    assert not harbour.mine("north-pier").exists()
    assert list((harbour.task / "messages").iterdir()) == []


@pytest.mark.parametrize(("reply", "code"), [("y", 0), ("n", 1), ("", 1)])
def test_what_a_custodian_agrees_to_at_a_terminal(harbour: Harbour, reply: str, code: int) -> None:
    with on_terminal(*harbour.arguments("north-pier")) as terminal:
        terminal.wait_for("Fingerprint of the task")
        terminal.answer("Do you agree? [y/N]:", reply)
        assert terminal.finish()[0] == code
    assert (harbour.task / "messages" / "0-north-pier.json").exists() is (code == 0)


def test_one_call_does_one_thing_that_it_asks_about(harbour: Harbour, monkeypatch: pytest.MonkeyPatch) -> None:
    """The last to speak in a round goes on with the next by itself, and stops where agreement is asked for anew."""
    for name in NAMES[:2]:
        harbour.next(name)
    last = harbour.next("light-house", "--json").json
    assert [Path(path).name for path in last["messages"]] == ["0-light-house.json", "1-light-house.json"]
    monkeypatch.setattr("shares.keys.joint.JointPart.asks", lambda *_: True)
    harbour.next("north-pier")
    turn = harbour.next("south-pier", "--json").json
    assert [Path(path).name for path in turn["messages"]] == ["1-south-pier.json"]
    assert (turn["again"], turn["state"]) == (True, "spoke")


def test_refusals(harbour: Harbour, tmp_path: Path) -> None:
    watched = harbour.root
    assert_refused(harbour.arguments("registrar", "--yes"), 4, "no party of this task", watched=watched)
    inside = harbour.arguments("north-pier", "--yes")
    inside[inside.index("--mine") + 1] = harbour.task / "own"
    assert_refused(inside, 2, "lies within the task's", watched=watched)
    wrong = harbour.arguments("north-pier", "--yes")
    wrong[-2] = tmp_path / "south-pier.passphrase"
    assert_refused(wrong, 4, "passphrase", watched=watched)
    (harbour.task / "task.json").rename(tmp_path / "task.json")
    assert_refused(harbour.arguments("north-pier", "--yes"), 5, "task.json", "does not exist", watched=watched)
    assert_refused(["task", "show", harbour.task], 5, "task.json", "does not exist")
    (harbour.task / "task.json").write_bytes((tmp_path / "north-pier.key.json").read_bytes())
    assert_refused(["task", "show", harbour.task], 4, "a task is wanted here, but it is a party key")


def test_a_restored_folder_is_refused(harbour: Harbour, tmp_path: Path) -> None:
    harbour.next("north-pier")
    shutil.rmtree(harbour.mine("north-pier"))
    line = assert_refused(harbour.arguments("north-pier", "--yes"), 4, "was restored from an older copy")
    assert "ask for a new task" in line


def signed(harbour: Harbour, name: str, minute: int, **changes: object) -> TaskMessage:
    task = TaskFolder(harbour.task).task
    members = {"body": OpeningKey(what="opening-key", x25519=b"\x09" + bytes(31)), **changes}
    with unlocked(name) as key:
        return TaskMessage.signed_by(
            key,
            task=task.digest(),
            round=0,
            sender=name,
            seen=Inbox(task, ()).seen(0),
            created=datetime(2026, 12, 1, 9, minute, tzinfo=UTC),
            **members,  # type: ignore[arg-type]
        )


def test_a_conflict_fails_the_task_for_everybody(harbour: Harbour) -> None:
    for minute in (1, 2):
        TaskFolder(harbour.task).release(signed(harbour, "south-pier", minute))
    for done in (harbour.next("north-pier"), harbour.show()):
        assert done.code == 4
        told = " ".join(done.out.split())
        assert "two different messages of south-pier in round 0: conflict: misbehaviour or restored state" in told
        assert "begin a new task" in told
    assert state(harbour.next("north-pier", "--json")) == (4, "failed")
    shown = harbour.show("--json")
    assert state(shown) == (4, "failed")
    assert [(one["kind"], one["sender"]) for one in shown.json["problems"]] == [("conflict", "south-pier")]
    assert not harbour.mine("north-pier").exists()


def test_who_makes_a_task_fail_is_named(harbour: Harbour) -> None:
    TaskFolder(harbour.task).release(signed(harbour, "south-pier", 1, body=Review(what="review", complaints=())))
    for name in ("north-pier", "light-house"):
        harbour.next(name)
    told = harbour.show("--json")
    assert (told.code, told.json["failure"]["by"]) == (4, "south-pier")
    assert "The task has failed, by south-pier:" in harbour.next("north-pier").out


def test_files_that_do_not_count_are_named_and_stop_nothing(harbour: Harbour) -> None:
    messages = harbour.task / "messages"
    (messages / "x\x1b[2J.json").write_bytes(b"{}")
    (messages / "foreign.json").write_bytes(TaskFolder(harbour.task).task.to_file())
    done = harbour.next("north-pier")
    assert done.code == 0
    cautions = [line for line in done.err.splitlines() if line.startswith("Caution: ")]
    assert len(cautions) == 2
    assert "\x1b" not in done.err + done.out
    shown = harbour.show()
    assert (shown.code, shown.out.count("Problem: ")) == (0, 2)


def test_after_the_due_date(harbour: Harbour, tmp_path: Path) -> None:
    shutil.rmtree(harbour.task)
    made = datetime(2026, 11, 1, tzinfo=UTC)
    TaskFolder.create(harbour.task, new_task(created=made, due=made + timedelta(days=1)))
    done = harbour.next("north-pier", "--json")
    assert (done.code, "was due 2026-11-02T00:00:00Z" in done.json["error"]["what"]) == (4, True)
    assert "past its due date" in harbour.show().out
    assert not (harbour.task / "messages" / "0-north-pier.json").exists()


def test_three_runs_at_once_say_one_thing(harbour: Harbour) -> None:
    with ThreadPoolExecutor(3) as pool:
        runs = list(pool.map(lambda _: spawn(*harbour.arguments("north-pier", "--yes")), range(3)))
    assert [(one.code, one.err.count("Traceback")) for one in runs] == [(0, 0)] * 3
    assert [path.name for path in (harbour.task / "messages").iterdir()] == ["0-north-pier.json"]
    assert [entry.event.what for entry in load_journal(harbour.mine("north-pier")).entries] == ["approved"]


def test_what_a_stopped_end_has_left_is_erased_and_what_a_stopped_run_has_left_is_named(harbour: Harbour) -> None:
    for _ in range(7):
        for name in NAMES:
            harbour.next(name)
    steps = next(harbour.mine("north-pier").glob("tasks/*"))
    (steps / "step-5.json").write_bytes(b"not erased yet")
    left = harbour.task / "messages" / ".0-north-pier.json.0123456789abcdef.partial"
    left.write_bytes(b"{")
    done = harbour.next("north-pier")
    assert (done.code, done.out) == (0, "The task is over for north-pier; nothing is left to be done.\n")
    assert "left by a run that was stopped" in done.err
    assert [path.name for path in steps.iterdir()] == ["done.json"]
    assert left.exists()


def test_nothing_secret_is_printed_or_lies_in_the_open(harbour: Harbour) -> None:
    printed = ""
    for _ in range(2):
        for name in NAMES:
            done = harbour.next(name)
            printed += done.out + done.err
    assert "passphrase of" not in printed
    for path, (mode, content) in files_in(harbour.root).items():
        if "/step-" in path:
            assert mode & 0o777 == 0o600
            assert content is not None
            assert set(json.loads(content)["wrapping"]) == {"method", "suite", "card", "key", "commitment"}


def test_json_alone_is_printed_where_it_is_asked_for(harbour: Harbour) -> None:
    (harbour.task / "messages" / "x.json").write_bytes(b"{}")
    done = run(*with_json(harbour.arguments("north-pier", "--yes")))
    assert (done.code, done.err) == (0, "")
    assert [one["kind"] for one in done.json["problems"]] == ["unreadable"]
    assert_one_line(run("task", "show", harbour.root / "nothing"))


# Who is asked has read what about.


@pytest.mark.parametrize("reply", ["y", "n"])
def test_with_json_at_a_terminal_it_is_shown_before_it_is_asked(harbour: Harbour, reply: str) -> None:
    with on_terminal(*with_json(harbour.arguments("north-pier"))) as terminal:
        terminal.wait_for("Fingerprint of the task")
        terminal.wait_for("You join in generating the key")
        terminal.answer("Do you agree? [y/N]:", reply)
        code, out = terminal.finish()
    told = json.loads(out)
    assert (told["exit"], told["done"]) == (code, reply == "y")


def put(harbour: Harbour, **changes: object) -> None:
    shutil.rmtree(harbour.task)
    TaskFolder.create(harbour.task, new_task(**changes))


def test_a_remark_and_a_label_stay_where_they_are_shown(harbour: Harbour) -> None:
    forged = "Fingerprint of the task: AAAA"
    put(harbour, remark=f"release 8 {' ' * 200}{forged} {'so it goes on ' * 15}", label=f"a key{' ' * 90}{forged}")
    for text in (harbour.show().out, run(*harbour.arguments("north-pier")).err):
        lines = text.splitlines()
        assert [line for line in lines if line.strip().startswith(forged)] == []
        first = next(i for i, line in enumerate(lines) if line.startswith("  Remark: release 8 Fingerprint"))
        assert lines[first + 1].startswith("    | ")
        assert f"(a key {forged})" in text
        assert max(len(line) for line in lines[first : first + 3]) <= 96


def test_unusual_times_are_told_before_anybody_agrees(harbour: Harbour) -> None:
    put(harbour, created=datetime(9998, 1, 1, tzinfo=UTC), due=datetime(9999, 1, 1, tzinfo=UTC))
    for told in (harbour.show().out, run(*harbour.arguments("north-pier")).err):
        assert "this clock has yet to reach" in " ".join(told.split())
        assert "in more than a year" in " ".join(told.split())
    assert len(harbour.show("--json").json["cautions"]) == 2
    now = datetime.now(UTC).replace(microsecond=0)
    put(harbour, created=now, due=now + timedelta(days=30))
    assert harbour.show("--json").json["cautions"] == []
    assert "Caution" not in harbour.show().out


# A task is given up.


def drop(harbour: Harbour, name: str, *more: str) -> list[str | Path]:
    return ["task", "drop", *harbour.arguments(name, *more)[2:]]


def kept(harbour: Harbour, name: str) -> list[str]:
    return sorted(path.name for path in harbour.mine(name).glob("tasks/*/*"))


def test_a_failed_task_is_given_up_and_nothing_of_it_is_kept_but_what_was_said(harbour: Harbour) -> None:
    harbour.next("north-pier")
    for minute in (1, 2):
        TaskFolder(harbour.task).release(signed(harbour, "south-pier", minute))
    failed = harbour.next("north-pier")
    assert failed.code == 4
    assert "`shares task drop` then erases" in " ".join(failed.out.split())
    assert kept(harbour, "north-pier") == ["step-0.json"]
    before = files_in(harbour.root)
    refused = run(*drop(harbour, "north-pier"))
    assert (refused.code, "--yes agrees" in refused.err.splitlines()[-1]) == (2, True)
    assert files_in(harbour.root) == before
    done = run(*drop(harbour, "north-pier", "--yes"))
    assert (done.code, "is erased" in done.out) == (0, True)
    assert kept(harbour, "north-pier") == ["done.json"]
    events = [entry.event for entry in load_journal(harbour.mine("north-pier")).entries]
    assert [event.what for event in events] == ["approved", "task-failed"]
    assert TaskFolder(harbour.task).task.digest() == events[-1].task  # type: ignore[union-attr]
    assert events[-1].reason.startswith("two different messages of south-pier")  # type: ignore[union-attr]
    after = harbour.next("north-pier")
    assert "over for north-pier, who has given it up" in after.out
    assert state(harbour.next("north-pier", "--json")) == (0, "dropped")
    # Repeated, it does what a run that was stopped has not: here nothing, and there is no second entry.
    for path in (harbour.task / "messages").iterdir():
        path.unlink()
    before = files_in(harbour.root)
    assert run(*drop(harbour, "north-pier", "--yes")).code == 0
    assert files_in(harbour.root) == before


def test_who_has_said_nothing_gives_a_task_up_and_never_speaks_in_it(harbour: Harbour) -> None:
    dropped = run(*drop(harbour, "north-pier", "--yes", "--json"))
    assert (dropped.code, dropped.json["state"]) == (0, "dropped")
    assert "over for north-pier" in harbour.next("north-pier").out
    assert not list((harbour.task / "messages").iterdir())


@pytest.mark.parametrize(("reply", "code"), [("y", 0), ("n", 1)])
def test_giving_up_asks_and_who_has_confirmed_is_warned(harbour: Harbour, reply: str, code: int) -> None:
    to_the_last_round(harbour)
    assert "step-5.json" in kept(harbour, "north-pier")
    with on_terminal(*drop(harbour, "north-pier")) as terminal:
        terminal.wait_for("You have signed the record")
        terminal.answer("Give it up for good? [y/N]:", reply)
        assert terminal.finish()[0] == code
    assert ("done.json" in kept(harbour, "north-pier")) is (code == 0)


def test_who_has_confirmed_is_warned_though_asked_nothing(harbour: Harbour) -> None:
    to_the_last_round(harbour)
    done = run(*drop(harbour, "north-pier", "--yes"))
    assert (done.code, "Caution: You have signed the record" in done.err) == (0, True)
    assert "Caution" not in run(*drop(harbour, "north-pier", "--yes")).err


def test_of_a_task_that_has_come_to_its_end_nothing_is_given_up(harbour: Harbour) -> None:
    for _ in range(7):
        for name in NAMES:
            harbour.next(name)
    assert_refused(drop(harbour, "north-pier", "--yes"), 2, "is over for north-pier", watched=harbour.root)
    (left,) = harbour.mine("north-pier").glob("tasks/*")
    (left / "result-1").write_bytes(b"left by a run that was stopped")
    done = run(*drop(harbour, "north-pier", "--yes", "--json"))
    assert (state(done), done.err, kept(harbour, "north-pier")) == ((0, "finished"), "", ["done.json"])
    events = [entry.event.what for entry in load_journal(harbour.mine("north-pier")).entries]
    assert events == ["approved", "approved", "key-born"]


def to_the_last_round(harbour: Harbour) -> None:
    """Go on until all have confirmed but light-house, which has spoken in the round before."""
    messages = harbour.task / "messages"
    for _ in range(12):
        for name in ("light-house", *NAMES[:2]):
            done = (messages / f"{4 if name == 'light-house' else 5}-{name}.json").exists()
            if not done:
                assert harbour.next(name).code == 0
    assert sorted(path.name for path in messages.glob("5-*")) == ["5-north-pier.json", "5-south-pier.json"]


def test_a_key_that_is_born_is_not_given_up(harbour: Harbour) -> None:
    to_the_last_round(harbour)
    harbour.next("light-house")
    harbour.next("light-house")
    waiting = [name for name in NAMES if "done.json" not in kept(harbour, name)]
    assert waiting
    assert_refused(drop(harbour, waiting[0], "--yes"), 2, "the key is born", watched=harbour.root)


def test_a_key_that_was_born_but_for_the_last_step_is_not_entered_as_failed(harbour: Harbour) -> None:
    to_the_last_round(harbour)
    harbour.next("light-house")
    name = next(name for name in NAMES if "step-5.json" in kept(harbour, name))
    with mock.patch.object(OwnSteps, "close", side_effect=StorageError("no space left")):
        assert harbour.next(name).code == 5
    share = (harbour.mine(name) / "share.json").read_bytes()
    # The task's folder is complete no longer: by that alone nobody could tell that the key was born.
    for path in (harbour.task / "messages").glob("5-*"):
        path.unlink()
    done = run(*drop(harbour, name, "--yes", "--json"))
    assert (state(done), done.err, kept(harbour, name)) == ((0, "finished"), "", ["done.json"])
    events = [entry.event.what for entry in load_journal(harbour.mine(name)).entries]
    assert events == ["approved", "approved", "key-born"]
    assert (harbour.mine(name) / "share.json").read_bytes() == share


def test_who_hears_of_a_second_review_is_told_what_to_ask_for_and_has_the_key(harbour: Harbour) -> None:
    to_the_last_round(harbour)
    folder = TaskFolder(harbour.task)
    before = folder.read().inbox.of(2)["light-house"]
    harbour.next("light-house")
    confirmed = (harbour.task / "messages" / "5-light-house.json").read_bytes()
    (harbour.task / "messages" / "5-light-house.json").unlink()
    with unlocked("light-house") as key:
        for number in range(3):
            reason = f"other words {number}"
            other = Review(what="review", complaints=(Complaint(against="north-pier", reason=reason),))
            folder.release(
                TaskMessage.signed_by(
                    key, task=before.task, round=2, sender="light-house", seen=before.seen, body=other
                )
            )
    failed = harbour.next("north-pier")
    assert (failed.code, "two different messages of light-house in round 2" in failed.out) == (4, True)
    assert "If another custodian says that the key is born: have them send" in " ".join(failed.out.split())
    assert harbour.show("--json").json["maybe_complete_elsewhere"] is True
    # Whoever has that sends the whole folder, and the key is born here too; the cheat is named.
    (harbour.task / "messages" / "5-light-house.json").write_bytes(confirmed)
    done = harbour.next("north-pier", "--json")
    assert state(done) == (0, "finished")
    assert [(one["sender"], one["stops"]) for one in done.json["problems"]] == [("light-house", False)]


def test_nobody_is_told_of_a_key_elsewhere_before_anybody_has_confirmed(harbour: Harbour) -> None:
    harbour.next("north-pier")
    for minute in (1, 2):
        TaskFolder(harbour.task).release(signed(harbour, "south-pier", minute))
    assert "If another custodian" not in harbour.next("north-pier").out
    assert harbour.show("--json").json["maybe_complete_elsewhere"] is False


def test_who_hears_of_an_accusation_alone_is_told_what_to_ask_for(harbour: Harbour) -> None:
    to_the_last_round(harbour)
    folder = TaskFolder(harbour.task)
    accusation = Accusation(what="accusation", against="north-pier", reason="no", share=None, blind=None)
    with unlocked("light-house") as key:
        folder.release(
            TaskMessage.signed_by(
                key,
                task=folder.task.digest(),
                round=5,
                sender="light-house",
                seen=folder.read().inbox.seen(5),
                body=accusation,
            )
        )
    told = " ".join(harbour.next("north-pier").out.split())
    assert "The task has failed, by light-house" in told
    assert "If another custodian says that the key is born" in told
