"""``shares passphrase``."""

from __future__ import annotations

from pathlib import Path

import click

from shares.cli.output import filled, json_option, print_result
from shares.custody.passphrase import DEFAULT_WORDS, MAX_WORDS, MIN_WORDS, draw_passphrase
from shares.memory import Secret
from shares.storage import write_new


@click.command()
@click.option(
    "--to", "target", required=True, metavar="FILE", callback=filled, help="Write it to this new file, mode 0600."
)
@click.option(
    "--words",
    type=click.IntRange(MIN_WORDS, MAX_WORDS),
    default=DEFAULT_WORDS,
    show_default=True,
    help="How many words, of a list of 256: 8 bits each.",
)
@json_option
def command(target: str, words: int, as_json: bool) -> None:
    """Draw a random passphrase: ten words, 80 bits, into a file. It is not printed.

    Give the file to --passphrase-file. Whoever must type it copies it by hand from the file, and the file is destroyed.

    \b
    Example:
      shares passphrase --to /dev/shm/north-pier.passphrase
    """
    with draw_passphrase(words) as drawn, Secret(len(drawn) + 1) as line, line.view() as view:
        with drawn.view() as inside:
            view[:-1] = inside
        view[-1] = 0x0A
        write_new(Path(target), view, secret=True)
    members = {"done": True, "file": target, "words": words, "bits": 8 * words}
    lines = [
        f"Drawn: {words} words, {8 * words} bits, in {target}.",
        "Next: keep it apart from what it opens; who loses it loses the share or key that it wraps.",
    ]
    print_result(members, lines, as_json=as_json)
