"""The quickstart does what it says: each of its claims is checked on the files that it leaves.

Source: RFC 8032 and RFC 8410 by way of ``cryptography`` for the key; everything else is this project's own promise.
It runs on the environment of the tests, so nothing is installed here; tests/run has installed the package before.
"""

from __future__ import annotations

import json
import os
import re
import shutil
import stat
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.serialization import load_pem_private_key

QUICKSTART = Path(__file__).resolve().parent.parent.parent / "examples" / "quickstart"
NAMES = ["north-pier", "south-pier", "light-house", "registrar", "dry-dock"]


def run(script: Path, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [script],
        env=os.environ | environment,
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )


def folder_of(done: subprocess.CompletedProcess[str]) -> Path:
    found = re.search(r"^What was made lies in (/\S+)\. Remove it: rm -r \1$", done.stdout, flags=re.MULTILINE)
    assert found, done.stdout + done.stderr
    return Path(found[1])


def shares(folder: Path, *arguments: str | Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [Path(sys.prefix) / "bin" / "shares", *arguments],
        cwd=folder,
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )


@pytest.fixture(scope="module")
def done() -> Iterator[subprocess.CompletedProcess[str]]:
    done = run(QUICKSTART, SHARES_VENV=sys.prefix)
    try:
        assert done.returncode == 0, done.stdout + done.stderr
        yield done
    finally:
        shutil.rmtree(folder_of(done))


def share(name: str) -> str:
    return f"handover/{name}/{name}.share.json"


def test_it_says_that_it_succeeded(done: subprocess.CompletedProcess[str]) -> None:
    assert "The same key, byte for byte." in done.stdout
    assert done.stderr == ""


def test_the_folder_is_private_and_on_a_ram_disk_where_there_is_one(done: subprocess.CompletedProcess[str]) -> None:
    folder = folder_of(done)
    assert stat.S_IMODE(folder.stat().st_mode) == 0o700
    if os.access("/dev/shm", os.W_OK):  # noqa: S108 - the RAM disk of Linux
        assert folder.parent == Path("/dev/shm")  # noqa: S108
    for path in folder.rglob("*"):
        assert path.is_dir() or path.name == "record.json" or stat.S_IMODE(path.stat().st_mode) == 0o600, path


def test_the_key_is_an_ed25519_key_and_fresh_each_time(done: subprocess.CompletedProcess[str]) -> None:
    again = run(QUICKSTART, SHARES_VENV=sys.prefix)
    try:
        texts = [(folder_of(each) / "key.pem").read_bytes() for each in (done, again)]
    finally:
        shutil.rmtree(folder_of(again))
    assert all(isinstance(load_pem_private_key(text, None), Ed25519PrivateKey) for text in texts)
    assert len(set(texts)) == 2


def test_the_recovered_key_is_the_key(done: subprocess.CompletedProcess[str]) -> None:
    folder = folder_of(done)
    assert ((folder / "key.pem").read_bytes() == (folder / "recovered.pem").read_bytes()) is True
    assert not (folder / "wrong.pem").exists()


def test_no_line_shows_the_key_or_a_share(done: subprocess.CompletedProcess[str]) -> None:
    folder = folder_of(done)
    said = done.stdout + done.stderr
    body = (folder / "key.pem").read_text().splitlines()[1]
    rows = [row for name in NAMES for row in json.loads((folder / share(name)).read_text())["rows"]]
    assert len(rows) == 5
    # Any 12 characters of base64 are 9 bytes of the secret.
    shown = [text[i : i + 12] in said for text in (body, *rows) for i in range(len(text) - 11)]
    assert not any(shown)


def test_every_share_is_intact_and_the_damaged_copy_is_not(done: subprocess.CompletedProcess[str]) -> None:
    folder = folder_of(done)
    for name in NAMES:
        assert shares(folder, "verify", share(name), "--record", "set/record.json").returncode == 0
    assert shares(folder, "verify", "damaged.share.json", "--record", "set/record.json").returncode == 4
    copy, original = (folder / "damaged.share.json").read_bytes(), (folder / share("light-house")).read_bytes()
    assert sum(a != b for a, b in zip(copy, original, strict=True)) == 1


def test_three_other_shares_recover_and_two_do_not(done: subprocess.CompletedProcess[str]) -> None:
    folder = folder_of(done)
    for quorum, code in ((NAMES[:2], 3), (NAMES[:3], 0)):
        found = shares(folder, "recover", *map(share, quorum), "--check")
        assert found.returncode == code, found.stderr


def with_false_shares(tmp_path: Path, before: str, after: str) -> Path:
    """Make an environment whose command shares does something else before or after the real one."""
    bin_ = tmp_path / "venv" / "bin"
    bin_.mkdir(parents=True)
    (bin_ / "python").symlink_to(sys.executable)
    real = Path(sys.prefix) / "bin" / "shares"
    (bin_ / "shares").write_text(f'#!/bin/bash\n{before}\n"{real}" "$@"; code=$?\n{after}\nexit $code\n')
    (bin_ / "shares").chmod(0o755)
    return tmp_path / "venv"


@pytest.mark.parametrize(
    ("before", "after", "complaint"),
    [
        (
            "",
            'test "$1" != recover || ! test -e recovered.pem || printf x >recovered.pem',
            "exit code 1, and 0 was expected",
        ),
        ('test "$1 $2" != "verify damaged.share.json" || exit 0', "", "exit code 0, and 4 was expected"),
        ('test "$1" != verify || exit 4', "", "exit code 4, and 0 was expected"),
        ("", 'test "$1" != recover || test -e recovered.pem || printf x >wrong.pem', "one of three shares is damaged"),
    ],
    ids=["another key", "damage missed", "verify refuses", "a key from a damaged share"],
)
def test_it_fails_where_a_claim_does_not_hold(tmp_path: Path, before: str, after: str, complaint: str) -> None:
    done = run(QUICKSTART, SHARES_VENV=str(with_false_shares(tmp_path, before, after)))
    shutil.rmtree(folder_of(done))
    assert done.returncode == 1
    assert complaint in done.stderr


@pytest.mark.parametrize(
    ("missing", "package"),
    [("python3", "python3"), ("cc", "gcc"), ("venv", "python3-venv"), ("headers", "python3-dev"), ("old", "3.11")],
)
def test_what_is_missing_is_said_in_one_line_before_anything_is_made(
    tmp_path: Path, missing: str, package: str
) -> None:
    (tmp_path / "examples").mkdir()
    script = Path(shutil.copy(QUICKSTART, tmp_path / "examples"))
    bin_ = tmp_path / "bin"
    bin_.mkdir()
    for tool in ("bash", "env", "dirname", "cc", "mktemp", "rm", "tail"):
        if tool != missing:
            (bin_ / tool).symlink_to(shutil.which(tool) or pytest.fail(f"{tool} is not here"))
    # A python3 that lacks one thing: it fails wherever that is looked for.
    marks = {"venv": "ensurepip", "headers": "Python.h", "old": "version_info"}
    if missing != "python3":
        refuse = f'[[ "$*" == *{marks[missing]}* ]] && exit 1\n' if missing in marks else ""
        (bin_ / "python3").write_text(f'#!{shutil.which("bash")}\n{refuse}exec "{sys.executable}" "$@"\n')
        (bin_ / "python3").chmod(0o755)
    done = run(script, PATH=str(bin_), SHARES_VENV="", PYTHON="python3")
    assert done.returncode == 1
    assert re.fullmatch(rf"quickstart: [^\n]*{re.escape(package)}[^\n]*\n", done.stderr)
    assert done.stdout == ""
    assert not (tmp_path / ".venv").exists()


def test_an_environment_without_the_package_is_refused(tmp_path: Path) -> None:
    done = run(QUICKSTART, SHARES_VENV=str(tmp_path))
    assert (done.returncode, done.stdout) == (1, "")
    assert done.stderr == f"quickstart: {tmp_path} has no shares that runs\n"
