"""A custodian's memory of the encapsulated keys they have served: each for one message only.

A partial result serves whatever was ever encrypted with its encapsulated key, so a second ciphertext with the same one
is not a second message to agree to: it is a way to have agreed to it already. No honest sender makes one.

Source: RFC 9180, sec. 5.1 (a fresh encapsulated key a message); RFC 9591, sec. 7 (state that must not be rolled back);
FORMAT_KEYS.md, sec. 28.
May import: shares.errors, shares.storage, shares.documents.
Secret: nothing. Confidential: what was opened, for whom. Public: the rest.
Does not: notice that its folder was restored from an older copy or is one of two: such a memory has gaps. It is one
custodian's; the others have theirs.
"""

from __future__ import annotations

import os
from pathlib import Path
from typing import Final

from shares import storage
from shares.documents.base import MAX_FILE, sha256
from shares.documents.opened_message import OpenedMessage
from shares.errors import StorageError, VerificationError

FOLDER: Final = "opened"
"""The memory's place in the custodian's own folder."""


def file_of(own: Path, encapsulated: bytes) -> Path:
    """Return where the memory of an encapsulated key is, or would be."""
    return own / FOLDER / f"{sha256(b'', encapsulated).hex()}.json"


def earlier(own: Path, new: OpenedMessage) -> OpenedMessage | None:
    """Return what is remembered of a message, None if nothing is.

    Args:
        own: the custodian's own folder.
        new: what is about to be opened.

    Raises:
        VerificationError: its encapsulated key was served for another message.
        DocumentError: the memory is damaged: nothing is served on the strength of it.
        StorageError: it cannot be read.
    """
    path = file_of(own, new.encapsulated)
    if not os.path.lexists(path):
        return None
    known = OpenedMessage.parse(storage.read_file(path, limit=MAX_FILE), where=str(path))
    if (known.key, known.encapsulated) != (new.key, new.encapsulated):
        raise VerificationError(
            "it remembers another encapsulated key than its name says",
            where=str(path),
            hint="it was renamed or copied here: put the folder back as it was",
        )
    if known.content != new.content:
        raise VerificationError(
            f"the encapsulated key of this message was served already, for another message, to {known.receiver}",
            where=str(path),
            hint="no honest sender uses one twice: find out who made this message, and do not take part",
        )
    return known


def remember(own: Path, new: OpenedMessage) -> None:
    """Put a message on the medium as served, before anything of it is; again is fine.

    Args:
        own: the custodian's own folder.
        new: what is about to be opened.

    Raises:
        VerificationError: as for ``earlier``; also where another process was faster with another message.
        DocumentError: as for ``earlier``.
        StorageError: it cannot be read or written.
    """
    if earlier(own, new) is not None:
        return
    path = file_of(own, new.encapsulated)
    storage.make_folder(path.parent)
    refused = None
    try:
        storage.write_new(path, new.to_file(), secret=True)
    except StorageError as error:
        refused = error
    # The name is exclusive: whoever comes second finds what the first one wrote.
    if refused is not None and earlier(own, new) is None:
        raise refused
