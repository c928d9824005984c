"""Every rule of the knowledge base on random boxes: no sampled point escapes the rule's set; how tight the sets are."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest

from weldbasis.evaluate import evaluate
from weldbasis.facts import Facts
from weldbasis.graph import KnowledgeGraph
from weldbasis.kinds import KINDS, Compiled, View
from weldbasis.kinds.condition import bounds_on
from weldbasis.kinds.limit import violated
from weldbasis.knowledge import Knowledge, Quantity
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder
from weldbasis.values import ABSENT, PRESENT, WIDE, Column, Levels, Numbers

BOXES, POINTS, MEMBERS = 24, 60, 3
RULES = sorted(load_knowledge(kb_folder()).rules)


def _span(rule: Compiled, quantity: Quantity) -> tuple[float, float]:
    """Where to draw a number: around the limits the rule sets, so that their edges are met."""
    low, high = quantity.range.low, quantity.range.high
    for condition in (rule.applies, rule.valid):
        limit = bounds_on(condition, quantity.id)
        if np.isfinite(limit.low) or np.isfinite(limit.high):
            low_end = limit.low if np.isfinite(limit.low) else max(low, limit.high / 3 if limit.high > 0 else low)
            high_end = limit.high if np.isfinite(limit.high) else min(high, 3 * max(limit.low, 1e-3))
            width = max(high_end - low_end, 1e-6)
            low, high = max(low, low_end - 0.1 * width), min(high, high_end + 0.1 * width)
    return low, min(high, low + 2000.0)


def _column(rule: Compiled, quantity: Quantity, rows: int, rng: np.random.Generator) -> Column:
    gone = (rng.random(rows) < 0.08) & (quantity.given != "must")
    presence = np.where(gone, ABSENT, PRESENT).astype(np.uint8)
    flags = np.zeros(rows, np.uint8)
    if not quantity.is_number:
        mask = rng.integers(1, 1 << len(quantity.order), rows).astype(np.uint64)
        single = np.uint64(1) << rng.integers(0, len(quantity.order), rows).astype(np.uint64)
        mask = np.where(rng.random(rows) < 0.6, single, mask)
        return Levels(np.where(gone, np.uint64(0), mask), presence, flags)
    low, high = _span(rule, quantity)
    ends = np.sort(rng.uniform(low, high, (2, rows)), axis=0)
    point = rng.random(rows) < 0.3
    top = np.where(point, ends[0], ends[0] + (ends[1] - ends[0]) * rng.choice([0.1, 0.5, 1.0], rows))
    return Numbers(np.where(gone, np.nan, ends[0]), np.where(gone, np.nan, top), presence, flags)


def _points(column: Column, rng: np.random.Generator, way: str = "") -> Column:
    """Each row as many single points, some at the ends of its range; the first two at the corners that a stated way of
    the result ("up" or "down") makes the extremes.
    """
    rows = np.repeat(np.arange(len(column)), POINTS)
    if isinstance(column, Levels):
        masks = column.mask[rows]
        picked = np.zeros(len(masks), np.uint64)
        for at, mask in enumerate(masks):
            bits = [bit for bit in range(64) if int(mask) >> bit & 1]
            picked[at] = np.uint64(1 << int(rng.choice(bits))) if bits else np.uint64(0)
        return Levels(picked, column.presence[rows], column.flags[rows])
    share = rng.random(len(rows))
    share = np.where(rng.random(len(rows)) < 0.5, np.round(share), share)
    if way in ("up", "down"):
        share[0::POINTS], share[1::POINTS] = (1.0, 0.0) if way == "up" else (0.0, 1.0)
    values = column.low[rows] + (column.high[rows] - column.low[rows]) * share
    return Numbers(values, values, column.presence[rows], column.flags[rows])


def _spread(
    columns: Mapping[str, Column], knowledge: Knowledge, rng: np.random.Generator, ways: Mapping[str, str]
) -> dict[str, Column]:
    """Points for all columns. A joint's members are drawn together, so that rows keep belonging to one joint."""
    found: dict[str, Column] = {}
    for name, column in columns.items():
        points = _points(column, rng, ways.get(name, ""))
        if knowledge.quantities[name].of == "member":
            order = np.arange(BOXES * MEMBERS * POINTS).reshape(BOXES, MEMBERS, POINTS).transpose(0, 2, 1).ravel()
            points = points.take(order)
        found[name] = points
    return found


def _results(rule: Compiled, columns: Mapping[str, Column], knowledge: Knowledge, joints: int) -> dict[str, Column]:
    view = View(knowledge, "joint", joints, np.repeat(np.arange(joints), MEMBERS), dict(columns))
    view = view if rule.rule.for_each == "joint" else view.members
    with np.errstate(all="ignore"):
        if rule.rule.kind == "limit":
            truth = violated(rule, view)
            presence = np.where(truth.may, PRESENT, 0) | np.where(truth.surely, 0, ABSENT)
            return {
                "finding": Levels(truth.may.astype(np.uint64), presence.astype(np.uint8), np.zeros(view.rows, np.uint8))
            }
        return dict(KINDS[rule.rule.kind].evaluate(rule, view))


def _boxes_of_points(rule: Compiled) -> np.ndarray:
    """For each result row of the points, the result row of its box."""
    if rule.rule.for_each == "joint":
        return np.repeat(np.arange(BOXES), POINTS)
    return np.arange(BOXES * MEMBERS).reshape(BOXES, 1, MEMBERS).repeat(POINTS, axis=1).ravel()


@pytest.mark.parametrize("name", RULES)
def test_no_point_escapes_its_box(name: str, knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    rule = graph.rules[name]
    rng = np.random.default_rng(sum(map(ord, name)))
    columns = {}
    for quantity in (knowledge.quantities[q] for q in rule.inputs):
        rows = BOXES if quantity.of == "joint" else BOXES * MEMBERS
        columns[quantity.id] = _column(rule, quantity, rows, rng)
    sets = _results(rule, columns, knowledge, BOXES)
    points = _results(rule, _spread(columns, knowledge, rng, rule.rule.direction), knowledge, BOXES * POINTS)
    box = _boxes_of_points(rule)
    for quantity_id, inner in points.items():
        outer = sets[quantity_id].take(box)
        assert not (inner.presence & ~outer.presence).any(), f"{name}: a presence escapes for {quantity_id}"
        there = inner.presence == PRESENT
        if isinstance(inner, Levels) and isinstance(outer, Levels):
            assert not (inner.mask & ~outer.mask)[there].any(), f"{name}: a level escapes for {quantity_id}"
        elif isinstance(inner, Numbers) and isinstance(outer, Numbers):
            slack = 1e-9 * np.maximum(1.0, np.abs(inner.low))
            inside = (inner.low >= outer.low - slack) & (inner.high <= outer.high + slack)
            assert inside[there].all(), f"{name}: a number escapes for {quantity_id}"


def test_most_number_rules_are_tight(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    """Nine number rules in ten, on nine boxes in ten: the range is proved exact, or is the sampled hull within 1 %."""
    tight: dict[str, bool] = {}
    for name, rule in graph.rules.items():
        if rule.rule.kind not in ("formula", "model"):
            continue
        rng = np.random.default_rng(11)
        columns: dict[str, Column] = {}
        for quantity in (knowledge.quantities[q] for q in rule.inputs):
            rows = BOXES if quantity.of == "joint" else BOXES * MEMBERS
            columns[quantity.id] = _column(rule, quantity, rows, rng)
        sets = _results(rule, columns, knowledge, BOXES)
        points = _results(rule, _spread(columns, knowledge, rng, rule.rule.direction), knowledge, BOXES * POINTS)
        outer = next(iter(sets.values()))
        inner = next(iter(points.values()))
        assert isinstance(outer, Numbers)
        assert isinstance(inner, Numbers)
        box = _boxes_of_points(rule)
        seen = outer.presence == PRESENT
        least, most = np.full(len(outer), np.inf), np.full(len(outer), -np.inf)
        np.fmin.at(least, box, inner.low)
        np.fmax.at(most, box, inner.high)
        close = (outer.high - outer.low) <= (most - least) * 1.01 + 1e-9
        proved = (outer.flags & WIDE) == 0
        tight[name] = not seen.any() or bool(np.mean((close | proved)[seen]) >= 0.9)
    loose = sorted(name for name, good in tight.items() if not good)
    assert len(loose) <= 0.1 * len(tight), loose


def test_only_what_is_wanted_is_worked_out(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    facts = Facts(("J",), ("a", "weld metal"), np.zeros(2, np.intp), {})
    some = evaluate(knowledge, facts, graph, ["min_preheat"])
    assert "hv_max" not in some.findings
    assert set(some.columns) == set(knowledge.quantities)
