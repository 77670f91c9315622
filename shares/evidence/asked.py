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
    for entry in life.entries:
        match entry.event:
            case Dealt():
                asked.clear()
                passed.clear()
            case Challenged(drill=None) as event:
                _end(asked, event.custodians, passed, entry.time)
                asked[event.challenge] = Asked(entry.sequence, event.due, dict.fromkeys(event.custodians))
            case Attested() as event if event.challenge in asked:
                asked[event.challenge].silent.pop(event.custodian, None)
            case Departed() as event:
                _end(asked, event.custodians, passed, entry.time)
    return list(asked.values()), passed


def _end(asked: dict[bytes, Asked], names: tuple[str, ...], passed: dict[str, list[datetime]], time: datetime) -> None:
    """Let earlier challenges be answered no more by these; what was due by then has passed in silence."""
    for one in asked.values():
        for name in names:
            if name in one.silent and one.due < time:
                passed.setdefault(name, []).append(one.due)
            one.silent.pop(name, None)
