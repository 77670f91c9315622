#!/usr/bin/env python3
"""A year in the life of one set, told by its own evidence, and the audit that ends it.

    python examples/year_of_a_set.py FOLDER

makes in the new FOLDER a set of the harbour trust as it stands after a year: split and delivered in January;
custodians asked for proof in February (one is silent) and in October (one share is damaged); a drill of practice in
March and one of recovery in September; a custodian who leaves in November. Then it audits the set as of 1 December, as
a page too, and makes the pack that an auditor takes away. Every date is made up, which only a library can do: the
commands take the time from the clock.

What to look at: FOLDER/audit.html, FOLDER/tide-archive.tar, and `shares journal show FOLDER/set`.
"""

import sys
from datetime import UTC, datetime
from pathlib import Path

from shares import Presented, Secret, new_party, split
from shares.custody.deliver import to_command
from shares.custody.entries import Entering, end_of_day
from shares.custody.handover import hand_over
from shares.custody.split import practice_for
from shares.documents.drill_report import Action
from shares.documents.event import Delivered, Departed, Received
from shares.documents.policy import Policy
from shares.documents.share import Share
from shares.documents.wrapping import Cost
from shares.evidence.after_action import close_drill, report_page
from shares.evidence.attest import answer
from shares.evidence.audit import audit
from shares.evidence.drill import open_drill
from shares.evidence.page import audit_page
from shares.evidence.rehearsal import rehearse
from shares.evidence.rounds import ask, enter
from shares.history.files import FolderFiles
from shares.history.folder import SetFolder
from shares.history.pack import write_pack

POLICY = Path(__file__).parent / "policies" / "tide-archive.toml"
QUICK = Cost(memory=8, passes=1, lanes=1)  # The demo's passphrases protect nothing; yours get the default cost.
PIERS = ("north-pier", "south-pier", "light-house")


def on(month: int, day: int, hour: int = 9) -> datetime:
    """A time in the year that is told."""
    return datetime(2026, month, day, hour, tzinfo=UTC)


def party(name: str):
    """A party's key, opened."""
    phrase = Secret.of(f"the demo passphrase of {name}".encode())
    return new_party(name, phrase, created=on(1, 5), cost=QUICK).open(phrase)


def main(folder: Path) -> int:
    folder.mkdir(mode=0o700)
    policy = Policy.parse(POLICY.read_bytes())
    names = [custodian.name for custodian in policy.custodians]
    keys = {name: party(name) for name in (*names, "harbour-office")}
    office, witness = keys["harbour-office"], keys["registrar"]

    # January: the split. Shares are kept bare here, which only a demo may do.
    deliveries = {name: folder / "kept" / name for name in names}
    for place in deliveries.values():
        place.mkdir(parents=True)
    with Secret.of(b"the root key of the tide archive, made up") as secret:
        dealt = split(secret, policy.rule(), label=policy.label, created=on(1, 5), policy=policy.digest())
    practice = practice_for(dealt.record).signed(office, "dealer", time=on(1, 5))
    dealt = dealt.signed(office, "dealer", time=on(1, 5)).signed(witness, "witness", time=on(1, 5))
    entering = Entering([office, witness], {name: keys[name].card for name in names}, on(1, 5))
    beside = {"policy.toml": policy.text}
    hand_over(dealt, folder / "set", deliveries, companions=beside, practice=practice, entering=entering)
    of_set = SetFolder(folder / "set")
    for number, name in enumerate(names):
        serial, day = f"HT-{1001 + number}", 6 + number
        sent = Delivered(what="delivered", custodian=name, serial=serial, channel=policy.custodians[number].channel)
        of_set.append(sent, keys=[office], time=on(1, day))
        of_set.append(Received(what="received", custodian=name, serial=serial), keys=[office], time=on(1, day, 15))

    def share(name: str, kind: str = "share") -> Presented:
        path = deliveries[name] / f"{name}.{kind}.json"
        return Presented(str(path), Share.parse(path.read_bytes()))

    def attested(asked, name: str, time: datetime):
        return answer(asked, of_set.record, name, grade="content", share=share(name), key=keys[name], time=time)

    # February: the first round. The keeper of the light-house is silent.
    asked, _ = ask(of_set, keys=[office], due=on(2, 15), time=on(2, 1))
    answers = [attested(asked, name, on(2, 3 + i)) for i, name in enumerate(n for n in names if n != "light-house")]
    enter(of_set, asked, answers, keys=[office], time=on(2, 12))

    # March: a drill of practice, for people to learn on.
    drill, _ = open_drill(of_set, "practice", custodians=(*PIERS, "registrar"), keys=[office], at=on(3, 10))
    brought = [share(name, "practice") for name in ("north-pier", "light-house", "registrar")]
    with rehearse(of_set, drill, brought, persons=["keeper of the light-house"], keys=[office], at=on(3, 10, 11)):
        pass  # The worthless secret is shown to everybody; then it is wiped.
    close_drill(of_set, drill, findings=["the way to the office is dark"], keys=[office], at=on(3, 11))

    # September: a drill of recovery. The probe gets the secret, and only its exit code is kept.
    drill, _ = open_drill(of_set, "recovery", keys=[office], at=on(9, 8))
    brought = [share(name) for name in ("north-pier", "south-pier", "registrar")]
    probe = [sys.executable, "-c", "import sys; sys.exit(len(sys.stdin.buffer.read()) != 41)"]
    with rehearse(
        of_set,
        drill,
        brought,
        probe=lambda recovery: to_command(recovery.secret, probe),
        persons=["registrar"],
        keys=[office, witness],
        at=on(9, 8, 12),
    ):
        pass
    action = Action(owner="registrar", due=end_of_day("2026-10-31"), what="wipe the drill machine before a witness")
    report, _, _ = close_drill(of_set, drill, actions=[action], keys=[office, witness], at=on(9, 9))
    (folder / "drill.html").write_bytes(report_page(report))

    # October: the second round. The light-house answers; the share of auditor-west is damaged, and its keeper says so.
    damaged = deliveries["auditor-west"] / "auditor-west.share.json"
    text = damaged.read_text()
    row = text.index('"rows"') + 20
    damaged.write_text(text[:row] + ("A" if text[row] != "A" else "B") + text[row + 1 :])
    asked, _ = ask(of_set, keys=[office], due=on(10, 15), time=on(10, 1))
    answers = [attested(asked, name, on(10, 2 + i)) for i, name in enumerate(names)]
    enter(of_set, asked, answers, keys=[office], time=on(10, 10))

    # November: the operator of the south pier leaves; nothing is done about it.
    leaver = next(one.person for one in policy.custodians if one.name == "south-pier")
    left = Departed(what="departed", person=leaver, custodians=("south-pier",), due=on(11, 20) + policy.respond_within)
    of_set.append(left, keys=[office], time=on(11, 20))

    # December: the audit.
    found = audit(FolderFiles(folder / "set"), at=on(12, 1), trusted=[office.card])
    page = audit_page([found], program="the year of a set", trusted=[office.card])
    (folder / "audit.html").write_bytes(page)
    write_pack(FolderFiles(folder / "set"), folder / "tide-archive.tar")
    print(f"{found.label}: {found.verdict.value}")
    for reason in found.reasons:
        print(f"  {reason.what}")
    print(
        f"Look at {folder / 'audit.html'} and {folder / 'drill.html'}; the auditor takes {folder / 'tide-archive.tar'}"
    )
    for key in keys.values():
        key.close()
    dealt.close()
    practice.close()
    return 0


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit("usage: python year_of_a_set.py FOLDER (a new one)")
    sys.exit(main(Path(sys.argv[1])))
