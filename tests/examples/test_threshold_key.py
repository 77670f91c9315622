"""The worked example runs as it stands, and what it made is what it says: openssl and the folders tell.

Source: the story is the script's own; RFC 8032 by ``openssl``.
"""

from __future__ import annotations

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest
from cli.harness import PROGRAM, run

from shares.documents.key_record import KeyRecord

SCRIPT = Path(__file__).resolve().parents[2] / "examples" / "threshold_key.py"
CUSTODIANS = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")


def started(*words: str | Path, cwd: Path | None = None) -> subprocess.CompletedProcess[str]:
    environment = os.environ | {"PATH": f"{PROGRAM.parent}:{os.environ['PATH']}"}
    command = [sys.executable, SCRIPT, *words]
    return subprocess.run(command, cwd=cwd, env=environment, capture_output=True, text=True, timeout=400, check=False)


@pytest.fixture(scope="module")
def told(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, str]:
    folder = tmp_path_factory.mktemp("key") / "harbour"
    done = started(folder.name, cwd=folder.parent)  # The name alone, as somebody types it who stands beside it.
    assert (done.returncode, done.stderr) == (0, "")
    return folder, done.stdout


def test_it_says_what_was_to_be_shown(told: tuple[Path, str]) -> None:
    _, out = told
    for words in (
        "Five custodians have generated a key, and no machine has ever held it:",
        "Each has checked their own key share; the records are the same: True",
        "openssl: Signature Verified Successfully",
        'ssh-keygen: Good "release" signature for the-quorum',
        "below.pem: OK",
        "certificate revoked",
        "the same as was sent: True",
    ):
        assert words in out
    cheat = out.split("One signer has cheated:")[1]
    assert re.search(r"light-house.*share of light-house is wrong", cheat)
    assert "south-pier" not in cheat


def test_five_machines_have_one_key_and_nobody_another_share(told: tuple[Path, str]) -> None:
    folder, _ = told
    records = {(folder / name / "key" / "record.json").read_bytes() for name in (*CUSTODIANS, "harbour-office")}
    record = KeyRecord.parse(records.pop())
    assert records == set()
    assert (record.origin, record.need, len(record.custodians)) == ("joint", 3, 5)
    shares = sorted(str(path.relative_to(folder)) for path in folder.rglob("share.json"))
    assert shares == sorted(f"{name}/key/share.json" for name in CUSTODIANS)
    for name in CUSTODIANS[:3]:
        key = ["--key", folder / name / f"{name}.key.json", "--passphrase-file", folder / name / "passphrase"]
        assert run("key", "verify", folder / name / "key", *key).code == 0


def test_its_signature_is_ordinary(told: tuple[Path, str]) -> None:
    office = told[0] / "harbour-office"
    verify = ["openssl", "pkeyutl", "-verify", "-pubin", "-inkey", "key.pem", "-rawin", "-sigfile", "release.sig"]

    def verified(name: str) -> str:
        done = subprocess.run([*verify, "-in", name], cwd=office, capture_output=True, text=True, check=False)
        return done.stdout

    assert verified("release.txt") == "Signature Verified Successfully\n"
    assert verified("key.pem") == "Signature Verification Failure\n"
    assert not (office / "cheated.sig").exists()


def test_the_journals_hold(told: tuple[Path, str]) -> None:
    for name in ("harbour-office", "north-pier", "light-house", "dry-dock"):
        assert run("journal", "verify", told[0] / name / "key").code == 0


def test_it_says_how_it_is_used() -> None:
    done = started()
    assert (done.returncode, done.stderr.startswith("usage: threshold_key.py FOLDER")) == (2, True)
