"""Ranges written as in ISO 80000-2: `[0.40, 0.45)`, `<= 20`, `> 38`, and plain numbers."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

_NUMBER = r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?"
_BRACKETS = re.compile(rf"([\[(])\s*({_NUMBER}|-inf)\s*,\s*({_NUMBER}|inf)\s*([\])])")
_COMPARISON = re.compile(rf"(<=|>=|<|>|≤|≥)\s*({_NUMBER})")

# Relative. A number this near to a limit stands at it: the last bits of arithmetic decide nothing.
ROUNDING = 1e-12


@dataclass(frozen=True, order=True)
class Range:
    """All numbers from `low` to `high`; an end marked open is itself left out."""

    low: float
    high: float
    low_open: bool = False
    high_open: bool = False

    def holds(self, number: float) -> bool:
        """Whether `number` lies in the range."""
        above = number > self.low if self.low_open else number >= self.low
        below = number < self.high if self.high_open else number <= self.high
        return above and below

    @property
    def least(self) -> float:
        """The least number that counts as inside, or, where the lower end is open, the greatest that does not."""
        return _moved(self.low, ROUNDING if self.low_open else -ROUNDING)

    @property
    def most(self) -> float:
        """The greatest number that counts as inside, or, where the upper end is open, the least that does not."""
        return _moved(self.high, -ROUNDING if self.high_open else ROUNDING)

    def __str__(self) -> str:
        if self.low == self.high:
            return f"{self.low:g}"
        if self.low == -math.inf:
            return f"{'<' if self.high_open else '<='} {self.high:g}"
        if self.high == math.inf:
            return f"{'>' if self.low_open else '>='} {self.low:g}"
        left, right = "(" if self.low_open else "[", ")" if self.high_open else "]"
        return f"{left}{self.low:g}, {self.high:g}{right}"


def _moved(end: float, share: float) -> float:
    return end + share * abs(end) if math.isfinite(end) else end


EVERYTHING = Range(-math.inf, math.inf, True, True)


def parse_range(text: str | float | int) -> Range:
    """Read a range.

    Raises ValueError, with a message fit for a user, where the text is no range or holds nothing.
    """
    if isinstance(text, bool):
        raise ValueError(f"{text} is no range; write one like '[0.40, 0.45)', '<= 20' or '> 38'")
    if isinstance(text, int | float):
        return Range(float(text), float(text))
    word = text.strip()
    if match := _BRACKETS.fullmatch(word):
        left, low, high, right = match.groups()
        found = Range(float(low), float(high), left == "(", right == ")")
        if found.low > found.high or (found.low == found.high and (found.low_open or found.high_open)):
            raise ValueError(f"the range {word!r} holds no number; its lower end comes first")
        return found
    if match := _COMPARISON.fullmatch(word):
        sign, number = match.group(1), float(match.group(2))
        if sign in ("<=", "<", "≤"):
            return Range(-math.inf, number, True, sign == "<")
        return Range(number, math.inf, sign == ">", True)
    if re.fullmatch(_NUMBER, word):
        return Range(float(word), float(word))
    raise ValueError(f"{word!r} is no range; write one like '[0.40, 0.45)', '<= 20' or '> 38'")


def common(one: Range, other: Range) -> Range | None:
    """The numbers that lie in both ranges; None where there are none."""
    low, low_open = max((one.low, one.low_open), (other.low, other.low_open))
    high, high_closed = min((one.high, not one.high_open), (other.high, not other.high_open))
    if low > high or (low == high and (low_open or not high_closed)):
        return None
    return Range(low, high, low_open, not high_closed)


def within(inner: Range, outer: Range) -> bool:
    """Whether every number of `inner` lies in `outer`."""
    return common(inner, outer) == inner
