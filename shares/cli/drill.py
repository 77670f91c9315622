"""``shares drill``."""

from __future__ import annotations

from datetime import timedelta
from pathlib import Path

import click

from shares import clock
from shares.cli import roster
from shares.cli.feeding import FeedsCommand
from shares.cli.intervals import interval
from shares.cli.keys import key_option, opening, sign_option, signers, warn_unsigned
from shares.cli.output import filled, json_option, print_result, prose, refuse_taken, warn
from shares.cli.passphrases import passphrase_options
from shares.cli.signals import held_signals
from shares.custody.deliver import fed, to_command
from shares.custody.encrypted_file import open_file
from shares.custody.entries import end_of_day
from shares.custody.presented import load_shares
from shares.custody.recover import Recovery
from shares.documents.drill_report import Action
from shares.documents.event import DrillKind
from shares.documents.members import encode_bytes
from shares.errors import ParameterError
from shares.evidence.after_action import close_drill, how_it_went, in_words, report_page
from shares.evidence.drill import Drill, open_drill, the_drill
from shares.evidence.rehearsal import Probe, Rehearsal, rehearse
from shares.history.folder import SetFolder
from shares.storage import write_new

STANDARD_ERROR = 2
FAILED = 1

drill_option = click.option("--drill", "number", type=int, metavar="N", help="Which drill, where several are open.")

CALLED = {
    "attendance": "Next: give the challenge to those called, by the known way; they answer with "
    "`shares attest answer --present`, and `shares attest check --set` enters the answers. Then close the drill.",
    "practice": "Next: those called bring their practice shares (NAME.practice.json); `shares drill rehearse` "
    "recovers the worthless secret from them.",
    "recovery": "Next: a quorum brings its shares to a machine that may know the secret; `shares drill rehearse` "
    "recovers it in memory, gives it to a probe after --, and writes it nowhere.",
}
EXPOSED = (
    "this machine has now held {secret}the shares brought, and the journal says so. "
    + "Wipe it, and bring each share back."
)


@click.group()
def command() -> None:
    """Rehearse a recovery before it is needed: call a drill, hold it, and close it with a signed report.

    \b
    Example:
      shares drill open tide-archive --kind practice \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
      shares drill rehearse tide-archive north-pier.practice.json dry-dock.practice.json registrar.practice.json \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
      shares drill close tide-archive --finding "the meeting room was locked" \\
        --action registrar 2027-01-15 "keep a second key" --sign harbour-office.key.json \\
        --passphrase-file harbour-office.passphrase
    """


@command.command("open", short_help="Call a drill.")
@click.argument("folder", metavar="SET", callback=filled)
@click.option(
    "--kind",
    type=click.Choice(["attendance", "practice", "recovery"]),
    required=True,
    help="Who comes; with worthless shares; or with the real ones.",
)
@click.option("--custodian", "custodians", multiple=True, metavar="NAME", help="Who is called.  [default: all]")
@click.option("--scope", metavar="TEXT", callback=filled, help="What it covers.")
@click.option("--objective", "objectives", multiple=True, metavar="TEXT", callback=filled, help="What it is to show.")
@click.option("--to", "target", metavar="C", callback=filled, help="In one of attendance: new file, to hand out.")
@click.option(
    "--due",
    default="2d",
    show_default=True,
    metavar="INTERVAL",
    callback=interval,
    help="In one of attendance: how long those called have to answer.",
)
@sign_option
@passphrase_options
@json_option
def open_(
    folder: str,
    kind: DrillKind,
    custodians: tuple[str, ...],
    scope: str | None,
    objectives: tuple[str, ...],
    target: str | None,
    due: timedelta,
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Call a drill of the SET: of attendance, of practice with worthless shares, or of recovery with the real ones.

    \b
    Examples:
      shares drill open tide-archive --kind practice \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
      shares drill open tide-archive --kind attendance --to called.json --sign harbour-office.key.json \\
        --passphrase-file harbour-office.passphrase
    """
    if (target is not None) != (kind == "attendance"):
        raise ParameterError("a drill of attendance, and no other, has a file to hand out: --to C", hint="see --help")
    if target is not None:
        refuse_taken(target)
    of_set = SetFolder(folder)
    with opening((), passphrase_files, descriptors) as at_hand, held_signals():
        drill, asked = open_drill(
            of_set,
            kind,
            custodians=custodians,
            scope=scope,
            objectives=objectives,
            due=due,
            keys=signers(signer_files, at_hand),
        )
        if target is not None and asked is not None:
            write_new(target, asked.to_file(), secret=True)
    warn_unsigned(signer_files, as_json=as_json)
    within = drill.event.target
    lines = [
        f"Drill {drill.number} is open: {kind}, {of_set.record.label}.",
        f"Called: {', '.join(drill.event.custodians)}.",
        *([f"To recover within {in_words(within)}, counted from now."] if within is not None else []),
        *([f"Challenge to hand out: {target}, fingerprint {asked.fingerprint}"] if asked is not None else []),
        *prose(CALLED[kind]),
    ]
    members = {
        "done": True,
        "drill": drill.number,
        "kind": kind,
        "custodians": drill.event.custodians,
        "target_seconds": within,
        "file": target,
    }
    print_result(members, lines, as_json=as_json)


@command.command("rehearse", cls=FeedsCommand, short_help="Recover in a drill, and enter how it went.")
@click.argument("folder", metavar="SET", callback=filled)
@click.argument("files", metavar="SHARE...", nargs=-1, callback=filled)
@drill_option
@click.option(
    "--encrypted",
    "encrypted_file",
    metavar="FILE",
    callback=filled,
    help="The encrypted file whose key the shares hold, for the command to get.",
)
@click.option("--present", "persons", multiple=True, metavar="PERSON", callback=filled, help="Who is present.")
@sign_option
@key_option
@passphrase_options
@json_option
@click.pass_context
def rehearse_(
    ctx: click.Context,
    folder: str,
    files: tuple[str, ...],
    number: int | None,
    encrypted_file: str | None,
    persons: tuple[str, ...],
    signer_files: tuple[str, ...],
    keys: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Recover in a drill of the SET from these SHAREs, and enter how it went, whether it passes or fails.

    In a drill of practice the worthless secret is shown. In one of recovery the real one is recovered in memory,
    compared with the record's commitment, given to COMMAND alone (its exit code and time are kept), and wiped; it is
    written nowhere. A failed rehearsal is entered too, and gives the exit code of its failure.

    \b
    Examples:
      shares drill rehearse tide-archive north-pier.practice.json dry-dock.practice.json registrar.practice.json \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
      shares drill rehearse tide-archive *.share.json --present "A. Keeper" \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase -- openssl pkey -noout
    """
    words: list[str] | None = ctx.meta.get("command")
    of_set = SetFolder(folder)
    drill = the_drill(of_set.journal(), number)
    if words == []:
        raise ParameterError("there is no command after --", hint="see --help")
    if words and of_set.record.encrypted_file is not None and encrypted_file is None:
        raise ParameterError(
            "these shares hold the key of an encrypted file, and the command needs that file",
            where="--encrypted",
            hint="give it with --encrypted FILE",
        )
    with opening((*keys, *signer_files), passphrase_files, descriptors) as at_hand, held_signals():
        signing = signers(signer_files, at_hand)
        presented = load_shares(files, at_hand.share)
        probe = _probe(words, encrypted_file) if words else None
        done = rehearse(of_set, drill, presented, probe=probe, persons=persons, keys=signing)
    warn_unsigned(signer_files, as_json=as_json)
    with done:
        print_result(_members(drill, done), _lines(drill, done), as_json=as_json)
    if done.failure is not None:
        warn(f"{done.failure}.")
        ctx.exit(done.failure.exit_code)


def _probe(words: list[str], encrypted_file: str | None) -> Probe:
    """Return what gives the secret to a command; its output goes to standard error, as nothing of it is kept."""

    def probe(recovery: Recovery) -> None:
        share = recovery.share
        if share.encrypted_file is None or encrypted_file is None:
            to_command(recovery.secret, words, output=STANDARD_ERROR)
        else:
            sink = fed(words, output=STANDARD_ERROR)
            open_file(encrypted_file, recovery.secret, share.encrypted_file, share.set, sink)

    return probe


def _shown(drill: Drill, done: Rehearsal) -> str | None:
    """Return the practice secret as text: it is worthless, and people see that it was recovered."""
    if done.recovery is None or drill.event.kind != "practice":
        return None
    with done.recovery.secret.view() as view:
        return encode_bytes(view)


def _members(drill: Drill, done: Rehearsal) -> dict[str, object]:
    event = done.event
    return {
        "done": event.passed,
        "exit": done.failure.exit_code if done.failure else 0,
        "drill": drill.number,
        "entry": done.entry.sequence,
        "used": event.custodians,
        "outcome": event.outcome,
        "seconds": event.seconds,
        "probe": event.probe,
        "probe_seconds": event.probe_seconds,
        "practice_secret": _shown(drill, done),
    }


def _lines(drill: Drill, done: Rehearsal) -> list[str]:
    event, shown = done.event, _shown(drill, done)
    went = f"Drill {drill.number}, {drill.event.kind}: {how_it_went(event)}"
    lines = prose(f"{went}, from {', '.join(event.custodians) or 'no usable share'}.")
    if shown is not None:
        lines += ["The practice secret, which is worthless and the same for every quorum:", f"  {shown}"]
    if event.probe is not None:
        lines.append(f"The probe ended with code {event.probe} after {event.probe_seconds} s.")
    lines.append(f"Entered as entry {done.entry.sequence}.")
    if done.brought:
        secret = "the secret and " if done.recovery and drill.event.kind == "recovery" else ""
        lines += prose(f"Next: {EXPOSED.format(secret=secret)}")
    return [*lines, "Then close the drill with `shares drill close`."]


@command.command("close", short_help="Close a drill with a signed report.")
@click.argument("folder", metavar="SET", callback=filled)
@drill_option
@click.option("--finding", "findings", multiple=True, metavar="TEXT", callback=filled, help="What was observed.")
@click.option(
    "--action",
    "actions",
    type=(str, str, str),
    multiple=True,
    metavar="OWNER DATE TEXT",
    help="What is to be done, by whom, until when; once for each.",
)
@click.option("--html", "page", metavar="FILE", callback=filled, help="Write the report for people to this new file.")
@sign_option
@passphrase_options
@json_option
@click.pass_context
def close_(
    ctx: click.Context,
    folder: str,
    number: int | None,
    findings: tuple[str, ...],
    actions: tuple[tuple[str, str, str], ...],
    page: str | None,
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Close a drill of the SET with a signed report: what it showed, who took part, times, findings, actions.

    A drill that failed is closed likewise; the exit code is 1 then.

    \b
    Example:
      shares drill close tide-archive --finding "the meeting room was locked" \\
        --action registrar 2027-01-15 "keep a second key" --html report.html \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    if page is not None:
        refuse_taken(page)
    of_set = SetFolder(folder)
    drill = the_drill(of_set.journal(), number)
    assigned = [Action(owner=owner, due=end_of_day(due, where="--action"), what=what) for owner, due, what in actions]
    for action in assigned:
        if action.due < clock.now():
            warn(f"the action of {action.owner} was due on {action.due:%Y-%m-%d}, which is past.")
    with opening((), passphrase_files, descriptors) as at_hand:
        report, filed, entry = close_drill(
            of_set, drill, findings=findings, actions=assigned, keys=signers(signer_files, at_hand)
        )
    if page is not None:
        write_new(page, report_page(report), secret=True)
    report_file = str(Path(folder) / filed.path)
    took = report.recovery_seconds
    lines = [
        f"Drill {drill.number} is closed: {'passed' if report.passed else 'failed'}.",
        *([f"Recovered {in_words(took)} after the call."] if took is not None else []),
        *(f"  finding: {finding}" for finding in report.findings),
        *(f"  action {i}: {one.owner}, by {one.due:%Y-%m-%d}: {one.what}" for i, one in enumerate(report.actions, 1)),
        f"Signed report: {report_file}" + (f"; for people: {page}" if page is not None else ""),
        *prose(_after(folder, entry.sequence, len(report.actions))),
    ]
    members = {
        "done": report.passed,
        "exit": 0 if report.passed else FAILED,
        "drill": drill.number,
        "report": report_file,
        "page": page,
        "recovery_seconds": took,
        "target_seconds": report.target_seconds,
        "findings": report.findings,
        "actions": [one.model_dump(mode="json") for one in report.actions],
    }
    print_result(members, lines, as_json=as_json)
    ctx.exit(0 if report.passed else FAILED)


def _after(folder: str, entry: int, actions: int) -> str:
    """Say what comes after a drill is closed."""
    if not actions:
        return "Next: give the report to those who took part, and to whoever plans the next drill."
    which = "1" if actions == 1 else f"1 to {actions}"
    return (
        f"Next: have the actions done, and enter each with `shares journal add {folder} resolved --entry {entry} "
        f"--action {which} --how done`."
    )


command.add_command(roster.command)
