"""A ceremony's log: each step and each exception becomes an entry of the journal, bound to the script by its digest.

Source: CA/Browser Forum TLS Baseline Requirements, sec. 5.4.1 (what is recorded of an event) and 6.1.1.1 (a script is
followed); published root-zone practice (exceptions are written down with their remedy); FORMAT_EVIDENCE.md, sec. 19.
May import: shares.errors, shares.storage, shares.documents, shares.history.
Secret: party keys that sign, passed through. Confidential: script and journal. Public: nothing.
Does not: need a record: a ceremony begins before there is one. Nor judge: ``evidence.ceremony_report`` tells all.
"""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Final

from shares.documents.base import MAX_FILE
from shares.documents.ceremony_script import CeremonyScript
from shares.documents.entry import Entry, NamedDigest
from shares.documents.event import Deviation, Event, ScriptStep
from shares.documents.members import check_text
from shares.documents.party import OpenPartyKey
from shares.errors import ParameterError, StorageError, VerificationError
from shares.history.files import RECORD_NAME
from shares.history.folder import SetFolder
from shares.history.journal import JOURNAL_NAME, Journal, append, load_journal
from shares.storage import StrPath, make_folder, read_file, write_new

CEREMONY_FOLDER: Final = "ceremony"


@dataclass(frozen=True, slots=True, eq=False)
class Logged:
    """An entry that was made, and how the ceremony stands now.

    Attributes:
        entry: as it stands in the journal.
        script: the ceremony's.
        skipped: steps before the one logged that have no entry yet.
        following: the first step after it that has none, or None at the end.
        pending: whether an exception was logged at a step that has no entry of its own yet.
    """

    entry: Entry
    script: CeremonyScript
    skipped: tuple[int, ...]
    following: int | None
    pending: bool


def script_name(digest: bytes) -> str:
    """Return the name of a script's file in a set's folder."""
    return f"{CEREMONY_FOLDER}/{digest.hex()[:16]}.json"


def load_script(folder: Path, path: StrPath | None) -> CeremonyScript:
    """Read the script of a ceremony: a file given, or else the one that the set's folder holds.

    Raises:
        StorageError: it cannot be read.
        DocumentError: it is none.
        ParameterError: no file is given, and the folder holds none, or several.
    """
    if path is None:
        kept = sorted((folder / CEREMONY_FOLDER).glob("*.json"))
        if len(kept) != 1:
            raise ParameterError(
                f"the folder holds {len(kept) or 'no'} scripts, so say which one this is about",
                where=os.fspath(folder),
                hint="give the script's file with --script",
            )
        path = kept[0]
    return CeremonyScript.parse(read_file(path, limit=MAX_FILE), where=os.fspath(path))


def log_step(
    folder: Path,
    script: CeremonyScript,
    step: int,
    *,
    initials: str,
    remark: str | None = None,
    repeats: bool = False,
    keys: Sequence[OpenPartyKey] = (),
    time: datetime | None = None,
) -> Logged:
    """Log a step as done. Steps may come out of order; the report says so.

    Args:
        folder: the set's, with or without a record. An empty one becomes a set's folder by this.
        script: the ceremony's; a copy is kept in the folder.
        step: its number, from 1.
        initials: of whoever did it, and of who saw it.
        remark: what is to be noted of it.
        repeats: whether it has an entry already and was done again.
        keys: of the parties that sign.
        time: of the entry; now by default.

    Raises:
        ParameterError: no such step; a second entry of a step that does not say that it repeats it, or the other way
            round; fewer signers than the policy asks for.
        StorageError: the folder is missing, is no set's, or cannot be written.
        VerificationError: the folder holds another script under this one's name.
    """
    _check(script, step, initials, remark)
    done = _steps_done(_checked_journal(folder), script)
    if step in done and not repeats:
        raise ParameterError(
            f"step {step} has an entry already (entry {done[step]})",
            where="--step",
            hint="say --repeats if it was done again, or log what went another way with --exception",
        )
    if repeats and step not in done:
        raise ParameterError(f"step {step} has no entry that could be repeated", where="--repeats")
    event = ScriptStep(
        what="step", script=script.digest(), step=step, initials=initials, repeats=repeats, remark=remark
    )
    return _logged(_append(folder, script, event, keys, time), script, {**done, step: 0}, step)


def log_exception(
    folder: Path,
    script: CeremonyScript,
    step: int | None,
    *,
    initials: str,
    exception: str,
    remedy: str | None = None,
    keys: Sequence[OpenPartyKey] = (),
    time: datetime | None = None,
) -> Logged:
    """Log that something went another way than the script says. The step itself is logged apart, when it is done.

    Args:
        step: at which step, where it was at one.
        exception: what happened.
        remedy: what was done about it.
        folder, script, initials, keys, time: as for ``log_step``.

    Raises:
        ParameterError, StorageError, VerificationError: as for ``log_step``.
    """
    _check(script, step, initials, exception, remedy)
    done = _steps_done(_checked_journal(folder), script)
    event = Deviation(
        what="exception", remark=exception, remedy=remedy, script=script.digest(), step=step, initials=initials
    )
    return _logged(_append(folder, script, event, keys, time), script, done, step or 0)


def _check(script: CeremonyScript, step: int | None, *texts: str | None) -> None:
    if step is not None and not 1 <= step <= len(script.steps):
        raise ParameterError(
            f"the script has steps 1 to {len(script.steps)}, and {step} is none of them", where="--step"
        )
    for text in texts:
        if text is not None:
            check_text(text, "a text of the log")


def _checked_journal(folder: Path) -> Journal:
    """Return the journal of a folder that is a set's, or may become one.

    Raises:
        StorageError: it is missing, or holds other things: a mistyped path must not found a journal somewhere.
    """
    if not folder.is_dir():
        raise StorageError(
            "the folder is not there", where=os.fspath(folder), hint="make it, mode 700; `shares split` fills it later"
        )
    known = {RECORD_NAME, JOURNAL_NAME, CEREMONY_FOLDER}
    names = {path.name for path in folder.iterdir()}
    if names and not names & known:
        raise StorageError(
            "it holds other files, and is no set's folder", where=os.fspath(folder), hint="give a new, empty folder"
        )
    return load_journal(folder)


def _steps_done(journal: Journal, script: CeremonyScript) -> dict[int, int]:
    """Return the entry that first logged each step of this script."""
    done: dict[int, int] = {}
    for entry in journal.entries:
        if isinstance(entry.event, ScriptStep) and entry.event.script == script.digest():
            done.setdefault(entry.event.step, entry.sequence)
    return done


def _append(
    folder: Path, script: CeremonyScript, event: Event, keys: Sequence[OpenPartyKey], time: datetime | None
) -> Entry:
    if script.dual_control and len({key.card.fingerprint for key in keys}) < 2:
        raise ParameterError(
            f"the policy asks for dual control: two parties sign each entry, and {len(keys)} would",
            hint="give the party keys of two people, each with --sign",
        )
    # Read before anything is written: a record or policy that is not what it should be is refused.
    known = SetFolder(folder) if os.path.lexists(folder / RECORD_NAME) else None
    if known is not None:
        known.require_signers(keys)
    documents = (_kept(folder, script),)
    if known is not None:
        return known.append(event, keys=keys, documents=documents, time=time)
    return append(folder, event, keys=keys, documents=documents, time=time)


def _kept(folder: Path, script: CeremonyScript) -> NamedDigest:
    """Keep the script in the set's folder, and return it as an entry names it."""
    name, digest = script_name(script.digest()), script.digest()
    path = folder / name
    if not os.path.lexists(path):
        make_folder(path.parent)
        write_new(path, script.text, secret=True)
    elif read_file(path, limit=MAX_FILE) != script.text:
        raise VerificationError(
            "it is not the script that its name says: it was changed", where=os.fspath(path), hint="bring back the copy"
        )
    return NamedDigest(path=name, digest=digest)


def _logged(entry: Entry, script: CeremonyScript, done: dict[int, int], step: int) -> Logged:
    left = [number for number in range(1, len(script.steps) + 1) if number not in done]
    skipped = tuple(number for number in left if number < step)
    return Logged(entry, script, skipped, next((number for number in left if number > step), None), step in left)
