"""Sets narrowed by cutting a joint into parts: tight for the preheat of every example, and never too small."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from bench.tightness import slacks
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.facts import Facts
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Knowledge, Quantity, Read, Rule
from weldbasis.narrow import MOST_PARTS, narrowed
from weldbasis.project import read_project
from weldbasis.ranges import Range
from weldbasis.reasons import trace_joint
from weldbasis.trace import Ref
from weldbasis.values import Levels, Numbers


def _one(facts: Facts, knowledge: Knowledge, joint: str) -> Facts:
    return facts.repeated(np.array([facts.joints.index(joint)]), knowledge.quantities)[0]


@pytest.fixture(scope="module")
def footbridge(knowledge: Knowledge, graph: KnowledgeGraph, examples: tuple[Path, ...]) -> Evaluation:
    folder = next(path for path in examples if path.name == "millrace-footbridge")
    return evaluate(knowledge, read_project(folder, knowledge).facts, graph)


@pytest.mark.parametrize(
    ("project", "joint"),
    [("millrace-footbridge", name) for name in ("N3", "N4", "N6", "N8", "N12", "N20")]
    + [("tideway-gates", name) for name in ("G22", "G29")],
)
def test_preheat_is_tight(
    project: str, joint: str, knowledge: Knowledge, graph: KnowledgeGraph, examples: tuple[Path, ...]
) -> None:
    """Against 20,000 points, one composition a part: at most 1 °C at either end, and no point outside."""
    folder = next(path for path in examples if path.name == project)
    facts = _one(read_project(folder, knowledge).facts, knowledge, joint)
    found = slacks(knowledge, graph, facts)
    assert found
    for slack in found:
        assert -1e-9 <= slack.least - slack.low <= 1, slack
        assert -1e-9 <= slack.high - slack.most <= 1, slack


def test_without_parts_some_preheats_are_wide(
    knowledge: Knowledge, graph: KnowledgeGraph, footbridge: Evaluation
) -> None:
    """What the parts are for: carbon raises the preheat and ends the method at 0.32 %."""
    facts = _one(footbridge.facts, knowledge, "N4")
    assert max(slack.worst for slack in slacks(knowledge, graph, facts, 4_000, narrow=False)) > 15


def test_sets_only_shrink(footbridge: Evaluation) -> None:
    after = narrowed(footbridge)
    assert after.parts
    assert all(1 < parts.count <= MOST_PARTS for parts in after.parts.values())
    for name, column in footbridge.columns.items():
        other = after.columns[name]
        assert not (other.presence & ~column.presence).any()
        assert (other.presence > 0).all()
        if isinstance(column, Numbers) and isinstance(other, Numbers):
            there = ~np.isnan(other.low)
            assert ((other.low >= column.low) & (other.high <= column.high) & (other.low <= other.high))[there].all()
        elif isinstance(column, Levels) and isinstance(other, Levels):
            assert not (other.mask & ~column.mask).any()
    for name, truth in footbridge.findings.items():
        assert not (after.findings[name].may & ~truth.may).any()
        assert not (truth.surely & ~after.findings[name].surely).any()


def test_known_joints_are_left_alone(footbridge: Evaluation) -> None:
    facts = _one(footbridge.facts, footbridge.knowledge, "N2")
    evaluation = evaluate(footbridge.knowledge, facts, footbridge.graph)
    assert narrowed(evaluation) is evaluation


def test_a_trace_says_that_it_was_narrowed(footbridge: Evaluation) -> None:
    after = narrowed(footbridge)
    row = footbridge.facts.joints.index("N12")
    trace, before = trace_joint(after, row), trace_joint(footbridge, row)
    assert "carbon of repair-1950s (part 2)" in trace.in_parts
    assert f"into {after.parts[row].count} parts" in trace.in_parts
    assert not before.in_parts
    assert trace.steps[Ref("preheat_cet_member", 2)].value.narrowed
    assert not trace.steps[Ref("preheat_cet_member", 1)].value.narrowed
    assert not before.steps[Ref("preheat_cet_member", 2)].value.narrowed


def _rule(name: str, kind: str, reads: Mapping[str, str], body: Mapping[str, object]) -> Rule:
    bound = tuple(Read(symbol, quantity) for symbol, quantity in reads.items())
    return Rule(name, 1, name, kind, "joint", (name,), bound, body, "{result}", (), ())


def _crossing() -> Knowledge:
    """Two candidates of one input, one falling and one rising with it; the higher decides."""
    parts: dict[str, Any] = {"title": "", "of": "joint", "says": "", "unit": "degC", "range": Range(0, 500)}
    heat = Quantity("heat_input", "Heat input", "joint", "", unit="kJ/mm", range=Range(0, 12), given="may")
    quantities = [heat, Quantity("falling", **parts), Quantity("rising", **parts)]
    quantities.append(Quantity("min_preheat", decision=1, worse="higher", **parts))
    rules = [
        _rule("falling", "formula", {"Q": "heat_input"}, {"formula": "100 - 20*Q"}),
        _rule("rising", "formula", {"Q": "heat_input"}, {"formula": "40 + 20*Q"}),
        _rule("min_preheat", "governing", {}, {"take": "highest", "candidates": ["falling", "rising"]}),
    ]
    by_id = {q.id: q for q in quantities}
    return Knowledge("", "", "working", by_id, {rule.id: rule for rule in rules}, {}, {}, {}, {}, ())


def test_one_input_that_works_both_ways_is_respected() -> None:
    """max(100 − 20 Q, 40 + 20 Q) over Q from 0 to 2.9 is 70 to 100, not 40 to 100."""
    heat = Numbers(np.array([0.0]), np.array([2.9]), np.array([1], np.uint8), np.zeros(1, np.uint8))
    facts = Facts(("J",), ("plate",), np.zeros(1, np.intp), {"heat_input": heat})
    whole = evaluate(_crossing(), facts)
    after = narrowed(whole)
    for evaluation, low in ((whole, 42.0), (after, 70.0)):
        column = evaluation.columns["min_preheat"]
        assert isinstance(column, Numbers)
        assert column.high[0] == pytest.approx(100)
        assert low - 6 <= column.low[0] <= low
    assert after.parts[0].along == (("heat_input", 0),)
