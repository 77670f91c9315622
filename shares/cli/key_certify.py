"""``shares key root``, ``certify`` and ``revoke``: certificates and revocation lists that custodians are asked to sign.

Source: RFC 5280 (certificates and lists), RFC 2986 (requests).
May import: shares.clock, shares.errors, shares.storage, shares.documents, shares.keys, shares.cli.
Secret: nothing; the author's party key is passed through. Public: what is signed.
Does not: say what may be certified; ``keys.certificates`` and ``keys.revocation`` do, and each signer looks again.
"""

from __future__ import annotations

from datetime import timedelta
from typing import get_args

import click

from shares import clock
from shares.cli.intervals import interval, later
from shares.cli.key_ask import Asked, ask_to_sign, asking_options, batch_option, signer_option
from shares.cli.output import filled
from shares.documents.base import MAX_FILE
from shares.errors import ParameterError
from shares.keys import certificates, revocation
from shares.keys.certificates import Purpose
from shares.keys.content import described
from shares.keys.folder import KeyFolder
from shares.keys.forms import Signable
from shares.keys.revocation import REASONS, Revoked
from shares.storage import read_file

FOR_GOOD = "A certificate that was signed cannot be taken back; it can only be revoked, by whoever then looks."

issuer_option = click.option(
    "--issuer", "issuer_file", required=True, metavar="PEM", callback=filled, help="The certificate of this key."
)
path_length_help = "How many authorities may stand below it, one under the other."


@click.command("root", short_help="Ask custodians to sign a root certificate of the key.")
@click.argument("folder", metavar="KEYDIR", callback=filled)
@click.argument("subject", metavar="SUBJECT", callback=filled)
@click.option(
    "--valid", default="10y", show_default=True, metavar="INTERVAL", callback=interval, help="For how long, from now."
)
@click.option("--path-length", type=int, metavar="N", help=f"{path_length_help}  [default: any number]")
@asking_options(signer_option, batch_option)
def root_command(folder: str, subject: str, valid: timedelta, path_length: int | None, asked: Asked) -> None:
    """Ask custodians to sign a root certificate: the key's own, for a certificate authority that a quorum runs.

    SUBJECT is its name, written like "CN=Harbour Trust Root,O=Harbour Trust". `shares key finish` writes it as PEM.

    \b
    Example:
      shares key root release-key "CN=Harbour Trust Root,O=Harbour Trust" --task to-sign \\
        --signer north-pier --signer light-house --sign harbour-office.key.json \\
        --passphrase-file harbour-office.passphrase
    """
    key, now = KeyFolder(folder), clock.now()
    body = certificates.root(
        key.record.public_key.encode(),
        subject=subject,
        not_before=now,
        not_after=later(now, valid),
        path_length=path_length,
    )
    ask_to_sign(key, Signable(body, "certificate"), asked, words=_words(key, body))


@click.command("certify", short_help="Ask custodians to sign a certificate for a request.")
@click.argument("folder", metavar="KEYDIR", callback=filled)
@click.argument("request_file", metavar="REQUEST", callback=filled)
@issuer_option
@click.option(
    "--for",
    "purpose",
    type=click.Choice(get_args(Purpose)),
    required=True,
    help="What it is for: another authority below, a server, or a client.",
)
@click.option(
    "--valid", default="1y", show_default=True, metavar="INTERVAL", callback=interval, help="For how long, from now."
)
@click.option("--path-length", type=int, metavar="N", help=f"Of an authority: {path_length_help.lower()}  [default: 0]")
@asking_options(signer_option, batch_option)
def certify_command(
    folder: str,
    request_file: str,
    issuer_file: str,
    purpose: Purpose,
    valid: timedelta,
    path_length: int | None,
    asked: Asked,
) -> None:
    """Ask custodians to sign a certificate for whoever made REQUEST (PKCS #10), below the key's own certificate.

    Of the request its key and its subject are taken, and for a server or client its names; what else it asks for is
    left out, and said.

    \b
    Example:
      shares key certify release-key request.pem --issuer root.pem --for server --task to-sign \\
        --signer north-pier --signer light-house --sign harbour-office.key.json \\
        --passphrase-file harbour-office.passphrase
    """
    if path_length is not None and purpose != "authority":
        raise ParameterError("only an authority has others below it", where="--path-length")
    key, now = KeyFolder(folder), clock.now()
    request, issuer = read_file(request_file, limit=MAX_FILE), read_file(issuer_file, limit=MAX_FILE)
    body = certificates.from_request(
        key.record.public_key.encode(),
        request,
        issuer=issuer,
        purpose=purpose,
        not_before=now,
        not_after=later(now, valid),
        path_length=path_length or 0,
    )
    dropped = certificates.left_out(request, purpose)
    left = [f"Left out of what the request asks for: {', '.join(dropped)}."] if dropped else []
    ask_to_sign(key, Signable(body, "certificate", issuer=issuer), asked, words=[*_words(key, body), *left])


@click.command("revoke", short_help="Ask custodians to sign a revocation list.")
@click.argument("folder", metavar="KEYDIR", callback=filled)
@click.argument("certificate_files", metavar="[CERTIFICATE...]", nargs=-1, callback=filled)
@issuer_option
@click.option("--reason", type=click.Choice(REASONS), help="Why they are revoked.")
@click.option("--earlier", "earlier_file", metavar="PEM", callback=filled, help="The list before: it is continued.")
@click.option(
    "--next",
    "until",
    default="90d",
    show_default=True,
    metavar="INTERVAL",
    callback=interval,
    help="When the next list is there at the latest.",
)
@asking_options(signer_option, batch_option)
def revoke_command(
    folder: str,
    certificate_files: tuple[str, ...],
    issuer_file: str,
    reason: str | None,
    earlier_file: str | None,
    until: timedelta,
    asked: Asked,
) -> None:
    """Ask custodians to sign a revocation list with these CERTIFICATEs, and all that the list before revokes.

    Without a CERTIFICATE it says that nothing more is revoked. Give the list before with --earlier whenever there is
    one: what is not on the new list is no longer revoked.

    \b
    Example:
      shares key revoke release-key server.pem --issuer root.pem --reason keyCompromise --task to-sign \\
        --signer north-pier --signer light-house --sign harbour-office.key.json \\
        --passphrase-file harbour-office.passphrase
    """
    key, now = KeyFolder(folder), clock.now()
    public_key, issuer = key.record.public_key.encode(), read_file(issuer_file, limit=MAX_FILE)
    earlier = None if earlier_file is None else read_file(earlier_file, limit=MAX_FILE)
    serials = [
        revocation.serial_of(read_file(path, limit=MAX_FILE), issuer=issuer, public_key=public_key)
        for path in certificate_files
    ]
    body = revocation.revocation_list(
        public_key,
        [Revoked(serial, now, reason) for serial in serials],
        issuer=issuer,
        this_update=now,
        next_update=later(now, until),
        earlier=earlier,
    )
    wanted = Signable(body, "revocation-list", issuer=issuer, earlier=earlier)
    ask_to_sign(key, wanted, asked, words=_words(key, body)[:-1])


def _words(folder: KeyFolder, body: bytes) -> list[str]:
    """Say what the body is, found in its bytes, as each signer will be told."""
    told = described(body, folder.record.public_key.encode())
    return [f"It is {told.kind}.", *(f"  {line}" for line in told.lines), FOR_GOOD]
