"""``shares sheet``."""

from __future__ import annotations

import click

from shares.cli.output import filled, json_option, print_result, prose, warn
from shares.cli.signals import held_signals
from shares.custody.presented import parse_share
from shares.documents.base import MAX_FILE
from shares.documents.share import Share
from shares.paper.paperform import PaperShare
from shares.paper.sheet import Sheet, make_sheet
from shares.storage import read_file, write_new

BARE_CAUTION = (
    "this share is bare, and so is its sheet: whoever reads the page or the file has the share. "
    "Print on a printer that keeps no copies, shred misprints, and destroy the file once it is printed."
)
CODE_ALONE_CAUTION = (
    "there are no lines to type, which would be too many: the page is worth no more than its code. "
    "Keep the share's file as well."
)


@click.command()
@click.argument("file", metavar="SHARE", callback=filled)
@click.option("--to", "target", required=True, metavar="FILE", callback=filled, help="Write the page to this new file.")
@click.option("--serial", metavar="TEXT", callback=filled, help="Number of the sheet.  [default: a random one]")
@json_option
def command(file: str, target: str, serial: str | None, as_json: bool) -> None:
    """Write SHARE as a page to print, A4 or Letter, with a second page to acknowledge and sign.

    The page has the share as lines that a person can type, each correcting two wrong characters, and as a QR code. A
    share wrapped for a party card has the code alone. Any browser prints it, or saves it as PDF; the page loads nothing
    from anywhere. `shares transcribe` reads it back.

    \b
    Example:
      shares sheet north-pier.share.json --to north-pier.html
    """
    share = parse_share(read_file(file, limit=MAX_FILE), where=file)
    sheet = make_sheet(share, serial=serial, where=file)
    with held_signals():
        write_new(target, sheet.page, secret=True)
        cautions = [BARE_CAUTION] if isinstance(share, Share) else []
        if not sheet.lines:
            cautions.append(CODE_ALONE_CAUTION)
        if not as_json:
            for caution in cautions:
                warn(caution)
        print_result(_members(share, sheet, target, cautions), _lines(share, sheet, target), as_json=as_json)


def _members(share: PaperShare, sheet: Sheet, target: str, cautions: list[str]) -> dict[str, object]:
    return {
        "done": True,
        "file": target,
        "custodian": share.custodian,
        "set": share.set.hex(),
        "epoch": share.epoch,
        "serial": sheet.serial,
        "lines": sheet.lines,
        "code": {"version": sheet.version, "level": sheet.level},
        "cautions": cautions,
    }


def _lines(share: PaperShare, sheet: Sheet, target: str) -> list[str]:
    holds = f"{sheet.lines} lines to type, and a code" if sheet.lines else "a code alone"
    return [
        f"Sheet {sheet.serial} of {share.custodian}, epoch {share.epoch}: {holds}. Written to {target}",
        "Checked: the share was read back from what is printed.",
        *prose(
            "Next: open the file in a browser on a computer without network and print both pages, without headers and "
            "footers; note the number of the sheet; have the second page signed and given back; destroy the file."
        ),
    ]
