"""What entries say, in one sentence each, for people: in a table, on a page, read aloud.

Source: none.
May import: shares.clock, shares.documents.
Secret: nothing. Confidential: persons, places and serials, as in the entries. Public: the rest.
Does not: escape anything; whoever puts it on a page or terminal does.
"""

from __future__ import annotations

from collections.abc import Iterable
from datetime import datetime
from typing import assert_never

from shares import clock
from shares.documents.event import (
    Acknowledged,
    Attested,
    Brought,
    Challenged,
    Copied,
    Dealt,
    Delivered,
    Departed,
    Destroyed,
    Deviation,
    DrillClosed,
    DrillOpened,
    Event,
    HandedOn,
    Incident,
    Introduced,
    Lost,
    Noted,
    Received,
    Recovered,
    Rehearsed,
    Resolved,
    Retired,
    ScriptStep,
    SetAside,
    Transcribed,
)
from shares.documents.key_event import Approved, KeyBorn, NoncesCommitted, TaskAsked, TaskFailed, TaskFinished

_GRADES = {"content": "attested", "sealed": "showed the pack closed", "present": "answered"}
_DISPOSITIONS = {"returned": "the shares return to their custodians", "destroyed": "the key is destroyed"}


def words(event: Event) -> str:
    """Say in one sentence what an entry tells, without a final stop.

    >>> from shares.documents.event import make_event
    >>> words(make_event("delivered", custodian="north-pier", serial="HT-0001", channel="own boat"))
    'share of north-pier sent, serial HT-0001, by way of: own boat'
    """
    remark = getattr(event, "remark", None)
    said = _said(event)
    return f"{said}: {remark}" if remark and not isinstance(event, Noted | SetAside | Deviation) else said


def _said(event: Event) -> str:
    match event:
        case Dealt():
            twin = "" if event.practice is None else ", with a twin to practise on"
            return f"epoch {event.epoch} dealt to {_all(share.name for share in event.custodians)}{twin}"
        case Introduced():
            return f"card of {event.custodian} made known: {event.card}"
        case Acknowledged():
            return f"duties accepted by {event.custodian}"
        case Delivered():
            return f"share of {event.custodian} sent{_serial(event.serial)}{_more(', by way of: ', event.channel)}"
        case Received():
            return f"share of {event.custodian} received{_serial(event.serial)}"
        case Copied():
            return f"share of {event.custodian} copied, copy {event.copy_}"
        case Transcribed():
            return f"share of {event.custodian} typed or scanned, seen by {_all(event.persons)}"
        case HandedOn():
            return f"share of {event.custodian} handed on to {event.to}"
        case Challenged():
            drill = "" if event.drill is None else f" for drill {event.drill}"
            return f"{_all(event.custodians)} challenged{drill}, due {_time(event.due)}"
        case Attested():
            return _attested(event)
        case DrillOpened():
            return f"drill of {event.kind} opened for {_all(event.custodians)}: {event.scope}"
        case Brought():
            return f"shares of {_all(event.custodians)} brought to drill {event.drill}, and opened there"
        case Rehearsed():
            passed = "passed" if event.passed else f"failed, {event.outcome}"
            return f"drill {event.drill} rehearsed by {_all(event.custodians)} in {event.seconds} s: {passed}"
        case DrillClosed():
            return f"drill {event.drill} closed, {'passed' if event.passed else 'failed'}"
        case Recovered():
            after = _DISPOSITIONS.get(event.disposition) or f"the key is to be replaced by {_time(event.by)}"
            return f"secret recovered from {_all(event.custodians)}, because: {event.reason}; {after}"
        case Departed():
            share = f", with the share of {_all(event.custodians)}" if event.custodians else ""
            return f"{event.person} leaves{share}; to be dealt with by {_time(event.due)}"
        case Incident():
            exposed = "may be known" if event.exposed else "not taken to be known"
            to = f" to {_all(event.persons)}" if event.persons else ""
            return f"incident with {_all(event.custodians)}, {exposed}{to}, to be dealt with by {_time(event.due)}"
        case Resolved():
            action = "" if event.action is None else f", action {event.action}"
            return f"task of entry {event.entry}{action} done, {event.how}"
        case ScriptStep():
            return (
                f"step {event.step} of the ceremony done{' again' if event.repeats else ''}, initials {event.initials}"
            )
        case Deviation():
            step = "" if event.step is None else f" at step {event.step}"
            return f"exception{step}: {event.remark}{_more('; remedy: ', event.remedy)}"
        case Destroyed():
            return (
                f"copy {event.copy_} of {event.custodian}'s share destroyed by {event.by}"
                f"{_more(', ', event.method)}, seen by {event.witness}"
            )
        case Lost():
            return (
                f"copy {event.copy_} of {event.custodian}'s share given up as lost by {event.by}, "
                f"heard by {event.witness}: {event.reason}"
            )
        case Retired():
            return f"set retired, records kept until {_time(event.keep_until)}"
        case Noted() | SetAside():
            return event.remark
        case KeyBorn():
            how = "generated jointly" if event.origin == "joint" else "dealt"
            return f"key {how}, epoch {event.epoch}, record {event.record}"
        case NoncesCommitted():
            return f"{event.count:,} nonces made by {event.custodian}, and commitments to them handed out"
        case TaskAsked():
            return f"{_all(event.parties)} asked to {event.work} (task {event.task.hex()[:16]})"
        case Approved():
            return f"{event.custodian} agreed to {event.work}: {event.summary} (task {event.task.hex()[:16]})"
        case TaskFinished():
            return f"task {event.task.hex()[:16]} to {event.work} finished{_result(event.result)}"
        case TaskFailed():
            return f"task {event.task.hex()[:16]} to {event.work} failed{_more(', by ', event.by)}: {event.reason}"
    assert_never(event)


def _result(digest: bytes | None) -> str:
    return "" if digest is None else f", its result has the SHA-256 {digest.hex()}"


def _attested(event: Attested) -> str:
    notes = [
        "" if event.attributed else "unattributed",
        "late" if event.late else "",
        "seal opened" if event.opened else "",
    ]
    place = _more(", at ", event.place) + _serial(event.serial)
    return f"{event.custodian} {_GRADES[event.grade]}, {event.result}{place}" + "".join(f", {n}" for n in notes if n)


def _all(names: Iterable[str]) -> str:
    return ", ".join(names) or "nobody"


def _more(before: str, text: str | None) -> str:
    return "" if text is None else f"{before}{text}"


def _serial(serial: str | None) -> str:
    return _more(", serial ", serial)


def _time(time: datetime | None) -> str:
    return "" if time is None else clock.to_text(time)
