"""Sets narrowed by cutting a joint into parts: tight for the preheat of every example, and never too small."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from bench.tightness import slacks
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.facts import Facts
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Knowledge
from weldbasis.narrow import MOST_PARTS, narrowed
from weldbasis.project import read_project
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
