"""What people report by hand: which facts each event needs, and the entry made of them, with what they hand in.

Source: FORMAT_EVIDENCE.md, sec. 16; the 24 hours for a leaver are what the trade asks for.
May import: shares.errors, shares.clock, shares.documents, .folder, .holders, .set_tasks.
Secret: party keys that sign, passed through. Confidential: what is reported. Public: nothing.
Does not: take reports of what a command does itself, such as a split, an attestation, a drill or a recovery.
"""

from __future__ import annotations

import dataclasses
import hashlib
import os
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import Final

from shares import clock
from shares.documents.entry import Entry, NamedDigest
from shares.documents.event import Event, Remedy, make_event
from shares.documents.intervals import parse_duration
from shares.documents.party import OpenPartyKey, PartyCard
from shares.errors import ParameterError
from shares.history.folder import SetFolder
from shares.history.holders import Holders
from shares.history.set_tasks import check_task

# What each event needs, and what it may have besides: fields of ``Report``, and so options of the command.
NEEDS: Final[dict[str, tuple[tuple[str, ...], tuple[str, ...]]]] = {
    "delivered": (("custodian",), ("serial", "channel", "remark")),
    "received": (("custodian",), ("serial", "remark")),
    "acknowledged": (("custodian",), ("remark",)),
    "introduced": (("custodian", "card"), ("remark",)),
    "copied": (("custodian", "copy"), ("remark",)),
    "transcribed": (("custodian", "person"), ("remark",)),
    "handed-on": (("custodian", "to"), ("remark",)),
    "departed": (("person",), ("custodian", "within", "remark")),
    "incident": (("custodian", "remark"), ("person", "not_exposed", "within")),
    "resolved": (("entry", "how"), ("action", "remark")),
    "exception": (("remark",), ("remedy",)),
    "noted": (("remark",), ()),
}
_SEVERAL: Final = {
    ("transcribed", "person"),
    ("departed", "custodian"),
    ("incident", "custodian"),
    ("incident", "person"),
}
RESPOND_WITHIN: Final = timedelta(hours=24)
"""How soon a departure, incident or loss is dealt with where no policy says."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Report:
    """What somebody says has happened; which of it an event needs, ``NEEDS`` tells.

    Attributes:
        custodian: whose shares.
        person: who leaves, typed the share, or may know it.
        card: the custodian's party card.
        copy: which copy, by its serial.
        to: who has the share now.
        entry: the number of the entry that set the task which is done.
        action: which action of a drill's report, from 1.
        within: how soon to respond, like ``24h``.
        not_exposed: nobody can have come to know a share.
    """

    custodian: tuple[str, ...] = ()
    person: tuple[str, ...] = ()
    card: PartyCard | None = None
    serial: str | None = None
    channel: str | None = None
    copy: str | None = None
    to: str | None = None
    entry: int | None = None
    action: int | None = None
    how: Remedy | None = None
    remedy: str | None = None
    within: str | None = None
    not_exposed: bool = False
    remark: str | None = None


def event_of(folder: SetFolder, what: str, report: Report, *, time: datetime | None = None) -> Event:
    """Return the event that somebody reports.

    Args:
        folder: the set's.
        what: which event, one of ``NEEDS``.
        report: the facts. Custodians of a departure are by default those whose share the person holds by policy and
            journal.
        time: of the report; now by default.

    Raises:
        ParameterError: a fact is missing, out of place, or cannot be: its option is named.
        StorageError, DocumentError: the journal, or the report of the drill that is meant, cannot be read.
    """
    needed, allowed = NEEDS[what]
    if what == "departed" and report.person and not report.custodian:
        report = dataclasses.replace(report, custodian=_held_by(folder, report.person))
    fields = [field.name for field in dataclasses.fields(report)]
    said = {name: value for name in fields if (value := getattr(report, name)) not in (None, (), False)}
    for name in said:
        if name not in needed + allowed:
            raise ParameterError(f"{what} does not take it", where=_option(name), hint=_taken(what))
        if (what, name) not in _SEVERAL and isinstance(said[name], tuple) and len(said[name]) > 1:
            raise ParameterError(f"{what} takes it once", where=_option(name), hint="make one entry for each")
    for name in needed:
        if name not in said:
            raise ParameterError(f"{what} needs it", where=_option(name), hint=_taken(what))
    _check_custodians(folder, report.custodian)
    if report.entry is not None:
        check_task(folder, report.entry, report.action, report.how)
    members = {
        name: said[name] for name in said if name not in ("custodian", "person", "card", "within", "not_exposed")
    }
    for name in ("custodian", "person"):
        if (what, name) in _SEVERAL:
            members[f"{name}s"] = getattr(report, name)
        elif name in said:
            members[name] = said[name][0]
    if report.card is not None:
        members["card"] = report.card.fingerprint
    if what in ("departed", "incident"):
        members["due"] = (clock.now() if time is None else time) + _within(folder, report.within)
    if what == "incident":
        members["exposed"] = not report.not_exposed
    return make_event(what, **members)


def append_with(
    folder: SetFolder,
    event: Event,
    attached: Mapping[str, bytes],
    *,
    keys: Sequence[OpenPartyKey] = (),
    cards: Sequence[PartyCard] = (),
    time: datetime | None = None,
) -> Entry:
    """Append an event, with the documents handed in for it: copied into the set's folder under their digests.

    Args:
        folder: the set's.
        event: what happened.
        attached: what each file holds, by its name, of which only a plain ending is kept.
        keys: of the parties that sign.
        cards: to be introduced.
        time: of the entry; now by default.

    Raises:
        ParameterError: the policy asks for two signatures, and fewer parties sign.
        StorageError: something cannot be written; then there is no entry. A document that was copied already stays,
            and the next attempt takes it up.
    """
    folder.require_signers(keys)
    documents = []
    for name, data in attached.items():
        ending = re.search(r"(\.[a-z0-9]{1,8}){0,2}$", name)
        document = NamedDigest.of(f"documents/{hashlib.sha256(data).hexdigest()}{ending[0] if ending else ''}", data)
        if not os.path.lexists(folder.path / document.path):
            folder.add(document.path, data)
        documents.append(document)
    return folder.append(event, keys=keys, cards=cards, documents=documents, time=time)


def _option(field: str) -> str:
    return "--" + field.replace("_", "-")


def _taken(what: str) -> str:
    needed, allowed = (", ".join(map(_option, names)) for names in NEEDS[what])
    return f"{what} needs {needed}" + (f", and takes {allowed}" if allowed else "")


def _held_by(folder: SetFolder, persons: tuple[str, ...]) -> tuple[str, ...]:
    """Return whose shares a person holds now, as far as policy and journal say."""
    holders = Holders((custodian.name for custodian in folder.record.custodians), folder.policy)
    for entry in folder.journal().entries:
        holders.take(entry.event)
    held = tuple(dict.fromkeys(name for person in persons for name in holders.held_by(person)))
    if held:
        return held
    raise ParameterError(
        "neither policy nor journal names a share that this person holds"
        if folder.policy
        else "the set has no policy that says who holds what, and the journal hands this person none",
        where="--custodian",
        hint="name each custodian whose share they held or could reach",
    )


def _check_custodians(folder: SetFolder, names: tuple[str, ...]) -> None:
    known = [custodian.name for custodian in folder.record.custodians]
    for i, name in enumerate(names):
        if name not in known:
            hint = f"one of {', '.join(known)}"
            raise ParameterError("is no custodian of this set", where=f"--custodian {name}", hint=hint)
        if name in names[:i]:
            raise ParameterError("is given twice", where=f"--custodian {name}")


def _within(folder: SetFolder, text: str | None) -> timedelta:
    if text is None:
        return folder.policy.respond_within if folder.policy else RESPOND_WITHIN
    try:
        return parse_duration(text)
    except ParameterError as error:
        problem = error.what
    raise ParameterError(problem, where="--within")
