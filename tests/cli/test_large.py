"""Large secrets by the command line: encrypted beside the record, opened only whole."""

from __future__ import annotations

import os
import signal
import subprocess
from pathlib import Path

import pytest
from cli.harness import PROGRAM, PURPOSE, Place, assert_refused, files_in, run

from shares.custody.parties import write_party
from shares.documents.party import new_party
from shares.documents.wrapping import Cost
from shares.memory import Secret

LARGE = os.urandom(3 * (1 << 20) + 17)


@pytest.fixture
def place(tmp_path: Path) -> Place:
    place = Place.make(tmp_path / "place", LARGE)
    done = place.split()
    assert "No shares recover the secret without this file" in done.out
    return place


def encrypted(place: Place) -> Path:
    return place.set / "secret.encrypted"


def recover(place: Place, *more: str | Path) -> list[str | Path]:
    return ["recover", *place.shares[:2], "--record", place.record, *PURPOSE, *more]


def test_a_large_secret_goes_in_and_out(place: Place) -> None:
    out = place.folder / "out"
    assert run(*recover(place, "--encrypted", encrypted(place), "--to", out)).code == 0
    assert out.read_bytes() == LARGE
    assert out.stat().st_mode & 0o777 == 0o600
    done = run(*recover(place, "--encrypted", encrypted(place), "--json", "--", "sha256sum"))
    assert (done.code, done.json["encrypted_file"]) == (0, run("show", place.record, "--json").json["encrypted_file"])
    assert run(*recover(place, "--encrypted", encrypted(place), "--check")).code == 0


def test_a_small_one_is_encrypted_when_asked_for(tmp_path: Path) -> None:
    place = Place.make(tmp_path / "small", b"short")
    told = run(*place.split_arguments(more=["--plain", "--encrypt", "--json"])).json
    assert told["encrypted_file"] == str(encrypted(place))
    out = place.folder / "out"
    assert run(*recover(place, "--encrypted", encrypted(place), "--to", out)).code == 0
    assert out.read_bytes() == b"short"


@pytest.mark.parametrize("size", [65536, 65537])
def test_the_bound_is_64_kib(tmp_path: Path, size: int) -> None:
    place = Place.make(tmp_path / "bound", bytes(size))
    place.split()
    assert encrypted(place).exists() is (size > 65536)


def test_the_file_is_needed_and_only_where_there_is_one(place: Place, tmp_path: Path) -> None:
    for what in (["--check"], ["--to", place.folder / "out"], ["--", "true"]):
        assert_refused(recover(place, *what), 2, "encrypted file", "--encrypted FILE", watched=place.folder)
    small = Place.make(tmp_path / "small")
    small.split()
    refused = recover(small, "--encrypted", encrypted(place), "--check")
    assert_refused(refused, 2, "the secret itself", watched=place.folder)
    refused = ["verify", "--record", small.record, "--encrypted", encrypted(place)]
    assert_refused(refused, 2, "names no encrypted file", watched=place.folder)


def damaged(place: Place, how: str) -> Path:
    whole = encrypted(place).read_bytes()
    changed = {
        "cut short": whole[:-1],
        "cut at a chunk": whole[: -(17 + 16)],
        "extended": whole + b"\0",
        "a bit": whole[:2_000_000] + bytes([whole[2_000_000] ^ 1]) + whole[2_000_001:],
        "empty": b"",
    }[how]
    path = place.folder / "damaged"
    path.write_bytes(changed)
    return path


def beside_the_journal(place: Place) -> dict[str, tuple[int, bytes | None]]:
    """All files but the journal: the key was recovered all the same, so an entry says so."""
    return {name: held for name, held in files_in(place.folder).items() if name != "set/journal.jsonl"}


@pytest.mark.parametrize("how", ["cut short", "cut at a chunk", "extended", "a bit", "empty"])
def test_a_damaged_file_is_refused_before_any_plaintext_exists(place: Place, how: str) -> None:
    path = damaged(place, how)
    out, marker = place.folder / "out", place.folder / "marker"
    before = beside_the_journal(place)
    assert_refused(recover(place, "--encrypted", path, "--to", out), 4)
    assert_refused(recover(place, "--encrypted", path, "--", "touch", marker), 4)
    assert beside_the_journal(place) == before  # The command was not even started.
    assert_refused(["verify", "--record", place.record, "--encrypted", path], 4, watched=place.folder)


def test_show_knows_the_file_by_its_beginning(place: Place) -> None:
    told = run("show", encrypted(place), "--json").json
    assert (told["kind"], told["set"], told["bytes"]) == (
        "encrypted-file",
        run("show", place.record, "--json").json["set"],
        encrypted(place).stat().st_size,
    )
    assert "shares verify --record" in run("show", encrypted(place)).out
    policy = place.folder / "policy.toml"
    policy.write_text("[rule]")
    assert_refused(["show", policy], 4, "shares plan")


def test_an_auditor_checks_the_file_without_any_key(place: Place) -> None:
    done = run("verify", "--record", place.record, "--encrypted", encrypted(place))
    assert (done.code, "whole" in done.out) == (0, True)


def test_a_receiver_gets_the_key_sealed_and_opens_the_file(place: Place) -> None:
    key = new_party("harbour-office", Secret.of(b"pass"), cost=Cost(memory=8, passes=1, lanes=1))
    key_path, card_path = write_party(key, place.folder)
    (place.folder / "pass").write_text("pass")
    sealed, out = place.folder / "sealed.json", place.folder / "out"
    assert run(*recover(place, "--for", card_path, "--encrypted", encrypted(place), "--to", sealed)).code == 0
    opening = ["unwrap", sealed, "--key", key_path, "--passphrase-file", place.folder / "pass", "--to", out]
    assert_refused(opening, 2, "--encrypted", watched=place.folder)
    assert run(*opening, "--encrypted", encrypted(place)).code == 0
    assert out.read_bytes() == LARGE


def test_a_failed_split_leaves_no_encrypted_file(tmp_path: Path) -> None:
    place = Place.make(tmp_path / "place", LARGE)
    (place.folder / "taken").mkdir()
    names = ["north-pier", "south-pier", "x" * 250]
    assert run(*place.split_arguments(names=names)).code == 2
    assert not encrypted(place).exists()


def test_once_the_record_stands_the_encrypted_file_stays(tmp_path: Path) -> None:
    """It was once removed again when the result could not be printed: the shares were then worth nothing."""
    place = Place.make(tmp_path / "place", LARGE)
    with open("/dev/full", "w") as full:
        done = subprocess.run([PROGRAM, *place.split_arguments()], stdout=full, stderr=subprocess.PIPE, check=False)
    assert done.returncode == 5
    assert b"what was asked for is done all the same" in done.stderr
    assert run(*recover(place, "--encrypted", encrypted(place), "--check")).code == 0


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM, signal.SIGQUIT])
def test_a_signal_while_encrypting_leaves_nothing(tmp_path: Path, number: signal.Signals) -> None:
    place = Place.make(tmp_path / "place", b"")
    process = subprocess.Popen(
        [PROGRAM, *place.split_arguments(source="-", more=["--plain", "--encrypt"])],
        stdin=subprocess.PIPE,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
    )
    assert process.stdin
    process.stdin.write(LARGE)
    process.stdin.flush()
    process.send_signal(number)
    _, told = process.communicate(timeout=60)
    assert (process.returncode, b"stopped before it was done" in told) == (1, True)
    left = [name for name, (_, content) in files_in(place.folder).items() if content is not None]
    assert left == ["key"]
