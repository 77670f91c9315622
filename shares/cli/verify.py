"""``shares verify``."""

from __future__ import annotations

import click

from shares.cli.keys import key_option, opening, trust_option
from shares.cli.output import filled, json_option, print_result, progress, prose
from shares.cli.passphrases import passphrase_options
from shares.custody.large import check_encrypted
from shares.custody.parties import load_card
from shares.custody.presented import Finding, Presented, Status, load_record, load_shares
from shares.custody.verify import examine, examine_alone
from shares.documents.party import PartyCard
from shares.documents.record import Record
from shares.errors import ParameterError

WITH_RECORD = (
    "This proves that each intact share is whole and lies on the dealing of the record with fingerprint {fingerprint}. "
    "{who}"
    "It does not prove that the dealing holds the right secret: only a recovery does."
)
UNSIGNED = "It does not prove who made that record: compare the fingerprint with the one read aloud at the split. "
SIGNED = "It proves who made that record only as far as you know whose card each signer's is. "
RECORD_ALONE = (
    "This proves that the record with fingerprint {fingerprint} agrees with itself. {who}"
    "It proves nothing of any share: each custodian checks their own."
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
    Status.LOCKED: "Next, for a share not opened: give its passphrase or party key (--passphrase-file, --key).",
    Status.UNREADABLE: "Next, for an unreadable file: see the reason given; it says nothing of the share itself.",
}


@click.command()
@click.argument("files", metavar="[SHARE...]", nargs=-1, callback=filled)
@click.option("--record", "record_file", metavar="R", callback=filled, help="The set's public record.")
@trust_option
@click.option(
    "--encrypted",
    "encrypted_file",
    metavar="FILE",
    callback=filled,
    help="With --record: check this encrypted file against it as well, without any key.",
)
@key_option
@passphrase_options
@json_option
@click.pass_context
def command(
    ctx: click.Context,
    files: tuple[str, ...],
    record_file: str | None,
    trusted_files: tuple[str, ...],
    encrypted_file: str | None,
    keys: tuple[str, ...],
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Check each SHARE alone, without any secret, and who signed the record.

    With the record: that the share is whole, that the record commits to it, and that the dealer dealt consistently.
    One line for each share: intact, damaged, inconsistent dealing, foreign set, other epoch, not in the record,
    not opened, or unreadable, with the reason. Wrapped shares are opened in memory with --key or a passphrase.
    Without a SHARE the record alone is checked. Exit code 0 when all are intact and, with --trust, the record is signed
    by one trusted; 4 when not; 5 when a file cannot be read.

    \b
    Examples:
      shares verify north-pier.share.json --record tide-archive/record.json
      shares verify registrar.wrapped.json --record record.json --trust harbour-office.card.json \\
        --key registrar.key.json --passphrase-file registrar.passphrase
    """
    if record_file is None and (trusted_files or encrypted_file or not files):
        raise ParameterError("there is nothing to check", hint="give a SHARE, or --record R, or both; see --help")
    record = load_record(record_file) if record_file is not None else None
    trusted = [load_card(path) for path in trusted_files]
    with opening(keys, passphrase_files, descriptors) as at_hand:
        presented = load_shares(files, at_hand.share)
    if record and encrypted_file is not None:
        check_encrypted(encrypted_file, record, progress=progress("Checking the encrypted file", "MiB"))
    findings = examine(presented, record) if record else examine_alone(presented)
    repeated = _repeated(presented)
    signed = bool(record and record.signatures)
    proves = (
        (WITH_RECORD if findings else RECORD_ALONE).format(
            fingerprint=record.fingerprint, who=SIGNED if signed else UNSIGNED
        )
        if record
        else WITHOUT_RECORD
    )
    code = _exit_code(findings, record, trusted)
    members = {
        "done": code == 0,
        "exit": code,
        "record": record.fingerprint if record else None,
        "encrypted_file": encrypted_file,
        "signatures": _signatures(record, trusted) if record else None,
        "trusted": record.is_signed_by(trusted) if record and trusted else None,
        "shares": [
            {"file": f.source, "custodian": f.custodian, "status": f.status.value, "reason": f.reason} for f in findings
        ],
        "repeated": [presented[i].source for i in repeated],
        "proves": proves if not findings or any(f.status is Status.INTACT for f in findings) else None,
    }
    lines = _lines(findings, repeated, record, trusted, proves)
    if encrypted_file is not None:
        lines.insert(0, f"{encrypted_file}: intact - the encrypted file that the record names, whole")
    print_result(members, lines, as_json=as_json)
    ctx.exit(code)


def _signatures(record: Record, trusted: list[PartyCard]) -> list[dict[str, object]]:
    fingerprints = {card.fingerprint for card in trusted}
    return [
        {
            **one.public("role", "time"),
            **one.card.public("name", "fingerprint"),
            "trusted": one.card.fingerprint in fingerprints,
        }
        for one in record.signatures
    ]


def _signature_lines(record: Record, trusted: list[PartyCard]) -> list[str]:
    if not record.signatures and trusted:
        return [
            "The record is unsigned, and --trust asks for a signature: ask the dealer for the signed record.",
        ]
    if not record.signatures:
        return ["The record is unsigned: compare its fingerprint with the one read aloud at the split."]
    other = "not among the cards you trust" if trusted else "--trust tells whether you trust that card"
    lines = [
        f"Signed by {one['name']} as {one['role']}, {one['time']}, card {one['fingerprint']} "
        f"({'trusted' if one['trusted'] else other})."
        for one in _signatures(record, trusted)
    ]
    if trusted and not record.is_signed_by(trusted):
        lines.append("Next: it is signed by none of the parties you trust. Ask the dealer for the record, and compare.")
    return lines


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


def _lines(
    findings: list[Finding], repeated: list[int], record: Record | None, trusted: list[PartyCard], proves: str
) -> list[str]:
    lines = []
    for i, finding in enumerate(findings):
        again = "; the same share was given before" if i in repeated else ""
        name = f" ({finding.custodian})" if finding.custodian else ""
        lines.append(f"{finding.source}{name}: {finding.status} - {finding.reason}{again}")
    intact = [finding for finding in findings if finding.status is Status.INTACT]
    if findings:
        lines.append(f"{len(intact)} of {len(findings)} intact{f', set {record.label}' if record else ''}.")
    if record:
        if not findings:
            lines.append(f"The record of {record.label} agrees with itself; fingerprint {record.fingerprint}.")
        lines.extend(_signature_lines(record, trusted))
    if intact or not findings:
        lines.extend(prose(proves))
    lines.extend(advice for status, advice in NEXT.items() if any(finding.status is status for finding in findings))
    return lines


def _exit_code(findings: list[Finding], record: Record | None, trusted: list[PartyCard]) -> int:
    statuses = {finding.status for finding in findings}
    if record and trusted and not record.is_signed_by(trusted):
        return 4
    if statuses <= {Status.INTACT}:
        return 0
    return 5 if statuses <= {Status.INTACT, Status.UNREADABLE} else 4
