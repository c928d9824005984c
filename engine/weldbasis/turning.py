"""Where rules change over: the figures of every number at which some condition or row of a table begins or ends."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping

import numpy as np

from weldbasis.kinds import Compiled
from weldbasis.kinds.condition import Condition
from weldbasis.kinds.gather import Gather
from weldbasis.kinds.governing import Governing
from weldbasis.kinds.table import Table
from weldbasis.knowledge import Quantity
from weldbasis.ranges import Range
from weldbasis.values import Floats


def turning_figures(rules: Iterable[Compiled]) -> Mapping[str, Floats]:
    """For every number the figures at which one of these rules changes over, within what the vocabulary allows."""
    return _gathered((quantity, figure) for rule in rules for quantity, figure, _ in _turns(rule))


def first_beyond(rules: Iterable[Compiled]) -> Mapping[str, Floats]:
    """For every number the first numbers on the upper side of each change; so `<= 0.32` gives what follows 0.32.

    Between two of them no condition on the number changes.
    """
    return _gathered((quantity, beyond) for rule in rules for quantity, _, beyond in _turns(rule))


def _gathered(found: Iterable[tuple[Quantity, float]]) -> Mapping[str, Floats]:
    figures: dict[str, set[float]] = {}
    for quantity, figure in found:
        if quantity.range.low <= figure <= quantity.range.high:
            figures.setdefault(quantity.id, set()).add(float(figure))
    return {name: np.array(sorted(some)) for name, some in sorted(figures.items())}


def _turns(rule: Compiled) -> Iterator[tuple[Quantity, float, float]]:
    """Number, figure, and the first number beyond the change there."""
    yield from _in_condition(rule.applies)
    yield from _in_condition(rule.valid)
    if isinstance(rule.body, Governing):
        for choice in rule.body.choices:
            yield from _in_condition(choice.when)
    if isinstance(rule.body, Gather):
        yield from _in_condition(rule.body.where)
    if isinstance(rule.body, Table):
        yield from _in_table(rule, rule.body)


def _in_condition(condition: Condition) -> Iterator[tuple[Quantity, float, float]]:
    for test in condition.tests:
        if test.quantity.is_number and not test.there:
            yield from _ends(test.quantity, test.range)
    for part in condition.any_of:
        yield from _in_condition(part)


def _ends(quantity: Quantity, limits: Range) -> Iterator[tuple[Quantity, float, float]]:
    if np.isfinite(limits.low):
        yield quantity, limits.low, _next(limits.least) if limits.low_open else limits.least
    if np.isfinite(limits.high):
        yield quantity, limits.high, limits.most if limits.high_open else _next(limits.most)


def _in_table(rule: Compiled, table: Table) -> Iterator[tuple[Quantity, float, float]]:
    for place, (axis, read) in enumerate(zip(table.axes, rule.reads, strict=False)):
        for number, cut in enumerate(axis.cuts):
            figure = float((cut - read.offset) / read.factor)
            below, at, above = ([row[place][2 * number + step] for row in table.covers] for step in (0, 1, 2))
            if at != below:
                yield axis.quantity, figure, Range(figure, figure).least
            if at != above:
                yield axis.quantity, figure, _next(Range(figure, figure).most)
    if table.surface:
        along = table.surface.along
        for curve in table.surface.curves:
            for node in curve.at:
                figure = float((node - along.offset) / along.factor)
                yield along.quantity, figure, figure


def _next(figure: float) -> float:
    return float(np.nextafter(figure, np.inf))
