"""``shares attest challenge``, ``answer`` and ``check``."""

from __future__ import annotations

import os
from datetime import timedelta
from pathlib import Path

import click

from shares import clock
from shares.cli.attested import (
    ANSWER_CAUTION,
    answer_lines,
    answer_members,
    asked_lines,
    check_code,
    check_lines,
    check_members,
    read_answers,
    who_answers,
)
from shares.cli.intervals import interval
from shares.cli.keys import cards_by_name, key_option, opening, sign_option, signers, warn_unsigned
from shares.cli.output import filled, json_option, print_result, prose, refuse_taken, warn
from shares.cli.passphrases import passphrase_options
from shares.cli.signals import held_signals
from shares.custody.parties import load_card, load_key
from shares.custody.presented import load_record, load_shares
from shares.documents.base import MAX_FILE
from shares.documents.challenge import Challenge
from shares.documents.event import Grade
from shares.errors import ParameterError, SharesError
from shares.evidence.attest import answer as make_answer
from shares.evidence.attest import check_asked
from shares.evidence.rounds import ask, check_only, doubts_of_asked, enter, rounds
from shares.history.folder import SetFolder
from shares.storage import read_file, write_new

SEND = (
    "Next: give it to those who are asked, by the known way, and read its fingerprint aloud to them by another one. "
    "They answer with `shares attest answer`; `shares attest check` takes the answers."
)


@click.group()
def command() -> None:
    """Ask custodians whether their shares are there and whole; answer; check the answers with public material alone.

    \b
    Examples:
      shares attest challenge tide-archive --to challenge.json --sign harbour-office.key.json \\
        --passphrase-file harbour-office.passphrase
      shares attest answer challenge.json --record record.json --share north-pier.share.json \\
        --sign north-pier.key.json --passphrase-file north-pier.passphrase --to north-pier.answer.json
      shares attest check challenge.json north-pier.answer.json --set tide-archive --card north-pier.card.json \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """


@command.command(short_help="Ask custodians for a fresh proof of their shares.")
@click.argument("folder", metavar="SET", callback=filled)
@click.option("--to", "target", required=True, metavar="C", callback=filled, help="New file, to hand out.")
@click.option("--custodian", "custodians", multiple=True, metavar="NAME", help="Who is asked.  [default: all]")
@click.option(
    "--due",
    default="14d",
    show_default=True,
    metavar="INTERVAL",
    callback=interval,
    help="Until when to answer, from now: days, weeks or years, like 14d, 2w or 1y.",
)
@sign_option
@passphrase_options
@json_option
def challenge(
    folder: str,
    target: str,
    custodians: tuple[str, ...],
    due: timedelta,
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Ask custodians of the SET for a fresh proof that they hold their shares: a signed, dated challenge.

    It is filed in the SET and entered in its journal; C is the copy to hand out. The first --sign KEY asks.

    \b
    Example:
      shares attest challenge tide-archive --to challenge.json --due 14d \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    refuse_taken(target)
    of_set = SetFolder(folder)
    now = clock.now()
    doubtful = doubts_of_asked(of_set.record, of_set.journal(), custodians)
    with opening((), passphrase_files, descriptors) as at_hand, held_signals():
        made, entry = ask(of_set, keys=signers(signer_files, at_hand), due=now + due, custodians=custodians, time=now)
        filed = Path(folder) / entry.documents[0].path
        try:
            write_new(target, made.to_file(), secret=True)
        except SharesError as error:
            error.hint = f"the challenge was made: hand out a copy of {filed}"
            raise
    members = {
        "done": True,
        "file": target,
        "filed": os.fspath(filed),
        "entry": entry.sequence,
        "challenge": made.digest().hex(),
        "fingerprint": made.fingerprint,
        "custodians": made.custodians,
        "due": clock.to_text(made.due),
        "journal": made.journal.model_dump() if made.journal else None,
        "cautions": doubtful,
    }
    for line in () if as_json else doubtful:
        warn(line)
    lines = [
        *prose(f"Challenge, {made.label}: {made.words()}."),
        f"To hand out: {target}; kept: {filed}; entry {entry.sequence} of the journal.",
        f"Fingerprint, to read aloud: {made.fingerprint}",
        *prose(SEND),
    ]
    print_result(members, lines, as_json=as_json)


@command.command("answer", short_help="Answer a challenge with your share, or its sealed pack.")
@click.argument("file", metavar="C", callback=filled)
@click.option("--record", "record_file", required=True, metavar="R", callback=filled, help="Your copy of the record.")
@click.option("--share", "share_file", metavar="S", callback=filled, help="Your share, wrapped or not: it is checked.")
@click.option("--sealed", is_flag=True, help="The pack stays closed: you saw it and its seal. Needs --serial.")
@click.option("--broken", is_flag=True, help="With --sealed: the seal was found broken.")
@click.option("--present", is_flag=True, help="Answer a drill of attendance.")
@click.option("--custodian", metavar="NAME", callback=filled, help="Who answers; the name on the share by default.")
@click.option("--to", "target", required=True, metavar="A", callback=filled, help="New file for the answer.")
@click.option(
    "--sign", "signer_file", metavar="KEY", callback=filled, help="Your party key. Without it the answer counts less."
)
@click.option(
    "--trust",
    "trusted_files",
    multiple=True,
    metavar="CARD",
    callback=filled,
    help="A party card whose fingerprint you have compared: the asker must be such a party.",
)
@click.option("--paper", is_flag=True, help="The share was read back from paper.")
@click.option("--opened", is_flag=True, help="A seal was broken for this answer.")
@click.option("--place", metavar="TEXT", callback=filled, help="Where the pack is, or you are.")
@click.option("--serial", metavar="TEXT", callback=filled, help="Of the pack; the new one after --opened.")
@click.option("--remark", metavar="TEXT", callback=filled, help="Anything else.")
@key_option
@passphrase_options
@json_option
@click.pass_context
def answer_(
    ctx: click.Context,
    file: str,
    record_file: str,
    share_file: str | None,
    sealed: bool,
    broken: bool,
    present: bool,
    custodian: str | None,
    target: str,
    signer_file: str | None,
    trusted_files: tuple[str, ...],
    paper: bool,
    opened: bool,
    place: str | None,
    serial: str | None,
    remark: str | None,
    keys: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Answer the challenge C: check your share against the record, and sign what was found, good or bad.

    An answer proves possession to whoever asked, and holds no secret. Share and party key both sign it; only then does
    it count fully. With --sealed the pack stays closed, and nothing is proved of what is in it. A share on paper is
    read back with `shares transcribe` first. Exit code 0 when all is well, 4 when the share is damaged or the seal
    broken: the answer is written all the same.

    \b
    Examples:
      shares attest answer challenge.json --record record.json --share north-pier.share.json \\
        --sign north-pier.key.json --passphrase-file north-pier.passphrase --to north-pier.answer.json
      shares attest answer challenge.json --record record.json --sealed --serial TB-0017 --place "the dock house" \\
        --sign dry-dock.key.json --passphrase-file dry-dock.passphrase --to dry-dock.answer.json
    """
    if (share_file is not None) + sealed + present != 1:
        raise ParameterError("give exactly one of --share S, --sealed and --present", hint="see --help")
    if (broken and not sealed) or (paper and share_file is None):
        raise ParameterError("--broken goes with --sealed, and --paper with --share S", hint="see --help")
    refuse_taken(target)
    grade: Grade = "content" if share_file is not None else "sealed" if sealed else "present"
    asked = Challenge.parse(read_file(file, limit=MAX_FILE), where=file)
    record = load_record(record_file)
    trusted = [load_card(path) for path in trusted_files]
    key = load_key(signer_file) if signer_file is not None else None
    name = custodian or who_answers(asked, share_file, key.card.name if key else None)
    check_asked(asked, record, name, trusted=trusted)
    _have_agreed(asked, name, is_trusted=bool(trusted), as_json=as_json)
    if key is not None and key.card.name != name:
        warn(f"the party key is of {key.card.name}, and {name} answers: it counts where that card is known as theirs.")
    with opening((*keys, *([signer_file] if signer_file else [])), passphrase_files, descriptors) as at_hand:
        made = make_answer(
            asked,
            record,
            name,
            grade=grade,
            share=load_shares([share_file], at_hand.share)[0] if share_file is not None else None,
            key=at_hand.party(key) if key else None,
            trusted=trusted,
            carrier="paper" if paper else None,
            opened=opened,
            seal="broken" if broken else "intact",
            place=place,
            serial=serial,
            remark=remark,
        )
    with held_signals():
        write_new(target, made.to_file(), secret=True)
        print_result(answer_members(made, asked, target), answer_lines(made, asked, target), as_json=as_json)
    ctx.exit(check_code([], whole=made.is_good))


def _have_agreed(asked: Challenge, name: str, *, is_trusted: bool, as_json: bool) -> None:
    """Show who asks for what and, at a terminal, have the custodian agree before anything is opened."""
    if not as_json:
        for line in asked_lines(asked, is_trusted=is_trusted):
            click.echo(line, err=True)
        warn(ANSWER_CAUTION)
    if os.isatty(0) and not click.confirm(f"Did it come by the known way, and does {name} answer?", err=True):
        raise SharesError(
            "the challenge is not answered", hint="nothing was written; ask who sent it, by the known way"
        )


@command.command("check", short_help="Check answers, and enter them in the journal.")
@click.argument("file", metavar="C", callback=filled)
@click.argument("files", metavar="A...", nargs=-1, required=True, callback=filled)
@click.option("--set", "folder", metavar="SET", callback=filled, help="Enter the answers in this set's journal.")
@click.option("--record", "record_file", metavar="R", callback=filled, help="Only check, against this record.")
@click.option(
    "--card",
    "cards",
    multiple=True,
    metavar="[NAME=]CARD",
    callback=filled,
    help="A custodian's party card whose fingerprint you have compared; with --set only where its journal has none.",
)
@sign_option
@passphrase_options
@json_option
@click.pass_context
def check_(
    ctx: click.Context,
    file: str,
    files: tuple[str, ...],
    folder: str | None,
    record_file: str | None,
    cards: tuple[str, ...],
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Check the answers A to the challenge C with public material alone; with --set, file and enter them.

    One line for each: what was found, and whether it counts. Damaged shares and late answers are entered, as they are
    facts; forged, foreign and repeated ones are named and refused. Those who were asked and are silent are named too.
    Exit code 0 when every answer given is accepted, good, and signed by the custodian's known card; else 4, or 5 where
    a file cannot be read.

    \b
    Example:
      shares attest check challenge.json *.answer.json --set tide-archive --card north-pier.card.json \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    if (folder is None) == (record_file is None):
        raise ParameterError("give either --set SET, to enter the answers, or --record R", hint="see --help")
    if record_file is not None and signer_files:
        raise ParameterError("there is nothing to sign", where="--sign", hint="with --set the answers are entered")
    asked = Challenge.parse(read_file(file, limit=MAX_FILE), where=file)
    given = read_answers(files)
    attestations = [one.attestation for one in given if one.attestation is not None]
    policy = None
    if folder is not None:
        of_set = SetFolder(folder)
        policy = of_set.policy
        known = cards_by_name(cards, [one.name for one in of_set.record.custodians], option="--card")
        with opening((), passphrase_files, descriptors) as at_hand, held_signals():
            results = enter(of_set, asked, attestations, keys=signers(signer_files, at_hand), cards=known)
        silent = rounds(of_set.journal())[asked.digest()].silent
    else:
        record = load_record(record_file or "")
        known = cards_by_name(cards, [one.name for one in record.custodians], option="--card")
        results = check_only(record, asked, attestations, cards=known)
        accepted = {one.judgement.custodian for one in results if one.judgement.accepted}
        silent = [name for name in asked.custodians if name not in accepted]
    judged = iter(results)
    told = [(one, next(judged) if one.attestation is not None else None) for one in given]
    code = check_code(told, whole=True)
    if any(one.entry for one in results):
        warn_unsigned(signer_files, as_json=as_json)
    print_result(
        check_members(told, asked, silent, code),
        check_lines(told, asked, silent, entered=folder is not None, policy=policy),
        as_json=as_json,
    )
    ctx.exit(code)
