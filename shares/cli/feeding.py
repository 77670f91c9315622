"""Commands that feed another: what follows ``--`` is that command and its arguments.

Source: POSIX.1-2017, Base Definitions, sec. 12.2, guideline 10 (``--`` ends the options).
May import: nothing of this package.
Secret: nothing. Public: arguments.
Does not: run the command.
"""

from __future__ import annotations

import click


class FeedsCommand(click.Command):
    """Takes what follows ``--`` as a command and its arguments, in ``ctx.meta["command"]``, never as shares."""

    def parse_args(self, ctx: click.Context, args: list[str]) -> list[str]:
        if "--" in args:
            at = args.index("--")
            ctx.meta["command"] = args[at + 1 :]
            args = args[:at]
        return super().parse_args(ctx, args)

    def collect_usage_pieces(self, ctx: click.Context) -> list[str]:
        return [*super().collect_usage_pieces(ctx), "[-- COMMAND ARG...]"]
