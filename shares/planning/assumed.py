"""What is assumed of losses, leaks and absences where a policy states nothing: the numbers, and why they are these.

They are starting points to be replaced by an organisation's own. Chances are within a year; where no source is given
there is none, and the number is common practice or a guess that is said to be one.

Source: the 5 % of shares a year that planning arithmetic commonly takes as lost unnoticed; else
``reason`` says.
May import: nothing of this package.
Secret: nothing. Public: everything.
Does not: know a policy; ``model`` takes from here what a policy leaves open.
"""

from __future__ import annotations

from typing import Final, Literal, NamedTuple, TypeAlias

Kind: TypeAlias = Literal["share", "person", "site", "line", "medium"]


class Assumed(NamedTuple):
    """Rates of one kind of event, and why.

    Attributes:
        loss, leak: chances within a year, 0 to 1.
        absent: the part of days, 0 to 1.
        reason: why, in one sentence or two.
    """

    loss: float
    leak: float
    absent: float
    reason: str


SHARE_LOSS: Final = 0.04
"""One share mislaid, thrown away or unreadable. With departures it makes the 5 % a year of planning arithmetic."""

SHARE_LOSS_ON: Final = {"paper": 0.03, "safe": 0.02, "stick": 0.06, "card": 0.04}
"""The same by medium, where it is one of these: a sheet; a sheet in a locked safe; flash memory, which forgets without
power; a chip card. Guesses around 4 %, in the order in which archivists trust these."""

DEPARTURE: Final = 0.10
HANDED_ON: Final = 0.90
ABSENT_FOR: Final = 7.0

PERSON: Final = Assumed(
    0.0,
    0.01,
    0.10,
    "Of 100 custodians one a year tells, copies or is made to give up a share (a guess); 10 % leave within a year "
    "(common turnover), and one leaver in ten takes the share along, which loses and leaks it; 25 days of leave and 10 "
    "of illness make 10 % of days away, a week at a time.",
)
SITE: Final = Assumed(
    0.002,
    0.002,
    0.005,
    "Fire or flood, and a break-in that takes all, once in 500 years each (guesses); closed two days a year.",
)
LINE: Final = Assumed(
    0.001,
    0.002,
    0.0,
    "One order, or the end of a whole department, destroys or gathers all shares of a line once in 1,000 and 500 years "
    "(guesses).",
)
MEDIUM: Final = Assumed(0.0, 0.0, 0.0, "Sheets do not fail together.")
MEDIUM_OF_ONE_MAKE: Final = Assumed(
    0.002, 0.0, 0.0, "Sticks and cards bought together fail together once in 500 years (a guess)."
)
OF_ONE_MAKE: Final = frozenset({"stick", "card"})
