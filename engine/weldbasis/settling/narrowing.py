"""How far knowing something narrows a decision, and the words for what is left."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from weldbasis.knowledge import Quantity
from weldbasis.trace import Ref, Value
from weldbasis.words import levels_text, range_text, with_unit

ANALYSIS = "analysis"


@dataclass(frozen=True)
class Case:
    """What the decision would be where an input is found to lie in a part of its set."""

    found: Value
    outcome: Value


@dataclass(frozen=True)
class Narrowing:
    """How far knowing one input, or a pair, would narrow a decision: what is left at worst, and if that settles it.

    A ref may name `ANALYSIS` in place of a quantity: all elements of a steel known together. `now` is what is known
    of each. `cases` are, of a number, the part of its range that asks least and the rest, of a category its levels;
    none where the decision does not turn on it.
    """

    refs: tuple[Ref, ...]
    now: tuple[Value, ...]
    left: str
    settles: bool
    share: float
    cases: tuple[Case, ...] = ()

    @property
    def ref(self) -> Ref:
        """The first, or only, input."""
        return self.refs[0]


def share_left(end: Value, now: Value) -> float:
    """How much of the set is left: width against width, or count against count; doubt of presence counts as a step."""
    doubt = 1.0 if end.presence == "maybe" else 0.0
    doubt_now = 1.0 if now.presence == "maybe" else 0.0
    if end.presence == "absent":
        return 0.0
    if end.low is None or end.high is None or now.low is None or now.high is None:
        return (len(end.any_of) - 1 + doubt) / max(len(now.any_of) - 1 + doubt_now, 1.0)
    width = now.high - now.low
    left = (end.high - end.low) / width if width > 0 else 0.0
    return (left + doubt) / (1.0 + doubt_now) if doubt_now or doubt else left


def left_in_words(decision: Quantity, ends: Sequence[Value]) -> str:
    """The widest set that is left, in words."""
    there = [end for end in ends if end.presence != "absent"]
    if not there:
        return "no rule that covers it"
    widest = max(there, key=lambda end: (len(end.any_of), (end.high or 0) - (end.low or 0)))
    doubt = " or no rule that covers it" if any(end.presence != "present" for end in ends) else ""
    if widest.low is None or widest.high is None:
        return levels_text(decision, widest.any_of) + doubt
    return with_unit(range_text(widest.low, widest.high, decision.decimals), decision.unit) + doubt
