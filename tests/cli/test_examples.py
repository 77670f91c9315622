"""The examples that each ``--help`` shows are run as they stand, in a folder where what they name is there.

Only what lies outside such a folder is brought into it: the medium, the RAM disk and the home of whoever asks.
"""

from __future__ import annotations

import os
import re
import shutil
import subprocess
from pathlib import Path

import pytest
from cli.harness import NAMES, PROGRAM, Place, run
from cli.keyed import key_before
from cryptography.hazmat.primitives import serialization
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

from shares.custody.parties import write_party
from shares.custody.presented import load_record
from shares.documents.party import new_party
from shares.documents.share import Share
from shares.documents.wrapped_share import WrappedShare
from shares.documents.wrapping import Cost, card_sealer, passphrase_sealer
from shares.memory import Secret

POLICIES = Path(__file__).resolve().parents[2] / "examples" / "policies"
PAGES: list[tuple[str, ...]] = [
    (),
    ("split",),
    ("verify",),
    ("recover",),
    ("show",),
    ("acknowledge",),
    ("wrap",),
    ("unwrap",),
    ("record",),
    ("record", "sign"),
    ("party",),
    ("party", "new"),
    ("party", "show"),
    ("party", "passphrase"),
    ("passphrase",),
    ("polynomial",),
    ("polynomial", "list"),
    ("polynomial", "check"),
    ("ceremony",),
    ("ceremony", "script"),
    ("ceremony", "log"),
    ("ceremony", "report"),
    ("retire",),
    ("retire", "status"),
    ("retire", "destroyed"),
    ("retire", "lost"),
    ("retire", "affidavit"),
    ("retire", "close"),
    ("attest",),
    ("attest", "challenge"),
    ("attest", "answer"),
    ("attest", "check"),
    ("drill",),
    ("drill", "open"),
    ("drill", "rehearse"),
    ("drill", "close"),
    ("drill", "roster"),
    ("journal",),
    ("journal", "show"),
    ("journal", "add"),
    ("journal", "verify"),
    ("journal", "head"),
    ("audit",),
    ("audit", "pack"),
    ("key",),
    ("key", "deal"),
    ("key", "join"),
    ("key", "commit"),
    ("key", "sign"),
    ("key", "root"),
    ("key", "certify"),
    ("key", "revoke"),
    ("key", "open"),
    ("key", "finish"),
    ("key", "show"),
    ("key", "verify"),
    ("task",),
    ("task", "next"),
    ("task", "show"),
    ("task", "drop"),
    ("sheet",),
    ("selftest",),
    ("completion",),
]
# Examples that show a refusal or a finding, and what their exit codes are: of a head that the journal never had, of an
# audit of a set that nobody has attested yet.
CODES = {"shares polynomial check 0x11c": 4, "shares journal verify": 4, "shares audit": 6}


def examples(page: tuple[str, ...]) -> list[str]:
    """The lines after ``Example:`` in a help page, continued lines joined."""
    text = run(*page, "--help").out.replace("\\\n", " ")
    found = re.search(r"^ *Examples?:\n((?: +shares .*\n)+)", text, flags=re.MULTILINE)
    return [re.sub(r"\s+", " ", line.strip()) for line in found[1].splitlines()] if found else []


QUICK = Cost(memory=8, passes=1, lanes=1)


def passphrase(name: str) -> Secret:
    return Secret.of(f"the passphrase of {name}".encode())


@pytest.fixture
def prepared(tmp_path: Path) -> Path:
    """A key, and in the same folder the shares, bare and wrapped, the record, and the parties of a set."""
    key = Ed25519PrivateKey.generate().private_bytes(
        serialization.Encoding.PEM, serialization.PrivateFormat.PKCS8, serialization.NoEncryption()
    )
    place = Place.make(tmp_path / "made", key)
    place.split(need=3, names=NAMES)
    for path in [*place.drop.iterdir()]:
        path.rename(tmp_path / path.name)
    keys = {}
    for name in (*NAMES, "auditor-east", "auditor-west", "harbour-office", "new"):
        (tmp_path / f"{name}.passphrase").write_text(f"the passphrase of {name}\n")
        if name != "new":
            keys[name] = new_party(name, passphrase(name), cost=QUICK)
            write_party(keys[name], tmp_path)
    for name in ("north-pier", "dry-dock", "registrar"):
        seal = (
            card_sealer(keys[name].card.recipient())
            if name == "registrar"
            else passphrase_sealer(passphrase(name), QUICK)
        )
        share = Share.parse((tmp_path / f"{name}.share.json").read_bytes())
        (tmp_path / f"{name}.wrapped.json").write_bytes(WrappedShare.wrap(share, seal).to_file())
    with keys["harbour-office"].open(passphrase("harbour-office")) as dealer:
        signed = load_record(place.record).signed(dealer, "dealer")
    (tmp_path / "record.json").write_bytes(signed.to_file())
    policy = (POLICIES / "tide-archive.toml").read_text()
    (tmp_path / "policy.toml").write_text(
        re.sub(r'^(name = "(.*)")$', r'\1\ncard = "\2.card.json"', policy, flags=re.M)
    )
    (tmp_path / "scan.pdf").write_bytes(b"a form, signed by hand")
    shutil.copytree(place.set, tmp_path / "tide-archive")
    for folder in ("media/stick", "dev/shm/handover", "home/.local/share/bash-completion/completions"):
        (tmp_path / folder).mkdir(parents=True)
    return tmp_path


def go_before(page: tuple[str, ...], folder: Path) -> None:
    """Do what an example takes to be done."""
    script, of_set = folder / "ceremony" / "script.json", folder / "tide-archive"
    if page in (("ceremony", "log"), ("ceremony", "report")):
        assert run("ceremony", "script", folder / "policy.toml", "--to", script.parent).code == 0
    if page == ("ceremony", "report"):
        assert run("ceremony", "log", of_set, "--script", script, "--step", "1", "--initials", "A.K.").code == 0
    office = ("--sign", folder / "harbour-office.key.json", "--passphrase-file", folder / "harbour-office.passphrase")
    if page in (("attest", "answer"), ("attest", "check")):
        assert run("attest", "challenge", of_set, "--to", folder / "challenge.json", *office).code == 0
    if page == ("attest", "check"):
        answer = ["attest", "answer", folder / "challenge.json", "--record", folder / "record.json"]
        answer += ["--share", folder / "north-pier.share.json", "--to", folder / "north-pier.answer.json"]
        own = ("--sign", folder / "north-pier.key.json", "--passphrase-file", folder / "north-pier.passphrase")
        assert run(*answer, *own).code == 0
    if page in (("drill", "rehearse"), ("drill", "close")):
        assert run("drill", "open", of_set, "--kind", "practice").code == 0
    if page == ("drill", "close"):
        practice = [folder / f"{name}.practice.json" for name in NAMES[:3]]
        assert run("drill", "rehearse", of_set, *practice).code == 0
    if page[:1] in (("key",), ("task",)):
        key_before(page[-1] if page[0] == "key" else "task", folder)
    if page == ("audit",):
        shutil.copytree(of_set, folder / "srv" / "sets" / "tide-archive")
        (folder / "noted-on-monday.txt").write_text(run("journal", "head", of_set).out)
    if page == ("retire", "close"):
        for name in NAMES:
            assert run("retire", "destroyed", of_set, "--custodian", name, "--by", "A", "--witness", "B").code == 0


@pytest.mark.parametrize("page", PAGES, ids=lambda page: " ".join(page) or "shares")
def test_every_example_runs(page: tuple[str, ...], prepared: Path) -> None:
    lines = examples(page)
    assert lines
    go_before(page, prepared)
    for line in lines:
        if line.startswith("shares split"):
            (prepared / "key.pem").write_bytes((prepared / "made" / "key").read_bytes())
            shutil.rmtree(prepared / "tide-archive")
        if line.startswith("shares drill rehearse") and "*.share.json" in line:
            office = ("--sign", prepared / "harbour-office.key.json")
            phrase = ("--passphrase-file", prepared / "harbour-office.passphrase")
            assert run("drill", "close", prepared / "tide-archive", *office, *phrase).code == 0
            assert run("drill", "open", prepared / "tide-archive", "--kind", "recovery").code == 0
        if line.startswith("shares wrap"):
            (prepared / "north-pier.wrapped.json").unlink()
        done = subprocess.run(
            ["bash", "-c", re.sub(r" (/media|/dev/shm|/srv)/", rf" {prepared}\1/", line)],
            cwd=prepared,
            env={**os.environ, "PATH": f"{PROGRAM.parent}:{os.environ['PATH']}", "HOME": str(prepared / "home")},
            stdin=subprocess.DEVNULL,
            capture_output=True,
            text=True,
            timeout=60,
            check=False,
        )
        expected = next((code for start, code in CODES.items() if line.startswith(start)), 0)
        expected = 0 if line.startswith("shares audit pack") else expected
        assert (line, done.returncode, done.stderr if done.returncode != expected else "") == (line, expected, "")
        if "--to key.pem" in line:
            assert (prepared / "key.pem").read_bytes() == (prepared / "made" / "key").read_bytes()
        if "-pubout" in line:
            assert done.stdout.startswith("-----BEGIN PUBLIC KEY-----")
    written = prepared / "home/.local/share/bash-completion/completions/shares"
    assert written.exists() is (page == ("completion",))
