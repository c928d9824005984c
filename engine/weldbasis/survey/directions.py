"""Does more carbon, thickness, hydrogen or restraint ever lower the preheat, or more heat input raise it?

Joints are drawn over the declared domain: a grade, a thickness, an analysis within its limits, a process, a
contract. Of each pair of joints one differs in a single input that can only make matters worse.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from weldbasis.evaluate import evaluate
from weldbasis.facts import Facts
from weldbasis.graph import KnowledgeGraph
from weldbasis.kinds.limit import violated
from weldbasis.knowledge import Knowledge
from weldbasis.project.steels import ELEMENTS
from weldbasis.state import demand
from weldbasis.survey.lattice import lattice, steel_of_grade
from weldbasis.values import PRESENT, Column, Floats, Levels, Numbers, level_sets

FORMAT = "weldbasis-directions/1"
DECISION = "preheat_required"
# Caps that a standard sets on a sum of elements say nothing beside a whole analysis.
_CAPS = ("ce_iiw_limit", "ce_iiw_cap", "pcm_limit", "pcm_cap", "cet_limit")
_SEED = 20261201
_NOISE = 1e-6


@dataclass(frozen=True)
class Move:
    """A change of one input for the worse: what moves in words, and the facts with it moved."""

    name: str
    facts: Facts


@dataclass(frozen=True)
class Fall:
    """A pair in which more asks for less: the steel, and the preheat (°C) before and after."""

    steel: str
    before: float
    after: float
    given: Mapping[str, str]


@dataclass(frozen=True)
class Direction:
    """What came of the pairs of one input: how many were compared, fell, lost their value or gained one."""

    name: str
    pairs: int
    fell: int
    lost: int
    gained: int
    worst: Fall | None


def audit(knowledge: Knowledge, graph: KnowledgeGraph, joints: int, draw: Mapping[str, Any]) -> tuple[Direction, ...]:
    """Compare pairs of joints, as many for each input as joints are drawn. `draw` says what is drawn from where."""
    random = np.random.default_rng(_SEED)
    facts = drawn_facts(knowledge, joints, draw, random)
    floors = draw["floor_alone"]
    before = _asked(knowledge, graph, facts, floors)
    return tuple(
        _direction(knowledge, facts, before, _asked(knowledge, graph, move.facts, floors), move)
        for move in _moves(knowledge, facts, random)
    )


def _asked(knowledge: Knowledge, graph: KnowledgeGraph, facts: Facts, floors: Sequence[str]) -> Floats:
    """The preheat (°C) of every joint; nan where there is none, or where a finding says that only a floor stands."""
    quantity = knowledge.quantities[DECISION]
    reads = [read.quantity for name in floors for read in knowledge.rules[name].reads]
    wanted = (DECISION, *reads, *(q for name in floors for q in knowledge.rules[name].applies_when))
    evaluation = evaluate(knowledge, facts, graph, wanted)
    column = evaluation.columns[DECISION]
    found = demand(column, quantity)
    assert found is not None
    there = column.presence == PRESENT
    for name in floors:
        there &= ~violated(graph.rules[name], evaluation.views["joint"]).surely
    return np.where(there, found, np.nan)


def drawn_facts(knowledge: Knowledge, joints: int, draw: Mapping[str, Any], random: np.random.Generator) -> Facts:
    """Joints of drawn steels, analyses and conditions; every value is a point."""
    steels = [steel_of_grade(grade) for grade in knowledge.grades.values()]
    plain = lattice(knowledge, steels, draw["joint"], draw["thickness_mm"], []).facts
    rows = random.integers(0, len(plain.joints), joints)
    members = (rows[:, None] * 3 + np.arange(3)).reshape(-1)
    take = {"joint": rows, "member": members}
    given = {n: c.take(take[knowledge.quantities[n].of]) for n, c in plain.given.items() if n not in _CAPS}
    both = np.repeat(np.arange(joints), 3)
    for name in ELEMENTS.values():
        given[name] = _analysed(given[name], random.random(joints)[both])
    for name, (low, high) in draw["numbers"].items():
        values = np.exp(random.uniform(np.log(low), np.log(high), joints))
        given[name] = Numbers(values, values, np.full(joints, PRESENT), np.zeros(joints, np.uint8))
    for name, levels in draw["levels"].items():
        order = knowledge.quantities[name].order
        bits = np.array([1 << order.index(level) for level in levels], np.uint64)
        given[name] = level_sets(bits[random.integers(0, len(bits), joints)])
    names = tuple(plain.members[row] for row in members)
    return Facts(tuple(plain.joints[row] for row in rows), names, np.repeat(np.arange(joints), 3), given)


def _analysed(column: Column, share: Floats) -> Numbers:
    """One point of every range, the same share of it in all parts of a joint."""
    assert isinstance(column, Numbers)
    value = column.low + (column.high - column.low) * share
    return Numbers(value, value, column.presence, np.zeros(len(value), np.uint8))


def _moves(knowledge: Knowledge, facts: Facts, random: np.random.Generator) -> list[Move]:
    joints = len(facts.joints)
    more = 1.0 + random.uniform(0.01, 0.6, joints)
    parts = more[facts.joint_of]
    restraint = facts.given["restraint"]
    assert isinstance(restraint, Levels)
    last = np.uint64(1 << (len(knowledge.quantities["restraint"].order) - 1))
    higher = Levels(np.minimum(restraint.mask << np.uint64(1), last), restraint.presence, restraint.flags)
    changed: list[tuple[str, dict[str, Column]]] = [
        ("more carbon", {"carbon": _scaled(knowledge, facts, "carbon", parts)}),
        ("more manganese", {"manganese": _scaled(knowledge, facts, "manganese", parts)}),
        ("more thickness", {"member_thickness": _scaled(knowledge, facts, "member_thickness", parts)}),
        ("more hydrogen", {"hydrogen": _scaled(knowledge, facts, "hydrogen", more)}),
        ("less heat input", {"heat_input": _scaled(knowledge, facts, "heat_input", 1.0 / more)}),
        ("more restraint", {"restraint": higher}),
    ]
    return [Move(name, replace(facts, given={**facts.given, **columns})) for name, columns in changed]


def _scaled(knowledge: Knowledge, facts: Facts, name: str, by: Floats) -> Numbers:
    column = facts.given[name]
    assert isinstance(column, Numbers)
    allowed = knowledge.quantities[name].range
    value = np.clip(column.low * by, allowed.low, allowed.high)
    return Numbers(value, value, column.presence, column.flags)


def _direction(knowledge: Knowledge, facts: Facts, before: Floats, after: Floats, move: Move) -> Direction:
    there, still = ~np.isnan(before), ~np.isnan(after)
    drop = np.where(there & still, before - after, -np.inf)
    at = int(np.argmax(drop))
    worst = _fall(knowledge, facts, move, before, after, at) if drop[at] > _NOISE else None
    return Direction(
        move.name,
        int((there & still).sum()),
        int((drop > _NOISE).sum()),
        int((there & ~still).sum()),
        int((~there & still).sum()),
        worst,
    )


def _fall(knowledge: Knowledge, facts: Facts, move: Move, before: Floats, after: Floats, row: int) -> Fall:
    first = int(np.searchsorted(facts.joint_of, row))
    given = {}
    for name in ("carbon", "manganese", "member_thickness", "hydrogen", "heat_input", "restraint", "process"):
        column, moved = facts.given[name], move.facts.given[name]
        at = row if knowledge.quantities[name].of == "joint" else first
        if isinstance(column, Numbers) and isinstance(moved, Numbers):
            words = [f"{float(end):.4g}" for end in (column.low[at], moved.low[at])]
        else:
            assert isinstance(column, Levels)
            assert isinstance(moved, Levels)
            order = knowledge.quantities[name].order
            words = [order[int(mask).bit_length() - 1] for mask in (column.mask[at], moved.mask[at])]
        given[knowledge.quantities[name].title] = words[0] if words[0] == words[1] else f"{words[0]} → {words[1]}"
    return Fall(facts.members[first], float(before[row]), float(after[row]), given)


def summary(knowledge: Knowledge, found: tuple[Direction, ...]) -> dict[str, Any]:
    """The result as plain data, for the page and for scripts; it names the rules that it holds for."""
    return {
        "format": FORMAT,
        "rules": knowledge.digest,
        "pairs": sum(one.pairs for one in found),
        "directions": [
            {
                "input": one.name,
                "pairs": one.pairs,
                "fell": one.fell,
                "lost": one.lost,
                "gained": one.gained,
                **({"worst": {"steel": one.worst.steel, "before": one.worst.before, "after": one.worst.after,
                              "given": dict(one.worst.given)}} if one.worst else {}),
            }
            for one in found
        ],
    }  # fmt: skip
