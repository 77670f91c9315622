"""A journal held against what it speaks of: the record, the policy, the files it names, and heads noted elsewhere.

Source: FORMAT_EVIDENCE.md, sec. 16.
May import: shares.errors, shares.documents, shares.history.files, shares.history.journal.
Secret: nothing. Confidential: the policy, and what entries and files tell. Public: the record, digests.
Does not: judge what happened, or what is overdue; ``evidence`` does. Whoever holds every signing key could write
another journal from its start: only heads and attestations that others keep tell the two apart.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Iterator, Sequence

from shares.documents.entry import Entry, Head, NamedDigest
from shares.documents.event import Dealt, SetAside
from shares.documents.key_event import KeyBorn
from shares.documents.key_record import KeyRecord
from shares.documents.party import PartyCard
from shares.documents.policy import Policy
from shares.documents.record import Record
from shares.errors import StorageError
from shares.history.files import MAX_DOCUMENT, Files, is_name_in_set
from shares.history.journal import Journal, Problem, unnamed


def verify(
    journal: Journal,
    files: Files,
    record: Record | KeyRecord,
    policy: Policy | None,
    *,
    heads: Sequence[Head] = (),
    trusted: Sequence[PartyCard] = (),
) -> tuple[Problem, ...]:
    """Say everything that is wrong with a journal: its own problems first, then those with what it speaks of.

    Args:
        journal: as ``read_journal`` read it.
        files: those of its set.
        record: the set's, or the threshold key's.
        policy: the set's, where there is one: whether two parties sign each entry, of those trusted if some are given.
        heads: where the journal is known to have stood: noted elsewhere, or quoted in attestations and reports.
        trusted: cards whose fingerprints were compared; where some are given, one of these parties signs each entry.

    Raises:
        StorageError: the files cannot be listed.
    """
    names = files.names()
    return (
        *journal.problems,
        *(_record_problems(journal, record) if isinstance(record, Record) else _key_problems(journal, record)),
        *_document_problems(journal, files, frozenset(names)),
        *_set_aside(journal, names),
        *_signer_problems(journal, policy, trusted),
        *head_problems(journal, heads),
    )


def _record_problems(journal: Journal, record: Record) -> Iterator[Problem]:
    latest = None
    for entry in journal.entries:
        event = entry.event
        if not isinstance(event, Dealt):
            continue
        if event.set != record.set:
            what = f"it tells of the set {event.set.hex()}, and the record is of {record.set.hex()}"
            yield Problem(entry.sequence, what, kind="record")
        elif latest and event.epoch <= latest.epoch:
            what = f"it tells of epoch {event.epoch}, after epoch {latest.epoch}"
            yield Problem(entry.sequence, what, kind="record")
        else:
            latest = event
    if latest is None:
        yield Problem(0, "no entry tells that the record's set was dealt", kind="record")
    elif latest.record != record.fingerprint:
        what = f"the set was last dealt with the record {latest.record}, and the record here is {record.fingerprint}"
        yield Problem(0, what, kind="record")
    elif [share.name for share in latest.custodians] != [custodian.name for custodian in record.custodians]:
        yield Problem(0, "the set was dealt to other custodians than those of the record", kind="record")


def _key_problems(journal: Journal, record: KeyRecord) -> Iterator[Problem]:
    births = [(entry.sequence, entry.event) for entry in journal.entries if isinstance(entry.event, KeyBorn)]
    for number, born in births:
        if (born.key, born.epoch, born.record) != (record.key, record.epoch, record.fingerprint):
            what = f"it tells of the key record {born.record}, and the one here is {record.fingerprint}"
            yield Problem(number, what, kind="record")
    if not births:
        # Whoever only asks for tasks begins a journal when the key has long been there.
        what = "no entry tells how the key was born: this journal was begun later, or its beginning is gone"
        yield Problem(0, what, breaks=False, kind="record")


def _document_problems(journal: Journal, files: Files, names: frozenset[str]) -> Iterator[Problem]:
    latest: dict[str, tuple[Entry, NamedDigest]] = {}
    for entry in journal.entries:
        for document in entry.documents:
            before = latest.get(document.path)
            if before and before[1].digest != document.digest:
                what = f"it names {document.path} with other content than entry {before[0].sequence} did"
                yield Problem(entry.sequence, what, breaks=False, kind="renamed")
            latest[document.path] = entry, document
    for entry, document in latest.values():
        if not is_name_in_set(document.path):
            what = f"it names {document.path!a}, which is no file in a set's folder"
            yield Problem(entry.sequence, what, kind="missing")
        elif document.path not in names:
            yield Problem(entry.sequence, f"it names {document.path}, which is missing", kind="missing")
        else:
            yield from _content_problem(entry, document, files)


def _content_problem(entry: Entry, document: NamedDigest, files: Files) -> Iterator[Problem]:
    try:
        found = files.read(document.path, limit=MAX_DOCUMENT)
    except StorageError as error:
        what = f"it names {document.path}, which cannot be read: {error.what}"
        yield Problem(entry.sequence, what, kind="missing")
        return
    if hashlib.sha256(found).digest() != document.digest:
        what = f"it names {document.path}, which was altered since"
        yield Problem(entry.sequence, what, kind="altered")


def _set_aside(journal: Journal, names: Iterable[str]) -> Iterator[Problem]:
    named = {document.path for entry in journal.entries for document in entry.documents}
    for entry in journal.entries:
        if isinstance(entry.event, SetAside):
            where = ", ".join(document.path for document in entry.documents)
            what = f"what a stopped run had left of a line was set aside: {where}"
            yield Problem(entry.sequence, what, breaks=False, kind="set-aside")
    for name in unnamed(names, named.__contains__):
        what = f"{name} holds what a stopped run left of a line, and no entry names it; the next entry will"
        yield Problem(0, what, breaks=False, kind="set-aside")


def _signer_problems(journal: Journal, policy: Policy | None, trusted: Sequence[PartyCard]) -> Iterator[Problem]:
    signers = [{card.ed25519 for card in journal.signers(entry)} for entry in journal.entries]
    known = {card.ed25519 for card in trusted}
    numbers = [entry.sequence for entry in journal.entries]

    def those(lacking: Iterable[bool]) -> list[int]:
        return [number for number, lacks in zip(numbers, lacking, strict=True) if lacks]

    unsigned = those(not keys for keys in signers)
    if unsigned:
        what = f"{_entries(unsigned)} not signed: whoever could write to the file may have written that"
        yield Problem(unsigned[0], what, breaks=False, kind="trust")
    if policy is not None and policy.dual_control:
        # Where parties are trusted, anybody's second key is no second party.
        alone = those(len(keys & known if known else keys) < 2 for keys in signers)
        if alone:
            whom = "parties whose cards are trusted" if known else "parties"
            what = f"{_entries(alone)} signed by fewer than two {whom}, and the policy asks for dual control"
            yield Problem(alone[0], what, kind="control")
    if known:
        # Those that nobody signed are told above.
        foreign = those(bool(keys) and not keys & known for keys in signers)
        if foreign:
            yield Problem(foreign[0], f"{_entries(foreign)} signed by no party whose card is trusted", kind="trust")


def head_problems(journal: Journal, heads: Iterable[Head]) -> Iterator[Problem]:
    """Yield each head at which a journal never stood.

    Args:
        journal: as it was read.
        heads: noted elsewhere, or quoted in documents.
    """
    for head in heads:
        if journal.holds(head):
            continue
        last = journal.entries[-1].sequence if journal.entries else 0
        lost = "its end was removed, or it was rewritten" if head.sequence > last else "it was rewritten"
        yield Problem(0, f"it never stood at {head.words()}, as was noted elsewhere: {lost}", kind="head")


def numbered(numbers: Sequence[int]) -> str:
    """Write ascending numbers of entries in a few words.

    >>> numbered([1, 3, 4, 5, 7]), numbered([2])
    ('entries 1, 3 to 5, 7', 'entry 2')
    """
    runs: list[list[int]] = []
    for number in numbers:
        if runs and number == runs[-1][-1] + 1:
            runs[-1][1:] = [number]
        else:
            runs.append([number])
    said = ", ".join(f"{run[0]} to {run[1]}" if len(run) > 1 else str(run[0]) for run in runs)
    return f"entry {said}" if len(numbers) == 1 else f"entries {said}"


def _entries(numbers: Sequence[int]) -> str:
    """Write the same with the verb: ``entries 1, 3 to 7 are``."""
    return f"{numbered(numbers)} {'is' if len(numbers) == 1 else 'are'}"
