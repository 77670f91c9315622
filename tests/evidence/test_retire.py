"""The end of a set: witnessed by a third party, copy by copy, and not closed while one is unaccounted for."""

from __future__ import annotations

from datetime import timedelta
from pathlib import Path
from typing import Any

import pytest
from evidence.harbour_set import NAMES, at, deal, enter
from parties import unlocked

from shares.documents.event import Copied, HandedOn, Retired
from shares.errors import DocumentError, ParameterError, StorageError, VerificationError
from shares.evidence.retire import close, destroyed, ending, is_retired, lost
from shares.history.folder import SetFolder

THIRD = {"by": "A. Person", "witness": "B. Person"}


@pytest.fixture
def of_set(tmp_path: Path) -> SetFolder:
    return deal(tmp_path / "set")


def written(of_set: SetFolder) -> bytes:
    return (of_set.path / "journal.jsonl").read_bytes()


def destroy(of_set: SetFolder, custodian: str, **options: Any) -> None:
    destroyed(of_set, custodian, **{**THIRD, **options})


def test_a_set_ends_share_by_share(of_set: SetFolder) -> None:
    for name in NAMES:
        with pytest.raises(VerificationError, match=f"unaccounted for: .*{name} "):
            close(of_set)
        destroy(of_set, name, method="burnt")
    assert not is_retired(of_set.journal())
    found, entry = close(of_set, remark="at last", time=at(60))
    assert isinstance(entry.event, Retired)
    assert entry.event.keep_until == at(60) + timedelta(days=730)
    assert [copy.fate for copy in found.inventory.copies] == ["destroyed"] * 3
    assert is_retired(of_set.journal())
    with pytest.raises(ParameterError, match=r"was retired on 2026-12-01T08:00:00Z \(entry 5\)"):
        close(of_set)


def test_every_copy_left_is_named(of_set: SetFolder) -> None:
    enter(of_set, Copied, what="copied", custodian="registrar", copy="S-1")
    destroy(of_set, "north-pier")
    before = written(of_set)
    with pytest.raises(VerificationError) as refused:
        close(of_set)
    assert "3 of 4 copies are unaccounted for: south-pier (original); registrar (original); registrar (S-1)" in str(
        refused.value
    )
    assert written(of_set) == before


def test_the_policy_says_how_long_records_are_kept(tmp_path: Path) -> None:
    of_set = deal(tmp_path / "set", 'keep_records = "7y"')
    for name in NAMES:
        destroy(of_set, name)
    event = close(of_set, time=at(0))[1].event
    assert isinstance(event, Retired)
    assert event.keep_until == at(0) + timedelta(days=7 * 365)


def test_a_copy_is_named_where_there_are_several(of_set: SetFolder) -> None:
    enter(of_set, Copied, what="copied", custodian="registrar", copy="S-1")
    with pytest.raises(ParameterError, match="registrar has several copies: original, S-1"):
        destroy(of_set, "registrar")
    with pytest.raises(ParameterError, match="no entry tells of a copy S-2 of registrar's share"):
        destroy(of_set, "registrar", copy="S-2")
    with pytest.raises(ParameterError, match="dry-dock was dealt no share of this set"):
        destroy(of_set, "dry-dock")
    destroy(of_set, "registrar", copy="s-1")
    destroy(of_set, "registrar")
    with pytest.raises(ParameterError, match=r"copy original of registrar's share was destroyed already \(entry 4\)"):
        destroy(of_set, "registrar", copy="original")


@pytest.mark.parametrize("witness", ["north-pier", "NORTH-PIER", "keeper  of north-pier", "C. Person"])
def test_the_witness_is_no_one_who_kept_the_share(of_set: SetFolder, witness: str) -> None:
    enter(of_set, HandedOn, what="handed-on", custodian="north-pier", to="C. Person")
    before = written(of_set)
    for act, more in ((destroyed, {}), (lost, {"reason": "x"})):
        with pytest.raises(
            VerificationError, match="the witness is the custodian north-pier, and must be a third party"
        ):
            act(of_set, "north-pier", by="A. Person", witness=witness, **more)  # type: ignore[operator]
    assert written(of_set) == before
    destroy(of_set, "north-pier", by=witness)  # whoever keeps it may destroy it


def test_nobody_witnesses_their_own_act(of_set: SetFolder) -> None:
    with pytest.raises(VerificationError, match="nobody witnesses their own act"):
        destroy(of_set, "north-pier", by="A. Person", witness="a. person ")


def test_a_lost_copy_is_accounted_for_and_said_to_be_lost(of_set: SetFolder) -> None:
    destroy(of_set, "north-pier")
    destroy(of_set, "south-pier")
    lost(of_set, "registrar", reason="not in the safe", **THIRD)
    with pytest.raises(ParameterError, match="is lost already"):
        lost(of_set, "registrar", reason="again", **THIRD)
    found, _ = close(of_set)
    assert [(copy.custodian, copy.by, copy.witness) for copy in found.lost] == [("registrar", "A. Person", "B. Person")]
    # What turns up after the end is destroyed after it, and entered.
    destroy(of_set, "registrar")
    assert ending(of_set).lost == ()


def test_an_affidavit_is_kept_once_and_named_by_the_entry(of_set: SetFolder, tmp_path: Path) -> None:
    scan = tmp_path / "Scan of the form.PDF"
    scan.write_bytes(b"signed by hand")
    destroy(of_set, "north-pier", affidavit=scan)
    destroy(of_set, "south-pier", affidavit=scan)
    first, second = of_set.journal().entries[1:]
    assert first.documents == second.documents
    [named] = first.documents
    assert named.path == f"affidavits/{named.digest.hex()[:16]}.pdf"
    assert (of_set.path / named.path).read_bytes() == b"signed by hand"
    assert (of_set.path / named.path).stat().st_mode & 0o777 == 0o600


def test_a_scan_that_cannot_be_kept_is_refused_before_anything_is_entered(of_set: SetFolder, tmp_path: Path) -> None:
    before = written(of_set)
    (tmp_path / "large").write_bytes(bytes((1 << 20) + 1))
    for name in ("large", "missing"):
        with pytest.raises(StorageError):
            destroy(of_set, "north-pier", affidavit=tmp_path / name)
    assert written(of_set) == before
    assert not (of_set.path / "affidavits").exists()


@pytest.mark.parametrize("name", ["by", "witness", "method"])
def test_texts_that_may_not_be_are_refused(of_set: SetFolder, name: str) -> None:
    before = written(of_set)
    with pytest.raises(ParameterError, match="must not hold control or invisible characters"):
        destroy(of_set, "north-pier", **{name: "a\x1bb"})
    assert written(of_set) == before


def test_dual_control_comes_before_anything_else(tmp_path: Path) -> None:
    of_set = deal(tmp_path / "set", "dual_control = true")
    with unlocked("registrar") as one, unlocked("harbour-office") as two:
        for keys in ((), (one,)):
            for act in (
                lambda keys: destroyed(of_set, "nobody", keys=keys, **THIRD),
                lambda keys: lost(of_set, "nobody", reason="x", keys=keys, **THIRD),
                lambda keys: close(of_set, keys=keys),
            ):
                with pytest.raises(ParameterError, match="the policy asks for dual control"):
                    act(keys)
        destroy(of_set, "registrar", keys=(one, two))
    assert [card.name for card in of_set.journal().signers(of_set.journal().entries[-1])] == [
        "registrar", "harbour-office",
    ]  # fmt: skip


def test_a_broken_journal_does_not_say_which_copies_there_are(of_set: SetFolder) -> None:
    for name in NAMES:
        destroy(of_set, name)
    journal = of_set.path / "journal.jsonl"
    lines = journal.read_bytes().splitlines(keepends=True)
    # The entry of a copy is taken out, and with it the copy would be forgotten.
    journal.write_bytes(b"".join(lines[:1] + lines[2:]))
    for act in (ending, close):
        with pytest.raises(VerificationError, match="the journal cannot be relied on: line 2: "):
            act(of_set)  # type: ignore[operator]


def test_a_folder_that_is_no_set_is_refused(tmp_path: Path) -> None:
    with pytest.raises((StorageError, DocumentError)):
        SetFolder(tmp_path)
