"""What a change of the rules does to projects: every joint that moves, and the change that moves it.

Both sets decide all joints; then every change is switched on alone, so that each move is put down to what causes it.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Literal

import numpy as np

from weldbasis.authority.changes import KEPT_IN, Difference, differences_between
from weldbasis.authority.governors import governors
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.facts import Facts
from weldbasis.graph import KnowledgeGraph, build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.meaning import meaning_of
from weldbasis.narrow import narrowed
from weldbasis.problem import Refused
from weldbasis.project import Project, read_project
from weldbasis.reading import value_of
from weldbasis.sentences import value_text
from weldbasis.settling.trials import alike
from weldbasis.state import demand, state_of
from weldbasis.values import Bools, Column, Floats, Ints, Numbers

Way = Literal["stricter", "looser", "otherwise"]
_LEVELS = ("none", "note", "caution", "hold", "stop")


@dataclass(frozen=True)
class Move:
    """One thing that moves in one joint: a decision, who governs it, or a finding (`finding` is its rule)."""

    joint: str
    decision: str
    finding: str
    before: str
    after: str
    way: Way
    governing_before: tuple[str, ...] = ()
    governing_after: tuple[str, ...] = ()


@dataclass(frozen=True)
class Cause:
    """Changes that only work together, mostly one alone, and the moves they bring when nothing else is switched on."""

    differences: tuple[Difference, ...]
    moves: tuple[Move, ...]

    @property
    def name(self) -> str:
        """The changed records by kind and id."""
        return ", ".join(f"{difference.of} {difference.id}" for difference in self.differences)


@dataclass(frozen=True)
class Switch:
    """The old rules with some changes switched on; no graph where these close a circle by themselves."""

    differences: tuple[Difference, ...]
    knowledge: Knowledge
    graph: KnowledgeGraph | None


@dataclass(frozen=True)
class ProjectImpact:
    """What moves in one project. `together` names joints that move only when several changes meet.

    `old` and `new` hold one joint for all that are given the very same, which `stands_for` names.
    """

    project: Project
    moves: tuple[Move, ...]
    causes: tuple[Cause, ...]
    together: tuple[str, ...]
    stands_for: Mapping[str, str] = field(compare=False, repr=False)
    old: Evaluation = field(compare=False, repr=False)
    new: Evaluation = field(compare=False, repr=False)

    @property
    def joints(self) -> tuple[str, ...]:
        """The joints that move, in the order of the project."""
        moved = {move.joint for move in self.moves}
        return tuple(joint for joint in self.project.facts.joints if joint in moved)


def impact(before: Knowledge, after: Knowledge, folders: Sequence[Path]) -> tuple[ProjectImpact, ...]:
    """What changes from one set of rules to the other in every project. Raises Refused where either cannot decide."""
    found = differences_between(before, after)
    switched = [_switch(before, after, group) for group in _groups(before, after, found)]
    graphs = build_graph(before), build_graph(after)
    return tuple(_project_impact(folder, (before, after), graphs, switched, found) for folder in folders)


def _groups(before: Knowledge, after: Knowledge, found: tuple[Difference, ...]) -> list[tuple[Difference, ...]]:
    """Changes that may move results, put together where one cannot stand without the other.

    That is where rules change places in giving a quantity: one stops to give it as the other begins.
    """
    bearing = [difference for difference in found if difference.results]
    gives: dict[tuple[str, str], frozenset[str]] = {
        (d.of, d.id): frozenset(_gives(before, d)) ^ frozenset(_gives(after, d)) for d in bearing if d.of == "rule"
    }
    groups: list[list[Difference]] = []
    for difference in bearing:
        own = gives.get((difference.of, difference.id), frozenset())
        joined = [group for group in groups if any(own & gives.get((d.of, d.id), frozenset()) for d in group)]
        groups = [group for group in groups if group not in joined]
        groups.append([d for group in joined for d in group] + [difference])
    return [tuple(group) for group in groups]


def _gives(knowledge: Knowledge, difference: Difference) -> tuple[str, ...]:
    rule = knowledge.rules.get(difference.id)
    return rule.gives if rule else ()


def _switched(before: Knowledge, after: Knowledge, group: tuple[Difference, ...]) -> Knowledge:
    """The old set with one group of changes switched on; new quantities and sources harm nothing and are all there."""
    parts = {kept: dict(getattr(before, kept)) for kept in KEPT_IN.values()}
    for kept in ("quantities", "sources"):
        parts[kept] = {**getattr(after, kept), **parts[kept]}
    for difference in group:
        kept = KEPT_IN[difference.of]
        parts[kept].pop(difference.id, None)
        if difference.id in getattr(after, kept):
            parts[kept][difference.id] = getattr(after, kept)[difference.id]
    ordered = {kept: dict(sorted(records.items())) for kept, records in parts.items()}
    return replace(
        before,
        frozen="",
        quantities=ordered["quantities"],
        rules=ordered["rules"],
        sources=ordered["sources"],
        grades=ordered["grades"],
        eras=ordered["eras"],
        consumables=ordered["consumables"],
    )


def _switch(before: Knowledge, after: Knowledge, group: tuple[Difference, ...]) -> Switch:
    knowledge = _switched(before, after, group)
    try:
        return Switch(group, knowledge, build_graph(knowledge))
    except Refused:  # a circle that only the other changes open again
        return Switch(group, knowledge, None)


def _project_impact(
    folder: Path,
    sets: tuple[Knowledge, Knowledge],
    graphs: tuple[KnowledgeGraph, KnowledgeGraph],
    switches: Sequence[Switch],
    found: tuple[Difference, ...],
) -> ProjectImpact:
    project = read_project(folder, sets[0])
    other = project if _read_alike(*sets, found) else read_project(folder, sets[1])
    # A quantity that is new brings what stands where nothing is given, also where its rule alone is switched on.
    grown = any(difference.of == "quantity" and difference.how == "added" for difference in found)
    like = _like(sets, graphs, (project.facts, other.facts))
    first = np.unique(like)
    base = evaluate(sets[0], _only(project.facts, first, sets[0]), graphs[0])
    old, new = narrowed(base), narrowed(evaluate(sets[1], _only(other.facts, first, sets[1]), graphs[1]))
    names = project.facts.joints
    moves = _spread(moves_between(old, new), like, names)
    causes = []
    for switch in switches:
        same = not grown and _read_alike(sets[0], switch.knowledge, switch.differences)
        if switch.graph:
            facts = project.facts if same else read_project(folder, switch.knowledge).facts
            few = base.facts if same else _only(facts, first, switch.knowledge)
            one = narrowed(evaluate(switch.knowledge, few, switch.graph, kept=base if same else None))
            causes.append(Cause(switch.differences, _spread(moves_between(old, one), like, names)))
        else:
            causes.append(Cause(switch.differences, ()))
    explained = {move.joint for cause in causes for move in cause.moves}
    together = tuple(dict.fromkeys(move.joint for move in moves if move.joint not in explained))
    stands_for = {name: names[row] for name, row in zip(names, like.tolist(), strict=True)}
    return ProjectImpact(project, moves, tuple(causes), together, stands_for, old, new)


def _like(
    sets: tuple[Knowledge, Knowledge], graphs: tuple[KnowledgeGraph, KnowledgeGraph], both: tuple[Facts, Facts]
) -> Ints:
    """For every joint the row of the first one that is given the very same under both sets; it is decided for all."""
    count = len(both[0].joints)
    firsts = []
    for knowledge, graph, facts in zip(sets, graphs, both, strict=True):
        found = np.arange(count)
        # Findings set aside for single joints tell joints apart that are else alike.
        groups = alike(Evaluation(knowledge, graph, facts, {}, {}), range(count)) if not facts.set_aside else {}
        for row, group in groups.items():
            found[list(group)] = row
        firsts.append(found)
    _, where, back = np.unique(np.stack(firsts), axis=1, return_index=True, return_inverse=True)
    like: Ints = where[back.reshape(-1)]
    return like


def _only(facts: Facts, rows: Ints, knowledge: Knowledge) -> Facts:
    """The joints at some rows; the facts as they are where that is all of them."""
    return facts if len(rows) == len(facts.joints) else facts.repeated(rows, knowledge.quantities)[0]


def _spread(moves: Sequence[Move], like: Ints, names: Sequence[str]) -> tuple[Move, ...]:
    """The moves of the joints decided, said of every joint that they stand for, in the order of the project."""
    by_joint: dict[str, list[Move]] = {}
    for move in moves:
        by_joint.setdefault(move.joint, []).append(move)
    return tuple(
        replace(move, joint=name)
        for name, row in zip(names, like.tolist(), strict=True)
        for move in by_joint.get(names[row], ())
    )


# The kinds of record that a project's files are read with.
_READ_WITH = frozenset({"quantity", "grade", "era", "consumable"})


def _read_alike(one: Knowledge, other: Knowledge, differences: Iterable[Difference]) -> bool:
    """Whether a project's files mean the same facts under both sets, which differ in these records."""
    same_samples = meaning_of(one.sampling) == meaning_of(other.sampling)
    return same_samples and not any(difference.of in _READ_WITH for difference in differences)


def moves_between(old: Evaluation, new: Evaluation) -> tuple[Move, ...]:
    """Everything that moves in any joint, in the order of the joints, decisions before findings."""
    found: list[tuple[int, int, Move]] = []
    for place, quantity in enumerate(new.knowledge.decisions):
        if quantity.id not in old.columns:
            continue
        for row in np.flatnonzero(_differs(old, new, quantity.id)):
            found.append((int(row), place, _decision_move(old, new, quantity.id, int(row))))
    for place, name in enumerate(dict.fromkeys([*old.findings, *new.findings]), start=len(new.knowledge.decisions)):
        before, after = _raised(old, name), _raised(new, name)
        for row in np.flatnonzero(before != after):
            levels = int(before[row]), int(after[row])
            words = tuple("no finding" if level == 0 else _LEVELS[level] for level in levels)
            way: Way = "stricter" if levels[1] > levels[0] else "looser"
            found.append((int(row), place, Move(old.facts.joints[row], "", name, words[0], words[1], way)))
    return tuple(move for _, _, move in sorted(found, key=lambda one: one[:2]))


def _differs(old: Evaluation, new: Evaluation, decision: str) -> Bools:
    one, other = old.columns[decision], new.columns[decision]
    decimals = new.knowledge.quantities[decision].decimals + 2
    moved: Bools = one.presence != other.presence
    if isinstance(one, Numbers) and isinstance(other, Numbers):
        for before, after in ((one.low, other.low), (one.high, other.high)):
            moved = moved | (np.nan_to_num(np.round(before, decimals)) != np.nan_to_num(np.round(after, decimals)))
    elif not isinstance(one, Numbers) and not isinstance(other, Numbers):
        moved = moved | (one.mask != other.mask)
    before_rules, after_rules = _governing(old, decision), _governing(new, decision)
    nobody = np.zeros(len(moved), np.bool_)
    for rule in {*before_rules, *after_rules}:
        moved = moved | (before_rules.get(rule, nobody) != after_rules.get(rule, nobody))
    return moved


def _governing(evaluation: Evaluation, decision: str) -> Mapping[str, Bools]:
    return evaluation.views["joint"].once(("governors", decision), lambda: governors(evaluation, decision))


def _decision_move(old: Evaluation, new: Evaluation, decision: str, row: int) -> Move:
    one, other = old.knowledge.quantities[decision], new.knowledge.quantities[decision]
    before, after = value_of(old.columns[decision], one, row), value_of(new.columns[decision], other, row)
    texts = [value_text(q, v) for q, v in ((one, before), (other, after))]
    states = [state_of(v, q) for q, v in ((one, before), (other, after))]
    shown = [text if state == "settled" else f"{text} ({state})" for text, state in zip(texts, states, strict=True)]
    shown = ["not covered" if state == "uncovered" else text for text, state in zip(shown, states, strict=True)]
    rules = [
        tuple(sorted(name for name, mask in _governing(evaluation, decision).items() if mask[row]))
        for evaluation in (old, new)
    ]
    way = _way(old.columns[decision], new.columns[decision], old, decision, row)
    return Move(old.facts.joints[row], decision, "", shown[0], shown[1], way, rules[0], rules[1])


def _way(one: Column, other: Column, old: Evaluation, decision: str, row: int) -> Way:
    quantity = old.knowledge.quantities[decision]
    at = np.array([row])
    before, after = demand(one.take(at), quantity), demand(other.take(at), quantity)
    if before is None or after is None or before[0] == after[0]:
        return "otherwise"
    return "stricter" if after[0] > before[0] else "looser"


def _raised(evaluation: Evaluation, name: str) -> Floats:
    """The level of a finding in every joint, 0 where it is not raised."""
    joints = len(evaluation.facts.joints)
    truth = evaluation.findings.get(name)
    if truth is None:
        return np.zeros(joints)
    rule = evaluation.graph.rules[name]
    may, surely = truth.may, truth.surely
    sure, unsure = _LEVELS.index(rule.body.level), _LEVELS.index(rule.body.level_if_unsure)
    found = np.where(surely, sure, np.where(may, unsure, 0)).astype(np.float64)
    if rule.rule.for_each == "member":
        found = np.maximum.reduceat(found, evaluation.views["member"].starts)
    for row in evaluation.facts.set_aside.get(name, {}):
        found[row] = min(found[row], _LEVELS.index("note"))
    return found
