"""Accepting a custodian's duties: read first, then signed, or printed, signed by hand and entered."""

from __future__ import annotations

import hashlib
from pathlib import Path

import pytest
from cli.harness import assert_refused, run
from cli.terminal import on_terminal

from shares.custody.parties import write_party
from shares.documents.acknowledgement import DUTIES, Acknowledgement
from shares.documents.party import new_party
from shares.documents.wrapping import Cost
from shares.memory import Secret

LABEL = "Tide archive root"


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """The party north-pier; its passphrase is in a file."""
    write_party(new_party("north-pier", Secret.of(b"made up"), cost=Cost(memory=8, passes=1, lanes=1)), tmp_path)
    (tmp_path / "passphrase").write_text("made up\n")
    return tmp_path


def signing(folder: Path, *more: str | Path) -> list[str | Path]:
    key = ["--key", folder / "north-pier.key.json", "--passphrase-file", folder / "passphrase"]
    return ["acknowledge", "--label", LABEL, "--to", folder / "ack", *key, *more]


def test_a_script_signs_and_is_shown_the_duties(folder: Path) -> None:
    done = run(*signing(folder))
    assert done.code == 0
    assert all(duty in done.err for duty in DUTIES)
    found = Acknowledgement.parse((folder / "ack").read_bytes())
    assert (found.custodian, found.label, found.duties, found.form) == ("north-pier", LABEL, DUTIES, None)
    assert found.card is not None
    assert found.card.name == "north-pier"
    shown = run("show", folder / "ack")
    assert (shown.code, "by north-pier, card" in shown.out) == (0, True)


@pytest.mark.parametrize(("answer", "code"), [("y", 0), ("n", 1), ("", 1)])
def test_a_person_reads_before_they_accept(folder: Path, answer: str, code: int) -> None:
    with on_terminal(*signing(folder)) as terminal:
        terminal.wait_for(DUTIES[-1][:40])
        terminal.answer("Does north-pier accept them? [y/N]:", answer)
        assert terminal.finish()[0] == code
    assert (folder / "ack").exists() is (code == 0)


def test_a_form_is_printed_signed_and_entered(folder: Path) -> None:
    named = ["acknowledge", "--label", LABEL, "--custodian", "dry-dock"]
    assert run(*named, "--page", "--to", folder / "form.html").code == 0
    assert b"dry-dock" in (folder / "form.html").read_bytes()
    (folder / "scan").write_bytes(b"signed by hand")
    told = run(*named, "--form", folder / "scan", "--to", folder / "ack", "--json").json
    assert told["custodian"] == "dry-dock"
    found = Acknowledgement.parse((folder / "ack").read_bytes())
    assert (found.form, found.card) == (hashlib.sha256(b"signed by hand").digest(), None)


def test_a_key_of_another_is_cautioned_about(folder: Path) -> None:
    done = run(*signing(folder, "--custodian", "dry-dock"))
    assert (done.code, "Caution: the key is of north-pier" in done.err) == (0, True)


def test_bad_input_is_refused_and_nothing_is_written(folder: Path) -> None:
    base = ["acknowledge", "--label", LABEL, "--to", folder / "ack"]
    assert_refused(base, 2, "exactly one of --key KEY, --page and --form SCAN", watched=folder)
    assert_refused([*base, "--page"], 2, "--custodian NAME is needed", watched=folder)
    scan = ["--form", folder / "missing", "--custodian", "dry-dock"]
    assert_refused([*base, *scan], 5, "does not exist", watched=folder)
    assert_refused([*base, "--page", "--custodian", "a/b"], 2, "path separator", watched=folder)
    (folder / "ack").write_text("taken")
    done = run(*base, "--page", "--custodian", "dry-dock")
    assert (done.code, (folder / "ack").read_text()) == (5, "taken")
