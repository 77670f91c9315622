"""How often shares are lost or leak and people are away: the rates that a policy may state, each with its unit.

Source: FORMAT.md, sec. 12.
May import: shares.errors, .base, .intervals, .members.
Secret: nothing. Public: nothing either: like all of a policy, rates are confidential.
Does not: know what a rate is where none is stated, or what follows from it (``planning`` does).
"""

from __future__ import annotations

import re
from collections.abc import Callable
from datetime import timedelta
from typing import Annotated

from pydantic import PlainValidator
from pydantic_core import PydanticCustomError

from shares.documents.base import Document
from shares.documents.intervals import Duration
from shares.documents.members import Text
from shares.errors import ParameterError

_NUMBER = r"([0-9]{1,3}(?:\.[0-9]{1,12})?)"


def parse_rate(text: str) -> float:
    """Return how probable something is within a year, as policies write it.

    Args:
        text: a percentage or a number below 1, and ``/y`` for 'in a year'.

    Returns:
        A probability: 0 or more, and below 1, as what is certain within a year has no rate.

    Raises:
        ParameterError: it is not written so, or not below 1.

    >>> parse_rate("4 %/y"), parse_rate("0.04/y")
    (0.04, 0.04)
    """
    form = re.fullmatch(_NUMBER + r" ?(%?) ?/ ?y", text)
    if form is None:
        raise ParameterError(
            'should be a rate with its unit, like "4 %/y" or "0.04/y": in plain digits, from 0 to below 100 %/y'
        )
    rate = float(form[1]) / (100 if form[2] else 1)
    if rate >= 1:
        raise ParameterError("should be below 100 %/y: it is the chance that this happens within a year")
    return rate


def parse_portion(text: str) -> float:
    """Return a part of a whole, as policies write it.

    Args:
        text: a percentage.

    Returns:
        A number from 0 to 1.

    Raises:
        ParameterError: it is not written so, or above 1.

    >>> parse_portion("10 %")
    0.1
    """
    form = re.fullmatch(_NUMBER + " ?%", text)
    if form is None:
        raise ParameterError('should be a percentage, like "10 %": in plain digits, from 0 to 100 %')
    portion = float(form[1]) / 100
    if portion > 1:
        raise ParameterError("should be at most 100 %")
    return portion


def parse_absence(text: str) -> float:
    """Return the part of days on which someone cannot be reached, as policies write it.

    Args:
        text: a percentage.

    Returns:
        A number: 0 or more, and below 1, as an absence without an end has no length.

    Raises:
        ParameterError: it is not written so, or not below 100 %.

    >>> parse_absence("10 %")
    0.1
    """
    portion = parse_portion(text)
    if portion == 1:
        raise ParameterError("should be below 100 %: leave out of the rule whoever can never be reached")
    return portion


def _read_by(parse: Callable[[str], float]) -> PlainValidator:
    def read(value: object) -> float:
        try:
            return parse(value if isinstance(value, str) else "")
        except ParameterError as error:
            reason = error.what
        raise PydanticCustomError("shares_rate", "{reason}", {"reason": reason})

    return PlainValidator(read)


Rate = Annotated[float, _read_by(parse_rate)]
Portion = Annotated[float, _read_by(parse_portion)]
Absence = Annotated[float, _read_by(parse_absence)]


class Rates(Document):
    """What holds for every custodian who states nothing else, and for the mending of losses.

    Attributes:
        loss: how probably a share is lost or unreadable within a year.
        leak: how probably a custodian's share comes to be known to someone who must not know it.
        departure: how probably a custodian leaves within a year.
        handed_on: of departures, the part in which the share is handed on, its seal whole. Else it is lost, and out.
        absent: the part of days on which a custodian cannot be reached.
        absent_for: how long an absence lasts on the average.
        repair_after: how long after an attestation the shares found lost are made good.
    """

    loss: Rate | None = None
    leak: Rate | None = None
    departure: Rate | None = None
    handed_on: Portion | None = None
    absent: Absence | None = None
    absent_for: Duration | None = None
    repair_after: Duration = timedelta(days=14)


class CommonRates(Document):
    """What befalls everyone at one site, of one reporting line or with one kind of medium, all at once.

    Attributes:
        name: the site, manager or medium, as the custodians name it.
        loss, leak: how probably all of these shares are lost, or known, within a year.
        absent: the part of days on which none of them can be had.
    """

    name: Text
    loss: Rate | None = None
    leak: Rate | None = None
    absent: Absence | None = None
