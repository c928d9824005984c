"""Levers: the change named does what it says and a bit less does not; wishes and tables against brute force."""

from __future__ import annotations

from itertools import combinations, product
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
from weldbasis.settling.edges import edges
from weldbasis.settling.levers import Change, JointLevers, holds_of, levers, settings_of
from weldbasis.settling.trials import Pin, Trial, demands_of, outcomes, pin_to
from weldbasis.settling.walks import steps_between
from weldbasis.settling.wishes import cheapest, decision_named, meets, read_wish, trial_of
from weldbasis.state import demand_of
from weldbasis.trace import Ref


@pytest.fixture(scope="module")
def evaluations(knowledge: Knowledge, graph: KnowledgeGraph, examples: tuple[Path, ...]) -> tuple[Evaluation, ...]:
    return tuple(evaluate(knowledge, read_project(folder, knowledge).facts, graph) for folder in examples)


def check_margins(evaluation: Evaluation, found: dict[int, JointLevers]) -> int:
    """At the setting named the decision asks more or less, as said; at every step before it, it does not."""
    quantities, checked = evaluation.knowledge.quantities, 0
    trials: list[Trial] = []
    expected: list[tuple[int, Change]] = []
    for joint, some in found.items():
        for margin in some.margins:
            hold, lever = margin.hold, margin.hold.quantity.lever
            assert lever is not None
            for change in margin.changes:
                if isinstance(change.setting, str) or margin.start is None:
                    continue
                before = steps_between(margin.start, change.setting, lever.step)[:-1]
                kept = [before[0], before[len(before) // 2], before[-1]]
                first = len(trials)
                for value in (*kept, change.setting):
                    trials.append(Trial(joint, (pin_to(hold.quantity, hold.rows, value),)))
                expected.append((first, change))
    names = list(dict.fromkeys(change.decision for _, change in expected))
    columns = outcomes(evaluation, trials, names)
    demands = {name: demand_of(column, quantities[name]) for name, column in columns.items()}
    for first, change in expected:
        start, middle, last, at = demands[change.decision][first : first + 4]
        assert (at < start) if change.easier else (at > start), change
        # Before the change no value tried asks more; and a step before it less is not asked yet.
        assert middle <= start
        assert last == start or not change.easier
        assert value_of(columns[change.decision], quantities[change.decision], first + 3) == change.becomes
        checked += 1
    return checked


def test_margins_of_the_examples(evaluations: tuple[Evaluation, ...]) -> None:
    checked = sum(check_margins(e, dict(levers(e, range(len(e.facts.joints))))) for e in evaluations)
    assert checked > 150


@settings(max_examples=6)
@given(seed=st.integers(0, 10**6))
def test_margins_of_drawn_joints(evaluations: tuple[Evaluation, ...], seed: int) -> None:
    evaluation = drawn_joints(evaluations, seed, 6)
    check_margins(evaluation, dict(levers(evaluation, range(len(evaluation.facts.joints)))))


def test_the_nearest_change_is_the_nearest_by_brute_force(evaluations: tuple[Evaluation, ...]) -> None:
    """Every step of heat input walked one by one."""
    evaluation = evaluations[1]
    decision = evaluation.knowledge.quantities["min_preheat"]
    joints = range(8)
    found = levers(evaluation, joints)
    for joint in joints:
        margin = next(m for m in found[joint].margins if m.hold.ref.quantity == "heat_input")
        lever = margin.hold.quantity.lever
        assert lever is not None
        assert margin.start is not None
        for end, up in ((lever.within.high, True), (lever.within.low, False)):
            values = steps_between(margin.start, end, lever.step)
            trials = [Trial(joint, (pin_to(margin.hold.quantity, (joint,), v),)) for v in values]
            asked = demands_of(evaluation, trials, [decision])[:, 0]
            first = next((v for v, d in zip(values, asked, strict=True) if d != asked[0]), None)
            named = [
                c.setting
                for c in margin.changes
                if c.decision == "min_preheat" and (float(c.setting) > margin.start) == up
            ]
            assert named == ([] if first is None else [first])


def test_the_table_is_what_direct_evaluation_gives(evaluations: tuple[Evaluation, ...]) -> None:
    evaluation = evaluations[1]
    decision = evaluation.knowledge.quantities["min_preheat"]
    for joint, some in levers(evaluation, range(6)).items():
        table = some.table
        assert table is not None
        assert table.columns == ("H3", "H5", "H10", "H15")
        for value, cells in zip(table.rows, table.cells, strict=True):
            for name, cell in zip(table.columns, cells, strict=True):
                hydrogen = dict(settings_of(table.across))[name]
                pins = (
                    Pin("heat_input", (joint,), value.low or 0.0, value.high or 0.0),
                    pin_to(table.across.quantity, (joint,), hydrogen),
                )
                column = outcomes(evaluation, [Trial(joint, pins)], ["min_preheat"])["min_preheat"]
                found = value_of(column, decision, 0)
                assert (found.low, found.high, found.presence) == (cell.low, cell.high, cell.presence)


def test_only_new_parts_can_be_made_thinner(evaluations: tuple[Evaluation, ...]) -> None:
    millrace = next(e for e in evaluations if "N3" in e.facts.joints)
    row = millrace.facts.joints.index("N3")
    names = [millrace.facts.members[h.rows[0]] for h in holds_of(millrace, row) if h.ref.quantity == "member_thickness"]
    assert names == ["cover-plate"]


def test_a_wish_is_reached_and_a_step_less_does_not_reach_it(evaluations: tuple[Evaluation, ...]) -> None:
    ones = twos = 0
    for evaluation in evaluations:
        for text in ("min_preheat <= 20", "min_preheat <= 50", "z_quality = none"):
            wish = read_wish(text, evaluation.knowledge)
            for joint in range(0, len(evaluation.facts.joints), 5):
                for way in cheapest(evaluation, joint, wish):
                    column = outcomes(evaluation, [trial_of(joint, way.settings)], [wish.decision.id])
                    assert meets(wish, column[wish.decision.id])[0]
                    ones, twos = ones + (len(way.settings) == 1), twos + (len(way.settings) == 2)
                    for place, setting in enumerate(way.settings):
                        lever, start = setting.hold.quantity.lever, setting.hold.now
                        if isinstance(setting.name, str) or lever is None:
                            continue
                        edge = start.high if setting.name > (start.high or 0.0) else start.low
                        back = steps_between(edge or 0.0, setting.name, lever.step)[-2]
                        others = trial_of(joint, way.settings[:place] + way.settings[place + 1 :]).pins
                        pins = (*others, pin_to(setting.hold.quantity, setting.hold.rows, back))
                        column = outcomes(evaluation, [Trial(joint, pins)], [wish.decision.id])
                        assert not meets(wish, column[wish.decision.id])[0], (joint, text, way)
    assert ones > 6
    assert twos > 2


def test_one_lever_ways_are_those_of_brute_force(evaluations: tuple[Evaluation, ...]) -> None:
    evaluation = evaluations[1]
    wish = read_wish("preheat <= 50 °C", evaluation.knowledge)
    joint = evaluation.facts.joints.index("G3")
    best: dict[Ref, tuple[float, float]] = {}
    for hold in holds_of(evaluation, joint):
        lever = hold.quantity.lever
        assert lever is not None
        if not lever.step:
            continue
        for number in range(1, 400):
            value = round(lever.within.low + number * lever.step / 2, 6)
            if value > lever.within.high or abs(value / lever.step - round(value / lever.step)) > 1e-6:
                continue
            column = outcomes(evaluation, [Trial(joint, (pin_to(hold.quantity, hold.rows, value),))], ["min_preheat"])
            if meets(wish, column["min_preheat"])[0]:
                share = abs(value - (hold.now.low or 0.0)) / (hold.now.low or 1.0)
                best[hold.ref] = min(best.get(hold.ref, (9e9, 0.0)), (share, value))
    found = {w.settings[0].hold.ref: w.settings[0].name for w in cheapest(evaluation, joint, wish)}
    assert best
    assert {ref: name for ref, name in found.items() if not isinstance(name, str)} == {
        r: v for r, (_, v) in best.items()
    }


def test_pairs_are_near_the_cheapest_of_all(evaluations: tuple[Evaluation, ...]) -> None:
    """Every pair of settings of two levers, each in its own step, tried one by one."""
    evaluation = evaluations[1]
    wish = read_wish("min_preheat <= 20", evaluation.knowledge)
    joint = evaluation.facts.joints.index("G3")
    ways = cheapest(evaluation, joint, wish)
    assert ways
    assert all(len(way.settings) == 2 for way in ways)
    for way in ways:
        one, other = way.settings
        options = []
        for setting in (one, other):
            lever, now = setting.hold.quantity.lever, setting.hold.now
            assert lever is not None
            assert now.low is not None
            if isinstance(setting.name, str):
                options.append([(s, 0.0) for _, s in settings_of(setting.hold)])
            else:
                end = lever.within.high if setting.name > now.low else lever.within.low
                steps = steps_between(now.low, end, lever.step)
                options.append([(v, abs(v - now.low) / now.low) for v in steps])
        tried = list(product(*options))
        holds = (one.hold, other.hold)
        trials = [
            Trial(joint, tuple(pin_to(h.quantity, h.rows, v) for h, (v, _) in zip(holds, some, strict=True)))
            for some in tried
        ]
        met = meets(wish, outcomes(evaluation, trials, ["min_preheat"])["min_preheat"])
        least = min(sum(share for _, share in some) for some, ok in zip(tried, met, strict=True) if ok)
        mine = sum(s.share for s in way.settings if not isinstance(s.name, str))
        assert mine <= least * 1.25 + 1e-9
    assert len({tuple(s.hold.ref for s in way.settings) for way in ways}) == len(ways)
    assert not any(ref == other for way in ways for ref, other in combinations([s.hold.ref for s in way.settings], 2))


def test_wishes_are_read_and_mistakes_named(knowledge: Knowledge) -> None:
    for text, decision, sign, value in (
        ("min_preheat <= 20", "min_preheat", "<=", 20.0),
        ("preheat 50", "min_preheat", "=", 50.0),
        ("preheat ≤ 122 degF", "min_preheat", "<=", 50.0),
        ("hydrogen class >= H10", "hydrogen_class", ">=", "H10"),
        ("interpass < 250 °C", "max_interpass", "<", 250.0),
        ("delay 16 h", "inspection_delay", "=", 16.0),
        ("pwht = not needed", "pwht", "=", "not-needed"),
        ("procedure test hardness survey", "procedure_test", "=", "hardness-survey"),
    ):
        wish = read_wish(text, knowledge)
        assert (wish.decision.id, wish.sign, wish.value) == (decision, sign, value)
    assert decision_named("release", knowledge).id == "hydrogen_release"
    for text, words in (
        ("prehat <= 20", "Did you mean"),
        ("hydrogen H5", "may mean hydrogen_class or hydrogen_release"),
        ("preheat <= warm", "no number"),
        ("pwht = maybe", "no level"),
        ("preheat", "no wish"),
        ("preheat 50 to 60", "range"),
    ):
        with pytest.raises(ValueError, match=words):
            read_wish(text, knowledge)


def test_on_the_edge_is_what_half_a_rounding_step_tips(evaluations: tuple[Evaluation, ...]) -> None:
    """Every edge named tips at its upper or lower reading; every composition reading not named does not."""
    named = 0
    for evaluation in evaluations:
        found = edges(evaluation, range(len(evaluation.facts.joints)))
        for joint, some in found.items():
            for edge in some:
                decision = evaluation.knowledge.quantities[edge.decision]
                first = int(evaluation.views["joint"].starts[joint])
                rows: tuple[int, ...] = (first + edge.ref.member - 1,) if edge.ref.member else (joint,)
                same = [r for r in range(first, first + 4) if r < len(evaluation.facts.members)]
                name = evaluation.facts.members[rows[0]]
                if edge.ref.member:
                    of_joint = [r for r in same if evaluation.facts.joint_of[r] == joint]
                    rows = tuple(r for r in of_joint if evaluation.facts.members[r] == name)
                pin = Pin(edge.ref.quantity, rows, edge.reading - edge.by, edge.reading + edge.by)
                asked = demands_of(evaluation, [Trial(joint), Trial(joint, (pin,))], [decision])[:, 0]
                assert asked[1] > asked[0]
                named += 1
    assert named > 5
    assert np.isfinite(named)
