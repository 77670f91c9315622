"""``shares split``."""

from __future__ import annotations

from pathlib import Path

import click

from shares.cli.output import filled, json_option, print_result, progress, warn
from shares.cli.signals import held_signals
from shares.custody.handover import HandedOver, check_targets, hand_over, other_shares
from shares.custody.payload import MAX_SECRET
from shares.custody.split import Dealt, flat_rule, split
from shares.errors import ParameterError
from shares.field.gf256 import DEFAULT_MODULUS, Field
from shares.field.polynomial import Polynomial
from shares.storage import read_secret

PLAIN_CAUTION = "the shares are written bare: all of them in one folder are the secret. Part them, and keep no copy."
ONE_CAUTION = "with --need 1 there is no secrecy: every single share is the whole secret."

OTHERS_CAUTION = (
    "other shares lay there before: {names}. They are of another set, or were left by a run that was stopped; "
    "then no record names them: destroy them."
)


@click.command()
@click.argument("file", metavar="FILE|-", callback=filled)
@click.option("--need", type=int, required=True, metavar="K", help="How many shares recover the secret.")
@click.option(
    "--custodian", "custodians", multiple=True, required=True, metavar="NAME", help="Who keeps a share; once for each."
)
@click.option("--label", required=True, metavar="TEXT", help="What the secret is, for people. It is public.")
@click.option(
    "--set",
    "set_folder",
    required=True,
    metavar="DIR",
    callback=filled,
    help="New folder for the public record.",
)
@click.option(
    "--deliver",
    "deliveries",
    multiple=True,
    required=True,
    metavar="DIR|NAME=DIR",
    callback=filled,
    help="Existing folder for the shares, or for one custodian's. Best on a RAM disk or on the custodian's own medium.",
)
@click.option("--plain", is_flag=True, help="Write bare shares. Required: this version cannot wrap shares yet.")
@click.option(
    "--polynomial",
    metavar="P",
    callback=filled,
    help="Irreducible polynomial of degree 8 for the field.  [default: x^8 + x^4 + x^3 + x + 1]",
)
@json_option
def command(
    file: str,
    need: int,
    custodians: tuple[str, ...],
    label: str,
    set_folder: str,
    deliveries: tuple[str, ...],
    plain: bool,
    polynomial: str | None,
    as_json: bool,
) -> None:
    """Split the secret in FILE (or standard input, -) so that any K of the custodians recover it.

    A secret is 1 byte to 64 KiB. Every share is written, read back and verified, and the secret is recovered from
    quorums of what was written; only then is the record written. A stopped run leaves no record.

    \b
    Example:
      shares split key.pem --need 2 --label "Tide archive root" \\
        --custodian north-pier --custodian south-pier --custodian light-house \\
        --set tide-archive --deliver /dev/shm/handover --plain
    """
    if not plain:
        raise ParameterError(
            "this version writes bare, unencrypted shares only, so --plain is required",
            hint=f"with --plain {PLAIN_CAUTION}",
        )
    rule = flat_rule(need, custodians)
    field = Field(Polynomial.parse(polynomial).number if polynomial else DEFAULT_MODULUS)
    folders = _delivery_folders(custodians, deliveries)
    check_targets(Path(set_folder), folders)
    strangers = other_shares(folders)
    with read_secret(file, limit=MAX_SECRET) as secret:
        dealt = split(secret, rule, label=label, field=field)
    with held_signals() as stop_here:
        try:
            done = hand_over(dealt, Path(set_folder), folders, progress=progress("Trial recovery", stop_here))
        finally:
            dealt.close()
        cautions = [PLAIN_CAUTION] + ([ONE_CAUTION] if need == 1 else [])
        if strangers:
            cautions.append(OTHERS_CAUTION.format(names=", ".join(map(str, strangers))))
        if not as_json:
            for caution in cautions:
                warn(caution)
        print_result(_members(dealt, done, cautions), _lines(dealt, done), as_json=as_json)


def _delivery_folders(custodians: tuple[str, ...], deliveries: tuple[str, ...]) -> dict[str, Path]:
    """Return each custodian's folder: NAME=DIR where it is given, else the one DIR for all."""
    own: dict[str, Path] = {}
    common: list[Path] = []
    for delivery in deliveries:
        # A name may hold a sign of equality itself.
        name = max((name for name in custodians if delivery.startswith(f"{name}=")), key=len, default=None)
        if name is None:
            common.append(_common_folder(delivery))
        elif name in own:
            raise ParameterError(f"two delivery folders are given for {name}", where="--deliver")
        elif delivery == f"{name}=":
            raise ParameterError(f"the delivery folder of {name} is empty", where="--deliver")
        else:
            own[name] = Path(delivery.removeprefix(f"{name}="))
    if len(common) > 1:
        raise ParameterError(
            "more than one folder is given for all custodians",
            where="--deliver",
            hint="write NAME=DIR, with a custodian's name",
        )
    without = [name for name in custodians if name not in own]
    if without and not common:
        raise ParameterError(
            f"no delivery folder is given for {', '.join(without)}",
            where="--deliver",
            hint="add NAME=DIR for each of them, or one DIR for all who have none of their own",
        )
    return own | {name: folder for folder in common for name in without}


def _common_folder(delivery: str) -> Path:
    folder = Path(delivery)
    if "=" in delivery and not folder.is_dir():
        raise ParameterError(
            "it begins with no custodian's name, and is no folder",
            where=f"--deliver {delivery}",
            hint="write NAME=DIR with a name given by --custodian",
        )
    return folder


def _members(dealt: Dealt, done: HandedOver, cautions: list[str]) -> dict[str, object]:
    return {
        "done": True,
        "set": dealt.record.set.hex(),
        "label": dealt.record.label,
        "rule": dealt.record.rule.to_rule().words(),
        "record": str(done.record),
        "fingerprint": dealt.record.fingerprint,
        "shares": {name: str(path) for name, path in done.shares.items()},
        "quorums_tried": done.trials,
        "quorums": done.quorums,
        "cautions": cautions,
    }


def _lines(dealt: Dealt, done: HandedOver) -> list[str]:
    tried = f"all {done.quorums:,}" if done.trials == done.quorums else f"{done.trials:,} of {done.quorums:,}"
    width = max(len(name) for name in done.shares)
    return [
        f"Split: {dealt.record.label}. To recover: {dealt.record.rule.to_rule().words()}.",
        *(f"  {name:<{width}}  {path}" for name, path in done.shares.items()),
        f"Record (public): {done.record}",
        f"Fingerprint, to read aloud and write down: {dealt.record.fingerprint}",
        f"Checked: every share read back and verified alone; the secret recovered from {tried} quorums.",
        "Next: bring each share to its custodian and have it verified there with the record;",
        "then destroy the copies in the delivery folders, and the secret where it is no longer needed.",
    ]
