"""Conditions over quantities (`applies_when`, `valid_within`, `where`, `when`): compiled, judged on sets, explained."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from weldbasis.kinds.view import View
from weldbasis.knowledge import Knowledge, Quantity
from weldbasis.ranges import EVERYTHING, Range, parse_range
from weldbasis.values import Levels, Numbers, Truth, is_there, levels_of, mask_of, may_be_at
from weldbasis.words import levels_text, number_text, range_text, with_unit


@dataclass(frozen=True)
class Test:
    """One demand on one quantity: a range for numbers, allowed levels as bits, or only to be there or not."""

    quantity: Quantity
    range: Range = EVERYTHING
    mask: int = 0
    there: Literal["", "present", "absent"] = ""


@dataclass(frozen=True)
class Condition:
    """Holds when every test holds and, where there are alternatives, at least one of them."""

    tests: tuple[Test, ...] = ()
    any_of: tuple[Condition, ...] = ()

    def __bool__(self) -> bool:
        return bool(self.tests or self.any_of)


def compile_test(quantity: Quantity, wanted: Any) -> Test:
    """One entry of a condition; ValueError says what a reader should write instead."""
    if wanted in ("present", "absent"):
        return Test(quantity, there=wanted)
    if quantity.is_number:
        return Test(quantity, range=parse_range(wanted))
    levels = wanted if isinstance(wanted, list | tuple) else [wanted]
    unknown = [level for level in levels if level not in quantity.order]
    if unknown:
        raise ValueError(f"{unknown[0]!r} is no level of {quantity.id}; its levels are {', '.join(quantity.order)}")
    return Test(quantity, mask=mask_of(levels, quantity.order))


def compile_condition(written: Mapping[str, Any], knowledge: Knowledge) -> Condition:
    """A condition as written, ready to be judged; ValueError or KeyError where it does not fit the vocabulary."""
    alternatives = tuple(compile_condition(part, knowledge) for part in written.get("any_of", ()))
    tests = tuple(
        compile_test(knowledge.quantities[name], wanted) for name, wanted in written.items() if name != "any_of"
    )
    return Condition(tests, alternatives)


def quantities_in(condition: Condition) -> Iterator[str]:
    """The ids of all quantities the condition looks at, in order, repeats and all."""
    for test in condition.tests:
        yield test.quantity.id
    for part in condition.any_of:
        yield from quantities_in(part)


def judge(condition: Condition, view: View) -> Truth:
    """Whether the condition may and surely does hold, row by row."""
    truth = Truth(view.all_true, view.all_true)
    for test in condition.tests:
        truth = truth & judge_test(test, view)
    if condition.any_of:
        alternatives = [judge(part, view) for part in condition.any_of]
        either = alternatives[0]
        for other in alternatives[1:]:
            either = either | other
        truth = truth & either
    return truth


def judge_test(test: Test, view: View) -> Truth:
    """Whether one demand may and surely does hold; a value that is absent meets none but `absent`."""
    column = view.column(test.quantity.id)
    there = is_there(column)
    if test.there == "absent":
        return Truth(~there.surely, ~there.may)
    if test.there == "present":
        return there
    return there & _inside(test, column)


def _inside(test: Test, column: Numbers | Levels) -> Truth:
    if isinstance(column, Levels):
        wanted = np.uint64(test.mask)
        return Truth((column.mask & wanted) != 0, (column.mask & ~wanted) == 0)
    wide, least, most = test.range, test.range.least, test.range.most
    above = column.low > least if wide.low_open else column.low >= least
    below = column.high < most if wide.high_open else column.high <= most
    surely = above & below
    if column.high is column.low:
        return Truth(surely, surely)
    reaches_up = column.high > least if wide.low_open else column.high >= least
    reaches_down = column.low < most if wide.high_open else column.low <= most
    return Truth(reaches_up & reaches_down, surely)


def bounds_on(condition: Condition, quantity: str) -> Range:
    """The range that the plain tests of a condition leave a quantity; ends are taken as closed."""
    low, high = -np.inf, np.inf
    for test in condition.tests:
        if test.quantity.id == quantity and test.quantity.is_number and not test.there:
            low, high = max(low, test.range.low), min(high, test.range.high)
    return Range(float(low), float(high))


def failures(condition: Condition, view: View, row: int) -> tuple[str, ...]:
    """For one row, a sentence for every demand that surely or possibly fails: the limit left, and by how much."""
    found = [failure(test, view, row) for test in condition.tests]
    if condition.any_of:
        truth = view.once(("any of", id(condition)), lambda: judge(Condition(any_of=condition.any_of), view))
        if not bool(truth.surely[row]):
            parts = [" and ".join(failures(part, view, row)) or "met" for part in condition.any_of]
            found.append("none of these is surely met: " + "; or ".join(parts))
    return tuple(text for text in found if text)


def failure(test: Test, view: View, row: int) -> str:
    """For one row, how a demand surely or possibly fails; empty where it surely holds."""
    truth = view.once(("test", id(test)), lambda: judge_test(test, view))
    if bool(truth.surely[row]):
        return ""
    quantity, column = test.quantity, view.column(test.quantity.id)
    title = quantity.title
    maybe = bool(truth.may[row])
    if test.there == "absent":
        return f"{title} is given" if not maybe else f"{title} may be given"
    if not may_be_at(column, row):
        return f"{title} is not known here"
    if test.there == "present":
        return f"{title} may be missing"
    if isinstance(column, Levels):
        have = levels_text(quantity, levels_of(int(column.mask[row]), quantity.order))
        want = levels_text(quantity, levels_of(test.mask, quantity.order))
        return f"{title} {'may not be' if maybe else 'is not'} {want}: it is {have}"
    return _range_failure(test, float(column.low[row]), float(column.high[row]), maybe)


def _range_failure(test: Test, low: float, high: float, maybe: bool) -> str:
    quantity, wanted = test.quantity, test.range
    have = with_unit(range_text(low, high, quantity.decimals), quantity.unit)
    over, under = high - wanted.high, wanted.low - low
    side, by = ("above", over) if over >= under else ("below", under)
    amount = with_unit(number_text(max(by, 0.0), quantity.decimals), quantity.unit)
    verb = "may lie" if maybe else "lies"
    tail = f" by {'up to ' if maybe else ''}{amount}" if by > 0 else " (the limit itself is left out)"
    return f"{quantity.title} {have} {verb} {side} the limit {wanted}{tail}"
