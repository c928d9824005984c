"""A rule made ready: its conditions, its reads in the units of its body, and what every kind has in common."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from weldbasis.kinds.condition import Condition, bounds_on, compile_condition, judge, quantities_in
from weldbasis.kinds.view import View
from weldbasis.knowledge import Knowledge, Quantity, Rule
from weldbasis.problem import Problem, Refused
from weldbasis.trace import Candidate
from weldbasis.units import conversion
from weldbasis.values import (
    Bytes,
    Column,
    Floats,
    Levels,
    Numbers,
    Truth,
    is_point,
    is_there,
)


@dataclass(frozen=True)
class BoundRead:
    """A name of a rule's body bound to a quantity; body value = factor × vocabulary value + offset."""

    name: str
    quantity: Quantity
    factor: float = 1.0
    offset: float = 0.0

    @property
    def converts(self) -> bool:
        """Whether the body takes the quantity in another unit than the vocabulary's."""
        return self.factor != 1.0 or self.offset != 0.0


@dataclass(frozen=True)
class Compiled:
    """A rule with its conditions and reads resolved; `body` belongs to the kind.

    A result converts by `gives_factor` and `gives_offset` from the body's unit to the vocabulary's.
    """

    rule: Rule
    applies: Condition
    valid: Condition
    reads: tuple[BoundRead, ...]
    gives: tuple[Quantity, ...]
    body: Any
    body_quantities: tuple[str, ...] = ()
    gives_factor: float = 1.0
    gives_offset: float = 0.0

    @cached_property
    def inputs(self) -> tuple[str, ...]:
        """Every quantity that bears on the result, once each, in order of mention."""
        names = [read.quantity.id for read in self.reads] + list(self.body_quantities)
        names += [*quantities_in(self.applies), *quantities_in(self.valid)]
        return tuple(dict.fromkeys(names))


@dataclass(frozen=True)
class Explanation:
    """What a kind has to say of one row: the arithmetic or the rows used, and what it chose from."""

    figures: str = ""
    candidates: tuple[Candidate, ...] = ()


@dataclass(frozen=True)
class Kind:
    """A rule kind: how its body is compiled, evaluated on columns, and explained for one row.

    `evaluate` returns a column for each quantity the rule gives; a limit returns none and is judged by
    `violated` instead.
    """

    name: str
    compile: Callable[[Rule, Knowledge], Compiled]
    evaluate: Callable[[Compiled, View], Mapping[str, Column]]
    explain: Callable[[Compiled, View, int], Explanation]


def compile_common(rule: Rule, knowledge: Knowledge, body: Any, body_quantities: tuple[str, ...] = ()) -> Compiled:
    """Resolve what all kinds share. Raises Refused with every problem found."""
    problems: list[Problem] = []
    conditions: dict[str, Condition] = {}
    for part in ("applies_when", "valid_within"):
        try:
            conditions[part] = compile_condition(getattr(rule, part), knowledge)
        except (ValueError, KeyError) as fault:
            problems.append(Problem(rule.place_of(part), f"{part} of rule {rule.id}: {fault}"))
    reads = []
    for read in rule.reads:
        quantity = knowledge.quantities[read.quantity]
        try:
            factor, offset = conversion(quantity.unit, read.unit) if read.unit else (1.0, 0.0)
            reads.append(BoundRead(read.name, quantity, factor, offset))
        except ValueError as fault:
            problems.append(Problem(rule.place_of("reads", read.name), f"{read.name} of rule {rule.id}: {fault}"))
    gives = tuple(knowledge.quantities[name] for name in rule.gives)
    factor, offset = 1.0, 0.0
    if rule.gives_unit:
        try:
            factor, offset = conversion(rule.gives_unit, gives[0].unit)
        except ValueError as fault:
            problems.append(Problem(rule.place_of("gives_unit"), f"gives_unit of rule {rule.id}: {fault}"))
    if problems:
        raise Refused(problems)
    applies, valid = conditions["applies_when"], conditions["valid_within"]
    return Compiled(rule, applies, valid, tuple(reads), gives, body, body_quantities, factor, offset)


def refuse(rule: Rule, message: str, *path: str | int, do: str = "") -> Refused:
    """The error for a body that cannot mean anything, placed at a part of the rule's file."""
    return Refused([Problem(rule.place_of(*path), f"rule {rule.id}: {message}", do=do)])


def gate(compiled: Compiled, view: View, needs: tuple[str, ...] = ()) -> Truth:
    """Whether the rule may and surely does give a value: it applies, is valid, and all it needs is there."""
    return view.once(("gate", compiled.rule.id, needs), lambda: _gate(compiled, view, needs))


def _gate(compiled: Compiled, view: View, needs: tuple[str, ...]) -> Truth:
    truth = Truth(view.all_true, view.all_true)
    if compiled.applies:
        truth = truth & judge(compiled.applies, view)
    if compiled.valid:
        truth = truth & judge(compiled.valid, view)
    for quantity in dict.fromkeys(needs):
        truth = truth & is_there(view.column(quantity))
    return truth


def read_range(compiled: Compiled, read: BoundRead, view: View, there: Truth) -> tuple[Floats, Floats]:
    """Low and high of a read in the body's unit.

    Where the rule only may hold, the set is first cut to the part in which it does hold, so that the
    result is no wider than the rule allows.
    """
    return view.once(("read", compiled.rule.id, read.name, id(there)), lambda: _read_range(compiled, read, view, there))


def _read_range(compiled: Compiled, read: BoundRead, view: View, there: Truth) -> tuple[Floats, Floats]:
    column = view.column(read.quantity.id)
    assert isinstance(column, Numbers), f"{read.quantity.id} is no number"
    low, high = column.low, column.high
    if not is_point(column) and not bool(there.surely.all()):
        for condition in (compiled.applies, compiled.valid):
            inside = bounds_on(condition, read.quantity.id)
            low, high = np.clip(low, inside.low, inside.high), np.clip(high, inside.low, inside.high)
    if read.converts:
        point = high is low
        low = read.factor * low + read.offset
        high = low if point else read.factor * high + read.offset
    return low, high


def flags_of(compiled: Compiled, view: View) -> Bytes:
    """The flags of everything that bears on the result, joined."""
    flags = np.zeros(view.rows, np.uint8)
    for quantity in compiled.inputs:
        flags |= view.column(quantity).flags
    return flags


def to_vocabulary(compiled: Compiled, low: Floats, high: Floats) -> tuple[Floats, Floats]:
    """A result converted from the body's unit to the vocabulary's."""
    factor, offset = compiled.gives_factor, compiled.gives_offset
    if factor == 1.0 and offset == 0.0:
        return low, high
    converted = factor * low + offset
    return converted, converted if high is low else factor * high + offset


def possible_levels(column: Column) -> Levels:
    """The column as levels; a wiring mistake otherwise."""
    assert isinstance(column, Levels)
    return column


def possible_numbers(column: Column) -> Numbers:
    """The column as numbers; a wiring mistake otherwise."""
    assert isinstance(column, Numbers)
    return column
