"""Large secrets on media that fail, and runs that are killed: no part of a file is ever taken for the whole.

SIGKILL and errors are injected by strace(1) at every system call of an encryption and of an opening that touches their
folder. Error numbers: write(2), fsync(2), rename(2).
"""

from __future__ import annotations

import collections
import re
import subprocess
import sys
import textwrap
from collections.abc import Callable
from pathlib import Path

import pytest
from faults.tracing import at_each
from vectors.make.encrypted_file_v1 import encrypted_file, made_up

from shares.custody.encrypted_file import check_file, encrypt_file, open_file
from shares.errors import StorageError
from shares.memory import Secret
from shares.storage import leftovers
from shares.streams import new_file

Mount = Callable[[str, str], Path]
SET = bytes(16)
CHUNK = 1 << 20
SECRET = made_up("secret", 2 * CHUNK + 5)
KEY = made_up("key", 32)
FILE, DIGEST = encrypted_file(KEY, SET, CHUNK, SECRET)

# One call of the library as a program. Keys of tests are no secrets, and come as the file that stands for a recovery.
PROGRAM = textwrap.dedent("""
    import sys
    from pathlib import Path
    from shares.custody.encrypted_file import encrypt_file, open_file
    from shares.errors import StorageError
    from shares.memory import Secret
    from shares.streams import new_file
    act, folder = sys.argv[1], Path(sys.argv[2])
    try:
        if act == "encrypt":
            encrypt_file(folder / "source", folder / "result", bytes(16))
        else:
            with Secret.of((folder / "key").read_bytes()) as key:
                sink = new_file(folder / "result", secret=True)
                open_file(folder / "source", key, bytes.fromhex(sys.argv[3]), bytes(16), sink)
    except StorageError:
        sys.exit(5)
""")


def prepared(folder: Path, act: str) -> Path:
    folder.mkdir()
    (folder / "source").write_bytes(SECRET if act == "encrypt" else FILE)
    (folder / "key").write_bytes(KEY)
    return folder


def traced(folder: Path, act: str, *inject: str) -> tuple[int, list[tuple[str, int]]]:
    """Run one act under strace; return how it ended, and its calls that touch the result, each with its number."""
    log = folder.with_name(f"{folder.name}.log")
    faults = [word for expression in inject for word in ("-e", f"inject={expression}")]
    command = ["strace", "-f", "-qq", "-y", "-s", "8", "-o", log, "-e", "trace=%file,%desc", *faults]
    command += [sys.executable, "-P", "-B", "-c", PROGRAM, act, folder, DIGEST.hex()]
    done = subprocess.run(command, stdin=subprocess.DEVNULL, capture_output=True, text=True, timeout=120, check=False)
    seen: collections.Counter[str] = collections.Counter()
    sites = []
    for line in log.read_text("utf-8", "replace").splitlines():
        found = re.match(r"\d+ +(\w+)\((.*)", line)
        if found and found[1] not in ("execve", "exit_group"):
            seen[found[1]] += 1
            # Reading source and key changes nothing that could be left over.
            if re.search(rf'{re.escape(str(folder))}[/>"](?!source|key)', found[2]):
                sites.append((found[1], seen[found[1]]))
    return done.returncode, sites


def struck(tmp_path: Path, number: int, act: str, site: tuple[str, int], fault: str) -> tuple[int, Path]:
    """Run one act with a fault at one call, again where the fault struck another call."""
    for attempt in range(5):
        folder = prepared(tmp_path / f"run{number}.{attempt}", act)
        code, sites = traced(folder, act, f"{site[0]}:{fault}:when={site[1]}")
        if site in sites:
            return code, folder
    raise AssertionError(f"the fault never struck {site}")


def sites_of(tmp_path: Path, act: str) -> list[tuple[str, int]]:
    code, sites = traced(prepared(tmp_path / "undisturbed", act), act)
    assert code == 0
    assert {"openat", "write", "fchmod", "fsync", "renameat2", "close"} <= {call for call, _ in sites}
    assert sum(call == "write" for call, _ in sites) >= 3
    return sites


def is_whole(folder: Path, act: str) -> bool:
    """Whether the result stands under its name; if so it must be whole."""
    result = folder / "result"
    if not result.exists():
        return False
    if act == "encrypt":
        # The key died with the run, so length and form are what can be looked at.
        assert result.stat().st_size == len(FILE)
    else:
        assert result.read_bytes() == SECRET
    return True


@pytest.mark.usefixtures("strace")
@pytest.mark.parametrize("act", ["encrypt", "open"])
def test_killed_at_every_call(tmp_path: Path, act: str) -> None:
    sites = sites_of(tmp_path, act)

    def attempt(number: int, site: tuple[str, int]) -> tuple[int, Path]:
        return struck(tmp_path, number, act, site, "signal=KILL")

    outcomes = at_each(sites, attempt)
    whole = 0
    for code, folder in outcomes:
        assert code == -9
        whole += is_whole(folder, act)
        assert {path for path in folder.iterdir() if path.name not in ("source", "key", "result")} == set(
            leftovers(folder)
        )
    assert 0 < whole < len(sites)


@pytest.mark.usefixtures("strace")
@pytest.mark.parametrize("act", ["encrypt", "open"])
@pytest.mark.parametrize("error", ["EIO", "ENOSPC"])
def test_failing_at_every_call(tmp_path: Path, act: str, error: str) -> None:
    sites = sites_of(tmp_path, act)[:-1]  # By the last, closing the folder, all is done.

    def attempt(number: int, site: tuple[str, int]) -> tuple[tuple[str, int], int, Path]:
        return (site, *struck(tmp_path, number, act, site, f"error={error}"))

    refused = 0
    for site, code, folder in at_each(sites, attempt):
        if code == 0:
            # Modes, and the look whether the name is taken, may fail without harm.
            assert site[0] in ("fchmod", "newfstatat", "ioctl", "lseek"), site
            assert is_whole(folder, act)
        else:
            refused += 1
            assert code == 5, site
            assert sorted(path.name for path in folder.iterdir()) == ["key", "source"], site
    assert refused >= 6


@pytest.fixture
def full(medium: Mount) -> Path:
    return medium("stick", "size=2m")


def test_a_medium_that_fills_up_while_encrypting(full: Path, tmp_path: Path) -> None:
    (tmp_path / "source").write_bytes(SECRET)
    with pytest.raises(StorageError, match="the medium is full"):
        encrypt_file(tmp_path / "source", full / "result", SET)
    assert list(full.iterdir()) == []


def test_a_medium_that_fills_up_while_opening(full: Path, tmp_path: Path) -> None:
    (tmp_path / "source").write_bytes(FILE)
    with Secret.of(KEY) as key:
        with pytest.raises(StorageError, match="the medium is full"):
            open_file(tmp_path / "source", key, DIGEST, SET, new_file(full / "result", secret=True))
        assert check_file(tmp_path / "source", key, DIGEST, SET) == len(SECRET)
    assert list(full.iterdir()) == []


@pytest.mark.usefixtures("strace")
@pytest.mark.parametrize("act", ["encrypt", "open"])
def test_a_medium_without_links_or_renames(tmp_path: Path, act: str) -> None:
    folder = prepared(tmp_path / "run", act)
    code, _ = traced(folder, act, "renameat2:error=EINVAL", "linkat:error=EPERM")
    assert (code, is_whole(folder, act)) == (0, True)
    assert sorted(path.name for path in folder.iterdir()) == ["key", "result", "source"]
