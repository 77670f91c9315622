"""Who has accepted the duties: before a share is handed over, where the policy asks for it.

Source: trade practice: custodians sign before they receive (common practice, no source); FORMAT.md, sec. 14.
May import: shares.errors, shares.storage, shares.documents.
Secret: nothing. Public: who has acknowledged, and how.
Does not: decide who is a custodian, or look at what is on a scan.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Mapping, Sequence

from shares.documents.acknowledgement import DUTIES, Acknowledgement
from shares.documents.party import PartyCard
from shares.errors import VerificationError
from shares.storage import StrPath, read_file

MAX_SCAN = 64 << 20
"""The largest scan of a form, in bytes: 64 MiB."""


def digest_of_form(path: StrPath) -> bytes:
    """Return the SHA-256 of a scanned form, 32 bytes.

    Raises:
        StorageError: it cannot be read, or is larger than 64 MiB.
    """
    return hashlib.sha256(read_file(path, limit=MAX_SCAN)).digest()


def check_acknowledged(
    custodians: Sequence[str],
    label: str,
    given: Iterable[Acknowledgement],
    cards: Mapping[str, PartyCard],
) -> dict[str, Acknowledgement]:
    """Return each custodian's acknowledgement, or refuse: no share is delivered to whoever has none.

    Args:
        custodians: who is to receive a share.
        label: what the set protects; each acknowledgement must say the same.
        given: the acknowledgements.
        cards: the party cards of custodians, as far as known: who has one signs with its key, or on paper.

    Raises:
        VerificationError: one is missing, of another set, of other duties, or signed by another party; says whose.
    """
    found: dict[str, Acknowledgement] = {}
    for one in given:
        problem = _problem(one, custodians, label, cards)
        if problem:
            raise VerificationError(f"the acknowledgement of {one.custodian} does not count: {problem}")
        found[one.custodian] = one
    missing = [name for name in custodians if name not in found]
    if missing:
        raise VerificationError(
            f"no acknowledgement of the duties is given for {', '.join(missing)}",
            hint="the policy asks for one before delivery: `shares acknowledge` makes it",
        )
    return found


def _problem(one: Acknowledgement, custodians: Sequence[str], label: str, cards: Mapping[str, PartyCard]) -> str | None:
    if one.custodian not in custodians:
        return "no custodian of this name is to receive a share"
    if one.label != label:
        return "it is about another set: its label is not this one's"
    if one.duties != DUTIES:
        return "it lists other duties than those of this version"
    card = cards.get(one.custodian)
    if one.card is not None and card is not None and one.card.fingerprint != card.fingerprint:
        return f"it is signed by the card {one.card.fingerprint}, and the custodian's is {card.fingerprint}"
    if one.card is not None and card is None and one.card.name != one.custodian:
        return f"it is signed by {one.card.name}"
    return None
