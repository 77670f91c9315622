"""Hand over a dealing: shares to the delivery folders, then, as the commit point, the record to the set's folder.

Source: design laws 5 and 6 of this project (DEVELOPERS.md): all or nothing, and nothing is called done unchecked.
May import: shares.errors, shares.storage, shares.documents, shares.sharing, shares.history, shares.custody.entries,
.packing, .payload, .presented, .split, .verify.
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

from shares.custody.entries import Entering
from shares.custody.packing import BARE_SUFFIX, WRAPPED_SUFFIX, Packing
from shares.custody.payload import is_committed
from shares.custody.presented import Presented, Status
from shares.custody.split import Dealt
from shares.custody.verify import examine
from shares.documents.base import MAX_FILE
from shares.errors import SharesError, StorageError, VerificationError
from shares.history.files import PRACTICE_RECORD, RECORD_NAME
from shares.history.journal import JOURNAL_NAME
from shares.sharing.robust import count_quorums, covering_quorums, quorums
from shares.sharing.rule import recover_payload
from shares.storage import discard, leftovers, make_folder, read_back, write_new

PRACTICE_SUFFIX = ".practice.json"
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
        practice: path of each custodian's practice share, where a practice set was dealt as well.
        trials: quorums from which the secret was recovered, out of ``quorums``.
        quorums: how many minimal quorums there are.
    """

    record: Path
    companions: dict[str, Path]
    shares: dict[str, Path]
    practice: dict[str, Path]
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
    beside = [set_folder / name for name in (*companions, PRACTICE_RECORD)]
    targets = [
        *(
            share_path(folder, custodian, suffix)
            for custodian, folder in deliveries.items()
            for suffix in (BARE_SUFFIX, WRAPPED_SUFFIX, PRACTICE_SUFFIX)
        ),
        *beside,
    ]
    folders = dict.fromkeys([set_folder, *(path.parent for path in beside), *deliveries.values()])
    there = [path for path in targets if os.path.lexists(path)]
    there += [path for folder in folders for path in leftovers(folder)]
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
    practice: Dealt | None = None,
    entering: Entering | None = None,
    progress: Progress | None = None,
) -> HandedOver:
    """Write every share, read all back from disk, verify and trial-recover, enter it into the journal, and only then
    write the record.

    Args:
        dealt: the dealing.
        set_folder: where the record goes; made with mode 0700 where it is missing. A journal that is there, of the
            ceremony so far, goes on.
        deliveries: for each custodian the folder that the share goes to.
        packings: for each custodian how the share is packed; all bare by default.
        companions: content of each file, mode 0600, that goes into the set's folder beside the record, by its name
            there.
        practice: the dealing of a worthless secret under the same rule, for rehearsals; its shares go along, bare.
        entering: who signs the journal's entries, and the cards that they introduce.
        progress: called with (quorums tried, quorums to try).

    Raises:
        StorageError: a file or folder cannot be written; then no file of this call is left, and a journal that was
            there before says so.
        VerificationError: what was read back does not verify or recover; then no file of this call is left.
    """
    beside = dict(companions or {})
    entering = entering or Entering()
    check_targets(set_folder, deliveries, beside)
    make_folder(set_folder)
    packed = packings or dict.fromkeys(deliveries, Packing.bare())
    paths = {
        name: share_path(folder, name, packed[name].suffix)
        for name, folder in ((share.custodian, deliveries[share.custodian]) for share in dealt.shares)
    }
    rehearsed = {name: share_path(deliveries[name], name, PRACTICE_SUFFIX) for name in paths} if practice else {}
    act = _Act(set_folder)
    try:
        for share in dealt.shares:
            act.write(paths[share.custodian], packed[share.custodian].pack(share))
        for share in practice.shares if practice else ():
            act.write(rehearsed[share.custodian], share.to_file())
        trials, total = _prove(dealt, paths, packed, progress)
        if practice:
            _prove(practice, rehearsed, dict.fromkeys(rehearsed, Packing.bare()), None)
            act.write_back(PRACTICE_RECORD, practice.record.to_file())
        for name, data in beside.items():
            act.write_back(name, data)
        act.enter(entering, dealt, packed, beside, practice)
        act.write_back(RECORD_NAME, dealt.record.to_file(), secret=False)
    except BaseException:  # Whatever stops the act, an interrupt included, undoes it.
        act.undo()
        raise
    placed = {name: set_folder / name for name in beside}
    return HandedOver(set_folder / RECORD_NAME, placed, paths, rehearsed, trials, total)


class _Act:
    """The files that one handing over has written so far, so that they can be taken back."""

    def __init__(self, set_folder: Path) -> None:
        self.folder = set_folder
        self.written: dict[Path, bytes | None] = {}
        self.journal_is_new = not os.path.lexists(set_folder / JOURNAL_NAME)
        self.entered: Callable[[], None] | None = None

    def write(self, path: Path, data: bytes, *, secret: bool = True) -> None:
        """Write one file, noting it with its content before, since an interrupt may come between its writing and our
        knowing, and without it as soon as it is known to be ours."""
        self.written[path] = data
        write_new(path, data, secret=secret)
        self.written[path] = None

    def write_back(self, name: str, data: bytes, *, secret: bool = True) -> None:
        """Write a file into the set's folder and read it back."""
        path = self.folder / name
        make_folder(path.parent)
        self.write(path, data, secret=secret)
        if read_back(path, limit=MAX_FILE) != data:
            raise VerificationError("what is read back differs from what was written", where=os.fspath(path))

    def enter(
        self,
        entering: Entering,
        dealt: Dealt,
        packings: Mapping[str, Packing],
        companions: Mapping[str, bytes],
        practice: Dealt | None,
    ) -> None:
        """Enter the dealing into the journal."""
        self.entered = lambda: entering.undone(self.folder, dealt.record.set)
        entering.dealing(self.folder, dealt, packings, companions, practice)

    def undo(self) -> None:
        """Remove what was written, the record first; a share that cannot be removed is left for the next run to name.
        Where the record cannot be removed all stays: it must never outlive the shares."""
        record = self.folder / RECORD_NAME
        for path, data in reversed(self.written.items()):
            try:
                if data is None or _holds(path, data):
                    discard(path)
            except StorageError:
                if path == record:
                    return
        if self.entered:
            with contextlib.suppress(SharesError):
                if self.journal_is_new:
                    discard(self.folder / JOURNAL_NAME)
                else:
                    self.entered()


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
