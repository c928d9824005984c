"""Which numbers a quantity can take: the vocabulary's range, cut to what the rule that gives it can ever give.

A quantity that a project may give keeps the vocabulary's range. Bounds are safe: no value lies outside them.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from weldbasis.formula import Formula
from weldbasis.formula.search import box_jet
from weldbasis.graph import KnowledgeGraph
from weldbasis.kinds.compiled import Compiled
from weldbasis.kinds.gather import Gather
from weldbasis.kinds.governing import Governing
from weldbasis.kinds.table import Table
from weldbasis.knowledge import Knowledge, Quantity
from weldbasis.proofs.domain import domain_of, formula_ends
from weldbasis.ranges import Range, common


def reach_of(knowledge: Knowledge, graph: KnowledgeGraph) -> Mapping[str, Range]:
    """The range every number can take, by the quantity's id."""
    found = {quantity.id: quantity.range for quantity in knowledge.quantities.values() if quantity.is_number}
    for name in graph.order:
        for at, quantity in enumerate(graph.rules[name].gives):
            if quantity.is_number and quantity.given == "never":
                spans = list(_spans(graph.rules[name], at, found))
                given = _hull(spans, quantity) if spans else None
                found[quantity.id] = (given and common(given, quantity.range)) or quantity.range
    return found


def _hull(spans: list[Range], quantity: Quantity) -> Range:
    low, high = min(span.low for span in spans), max(span.high for span in spans)
    return quantity.range if np.isnan(low) or np.isnan(high) else Range(low, high)


def _spans(compiled: Compiled, at: int, reach: Mapping[str, Range]) -> Iterator[Range]:
    """Ranges that together hold every number the rule can give for its quantity `at`; none where that is not known."""
    body = compiled.body
    if isinstance(body, Formula):
        yield from _formula_spans(compiled, body, reach)
    elif isinstance(body, Table) and body.surface is not None:
        for curve in body.surface.curves:
            yield Range(float(curve.value.min()), float(curve.value.max()))
    elif isinstance(body, Table):
        cells = body.gives[at]
        for row in np.flatnonzero(cells.there):
            yield Range(float(cells.low[row]), float(cells.high[row]))
    elif isinstance(body, Governing):
        yield from (reach[choice.quantity.id] for choice in body.choices)
    elif isinstance(body, Gather) and body.take != "sum":
        yield reach[body.of.id]


def _formula_spans(compiled: Compiled, formula: Formula, reach: Mapping[str, Range]) -> Iterator[Range]:
    for box in domain_of(compiled, reach):
        low, high = formula_ends(compiled, formula, box)
        ends = (np.array([[end[name]] for name in formula.names], np.float64) for end in (low, high))
        if not formula.names:
            return
        jet = box_jet(formula, *ends)
        factor, offset = compiled.gives_factor, compiled.gives_offset
        yield Range(factor * float(jet.low[0]) + offset, factor * float(jet.high[0]) + offset)
