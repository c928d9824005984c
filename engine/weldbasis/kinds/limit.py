"""Kind `limit`: a check between quantities that raises a finding where it fails, or may fail."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import get_args

import numpy as np

from weldbasis.formula import Comparison, Formula, FormulaError, parse_comparison, range_over, show
from weldbasis.kinds.compiled import Compiled, Explanation, Kind, compile_common, gate, read_range, refuse
from weldbasis.kinds.view import View
from weldbasis.knowledge import Knowledge, Rule
from weldbasis.ranges import ROUNDING
from weldbasis.trace import FindingLevel
from weldbasis.values import Column, Floats, Truth, may_be_at
from weldbasis.words import range_text


@dataclass(frozen=True)
class Limit:
    """What must hold (nothing: the finding is raised wherever the rule applies), and the finding's level."""

    must_hold: Comparison | None
    level: str
    level_if_unsure: str


def compile_limit(rule: Rule, knowledge: Knowledge) -> Compiled:
    """Parse the comparison; its names must be reads that are numbers."""
    body = rule.body
    comparison = None
    if "must_hold" in body:
        try:
            comparison = parse_comparison(body["must_hold"])
        except FormulaError as fault:
            raise refuse(rule, f"must_hold: {fault}", "must_hold") from fault
        names = {*comparison.left.names, *comparison.right.names}
        if missing := sorted(names - {read.name for read in rule.reads}):
            raise refuse(rule, f"must_hold names {missing[0]!r}, which reads does not bind", "must_hold")
    level = str(body["level"])
    unsure = str(body.get("level_if_unsure", level))
    known = {*get_args(FindingLevel), "none"}
    if level not in known or unsure not in known:
        raise refuse(rule, f"a finding's level is one of {', '.join(sorted(known))}", "level")
    return compile_common(rule, knowledge, Limit(comparison, level, unsure))


def evaluate_limit(compiled: Compiled, view: View) -> Mapping[str, Column]:
    """A limit gives no quantity."""
    del compiled, view
    return {}


def violated(compiled: Compiled, view: View) -> Truth:
    """Where the finding may be and surely is raised.

    A check whose quantities are missing raises nothing: what is not decided is reported as such elsewhere.
    """
    comparison: Comparison | None = compiled.body.must_hold
    if comparison is None:
        return gate(compiled, view, ())
    there = gate(compiled, view, tuple(read.quantity.id for read in compiled.reads if read.quantity.is_number))
    left_low, left_high = _side(compiled, comparison.left, view, there)
    right_low, right_high = _side(compiled, comparison.right, view, there)
    if comparison.sign in (">=", ">"):
        left_low, left_high, right_low, right_high = right_low, right_high, left_low, left_high
    if comparison.sign in ("<=", ">="):
        may_fail, surely_fails = (
            left_high > right_low + ROUNDING * np.abs(right_low),
            left_low > right_high + ROUNDING * np.abs(right_high),
        )
    else:
        may_fail, surely_fails = (
            left_high >= right_low - ROUNDING * np.abs(right_low),
            left_low >= right_high - ROUNDING * np.abs(right_high),
        )
    return there & Truth(may_fail, surely_fails)


def _side(compiled: Compiled, formula: Formula, view: View, there: Truth) -> tuple[Floats, Floats]:
    if not formula.names:
        empty: dict[str, Floats] = {}
        hull = range_over(formula, empty, empty)
        return np.full(view.rows, hull.low), np.full(view.rows, hull.high)
    lows, highs = {}, {}
    for read in compiled.reads:
        if read.name in formula.names:
            lows[read.name], highs[read.name] = read_range(compiled, read, view, there)
    hull = range_over(formula, lows, highs)
    return hull.low, hull.high


def explain_limit(compiled: Compiled, view: View, row: int) -> Explanation:
    """The comparison with this row's figures put in."""
    comparison: Comparison | None = compiled.body.must_hold
    if comparison is None:
        return Explanation()
    figures = {}
    for read in compiled.reads:
        if read.quantity.is_number and may_be_at(view.column(read.quantity.id), row):
            low, high = read_range(compiled, read, view, gate(compiled, view, ()))
            figures[read.name] = range_text(float(low[row]), float(high[row]), read.quantity.decimals)
        else:
            figures[read.name] = "none"
    left, right = show(comparison.left, figures), show(comparison.right, figures)
    return Explanation(f"{left} {comparison.sign} {right}")


LIMIT = Kind("limit", compile_limit, evaluate_limit, explain_limit)
