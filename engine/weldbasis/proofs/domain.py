"""Where a rule can give a value: a union of boxes, cut out of the vocabulary by the rule's own conditions.

Nothing is known here of how quantities depend on each other; every combination inside a box counts as possible.
Ends are open where the rule leaves them out. The boxes are exact for every condition the language of rules has.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace

from weldbasis.formula import Formula
from weldbasis.kinds.compiled import BoundRead, Compiled
from weldbasis.kinds.condition import Condition, Test
from weldbasis.kinds.gather import Gather
from weldbasis.kinds.governing import Governing
from weldbasis.knowledge import Quantity
from weldbasis.proofs.finding import VetFinding
from weldbasis.ranges import Range, common

_DIGITS = 12  # a converted end is rounded to this many, so that 50.8 mm is 2 in and no sliver more


@dataclass(frozen=True)
class Box:
    """One box of a rule's domain: ranges and bits of levels by quantity id, and what must be absent in it.

    A quantity that is not named takes all that the vocabulary allows.
    """

    ranges: Mapping[str, Range] = field(default_factory=dict)
    levels: Mapping[str, int] = field(default_factory=dict)
    absent: frozenset[str] = frozenset()
    present: frozenset[str] = frozenset()

    def range_of(self, quantity: Quantity) -> Range:
        """The numbers the box leaves a quantity."""
        return self.ranges.get(quantity.id, quantity.range)

    def levels_of(self, quantity: Quantity) -> int:
        """The levels the box leaves a quantity, as bits."""
        return self.levels.get(quantity.id, (1 << len(quantity.order)) - 1)


def domain_of(compiled: Compiled, reach: Mapping[str, Range] | None = None) -> tuple[Box, ...]:
    """The boxes in which the rule holds and everything it reads is there; none where it can never hold.

    `reach` narrows what the vocabulary allows the quantities read.
    """
    reads = frozenset(read.quantity.id for read in compiled.reads)
    start = Box({name: span for name, span in (reach or {}).items() if name in reads}, present=reads)
    boxes = [box for first in boxes_of(compiled.applies, start) for box in boxes_of(compiled.valid, first)]
    return _different(boxes)


def _different(boxes: list[Box]) -> tuple[Box, ...]:
    found: list[Box] = []
    for box in boxes:
        if box not in found:
            found.append(box)
    return tuple(found)


def boxes_of(condition: Condition, box: Box) -> Iterator[Box]:
    """The parts of a box in which a condition holds."""
    inside: Box | None = box
    for test in condition.tests:
        inside = inside and _cut(inside, test)
    if inside is None:
        return
    if not condition.any_of:
        yield inside
    for part in condition.any_of:
        yield from boxes_of(part, inside)


def _cut(box: Box, test: Test) -> Box | None:
    """The part of a box in which one test holds; None where there is none."""
    name = test.quantity.id
    if test.there == "absent":
        return None if name in box.present else replace(box, absent=box.absent | {name})
    if name in box.absent:
        return None
    box = replace(box, present=box.present | {name})
    if test.there == "present":
        return box
    if test.quantity.is_number:
        left = common(box.range_of(test.quantity), test.range)
        return None if left is None else replace(box, ranges={**box.ranges, name: left})
    bits = box.levels_of(test.quantity) & test.mask
    return replace(box, levels={**box.levels, name: bits}) if bits else None


def body_range(box: Box, read: BoundRead) -> Range:
    """What a box leaves a number, in the unit of the rule's body."""
    inside = box.range_of(read.quantity)
    if not read.converts:
        return inside
    low, high = (_rounded(read.factor * end + read.offset) for end in (inside.low, inside.high))
    return Range(low, high, inside.low_open, inside.high_open)


def _rounded(number: float) -> float:
    return float(f"{number:.{_DIGITS}g}") if math.isfinite(number) else number


def formula_ends(compiled: Compiled, formula: Formula, box: Box) -> tuple[dict[str, float], dict[str, float]]:
    """The least and greatest number a box leaves each name of a formula, in the units of the rule's body."""
    low, high = {}, {}
    for read in compiled.reads:
        if read.name in formula.names:
            span = body_range(box, read)
            low[read.name] = math.nextafter(span.low, math.inf) if span.low_open else span.low
            high[read.name] = math.nextafter(span.high, -math.inf) if span.high_open else span.high
    return low, high


def never_applies(compiled: Compiled, boxes: tuple[Box, ...]) -> Iterator[VetFinding]:
    """A rule that can hold nowhere, and single demands that no value of the vocabulary meets."""
    rule = compiled.rule
    found = False
    for part, condition in (("applies_when", compiled.applies), ("valid_within", compiled.valid)):
        for test, path in _tests(condition, (part,)):
            if test.quantity.is_number and not test.there and common(test.quantity.range, test.range) is None:
                found = True
                yield VetFinding(
                    rule.place_of(*path),
                    "stop",
                    "vocabulary",
                    f"rule {rule.id}, {part}: {test.quantity.id} {test.range} lies outside the vocabulary's "
                    f"{test.quantity.range} {test.quantity.unit}".rstrip(),
                    f"write the limit in {test.quantity.unit or 'the unit of the vocabulary'}",
                )
    for path, condition in _own_conditions(compiled):
        if not any(boxes_of(condition, Box())):
            yield VetFinding(
                rule.place_of(*path),
                "caution",
                "vocabulary",
                f"rule {rule.id}: what {' '.join(str(step) for step in path)} asks for can never be",
                "mend the condition, or take it out",
            )
    if not boxes and not found:
        yield VetFinding(
            rule.place_of("valid_within") if rule.valid_within else rule.place_of("applies_when"),
            "stop",
            "vocabulary",
            f"rule {rule.id} can hold nowhere: no values meet applies_when and valid_within together",
            "widen one of them, or take the rule out",
        )


def _own_conditions(compiled: Compiled) -> Iterator[tuple[tuple[str | int, ...], Condition]]:
    """Conditions inside a rule's body, with where they stand."""
    if isinstance(compiled.body, Governing):
        for place, choice in enumerate(compiled.body.choices):
            yield ("candidates", place, "when"), choice.when
    elif isinstance(compiled.body, Gather):
        yield ("where",), compiled.body.where


def _tests(condition: Condition, path: tuple[str | int, ...]) -> Iterator[tuple[Test, tuple[str | int, ...]]]:
    for test in condition.tests:
        yield test, (*path, test.quantity.id)
    for place, part in enumerate(condition.any_of):
        yield from _tests(part, (*path, "any_of", place))
