"""What a split and a recovery enter into the journal of the set.

Source: trade practice: creation, distribution and use of shares are logged with date, person and purpose (CA/Browser
Forum TLS Baseline Requirements, sec. 5.4.1); a recovery ends with a decision on what becomes of the key (NIST SP 800-57
Part 1 rev. 5, appendix B, from memory); FORMAT.md, sec. 16.
May import: shares.errors, shares.documents, shares.history, shares.custody.packing, .split.
Secret: party keys that sign, passed through. Confidential: reasons and persons. Public: the rest.
Does not: read a journal; ``history`` does, and ``evidence`` judges it.
"""

from __future__ import annotations

import re
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from shares.custody.packing import Packing
from shares.custody.split import Dealt
from shares.documents.entry import Entry, NamedDigest
from shares.documents.event import Acknowledged, DealtShare, Deviation, Disposition, Recovered
from shares.documents.event import Dealt as DealtEvent
from shares.documents.members import check_text
from shares.documents.party import OpenPartyKey, PartyCard
from shares.errors import ParameterError
from shares.history.folder import SetFolder
from shares.history.journal import append, load_journal

ACKNOWLEDGEMENTS = "acknowledgements"
_DISPOSITIONS: tuple[Disposition, ...] = ("returned", "destroyed")


@dataclass(frozen=True, slots=True, eq=False)
class Entering:
    """What of a split goes into its journal besides the dealing itself.

    Attributes:
        keys: of the parties that sign the entries.
        cards: the custodians' party cards, as far as known; they are introduced by the entry.
        time: of the entries; now by default.
    """

    keys: Sequence[OpenPartyKey] = ()
    cards: Mapping[str, PartyCard] | None = None
    time: datetime | None = None

    def dealing(
        self,
        folder: Path,
        dealt: Dealt,
        packings: Mapping[str, Packing],
        companions: Mapping[str, bytes],
        practice: Dealt | None,
    ) -> None:
        """Enter a dealing, just before its record is written.

        Raises:
            StorageError: the journal cannot be written.
        """
        self._end_unfinished(folder)
        cards = self.cards or {}
        named = [NamedDigest.of(name, data) for name, data in companions.items()]
        for one in named:
            if _is_acknowledgement(one):
                custodian = one.path.removeprefix(f"{ACKNOWLEDGEMENTS}/").removesuffix(".json")
                event = Acknowledged(what="acknowledged", custodian=custodian)
                append(folder, event, keys=self.keys, documents=[one], time=self.time)
        record = dealt.record
        append(
            folder,
            DealtEvent(
                what="dealt",
                set=record.set,
                epoch=record.epoch,
                record=record.fingerprint,
                custodians=tuple(
                    DealtShare(
                        name=name,
                        packed=packings[name].method,
                        card=cards[name].fingerprint if name in cards else None,
                    )
                    for name in (custodian.name for custodian in record.custodians)
                ),
                practice=practice.record.fingerprint if practice else None,
            ),
            keys=self.keys,
            cards=list(cards.values()),
            documents=[one for one in named if not _is_acknowledgement(one)],
            time=self.time,
        )

    def _end_unfinished(self, folder: Path) -> None:
        """Enter that the dealing which ends the journal came to nothing: a run was killed before its record stood."""
        entries = load_journal(folder).entries
        last = entries[-1].event if entries else None
        if isinstance(last, DealtEvent):
            self.undone(folder, last.set)

    def undone(self, folder: Path, set_id: bytes) -> None:
        """Enter that a dealing already entered came to nothing; an entry is never taken back.

        Raises:
            StorageError: the journal cannot be written.
        """
        remark = f"the split of set {set_id.hex()} did not finish: no record was written"
        append(
            folder,
            Deviation(what="exception", remark=remark, remedy="its files are destroyed"),
            keys=self.keys,
            time=self.time,
        )


def _is_acknowledgement(one: NamedDigest) -> bool:
    return one.path.startswith(f"{ACKNOWLEDGEMENTS}/")


@dataclass(frozen=True, slots=True)
class Purpose:
    """Why a secret is recovered, before whom, and what becomes of key and shares afterwards."""

    reason: str
    disposition: Disposition
    by: datetime | None = None
    persons: tuple[str, ...] = ()

    @classmethod
    def of(cls, reason: str, disposition: str, persons: Collection[str] = ()) -> Purpose:
        """Return the purpose that an operator states.

        Args:
            reason: 1 to 500 characters.
            disposition: ``returned``, ``destroyed``, or the date until which the key is replaced, like ``2026-12-31``.
            persons: who is present.

        Raises:
            ParameterError: a text out of range, or no such disposition.

        >>> Purpose.of("the archive's disk failed", "2026-12-31").disposition
        'replace'
        """
        for text in (reason, *persons):
            check_text(text)
        for kept in _DISPOSITIONS:
            if disposition == kept:
                return cls(reason, kept, None, tuple(persons))
        try:
            return cls(reason, "replace", end_of_day(disposition), tuple(persons))
        except ParameterError as error:
            problem = error.what
        raise ParameterError(f"{problem}, nor `returned` or `destroyed`", where="--disposition")

    def enter(self, folder: SetFolder, opened: Sequence[str], keys: Sequence[OpenPartyKey]) -> Entry:
        """Enter the recovery into the journal, before the secret goes anywhere.

        Args:
            folder: the set's.
            opened: whose shares of the set were opened here, whether they were needed or not: all are known now.
            keys: of the parties that sign.

        Raises:
            ParameterError: the policy asks for two signatures, and fewer parties sign.
            StorageError: the journal cannot be written.
        """
        event = Recovered(
            what="recovered",
            custodians=tuple(opened),
            persons=self.persons,
            reason=self.reason,
            disposition=self.disposition,
            by=self.by,
        )
        return folder.append(event, keys=keys)


def end_of_day(date: str, *, where: str | None = None) -> datetime:
    """Return the last second of a day, UTC.

    Args:
        date: like ``2026-12-31``.
        where: which option says it, for the refusal.

    Raises:
        ParameterError: it is no date like ``2026-12-31``.

    >>> end_of_day("2026-12-31").isoformat()
    '2026-12-31T23:59:59+00:00'
    """
    form = re.fullmatch(r"([0-9]{4})-([0-9]{2})-([0-9]{2})", date)
    if form:
        try:
            return datetime(int(form[1]), int(form[2]), int(form[3]), 23, 59, 59, tzinfo=UTC)
        except ValueError:
            pass
    raise ParameterError("it is no date like 2026-12-31", where=where)
