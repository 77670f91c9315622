"""The end of a set, share by share: who destroyed which copy, who saw it, and that none is left unaccounted for.

Source: PCI PIN 3.1, 24-2 (destruction is witnessed by a third party; from memory); ISO 11568, sec. 4.14.4, and WebTrust
for CAs 4.6 (any copy for any purpose; from a summary); CA/Browser Forum TLS Baseline Requirements, sec. 5.4.3 (records
are kept at least two years after the destruction of the key); NIST SP 800-57 Part 1, sec. 8.2.2.1.
May import: shares.errors, shares.clock, shares.storage, shares.documents, shares.history, shares.evidence.inventory.
Secret: party keys that sign, passed through. Confidential: who keeps and destroyed what. Public: nothing.
Does not: prove erasure: it records who says so and who saw it. The secret itself, once recovered, is no copy here.
"""

from __future__ import annotations

import hashlib
import os
import re
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from pathlib import Path
from typing import Final

from shares import clock
from shares.documents.base import MAX_FILE
from shares.documents.entry import Entry, NamedDigest
from shares.documents.event import Destroyed, Lost, Retired
from shares.documents.members import check_text
from shares.documents.party import OpenPartyKey
from shares.documents.policy import folded
from shares.errors import ParameterError, VerificationError
from shares.evidence.inventory import Copy, Inventory, take_inventory
from shares.history.folder import SetFolder
from shares.history.holders import Holders
from shares.history.journal import Journal
from shares.storage import StrPath, read_file

KEEP_RECORDS: Final = timedelta(days=2 * 365)
"""How long records are kept where no policy says it: two years (BR, sec. 5.4.3)."""
AFFIDAVITS: Final = "affidavits"


@dataclass(frozen=True, slots=True)
class Ending:
    """How far a set has come to its end.

    Attributes:
        inventory: every copy and its fate.
        retired: the entry that closed it, or None.
    """

    inventory: Inventory
    retired: Entry | None

    @property
    def lost(self) -> tuple[Copy, ...]:
        """The copies that were given up, and not destroyed."""
        return tuple(copy for copy in self.inventory.copies if copy.fate == "lost")


def is_retired(journal: Journal) -> bool:
    """Say whether a set was closed: nobody should challenge, drill or recover by it any more."""
    return any(isinstance(entry.event, Retired) for entry in journal.entries)


def refuse_retired(folder: SetFolder) -> None:
    """Refuse to ask for proofs or drills of a set that was closed.

    Raises:
        ParameterError: it was.
        StorageError: the journal cannot be read.
    """
    if is_retired(folder.journal()):
        raise ParameterError(
            "the set was retired: its shares are destroyed, and nothing is asked of its custodians any more",
            where=os.fspath(folder.path),
            hint="`shares retire status` says how each copy ended",
        )


def ending(folder: SetFolder) -> Ending:
    """Return how far a set has come to its end.

    Raises:
        StorageError: the journal cannot be read.
        VerificationError: the journal is broken, so that it cannot be said which copies there are.
    """
    journal = folder.journal()
    broken = next((problem for problem in journal.problems if problem.breaks), None)
    if broken is not None:
        raise VerificationError(
            f"the journal cannot be relied on: line {broken.line}: {broken.what}",
            where=os.fspath(folder.path),
            hint="`shares journal verify` says all; which copies there are cannot be said by it",
        )
    retired = next((entry for entry in journal.entries if isinstance(entry.event, Retired)), None)
    return Ending(take_inventory(journal, folder.record), retired)


def copy_of(found: Ending, custodian: str, name: str | None) -> Copy:
    """Return the copy that is meant.

    Args:
        found: as ``ending`` returns it.
        custodian: whose share.
        name: of the copy; may be None where the custodian has just one that is not destroyed.

    Raises:
        ParameterError: no such custodian or copy, or several; says which there are.
    """
    own = [copy for copy in found.inventory.copies if copy.custodian == custodian]
    if not own:
        raise ParameterError(
            f"{custodian} was dealt no share of this set",
            where="--custodian",
            hint=f"custodians: {', '.join(dict.fromkeys(copy.custodian for copy in found.inventory.copies))}",
        )
    names = ", ".join(copy.name for copy in own)
    if name is not None:
        copy = found.inventory.find(custodian, name)
        if copy is None:
            raise ParameterError(
                f"no entry tells of a copy {name} of {custodian}'s share",
                where="--copy",
                hint=f"copies: {names}; enter one that nobody knew of with `shares journal add SET copied` first",
            )
        return copy
    open_ = [copy for copy in own if copy.fate != "destroyed"]
    if len(open_) > 1:
        raise ParameterError(
            f"{custodian} has several copies: {', '.join(copy.name for copy in open_)}",
            hint="say which one with --copy",
        )
    return open_[0] if open_ else own[0]


def destroyed(
    folder: SetFolder,
    custodian: str,
    *,
    copy: str | None = None,
    by: str,
    witness: str,
    method: str | None = None,
    affidavit: StrPath | None = None,
    keys: Sequence[OpenPartyKey] = (),
    time: datetime | None = None,
) -> tuple[Copy, Entry]:
    """Enter that a copy was destroyed before a witness.

    Args:
        folder: the set's.
        custodian: whose share.
        copy: which copy; see ``copy_of``.
        by: who destroyed it.
        witness: who saw it: neither the custodian nor ``by``.
        method: how.
        affidavit: the scan of the signed form, at most 1 MiB; a copy is kept in the set's folder.
        keys: of the parties that sign.
        time: of the entry; now by default.

    Returns:
        The copy as it was, and the entry.

    Raises:
        ParameterError: no such copy, it was destroyed already, or fewer signers than the policy asks for.
        VerificationError: the witness is no third party, or the journal is broken.
        StorageError: a file cannot be read or written.
    """
    folder.require_signers(keys)
    meant = copy_of(ending(folder), custodian, copy)
    if meant.fate == "destroyed":
        raise ParameterError(
            f"copy {meant.name} of {custodian}'s share was destroyed already (entry {meant.entry})",
            hint="a copy that nobody knew of is entered with `shares journal add SET copied` first",
        )
    _check_witness(folder, meant, by, witness)
    event = Destroyed.model_validate(
        {**_who(meant, by, witness), "what": "destroyed", "method": _text(method, "the method")}
    )
    documents = (_affidavit(folder, affidavit),) if affidavit is not None else ()
    return meant, folder.append(event, keys=keys, documents=documents, time=time)


def lost(
    folder: SetFolder,
    custodian: str,
    *,
    copy: str | None = None,
    by: str,
    witness: str,
    reason: str,
    keys: Sequence[OpenPartyKey] = (),
    time: datetime | None = None,
) -> tuple[Copy, Entry]:
    """Enter that a copy cannot be found and is given up. It is accounted for then, but was not destroyed.

    Args:
        by: who says so.
        reason: how it was lost, and where it was looked for.
        folder, custodian, copy, witness, keys, time: as for ``destroyed``.

    Raises:
        ParameterError, VerificationError, StorageError: as for ``destroyed``.
    """
    folder.require_signers(keys)
    meant = copy_of(ending(folder), custodian, copy)
    if meant.fate != "held":
        raise ParameterError(f"copy {meant.name} of {custodian}'s share is {meant.fate} already (entry {meant.entry})")
    _check_witness(folder, meant, by, witness)
    event = Lost.model_validate({**_who(meant, by, witness), "what": "lost", "reason": _text(reason, "the reason")})
    return meant, folder.append(event, keys=keys, time=time)


def close(
    folder: SetFolder,
    *,
    remark: str | None = None,
    keys: Sequence[OpenPartyKey] = (),
    time: datetime | None = None,
) -> tuple[Ending, Entry]:
    """Close a set: every copy of every share is accounted for.

    Args:
        folder: the set's.
        remark: what is to be noted.
        keys: of the parties that sign.
        time: of the entry; now by default.

    Returns:
        How the set ended, and the entry; ``keep_until`` is the policy's ``keep_records`` from then.

    Raises:
        ParameterError: it is closed already, or fewer sign than the policy asks for.
        VerificationError: a copy is unaccounted for (each is named), or the journal is broken.
    """
    folder.require_signers(keys)
    found = ending(folder)
    if found.retired is not None:
        raise ParameterError(
            f"the set was retired on {clock.to_text(found.retired.time)} (entry {found.retired.sequence})"
        )
    held = found.inventory.held
    if held:
        names = "; ".join(f"{copy.custodian} ({copy.name})" for copy in held)
        raise VerificationError(
            f"{len(held)} of {len(found.inventory.copies)} copies are unaccounted for: {names}",
            where=os.fspath(folder.path),
            hint="enter each with `shares retire destroyed`, or, where one cannot be found, `shares retire lost`",
        )
    now = clock.now() if time is None else time
    keep = KEEP_RECORDS if folder.policy is None else folder.policy.keep_records
    event = Retired(what="retired", keep_until=now + keep, remark=_text(remark, "the remark"))
    return found, folder.append(event, keys=keys, time=now)


def _check_witness(folder: SetFolder, copy: Copy, by: str, witness: str) -> None:
    """See that a third party saw it: not the custodian, by whatever name, and not whoever did it."""
    check_text(by, "the name of who did it")
    check_text(witness, "the name of the witness")
    if folded(witness) == folded(by):
        raise VerificationError(
            "the witness is the one who did it: nobody witnesses their own act", where="--witness", hint="have another"
        )
    holders = Holders((custodian.name for custodian in folder.record.custodians), folder.policy)
    for entry in folder.journal().entries:
        holders.take(entry.event)
    if holders.is_party(copy.custodian, witness):
        raise VerificationError(
            f"the witness is the custodian {copy.custodian}, and must be a third party",
            where="--witness",
            hint="name somebody who does not keep this share and never did",
        )


def _who(copy: Copy, by: str, witness: str) -> dict[str, str]:
    return {"custodian": copy.custodian, "copy": copy.name, "by": by, "witness": witness}


def _text(text: str | None, what: str) -> str | None:
    return None if text is None else check_text(text, what)


def _affidavit(folder: SetFolder, path: StrPath) -> NamedDigest:
    """Keep the scan of an affidavit in the set's folder, under a name made of its digest."""
    data = read_file(path, limit=MAX_FILE)
    suffix = re.search(r"\.[a-z0-9]{1,5}$", os.fspath(path).lower())
    name = f"{AFFIDAVITS}/{hashlib.sha256(data).hexdigest()[:16]}{suffix[0] if suffix else ''}"
    # One form may tell of several copies; a run that was stopped may have left the file.
    return folder.named(name) if os.path.lexists(Path(folder.path, name)) else folder.add(name, data)
