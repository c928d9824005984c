"""Decisions on the edge: a reading that is off by its rounding would ask for more.

How finely papers print a reading is data of the vocabulary (`read_to`); a figure may be off by half of that.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from weldbasis.evaluate import Evaluation
from weldbasis.knowledge import Quantity
from weldbasis.reading import value_of
from weldbasis.settling.settle import steels_of
from weldbasis.settling.trials import Pin, Trial, alike, outcomes
from weldbasis.state import demand_of
from weldbasis.trace import Ref, Value
from weldbasis.values import Numbers, may_be_at

_READ = frozenset({"certificate", "samples"})  # where a composition is a reading, not a limit or an assumption


@dataclass(frozen=True)
class Edge:
    """A decision that asks for more where one reading is off by no more than `by`: what it would become."""

    decision: str
    ref: Ref
    reading: float
    by: float
    becomes: Value


def edges(evaluation: Evaluation, joints: Sequence[int]) -> Mapping[int, tuple[Edge, ...]]:
    """The decisions of the first rank that stand on the edge, joint by joint, each with the readings it hangs on.

    Every reading is taken as off by itself, both ways, the others as they are.
    """
    same = alike(evaluation, joints)
    decisions = [decision for decision in evaluation.knowledge.decisions if not decision.part_of]
    wanted = [decision.id for decision in decisions]
    readings = {joint: _readings(evaluation, joint) for joint in same}
    together = [Trial(joint, tuple(pin for _, _, pin in some)) for joint, some in readings.items()]
    now = {d.id: demand_of(evaluation.columns[d.id], d) for d in decisions}
    columns = outcomes(evaluation, together, wanted)
    then = {d.id: demand_of(columns[d.id], d) for d in decisions} if together else {}
    near = [j for n, j in enumerate(same) if any(then[name][n] > now[name][j] for name in wanted)]
    single = [(joint, ref, value, pin) for joint in near for ref, value, pin in readings[joint]]
    columns = outcomes(evaluation, [Trial(joint, (pin,)) for joint, _, _, pin in single], wanted)
    found: dict[int, list[Edge]] = {}
    for decision in decisions if single else []:
        asked = demand_of(columns[decision.id], decision)
        for row, (joint, ref, value, pin) in enumerate(single):
            if asked[row] > now[decision.id][joint]:
                becomes = value_of(columns[decision.id], decision, row)
                found.setdefault(joint, []).append(Edge(decision.id, ref, value, (pin.high - pin.low) / 2, becomes))
    return {joint: tuple(some) for first, some in found.items() for joint in same[first]}


def _readings(evaluation: Evaluation, joint: int) -> list[tuple[Ref, float, Pin]]:
    """Every reading of a joint with the range that its rounding leaves."""
    found = []
    for quantity in evaluation.knowledge.quantities.values():
        column = evaluation.facts.given.get(quantity.id)
        if not quantity.read_to or not isinstance(column, Numbers):
            continue
        places = [((joint,), 0)] if quantity.of == "joint" else steels_of(evaluation, joint)
        for rows, member in places:
            value = float(column.low[rows[0]])
            if may_be_at(column, rows[0]) and value == column.high[rows[0]] and _is_read(evaluation, quantity, rows[0]):
                off = off_by(quantity, value)
                low, high = max(value - off, quantity.range.low), min(value + off, quantity.range.high)
                found.append((Ref(quantity.id, member), value, Pin(quantity.id, rows, low, high)))
    return found


def off_by(quantity: Quantity, value: float) -> float:
    """Half the step to which a reading is printed; of one printed finer, half the vocabulary's last decimal."""
    coarse = np.isclose(value / quantity.read_to, round(value / quantity.read_to), atol=1e-6)
    return (quantity.read_to if coarse else min(quantity.read_to, 10.0**-quantity.decimals)) / 2


def _is_read(evaluation: Evaluation, quantity: Quantity, row: int) -> bool:
    """Whether a value comes from a paper that reports it, rather than from a limit or an assumption."""
    places = evaluation.facts.origins.get(quantity.id)
    if quantity.topic != "composition" or places is None:
        return True
    return evaluation.facts.origin_list[int(places[row])].kind in _READ
