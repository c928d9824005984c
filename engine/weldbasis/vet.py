"""Is a set of rules sound? Graph, gaps, unused parts, stated directions, words, cases: every finding with its place."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from weldbasis.cases import CaseResult, run_cases
from weldbasis.formula import slopes
from weldbasis.graph import KnowledgeGraph, build_graph, quantity_node
from weldbasis.house import amended_records, house_problems
from weldbasis.kinds import Compiled
from weldbasis.kinds.condition import bounds_on
from weldbasis.kinds.table import Table, describe_cell
from weldbasis.knowledge import Knowledge
from weldbasis.problem import Place, Problem
from weldbasis.ranges import Range
from weldbasis.soundness import Escape

VetLevel = Literal["stop", "caution"]
_MOST_EXAMPLES = 3


@dataclass(frozen=True, order=True)
class VetFinding:
    """One thing wrong or doubtful in a set of rules; `stop` must be mended before it is used."""

    place: Place
    level: VetLevel
    check: str
    what: str
    do: str = ""

    def __str__(self) -> str:
        return f"{self.place}: {self.level}: {self.what}" + (f"\n    {self.do}" if self.do else "")


@dataclass(frozen=True)
class VetReport:
    """All findings and what was looked at."""

    findings: tuple[VetFinding, ...]
    cases: tuple[CaseResult, ...]
    counts: dict[str, int]

    @property
    def stops(self) -> tuple[VetFinding, ...]:
        """The findings that stop work."""
        return tuple(finding for finding in self.findings if finding.level == "stop")


def vet(knowledge: Knowledge) -> VetReport:
    """Look a loaded knowledge base over. Raises Refused where the rules do not even make a graph."""
    graph = build_graph(knowledge)
    cases = run_cases(knowledge, graph)
    findings = [*case_findings(cases), *uncased_rules(knowledge), *unused_parts(knowledge, graph)]
    for rule in graph.rules.values():
        findings += [*table_gaps(rule), *unused_rows(rule), *wrong_directions(rule), *missing_papers(rule)]
    findings += [from_problem(problem, "amendments") for problem in house_problems(amended_records(knowledge))]
    counts = {
        "quantities": len(knowledge.quantities),
        "rules": len(knowledge.rules),
        "sources": len(knowledge.sources),
        "grades": len(knowledge.grades),
        "eras": len(knowledge.eras),
        "consumables": len(knowledge.consumables),
        "cases": len(cases),
        "cases passed": sum(not case.faults for case in cases),
    }
    return VetReport(tuple(sorted(findings)), cases, counts)


def with_problems(report: VetReport, problems: Iterable[Problem], check: str) -> VetReport:
    """A report with problems found elsewhere added to its findings."""
    found = [from_problem(problem, check) for problem in problems]
    return replace(report, findings=tuple(sorted([*report.findings, *found])))


def from_problem(problem: Problem, check: str = "reading") -> VetFinding:
    """A problem as a finding that stops work."""
    what = problem.what + (f" ({problem.why})" if problem.why else "")
    return VetFinding(problem.place, "stop", check, what, problem.do)


def from_escape(escape: Escape, knowledge: Knowledge) -> VetFinding:
    """A quantity whose set does not hold all its points, as a finding that stops work."""
    rule = knowledge.rules.get(escape.rule)
    what = f"{escape.quantity}: {escape.points} points lie outside the set of their box, such as {escape.example}"
    place = rule.place if rule else Place("")
    return VetFinding(place, "stop", "points", what, "a mistake of the engine, or of a stated direction")


def case_findings(cases: tuple[CaseResult, ...]) -> Iterator[VetFinding]:
    """Cases that a rule does not reproduce."""
    for result in cases:
        for fault in result.faults:
            yield VetFinding(
                result.case.place,
                "stop",
                "cases",
                f"case {result.case.id}: {fault}",
                f"look at rule {result.case.rule}, or at the figures of the case",
            )


def uncased_rules(knowledge: Knowledge) -> Iterator[VetFinding]:
    """Rules that no case checks."""
    cased = {case.rule for case in knowledge.cases}
    for rule in knowledge.rules.values():
        if rule.id not in cased:
            yield VetFinding(
                rule.place,
                "caution",
                "cases",
                f"rule {rule.id} has no case",
                "write one under cases/, from a published example or worked by hand",
            )


def unused_parts(knowledge: Knowledge, graph: KnowledgeGraph) -> Iterator[VetFinding]:
    """Quantities that nothing gives and no project may give, or that nothing reads and nobody shows."""
    shown = {
        name
        for rule in graph.rules.values()
        if rule.rule.kind == "governing"
        for name in rule.rule.body.get("compare", ())
    }
    for quantity in knowledge.quantities.values():
        node = quantity_node(quantity.id)
        if quantity.given == "never" and quantity.id not in graph.giving:
            yield VetFinding(
                quantity.place,
                "caution",
                "unused",
                f"no rule gives {quantity.id} and no project may",
                "let a rule give it, write given: may, or take it out",
            )
        elif not graph.feeds(node) and not quantity.decision and quantity.id not in shown:
            yield VetFinding(
                quantity.place,
                "caution",
                "unused",
                f"nothing reads {quantity.id}",
                "read it in a rule, show it under compare, or take it out",
            )


def table_gaps(rule: Compiled) -> Iterator[VetFinding]:
    """Cells inside the vocabulary and the rule's limits that no row covers."""
    if not isinstance(rule.body, Table) or not rule.body.axes:
        return
    inside = [_segments_inside(rule, place) for place in range(len(rule.body.axes))]
    within = np.zeros(rule.body.won.shape, np.bool_)
    within[np.ix_(*inside)] = True
    gaps = np.argwhere((rule.body.won == -1) & within)
    if len(gaps):
        examples = "; ".join(describe_cell(rule.body.axes, tuple(int(s) for s in gap)) for gap in gaps[:_MOST_EXAMPLES])
        more = f" and {len(gaps) - _MOST_EXAMPLES} more" if len(gaps) > _MOST_EXAMPLES else ""
        yield VetFinding(
            rule.rule.place_of("rows"),
            "caution",
            "gaps",
            f"rule {rule.rule.id}: no row covers {examples}{more}",
            "add a row (give: absent where the table is silent on purpose), or narrow valid_within",
        )


def _segments_inside(rule: Compiled, place: int) -> np.ndarray:
    axis, read = rule.body.axes[place], rule.reads[place]
    if not axis.quantity.is_number:
        allowed = [
            test.mask
            for condition in (rule.applies, rule.valid)
            for test in condition.tests
            if test.quantity.id == axis.quantity.id and test.mask
        ]
        bits = np.array([all(mask >> level & 1 for mask in allowed) for level in range(axis.segments)])
        return bits if len(bits) else np.ones(axis.segments, np.bool_)
    limits = [axis.quantity.range, bounds_on(rule.applies, axis.quantity.id), bounds_on(rule.valid, axis.quantity.id)]
    low = read.factor * max(limit.low for limit in limits) + read.offset
    high = read.factor * min(limit.high for limit in limits) + read.offset
    return np.array([_meets(axis.segment_range(s), low, high) for s in range(axis.segments)])


def _meets(segment: Range, low: float, high: float) -> bool:
    if segment.low == segment.high:
        return low <= segment.low <= high
    return segment.low < high and segment.high > low


def unused_rows(rule: Compiled) -> Iterator[VetFinding]:
    """Rows of a table that win no cell."""
    if isinstance(rule.body, Table) and rule.body.axes:
        won = set(rule.body.won.reshape(-1).tolist())
        for row in range(len(rule.body.covers)):
            if row not in won:
                yield VetFinding(
                    rule.rule.place_of("rows", row),
                    "caution",
                    "gaps",
                    f"rule {rule.rule.id}: row {row + 1} never decides anything",
                    "take the row out",
                )


def wrong_directions(rule: Compiled) -> Iterator[VetFinding]:
    """Stated directions that the formula contradicts somewhere inside its validity."""
    if rule.rule.kind != "formula" or not rule.rule.direction:
        return
    lows, highs = {}, {}
    for read in rule.reads:
        limits = [
            read.quantity.range,
            bounds_on(rule.applies, read.quantity.id),
            bounds_on(rule.valid, read.quantity.id),
        ]
        low, high = max(limit.low for limit in limits), min(limit.high for limit in limits)
        lows[read.name] = np.array([read.factor * low + read.offset])
        highs[read.name] = np.array([read.factor * high + read.offset])
    found = slopes(rule.body, lows, highs)
    for read in rule.reads:
        stated = rule.rule.direction.get(read.quantity.id)
        steepest = (float(found[read.name][0][0]), float(found[read.name][1][0]))
        against = (stated == "up" and steepest[1] < 0) or (stated == "down" and steepest[0] > 0)
        if against:
            yield VetFinding(
                rule.rule.place_of("direction", read.quantity.id),
                "stop",
                "direction",
                f"rule {rule.rule.id} says that the result goes {stated} with {read.quantity.id}, "
                f"but its slope is {steepest[0]:.3g} to {steepest[1]:.3g}",
                "turn the direction round",
            )


def missing_papers(rule: Compiled) -> Iterator[VetFinding]:
    """Rules without a source, a sentence or a history."""
    if not rule.rule.cites:
        yield VetFinding(
            rule.rule.place,
            "stop",
            "sources",
            f"rule {rule.rule.id} cites nothing",
            "cite the source and clause, or common-practice with its reason",
        )
    if not rule.rule.changes:
        yield VetFinding(
            rule.rule.place,
            "stop",
            "versions",
            f"rule {rule.rule.id} has no changes entry",
            "add one for its first version",
        )
