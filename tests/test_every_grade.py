"""Every grade over thickness, process and hydrogen: each decision is settled, open or uncovered, and says why."""

from __future__ import annotations

import numpy as np
import pytest

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Knowledge, Quantity
from weldbasis.nearest import nearest_gap
from weldbasis.reasons import trace_joint
from weldbasis.settling.settle import open_inputs, settle
from weldbasis.state import open_rows
from weldbasis.survey.typical import Setting, joints_of_grade, lattice_facts
from weldbasis.values import ABSENT, MAYBE, PRESENT, Bools, Levels, Numbers, mask_of

THICKNESSES = (3.0, 12.0, 40.0, 90.0, 150.0)
JOINT: Setting = {"form": "butt", "process": "136", "ambient": 15.0, "humidity": "dry", "restraint": "medium"}
SETTINGS: tuple[Setting, ...] = (
    {"process": "111", "hydrogen": 15.0, "heat_input": 1.2},
    {"process": "121", "hydrogen": 5.0, "heat_input": 3.0},
    {"process": "141", "hydrogen": 2.0, "heat_input": 0.8},
)
SAMPLE = 150
ASKED = ("recommended", "required")


@pytest.fixture(scope="module")
def lattice(knowledge: Knowledge, graph: KnowledgeGraph) -> Evaluation:
    rows = [row for grade in knowledge.grades.values() for row in joints_of_grade(knowledge, grade, THICKNESSES, JOINT)]
    return evaluate(knowledge, lattice_facts(knowledge, rows, SETTINGS), graph, [q.id for q in knowledge.decisions])


@pytest.fixture(scope="module")
def sample(lattice: Evaluation) -> list[int]:
    count = len(lattice.facts.joints)
    return [int(row) for row in np.random.default_rng(11).choice(count, SAMPLE, replace=False)]


def main_decisions(knowledge: Knowledge) -> list[Quantity]:
    return [quantity for quantity in knowledge.decisions if not quantity.part_of]


def uncovered(lattice: Evaluation, quantity: Quantity) -> Bools:
    return np.asarray(lattice.columns[quantity.id].presence == ABSENT)


def test_all_grades_are_there(lattice: Evaluation, knowledge: Knowledge) -> None:
    assert len(lattice.facts.joints) == len(knowledge.grades) * len(THICKNESSES) * len(SETTINGS)


def test_every_decision_has_a_state_everywhere(lattice: Evaluation, knowledge: Knowledge) -> None:
    """Where there is or may be a value it is a set of something; an empty set would be an answer that says nothing."""
    for quantity in knowledge.decisions:
        column = lattice.columns[quantity.id]
        assert set(np.unique(column.presence)) <= {PRESENT, ABSENT, MAYBE}, quantity.id
        there = column.presence != ABSENT
        if isinstance(column, Numbers):
            assert (column.low[there] <= column.high[there]).all(), quantity.id
            assert np.isnan(column.low[~there]).all(), quantity.id
        else:
            assert isinstance(column, Levels)
            assert (column.mask[there] != 0).all(), quantity.id


def test_uncovered_names_the_nearest_rule_and_what_it_misses(lattice: Evaluation, knowledge: Knowledge) -> None:
    for quantity in main_decisions(knowledge):
        for row in np.flatnonzero(uncovered(lattice, quantity))[::4]:
            gap = nearest_gap(lattice, quantity.id, int(row))
            where = (quantity.id, lattice.facts.joints[row])
            assert gap.rule in knowledge.rules, where
            assert gap.misses, where
            assert gap.distance > 0, where


def test_a_figure_missed_is_named_with_its_amount(lattice: Evaluation, knowledge: Knowledge) -> None:
    row = lattice.facts.joints.index("A217-C12 12 2")
    gap = nearest_gap(lattice, "min_preheat", row)
    assert gap.rule == "preheat-cet-raised-member"
    assert "Chromium 8 to 10 % lies above the limit <= 1.5 by 8.5 %" in gap.misses
    assert nearest_gap(lattice, "max_interpass", lattice.facts.joints.index("A350-LF3 12 1")).misses == (
        "it has no figure for Steel family nickel",
    )


def test_what_is_covered_has_no_gap(lattice: Evaluation, knowledge: Knowledge) -> None:
    for quantity in main_decisions(knowledge):
        for row in np.flatnonzero(~uncovered(lattice, quantity))[::500]:
            assert nearest_gap(lattice, quantity.id, int(row)).distance == 0


def test_a_part_that_is_asked_for_is_given_or_said_to_be_missing(lattice: Evaluation, knowledge: Knowledge) -> None:
    """A treatment that is required without a temperature must not pass in silence."""
    missing: dict[int, list[Quantity]] = {}
    for quantity in knowledge.decisions:
        if quantity.part_of and isinstance(parent := lattice.columns[quantity.part_of], Levels):
            order = knowledge.quantities[quantity.part_of].order
            asked = mask_of([level for level in ASKED if level in order], order)
            for row in np.flatnonzero(((parent.mask & np.uint64(asked)) != 0) & uncovered(lattice, quantity)):
                missing.setdefault(int(row), []).append(quantity)
    assert missing, "the lattice holds no such case any more; take another one"
    for at, quantities in list(missing.items())[::10]:
        texts = [finding.text for finding in trace_joint(lattice, at, {}).findings]
        for quantity in quantities:
            assert any(text.startswith(f"{quantity.title} is asked for, and the rules give none.") for text in texts)


def test_open_says_what_would_settle_it(lattice: Evaluation, knowledge: Knowledge, sample: list[int]) -> None:
    narrowings = settle(lattice, sample)
    for quantity in main_decisions(knowledge):
        still_open = open_rows(lattice.columns[quantity.id], quantity)
        for row in (row for row in sample if still_open[row]):
            where = (quantity.id, lattice.facts.joints[row])
            assert narrowings.get((row, quantity.id)) or open_inputs(lattice, quantity, row), where


def test_traces_say_it_all(lattice: Evaluation, knowledge: Knowledge, sample: list[int]) -> None:
    narrowings = settle(lattice, sample[:20])
    for row in sample[:20]:
        trace = trace_joint(lattice, row, narrowings)
        assert {d.ref.quantity for d in trace.decisions} == {q.id for q in knowledge.decisions}
        for decision in trace.decisions:
            title = knowledge.quantities[decision.ref.quantity].title
            if knowledge.quantities[decision.ref.quantity].part_of:
                continue
            said = [finding.text for finding in trace.findings if finding.text.startswith(title)]
            if decision.state == "settled":
                assert decision.governing, (trace.joint, title)
            elif decision.state == "open":
                assert any("To know " in text or "it rests on " in text for text in said), (trace.joint, title)
            else:
                assert any("The nearest rule is " in text for text in said), (trace.joint, title)
