"""Hand over a dealing: shares to the delivery folders, then, as the commit point, the record to the set's folder.

Source: design laws 5 and 6 of this project (DEVELOPERS.md): all or nothing, and nothing is called done unchecked.
May import: shares.errors, shares.storage, shares.documents, shares.sharing, shares.custody.packing, .payload,
.presented, .split, .verify.
Secret: the shares, and their files where they are bare. Confidential: what goes beside the record. Public: the record,
the paths.
Does not: choose how shares are packed; who asks for bare ones has been told that all of them in one folder are the
secret.
"""

from __future__ import annotations

import contextlib
import os
from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass
from pathlib import Path

from shares.custody.packing import BARE_SUFFIX, WRAPPED_SUFFIX, Packing
from shares.custody.payload import is_committed
from shares.custody.presented import Presented, Status
from shares.custody.split import Dealt
from shares.custody.verify import examine
from shares.documents.base import MAX_FILE
from shares.errors import StorageError, VerificationError
from shares.sharing.robust import count_quorums, covering_quorums, quorums
from shares.sharing.rule import recover_payload
from shares.storage import discard, leftovers, make_folder, read_back, write_new

RECORD_NAME = "record.json"
MOST_TRIALS = 1000
"""With at most this many quorums every one is tried; beyond, a sample in which each share takes part."""

Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True)
class HandedOver:
    """What was written, and how it was checked.

    Attributes:
        record: path of the record.
        companions: path of each file that went into the set's folder beside the record.
        shares: path of each custodian's share.
        trials: quorums from which the secret was recovered, out of ``quorums``.
        quorums: how many minimal quorums there are.
    """

    record: Path
    companions: dict[str, Path]
    shares: dict[str, Path]
    trials: int
    quorums: int


def share_path(folder: Path, custodian: str, suffix: str = BARE_SUFFIX) -> Path:
    """Return where a custodian's share is written in a delivery folder."""
    return folder / f"{custodian}{suffix}"


def check_targets(set_folder: Path, deliveries: Mapping[str, Path], companions: Collection[str] = ()) -> None:
    """Refuse before anything secret is touched when the files cannot all be new; name what an earlier run left over.

    Args:
        set_folder: where the record goes; may not exist yet.
        deliveries: for each custodian the folder that the share goes to; must exist.
        companions: names of files that go into the set's folder beside the record.

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
    for name in companions:
        if os.path.lexists(set_folder / name):
            raise StorageError(
                "a file of another split, or one that did not finish, is here",
                where=os.fspath(set_folder / name),
                hint="choose a new folder",
            )
    beside = dict.fromkeys([set_folder, *((set_folder / name).parent for name in companions)])
    targets = [
        share_path(folder, custodian, suffix)
        for custodian, folder in deliveries.items()
        for suffix in (BARE_SUFFIX, WRAPPED_SUFFIX)
    ]
    unfinished = [path for folder in (*beside, *dict.fromkeys(deliveries.values())) for path in leftovers(folder)]
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
            found.extend(sorted(path for path in folder.iterdir() if path.name.endswith(BARE_SUFFIX)))
    return found


def hand_over(
    dealt: Dealt,
    set_folder: Path,
    deliveries: Mapping[str, Path],
    *,
    packings: Mapping[str, Packing] | None = None,
    companions: Mapping[str, bytes] | None = None,
    progress: Progress | None = None,
) -> HandedOver:
    """Write every share, read all back from disk, verify and trial-recover, and only then write the record.

    Args:
        dealt: the dealing.
        set_folder: where the record goes; made with mode 0700 where it is missing.
        deliveries: for each custodian the folder that the share goes to.
        packings: for each custodian how the share is packed; all bare by default.
        companions: content of each file, mode 0600, that goes into the set's folder beside the record, by its name
            there.
        progress: called with (quorums tried, quorums to try).

    Raises:
        StorageError: a file or folder cannot be written; then no file of this call is left.
        VerificationError: what was read back does not verify or recover; then no file of this call is left.
    """
    beside = {set_folder / name: data for name, data in (companions or {}).items()}
    check_targets(set_folder, deliveries, companions or ())
    make_folder(set_folder)
    record_path = set_folder / RECORD_NAME
    packed = packings or dict.fromkeys(deliveries, Packing.bare())
    paths = {
        share.custodian: share_path(deliveries[share.custodian], share.custodian, packed[share.custodian].suffix)
        for share in dealt.shares
    }
    written: dict[Path, bytes | None] = {}
    try:
        for share in dealt.shares:
            _write(paths[share.custodian], packed[share.custodian].pack(share), written)
        trials, total = _prove(dealt, paths, packed, progress)
        for path, data in beside.items():
            make_folder(path.parent)
            _write(path, data, written)
            _read_again(path, data)
        _write(record_path, dealt.record.to_file(), written, secret=False)
        _read_again(record_path, dealt.record.to_file())
    except BaseException:  # Whatever stops the act, an interrupt included, undoes it.
        _undo(written, record_path)
        raise
    return HandedOver(record_path, {name: set_folder / name for name in companions or ()}, paths, trials, total)


def _write(path: Path, data: bytes, written: dict[Path, bytes | None], *, secret: bool = True) -> None:
    """Write one file, noting it with its content before, since an interrupt may come between its writing and our
    knowing, and without it as soon as it is known to be ours."""
    written[path] = data
    write_new(path, data, secret=secret)
    written[path] = None


def _read_again(path: Path, data: bytes) -> None:
    if read_back(path, limit=MAX_FILE) != data:
        raise VerificationError("what is read back differs from what was written", where=os.fspath(path))


def _undo(written: dict[Path, bytes | None], record_path: Path) -> None:
    """Remove what this call wrote, the record first; a share that cannot be removed is left for the next run to name.
    Where the record cannot be removed all stays: it must never outlive the shares."""
    for path, data in reversed(written.items()):
        try:
            if data is None or _holds(path, data):
                discard(path)
        except StorageError:
            if path == record_path:
                return


def _holds(path: Path, data: bytes) -> bool:
    """Say whether the file that was to be written stands here; another process may have taken the name before."""
    is_file = os.path.isfile(path) and not os.path.islink(path)
    return is_file and read_back(path, limit=MAX_FILE) == data


def _prove(
    dealt: Dealt, paths: Mapping[str, Path], packings: Mapping[str, Packing], progress: Progress | None
) -> tuple[int, int]:
    """Read the shares from disk, verify each, and recover from quorums of them; return (tried, all there are)."""
    record, shares = dealt.record, []
    try:
        for dealt_share in dealt.shares:
            path = paths[dealt_share.custodian]
            data = read_back(path, limit=MAX_FILE)
            shares.append(packings[dealt_share.custodian].unpack(data, os.fspath(path), dealt_share))
        presented = [Presented(os.fspath(path), share) for path, share in zip(paths.values(), shares, strict=True)]
        for finding in examine(presented, record):
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
            if all(share is not one for one in dealt.shares):
                share.close()
    return len(chosen), total
