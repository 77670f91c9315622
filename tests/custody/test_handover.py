"""Handing over: every share written, read back, verified and tried, then the record, last; or nothing at all.

Checked against: what lies in the folders afterwards. Every step that can fail is made to fail, one at a time.
"""

from __future__ import annotations

import dataclasses
import errno
import json
import math
import os
import stat
from pathlib import Path

import pytest
from parties import QUICK, by, card, passphrase, unlocked
from strategies import HARBOUR, crooked_split, flat, presented, revealed

from shares import memory
from shares.custody import handover, packing
from shares.custody.handover import check_targets, hand_over, other_shares, share_path
from shares.custody.packing import WRAPPED_SUFFIX, Packing
from shares.custody.presented import load_record, load_shares
from shares.custody.recover import recover
from shares.custody.split import Dealt, flat_rule, split
from shares.custody.verify import examine
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import passphrase_sealer
from shares.errors import StorageError, VerificationError
from shares.memory import Secret

SECRET = b"not a real key, made up for a test"


@pytest.fixture
def dealt() -> Dealt:
    return split(Secret.of(SECRET), flat(2, 3), label="Tide archive")


@pytest.fixture
def places(tmp_path: Path) -> tuple[Path, dict[str, Path]]:
    """A set folder that is not there yet, and a delivery folder for each custodian."""
    deliveries = {name: tmp_path / "media" / name for name in HARBOUR[:3]}
    for folder in deliveries.values():
        folder.mkdir(parents=True, mode=0o700)
    return tmp_path / "set", deliveries


def files(tmp_path: Path) -> list[str]:
    return sorted(str(path.relative_to(tmp_path)) for path in tmp_path.rglob("*") if not path.is_dir())


def test_the_files_are_private_and_complete_and_recover(dealt, places, tmp_path) -> None:
    done = hand_over(dealt, *places)
    assert files(tmp_path) == sorted(
        ["set/journal.jsonl", "set/record.json", *(f"media/{name}/{name}.share.json" for name in HARBOUR[:3])]
    )
    assert stat.S_IMODE(done.record.stat().st_mode) == 0o644
    assert stat.S_IMODE(done.record.parent.stat().st_mode) == 0o700
    assert {stat.S_IMODE(path.stat().st_mode) for path in done.shares.values()} == {0o600}
    assert (done.trials, done.quorums) == (3, 3)
    record, shares = load_record(done.record), load_shares(list(done.shares.values()))
    assert {finding.status.value for finding in examine(shares, record)} == {"intact"}
    assert revealed(recover(shares[1:], record).secret) == SECRET


def test_all_shares_may_go_to_one_folder(dealt, tmp_path) -> None:
    tmp_path.joinpath("out").mkdir()
    hand_over(dealt, tmp_path / "set", dict.fromkeys(HARBOUR[:3], tmp_path / "out"))
    assert len(files(tmp_path)) == 5


def test_every_quorum_is_tried_up_to_a_thousand_and_beyond_each_share(tmp_path) -> None:
    """C(12, 4) = 495 quorums are all tried; C(14, 5) = 2,002 are sampled so that each share takes part."""
    for need, total, trials in ((4, 12, 495), (5, 14, None)):
        out = tmp_path / f"{need}-of-{total}"
        out.mkdir()
        names = [f"pier {i}" for i in range(total)]
        dealt = split(Secret.of(SECRET), flat_rule(need, names), label="Tide archive")
        seen: list[tuple[int, int]] = []
        done = hand_over(
            dealt,
            out / "set",
            dict.fromkeys(names, out),
            progress=lambda done, all_, seen=seen: seen.append((done, all_)),
        )
        assert done.quorums == math.comb(total, need)
        assert done.trials == (trials or -(-total // need))
        assert seen == [(i, done.trials) for i in range(done.trials)]


# What is refused before anything is written.


def test_a_missing_delivery_folder_is_refused_and_not_made(dealt, places, tmp_path) -> None:
    places[1]["south-pier"].rmdir()
    with pytest.raises(StorageError, match="south-pier is not there"):
        hand_over(dealt, *places)
    assert files(tmp_path) == []
    assert not places[0].exists()


def test_a_delivery_folder_that_may_not_be_entered_is_refused_not_stumbled_over(dealt, places, monkeypatch) -> None:
    """stat(2) answers EACCES below a folder without search permission; as root it cannot be had for real."""
    real = os.stat

    def no_entry(path, *args, **kwargs):
        if os.fspath(path).endswith("south-pier"):
            raise PermissionError(errno.EACCES, os.strerror(errno.EACCES), path)
        return real(path, *args, **kwargs)

    monkeypatch.setattr(os, "stat", no_entry)
    with pytest.raises(StorageError, match="south-pier"):
        check_targets(*places)


@pytest.mark.parametrize("kind", ["file", "link", "dangling link", "folder"])
@pytest.mark.parametrize("name", ["record", "share"])
def test_whatever_has_the_name_already_is_kept(dealt, places, tmp_path, kind, name) -> None:
    target = places[0] / "record.json" if name == "record" else share_path(places[1]["south-pier"], "south-pier")
    target.parent.mkdir(exist_ok=True)
    other = tmp_path / "other"
    other.write_bytes(b"kept")
    if kind == "file":
        target.write_bytes(b"kept")
    elif kind == "folder":
        target.mkdir()
    else:
        target.symlink_to(other if kind == "link" else tmp_path / "nowhere")
    before = files(tmp_path)
    with pytest.raises(StorageError):
        hand_over(dealt, *places)
    assert files(tmp_path) == before
    assert other.read_bytes() == b"kept"


@pytest.mark.parametrize("where", ["set", "media"])
def test_what_a_killed_run_left_is_named(dealt, places, where) -> None:
    folder = places[0] if where == "set" else places[1]["light-house"]
    folder.mkdir(exist_ok=True)
    left = folder / f".record.json.{'0' * 16}.partial"
    left.write_bytes(b"")
    with pytest.raises(StorageError, match=left.name):
        check_targets(*places)


def test_bare_shares_that_lie_in_the_delivery_folders_already_are_listed(places) -> None:
    _, deliveries = places
    assert other_shares(deliveries) == []
    for name in ("one.share.json", "two.share.json", "record.json"):
        (deliveries["south-pier"] / name).write_bytes(b"")
    expected = [deliveries["south-pier"] / name for name in ("one.share.json", "two.share.json")]
    assert other_shares({**deliveries, "again": deliveries["south-pier"]}) == expected
    assert other_shares({"nobody": deliveries["south-pier"] / "nowhere"}) == []


# Failures on the way. After each, no file of the act is there: never a record without its shares.


class Failure(Exception):
    """What no code of the package raises or expects."""


def failing(monkeypatch, function: str, at: int, error: BaseException) -> list[int]:
    """Make the call number ``at`` of a function of the module fail; return where calls are counted."""
    real, calls = getattr(handover, function), []

    def stand_in(*args, **kwargs):
        calls.append(1)
        if len(calls) == at:
            raise error
        return real(*args, **kwargs)

    monkeypatch.setattr(handover, function, stand_in)
    return calls


ERRORS = [StorageError("the medium is full"), KeyboardInterrupt(), MemoryError(), Failure()]


@pytest.mark.parametrize("error", ERRORS, ids=lambda error: type(error).__name__)
@pytest.mark.parametrize(
    ("function", "at"),
    [
        *(("write_new", at) for at in range(1, 5)),
        *(("read_back", at) for at in range(1, 5)),
        ("examine", 1),
        *(("recover_payload", at) for at in range(1, 4)),
        *(("is_committed", at) for at in range(1, 4)),
    ],
)
def test_a_failure_at_any_step_leaves_nothing(dealt, places, tmp_path, monkeypatch, function, at, error) -> None:
    calls = failing(monkeypatch, function, at, error)
    with pytest.raises(type(error)):
        hand_over(dealt, *places)
    assert len(calls) >= at
    assert files(tmp_path) == []


def test_a_progress_report_that_fails_leaves_nothing(dealt, places, tmp_path) -> None:
    def report(done: int, total: int) -> None:
        raise Failure

    with pytest.raises(Failure):
        hand_over(dealt, *places, progress=report)
    assert files(tmp_path) == []


@pytest.mark.parametrize("edit", [False, True])
def test_a_share_that_comes_back_changed_leaves_nothing(dealt, places, tmp_path, monkeypatch, edit) -> None:
    """South pier's file reads back as north pier's, whole share, or as south pier's with another label."""
    real = handover.read_back
    north, south = dealt.shares[:2]
    instead = south.model_copy(update={"label": "Another label"}).to_file() if edit else north.to_file()

    def changed(path, *, limit):
        return instead if Path(path).name == "south-pier.share.json" else real(path, limit=limit)

    monkeypatch.setattr(handover, "read_back", changed)
    with pytest.raises(VerificationError):
        hand_over(dealt, *places)
    assert files(tmp_path) == []


def test_a_dealing_that_does_not_recover_is_never_handed_over(places, tmp_path) -> None:
    def bend(dealing) -> None:
        with dealing.points["south-pier"][0].row.view() as row:
            row[0] ^= 1

    dealt = crooked_split(SECRET, flat(2, 3), bend=bend)
    with pytest.raises(VerificationError, match="inconsistent dealing"):
        hand_over(dealt, *places)
    assert files(tmp_path) == []


def test_a_dealing_that_verifies_but_recovers_another_secret_is_never_handed_over(
    places, tmp_path, monkeypatch
) -> None:
    """A dealer whose commitment, in shares and record alike, is to something else than what was shared."""
    monkeypatch.setattr("strategies.commitment", lambda set_id, payload: bytes(32))
    dealt = crooked_split(SECRET, flat(2, 3))
    assert {finding.status.value for finding in examine(presented(dealt.shares), dealt.record)} == {"intact"}
    with pytest.raises(VerificationError, match="trial recovery"):
        hand_over(dealt, *places)
    assert files(tmp_path) == []


def test_a_record_that_comes_back_changed_is_removed_with_the_shares(dealt, places, tmp_path, monkeypatch) -> None:
    """The medium spoils the record: it once stayed, as it was no longer what had been written, and the shares went."""
    real = handover.read_back

    def spoiled(path, *, limit):
        return real(path, limit=limit) + (b" " if Path(path).name == "record.json" else b"")

    monkeypatch.setattr(handover, "read_back", spoiled)
    with pytest.raises(VerificationError, match="what is read back differs"):
        hand_over(dealt, *places)
    assert files(tmp_path) == []


def test_a_record_that_cannot_be_removed_keeps_its_shares(dealt, places, tmp_path, monkeypatch) -> None:
    real_read, real_discard = handover.read_back, handover.discard

    def unreadable(path, *, limit):
        if Path(path).name == "record.json":
            raise StorageError("the medium reports an error")
        return real_read(path, limit=limit)

    def stuck(path):
        if Path(path).name == "record.json":
            raise StorageError("the medium is read-only")
        real_discard(path)

    monkeypatch.setattr(handover, "read_back", unreadable)
    monkeypatch.setattr(handover, "discard", stuck)
    with pytest.raises(StorageError, match="reports an error"):
        hand_over(dealt, *places)
    monkeypatch.undo()
    shares = load_shares([share_path(places[1][name], name) for name in HARBOUR[:3]])
    assert {finding.status.value for finding in examine(shares, load_record(places[0] / "record.json"))} == {"intact"}


def test_a_share_that_cannot_be_removed_does_not_keep_the_others(dealt, places, tmp_path, monkeypatch) -> None:
    real = handover.discard

    def stuck(path):
        if Path(path).name == "south-pier.share.json":
            raise StorageError("the medium is read-only")
        real(path)

    monkeypatch.setattr(handover, "discard", stuck)
    failing(monkeypatch, "recover_payload", 1, Failure())
    with pytest.raises(Failure):
        hand_over(dealt, *places)
    assert files(tmp_path) == ["media/south-pier/south-pier.share.json"]


@pytest.mark.parametrize("name", ["record.json", "south-pier.share.json"])
@pytest.mark.parametrize("ours", [True, False])
def test_an_interrupt_just_after_a_file_was_written_undoes_only_our_own(
    dealt, places, tmp_path, monkeypatch, ours, name
):
    """Another process may win a name; what it wrote is not ours to remove."""
    real = handover.write_new

    def interrupted(path, data, *, secret):
        if Path(path).name == name:
            real(path, data if ours else b"{}", secret=secret)
            raise KeyboardInterrupt
        real(path, data, secret=secret)

    monkeypatch.setattr(handover, "write_new", interrupted)
    with pytest.raises(KeyboardInterrupt):
        hand_over(dealt, *places)
    assert [Path(left).name for left in files(tmp_path)] == ([] if ours else [name])


# Wrapped shares, a signed record, and files beside it.

NORTH, SOUTH, LIGHT = HARBOUR[:3]


@pytest.fixture
def packings(monkeypatch) -> dict[str, Packing]:
    """One wrapped by passphrase, one for a card by each suite; stretching is cheap."""
    monkeypatch.setattr(packing, "passphrase_sealer", lambda secret: passphrase_sealer(secret, QUICK))
    return {
        NORTH: Packing.by_passphrase(passphrase(NORTH)),
        SOUTH: Packing.for_card(card(SOUTH)),
        LIGHT: Packing.for_card(card(LIGHT), "x25519"),
    }


def test_each_share_is_packed_as_asked_and_opens(dealt, places, packings, tmp_path) -> None:
    done = hand_over(dealt, *places, packings=packings)
    assert files(tmp_path) == sorted(
        ["set/journal.jsonl", "set/record.json", *(f"media/{name}/{name}.wrapped.json" for name in HARBOUR[:3])]
    )
    assert {stat.S_IMODE(path.stat().st_mode) for path in done.shares.values()} == {0o600}
    assert (done.trials, done.quorums) == (3, 3)
    for name, dealt_share in zip(HARBOUR[:3], dealt.shares, strict=True):
        wrapped = WrappedShare.parse(done.shares[name].read_bytes())
        with unlocked(name) as key:
            opened = wrapped.open(by(name) if name == NORTH else key.open)
        assert opened.to_file() == dealt_share.to_file()
        assert json.loads(done.shares[name].read_bytes())["record"] == dealt.record.fingerprint


def test_bare_and_wrapped_shares_may_be_handed_over_together(dealt, places, packings, tmp_path) -> None:
    done = hand_over(dealt, *places, packings={**packings, SOUTH: Packing.bare()})
    assert done.shares[SOUTH].name == "south-pier.share.json"
    assert done.shares[NORTH].name == "north-pier.wrapped.json"


def test_the_signatures_of_the_dealer_and_of_witnesses_go_into_the_record(dealt, places) -> None:
    fingerprint = dealt.record.fingerprint
    with unlocked("harbour-office") as dealer, unlocked("registrar") as witness:
        done = hand_over(dealt.signed(dealer, "dealer").signed(witness, "witness"), *places)
    record = load_record(done.record)
    signers = [(one.card.name, one.role) for one in record.signatures]
    assert signers == [("harbour-office", "dealer"), ("registrar", "witness")]
    assert record.fingerprint == fingerprint
    shares = load_shares(list(done.shares.values()))
    assert {finding.status.value for finding in examine(shares, record)} == {"intact"}


@pytest.mark.parametrize("suffix", [".share.json", WRAPPED_SUFFIX])
def test_a_share_of_either_form_that_has_the_place_already_is_kept(dealt, places, packings, suffix, tmp_path) -> None:
    """Whichever form is to be written: a bare one beside a wrapped one would be one custodian's share twice."""
    path = share_path(places[1][SOUTH], SOUTH, suffix)
    path.write_bytes(b"kept")
    for chosen in (packings, None):
        with pytest.raises(StorageError, match="of another split"):
            hand_over(dealt, *places, packings=chosen)
    assert files(tmp_path) == [str(path.relative_to(tmp_path))]


@pytest.mark.parametrize("name", HARBOUR[:3])
@pytest.mark.parametrize("bend", ["cut", "changed", "another's", "bare"])
def test_a_wrapped_share_that_comes_back_changed_leaves_nothing(
    dealt, places, packings, tmp_path, monkeypatch, name, bend
) -> None:
    real = handover.read_back
    other = next(one for one in HARBOUR[:3] if one != name)
    instead = {
        "another's": packings[other].pack(dealt.shares[HARBOUR.index(other)]),
        "bare": dealt.shares[HARBOUR.index(name)].to_file(),
    }

    def changed(path, *, limit):
        data = real(path, limit=limit)
        if not Path(path).name.startswith(name):
            return data
        at = data.index(b'"sealed"') + 15
        return {"cut": data[:-20], "changed": data[:at] + bytes([data[at] ^ 3]) + data[at + 1 :], **instead}[bend]

    monkeypatch.setattr(handover, "read_back", changed)
    with pytest.raises((VerificationError, ValueError)):
        hand_over(dealt, *places, packings=packings)
    assert files(tmp_path) == []


@pytest.mark.parametrize("function", ["pack", "unpack"])
@pytest.mark.parametrize("name", HARBOUR[:3])
@pytest.mark.parametrize("error", ERRORS, ids=lambda error: type(error).__name__)
def test_a_failure_in_packing_leaves_nothing(dealt, places, packings, tmp_path, function, name, error) -> None:
    def stand_in(*_):
        raise error

    broken = dataclasses.replace(packings[name], **{function: stand_in})
    with pytest.raises(type(error)):
        hand_over(dealt, *places, packings={**packings, name: broken})
    assert files(tmp_path) == []


def test_the_shares_that_were_opened_to_be_tried_are_wiped(dealt, places, packings) -> None:
    before = set(memory._open)
    hand_over(dealt, *places, packings=packings)
    assert set(memory._open) <= before


COMPANIONS = {"policy.toml": b'label = "Tide archive"\n', "acknowledgements/north-pier.json": b"{}\n"}


def test_files_beside_the_record_are_written_whole_and_private(dealt, places, tmp_path) -> None:
    done = hand_over(dealt, *places, companions=COMPANIONS)
    assert done.companions == {name: places[0] / name for name in COMPANIONS}
    assert {name: path.read_bytes() for name, path in done.companions.items()} == COMPANIONS
    assert {stat.S_IMODE(path.stat().st_mode) for path in done.companions.values()} == {0o600}


def test_a_file_beside_the_record_that_is_there_already_is_kept(dealt, places, tmp_path) -> None:
    places[0].mkdir()
    (places[0] / "policy.toml").write_bytes(b"kept")
    with pytest.raises(StorageError, match=r"found 1 file\(s\) of another split.*policy\.toml"):
        hand_over(dealt, *places, companions=COMPANIONS)
    assert files(tmp_path) == ["set/policy.toml"]


@pytest.mark.parametrize("at", range(4, 7))
@pytest.mark.parametrize("function", ["write_new", "read_back"])
def test_a_failure_at_a_file_beside_the_record_leaves_nothing(
    dealt, places, tmp_path, monkeypatch, function, at
) -> None:
    """The fourth and fifth files are companions, the sixth the record."""
    failing(monkeypatch, function, at, Failure())
    with pytest.raises(Failure):
        hand_over(dealt, *places, companions=COMPANIONS)
    assert files(tmp_path) == []


def test_a_file_beside_the_record_that_comes_back_changed_leaves_nothing(dealt, places, tmp_path, monkeypatch) -> None:
    real = handover.read_back
    monkeypatch.setattr(
        handover, "read_back", lambda path, *, limit: real(path, limit=limit) + b" " * (Path(path).suffix == ".toml")
    )
    with pytest.raises(VerificationError, match="what is read back differs"):
        hand_over(dealt, *places, companions=COMPANIONS)
    assert files(tmp_path) == []
