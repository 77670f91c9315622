"""A rehearsal: in a drill, shares recover the practice secret in the open, or the real one in locked memory.

Source: NIST SP 800-84 (functional exercise); FORMAT.md, sec. 16.
May import: shares.errors, shares.documents, shares.history, shares.custody, shares.evidence.drill.
Secret: shares and the secret of a recovery drill, in memory, wiped; they go to the probe alone.
Public: the rest, which is confidential.
Does not: write a secret anywhere. What a drill of recovery recovered is known to the machine all the same.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Self, TypeAlias

from shares.custody.presented import Presented, Status
from shares.custody.recover import Recovery, recover
from shares.documents.entry import Entry
from shares.documents.event import Brought, Rehearsed
from shares.documents.members import MAX_TEXT, check_text
from shares.documents.party import OpenPartyKey
from shares.documents.record import Record
from shares.errors import CommandFailedError, ParameterError, SharesError, VerificationError
from shares.evidence.drill import Drill, practice_record
from shares.history.folder import SetFolder

Probe: TypeAlias = Callable[[Recovery], None]
"""Gives what was recovered to a command; raises CommandFailedError where that does not succeed."""


@dataclass(frozen=True, slots=True, eq=False)
class Rehearsal:
    """How one rehearsal went.

    Attributes:
        brought: whose shares of the set itself were opened.
        entry: what was entered into the journal.
        event: the same, for short.
        recovery: what was recovered, its secrets wiped unless it is worthless; None where nothing was.
        failure: why it failed, with its exit code; None where it passed.
    """

    brought: tuple[str, ...]
    entry: Entry
    event: Rehearsed
    recovery: Recovery | None
    failure: SharesError | None

    def close(self) -> None:
        """Wipe what was recovered."""
        if self.recovery:
            self.recovery.secret.close()
            self.recovery.payload.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def rehearse(
    folder: SetFolder,
    drill: Drill,
    presented: Sequence[Presented],
    *,
    probe: Probe | None = None,
    persons: Collection[str] = (),
    keys: Sequence[OpenPartyKey] = (),
    at: datetime | None = None,
) -> Rehearsal:
    """Recover in a drill of practice or recovery, and enter how that went, whether it passed or failed.

    Args:
        folder: the set's.
        drill: of practice: recovers the worthless twin; of recovery: recovers the secret in locked memory, compares it
            with the commitment, gives it to the probe alone and wipes it.
        presented: the shares brought.
        probe: in a drill of recovery, what takes the secret.
        persons: who is present.
        keys: of the parties that sign.
        at: the time of the entry; now by default.

    Raises:
        ParameterError: a drill of attendance, a probe in one of practice, or too few signers.
        StorageError: the journal cannot be written.
    """
    folder.require_signers(keys)
    for person in persons:
        check_text(person)
    real = _of_set(presented, folder.record)
    if drill.event.kind == "attendance":
        raise ParameterError(
            "nothing is recovered in a drill of attendance", hint="`shares attest check` takes the answers"
        )
    practice = drill.event.kind == "practice"
    if practice and probe:
        raise ParameterError("a practice secret opens nothing", hint="leave the command out")
    record = practice_record(folder) if practice else folder.record
    if real:
        # Before the secret can go anywhere: what is known from here on is known, even where this run is killed.
        folder.append(
            Brought(what="brought", drill=drill.number, custodians=real, persons=tuple(persons)), keys=keys, time=at
        )
    started = time.monotonic()
    recovery: Recovery | None = None
    failure: SharesError | None = None
    status: int | None = None
    probing = 0.0
    try:
        if practice and real:
            raise VerificationError(
                f"real shares were brought to a drill of practice: of {', '.join(real)}",
                hint="whoever was present may have seen them: enter it with `shares journal add SET incident`",
            )
        recovery = recover(presented, record)
        if probe:
            began = time.monotonic()
            try:
                probe(recovery)
                status = 0
            finally:
                probing = time.monotonic() - began
    except CommandFailedError as error:
        failure, status = error, _exit_code(error.status)
    except SharesError as error:
        failure = error
    finally:
        if recovery and not practice:
            recovery.secret.close()
            recovery.payload.close()
    # The entry is made whatever happened: a drill that fails is a result.
    event = Rehearsed(
        what="rehearsed",
        drill=drill.number,
        custodians=recovery.used if recovery else _of_set(presented, record),
        persons=tuple(persons),
        passed=failure is None,
        outcome=_outcome(recovery, failure)[:MAX_TEXT],
        seconds=round(time.monotonic() - started - probing),
        probe=status,
        probe_seconds=round(probing) if status is not None else None,
    )
    return Rehearsal(real, folder.append(event, keys=keys, time=at), event, recovery, failure)


def _of_set(presented: Sequence[Presented], record: Record) -> tuple[str, ...]:
    """Return whose shares of a record's set were opened."""
    named = {custodian.name for custodian in record.custodians}
    found = (one.share.custodian for one in presented if one.share is not None and one.share.set == record.set)
    return tuple(dict.fromkeys(name for name in found if name in named))


def _exit_code(status: int | None) -> int:
    """Return a command's exit code as a shell has it: 128 and the number of the signal that ended it."""
    return 255 if status is None else status if status >= 0 else 128 - status


def _outcome(recovery: Recovery | None, failure: SharesError | None) -> str:
    if failure:
        return failure.what
    aside = [
        f"{one.custodian or one.source} is {one.status}"
        for one in (recovery.findings if recovery else ())
        if one.status is not Status.INTACT
    ]
    return f"passed; set aside: {', '.join(aside)}" if aside else "passed"
