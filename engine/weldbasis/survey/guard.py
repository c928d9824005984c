"""How well the figures of a set of rules are guarded: each nudged, one at a time, and does any case or proof notice?"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, replace
from typing import Any

from weldbasis.cases import outcome_faults
from weldbasis.graph import KnowledgeGraph
from weldbasis.kinds import compile_rule
from weldbasis.knowledge import Case, Knowledge, Rule
from weldbasis.problem import Refused
from weldbasis.proofs.domain import domain_of
from weldbasis.proofs.formulas import wrong_directions
from weldbasis.proofs.tables import table_findings
from weldbasis.survey.figures import Figure, figures_of, nudged, nudges

FORMAT = "weldbasis-figures/1"


@dataclass(frozen=True)
class Guarded:
    """One figure and what noticed it a little lower and a little higher: a case, a proof, or nothing (empty)."""

    figure: Figure
    topic: str
    noticed: tuple[str, str]

    @property
    def both(self) -> bool:
        """Whether neither nudge passes unnoticed."""
        return all(self.noticed)


def guard(
    knowledge: Knowledge, graph: KnowledgeGraph, rules: Iterable[str] = (), done: Callable[[int], object] = lambda _: 0
) -> tuple[Guarded, ...]:
    """Nudge every figure of all rules, or of those named; `done` is told how many rules are finished."""
    cases: dict[str, list[Case]] = {}
    for case in knowledge.cases:
        cases.setdefault(case.rule, []).append(case)
    found: list[Guarded] = []
    for count, name in enumerate(rules or knowledge.rules, start=1):
        rule = knowledge.rules[name]
        before = _proofs(rule, knowledge)
        for figure in figures_of(rule, knowledge):
            low, high = (
                _noticed(nudged(rule, figure, spelling), before, cases.get(name, []), knowledge, graph)
                for spelling in nudges(figure)
            )
            found.append(Guarded(figure, rule.topic, (low, high)))
        done(count)
    return tuple(found)


def _noticed(rule: Rule, before: frozenset[str], cases: list[Case], knowledge: Knowledge, graph: KnowledgeGraph) -> str:
    """What notices that a rule is not as it was; empty where nothing does."""
    try:
        compiled = compile_rule(rule, knowledge)
    except Refused:
        return "refused"
    beside = replace(graph, rules={**graph.rules, rule.id: compiled})
    for case in cases:
        if outcome_faults(case, knowledge, beside):
            return case.id
    return "proof" if _proofs(rule, knowledge) != before else ""


def _proofs(rule: Rule, knowledge: Knowledge) -> frozenset[str]:
    """What the proofs about a rule find: gaps, rows that decide nothing, stated directions that do not hold."""
    compiled = compile_rule(rule, knowledge)
    boxes = domain_of(compiled)
    directions = wrong_directions(compiled, boxes) if rule.kind == "formula" else ()
    return frozenset(f"{found.check} {found.place}" for found in (*table_findings(compiled, boxes), *directions))


def summary(knowledge: Knowledge, found: tuple[Guarded, ...]) -> dict[str, Any]:
    """The result as plain data, for the page and for scripts; it names the rules that it holds for."""
    topics: dict[str, list[Guarded]] = {}
    for one in found:
        topics.setdefault(one.topic, []).append(one)
    return {
        "format": FORMAT,
        "rules": knowledge.digest,
        "figures": len(found),
        "guarded": sum(one.both for one in found),
        "nudges_noticed": sum(bool(end) for one in found for end in one.noticed),
        "topics": {
            topic: {"figures": len(some), "guarded": sum(one.both for one in some)}
            for topic, some in sorted(topics.items())
        },
        "unguarded": [
            {
                "rule": one.figure.rule,
                "where": one.figure.where,
                "figure": one.figure.spelling,
                "unnoticed": [way for way, end in zip(("lower", "higher"), one.noticed, strict=True) if not end],
            }
            for one in found
            if not one.both
        ],
    }


def reason_for(reasons: Mapping[str, Any], rule: str, where: str) -> str:
    """Why a figure may stay unguarded, from the list kept by hand; empty where no reason is given."""
    for entry in reasons.get("unguarded", ()):
        if entry["rule"] == rule and entry.get("where", where) == where:
            return str(entry["why"])
    return ""
