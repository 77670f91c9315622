"""Rounds of attestation in a set's folder: a challenge filed, its answers judged and entered, and who is still silent.

Source: FORMAT_EVIDENCE.md, sec. 17.
May import: shares.errors, shares.clock, shares.storage, shares.documents, shares.history, shares.evidence.attest,
shares.evidence.inventory, shares.evidence.judge, shares.evidence.retire.
Secret: party keys that sign, passed through. Confidential: challenges, answers, journal. Public: nothing else.
Does not: say when a round is due, or what its answers amount to; an audit does.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime

from shares import clock
from shares.documents.attestation import Attestation
from shares.documents.base import MAX_FILE
from shares.documents.challenge import Challenge, Purpose
from shares.documents.entry import Entry, NamedDigest
from shares.documents.event import Attested, Challenged, Departed, HandedOn, Introduced
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.record import Record
from shares.errors import ParameterError, VerificationError
from shares.evidence.attest import make_challenge
from shares.evidence.inventory import take_inventory
from shares.evidence.judge import Earlier, Judgement, check_challenge, judge
from shares.evidence.retire import refuse_retired
from shares.history.folder import SetFolder
from shares.history.holders import known_cards
from shares.history.journal import Journal
from shares.storage import read_file

ATTESTATIONS = "attestations"
CHALLENGE_NAME = "challenge.json"


@dataclass(frozen=True, slots=True)
class Round:
    """A challenge as the journal knows it, and what was answered.

    Attributes:
        challenged: the entry of the challenge.
        event: what it says.
        answers: the entry of each custodian's answer, by name: the first, or the first that is attributed.
    """

    challenged: Entry
    event: Challenged
    answers: dict[str, Entry]

    @property
    def silent(self) -> list[str]:
        """Who was asked and has not answered. Silence is no consent."""
        return [name for name in self.event.custodians if name not in self.answers]


@dataclass(frozen=True, slots=True)
class Entered:
    """What became of one answer: how it was judged, and its entry, where it was accepted."""

    judgement: Judgement
    entry: Entry | None


def rounds(journal: Journal) -> dict[bytes, Round]:
    """Return every round that a journal knows, oldest first, by the digest of its challenge."""
    found: dict[bytes, Round] = {}
    for entry in journal.entries:
        event = entry.event
        if isinstance(event, Challenged):
            found.setdefault(event.challenge, Round(entry, event, {}))
        elif isinstance(event, Attested) and event.challenge in found:
            answers = found[event.challenge].answers
            before = answers.get(event.custodian)
            if before is None or (event.attributed and not _is_attributed(before)):
                answers[event.custodian] = entry
    return found


def folder_of_round(challenge: Challenge) -> str:
    """Return the name of the folder, within the set's, where a challenge and its answers are kept."""
    day = challenge.created.date().isoformat()
    return f"{ATTESTATIONS}/{day}-{challenge.digest()[:6].hex()}"


def doubts_of_asked(record: Record, journal: Journal, custodians: Sequence[str]) -> list[str]:
    """Say of whom no answer can be expected: whose person has left, or who has no copy of the share any more.

    Args:
        record: the set's.
        journal: the set's.
        custodians: who is to be asked; all of them where none is named.
    """
    names = custodians or [custodian.name for custodian in record.custodians]
    left: dict[str, Entry] = {}
    for entry in journal.entries:
        event = entry.event
        if isinstance(event, Departed):
            left |= dict.fromkeys(event.custodians, entry)
        elif isinstance(event, HandedOn | Introduced):
            # Somebody else has the place since.
            left.pop(event.custodian, None)
    copies = [copy for copy in take_inventory(journal, record).copies if copy.epoch == record.epoch]
    gone = {copy.custodian for copy in copies} - {copy.custodian for copy in copies if copy.fate == "held"}
    said = []
    for name in names:
        if name in left:
            said.append(f"{name} is asked, and entry {left[name].sequence} tells that the person who held it has left.")
        if name in gone:
            said.append(f"{name} is asked, and every copy of that share is entered as destroyed or lost.")
    return said


def ask(
    folder: SetFolder,
    *,
    keys: Sequence[OpenPartyKey],
    due: datetime,
    custodians: Sequence[str] = (),
    purpose: Purpose = "attestation",
    drill: int | None = None,
    time: datetime | None = None,
) -> tuple[Challenge, Entry]:
    """Make a challenge, file it in the set's folder, and enter it in the journal.

    Args:
        folder: the set's.
        keys: of the parties that sign the entry; the first of them asks, and signs the challenge.
        due: until when to answer.
        custodians: who is asked; all of them by default.
        purpose: what is asked.
        drill: the number of the entry that opened the drill, for attendance.
        time: now by default.

    Returns:
        The challenge, and its entry, which names the file.

    Raises:
        ParameterError: nobody signs, or fewer than the policy wants; the set is retired; or as for ``make_challenge``.
        StorageError: folder or journal cannot be read or written.
    """
    if not keys:
        raise ParameterError(
            "a challenge is signed, and no party key is given", hint="give --sign KEY: custodians know who asks by it"
        )
    folder.require_signers(keys)
    refuse_retired(folder)
    time = clock.now() if time is None else time
    challenge = make_challenge(
        folder.record,
        custodians or [custodian.name for custodian in folder.record.custodians],
        key=keys[0],
        due=due,
        head=folder.journal().head,
        purpose=purpose,
        drill=drill,
        created=time,
    )
    named = folder.add(f"{folder_of_round(challenge)}/{CHALLENGE_NAME}", challenge.to_file())
    event = Challenged(
        what="challenged", challenge=challenge.digest(), custodians=challenge.custodians, due=due, drill=drill
    )
    return challenge, folder.append(event, keys=keys, documents=[named], time=time)


def enter(
    folder: SetFolder,
    challenge: Challenge,
    attestations: Sequence[Attestation],
    *,
    keys: Sequence[OpenPartyKey] = (),
    cards: Mapping[str, PartyCard] | None = None,
    time: datetime | None = None,
) -> list[Entered]:
    """Judge answers to a challenge of this set, file those that are accepted, and enter them in the journal.

    A run that was stopped is simply done again: what was entered is then named as given before.

    Args:
        folder: the set's.
        challenge: the challenge.
        attestations: the answers.
        keys: of the parties that sign the entries.
        cards: custodians' party cards whose fingerprints were compared, by name; one that the journal does not know
            yet is introduced in it.
        time: when the answers came; now by default.

    Returns:
        What became of each answer, in order.

    Raises:
        SetMismatchError, EpochMismatchError: the challenge is about another set or epoch.
        VerificationError: the journal knows no such challenge, or another card of a custodian.
        ParameterError: fewer sign than the policy wants, or a card is given for somebody unknown.
        StorageError: folder or journal cannot be read or written.
    """
    folder.require_signers(keys)
    check_challenge(challenge, folder.record)
    time = clock.now() if time is None else time
    journal = folder.journal()
    found = rounds(journal).get(challenge.digest())
    if found is None:
        raise VerificationError(
            "the set's journal knows no such challenge",
            where=os.fspath(folder.path),
            hint="give the challenge that was filed there; another set's answers prove nothing here",
        )
    known = _introduced(folder, known_cards(journal, folder.record, folder.policy), cards or {}, keys, time)
    earlier = {name: Earlier(_digest_of(entry), _is_attributed(entry)) for name, entry in found.answers.items()}

    def enter_one(attestation: Attestation, judgement: Judgement) -> Entry:
        name = f"{folder_of_round(challenge)}/{attestation.custodian}.json"
        named = _filed(folder, name, attestation.to_file())
        return folder.append(_event(attestation, judgement), keys=keys, documents=[named], time=time)

    return _each_judged(folder.record, challenge, attestations, known, time, earlier, enter_one)


def check_only(
    record: Record,
    challenge: Challenge,
    attestations: Sequence[Attestation],
    *,
    cards: Mapping[str, PartyCard],
    time: datetime | None = None,
) -> list[Entered]:
    """Judge answers as ``enter`` does, for whoever has no set's folder; nothing is filed or entered.

    Args:
        record: of the set and epoch.
        challenge: the challenge.
        attestations: the answers.
        cards: custodians' party cards whose fingerprints were compared, by name.
        time: when the answers came; now by default.

    Raises:
        SetMismatchError, EpochMismatchError, VerificationError: the challenge is not about this record.
    """
    check_challenge(challenge, record)
    known = {name: card.fingerprint for name, card in cards.items()}
    return _each_judged(record, challenge, attestations, known, clock.now() if time is None else time, {}, None)


def _each_judged(
    record: Record,
    challenge: Challenge,
    attestations: Sequence[Attestation],
    known: Mapping[str, str],
    time: datetime,
    earlier: dict[str, Earlier],
    enter_one: Callable[[Attestation, Judgement], Entry] | None,
) -> list[Entered]:
    """Judge one answer after another, and enter each that is accepted: what came before tells a replay."""
    judged = []
    for attestation in attestations:
        name = attestation.custodian
        judgement = judge(attestation, challenge, record, card=known.get(name), received=time, earlier=earlier)
        entry = None
        if judgement.accepted:
            entry = enter_one(attestation, judgement) if enter_one else None
            earlier[name] = Earlier(attestation.digest(), judgement.attributed)
        judged.append(Entered(judgement, entry))
    return judged


def _event(attestation: Attestation, judgement: Judgement) -> Attested:
    return Attested(
        what="attested",
        challenge=attestation.challenge,
        custodian=attestation.custodian,
        grade=attestation.grade,
        result=attestation.result,
        attributed=judgement.attributed,
        late=judgement.late,
        opened=attestation.opened,
        place=attestation.place,
        serial=attestation.serial,
    )


def _digest_of(entry: Entry) -> bytes:
    """Return the digest of the answer that an entry names; of nothing where it names none."""
    return entry.documents[0].digest if entry.documents else b""


def _is_attributed(entry: Entry) -> bool:
    return isinstance(entry.event, Attested) and entry.event.attributed


def _introduced(
    folder: SetFolder,
    known: dict[str, str],
    cards: Mapping[str, PartyCard],
    keys: Sequence[OpenPartyKey],
    time: datetime,
) -> dict[str, str]:
    """Enter the cards that the journal does not know yet; return all that are known then."""
    for name, card in cards.items():
        if folder.record.custodian(name) is None:
            raise ParameterError(f"a card is given for {name}, whom the record does not name")
        if known.get(name) not in (None, card.fingerprint):
            raise VerificationError(
                f"the card of {name} is {known[name]} by the journal, and another one is given: {card.fingerprint}",
                hint="compare fingerprints with them, by the known way; `shares journal add` introduces a new card",
            )
    for name, card in cards.items():
        if name not in known:
            event = Introduced(what="introduced", custodian=name, card=card.fingerprint)
            folder.append(event, keys=keys, cards=[card], time=time)
    return known | {name: card.fingerprint for name, card in cards.items()}


def _filed(folder: SetFolder, name: str, data: bytes) -> NamedDigest:
    """File an answer; one that a stopped run has filed and not entered is taken as it is."""
    path = folder.path / name
    if os.path.lexists(path) and read_file(path, limit=MAX_FILE) == data:
        return folder.named(name)
    return folder.add(folder.free_name(name), data)
