"""A set of the demo harbour with what a round of attestation needs: challenges, answers, and a set's folder.

Source: none. Times are fixed; keys are made once.
"""

from __future__ import annotations

from datetime import datetime, timedelta
from pathlib import Path
from typing import Any

from parties import card, unlocked
from strategies import CREATED, HARBOUR, crooked_split, flat, presented

from shares.custody.presented import Presented
from shares.documents.attestation import Attestation
from shares.documents.challenge import Challenge
from shares.documents.event import Dealt, DealtShare
from shares.documents.record import Record
from shares.documents.share import Share
from shares.evidence.attest import answer, make_challenge
from shares.history.files import RECORD_NAME
from shares.history.folder import SetFolder

NAMES = HARBOUR[:3]
DEALT = crooked_split(b"made up, and worthless", flat(2, 3))
RECORD = DEALT.record
SHARES = {share.custodian: share for share in DEALT.shares}
ASKED = CREATED + timedelta(days=30)
DUE = ASKED + timedelta(days=14)
NEXT_DAY = ASKED + timedelta(days=1)
CARDS = {name: card(name).fingerprint for name in NAMES}


def challenge(record: Record = RECORD, **changes: Any) -> Challenge:
    """A fresh challenge to all three custodians by the harbour office."""
    given = {"custodians": NAMES, "due": DUE, "head": None, "created": ASKED, **changes}
    with unlocked("harbour-office") as key:
        return make_challenge(record, key=key, **given)


def given(share: Share) -> Presented:
    """A share as it is given."""
    return presented([share])[0]


def answered(
    asked: Challenge, name: str = "north-pier", *, signer: str | None = "", share: Share | None = None, **changes: Any
) -> Attestation:
    """An answer about content by a custodian, signed by their own party key, by another's, or by none."""
    record = changes.pop("record", RECORD)
    say: dict[str, Any] = {"grade": "content", "time": NEXT_DAY, **changes}
    if say["grade"] == "content":
        say["share"] = given(share or SHARES[name])
    if signer is None:
        return answer(asked, record, name, **say)
    with unlocked(signer or name) as key:
        return answer(asked, record, name, key=key, **say)


def sealed(asked: Challenge, name: str = "north-pier", **changes: Any) -> Attestation:
    """An answer about a closed pack."""
    return answered(asked, name, grade="sealed", **{"serial": "TB-0017", "place": "the pier house", **changes})


def set_folder(path: Path, *, cards: bool = True, time: datetime = CREATED) -> SetFolder:
    """A set's folder whose journal begins with the dealing; it knows the custodians' cards, or not."""
    path.mkdir()
    (path / RECORD_NAME).write_bytes(RECORD.to_file())
    folder = SetFolder(path)
    dealt = tuple(DealtShare(name=name, packed="card", card=CARDS[name] if cards else None) for name in NAMES)
    folder.append(
        Dealt(
            what="dealt",
            set=RECORD.set,
            epoch=RECORD.epoch,
            record=RECORD.fingerprint,
            custodians=dealt,
            practice=None,
        ),
        time=time,
    )
    return folder
