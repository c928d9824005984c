"""Preheat methods side by side over a lattice of joints: where they agree, where they part, which limits are left."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import product

import numpy as np

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import KnowledgeGraph, quantity_node
from weldbasis.kinds import Compiled
from weldbasis.kinds.condition import Test, judge_test
from weldbasis.kinds.gather import Gather
from weldbasis.kinds.governing import Governing
from weldbasis.knowledge import Knowledge, Quantity
from weldbasis.project.columns import JointRow
from weldbasis.project.given import Fact
from weldbasis.survey.typical import Setting, joints_of_grade, lattice_facts, typical_analysis
from weldbasis.values import Floats, Numbers, levels_of
from weldbasis.words import levels_text

_MEASURED = frozenset({"carbon", "manganese"})


@dataclass(frozen=True)
class Plan:
    """What is compared: grades with their own joint values, the axes of the lattice, the methods by quantity id."""

    steels: Mapping[str, Setting]
    shares: Mapping[str, float]
    own_shares: Mapping[str, Mapping[str, float]]
    residual_share: float
    joint: Setting
    thickness_mm: tuple[float, ...]
    axes: Mapping[str, tuple[float | str, ...]]
    methods: tuple[str, ...]
    agree_within_k: float


@dataclass(frozen=True)
class Lattice:
    """Methods over the lattice: `values` in °C by method, steel, thickness and one axis after the other.

    nan stands where a method gives nothing. What lies below the metal's own temperature asks for no heating and is put
    at that temperature, so that two methods which both ask for nothing do not differ.
    """

    plan: Plan
    evaluation: Evaluation
    values: Floats

    @property
    def joints(self) -> int:
        """How many joints the lattice holds."""
        return int(np.prod(self.values.shape[1:]))

    def flat(self, method: int) -> Floats:
        """A method's values over all joints."""
        return np.asarray(self.values[method].ravel())


@dataclass(frozen=True)
class Pair:
    """Two methods where both give a value: of how many joints, what share agrees, and first less second in K."""

    joints: int
    agree: float
    low: float
    middle: float
    high: float


@dataclass(frozen=True)
class Effect:
    """What a method's value changes by, in K, from the lower to the upper end of an axis, on average; None: no pair."""

    mean: float | None


@dataclass(frozen=True)
class LimitLeft:
    """A limit of a method, and in what share of all joints it is surely left."""

    quantity: Quantity
    limit: str
    share: float


def walk_lattice(plan: Plan, knowledge: Knowledge, graph: KnowledgeGraph) -> Lattice:
    """Work out every method for every joint of the plan. A thickness that a grade is not made in, or at which it
    does not limit carbon and manganese both, is no joint: nothing typical could be said of it.
    """
    settings: list[Setting] = [dict(zip(plan.axes, point, strict=True)) for point in product(*plan.axes.values())]
    rows: list[JointRow] = []
    places: list[tuple[int, int]] = []
    for number, (name, own) in enumerate(plan.steels.items()):
        grade = knowledge.grades[name]
        shares = {**plan.shares, **plan.own_shares.get(name, {})}
        analyses: dict[float, Mapping[str, Fact]] = {}
        for place, thickness in enumerate(plan.thickness_mm):
            found = typical_analysis(knowledge, grade, thickness, shares, plan.residual_share)
            if found is not None and found.keys() >= _MEASURED:
                analyses[thickness] = found
                places.append((number, place))
        rows += joints_of_grade(knowledge, grade, analyses, {**plan.joint, **own}, analyses)
    wanted = (*plan.methods, "no_preheat_combined_thickness", "ce_iiw", "cet", "pcm")
    evaluation = evaluate(knowledge, lattice_facts(knowledge, rows, settings), graph, wanted)
    ambient = evaluation.columns["ambient"]
    assert isinstance(ambient, Numbers)
    shape = (len(plan.steels), len(plan.thickness_mm), *(len(levels) for levels in plan.axes.values()))
    values = np.full((len(plan.methods), *shape), np.nan)
    at = tuple(np.array(places).T)
    for number, method in enumerate(plan.methods):
        column = evaluation.columns[method]
        assert isinstance(column, Numbers)
        high = np.where(np.isnan(column.high), np.nan, np.maximum(column.high, ambient.high))
        values[number][at] = high.reshape(len(places), *shape[2:])
    return Lattice(plan, evaluation, values)


def share_inside(lattice: Lattice, method: int) -> float:
    """In what share of the joints evaluated a method gives a value."""
    return float(np.isfinite(lattice.flat(method)).sum() / len(lattice.evaluation.facts.joints))


def compare(lattice: Lattice, first: int, second: int) -> Pair | None:
    """Two methods against each other; None where there is no joint that both give a value for."""
    apart = lattice.flat(first) - lattice.flat(second)
    apart = apart[np.isfinite(apart)]
    if not len(apart):
        return None
    low, middle, high = np.percentile(apart, [5, 50, 95])
    agree = np.abs(apart) <= lattice.plan.agree_within_k
    return Pair(len(apart), float(agree.mean()), float(low), float(middle), float(high))


def effect(lattice: Lattice, method: int, axis: str) -> Effect:
    """How much a method's value changes from the first to the last level of an axis, over joints inside at both."""
    place = 1 if axis == "thickness" else 2 + list(lattice.plan.axes).index(axis)
    values = lattice.values[method]
    if axis == "thickness":  # 20 and 50 mm lie inside most methods
        ends = [lattice.plan.thickness_mm.index(end) for end in (20.0, 50.0)]
    else:
        ends = [0, values.shape[place] - 1]
    change = np.take(values, ends[1], place) - np.take(values, ends[0], place)
    change = change[np.isfinite(change)]
    return Effect(float(change.mean()) if len(change) else None)


def spreads(lattice: Lattice, steel: int) -> Floats:
    """Highest less lowest method, in K, of every joint of a steel that two methods or more give a value for."""
    here = lattice.values[:, steel].reshape(len(lattice.plan.methods), -1)
    here = here[:, np.isfinite(here).sum(axis=0) > 1]
    return np.asarray(np.nanmax(here, axis=0) - np.nanmin(here, axis=0)) if here.size else np.zeros(0)


def widest(lattice: Lattice, steel: int) -> tuple[float, int, int, tuple[int, ...]] | None:
    """Where a steel's methods part most: by how much, the highest and the lowest method, the place in the lattice."""
    here = lattice.values[:, steel]
    counts = np.isfinite(here).sum(axis=0)
    if not (counts > 1).any():
        return None
    high, low = (np.where(np.isfinite(here), here, fill) for fill in (-np.inf, np.inf))
    apart = np.where(counts > 1, high.max(axis=0) - low.min(axis=0), -np.inf)
    place = int(np.argmax(apart))
    indices = tuple(int(index) for index in np.unravel_index(place, apart.shape))
    top, bottom = (int(order.reshape(-1)[place]) for order in (high.argmax(axis=0), low.argmin(axis=0)))
    return float(apart.reshape(-1)[place]), top, bottom, indices


def limits_left(lattice: Lattice, graph: KnowledgeGraph, method: str) -> list[LimitLeft]:
    """The limits of the rules behind a method by how often a parent part surely leaves them, the most often first."""
    evaluation, found = lattice.evaluation, {}
    for rule in _rules_behind(graph, method):
        view = evaluation.views[rule.rule.for_each]
        parents = view.starts if rule.rule.for_each == "member" else np.arange(view.rows)
        for test in _tests(rule):
            left = ~judge_test(test, view).may[parents]
            limit = str(test.range) if test.quantity.is_number else _levels(test)
            found[test.quantity.id, limit] = LimitLeft(test.quantity, limit, float(left.mean()))
    return sorted((left for left in found.values() if left.share > 0), key=lambda left: (-left.share, left.quantity.id))


def _rules_behind(graph: KnowledgeGraph, quantity: str) -> list[Compiled]:
    """The rules that reckon a quantity, down through what only gathers and chooses."""
    name = graph.giving.get(quantity)
    if name is None:
        return []
    rule = graph.rules[name]
    if isinstance(rule.body, Gather):
        return _rules_behind(graph, rule.body.of.id)
    if isinstance(rule.body, Governing):
        return [behind for choice in rule.body.choices[:1] for behind in _rules_behind(graph, choice.quantity.id)]
    return [rule]


def _levels(test: Test) -> str:
    return levels_text(test.quantity, levels_of(test.mask, test.quantity.order))


def _tests(rule: Compiled) -> Sequence[Test]:
    given = [test for test in (*rule.applies.tests, *rule.valid.tests) if not test.there]
    return [test for test in given if test.quantity.id != "member_role"]


def rests_on(graph: KnowledgeGraph, method: str, quantities: Sequence[str]) -> list[str]:
    """Which of some quantities a method rests on, near or far."""
    above = {node.id for node in graph.rests_on(quantity_node(method)) if node.sort == "quantity"}
    return [name for name in quantities if name in above]
