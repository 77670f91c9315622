"""Rounds of attestation in a set's folder: what is filed, what is entered, and what is left after a stopped run."""

from __future__ import annotations

import hashlib
import json
from datetime import timedelta
from pathlib import Path
from unittest import mock

import pytest
from attested import ASKED, CARDS, DUE, NAMES, NEXT_DAY, RECORD, SHARES, answered, challenge, sealed, set_folder
from cli.harness import files_in
from parties import card, file_of, unlocked
from strategies import crooked_split, flat, flipped, toml_of, with_rows

from shares.documents.attestation import Attestation
from shares.documents.challenge import Challenge
from shares.documents.event import Attested, Challenged, Introduced
from shares.documents.policy import Policy
from shares.errors import ParameterError, SetMismatchError, StorageError, VerificationError
from shares.evidence.judge import Flaw
from shares.evidence.rounds import ask, enter, folder_of_round, rounds
from shares.history.folder import SetFolder
from shares.history.holders import known_cards


@pytest.fixture
def folder(tmp_path: Path) -> SetFolder:
    return set_folder(tmp_path / "set")


def asked_of(folder: SetFolder, *custodians: str) -> Challenge:
    """A challenge by the harbour office, filed and entered."""
    with unlocked("harbour-office") as key:
        return ask(folder, keys=[key], due=DUE, custodians=custodians, time=ASKED)[0]


def test_a_challenge_is_filed_and_entered(folder: SetFolder) -> None:
    head = folder.journal().head
    with unlocked("harbour-office") as key:
        made, entry = ask(folder, keys=[key], due=DUE, time=ASKED)
    assert made.custodians == NAMES
    assert made.journal == head
    named = entry.documents[0]
    data = (folder.path / named.path).read_bytes()
    assert Challenge.parse(data) == made
    assert named.digest == hashlib.sha256(data).digest()
    assert (folder.path / named.path).stat().st_mode & 0o777 == 0o600
    journal = folder.journal()
    assert journal.problems == ()
    assert head is not None
    assert journal.holds(head)
    assert [one.name for one in journal.signers(entry)] == ["harbour-office"]
    (found,) = rounds(journal).values()
    assert (found.challenged, found.silent, found.event.drill) == (entry, list(NAMES), None)


def test_a_challenge_of_attendance_belongs_to_its_drill(folder: SetFolder) -> None:
    with unlocked("harbour-office") as key:
        made, entry = ask(folder, keys=[key], due=DUE, purpose="attendance", drill=1, time=ASKED)
    assert isinstance(entry.event, Challenged)
    assert entry.event.drill == 1
    (entered,) = enter(folder, made, [answered(made, grade="present", place="the quay")], time=NEXT_DAY)
    assert entered.entry is not None
    assert isinstance(entered.entry.event, Attested)
    assert (entered.entry.event.grade, entered.entry.event.place) == ("present", "the quay")


def test_answers_are_filed_and_entered_as_they_are(folder: SetFolder) -> None:
    made = asked_of(folder)
    share = SHARES["light-house"]
    bent = share.model_copy(update={"rows": with_rows(share, flipped(3))})
    answers = [
        answered(made, "north-pier", carrier="paper", opened=True, serial="TB-18"),
        sealed(made, "south-pier"),
        answered(made, "light-house", share=bent),
    ]
    entered = enter(folder, made, answers, time=DUE + timedelta(days=1))
    journal = folder.journal()
    assert journal.problems == ()
    for one, attestation in zip(entered, answers, strict=True):
        assert one.entry is not None
        assert one.entry in journal.entries
        event = one.entry.event
        assert isinstance(event, Attested)
        assert (event.custodian, event.grade, event.result) == (
            attestation.custodian,
            attestation.grade,
            attestation.result,
        )
        assert (event.attributed, event.late, event.opened) == (True, True, attestation.opened)
        assert (event.place, event.serial) == (attestation.place, attestation.serial)
        named = one.entry.documents[0]
        assert named.path == f"{folder_of_round(made)}/{attestation.custodian}.json"
        assert Attestation.parse((folder.path / named.path).read_bytes()) == attestation
        assert named.digest == attestation.digest()
        assert (folder.path / named.path).stat().st_mode & 0o777 == 0o600
    assert [one.judgement.counts for one in entered] == [True, False, False]
    assert rounds(journal)[made.digest()].silent == []


def test_what_is_refused_is_neither_filed_nor_entered(folder: SetFolder) -> None:
    made = asked_of(folder, "north-pier", "light-house")
    before = files_in(folder.path)
    good = json.loads(answered(made).to_file())
    bad = [
        answered(challenge()),
        Attestation.parse(file_of(good | {"remark": "changed"})),
        Attestation.parse(file_of(good | {"epoch": 2})),
        sealed(made, signer="dry-dock"),
        answered(challenge(custodians=("south-pier",)), "south-pier"),
    ]
    entered = enter(folder, made, bad, time=NEXT_DAY)
    assert [one.entry for one in entered] == [None] * len(bad)
    assert not any(one.judgement.accepted for one in entered)
    assert files_in(folder.path) == before
    assert rounds(folder.journal())[made.digest()].silent == ["north-pier", "light-house"]


def test_replays_are_named_and_not_entered(folder: SetFolder) -> None:
    made = asked_of(folder)
    first, second = answered(made), answered(made, remark="once more")
    entered = enter(folder, made, [first, first, second], time=NEXT_DAY)
    assert [one.judgement.flaws for one in entered] == [set(), {Flaw.REPLAY}, {Flaw.ANSWERED}]
    before = files_in(folder.path)
    again = enter(folder, made, [first, second], time=NEXT_DAY)
    assert [one.judgement.flaws for one in again] == [{Flaw.REPLAY}, {Flaw.ANSWERED}]
    assert files_in(folder.path) == before


def test_an_attributed_answer_may_follow_one_that_is_not(folder: SetFolder) -> None:
    made = asked_of(folder)
    alone, own = answered(made, signer=None), answered(made)
    assert [one.judgement.counts for one in enter(folder, made, [alone, own], time=NEXT_DAY)] == [False, True]
    (found,) = rounds(folder.journal()).values()
    assert isinstance(found.answers["north-pier"].event, Attested)
    assert found.answers["north-pier"].event.attributed
    # The other way round, and once more, it is refused: whoever had the share cannot unsay what the custodian said.
    again = enter(folder, made, [alone, own], time=NEXT_DAY)
    assert [one.judgement.accepted for one in again] == [False, False]
    assert [flaw in one.judgement.flaws for flaw, one in zip((Flaw.ANSWERED, Flaw.REPLAY), again, strict=True)] == [
        True,
        True,
    ]


def test_a_challenge_of_another_folder_is_refused(folder: SetFolder, tmp_path: Path) -> None:
    before = files_in(folder.path)
    with pytest.raises(VerificationError, match="knows no such challenge"):
        enter(folder, challenge(), [], time=NEXT_DAY)
    other = crooked_split(b"another", flat(2, 3)).record
    with pytest.raises(SetMismatchError, match="about the set"):
        enter(folder, challenge(other), [], time=NEXT_DAY)
    assert files_in(folder.path) == before


def test_a_card_that_is_given_is_introduced_once(tmp_path: Path) -> None:
    folder = set_folder(tmp_path / "set", cards=False)
    assert known_cards(folder.journal(), folder.record, folder.policy) == {}
    made = asked_of(folder)
    answers = [answered(made, "north-pier"), answered(made, "south-pier")]
    entered = enter(folder, made, answers, cards={"north-pier": card("north-pier")}, time=NEXT_DAY)
    assert [one.judgement.attributed for one in entered] == [True, False]
    assert entered[1].judgement.flaws == {Flaw.UNKNOWN_CARD}
    journal = folder.journal()
    assert journal.problems == ()
    assert known_cards(journal, folder.record, folder.policy) == {"north-pier": CARDS["north-pier"]}
    assert journal.cards[CARDS["north-pier"]] == card("north-pier")
    enter(folder, made, [], cards={"north-pier": card("north-pier")}, time=NEXT_DAY)
    assert sum(isinstance(entry.event, Introduced) for entry in folder.journal().entries) == 1


def test_a_card_that_contradicts_the_journal_is_refused(folder: SetFolder) -> None:
    made = asked_of(folder)
    before = files_in(folder.path)
    with pytest.raises(VerificationError, match=r"the card of north-pier is .* by the journal"):
        enter(folder, made, [answered(made)], cards={"north-pier": card("dry-dock")}, time=NEXT_DAY)
    with pytest.raises(ParameterError, match="dry-dock, whom the record does not name"):
        enter(folder, made, [answered(made)], cards={"dry-dock": card("dry-dock")}, time=NEXT_DAY)
    assert files_in(folder.path) == before


def test_the_card_that_the_journal_told_last_holds(folder: SetFolder) -> None:
    made = asked_of(folder)
    event = Introduced(what="introduced", custodian="north-pier", card=card("dry-dock").fingerprint)
    folder.append(event, cards=[card("dry-dock")], time=ASKED)
    old, new = answered(made, "north-pier"), answered(made, "north-pier", signer="dry-dock")
    (entered,) = enter(folder, made, [old], time=NEXT_DAY)
    assert entered.judgement.flaws == {Flaw.OTHER_CARD}
    second = asked_of(folder, "north-pier")
    (entered,) = enter(folder, second, [answered(second, "north-pier", signer="dry-dock")], time=NEXT_DAY)
    assert entered.judgement.attributed
    assert new != old


@pytest.mark.parametrize("stopped", ["before the file", "before the entry"])
def test_a_stopped_run_is_simply_done_again(folder: SetFolder, stopped: str) -> None:
    made = asked_of(folder)
    answers = [answered(made, name) for name in NAMES]
    method = "add" if stopped == "before the file" else "append"
    real = getattr(SetFolder, method)
    calls = []

    def stops(self: SetFolder, *given: object, **named: object) -> object:
        calls.append(given)
        if len(calls) == 2:
            raise StorageError("the medium is full")
        return real(self, *given, **named)

    with mock.patch.object(SetFolder, method, stops), pytest.raises(StorageError):
        enter(folder, made, answers, time=NEXT_DAY)
    assert rounds(folder.journal())[made.digest()].silent == ["south-pier", "light-house"]
    entered = enter(folder, made, answers, time=NEXT_DAY)
    assert [one.judgement.flaws for one in entered] == [{Flaw.REPLAY}, set(), set()]
    journal = folder.journal()
    assert journal.problems == ()
    assert rounds(journal)[made.digest()].silent == []
    assert len(list((folder.path / folder_of_round(made)).iterdir())) == 4


def test_what_a_stopped_run_left_is_not_overwritten(folder: SetFolder) -> None:
    made = asked_of(folder)
    left = folder.path / folder_of_round(made) / "north-pier.json"
    left.write_bytes(b"another")
    (entered,) = enter(folder, made, [answered(made)], time=NEXT_DAY)
    assert left.read_bytes() == b"another"
    assert entered.entry is not None
    assert entered.entry.documents[0].path.endswith("/north-pier-2.json")
    assert (folder.path / entered.entry.documents[0].path).exists()


def test_a_challenge_whose_entry_fails_leaves_no_trace_in_the_journal(folder: SetFolder) -> None:
    with (
        mock.patch.object(SetFolder, "append", side_effect=StorageError("full")),
        pytest.raises(StorageError),
        unlocked("harbour-office") as key,
    ):
        ask(folder, keys=[key], due=DUE, time=ASKED)
    assert rounds(folder.journal()) == {}
    assert asked_of(folder).custodians == NAMES


def test_a_challenge_is_signed(folder: SetFolder) -> None:
    before = files_in(folder.path)
    with pytest.raises(ParameterError, match="a challenge is signed"):
        ask(folder, keys=[], due=DUE, time=ASKED)
    with unlocked("harbour-office") as key, pytest.raises(ParameterError, match="due after it is made"):
        ask(folder, keys=[key], due=ASKED, time=ASKED)
    assert files_in(folder.path) == before


def test_under_dual_control_two_sign_or_nothing_happens(folder: SetFolder) -> None:
    custodians = [{"name": name, "person": name, "site": "x", "reports_to": "y", "weight": 1} for name in NAMES]
    rule = {"need": 2, "from": list(NAMES)}
    policy = {"label": RECORD.label, "dual_control": True, "custodian": custodians, "rule": rule}
    made = asked_of(folder)
    folder.policy = Policy.parse(toml_of(policy))
    before = files_in(folder.path)
    with unlocked("harbour-office") as first, unlocked("registrar") as second:
        for keys in ([first], [first, first]):
            with pytest.raises(ParameterError, match="dual control"):
                ask(folder, keys=keys, due=DUE, time=ASKED)
            with pytest.raises(ParameterError, match="dual control"):
                enter(folder, made, [answered(made)], keys=keys, time=NEXT_DAY)
        assert files_in(folder.path) == before
        asked, entry = ask(folder, keys=[first, second], due=DUE, time=ASKED)
        assert asked.card == first.card
        (entered,) = enter(folder, asked, [answered(asked)], keys=[second, first], time=NEXT_DAY)
    assert entered.entry is not None
    assert (len(entry.signatures), len(entered.entry.signatures)) == (2, 2)
    assert folder.journal().problems == ()
