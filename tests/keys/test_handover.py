"""Handing over a dealt key: all or nothing, whatever stops it; and the folder that each custodian finds."""

from __future__ import annotations

from pathlib import Path

import pytest
from cli.harness import files_in
from parties import card, unlocked

from shares.documents.key_event import KeyBorn
from shares.errors import SetMismatchError, StorageError, VerificationError
from shares.group.edwards25519 import Scalar
from shares.keys import handover
from shares.keys.deal import DealtKey, deal
from shares.keys.folder import KeyFolder
from shares.keys.handover import check_places, hand_over
from shares.keys.own_share import own_share

NAMES = ("north-pier", "south-pier", "light-house")


@pytest.fixture(scope="module")
def dealt() -> DealtKey:
    with unlocked("harbour-office") as dealer:
        return deal(Scalar.drawn(), 2, [card(name) for name in NAMES], label="Harbour release key", dealer=dealer)


@pytest.fixture
def deliveries(tmp_path: Path) -> dict[str, Path]:
    for name in ("stick", "other"):
        (tmp_path / name).mkdir()
    return {name: tmp_path / ("other" if name == "light-house" else "stick") for name in NAMES}


def handed_over(dealt: DealtKey, target: Path, deliveries: dict[str, Path]) -> dict[str, Path]:
    with unlocked("harbour-office") as dealer:
        return hand_over(dealt, dealer, target, deliveries)


def test_each_custodian_finds_a_folder_to_work_with(
    dealt: DealtKey, tmp_path: Path, deliveries: dict[str, Path]
) -> None:
    places = handed_over(dealt, tmp_path / "key", deliveries)
    assert places == {name: deliveries[name] / name for name in NAMES}
    for name, place in places.items():
        folder = KeyFolder(place)
        with unlocked(name) as own:
            own_share(folder.share(), folder.record, name, own.open)
        (born,) = folder.journal().entries
        assert isinstance(born.event, KeyBorn)
        assert [one.name for one in folder.journal().signers(born)] == ["harbour-office"]
    office = KeyFolder(tmp_path / "key")
    assert (office.holds_share, office.record) == (False, dealt.record)
    with pytest.raises(StorageError, match="holds no key share"):
        office.share()
    modes = {name: mode & 0o777 for name, (mode, _) in files_in(tmp_path / "stick").items()}
    assert modes["north-pier"] == 0o700
    assert modes["north-pier/share.json"] == 0o600
    assert modes["north-pier/record.json"] == 0o644


@pytest.mark.parametrize("nth", range(1, 12))
def test_whatever_cannot_be_written_nothing_is_left(
    nth: int, dealt: DealtKey, tmp_path: Path, deliveries: dict[str, Path], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Eleven files: three for each of three custodians, and the dealer's two. Each in turn fails, or is interrupted."""
    for stop in (StorageError("no space left"), KeyboardInterrupt()):
        count, real = 0, handover.write_new

        def failing(*arguments: object, stop: BaseException = stop, real: object = real, **more: object) -> None:
            nonlocal count
            count += 1
            if count == nth and isinstance(stop, StorageError):
                raise stop
            real(*arguments, **more)  # type: ignore[operator]
            if count == nth:
                raise stop  # After it was written, before anybody has noted that.

        with monkeypatch.context() as patched:
            patched.setattr(handover, "write_new", failing)
            before = files_in(tmp_path)
            with pytest.raises(type(stop)):
                handed_over(dealt, tmp_path / "key", deliveries)
            assert files_in(tmp_path) == before
    handed_over(dealt, tmp_path / "key", deliveries)


def test_what_reads_back_otherwise_is_not_called_done(
    dealt: DealtKey, tmp_path: Path, deliveries: dict[str, Path], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(handover, "read_back", lambda path, limit: b"{}")
    with pytest.raises(VerificationError, match="differs"):
        handed_over(dealt, tmp_path / "key", deliveries)
    assert sorted(path.name for path in tmp_path.rglob("*")) == ["other", "stick"]


def test_a_record_that_cannot_be_removed_keeps_its_key_shares(
    dealt: DealtKey, tmp_path: Path, deliveries: dict[str, Path], monkeypatch: pytest.MonkeyPatch
) -> None:
    """The dealer's medium turns read-only between the writing of the record and the look at it."""
    record = tmp_path / "key" / "record.json"
    real_read, real_discard = handover.read_back, handover.discard

    def read_back(path: Path, limit: int) -> bytes:
        return b"{}" if path == record else real_read(path, limit=limit)

    def discard(path: Path) -> None:
        if path.parent == record.parent:
            raise StorageError("read-only file system")
        real_discard(path)

    monkeypatch.setattr(handover, "read_back", read_back)
    monkeypatch.setattr(handover, "discard", discard)
    with pytest.raises(VerificationError, match="differs"):
        handed_over(dealt, tmp_path / "key", deliveries)
    assert record.is_file()
    assert all((folder / name / "share.json").is_file() for name, folder in deliveries.items())


def test_nothing_of_another_key_is_touched(dealt: DealtKey, tmp_path: Path, deliveries: dict[str, Path]) -> None:
    handed_over(dealt, tmp_path / "key", deliveries)
    before = files_in(tmp_path)
    for target in ("key", "another"):
        with pytest.raises(StorageError, match="another key"):
            handed_over(dealt, tmp_path / target, deliveries)
    assert files_in(tmp_path) == before


def test_places_are_looked_at_first(tmp_path: Path, deliveries: dict[str, Path]) -> None:
    check_places(tmp_path / "key", deliveries)
    with pytest.raises(StorageError, match="delivery folder of dry-dock is not there"):
        check_places(tmp_path / "key", deliveries | {"dry-dock": tmp_path / "missing"})
    (tmp_path / "key").mkdir()
    (tmp_path / "key" / ".record.json.0123456789abcdef.partial").write_bytes(b"")
    with pytest.raises(StorageError, match="did not finish"):
        check_places(tmp_path / "key", deliveries)
    (tmp_path / "new").mkdir()
    (tmp_path / "stick" / "north-pier").symlink_to(tmp_path / "nowhere")
    with pytest.raises(StorageError, match="north-pier"):
        check_places(tmp_path / "new", deliveries)


def test_a_share_of_another_key_in_the_folder_is_refused(
    dealt: DealtKey, tmp_path: Path, deliveries: dict[str, Path]
) -> None:
    places = handed_over(dealt, tmp_path / "key", deliveries)
    (places["north-pier"] / "share.json").unlink()
    with unlocked("harbour-office") as dealer:
        other = deal(Scalar.drawn(), 2, [card(name) for name in NAMES], label="Another", dealer=dealer)
    (places["north-pier"] / "share.json").write_bytes(other.shares[0].to_file())
    with pytest.raises(SetMismatchError):
        KeyFolder(places["north-pier"]).share()
