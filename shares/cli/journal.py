"""``shares journal show``, ``add``, ``verify`` and ``head``."""

from __future__ import annotations

import dataclasses
import os
from collections import Counter
from datetime import datetime
from pathlib import Path
from typing import get_args

import click

from shares import clock
from shares.cli.heads import heads_given
from shares.cli.intervals import moment
from shares.cli.journal_words import cautions, entry_lines, entry_members, next_lines, proves, verified_lines
from shares.cli.keys import opening, sign_option, signers, warn_unsigned
from shares.cli.output import filled, json_option, print_result, progress, warn
from shares.cli.passphrases import passphrase_options
from shares.custody.parties import load_card
from shares.documents.base import MAX_FILE, parse_object
from shares.documents.event import EVENT_NAMES, Remedy
from shares.documents.key_record import KeyRecord
from shares.documents.policy import Policy
from shares.documents.record import Record
from shares.errors import StorageError, VerificationError
from shares.history.doubts import JUDGED, doubts
from shares.history.files import MAX_DOCUMENT, POLICY_NAME, RECORD_NAME, Files, FolderFiles
from shares.history.folder import SetFolder, load_policy
from shares.history.journal import JOURNAL_NAME, MAX_JOURNAL, Journal, load_journal, read_journal
from shares.history.pack import PackFiles
from shares.history.reports import NEEDS, Report, append_with, event_of
from shares.history.verify import verify as check
from shares.history.words import words
from shares.storage import read_file


@click.group()
def command() -> None:
    """What has happened to a set: show its journal, add to it, verify it, note where it stands.

    \b
    Example:
      shares journal head tide-archive
    """


set_argument = click.argument("folder", metavar="SET", callback=filled)


@command.command(short_help="Show the entries: when, what, and who signed.")
@set_argument
@click.option("--since", metavar="TIME", callback=moment, help="From this time on, like 2026-12-01T07:00:00Z.")
@click.option("--event", "wanted", multiple=True, type=click.Choice(EVENT_NAMES), help="Only these; once for each.")
@json_option
@click.pass_context
def show(ctx: click.Context, folder: str, since: datetime | None, wanted: tuple[str, ...], as_json: bool) -> None:
    """Show the entries of the journal in SET, a set's folder or a pack: number, time, what happened, who signed.

    Exit code 4, with the entries all the same, when the journal is broken.

    \b
    Example:
      shares journal show tide-archive --since 2026-12-01T00:00:00Z
    """
    journal = _load(_files(folder))
    chosen = [
        entry
        for entry in journal.entries
        if (since is None or entry.time >= since) and (not wanted or entry.event.what in wanted)
    ]
    broken = [problem for problem in journal.problems if problem.breaks]
    if broken:
        warn(f"the journal is broken, first at line {broken[0].line}: `shares journal verify` says how.")
    code = VerificationError.exit_code if broken else 0
    members = {"done": not broken, "exit": code, "entries": [entry_members(entry, journal) for entry in chosen]}
    signers = {card.fingerprint: card.name for entry in chosen for card in journal.signers(entry)}
    lines = [line for entry in chosen for line in entry_lines(entry, journal)] or ["No entry."]
    lines += [f"{name} signed by the card {card}." for card, name in signers.items()]
    print_result(members, lines, as_json=as_json)
    ctx.exit(code)


@command.command(short_help="Add what has happened to the journal.")
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
    odd = doubts(event, set_folder.journal(), set_folder.record, card) if isinstance(event, JUDGED) else []
    attached = {file: read_file(file, limit=MAX_DOCUMENT) for file in files}
    with opening((), passphrase_files, descriptors) as at_hand:
        keys = signers(signer_files, at_hand)
        cards = () if card is None else (card,)
        made = append_with(set_folder, event, attached, keys=keys, cards=cards, time=time)
    stands = made.head()
    found = [*odd, *cautions(made)]
    for line in () if as_json else found:
        warn(line)
    warn_unsigned(signer_files, as_json=as_json)
    members = {"done": True, **entry_members(made, None), "head": stands.public("sequence", "head")}
    members["cautions"] = found
    lines = [f"Added: {words(event)}.", *next_lines(event), f"The journal stands at {stands.words()}."]
    print_result(members, lines, as_json=as_json)


@command.command(short_help="Check chain, signatures, and all that is named.")
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
    """Check the journal in SET, a set's folder or a pack: chain, signatures, the record, and every document it names.

    Exit code 0 when it is whole, 4 when it is broken anywhere; each place is named.

    \b
    Example:
      shares journal verify tide-archive --head "57 ABCD-EFGH-IJKL-MNOP-QRST-UVWX-YZ23-4567"
    """
    heads = heads_given(noted)
    trusted = [load_card(file) for file in trusted_files]
    files = _files(folder)
    record, policy = _record_and_policy(files)
    journal = _load(files)
    problems = check(journal, files, record, policy, heads=heads, trusted=trusted)
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
        "proves": None if broken else proves(journal),
    }
    print_result(members, verified_lines(members, problems, journal), as_json=as_json)
    ctx.exit(code)


@command.command(short_help="Say where the journal stands, to be noted elsewhere.")
@set_argument
@json_option
def head(folder: str, as_json: bool) -> None:
    """Say where the journal in SET, a set's folder or a pack, stands: short enough to read aloud and note elsewhere.

    Whoever has noted it can show later that nothing before it was changed, and that nothing was cut off.

    \b
    Example:
      shares journal head tide-archive
    """
    journal = _load(_files(folder))
    broken = next((problem for problem in journal.problems if problem.breaks), None)
    if broken or journal.head is None:
        raise VerificationError(
            f"the journal is broken at line {broken.line}: {broken.what}" if broken else "the journal has no entry",
            where=folder,
            hint="`shares journal verify` names every place; a head of it would prove nothing",
        )
    print_result({"done": True, **journal.head.public("sequence", "head")}, [journal.head.words()], as_json=as_json)


def _files(path: str) -> Files:
    """Return the files of a set: of its folder, or in a pack."""
    return PackFiles(path) if os.path.isfile(path) else FolderFiles(Path(path))


def _load(files: Files) -> Journal:
    told = progress("Checking the journal", "entries")
    if isinstance(files, FolderFiles):
        if not os.path.lexists(files.folder / JOURNAL_NAME):
            raise StorageError("holds no journal", where=files.where, hint="name the folder of a set, or a pack of it")
        return load_journal(files.folder, progress=told)
    return read_journal(files.read(JOURNAL_NAME, limit=MAX_JOURNAL), progress=told)


def _record_and_policy(files: Files) -> tuple[Record | KeyRecord, Policy | None]:
    where = os.path.join(files.where, RECORD_NAME)
    data = files.read(RECORD_NAME, limit=MAX_FILE)
    if parse_object(data, where=where).get("kind") == KeyRecord.KIND:
        return KeyRecord.parse(data, where=where), None
    record = Record.parse(data, where=where)
    if record.policy is not None and POLICY_NAME not in files.names():
        warn("the policy is not beside the record: nothing says whether two parties have to sign each entry.")
        return record, None
    return record, load_policy(files, record)
