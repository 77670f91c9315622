"""The steps of a ceremony, as a policy asks for them, each with what is to be seen before the next.

Source: CA/Browser Forum TLS Baseline Requirements, sec. 6.1.1.1 (several people, from the making of the key on); RFC
9591, App. C (the dealer's randomness and duty to delete; all holders compare one commitment); PCI DSS v4.0.1, 3.7.8
(duties are accepted); PCI PIN 3.1, 6-3, 8-1, 9-2 (printers, channels, packs and serials; from a summary); published
root-zone practice (clock, exceptions, a second date, more people than needed).
May import: shares.documents.
Secret: nothing. Confidential: how shares travel. Public: the rest.
Does not: name persons; ``evidence.script`` does.
"""

from __future__ import annotations

import re
import shlex
from collections.abc import Iterator, Mapping
from typing import Final

from shares.documents.ceremony_script import CeremonyStep, Software
from shares.documents.party import PartyCard
from shares.documents.policy import Policy, PolicyCustodian

ADMINISTRATOR, INTERNAL, EXTERNAL, DEALER = "administrator", "internal-witness", "external-witness", "dealer"
ROLES: Final = (ADMINISTRATOR, INTERNAL, EXTERNAL, DEALER)
EVERYONE: Final = "everyone"
BEFORE, OPENING, MACHINE = "Before the day", "Opening", "The machine"
DEALING, HANDING, CLOSING = "Dealing", "Handing over", "Closing"


def title(role: str) -> str:
    """Return one of ``ROLES`` in words, like ``internal witness``."""
    return "ceremony administrator" if role == ADMINISTRATOR else role.replace("-", " ")


def signing(dual_control: bool) -> str:
    """Return the options by which an entry is signed: by the dealer, and under dual control by a witness as well."""
    return f" --sign {DEALER}.key.json" + (f" --sign {INTERNAL}.key.json" if dual_control else "")


def folder_name(label: str) -> str:
    """Return a name for the set's folder, made of its label.

    >>> folder_name("Tide archive, backup root")
    'tide-archive-backup-root'
    """
    return "-".join(re.findall(r"[a-z0-9]+", label.lower()))[:40].strip("-") or "set"


def steps_for(
    policy: Policy,
    software: Software,
    *,
    cards: Mapping[str, PartyCard],
    planned: str | None,
    standby: str | None,
) -> list[CeremonyStep]:
    """Return the steps of the ceremony at which a secret is split by a policy; see ``evidence.script.make_script``."""
    return list(_Steps(policy, software, cards, planned, standby).all())


class _Steps:
    """Writes the steps down, in order; ``part`` is the part that is being written."""

    def __init__(
        self,
        policy: Policy,
        software: Software,
        cards: Mapping[str, PartyCard],
        planned: str | None,
        standby: str | None,
    ) -> None:
        self.policy, self.software, self.cards = policy, software, cards
        self.planned, self.standby = planned or "to be written here", standby or "to be written here"
        self.set = folder_name(policy.label)
        self.part = BEFORE

    def all(self) -> Iterator[CeremonyStep]:
        yield from self._before()
        self.part = OPENING
        yield from self._opening()
        self.part = MACHINE
        yield from self._machine()
        self.part = DEALING
        yield from self._dealing()
        self.part = HANDING
        for one in self.policy.custodians:
            yield from self._handing(one)
        self.part = CLOSING
        yield from self._closing()

    def _step(
        self, role: str, what: str, expected: str, *, command: str | None = None, note: str | None = None
    ) -> CeremonyStep:
        role = title(role) if role in ROLES else role
        return CeremonyStep(part=self.part, role=role, what=what, command=command, expected=expected, note=note)

    def _before(self) -> Iterator[CeremonyStep]:
        yield self._step(
            ADMINISTRATOR,
            "Call everyone who has a role, and a stand-in for each. Agree on the day, and on a second one, should the "
            "room, the machine or a person fail.",
            f"Everyone has agreed to both. The day: {self.planned}. The second: {self.standby}.",
            note="Both days, where they are not printed",
        )
        yield self._step(
            ADMINISTRATOR,
            "Examine the policy with the owner of the key, and decide on each finding.",
            f"No serious finding stands, and each caution has a decision. To recover: {self.policy.rule().words()}.",
            command="shares plan policy.toml",
        )
        if self.policy.acknowledgement:
            names = ", ".join(one.name for one in self.policy.custodians)
            yield self._step(
                ADMINISTRATOR,
                "Have each custodian accept the duties, by signature or on the form. NAME is the custodian's.",
                f"One file each is here: {names}.",
                command=f"shares acknowledge --label {shlex.quote(self.policy.label)} --key NAME.key.json "
                "--to NAME.ack.json",
            )
        for one in self.policy.custodians:
            if one.name in self.cards:
                yield self._step(
                    f"custodian {one.name}",
                    "Read the fingerprint of your party card aloud, face to face or by a number that was known before.",
                    self.cards[one.name].fingerprint,
                    command=f"shares party show {shlex.quote(f'{one.name}.card.json')}",
                )
        yield self._step(
            ADMINISTRATOR,
            "Lay out numbered packs that show when they were opened, one for each custodian and two more; two empty "
            "media for the set's folder; a clock that is not the machine's; a printer that stands in the room, has no "
            "network and keeps no pages.",
            f"{len(self.policy.custodians) + 2} packs. Their serials are on a list that goes another way than they do.",
        )

    def _opening(self) -> Iterator[CeremonyStep]:
        yield self._step(
            ADMINISTRATOR,
            "Close the door. Everyone says name and role and signs the list of roles. Phones and cameras are outside, "
            "but for the one that records.",
            "Every role is filled. Administrator, dealer and witnesses are different people; no witness keeps a share. "
            "The external witness is here, or all of it is on video.",
            note="Video: where it is kept, and its SHA-256",
        )
        yield self._step(
            ADMINISTRATOR,
            "Say how it goes: a step is read aloud, done, seen by the internal witness, and initialled with its time. "
            "Whatever goes another way is logged as an exception, with its remedy; nothing is struck out.",
            "Everyone has agreed.",
        )

    def _machine(self) -> Iterator[CeremonyStep]:
        yield self._step(
            DEALER,
            "Start the machine, which serves nothing else, from a medium that cannot be written to, without its disk. "
            "Cables and radios are out.",
            "No interface but lo is UP, and no line tells of swap.",
            command="ip -brief link; swapon --show",
        )
        yield self._step(
            INTERNAL,
            "Compare the machine's clock with the second clock.",
            "They differ by less than a minute.",
            command="date -u",
            note="Both times (UTC)",
        )
        yield self._step(
            DEALER,
            "Make a folder in memory. Copy script, policy, acknowledgements, all cards, and the party keys of the "
            "dealer and both witnesses into it. From now on the internal witness logs each step when it is done; those "
            "before this one first, in order.",
            "No message.",
            command=f"umask 077; mkdir /dev/shm/ceremony; cd /dev/shm/ceremony; mkdir handover {self.set}",
        )
        for role in (DEALER, INTERNAL, EXTERNAL):
            yield self._step(
                role,
                "Show your party card as it lies beside your key in this folder, and read its fingerprint aloud from "
                "a paper that you brought. Everyone writes it down: signatures of record and log are known by it.",
                "The same 8 groups of 4 on the screen and on the paper, and another card for each of the three.",
                command=f"shares party show {role}.card.json",
                note="Fingerprint of the card",
            )
        yield self._step(
            INTERNAL,
            "Compare script and policy with this paper.",
            f"policy.toml: {self.policy.digest().hex()}. script.json: as at the head of this paper.",
            command="sha256sum policy.toml script.json",
        )
        yield self._step(
            DEALER,
            "Test the program, and compare what it is with what this script was made for.",
            f"shares {self.software.version}. Every known answer is right, secret memory can be locked, core dumps are "
            f"off. Software: {self.software.digest.hex()}.",
            command="shares selftest",
            note="Software, where it is another one: an exception",
        )
        yield self._step(
            DEALER,
            "See that the system's source of randomness is ready. The split adds a hedge of its own to it.",
            "It ends at once: 32 bytes copied.",
            command="dd if=/dev/random of=/dev/null bs=32 count=1",
        )

    def _dealing(self) -> Iterator[CeremonyStep]:
        yield self._step(
            DEALER,
            "Before the eyes of the witnesses, bring or make the secret as the file named secret in this folder. It "
            "is never shown, and never typed into a command.",
            "The file is there, for its owner alone (-rw-------), and has the size that the owner of the key expects.",
            command="ls -l secret",
        )
        yield self._step(DEALER, self._split_words(), self._split_expected(), command=self._split_command())
        yield self._step(
            EVERYONE,
            "The dealer reads the fingerprint of the record aloud. Everyone else writes it down, and compares it with "
            "the next person's. Custodians take it home.",
            "All have the same 8 groups of 4. If not, the ceremony stops here, and the shares are destroyed.",
            note="Fingerprint of the record",
        )
        signed = f"{self.set}/record.json"
        for witness in (EXTERNAL,) if self.policy.dual_control else (INTERNAL, EXTERNAL):
            target = f"{witness}.record.json"
            yield self._step(
                witness,
                "Sign the record, whose fingerprint you compared.",
                f"Signed as {title(witness)}, after those before. The fingerprint is as it was read aloud.",
                command=f"shares record sign {signed} --as witness --key {witness}.key.json --to {target}",
            )
            signed = target

    def _split_words(self) -> str:
        without = [one.name for one in self.policy.custodians if one.card is None]
        words = "Split."
        if without:
            words += f" Who has no card types an own passphrase when asked, unseen by others: {', '.join(without)}."
        if self.policy.practice:
            words += " Practice shares, of a secret that is worth nothing, are dealt with it, to rehearse in the open."
        return words

    def _split_command(self) -> str:
        files = [f"{one.name}.ack.json" for one in self.policy.custodians if self.policy.acknowledgement]
        acknowledged = "".join(f" --acknowledged {shlex.quote(file)}" for file in files)
        # Under dual control the dealing has two signatures from the first; else witnesses sign what they compared.
        second = f" --witness {INTERNAL}.key.json" if self.policy.dual_control else ""
        return (
            f"shares split secret --policy policy.toml{acknowledged} --dealer dealer.key.json{second} --set {self.set} "
            "--deliver handover"
        )

    def _split_expected(self) -> str:
        return (
            f"{len(self.policy.custodians)} shares. Every share was read back and verified alone, and the secret was "
            "recovered from what was written. The record is signed by the dealer."
        )

    def _handing(self, one: PolicyCustodian) -> Iterator[CeremonyStep]:
        role, name = f"custodian {one.name}", shlex.quote(one.name)
        share = f"handover/{shlex.quote(f'{one.name}.wrapped.json')}"
        key = f" --key {shlex.quote(f'{one.name}.key.json')}" if one.card is not None else ""
        yield self._step(
            role,
            "Check your share against the record with your own hands.",
            "1 of 1 intact, and the fingerprint that was read aloud. Anything else stops the ceremony.",
            command=f"shares verify {share} --record {self.set}/record.json{key}",
        )
        yield self._step(
            role,
            "Have the sheet of your share printed, both pages, and see that nobody else reads it. Shred misprints.",
            "Two pages, of one number. Sign the second page, which says what you accept, and give that one back.",
            command=f"shares sheet {share} --to {shlex.quote(f'{one.name}.html')}",
            note="Number of the sheet",
        )
        way = f"with: {one.carrier or 'the custodian'}" + (f"; the way: {one.channel}" if one.channel else "")
        channel = f" --channel {shlex.quote(one.channel)}" if one.channel else ""
        yield self._step(
            role,
            "Seal the sheet in a pack. Read its serial aloud: it goes here, into the command for SERIAL, and on the "
            f"list that goes another way. The pack leaves {way}. (A second copy, on any medium, is logged as copied.)",
            "The seal is whole, and both lists have the same serial.",
            command=f"shares journal add {self.set} delivered --custodian {name} --serial SERIAL{channel}"
            + signing(self.policy.dual_control),
            note="Serial of the pack",
        )

    def _closing(self) -> Iterator[CeremonyStep]:
        left = "records, practice shares (worth nothing)" if self.policy.practice else "records"
        keep = "mkdir practice; mv handover/*.practice.json practice; " if self.policy.practice else ""
        yield self._step(
            DEALER,
            "Erase the secret, the shares and the sheets. Where the secret must live on elsewhere, its owner has it.",
            f"Neither secret, shares nor sheets are listed. What is left: {self.set}, {left}, and what was brought.",
            command=f"{keep}rm -r secret handover *.html; ls -A",
        )
        yield self._step(
            ADMINISTRATOR,
            "Clear the printer: switch it off, and take it from the mains. Destroy misprints and notes but this paper.",
            "The internal witness has seen it.",
        )
        yield self._step(
            ADMINISTRATOR,
            "Have the report made, and the exceptions read aloud.",
            "The exceptions are those that everyone remembers. Steps from this one on are all that has no entry yet.",
            command=f"shares ceremony report {self.set}",
        )
        yield self._step(
            EVERYONE,
            "Sign the last page of this paper. Both witnesses sign the entry of this step as well (--sign KEY, twice): "
            "the chain binds to it what was logged before.",
            "Every role has signed, with the time.",
        )
        yield self._step(
            EVERYONE,
            "The internal witness reads the head of the journal aloud. Everyone writes it down and takes it home: a "
            "journal that is changed later no longer holds it.",
            "All have the same number and the same 8 groups of 4.",
            command=f"shares journal head {self.set}",
            note="Number of the entry, and head",
        )
        yield self._step(
            ADMINISTRATOR,
            "Copy the set's folder, and the records that the witnesses signed, to two media. MEDIUM is where each is.",
            "No difference is told, of either medium.",
            command=f"cp -r {self.set} *.record.json MEDIUM; diff -r {self.set} MEDIUM/{self.set}",
        )
        yield self._step(
            DEALER,
            "Shut the machine down and take it from the mains for a minute: what was in memory is gone. This step is "
            "logged afterwards, where the set's folder is kept.",
            "The machine is dark. The door is opened.",
        )
