"""``shares acknowledge``."""

from __future__ import annotations

import os

import click

from shares.cli.keys import opening
from shares.cli.output import filled, json_option, print_result, warn
from shares.cli.passphrases import passphrase_options
from shares.custody.duties import digest_of_form
from shares.custody.parties import load_key
from shares.documents.acknowledgement import DUTIES, Acknowledgement
from shares.errors import ParameterError, SharesError
from shares.paper.sheet import make_form
from shares.storage import write_new


@click.command()
@click.option("--custodian", metavar="NAME", callback=filled, help="Who accepts; by default the name on KEY's card.")
@click.option(
    "--label", required=True, metavar="TEXT", callback=filled, help="What the set protects, as its policy says."
)
@click.option("--key", "key_file", metavar="KEY", callback=filled, help="Sign with this party key, the custodian's.")
@click.option("--form", "scan", metavar="SCAN", callback=filled, help="Enter the scan of a form signed by hand.")
@click.option("--page", is_flag=True, help="Write the form itself, to be printed and signed by hand.")
@click.option("--to", "target", required=True, metavar="FILE", callback=filled, help="New file.")
@passphrase_options
@json_option
def command(
    custodian: str | None,
    label: str,
    key_file: str | None,
    scan: str | None,
    page: bool,
    target: str,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Accept a custodian's duties, before the share is handed over: by signature, or by a form signed by hand.

    --key signs; --page writes the form to print, and --form enters its scan once it is signed.

    The duties are shown and stand in the file. A policy with `acknowledgement = true` has `split` ask for one of each
    custodian (--acknowledged FILE).

    \b
    Examples:
      shares acknowledge --label "Tide archive root" --key north-pier.key.json --to north-pier.ack.json \\
        --passphrase-file north-pier.passphrase
      shares acknowledge --label "Tide archive root" --custodian south-pier --page --to form.html
      shares acknowledge --label "Tide archive root" --custodian south-pier --form scan.pdf --to south-pier.ack.json
    """
    if (key_file is not None) + (scan is not None) + page != 1:
        raise ParameterError("give exactly one of --key KEY, --page and --form SCAN", hint="see --help")
    if key_file is None and custodian is None:
        raise ParameterError("--custodian NAME is needed", hint="neither a form nor a scan says whose it is")
    if page:
        _write_form(custodian or "", label, target, as_json=as_json)
        return
    if not as_json:
        for line in ("The duties:", *(f"  - {duty}" for duty in DUTIES)):
            click.echo(line, err=True)
    if key_file is not None:
        key = load_key(key_file)
        if custodian is not None and custodian != key.card.name:
            warn(f"the key is of {key.card.name}: `split` takes it for {custodian} only where that card is theirs.")
        _have_accepted(custodian or key.card.name)
        with opening((), passphrase_files, descriptors) as at_hand:
            made = Acknowledgement.signed_by(at_hand.party(key), custodian=custodian or key.card.name, label=label)
        how = f"signed by {key.card.name}, card {key.card.fingerprint}"
    else:
        digest = digest_of_form(scan or "")
        made = Acknowledgement.of_form(digest, custodian=custodian or "", label=label)
        how = f"on a form whose scan has SHA-256 {digest.hex()}"
    write_new(target, made.to_file(), secret=False)
    lines = [
        f"Acknowledged: the duties of {made.custodian} for {made.label}, {how}, in {target}.",
        "Next: give this file to the dealer; keep a form signed by hand, and its scan, apart from it.",
    ]
    print_result(
        {"done": True, "file": target, "custodian": made.custodian, "label": made.label, "how": how, "duties": DUTIES},
        lines,
        as_json=as_json,
    )


def _have_accepted(custodian: str) -> None:
    """Ask at a terminal, where there is one: nobody signs what they have not read."""
    if os.isatty(0) and not click.confirm(f"Does {custodian} accept them?", err=True):
        raise SharesError("the duties were not accepted", hint="nothing was written")


def _write_form(custodian: str, label: str, target: str, *, as_json: bool) -> None:
    write_new(target, make_form(custodian, label), secret=False)
    lines = [
        f"The form for {custodian} to sign is in {target}.",
        "Next: print it from a browser; have it signed before a witness; scan it, and enter the scan with --form.",
    ]
    print_result({"done": True, "file": target, "custodian": custodian, "label": label}, lines, as_json=as_json)
