#!/usr/bin/env python3
"""Five custodians generate a key that is in no one place, and use it: a release, two certificates, a message.

    python examples/threshold_key.py FOLDER

makes in the new FOLDER a folder for the office and for each of five custodians, as if each were a machine of its own.
A machine runs the commands of `shares` on its own folder alone; whatever goes to another goes by `carry`, which copies
messages of a task and nothing else, as a stick or mail would. Then three of five sign; `openssl` and `ssh-keygen`
verify; somebody who has only the `cryptography` package sends a message, which three open; and one signer cheats and is
named.

The commands `shares`, `openssl` and `ssh-keygen` have to be there. The demo's passphrases protect nothing.
"""

import filecmp
import json
import shutil
import subprocess
import sys
from pathlib import Path

from shares import Secret, new_party
from shares.custody.parties import load_key, write_party
from shares.documents.task_message import SignatureShare, TaskMessage
from shares.documents.wrapping import Cost
from shares.group.edwards25519 import Scalar

CUSTODIANS = ("north-pier", "south-pier", "light-house", "registrar", "dry-dock")
OFFICE = "harbour-office"
SHARES = shutil.which("shares") or Path(sys.executable).with_name("shares")
SENDER = Path(__file__).with_name("send_to_key.py")
QUICK = Cost(memory=8, passes=1, lanes=1)  # Yours get the default cost.


class Machine:
    """The folder of one party: its party key, its own folder of the threshold key, and its copies of tasks."""

    def __init__(self, folder: Path, name: str) -> None:
        self.name, self.folder = name, folder / name
        self.folder.mkdir(parents=True)
        write_party(new_party(name, self.phrase(), cost=QUICK), self.folder)
        (self.folder / "passphrase").write_bytes(self.words)

    @property
    def words(self) -> bytes:
        return f"the demo passphrase of {self.name}".encode()

    def phrase(self) -> Secret:
        return Secret.of(self.words)

    @property
    def card(self) -> Path:
        return self.folder / f"{self.name}.card.json"

    def shares(self, *words: str | Path, code: int = 0) -> str:
        """Run a command here; return what it says."""
        told = subprocess.run([SHARES, *words], cwd=self.folder, capture_output=True, text=True, check=False)
        if told.returncode != code:
            sys.exit(f"{self.name}: shares {' '.join(map(str, words))}: code {told.returncode}\n{told.stderr}")
        return (told.stdout or told.stderr).strip()

    @property
    def own(self) -> list[str]:
        """The options by which a custodian's party key is used."""
        return [f"--key={self.name}.key.json", "--passphrase-file=passphrase"]

    @property
    def signing(self) -> list[str]:
        """The options by which whoever asks for something signs that."""
        return [f"--sign={self.name}.key.json", "--passphrase-file=passphrase"]

    def next(self, task: str) -> bool:
        """A custodian's one verb. It says what it will do, and asks; --yes stands for the custodian who agrees.

        Returns:
            Whether the task is over for this custodian.
        """
        told = self.shares("task", "next", task, "--mine=key", "--yes", "--json", *self.own)
        return json.loads(told)["state"] == "finished"


def say(title: str, *lines: str) -> None:
    print(f"\n{title}")
    for line in lines:
        print(f"  {line}")


def run(*words: str | Path, given: str = "", code: int = 0) -> str:
    """Run an ordinary program; return what it says."""
    told = subprocess.run(words, input=given, capture_output=True, text=True, check=False)
    if told.returncode != code:
        sys.exit(f"{words[0]}: code {told.returncode}\n{told.stderr}")
    return (told.stdout or told.stderr).strip()


def carry(task: str, machines: list[Machine]) -> None:
    """Copy the messages that one machine has to the others: all that ever goes from one to another."""
    for one in machines:
        for message in sorted((one.folder / task / "messages").iterdir()):
            for other in machines:
                there = other.folder / task / "messages" / message.name
                if not there.exists():
                    shutil.copyfile(message, there)
                elif not filecmp.cmp(message, there, shallow=False):
                    sys.exit(f"{task}: {other.name} has another {message.name}")


def hand_out(task: str, author: Machine, machines: list[Machine]) -> None:
    """Give each party a copy of a new task."""
    for one in machines:
        shutil.copytree(author.folder / task, one.folder / task)


def answer(task: str, author: Machine, machines: list[Machine]) -> None:
    """Visit each in turn until the task is over for all."""
    over = [False]
    while not all(over):
        over = [one.next(task) for one in machines]
        carry(task, [author, *machines])


def main(folder: Path) -> int:
    folder = folder.resolve()  # Each command runs in the folder of its own machine.
    folder.mkdir(mode=0o700)
    office = Machine(folder, OFFICE)
    custodians = [Machine(folder, name) for name in CUSTODIANS]
    three = custodians[:3]
    by = office.signing

    # Five machines make a key together. What they exchange lies in FOLDER/harbour-office/joining/messages.
    cards = [f"--custodian={one.card}" for one in custodians]
    office.shares("key", "join", "joining", "--need=3", "--label=Harbour release key", *cards, *by)
    hand_out("joining", office, custodians)
    answer("joining", office, custodians)
    told = {one.shares("key", "show", "key") for one in custodians}
    say("Five custodians have generated a key, and no machine has ever held it:", *told.pop().splitlines())
    for one in custodians:
        one.shares("key", "verify", "key", *one.own)
    say(f"Each has checked their own key share; the records are the same: {not told}")

    # The office needs the public record alone, and the world the public key.
    (office.folder / "key").mkdir(mode=0o700)
    shutil.copyfile(custodians[0].folder / "key" / "record.json", office.folder / "key" / "record.json")
    office.shares("key", "show", "key", "--pem=key.pem", "--x25519-pem=sealing.pem")

    # Three of them make nonces beforehand, so that each signature takes one visit.
    batches = []
    for one in three:
        one.shares("key", "commit", "key", "--count=10", f"--to={one.name}.commitments.json", *one.own)
        shutil.copy(one.folder / f"{one.name}.commitments.json", office.folder)
        batches.append(f"--batch={one.name}.commitments.json")
    signers = [*(f"--signer={one.name}" for one in three), *batches, *by]

    def signed(task: str, target: str, *words: str) -> Path:
        office.shares("key", *words, f"--task={task}", *signers)
        hand_out(task, office, three)
        answer(task, office, three)
        office.shares("key", "finish", "key", task, f"--to={target}", *by)
        return office.folder / target

    release = office.folder / "release.txt"
    release.write_text("tide tables, release 7\n")
    signature = signed("release", "release.sig", "sign", "key", "release.txt")
    public = office.folder / "key.pem"
    verify = ["openssl", "pkeyutl", "-verify", "-pubin", "-inkey", public, "-rawin", "-in", release, "-sigfile"]
    say("Three of five have signed a release:", f"openssl: {run(*verify, signature)}")

    for_ssh = signed("release-ssh", "release.txt.sig", "sign", "key", "release.txt", "--openssh=release")
    office.shares("key", "show", "key", "--openssh=key.pub")
    allowed = office.folder / "allowed"
    allowed.write_text(f"the-quorum {(office.folder / 'key.pub').read_text()}")
    verify_ssh = ["ssh-keygen", "-Y", "verify", "-f", allowed, "-I", "the-quorum", "-n", "release", "-s", for_ssh]
    say("And once more, for OpenSSH:", f"ssh-keygen: {run(*verify_ssh, given=release.read_text())}")

    root = signed("root", "root.pem", "root", "key", "CN=Harbour Trust Root,O=Harbour Trust")
    run("openssl", "req", "-newkey", "ed25519", "-nodes", "-keyout", office.folder / "below.key", "-out",
        office.folder / "below.req", "-subj", "/CN=Harbour Intermediate/O=Harbour Trust")  # fmt: skip
    below = signed("below", "below.pem", "certify", "key", "below.req", "--issuer=root.pem", "--for=authority")
    say(
        "They have signed a root and an intermediate certificate:",
        f"openssl: {run('openssl', 'verify', '-CAfile', root, below)}",
    )
    reason = "--reason=cessationOfOperation"
    revoked = signed("revoked", "revoked.pem", "revoke", "key", "below.pem", "--issuer=root.pem", reason)
    check = ["openssl", "verify", "-crl_check", "-CRLfile", revoked, "-CAfile", root, below]
    say("And revoked the intermediate one:", *(f"openssl: {line}" for line in run(*check, code=2).splitlines()))

    # Somebody who has the public key and the cryptography package sends a message; the office is to read it.
    plain = folder / "plain.txt"
    plain.write_text("The lock of the north gate is 4711.\n")
    run(sys.executable, SENDER, office.folder / "sealing.pem", plain, office.folder / "message.bin")
    asked = [f"--custodian={one.name}" for one in three]
    office.shares("key", "open", "key", "message.bin", "--task=opening", *asked, *by)
    hand_out("opening", office, three)
    answer("opening", office, three)
    office.shares("key", "finish", "key", "opening", "--to=opened.txt", *by)
    same = filecmp.cmp(plain, office.folder / "opened.txt", shallow=False)
    say("Three have opened a message for the office, which alone can read it:", f"the same as was sent: {same}")

    # The light-house says a wrong share of a signature, in a message that it has signed all the same.
    office.shares("key", "sign", "key", "release.txt", "--task=cheated", *signers)
    hand_out("cheated", office, three)
    cheat = three[2]
    cheat.next("cheated")
    (said,) = (cheat.folder / "cheated" / "messages").iterdir()
    said.write_bytes(falsified(cheat, said.read_bytes()))
    for one in three[:2]:
        one.next("cheated")
    carry("cheated", [office, *three])
    say("One signer has cheated:", office.shares("key", "finish", "key", "cheated", "--to=cheated.sig", *by, code=4))
    print("\nLook around: shares journal show", office.folder / "key")
    return 0 if same else 1


def falsified(cheat: Machine, message: bytes) -> bytes:
    """Return the cheat's message with another number in it than its machine has worked out."""
    good = TaskMessage.parse(message)
    false = SignatureShare(what="signature-share", share=Scalar.drawn())
    with load_key(cheat.folder / f"{cheat.name}.key.json").open(cheat.phrase()) as key:
        return TaskMessage.signed_by(
            key, task=good.task, round=good.round, sender=good.sender, seen=good.seen, body=false
        ).to_file()


if __name__ == "__main__":
    if len(sys.argv) != 2 or sys.argv[1].startswith("-"):
        print(f"usage: {Path(sys.argv[0]).name} FOLDER, which is made", file=sys.stderr)
        sys.exit(2)
    sys.exit(main(Path(sys.argv[1])))
