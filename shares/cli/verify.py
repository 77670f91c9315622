"""``shares verify``."""

from __future__ import annotations

import click

from shares.cli.output import filled, json_option, print_result, prose
from shares.custody.presented import Finding, Presented, Status, load_record, load_shares
from shares.custody.verify import examine, examine_alone
from shares.documents.record import Record

WITH_RECORD = (
    "This proves that each intact share is whole and lies on the dealing of the record with fingerprint {fingerprint}. "
    "It does not prove who made that record: compare the fingerprint with the one read aloud at the split. "
    "Nor does it prove that the dealing holds the right secret: only a recovery does."
)
WITHOUT_RECORD = (
    "Without a record this shows only that no accident befell these files and that they agree with one another. "
    "It does not prove that they are the shares that were dealt, nor that they recover anything: "
    "give --record for that."
)

NEXT = {
    Status.DAMAGED: "Next, for a damaged share: keep the file as it is, and ask for another copy; destroy nothing yet.",
    Status.INCONSISTENT: "Next, for an inconsistent dealing: stop using this set, and ask the dealer to split anew.",
    Status.FOREIGN: "Next, for a foreign share: find the record it belongs to; the share may be perfectly good.",
    Status.OTHER_EPOCH: "Next, for another epoch: find the record of that epoch; the share may be perfectly good.",
    Status.UNKNOWN: "Next, for a share not in the record: ask the dealer which record it belongs to.",
    Status.UNREADABLE: "Next, for an unreadable file: see the reason given; it says nothing of the share itself.",
}


@click.command()
@click.argument("files", metavar="SHARE...", nargs=-1, required=True, callback=filled)
@click.option("--record", "record_file", metavar="R", callback=filled, help="The set's public record.")
@json_option
@click.pass_context
def command(ctx: click.Context, files: tuple[str, ...], record_file: str | None, as_json: bool) -> None:
    """Check each SHARE alone, without any secret.

    With the record: that the share is whole, that the record commits to it, and that the dealer dealt consistently.
    One line for each share: intact, damaged, inconsistent dealing, foreign set, other epoch, not in the record, or
    unreadable, with the reason. Exit code 0 when all are intact, 4 when one is not, 5 when one cannot be read.

    \b
    Example:
      shares verify north-pier.share.json --record tide-archive/record.json
    """
    record = load_record(record_file) if record_file is not None else None
    presented = load_shares(files)
    findings = examine(presented, record) if record else examine_alone(presented)
    repeated = _repeated(presented)
    proves = WITH_RECORD.format(fingerprint=record.fingerprint) if record else WITHOUT_RECORD
    members = {
        "done": True,
        "record": record.fingerprint if record else None,
        "shares": [
            {"file": f.source, "custodian": f.custodian, "status": f.status.value, "reason": f.reason} for f in findings
        ],
        "repeated": [presented[i].source for i in repeated],
        "proves": proves if any(f.status is Status.INTACT for f in findings) else None,
    }
    print_result(members, _lines(findings, repeated, record, proves), as_json=as_json)
    ctx.exit(_exit_code(findings))


def _repeated(presented: list[Presented]) -> list[int]:
    """Return the places of shares that were given before."""
    seen: set[bytes] = set()
    again = []
    for i, one in enumerate(presented):
        if one.share is not None:
            commitment = one.share.commitment()
            if commitment in seen:
                again.append(i)
            seen.add(commitment)
    return again


def _lines(findings: list[Finding], repeated: list[int], record: Record | None, proves: str) -> list[str]:
    lines = []
    for i, finding in enumerate(findings):
        again = "; the same share was given before" if i in repeated else ""
        name = f" ({finding.custodian})" if finding.custodian else ""
        lines.append(f"{finding.source}{name}: {finding.status} - {finding.reason}{again}")
    intact = [finding for finding in findings if finding.status is Status.INTACT]
    lines.append(f"{len(intact)} of {len(findings)} intact{f', set {record.label}' if record else ''}.")
    if intact:
        lines.extend(prose(proves))
    lines.extend(advice for status, advice in NEXT.items() if any(finding.status is status for finding in findings))
    return lines


def _exit_code(findings: list[Finding]) -> int:
    statuses = {finding.status for finding in findings}
    if statuses == {Status.INTACT}:
        return 0
    return 5 if statuses <= {Status.INTACT, Status.UNREADABLE} else 4
