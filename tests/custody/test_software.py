"""The digest of the software: worked out again from FORMAT_EVIDENCE.md, section 19, and seen to notice every change."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable
from pathlib import Path

import pytest

import shares
from shares.custody.software import software_digest


def by_the_format(folder: Path) -> bytes:
    """The digest by the text of the format page, for names in ASCII."""
    files = [path for path in folder.rglob("*") if path.is_file() and "__pycache__" not in path.parts]
    digests = {path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest() for path in files}
    text = json.dumps(digests, sort_keys=True, separators=(",", ":"))
    return hashlib.sha256(b"shares/v1/software" + text.encode()).digest()


def test_it_is_that_of_the_installed_files() -> None:
    assert software_digest() == by_the_format(Path(shares.__file__).parent)


@pytest.fixture
def package(tmp_path: Path) -> Path:
    (tmp_path / "inner").mkdir()
    (tmp_path / "a.py").write_text("a = 1\n")
    (tmp_path / "inner" / "b.py").write_text("b = 1\n")
    return tmp_path


CHANGES: dict[str, Callable[[Path], object]] = {
    "a byte": lambda folder: (folder / "a.py").write_text("a = 2\n"),
    "a file more": lambda folder: (folder / "inner" / "c.py").write_text(""),
    "a file fewer": lambda folder: (folder / "a.py").unlink(),
    "a file moved": lambda folder: (folder / "inner" / "b.py").rename(folder / "b.py"),
    "two files exchanged": lambda folder: [
        (folder / "a.py").write_text("b = 1\n"),
        (folder / "inner" / "b.py").write_text("a = 1\n"),
    ],
}


@pytest.mark.parametrize("change", CHANGES)
def test_it_notices(package: Path, change: str) -> None:
    before = software_digest(package)
    assert before == by_the_format(package)
    CHANGES[change](package)
    assert software_digest(package) != before


def test_what_python_writes_by_itself_does_not_count(package: Path) -> None:
    before = software_digest(package)
    (package / "inner" / "__pycache__").mkdir()
    (package / "inner" / "__pycache__" / "b.pyc").write_bytes(b"x")
    assert software_digest(package) == before
