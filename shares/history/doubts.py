"""What does not agree with the journal in a report by hand: said to whoever makes it, and entered all the same.

Source: PCI PIN 9-2 (serials of packs are compared on receipt; from a summary); the rest is common practice, no source.
May import: shares.documents, .holders, .journal.
Secret: nothing. Confidential: serials, and who holds which card. Public: nothing.
Does not: refuse anything: what people saw is a fact, and an audit judges it.
"""

from __future__ import annotations

from collections.abc import Iterator

from shares.documents.event import Copied, Dealt, Delivered, Event, Introduced, Received
from shares.documents.party import PartyCard
from shares.documents.policy import folded
from shares.documents.record import Record
from shares.history.holders import known_cards
from shares.history.journal import Journal

JUDGED = (Introduced, Received, Copied)
"""The events that there can be doubts about: for all others the journal need not be read."""


def doubts(event: Event, journal: Journal, record: Record, card: PartyCard | None = None) -> list[str]:
    """Say what is odd about a report, in words for a caution each.

    Args:
        event: what is reported.
        journal: as it stood before.
        record: the set's.
        card: the one that the event introduces.
    """
    if isinstance(event, Introduced) and card is not None:
        return list(_of_card(event.custodian, card, journal, record))
    if isinstance(event, Received):
        return list(_of_pack(event, journal))
    if isinstance(event, Copied):
        return list(_of_copy(event, journal))
    return []


def _of_card(custodian: str, card: PartyCard, journal: Journal, record: Record) -> Iterator[str]:
    if card.name != custodian:
        yield f"the card is of {card.name}, not {custodian}."
    # One signing key is one party, whatever other cards it has.
    if any(one.role == "dealer" and one.card.ed25519 == card.ed25519 for one in record.signatures):
        yield (
            f"the card is the dealer's, who signed the record: what {custodian} attests would be the dealer's word. "
            "Ask them for a card of their own."
        )
    for other, fingerprint in known_cards(journal, record, None).items():
        known = journal.cards.get(fingerprint)
        same = fingerprint == card.fingerprint or (known is not None and known.ed25519 == card.ed25519)
        if other != custodian and same:
            yield (
                f"the card is known as that of {other}: one person would attest for two shares, and an audit would "
                "count two custodians."
            )


def _of_pack(event: Received, journal: Journal) -> Iterator[str]:
    sent: Delivered | None = None
    for entry in journal.entries:
        if isinstance(entry.event, Dealt):
            sent = None
        elif isinstance(entry.event, Delivered) and entry.event.custodian == event.custodian:
            sent = entry.event
    if sent is None:
        yield (
            f"no entry tells that the share of {event.custodian} was sent: see that it came from where it should, and "
            "enter `delivered` as well."
        )
    elif sent.serial and event.serial and folded(sent.serial) != folded(event.serial):
        yield (
            f"the serials differ: {sent.serial} was sent, and {event.serial} was received. Open nothing; ask who sent "
            "it, by the known way, and enter an incident (`shares journal add SET incident`)."
        )


def _of_copy(event: Copied, journal: Journal) -> Iterator[str]:
    for entry in journal.entries:
        before = entry.event
        if not isinstance(before, Copied) or before.custodian != event.custodian:
            continue
        if folded(before.copy_) == folded(event.copy_):
            yield (
                f"entry {entry.sequence} tells of a copy {event.copy_} of {event.custodian} already: this one counts "
                "as another, and has to be accounted for as well."
            )
            return
