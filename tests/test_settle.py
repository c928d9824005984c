"""What would settle an open decision: turning value, best pair and pooled samples, against direct evaluation."""

from __future__ import annotations

from itertools import combinations
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from joints import drawn_joints
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Knowledge
from weldbasis.project import read_project
from weldbasis.reading import value_of
from weldbasis.settling.narrowing import ANALYSIS, Narrowing
from weldbasis.settling.sampling import Plan, plan_samples
from weldbasis.settling.settle import open_analyses, open_decisions, settle, steels_of
from weldbasis.settling.trials import Pin, Trial, alike, decided_again, demands_of, member_rows, outcomes, pin_to
from weldbasis.settling.walks import steps_between
from weldbasis.state import demand_of, open_rows
from weldbasis.trace import Ref


@pytest.fixture(scope="module")
def evaluations(knowledge: Knowledge, graph: KnowledgeGraph, examples: tuple[Path, ...]) -> tuple[Evaluation, ...]:
    return tuple(evaluate(knowledge, read_project(folder, knowledge).facts, graph) for folder in examples)


def rows_of(evaluation: Evaluation, joint: int, ref: Ref) -> tuple[int, ...]:
    if not ref.member:
        return (joint,)
    return next(rows for rows, member in steels_of(evaluation, joint) if member == ref.member)


def check_turns(evaluation: Evaluation, found: dict[tuple[int, str], tuple[Narrowing, ...]]) -> int:
    """Every turning value: all values tried on the easy side ask what its end asks, and beyond it some ask more."""
    checked = 0
    for (joint, name), some in found.items():
        decision = evaluation.knowledge.quantities[name]
        for narrowing in some:
            if not narrowing.cases or narrowing.cases[0].found.low is None:
                continue
            rows = rows_of(evaluation, joint, narrowing.ref)
            easy, rest = (case.found for case in narrowing.cases)
            assert easy.low is not None
            assert easy.high is not None
            assert rest.low is not None
            assert rest.high is not None
            rising = rest.low > easy.low
            start, edge, after = (easy.low, easy.high, rest.low) if rising else (easy.high, easy.low, rest.high)
            beyond = np.linspace(rest.low, rest.high, 9)
            values = [start, edge, after, *beyond, *np.linspace(easy.low, easy.high, 7)]
            trials = [Trial(joint, (Pin(narrowing.ref.quantity, rows, v, v),)) for v in values]
            asked = demands_of(evaluation, trials, [decision])[:, 0]
            assert asked[1] == asked[0]
            assert asked[2] >= asked[0], (evaluation.facts.joints[joint], name)  # the edge lies on the safe side
            assert (asked[3:12] > asked[0]).any()
            assert (asked[12:] <= asked[0]).all()
            step = 10.0 ** -evaluation.knowledge.quantities[narrowing.ref.quantity].decimals
            assert abs(after - edge) <= step * 1.001
            checked += 1
    return checked


def test_turning_values_of_the_examples(evaluations: tuple[Evaluation, ...]) -> None:
    checked = sum(check_turns(e, dict(settle(e, range(len(e.facts.joints))))) for e in evaluations)
    assert checked >= 10


@settings(max_examples=5)
@given(seed=st.integers(0, 10**6))
def test_turning_values_of_drawn_joints(evaluations: tuple[Evaluation, ...], seed: int) -> None:
    evaluation = drawn_joints(evaluations, seed)
    check_turns(evaluation, dict(settle(evaluation, range(len(evaluation.facts.joints)))))


@settings(max_examples=8)
@given(seed=st.integers(0, 10**6), share=st.floats(0, 1))
def test_what_is_said_to_settle_does_at_any_value(evaluations: tuple[Evaluation, ...], seed: int, share: float) -> None:
    """The claim rests on seven values; here it is held against others."""
    evaluation = drawn_joints(evaluations, seed)
    for (joint, name), some in settle(evaluation, range(len(evaluation.facts.joints))).items():
        decision = evaluation.knowledge.quantities[name]
        for narrowing in some:
            if not narrowing.settles or any(ref.quantity == ANALYSIS for ref in narrowing.refs):
                continue
            pins = []
            for ref, now in zip(narrowing.refs, narrowing.now, strict=True):
                if now.low is None or now.high is None:
                    break
                value = now.low + share * (now.high - now.low)
                pins.append(Pin(ref.quantity, rows_of(evaluation, joint, ref), value, value))
            if len(pins) == len(narrowing.refs):
                column = outcomes(evaluation, [Trial(joint, tuple(pins))], [name])[name]
                assert not open_rows(column, decision)[0]


def test_the_pair_beats_every_single_and_every_other_pair_tried_by_hand(evaluations: tuple[Evaluation, ...]) -> None:
    """Two ranges that both matter, heat input and carbon, beside one that hardly does."""
    evaluation = evaluations[0]
    row = evaluation.facts.joints.index("N1")
    members = member_rows(evaluation, row)
    pins = (
        Pin("heat_input", (row,), 0.8, 2.4),
        Pin("carbon", tuple(members)[:2], 0.12, 0.2),
        Pin("hydrogen", (row,), 4.9, 5.0),
    )
    small = decided_again(evaluation, [Trial(row, pins)])
    found = settle(small, [0])[0, "min_preheat"]
    best = found[0]
    assert {ref.quantity for ref in best.refs} == {"heat_input", "carbon"}
    assert best.share < min(n.share for n in found if len(n.refs) == 1)
    decision = small.knowledge.quantities["min_preheat"]
    widths = {}
    single = {n.refs[0]: n.now[0] for n in found if len(n.refs) == 1 and n.ref.quantity != ANALYSIS}
    for one, other in combinations(sorted(single), 2):
        trials = []
        for a in np.linspace(single[one].low or 0, single[one].high or 0, 7):
            for b in np.linspace(single[other].low or 0, single[other].high or 0, 7):
                both = ((one, a), (other, b))
                trials.append(Trial(0, tuple(Pin(r.quantity, rows_of(small, 0, r), v, v) for r, v in both)))
        column = outcomes(small, trials, ["min_preheat"])["min_preheat"]
        values = [value_of(column, decision, n) for n in range(len(trials))]
        widths[one, other] = max((v.high or 0) - (v.low or 0) for v in values)
    assert widths
    assert min(widths, key=lambda key: widths[key]) == tuple(sorted(best.refs))


def settled_by(evaluation: Evaluation, plan: Plan, share: np.ndarray) -> Evaluation:
    """The project with every sampled steel analysed, each element at its share of the range."""
    undecided = open_decisions(evaluation, range(len(evaluation.facts.joints)))
    sampled = {steel for step in plan.steps if step.surely for steel in step.steels}
    at = {steel: n for n, steel in enumerate(sorted(plan.members))}
    trials = []
    for joint in range(len(evaluation.facts.joints)):
        pins = []
        for rows, _, ends in open_analyses(evaluation, joint, undecided.get(joint, ())):
            steel = next((s for s in sampled if plan.members[s].get(joint) == rows), None)
            if steel is not None:
                for n, (low, high) in enumerate(ends):
                    value = low.low + share[at[steel], n] * (high.low - low.low)
                    pins.append(Pin(low.quantity, rows, value, value))
        trials.append(Trial(joint, tuple(pins)))
    return decided_again(evaluation, trials, [decision.id for decision in evaluation.knowledge.decisions])


def test_samples_settle_the_joints_claimed(evaluations: tuple[Evaluation, ...]) -> None:
    rng = np.random.default_rng(11)
    claimed = 0
    for evaluation in evaluations:
        plan = plan_samples(evaluation, range(len(evaluation.facts.joints)))
        for _ in range(5):
            known = settled_by(evaluation, plan, rng.random((len(plan.members), 20)))
            for step in plan.steps:
                for joint, name in step.decisions if step.surely else ():
                    decision = evaluation.knowledge.quantities[name]
                    assert not open_rows(known.columns[name], decision)[joint]
                    assert np.isfinite(demand_of(known.columns[name], decision)[joint])
                    claimed += 1
                open_now = open_decisions(known, step.joints if step.surely else ())
                assert not open_now
    assert claimed > 40


def test_the_first_sample_is_the_best_by_brute_force(evaluations: tuple[Evaluation, ...]) -> None:
    """Each steel alone, analysed as it may be: none settles more joints than the first step does for each sample."""
    rng = np.random.default_rng(5)
    for evaluation in evaluations:
        plan = plan_samples(evaluation, range(len(evaluation.facts.joints)))
        decisions = [decision for decision in evaluation.knowledge.decisions if not decision.part_of]
        counts = {}
        for steel, joints in plan.members.items():
            undecided = open_decisions(evaluation, list(joints))
            trials = []
            for share in np.vstack([np.zeros(20), np.ones(20), rng.random((12, 20))]):
                for joint, rows in joints.items():
                    ends = next(e for r, _, e in open_analyses(evaluation, joint, undecided[joint]) if r == rows)
                    values = [(low, low.low + share[n] * (high.low - low.low)) for n, (low, high) in enumerate(ends)]
                    trials.append(Trial(joint, tuple(Pin(pin.quantity, pin.rows, v, v) for pin, v in values)))
            columns = outcomes(evaluation, trials, [decision.id for decision in decisions])
            left = set()
            for n, trial in enumerate(trials):
                for decision in undecided[trial.joint]:
                    column = columns[decision.id]
                    if open_rows(column, decision)[n] or not np.isfinite(demand_of(column, decision)[n]):
                        left.add(trial.joint)
            counts[steel] = len(joints.keys() - left)
        sure = [step for step in plan.steps if step.surely]
        assert len(sure[0].joints) / len(sure[0].steels) >= max(counts.values())
        worth = [len(step.joints) / len(step.steels) for step in plan.steps]
        assert worth[0] == max(worth)


@settings(max_examples=6)
@given(seed=st.integers(0, 10**6))
def test_what_nothing_pinned_touches_is_rightly_taken_over(evaluations: tuple[Evaluation, ...], seed: int) -> None:
    """Trials of wanted decisions give what a whole evaluation of the same trials gives, in the order asked."""
    evaluation = evaluations[seed % len(evaluations)]
    rng = np.random.default_rng(seed)
    quantities = evaluation.knowledge.quantities
    trials = []
    for _ in range(600):
        joint = int(rng.integers(len(evaluation.facts.joints)))
        first = (member_rows(evaluation, joint)[0],)
        pins = (
            Pin("heat_input", (joint,), 1.0, round(float(rng.uniform(1, 3)), 2)),
            pin_to(quantities["member_thickness"], first, float(rng.integers(8, 60))),
            pin_to(quantities["restraint"], (joint,), "high"),
        )
        trials.append(Trial(joint, (pins[int(rng.integers(3))],)))
    names = [decision.id for decision in evaluation.knowledge.decisions]
    found = outcomes(evaluation, trials, names)
    whole = decided_again(evaluation, trials)
    for name in names:
        quantity = quantities[name]
        for row in range(0, 600, 7):
            assert value_of(found[name], quantity, row) == value_of(whole.columns[name], quantity, row)


def test_joints_given_the_very_same_are_tried_once(evaluations: tuple[Evaluation, ...]) -> None:
    evaluation = evaluations[0]
    twice = decided_again(evaluation, [Trial(3), Trial(3), Trial(4)])
    assert alike(twice, range(3)) == {0: (0, 1), 2: (2,)}
    found = settle(twice, range(3))
    assert found[0, "min_preheat"] == found[1, "min_preheat"]


def test_steps_are_those_people_write() -> None:
    assert steps_between(0.12, 0.153, 0.01) == (0.12, 0.13, 0.14, 0.15, 0.153)
    assert steps_between(1.4, 1.1, 0.1) == (1.4, 1.3, 1.2, 1.1)
    assert steps_between(5.0, 5.0, 0.1) == (5.0,)
