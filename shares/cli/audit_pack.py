"""``shares audit pack``."""

from __future__ import annotations

from pathlib import Path

import click

from shares.cli.output import filled, json_option, print_result, prose, refuse_taken
from shares.history.files import FolderFiles
from shares.history.pack import Packed, write_pack

CAUTION = (
    "The pack is confidential: policy, journal and evidence tell who holds what, and where. Hand it to the auditor in "
    "person, or encrypted. No file in it is a share or key of this program; a scan or picture of one would not be "
    "noticed: look at what lies in documents/ yourself."
)


@click.command()
@click.argument("folder", metavar="SET", callback=filled)
@click.option("--to", "target", metavar="PACK", required=True, callback=filled, help="The pack, a new file.")
@json_option
def command(folder: str, target: str, as_json: bool) -> None:
    """Pack what an outside auditor needs of a set's folder into one file, byte for byte the same each time.

    It holds record, policy, journal and evidence, and never a share: where one lies in the folder, nothing is packed.
    The auditor runs `shares audit PACK` on a machine of their own.

    \b
    Example:
      shares audit pack tide-archive --to tide-archive.tar
    """
    refuse_taken(target)
    packed = write_pack(FolderFiles(Path(folder)), target)
    members = {
        "done": True,
        "exit": 0,
        "pack": target,
        "sha256": packed.digest.hex(),
        "size": packed.size,
        "files": list(packed.names),
        "left_out": list(packed.left_out),
        "caution": CAUTION,
    }
    print_result(members, _lines(packed, target), as_json=as_json)


def _lines(packed: Packed, target: str) -> list[str]:
    left = [f"Left out: {', '.join(packed.left_out)}"] if packed.left_out else []
    return [
        f"Packed: {len(packed.names):,} files, {packed.size:,} bytes, into {target}",
        f"SHA-256, to compare on arrival: {packed.digest.hex()}",
        *left,
        *prose(CAUTION),
    ]
