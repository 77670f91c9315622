"""Hand over a dealt key: to each custodian a folder of their own, then, as the commit point, the dealer's record.

Source: design laws 5 and 6 of this project (DEVELOPERS.md): all or nothing, and nothing is called done unchecked.
May import: shares.errors, shares.storage, shares.documents, shares.history, .deal, .folder,
.own_share.
Secret: nothing in the open: key shares come here wrapped. Public: records, paths.
Does not: gather key shares in one place unless all delivery folders are one.
"""

from __future__ import annotations

import contextlib
import os
from collections.abc import Mapping
from pathlib import Path

from shares.documents.base import MAX_FILE
from shares.documents.key_event import KeyBorn
from shares.documents.key_share import KeyShare
from shares.documents.party import OpenPartyKey
from shares.errors import StorageError, VerificationError
from shares.history.files import RECORD_NAME
from shares.history.journal import JOURNAL_NAME, first_line
from shares.keys.deal import DealtKey
from shares.keys.folder import SHARE_NAME, load_key_record
from shares.keys.own_share import check_belongs
from shares.storage import discard, leftovers, make_folder, read_back, read_file, write_new


def check_places(key_folder: Path, deliveries: Mapping[str, Path]) -> None:
    """Refuse before anything secret is touched when the files cannot all be new.

    Args:
        key_folder: the dealer's, for record and journal; may not exist yet.
        deliveries: for each custodian an existing folder, in which one of the custodian's name is made.

    Raises:
        StorageError: a delivery folder is missing, or something has a name that is needed.
    """
    for custodian, folder in deliveries.items():
        if not os.path.isdir(folder):
            raise StorageError(
                f"the delivery folder of {custodian} is not there",
                where=os.fspath(folder),
                hint="mount the medium, or make the folder with mode 700; it is not made here, "
                "lest a key share end up on the wrong disk",
            )
    targets = [folder / custodian for custodian, folder in deliveries.items()]
    targets += [key_folder / name for name in (JOURNAL_NAME, RECORD_NAME)]
    taken = [path for path in targets if os.path.lexists(path)] + leftovers(key_folder)
    if taken:
        names = ", ".join(map(os.fspath, taken))
        raise StorageError(
            f"found {len(taken)} file(s) or folder(s) of another key, or left by a run that did not finish: {names}",
            hint="where the key's record stands in its dealer's folder they are in use: choose other folders; else the "
            "key was never born: destroy what is left of it",
        )


def hand_over(
    dealt: DealtKey, dealer: OpenPartyKey, key_folder: Path, deliveries: Mapping[str, Path]
) -> dict[str, Path]:
    """Write each custodian's folder, read all back, and only then write the dealer's record, or leave nothing.

    Args:
        dealt: the key.
        dealer: who signs that it was born, in each journal.
        key_folder: the dealer's.
        deliveries: as for ``check_places``.

    Returns:
        Each custodian's folder.

    Raises:
        StorageError: something cannot be written; then no file of this call is left.
        VerificationError: what was read back does not verify; then likewise.
    """
    check_places(key_folder, deliveries)
    record = dealt.record
    born = KeyBorn(what="key-born", key=record.key, epoch=record.epoch, record=record.fingerprint, origin=record.origin)
    line = first_line(born, keys=(dealer,))
    places = {name: folder / name for name, folder in deliveries.items()}
    act = _Act(key_folder / RECORD_NAME)
    try:
        for share in dealt.shares:
            place = places[share.custodian]
            act.write(place / SHARE_NAME, share.to_file(), secret=True)
            act.write(place / JOURNAL_NAME, line, secret=True)
            act.write(place / RECORD_NAME, record.to_file(), secret=False)
        for share in dealt.shares:
            _read_again(places[share.custodian], share, dealt)
        act.write(key_folder / JOURNAL_NAME, line, secret=True)
        act.write(key_folder / RECORD_NAME, record.to_file(), secret=False)
    except BaseException:  # Whatever stops the act, an interrupt included, undoes it.
        act.undo()
        raise
    return places


class _Act:
    """The files and folders that one handing over has made so far, so that they can be taken back."""

    def __init__(self, commit: Path) -> None:
        self._commit = commit
        self._written: dict[Path, bytes] = {}
        self._folders: list[Path] = []

    def write(self, path: Path, data: bytes, *, secret: bool) -> None:
        """Write one file, noted before it is there: an interrupt may come between its writing and our knowing."""
        if not path.parent.is_dir():
            self._folders.append(path.parent)
            make_folder(path.parent)
        self._written[path] = data
        write_new(path, data, secret=secret)
        if read_back(path, limit=MAX_FILE) != data:
            raise VerificationError("what is read back differs from what was written", where=os.fspath(path))

    def undo(self) -> None:
        """Remove what was written, the last first. Where the dealer's record cannot be removed all stays: it must never
        outlive the key shares."""
        for path, data in reversed(self._written.items()):
            try:
                if os.path.isfile(path) and read_file(path, limit=MAX_FILE) == data:
                    discard(path)
            except StorageError:
                if path == self._commit:
                    return
        for folder in reversed(self._folders):
            with contextlib.suppress(OSError):  # Somebody else has put something there, or it was never made.
                os.rmdir(folder)


def _read_again(place: Path, share: KeyShare, dealt: DealtKey) -> None:
    """See that what lies on the medium is the record, and a key share that belongs to it."""
    record = load_key_record(place / RECORD_NAME)
    found = KeyShare.parse(read_back(place / SHARE_NAME, limit=MAX_FILE), where=os.fspath(place / SHARE_NAME))
    check_belongs(found, record)
    if (record, found) != (dealt.record, share):
        raise VerificationError("a key share just written reads back as another one", where=os.fspath(place))
