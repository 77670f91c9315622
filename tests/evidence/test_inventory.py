"""The copies of every share: each that ever was is counted until it is destroyed or given up, and none twice."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from evidence.harbour_set import NAMES, deal, enter
from hypothesis import given, settings
from hypothesis import strategies as st

from shares.documents.event import Copied, Dealt, DealtShare, Delivered, Destroyed, HandedOn, Lost
from shares.evidence.inventory import Inventory, take_inventory
from shares.history.folder import SetFolder

GONE = {"by": "A. Person", "witness": "B. Person"}


@pytest.fixture
def of_set(tmp_path: Path) -> SetFolder:
    return deal(tmp_path / "set")


def taken(of_set: SetFolder) -> Inventory:
    return take_inventory(of_set.journal(), of_set.record)


def listed(of_set: SetFolder) -> list[tuple[str, str, str]]:
    return [(copy.custodian, copy.name, copy.fate) for copy in taken(of_set).copies]


def copied(of_set: SetFolder, custodian: str, name: str) -> None:
    enter(of_set, Copied, what="copied", custodian=custodian, copy=name)


def destroyed(of_set: SetFolder, custodian: str, name: str) -> None:
    enter(of_set, Destroyed, what="destroyed", custodian=custodian, copy=name, **GONE)


def lost(of_set: SetFolder, custodian: str, name: str) -> None:
    enter(of_set, Lost, what="lost", custodian=custodian, copy=name, reason="the flood", **GONE)


def dealt_again(of_set: SetFolder, **changes: Any) -> None:
    shares = tuple(DealtShare(name=name, packed="card", card=None) for name in NAMES[:2])
    facts = {"set": of_set.record.set, "epoch": 2, "record": of_set.record.fingerprint, "practice": None, **changes}
    enter(of_set, Dealt, what="dealt", custodians=shares, **facts)


def test_what_was_dealt_is_held(of_set: SetFolder) -> None:
    assert listed(of_set) == [(name, "original", "held") for name in NAMES]
    assert {copy.packed for copy in taken(of_set).copies} == {"passphrase"}


def test_a_set_whose_journal_began_late_has_its_originals(tmp_path: Path) -> None:
    late = deal(tmp_path / "late", journal=False)
    assert listed(late) == [(name, "original", "held") for name in NAMES]
    copied(late, "registrar", "S-1")
    assert len(listed(late)) == len(NAMES) + 1


def test_a_later_epoch_adds_originals_and_a_split_that_failed_does_not(of_set: SetFolder) -> None:
    dealt_again(of_set)
    dealt_again(of_set, set=bytes(16), epoch=1)
    assert listed(of_set)[3:] == [(name, "original, epoch 2", "held") for name in NAMES[:2]]
    enter(of_set, Delivered, what="delivered", custodian="north-pier", serial="P-1")
    assert [copy.sent for copy in taken(of_set).copies if copy.custodian == "north-pier"] == [None, "P-1"]
    destroyed(of_set, "north-pier", "original")
    assert [copy.name for copy in taken(of_set).held if copy.custodian == "north-pier"] == ["original, epoch 2"]


def test_a_serial_that_is_taken_is_counted_once_more(of_set: SetFolder) -> None:
    for name in ("S-1", "s-1", "S-1", "original"):
        copied(of_set, "registrar", name)
    own = [copy.name for copy in taken(of_set).copies if copy.custodian == "registrar"]
    assert own == ["original", "S-1", "s-1 (2)", "S-1 (3)", "original (2)"]
    assert [problem.split(": ")[1] for problem in taken(of_set).problems] == [
        "counted as s-1 (2)", "counted as S-1 (3)", "counted as original (2)",
    ]  # fmt: skip


def test_what_was_lost_may_be_found_and_destroyed_and_nothing_else_ends_twice(of_set: SetFolder) -> None:
    lost(of_set, "registrar", "original")
    assert listed(of_set)[2] == ("registrar", "original", "lost")
    destroyed(of_set, "registrar", "ORIGINAL")
    assert listed(of_set)[2] == ("registrar", "original", "destroyed")
    lost(of_set, "registrar", "original")
    destroyed(of_set, "registrar", "original")
    assert listed(of_set)[2] == ("registrar", "original", "destroyed")
    assert taken(of_set).problems == (
        "entry 4 says that copy original of registrar was lost, and none was held",
        "entry 5 says that copy original of registrar was destroyed, and none was held",
    )


def test_entries_about_nobody_are_told(of_set: SetFolder) -> None:
    copied(of_set, "dry-dock", "S-1")
    enter(of_set, HandedOn, what="handed-on", custodian="east-quay", to="A. Person")
    destroyed(of_set, "registrar", "S-9")
    assert len(taken(of_set).problems) == 3
    # A copy of a share that nobody dealt is still a copy that somebody has.
    assert [(copy.custodian, copy.name) for copy in taken(of_set).held][3:] == [("dry-dock", "S-1")]


def test_a_copy_that_is_called_an_original_is_none(of_set: SetFolder) -> None:
    copied(of_set, "registrar", "original of the sheet")
    enter(of_set, Delivered, what="delivered", custodian="registrar", serial="P-1")
    assert [(copy.name, copy.sent) for copy in taken(of_set).copies[2:]] == [
        ("original", "P-1"),
        ("original of the sheet", None),
    ]
    copied(of_set, "north-pier", "original, epoch 2")
    dealt_again(of_set)
    own = [copy.name for copy in taken(of_set).copies if copy.custodian == "north-pier"]
    assert own == ["original", "original, epoch 2", "original, epoch 2 (2)"]


def test_who_it_was_handed_on_to_is_kept(of_set: SetFolder) -> None:
    for person in ("A. Person", "B. Person"):
        enter(of_set, HandedOn, what="handed-on", custodian="registrar", to=person)
    assert taken(of_set).copies[2].holders == ("A. Person", "B. Person")


ACTS = st.tuples(
    st.sampled_from(["copy", "destroy", "lose"]), st.sampled_from(NAMES), st.sampled_from(["original", "S-1", "S-2"])
)


@settings(max_examples=25)
@given(st.lists(ACTS, max_size=12))
def test_against_a_count_by_hand(tmp_path_factory: pytest.TempPathFactory, acts: list[tuple[str, str, str]]) -> None:
    """Nothing vanishes: copies are as many as were made, and held are those that nothing ended."""
    of_set = deal(tmp_path_factory.mktemp("set") / "set")
    fates = {(name, "original"): "held" for name in NAMES}
    for act, custodian, name in acts:
        if act == "copy":
            copied(of_set, custodian, name)
            number, own = 2, name
            while (custodian, own) in fates:
                number, own = number + 1, f"{name} ({number})"
            fates[custodian, own] = "held"
        else:
            {"destroy": destroyed, "lose": lost}[act](of_set, custodian, name)
            before = fates.get((custodian, name))
            if before == "held" or (before == "lost" and act == "destroy"):
                fates[custodian, name] = "destroyed" if act == "destroy" else "lost"
    assert {(copy.custodian, copy.name): copy.fate for copy in taken(of_set).copies} == fates
    assert len(listed(of_set)) == len(fates)
