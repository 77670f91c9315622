"""``shares journal show``, ``add``, ``verify`` and ``head``."""

from __future__ import annotations

import dataclasses
import os
import textwrap
from collections import Counter
from collections.abc import Sequence
from datetime import datetime
from pathlib import Path
from typing import Any, get_args

import click

from shares import clock
from shares.cli.heads import heads_given
from shares.cli.keys import opening, sign_option, signers, warn_unsigned
from shares.cli.output import filled, json_option, print_result, progress, prose, warn
from shares.cli.passphrases import passphrase_options
from shares.custody.parties import load_card
from shares.custody.presented import load_record
from shares.documents.entry import Entry
from shares.documents.event import EVENT_NAMES, Departed, Event, HandedOn, Incident, Introduced, Remedy
from shares.documents.policy import Policy
from shares.documents.record import Record
from shares.errors import ParameterError, StorageError, VerificationError
from shares.history.files import MAX_DOCUMENT, POLICY_NAME, RECORD_NAME, FolderFiles
from shares.history.folder import SetFolder, load_policy
from shares.history.journal import JOURNAL_NAME, Journal, Problem, load_journal
from shares.history.reports import NEEDS, Report, append_with, event_of
from shares.history.verify import verify as check
from shares.history.words import words
from shares.storage import read_file

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


@click.group()
def command() -> None:
    """What has happened to a set: show its journal, add to it, verify it, note where it stands.

    \b
    Example:
      shares journal head tide-archive
    """


set_argument = click.argument("folder", metavar="SET", callback=filled)


@command.command()
@set_argument
@click.option("--since", metavar="TIME", callback=filled, help="From this time on, like 2026-12-01T07:00:00Z.")
@click.option("--event", "wanted", multiple=True, type=click.Choice(EVENT_NAMES), help="Only these; once for each.")
@json_option
@click.pass_context
def show(ctx: click.Context, folder: str, since: str | None, wanted: tuple[str, ...], as_json: bool) -> None:
    """Show the entries of the journal in the folder SET: number, time, what happened, who signed.

    Exit code 4, with the entries all the same, when the journal is broken.

    \b
    Example:
      shares journal show tide-archive --since 2026-12-01T00:00:00Z
    """
    start = None if since is None else _time(since)
    journal = _load(folder)
    chosen = [
        entry
        for entry in journal.entries
        if (start is None or entry.time >= start) and (not wanted or entry.event.what in wanted)
    ]
    broken = [problem for problem in journal.problems if problem.breaks]
    if broken:
        warn(f"the journal is broken, first at line {broken[0].line}: `shares journal verify` says how.")
    code = VerificationError.exit_code if broken else 0
    members = {"done": not broken, "exit": code, "entries": [_entry_members(entry, journal) for entry in chosen]}
    signers = {card.fingerprint: card.name for entry in chosen for card in journal.signers(entry)}
    lines = [line for entry in chosen for line in _entry_lines(entry, journal)] or ["No entry."]
    lines += [f"{name} signed by the card {card}." for card, name in signers.items()]
    print_result(members, lines, as_json=as_json)
    ctx.exit(code)


@command.command()
@set_argument
@click.argument("what", metavar="EVENT", type=click.Choice(list(NEEDS)))
@click.option(
    "--custodian", multiple=True, metavar="NAME", callback=filled, help="Whose share; several where it may be."
)
@click.option(
    "--person", multiple=True, metavar="TEXT", callback=filled, help="Who leaves, typed a share, may know it."
)
@click.option("--card", "card_file", metavar="CARD", callback=filled, help="The custodian's party card.")
@click.option("--serial", metavar="TEXT", callback=filled, help="The serial of the sealed pack.")
@click.option("--channel", metavar="TEXT", callback=filled, help="By which way a share was sent.")
@click.option("--copy", metavar="TEXT", callback=filled, help="Which copy, by its serial.")
@click.option("--to", metavar="TEXT", callback=filled, help="Who has the share now.")
@click.option("--entry", type=click.IntRange(min=1), metavar="N", help="The entry that set the task which is done.")
@click.option("--action", type=click.IntRange(min=1), metavar="N", help="Which action of a drill's report.")
@click.option("--how", type=click.Choice(get_args(Remedy)), help="How the task was done.")
@click.option("--remedy", metavar="TEXT", callback=filled, help="What was done about an exception.")
@click.option(
    "--within", metavar="TIME", callback=filled, help='How soon to respond, like "24h"; else as the policy says.'
)
@click.option("--not-exposed", is_flag=True, help="Nobody can have come to know a share by the incident.")
@click.option("--remark", metavar="TEXT", callback=filled, help="What else to know, and when it happened, if not now.")
@click.option(
    "--document", "files", multiple=True, metavar="FILE", callback=filled, help="Keep a copy of this with it."
)
@sign_option
@passphrase_options
@json_option
def add(
    folder: str,
    what: str,
    custodian: tuple[str, ...],
    person: tuple[str, ...],
    card_file: str | None,
    serial: str | None,
    channel: str | None,
    copy: str | None,
    to: str | None,
    entry: int | None,
    action: int | None,
    how: Remedy | None,
    remedy: str | None,
    within: str | None,
    not_exposed: bool,
    remark: str | None,
    files: tuple[str, ...],
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Add what happened to the journal in the folder SET. Its time is now, and nothing is ever taken out again.

    EVENT is delivered, received, acknowledged, introduced, copied, transcribed, handed-on, departed, incident,
    resolved, exception or noted; what an event needs is said where it is missing. Other commands add the rest.

    \b
    Examples:
      shares journal add tide-archive received --custodian north-pier --serial HT-0031 \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
      shares journal add tide-archive noted --remark "The safe of the light-house was replaced on Monday" \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    set_folder, time = SetFolder(folder), clock.now()
    card = None if card_file is None else load_card(card_file)
    report = Report(
        custodian=custodian,
        person=person,
        card=card,
        serial=serial,
        channel=channel,
        copy=copy,
        to=to,
        entry=entry,
        action=action,
        how=how,
        remedy=remedy,
        within=within,
        not_exposed=not_exposed,
        remark=remark,
    )
    event = event_of(set_folder, what, report, time=time)
    attached = {file: read_file(file, limit=MAX_DOCUMENT) for file in files}
    with opening((), passphrase_files, descriptors) as at_hand:
        keys = signers(signer_files, at_hand)
        cards = () if card is None else (card,)
        made = append_with(set_folder, event, attached, keys=keys, cards=cards, time=time)
    stands = made.head()
    found = _cautions(made)
    for line in () if as_json else found:
        warn(line)
    warn_unsigned(signer_files, as_json=as_json)
    members = {"done": True, **_entry_members(made, None), "head": stands.public("sequence", "head"), "cautions": found}
    lines = [f"Added: {words(event)}.", *_next(event), f"The journal stands at {stands.words()}."]
    print_result(members, lines, as_json=as_json)


@command.command()
@set_argument
@click.option(
    "--head",
    "noted",
    multiple=True,
    metavar="HEAD",
    callback=filled,
    help='Where the journal is known to have stood: "57 ABCD-...", or a file that quotes it; once for each.',
)
@click.option(
    "--trust",
    "trusted_files",
    multiple=True,
    metavar="CARD",
    callback=filled,
    help="A party card whose fingerprint you have compared: each entry must be signed by one such party.",
)
@json_option
@click.pass_context
def verify(
    ctx: click.Context, folder: str, noted: tuple[str, ...], trusted_files: tuple[str, ...], as_json: bool
) -> None:
    """Check the journal in the folder SET: chain, signatures, the record, and every document that it names.

    Exit code 0 when it is whole, 4 when it is broken anywhere; each place is named.

    \b
    Example:
      shares journal verify tide-archive --head "57 ABCD-EFGH-IJKL-MNOP-QRST-UVWX-YZ23-4567"
    """
    heads = heads_given(noted)
    trusted = [load_card(file) for file in trusted_files]
    record, policy = _record_and_policy(Path(folder))
    journal = _load(folder)
    problems = check(journal, FolderFiles(Path(folder)), record, policy, heads=heads, trusted=trusted)
    broken = any(problem.breaks for problem in problems)
    signed = Counter(card.fingerprint for entry in journal.entries for card in journal.signers(entry))
    code = VerificationError.exit_code if broken else 0
    members = {
        "done": not broken,
        "exit": code,
        "label": record.label,
        "record": record.fingerprint,
        "entries": len(journal.entries),
        "documents": len({document.path for entry in journal.entries for document in entry.documents}),
        "head": journal.head.public("sequence", "head") if journal.head else None,
        "heads_given": len(heads),
        "signers": [{"name": journal.cards[one].name, "card": one, "entries": n} for one, n in signed.items()],
        "problems": [dataclasses.asdict(problem) for problem in problems],
        "proves": None if broken else _proves(journal),
    }
    print_result(members, _verified_lines(members, problems, journal), as_json=as_json)
    ctx.exit(code)


@command.command()
@set_argument
@json_option
def head(folder: str, as_json: bool) -> None:
    """Say where the journal in the folder SET stands, short enough to be read aloud and noted elsewhere.

    Whoever has noted it can show later that nothing before it was changed, and that nothing was cut off.

    \b
    Example:
      shares journal head tide-archive
    """
    journal = _load(folder)
    broken = next((problem for problem in journal.problems if problem.breaks), None)
    if broken or journal.head is None:
        raise VerificationError(
            f"the journal is broken at line {broken.line}: {broken.what}" if broken else "the journal has no entry",
            where=folder,
            hint="`shares journal verify` names every place; a head of it would prove nothing",
        )
    print_result({"done": True, **journal.head.public("sequence", "head")}, [journal.head.words()], as_json=as_json)


def _load(folder: str) -> Journal:
    path = Path(folder)
    if not os.path.lexists(path / JOURNAL_NAME):
        raise StorageError("holds no journal", where=folder, hint="name the folder of a set")
    return load_journal(path, progress=progress("Checking the journal", "entries"))


def _record_and_policy(path: Path) -> tuple[Record, Policy | None]:
    record = load_record(path / RECORD_NAME)
    if record.policy is not None and not os.path.lexists(path / POLICY_NAME):
        warn("the policy is not in this folder: nothing says whether two parties have to sign each entry.")
        return record, None
    return record, load_policy(path, record)


def _proves(journal: Journal) -> str:
    last = next((entry.sequence for entry in reversed(journal.entries) if entry.signatures), None)
    return SIGNED.format(last=last) if last else UNSIGNED


def _time(text: str) -> datetime:
    try:
        return clock.from_text(text)
    except ParameterError as error:
        problem = error.what
    raise ParameterError(problem, where="--since")


def _entry_members(entry: Entry, journal: Journal | None) -> dict[str, Any]:
    """Return an entry for JSON: its own members, its sentence, and who signed it, as far as the signature fits."""
    cards = journal.signers(entry) if journal else None
    signers = [one.card for one in entry.signatures] if cards is None else [card.fingerprint for card in cards]
    return {**entry.public("sequence", "time", "event", "documents"), "words": words(entry.event), "signers": signers}


def _entry_lines(entry: Entry, journal: Journal) -> list[str]:
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


def _cautions(entry: Entry) -> list[str]:
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
        case Introduced(custodian=name):
            other = [card.name for card in entry.cards if card.fingerprint == entry.event.card and card.name != name]
            return [
                *(f"the card is of {card}, not {name}." for card in other),
                "a card proves nothing of a person: compare its fingerprint with them before you rely on it.",
            ]
    return []


def _next(event: Event) -> list[str]:
    if isinstance(event, Departed | Incident):
        return [f"Next: deal with it by {clock.to_text(event.due)}, and enter that: shares journal add ... resolved."]
    return []


def _count(number: int, what: str) -> str:
    return f"{number:,} {what if number == 1 else what.replace('entry', 'entrie') + 's'}"


def _verified_lines(members: dict[str, Any], problems: Sequence[Problem], journal: Journal) -> list[str]:
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
