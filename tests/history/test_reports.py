"""What people report by hand: every event takes what it needs and refuses the rest, and says which option is meant.

Source: 24 hours for a leaver are what the trade asks for; all else is this project's own (FORMAT_EVIDENCE.md, sec. 16).
"""

from __future__ import annotations

import dataclasses
import hashlib
import itertools
from datetime import timedelta
from pathlib import Path

import pytest
from history.making import START, key, note, set_folder
from history.test_folder import POLICY, with_policy

from shares.documents.event import EVENT_NAMES, Departed, HandedOn, Incident, make_event
from shares.errors import ParameterError, StorageError
from shares.history.folder import SetFolder
from shares.history.reports import NEEDS, Report, append_with, event_of

FACTS = Report(
    custodian=("north-pier",),
    person=("A. Keeper",),
    card=key("north-pier").card,
    serial="HT-0001",
    channel="own boat",
    copy="HT-0002",
    to="B. Keeper",
    entry=2,
    action=1,
    how="refreshed",
    remedy="repaired",
    within="2d",
    not_exposed=True,
    remark="in the rain",
)


@pytest.fixture
def folder(tmp_path: Path) -> SetFolder:
    """A set without a policy, whose second entry sets a task."""
    made = SetFolder(set_folder(tmp_path / "set"))
    made.append(make_event("incident", custodians=("north-pier",), persons=(), exposed=True, due=START, remark="lost"))
    return made


def only(*names: str, **changes: object) -> Report:
    facts = {name: getattr(FACTS, name) for name in names} | changes
    return Report(**facts)  # type: ignore[arg-type]


def test_every_event_is_made_of_what_it_needs(folder: SetFolder) -> None:
    for what, (needed, allowed) in NEEDS.items():
        least = needed + (("custodian",) if what == "departed" else ())
        # An action is one of a drill's report, and the task here is of an incident.
        for names in (least, tuple(name for name in dict.fromkeys(least + allowed) if name != "action")):
            event = event_of(folder, what, only(*names), time=START)
            assert event.what == what
            folder.append(event)
    assert folder.journal().problems == ()


def test_every_fact_that_is_said_stands_in_the_event(folder: SetFolder) -> None:
    for what, (needed, allowed) in NEEDS.items():
        names = tuple(name for name in needed + allowed if name != "action")
        members = event_of(folder, what, only(*names), time=START).model_dump(mode="json", by_alias=True)
        text = repr(members)
        for name in set(names) - {"not_exposed", "within", "card", "entry"}:
            value = getattr(FACTS, name)
            assert (value[0] if isinstance(value, tuple) else value) in text, (what, name)


def test_every_other_fact_is_refused_and_named(folder: SetFolder) -> None:
    fields = [one.name for one in dataclasses.fields(Report)]
    for what, name in itertools.product(NEEDS, fields):
        needed, allowed = NEEDS[what]
        if name not in needed + allowed:
            held = {"custodian"} if what == "departed" else set()
            with pytest.raises(ParameterError, match=f"--{name.replace('_', '-')}: {what} does not take it"):
                event_of(folder, what, only(*needed, *held, name))
        elif name in needed:
            with pytest.raises(ParameterError, match=f"--{name}: {what} needs it"):
                event_of(folder, what, only(*(set(needed) - {name})))


def test_what_commands_do_themselves_is_not_reported() -> None:
    own = {"dealt", "challenged", "attested", "drill-opened", "brought", "rehearsed", "drill-closed", "recovered",
           "step", "destroyed", "lost", "retired", "set-aside",
           "key-born", "nonces-committed", "task-asked", "approved", "task-finished", "task-failed"}  # fmt: skip
    assert set(NEEDS) == set(EVENT_NAMES) - own


@pytest.mark.parametrize(
    ("what", "changes", "words"),
    [
        ("received", {"custodian": ("dry-dock",)}, "--custodian dry-dock: is no custodian of this set"),
        ("incident", {"custodian": ("north-pier",) * 2, "remark": "x"}, "--custodian north-pier: is given twice"),
        ("received", {"custodian": ("north-pier", "south-pier")}, "--custodian: received takes it once"),
        ("departed", {"person": ("a", "b"), "custodian": ("north-pier",)}, "--person: departed takes it once"),
        ("departed", {"person": ("A. Keeper",)}, "--custodian: the set has no policy"),
        ("resolved", {"entry": 9, "how": "done"}, "--entry: the journal has no entry 9"),
        ("resolved", {"entry": 1, "how": "done"}, "--entry: entry 1 sets no task: it is dealt"),
        ("resolved", {"entry": 1, "how": "done"}, "open: --entry 2 (incident with north-pier"),
        ("resolved", {"entry": 2, "how": "done", "action": 1}, "--action: entry 2 is incident, and no drill's"),
        ("incident", {"custodian": ("north-pier",), "remark": "x", "within": "soon"}, "--within: should be a duration"),
        ("noted", {"remark": "x" * 501}, "noted: remark is not as it should be"),
        ("noted", {"remark": "a\x1bb"}, "control or invisible"),
    ],
)  # fmt: skip
def test_what_cannot_be_is_refused(folder: SetFolder, what: str, changes: dict[str, object], words: str) -> None:
    with pytest.raises(ParameterError) as refusal:
        event_of(folder, what, only(**changes))  # type: ignore[arg-type]
    assert words in str(refusal.value)
    assert len(folder.journal().entries) == 2


def test_a_leaver_is_dealt_with_in_a_day_or_as_the_policy_says(folder: SetFolder, tmp_path: Path) -> None:
    def due(where: SetFolder, what: str, **changes: object) -> timedelta:
        event = event_of(where, what, only(**changes), time=START)  # type: ignore[arg-type]
        assert isinstance(event, Departed | Incident)
        return event.due - START

    leaver = {"person": ("north-pier keeper",), "custodian": ("north-pier",)}
    assert due(folder, "departed", **leaver) == timedelta(hours=24)
    assert due(folder, "departed", **leaver, within="90min") == timedelta(minutes=90)
    text = POLICY.replace(b"dual_control = true", b'respond_within = "4h"')
    planned = SetFolder(with_policy(tmp_path / "planned", text))
    assert due(planned, "departed", **leaver) == timedelta(hours=4)
    assert due(planned, "incident", custodian=("north-pier",), remark="seen") == timedelta(hours=4)


def test_the_policy_says_whose_share_a_leaver_holds(tmp_path: Path) -> None:
    text = POLICY.replace(b"south-pier keeper", b"North-Pier  KEEPER").replace(b"dual_control = true", b"")
    folder = SetFolder(with_policy(tmp_path / "set", text))
    event = event_of(folder, "departed", only(person=("north-pier keeper",)))
    assert isinstance(event, Departed)
    assert event.custodians == ("north-pier", "south-pier")
    with pytest.raises(ParameterError, match="names a share that this person holds"):
        event_of(folder, "departed", only(person=("somebody else",)))


def test_the_journal_says_whose_share_a_leaver_was_handed(tmp_path: Path) -> None:
    text = POLICY.replace(b"dual_control = true", b"")
    folder = SetFolder(with_policy(tmp_path / "set", text))
    for name, to in (("north-pier", "south-pier keeper"), ("south-pier", "A. Newcomer")):
        folder.append(HandedOn(what="handed-on", custodian=name, to=to))
    held = {"south-pier keeper": ("north-pier",), "a.  newcomer": ("south-pier",)}
    for person, names in held.items():
        event = event_of(folder, "departed", only(person=(person,)))
        assert isinstance(event, Departed)
        assert event.custodians == names
    with pytest.raises(ParameterError, match="names a share that this person holds"):
        event_of(folder, "departed", only(person=("north-pier keeper",)))


def test_an_incident_counts_as_exposed_unless_it_is_said_not_to_be(folder: SetFolder) -> None:
    for said in (False, True):
        event = event_of(folder, "incident", only("custodian", "remark", not_exposed=said))
        assert isinstance(event, Incident)
        assert event.exposed is not said


def test_documents_are_copied_and_named(folder: SetFolder) -> None:
    attached = {"receipt.pdf": b"signed", "/elsewhere/../scan.tar.gz": b"scanned", "a b.<script>": b"odd", "plain": b""}
    entry = append_with(folder, note("papers"), attached)
    wanted = [(b"signed", ".pdf"), (b"scanned", ".tar.gz"), (b"odd", ""), (b"", "")]
    assert [one.path for one in entry.documents] == [
        f"documents/{hashlib.sha256(data).hexdigest()}{ending}" for data, ending in wanted
    ]
    assert [(folder.path / one.path).read_bytes() for one in entry.documents] == [data for data, _ in wanted]
    # The same paper handed in again is kept once.
    again = append_with(folder, note("the same"), {"receipt.pdf": b"signed"})
    assert again.documents == entry.documents[:1]


def test_nothing_is_copied_where_two_are_to_sign_and_one_does(tmp_path: Path) -> None:
    folder = SetFolder(with_policy(tmp_path / "set"))
    with pytest.raises(ParameterError, match="dual control"):
        append_with(folder, note("papers"), {"receipt.pdf": b"signed"}, keys=[key()])
    assert not (folder.path / "documents").exists()
    entry = append_with(folder, note("papers"), {"receipt.pdf": b"signed"}, keys=[key(), key("registrar")])
    assert len(entry.signatures) == 2


def test_an_attempt_that_failed_can_be_repeated(folder: SetFolder) -> None:
    path = folder.path / "journal.jsonl"
    whole = path.read_bytes()
    path.write_bytes(whole + b"rubbish\n")
    with pytest.raises(StorageError):
        append_with(folder, note("papers"), {"receipt.pdf": b"signed"})
    path.write_bytes(whole)
    entry = append_with(folder, note("papers"), {"receipt.pdf": b"signed"})
    assert (folder.path / entry.documents[0].path).read_bytes() == b"signed"


def test_events_are_made_only_of_what_they_have() -> None:
    for what, members, words in (
        ("forgotten", {}, "there is no event 'forgotten'"),
        ("noted", {}, "noted: remark is missing"),
        ("noted", {"remark": "x", "extra": 1}, "noted: extra"),
        ("recovered", {"custodians": (), "persons": (), "reason": "x", "disposition": "replace"}, "a date"),
    ):
        with pytest.raises(ParameterError) as refusal:
            make_event(what, **members)
        assert words in str(refusal.value)
