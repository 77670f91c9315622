"""Deal a threshold key from one machine that holds it: a fresh one, or an Ed25519 key that is in use already.

What is shared is the scalar within the key, not the seed that its file holds: a seed cannot be had again from key
shares, and the nonces of RFC 8032, which come from the other half of the seed's hash, give way to those of RFC 9591.
Ordinary verifiers see no difference, and the public key stays.

Source: A. Shamir, "How to share a secret", CACM 22(11), 1979; P. Feldman, FOCS 1987; RFC 9591, appendix C.1 (a trusted
dealer); RFC 8032, sec. 5.1.5; RFC 8410, sec. 7 (a private key in PKCS #8).
May import: shares.errors, shares.memory, shares.clock, shares.documents, shares.group, shares.sharing.verifiable.
Secret: the key, coefficients and key shares, as scalars; the file of an imported key, on its way through the library.
Public: record, commitments, cards.
Does not: write files (``handover`` does), or keep the key from the machine that deals it: ``joint`` does without one.
"""

from __future__ import annotations

import secrets
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import datetime

from cryptography.exceptions import UnsupportedAlgorithm
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.serialization import load_pem_private_key

from shares import clock
from shares.documents.key_event import MAX_HOLDERS
from shares.documents.key_record import Holder, KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.members import check_text
from shares.documents.party import OpenPartyKey, PartyCard
from shares.documents.wrapping import SUITES, Suite, card_sealer
from shares.errors import DocumentError, ParameterError, VerificationError, WrongKeyError
from shares.group.edwards25519 import BASE, Point, Scalar
from shares.group.seed import scalar_of_seed
from shares.memory import Secret
from shares.sharing.verifiable import check_feldman, evaluate, feldman, polynomial, recombine

MAX_PEM = 1 << 16
MIN_NEED = 2
KEY_ID = 16


@dataclass(frozen=True, slots=True)
class DealtKey:
    """A key that was dealt: its record, signed by the dealer, and each custodian's key share, wrapped."""

    record: KeyRecord
    shares: tuple[KeyShare, ...]


def fresh_key() -> tuple[Scalar, Point]:
    """Draw a key; return it and its public half."""
    scalar = Scalar.drawn()
    return scalar, scalar * BASE


def imported_key(
    pem: Secret, passphrases: Callable[[Callable[[Secret], Scalar]], Scalar], *, where: str | None = None
) -> tuple[Scalar, Point]:
    """Return the scalar of an Ed25519 private key in PEM, and its public half, which stays.

    Args:
        pem: the file (PKCS #8).
        passphrases: called only where the file is encrypted, with a function that tries one passphrase; returns what
            that returns.
        where: what to call the file in an error.

    Raises:
        WrongKeyError: no passphrase fits.
        DocumentError: it holds no Ed25519 private key.
    """
    scalar, problem = None, None
    try:
        scalar = _scalar_in(pem, None)
    except _EncryptedError:
        pass
    except DocumentError as error:
        problem = DocumentError(error.what, where=where, hint=error.hint)
    if problem:
        raise problem
    if scalar is None:
        scalar = passphrases(lambda passphrase: _scalar_in(pem, passphrase))
    return scalar, scalar * BASE


class _EncryptedError(Exception):
    """The file asks for a passphrase."""


def _scalar_in(pem: Secret, passphrase: Secret | None) -> Scalar:
    key = None
    problem: Exception | None = None
    with pem.view() as view:
        try:
            # The library takes copies of its own, as for party keys; they are listed in SECURITY.md.
            if passphrase is None:
                key = load_pem_private_key(view, None)
            else:
                with passphrase.view() as typed:
                    key = load_pem_private_key(view, bytes(typed))
        except TypeError:
            problem = _EncryptedError()
        except (ValueError, UnsupportedAlgorithm):
            problem = DocumentError("it is no private key in PEM") if passphrase is None else _wrong()
    if problem is not None:
        raise problem
    if not isinstance(key, Ed25519PrivateKey):
        raise DocumentError(
            "it is a private key of another kind than Ed25519",
            hint="only an Ed25519 key can go on as a threshold key: make a new key with the others",
        )
    scalar, public = scalar_of_seed(key.private_bytes_raw())
    if public.encode() != key.public_key().public_bytes_raw():
        raise DocumentError("the private key and its public half do not belong together")
    return scalar


def _wrong() -> WrongKeyError:
    return WrongKeyError("the passphrase does not open the private key", hint="try again: upper and lower case count")


def check_custodians(need: int, cards: Sequence[PartyCard], label: str) -> None:
    """Refuse what no key can be made for, before anything secret is touched.

    Args:
        need: k.
        cards: of the custodians.
        label: what the key is, for people.

    Raises:
        ParameterError: says which is out of range.
    """
    check_text(label)
    if not MIN_NEED <= len(cards) <= MAX_HOLDERS:
        raise ParameterError(f"a threshold key has {MIN_NEED} to {MAX_HOLDERS} custodians, and {len(cards)} are given")
    if not MIN_NEED <= need <= len(cards):
        choice = f"{MIN_NEED} to {len(cards)}" if len(cards) > MIN_NEED else f"just {MIN_NEED}"
        raise ParameterError(f"of {len(cards)} custodians {choice} can be needed, not {need}")
    if len({card.name.casefold() for card in cards}) != len(cards):
        raise ParameterError("two custodians have one name", hint="ask one of them for a card under another name")
    if len({card.ed25519 for card in cards}) != len(cards):
        raise ParameterError("two custodians have one party key", hint="each needs a key of their own")


def deal(
    secret: Scalar,
    need: int,
    cards: Sequence[PartyCard],
    *,
    label: str,
    dealer: OpenPartyKey,
    suite: Suite = SUITES[0],
    created: datetime | None = None,
) -> DealtKey:
    """Deal a key, so that any ``need`` of the custodians can use it, and check what was dealt.

    Args:
        secret: the key, not zero.
        need: k, 2 to as many as there are custodians.
        cards: of the custodians, 2 to 64; their order numbers them from 1.
        label: what the key is, for people; 1 to 500 characters, public.
        dealer: who signs the record.
        suite: how each key share is encrypted to its card.
        created: UTC to the second; now by default.

    Raises:
        ParameterError: need, cards or label are out of range.
        VerificationError: a card holds no usable keys; or what was dealt does not hold, so this machine is faulty.

    Source: RFC 9591, appendix C.1 and C.2.
    """
    check_custodians(need, cards, label)
    coefficients = polynomial(secret, need)
    holders = [Holder(name=card.name, index=x, card=card) for x, card in enumerate(cards, 1)]
    record = KeyRecord.of(
        key=secrets.token_bytes(KEY_ID),
        label=label,
        created=clock.now() if created is None else created,
        origin="dealt",
        custodians=holders,
        commitments=feldman(coefficients),
    )
    values = {one.index: evaluate(coefficients, one.index) for one in holders}
    _check(values, record)
    shares = tuple(
        KeyShare.wrap(values[one.index], record, one.name, card_sealer(one.card.recipient(), suite)) for one in holders
    )
    return DealtKey(record.signed([record.signature_by(dealer)]), shares)


def _check(values: dict[int, Scalar], record: KeyRecord) -> None:
    """Check every share against the commitments, and that the first and the last k of them give the public key."""
    for x, value in values.items():
        check_feldman(value, x, record.commitments, record.need)
    indices = list(values)
    for quorum in (indices[: record.need], indices[-record.need :]):
        if recombine({x: values[x] * BASE for x in quorum}) != record.public_key:
            raise VerificationError("key shares do not give the public key", hint="this machine is faulty")
