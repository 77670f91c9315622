"""``shares selftest``."""

from __future__ import annotations

import click

import shares
from shares.cli.output import json_option, print_result
from shares.custody.selftest import selftest
from shares.custody.software import software_digest
from shares.field import kernel
from shares.memory import locking, protect_process


@click.command()
@json_option
@click.pass_context
def command(ctx: click.Context, as_json: bool) -> None:
    """Test this installation with known answers, and say what this machine can protect.

    Exit code 0 when every answer is right, else 1: then do not use this installation.

    \b
    Example:
      shares selftest
    """
    outcomes = selftest()
    failed = [outcome for outcome in outcomes if outcome.problem]
    running, lock, guard = kernel(), locking(), protect_process()
    software = software_digest()
    members = {
        "done": not failed,
        "version": shares.__version__,
        "kernel": running.name,
        "path": running.path,
        "software": software.hex(),
        "tests": [{"about": outcome.about, "problem": outcome.problem} for outcome in outcomes],
        "memory_locked": lock.works,
        "core_limit_zero": guard.core_limit,
        "not_dumpable": guard.not_dumpable,
    }
    lines = [
        f"shares {shares.__version__}, kernel {running.name} ({running.path})",
        f"Software, to compare with another machine: {software.hex()}",
        *(
            f"  {'FAILED' if o.problem else 'right '}  {o.about}{f': {o.problem}' if o.problem else ''}"
            for o in outcomes
        ),
        f"  {'yes' if lock.works else 'NO '}     secret memory can be locked against swapping",
        f"  {'yes' if guard.core_limit and guard.not_dumpable else 'NO '}     core dumps of this process are off",
        f"{len(failed)} of {len(outcomes)} known answers are WRONG: do not use this installation."
        if failed
        else f"All {len(outcomes)} known answers are right.",
    ]
    print_result(members, lines, as_json=as_json)
    ctx.exit(1 if failed else 0)
