"""A round of attestation from the command line: asked, answered, checked and entered, by hand and by script."""

from __future__ import annotations

import json
import re
from datetime import timedelta
from pathlib import Path
from typing import Any

import pytest
from cli.harbour import Harbour
from cli.harness import NAMES, Result, assert_one_line, assert_refused, files_in, run, spawn
from cli.terminal import on_terminal
from parties import unlocked

from shares import clock
from shares.cli.keys import UNSIGNED_ENTRY
from shares.documents.attestation import Attestation
from shares.documents.challenge import Challenge
from shares.documents.event import Attested, Introduced, make_event
from shares.documents.share import Share
from shares.documents.wrapping import Suite
from shares.evidence.rounds import ask, doubts_of_asked, rounds
from shares.history.folder import SetFolder
from shares.history.journal import load_journal
from shares.storage import read_file

OFFICE = "harbour-office"


class Quay:
    """The harbour, with what a round needs."""

    def __init__(self, harbour: Harbour) -> None:
        self.harbour = harbour
        self.place = harbour.place
        self.challenge = harbour.folder / "challenge.json"

    def signed_by(self, name: str) -> list[str | Path]:
        return ["--sign", self.harbour.key(name), *self.harbour.known(name)]

    def ask_arguments(self, *more: str | Path) -> list[str | Path]:
        return ["attest", "challenge", self.place.set, "--to", self.challenge, *more]

    def ask(self, *more: str | Path) -> Result:
        done = run(*self.ask_arguments(*self.signed_by(OFFICE), *more))
        assert done.code == 0, done.err
        return done

    def answer_file(self, name: str) -> Path:
        return self.harbour.folder / f"{name}.answer.json"

    def answer_arguments(self, name: str, *more: str | Path, signed: bool = True) -> list[str | Path]:
        sign = self.signed_by(name) if signed else []
        to = ["--to", self.answer_file(name)]
        return ["attest", "answer", self.challenge, "--record", self.place.record, *to, *sign, *more]

    def answer(self, name: str, *more: str | Path, signed: bool = True, code: int = 0) -> Result:
        share = () if {"--sealed", "--share"} & set(map(str, more)) else ("--share", self.place.share(name))
        done = run(*self.answer_arguments(name, *share, *more, signed=signed))
        assert done.code == code, done.err
        return done

    def check_arguments(self, *names: str, more: tuple[str | Path, ...] = ()) -> list[str | Path]:
        return ["attest", "check", self.challenge, *map(self.answer_file, names), *more]

    def cards(self, *names: str) -> list[str | Path]:
        return [word for name in names for word in ("--card", self.harbour.card(name))]

    def entering(self) -> tuple[str | Path, ...]:
        return ("--set", self.place.set)


@pytest.fixture
def quay(harbour: Harbour) -> Quay:
    return Quay(harbour)


def assert_not_answered(arguments: list[str | Path], code: int, *words: str, watched: Path) -> None:
    """See that an answer is refused, if need be after the challenge was shown, and that nothing is written."""
    before = files_in(watched)
    done, told = run(*arguments), run(*arguments, "--json")
    line = done.err.splitlines()[-1]
    assert (done.code, done.out, line.startswith("shares: ")) == (code, "", True), line
    assert (told.code, told.json["done"], told.err) == (code, False, "")
    assert [word for word in words if word not in line] == [], line
    assert "Traceback" not in done.err
    assert files_in(watched) == before


def damage(path: Path) -> None:
    """Change a row and leave all else."""
    share = Share.parse(path.read_bytes())
    with share.rows[0].view() as row:
        row[3] ^= 16
    path.write_bytes(share.to_file())


def test_a_round_from_the_question_to_the_journal(quay: Quay) -> None:
    asked = quay.ask("--due", "2w", *(f"--custodian={name}" for name in NAMES[:4]))
    challenge = Challenge.parse(quay.challenge.read_bytes())
    assert challenge.fingerprint in asked.out
    assert "by the known way" in asked.out
    assert (challenge.due - challenge.created).days == 14
    assert quay.challenge.stat().st_mode & 0o777 == 0o600

    damage(quay.place.share("light-house"))
    first = quay.answer("north-pier", "--place", "the pier house")
    assert "Answered for north-pier: intact." in first.out
    assert "Signed by the share and by north-pier, card " in first.out
    assert "Challenge by harbour-office, card " in first.err
    assert "an answer proves possession to whoever asked" in first.err
    assert challenge.journal is not None
    assert f"where the journal of the set stood, {challenge.journal.words()}" in first.out.replace("\n", " ")
    assert "sealed pack" not in first.out
    assert quay.answer_file("north-pier").stat().st_mode & 0o777 == 0o600
    closed = quay.answer("south-pier", "--sealed", "--serial", "TB-0017")
    assert "it counts only beside an earlier proof of content" in closed.out.replace("\n", " ")
    damaged = quay.answer("light-house", "--custodian", "light-house", code=4)
    assert "Answered for light-house: damaged." in damaged.out
    assert "tell whoever asked at once" in damaged.out

    cards = quay.cards("north-pier", "south-pier", "light-house")
    done = run(*quay.check_arguments(*NAMES[:3], more=(*quay.entering(), *cards, *quay.signed_by(OFFICE))))
    lines = done.out.splitlines()
    assert done.code == 4
    assert lines[0].startswith(f"{quay.answer_file('north-pier')} (north-pier): intact, counts (entry ")
    assert "(south-pier): seal intact, attributed, counts beside an earlier proof of content (entry " in lines[1]
    assert lines[1].endswith("- pack and seal were seen, and no proof of content was given")
    assert "(light-house): damaged, attributed, does not count (entry " in lines[2]
    assert lines[3] == "1 of 3 count toward the margin of Tide archive root."
    assert "until that is 365 days old (the policy may say otherwise" in done.out.replace("\n", " ")
    assert "Still silent: registrar; due is " in done.out
    assert "Silence is no consent" in done.out

    journal = load_journal(quay.place.set)
    assert journal.problems == ()
    found = rounds(journal)[challenge.digest()]
    events = [entry.event for entry in found.answers.values()]
    assert [(one.custodian, one.grade, one.result, one.attributed) for one in events if isinstance(one, Attested)] == [
        ("north-pier", "content", "intact", True),
        ("south-pier", "sealed", "seal intact", True),
        ("light-house", "content", "damaged", True),
    ]
    assert found.silent == ["registrar"]
    introduced = [entry.event for entry in journal.entries if isinstance(entry.event, Introduced)]
    assert [one.custodian for one in introduced] == ["north-pier", "south-pier", "light-house"]
    assert all(journal.signers(entry) for entry in found.answers.values())

    # The same again is a replay, named and not entered.
    again = run(*quay.check_arguments("north-pier", more=quay.entering()), "--json")
    (one,) = again.json["answers"]
    assert (again.code, one["accepted"], one["problems"][0]["flaw"]) == (4, False, "given before")
    assert load_journal(quay.place.set).entries == journal.entries


def test_all_good_is_exit_code_0(quay: Quay) -> None:
    quay.ask("--custodian", "north-pier", "--custodian", "registrar")
    for name in ("north-pier", "registrar"):
        quay.answer(name)
    more = (*quay.entering(), *quay.cards("north-pier", "registrar"))
    done = run(*quay.check_arguments("north-pier", "registrar", more=more))
    assert done.code == 0
    assert "2 of 2 count toward the margin" in done.out
    assert "All who were asked have answered." in done.out
    assert UNSIGNED_ENTRY in done.err


def test_every_command_says_the_same_in_json(quay: Quay) -> None:
    asked = quay.ask("--json").json
    challenge = Challenge.parse(quay.challenge.read_bytes())
    assert (asked["done"], asked["challenge"], asked["fingerprint"]) == (
        True,
        challenge.digest().hex(),
        challenge.fingerprint,
    )
    assert Path(asked["filed"]).read_bytes() == quay.challenge.read_bytes()
    answered = quay.answer("north-pier", "--json", signed=False)
    assert answered.err == ""
    assert {name: answered.json[name] for name in ("done", "exit", "result", "signed_by_share", "card", "late")} == {
        "done": True,
        "exit": 0,
        "result": "intact",
        "signed_by_share": True,
        "card": None,
        "late": False,
    }
    assert answered.json["journal"] == asked["journal"] is not None
    quay.answer_file("junk").write_text("{}")
    checked = run(*quay.check_arguments("north-pier", "junk", more=("--record", quay.place.record, "--json")))
    assert (checked.code, checked.json["done"], checked.json["silent"]) == (4, False, list(NAMES[1:]))
    one, junk = checked.json["answers"]
    assert (one["accepted"], one["attributed"], one["counts"], one["entry"]) == (True, False, False, None)
    assert [problem["flaw"] for problem in one["problems"]] == ["not attributed"]
    assert "does not say that it is one" in junk["unreadable"]


def test_only_checking_enters_nothing(quay: Quay) -> None:
    quay.ask("--custodian", "north-pier")
    quay.answer("north-pier")
    before = files_in(quay.place.set)
    more = ("--record", quay.place.record, *quay.cards("north-pier"))
    done = run(*quay.check_arguments("north-pier", "north-pier", more=more))
    assert done.code == 4
    assert "this very answer was given before" in done.out
    done = run(*quay.check_arguments("north-pier", more=more))
    assert (done.code, "Nothing was entered" in done.out) == (0, True)
    assert files_in(quay.place.set) == before


@pytest.mark.parametrize("suite", [None, "x25519", "mlkem768-x25519"])
def test_a_wrapped_share_is_opened_in_memory(quay: Quay, suite: Suite | None) -> None:
    quay.ask("--custodian", "registrar")
    wrapped = quay.harbour.wrap("registrar", suite)
    done = quay.answer("registrar", "--share", wrapped)
    assert "Answered for registrar: intact." in done.out
    done = run(*quay.check_arguments("registrar", more=("--record", quay.place.record, *quay.cards("registrar"))))
    assert (done.code, "counts" in done.out) == (0, True)


def test_a_wrong_passphrase_is_no_answer(quay: Quay) -> None:
    quay.ask()
    wrapped = quay.harbour.wrap("registrar")
    arguments = [*quay.answer_arguments("registrar", "--share", wrapped, signed=False)]
    wrong = f"--passphrase-file={quay.harbour.phrase('dry-dock')}"
    assert_not_answered([*arguments, wrong], 4, "not opened", watched=quay.harbour.folder)


def test_a_sheet_answers_through_transcribe(quay: Quay) -> None:
    quay.ask("--custodian", "north-pier")
    page, typed = quay.harbour.folder / "sheet.html", quay.harbour.folder / "typed.json"
    assert run("sheet", quay.place.share("north-pier"), "--to", page).code == 0
    lines = [
        line.split("</th>")[1].replace("<td>", " ").replace("</td>", " ")
        for line in page.read_text().splitlines()
        if '<tr><th scope="row">' in line and "</th><td" in line
    ]

    rows = [re.sub(r"<[^>]*>", " ", line) for line in lines]
    scanned = quay.harbour.folder / "lines.txt"
    scanned.write_text("\n".join(row for row in rows if len(row.split()) > 4) + "\n")
    transcribed = run("transcribe", "--from", scanned, "--to", typed)
    assert transcribed.code == 0, transcribed.err
    done = quay.answer("north-pier", "--share", typed, "--paper", "--opened", "--serial", "TB-18")
    assert "Answered for north-pier: intact." in done.out
    assert "Destroy the file that was typed from paper" in done.out
    made = Attestation.parse(quay.answer_file("north-pier").read_bytes())
    assert (made.carrier, made.opened, made.serial) == ("paper", True, "TB-18")
    done = run(*quay.check_arguments("north-pier", more=(*quay.entering(), *quay.cards("north-pier"))))
    assert done.code == 0


def test_what_comes_to_light_after_the_answer_is_an_incident(quay: Quay) -> None:
    quay.ask("--custodian", "north-pier")
    entering = (*quay.entering(), *quay.cards("north-pier"))
    quay.answer("north-pier")
    run(*quay.check_arguments("north-pier", more=entering))
    quay.answer_file("north-pier").unlink()
    quay.answer("north-pier", "--sealed", "--broken", "--serial", "TB-0017", code=4)
    done = run(*quay.check_arguments("north-pier", more=entering))
    told = done.out.replace("\n", " ")
    assert (done.code, "refused - this custodian has answered before" in told) == (4, True)
    assert "north-pier answered before, and now reports: seal broken." in told
    assert "`shares journal add SET incident --custodian north-pier --remark TEXT`" in told


def test_who_cannot_answer_is_named_when_they_are_asked(quay: Quay) -> None:
    folder = SetFolder(quay.place.set)
    assert doubts_of_asked(folder.record, folder.journal(), ()) == []
    folder.append(make_event("departed", person="A. Keeper", custodians=("north-pier",), due=clock.now()))
    for what in ("destroyed", "lost"):
        more = {"reason": "the flood"} if what == "lost" else {}
        name = {"destroyed": "registrar", "lost": "dry-dock"}[what]
        folder.append(make_event(what, custodian=name, copy="original", by="A", witness="B", **more))
    folder.append(make_event("copied", custodian="dry-dock", copy="S-1"))
    done = quay.ask()
    number = len(load_journal(quay.place.set).entries) - 4
    assert f"north-pier is asked, and entry {number} tells that the person who held it has left." in done.err
    assert "registrar is asked, and every copy of that share is entered as destroyed or lost." in done.err
    assert done.err.count("Caution:") == 2
    folder.append(make_event("handed-on", custodian="north-pier", to="B. Keeper"))
    quay.challenge.unlink()
    told = quay.ask("--json", "--custodian", "north-pier", "--custodian", "registrar")
    assert (told.err, [line.split()[0] for line in told.json["cautions"]]) == ("", ["registrar"])


def test_attendance_in_a_drill_is_answered_without_any_share(quay: Quay) -> None:
    now = clock.now()
    with unlocked(OFFICE) as key:
        made, _ = ask(
            SetFolder(quay.place.set),
            keys=[key],
            due=now + timedelta(days=1),
            custodians=["dry-dock"],
            purpose="attendance",
            drill=1,
            time=now,
        )
    quay.challenge.write_bytes(made.to_file())
    done = run(*quay.answer_arguments("dry-dock", "--present", "--place", "the quay"))
    assert (done.code, "Answered for dry-dock: present." in done.out) == (0, True)
    assert "dry-dock is asked who is there" in done.err
    done = run(*quay.check_arguments("dry-dock", more=(*quay.entering(), *quay.cards("dry-dock"))))
    assert (done.code, "(dry-dock): answered (entry " in done.out) == (0, True)
    assert ("margin" in done.out, "1 of 1 who were asked have answered." in done.out) == (False, True)
    quay.answer_file("dry-dock").unlink()
    share = quay.answer_arguments("dry-dock", "--share", quay.place.share("dry-dock"))
    assert_not_answered(share, 2, "asks who is there", watched=quay.harbour.folder)


def test_a_broken_seal_is_told(quay: Quay) -> None:
    quay.ask("--custodian", "south-pier")
    done = quay.answer("south-pier", "--sealed", "--broken", "--serial", "TB-17", code=4)
    assert "touch nothing" in done.out
    done = run(*quay.check_arguments("south-pier", more=(*quay.entering(), *quay.cards("south-pier"))))
    assert (done.code, "the seal was found broken" in done.out) == (4, True)


def test_a_file_that_cannot_be_read_does_not_stop_the_others(quay: Quay) -> None:
    quay.ask("--custodian", "north-pier", "--custodian", "south-pier")
    quay.answer("north-pier")
    more = (*quay.entering(), *quay.cards("north-pier"))
    done = run(*quay.check_arguments("missing", "north-pier", more=more))
    assert done.code == 5
    assert f"{quay.answer_file('missing')}: unreadable - does not exist" in done.out
    assert "(north-pier): intact, counts" in done.out
    assert rounds(load_journal(quay.place.set)).popitem()[1].silent == ["south-pier"]


def test_what_a_person_agrees_to_at_a_terminal(quay: Quay) -> None:
    quay.ask()
    for reply, code in (("n", 1), ("y", 0)):
        with on_terminal(*quay.answer_arguments("north-pier", "--share", quay.place.share("north-pier"))) as terminal:
            terminal.wait_for("an answer proves possession")
            terminal.answer("Did it come by the known way, and does north-pier answer? [y/N]:", reply)
            assert terminal.finish()[0] == code
        assert quay.answer_file("north-pier").exists() is (code == 0)


def test_without_a_terminal_nothing_is_asked(quay: Quay) -> None:
    quay.ask("--custodian", "north-pier")
    done = spawn(*quay.answer_arguments("north-pier", "--share", quay.place.share("north-pier")), stdin=None)
    assert done.code == 0
    done = spawn(*quay.check_arguments("north-pier", more=(*quay.entering(), *quay.cards("north-pier"), "--json")))
    assert (done.code, done.json["answers"][0]["counts"]) == (0, True)


def test_a_challenge_is_refused_before_anything_is_written(quay: Quay) -> None:
    folder = quay.harbour.folder
    assert_refused(quay.ask_arguments(), 2, "a challenge is signed", "--sign KEY", watched=folder)
    signed = quay.signed_by(OFFICE)
    assert_refused(quay.ask_arguments(*signed, "--custodian", "nobody"), 2, "no custodian nobody", watched=folder)
    for due in ("0d", "soon", "14", "1h"):
        assert_refused(quay.ask_arguments(*signed, "--due", due), 2, "--due: should be an interval", watched=folder)
    quay.challenge.write_text("taken")
    assert_refused(quay.ask_arguments(*signed), 5, "exists already", watched=folder)


def test_an_answer_is_refused_before_anything_is_written(quay: Quay) -> None:
    quay.ask("--custodian", "north-pier", "--custodian", "south-pier")
    folder, share = quay.harbour.folder, quay.place.share
    refused: list[tuple[list[str | Path], int, str]] = [
        ([], 2, "exactly one of --share S, --sealed and --present"),
        (["--sealed", "--present"], 2, "exactly one of"),
        (["--sealed", "--share", share("north-pier")], 2, "exactly one of"),
        (["--broken", "--share", share("north-pier")], 2, "--broken goes with --sealed"),
        (["--sealed", "--paper"], 2, "--paper with --share"),
        (["--sealed"], 2, "known by its serial"),
        (["--present"], 2, "this would answer something else"),
        (["--share", share("registrar")], 2, "does not ask registrar"),
        (["--share", share("south-pier"), "--custodian", "north-pier"], 2, "the share of south-pier"),
        (["--share", share("nobody")], 5, "unreadable"),
        (["--share", share("north-pier"), "--trust", quay.harbour.card("auditor-east")], 4, "not trusted here"),
        (["--sealed", "--serial", "x\ny"], 2, "control"),
    ]
    for more, code, words in refused:
        assert_not_answered(quay.answer_arguments("north-pier", *more), code, words, watched=folder)
    damage(share("north-pier"))
    unsigned = quay.answer_arguments("north-pier", "--share", share("north-pier"), signed=False)
    assert_not_answered(unsigned, 4, "no party key to sign that with", watched=folder)
    unsure = quay.answer_arguments("x", "--sealed", "--serial", "TB-1", signed=False)
    assert_not_answered(unsure, 2, "not clear who answers", "north-pier, south-pier", watched=folder)
    quay.answer_file("north-pier").write_text("taken")
    assert_refused(quay.answer_arguments("north-pier", "--sealed", "--serial", "TB-1"), 5, "exists already")


def test_a_trusted_asker_is_shown_as_such(quay: Quay) -> None:
    quay.ask()
    done = quay.answer("north-pier", "--trust", quay.harbour.card(OFFICE))
    assert "(trusted)" in done.err
    assert "Caution: the party key is of" not in done.err


def test_a_key_of_another_is_cautioned_about(quay: Quay) -> None:
    quay.ask("--custodian", "north-pier")
    arguments = quay.answer_arguments("dry-dock", "--share", quay.place.share("north-pier"))
    done = run(*arguments)
    assert (done.code, "Caution: the party key is of dry-dock, and north-pier answers" in done.err) == (0, True)
    more = ("--record", quay.place.record, *quay.cards("north-pier"))
    done = run(*quay.check_arguments("dry-dock", more=more))
    assert (done.code, "intact, unattributed, does not count" in done.out) == (4, True)


def test_checking_is_refused_for_the_wrong_things(quay: Quay) -> None:
    quay.ask("--custodian", "north-pier")
    quay.answer("north-pier")
    folder = quay.harbour.folder
    check = quay.check_arguments
    assert_refused(check("north-pier"), 2, "give either --set SET, to enter", watched=folder)
    both = (*quay.entering(), "--record", quay.place.record)
    assert_refused(check("north-pier", more=both), 2, "give either", watched=folder)
    sign = ("--record", quay.place.record, *quay.signed_by(OFFICE))
    assert_refused(check("north-pier", more=sign), 2, "nothing to sign", watched=folder)
    wrong = (*quay.entering(), *quay.cards(OFFICE))
    assert_refused(check("north-pier", more=wrong), 2, "no custodian here", watched=folder)
    assert_refused(
        ["attest", "check", quay.answer_file("north-pier"), "x", *quay.entering()], 4, "a challenge is wanted"
    )
    (quay.place.set / "journal.jsonl").unlink()
    assert_refused(check("north-pier", more=quay.entering()), 4, "knows no such challenge")


def test_an_altered_challenge_is_refused_everywhere(quay: Quay) -> None:
    quay.ask()
    quay.answer("north-pier")
    members: dict[str, Any] = json.loads(quay.challenge.read_bytes())
    quay.challenge.write_text(json.dumps(members | {"due": "2099-01-01T00:00:00Z"}))
    for arguments in (
        quay.answer_arguments("south-pier", "--share", quay.place.share("south-pier")),
        quay.check_arguments("north-pier", more=quay.entering()),
        ["show", quay.challenge],
    ):
        assert_refused(arguments, 4, "its signature does not fit its content", watched=quay.harbour.folder)


def test_show_tells_what_was_asked_and_answered(quay: Quay) -> None:
    quay.ask()
    quay.answer("north-pier", "--remark", "dry and clean")
    shown = run("show", quay.challenge)
    assert (shown.code, "harbour-office, card " in shown.out, "attestation" in shown.out) == (0, True, True)
    shown = run("show", quay.answer_file("north-pier"))
    assert (shown.code, "dry and clean" in shown.out, "intact" in shown.out) == (0, True, True)


def test_a_copy_that_cannot_be_written_is_no_loss(quay: Quay) -> None:
    done = run("attest", "challenge", quay.place.set, "--to", "/proc/no/such", *quay.signed_by(OFFICE))
    line = assert_one_line(done)
    assert done.code == 5
    kept = line.split("hand out a copy of ")[1].rstrip(")\n")
    assert Challenge.parse(read_file(kept, limit=1 << 20)).custodians == NAMES
