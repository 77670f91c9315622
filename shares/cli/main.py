"""The command ``shares``: finds the command asked for, and turns every refusal into one line and an exit code.

Source: the exit codes are this project's own (shares/errors.py, README).
May import: shares.errors, shares.memory, shares.field, shares.cli.output, shares.cli.signals; a command's module only
when it is asked for.
Secret: nothing. Public: arguments, messages.
Does not: do any command's work. Before anything else it turns core dumps off.
"""

from __future__ import annotations

import contextlib
import importlib
import io
import os
import sys
from pathlib import Path
from typing import NoReturn

import click

import shares
from shares.cli.output import print_error, warn
from shares.cli.signals import heed_signals
from shares.errors import ParameterError, SharesError, StorageError
from shares.memory import lock_refused, protect_process

# Name -> (module, what it is for), in the order of a key's life. Modules are imported late: `--version` and `--help`
# stay quick.
COMMANDS = {
    "plan": ("plan", "Examine a policy before anything is split."),
    "party": ("party", "Make and show party keys and cards."),
    "passphrase": ("passphrase", "Draw a random passphrase."),
    "acknowledge": ("acknowledge", "Accept a custodian's duties, before the share is handed over."),
    "ceremony": ("ceremony", "Write the script of a key ceremony, log its steps, report on it."),
    "split": ("split", "Split a secret into shares, and check that they recover it."),
    "verify": ("verify", "Check each share alone, without any secret."),
    "sheet": ("sheet", "Print a share: lines to type, a QR code, and a receipt."),
    "transcribe": ("transcribe", "Read a printed share back, typed or scanned."),
    "attest": ("attest", "Ask custodians for proof of their shares; answer; check the answers."),
    "drill": ("drill", "Rehearse a recovery, and report what it showed."),
    "audit": ("audit", "Audit sets: would recovery work, and does the evidence hold?"),
    "recover": ("recover", "Recover a secret from enough shares."),
    "key": ("key", "Keys that a quorum uses and nobody holds: make, sign, open, show, verify."),
    "wrap": ("wrap", "Wrap a bare share, under a passphrase or for a card."),
    "unwrap": ("unwrap", "Open a wrapped share, or a secret recovered for your card."),
    "record": ("record", "Sign a record, as its dealer or a witness."),
    "task": ("task", "Do your part in a task of several parties, and see where it stands."),
    "journal": ("journal", "Show, extend and verify what has happened to a set."),
    "show": ("show", "Show the public facts of a share or record."),
    "retire": ("retire", "End a set: each copy destroyed before a witness, then closed."),
    "polynomial": ("polynomial", "List and check field polynomials."),
    "selftest": ("selftest", "Test this installation and this machine."),
    "completion": ("completion", "Print the completion script for a shell."),
}

# Messages name the page and a section of it; an installed package has it where nobody would look.
FORMAT = f"""\b
What each document and a policy hold, FORMAT.md:
{Path(shares.__file__).parent / "documents" / "FORMAT.md"}"""

EXIT_CODES = """\b
Exit codes: 0 done, 1 failed, 2 usage, 3 not enough shares, 4 verification failed,
5 file or I/O, 6 audit found something due, 7 the command that was fed failed."""


class _Commands(click.Group):
    """A group whose commands are imported when they are used."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in COMMANDS:
            return None
        module = importlib.import_module(f"shares.cli.{COMMANDS[cmd_name][0]}")
        command: click.Command = module.command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl([(name, what) for name, (_, what) in COMMANDS.items()])


def _print_version(ctx: click.Context, _: click.Parameter, wanted: bool) -> None:
    if wanted and not ctx.resilient_parsing:
        from shares.field import kernel

        running = kernel()
        click.echo(f"shares {shares.__version__}, kernel {running.name} ({running.path})")
        ctx.exit()


@click.group(
    cls=_Commands,
    epilog=f"{FORMAT}\n\n{EXIT_CODES}",
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)
@click.option(
    "--version",
    is_flag=True,
    expose_value=False,
    is_eager=True,
    callback=_print_version,
    help="Show version and kernel.",
)
def commands() -> None:
    """Keep recovery keys recoverable: plan, split, verify, recover, on files and on paper.

    \b
    Example:
      shares split key.pem --policy policy.toml --set tide-archive --deliver /dev/shm/handover
    """


def run() -> NoReturn:
    """Run the command line and leave with its exit code; never with a traceback."""
    protect_process()
    heed_signals()
    _prepare_streams()
    arguments = sys.argv[1:]
    before_command = arguments[: arguments.index("--")] if "--" in arguments else arguments
    sys.exit(_run(arguments, as_json="--json" in before_command))


def _prepare_streams() -> None:
    """See to it that descriptors 0 to 2 are taken, and that no text is too strange to be printed."""
    for number in range(3):
        try:
            os.fstat(number)
        except OSError:
            # Closed by whoever started us: a share file opened later would get this number, and whatever a library
            # prints would go into it. The lowest free number is the one given; standard input cannot be read then.
            os.open(os.devnull, os.O_RDWR if number else os.O_WRONLY)
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")


def _run(arguments: list[str], *, as_json: bool) -> int:
    problem: SharesError
    try:
        code = commands.main(arguments, prog_name="shares", standalone_mode=False)
        refused = lock_refused()
        if refused:
            warn(f"{refused}.")
        return code if isinstance(code, int) else 0
    except SharesError as error:
        problem = error
    except click.exceptions.NoArgsIsHelpError as error:
        with contextlib.suppress(OSError):
            click.echo(error.format_message(), err=True)
        return ParameterError.exit_code
    except click.ClickException as error:
        # Some of these messages are several lines long.
        message = " ".join(error.format_message().split())
        problem = ParameterError(message.rstrip("."), hint="see --help")
    except (click.Abort, KeyboardInterrupt):
        problem = SharesError("stopped before it was done", hint="nothing was left half written")
    except BrokenPipeError:
        # Whoever read the output has gone; there is nobody to tell.
        return 1
    except OSError as error:
        problem = StorageError(f"the system refused: {error.strerror or type(error).__name__}")
    except Exception as error:  # noqa: BLE001 - law 7: never a traceback; the text is withheld, as it may hold anything
        place = error.__traceback__
        while place and place.tb_next:
            place = place.tb_next
        where = f"{place.tb_frame.f_globals.get('__name__')}:{place.tb_lineno}" if place else "unknown place"
        problem = SharesError(
            f"a fault in this program: {type(error).__name__} at {where}",
            hint="please report it; no secret is in this line",
        )
    # Where standard output or error is full or gone, the exit code still tells.
    with contextlib.suppress(OSError):
        print_error(problem, as_json=as_json)
    return problem.exit_code
