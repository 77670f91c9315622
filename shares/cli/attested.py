"""What the commands of attestation read of answers, and how they tell what was asked, answered and found.

Source: none.
May import: shares.errors, shares.clock, shares.storage, shares.documents, shares.custody.presented, shares.evidence,
shares.cli.output.
Secret: nothing; a share is opened for its name alone. Confidential: answers. Public: the rest.
Does not: judge, or enter anything.
"""

from __future__ import annotations

import shlex
from collections.abc import Sequence
from dataclasses import dataclass

from shares import clock
from shares.cli.output import prose
from shares.custody.presented import parse_share
from shares.documents.attestation import Attestation
from shares.documents.base import MAX_FILE
from shares.documents.challenge import Challenge
from shares.documents.policy import Policy
from shares.errors import ParameterError, SharesError, StorageError
from shares.evidence.judge import Flaw, Judgement
from shares.evidence.rounds import Entered
from shares.storage import read_file

VERIFICATION, STORAGE = 4, 5
ANSWER_CAUTION = "an answer proves possession to whoever asked: answer only challenges that came by the known way."
WHAT_IT_IS = "Next: give the answer to whoever asked. It holds no secret, and proves nothing to any other challenge."
NEXT = {
    "damaged": "Next: tell whoever asked at once. Keep the share as it is, and look for another copy; destroy nothing.",
    "inconsistent dealing": "Next: tell whoever asked at once: the dealer was faulty, and the set must be split anew.",
    "seal broken": "Next: tell whoever asked at once, and touch nothing: the share may have been seen.",
}
UNATTRIBUTED = (
    "The share alone signed: whoever ever had it whole could have answered, so it does not count toward the margin. "
    "A party key (--sign) makes it yours."
)
SEALED_COUNTS = (
    "A closed pack proves nothing of its content: it counts only beside an earlier proof of content by the same "
    "custodian, and until that is {} old ({})."
)
INCIDENT = (
    "{} answered before, and now reports: {}. A second answer is not entered, so enter that as an incident: `shares "
    "journal add SET incident --custodian {} --remark TEXT`."
)
SILENCE = "Silence is no consent: ask each of them by the known way."
PROVES = (
    "An answer that counts shows that its signer had the whole share when it was made. It does not show who else has, "
    "nor that the custodian will come when called."
)


@dataclass(frozen=True, slots=True)
class GivenAnswer:
    """An answer's file, and what is in it, or why nothing is."""

    file: str
    attestation: Attestation | None
    problem: SharesError | None = None


Told = tuple[GivenAnswer, Entered | None]
"""A file, and what was found of the answer in it; None where it holds none."""


def read_answers(files: Sequence[str]) -> list[GivenAnswer]:
    """Read answers; one that cannot be read is named, and the others go on."""
    return [_read(file) for file in files]


def _read(file: str) -> GivenAnswer:
    try:
        return GivenAnswer(file, Attestation.parse(read_file(file, limit=MAX_FILE), where=file))
    except SharesError as error:
        return GivenAnswer(file, None, error)


def who_answers(asked: Challenge, share_file: str | None, key_name: str | None) -> str:
    """Return the custodian's name from the share, wrapped or not, else from the party key, else the only one asked.

    Raises:
        ParameterError: none of them says it.
    """
    if share_file is not None:
        try:
            return parse_share(read_file(share_file, limit=MAX_FILE), where=share_file).custodian
        except SharesError:
            pass  # A share that cannot be read is for the answer to tell; here it only gives no name.
    if key_name in asked.custodians:
        return str(key_name)
    if len(asked.custodians) == 1:
        return asked.custodians[0]
    raise ParameterError(
        "it is not clear who answers", hint=f"give --custodian NAME, one of {', '.join(asked.custodians)}"
    )


def asked_lines(asked: Challenge, *, is_trusted: bool) -> list[str]:
    """Say who asks whom for what."""
    trust = "trusted" if is_trusted else "compare it with the one you know; --trust CARD does"
    return [
        f"Challenge by {asked.card.name}, card {asked.card.fingerprint} ({trust})",
        f"  made {clock.to_text(asked.created)}, fingerprint {asked.fingerprint}",
        f"  about {asked.label}, epoch {asked.epoch}, record {asked.record}",
        *(f"  {line}" for line in prose(f"{asked.words()}.")),
    ]


def answer_members(made: Attestation, asked: Challenge, target: str) -> dict[str, object]:
    """Return an answer as one JSON object."""
    return {
        "done": made.is_good,
        "exit": 0 if made.is_good else VERIFICATION,
        "file": target,
        **made.public("custodian", "grade", "result", "carrier", "opened", "time"),
        "challenge": made.challenge.hex(),
        "journal": made.journal.model_dump() if made.journal else None,
        "asker": asked.card.public("name", "fingerprint"),
        "signed_by_share": made.share_signature is not None,
        "card": made.card.fingerprint if made.card else None,
        "late": made.time > asked.due,
    }


def answer_lines(made: Attestation, asked: Challenge, target: str) -> list[str]:
    """Tell a custodian what was answered, and what to do."""
    signers = [
        *(["the share"] if made.share_signature is not None else []),
        *([f"{made.card.name}, card {made.card.fingerprint}"] if made.card else []),
    ]
    lines = [
        f"Answered for {made.custodian}: {made.result}. Written to {target}",
        f"Signed by {' and by '.join(signers)}.",
    ]
    if made.time > asked.due:
        lines.append(f"It is late: due was {clock.to_text(asked.due)}.")
    if made.card is None:
        lines += prose(UNATTRIBUTED)
    if made.journal is not None:
        note = "keep a copy, and an audit can see by it that the journal was not rewritten since."
        lines += prose(f"It says where the journal of the set stood, {made.journal.words()}: {note}")
    if made.result == "seal intact":
        lines += prose(sealed_counts(None))
    lines += prose(NEXT.get(made.result, WHAT_IT_IS))
    if made.carrier == "paper":
        lines += prose("Destroy the file that was typed from paper; seal the sheet again, and note the new serial.")
    return lines


def sealed_counts(policy: Policy | None) -> str:
    """Say what an answer about a closed pack is worth, and for how long.

    Args:
        policy: the set's, where it is at hand.
    """
    if policy is None:
        return SEALED_COUNTS.format("365 days", "the policy may say otherwise, with content_every")
    return SEALED_COUNTS.format(f"{policy.content_every.days} days", "content_every in the policy")


def check_code(told: Sequence[Told], *, whole: bool) -> int:
    """Return the exit code: 0 where all is well, 5 where nothing is wrong but a file that cannot be read, else 4."""
    problems = {_is_unread(given) for given, found in told if not (found and _is_good(found))}
    if not whole or False in problems:
        return VERIFICATION
    return STORAGE if problems else 0


def _is_unread(given: GivenAnswer) -> bool:
    return isinstance(given.problem, StorageError)


def _is_good(found: Entered) -> bool:
    judgement = found.judgement
    return judgement.accepted and judgement.attributed and judgement.whole


def check_members(told: Sequence[Told], asked: Challenge, silent: Sequence[str], code: int) -> dict[str, object]:
    """Return what was found of the answers as one JSON object."""
    return {
        "done": code == 0,
        "exit": code,
        "challenge": asked.digest().hex(),
        "due": clock.to_text(asked.due),
        "answers": [_member(given, found) for given, found in told],
        "silent": list(silent),
    }


def _member(given: GivenAnswer, found: Entered | None) -> dict[str, object]:
    if found is None:
        return {"file": given.file, "accepted": False, "unreadable": given.problem.what if given.problem else None}
    judgement = found.judgement
    return {
        "file": given.file,
        "custodian": judgement.custodian,
        "grade": judgement.grade,
        "result": judgement.result,
        "accepted": judgement.accepted,
        "attributed": judgement.attributed,
        "late": judgement.late,
        "counts": judgement.counts,
        "entry": found.entry.sequence if found.entry else None,
        "problems": [{"flaw": problem.flaw.value, "what": problem.what} for problem in judgement.problems],
    }


def check_lines(
    told: Sequence[Told], asked: Challenge, silent: Sequence[str], *, entered: bool, policy: Policy | None
) -> list[str]:
    """Tell what was found of each answer, who is silent, and what it all proves."""
    lines = [_line(given, found) for given, found in told]
    counting = sum(found is not None and found.judgement.counts for _, found in told)
    if asked.purpose == "attendance":
        there = len(asked.custodians) - len(silent)
        lines.append(f"{there} of {len(asked.custodians)} who were asked have answered.")
    else:
        lines.append(f"{counting} of {len(told)} count toward the margin of {asked.label}.")
    if any(found and _is_sealed(found.judgement) for _, found in told):
        lines += prose(sealed_counts(policy))
    for _, found in told:
        if found and {Flaw.ANSWERED, Flaw.NOT_WHOLE} <= found.judgement.flaws:
            name = found.judgement.custodian
            lines += prose(INCIDENT.format(name, found.judgement.result, shlex.quote(name)))
    if silent:
        lines += prose(f"Still silent: {', '.join(silent)}; due is {clock.to_text(asked.due)}. {SILENCE}")
    else:
        lines.append("All who were asked have answered.")
    if counting:
        lines += prose(PROVES)
    if not entered:
        lines.append("Nothing was entered: --set SET files and enters them.")
    return lines


def _is_sealed(judgement: Judgement) -> bool:
    return judgement.accepted and judgement.attributed and judgement.grade == "sealed" and judgement.whole


def _line(given: GivenAnswer, found: Entered | None) -> str:
    if found is None:
        return f"{given.file}: unreadable - {given.problem.what if given.problem else 'nothing is in it'}"
    judgement = found.judgement
    if not judgement.accepted:
        verdict = "refused"
    elif judgement.grade == "present":
        verdict = "answered"
    elif judgement.counts:
        verdict = f"{judgement.result}, counts"
    elif _is_sealed(judgement):
        verdict = f"{judgement.result}, attributed, counts beside an earlier proof of content"
    else:
        verdict = f"{judgement.result}, {'attributed' if judgement.attributed else 'unattributed'}, does not count"
    why = "; ".join(problem.what for problem in judgement.problems)
    entry = f" (entry {found.entry.sequence})" if found.entry else ""
    return f"{given.file} ({judgement.custodian}): {verdict}{entry}{f' - {why}' if why else ''}"
