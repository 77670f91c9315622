"""Who was asked to attest and did not answer: what is still to be answered, and what passed in silence.

The latest challenge is the one to answer: whoever is asked anew owes nothing for the one before.

Source: trade practice: silence is no consent, and is told.
May import: shares.documents, shares.evidence.life.
Secret: nothing. Confidential: the answers. Public: nothing.
Does not: look at answers: an entry that tells of one is an answer, whatever it proves. Attendance in drills is theirs.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from shares.documents.event import Attested, Challenged, Dealt, Departed
from shares.evidence.life import Life


@dataclass(slots=True, eq=False)
class Asked:
    """A challenge, and who has not answered it.

    Attributes:
        number: of its entry.
        due: until when answers were asked for.
        silent: those asked who have neither answered nor left, nor were asked anew.
    """

    number: int
    due: datetime
    silent: dict[str, None]


def still_asked(life: Life) -> list[Asked]:
    """Return the challenges with those who have neither answered them nor later ones.

    Args:
        life: of the set, up to the time of the audit.
    """
    return _walked(life)[0]


def unanswered(life: Life) -> dict[str, tuple[datetime, ...]]:
    """Return when each custodian's challenges were due that passed without an answer.

    Args:
        life: of the set, up to the time of the audit.
    """
    asked, passed = _walked(life)
    for one in asked:
        if one.due < life.at:
            for name in one.silent:
                passed.setdefault(name, []).append(one.due)
    return {name: tuple(sorted(times)) for name, times in passed.items()}


def _walked(life: Life) -> tuple[list[Asked], dict[str, list[datetime]]]:
    asked: dict[bytes, Asked] = {}
    passed: dict[str, list[datetime]] = {}
    # What each custodian is still to answer: one challenge at most, so that many of them are walked through quickly.
    waiting: dict[str, Asked] = {}

    def end(names: tuple[str, ...], time: datetime) -> None:
        """Let earlier challenges be answered no more by these; what was due by then has passed in silence."""
        for name in names:
            one = waiting.pop(name, None)
            if one is not None and name in one.silent:
                if one.due < time:
                    passed.setdefault(name, []).append(one.due)
                del one.silent[name]

    for entry in life.entries:
        match entry.event:
            case Dealt():
                asked.clear()
                passed.clear()
                waiting.clear()
            case Challenged(drill=None) as event:
                end(event.custodians, entry.time)
                one = Asked(entry.sequence, event.due, dict.fromkeys(event.custodians))
                asked[event.challenge] = one
                waiting |= dict.fromkeys(event.custodians, one)
            case Attested() as event if event.challenge in asked:
                asked[event.challenge].silent.pop(event.custodian, None)
            case Departed():
                end(life.leaving[entry.sequence], entry.time)
    return list(asked.values()), passed
