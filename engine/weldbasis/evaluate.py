"""Evaluate all rules over all joints at once: one rule at a time, in the order of the graph, on columns of sets."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from weldbasis.facts import Facts
from weldbasis.graph import KnowledgeGraph, build_graph
from weldbasis.kinds import KINDS, View
from weldbasis.kinds.limit import violated
from weldbasis.knowledge import Knowledge, Scope
from weldbasis.values import Column, Truth, absent_levels, absent_numbers, chosen, is_there


@dataclass(frozen=True)
class Parts:
    """How the box of a joint was cut: into how many parts, along which inputs (quantity and member, 0 the joint)."""

    count: int
    along: tuple[tuple[str, int], ...]


@dataclass(frozen=True)
class Evaluation:
    """Every quantity's column, given or worked out, and where each limit rule raises its finding.

    `findings` maps a rule's id to the truth of its finding over the rows of the rule's scope. `facts.given`
    tells what was given; a given value beats the rule that would have worked it out, and `overruled` keeps what
    that rule gave. `parts` says for which joints, by row, the sets were narrowed by cutting their box.
    """

    knowledge: Knowledge
    graph: KnowledgeGraph
    facts: Facts
    columns: Mapping[str, Column]
    findings: Mapping[str, Truth]
    overruled: Mapping[str, Column] = field(default_factory=dict)
    # Whether every rule was worked out, not only those for some wanted quantities.
    whole: bool = True
    parts: Mapping[int, Parts] = field(default_factory=dict)

    @cached_property
    def views(self) -> Mapping[Scope, View]:
        """The finished columns as joints and as members see them."""
        return _views(self.knowledge, self.facts, dict(self.columns), complete=True)


def evaluate(
    knowledge: Knowledge,
    facts: Facts,
    graph: KnowledgeGraph | None = None,
    wanted: Iterable[str] | None = None,
    kept: Evaluation | None = None,
    known: Mapping[str, Column] | None = None,
) -> Evaluation:
    """Work out every quantity of every joint, or only what the `wanted` quantities rest on.

    `graph` spares building it again when several projects are evaluated. `kept` is what other rules made of the
    same facts: what does not rest on a rule that differs is taken from it. `known` holds columns of quantities
    worked out already over the same rows: what the wanted ones rest on is followed no farther up than to them.
    Raises Refused where the rules themselves cannot be used.
    """
    graph = graph or build_graph(knowledge)
    needed = None if wanted is None else graph.rules_for(tuple(wanted), known or ())
    same = _untouched(kept, graph) if kept else frozenset()
    columns: dict[str, Column] = dict(facts.given) | dict(known or {})
    views = _views(knowledge, facts, columns)
    findings: dict[str, Truth] = {}
    overruled: dict[str, Column] = {}
    with np.errstate(all="ignore"):
        for name in graph.order:
            if needed is not None and name not in needed:
                continue
            rule = graph.rules[name]
            view = views[rule.rule.for_each]
            if kept and name in same:
                columns |= {q.id: kept.columns[q.id] for q in rule.gives}
                overruled |= {q.id: kept.overruled[q.id] for q in rule.gives if q.id in kept.overruled}
                if name in kept.findings:
                    findings[name] = kept.findings[name]
                continue
            for given, result in KINDS[rule.rule.kind].evaluate(rule, view).items():
                columns[given] = _given_first(facts.given.get(given), result)
                if given in facts.given:
                    overruled[given] = result
            if rule.rule.kind == "limit":
                findings[name] = violated(rule, view)
    for quantity in knowledge.quantities.values():
        if quantity.id not in columns:
            rows = views[quantity.of].rows
            columns[quantity.id] = absent_numbers(rows) if quantity.is_number else absent_levels(rows)
    return Evaluation(knowledge, graph, facts, columns, findings, overruled, needed is None)


def _untouched(kept: Evaluation, graph: KnowledgeGraph) -> frozenset[str]:
    """The rules that are the same in both sets, down to everything they rest on."""
    rules, quantities = kept.graph.rules, kept.knowledge.quantities
    same: set[str] = set()
    for name in graph.order:
        rule = graph.rules[name]
        above = [graph.giving[read] for read in rule.inputs if read in graph.giving]
        reads = all(quantities.get(q.quantity.id) == q.quantity for q in rule.reads)
        gives = all(quantities.get(q.id) == q for q in rule.gives)
        unchanged = name in rules and rules[name].rule == rule.rule and reads and gives
        roots = all(kept.graph.giving.get(read) == graph.giving.get(read) for read in rule.inputs)
        if unchanged and roots and all(giver in same for giver in above):
            same.add(name)
    return frozenset(same)


def _given_first(given: Column | None, result: Column) -> Column:
    if given is None:
        return result
    there = is_there(given)
    if bool(there.surely.all()):
        return given
    return chosen(there.may, given, result)


def _views(
    knowledge: Knowledge, facts: Facts, columns: dict[str, Column], complete: bool = False
) -> Mapping[Scope, View]:
    joints = View(knowledge, "joint", len(facts.joints), facts.joint_of, columns, complete=complete)
    return {"joint": joints, "member": joints.members}
