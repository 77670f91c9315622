"""``shares key sign``, ``open``, ``commit`` and ``finish``: asked, answered, put together.

Checked against: ``openssl``, which verifies what a quorum has signed; the sender in examples/, which uses
``cryptography`` alone.
"""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from datetime import timedelta

import pytest
from cli.asked import CONTENT, FIRST, SECOND, THIRD, commit, events, finish, sent, sign_arguments
from cli.harness import Result, assert_refused, files_in, run
from cli.keyed import OFFICE, Keyed
from cli.test_key import tool
from parties import unlocked

from shares import clock
from shares.documents.key_event import Approved, NoncesCommitted, TaskAsked, TaskFailed, TaskFinished
from shares.documents.task import Task
from shares.documents.task_message import SignatureShare, TaskMessage
from shares.group.edwards25519 import Scalar


class TestSigning:
    def test_a_quorum_signs_and_openssl_verifies(self, keyed: Keyed) -> None:
        task = keyed.ask("sign", keyed.path("release.txt"), task="to-sign")
        assert_refused(finish(keyed, task, "--to", keyed.path("sig")), 3, FIRST, SECOND, watched=keyed.folder)
        keyed.answer(task, FIRST, SECOND)
        signature = keyed.finish(task, "sig")
        assert len(signature.read_bytes()) == 64
        again = run(*finish(keyed, task, "--to", keyed.path("sig-2"), "--json")).json
        assert (again["again"], again["signers"]) == (True, [FIRST, SECOND])
        assert again["sha256"] == hashlib.sha256(keyed.path("sig-2").read_bytes()).hexdigest()
        assert keyed.path("sig-2").read_bytes() == signature.read_bytes()
        verify = ["openssl", "pkeyutl", "-verify", "-pubin", "-inkey", keyed.path("k.pem"), "-rawin"]
        assert "Success" in tool(*verify, "-in", keyed.path("release.txt"), "-sigfile", signature)
        # The office's journal tells what was asked and what came of it, the signers' what they agreed to.
        (asked,), (finished,) = events(keyed.key, TaskAsked), events(keyed.key, TaskFinished)
        assert asked.task == finished.task == Task.parse((task / "task.json").read_bytes()).digest()
        assert finished.result == hashlib.sha256(signature.read_bytes()).digest()
        (agreed,) = events(keyed.own(FIRST), Approved)
        assert "release 7 of the tide tables" in agreed.summary
        assert run("journal", "verify", keyed.key).code == run("journal", "verify", keyed.own(FIRST)).code == 0

    def test_what_is_asked_is_told(self, keyed: Keyed) -> None:
        by_hand = run(*sign_arguments(keyed, "--remark", "release day", "--due", "2d", *keyed.as_(OFFICE)))
        assert "Asked: north-pier, south-pier: sign (Harbour release key), until " in by_hand.out
        task = Task.parse((keyed.path("t") / "task.json").read_bytes())
        assert task.fingerprint in by_hand.out
        assert (task.remark, (task.due - task.created).days) == ("release day", 2)
        assert f"shares key finish {keyed.key} {keyed.path('t')} --to FILE --sign " in by_hand.out
        assert by_hand.err == ""
        told = run(*sign_arguments(keyed, "--json", *keyed.as_(OFFICE), task="u")).json
        assert (told["work"], told["parties"], told["done"]) == ("sign", [FIRST, SECOND], True)
        assert told["exit"] == 0
        assert (keyed.path("u") / "content").read_bytes() == keyed.path("release.txt").read_bytes()

    @pytest.mark.parametrize(
        ("names", "words"),
        [
            ((FIRST,), "2 custodians are needed, and 1 are named"),
            ((FIRST, FIRST), "named twice"),
            ((FIRST, "dry-dock"), "dry-dock is no custodian"),
        ],
    )
    def test_signers_that_are_no_quorum_are_refused(self, keyed: Keyed, names: Sequence[str], words: str) -> None:
        assert_refused(sign_arguments(keyed, *keyed.as_(OFFICE), names=names), 2, words, watched=keyed.folder)

    @pytest.mark.parametrize(
        ("more", "words"),
        [
            (["--remark", "a\nb"], "--remark"),
            (["--remark", "x" * 501], "--remark"),
            (["--remark", ""], "--remark"),
            (["--openssh", "a\x1bb"], "--openssh"),
            (["--openssh", ""], "--openssh"),
            (["--due", "9999y"], "the year 9999"),
            (["--due", "0d"], "--due"),
        ],
    )
    def test_what_no_task_can_say_is_refused(self, keyed: Keyed, more: list[str], words: str) -> None:
        assert_refused(sign_arguments(keyed, *more, *keyed.as_(OFFICE)), 2, words, watched=keyed.folder)

    def test_a_task_that_lies_about_for_long_is_cautioned_of(self, keyed: Keyed) -> None:
        done = run(*sign_arguments(keyed, "--due", "1y", *keyed.as_(OFFICE)))
        assert done.code == 0
        assert "Caution: until " in done.err

    def test_a_folder_is_for_one_task(self, keyed: Keyed) -> None:
        keyed.ask("sign", keyed.path("release.txt"), task="t")
        assert_refused(sign_arguments(keyed, *keyed.as_(OFFICE)), 5, "a task is here already", watched=keyed.folder)

    def test_content_that_is_not_there_is_refused(self, keyed: Keyed) -> None:
        arguments = ["key", "sign", keyed.key, keyed.path("missing"), "--task", keyed.path("t"), f"--signer={FIRST}"]
        assert_refused([*arguments, *keyed.as_(OFFICE)], 5, "missing", watched=keyed.folder)
        nowhere = [
            "key",
            "sign",
            keyed.path("nowhere"),
            keyed.path("release.txt"),
            *arguments[4:],
            f"--signer={SECOND}",
        ]
        assert_refused([*nowhere, *keyed.as_(OFFICE)], 5, "nowhere", watched=keyed.folder)

    def test_altered_content_is_not_signed(self, keyed: Keyed) -> None:
        task = keyed.ask("sign", keyed.path("release.txt"), task="t")
        (task / "content").write_bytes(b"release 8\n")
        assert keyed.next(task, FIRST).code == 4
        assert_refused(finish(keyed, task, "--to", keyed.path("sig")), 4, "the whole folder", watched=keyed.folder)
        shown = run("task", "show", task)
        assert (shown.code, "This copy of the task is damaged" in shown.out) == (4, True)
        assert "failed" not in shown.out
        assert run("task", "show", task, "--json").json["state"] == "damaged"
        assert events(keyed.key, TaskFailed) == []

    def test_past_its_due_date_nobody_is_asked(self, keyed: Keyed, monkeypatch: pytest.MonkeyPatch) -> None:
        task = keyed.ask("sign", keyed.path("release.txt"), task="t")
        for name in (FIRST, SECOND):
            assert keyed.next(task, name).code == 0
        due = Task.parse((task / "task.json").read_bytes()).due
        monkeypatch.setattr(clock, "now", lambda: due + timedelta(days=1))
        refused = keyed.next(task, FIRST)
        assert (refused.code, refused.out) == (4, "")
        assert "the task was due" in refused.err
        assert "Asked for by" not in refused.err
        line = assert_refused(finish(keyed, task, "--to", keyed.path("sig")), 3, FIRST, "nobody can speak in it")
        assert "try again" not in line
        assert "begin a new task" in run("task", "show", task).out

    def test_whose_folder_it_is_is_said_before_anybody_is_asked(self, keyed: Keyed) -> None:
        task = keyed.ask("sign", keyed.path("release.txt"), task="t")
        arguments = ["task", "next", task, "--mine", keyed.own(FIRST), *keyed.as_(SECOND, "--key"), "--yes"]
        assert_refused(arguments, 4, f"not that of {SECOND}, but of {FIRST}", watched=keyed.folder)
        assert keyed.next(task, FIRST).code == 0
        assert_refused(arguments, 4, f"is the folder of {FIRST}", "name your own", watched=keyed.folder)
        other = Keyed.make(keyed.folder / "other").dealt()
        foreign = ["task", "next", task, "--mine", other.own(SECOND), *keyed.as_(SECOND, "--key"), "--yes"]
        assert_refused(foreign, 4, "the key share is of the key", watched=keyed.folder)

    def test_where_what_was_said_is_sent(self, keyed: Keyed) -> None:
        task = keyed.ask("sign", keyed.path("release.txt"), task="t")
        told = [" ".join(keyed.next(task, name).out.split()) for name in (FIRST, SECOND, FIRST)]
        to_office = "to harbour-office, who puts it together: `shares key finish`"
        assert [to_office in one for one in told] == [False, False, True]
        assert "to the others. Run this again with their messages" in told[0]

    def test_who_cheats_is_named(self, keyed: Keyed) -> None:
        """A signer whose machine says a wrong share, under its own good signature."""
        task = keyed.ask("sign", keyed.path("release.txt"), task="t")
        for name in (FIRST, SECOND):
            assert keyed.next(task, name).code == 0
        said = next((task / "messages").glob("1-*.json"))
        good = TaskMessage.parse(said.read_bytes())
        with unlocked(good.sender) as cheat:
            said.write_bytes(
                TaskMessage.signed_by(
                    cheat,
                    task=good.task,
                    round=good.round,
                    sender=good.sender,
                    seen=good.seen,
                    body=SignatureShare(what="signature-share", share=Scalar.drawn()),
                ).to_file()
            )
        other = FIRST if good.sender == SECOND else SECOND
        keyed.next(task, other)
        line = assert_refused(finish(keyed, task, "--to", keyed.path("sig")), 4, "the task has failed", good.sender)
        assert other not in line
        assert not keyed.path("sig").exists()
        # An auditor sees it in the office's journal, told once however often it is tried.
        assert run(*finish(keyed, task, "--to", keyed.path("sig"))).code == 4
        (told,) = events(keyed.key, TaskFailed)
        assert (told.by, told.work, good.sender in told.reason) == (good.sender, "sign", True)
        assert f"failed, by {good.sender}: " in " ".join(run("journal", "show", keyed.key).out.split())

    def test_nothing_is_fed_but_what_was_in_a_message(self, keyed: Keyed) -> None:
        task = keyed.ask("sign", keyed.path("release.txt"), task="t")
        for more, words in (
            (["--", "cat"], "only what was in a message"),
            (["--to", "-"], "nothing of it is printed"),
            ([], "exactly one of"),
            (["--to", "x", "--", "cat"], "exactly one of"),
            (["--"], "exactly one of"),
        ):
            assert_refused(finish(keyed, task, *more), 2, words, watched=keyed.folder)

    def test_another_keys_folder_does_not_finish_it(self, keyed: Keyed) -> None:
        task = keyed.ask("sign", keyed.path("release.txt"), task="t")
        other = Keyed.make(keyed.folder / "other").dealt()
        assert_refused(finish(other, task, "--to", keyed.path("sig")), 4, "another key", watched=keyed.folder)


class TestCommitments:
    def test_one_visit_is_enough_and_no_pair_is_named_twice(self, keyed: Keyed) -> None:
        batches = [f"--batch={commit(keyed, name, 2)}" for name in (FIRST, SECOND)]
        named = []
        for number in range(2):
            task = keyed.ask("sign", keyed.path("release.txt"), task=f"t{number}", more=batches)
            keyed.answer(task, FIRST, SECOND, rounds=1)
            assert len(keyed.finish(task, f"sig{number}").read_bytes()) == 64
            work = Task.parse((task / "task.json").read_bytes()).work
            named += [one.hiding.encode() for one in work.commitments]  # type: ignore[union-attr]
        assert len(set(named)) == len(named) == 4
        arguments = sign_arguments(keyed, *batches, *keyed.as_(OFFICE), task="t2")
        assert_refused(arguments, 3, FIRST, SECOND, "shares key commit", watched=keyed.folder)
        (committed,) = events(keyed.own(FIRST), NoncesCommitted)
        assert committed.count == 2

    def test_a_signer_refuses_what_was_used_before(self, keyed: Keyed) -> None:
        """Where the office forgets what it asked for, the signers do not."""
        batches = [f"--batch={commit(keyed, name)}" for name in (FIRST, SECOND)]
        keyed.answer(keyed.ask("sign", keyed.path("release.txt"), task="t0", more=batches), FIRST, SECOND, rounds=1)
        for kept in (keyed.key / "asked").iterdir():
            kept.unlink()
        task = keyed.ask("sign", keyed.path("release.txt"), task="t1", more=batches)
        refused = keyed.next(task, FIRST)
        assert refused.code == 4
        assert "nonce was used" in refused.err

    def test_batches_of_others_are_refused(self, keyed: Keyed) -> None:
        good = commit(keyed, FIRST)
        other = Keyed.make(keyed.folder / "other").dealt()
        foreign = commit(other, SECOND)
        for batches in ([f"--batch={good}", f"--batch={foreign}"], [f"--batch={good}"]):
            code, words = (4, "another key") if len(batches) > 1 else (3, SECOND)
            assert_refused(sign_arguments(keyed, *batches, *keyed.as_(OFFICE)), code, words, watched=keyed.folder)
        by_hand = run("show", good)
        assert "commitments of a signer" in by_hand.out

    def test_only_a_custodian_commits(self, keyed: Keyed) -> None:
        target = keyed.path("c.json")
        arguments = ["key", "commit", keyed.key, "--to", target, *keyed.as_(OFFICE, "--key")]
        assert_refused(arguments, 5, "holds no key share", watched=keyed.folder)
        for count in ("0", "1001"):
            own = ["key", "commit", keyed.own(FIRST), "--count", count, "--to", target, *keyed.as_(FIRST, "--key")]
            assert_refused(own, 2, "1000", watched=keyed.folder)


class TestOpening:
    def test_the_receiver_alone_has_what_was_in_it(self, keyed: Keyed) -> None:
        task = keyed.ask("open", sent(keyed), task="t", names=(FIRST, SECOND, THIRD))
        assert_refused(finish(keyed, task, "--to", keyed.path("o")), 3, FIRST, THIRD, watched=keyed.folder)
        for name in (THIRD, FIRST):
            assert "Enough have spoken" not in run("task", "show", task).out
            assert keyed.next(task, name).code == 0
        assert "Enough have spoken" in run("task", "show", task).out
        target = keyed.path("opened")
        # Two of three are enough. Where the command fails all stays as it was, to be tried again.
        failed = run(*finish(keyed, task, "--", "sh", "-c", "cat >/dev/null; exit 9"))
        assert (failed.code, failed.out) == (7, "")
        fed = run(*finish(keyed, task, "--json", "--", "sh", "-c", "exit 3"))
        assert (fed.code, fed.json["error"]["status"]) == (7, 3)
        done = run(*finish(keyed, task, "--to", target))
        assert (done.code, "The message is open" in done.out, CONTENT.decode() in done.out) == (0, True, False)
        assert "run `shares task next` once more" in " ".join(done.out.split())
        assert (target.read_bytes(), target.stat().st_mode & 0o777) == (CONTENT, 0o600)
        again = finish(keyed, task, "--to", keyed.path("again"))
        assert_refused(again, 2, "this task is over", watched=keyed.folder)
        (asked,), (finished,) = events(keyed.key, TaskAsked), events(keyed.key, TaskFinished)
        assert (asked.work, finished.work, finished.result) == ("open", "open", None)
        assert asked.parties == (FIRST, SECOND, THIRD)

    def test_it_is_fed_to_a_command(self, keyed: Keyed) -> None:
        task = keyed.ask("open", sent(keyed), task="t", names=(FIRST, SECOND))
        keyed.answer(task, FIRST, SECOND, rounds=1)
        done = run(*finish(keyed, task, "--", "sha256sum"))
        assert (done.code, done.out.split()[0]) == (0, hashlib.sha256(CONTENT).hexdigest())
        assert "given to sha256sum" in done.err

    def test_a_custodian_may_be_the_receiver(self, keyed: Keyed) -> None:
        own, message = keyed.own(FIRST), sent(keyed)
        ask = ["key", "open", own, message, "--task", keyed.path("t"), f"--custodian={SECOND}", *keyed.as_(FIRST)]
        assert run(*ask).code == 0
        for name in (FIRST, SECOND):
            assert keyed.next(keyed.path("t"), name).code == 0
        done = run("key", "finish", own, keyed.path("t"), "--to", keyed.path("o"), *keyed.as_(FIRST))
        assert (done.code, keyed.path("o").read_bytes()) == (0, CONTENT)

    def test_what_is_asked_lies_in_the_askers_own_folder(self, keyed: Keyed) -> None:
        """A custodian's steps in the office's folder, or another's, would cry wolf at the custodian's own ones."""
        message = sent(keyed)
        for folder, who, words in (
            (keyed.key, FIRST, "holds no key share"),
            (keyed.own(SECOND), FIRST, f"is the folder of {SECOND}"),
            (keyed.own(SECOND), OFFICE, f"is the folder of {SECOND}"),
        ):
            ask = ["key", "open", folder, message, "--task", keyed.path("t"), f"--custodian={SECOND}"]
            ask += [f"--custodian={THIRD}", *keyed.as_(who)]
            assert_refused(ask, 2, words, "your own folder", watched=keyed.folder)

    def test_nobody_else_reads_the_answers(self, keyed: Keyed) -> None:
        task = keyed.ask("open", sent(keyed), task="t", names=(FIRST, SECOND))
        keyed.answer(task, FIRST, SECOND, rounds=1)
        arguments = ["key", "finish", keyed.key, task, "--to", keyed.path("o"), *keyed.as_(FIRST)]
        assert_refused(arguments, 2, "the receiver of this message is harbour-office", watched=keyed.folder)

    def test_a_message_that_must_not_be_served_is_not_asked_for(self, keyed: Keyed) -> None:
        for encapsulated in (bytes(32), b"\xff" * 32, (2**255 - 20).to_bytes(32, "little")):
            keyed.path("bad").write_bytes(encapsulated + bytes(40))
            arguments = ["key", "open", keyed.key, keyed.path("bad"), "--task", keyed.path("t"), f"--custodian={FIRST}"]
            arguments += [f"--custodian={SECOND}", *keyed.as_(OFFICE)]
            assert_refused(arguments, 4, "encapsulated key", watched=keyed.folder)

    def test_another_ciphertext_for_one_encapsulated_key_is_refused(self, keyed: Keyed) -> None:
        message = sent(keyed)
        keyed.answer(keyed.ask("open", message, task="t", names=(FIRST, SECOND)), FIRST, SECOND, rounds=1)
        data = bytearray(message.read_bytes())
        data[-1] ^= 1
        keyed.path("other.bin").write_bytes(data)
        task = keyed.ask("open", keyed.path("other.bin"), task="u", names=(FIRST, SECOND))
        refused = keyed.next(task, FIRST)
        assert refused.code == 4
        assert "encapsulated key" in refused.err

    def test_the_journal_tells_that_too_few_answers_hold(self, keyed: Keyed) -> None:
        task = keyed.ask("open", sent(keyed), task="t", names=(FIRST, SECOND))
        keyed.answer(task, FIRST, SECOND, rounds=1)
        (said,) = (task / "messages").glob(f"1-{SECOND}.json")
        good = TaskMessage.parse(said.read_bytes())
        with unlocked(SECOND) as cheat:
            empty = {"task": good.task, "round": 1, "sender": SECOND, "seen": good.seen, "body": good.body}
            said.write_bytes(TaskMessage.signed_by(cheat, **empty).to_file())
        assert_refused(finish(keyed, task, "--to", keyed.path("o")), 3, SECOND)
        (told,) = events(keyed.key, TaskFailed)
        assert (told.work, SECOND in told.reason, FIRST in told.reason) == ("open", True, False)

    def test_what_was_in_it_is_nowhere_else(self, keyed: Keyed) -> None:
        task = keyed.ask("open", sent(keyed), task="t", names=(FIRST, SECOND))
        keyed.answer(task, FIRST, SECOND, rounds=1)
        told: list[Result] = [run(*finish(keyed, task, "--to", keyed.path("o"), "--json"))]
        assert told[0].code == 0
        assert CONTENT.decode().strip() not in told[0].out + told[0].err
        found = [name for name, (_, content) in files_in(keyed.folder).items() if content and CONTENT in content]
        assert found == ["o"]


class TestJoining:
    def test_what_cannot_be_is_refused(self, keyed: Keyed) -> None:
        cards = [f"--custodian={keyed.path(f'{name}.card.json')}" for name in (FIRST, SECOND)]
        arguments = ["key", "join", keyed.path("t"), "--label=Harbour key", *cards, *keyed.as_(OFFICE)]
        assert_refused([*arguments, "--need=3"], 2, "not 3", watched=keyed.folder)
        assert_refused([*arguments, "--need=2", cards[0]], 2, "two custodians have one name", watched=keyed.folder)
        assert_refused([*arguments, "--need=2", "--due=soon"], 2, "--due", watched=keyed.folder)
        assert run(*arguments, "--need=2").code == 0
        assert_refused([*arguments, "--need=2"], 5, "a task is here already", watched=keyed.folder)

    def test_a_key_is_born_and_signs(self, keyed: Keyed) -> None:
        """With the custodians' own folders made new, and the office knowing nothing but the record."""
        joint = Keyed.make(keyed.folder / "joint")
        cards = [f"--custodian={joint.path(f'{name}.card.json')}" for name in joint.names]
        arguments = ["key", "join", joint.path("j"), "--label=Harbour key", "--need=2", *cards, *joint.as_(OFFICE)]
        assert run(*arguments).code == 0
        joint.answer(joint.path("j"), *joint.names, rounds=6)
        for name in joint.names:
            assert run("key", "verify", joint.own(name), *joint.as_(name, "--key")).code == 0
        assert "generated jointly" in run("key", "show", joint.own(FIRST)).out
        assert run("journal", "verify", joint.own(FIRST)).code == 0
        joint.key.mkdir()
        (joint.key / "record.json").write_bytes((joint.own(FIRST) / "record.json").read_bytes())
        task = joint.ask("sign", joint.path("release.txt"), task="t", names=(THIRD, FIRST))
        joint.answer(task, THIRD, FIRST)
        assert len(joint.finish(task, "sig").read_bytes()) == 64
        arguments = ["key", "finish", joint.key, joint.path("j"), "--to", joint.path("x"), *joint.as_(OFFICE)]
        assert_refused(arguments, 2, "shares task next", watched=joint.folder)


class TestTold:
    """What a task is about is told by every command that shows it, not by the one alone that asks."""

    def test_show_and_both_kinds_of_json_say_what_the_content_is(self, keyed: Keyed) -> None:
        task = keyed.ask("sign", keyed.path("release.txt"), task="to-sign")
        shown = run("task", "show", task)
        assert "What is signed is text." in shown.out
        assert "release 7 of the tide tables" in shown.out
        assert f"By the key: {keyed.record.label}" in shown.out
        asked = keyed.next(task, FIRST).err
        assert "What is signed is text." in asked
        for done in (run("task", "show", task, "--json"), keyed.next(task, FIRST, "--json")):
            about = done.json["about"]
            assert (about["kind"], about["lines"][2]) == ("text", "release 7 of the tide tables")
            assert about["cautions"] == []
        (task / "content").write_bytes(b"something else")
        assert run("task", "show", task, "--json").json["about"] is None

    def test_of_a_message_the_cautions_are_told(self, keyed: Keyed) -> None:
        task = keyed.ask("open", sent(keyed), task="to-open")
        assert "What is opened is a message that is encrypted to the key." in run("task", "show", task).out
        told = run("task", "show", task, "--json").json["about"]
        assert any("every message with this encapsulated key" in one for one in told["cautions"])
