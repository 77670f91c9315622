"""The files of parties: a key and a card made, cards and keys read.

Source: FORMAT.md, sec. 9.
May import: shares.errors, shares.storage, shares.documents.
Secret: nothing in the open; a key's file is wrapped. Public: cards.
Does not: open keys; ``custody.opening`` does.
"""

from __future__ import annotations

import os
from pathlib import Path

from shares.documents.base import MAX_FILE
from shares.documents.party import PartyCard, PartyKey
from shares.errors import StorageError
from shares.storage import StrPath, discard, read_back, read_file, write_new

KEY_SUFFIX = ".key.json"
CARD_SUFFIX = ".card.json"


def party_paths(folder: Path, name: str) -> tuple[Path, Path]:
    """Return where the key and the card of a new party are written."""
    return folder / f"{name}{KEY_SUFFIX}", folder / f"{name}{CARD_SUFFIX}"


def check_party_paths(folder: Path, name: str) -> None:
    """Refuse before anybody chooses a passphrase when the files cannot be new.

    Raises:
        StorageError: one of them exists, or the folder does not.
    """
    for path in party_paths(folder, name):
        if os.path.lexists(path):
            raise StorageError(
                "exists already and is never overwritten",
                where=os.fspath(path),
                hint="choose another folder; who loses a party key cannot open what was wrapped for its card",
            )
    if not os.path.isdir(folder):
        raise StorageError("the folder is not there", where=os.fspath(folder), hint="make it, mode 700")


def write_party(key: PartyKey, folder: Path) -> tuple[Path, Path]:
    """Write a party's key (0600) and then its card, and read both back.

    Returns:
        The paths of the key and of the card.

    Raises:
        StorageError: a file cannot be written or does not read back; then neither is left.
    """
    key_path, card_path = party_paths(folder, key.card.name)
    written: list[Path] = []
    try:
        for path, data, secret in ((key_path, key.to_file(), True), (card_path, key.card.to_file(), False)):
            write_new(path, data, secret=secret)
            written.append(path)
            if read_back(path, limit=MAX_FILE) != data:
                raise StorageError("what is read back differs from what was written", where=os.fspath(path))
    except BaseException:
        for path in reversed(written):
            discard(path)
        raise
    return key_path, card_path


def load_card(path: StrPath) -> PartyCard:
    """Read a party card.

    Raises:
        StorageError: it cannot be read.
        DocumentError: it is no card, or its own signature does not fit.
    """
    return PartyCard.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path))


def load_key(path: StrPath) -> PartyKey:
    """Read a party key, wrapped as it is.

    Raises:
        StorageError: it cannot be read.
        DocumentError: it is no party key.
    """
    return PartyKey.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path))
