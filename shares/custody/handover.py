"""Hand over a dealing: shares to the delivery folders, then, as the commit point, the record to the set's folder.

Source: design laws 5 and 6 of this project (DEVELOPERS.md): all or nothing, and nothing is called done unchecked.
May import: shares.errors, shares.storage, shares.documents, shares.sharing, shares.custody.payload, .presented, .split,
.verify.
Secret: the share files. Public: the record, the paths.
Does not: wrap shares; who asks for plain ones has been told that all of them in one folder are the secret.
"""

from __future__ import annotations

import contextlib
import os
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

from shares.custody.payload import is_committed
from shares.custody.presented import Presented, Status
from shares.custody.split import Dealt
from shares.custody.verify import examine
from shares.documents.base import MAX_FILE
from shares.documents.record import Record
from shares.documents.share import Share
from shares.errors import StorageError, VerificationError
from shares.sharing.robust import count_quorums, covering_quorums, quorums
from shares.sharing.rule import recover_payload
from shares.storage import discard, leftovers, make_folder, read_back, write_new

RECORD_NAME = "record.json"
SHARE_SUFFIX = ".share.json"
MOST_TRIALS = 1000
"""With at most this many quorums every one is tried; beyond, a sample in which each share takes part."""

Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True)
class HandedOver:
    """What was written, and how it was checked.

    Attributes:
        record: path of the record.
        shares: path of each custodian's share.
        trials: quorums from which the secret was recovered, out of ``quorums``.
        quorums: how many minimal quorums there are.
    """

    record: Path
    shares: dict[str, Path]
    trials: int
    quorums: int


def share_path(folder: Path, custodian: str) -> Path:
    """Return where a custodian's share is written in a delivery folder."""
    return folder / f"{custodian}{SHARE_SUFFIX}"


def check_targets(set_folder: Path, deliveries: Mapping[str, Path]) -> None:
    """Refuse before anything secret is touched when the files cannot all be new; name what an earlier run left over.

    Args:
        set_folder: where the record goes; may not exist yet.
        deliveries: for each custodian the folder that the share goes to; must exist.

    Raises:
        StorageError: a folder is missing, a file exists, or an unfinished run left something.
    """
    for custodian, folder in deliveries.items():
        if not os.path.isdir(folder):  # Unlike Path.is_dir, it also answers for a folder that may not be entered.
            raise StorageError(
                f"the delivery folder of {custodian} is not there",
                where=os.fspath(folder),
                hint="mount the medium, or make the folder with mode 700; it is not made here, "
                "lest a share end up on the wrong disk",
            )
    record = set_folder / RECORD_NAME
    if os.path.lexists(record):
        raise StorageError("a set already has its record here", where=os.fspath(record), hint="choose a new folder")
    targets = [share_path(folder, custodian) for custodian, folder in deliveries.items()]
    unfinished = [path for folder in (set_folder, *dict.fromkeys(deliveries.values())) for path in leftovers(folder)]
    there = [path for path in targets if os.path.lexists(path)] + unfinished
    if there:
        names = ", ".join(os.fspath(path) for path in there)
        raise StorageError(
            f"found {len(there)} file(s) of another split, or left by a run that did not finish: {names}",
            hint="shares that belong to a record elsewhere are in use: choose another folder; what a stopped run left "
            "is destroyed like the secret itself, which enough of it recovers",
        )


def other_shares(deliveries: Mapping[str, Path]) -> list[Path]:
    """Return the bare shares that lie in the delivery folders already: of another set, or left by a run that was
    stopped under other names. A folder that cannot be listed tells nothing."""
    found: list[Path] = []
    for folder in dict.fromkeys(deliveries.values()):
        with contextlib.suppress(OSError):
            found.extend(sorted(path for path in folder.iterdir() if path.name.endswith(SHARE_SUFFIX)))
    return found


def hand_over(
    dealt: Dealt, set_folder: Path, deliveries: Mapping[str, Path], *, progress: Progress | None = None
) -> HandedOver:
    """Write every share, read all back from disk, verify and trial-recover, and only then write the record.

    Args:
        dealt: the dealing.
        set_folder: where the record goes; made with mode 0700 where it is missing.
        deliveries: for each custodian the folder that the share goes to.
        progress: called with (quorums tried, quorums to try).

    Raises:
        StorageError: a file or folder cannot be written; then no file of this call is left.
        VerificationError: what was read back does not verify or recover; then no file of this call is left.
    """
    check_targets(set_folder, deliveries)
    make_folder(set_folder)
    record_path = set_folder / RECORD_NAME
    paths = {share.custodian: share_path(deliveries[share.custodian], share.custodian) for share in dealt.shares}
    written: list[Path] = []
    record_is_ours = False
    try:
        for share in dealt.shares:
            write_new(paths[share.custodian], share.to_file(), secret=True)
            written.append(paths[share.custodian])
        trials, total = _prove(dealt.record, list(paths.values()), progress)
        write_new(record_path, dealt.record.to_file(), secret=False)
        record_is_ours = True
        if read_back(record_path, limit=MAX_FILE) != dealt.record.to_file():
            raise VerificationError("the record read back differs from what was written", where=os.fspath(record_path))
    except BaseException:  # Whatever stops the act, an interrupt included, undoes it.
        _undo(written, dealt.record, record_path, record_is_ours)
        raise
    return HandedOver(record_path, paths, trials, total)


def _undo(shares: list[Path], record: Record, record_path: Path, record_is_ours: bool) -> None:
    """Remove the record and then the shares that this call wrote; a share that cannot be removed is left for the next
    run to name. Where the record cannot be removed the shares stay: it must never outlive them."""
    try:
        if record_is_ours or _is_there(record, record_path):
            discard(record_path)
    except StorageError:
        return
    for path in reversed(shares):
        with contextlib.suppress(StorageError):
            discard(path)


def _is_there(record: Record, path: Path) -> bool:
    """Say whether this very record stands at ``path``: an interrupt may come between its writing and our knowing."""
    is_file = os.path.isfile(path) and not os.path.islink(path)
    return is_file and read_back(path, limit=MAX_FILE) == record.to_file()


def _prove(record: Record, paths: list[Path], progress: Progress | None) -> tuple[int, int]:
    """Read the shares from disk, verify each, and recover from quorums of them; return (tried, all there are)."""
    shares = [Share.parse(read_back(path, limit=MAX_FILE), where=os.fspath(path)) for path in paths]
    try:
        for finding in examine([Presented(os.fspath(path), s) for path, s in zip(paths, shares, strict=True)], record):
            if finding.status is not Status.INTACT:
                raise VerificationError(
                    f"a share just written does not verify: {finding.status}, {finding.reason}", where=finding.source
                )
        if [share.custodian for share in shares] != [custodian.name for custodian in record.custodians]:
            raise VerificationError("a share just written reads back as another one", hint="the medium is faulty")
        points = [point for share in shares for point in share.points()]
        places = [point.path for point in points]
        total = count_quorums(places)
        chosen = list(quorums(places) if total <= MOST_TRIALS else covering_quorums(places))
        for done, quorum in enumerate(chosen):
            if progress:
                progress(done, len(chosen))
            with recover_payload(record.field, [points[i] for i in quorum]) as payload:
                if not is_committed(record.set, payload, record.secret_commitment):
                    raise VerificationError(
                        "a trial recovery from the files just written failed",
                        hint="the medium or this machine is faulty; nothing was kept",
                    )
    finally:
        for share in shares:
            share.close()
    return len(chosen), total
