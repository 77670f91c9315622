"""``shares audit``: the sets that are named, or ``shares audit pack``."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence
from datetime import datetime

import click

import shares
from shares.cli import audit_pack
from shares.cli.heads import heads_given
from shares.cli.intervals import moment
from shares.cli.output import filled, json_option, print_result, progress, prose, refuse_taken, warn
from shares.clock import to_text
from shares.custody.parties import load_card
from shares.errors import VerificationError
from shares.evidence.audited import Audit, CustodianRow, Known, Margin, Verdict
from shares.evidence.many import audit_many, find_sets
from shares.storage import write_new

PACK = "pack"
DUE = 6
"""The exit code of an audit that found something due; where something does not hold it is 4."""
PROVES = (
    "Worked out offline from public material and from what the journals tell. It proves who attested to what, and that "
    "records, chains, signatures and digests hold. It does not prove that a file was erased, a pack kept closed or a "
    "person honest, nor that whoever holds every signing key wrote no other journal: compare each head with one that "
    "was noted elsewhere. Whether this meets a law, standard or contract is for a professional to judge."
)
CONFIDENTIAL = "Confidential: it tells who holds what, and where."
_SETS_TOLD_IN_FULL = 1
_MOST_TOLD = 5


class _OrPack(click.Command):
    """A command over paths whose first word may be another command: a folder of that name is ``./pack``."""

    def make_context(
        self, info_name: str | None, args: list[str], parent: click.Context | None = None, **extra: object
    ) -> click.Context:
        if args[:1] == [PACK]:
            return audit_pack.command.make_context(f"{info_name} {PACK}", args[1:], parent, **extra)
        return super().make_context(info_name, args, parent, **extra)


@click.command(cls=_OrPack)
@click.argument("paths", metavar="SET...", nargs=-1, required=True, callback=filled)
@click.option("--at", metavar="TIME", callback=moment, help="Audit as of a time, like 2026-12-01T07:00:00Z.")
@click.option(
    "--trust",
    "trusted_files",
    multiple=True,
    metavar="CARD",
    callback=filled,
    help="A party card whose fingerprint you have compared: one such party must have signed record and journal.",
)
@click.option(
    "--head",
    "noted",
    multiple=True,
    metavar="HEAD",
    callback=filled,
    help='Where the journal is known to have stood: "57 ABCD-...", or a file that quotes it; of one set alone.',
)
@click.option("--html", "page", metavar="FILE", callback=filled, help="Write a page as well, to be read and filed.")
@click.option("--jobs", type=click.IntRange(1), metavar="N", help="So many processes; one a processor by default.")
@json_option
@click.pass_context
def command(
    ctx: click.Context,
    paths: tuple[str, ...],
    at: datetime | None,
    trusted_files: tuple[str, ...],
    noted: tuple[str, ...],
    page: str | None,
    jobs: int | None,
    as_json: bool,
) -> None:
    """Audit sets, offline and without any share: would recovery work, and does the evidence hold?

    Each SET is a set's folder, a pack that `shares audit pack SET --to PACK` made, or a folder of these. Read are
    record, policy, journal, attestations and drill reports; told is a verdict with reasons and next steps: good,
    unsigned (nobody vouches for it), due, at risk, or broken (something does not hold). A failure of one set stops no
    other. Exit code 0 when all are good; 4 when any is broken; else 6.

    \b
    Examples:
      shares audit tide-archive --html report.html
      shares audit /srv/sets --trust harbour-office.card.json --json
      shares audit pack tide-archive --to tide-archive.tar
      shares audit tide-archive.tar --trust harbour-office.card.json --head noted-on-monday.txt
    """
    if page is not None:
        refuse_taken(page)
    trusted = [load_card(path) for path in trusted_files]
    heads = heads_given(noted)
    found = find_sets(paths)
    if found.passed_over:
        warn(f"{len(found.passed_over):,} folder(s) hold no set, and were passed over: {_few(found.passed_over)}.")
    bar = progress("Auditing", "sets")
    audits = list(audit_many(found.sets, jobs=jobs, at=at, trusted=trusted, heads=heads, progress=bar))
    if page is not None:
        # The template engine is loaded for a page alone.
        from shares.evidence.page import audit_page

        program = f"shares {shares.__version__}"
        write_new(page, audit_page(audits, program=program, trusted=trusted, heads=heads), secret=True)
    worst = max((audited.verdict for audited in audits), key=lambda verdict: verdict.rank)
    code = VerificationError.exit_code if worst is Verdict.BROKEN else 0 if worst is Verdict.GOOD else DUE
    counts = Counter(audited.verdict for audited in audits)
    members = {
        "done": code == 0,
        "exit": code,
        "confidential": CONFIDENTIAL,
        "verdict": worst.value,
        "counts": {verdict.value: counts[verdict] for verdict in Verdict},
        "page": page,
        "passed_over": list(found.passed_over),
        "proves": PROVES,
        "sets": [audited.members() for audited in audits],
    }
    print_result(members, _lines(audits, counts, page), as_json=as_json)
    ctx.exit(code)


def _lines(audits: Sequence[Audit], counts: Counter[Verdict], page: str | None) -> Iterator[str]:
    for audited in sorted(audits, key=lambda one: -one.verdict.rank):
        if audited.verdict is Verdict.GOOD and len(audits) > _SETS_TOLD_IN_FULL:
            continue
        yield from _set_lines(audited, in_full=len(audits) <= _SETS_TOLD_IN_FULL)
        yield ""
    if len(audits) > _SETS_TOLD_IN_FULL:
        told = ", ".join(f"{counts[verdict]:,} {verdict}" for verdict in reversed(Verdict) if counts[verdict])
        yield f"{len(audits):,} sets: {told}."
    if page is not None:
        yield f"Page, confidential like this: {page}"
    yield from prose(PROVES)
    yield CONFIDENTIAL


def _set_lines(audited: Audit, *, in_full: bool) -> Iterator[str]:
    label = f"{audited.label}, epoch {audited.epoch}" if audited.label else audited.where
    yield from prose(f"{str(audited.verdict).capitalize()}: {label} ({audited.where}), {to_text(audited.at)}")
    for reason in audited.reasons if in_full else audited.reasons[:_MOST_TOLD]:
        yield from (f"  {line}" for line in prose(f"{reason.level}: {reason.what}"))
        yield from (f"    {line}" for line in prose(f"Next: {reason.next}"))
    if not in_full:
        more = len(audited.reasons) - _MOST_TOLD
        if more > 0:
            yield f"  and {more:,} more; audit it alone to see all"
        return
    if audited.margin is not None and audited.retired is None:
        yield from _margin_lines(audited.margin)
    if audited.retired is not None:
        until = to_text(audited.keep_until or audited.at)
        yield f"  Retired {to_text(audited.retired)}; records are kept until {until}."
    yield from _custodian_lines(audited.custodians)
    yield from _exposure_lines(audited.exposure)
    ahead = [task for task in audited.tasks if not task.overdue]
    if ahead:
        yield "  Coming:"
        yield from (f"    {task.due:%Y-%m-%d}  {task.what}" for task in ahead[:_MOST_TOLD])
    if audited.exceptions:
        entries = _few([str(one.entry) for one in audited.exceptions])
        yield f"  Exceptions: {len(audited.exceptions):,}, in entries {entries}"
    for signer in audited.signers:
        roles = ", ".join(role if role != "journal" else f"{signer.entries:,} entries" for role in signer.roles)
        yield f"  Signed by {signer.name} ({roles}), card {signer.card}{', trusted' if signer.trusted else ''}"
    if audited.head:
        yield f"  Journal: {audited.counts.entries:,} entries; head {audited.head}"
    for note in audited.notes:
        yield from (f"  {line}" for line in prose(f"Note: {note}"))


def _margin_lines(margin: Margin) -> Iterator[str]:
    people = f", {margin.people} in people" if margin.people is not None else ""
    sites = f", {margin.sites} in sites" if margin.sites is not None else ""
    yield f"  Confirmed: {margin.confirmed} of {margin.total} custodians."
    if margin.custodians.low >= 0:
        yield f"  May still be lost: {margin.custodians} of these{people}{sites}."
    if margin.custodians.high < 0:
        yield f"  They make no quorum: the fewest that are missing are {margin.missing}."


def _custodian_lines(rows: Sequence[CustodianRow]) -> Iterator[str]:
    width = max((len(row.name) for row in rows), default=0)
    for row in rows:
        due = f"; due {row.due:%Y-%m-%d}" if row.due else ""
        due += f"; silent: asked, no answer by {row.silent:%Y-%m-%d}" if row.silent else ""
        yield f"    {row.name:<{width}}  {row.status}: {row.why}{due}"


def _exposure_lines(exposure: Sequence[Known]) -> Iterator[str]:
    people = [row for row in exposure if row.kind in ("person", "unknown") and row.missing is not None]
    if people:
        nearest = people[0]
        missing = f"{nearest.missing} more would make a quorum" if not nearest.suffices else "that makes a quorum"
        yield from (
            f"  {line}" for line in prose(f"Most known to one: {nearest.who}, of {_few(nearest.shares)}; {missing}.")
        )
    recovered = [row.who for row in people if row.recoveries]
    if recovered:
        yield from (f"  {line}" for line in prose(f"Present at recoveries: {_few(recovered)}."))


def _few(names: Sequence[str]) -> str:
    more = f" and {len(names) - _MOST_TOLD:,} more" if len(names) > _MOST_TOLD else ""
    return ", ".join(names[:_MOST_TOLD]) + more
