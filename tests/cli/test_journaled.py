"""What a split and a recovery enter into the journal of their set, and what they refuse for want of it.

Source: CA/Browser Forum TLS Baseline Requirements, sec. 5.4.1 (life-cycle events of keys are logged); the rest is this
project's own promise (README, FORMAT_EVIDENCE.md, sec. 16).
"""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from cli.harbour import Harbour
from cli.harness import NAMES, PURPOSE, SECRET, Place, assert_refused, files_in, run
from cli.terminal import on_terminal

from shares.custody import handover
from shares.custody.presented import load_record
from shares.documents.event import Dealt, Event, Noted, Recovered
from shares.history.journal import append, load_journal

OFFICE, REGISTRAR = "harbour-office", "registrar"
POLICY = """
label = "Tide archive root"
{more}

[rule]
need = 2
from = ["north-pier", "south-pier", "light-house"]
""" + "".join(
    f"""
[[custodian]]
name = "{name}"
person = "keeper of the {name}"
site = "{name}"
reports_to = "master of the {name}"
"""
    for name in NAMES[:3]
)


@pytest.fixture
def harbour(tmp_path: Path) -> Harbour:
    return Harbour.make(Place.make(tmp_path / "place"))


def by_policy(harbour: Harbour, more: str = "") -> list[str | Path]:
    policy = harbour.folder / "policy.toml"
    policy.write_text(POLICY.format(more=more))
    place = harbour.place
    return ["split", place.key, "--policy", policy, "--set", place.set, "--deliver", place.drop, "--plain"]


def events(place: Place) -> list[Event]:
    journal = load_journal(place.set)
    assert journal.problems == ()
    return [entry.event for entry in journal.entries]


def test_a_split_begins_the_journal_with_what_was_dealt_to_whom(harbour: Harbour) -> None:
    place = harbour.place
    card = harbour.card("north-pier")
    phrases = harbour.known(OFFICE, "south-pier", "light-house")
    place.split(more=["--card", card, "--dealer", harbour.key(OFFICE), *phrases])
    (dealt,) = events(place)
    assert isinstance(dealt, Dealt)
    record = load_record(place.record)
    assert (dealt.set, dealt.epoch, dealt.record) == (record.set, 1, record.fingerprint)
    assert dealt.practice == load_record(place.set / "practice.json").fingerprint
    fingerprint = json.loads(card.read_text())["fingerprint"]
    assert [(one.name, one.packed, one.card) for one in dealt.custodians] == [
        ("north-pier", "card", fingerprint),
        ("south-pier", "passphrase", None),
        ("light-house", "passphrase", None),
    ]
    journal = load_journal(place.set)
    assert [card.name for card in journal.signers(journal.entries[0])] == [OFFICE]
    assert {card.name for card in journal.cards.values()} == {OFFICE, "north-pier"}


def test_the_practice_set_recovers_and_is_no_part_of_the_real_one(harbour: Harbour) -> None:
    place = harbour.place
    place.split()
    practice = [place.drop / f"{name}.practice.json" for name in NAMES[:3]]
    told = run("recover", *practice[:2], "--record", place.set / "practice.json", "--check", "--json").json
    assert told["label"] == "Practice, worthless: Tide archive root"
    assert told["journaled"] is False
    assert run("recover", practice[0], place.shares[1], "--check").code == 4
    real, twin = load_record(place.record), load_record(place.set / "practice.json")
    assert real.set != twin.set
    assert real.rule == twin.rule


def test_a_policy_may_want_no_practice_set(harbour: Harbour) -> None:
    assert run(*by_policy(harbour, "practice = false")).code == 0
    assert not list(harbour.place.drop.glob("*.practice.json"))
    assert not (harbour.place.set / "practice.json").exists()
    (dealt,) = events(harbour.place)
    assert isinstance(dealt, Dealt)
    assert dealt.practice is None
    assert_refused(["drill", "open", harbour.place.set, "--kind", "practice"], 2, "no practice set was dealt")


def test_dual_control_binds_the_split_and_the_recovery(harbour: Harbour) -> None:
    place = harbour.place
    one = [*by_policy(harbour, "dual_control = true"), "--dealer", harbour.key(OFFICE), *harbour.known(OFFICE)]
    assert_refused(one, 2, "dual control", "--witness", watched=place.folder)
    twice = [*one, "--witness", harbour.key(OFFICE)]
    assert_refused(twice, 2, "dual control", watched=place.folder)
    assert run(*one, "--witness", harbour.key(REGISTRAR), *harbour.known(REGISTRAR)).code == 0
    recover = ["recover", *place.shares[:2], "--record", place.record, *PURPOSE, "--to", place.folder / "out"]
    signed = [*recover, "--sign", harbour.key(OFFICE), *harbour.known(OFFICE)]
    assert_refused(recover, 2, "and 0 would", watched=place.folder)
    assert_refused(signed, 2, "and 1 would", watched=place.folder)
    assert run(*signed, "--sign", harbour.key(REGISTRAR), *harbour.known(REGISTRAR)).code == 0
    assert [event.what for event in events(place)] == ["dealt", "recovered"]
    assert len(load_journal(place.set).entries[-1].signatures) == 2


def test_a_split_goes_on_with_the_journal_of_its_ceremony(harbour: Harbour) -> None:
    place = harbour.place
    place.set.mkdir()
    append(place.set, Noted(what="noted", remark="the door was sealed"))
    place.split()
    assert [event.what for event in events(place)] == ["noted", "dealt"]


def test_a_split_that_fails_there_leaves_that_journal_and_says_so(
    harbour: Harbour, monkeypatch: pytest.MonkeyPatch
) -> None:

    place = harbour.place
    place.set.mkdir()
    append(place.set, Noted(what="noted", remark="the door was sealed"))
    real = handover.write_new

    def fails(path: Path, data: bytes, *, secret: bool) -> None:
        if Path(path).name == "record.json":
            raise OSError(28, "No space left on device")
        real(path, data, secret=secret)

    with monkeypatch.context() as patched:
        patched.setattr(handover, "write_new", fails)
        assert run(*place.split_arguments()).code == 5
    assert [event.what for event in events(place)] == ["noted", "dealt", "exception"]
    assert list(place.drop.iterdir()) == []
    place.split()
    assert [event.what for event in events(place)] == ["noted", "dealt", "exception", "dealt"]


def test_a_recovery_is_entered_with_its_reason(harbour: Harbour) -> None:
    place = harbour.place
    place.split()
    words = ["--reason", "the disk failed", "--disposition", "2027-01-31", "--present", "A. Keeper"]
    done = run("recover", *place.shares[:2], "--record", place.record, "--check", *words)
    assert done.code == 0
    assert "Replace the key by 2027-01-31" in done.out.replace("\n", " ")
    *_, event = events(place)
    assert isinstance(event, Recovered)
    assert (event.reason, event.disposition, event.persons) == ("the disk failed", "replace", ("A. Keeper",))
    assert set(event.custodians) == {share.name.removesuffix(".share.json") for share in place.shares[:2]}
    assert event.by is not None
    assert event.by.isoformat() == "2027-01-31T23:59:59+00:00"


def test_every_share_that_was_opened_is_entered_needed_or_not(harbour: Harbour) -> None:
    place = harbour.place
    place.split()
    assert run("recover", *place.shares, "--record", place.record, *PURPOSE, "--check").code == 0
    *_, event = events(place)
    assert isinstance(event, Recovered)
    assert set(event.custodians) == set(NAMES[:3])


def test_a_recovery_beside_a_journal_that_does_not_hold_says_so(harbour: Harbour) -> None:
    place = harbour.place
    place.split()
    append(place.set, Noted(what="noted", remark="all is well"))
    journal = place.set / "journal.jsonl"
    _, rest = journal.read_bytes().split(b"\n", 1)
    journal.write_bytes(rest)  # The line of the dealing is gone.
    done = run("recover", *place.shares[:2], "--record", place.record, *PURPOSE, "--check")
    assert done.code == 0
    assert "the journal does not hold" in done.err
    assert "does not tell of this set's dealing" in done.err
    told = run("recover", *place.shares[:2], "--record", place.record, *PURPOSE, "--check", "--json")
    assert (told.err, len(told.json["cautions"])) == ("", 2)


def test_a_recovery_that_cannot_be_entered_lets_nothing_go(harbour: Harbour) -> None:
    place = harbour.place
    place.split()
    journal = place.set / "journal.jsonl"
    journal.write_bytes(b"this is no journal\n")
    out, marker = place.folder / "out", place.folder / "marker"
    base = ["recover", *place.shares[:2], "--record", place.record, *PURPOSE]
    for way in (["--to", out], ["--check"], ["--", "touch", marker]):
        line = assert_refused([*base, *way], 5, "its last line is no entry", watched=place.folder)
        assert SECRET.decode().strip() not in line
    assert not out.exists()
    assert not marker.exists()
    # In an emergency the record recovers from elsewhere: shares alone suffice.
    copy = place.folder / "record-copy.json"
    copy.write_bytes(place.record.read_bytes())
    assert run("recover", *place.shares[:2], "--record", copy, "--to", out).code == 0


def test_what_is_stated_badly_is_refused(harbour: Harbour) -> None:
    place = harbour.place
    place.split()
    base = ["recover", *place.shares[:2], "--record", place.record, "--check"]
    for words, said in (
        ([], "--reason TEXT and --disposition"),
        (["--reason", "x"], "--reason TEXT and --disposition"),
        (["--reason", "x", "--disposition", "soon"], "it is no date like 2026-12-31"),
        (["--reason", "x", "--disposition", "2027-02-30"], "it is no date"),
        (["--reason", "x" * 501, "--disposition", "returned"], "500 characters"),
        (["--reason", "", "--disposition", "returned"], "an empty value"),
    ):
        assert_refused([*base, *words], 2, said, watched=place.folder)
    assert_refused(["recover", *place.shares[:2], "--check", *PURPOSE], 2, "there is no journal")


def test_a_retired_set_is_asked_nothing_more(harbour: Harbour) -> None:
    place = harbour.place
    place.split(names=NAMES[:2], need=2)
    witness = ["--by", "A. Keeper", "--witness", "B. Keeper"]
    for name in NAMES[:2]:
        assert run("retire", "destroyed", place.set, "--custodian", name, *witness).code == 0
    assert run("retire", "close", place.set).code == 0
    signing = ["--sign", harbour.key(OFFICE), *harbour.known(OFFICE)]
    before = files_in(place.folder)
    assert_refused(["attest", "challenge", place.set, "--to", place.folder / "c", *signing], 2, "was retired")
    assert_refused(["drill", "open", place.set, "--kind", "practice"], 2, "was retired")
    assert files_in(place.folder) == before
    done = run("recover", *place.shares, "--record", place.record, *PURPOSE, "--check")
    assert done.code == 0
    assert "this set was retired" in done.err


def test_at_a_terminal_reason_and_disposition_are_asked_for(harbour: Harbour) -> None:
    place = harbour.place
    place.split()
    with on_terminal("recover", *place.shares[:2], "--record", place.record, "--check") as terminal:
        terminal.answer("Why is the secret recovered", "the disk failed")
        terminal.answer("returned, destroyed, or replaced by", "destroyed")
        code, out = terminal.finish()
    assert (code, "Recovered: Tide archive root" in out) == (0, True)
    *_, event = events(place)
    assert isinstance(event, Recovered)
    assert (event.reason, event.disposition) == ("the disk failed", "destroyed")
