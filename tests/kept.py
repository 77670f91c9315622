"""A set of the demo harbour that is kept for a while: its folder, and what custodians do, at times that tests choose.

Everything is made as the commands make it, through the library, with times of its own.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from datetime import UTC, datetime, timedelta
from pathlib import Path

from parties import card, unlocked
from strategies import toml_of

from shares.custody.presented import Presented
from shares.custody.split import Dealt, practice_for, split
from shares.documents.challenge import Challenge
from shares.documents.drill_report import Action
from shares.documents.entry import Entry
from shares.documents.event import Dealt as DealtEvent
from shares.documents.event import DealtShare, DrillKind, Event, Grade
from shares.documents.policy import Policy
from shares.documents.record import Record
from shares.evidence.after_action import close_drill
from shares.evidence.attest import answer
from shares.evidence.audit import audit
from shares.evidence.audited import Audit
from shares.evidence.drill import open_drill, the_drill
from shares.evidence.rehearsal import rehearse
from shares.evidence.rounds import Entered, ask, enter
from shares.history.files import PRACTICE_RECORD, FolderFiles
from shares.history.folder import SetFolder
from shares.history.journal import append
from shares.memory import Secret
from shares.sharing.rule import Rule

START = datetime(2026, 1, 10, 9, 0, 0, tzinfo=UTC)
NAMES = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")
OFFICE = "harbour-office"
PEOPLE = dict(zip(NAMES, ("keeper one", "keeper two", "keeper three", "keeper four", "keeper five"), strict=True))
SITES = dict(zip(NAMES, ("pier house", "pier house", "light house", "dock house", "dock house"), strict=True))


def day(number: float, hour: int = 0) -> datetime:
    """So many days after the split."""
    return START + timedelta(days=number, hours=hour)


def policy_text(need: int = 3, names: Sequence[str] = NAMES, **more: object) -> bytes:
    """A policy over these custodians, ``need`` of them, with some keys of its own."""
    custodians = [
        {"name": name, "person": PEOPLE[name], "site": SITES[name], "reports_to": "harbour master"} for name in names
    ]
    plain = {"attest_every": "90d", "drill_every": "180d", **more}
    return toml_of(
        {"label": "Tide archive", **plain, "custodian": custodians, "rule": {"need": need, "from": list(names)}}
    )


@dataclasses.dataclass(eq=False)
class Kept:
    """A set in its folder. Whoever signs the journal is the harbour office."""

    folder: Path
    dealt: Dealt
    practice: Dealt | None
    signed: bool = True

    @classmethod
    def make(
        cls,
        folder: Path,
        policy: bytes | None = None,
        *,
        rule: Rule | None = None,
        cards: Sequence[str] = NAMES,
        signed: bool = True,
        journal: bool = True,
        epoch: int = 1,
        set_id: bytes | None = None,
    ) -> Kept:
        """Deal a set; ``cards``: the custodians whose party cards the journal knows. Another epoch is only written."""
        folder.mkdir(parents=True)
        read = Policy.parse(policy) if policy else None
        tree = read.rule() if read else rule or Rule(3, NAMES)
        with Secret.of(b"made up, and worth nothing") as secret:
            dealt = split(secret, tree, label="Tide archive", created=START, policy=read.digest() if read else None)
        if set_id:
            record = dealt.record.model_copy(update={"epoch": epoch, "set": set_id})
            dealt = Dealt(record.model_copy(update={"fingerprint": record.own_fingerprint()}), dealt.shares)
        practice = practice_for(dealt.record) if read and read.practice else None
        made = cls(folder, dealt, practice, signed)
        if policy:
            (folder / "policy.toml").write_bytes(policy)
        if practice:
            (folder / PRACTICE_RECORD).parent.mkdir(exist_ok=True)
            (folder / PRACTICE_RECORD).write_bytes(practice.record.to_file())
        record = dealt.record
        if signed:
            with unlocked(OFFICE) as key:
                record = record.signed(key, "dealer", time=START)
        (folder / "record.json").write_bytes(record.to_file())
        known = {name: card(name) for name in dealt.record.rule.to_rule().paths() if name in cards}
        event = DealtEvent(
            what="dealt",
            set=record.set,
            epoch=record.epoch,
            record=record.fingerprint,
            custodians=tuple(
                DealtShare(
                    name=one.name, packed="bare", card=known[one.name].fingerprint if one.name in known else None
                )
                for one in record.custodians
            ),
            practice=practice.record.fingerprint if practice else None,
        )
        if journal:
            made.append(event, START, cards=list(known.values()))
        return made

    @property
    def record(self) -> Record:
        return self.dealt.record

    @property
    def set(self) -> SetFolder:
        return SetFolder(self.folder)

    def append(self, event: Event, time: datetime, **more: object) -> Entry:
        """Enter an event as if no policy asked for more signatures."""
        if not self.signed:
            return append(self.folder, event, time=time, **more)  # type: ignore[arg-type]
        with unlocked(OFFICE) as key:
            return append(self.folder, event, keys=[key], time=time, **more)  # type: ignore[arg-type]

    def share(self, name: str) -> Presented:
        """A custodian's share, as it is presented."""
        (share,) = (one for one in self.dealt.shares if one.custodian == name)
        return Presented(name, share)

    def ask(self, time: datetime, names: Sequence[str] = (), *, due: datetime | None = None) -> Challenge:
        """Challenge custodians, all of them by default."""
        with unlocked(OFFICE) as key:
            return ask(self.set, keys=[key], due=due or time + timedelta(days=14), custodians=names, time=time)[0]

    def answer(
        self,
        challenge: Challenge,
        names: Sequence[str],
        time: datetime,
        *,
        grade: Grade = "content",
        damaged: bool = False,
        party: bool = True,
        opened: bool = False,
        seal: str = "intact",
    ) -> list[Entered]:
        """Answer a challenge for custodians, and enter it."""
        answers = []
        for name in names:
            share = self.share(name) if grade == "content" else None
            if damaged:
                share = Presented(name, None, "it rotted")
            serial = "4711" if grade == "sealed" else None
            with unlocked(name) as key:
                answers.append(
                    answer(
                        challenge,
                        self.record,
                        name,
                        grade=grade,
                        share=share,
                        key=key if party else None,
                        opened=opened,
                        seal=seal,  # type: ignore[arg-type]
                        serial=serial,
                        time=time,
                    )
                )
        with unlocked(OFFICE) as key:
            return enter(self.set, challenge, answers, keys=[key], time=time)

    def round(self, time: datetime, names: Sequence[str] | None = None) -> Challenge:
        """A round that these answer, all by default, one day later."""
        challenge = self.ask(time)
        self.answer(
            challenge, list(self.record.rule.to_rule().paths()) if names is None else names, time + timedelta(1)
        )
        return challenge

    def drill(
        self, kind: DrillKind, time: datetime, names: Sequence[str], *, actions: Sequence[Action] = (), hours: int = 1
    ) -> int:
        """A drill in which these bring their shares; return its number."""
        with unlocked(OFFICE) as key:
            number = open_drill(self.set, kind, keys=[key], at=time)[0].number
            dealt = self.practice if kind == "practice" else self.dealt
            assert dealt
            brought = [Presented(one.custodian, one) for one in dealt.shares if one.custodian in names]
            later = time + timedelta(hours=hours)
            people = [PEOPLE[name] for name in names]
            rehearse(self.set, the_drill(self.set.journal(), number), brought, persons=people, keys=[key], at=later)
            drill = the_drill(self.set.journal(), number)
            close_drill(self.set, drill, actions=actions, keys=[key], at=later + timedelta(hours=1))
        return number

    def audit(self, at: datetime, **more: object) -> Audit:
        return audit(FolderFiles(self.folder), at=at, **more)  # type: ignore[arg-type]
