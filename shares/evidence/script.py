"""The script of a ceremony: who has which role, and the steps that a policy asks for.

Source: CA/Browser Forum TLS Baseline Requirements, sec. 6.1.1.1 (script, witness or video); ETSI EN 319 411-1, sec.
6.5.1 (roles; from a summary); DNSSEC practice statements by RFC 6841 (who audits takes no part in the quorum). WebTrust
for CAs 4.1 from memory. The names of roles are those of published root-zone practice.
May import: shares.errors, shares.clock, shares.documents, shares.planning, shares.evidence.steps.
Secret: nothing. Confidential: persons, and how shares travel. Public: the rest.
Does not: write files or pages (``evidence.paperwork`` renders), or judge the policy: ``planning`` does.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from datetime import datetime
from typing import Final

from shares import clock
from shares.documents.base import MAX_FILE
from shares.documents.ceremony_script import CeremonyRole, CeremonyScript, Software
from shares.documents.members import MAX_LONG_TEXT, check_text
from shares.documents.party import PartyCard
from shares.documents.policy import Policy, folded
from shares.errors import ParameterError, VerificationError
from shares.evidence.steps import ADMINISTRATOR, DEALER, EXTERNAL, INTERNAL, steps_for, title
from shares.planning.examine import examine

DUTIES: Final = {
    ADMINISTRATOR: "Leads: reads each step aloud, and says when the next one begins. Handles neither secret nor share.",
    INTERNAL: "Checks each step against this script, keeps the log, and has whatever goes another way written down.",
    EXTERNAL: "Watches, from outside the organisation, and signs what was seen. Takes no part and keeps no share.",
    DEALER: "Works at the machine, and is never alone with it.",
}
"""The roles that a person can be named for beforehand, and what each does."""
_HOLDS: Final = "Keeps a share: checks it, seals it, and answers for it from then on."


def make_script(
    policy: Policy,
    software: Software,
    *,
    people: Mapping[str, str] | None = None,
    cards: Mapping[str, PartyCard] | None = None,
    planned: str | None = None,
    standby: str | None = None,
    created: datetime | None = None,
) -> CeremonyScript:
    """Return the script of the ceremony at which a secret is split by this policy.

    Args:
        policy: as ``Policy.parse`` returns it.
        software: version and digest of the program that is to be used.
        people: who has which of the roles in ``DUTIES``, as far as known; the others are filled in by hand.
        cards: the party cards of custodians that the policy names, by the custodian's name.
        planned: date and place, as people write them.
        standby: the second date.
        created: of the script; now by default.

    Raises:
        ParameterError: an unknown role, a text that may not be, or more custodians than one script has room for.
        VerificationError: a witness keeps a share or has a second role; or the policy is strict, and a serious finding
            stands, so that `split` would refuse it.
    """
    people = dict(people or {})
    for role, person in people.items():
        if role not in DUTIES:
            raise ParameterError(f"there is no role {role!r}", where="--role", hint=f"roles: {', '.join(DUTIES)}")
        check_text(person, "the name of a person")
    for text in (planned, standby):
        if text is not None:
            check_text(text, "a day and place")
    _check_separation(policy, people)
    examine(policy, cards=cards).require_sound()
    words = policy.rule().words()
    if len(words) > MAX_LONG_TEXT:
        raise ParameterError(f"the rule in words would be longer than {MAX_LONG_TEXT:,} characters")
    script = CeremonyScript(
        kind="ceremony-script",
        version=1,
        created=clock.now() if created is None else created,
        label=policy.label,
        policy=policy.digest(),
        rule=words,
        software=software,
        dual_control=policy.dual_control,
        planned=planned,
        standby=standby,
        roles=tuple(_roles(policy, people)),
        steps=tuple(steps_for(policy, software, cards=cards or {}, planned=planned, standby=standby)),
        signatures=(),
    )
    if len(script.to_file()) > MAX_FILE - 8 * 8192:
        raise ParameterError(
            f"the script for {len(policy.custodians)} custodians would be larger than 1 MiB",
            hint="hold the ceremony by a rule with fewer custodians",
        )
    return script


def _check_separation(policy: Policy, people: Mapping[str, str]) -> None:
    """See that nobody watches themself, and that who audits keeps no share."""
    keepers = {folded(one.person): one.name for one in policy.custodians}
    for witness in (INTERNAL, EXTERNAL):
        person = people.get(witness)
        if person is None:
            continue
        if folded(person) in keepers:
            raise VerificationError(
                f"the {title(witness)} is the person of {keepers[folded(person)]}, who keeps a share",
                where="--role",
                hint="name somebody else; audit staff take no part in the quorum",
            )
        others = [role for role, other in people.items() if role != witness and folded(other) == folded(person)]
        if others:
            raise VerificationError(
                f"one person is {title(witness)} and {title(others[0])}: nobody watches themself",
                where="--role",
                hint="name somebody else",
            )


def cautions(policy: Policy, people: Mapping[str, str]) -> list[str]:
    """Return what is worth a decision about the roles: who works the ceremony and keeps a share as well."""
    keepers = {folded(one.person): one.name for one in policy.custodians}
    return [
        f"the {title(role)} is the person of custodian {keepers[folded(people[role])]}: whoever leads, or works at the "
        "machine, keeps no share where it can be avoided."
        for role in (ADMINISTRATOR, DEALER)
        if role in people and folded(people[role]) in keepers
    ]


def _roles(policy: Policy, people: Mapping[str, str]) -> Iterator[CeremonyRole]:
    for role, duty in DUTIES.items():
        yield CeremonyRole(role=title(role), duty=duty, person=people.get(role))
    for one in policy.custodians:
        yield CeremonyRole(role=f"custodian {one.name}", duty=_HOLDS, person=one.person)
