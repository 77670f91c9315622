"""``shares key deal``: a key dealt by one machine.

Source: none.
May import: shares.errors, shares.storage, shares.custody, shares.documents, shares.keys, shares.group, shares.cli.
Secret: the key, while it is dealt; passphrases. Public: what is printed.
Does not: keep the key.
"""

from __future__ import annotations

from pathlib import Path

import click

from shares.cli.deliveries import delivery_folders
from shares.cli.keys import signers, suite_option
from shares.cli.output import filled, json_option, print_result, prose, warn
from shares.cli.passphrases import GivenPassphrases, passphrase_options
from shares.cli.signals import held_signals
from shares.custody.opening import Opening
from shares.custody.parties import load_card
from shares.documents.wrapping import Suite
from shares.group.edwards25519 import Point, Scalar
from shares.history.files import RECORD_NAME
from shares.keys.deal import MAX_PEM, check_custodians, deal, fresh_key, imported_key
from shares.keys.handover import check_places, hand_over
from shares.storage import read_secret

IMPORTED = "import"
"""The name under which the passphrase of an imported key is asked for."""
HELD = (
    "this machine has held the whole key, and whoever read its memory has it. Wipe it; for a key that was in no one "
    "place ever, let the custodians generate it: `shares key join`."
)
OLD_KEY = (
    "{file} and every copy of it still are the whole key: until the last of them is destroyed, before a witness, no "
    "quorum protects it. The key shares do not give that file back: what they share is the number within it."
)

custodian_option = click.option(
    "--custodian",
    "card_files",
    multiple=True,
    required=True,
    metavar="CARD",
    callback=filled,
    help="Party card of a custodian whose fingerprint you have compared; once for each.",
)
need_option = click.option("--need", type=int, required=True, metavar="K", help="How many custodians use the key.")
label_option = click.option(
    "--label", required=True, metavar="TEXT", callback=filled, help="What the key is, for people. It is public."
)


@click.command("deal", short_help="Deal a new key, or one that is in use, to its custodians.")
@need_option
@custodian_option
@label_option
@click.option(
    "--key-folder", required=True, metavar="DIR", callback=filled, help="New folder for the record and the journal."
)
@click.option(
    "--deliver",
    "deliveries",
    multiple=True,
    required=True,
    metavar="DIR|NAME=DIR",
    callback=filled,
    help="Existing folder in which each custodian's folder is made, or one custodian's. Best their own medium.",
)
@click.option(
    "--import",
    "import_file",
    metavar="PEM",
    callback=filled,
    help="Deal this Ed25519 key: its public half stays.",
)
@click.option("--sign", "signer_file", required=True, metavar="KEY", callback=filled, help="The dealer's party key.")
@suite_option
@passphrase_options
@json_option
def deal_command(
    need: int,
    card_files: tuple[str, ...],
    label: str,
    key_folder: str,
    deliveries: tuple[str, ...],
    import_file: str | None,
    signer_file: str,
    suite: Suite,
    passphrase_files: tuple[str, ...],
    descriptors: tuple[str, ...],
    as_json: bool,
) -> None:
    """Deal a key so that any K of the custodians use it, each with a key share wrapped for their party card.

    In each delivery folder a folder of the custodian's name is made, with key share, record and journal; the dealer's
    record is written last. With --import an Ed25519 private key in PEM (PKCS #8) is dealt, and what verified before
    verifies on; the passphrase of an encrypted one is given as --passphrase-file import=FILE.

    \b
    Example:
      shares key deal --need 2 --custodian north-pier.card.json --custodian south-pier.card.json \\
        --custodian light-house.card.json --label "Harbour release key" --key-folder release-key \\
        --deliver /media/stick --sign harbour-office.key.json --passphrase-file harbour-office.passphrase
    """
    cards = [load_card(path) for path in card_files]
    check_custodians(need, cards, label)
    target = Path(key_folder)
    folders = delivery_folders(tuple(card.name for card in cards), deliveries)
    check_places(target, folders)
    with GivenPassphrases(passphrase_files, descriptors) as passphrases, Opening(passphrases) as at_hand:
        dealer = signers((signer_file,), at_hand)[0]
        passphrases.only_for([dealer.card.name, IMPORTED])
        key, public_key = fresh_key() if import_file is None else _imported(import_file, passphrases)
        dealt = deal(key, need, cards, label=label, dealer=dealer, suite=suite)
        del key
        with held_signals():
            places = hand_over(dealt, dealer, target, folders)
            cautions = [HELD] if import_file is None else [OLD_KEY.format(file=import_file), HELD]
            if not as_json:
                for caution in cautions:
                    warn(caution)
            record = dealt.record
            members = {
                "done": True,
                "key": record.key.hex(),
                "label": record.label,
                "need": record.need,
                "public_key": public_key.encode().hex(),
                "record": str(target / RECORD_NAME),
                "fingerprint": record.fingerprint,
                "custodians": {name: str(place) for name, place in places.items()},
                "cautions": cautions,
            }
            width = max(map(len, places))
            lines = [
                f"Dealt: {record.label}. Any {record.need} of {len(cards)} custodians use it.",
                *(f"  {name:<{width}}  {place}" for name, place in places.items()),
                f"Record (public): {target / RECORD_NAME}, signed by {dealer.card.name}",
                f"Public key (Ed25519): {public_key.encode().hex()}",
                f"Fingerprint of the record, to read aloud: {record.fingerprint}",
                "Checked: each key share against the record's commitments, and all files read back.",
                *prose(
                    "Next: bring each folder to its custodian, who checks it there with `shares key verify FOLDER "
                    "--key KEY`; then destroy the copies in the delivery folders."
                ),
            ]
            print_result(members, lines, as_json=as_json)


def _imported(path: str, passphrases: GivenPassphrases) -> tuple[Scalar, Point]:
    with read_secret(path, limit=MAX_PEM) as pem:
        return imported_key(pem, lambda attempt: passphrases.opening(IMPORTED, attempt), where=path)
