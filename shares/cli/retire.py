"""``shares retire``."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar

import click

from shares.cli.keys import opening, sign_option, signers, warn_unsigned
from shares.cli.output import filled, json_option, print_result, prose, refuse_taken, warn
from shares.cli.passphrases import passphrase_options
from shares.clock import to_text
from shares.documents.entry import Entry
from shares.documents.event import Retired
from shares.evidence.inventory import Copy
from shares.evidence.paperwork import affidavit_page
from shares.evidence.retire import close, copy_of, destroyed, ending, lost
from shares.history.folder import SetFolder
from shares.storage import write_new

Function = TypeVar("Function", bound=Callable[..., Any])

NOT_COUNTED = "Practice shares are worth nothing and are not counted."
MEANS_OF_ERASURE = (
    "deleting is not destroying: flash and journaling file systems keep old blocks, and printers, scanners, telephones "
    "and backups keep what they once had. This records who attested to it, and cannot prove that nothing is left."
)
LOST_CAUTION = (
    "it was not destroyed: whoever finds it has the share. While the secret protects anything, treat it as an "
    "incident: refresh the shares, or replace the key."
)
CLOSING_CAUTION = (
    "that it is closed rests on what people attested to. Look once more for copies that nobody entered: backups of "
    "machines, memories of printers, telephones. " + MEANS_OF_ERASURE[0].upper() + MEANS_OF_ERASURE[1:]
)
KEEP_ENCRYPTED = "No quorum is left that could open secret.encrypted and its copies: they may go too."

custodian_option = click.option(
    "--custodian", required=True, metavar="NAME", callback=filled, help="Whose share it was."
)
copy_option = click.option(
    "--copy",
    metavar="SERIAL",
    callback=filled,
    help="Which copy: `original`, or its serial.  [default: the only one that is left]",
)
witness_option = click.option(
    "--witness", required=True, metavar="PERSON", callback=filled, help="Who saw it: not the custodian, and not --by."
)


@click.group()
def command() -> None:
    """End a set, share by share: who destroyed which copy, and who saw it. It closes when none is unaccounted for.

    \b
    Example:
      shares retire status tide-archive
      shares retire affidavit tide-archive --custodian north-pier --to affidavit.html
    """


@command.command("status", short_help="Show every copy, and what became of it.")
@click.argument("folder", metavar="SET", callback=filled)
@json_option
def status_(folder: str, as_json: bool) -> None:
    """Show every copy of every share of the SET, and what became of it.

    Counted are the shares that were dealt, wrapped or not, and each copy that was entered since (`shares journal add
    SET copied`). Practice shares are worth nothing and are not counted.

    \b
    Example:
      shares retire status tide-archive
    """
    found = ending(SetFolder(folder))
    held, copies = found.inventory.held, found.inventory.copies
    until = _kept_until(found.retired)
    them = "copy is" if len(copies) == 1 else "copies are"
    lines = [
        f"{len(copies) - len(held)} of {len(copies)} {them} accounted for. {NOT_COUNTED}",
        *(line for copy in copies for line in prose(f"  {_words(copy)}")),
        *(line for problem in found.inventory.problems for line in prose(f"Note: {problem}.")),
        _retired_line(found.retired.sequence, until, len(held))
        if found.retired
        else "Next: `shares retire destroyed` enters each; `shares retire close` ends the set."
        if held
        else "Next: `shares retire close` ends the set.",
    ]
    members = {
        "done": True,
        "retired": found.retired is not None,
        "keep_until": until,
        "held": len(held),
        "copies": [_copy_members(copy) for copy in copies],
        "notes": list(found.inventory.problems),
    }
    print_result(members, lines, as_json=as_json)


@command.command("destroyed", short_help="Enter that a copy was destroyed before a witness.")
@click.argument("folder", metavar="SET", callback=filled)
@custodian_option
@copy_option
@click.option("--by", required=True, metavar="PERSON", callback=filled, help="Who destroyed it.")
@witness_option
@click.option("--method", metavar="TEXT", callback=filled, help="How, in words.")
@click.option(
    "--affidavit", metavar="SCAN", callback=filled, help="Scan of the signed form, at most 1 MiB; it is kept."
)
@sign_option
@passphrase_options
@json_option
def destroyed_(
    folder: str,
    custodian: str,
    copy: str | None,
    by: str,
    witness: str,
    method: str | None,
    affidavit: str | None,
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Enter that a copy of a share of the SET was destroyed before a witness, who is a third party.

    \b
    Example:
      shares retire destroyed tide-archive --custodian north-pier --by "the keeper of the north pier" \\
        --witness "an auditor from outside" --method "shredded crosswise" --affidavit scan.pdf \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    of_set = SetFolder(folder)
    with opening((), passphrase_files, descriptors) as at_hand:
        keys = signers(signer_files, at_hand)
        meant, entry = destroyed(
            of_set, custodian, copy=copy, by=by, witness=witness, method=method, affidavit=affidavit, keys=keys
        )
    warn_unsigned(signer_files, as_json=as_json)
    _tell(of_set, meant, entry, f"destroyed by {by}, seen by {witness}", MEANS_OF_ERASURE, as_json=as_json)


@command.command("lost", short_help="Enter that a copy is given up as lost.")
@click.argument("folder", metavar="SET", callback=filled)
@custodian_option
@copy_option
@click.option("--by", required=True, metavar="PERSON", callback=filled, help="Who says that it is lost.")
@witness_option
@click.option("--reason", required=True, metavar="TEXT", callback=filled, help="How, and where it was looked for.")
@sign_option
@passphrase_options
@json_option
def lost_(
    folder: str,
    custodian: str,
    copy: str | None,
    by: str,
    witness: str,
    reason: str,
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Enter that a copy of a share of the SET cannot be found and is given up. It is accounted for, not destroyed.

    \b
    Example:
      shares retire lost tide-archive --custodian dry-dock --by "the dock master" \\
        --witness "an auditor from outside" --reason "not in the safe after the flood of 2027" \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    of_set = SetFolder(folder)
    with opening((), passphrase_files, descriptors) as at_hand:
        keys = signers(signer_files, at_hand)
        meant, entry = lost(of_set, custodian, copy=copy, by=by, witness=witness, reason=reason, keys=keys)
    warn_unsigned(signer_files, as_json=as_json)
    _tell(of_set, meant, entry, f"given up as lost by {by}, before {witness}", LOST_CAUTION, as_json=as_json)


@command.command("affidavit", short_help="Write the form that declares a destruction.")
@click.argument("folder", metavar="SET", callback=filled)
@custodian_option
@copy_option
@click.option("--to", "target", required=True, metavar="FILE", callback=filled, help="New file for the page.")
@json_option
def affidavit_(folder: str, custodian: str, copy: str | None, target: str, as_json: bool) -> None:
    """Write the form on which the destruction of a copy is declared and witnessed by hand, for a browser to print.

    \b
    Example:
      shares retire affidavit tide-archive --custodian north-pier --to affidavit.html
    """
    refuse_taken(target)
    of_set = SetFolder(folder)
    meant = copy_of(ending(of_set), custodian, copy)
    write_new(target, affidavit_page(of_set.record, meant), secret=True)
    lines = [
        f"The form for {custodian}'s copy ({meant.name}) is in {target}.",
        "Next: print it; destroy the copy before a witness; both sign; scan it, and enter the scan with",
        "`shares retire destroyed --affidavit SCAN`.",
    ]
    print_result({"done": True, "file": target, **_copy_members(meant)}, lines, as_json=as_json)


@command.command("close", short_help="End the set: every copy is accounted for.")
@click.argument("folder", metavar="SET", callback=filled)
@click.option("--remark", metavar="TEXT", callback=filled, help="What is to be noted.")
@sign_option
@passphrase_options
@json_option
def close_(
    folder: str,
    remark: str | None,
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Close the SET: every copy of every share is accounted for. Refused, with exit code 4, while one is not.

    Records are kept as long as the policy says (`keep_records`), two years without one.

    \b
    Example:
      shares retire close tide-archive --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    of_set = SetFolder(folder)
    with opening((), passphrase_files, descriptors) as at_hand:
        found, entry = close(of_set, remark=remark, keys=signers(signer_files, at_hand))
    until = _kept_until(entry)
    gone = len(found.inventory.copies) - len(found.lost)
    lines = [
        f"Retired: {of_set.record.label}, entry {entry.sequence}. {_copies(gone)} destroyed.",
        *(line for copy in found.lost for line in prose(f"Not destroyed but lost: {_words(copy)}. Exposure stays.")),
        f"Keep record, policy, journal, affidavits and their paper until {until}; destroy nothing of them before.",
        *([KEEP_ENCRYPTED] if of_set.record.encrypted_file is not None and not found.lost else []),
        NOT_COUNTED,
        "Next: `shares journal head` reads what the journal ends with; have it noted elsewhere.",
    ]
    members = {
        "done": True,
        "entry": entry.sequence,
        "keep_until": until,
        "destroyed": gone,
        "lost": [_copy_members(copy) for copy in found.lost],
        "cautions": [CLOSING_CAUTION],
    }
    if not as_json:
        warn(CLOSING_CAUTION)
    warn_unsigned(signer_files, as_json=as_json)
    print_result(members, lines, as_json=as_json)


def _copies(number: int) -> str:
    return f"{number} {'copy was' if number == 1 else 'copies were'}"


def _retired_line(entry: int, until: str | None, held: int) -> str:
    since = f" Entered since, and to be accounted for: {held}." if held else ""
    return f"Retired: entry {entry}; records are kept until {until}.{since}"


def _tell(of_set: SetFolder, copy: Copy, entry: Entry, how: str, caution: str, *, as_json: bool) -> None:
    """Say what was entered of a copy, and how many are left."""
    left = [f"{one.custodian} ({one.name})" for one in ending(of_set).inventory.held]
    lines = [
        *prose(f"Entered: {copy.custodian}'s copy ({copy.name}), {how}, entry {entry.sequence}."),
        *prose(f"Left to account for: {'; '.join(left)}." if left else "Next: `shares retire close` ends the set."),
    ]
    if not as_json:
        warn(caution)
    members = {"done": True, "entry": entry.sequence, "custodian": copy.custodian, "copy": copy.name, "left": left}
    print_result({**members, "cautions": [caution]}, lines, as_json=as_json)


def _kept_until(entry: Entry | None) -> str | None:
    return to_text(entry.event.keep_until) if entry is not None and isinstance(entry.event, Retired) else None


def _words(copy: Copy) -> str:
    serial = copy.received or copy.sent
    packed = f", pack {serial}" if serial else ""
    if copy.fate == "held":
        return f"{copy.custodian}, {copy.name}{packed}: to be accounted for"
    return (
        f"{copy.custodian}, {copy.name}{packed}: {copy.fate}, by {copy.by}, seen by {copy.witness}, entry {copy.entry}"
    )


def _copy_members(copy: Copy) -> dict[str, object]:
    return {
        "custodian": copy.custodian,
        "copy": copy.name,
        "epoch": copy.epoch,
        "packed": copy.packed,
        "serial": copy.received or copy.sent,
        "fate": copy.fate,
        "entry": copy.entry,
        "by": copy.by,
        "witness": copy.witness,
    }
