"""What if: joints decided again with some inputs pinned, all trials of all joints together as so many more joints."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import get_args

import numpy as np

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.facts import Facts, OriginKind
from weldbasis.graph import quantity_node
from weldbasis.knowledge import Quantity
from weldbasis.state import demand_of
from weldbasis.values import (
    PRESENT,
    Column,
    Floats,
    Ints,
    Levels,
    Numbers,
    absent_levels,
    absent_numbers,
)

_KINDS = get_args(OriginKind)
_WORTH_A_BATCH = 256
_AT_ONCE = 4096  # trials evaluated together: enough to be fast, few enough to be light


@dataclass(frozen=True)
class Pin:
    """A set that stands in for a quantity in some rows (of joints or of members, by the quantity's scope).

    A number takes `low` and `high`, a category the bits of `mask`.
    """

    quantity: str
    rows: tuple[int, ...]
    low: float = math.nan
    high: float = math.nan
    mask: int = 0


@dataclass(frozen=True)
class Trial:
    """One joint with some of its inputs pinned; a later pin of the same row counts before an earlier one."""

    joint: int
    pins: tuple[Pin, ...] = ()


def pin_to(quantity: Quantity, rows: tuple[int, ...], value: float | str) -> Pin:
    """A pin to one number, or to one level."""
    if isinstance(value, str):
        return Pin(quantity.id, rows, mask=1 << quantity.order.index(value))
    return Pin(quantity.id, rows, value, value)


def member_rows(evaluation: Evaluation, joint: int) -> range:
    """The rows of a joint's members."""
    starts = evaluation.views["joint"].starts
    last = int(starts[joint + 1]) if joint + 1 < len(starts) else len(evaluation.facts.members)
    return range(int(starts[joint]), last)


def outcomes(evaluation: Evaluation, trials: Sequence[Trial], wanted: Sequence[str]) -> Mapping[str, Column]:
    """The columns of the wanted quantities of joints, one row a trial."""
    parts: list[Mapping[str, Column]] = []
    order: list[int] = []
    for numbers in _batches(trials):
        outcome = decided_again(evaluation, [trials[number] for number in numbers], wanted)
        parts.append({name: outcome.columns[name] for name in wanted})
        order += numbers
    if not parts:
        return {}
    back = np.argsort(np.array(order, np.intp))
    return {name: _joined([part[name] for part in parts]).take(back) for name in wanted}


def _batches(trials: Sequence[Trial]) -> Iterator[list[int]]:
    """Trials by number, those that pin the same quantities together, for they leave the same rules untouched."""
    groups: dict[frozenset[str], list[int]] = {}
    for number, trial in enumerate(trials):
        groups.setdefault(frozenset(pin.quantity for pin in trial.pins), []).append(number)
    few: list[int] = []
    for numbers in groups.values():
        if len(numbers) < _WORTH_A_BATCH:
            few += numbers
            continue
        yield from (numbers[first : first + _AT_ONCE] for first in range(0, len(numbers), _AT_ONCE))
    yield from (few[first : first + _AT_ONCE] for first in range(0, len(few), _AT_ONCE))


def decided_again(evaluation: Evaluation, trials: Sequence[Trial], wanted: Sequence[str] | None = None) -> Evaluation:
    """The evaluation of the trials, one joint each, of all quantities or of the wanted ones.

    For wanted quantities, what does not rest on anything pinned is taken from the evaluation instead.
    """
    facts, rows = _repeated(evaluation, trials)
    known: dict[str, Column] = {}
    if wanted is not None and evaluation.whole:
        quantities = evaluation.knowledge.quantities
        known = {
            name: evaluation.columns[name].take(rows[quantities[name].of])
            for name in _untouched(evaluation, frozenset(pin.quantity for t in trials for pin in t.pins), wanted)
        }
    return evaluate(evaluation.knowledge, facts, evaluation.graph, wanted, known=known)


def _untouched(evaluation: Evaluation, pinned: frozenset[str], wanted: Sequence[str]) -> list[str]:
    """Quantities given by rules that rest on nothing pinned, and that the touched rules or the wish read."""
    graph = evaluation.graph
    below = {node.id for name in pinned for node in graph.bears_on(quantity_node(name)) if node.sort == "rule"}
    read = {name for rule in graph.rules_for(tuple(wanted)) & below for name in graph.rules[rule].inputs}
    spared = [name for name in sorted({*read, *wanted}) if graph.giving.get(name, "") not in below | {""}]
    return [name for name in spared if name not in pinned]


def _joined(columns: Sequence[Column]) -> Column:
    if len(columns) == 1:
        return columns[0]
    presence = np.concatenate([column.presence for column in columns])
    flags = np.concatenate([column.flags for column in columns])
    if isinstance(columns[0], Levels):
        return Levels(np.concatenate([c.mask for c in columns if isinstance(c, Levels)]), presence, flags)
    numbers = [column for column in columns if isinstance(column, Numbers)]
    low, high = np.concatenate([c.low for c in numbers]), np.concatenate([c.high for c in numbers])
    return Numbers(low, high, presence, flags)


def _repeated(evaluation: Evaluation, trials: Sequence[Trial]) -> tuple[Facts, Mapping[str, Ints]]:
    """The facts of the trials, and the rows of joints and of members that they repeat."""
    facts, quantities = evaluation.facts, evaluation.knowledge.quantities
    joints = np.array([trial.joint for trial in trials], np.intp)
    starts = np.searchsorted(facts.joint_of, joints, side="left")
    sizes = np.searchsorted(facts.joint_of, joints, side="right") - starts
    offsets = np.cumsum(sizes) - sizes
    joint_of = np.repeat(np.arange(len(trials)), sizes)
    members = np.arange(len(joint_of)) - offsets[joint_of] + starts[joint_of]
    rows = {"joint": joints, "member": members}
    given = {name: column.take(rows[quantities[name].of]) for name, column in facts.given.items()}
    pins: dict[str, list[tuple[int, Pin]]] = {}
    shift: Mapping[str, Ints] = {"joint": np.arange(len(trials)) - joints, "member": offsets - starts}
    for number, trial in enumerate(trials):
        for pin in trial.pins:
            moved = int(shift[quantities[pin.quantity].of][number])
            pins.setdefault(pin.quantity, []).extend((row + moved, pin) for row in pin.rows)
    for name, pinned in pins.items():
        quantity = quantities[name]
        count = len(rows[quantity.of])
        nothing = absent_numbers(count) if quantity.is_number else absent_levels(count)
        given[name] = _pinned(given.get(name, nothing), pinned)
    names = tuple(facts.joints[j] for j in joints), tuple(facts.members[m] for m in members)
    return Facts(*names, joint_of, given), rows


def _pinned(column: Column, pins: Sequence[tuple[int, Pin]]) -> Column:
    rows = np.array([row for row, _ in pins], np.intp)
    presence = column.presence.copy()
    presence[rows] = PRESENT
    if isinstance(column, Levels):
        mask = column.mask.copy()
        mask[rows] = np.array([pin.mask for _, pin in pins], np.uint64)
        return Levels(mask, presence, column.flags)
    low, high = column.low.copy(), column.high.copy()
    low[rows] = np.array([pin.low for _, pin in pins])
    high[rows] = np.array([pin.high for _, pin in pins])
    is_point = np.array_equal(low, high, equal_nan=True)
    return Numbers(low, low if is_point else high, presence, column.flags)


def alike(evaluation: Evaluation, joints: Sequence[int]) -> Mapping[int, tuple[int, ...]]:
    """Joints that are given the very same, by the first of them: what is tried on one holds for all.

    Same facts with the same kind of origin, and parts of one steel in the same places.
    """
    facts, quantities = evaluation.facts, evaluation.knowledge.quantities
    kinds = np.array([_KINDS.index(origin.kind) for origin in facts.origin_list] or [0], np.intp)
    tables: dict[str, list[np.ndarray]] = {"joint": [], "member": []}
    for name, column in facts.given.items():
        table = tables[quantities[name].of]
        if isinstance(column, Levels):
            table.append(column.mask.astype(np.int64))
        else:
            table += [column.low.view(np.int64), np.ascontiguousarray(column.high).view(np.int64)]
        table += [column.presence.astype(np.int64), column.flags.astype(np.int64)]
        if name in facts.origins:
            table.append(kinds[facts.origins[name]].astype(np.int64))
    of_joint = np.column_stack(tables["joint"]) if tables["joint"] else np.zeros((len(facts.joints), 1), np.int64)
    of_member = np.column_stack(tables["member"]) if tables["member"] else np.zeros((len(facts.members), 1), np.int64)
    groups: dict[object, list[int]] = {}
    for joint in joints:
        rows = member_rows(evaluation, joint)
        names = [facts.members[row] for row in rows]
        pattern = tuple(names.index(name) for name in names)
        key = (of_joint[joint].tobytes(), of_member[rows.start : rows.stop].tobytes(), pattern)
        groups.setdefault(key, []).append(joint)
    return {group[0]: tuple(group) for group in groups.values()}


def demands_of(evaluation: Evaluation, trials: Sequence[Trial], decisions: Sequence[Quantity]) -> Floats:
    """How much every trial asks, a row a trial and a column a decision."""
    columns = outcomes(evaluation, trials, [decision.id for decision in decisions])
    return np.column_stack([demand_of(columns[decision.id], decision) for decision in decisions])
