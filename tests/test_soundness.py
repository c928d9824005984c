"""Points inside random boxes of all project inputs never leave their box's sets; the check finds what is unsound."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import KnowledgeGraph
from weldbasis.kinds import KINDS, View
from weldbasis.kinds.condition import Condition, judge
from weldbasis.knowledge import Knowledge
from weldbasis.survey import soundness
from weldbasis.survey.draw import points_in, random_boxes
from weldbasis.survey.soundness import try_points
from weldbasis.turning import first_beyond, turning_figures
from weldbasis.values import PRESENT, Levels, Numbers

SLICES = range(11, 14)


@pytest.mark.parametrize("seed", SLICES)
def test_no_point_leaves_the_set_of_its_box(seed: int, knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    found = try_points(knowledge, graph, 5_000, seed)
    assert found.escapes == ()
    assert found.points >= 5_000


def test_every_quantity_gets_a_value_somewhere(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    """A check that never reached a rule would prove nothing of it; a few rare methods may be missed in a slice."""
    assert len(try_points(knowledge, graph, 20_000, 1).untried) <= 3


def test_a_set_that_is_too_small_is_found(
    knowledge: Knowledge, graph: KnowledgeGraph, monkeypatch: pytest.MonkeyPatch
) -> None:
    def shrunk(evaluation: Evaluation) -> Evaluation:
        column = evaluation.columns["cet"]
        assert isinstance(column, Numbers)
        middle = (column.low + column.high) / 2
        columns = {**evaluation.columns, "cet": dataclasses.replace(column, low=middle, high=middle)}
        return dataclasses.replace(evaluation, columns=columns)

    monkeypatch.setattr(soundness, "narrowed", shrunk)
    found = try_points(knowledge, graph, 2_000)
    assert [(escape.quantity, escape.rule) for escape in found.escapes] == [("cet", "cet")]


def test_points_are_the_same_for_the_same_seed(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    figures = turning_figures(graph.rules.values())
    first, second = (random_boxes(knowledge, figures, 20, np.random.default_rng(3)) for _ in range(2))
    for name, column in first.given.items():
        other = second.given[name]
        if isinstance(column, Numbers) and isinstance(other, Numbers):
            assert np.array_equal(column.low, other.low, equal_nan=True)
            assert np.array_equal(column.high, other.high, equal_nan=True)
        elif isinstance(column, Levels) and isinstance(other, Levels):
            assert np.array_equal(column.mask, other.mask)


def test_points_lie_in_their_boxes(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    figures, rng = turning_figures(graph.rules.values()), np.random.default_rng(5)
    boxes = random_boxes(knowledge, figures, 50, rng)
    joints = np.repeat(np.arange(50), 20)
    points, members = points_in(boxes, knowledge, figures, joints, rng)
    for name, column in points.given.items():
        outer = boxes.given[name].take(joints if knowledge.quantities[name].of == "joint" else members)
        assert np.array_equal(column.presence, outer.presence)
        if isinstance(column, Levels) and isinstance(outer, Levels):
            assert not (column.mask & ~outer.mask).any()
            assert not (column.mask & (column.mask - np.uint64(1)))[column.mask > 0].any()
        elif isinstance(column, Numbers) and isinstance(outer, Numbers):
            there = ~np.isnan(column.low)
            assert ((column.low >= outer.low) & (column.low <= outer.high))[there].all()


def test_no_condition_changes_between_two_turns(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    """What is cut at a turn lies on one side of the rule's limit, and the last number before it on the other."""
    beyond = first_beyond([graph.rules["preheat-cet-member"]])
    carbon = graph.rules["preheat-cet-member"].valid.tests
    test = next(test for test in carbon if test.quantity.id == "carbon")
    assert np.round(beyond["carbon"], 6).tolist() == [0.05, 0.32]
    for first, before, after in zip(beyond["carbon"], (False, True), (True, False), strict=True):
        for number, inside in ((np.nextafter(first, -np.inf), before), (first, after)):
            assert (test.range.least <= number <= test.range.most) == inside
    assert knowledge.quantities["carbon"].range.high > 0.32


@pytest.mark.parametrize(
    ("phosphorus", "dilution"),
    [(0.045, (0.2, 0.6)), (0.045, (0.1, 0.3)), (0.045, (0.15, 0.4)), (0.5, (0.2, 0.6)), (0.5, (0.15, 0.4))],
)
def test_a_mixture_of_equal_contents_stands_at_its_limit(
    phosphorus: float, dilution: tuple[float, float], knowledge: Knowledge, graph: KnowledgeGraph
) -> None:
    """d·0.045 + (1 − d)·0.045 may come out a bit above 0.045; the limit `<= 0.045` is met all the same, and 0.5, all
    that the vocabulary allows, is a result still.
    """
    figures = turning_figures(graph.rules.values())
    facts = random_boxes(knowledge, figures, 1, np.random.default_rng(0))
    rows = len(facts.members)
    given = dict(facts.given)

    def number(low: float, high: float, count: int) -> Numbers:
        some = np.ones(count, np.uint8)
        return Numbers(np.full(count, low), np.full(count, high), some, np.zeros(count, np.uint8))

    for name, low, high in (("phosphorus", phosphorus, phosphorus), ("sulphur", 0.01, 0.01), ("carbon", 0.1, 0.1)):
        given[name] = number(low, high, rows)
    given["dilution"] = number(*dilution, 1)
    for name in ("segregation_factor", "core_phosphorus", "core_sulphur"):
        given.pop(name, None)
    given["deoxidation"] = Levels(np.full(rows, 1, np.uint64), np.ones(rows, np.uint8), np.zeros(rows, np.uint8))
    found = evaluate(knowledge, dataclasses.replace(facts, given=given), graph, ["mixed_phosphorus"])
    mixed = found.columns["mixed_phosphorus"]
    assert isinstance(mixed, Numbers)
    assert mixed.low[0] <= mixed.high[0]
    test = next(t for t in graph.rules["ucs"].valid.tests if t.quantity.id == "mixed_phosphorus")
    assert mixed.presence[0] == PRESENT
    assert mixed.high[0] == pytest.approx(phosphorus)
    assert bool(judge(Condition((test,)), found.views["joint"]).surely[0]) == (phosphorus == 0.045)


def test_a_mixture_of_all_that_is_allowed_has_a_result(knowledge: Knowledge, graph: KnowledgeGraph) -> None:
    """Of 0.4 % sulphur on both sides, at every dilution, the mixture holds 0.4 %; rounding takes no result away."""
    rule = graph.rules["mixed-sulphur"]
    dilution = np.linspace(0.0, 1.0, 400)
    full = np.full(400, knowledge.quantities["mixed_sulphur"].range.high)
    columns = {"dilution": dilution, "parent_sulphur": full, "deposit_sulphur": full}
    some, none = np.ones(400, np.uint8), np.zeros(400, np.uint8)
    view = View(knowledge, "joint", 400, np.arange(400), {n: Numbers(c, c, some, none) for n, c in columns.items()})
    found = KINDS["formula"].evaluate(rule, view)["mixed_sulphur"]
    assert (found.presence == PRESENT).all()
