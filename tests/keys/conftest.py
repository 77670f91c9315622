"""Fixtures about a signer's nonces."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from keys.quorum import dealt
from keys.stores import ME, Pair, refuse, store_in
from parties import unlocked

from shares import streams
from shares.documents.party import OpenPartyKey
from shares.keys.nonces import NonceStore


@pytest.fixture
def own() -> Iterator[OpenPartyKey]:
    with unlocked(ME) as key:
        yield key


@pytest.fixture
def store(tmp_path: Path, own: OpenPartyKey) -> NonceStore:
    return store_in(tmp_path, own)


@pytest.fixture
def pair(store: NonceStore) -> Pair:
    (made,) = store.make(dealt().scalars[ME])
    return made


@pytest.fixture(params=["rename", "link"])
def medium(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> str:
    """Each way a medium lets a file get another name in one step."""
    if request.param == "link":
        monkeypatch.setattr(streams, "_rename_new", refuse)
    return str(request.param)
