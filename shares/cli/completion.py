"""``shares completion``."""

from __future__ import annotations

import click
from click.shell_completion import get_completion_class

from shares.cli.output import json_option, print_result
from shares.errors import SharesError


@click.command()
@click.argument("shell", type=click.Choice(["bash", "zsh", "fish"]))
@json_option
@click.pass_context
def command(ctx: click.Context, shell: str, as_json: bool) -> None:
    """Print the completion script for a shell.

    \b
    Example:
      shares completion bash > ~/.local/share/bash-completion/completions/shares
    """
    kind = get_completion_class(shell)
    if kind is None:
        raise SharesError(f"no completion is known for {shell}")
    script = kind(ctx.find_root().command, {}, "shares", "_SHARES_COMPLETE").source()
    print_result({"done": True, "shell": shell, "script": script}, script.splitlines(), as_json=as_json)
