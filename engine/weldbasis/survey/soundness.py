"""Does every point of a box lie in the set that the box was given? All rules together, from the inputs down.

Boxes of project inputs are drawn at random and decided as sets; points inside each are decided as joints of their
own. Whatever a point gives (its value, whether it has one, whether a finding is raised) must be allowed by its box.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.facts import Facts
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Knowledge
from weldbasis.narrow import narrowed
from weldbasis.survey.draw import points_in, random_boxes
from weldbasis.turning import turning_figures
from weldbasis.values import ABSENT, PRESENT, Bools, Column, Floats, Ints, Levels, Numbers

_BOXES, _EACH = 400, 50  # boxes decided at a time, and points in each
_NARROWED_EACH, _NARROWED = 5, 20  # every so many times, so many boxes are narrowed too, as decisions are
_ROUNDING = 1e-9  # relative; what the last bits of the machine's arithmetic may differ by


@dataclass(frozen=True)
class Escape:
    """A quantity of which some point lies outside its box's set: how many points, and one of them in words."""

    quantity: str
    rule: str
    points: int
    example: str


@dataclass(frozen=True)
class Soundness:
    """What was tried: points, boxes, escapes in the order of the rules, and quantities that never had a value."""

    points: int
    boxes: int
    escapes: tuple[Escape, ...]
    untried: tuple[str, ...]


def try_points(
    knowledge: Knowledge,
    graph: KnowledgeGraph,
    points: int,
    seed: int = 1,
    done: Callable[[int], object] = lambda _: None,
) -> Soundness:
    """Try at least so many points; the same for the same seed. `done` is told how many were tried."""
    rng = np.random.default_rng(seed)
    figures = turning_figures(graph.rules.values())
    found: dict[str, Escape] = {}
    tried: set[str] = set()
    count = boxes = turn = 0
    while count < points:
        in_parts = turn % _NARROWED_EACH == 0
        turn += 1
        most = _NARROWED if in_parts else _BOXES
        facts = random_boxes(knowledge, figures, min(most, -(-(points - count) // _EACH)), rng)
        sets = evaluate(knowledge, facts, graph)
        sets = narrowed(sets) if in_parts else sets
        for escape in escapes(sets, facts, figures, _EACH, rng, tried):
            before = found.get(escape.quantity)
            more = escape.points + (before.points if before else 0)
            found[escape.quantity] = Escape(escape.quantity, escape.rule, more, (before or escape).example)
        boxes += len(facts.joints)
        count += len(facts.joints) * _EACH
        done(count)
    given = {quantity.id for name in graph.order for quantity in graph.rules[name].gives}
    return Soundness(count, boxes, tuple(found.values()), tuple(sorted(given - tried)))


def escapes(
    sets: Evaluation, facts: Facts, figures: Mapping[str, Floats], each: int, rng: np.random.Generator, tried: set[str]
) -> Iterator[Escape]:
    """The quantities, in the order of the rules, of which points of these boxes lie outside.

    Quantities that had a value at some point are put among `tried`.
    """
    knowledge, graph = sets.knowledge, sets.graph
    joints: Ints = np.repeat(np.arange(len(facts.joints)), each)
    points, members = points_in(facts, knowledge, figures, joints, rng)
    inner = evaluate(knowledge, points, graph)
    for name in graph.order:
        rule = graph.rules[name]
        rows = joints if rule.rule.for_each == "joint" else members
        for quantity in rule.gives:
            at = joints if quantity.of == "joint" else members
            column = inner.columns[quantity.id]
            if bool((column.presence != ABSENT).any()):
                tried.add(quantity.id)
            out = _outside(column, sets.columns[quantity.id].take(at))
            if bool(out.any()):
                row = int(np.flatnonzero(out)[0])
                words = f"{_set(column, row)} outside {_set(sets.columns[quantity.id], int(at[row]))}"
                yield Escape(quantity.id, name, int(out.sum()), words)
        if name in inner.findings:
            may, surely = sets.findings[name].may[rows], sets.findings[name].surely[rows]
            out = (inner.findings[name].may & ~may) | (surely & ~inner.findings[name].surely)
            if bool(out.any()):
                yield Escape(f"finding {name}", name, int(out.sum()), "raised where the box says no, or the other way")


def _outside(inner: Column, outer: Column) -> Bools:
    """Rows of a point's column that the box's column does not allow."""
    out: Bools = (inner.presence & ~outer.presence) != 0
    there = (inner.presence & PRESENT) != 0
    if isinstance(inner, Levels) and isinstance(outer, Levels):
        out |= there & ((inner.mask & ~outer.mask) != 0)
        return out
    assert isinstance(inner, Numbers)
    assert isinstance(outer, Numbers)
    slack = _ROUNDING * np.maximum(1.0, np.abs(inner.low))
    with np.errstate(invalid="ignore"):
        inside = (inner.low >= outer.low - slack) & (inner.high <= outer.high + slack)
    out |= there & ~inside
    return out


def _set(column: Column, row: int) -> str:
    presence = {1: "", 2: "absent", 3: " or absent"}[int(column.presence[row])]
    if column.presence[row] == ABSENT:
        return presence
    if isinstance(column, Levels):
        return f"levels {int(column.mask[row]):b}{presence}"
    return f"[{float(column.low[row])!r}, {float(column.high[row])!r}]{presence}"
