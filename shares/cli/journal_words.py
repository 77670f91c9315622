"""How the commands of the journal tell entries, what they mean for the shares, and what a check found and proves.

Source: none.
May import: shares.clock, shares.documents, shares.history, shares.cli.output.
Secret: nothing. Confidential: what entries tell of persons and places. Public: the rest.
Does not: read or check anything.
"""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import Any

from shares import clock
from shares.cli.output import prose
from shares.documents.entry import Entry
from shares.documents.event import Departed, Event, HandedOn, Incident, Introduced
from shares.history.journal import Journal, Problem
from shares.history.words import words

SHOWN = 20
"""How many problems are told one by one to people."""
SIGNED = (
    "It proves that up to entry {last}, the last that is signed, nobody without the signing keys has changed, moved or "
    "added a line, or removed one from within. Whose a key is, you know by comparing its card's fingerprint. Whoever "
    "holds all the keys could write another journal from the start, and anyone could cut off its end: heads that "
    "others noted show that (--head), and so do the signatures of custodians in their attestations."
)
UNSIGNED = (
    "No entry is signed, so by itself it proves nothing: whoever can write to the file could have written all of it "
    "anew. A head that somebody noted elsewhere (--head) proves what stands up to it."
)


def entry_members(entry: Entry, journal: Journal | None) -> dict[str, Any]:
    """Return an entry for JSON: its own members, its sentence, and who signed it, as far as the signature fits."""
    cards = journal.signers(entry) if journal else None
    signers = [one.card for one in entry.signatures] if cards is None else [card.fingerprint for card in cards]
    return {**entry.public("sequence", "time", "event", "documents"), "words": words(entry.event), "signers": signers}


def entry_lines(entry: Entry, journal: Journal) -> list[str]:
    names = ", ".join(card.name for card in journal.signers(entry)) or "unsigned"
    before = f"{entry.sequence:>5}  {clock.to_text(entry.time)}  "
    return textwrap.wrap(
        f"{words(entry.event)} [{names}]",
        100,
        initial_indent=before,
        subsequent_indent=" " * len(before),
        break_long_words=False,
        break_on_hyphens=False,
    )


def cautions(entry: Entry) -> list[str]:
    """Say what a report means for the shares, where that is easily overlooked."""
    match entry.event:
        case Departed():
            return [
                "who leaves keeps what they know. A share that was handed back may have been copied: renew the shares, "
                "or replace the key where they held enough of them."
            ]
        case Incident(exposed=True):
            return ["whoever may know a share counts as knowing it: leave that custodian out, and renew the shares."]
        case HandedOn():
            return ["the one before still knows the share. Two shares in one person's mind may be a quorum."]
        case Introduced():
            return ["a card proves nothing of a person: compare its fingerprint with them before you rely on it."]
    return []


def next_lines(event: Event) -> list[str]:
    if isinstance(event, Departed | Incident):
        return [f"Next: deal with it by {clock.to_text(event.due)}, and enter that: shares journal add ... resolved."]
    return []


def _count(number: int, what: str) -> str:
    return f"{number:,} {what if number == 1 else what.replace('entry', 'entrie') + 's'}"


def verified_lines(members: dict[str, Any], problems: Sequence[Problem], journal: Journal) -> list[str]:
    lines = []
    for problem in problems[:SHOWN]:
        place = f"Line {problem.line}" if problem.line else "The journal"
        lines += prose(f"{place}: {problem.what}{'' if problem.breaks else ' (noticed)'}.")
    if len(problems) > SHOWN:
        lines.append(f"And {len(problems) - SHOWN} more; --json lists them all.")
    counts = f"{_count(members['entries'], 'entry')}, {_count(members['documents'], 'document')} named"
    given = f", {_count(members['heads_given'], 'head')} noted elsewhere" if members["heads_given"] else ""
    whole = "broken" if any(problem.breaks for problem in problems) else "whole"
    lines.append(f"The journal of {members['label']} is {whole}: {counts}{given}.")
    lines += [
        f"Signed by {one['name']}, card {one['card']}: {_count(one['entries'], 'entry')}." for one in members["signers"]
    ]
    if whole == "broken":
        lines += prose("Next: change nothing in this folder, compare it with other copies, and tell who relies on it.")
    elif journal.head:
        lines += [f"It stands at {journal.head.words()}.", *prose(members["proves"])]
    return lines


def proves(journal: Journal) -> str:
    last = next((entry.sequence for entry in reversed(journal.entries) if entry.signatures), None)
    return SIGNED.format(last=last) if last else UNSIGNED
