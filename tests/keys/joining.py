"""Joint generations for tests: parties of the harbour, with whom, and how some of them cheat."""

from __future__ import annotations

import functools

from curve import BASE, L, encode, multiply
from keys.rounds import DUE, START, Exchange
from parties import card, unlocked
from strategies import HARBOUR

from shares.documents.key_record import KeyRecord
from shares.documents.key_share import KeyShare
from shares.documents.task import Joining, Task, TaskParty
from shares.documents.task_message import Dealing
from shares.history.rounds import Said
from shares.keys.joint import JointCourse, JointPart

EXTRA = tuple(f"berth-{number}" for number in range(1, 58))


@functools.cache
def key(name):
    """An opened party key, kept for the whole run."""
    return unlocked(name)


@functools.cache
def task(need=3, count=5, **changes):
    """A task to generate a key together."""
    members = {
        "key": bytes(range(16)),
        "epoch": 1,
        "record": None,
        "label": "harbour release key",
        "work": Joining(what="join", need=need),
        "parties": tuple(TaskParty(name=name, card=card(name)) for name in (HARBOUR + EXTRA)[:count]),
        "remark": None,
        "nonce": bytes(32),
        "created": START,
        "due": DUE,
    }
    return Task.signed_by(key("harbour-office"), **(members | changes))


def joint(need=3, count=5, cheats=None):
    """Parties about to generate a key."""
    made = task(need, count)
    keys = {name: key(name) for name in made.names}
    parts = {name: JointPart(made, name, keys[name]) for name in made.names}
    return Exchange(made, JointCourse(made), parts, keys, cheats or {})


def dealing(exchange, me, contribution):
    """What a party says that deals this contribution."""
    names = exchange.task.names
    sealed = {name: contribution.dealt_to(names.index(name) + 1).encode() for name in names if name != me}
    return Said(Dealing(what="dealing", commitments=contribution.commitments()), contribution.encode(), sealed)


def born(exchange, name):
    """What a party has at the end: the key's record and the number of its share."""
    share, record = exchange.outcome(name).files
    assert (share.name, share.secret, record.name, record.secret) == ("share.json", True, "record.json", False)
    opened = KeyShare.parse(share.data).open(exchange.keys[name].open)
    return KeyRecord.parse(record.data), int.from_bytes(opened.encode(), "little")


def public_half(number):
    """The public key of a secret number, by integers."""
    return encode(multiply(number, BASE))


def interpolated(shares):
    """The number at 0 of the polynomial through these, by integers."""
    total = 0
    for x, value in shares.items():
        product = value
        for other in shares:
            if other != x:
                product = product * other * pow(other - x, -1, L) % L
        total += product
    return total % L
