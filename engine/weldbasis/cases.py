"""Run the worked examples of a knowledge base: one rule, the values it reads, and what it must give."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from weldbasis.graph import KnowledgeGraph
from weldbasis.kinds import KINDS, View
from weldbasis.kinds.limit import violated
from weldbasis.knowledge import Case, Knowledge, Quantity
from weldbasis.ranges import parse_range
from weldbasis.reading import value_of
from weldbasis.trace import Value
from weldbasis.values import ABSENT, PRESENT, Column, Levels, Numbers, mask_of
from weldbasis.words import levels_text, range_text

_FLOAT_NOISE = 1e-9


@dataclass(frozen=True)
class CaseResult:
    """A case with what was wrong; an empty list means that the rule gave what the case expects."""

    case: Case
    faults: tuple[str, ...]


def run_cases(knowledge: Knowledge, graph: KnowledgeGraph) -> tuple[CaseResult, ...]:
    """Run every case. A case that cannot be set up is a fault of the case, never an exception."""
    return tuple(CaseResult(case, tuple(outcome_faults(case, knowledge, graph))) for case in knowledge.cases)


def outcome_faults(case: Case, knowledge: Knowledge, graph: KnowledgeGraph) -> list[str]:
    """What is wrong with a case, or with its rule; empty where the rule gives what the case expects."""
    try:
        found = outcome_of(case, knowledge, graph)
    except (ValueError, KeyError) as fault:
        return [f"the case cannot be set up: {fault}"]
    faults = []
    for name, expected in case.expect.items():
        if name == "finding":
            if found.get(name) != expected:
                faults.append(f"finding: expected {expected}, got {found.get(name)}")
        elif name not in found:
            faults.append(f"rule {case.rule} does not give {name}")
        else:
            value = found[name]
            assert isinstance(value, Value)
            faults += _compare(knowledge.quantities[name], expected, value, case.tolerance)
    return faults


def outcome_of(case: Case, knowledge: Knowledge, graph: KnowledgeGraph) -> dict[str, Value | str]:
    """What the case's rule gives for the case's values: each quantity, or for a limit "finding": sure, maybe or none.

    Raises ValueError or KeyError where the case's values do not fit the vocabulary.
    """
    rule = graph.rules[case.rule]
    members = max([len(v) for q, v in case.given.items() if _is_member_list(knowledge.quantities[q], v)], default=1)
    columns = {name: _column(knowledge.quantities[name], value, members) for name, value in case.given.items()}
    joint = View(knowledge, "joint", 1, np.zeros(members, np.intp), columns)
    view = joint if rule.rule.for_each == "joint" else joint.members
    with np.errstate(all="ignore"):
        if rule.rule.kind == "limit":
            truth = violated(rule, view)
            return {"finding": "sure" if truth.surely[0] else "maybe" if truth.may[0] else "none"}
        given = KINDS[rule.rule.kind].evaluate(rule, view)
    return {name: value_of(column, knowledge.quantities[name], 0) for name, column in given.items()}


def _is_member_list(quantity: Quantity, value: Any) -> bool:
    return quantity.of == "member" and isinstance(value, list | tuple)


def _column(quantity: Quantity, value: Any, members: int) -> Column:
    if quantity.of == "joint":
        return _cells(quantity, [value])
    if _is_member_list(quantity, value):
        return _cells(quantity, list(value) + [value[-1]] * (members - len(value)))
    return _cells(quantity, [value] * members)


def _cells(quantity: Quantity, values: list[Any]) -> Column:
    flags = np.zeros(len(values), np.uint8)
    if quantity.is_number:
        ranges = [parse_range("[0, 0]" if value == "absent" else value) for value in values]
        gone = np.array([value == "absent" for value in values])
        low = np.where(gone, np.nan, [found.low for found in ranges])
        high = np.where(gone, np.nan, [found.high for found in ranges])
        point = all(found.low == found.high for found in ranges)
        return Numbers(low, low if point else high, np.where(gone, ABSENT, PRESENT).astype(np.uint8), flags)
    masks = []
    for value in values:
        levels = value if isinstance(value, list | tuple) else [value]
        if unknown := [level for level in levels if level not in quantity.order and level != "absent"]:
            raise ValueError(f"{unknown[0]!r} is no level of {quantity.id}")
        masks.append(0 if value == "absent" else mask_of(levels, quantity.order))
    mask = np.array(masks, np.uint64)
    return Levels(mask, np.where(mask == 0, ABSENT, PRESENT).astype(np.uint8), flags)


def _compare(quantity: Quantity, expected: Any, got: Value, tolerance: float) -> list[str]:
    if expected == "absent":
        return [] if got.presence == "absent" else [f"{quantity.id}: expected no value, got {_shown(quantity, got)}"]
    if got.presence == "absent":
        return [f"{quantity.id}: expected {expected}, the rule gives no value"]
    if got.low is None or got.high is None:
        levels = tuple(expected) if isinstance(expected, list | tuple) else (expected,)
        same = set(levels) == set(got.any_of)
        return [] if same else [f"{quantity.id}: expected {' or '.join(levels)}, got {' or '.join(got.any_of)}"]
    wanted = parse_range(expected)
    slack = tolerance + _FLOAT_NOISE * max(1.0, abs(wanted.high))
    if abs(got.low - wanted.low) <= slack and abs(got.high - wanted.high) <= slack:
        return []
    return [f"{quantity.id}: expected {wanted} ± {tolerance:g}, got {got.low:.6g} to {got.high:.6g}"]


def _shown(quantity: Quantity, value: Value) -> str:
    if value.low is None or value.high is None:
        return levels_text(quantity, value.any_of)
    return range_text(value.low, value.high, quantity.decimals)


def nature_counts(cases: tuple[Case, ...]) -> Mapping[str, int]:
    """How many cases there are of each nature."""
    found: dict[str, int] = {}
    for case in cases:
        found[case.nature] = found.get(case.nature, 0) + 1
    return dict(sorted(found.items()))
