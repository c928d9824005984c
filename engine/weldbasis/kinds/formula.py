"""Kind `formula`: arithmetic over bound names, evaluated as the hull over the sets of what it reads."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from weldbasis.formula import FormulaError, parse_formula, range_over, show, value_at
from weldbasis.kinds.compiled import (
    Compiled,
    Explanation,
    Kind,
    compile_common,
    flags_of,
    gate,
    read_range,
    refuse,
    to_vocabulary,
)
from weldbasis.kinds.view import View
from weldbasis.knowledge import Knowledge, Rule
from weldbasis.problem import Place, Problem, Refused
from weldbasis.ranges import ROUNDING
from weldbasis.values import WIDE, Column, Truth, may_be_at, numbers_where
from weldbasis.words import range_text


def compile_formula(rule: Rule, knowledge: Knowledge) -> Compiled:
    """Parse the formula and check that its names and the rule's reads are the same."""
    text = rule.body["formula"]
    try:
        formula = parse_formula(text)
    except FormulaError as fault:
        place = rule.place_of("formula")
        raise Refused(
            [
                Problem(
                    Place(place.file, place.line, place.column),
                    f"formula of rule {rule.id}: {fault}",
                    f"at character {fault.column} of {text!r}",
                )
            ]
        ) from fault
    bound = {read.name for read in rule.reads}
    if missing := [name for name in formula.names if name not in bound]:
        raise refuse(
            rule,
            f"the formula names {missing[0]!r}, which reads does not bind",
            "formula",
            do=f"add '{missing[0]}: <quantity>' to reads",
        )
    if unused := [read.name for read in rule.reads if read.name not in formula.names]:
        raise refuse(
            rule,
            f"reads binds {unused[0]!r}, which the formula does not use",
            "reads",
            do="take it out of reads, or use it in the formula",
        )
    compiled = compile_common(rule, knowledge, formula)
    if levels := [read.name for read in compiled.reads if not read.quantity.is_number]:
        raise refuse(rule, f"{levels[0]!r} is a level, and a formula reckons with numbers only", "reads")
    return compiled


def evaluate_formula(compiled: Compiled, view: View) -> Mapping[str, Column]:
    """The result's hull, row by row; absent where the rule does not hold or the formula has no value."""
    there = gate(compiled, view, tuple(read.quantity.id for read in compiled.reads))
    lows, highs, points = {}, {}, True
    for read in compiled.reads:
        lows[read.name], highs[read.name] = read_range(compiled, read, view, there)
        points = points and highs[read.name] is lows[read.name]
    flags = flags_of(compiled, view)
    if points:
        low = value_at(compiled.body, lows) if lows else np.full(view.rows, value_at(compiled.body, {}))
        defined = np.isfinite(low)
        low = high = np.where(defined, low, np.nan)
    else:
        hull = range_over(compiled.body, lows, highs)
        low, high, defined = hull.low, hull.high, hull.defined
        flags = np.where(hull.exact, flags, flags | WIDE).astype(np.uint8)
    low, high = to_vocabulary(compiled, low, high)
    allowed = compiled.gives[0].range
    near = ROUNDING * max(abs(allowed.low), abs(allowed.high))
    some = (low <= allowed.high + near) & (high >= allowed.low - near)
    whole = (high <= allowed.high + near) & (low >= allowed.low - near)
    there = Truth(there.may & some, there.surely & defined & whole)
    # What the vocabulary does not allow is no result: the rule has nothing to say there.
    if not bool(whole.all()):
        low = np.maximum(low, allowed.low)
        high = low if points else np.minimum(high, allowed.high)
    return {compiled.gives[0].id: numbers_where(there, low, high, flags)}


def explain_formula(compiled: Compiled, view: View, row: int) -> Explanation:
    """The formula with this row's figures put in."""
    figures = {}
    for read in compiled.reads:
        column = view.column(read.quantity.id)
        if not may_be_at(column, row):
            figures[read.name] = "none"
            continue
        there = gate(compiled, view, ())
        low, high = read_range(compiled, read, view, there)
        figures[read.name] = range_text(float(low[row]), float(high[row]), read.quantity.decimals)
    return Explanation(show(compiled.body, figures))


FORMULA = Kind("formula", compile_formula, evaluate_formula, explain_formula)
