"""``shares ceremony``."""

from __future__ import annotations

from pathlib import Path

import click

import shares
from shares.cli.keys import opening, sign_option, signers, warn_unsigned
from shares.cli.output import filled, json_option, print_result, prose, refuse_taken, warn
from shares.cli.passphrases import passphrase_options
from shares.clock import to_text
from shares.custody.parties import load_card
from shares.custody.software import software_digest
from shares.documents.base import MAX_FILE
from shares.documents.ceremony_script import CeremonyScript, Software
from shares.documents.policy import Policy
from shares.errors import ParameterError, VerificationError
from shares.evidence.ceremony import Logged, load_script, log_exception, log_step
from shares.evidence.ceremony_report import CeremonyReport, ceremony_report
from shares.evidence.paperwork import log_command, ranges, report_lines, report_page, script_page, script_text
from shares.evidence.script import DUTIES, cautions, make_script
from shares.history.files import FolderFiles
from shares.storage import discard, make_folder, read_file, write_new

SCRIPT, PAGE, TEXT = "script.json", "script.html", "script.txt"
BROKEN = "the journal does not hold: the report cannot be relied on."

script_option = click.option(
    "--script",
    "script_file",
    metavar="FILE",
    callback=filled,
    help="The script's file (script.json).  [default: the one that the folder holds]",
)


@click.group()
def command() -> None:
    """Hold a key ceremony: write its script from the policy, log each step, and report what went how.

    \b
    Example:
      shares ceremony script policy.toml --to ceremony
      shares ceremony log tide-archive --script ceremony/script.json --step 1 --initials "A.K." \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
      shares ceremony report tide-archive --html report.html
    """


@command.command("script", short_help="Write the script from a policy: steps, roles, room for initials.")
@click.argument("policy", metavar="POLICY", callback=filled)
@click.option("--to", "target", required=True, metavar="DIR", callback=filled, help="Folder for the script's files.")
@click.option(
    "--role",
    "roles",
    multiple=True,
    metavar="ROLE=PERSON",
    callback=filled,
    help=f"Who has a role: {', '.join(DUTIES)}. Others are filled in by hand.",
)
@click.option("--when", "planned", metavar="TEXT", callback=filled, help="Day and place, as people write them.")
@click.option("--standby", metavar="TEXT", callback=filled, help="The second day, should something fail.")
@sign_option
@passphrase_options
@json_option
def script_(
    policy: str,
    target: str,
    roles: tuple[str, ...],
    planned: str | None,
    standby: str | None,
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Write the script of the ceremony at which a secret is split by POLICY: numbered steps, each with whose it is,
    what is typed, what is to be seen, and room for initials and time.

    Three files are written: script.json, which the log is bound to; script.html, to print and lay on the table; and
    script.txt, the same as text. The script names this program by a digest over its files: make it with the release
    that will be used. The party cards that the policy names are read.

    \b
    Example:
      shares ceremony script policy.toml --to ceremony --role "dealer=the harbour engineer" \\
        --role "external-witness=an auditor from outside" --when "2027-01-15 09:00 UTC, harbour office"
    """
    names = [Path(target) / name for name in (SCRIPT, PAGE, TEXT)]
    for path in names:
        refuse_taken(str(path))
    read = Policy.parse(read_file(policy, limit=MAX_FILE), where=policy)
    folder = Path(policy).parent
    people = _people(roles)
    made = make_script(
        read,
        Software(version=shares.__version__, digest=software_digest()),
        people=people,
        cards={one.name: load_card(folder / one.card) for one in read.custodians if one.card is not None},
        planned=planned,
        standby=standby,
    )
    with opening((), passphrase_files, descriptors) as at_hand:
        for key in signers(signer_files, at_hand):
            made = made.signed(key)
    _write(dict(zip(reversed(names), (script_text(made).encode(), script_page(made), made.text), strict=True)))
    found = cautions(read, people)
    if not as_json:
        for caution in found:
            warn(caution)
    print_result(_script_members(made, names, found), _script_lines(made, names), as_json=as_json)


def _people(roles: tuple[str, ...]) -> dict[str, str]:
    people: dict[str, str] = {}
    for one in roles:
        role, sign, person = one.partition("=")
        if not sign or not person:
            raise ParameterError("write ROLE=PERSON", where=f"--role {one}", hint=f"roles: {', '.join(DUTIES)}")
        if role in people:
            raise ParameterError(f"the role {role} is given twice", where="--role")
        people[role] = person
    return people


def _write(files: dict[Path, bytes]) -> None:
    """Write the files of a script, the one that counts last; all of them or none."""
    written: list[Path] = []
    try:
        for path, data in files.items():
            make_folder(path.parent)
            write_new(path, data, secret=True)
            written.append(path)
    except BaseException:
        for path in written:
            discard(path)
        raise


def _script_members(made: CeremonyScript, names: list[Path], found: list[str]) -> dict[str, object]:
    return {
        "done": True,
        "files": [str(path) for path in names],
        "label": made.label,
        "steps": len(made.steps),
        "digest": made.digest().hex(),
        "spoken": made.spoken(),
        "software": {"version": made.software.version, "digest": made.software.digest.hex()},
        "signers": [one.card.name for one in made.signatures],
        "log": log_command(made),
        "cautions": found,
    }


def _script_lines(made: CeremonyScript, names: list[Path]) -> list[str]:
    signed = ", ".join(one.card.name for one in made.signatures)
    return [
        f"Script: {made.label}, {len(made.steps)} steps, {f'signed by {signed}' if signed else 'unsigned'}.",
        *(f"  {path}" for path in names),
        f"Digest, to read aloud: {made.spoken()}",
        f"SHA-256 of {SCRIPT}: {made.digest().hex()}",
        f"Made for: shares {made.software.version}, software {made.software.digest.hex()}",
        *prose(
            f"Next: print {PAGE}, without headers and footers; have it agreed on; change nothing in {SCRIPT} from then "
            f"on, as the log is bound to it. After each step: `{log_command(made)}`"
        ),
        "Confidential: it tells who keeps shares, and how they travel.",
    ]


@command.command("log", short_help="Log a step as done, or an exception.")
@click.argument("folder", metavar="SET", callback=filled)
@script_option
@click.option("--step", type=int, metavar="N", help="The number of the step.")
@click.option("--initials", required=True, metavar="TEXT", callback=filled, help="Of whoever did it, and who saw it.")
@click.option("--remark", metavar="TEXT", callback=filled, help="What is to be noted of the step.")
@click.option("--repeats", is_flag=True, help="The step has an entry already, and was done again.")
@click.option("--exception", metavar="TEXT", callback=filled, help="What went another way than the script says.")
@click.option("--remedy", metavar="TEXT", callback=filled, help="With --exception: what was done about it.")
@sign_option
@passphrase_options
@json_option
def log_(
    folder: str,
    script_file: str | None,
    step: int | None,
    initials: str,
    remark: str | None,
    repeats: bool,
    exception: str | None,
    remedy: str | None,
    signer_files: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Log a step of a ceremony as done, or with --exception what went another way, in the journal of the SET.

    SET is the set's folder, or the empty one that it is going to be: a ceremony begins before the split. The script is
    copied into it with the first entry. Nothing is ever taken back: an exception at a step is an entry of its own, and
    the step is logged when it is done. Steps may come out of order; the report says so.

    \b
    Examples:
      shares ceremony log tide-archive --script ceremony/script.json --step 1 --initials "A.K., R.W." \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
      shares ceremony log tide-archive --step 7 --initials "A.K." --exception "the clock was 3 minutes slow" \\
        --remedy "set by the second clock, seen by both witnesses" \\
        --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    if exception is None and step is None:
        raise ParameterError("--step N is needed", hint="an exception alone may have none")
    if exception is None and remedy is not None:
        raise ParameterError("--remedy goes with --exception", hint="use --remark for a note on a step")
    if exception is not None and (remark is not None or repeats):
        raise ParameterError(
            "--exception is an entry of its own, and takes neither --remark nor --repeats",
            hint="log the step itself with a second command",
        )
    target = Path(folder)
    script = load_script(target, script_file)
    with opening((), passphrase_files, descriptors) as at_hand:
        keys = signers(signer_files, at_hand)
        if exception is not None:
            logged = log_exception(
                target, script, step, initials=initials, exception=exception, remedy=remedy, keys=keys
            )
        else:
            logged = log_step(target, script, step or 0, initials=initials, remark=remark, repeats=repeats, keys=keys)
    if logged.skipped and not as_json:
        several = len(logged.skipped) > 1
        which = f"steps {ranges(logged.skipped)}, which come" if several else f"step {logged.skipped[0]}, which comes"
        warn(f"there is no entry yet of {which} before it.")
    warn_unsigned(signer_files, as_json=as_json)
    print_result(_log_members(logged, step), _log_lines(logged, step, exception), as_json=as_json)


def _log_members(logged: Logged, step: int | None) -> dict[str, object]:
    return {
        "done": True,
        "entry": logged.entry.sequence,
        "time": to_text(logged.entry.time),
        "script": logged.script.digest().hex(),
        "step": step,
        "skipped": list(logged.skipped),
        "next": step if logged.pending else logged.following,
    }


def _log_lines(logged: Logged, step: int | None, exception: str | None) -> list[str]:
    what = "exception" if exception is not None else "done"
    place = f"step {step} of {len(logged.script.steps)}, " if step is not None else ""
    lines = [f"Logged: {place}{what}, {to_text(logged.entry.time)}, entry {logged.entry.sequence}."]
    if logged.pending:
        return [*lines, *prose(f"Next: step {step} itself has no entry yet. Log it when it is done.")]
    if logged.following is None:
        return [*lines, "Next: no later step is left. `shares ceremony report` tells how it went."]
    following = logged.script.steps[logged.following - 1]
    return [*lines, *prose(f"Next: step {logged.following}, {following.role}: {following.what}")]


@command.command("report", short_help="Report how a ceremony went, exceptions first.")
@click.argument("folder", metavar="SET", callback=filled)
@script_option
@click.option("--html", "page", metavar="FILE", callback=filled, help="Write it as a page to this new file as well.")
@json_option
@click.pass_context
def report_(ctx: click.Context, folder: str, script_file: str | None, page: str | None, as_json: bool) -> None:
    """Report a ceremony from the journal of the SET, for whoever audits it: exceptions first, then roles, every step
    with time and initials, the shares by serial, and who signed what.

    Named as well are steps without an entry, out of order, or logged twice. Exit code 0 whatever went another way, as
    long as it is written down; 4 where the journal or the script were changed.

    \b
    Example:
      shares ceremony report tide-archive --html report.html
    """
    if page is not None:
        refuse_taken(page)
    chosen = load_script(Path(folder), script_file).digest() if script_file is not None else None
    report = ceremony_report(FolderFiles(Path(folder)), script=chosen)
    if page is not None:
        write_new(page, report_page(report), secret=True)
    code = VerificationError.exit_code if report.problems else 0
    if report.problems and not as_json:
        warn(BROKEN)
    print_result(_report_members(report, page, code), report_lines(report), as_json=as_json)
    ctx.exit(code)


def _report_members(report: CeremonyReport, page: str | None, code: int) -> dict[str, object]:
    return {
        "done": not code,
        "exit": code,
        "page": page,
        "label": report.script.label,
        "script": report.script.digest().hex(),
        "began": to_text(report.began) if report.began else None,
        "ended": to_text(report.ended) if report.ended else None,
        "complete": not report.missing,
        "missing": list(report.missing),
        "exceptions": [
            {
                "step": one.step,
                "what": one.what,
                "remedy": one.remedy,
                "entry": one.entry,
                "time": to_text(one.time) if one.time else None,
                "initials": one.initials,
            }
            for one in report.exceptions
        ],
        "roles": [one.model_dump(mode="json") for one in report.script.roles],
        "steps": [
            {
                "step": one.number,
                "role": one.step.role,
                "entries": [entry.sequence for entry in one.entries],
                "times": [to_text(time) for time in one.times],
                "initials": list(one.initials),
                "remarks": list(one.remarks),
                "signers": list(one.signers),
            }
            for one in report.steps
        ],
        "record": report.record.fingerprint if report.record else None,
        "shares": [
            {"custodian": c.custodian, "copy": c.name, "sent": c.sent, "received": c.received, "fate": c.fate}
            for c in report.copies
        ],
        "head": report.head.model_dump(mode="json") if report.head else None,
        "problems": list(report.problems),
    }
