"""Is a set of rules sound? Every proof over every rule, and what comes of it; the proofs are in `proofs/`."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

import numpy as np

from weldbasis.authority.house import amended_records, house_problems
from weldbasis.cases import CaseResult, run_cases
from weldbasis.graph import build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.problem import Place, Problem
from weldbasis.proofs.domain import domain_of, never_applies
from weldbasis.proofs.finding import VetFinding
from weldbasis.proofs.formulas import formula_findings
from weldbasis.proofs.limits import limit_findings
from weldbasis.proofs.papers import case_findings, missing_papers, uncased_rules, unread_words, unused_sources
from weldbasis.proofs.reach import reach_of
from weldbasis.proofs.tables import table_findings
from weldbasis.proofs.unused import unused_parts
from weldbasis.survey.soundness import Escape


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
    findings += [*unused_sources(knowledge), *limit_findings(knowledge, graph)]
    reach = reach_of(knowledge, graph)
    for rule in graph.rules.values():
        boxes = domain_of(rule)
        findings += [*never_applies(rule, boxes), *missing_papers(rule), *unread_words(rule)]
        with np.errstate(all="ignore"):
            findings += [*table_findings(rule, boxes), *formula_findings(rule, domain_of(rule, reach))]
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
