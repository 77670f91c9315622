"""What the tests of the command line are given: folders with a secret, with a set split, and with a key dealt."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest
from cli.harbour import Harbour
from cli.harness import NAMES, Place, run
from cli.keyed import Keyed
from parties import QUICK

from shares.documents import wrapping
from shares.documents.wrapping import Cost


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


@pytest.fixture
def quick(monkeypatch: pytest.MonkeyPatch) -> None:
    """Cheap stretching for what commands wrap within this process; what a file asks for is left as it is."""
    monkeypatch.setattr(wrapping, "Cost", lambda *given: Cost(*given) if given else QUICK)


@pytest.fixture
def harbour(dealt: Place) -> Harbour:
    """A set split 3-of-5, its shares bare, and the parties of the harbour with their passphrases."""
    return Harbour.make(dealt)


@pytest.fixture(scope="session")
def _keyed_once(tmp_path_factory: pytest.TempPathFactory) -> Keyed:
    keyed = Keyed.make(tmp_path_factory.mktemp("keyed") / "harbour").dealt()
    assert run("key", "show", keyed.key, "--pem", keyed.path("k.pem"), "--x25519-pem", keyed.path("x.pem")).code == 0
    return keyed


@pytest.fixture
def keyed(_keyed_once: Keyed, tmp_path: Path) -> Keyed:
    """A key dealt 2 of 3, and its public halves in k.pem and x.pem."""
    return _keyed_once.copy(tmp_path / "harbour")
