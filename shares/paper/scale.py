"""Axes of charts: where a number lies on the paper, and which marks tell how to read it.

Source: W. S. Cleveland, "The Elements of Graphing Data", 1985 (from memory: chances that span powers of ten are read on
a logarithmic scale, and few round marks are enough).
May import: nothing of this package.
Secret: nothing. Public: numbers.
Does not: draw: templates do, from plain numbers.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass

_FEW_DECADES = 2
_SEVERAL_DECADES = 7


@dataclass(frozen=True, slots=True)
class Tick:
    """A mark on an axis: where, and what it says."""

    at: float
    text: str


@dataclass(frozen=True, slots=True)
class LogScale:
    """A logarithmic axis.

    Attributes:
        low, high: the numbers at its ends, above 0.
        start, end: where these lie.
    """

    low: float
    high: float
    start: float
    end: float

    @classmethod
    def around(cls, numbers: Iterable[float], *, least: float, start: float, end: float) -> LogScale:
        """Return an axis of whole decades around numbers. Where any lies below ``least``, the axis ends there, and what
        lies below is drawn at that end.

        >>> LogScale.around([0.02, 0.5], least=1e-6, start=0, end=100)
        LogScale(low=0.01, high=1.0, start=0, end=100)
        >>> LogScale.around([0.02, 0.5, 0.0], least=1e-6, start=0, end=100).low
        1e-06
        """
        seen = [max(number, least) for number in numbers]
        low = 10.0 ** math.floor(math.log10(min(seen, default=least)))
        high = 10.0 ** math.ceil(math.log10(max(seen, default=1.0)))
        if low >= high:
            low, high = (high / 10, high) if high >= 1 else (low, 10 * low)
        return cls(low, high, start, end)

    def at(self, number: float) -> float:
        """Return where a number lies, to a tenth of a unit; what is beyond an end lies there."""
        inside = min(max(number, self.low), self.high)
        part = math.log(inside / self.low) / math.log(self.high / self.low)
        return round(self.start + part * (self.end - self.start), 1)

    def ticks(self, words: Callable[[float], str]) -> tuple[Tick, ...]:
        """Return marks at powers of ten, at 2 and 5 times these too where there are few, at every other where many.

        Args:
            words: how a number is written.
        """
        first, last = round(math.log10(self.low)), round(math.log10(self.high))
        step = 1 if last - first <= _SEVERAL_DECADES else 2
        steps = (1, 2, 5) if last - first <= _FEW_DECADES else (1,)
        told = [steps_of * 10.0**power for power in range(last, first - 1, -step) for steps_of in steps]
        return tuple(Tick(self.at(one), words(one)) for one in sorted(told) if one <= self.high * (1 + 1e-9))
