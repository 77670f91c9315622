"""What the tests of the command line are given: a folder with a secret, and one with a set already split."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest
from cli.harness import NAMES, Place


@pytest.fixture
def place(tmp_path: Path) -> Place:
    """A secret and an empty delivery folder."""
    return Place.make(tmp_path / "place")


@pytest.fixture(scope="session")
def _dealt_once(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("dealt") / "place"
    Place.make(folder).split(need=3, names=NAMES)
    return folder


@pytest.fixture
def dealt(_dealt_once: Path, tmp_path: Path) -> Place:
    """A set split 3-of-5, to be damaged at will."""
    shutil.copytree(_dealt_once, tmp_path / "dealt")
    return Place(tmp_path / "dealt")
