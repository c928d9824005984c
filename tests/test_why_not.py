"""Why not another value: the governing rule stands first, and what is at or above the decision meets no rule."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Knowledge
from weldbasis.project import read_project
from weldbasis.reasons import trace_joint
from weldbasis.settling.against import why_not_value
from weldbasis.settling.wishes import Wish, read_wish


@pytest.fixture(scope="module")
def evaluations(knowledge: Knowledge, graph: KnowledgeGraph, examples: tuple[Path, ...]) -> tuple[Evaluation, ...]:
    return tuple(evaluate(knowledge, read_project(folder, knowledge).facts, graph) for folder in examples)


@given(data=st.data())
def test_the_governing_rule_stands_first_against_less(evaluations: tuple[Evaluation, ...], data: st.DataObject) -> None:
    evaluation = data.draw(st.sampled_from(evaluations))
    joint = data.draw(st.integers(0, len(evaluation.facts.joints) - 1))
    decision = data.draw(st.sampled_from([d for d in evaluation.knowledge.decisions if not d.part_of]))
    made = next(d for d in trace_joint(evaluation, joint, {}).decisions if d.ref.quantity == decision.id)
    if made.state == "uncovered":
        found = why_not_value(evaluation, joint, Wish(decision, "=", decision.order[0] if decision.levels else 50.0))
        assert found.uncovered
        assert found.objections == ()
        return
    if decision.is_number:
        assert isinstance(made.demanding, float)
        by = data.draw(st.floats(1, 200))
        less = made.demanding - by if decision.worse == "higher" else made.demanding + by
        value: float | str = less
    else:
        assert isinstance(made.demanding, str)
        order = decision.order if decision.worse == "last" else decision.order[::-1]
        place = order.index(made.demanding)
        if place == 0:
            return
        value = order[data.draw(st.integers(0, place - 1))]
    found = why_not_value(evaluation, joint, Wish(decision, "=", value))
    assert found.objections
    assert found.objections[0].governs
    assert not found.asks_more
    # Unless only rounding stands against it, a rule that governs the decision is the first named.
    giving = evaluation.graph.giving[decision.id]
    assert found.objections[0].step.rule in {*made.governing, giving}
    if isinstance(value, float) and abs(value - float(made.demanding)) > 10:
        assert found.objections[0].step.rule in made.governing


def test_what_is_asked_or_more_meets_no_rule_but_checks(evaluations: tuple[Evaluation, ...]) -> None:
    tideway = next(e for e in evaluations if "G4" in e.facts.joints)
    row = tideway.facts.joints.index("G4")
    same = why_not_value(tideway, row, read_wish("preheat 40", tideway.knowledge))
    assert (same.objections, same.checks, same.asks_more) == ((), (), False)
    more = why_not_value(tideway, row, read_wish("preheat 45", tideway.knowledge))
    assert (more.objections, more.checks, more.asks_more) == ((), (), True)
    far = why_not_value(tideway, row, read_wish("preheat 300", tideway.knowledge))
    assert far.objections == ()
    assert next((f.level, f.rule) for f in far.checks) == ("stop", "interpass-below-preheat")


def test_rounding_alone_is_named_where_nothing_else_asks_more(evaluations: tuple[Evaluation, ...]) -> None:
    millrace = next(e for e in evaluations if "N1" in e.facts.joints)
    row = millrace.facts.joints.index("N1")
    found = why_not_value(millrace, row, read_wish("preheat 55", millrace.knowledge))
    assert [o.step.rule for o in found.objections] == ["min-preheat"]
    found = why_not_value(millrace, row, read_wish("preheat 50", millrace.knowledge))
    assert found.objections[0].step.rule == "preheat-cet-member"
    assert found.objections[0].step.ref.member == 1


def test_only_the_contracts_method_stands_against_where_it_counts_first(evaluations: tuple[Evaluation, ...]) -> None:
    """Methods shown for comparison are no objection."""
    tideway = next(e for e in evaluations if "G1" in e.facts.joints)
    found = why_not_value(tideway, tideway.facts.joints.index("G1"), read_wish("preheat 45", tideway.knowledge))
    assert {o.step.rule for o in found.objections} == {"preheat-cet-member"}
