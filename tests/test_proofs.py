"""Proofs against brute force: tables point by point, formulas on dense grids, reach on the example projects."""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, example, given, settings
from hypothesis import strategies as st

from weldbasis.cli.vet import _show
from weldbasis.evaluate import evaluate
from weldbasis.formula import parse_formula, value_at
from weldbasis.formula.factors import what_turns
from weldbasis.formula.holes import holes
from weldbasis.graph import KnowledgeGraph
from weldbasis.kinds import Compiled, compile_rule
from weldbasis.knowledge import Knowledge, Level, Quantity, Read, Rule
from weldbasis.problem import Place, Refused
from weldbasis.project.read import read_project
from weldbasis.proofs.cells import blocks, inside
from weldbasis.proofs.domain import domain_of
from weldbasis.proofs.finding import VetFinding
from weldbasis.proofs.formulas import formula_findings
from weldbasis.proofs.reach import reach_of
from weldbasis.proofs.tables import table_findings
from weldbasis.ranges import Range, common, parse_range, within
from weldbasis.values import PRESENT, Numbers
from weldbasis.vet import VetReport

LEVELS = ("a", "b", "c")
QUANTITIES = {
    "t": Quantity("t", "t", "joint", "", unit="mm", range=Range(0, 8)),
    "g": Quantity("g", "g", "joint", "", levels=tuple(Level(name, name) for name in LEVELS)),
    "x": Quantity("x", "x", "joint", "", range=Range(-3, 3)),
    "y": Quantity("y", "y", "joint", "", range=Range(-3, 3)),
    "r": Quantity("r", "r", "joint", "", range=Range(-1e9, 1e9), worse="higher"),
}
KNOWLEDGE = Knowledge("", "", "", QUANTITIES, {}, {}, {}, {}, {}, ())


def compiled(kind: str, body: Mapping[str, Any], reads: tuple[str, ...], **more: Any) -> Compiled:
    written = tuple(Read(name, name) for name in reads)
    return compile_rule(Rule("r", 1, "", kind, "joint", ("r",), written, body, "", (), (), **more), KNOWLEDGE)


spans = st.builds(
    lambda low, width, a, b: f"{'(' if a and width else '['}{low}, {low + width}{')' if b and width else ']'}",
    st.integers(0, 8),
    st.integers(0, 5),
    st.booleans(),
    st.booleans(),
)
some_levels = st.lists(st.sampled_from(LEVELS), min_size=1, max_size=3, unique=True)
conditions = st.fixed_dictionaries({}, optional={"t": spans, "g": some_levels})
domains = st.builds(
    lambda plain, parts: {**plain, "any_of": parts} if parts else plain,
    conditions,
    st.lists(conditions, max_size=3),
)
tables = st.lists(st.tuples(conditions, st.integers(1, 3)), min_size=1, max_size=5)
POINTS = [(float(t), g) for t in np.arange(0, 8.01, 0.25) for g in LEVELS]


def holds(condition: Mapping[str, Any], point: tuple[float, str]) -> bool:
    """The plain meaning of a condition at a point."""
    t, g = point
    plain = ("t" not in condition or parse_range(condition["t"]).holds(t)) and g in condition.get("g", LEVELS)
    return plain and ("any_of" not in condition or any(holds(part, point) for part in condition["any_of"]))


def rows_of(written: list[tuple[dict[str, Any], int]]) -> list[dict[str, Any]]:
    return [{"when": when, "give": give} for when, give in written]


@settings(max_examples=300)
@given(tables, domains)
@example([({"t": "[0, 3)"}, 1), ({"t": "(3, 8]"}, 2)], {"any_of": [{"t": "(3, 8]"}, {"t": "[0, 3)"}]})
@example([({"t": "[0, 3)"}, 1), ({"t": "(3, 8]"}, 2)], {"any_of": [{"t": "[3, 8]"}, {"t": "[0, 3)"}]})
def test_gaps_and_idle_rows_equal_enumeration(
    written: list[tuple[dict[str, Any], int]], domain: dict[str, Any]
) -> None:
    body = {"read_as": "most-demanding-row", "rows": rows_of(written)}
    rule = compiled("table", body, ("t", "g"), valid_within=domain)
    boxes = domain_of(rule)
    inner = [point for point in POINTS if holds(domain, point)]
    assert bool(boxes) == bool(inner)
    assume(inner)
    matching = {point: [at for at, (when, _) in enumerate(written) if holds(when, point)] for point in inner}
    bare = {point for point, rows in matching.items() if not rows}
    axes = rule.body.axes
    cells = inside(axes, rule.reads, boxes)
    marked = (rule.body.won == -1) & cells
    for point in POINTS:
        at = (int(axes[0].segment_of(np.array([point[0]]))[0]), LEVELS.index(point[1]))
        if point in inner:
            assert cells[at]
            assert marked[at] == (point in bare)
    assert bool(marked.any()) == bool(bare)
    covered = np.zeros(marked.shape, np.int_)
    for block in blocks(marked):
        covered[tuple(slice(first, last + 1) for first, last in block)] += 1
    assert (covered == marked).all()
    found = list(table_findings(rule, boxes))
    told = [finding for finding in found if "no row covers" in finding.what]
    assert bool(told) == bool(bare)
    for finding in told:
        shown = dict(part.split(" = ") for part in finding.example.split(", "))
        assert not any(holds(when, (float(shown["t"]), shown["g"])) for when, _ in written)
        assert holds(domain, (float(shown["t"]), shown["g"]))
    winning = {min(rows, key=lambda at: (-written[at][1], at)) for rows in matching.values() if rows}
    idle = {int(f.what.split("row ")[1].split(" ")[0]) - 1 for f in found if "never decides" in f.what}
    assert idle == set(range(len(written))) - winning


@given(tables)
def test_the_one_row_is_refused_where_two_match(written: list[tuple[dict[str, Any], int]]) -> None:
    several = {
        pair
        for point in POINTS
        for pair in itertools.combinations([at for at, (when, _) in enumerate(written) if holds(when, point)], 2)
    }
    try:
        compiled("table", {"read_as": "the-one-row", "rows": rows_of(written)}, ("t", "g"))
        told = set()
    except Refused as refused:
        words = [problem.what.split("rows ")[1].split(" both")[0].split(" and ") for problem in refused.problems]
        told = {(int(first) - 1, int(second) - 1) for first, second in words}
    beyond = {pair for pair in told - several if not _meet_in_range(written, pair)}
    assert told - beyond == several


def _meet_in_range(written: list[tuple[dict[str, Any], int]], pair: tuple[int, int]) -> bool:
    """Whether two rows meet inside the vocabulary; ranges drawn may reach beyond its end at 8."""
    spans_met = [parse_range(written[at][0].get("t", "[0, 8]")) for at in pair]
    met = common(*spans_met)
    return met is not None and common(met, Range(0, 8)) is not None


curves = st.lists(st.tuples(some_levels, st.integers(0, 4), st.integers(1, 6)), min_size=1, max_size=3)


@given(curves, domains)
def test_curves_equal_enumeration(drawn: list[tuple[list[str], int, int]], domain: dict[str, Any]) -> None:
    nodes: dict[tuple[str, ...], set[int]] = {}
    for levels, low, width in drawn:
        nodes.setdefault(tuple(sorted(levels)), set()).update((low, low + width))
    written = [{"when": {"t": t, "g": list(g)}, "give": 1} for g, at in nodes.items() for t in sorted(at)]
    rule = compiled("table", {"read_as": "interpolated", "rows": written}, ("t", "g"), valid_within=domain)
    boxes = domain_of(rule)
    inner = [point for point in POINTS if holds(domain, point)]
    assume(inner)
    reached = {p: [g for g, at in nodes.items() if p[1] in g and min(at) <= p[0] <= max(at)] for p in inner}
    several = any(sum(level in g for g in nodes) > 1 for level in {g for _, g in inner})
    found = list(table_findings(rule, boxes))
    assert any(finding.check == "overlaps" for finding in found) == several
    if not several:
        assert any(finding.check == "gaps" for finding in found) == any(not curve for curve in reached.values())


numbers = st.sampled_from(["0.5", "1", "2", "3"])
parts = st.recursive(
    st.one_of(st.sampled_from(["x", "y"]), numbers),
    lambda inner: st.one_of(
        st.tuples(inner, st.sampled_from("+-*/"), inner).map(lambda p: f"({p[0]} {p[1]} {p[2]})"),
        inner.map(lambda p: f"sqrt({p})"),
        inner.map(lambda p: f"log10({p})"),
        inner.map(lambda p: f"abs({p})"),
        st.tuples(inner, st.sampled_from(["2", "0.5", "-1", "-0.5", "3"])).map(lambda p: f"({p[0]})**({p[1]})"),
        st.tuples(inner, inner).map(lambda p: f"max({p[0]}, {p[1]})"),
        st.tuples(inner, numbers).map(lambda p: f"round_up({p[0]}, {p[1]} - 0.5)"),
    ),
    max_leaves=6,
)
ends = st.tuples(st.sampled_from([-3.0, -2.0, -1.0, 0.0, 1.0, 2.0]), st.sampled_from([0.5, 1.0, 2.0, 3.0]))


@settings(max_examples=400)
@given(parts, ends, ends)
@example("sqrt(x)", (0.0, 1.0), (0.0, 1.0))
@example("1/(x - y)", (0.0, 1.0), (2.0, 1.0))
@example("1/(x*x + 1)", (-1.0, 2.0), (0.0, 1.0))
@example("log10(x*y)", (0.5, 1.0), (0.5, 1.0))
def test_holes_against_a_dense_grid(text: str, x: tuple[float, float], y: tuple[float, float]) -> None:
    formula = parse_formula(text)
    assume(formula.names)
    low = {name: end[0] for name, end in (("x", x), ("y", y)) if name in formula.names}
    high = {name: sum(end) for name, end in (("x", x), ("y", y)) if name in formula.names}
    found = holes(formula, low, high)
    steps = [np.linspace(low[name], high[name], 49) for name in formula.names]
    grid = [axis.ravel() for axis in np.meshgrid(*steps)]
    values = value_at(formula, dict(zip(formula.names, grid, strict=True)))
    if not found:
        assert np.isfinite(values).all(), "proved, and yet there is a point without value"
    for hole in found:
        if hole.point is None:
            continue
        assert all(low[name] <= at <= high[name] for name, at in hole.point.items())
        value = value_at(formula, {name: np.array([at]) for name, at in hole.point.items()})[0]
        assert not np.isfinite(value) or "zero" in hole.why


@pytest.mark.parametrize(
    ("text", "box", "part", "why"),
    [
        ("log10(x - 2)", (2, 3), "log10(x − 2)", "a logarithm of zero or less"),
        ("sqrt(x - 2.5)", (2, 3), "sqrt(x − 2.5)", "a square root of less than zero"),
        ("1/(x - 2.7)", (2, 3), "1 / (x − 2.7)", "a division by zero"),
        ("1/(x - 2.7)**2", (2, 3), "1 / (x − 2.7)^2", "a division by zero"),
        ("(x - 2.5)**-1", (2, 3), "(x − 2.5)^(−1)", "a division by zero"),
        ("(2.5 - x)**0.35", (2, 3), "(2.5 − x)^0.35", "a fractional power of less than zero"),
        ("(2.5 - x)**x", (2, 3), "(2.5 − x)^x", "a changing power of zero or less"),
        ("round_up(x, x - 2)", (2, 3), "round_up(x, x − 2)", "rounding to steps of zero or less"),
        ("1/(0*x)", (2, 3), "1 / (0 × x)", "a division by zero"),
        ("exp(x)/sqrt(3 - x)", (2, 3), "exp(x) / sqrt(3 − x)", "a division by zero"),
    ],
)
def test_every_sort_of_hole_is_shown_with_its_part(text: str, box: tuple[float, float], part: str, why: str) -> None:
    hole = holes(parse_formula(text), {"x": box[0]}, {"x": box[1]})[0]
    assert (hole.part, hole.why) == (part, why)
    assert hole.point is not None


@pytest.mark.parametrize(
    "text", ["log10(x - 1.9)", "sqrt(x*x - 4*x + 4.01)", "1/(x*x - 4*x + 4.01)", "sqrt((x - 1)/(4 - x))", "x**x", "3/x"]
)
def test_formulas_with_a_value_everywhere_are_proved(text: str) -> None:
    assert holes(parse_formula(text), {"x": 2}, {"x": 3}) == ()


def test_what_is_neither_proved_nor_shown_is_left_open() -> None:
    hole = holes(parse_formula("1/(x*x - 2*x + 1)"), {"x": 0.0}, {"x": 4.1})[0]
    assert hole.point is None


def test_an_open_end_is_no_hole() -> None:
    for wanted, count in (("(0, 3]", 0), ("[0, 3]", 1)):
        rule = compiled("formula", {"formula": "log10(x)"}, ("x",), valid_within={"x": wanted})
        assert len(list(formula_findings(rule, domain_of(rule)))) == count


@given(parts, st.sampled_from(["up", "down"]))
@example("x*x", "up")
@example("x**3", "up")
def test_a_refuted_direction_shows_two_points_that_refute_it(text: str, way: str) -> None:
    formula = parse_formula(text)
    assume(formula.names)
    rule = compiled("formula", {"formula": text}, formula.names, direction={formula.names[0]: way})
    told = [f for f in formula_findings(rule, domain_of(rule)) if f.check == "directions"]
    found = [f for f in told if f.level == "stop"]
    low = {name: QUANTITIES[name].range.low for name in formula.names}
    steps = np.linspace(-3, 3, 61)
    for other in (-3.0, -1.1, 0.3, 3.0):
        values = value_at(formula, {n: steps if n == formula.names[0] else np.full(61, other) for n in low})
        moved = np.diff(values) * (1 if way == "up" else -1)
        if not told and np.isfinite(values).all():
            assert not (moved < -1e-9 * np.abs(values).max()).any()
    for finding in found:
        first, second = finding.example.split("; ")
        before, after = float(first.split("gives ")[1]), float(second.split("gives ")[1])
        assert (after < before) == (way == "up")


span_ends = st.integers(-3, 3)
span_pairs = st.tuples(span_ends, span_ends, st.booleans(), st.booleans()).filter(
    lambda p: p[0] < p[1] or (p[0] == p[1] and not (p[2] or p[3]))
)


@given(span_pairs, span_pairs)
def test_common_and_within_equal_enumeration(one: Any, other: Any) -> None:
    first, second = (Range(float(span[0]), float(span[1]), span[2], span[3]) for span in (one, other))
    points = np.arange(-4, 4.01, 0.25)
    both = [p for p in points if first.holds(p) and second.holds(p)]
    met = common(first, second)
    assert [p for p in points if met is not None and met.holds(p)] == both
    assert within(first, second) == all(second.holds(p) for p in points if first.holds(p))


def test_no_value_of_the_examples_lies_out_of_reach(
    knowledge: Knowledge, graph: KnowledgeGraph, examples: tuple[Path, ...]
) -> None:
    reach = reach_of(knowledge, graph)
    assert sum(reach[q.id] != q.range for q in knowledge.quantities.values() if q.is_number) > 40
    for folder in examples:
        done = evaluate(knowledge, read_project(folder, knowledge).facts, graph)
        for name, column in done.columns.items():
            if isinstance(column, Numbers) and knowledge.quantities[name].given == "never":
                here = column.presence == PRESENT
                slack = 1e-9 * np.maximum(1.0, np.abs(column.high[here]))
                span, allowed = reach[name], knowledge.quantities[name].range
                low, high = np.maximum(column.low[here], allowed.low), np.minimum(column.high[here], allowed.high)
                meets = low <= high
                assert (low >= span.low - slack)[meets].all(), name
                assert (high <= span.high + slack)[meets].all(), name


def test_the_summary_fits_a_screen(capsys: pytest.CaptureFixture[str]) -> None:
    found = tuple(
        VetFinding(Place("rules/a.yaml", line), "caution", check, f"rule a: thing {line}", "mend it", "x = 1")
        for check in ("cases", "formulas", "gaps", "limits", "unused")
        for line in range(30)
    )
    report = VetReport(found, (), {"rules": 1})
    _show(report, quiet=False, every=False)
    shown = capsys.readouterr().out
    assert len(shown.splitlines()) <= 25
    assert "and 29 cautions more of gaps: --all shows them" in shown
    _show(report, quiet=False, every=True)
    assert capsys.readouterr().out.count("rule a: thing") == 150


def test_many_gaps_are_counted() -> None:
    rows = [{"when": {"t": f"[{low}, {low + 1})"}, "give": 1} for low in (0, 2, 4, 6)]
    rule = compiled("table", {"read_as": "the-one-row", "rows": rows}, ("t", "g"))
    found = next(f for f in table_findings(rule, domain_of(rule)) if f.check == "gaps")
    assert found.what == "rule r: no row covers t is [1, 2); t is [3, 4); t is [5, 6) and 6 cells more"
    assert found.example == "t = 1.5, g = a"


@pytest.mark.parametrize(
    ("text", "kept"),
    [("y*x", {"x", "y"}), ("y*y*x", {"x", "y"}), ("y**2*x", {"x"}), ("x/exp(y)", {"x"}), ("(x - y)*2", {"x", "y"})],
)
def test_only_factors_that_are_never_below_zero_are_left_out(text: str, kept: set[str]) -> None:
    low, high = {"x": -1.0, "y": -2.0}, {"x": 1.0, "y": 2.0}
    assert set(what_turns(parse_formula(text), "x", low, high).names) == kept
