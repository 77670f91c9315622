"""Deliver a recovered secret: to a new private file, encrypted to its receiver, or to one command's standard input.

Source: execve(2), pipe(2); PCI PIN 21-1 by way of trade practice: recovery does not print a key.
May import: shares.errors, shares.memory, shares.storage, shares.streams, shares.documents,
shares.custody.payload, .recover.
Secret: the secret. Public: the path or the command, and how the command ended.
Does not: write to a terminal, keep the secret, or know what the command does with it.
"""

from __future__ import annotations

import contextlib
import functools
import subprocess
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path

from shares.custody.payload import is_committed, open_payload
from shares.custody.recover import Recovery
from shares.documents.party import PartyCard
from shares.documents.record import Record
from shares.documents.sealed_secret import SealedSecret
from shares.documents.share import MIN_ROW
from shares.documents.wrapping import Suite, card_sealer
from shares.errors import CommandFailedError, SetMismatchError, StorageError, VerificationError
from shares.memory import Secret
from shares.storage import write_new
from shares.streams import Write, write_all


def to_file(secret: Secret, path: Path) -> None:
    """Write the secret to a new file of mode 0600.

    Raises:
        StorageError: the file exists or cannot be written.
    """
    with secret.view() as view:
        write_new(path, view, secret=True)


def sealed_for(card: PartyCard, recovery: Recovery, suite: Suite) -> bytes:
    """Return the file that holds a recovered secret for the party of ``card`` alone.

    Raises:
        VerificationError: the card holds no usable keys.
    """
    share = recovery.share
    sealed = SealedSecret.seal(
        recovery.payload,
        card_sealer(card.recipient(), suite),
        set_id=share.set,
        epoch=share.epoch,
        label=recovery.label,
        secret_commitment=share.secret_commitment,
        encrypted_file=share.encrypted_file,
    )
    return sealed.to_file()


def open_sealed(sealed: SealedSecret, opener: Callable[[SealedSecret], Secret], record: Record | None) -> Secret:
    """Return the secret that was sealed for its receiver, checked against its commitment.

    Args:
        sealed: the document.
        opener: what opens it, with the receiver's party key.
        record: the public record of the set, where there is one; without it nothing says whose secret it is.

    Raises:
        WrongKeyError: it was sealed for another card.
        SetMismatchError, VerificationError: it is of another set than the record, damaged, or not the secret that the
            commitment names.
    """
    if record is not None and sealed.set != record.set:
        raise SetMismatchError(f"it is of set {sealed.set.hex()}, the record of set {record.set.hex()}")
    if record is not None and (sealed.secret_commitment, sealed.encrypted_file) != (
        record.secret_commitment,
        record.encrypted_file,
    ):
        raise VerificationError("it names another secret than the record", hint="it is forged: ask who sent it")
    with opener(sealed) as payload:
        if len(payload) < MIN_ROW or not is_committed(sealed.set, payload, sealed.secret_commitment):
            raise VerificationError(
                "what was sealed is not the secret that its commitment names", hint="it is forged: ask who sent it"
            )
        return open_payload(payload)


def to_command(secret: Secret, command: Sequence[str], *, output: int | None = None) -> None:
    """Run a command without a shell and give it the secret on its standard input.

    Args:
        secret: written whole, then the input ends. Nothing is added, no line end either.
        command: the program and its arguments, public.
        output: descriptor that the command's output goes to; this process's own standard output by default.

    Raises:
        StorageError: the command cannot be started.
        CommandFailedError: it ended with another code than 0, or by a signal.
    """
    with fed(command, output=output) as write, secret.view() as view:
        write(view)


@contextlib.contextmanager
def fed(command: Sequence[str], *, output: int | None = None) -> Iterator[Write]:
    """Run a command without a shell; its standard input ends at the end of ``with``, and then it is waited for.

    When anything is raised before that, the command is killed. Only where it stops reading by itself, the ``with`` is
    left early and quietly: the command's exit code says whether it had enough.

    Args:
        command: the program and its arguments, public.
        output: descriptor that the command's output goes to; this process's own standard output by default.

    Yields:
        A function that gives the command what comes next.

    Raises:
        StorageError: the command cannot be started.
        CommandFailedError: it ended with another code than 0, or by a signal.
    """
    name = command[0]
    try:
        process = subprocess.Popen(command, stdin=subprocess.PIPE, stdout=output, bufsize=0)  # noqa: S603 - the operator's words
    except OSError as error:
        reason = error.strerror or "it cannot be started"
    except ValueError:
        reason = "the system cannot pass on its words"
    else:
        reason = ""
    if reason:
        raise StorageError(
            f"the command was not started: {reason}", where=name, hint="check its name and that it may run"
        )
    with process, _killed_unless_done(process):
        pipe = process.stdin
        if pipe is not None:
            # A command may have read enough and closed its end.
            with contextlib.suppress(BrokenPipeError), pipe, _killed_unless_done(process):
                yield functools.partial(write_all, pipe.fileno())
        status = process.wait()
    if status:
        how = f"ended with code {status}" if status > 0 else f"was ended by signal {-status}"
        raise CommandFailedError(
            f"the command was given the secret and {how}", status=status, where=name, hint="see what it said above"
        )


@contextlib.contextmanager
def _killed_unless_done(process: subprocess.Popen[bytes]) -> Iterator[None]:
    """Kill the command when anything stops us, before its input ends: it must not take a part for the whole."""
    try:
        yield
    except BrokenPipeError:
        raise  # The command itself has read enough.
    except BaseException:
        process.kill()
        raise
