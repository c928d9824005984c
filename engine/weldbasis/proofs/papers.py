"""Proofs about the papers of rules: sources cited and used, limits of a source kept, sentences, histories, cases."""

from __future__ import annotations

import re
from collections.abc import Iterator

from weldbasis.cases import CaseResult
from weldbasis.kinds.compiled import Compiled
from weldbasis.knowledge import Knowledge
from weldbasis.problem import nearest
from weldbasis.proofs.finding import VetFinding

_NAME = re.compile(r"\{(\w+)\}")


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


def unused_sources(knowledge: Knowledge) -> Iterator[VetFinding]:
    """Sources that nothing cites."""
    records = (knowledge.rules, knowledge.grades, knowledge.eras, knowledge.consumables)
    cited = {cite.source for kind in records for record in kind.values() for cite in record.cites}
    cited |= {case.source for case in knowledge.cases}
    for source in knowledge.sources.values():
        if source.id not in cited:
            do = "cite it where it was used, or take it out"
            yield VetFinding(source.place, "caution", "unused", f"nothing cites {source.id}", do)


def missing_papers(compiled: Compiled) -> Iterator[VetFinding]:
    """Rules without a source or a history."""
    rule = compiled.rule
    if not rule.cites:
        yield VetFinding(
            rule.place,
            "stop",
            "sources",
            f"rule {rule.id} cites nothing",
            "cite the source and clause, or common-practice with its reason",
        )
    if not rule.changes:
        yield VetFinding(
            rule.place,
            "stop",
            "versions",
            f"rule {rule.id} has no changes entry",
            "add one for its first version",
        )


def unread_words(compiled: Compiled) -> Iterator[VetFinding]:
    """Values that a rule's sentence names and the rule does not look at."""
    rule = compiled.rule
    known = {read.name for read in compiled.reads} | {"result", *rule.gives, *compiled.inputs}
    for name in dict.fromkeys(_NAME.findall(rule.say)):
        if name not in known:
            yield VetFinding(
                rule.place_of("say"),
                "stop",
                "words",
                f"say of rule {rule.id} names {{{name}}}, which the rule does not read",
                nearest(name, known),
            )
