"""Sets of the demo harbour for tests of evidence: a folder with record, policy and journal, and no share anywhere.

Source: none.
"""

from __future__ import annotations

from datetime import datetime, timedelta
from pathlib import Path

from strategies import CREATED

from shares.custody.split import split
from shares.documents.event import Dealt, DealtShare, Event
from shares.documents.policy import Policy
from shares.history.folder import SetFolder
from shares.history.journal import append
from shares.memory import Secret

NAMES = ("north-pier", "south-pier", "registrar")
POLICY = """
label = "Tide archive root"
{more}
[rule]
need = 2
from = ["north-pier", "south-pier", "registrar"]
""" + "".join(
    f"""
[[custodian]]
name = "{name}"
person = "Keeper of {name}"
site = "{name}"
reports_to = "harbour master"
carrier = "harbour boat"
channel = "by hand"
"""
    for name in NAMES
)


def at(minutes: int) -> datetime:
    """A time after the split."""
    return CREATED + timedelta(minutes=minutes)


def policy(more: str = "") -> Policy:
    """The policy of the demo set, with more keys."""
    return Policy.parse(POLICY.format(more=more).encode())


def deal(folder: Path, more: str = "", *, journal: bool = True, minute: int = 0) -> SetFolder:
    """Split by the policy into a folder, which may hold the journal of a ceremony; the shares are thrown away."""
    ruling = policy(more)
    with Secret.of(b"made up") as secret:
        dealt = split(secret, ruling.rule(), label=ruling.label, created=CREATED, policy=ruling.digest())
    dealt.close()
    folder.mkdir(exist_ok=True)
    (folder / "policy.toml").write_bytes(ruling.text)
    record = dealt.record
    if journal:
        shares = tuple(DealtShare(name=name, packed="passphrase", card=None) for name in NAMES)
        event = Dealt(
            what="dealt", set=record.set, epoch=1, record=record.fingerprint, custodians=shares, practice=None
        )
        append(folder, event, time=at(minute))
    (folder / "record.json").write_bytes(record.to_file())
    return SetFolder(folder)


def enter(folder: SetFolder, kind: type[Event], **members: object) -> None:
    """Append an event, by the names that its members have in a document."""
    append(folder.path, kind.model_validate(members), time=at(1000))
