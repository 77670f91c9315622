"""``shares split``."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import click

from shares.cli.deliveries import delivery_folders
from shares.cli.keys import suite_option
from shares.cli.output import filled, json_option, print_result, progress, prose, warn
from shares.cli.passphrases import GivenPassphrases, passphrase_options
from shares.cli.signals import held_signals
from shares.cli.wanted import from_options, from_policy
from shares.custody.entries import Entering
from shares.custody.handover import PRACTICE_SUFFIX, HandedOver, check_targets, hand_over, other_shares
from shares.custody.large import ENCRYPTED_NAME, sourced
from shares.custody.opening import Opening
from shares.custody.packing import Packing
from shares.custody.parties import load_key
from shares.custody.split import Dealt, practice_for, split
from shares.documents.party import PartyCard
from shares.documents.record import Role
from shares.documents.wrapping import Suite
from shares.errors import ParameterError
from shares.sharing.rule import Rule

SEALED_NOTE = (
    "What is wrapped for a card was compared byte by byte, and only its custodian can open it: have each of them do so."
)
KEEP_ENCRYPTED = "No shares recover the secret without this file: keep copies, apart from the shares."
MEBIBYTES = "MiB"
FOR_DUAL_CONTROL = 2
PRACTICE_NOTE = "Practice shares, worthless and bare, for rehearsals in the open: {files}"
SHARED_CAUTION = "one passphrase wraps the shares of several custodians: whoever learns it opens them all."
PLAIN_CAUTION = "the shares are written bare: all of them in one folder are the secret. Part them, and keep no copy."
ONE_CAUTION = "there is no secrecy under this rule: a single share can be the whole secret."

OTHERS_CAUTION = (
    "other shares lay there before: {names}. They are of another set, or were left by a run that was stopped; "
    "then no record names them: destroy them."
)


@click.command()
@click.argument("file", metavar="FILE|-", callback=filled)
@click.option(
    "--policy", metavar="P", callback=filled, help="Policy (TOML) that says label, custodians, rule, field and cards."
)
@click.option("--need", type=int, metavar="K", help="How many shares recover the secret.")
@click.option("--custodian", "custodians", multiple=True, metavar="NAME", help="Who keeps a share; once for each.")
@click.option("--label", metavar="TEXT", help="What the secret is, for people. It is public.")
@click.option(
    "--set",
    "set_folder",
    required=True,
    metavar="DIR",
    callback=filled,
    help="New folder for the public record and what belongs to it.",
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
@click.option(
    "--card",
    "cards",
    multiple=True,
    metavar="[NAME=]CARD",
    callback=filled,
    help="Wrap a custodian's share for this party card; once for each.",
)
@click.option("--plain", is_flag=True, help="Write bare shares, unencrypted. All of them together are the secret.")
@click.option(
    "--acknowledged",
    multiple=True,
    metavar="FILE",
    callback=filled,
    help="With --policy: a custodian's acknowledgement of the duties; once for each.",
)
@click.option("--dealer", metavar="KEY", callback=filled, help="Party key that signs the record as its dealer.")
@click.option(
    "--witness", "witnesses", multiple=True, metavar="KEY", callback=filled, help="Party key that signs as a witness."
)
@click.option(
    "--encrypt", is_flag=True, help="Encrypt the secret to a file and split its key. Done in any case above 64 KiB."
)
@click.option(
    "--polynomial",
    metavar="P",
    callback=filled,
    help="Irreducible polynomial of degree 8 for the field.  [default: x^8 + x^4 + x^3 + x + 1]",
)
@suite_option
@passphrase_options
@json_option
def command(
    file: str,
    policy: str | None,
    need: int | None,
    custodians: tuple[str, ...],
    label: str | None,
    set_folder: str,
    deliveries: tuple[str, ...],
    cards: tuple[str, ...],
    plain: bool,
    acknowledged: tuple[str, ...],
    dealer: str | None,
    witnesses: tuple[str, ...],
    encrypt: bool,
    polynomial: str | None,
    suite: Suite,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Split the secret in FILE (or standard input, -) so that any K of the custodians, or a policy's rule, recover it.

    Each share is wrapped for the custodian's party card where one is given, else under a passphrase of their own.
    Every share is written, read back and verified, and the secret is recovered from quorums of what was written;
    only then is the record written. A stopped run leaves no record. A secret above 64 KiB is encrypted to
    secret.encrypted beside the record, and its key is split: that file is needed to recover, so keep copies.

    \b
    Examples:
      shares split key.pem --need 2 --label "Tide archive root" \\
        --custodian north-pier --custodian south-pier --custodian light-house \\
        --card north-pier.card.json --card south-pier.card.json --passphrase-file light-house.passphrase \\
        --set tide-archive --deliver /dev/shm/handover
      shares split key.pem --policy policy.toml --set by-policy --deliver /media/stick
    """
    if policy is None:
        wanted = from_options(need, custodians, label, polynomial, cards)
        if acknowledged:
            raise ParameterError("--acknowledged goes with --policy", hint="see --help")
    else:
        if need is not None or custodians or label is not None or polynomial is not None:
            raise ParameterError(
                "the policy says what --need, --custodian, --label and --polynomial say", hint="give it or them"
            )
        wanted = from_policy(policy, cards, acknowledged)
    if plain and cards:
        raise ParameterError("--plain writes bare shares, and --card wraps them", hint="give one of the two")
    target, names = Path(set_folder), wanted.custodians
    folders = delivery_folders(names, deliveries)
    check_targets(target, folders, [*wanted.beside, ENCRYPTED_NAME])
    cautions = [*wanted.cautions, *_cautions(wanted.rule, other_shares(folders))]
    signers: list[tuple[Role, str]] = [("dealer", dealer)] if dealer is not None else []
    signers += [("witness", witness) for witness in witnesses]
    with GivenPassphrases(passphrase_files, descriptors) as passphrases, Opening(passphrases) as at_hand:
        loaded = [(role, load_key(path)) for role, path in signers]
        if wanted.dual_control and len({key.card.fingerprint for _, key in loaded}) < FOR_DUAL_CONTROL:
            raise ParameterError("the policy asks for dual control", hint="give --dealer KEY and --witness KEY")
        passphrases.only_for(list(dict.fromkeys([*names, *(key.card.name for _, key in loaded)])))
        signing = [(role, at_hand.party(key)) for role, key in loaded]
        packings = _packings(names, wanted.cards, suite, passphrases, plain=plain)
        if plain:
            cautions.insert(0, PLAIN_CAUTION)
        elif passphrases.is_shared():
            cautions.append(SHARED_CAUTION)
        with sourced(file, target, encrypt=encrypt, progress=progress("Encrypting", MEBIBYTES)) as source:
            dealt = split(
                source.secret,
                wanted.rule,
                label=wanted.label,
                field=wanted.field,
                pad=wanted.pad,
                set_id=source.set_id,
                encrypted_file=source.encrypted_file,
                policy=wanted.policy,
            )
            practice = practice_for(dealt.record) if wanted.practice else None
            for role, key in signing:
                dealt = dealt.signed(key, role)
                practice = practice.signed(key, role) if practice else None
            with held_signals() as stop_here:
                try:
                    shown = progress("Trial recovery", "quorums", stop_here)
                    done = hand_over(
                        dealt,
                        target,
                        folders,
                        packings=packings,
                        companions=wanted.beside,
                        practice=practice,
                        entering=Entering([key for _, key in signing], wanted.cards),
                        progress=shown,
                    )
                finally:
                    dealt.close()
                encrypted = str(target / ENCRYPTED_NAME) if source.encrypted_file is not None else None
                if not as_json:
                    for caution in cautions:
                        warn(caution)
                members = {**_members(dealt, done, packings, cautions), "encrypted_file": encrypted}
                members["acknowledged"] = wanted.acknowledged
                print_result(members, _lines(dealt, done, packings, encrypted, wanted.acknowledged), as_json=as_json)


def _packings(
    custodians: tuple[str, ...],
    cards: Mapping[str, PartyCard],
    suite: Suite,
    passphrases: GivenPassphrases,
    *,
    plain: bool,
) -> dict[str, Packing]:
    """Return how each custodian's share is packed; whoever has no card gets a passphrase."""
    if plain:
        return dict.fromkeys(custodians, Packing.bare())
    return {
        name: Packing.for_card(cards[name], suite) if name in cards else Packing.by_passphrase(passphrases.new(name))
        for name in custodians
    }


def _cautions(rule: Rule, strangers: list[Path]) -> list[str]:
    cautions = []
    if any(all(need == 1 for need, _ in path) for paths in rule.paths().values() for path in paths):
        cautions.append(ONE_CAUTION)
    if strangers:
        cautions.append(OTHERS_CAUTION.format(names=", ".join(map(str, strangers))))
    return cautions


def _members(dealt: Dealt, done: HandedOver, packings: dict[str, Packing], cautions: list[str]) -> dict[str, object]:
    return {
        "done": True,
        "set": dealt.record.set.hex(),
        "label": dealt.record.label,
        "rule": dealt.record.rule.to_rule().words(),
        "record": str(done.record),
        "beside": {name: str(path) for name, path in done.companions.items()},
        "fingerprint": dealt.record.fingerprint,
        "signers": [f"{one.card.name} as {one.role}" for one in dealt.record.signatures],
        "shares": {name: str(path) for name, path in done.shares.items()},
        "practice": {name: str(path) for name, path in done.practice.items()},
        "packed": {name: packing.words for name, packing in packings.items()},
        "quorums_tried": done.trials,
        "quorums": done.quorums,
        "cautions": cautions,
    }


def _lines(
    dealt: Dealt, done: HandedOver, packings: dict[str, Packing], encrypted: str | None, acknowledged: list[str]
) -> list[str]:
    tried = f"all {done.quorums:,}" if done.trials == done.quorums else f"{done.trials:,} of {done.quorums:,}"
    width = max(len(name) for name in done.shares)
    length = max(len(str(path)) for path in done.shares.values())
    signers = ", ".join(f"{one.card.name} as {one.role}" for one in dealt.record.signatures)
    sealed = any(packing.is_sealed for packing in packings.values())
    return [
        *prose(f"Split: {dealt.record.label}. To recover: {dealt.record.rule.to_rule().words()}."),
        *(f"  {name:<{width}}  {path!s:<{length}}  {packings[name].words}" for name, path in done.shares.items()),
        f"Record (public): {done.record}, {f'signed by {signers}' if signers else 'unsigned'}",
        *(f"Beside it (confidential): {path}" for path in done.companions.values()),
        *([f"Encrypted secret: {encrypted}. {KEEP_ENCRYPTED}"] if encrypted else []),
        *([PRACTICE_NOTE.format(files=_practice(done))] if done.practice else []),
        *(f"Duties accepted by {line}" for line in acknowledged),
        f"Fingerprint, to read aloud and write down: {dealt.record.fingerprint}",
        f"Checked: every share read back and verified alone; the secret recovered from {tried} quorums.",
        *(prose(SEALED_NOTE) if sealed else ()),
        "Next: bring each share to its custodian and have it verified there with the record;",
        "then destroy the copies in the delivery folders, and the secret where it is no longer needed.",
    ]


def _practice(done: HandedOver) -> str:
    """Say where the practice shares are: in one pattern for each folder."""
    folders = dict.fromkeys(path.parent for path in done.practice.values())
    return ", ".join(str(folder / f"*{PRACTICE_SUFFIX}") for folder in folders)
