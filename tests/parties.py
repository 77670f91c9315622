"""Parties of the demo harbour for tests, made once, with passphrases that everyone may know.

Source: none. Stretching is cheap here wherever its cost is not the point.
"""

from __future__ import annotations

import functools
import json
from typing import Any

from shares.documents.party import OpenPartyKey, PartyCard, PartyKey, new_party
from shares.documents.wrapping import Cost, Opener, open_by_passphrase
from shares.memory import Secret

QUICK = Cost(memory=8, passes=1, lanes=1)


def passphrase(name: str) -> Secret:
    """The passphrase of a party or custodian."""
    return Secret.of(f"the passphrase of {name}".encode())


@functools.cache
def party(name: str) -> PartyKey:
    """A party's key and card; the same whenever it is asked for."""
    return new_party(name, passphrase(name), cost=QUICK)


def card(name: str) -> PartyCard:
    """A party's card."""
    return party(name).card


@functools.cache
def namesake(name: str) -> PartyCard:
    """A card of the same name by another party."""
    return new_party(name, passphrase(name), cost=QUICK).card


def unlocked(name: str) -> OpenPartyKey:
    """A party's key, opened; whoever asked wipes it."""
    return party(name).open(passphrase(name))


def by(secret: Secret | str) -> Opener:
    """What opens by this passphrase, or by the one of this name."""
    known = passphrase(secret) if isinstance(secret, str) else secret
    return lambda wrapping, sealed, bound: open_by_passphrase(wrapping, sealed, bound, known)  # type: ignore[arg-type]


def edited(data: bytes, *path: Any, to: Any) -> dict[str, Any]:
    """The members of a document, one of them, however deep, changed."""
    members = json.loads(data)
    inner = members
    for step in path[:-1]:
        inner = inner[step]
    inner[path[-1]] = to
    return members


def file_of(members: dict[str, Any]) -> bytes:
    """The file of a document."""
    return json.dumps(members).encode()
