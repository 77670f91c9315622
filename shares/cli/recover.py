"""``shares recover``."""

from __future__ import annotations

import contextlib
import os
from pathlib import Path

import click

from shares.cli.feeding import FeedsCommand
from shares.cli.keys import UNSIGNED_ENTRY, key_option, opening, sign_option, signers, suite_option, trust_option
from shares.cli.output import filled, json_option, print_result, progress, prose, refuse_taken, warn
from shares.cli.passphrases import passphrase_options
from shares.cli.signals import held_signals
from shares.custody.deliver import fed as fed_command
from shares.custody.deliver import sealed_for, to_command, to_file
from shares.custody.encrypted_file import check_file, open_file
from shares.custody.entries import Purpose
from shares.custody.parties import load_card
from shares.custody.presented import Status, load_record, load_shares
from shares.custody.recover import Recovery, recover
from shares.documents.event import Dealt
from shares.documents.party import OpenPartyKey
from shares.documents.record import Record
from shares.documents.wrapping import Suite
from shares.errors import ParameterError, VerificationError
from shares.evidence.retire import is_retired
from shares.history.files import RECORD_NAME
from shares.history.folder import SetFolder
from shares.history.journal import JOURNAL_NAME, Journal
from shares.storage import leftovers, write_new
from shares.streams import new_file

# By number: a stream of this program may be missing where the descriptor is not.
STANDARD_ERROR = 2
EXPOSED = (
    "this machine has now held the secret and the shares used. "
    "Decide what becomes of both: return, replace by a date, or destroy."
)
UNRECORDED = "No journal tells of this recovery: where the set has one, enter it there."
# After a recovery that was entered into the journal, which holds what was decided.
KNOWN = "this machine has now held the secret and the shares used, and the set's journal says so. "
RESOLVE = " Then enter that with `shares journal add`."
NEXT = {
    "returned": KNOWN + "Bring each share back to its custodian, and wipe this machine.",
    "destroyed": KNOWN + "Destroy the key and these copies of the shares, before a witness, and wipe this machine.",
    "replace": KNOWN + "Replace the key by {by:%Y-%m-%d}, and wipe this machine." + RESOLVE,
}


@click.command(cls=FeedsCommand)
@click.argument("files", metavar="SHARE...", nargs=-1, required=True, callback=filled)
@click.option(
    "--record",
    "record_file",
    metavar="R",
    callback=filled,
    help="The set's public record: tells bad shares apart beforehand.",
)
@click.option(
    "--to",
    "target",
    metavar="FILE",
    callback=filled,
    help="Write the secret to this new file, mode 0600.",
)
@click.option("--check", is_flag=True, help="Only prove that the shares recover the secret; write it nowhere.")
@click.option(
    "--for",
    "receiver",
    metavar="CARD",
    callback=filled,
    help="With --to: write it encrypted to the party of this card, who opens it with unwrap.",
)
@click.option(
    "--encrypted",
    "encrypted_file",
    metavar="FILE",
    callback=filled,
    help="The encrypted file whose key the shares hold, where the secret was encrypted.",
)
@click.option("--reason", metavar="TEXT", callback=filled, help="Why it is recovered, for the set's journal.")
@click.option(
    "--disposition",
    metavar="returned|destroyed|DATE",
    callback=filled,
    help="What becomes of key and shares afterwards; DATE (like 2026-12-31): the key is replaced by then.",
)
@click.option(
    "--present", "persons", multiple=True, metavar="PERSON", callback=filled, help="Who is present; once for each."
)
@sign_option
@suite_option
@trust_option
@key_option
@passphrase_options
@json_option
@click.pass_context
def command(
    ctx: click.Context,
    files: tuple[str, ...],
    record_file: str | None,
    target: str | None,
    check: bool,
    receiver: str | None,
    encrypted_file: str | None,
    reason: str | None,
    disposition: str | None,
    persons: tuple[str, ...],
    signer_files: tuple[str, ...],
    suite: Suite,
    trusted_files: tuple[str, ...],
    keys: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Recover the secret from enough SHAREs, check it against the commitment, and only then let it go.

    It goes to a new file, to the standard input of COMMAND (run without a shell), or nowhere. It is never printed.
    What COMMAND prints is the output then (with --json it goes to standard error), and its failure gives exit code 7.
    Wrapped shares are opened in memory, with --key or a passphrase. Bad shares are named; with more shares than needed
    it still recovers, searching at most 20,000 quorums or 20 seconds.

    Where a journal lies beside the record, the recovery is entered into it before the secret goes anywhere: --reason
    and --disposition are asked for then.

    \b
    Examples:
      shares recover north-pier.share.json light-house.share.json registrar.share.json --to key.pem
      shares recover *.share.json --record tide-archive/record.json --check \\
        --reason "the archive's disk failed" --disposition 2026-12-31
      shares recover *.share.json -- openssl pkey -pubout
      shares recover north-pier.wrapped.json dry-dock.wrapped.json registrar.wrapped.json \\
        --passphrase-file north-pier.passphrase --passphrase-file dry-dock.passphrase \\
        --passphrase-file registrar.passphrase --key registrar.key.json \\
        --for harbour-office.card.json --to key.sealed.json
    """
    fed: list[str] | None = ctx.meta.get("command")
    if (target is not None) + check + (fed is not None) != 1 or fed == []:
        raise ParameterError("give exactly one of --to FILE, --check, or -- COMMAND", hint="see --help")
    if target == "-":
        raise ParameterError(
            "the secret is not printed",
            where="--to -",
            hint="name a new file, or put the command that needs it after --; a file of this name is ./-",
        )
    if target is not None:
        refuse_taken(target)
    if receiver is not None and target is None:
        raise ParameterError("--for goes with --to FILE", hint="the encrypted secret is written to that file")
    card = load_card(receiver) if receiver is not None else None
    record = load_record(record_file) if record_file is not None else None
    if trusted_files and (record is None or not record.is_signed_by(map(load_card, trusted_files))):
        raise VerificationError(
            "no record signed by a party you trust is given",
            where=record_file or "--trust",
            hint="`shares verify --record R` says who signed it; ask the dealer for the signed record",
        )
    journaled = _journaled(record_file)
    purpose = _purpose(reason, disposition, persons, wanted=journaled is not None)
    # The journal is read before there is a secret to be wiped.
    cautions = _cautions(journaled.journal(), journaled.record) if journaled else []
    with opening(keys, passphrase_files, descriptors) as at_hand:
        signing = signers(signer_files, at_hand) if journaled else []
        if journaled:
            journaled.require_signers(signing)
        recovery = recover(load_shares(files, at_hand.share), record)
        _require_encrypted(recovery, encrypted_file, optional=card is not None)
        if journaled and purpose:
            _enter(journaled, purpose, recovery, signing)
    if not as_json:
        for caution in cautions:
            warn(f"{caution}.")
        for finding in recovery.findings:
            if finding.status is not Status.INTACT:
                warn(f"{finding.source} is {finding.status}: {finding.reason}.")
    for path in leftovers(Path(target).parent) if target is not None else ():
        warn(
            f"{path} was left by a run that was stopped, or belongs to one at work now; it may hold a secret. "
            "Where none is at work, destroy it."
        )
    went = f"written to {target}" if target is not None else f"given to {fed[0]}" if fed else "written nowhere"
    if card is not None:
        went += f", encrypted to {card.name}, card {card.fingerprint}"
        if recovery.share.encrypted_file is not None:
            went += "; it is the key of the encrypted file, which the receiver needs as well"
    against = (
        f"the record with fingerprint {record.fingerprint}, {_signers(record)}"
        if record
        else "the commitment that each share carries"
    )
    with contextlib.ExitStack() as stack:
        stack.enter_context(recovery.secret)
        stack.enter_context(recovery.payload)
        if target is not None and encrypted_file is None:
            stack.enter_context(held_signals())
        if card is not None and target is not None:
            _check_encrypted(recovery, encrypted_file)
            write_new(target, sealed_for(card, recovery, suite), secret=True)
        elif encrypted_file is not None:
            _open_encrypted(recovery, encrypted_file, target, fed, aside=as_json)
        elif target is not None:
            to_file(recovery.secret, Path(target))
        elif fed:
            to_command(recovery.secret, fed, output=STANDARD_ERROR if as_json else None)
        members = {**_members(recovery, went, against), "journaled": journaled is not None, "cautions": cautions}
        notes = [UNRECORDED] if journaled is None else [] if signer_files else [f"Caution: {UNSIGNED_ENTRY}"]
        lines = _lines(recovery, went, against, purpose, notes)
        print_result(members, lines, as_json=as_json, aside=bool(fed))


def _journaled(record_file: str | None) -> SetFolder | None:
    """Return the folder of the record where a journal lies in it."""
    if record_file is None or Path(record_file).name != RECORD_NAME:
        return None
    folder = Path(record_file).parent
    return SetFolder(folder) if os.path.lexists(folder / JOURNAL_NAME) else None


def _purpose(reason: str | None, disposition: str | None, persons: tuple[str, ...], *, wanted: bool) -> Purpose | None:
    """Return why the secret is recovered, asking at a terminal; None where there is no journal to enter it into.

    Raises:
        ParameterError: it is not stated and nobody can be asked, or stated where there is no journal.
    """
    if not wanted:
        if reason is not None or disposition is not None or persons:
            raise ParameterError(
                "there is no journal to enter a reason, a disposition or persons into",
                hint="give --record with the record in its set's folder",
            )
        return None
    if os.isatty(0):
        reason = reason or click.prompt("Why is the secret recovered", err=True)
        disposition = disposition or click.prompt("Afterwards: returned, destroyed, or replaced by (date)", err=True)
    if reason is None or disposition is None:
        raise ParameterError(
            "this set has a journal, which asks for --reason TEXT and --disposition returned|destroyed|DATE",
            hint="what becomes of key and shares is decided before they are exposed",
        )
    return Purpose.of(reason, disposition, persons)


def _enter(folder: SetFolder, purpose: Purpose, recovery: Recovery, signing: list[OpenPartyKey]) -> None:
    """Enter the recovery; where that cannot be done, nothing is let go."""
    try:
        purpose.enter(folder, _opened(recovery, folder), signing)
    except BaseException:
        recovery.secret.close()
        recovery.payload.close()
        raise


def _cautions(journal: Journal, record: Record) -> list[str]:
    """Caution where the journal says that the set should not be recovered, or cannot be relied on."""
    dealt = any(isinstance(one.event, Dealt) and one.event.record == record.fingerprint for one in journal.entries)
    found = {
        "the journal says that this set was retired, and its shares destroyed: ask where these are from": is_retired(
            journal
        ),
        "the journal does not hold: `shares journal verify` says where": any(
            problem.breaks for problem in journal.problems
        ),
        "the journal does not tell of this set's dealing: it is another's, or its beginning is gone": not dealt,
    }
    return [caution for caution, applies in found.items() if applies]


def _opened(recovery: Recovery, folder: SetFolder) -> list[str]:
    """Return whose shares of the set were opened here: those used first, and those that were not needed."""
    apart = (Status.FOREIGN, Status.OTHER_EPOCH, Status.UNKNOWN)
    others = [one.custodian for one in recovery.findings if one.custodian is not None and one.status not in apart]
    named = {custodian.name for custodian in folder.record.custodians}
    return [name for name in dict.fromkeys([*recovery.used, *others]) if name in named]


def _signers(record: Record) -> str:
    names = ", ".join(f"{one.card.name} as {one.role}" for one in record.signatures)
    return f"signed by {names}" if names else "which is unsigned"


def _require_encrypted(recovery: Recovery, encrypted_file: str | None, *, optional: bool) -> None:
    """Refuse where the encrypted file is missing, or where there is none."""
    is_key = recovery.share.encrypted_file is not None
    problem = None
    if encrypted_file is not None and not is_key:
        problem = "these shares hold the secret itself, and no key of an encrypted file"
        hint = "leave --encrypted out"
    elif encrypted_file is None and is_key and not optional:
        problem = "these shares hold the key of an encrypted file, and that file is needed too"
        hint = "give it with --encrypted FILE; `split` wrote it beside the record"
    if problem:
        recovery.secret.close()
        recovery.payload.close()
        raise ParameterError(problem, where="--encrypted", hint=hint)


def _check_encrypted(recovery: Recovery, encrypted_file: str | None) -> None:
    share = recovery.share
    if encrypted_file is not None and share.encrypted_file is not None:
        shown = progress("Checking", "MiB")
        check_file(encrypted_file, recovery.secret, share.encrypted_file, share.set, progress=shown)


def _open_encrypted(
    recovery: Recovery, encrypted_file: str, target: str | None, fed: list[str] | None, *, aside: bool
) -> None:
    """Open the encrypted file with the recovered key: into a new file, a command, or nowhere."""
    share = recovery.share
    if target is None and not fed:
        _check_encrypted(recovery, encrypted_file)
        return
    sink = (
        new_file(target, secret=True)
        if target is not None
        else fed_command(fed or [], output=STANDARD_ERROR if aside else None)
    )
    shown = progress("Checking, then opening", "MiB")
    open_file(encrypted_file, recovery.secret, share.encrypted_file or b"", share.set, sink, progress=shown)


def _members(recovery: Recovery, went: str, against: str) -> dict[str, object]:
    share = recovery.share
    return {
        "done": True,
        "set": share.set.hex(),
        "epoch": share.epoch,
        "label": recovery.label,
        "encrypted_file": share.encrypted_file.hex() if share.encrypted_file is not None else None,
        "used": list(recovery.used),
        "checked_against": against,
        "secret": went,
        "shares": [
            {"file": f.source, "custodian": f.custodian, "status": f.status.value, "reason": f.reason}
            for f in recovery.findings
        ],
    }


def _lines(recovery: Recovery, went: str, against: str, purpose: Purpose | None, notes: list[str]) -> list[str]:
    return [
        f"Recovered{f': {recovery.label}' if recovery.label else ''}, from {', '.join(recovery.used)}.",
        f"Checked against {against}; the secret was {went}.",
        *(line for note in notes for line in prose(note)),
        *prose(f"Next: {EXPOSED if purpose is None else NEXT[purpose.disposition].format(by=purpose.by)}"),
    ]
